"""What stands behind the pivots in a view, in pixels: wheels, ground, links, roll centre, scale bar, words."""

from collections.abc import Mapping

from study.charts import places, theme
from study.charts.frame import Frame, sides
from study.charts.words import number

_FORWARD = {"front": "car's left →", "side": "← forward", "top": "↑ forward"}
_MEMBER = {"colour": "#777f86", "width": 2.4}
_MEMBERS = {
    "spring": {"colour": theme.GREY, "width": 1.2, "dash": "dash"},
    "strut": {"colour": "#a3abb1", "width": 6.0},
    "axle": {"colour": "#b4bbc1", "width": 10.0},
    "bracket": {"colour": "#b4bbc1", "width": 4.0},
}
_BEYOND = 0.18  # a hinge line is drawn this share of its length beyond both ends


def scenery(frame: Frame, geometry: places.Geometry, tables: Mapping) -> dict[str, list[dict]]:
    """The data called tyres, bodies, rules, words_left, words_center and words_right."""
    words = [*_scale_words(frame), *_roll_words(frame, geometry, tables)]
    rules = [
        *_ground(frame, geometry),
        *_links(frame, geometry),
        *_hinges(frame, geometry),
        *_roll_lines(frame, geometry, tables),
        *_scale_bar(frame),
    ]
    outlines = {"tyres": _tyres(frame, geometry), "bodies": _bodies(frame, geometry)}
    return outlines | {"rules": rules} | {
        f"words_{align}": [word for word in words if word["a"] == align]
        for align in ("left", "center", "right")
    }


def _tyres(frame: Frame, geometry: places.Geometry) -> list[dict]:
    wheels = {side: places.tyre(geometry["wheel"][side]) for side in sides(geometry, frame.kind)}
    return _outlines(frame, wheels)


def _bodies(frame: Frame, geometry: places.Geometry) -> list[dict]:
    found = {}
    for side in sides(geometry, frame.kind):
        points = places.drawn_points(geometry, side)
        for part, names in geometry.get("bodies", []):
            found[f"{side} {part}"] = [points[name] for name in names if name in points]
    return _outlines(frame, found)


def _outlines(frame: Frame, found: Mapping) -> list[dict]:
    """The outline of each group of points as the view sees it, in drawing order."""
    rows = []
    for name, points in found.items():
        for x, y in places.hull([frame.px(point) for point in points]):
            rows.append({"g": name, "x": x, "y": y, "o": len(rows)})
    return rows


def _rule(a: tuple, b: tuple, *, colour: str = theme.SOFT, width: float = 1.0, dash: str = "solid") -> dict:
    return {"x": a[0], "y": a[1], "x2": b[0], "y2": b[1], "c": colour, "w": width, "d": dash}


def _ground(frame: Frame, geometry: places.Geometry) -> list[dict]:
    if frame.kind == "top":
        return []
    centre, ground = frame.px((0.0, 0.0, geometry["ground_mm"]))
    rules = [_rule((0, ground), (frame.width, ground), colour=theme.INK, width=1.6)]
    if frame.kind == "front":
        rules.append(_rule((centre, 8), (centre, ground), colour=theme.GREY, dash="dash"))
    return rules


def _links(frame: Frame, geometry: places.Geometry) -> list[dict]:
    rules = []
    for side in sides(geometry, frame.kind):
        points = places.drawn_points(geometry, side)
        for a, b, part in geometry["lines"]:
            if a in points and b in points and not _drawn_already(geometry, side, a, b):
                rules.append(_rule(frame.px(points[a]), frame.px(points[b]), **_MEMBERS.get(part, _MEMBER)))
    return rules


def _drawn_already(geometry: places.Geometry, side: str, a: str, b: str) -> bool:
    """Whether a member of a whole axle stands in the left side's points already."""
    if side == "left" or not places.whole_axle(geometry):
        return False
    left, right = (places.drawn_points(geometry, hand) for hand in ("left", "right"))
    return all(left.get(name) == right[name] for name in (a, b))


def _hinges(frame: Frame, geometry: places.Geometry) -> list[dict]:
    rules = []
    for side in sides(geometry, frame.kind):
        for a, b in geometry.get("hinges", []):
            (x, y), (x2, y2) = (frame.px(geometry[side][name]) for name in (a, b))
            dx, dy = _BEYOND * (x2 - x), _BEYOND * (y2 - y)
            rules.append(_rule((x - dx, y - dy), (x2 + dx, y2 + dy), width=1.4, dash="dash"))
    return rules


def _roll_lines(frame: Frame, geometry: places.Geometry, tables: Mapping) -> list[dict]:
    """The roll centre as a cross; of an independent suspension with the lines from both contact points to it."""
    centre = places.roll_centre(geometry, tables) if frame.kind == "front" else None
    if centre is None:
        return []
    x, y = frame.px((0.0, *centre))
    lines = [
        _rule(frame.px(places.contact(geometry["wheel"][side])), (x, y), dash="dash")
        for side in ("left", "right")
        if not places.whole_axle(geometry)
    ]
    return [
        *lines,
        _rule((x - 9, y), (x + 9, y), colour=theme.INK, width=1.8),
        _rule((x, y - 9), (x, y + 9), colour=theme.INK, width=1.8),
    ]


def _roll_words(frame: Frame, geometry: places.Geometry, tables: Mapping) -> list[dict]:
    centre = places.roll_centre(geometry, tables) if frame.kind == "front" else None
    if centre is None:
        return []
    x, y = frame.px((0.0, *centre))
    ground = frame.px((0.0, 0.0, geometry["ground_mm"]))[1]
    text = f"roll centre, {number(centre[1] - geometry['ground_mm'])} mm above ground"
    return [{"x": x, "y": max(y, ground) + 16, "t": text, "a": "center"}]


def _scale_bar(frame: Frame) -> list[dict]:
    y, long = frame.height - 9, 100 * frame.px_per_mm
    return [
        _rule((8, y), (8 + long, y), colour=theme.INK, width=2.0),
        *(_rule((x, y - 4), (x, y + 4), colour=theme.INK) for x in (8, 8 + long)),
    ]


def _scale_words(frame: Frame) -> list[dict]:
    y = frame.height - 9
    return [
        {"x": 14 + 100 * frame.px_per_mm, "y": y, "t": "100 mm", "a": "left"},
        {"x": frame.width - 6, "y": y, "t": _FORWARD[frame.kind], "a": "right"},
    ]
