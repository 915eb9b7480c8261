"""Every chart of a study. Result tables (lists of dict rows) in, Altair charts out.

Importing this package imports Altair: import it only where charts are made. The `…_spec` functions give
the same charts as finished Vega-Lite dicts, which is quicker where a page takes them as they are.
"""

from study.charts.curves import curve, curve_kinds, curve_spec
from study.charts.exports import ChartExportError, drawn, export, safe_stem, write
from study.charts.maps import map_spec, measure_map
from study.charts.panels import panels
from study.charts.rankings import matrix, matrix_spec, ranking, ranking_spec
from study.charts.roll_camber import roll_camber, roll_camber_spec
from study.charts.spread import distribution, distribution_spec
from study.charts.tables import Tables, measures
from study.charts.together import correlations, correlations_spec, demand, demand_spec
from study.charts.views import view, view_spec

__all__ = [
    "ChartExportError",
    "correlations",
    "curve",
    "curve_kinds",
    "curve_spec",
    "demand",
    "distribution",
    "drawn",
    "every",
    "export",
    "map_spec",
    "matrix",
    "measure_map",
    "measures",
    "panels",
    "ranking",
    "roll_camber",
    "roll_camber_spec",
    "safe_stem",
    "view",
    "write",
]

VIEWS = ("front", "side", "top")


def every(tables: Tables, geometry: dict | None = None) -> dict[str, dict]:
    """All charts that the tables allow as specifications that `export` takes, by the stem of their file:
    `view-front`, `matrix`, `ranking-1-roll-centre-height`, `distribution-1-…`, `curve-bump-toe-deg`, …
    """
    found = {f"view-{kind}": view_spec(geometry, tables, kind) for kind in VIEWS} if geometry else {}
    found["matrix"] = matrix_spec(tables)
    for head in measures(tables):
        tail = safe_stem(f"{head['place']}-{head['name'].lower()}")
        found[f"ranking-{tail}"] = ranking_spec(tables, head["measure_no"])
        found[f"distribution-{tail}"] = distribution_spec(tables, head["measure_no"])
    for axis, key in curve_kinds(tables):
        found[safe_stem(f"curve-{axis}-{key.replace('_', '-')}")] = curve_spec(tables, axis, key)
    for unit in dict.fromkeys(row.get("unit") for row in tables.get("demand", [])):
        found[safe_stem(f"demand-{unit}".replace("/", "-per-"))] = demand_spec(tables, unit)
    found["correlations"] = correlations_spec(tables)
    return {stem: spec for stem, spec in found.items() if spec is not None}
