"""Where things stand in space: error sources, wheel outlines, contact points. Car coordinates, ISO axes, mm.

The geometry is a plain dict:
    name, linkage     text
    left, right       {point name: (x, y, z)}; a solid axle has the same points in both
    lines             [(point_a, point_b, part)]; drawn on both sides
    bodies            optional [(part, (point, …))]: plates around points
    rack_point        optional: the point at the end of the rack, else tie_rod_inner
    hinges            optional [(point_a, point_b)]: lines that a body turns about
    drawn             optional {"left": {name: (x, y, z)}, "right": …}: points for lines and bodies only
    wheel             {"left": {"centre": (x, y, z), "axis": (x, y, z) pointing outboard, "radius_mm": r},
                      "right": …}
    ground_mm         height of the road plane at design
    roll_centre_mm    optional (y, height above ground)
"""

import math
from collections.abc import Mapping

import numpy as np

Point = tuple[float, float, float]
Geometry = Mapping

# features without a point of their own: the two points whose middle stands for them
_BETWEEN = {
    "tie_rod.length": ("tie_rod_inner", "tie_rod_outer"),
    "upright.strut_axis": ("strut_top", "strut_lower"),
    "upper_arm.front_leg": ("upper_front_pivot", "upper_ball_joint"),
    "upper_arm.rear_leg": ("upper_rear_pivot", "upper_ball_joint"),
    "lower_arm.front_leg": ("lower_front_pivot", "lower_ball_joint"),
    "lower_arm.rear_leg": ("lower_rear_pivot", "lower_ball_joint"),
}


_ON_RACK = 0.8  # the mount is drawn on the rack, near the end of the side that is shown


def source_place(geometry: Geometry, source: str, side: str = "left") -> Point | None:
    """Where an error source is drawn on one side, or None when it has no place (alignment bands, jigs)."""
    part, _, feature = source.partition(".")
    points = geometry[side]
    if part == "alignment" or not feature:
        return None
    for wheel in ("left", "right"):
        if feature.endswith(f"_{wheel}"):
            side, feature = wheel, feature.removesuffix(f"_{wheel}")
    if feature in points:
        return tuple(points[feature])
    if feature == "wheel_centre":
        return tuple(geometry["wheel"][side]["centre"])
    if feature == "hub_axis":
        return along_hub(geometry["wheel"][side])
    if source == "rack.mount":
        return rack_mount(geometry, side)
    ends = _BETWEEN.get(source, (f"{part}_inner", f"{part}_outer"))
    return _mean([points[end] for end in ends]) if all(end in points for end in ends) else None


def rack_mount(geometry: Geometry, side: str) -> Point | None:
    """Where the rack's mount is drawn, or None without a rack."""
    end = geometry[side].get(geometry.get("rack_point", "tie_rod_inner"))
    return None if end is None else (end[0], _ON_RACK * end[1], end[2])


def along_hub(wheel: Mapping, share: float = 0.2) -> Point:
    """A place on the spin axis, outboard of the wheel centre."""
    return tuple(
        c + share * wheel["radius_mm"] * a for c, a in zip(wheel["centre"], wheel["axis"], strict=True)
    )


def _mean(points: list) -> Point:
    return tuple(sum(values) / len(points) for values in zip(*points, strict=True))


def contact(wheel: Mapping) -> Point:
    """The tyre disc's lowest point: centre minus radius along the disc's steepest direction."""
    centre, axis = np.asarray(wheel["centre"], float), np.asarray(wheel["axis"], float)
    axis = axis / np.linalg.norm(axis)
    upward = np.array([0.0, 0.0, 1.0]) - axis[2] * axis
    return tuple(centre - wheel["radius_mm"] * upward / np.linalg.norm(upward))


def tyre(wheel: Mapping, width_share: float = 0.7, steps: int = 48) -> np.ndarray:
    """Points on the two rims of a tyre of an assumed width (2·steps, 3); their outline is what is drawn."""
    axis = np.asarray(wheel["axis"], float)
    axis = axis / np.linalg.norm(axis)
    helper = np.array([0.0, 0.0, 1.0]) if abs(axis[2]) < 0.9 else np.array([1.0, 0.0, 0.0])
    first = np.cross(axis, helper)
    first = first / np.linalg.norm(first)
    angle = np.linspace(0.0, 2 * math.pi, steps, endpoint=False)[:, None]
    radius = wheel["radius_mm"]
    circle = radius * (np.cos(angle) * first + np.sin(angle) * np.cross(axis, first))
    half = axis * radius * width_share / 2
    return np.asarray(wheel["centre"], float) + np.concatenate([circle + half, circle - half])


def hull(points: list[tuple[float, float]]) -> list[tuple[float, float]]:
    """Convex outline in drawing order, closed."""
    points = sorted(set(points))
    if len(points) < 3:
        return points

    def half(ordered: list) -> list:
        chain: list = []
        for p in ordered:
            while len(chain) > 1 and _turn(chain[-2], chain[-1], p) <= 0:
                chain.pop()
            chain.append(p)
        return chain[:-1]

    outline = half(points) + half(points[::-1])
    return [*outline, outline[0]]


def _turn(a: tuple, b: tuple, c: tuple) -> float:
    return (b[0] - a[0]) * (c[1] - a[1]) - (b[1] - a[1]) * (c[0] - a[0])


def whole_axle(geometry: Geometry) -> bool:
    """Whether one body carries both wheels: its members are drawn once."""
    return geometry["linkage"] == "solid-axle"


def drawn_points(geometry: Geometry, side: str) -> dict[str, Point]:
    """All points that lines and bodies of a side may name."""
    return {**geometry[side], **geometry.get("drawn", {}).get(side, {})}


def roll_centre(geometry: Geometry, tables: Mapping) -> tuple[float, float] | None:
    """(y, z) of the roll centre in car coordinates: as given, else from a measure studied at design."""
    given = geometry.get("roll_centre_mm")
    if given is not None:
        return float(given[0]), float(given[1]) + geometry["ground_mm"]
    for row in tables.get("stats", []):
        if row.get("of") == "roll_centre_height_mm" and row.get("nominal") is not None and _at_design(row):
            return 0.0, float(row["nominal"]) + geometry["ground_mm"]
    return None


def _at_design(row: Mapping) -> bool:
    position = row.get("position")
    if isinstance(position, Mapping):
        return not any(position.values())
    return " at " not in str(row.get("measure")) and " over " not in str(row.get("measure"))
