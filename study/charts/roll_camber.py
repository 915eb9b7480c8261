"""Camber in roll against the length of the front-view swing arm, geometries side by side.

The curve is common practice for an independent suspension: a wheel on a rigid swing arm of length s on a car of track t
cambers by 1 - (t/2)/s of each degree of roll. A mechanism departs from it where its contact points move sideways.
"""

import math
from collections.abc import Mapping, Sequence
from functools import cache

import altair as alt

from study.charts import theme
from study.charts.callouts import Spot, place
from study.charts.template import amount, as_chart, end, fill, label, rows, slot, template
from study.charts.words import finite, number

LINKAGES = {
    "double-wishbone": (theme.BLUE, "circle"),
    "strut": (theme.VERMILLION, "square"),
    "five-link": (theme.GREEN, "diamond"),
    "semi-trailing-arm": (theme.ORANGE, "triangle-up"),
    "solid-axle": (theme.PURPLE, "cross"),
}
MOST_TRACKS = 8.0
_MOST_LABELS = 40
_WIDTH, _LABEL_PX, _LEAST_PX = 820.0, 200.0, 320.0


def rigid_relation(tracks: float) -> float:
    """Camber in roll (deg per deg) of a rigid swing arm that is `tracks` track widths long."""
    return 1.0 - 0.5 / tracks


def roll_camber(found: Sequence[Mapping], **options) -> alt.LayerChart | None:
    """`roll_camber_spec` as a chart."""
    return as_chart(roll_camber_spec(found, **options))


def roll_camber_spec(found: Sequence[Mapping], *, title: str = "Camber in roll against swing arm") -> dict | None:
    """One labelled mark a geometry. found: rows with name, linkage, swing_arm_mm, track_mm, roll_camber (deg per deg).

    What has no swing arm, or one longer than eight tracks, is named below the title instead. None when no mark is left.
    """
    marks, left_out = split(found)
    if not marks:
        return None
    across, up = _domains(marks)
    height = max(_LEAST_PX, 16.0 * min(len(marks), _MOST_LABELS) / 2 + 60)
    size = (_WIDTH, height)
    named = _callouts(marks, across, up, size)
    kinds = [kind for kind in LINKAGES if any(mark["linkage"] == kind for mark in marks)]
    return fill(
        _template(),
        data={"marks": marks, "curve": _curve(across, up), "leaders": [_leader(item) for item in named]}
        | {f"names_{side}": [_name(item) for item in named if item.align == side] for side in ("left", "right")},
        slots={
            "across": across, "up": up, "kinds": kinds,
            "colours": [LINKAGES[kind][0] for kind in kinds], "shapes": [LINKAGES[kind][1] for kind in kinds],
        },
        title=title,
        subtitle=_subtitle(left_out, len(marks)),
        description=_description(marks, left_out),
        width=_WIDTH,
        height=height,
    )  # fmt: skip


def split(found: Sequence[Mapping]) -> tuple[list[dict], list[str]]:
    """The marks (name, linkage, tracks, roll_camber, rigid), and in words what cannot be drawn and why."""
    marks, left_out = [], []
    for row in found:
        arm, track, camber = (finite(row.get(key)) for key in ("swing_arm_mm", "track_mm", "roll_camber"))
        if arm is None or not track or camber is None:
            left_out.append(f"{row['name']} (no swing arm)")
        elif abs(arm / track) > MOST_TRACKS:
            left_out.append(f"{row['name']} (swing arm of {number(arm / track, 2)} tracks)")
        else:
            tracks = arm / track
            marks.append(
                {"name": row["name"], "linkage": row["linkage"], "tracks": tracks, "roll_camber": camber}
                | {"rigid": rigid_relation(tracks)}
            )
    return marks, left_out


def _domains(marks: list[dict]) -> tuple[list[float], list[float]]:
    """Wide enough for names in columns on both sides of the marks."""
    xs, ys = [mark["tracks"] for mark in marks], [mark["roll_camber"] for mark in marks]
    room = _LABEL_PX / _WIDTH
    wide = max((max(xs) - min(xs)) / (1.0 - 2.0 * room), 1.6)
    across = [min(0.4, min(xs) - room * wide), max(2.0, max(xs) + room * wide)]
    up = [min(-0.05, *ys), max(1.05, *ys)]
    return across, [up[0] - 0.05, up[1] + 0.05]


def _curve(across: list[float], up: list[float]) -> list[dict]:
    """The rigid relation inside the frame, a branch on either side of zero."""
    count, rows_ = 240, []
    for i in range(count + 1):
        x = across[0] + (across[1] - across[0]) * i / count
        y = rigid_relation(x) if abs(x) > 1e-9 else math.inf
        if up[0] <= y <= up[1]:
            rows_.append({"x": x, "y": y, "branch": "inboard" if x > 0 else "outboard"})
    return rows_


def _callouts(marks: list[dict], across: list[float], up: list[float], size: tuple[float, float]) -> list:
    """Names in columns left and right of the marks, with leaders, in pixels of the frame."""
    spots = []
    for mark in marks[:_MOST_LABELS]:
        x = (mark["tracks"] - across[0]) / (across[1] - across[0]) * size[0]
        y = (up[1] - mark["roll_camber"]) / (up[1] - up[0]) * size[1]
        spots.append(Spot(mark["name"], round(x, 1), round(y, 1), (mark["name"][:34],)))
    first, last = min(spot.x for spot in spots), max(spot.x for spot in spots)
    return place(spots, width=size[0], height=size[1], left_edge=first - 24, right_edge=last + 24)


def _leader(item) -> dict:
    (x, y), (x2, y2) = item.leader()
    return {"x": x, "y": y, "x2": x2, "y2": y2}


def _name(item) -> dict:
    return {"x": item.x, "y": item.y, "t": item.spot.lines[0]}


@cache
def _template() -> dict:
    x = amount(alt.X, "tracks", title="swing arm over track width (centre inboard +)",
               scale=alt.Scale(domain=slot("across"), nice=False, zero=False))  # fmt: skip
    y = amount(alt.Y, "roll_camber", title="camber per roll, ° per ° (1: leans with the body)",
               scale=alt.Scale(domain=slot("up"), nice=False, zero=False))  # fmt: skip
    shapes = alt.Scale(domain=slot("kinds"), range=slot("shapes"))
    colours = alt.Scale(domain=slot("kinds"), range=slot("colours"))
    px = {"x": amount(alt.X, "x", scale=None), "y": amount(alt.Y, "y", scale=None)}
    names = [
        alt.Chart(rows(f"names_{align}"))
        .mark_text(align=align, baseline="middle", **style)
        .encode(text=label(alt.Text, "t"), **px)
        for align in ("left", "right")
        for style in (theme.HALO, {})
    ]
    return template(
        alt.Chart(rows("curve"))
        .mark_line(color=theme.SOFT, strokeDash=[5, 3], strokeWidth=1.5)
        .encode(x=amount(alt.X, "x"), y=amount(alt.Y, "y"), detail=label(alt.Detail, "branch")),
        alt.Chart(rows("leaders"))
        .mark_rule(stroke=theme.SOFT, strokeWidth=0.8)
        .encode(x2=end(alt.X2, "x2"), y2=end(alt.Y2, "y2"), **px),
        *names,
        alt.Chart(rows("marks"))
        .mark_point(filled=True, size=110, opacity=1, stroke=theme.PAPER, strokeWidth=1)
        .encode(
            x=x, y=y,
            shape=label(alt.Shape, "linkage", scale=shapes, legend=alt.Legend(symbolSize=90)),
            color=label(alt.Color, "linkage", scale=colours, legend=alt.Legend(symbolSize=90)),
        ),
    )  # fmt: skip


def _subtitle(left_out: list[str], count: int) -> list[str] | str:
    lines = ["dashed: rigid swing arm, 1 − (track/2) / swing arm (common practice); at design, left side"]
    if left_out:
        shown = ", ".join(left_out[:4]) + (f" and {len(left_out) - 4} more" if len(left_out) > 4 else "")
        lines.append(f"not drawn: {shown}")
    if count > _MOST_LABELS:
        lines.append(f"the first {_MOST_LABELS} of {count} marks are named")
    return lines


def _description(marks: list[dict], left_out: list[str]) -> str:
    shown = "; ".join(
        f"{mark['name']}: swing arm {number(mark['tracks'])} tracks, camber {number(mark['roll_camber'])}° per ° of roll, "
        f"rigid relation {number(mark['rigid'])}"
        for mark in marks[:12]
    )
    tail = f"; and {len(marks) - 12} more" if len(marks) > 12 else ""
    gone = f" Not drawn: {', '.join(left_out[:12])}." if left_out else ""
    return f"Camber in roll against swing arm over track. {shown}{tail}.{gone}"
