"""Sweeps as chart files: curves along one input, maps over two; a page carries their numbers as tables."""

from collections.abc import Mapping, Sequence
from pathlib import Path

from study.chart_file import Numbers, write_chart
from study.charts import curve_spec, map_spec, panels
from study.charts.words import aligned, given, key_name, unit_text
from study.measures import KEYS
from study.sweeps import Asked, SweepError, Travel, map_note

_BAND = {"q05": "5 %", "q50": "Median", "q95": "95 %"}


def write_curves(path: Path, asked: Asked, rows: Sequence[Mapping], *, label: str, study: str = "") -> Path:
    """Curves of every measure asked for, one panel each. study: whose band the rows carry, in words.

    Raises ChartFileError, ChartExportError.
    """
    held, one = f"{asked.held_text()} held" if asked.held_text() else "", len(asked.keys) == 1
    note = "; ".join(text for text in ((label, held, study) if one else (held,)) if text)
    size = {"width": 560, "height": 320} if one else {"width": 360, "height": 220}
    specs = [curve_spec({"curves": rows}, asked.over.name, key, held=note, **size) for key in asked.keys]
    spec = panels(specs, title=f"{label} over {asked.over.name}", subtitle=study)
    return write_chart(spec, path, [_curve_numbers(asked, rows, key, bool(study)) for key in asked.keys])


def _curve_numbers(asked, rows, key, banded):
    found = [row for row in rows if row["key"] == key]
    names = ("nominal", *(_BAND if banded else ()))
    texts = iter(aligned((row[name] for row in found for name in names), 4))
    body = [[row["side"], given(row["x"]), *(next(texts) for _ in names)] for row in found]
    heads = ["Side", asked.over.name, "Nominal", *(_BAND.values() if banded else ())]
    return Numbers(_caption(key), heads, body, words=1)


def _caption(key):
    unit = unit_text(KEYS[key].unit)
    return key_name(key) + (f", {unit}" if unit else "")


def write_maps(path: Path, asked: Asked, against: Travel, found: Mapping[str, list], *, label: str) -> Path:
    """Maps of `study.sweeps.grid`, one panel each. Raises SweepError, ChartFileError, ChartExportError."""
    over, places = asked.over, {"over_at": asked.over.at, "against_at": against.at}
    specs, numbers = [], []
    for key, values in found.items():
        note = map_note(asked, against, key)
        note = f"{label}{note}" if len(found) == 1 else note.removeprefix(", ")
        spec = map_spec(values, over=over.name, against=against.name, **places, key=key, unit=KEYS[key].unit, note=note)
        specs += [spec] if spec else []
        numbers.append(_map_numbers(over, against, key, values))
    if not specs:
        raise SweepError(f"{', '.join(found)}: not defined anywhere on this map; there is nothing to draw")
    return write_chart(panels(specs, title=f"{label} over {over.name} and {against.name}"), path, numbers)


def _map_numbers(over, against, key, values):
    texts = iter(aligned((value for row in values for value in row), 4))
    body = [[f"{y:g}", *(next(texts) for _ in row)] for y, row in zip(over.at, values, strict=True)]
    return Numbers(_caption(key), [f"{over.name} \\ {against.name}", *(f"{x:g}" for x in against.at)], body)
