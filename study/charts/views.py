"""The geometry in front, side and top view; every pivot is drawn by what it does to a measure."""

from functools import cache

import altair as alt

from study.charts import places, theme
from study.charts import tables as tb
from study.charts.callouts import Spot, place
from study.charts.frame import Frame, frame, sides
from study.charts.scenery import scenery
from study.charts.template import amount, as_chart, end, fill, label, rows, slot, template
from study.charts.words import source_name

ALL = -1
_TITLES = {"front": "Front view", "side": "Side view, left side", "top": "Top view, left side"}
_WHOLE = {"top": "Top view"}
_LEAST_LABELLED = 0.03
_LONGEST = {"front": 34, "side": 25, "top": 25}


def view(geometry: places.Geometry, tables: tb.Tables, kind: str, **options) -> alt.LayerChart:
    """`view_spec` as a chart."""
    return as_chart(view_spec(geometry, tables, kind, **options))


def view_spec(
    geometry: places.Geometry,
    tables: tb.Tables,
    kind: str,
    *,
    measure_no: int | None = None,
    choose: bool = False,
    stage: str | None = None,
) -> dict:
    """One view (`front`, `side` or `top`), marker area by share of variance, the geometry as in `places`.

    `measure_no` None shows each source with the measure that it governs most. With `choose` the chart
    carries all measures, and its parameter `shown` (a measure number, -1 for all together) selects one.
    """
    stage = stage or tb.last_stage(tables)
    drawn = frame(geometry, kind)
    first = ALL if measure_no is None else measure_no
    wanted = dict.fromkeys([first, *(head["measure_no"] for head in tb.measures(tables) if choose)])
    above = _above_roll_centre(drawn, geometry, tables)
    data: dict[str, list[dict]] = {"marks": [], "leaders": [], "labels_left": [], "labels_right": []}
    for which in wanted:
        _add(data, drawn, geometry, strengths(tables, which, stage), which, above)
    families = [name for name in theme.FAMILIES if any(mark["s"] == name for mark in data["marks"])]
    return fill(
        _template(bool(families)),
        data=data | scenery(drawn, geometry, tables),
        params={"shown": first},
        slots={
            "across": [0, drawn.width],
            "down": [drawn.height, 0],
            "families": families,
            "shapes": [theme.FAMILIES[name][1] for name in families],
            "colours": [theme.FAMILIES[name][0] for name in families],
        },
        title=title(geometry, kind),
        subtitle="" if choose else _subtitle(tables, measure_no, stage),
        description=_description(geometry, tables, kind, first, stage),
        width=drawn.width,
        height=drawn.height,
    )


def title(geometry: places.Geometry, kind: str) -> str:
    """What a view is called."""
    return (_WHOLE if places.whole_axle(geometry) else {}).get(kind, _TITLES[kind])


def strengths(tables: tb.Tables, which: int, stage: str) -> dict[str, tuple[float, tuple[str, ...]]]:
    """Source to its strength (0 to 1) and the lines of its label; `which` is a measure number or ALL."""
    if which == ALL:
        return {
            source: (best["value"], (source_name(source), f"{best['text']} {best['measure']}"))
            for source, best in tb.greatest(tables, stage).items()
        }
    ranked = tb.ranked(tables, which, stage)
    if not ranked:
        return {}
    basis = tb.basis_of(ranked)
    values = tb.relative(ranked, basis)
    return {
        row["source"]: (values[row["source"]], (source_name(row["source"]), tb.strength_text(row, basis)))
        for row in ranked
    }


def _add(data: dict, drawn: Frame, geometry: places.Geometry, strong: dict, which: int, above: float | None) -> None:
    """Markers, leaders and labels of one choice of measure; labels at the car's middle end `above` a height."""
    spots = []
    for source, (value, lines) in sorted(strong.items(), key=lambda item: -item[1][0]):
        point = places.source_place(geometry, source)
        if point is None:
            continue
        x, y = drawn.px(point)
        data["marks"].append(
            {
                "m": which,
                "x": x,
                "y": y,
                "v": round(value, 4),
                "t": ": ".join(lines),
                "s": theme.family(source.split(".")[0]),
            }
        )
        if value >= _LEAST_LABELLED and len(spots) < min(10, 2 * int((drawn.height - 30) // 31)):
            spots.append(Spot(source, x, y, _fitted(lines, drawn.kind)))
    columns = _columns(drawn, geometry, spots) | {"left_height": above}
    for callout in place(spots, width=drawn.width, height=drawn.height - 46, **columns):
        (x, y), (x2, y2) = callout.leader()
        data["leaders"].append({"m": which, "x": x, "y": y, "x2": round(x2, 1), "y2": round(y2, 1)})
        data[f"labels_{callout.align}"].append(
            {
                "m": which,
                "x": round(callout.x, 1),
                "y": round(callout.y, 1),
                "t": "\n".join(callout.spot.lines),
            }
        )


def _fitted(lines: tuple[str, ...], kind: str) -> tuple[str, ...]:
    """The label's lines at the length that a view has room for; side and top view leave out the part."""
    if kind != "front":
        lines = (lines[0].split(" (")[0], *lines[1:])
    most = _LONGEST[kind]
    return tuple(line if len(line) <= most else line[: most - 1].rstrip() + "…" for line in lines)


def _columns(drawn: Frame, geometry: places.Geometry, spots: list[Spot]) -> dict[str, float]:
    """Where the label columns stand: outside the points, in front view outside the tyre."""
    first = min((spot.x for spot in spots), default=0.0)
    last = max((spot.x for spot in spots), default=drawn.width)
    outer = {
        side: [drawn.px(point)[0] for point in places.tyre(geometry["wheel"][side])]
        for side in sides(geometry, drawn.kind)
    }
    if len(outer) == 2:
        last = max(max(xs) for xs in outer.values())
        first = min(min(xs) for xs in outer.values()) if places.whole_axle(geometry) else first
    return {"left_edge": first - 30.0, "right_edge": last + 26.0}


def _above_roll_centre(drawn: Frame, geometry: places.Geometry, tables: tb.Tables) -> float | None:
    """Where labels at the car's middle have to end so that the roll centre stays in sight."""
    centre = places.roll_centre(geometry, tables) if drawn.kind == "front" else None
    return drawn.px((0.0, *centre))[1] - 10.0 if centre and not places.whole_axle(geometry) else None


@cache
def _template(has_marks: bool) -> dict:
    x = amount(alt.X, "x", axis=None, scale=alt.Scale(domain=slot("across"), nice=False, zero=False))
    y = amount(alt.Y, "y", axis=None, scale=alt.Scale(domain=slot("down"), nice=False, zero=False))
    ends = {"x": x, "y": y, "x2": end(alt.X2, "x2"), "y2": end(alt.Y2, "y2")}
    dashes = alt.Scale(domain=["solid", "dash"], range=[[1, 0], [5, 4]])
    legend = alt.Legend(symbolSize=90) if has_marks else None
    shapes = alt.Scale(domain=slot("families"), range=slot("shapes"))
    colours = alt.Scale(domain=slot("families"), range=slot("colours"))
    pick = "datum.m == shown"
    return template(
        alt.Chart(rows("tyres"))
        .mark_line(stroke=theme.GREY, strokeWidth=1, fill="#eef0f1")
        .encode(x=x, y=y, detail=label(alt.Detail, "g"), order=amount(alt.Order, "o")),
        alt.Chart(rows("bodies"))
        .mark_line(stroke="#9aa2a9", strokeWidth=1.2, strokeJoin="round", fill="#d3d8dc", fillOpacity=0.75)
        .encode(x=x, y=y, detail=label(alt.Detail, "g"), order=amount(alt.Order, "o")),
        alt.Chart(rows("rules"))
        .mark_rule(strokeCap="round")
        .encode(
            stroke=label(alt.Stroke, "c", scale=None),
            strokeWidth=amount(alt.StrokeWidth, "w", scale=None),
            strokeDash=label(alt.StrokeDash, "d", scale=dashes, legend=None),
            **ends,
        ),
        *(_text(f"words_{align}", align, x, y) for align in ("left", "center", "right")),
        alt.Chart(rows("leaders"))
        .mark_rule(stroke=theme.SOFT, strokeWidth=0.8)
        .encode(**ends)
        .transform_filter(pick),
        alt.Chart(rows("marks"))
        .mark_point(filled=True, opacity=0.92, stroke=theme.PAPER, strokeWidth=1)
        .encode(
            x=x,
            y=y,
            size=amount(alt.Size, "v", scale=alt.Scale(domain=[0, 1], range=[26, 1400]), legend=None),
            shape=label(alt.Shape, "s", scale=shapes, legend=legend),
            tooltip=label(alt.Tooltip, "t", title="source"),
            color=label(alt.Color, "s", scale=colours, legend=legend),
        )
        .transform_filter(pick),
        *(
            _text(f"labels_{align}", align, x, y, **halo).transform_filter(pick)
            for halo in (theme.HALO, {})
            for align in ("left", "right")
        ),
    )


def _text(name: str, align: str, x: alt.X, y: alt.Y, **style) -> alt.Chart:
    return (
        alt.Chart(rows(name))
        .mark_text(
            align=align,
            baseline="middle",
            fontSize=11,
            lineHeight=12,
            lineBreak="\n",
            **style,
        )
        .encode(x=x, y=y, text=label(alt.Text, "t"))
    )


def _subtitle(tables: tb.Tables, measure_no: int | None, stage: str) -> str:
    head = next((m for m in tb.measures(tables) if m["measure_no"] == measure_no), None)
    what = f"share of {head['name']}" if head else "largest share in any measure"
    return f"marker area: {what}, {theme.STAGE_WORDS[stage]}"


def _description(geometry: places.Geometry, tables: tb.Tables, kind: str, which: int, stage: str) -> str:
    order = sorted(strengths(tables, which, stage).items(), key=lambda item: -item[1][0])
    placed = [source for source, _ in order if places.source_place(geometry, source)]
    first = ", ".join(source_name(source) for source in placed[:3])
    tail = f" Largest markers: {first}." if first else ""
    name = geometry.get("name") or geometry["linkage"]
    return f"{title(geometry, kind)} of {name}, to scale, at design position.{tail}"
