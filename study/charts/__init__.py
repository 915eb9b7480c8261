"""Every chart of a study. Result tables (lists of dict rows) in, Altair charts out.

Importing this package imports Altair: import it only where charts are made.
"""

from study.charts.curves import curve, curve_kinds
from study.charts.export import ChartExportError, export, safe_stem
from study.charts.ranking import matrix, ranking
from study.charts.spread import correlations, demand, distribution
from study.charts.tables import Tables, measures
from study.charts.views import view

__all__ = ["ChartExportError", "correlations", "curve", "curve_kinds", "demand", "distribution", "every", "export",
           "matrix", "measures", "ranking", "safe_stem", "view"]

VIEWS = ("front", "side", "top")


def every(tables: Tables, geometry: dict | None = None) -> dict:
    """All charts that the tables allow, by the stem of their file: `ranking-1-roll-centre-height`, `view-front`, …"""
    found = {f"view-{kind}": view(geometry, tables, kind) for kind in VIEWS} if geometry else {}
    found["matrix"] = matrix(tables)
    for head in measures(tables):
        tail = safe_stem(f"{head['place']}-{head['name'].lower()}")
        found[f"ranking-{tail}"] = ranking(tables, head["measure_no"])
        found[f"distribution-{tail}"] = distribution(tables, head["measure_no"])
    for axis, key in curve_kinds(tables):
        found[safe_stem(f"curve-{axis}-{key.replace('_', '-')}")] = curve(tables, axis, key)
    for unit in dict.fromkeys(row.get("unit") for row in tables.get("demand", [])):
        found[safe_stem(f"demand-{unit}".replace("/", "-per-"))] = demand(tables, unit)
    found["correlations"] = correlations(tables)
    return {stem: chart for stem, chart in found.items() if chart is not None}
