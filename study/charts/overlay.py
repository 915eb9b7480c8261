"""Nominal curves of several geometries over each other."""

from collections.abc import Sequence
from functools import cache

import altair as alt

from study.charts import theme
from study.charts.template import amount, fill, label, rows, slot, template
from study.charts.words import key_name, unit_text

INKS = (theme.BLUE, theme.VERMILLION, theme.GREEN, theme.PURPLE, theme.ORANGE, theme.INK)
DASHES = ([1, 0], [6, 3], [2, 2], [8, 3, 2, 3], [12, 4], [4, 4])
UNITS = {"bump": "mm of road rise", "roll": "° of roll", "rack": "mm of rack"}


def overlay_spec(curves: Sequence[dict], axis: str, key: str, *, width: int = 360, height: int = 220) -> dict:
    """One measure along one input, a line a geometry: colour and dash differ. curves: rows of `study.compare.curves_of`."""
    found = [row for row in curves if row["axis"] == axis and row["key"] == key and row["nominal"] is not None]
    names = list(dict.fromkeys(row["side"] for row in found))
    unit = unit_text(found[0]["unit"]) if found else ""
    ends = "; ".join(_ends(found, name) for name in names)
    return fill(
        _template(),
        data={"line": found},
        slots={
            "names": names, "inks": [INKS[i % len(INKS)] for i in range(len(names))],
            "dashes": [DASHES[i % len(DASHES)] for i in range(len(names))], "x": [UNITS.get(axis, axis)],
        },
        title=f"{key_name(key).capitalize()} in {axis}" + (f", {unit}" if unit else ""),
        description=f"{key_name(key)} over {axis}, {len(names)} geometries. {ends}.",
        width=width,
        height=height,
    )  # fmt: skip


def _ends(found, name):
    line = [row for row in found if row["side"] == name]
    return f"{name}: {line[0]['nominal']:.4g} at {line[0]['x']:g} to {line[-1]['nominal']:.4g} at {line[-1]['x']:g}"


@cache
def _template() -> dict:
    inks = alt.Scale(domain=slot("names"), range=slot("inks"))
    dashes = alt.Scale(domain=slot("names"), range=slot("dashes"))
    return template(
        alt.Chart(rows("line"))
        .mark_line(strokeWidth=2)
        .encode(
            x=amount(alt.X, "x", title=slot("x")),
            y=amount(alt.Y, "nominal", title=None, scale=alt.Scale(zero=False)),
            color=label(alt.Color, "side", scale=inks, title=None),
            strokeDash=label(alt.StrokeDash, "side", scale=dashes, title=None),
        )
    )
