"""The geometry in front, side and top view; every pivot is drawn by what it does to a measure."""

from dataclasses import dataclass

import altair as alt

from study.charts import places, theme
from study.charts import tables as tb
from study.charts.callouts import Spot, place
from study.charts.words import number, source_name

ALL = -1
SHAPES = {name: shape for name, (_, shape, _) in theme.FAMILIES.items()}
COLOURS = {name: colour for name, (colour, _, _) in theme.FAMILIES.items()}
_WORDS = {"front": "Front view", "side": "Side view of the left side", "top": "Top view of the left side"}
_LEAST_LABELLED = 0.03


@dataclass(frozen=True, slots=True)
class Frame:
    """A view's scale: car millimetres to pixels, the same both ways."""

    kind: str
    width: float
    height: float
    px_per_mm: float
    h_min: float
    v_max: float
    margin: tuple[float, float]

    def flat(self, point) -> tuple[float, float]:
        """Horizontal and vertical drawing coordinates in mm: seen from ahead, from the left, from above."""
        x, y, z = point
        return {"front": (y, z), "side": (-x, z), "top": (-y, x)}[self.kind]

    def px(self, point) -> tuple[float, float]:
        h, v = self.flat(point)
        return (round(self.margin[0] + (h - self.h_min) * self.px_per_mm, 1),
                round(self.margin[1] + (self.v_max - v) * self.px_per_mm, 1))


def view(geometry: places.Geometry, tables: tb.Tables, kind: str, *, measure_no: int | None = None,
         choose: bool = False, stage: str | None = None) -> alt.LayerChart:
    """One view (`front`, `side` or `top`), markers by share of variance.

    `measure_no` None shows each source with the measure that it governs most. With `choose` the chart carries all
    measures and the parameter `shown` (measure number, -1 for all) selects one.
    """
    stage = stage or tb.last_stage(tables)
    frame = _frame(geometry, kind)
    wanted = [ALL] if measure_no is None else [measure_no]
    if choose:
        wanted = [ALL, *(head["measure_no"] for head in tb.measures(tables))]
    marks, leaders, labels = [], [], []
    for which in wanted:
        _add_sources(frame, geometry, _strengths(tables, which, stage), which, marks, leaders, labels)
    shown = alt.param(name="shown", value=wanted[0])
    layers = [*_scenery(frame, geometry, tables), *_pivots(frame, marks, leaders, labels)]
    layers[0] = layers[0].add_params(shown)
    title = _WORDS[kind]
    chart = alt.layer(*layers).resolve_scale(x="shared", y="shared").properties(
        width=frame.width, height=frame.height)
    return theme.dress(chart, title=title, subtitle=_subtitle(tables, measure_no, stage, choose),
                       description=_description(geometry, tables, title, measure_no, stage))


def _subtitle(tables: tb.Tables, measure_no: int | None, stage: str, choose: bool) -> str:
    if choose:
        return ""
    head = next((m for m in tb.measures(tables) if m["measure_no"] == measure_no), None)
    what = f"share of {head['name']}" if head else "largest share in any measure"
    return f"marker area: {what}, {theme.STAGE_WORDS[stage]}"


def _frame(geometry: places.Geometry, kind: str) -> Frame:
    width = {"front": 1080.0, "side": 530.0, "top": 530.0}[kind]
    margin = {"front": (24.0, 28.0), "side": (58.0, 28.0), "top": (58.0, 28.0)}[kind]
    right_room = {"front": 170.0, "side": 58.0, "top": 58.0}[kind]
    probe = Frame(kind, width, 0.0, 1.0, 0.0, 0.0, margin)
    flat = [probe.flat(point) for point in _extent(geometry, kind)]
    if kind == "front" and not places.two_sides(geometry):
        margin = (right_room, margin[1])
    h_min, h_max = min(h for h, _ in flat), max(h for h, _ in flat)
    v_min, v_max = min(v for _, v in flat), max(v for _, v in flat)
    scale = (width - margin[0] - right_room) / (h_max - h_min)
    scale = min(scale, 420.0 / (v_max - v_min))
    spare = width - margin[0] - right_room - scale * (h_max - h_min)
    margin = (margin[0] + spare / 2, margin[1])
    height = max(240.0, 28.0 + scale * (v_max - v_min) + 34.0)
    return Frame(kind, width, round(height), scale, h_min, v_max, margin)


def _extent(geometry: places.Geometry, kind: str) -> list:
    points = [*geometry["left"].values(), *places.tyre(geometry["wheel"]["left"])]
    if kind == "front":
        points += [*geometry["right"].values(), *places.tyre(geometry["wheel"]["right"])]
    if kind == "side" or kind == "front":
        points.append((0.0, 0.0, geometry["ground_mm"]) if kind == "front"
                      else (points[0][0], 0.0, geometry["ground_mm"]))
    return points


def _strengths(tables: tb.Tables, which: int, stage: str) -> dict[str, tuple[float, tuple[str, ...]]]:
    """Source to its strength (0 to 1) and the label's lines."""
    if which == ALL:
        return {source: (best["value"], (source_name(source), f"{best['text']} of {best['measure']}"))
                for source, best in tb.greatest(tables, stage).items()}
    rows = tb.ranked(tables, which, stage)
    basis = tb.basis_of(rows)
    if basis is None:
        return {}
    values = tb.relative(rows, basis)
    return {row["source"]: (values[row["source"]], (f"{source_name(row['source'])}", tb.strength_text(row, basis)))
            for row in rows}


def _add_sources(frame, geometry, strengths, which, marks, leaders, labels) -> None:
    """Append marker, leader and label rows for one choice of measure."""
    spots = []
    for source, (value, lines) in sorted(strengths.items(), key=lambda item: -item[1][0]):
        point = places.source_place(geometry, source)
        if point is None:
            continue
        x, y = frame.px(point)
        marks.append({"m": which, "x": x, "y": y, "v": round(value, 4), "s": theme.family(source.split(".")[0]),
                      "t": ": ".join(lines)})
        if value >= _LEAST_LABELLED and len(spots) < _most(frame):
            spots.append(Spot(source, x, y, _clipped(lines, frame)))
    for callout in place(spots, width=frame.width, height=frame.height - 22, **_edges(frame, geometry, spots)):
        labels.append({"m": which, "x": round(callout.x, 1), "y": round(callout.y, 1), "a": callout.align,
                       "t": "\n".join(callout.spot.lines)})
        (x, y), (x2, y2) = callout.leader()
        leaders.append({"m": which, "x": x, "y": y, "x2": round(x2, 1), "y2": round(y2, 1)})


def _most(frame: Frame) -> int:
    return min(10, 2 * int((frame.height - 30) // 32))


def _clipped(lines: tuple[str, ...], frame: Frame) -> tuple[str, ...]:
    most = 40 if frame.kind == "front" else 29
    return tuple(line if len(line) <= most else line[: most - 1] + "…" for line in lines)


def _edges(frame: Frame, geometry: places.Geometry, spots: list[Spot]) -> dict[str, float]:
    """Where the label columns stand: beside the corner in front view, over the wheel in the others."""
    if frame.kind != "front" or not spots:
        return {"left_edge": 0.0, "right_edge": frame.width}
    if not places.two_sides(geometry):
        return {"left_edge": 150.0, "right_edge": frame.width - 150.0}
    inner = min(spot.x for spot in spots)
    tyre_px = max(frame.px(point)[0] for point in places.tyre(geometry["wheel"]["left"]))
    return {"left_edge": inner - 40.0, "right_edge": tyre_px + 14.0}


def _scale(frame: Frame) -> dict[str, alt.Scale]:
    return {"x": alt.Scale(domain=[0, frame.width], nice=False, zero=False),
            "y": alt.Scale(domain=[frame.height, 0], nice=False, zero=False)}


def _xy(frame: Frame) -> dict:
    scale = _scale(frame)
    return {"x": theme.amount(alt.X, "x", scale=scale["x"], axis=None), "y": theme.amount(alt.Y, "y", scale=scale["y"], axis=None)}


def _scenery(frame: Frame, geometry: places.Geometry, tables: tb.Tables) -> list[alt.Chart]:
    """Wheels, ground, links, roll centre, scale bar and the direction words."""
    xy = _xy(frame)
    sides = ["left", "right"] if frame.kind == "front" else ["left"]
    outlines, order = [], 0
    for side in sides:
        for x, y in places.hull([frame.px(p) for p in places.tyre(geometry["wheel"][side])]):
            outlines.append({"g": side, "x": x, "y": y, "o": order})
            order += 1
    layers = [alt.Chart(theme.data(outlines)).mark_line(
        stroke=theme.SOFT, strokeWidth=1, fill="#eef0f1", fillOpacity=0.8).encode(
        **xy, detail=theme.label(alt.Detail, "g"), order=theme.amount(alt.Order, "o"))]
    rules = [*_ground(frame, geometry), *_links(frame, geometry, sides), *_roll_lines(frame, geometry, tables)]
    layers.append(alt.Chart(theme.data(rules)).mark_rule(strokeCap="round").encode(
        **xy, x2=theme.end(alt.X2, "x2"), y2=theme.end(alt.Y2, "y2"), color=theme.label(alt.Color, "c", scale=None), strokeWidth=theme.amount(alt.StrokeWidth, "w", scale=None),
        strokeDash=theme.label(alt.StrokeDash, "d", scale=alt.Scale(domain=["solid", "dash"], range=[[1, 0], [5, 4]]), legend=None)))
    words = _words(frame, geometry, tables)
    layers += [_text(frame, words, align, halo=False, filtered=False) for align in ("left", "center", "right")
               if any(word["a"] == align for word in words)]
    return layers


def _rule(a, b, *, colour=theme.SOFT, width=1.0, dash="solid") -> dict:
    return {"x": a[0], "y": a[1], "x2": b[0], "y2": b[1], "c": colour, "w": width, "d": dash}


def _ground(frame: Frame, geometry: places.Geometry) -> list[dict]:
    bar = 100 * frame.px_per_mm
    y = frame.height - 8
    scale_bar = [_rule((8, y), (8 + bar, y), colour=theme.INK, width=2.0),
                 _rule((8, y - 4), (8, y + 4), colour=theme.INK), _rule((8 + bar, y - 4), (8 + bar, y + 4), colour=theme.INK)]
    if frame.kind == "top":
        return scale_bar
    ground = frame.px((0.0, 0.0, geometry["ground_mm"]))[1]
    rules = [_rule((0, ground), (frame.width, ground), colour=theme.INK, width=1.6)]
    if frame.kind == "front":
        centre = frame.px((0.0, 0.0, 0.0))[0]
        rules.append(_rule((centre, 14), (centre, ground), colour=theme.FAINT, dash="dash"))
    return [*rules, *scale_bar]


def _links(frame: Frame, geometry: places.Geometry, sides: list[str]) -> list[dict]:
    if not places.two_sides(geometry):
        sides = ["left"]
    rules = []
    for side in sides:
        points = geometry[side]
        for a, b, _ in geometry["lines"]:
            if a in points and b in points:
                rules.append(_rule(frame.px(points[a]), frame.px(points[b]), colour="#777f86", width=2.4))
    return rules


def _roll_lines(frame: Frame, geometry: places.Geometry, tables: tb.Tables) -> list[dict]:
    centre = places.roll_centre(geometry, tables) if frame.kind == "front" else None
    if centre is None:
        return []
    x, y = frame.px((0.0, *centre))
    lines = [_rule(frame.px(places.contact(geometry["wheel"][side])), (x, y), colour=theme.SOFT, dash="dash")
             for side in ("left", "right")]
    cross = [_rule((x - 8, y), (x + 8, y), colour=theme.INK, width=1.6),
             _rule((x, y - 8), (x, y + 8), colour=theme.INK, width=1.6)]
    return lines + cross


def _words(frame: Frame, geometry: places.Geometry, tables: tb.Tables) -> list[dict]:
    bar = 100 * frame.px_per_mm
    words = [{"x": 14 + bar, "y": frame.height - 8, "t": "100 mm", "a": "left"}]
    forward = {"front": "car's left →", "side": "← forward", "top": "↑ forward, ← left"}[frame.kind]
    words.append({"x": frame.width - 6, "y": frame.height - 8, "t": forward, "a": "right"})
    centre = places.roll_centre(geometry, tables) if frame.kind == "front" else None
    if centre is not None:
        x, y = frame.px((0.0, *centre))
        ground = frame.px((0.0, 0.0, geometry["ground_mm"]))[1]
        text = f"roll centre {number(centre[1] - geometry['ground_mm'])} mm"
        words.append({"x": x, "y": min(y - 16, ground - 16), "t": text, "a": "center"})
    return words


def _text(frame: Frame, rows: list[dict], align: str, *, halo: bool, filtered: bool) -> alt.Chart:
    style = {"stroke": theme.PAPER, "strokeWidth": 4, "strokeJoin": "round", "strokeOpacity": 0.9} if halo else {}
    chart = alt.Chart(theme.data([row for row in rows if row["a"] == align])).mark_text(
        align=align, baseline="middle", fontSize=11, lineHeight=12, lineBreak="\n", **style,
    ).encode(**_xy(frame), text=theme.label(alt.Text, "t"))
    return chart.transform_filter("datum.m == shown") if filtered else chart


def _pivots(frame: Frame, marks: list[dict], leaders: list[dict], labels: list[dict]) -> list[alt.Chart]:
    if not marks:
        return []
    xy = _xy(frame)
    present = [name for name in theme.FAMILIES if any(mark["s"] == name for mark in marks)]
    layers = [] if not leaders else [alt.Chart(theme.data(leaders)).mark_rule(
        stroke=theme.SOFT, strokeWidth=0.8).encode(**xy, x2=theme.end(alt.X2, "x2"), y2=theme.end(alt.Y2, "y2")).transform_filter("datum.m == shown")]
    legend = alt.Legend(orient="top", symbolSize=90)
    layers.append(alt.Chart(theme.data(marks)).mark_point(
        filled=True, opacity=0.92, stroke=theme.PAPER, strokeWidth=1).encode(
        **xy, size=theme.amount(alt.Size, "v", scale=alt.Scale(domain=[0, 1], range=[26, 1400]), legend=None),
        shape=theme.label(alt.Shape, "s", scale=alt.Scale(domain=present, range=[SHAPES[p] for p in present]), legend=legend),
        color=theme.label(alt.Color, "s", scale=alt.Scale(domain=present, range=[COLOURS[p] for p in present]), legend=legend),
        tooltip=theme.label(alt.Tooltip, "t", title="source"),
    ).transform_filter("datum.m == shown"))
    layers += [_text(frame, labels, align, halo=halo, filtered=True) for halo in (True, False)
               for align in ("left", "right") if any(label["a"] == align for label in labels)]
    return layers


def _description(geometry, tables, title: str, measure_no: int | None, stage: str) -> str:
    which = ALL if measure_no is None else measure_no
    order = sorted(_strengths(tables, which, stage).items(), key=lambda item: -item[1][0])
    placed = [source for source, _ in order if places.source_place(geometry, source)]
    first = ", ".join(source_name(source) for source in placed[:3])
    tail = f" Largest markers: {first}." if first else ""
    return f"{title} of {geometry.get('name') or geometry['linkage']}, to scale, at design position.{tail}"
