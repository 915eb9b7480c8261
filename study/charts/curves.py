"""Bump, roll and steer curves: the nominal with the band of the builds."""

import altair as alt

from study.charts import tables as tb
from study.charts import theme
from study.charts.words import finite, key_name, quantity, unit_text

AXES = {"bump": ("bump", "mm", "bump"), "roll": ("roll", "°", "roll"), "rack": ("rack travel", "mm", "steer")}
_FIELDS = ("q05", "q25", "q50", "q75", "q95")


def curve_kinds(tables: tb.Tables) -> list[tuple[str, str]]:
    """The (axis, key) pairs that have curves, bump before roll before rack."""
    present = dict.fromkeys((row["axis"], row["key"]) for row in tables.get("curves", []))
    return sorted(present, key=lambda pair: list(AXES).index(pair[0]) if pair[0] in AXES else len(AXES))


def curve(tables: tb.Tables, axis: str, key: str, *, width: int = 340, height: int = 200) -> alt.LayerChart | None:
    """One measure along one input; a line per side (solid left, dashed right), bands of 50 and 90 % of the builds."""
    rows = _rows(tables, axis, key)
    if not rows:
        return None
    words, unit_x, kind = AXES.get(axis, (axis, "", axis))
    sides = list(dict.fromkeys(row["side"] for row in rows))
    unit = next(row["unit"] for row in rows)
    chart = _layers(rows, sides, f"{words}, {unit_x}", unit_text(unit))
    return theme.dress(
        chart.properties(width=width, height=height),
        title=f"{key_name(key).capitalize()} in {kind}", subtitle="line: nominal; bands: middle 50 and 90 % of the builds",
        description=_description(rows, key, words, unit),
    )


def _rows(tables: tb.Tables, axis: str, key: str) -> list[dict]:
    rows = [row for row in tables.get("curves", []) if row.get("axis") == axis and row.get("key") == key]
    stage = (tb.stages(rows) or ["before"])[-1]
    kept = []
    for row in rows:
        if row.get("stage") in (stage, None):
            numbers = {name: finite(row.get(name)) for name in ("x", "nominal", *_FIELDS)}
            kept.append(numbers | {"side": row.get("side") or "left", "unit": row.get("unit")})
    return sorted(kept, key=lambda row: (row["side"], row["x"]))


def _layers(rows: list[dict], sides: list[str], title_x: str, title_y: str) -> alt.LayerChart:
    order = [side for side in ("left", "right", "axle") if side in sides]
    colours = {"left": theme.BLUE, "right": theme.ORANGE, "axle": theme.GREEN}
    dashes = {"left": [1, 0], "right": [6, 3], "axle": [1, 0]}
    several = len(order) > 1
    colour = theme.label(alt.Color, "side", scale=alt.Scale(domain=order, range=[colours[s] for s in order]),
                       legend=alt.Legend() if several else None)
    dash = theme.label(alt.StrokeDash, "side", scale=alt.Scale(domain=order, range=[dashes[s] for s in order]),
                          legend=alt.Legend() if several else None)
    x = theme.amount(alt.X, "x", title=title_x, scale=alt.Scale(nice=False))
    y_scale = alt.Scale(zero=False)
    banded = [row for row in rows if row["q05"] is not None and row["q95"] is not None]
    base = alt.Chart(theme.data(banded))
    layers = [
        base.mark_area(opacity=opacity, line=False).encode(
            x=x, y=theme.amount(alt.Y, low, title=title_y, scale=y_scale), y2=theme.end(alt.Y2, high), color=colour)
        for low, high, opacity in (("q05", "q95", 0.18), ("q25", "q75", 0.28)) if banded
    ]
    line = alt.Chart(theme.data(rows)).mark_line(strokeWidth=2.2).encode(
        x=x, y=theme.amount(alt.Y, "nominal", title=title_y, scale=y_scale), color=colour, strokeDash=dash)
    return alt.layer(*layers, line)


def _description(rows: list[dict], key: str, words: str, unit: str | None) -> str:
    known = [row for row in rows if row["nominal"] is not None]
    if not known:
        return f"{key_name(key)} along {words}: not defined."
    first, last = known[0], known[-1]
    return (f"{key_name(key)} along {words}, nominal with the band of the builds: "
            f"{quantity(first['nominal'], unit)} at {quantity(first['x'], None)}, "
            f"{quantity(last['nominal'], unit)} at {quantity(last['x'], None)}.")
