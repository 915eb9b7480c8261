"""A view's frame: which way it looks, how car millimetres become pixels. The same scale both ways."""

from dataclasses import dataclass

from study.charts import places

WIDTHS = {"front": 980.0, "side": 530.0, "top": 530.0}
# kept free: above and below the drawing, beside its lines, and beside its outermost points for their labels
_TOP_PX, _FOOT_PX, _EDGE_PX = 26.0, 34.0, 12.0
_LABEL_PX = {"front": 190.0, "side": 150.0, "top": 150.0}
_MOST_DOWN_PX = 420.0


@dataclass(frozen=True, slots=True)
class Frame:
    kind: str
    width: float
    height: float
    px_per_mm: float
    left_mm: float
    top_mm: float
    left_px: float

    def px(self, point) -> tuple[float, float]:
        across, up = flat(self.kind, point)
        return (
            round(self.left_px + (across - self.left_mm) * self.px_per_mm, 1),
            round(_TOP_PX + (self.top_mm - up) * self.px_per_mm, 1),
        )


def flat(kind: str, point) -> tuple[float, float]:
    """Horizontal and vertical drawing coordinates in mm: seen from ahead, from the left, from above."""
    x, y, z = point
    return {"front": (y, z), "side": (-x, z), "top": (-y, x)}[kind]


def sides(geometry: places.Geometry, kind: str) -> list[str]:
    """The corners that a view shows: both from ahead, those of a whole axle from above too, else the left one."""
    both = kind == "front" or (kind == "top" and places.whole_axle(geometry))
    return ["left", "right"] if both else ["left"]


def frame(geometry: places.Geometry, kind: str) -> Frame:
    """The frame in which everything fits, with room for labels beside the outermost points."""
    shown = sides(geometry, kind)
    outline = [point for side in shown for point in places.tyre(geometry["wheel"][side])]
    points = [point for side in shown for point in geometry[side].values()]
    points += [places.along_hub(geometry["wheel"][side]) for side in shown]
    points += [mount for side in shown if (mount := places.rack_mount(geometry, side))]
    drawn = [flat(kind, point) for point in [*outline, *points]]
    low, high = min(h for h, _ in drawn), max(h for h, _ in drawn)
    ground = [geometry["ground_mm"]] if kind != "top" else []
    bottom, top = min([*(v for _, v in drawn), *ground]), max(v for _, v in drawn)
    labelled = [h for h, _ in (flat(kind, point) for point in points)]
    if len(shown) == 2:
        labelled = [low, high] if places.whole_axle(geometry) else [high]
    scale, left_px = _fit(WIDTHS[kind], _LABEL_PX[kind], (low, high), (min(labelled), max(labelled)))
    most = _MOST_DOWN_PX / (top - bottom)
    if scale > most:
        left_px += (scale - most) * (high - low) / 2
        scale = most
    height = max(230.0, _TOP_PX + scale * (top - bottom) + _FOOT_PX)
    return Frame(kind, WIDTHS[kind], round(height), scale, low, top, left_px)


def _fit(width: float, label_px: float, drawn: tuple, labelled: tuple) -> tuple[float, float]:
    """Largest scale, and where the drawing starts, with `label_px` free on both sides of the labelled stretch
    (on the right only where that stretch is a single place)."""
    single = labelled[0] == labelled[1]
    before = _EDGE_PX if single else label_px
    first = drawn[0] if single else labelled[0]
    scale = min(
        (width - a - b) / (end - start)
        for start, a in ((drawn[0], _EDGE_PX), (first, before))
        for end, b in ((drawn[1], _EDGE_PX), (labelled[1], label_px))
        if end > start
    )
    left_px = max(_EDGE_PX, before - (first - drawn[0]) * scale)
    spare = (
        width
        - left_px
        - max((drawn[1] - drawn[0]) * scale + _EDGE_PX, (labelled[1] - drawn[0]) * scale + label_px)
    )
    return scale, left_px + max(spare, 0.0) / 2
