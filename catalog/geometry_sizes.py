"""Positions and sizes that a geometry file may not have, judged in ISO axes and mm."""

import math
from collections.abc import Mapping
from dataclasses import dataclass
from itertools import combinations
from typing import NoReturn

from catalog.axes import length_mm
from catalog.geometry import Point, Side
from catalog.geometry_models import GeometryTable
from catalog.linkages import LINKAGES, SPRING_POINTS, ArmPoints, Linkage
from catalog.points_file import GivenPoints
from catalog.toml_text import refuse, shown

COINCIDENT_MM = 0.01
GROUND_MM = 0.01
HALF_TRACK_MM = (50.0, 3000.0)
LOADED_RADIUS_MM = (30.0, 1500.0)
WHEELBASE_MM = (200.0, 20000.0)
CG_HEIGHT_MM = (10.0, 5000.0)
FARTHEST_MM = 6000.0
LEAST_EXTENT_MM = 20.0


@dataclass(frozen=True, slots=True)
class _File:
    """What is judged: the file's table, its name for errors, and what its points file gave."""

    table: GeometryTable
    source: str
    from_csv: GivenPoints

    def refuse(self, key: str, rule: str, remedy: str) -> NoReturn:
        refuse(self.source, key, rule, remedy)

    def refuse_point(self, name: str, prefix: str, rule: str, remedy: str) -> NoReturn:
        refuse(self.source, _point_key(self, name, prefix), rule, remedy)


def check_sizes(table: GeometryTable, *, given: Side, other: Side, source: str, from_csv: GivenPoints) -> None:
    """Raise GeometryFileError for impossible or suspicious positions; sides in ISO axes and mm."""
    file = _File(table, source, from_csv)
    other_name = "right" if table.side == "left" else "left"
    _check_side(file, given, side=table.side, prefix="")
    if not table.other_side().is_empty():
        _check_side(file, other, side=other_name, prefix=f"{other_name}.")
    gap = abs(given.wheel.ground_mm() - other.wheel.ground_mm())
    if gap > GROUND_MM:
        rule = (
            f"stands on a ground {gap:.3f} mm away from that of wheel; both tyres must touch one level road"
            f" within {GROUND_MM} mm"
        )
        file.refuse(f"{other_name}.wheel", rule, "correct centre, loaded_radius or camber_deg of one side.")
    for key, limits in (("wheelbase", WHEELBASE_MM), ("cg_height", CG_HEIGHT_MM)):
        value = getattr(table.vehicle, key)
        if value is not None:
            length = length_mm(value, units=table.units)
            _check_range(file, f"vehicle.{key}", key.replace("_", " "), length, limits)


def _check_side(file: _File, side_points: Side, *, side: str, prefix: str) -> None:
    linkage, sign = LINKAGES[file.table.linkage], 1.0 if side == "left" else -1.0
    _check_wheel(file, side_points, side=side, prefix=prefix)
    points = side_points.points
    outer = [f"{name}_outer" for name in file.table.links if not linkage.whole_axle]
    for name in [*linkage.on_wheel_side, *outer]:
        if sign * points[name][1] <= 0.0:
            rule = f"is across the car from its {side} wheel (y = {points[name][1]:g} mm, left positive)"
            file.refuse_point(name, prefix, rule, "check its sign, side and axes.")
    for name, point in points.items():
        if not math.dist(point, side_points.wheel.centre) <= FARTHEST_MM:
            units = file.table.units
            rule = f"is more than {FARTHEST_MM / 1000:g} m from the wheel centre with units = {units!r}"
            file.refuse_point(name, prefix, rule, "check units and the number.")
    _check_coincident(file, points, prefix=prefix)


def _check_wheel(file: _File, side_points: Side, *, side: str, prefix: str) -> None:
    wheel, sign = side_points.wheel, 1.0 if side == "left" else -1.0
    across = sign * wheel.centre[1]
    key = f"{prefix}wheel.centre{file.from_csv.at(f'{prefix}wheel_centre')}"
    if across <= 0.0:
        rule = f"is on the wrong side for a {side} wheel (y = {wheel.centre[1]:g} mm, left positive)"
        file.refuse(key, rule, "check side, axes and the sign.")
    _check_range(file, key, "half track", across, HALF_TRACK_MM)
    _check_range(file, f"{prefix}wheel.loaded_radius", "loaded radius", wheel.loaded_radius_mm, LOADED_RADIUS_MM)


def _check_range(file: _File, key: str, what: str, value: float, limits: tuple[float, float]) -> None:
    low, high = limits
    if not low <= value <= high:
        rule = f"gives a {what} of {value:g} mm with units = {file.table.units!r}; {low:g} to {high:g} mm is taken"
        file.refuse(key, rule, "check units (mm, m or in).")


def _check_coincident(file: _File, points: Mapping[str, Point], *, prefix: str) -> None:
    linkage, links = LINKAGES[file.table.linkage], file.table.links
    for first, second in _apart(file.table, linkage, points):
        if math.dist(points[first], points[second]) < COINCIDENT_MM:
            rule = f"coincides with {second} (within {COINCIDENT_MM} mm), the part between has no length"
            file.refuse_point(first, prefix, rule, "give each its own position.")
    for name, arm in linkage.arms.items():
        if _off_line(points, arm) < COINCIDENT_MM:
            rule = f"lies on the line through the pivots of {name}, which then has no length"
            file.refuse_point(arm.ball_joint, prefix, rule, "move the ball joint off that line.")
    for first, second in combinations(links, 2):
        ends = [[points[f"{name}_{end}"] for end in ("inner", "outer")] for name in (first, second)]
        if all(math.dist(*pair) < COINCIDENT_MM for pair in zip(*ends, strict=True)):
            file.refuse(f"links.{second}", f"is the same link as {first}", "give each link its own points.")
    extent = max(math.dist(p, q) for p, q in combinations(points.values(), 2))
    if extent < LEAST_EXTENT_MM:
        rule = f"all lie within {extent:g} mm with units = {file.table.units!r}"
        file.refuse(f"{prefix}points", rule, "check units (mm, m or in).")


def _apart(table: GeometryTable, linkage: Linkage, points: Mapping[str, Point]) -> list[tuple[str, str]]:
    """Pairs of points that may not coincide: all of [points], the two ends of each link and of the spring."""
    pairs = [p for p in combinations(linkage.points, 2) if frozenset(p) not in linkage.may_meet]
    pairs += [(f"{name}_inner", f"{name}_outer") for name in table.links]
    return pairs + ([SPRING_POINTS] if SPRING_POINTS[0] in points else [])


def _off_line(points: Mapping[str, Point], arm: ArmPoints) -> float:
    front, rear, ball = (points[n] for n in (arm.front_pivot, arm.rear_pivot, arm.ball_joint))
    line = [b - a for a, b in zip(front, rear, strict=True)]
    to_ball = [b - a for a, b in zip(front, ball, strict=True)]
    share = sum(a * b for a, b in zip(line, to_ball, strict=True)) / sum(a * a for a in line)
    return math.dist(to_ball, [share * a for a in line])


def _point_key(file: _File, name: str, prefix: str) -> str:
    """The key of a point as it stands in the file, with what is given there."""
    said = file.table.other_side() if prefix else file.table
    link, _, end = name.rpartition("_")
    if link in file.table.links:
        found, key = getattr(said.links.get(link), end, None), f"{prefix}links.{link}.{end}"
    else:
        found, key = said.points.get(name), f"{prefix}points.{name}"
    if found is None:
        return f"{key} (mirror image)"
    return f"{key} = {shown(found)}{file.from_csv.at(prefix + name)}"
