"""Bump, roll and steer curves: the nominal with the band of the builds."""

from functools import cache

import altair as alt

from study.charts import tables as tb
from study.charts import theme
from study.charts.template import amount, as_chart, end, fill, label, rows, slot, template
from study.charts.words import finite, key_name, quantity, unit_text

# input: (in words, unit, what the curve is called after)
AXES = {"bump": ("bump", "mm", "bump"), "roll": ("roll", "°", "roll"), "rack": ("rack travel", "mm", "steer")}
_SIDES = {"left": (theme.BLUE, [1, 0]), "right": ("#b86e00", [6, 3]), "axle": (theme.GREEN, [1, 0])}
_FIELDS = ("q05", "q25", "q50", "q75", "q95")


def curve_kinds(tables: tb.Tables) -> list[tuple[str, str]]:
    """The (axis, key) pairs that have curves, bump before roll before rack."""
    present = dict.fromkeys((row["axis"], row["key"]) for row in tables.get("curves", []))
    return sorted(present, key=lambda pair: list(AXES).index(pair[0]) if pair[0] in AXES else len(AXES))


def curve(tables: tb.Tables, axis: str, key: str, **options) -> alt.LayerChart | None:
    """`curve_spec` as a chart."""
    return as_chart(curve_spec(tables, axis, key, **options))


def curve_spec(
    tables: tb.Tables, axis: str, key: str, *, held: str = "", width: int = 340, height: int = 200
) -> dict | None:
    """One measure along one input: a line per side (solid left, dashed right) over the bands of 50 and 90 %.

    A second side's band is drawn by its dashed edges, or left out where both sides are alike. Rows without
    quantiles give the lines alone. `held`: the inputs held meanwhile, in words.
    """
    found = curve_rows(tables, axis, key)
    if not found:
        return None
    words, unit_x, called = AXES.get(axis, (axis, "", axis))
    alike = _alike(found)
    found = [row for row in found if not (alike and row["side"] == "right")]
    banded = found if any(row["q05"] is not None for row in found) else []
    sides = [side for side in _SIDES if any(row["side"] == side for row in found)]
    unit = found[0]["unit"]
    along = unit_text(unit)
    return fill(
        _template(len(sides) > 1),
        data={
            "line": found,
            "band": [row for row in banded if row["side"] == sides[0]],
            "dots": _alone(found),
            "edges": [row for row in banded if row["side"] != sides[0]],
        },
        slots={
            "sides": sides,
            "colours": [_SIDES[side][0] for side in sides],
            "dashes": [_SIDES[side][1] for side in sides],
            "x": [f"{words}, {unit_x}"],
        },
        title=f"{key_name(key).capitalize()} in {called}" + (f", {along}" if along else ""),
        subtitle="; ".join(_subtitle(found, alike, held)),
        description=_description(found, key, words, unit),
        width=width,
        height=height,
    )


def _alone(found: list[dict]) -> list[dict]:
    """Points between two undefined ones, which a line would not show."""
    dots = []
    for side in dict.fromkeys(row["side"] for row in found):
        line = [row for row in found if row["side"] == side]
        known = [False, *(row["nominal"] is not None for row in line), False]
        dots += [row for i, row in enumerate(line, start=1) if known[i] and not known[i - 1] and not known[i + 1]]
    return dots


def _subtitle(found: list[dict], alike: bool, held: str) -> list[str]:
    parts = ["left, right alike"] if alike else []
    if any(row["q05"] is not None for row in found):
        parts.append("line: nominal; bands: middle 50 and 90 % of builds")
    elif found[0]["side"] in ("left", "right"):
        sides = dict.fromkeys(row["side"] for row in found)
        parts.append("nominal" if alike or len(sides) > 1 else f"nominal, {found[0]['side']} side")
    else:
        parts.append("nominal")
    return [*parts, held] if held else parts


def _alike(found: list[dict]) -> bool:
    """Whether the right side's curve would lie on the left's, within 5 % of the band."""
    left, right = ([row for row in found if row["side"] == side] for side in ("left", "right"))
    if not left or [row["x"] for row in left] != [row["x"] for row in right]:
        return False
    pairs = [
        (a[name], b[name]) for a, b in zip(left, right, strict=True) for name in ("nominal", "q05", "q95")
    ]
    known = [(a, b) for a, b in pairs if a is not None and b is not None]
    band = max(
        (row["q95"] - row["q05"] for row in left if row["q05"] is not None and row["q95"] is not None),
        default=0.0,
    )
    room = 0.05 * band or 1e-9
    return len(known) == sum(a is not None or b is not None for a, b in pairs) and all(
        abs(a - b) <= room for a, b in known
    )


def curve_rows(tables: tb.Tables, axis: str, key: str) -> list[dict]:
    """The numbers of one curve at the last stage, by side and x; what is undefined is None."""
    found = [row for row in tables.get("curves", []) if row.get("axis") == axis and row.get("key") == key]
    stage = (tb.stages(found) or [None])[-1]
    kept = [
        {name: finite(row.get(name)) for name in ("x", "nominal", *_FIELDS)}
        | {"side": row.get("side") or "left", "unit": row.get("unit")}
        for row in found
        if row.get("stage") in (stage, None)
    ]
    return sorted(kept, key=lambda row: (row["side"], row["x"]))


@cache
def _template(several: bool) -> dict:
    legend = alt.Legend(symbolType="stroke", symbolOpacity=1, symbolSize=300) if several else None
    colour = label(
        alt.Color, "side", scale=alt.Scale(domain=slot("sides"), range=slot("colours")), legend=legend
    )
    dash = label(
        alt.StrokeDash, "side", scale=alt.Scale(domain=slot("sides"), range=slot("dashes")), legend=legend
    )
    x = amount(alt.X, "x", title=slot("x"), scale=alt.Scale(nice=False), axis=alt.Axis(tickCount=6))
    scale = alt.Scale(zero=False)
    bands = [
        alt.Chart(rows("band"))
        .mark_area(opacity=opacity)
        .encode(x=x, y=amount(alt.Y, low, title=None, scale=scale), y2=end(alt.Y2, high), color=colour)
        for low, high, opacity in (("q05", "q95", 0.16), ("q25", "q75", 0.26))
    ]
    bands += [
        alt.Chart(rows("edges"))
        .mark_line(strokeWidth=1)
        .encode(x=x, y=amount(alt.Y, field, title=None, scale=scale), color=colour, strokeDash=dash)
        for field in ("q05", "q95")
    ]
    line = (
        alt.Chart(rows("line"))
        .mark_line(strokeWidth=2.2)
        .encode(x=x, y=amount(alt.Y, "nominal", title=None, scale=scale), color=colour, strokeDash=dash)
    )
    dots = (
        alt.Chart(rows("dots"))
        .mark_point(filled=True, size=30, opacity=1)
        .encode(x=x, y=amount(alt.Y, "nominal", title=None, scale=scale), color=colour)
    )
    return template(*bands, line, dots)


def _description(found: list[dict], key: str, words: str, unit: str | None) -> str:
    name, parts = key_name(key), []
    for side in dict.fromkeys(row["side"] for row in found):
        known = [row for row in found if row["side"] == side and row["nominal"] is not None]
        if known:
            first, last = known[0], known[-1]
            whose = f"{side} " if side != "axle" else ""
            parts.append(
                f"{whose}{quantity(first['nominal'], unit)} at {quantity(first['x'], None)}, "
                f"{quantity(last['nominal'], unit)} at {quantity(last['x'], None)}"
            )
    if not parts:
        return f"{name} along {words}: not defined."
    banded = any(row["q05"] is not None for row in found)
    return f"{name} along {words}, nominal{' with the band of the builds' if banded else ''}: {'; '.join(parts)}."
