"""What the views draw of a geometry: its points, members, bodies and wheels as plain data, car coordinates in mm.

Members are lines between named points, bodies are plates around them. Points that exist only for drawing (wheel
centres, where brackets stand on an axle tube) are kept apart from the geometry's own.
"""

import numpy as np

from study.assembly import ARM_PIVOTS, spin_axis

UPRIGHT_POINTS = ("upper_ball_joint", "strut_lower", "lower_ball_joint", "tie_rod_outer")
_AROUND_STRUT_MM = 60.0  # a spring this close to the strut's line is the spring around the strut


def drawing_of(geometry) -> dict:
    """The geometry as `study.charts.places` takes it."""
    wheels = {hand: _wheel(getattr(geometry, hand).wheel, hand) for hand in ("left", "right")}
    return {
        "name": geometry.name, "linkage": geometry.linkage, "datums": geometry.datums, "ground_mm": geometry.ground_mm(),
        "left": dict(geometry.left.points), "right": dict(geometry.right.points), "lines": lines_of(geometry),
        "bodies": bodies_of(geometry), "hinges": hinges_of(geometry), "wheel": wheels,
        "rack_point": _rack_point(geometry), "drawn": {hand: _drawn_points(geometry, hand) for hand in ("left", "right")},
    }  # fmt: skip


def _wheel(wheel, hand):
    axis = spin_axis(camber_deg=wheel.camber_deg, toe_deg=wheel.toe_deg) * (1.0, 1.0 if hand == "left" else -1.0, 1.0)
    return {"centre": wheel.centre, "axis": tuple(float(a) for a in axis), "radius_mm": wheel.loaded_radius_mm}


def lines_of(geometry) -> list[tuple[str, str, str]]:
    """(point, point, part) of every member that a view shows as a line; on a solid axle the tube comes first."""
    points = geometry.left.points
    links = geometry.links or (("tie_rod",) if "tie_rod_inner" in points else ())
    found = [*_axle_lines(geometry), *_arm_lines(geometry)]
    found += [(f"{name}_inner", f"{name}_outer", name) for name in links]
    if geometry.linkage == "double-wishbone":
        found.append(("upper_ball_joint", "lower_ball_joint", "upright"))
    if geometry.linkage == "strut":
        found.append(("strut_lower", "strut_top", "strut"))
    if "spring_inner" in points and not _around_strut(points):
        found.append(("spring_inner", "spring_outer", "spring"))
    return found


def _arm_lines(geometry):
    found = []
    for arm in geometry.arms:
        front, rear, joint = ARM_PIVOTS[arm]
        found += [(front, joint, arm), (rear, joint, arm)]
        if geometry.arms[arm].build == "one-piece":
            found.append((front, rear, arm))
    if geometry.linkage == "semi-trailing-arm":
        found += [(end, "wheel_centre", "arm") for end in ("hinge_inner", "hinge_outer")]
    return found


def _axle_lines(geometry):
    if geometry.linkage != "solid-axle":
        return []
    brackets = [(f"{name}_outer", f"{name}_foot", "bracket") for name in geometry.links]
    return [("wheel_centre_left", "wheel_centre_right", "axle"), *brackets]


def bodies_of(geometry) -> list[tuple[str, tuple[str, ...]]]:
    """(part, points) of every body that a view shows as a plate; each reaches to the wheel centre."""
    if geometry.linkage == "solid-axle":
        return []
    if geometry.linkage == "semi-trailing-arm":
        return [("arm", ("hinge_inner", "hinge_outer", "wheel_centre"))]
    held = [name for name in UPRIGHT_POINTS if name in geometry.left.points]
    held += [f"{name}_outer" for name in geometry.links]
    return [("upright", (*held, "wheel_centre"))]


def hinges_of(geometry) -> list[tuple[str, str]]:
    """Pairs of points whose line a body turns about."""
    return [("hinge_inner", "hinge_outer")] if geometry.linkage == "semi-trailing-arm" else []


def _rack_point(geometry):
    """The end of the rack; a toe link on the chassis of an unsteered axle has none."""
    if geometry.links:
        return f"{geometry.steer_link}_inner" if geometry.steer_link and geometry.vehicle.steered else None
    return "tie_rod_inner" if geometry.vehicle.steered else None


def _drawn_points(geometry, hand):
    if geometry.linkage != "solid-axle":
        return {"wheel_centre": getattr(geometry, hand).wheel.centre}
    ends = {f"wheel_centre_{side}": getattr(geometry, side).wheel.centre for side in ("left", "right")}
    tube = np.array(list(ends.values()))
    points = geometry.left.points
    return ends | {f"{name}_foot": _foot(points[f"{name}_outer"], tube) for name in geometry.links}


def _foot(point, tube):
    """The place of an axle tube (2, 3) that is nearest to a point, between the wheels."""
    along = tube[1] - tube[0]
    share = np.clip(np.dot(point - tube[0], along) / np.dot(along, along), 0.0, 1.0)
    return tuple(float(v) for v in tube[0] + share * along)


def _around_strut(points):
    if "strut_top" not in points:
        return False
    top, low = np.array(points["strut_top"]), np.array(points["strut_lower"])
    axis = (top - low) / np.linalg.norm(top - low)
    ends = np.array([points["spring_inner"], points["spring_outer"]]) - low
    return bool((np.linalg.norm(np.cross(ends, axis), axis=1) < _AROUND_STRUT_MM).all())
