"""Camber in roll of several geometries as a chart file, its numbers as a table."""

from collections.abc import Mapping, Sequence
from pathlib import Path

from catalog.errors import InputError
from study.chart_file import Numbers, write_chart
from study.charts import roll_camber_spec
from study.charts.roll_camber import split
from study.charts.words import number


class NothingToDraw(InputError):
    """No geometry that has a swing arm."""


def write_roll_camber(path: Path, found: Sequence[Mapping]) -> Path:
    """The chart of rows as `roll_camber_spec` takes them. Raises NothingToDraw, ChartFileError, ChartExportError."""
    spec = roll_camber_spec(found)
    if spec is None:
        names = ", ".join(row["name"] for row in found[:5]) or "the catalog is empty"
        raise NothingToDraw(f"--chart {path}: no geometry with a front-view swing arm to draw ({names})")
    marks, _ = split(found)
    body = [
        [m["name"], m["linkage"], *(number(m[key]) for key in ("tracks", "roll_camber", "rigid"))]
        + [number(round(m["roll_camber"] - m["rigid"], 6), 2, sign=True)]
        for m in marks
    ]
    heads = ["Geometry", "Linkage", "Swing arm, tracks", "Camber per roll", "Rigid relation", "Difference"]
    return write_chart(spec, path, [Numbers("Camber in roll, ° per ° at design, left side", heads, body, words=2)])
