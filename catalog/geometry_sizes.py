"""Positions and sizes that a geometry file may not have, judged in ISO axes and mm."""

import math
from itertools import combinations

from catalog.axes import length_mm
from catalog.geometry import Point, Side
from catalog.geometry_models import GeometryTable
from catalog.linkages import LINKAGES, SPRING_POINTS, ArmPoints, Linkage
from catalog.toml_text import refuse, shown

COINCIDENT_MM = 0.01
GROUND_MM = 0.01
HALF_TRACK_MM = (50.0, 3000.0)
LOADED_RADIUS_MM = (30.0, 1500.0)
WHEELBASE_MM = (200.0, 20000.0)
CG_HEIGHT_MM = (10.0, 5000.0)
FARTHEST_MM = 6000.0
LEAST_EXTENT_MM = 20.0


def check_sizes(table: GeometryTable, *, given: Side, other: Side, source: str) -> None:
    """Raise GeometryFileError for impossible or suspicious positions; sides in ISO axes and mm."""
    other_name = "right" if table.side == "left" else "left"
    _check_side(table, given, side=table.side, prefix="", source=source)
    if not table.other_side().is_empty():
        _check_side(table, other, side=other_name, prefix=f"{other_name}.", source=source)
    gap = abs(given.wheel.ground_mm() - other.wheel.ground_mm())
    if gap > GROUND_MM:
        refuse(
            source,
            f"{other_name}.wheel",
            f"stands on a ground {gap:.3f} mm away from that of wheel; both tyres must touch one level road"
            f" within {GROUND_MM} mm",
            "correct centre, loaded_radius or camber_deg of one side.",
        )
    _check_vehicle(table, source)


def _check_side(table: GeometryTable, side_points: Side, *, side: str, prefix: str, source: str) -> None:
    linkage, sign = LINKAGES[table.linkage], 1.0 if side == "left" else -1.0
    _check_wheel(table, side_points, side=side, prefix=prefix, source=source)
    points = side_points.points
    outer = [f"{name}_outer" for name in table.links if not linkage.whole_axle]
    for name in [*linkage.on_wheel_side, *outer]:
        if sign * points[name][1] <= 0.0:
            rule = f"is across the car from its {side} wheel (y = {points[name][1]:g} mm, left positive)"
            refuse(source, _point_key(table, name, prefix), rule, "check its sign, side and axes.")
    for name, point in points.items():
        if not math.dist(point, side_points.wheel.centre) <= FARTHEST_MM:
            rule = f"is more than {FARTHEST_MM / 1000:g} m from the wheel centre with units = {table.units!r}"
            refuse(source, _point_key(table, name, prefix), rule, "check units and the number.")
    _check_coincident(table, points, prefix=prefix, source=source)


def _check_wheel(table: GeometryTable, side_points: Side, *, side: str, prefix: str, source: str) -> None:
    wheel, sign = side_points.wheel, 1.0 if side == "left" else -1.0
    across = sign * wheel.centre[1]
    if across <= 0.0:
        rule = f"is on the wrong side for a {side} wheel (y = {wheel.centre[1]:g} mm, left positive)"
        refuse(source, f"{prefix}wheel.centre", rule, "check side, axes and the sign.")
    _check_range(source, f"{prefix}wheel.centre", "half track", across, HALF_TRACK_MM, table.units)
    key = f"{prefix}wheel.loaded_radius"
    _check_range(source, key, "loaded radius", wheel.loaded_radius_mm, LOADED_RADIUS_MM, table.units)


def _check_vehicle(table: GeometryTable, source: str) -> None:
    for key, limits in (("wheelbase", WHEELBASE_MM), ("cg_height", CG_HEIGHT_MM)):
        value = getattr(table.vehicle, key)
        if value is not None:
            length = length_mm(value, units=table.units)
            _check_range(source, f"vehicle.{key}", key.replace("_", " "), length, limits, table.units)


def _check_range(
    source: str, key: str, what: str, value: float, limits: tuple[float, float], units: str
) -> None:
    low, high = limits
    if not low <= value <= high:
        rule = f"gives a {what} of {value:g} mm with units = {units!r}; {low:g} to {high:g} mm is taken"
        refuse(source, key, rule, "check units (mm, m or in).")


def _check_coincident(table: GeometryTable, points: dict[str, Point], *, prefix: str, source: str) -> None:
    linkage = LINKAGES[table.linkage]
    for first, second in _apart(table, linkage, points):
        if math.dist(points[first], points[second]) < COINCIDENT_MM:
            rule = f"coincides with {second} (within {COINCIDENT_MM} mm), the part between has no length"
            refuse(source, _point_key(table, first, prefix), rule, "give each its own position.")
    for name, arm in linkage.arms.items():
        if _off_line(points, arm) < COINCIDENT_MM:
            rule = f"lies on the line through the pivots of {name}, which then has no length"
            refuse(
                source, _point_key(table, arm.ball_joint, prefix), rule, "move the ball joint off that line."
            )
    for first, second in combinations(table.links, 2):
        if all(
            math.dist(points[f"{first}_{e}"], points[f"{second}_{e}"]) < COINCIDENT_MM
            for e in ("inner", "outer")
        ):
            refuse(
                source, f"links.{second}", f"is the same link as {first}", "give each link its own points."
            )
    extent = max(math.dist(p, q) for p, q in combinations(points.values(), 2))
    if extent < LEAST_EXTENT_MM:
        rule = f"all lie within {extent:g} mm with units = {table.units!r}"
        refuse(source, f"{prefix}points", rule, "check units (mm, m or in).")


def _apart(table: GeometryTable, linkage: Linkage, points: dict[str, Point]) -> list[tuple[str, str]]:
    """Pairs of points that may not coincide: all of [points], the two ends of each link and of the spring."""
    pairs = [p for p in combinations(linkage.points, 2) if frozenset(p) not in linkage.may_meet]
    pairs += [(f"{name}_inner", f"{name}_outer") for name in table.links]
    return pairs + ([SPRING_POINTS] if SPRING_POINTS[0] in points else [])


def _off_line(points: dict[str, Point], arm: ArmPoints) -> float:
    front, rear, ball = (points[n] for n in (arm.front_pivot, arm.rear_pivot, arm.ball_joint))
    line = [b - a for a, b in zip(front, rear, strict=True)]
    to_ball = [b - a for a, b in zip(front, ball, strict=True)]
    share = sum(a * b for a, b in zip(line, to_ball, strict=True)) / sum(a * a for a in line)
    return math.dist(to_ball, [share * a for a in line])


def _point_key(table: GeometryTable, name: str, prefix: str) -> str:
    """The key of a point as it stands in the file, with what is given there."""
    said = table.other_side() if prefix else table
    link, _, end = name.rpartition("_")
    if link in table.links:
        found, key = getattr(said.links.get(link), end, None), f"{prefix}links.{link}.{end}"
    else:
        found, key = said.points.get(name), f"{prefix}points.{name}"
    return f"{key} = {shown(found)}" if found is not None else f"{key} (mirror image)"
