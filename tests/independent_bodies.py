"""Bodies for `independent.py` from plain dicts of points, of the design or of a build with errors.

`errors` maps "part.feature" to an offset: three mm for a point, one mm for a length, two radians for a hub axis.
They move the part's own feature in the part's own frame, and lengths follow from the part's own points.
"""

from __future__ import annotations

import numpy as np
from scipy.spatial.transform import Rotation

from tests.independent import Body, Link, Spring, Tyre, ground_of, spin_axis

FLIP = np.array([1.0, -1.0, 1.0])
ARM_POINTS = {
    "upper_arm": ("upper_front_pivot", "upper_rear_pivot", "upper_ball_joint"),
    "lower_arm": ("lower_front_pivot", "lower_rear_pivot", "lower_ball_joint"),
}


class Parts:
    """The design points with each part's own error added."""

    def __init__(self, points: dict, errors: dict | None):
        self.points = {name: np.asarray(value, float) for name, value in points.items()}
        self.errors = errors or {}

    def of(self, part: str, name: str) -> np.ndarray:
        return self.points[name] + self.shift(f"{part}.{name}")

    def shift(self, feature: str) -> np.ndarray:
        return np.asarray(self.errors.get(feature, (0.0, 0.0, 0.0)), float)

    def mount(self, on_rack: bool) -> np.ndarray:
        return self.shift("rack.mount") * on_rack

    def extra(self, feature: str) -> float:
        return float(self.errors.get(feature, 0.0))


def bores(chassis_front, chassis_rear, spacing, located_by):
    """A one-piece arm's bores on the line through the built chassis pivots."""
    along = (chassis_rear - chassis_front) / np.linalg.norm(chassis_rear - chassis_front)
    if located_by == "front":
        return chassis_front, chassis_front + spacing * along
    if located_by == "rear":
        return chassis_rear - spacing * along, chassis_rear
    middle = (chassis_front + chassis_rear) / 2
    return middle - spacing / 2 * along, middle + spacing / 2 * along


def arm_links(parts: Parts, arm: str, build: str, located_by: str) -> tuple[Link, Link, float | None]:
    """The two legs that stand for an arm, and the mismatch of a one-piece arm with its brackets."""
    front_name, rear_name, ball_name = ARM_POINTS[arm]
    front, rear, ball = (parts.points[name] for name in (front_name, rear_name, ball_name))
    held = parts.of("chassis", front_name), parts.of("chassis", rear_name)
    on_upright = parts.of("upright", ball_name)
    if build == "legs":
        lengths = [
            np.linalg.norm(ball - pivot) + parts.extra(f"{arm}.{leg}")
            for pivot, leg in ((front, "front_leg"), (rear, "rear_leg"))
        ]
        return Link(held[0], on_upright, lengths[0]), Link(held[1], on_upright, lengths[1]), None
    own_ball = parts.of(arm, ball_name)
    spacing = np.linalg.norm(rear - front)
    ends = bores(*held, spacing, located_by)
    fit = float(np.linalg.norm(held[1] - held[0]) - spacing)
    return (
        Link(ends[0], on_upright, float(np.linalg.norm(own_ball - front))),
        Link(ends[1], on_upright, float(np.linalg.norm(own_ball - rear))),
        fit,
    )


def tie_rod(parts: Parts, on_rack: bool) -> Link:
    holder = "rack" if on_rack else "chassis"
    inner = parts.of(holder, "tie_rod_inner") + parts.mount(on_rack)
    own = np.linalg.norm(parts.points["tie_rod_outer"] - parts.points["tie_rod_inner"])
    return Link(inner, parts.of("upright", "tie_rod_outer"), float(own + parts.extra("tie_rod.length")), True)


def tyre_of(wheel: dict, parts: Parts, part="upright", suffix="") -> Tyre:
    spin = spin_axis(wheel.get("camber_deg", 0.0), wheel.get("toe_deg", 0.0))
    if wheel.get("right"):
        spin = spin * FLIP
    centre = np.asarray(wheel["centre"], float) + parts.shift(f"{part}.wheel_centre{suffix}")
    about_x, about_z = parts.errors.get(f"{part}.hub_axis{suffix}", (0.0, 0.0))
    return Tyre(centre, tilted(spin, about_x, about_z), float(wheel["loaded_radius"]))


def tilted(spin, first: float, second: float):
    """The axis turned about its own two normals: the first is the one nearest x."""
    normal = np.array([1.0, 0.0, 0.0]) - spin[0] * spin
    normal = normal / np.linalg.norm(normal)
    other = np.cross(spin, normal)
    other = other * np.sign(other[np.argmax(np.abs(other))])
    return Rotation.from_rotvec(first * normal + second * other).apply(spin)


def spring_of(parts: Parts, spring_on: str, arm_ends=None) -> Spring | None:
    if "spring_inner" not in parts.points:
        return None
    inner, outer = parts.points["spring_inner"], parts.points["spring_outer"]
    if spring_on == "upright":
        return Spring(inner, outer)
    return Spring(inner, outer, arm_ends)


def finished(points, wheel, tyres, errors, **held) -> Body:
    """The road plane is always that of the design, whatever the errors are."""
    design = Tyre(
        np.asarray(wheel["centre"], float),
        spin_axis(wheel.get("camber_deg", 0.0), wheel.get("toe_deg", 0.0)),
        wheel["loaded_radius"],
    )
    notes = held.pop("notes", {}) | {"errors": bool(errors)}
    return Body(tyres=tyres, ground=ground_of(design), notes=notes, **held)


def double_wishbone(points, wheel, *, arms=None, errors=None, spring_on="upright", steered=True) -> Body:
    parts = Parts(points, errors)
    arms = arms or {}
    upper = arm_links(parts, "upper_arm", *arms.get("upper_arm", ("one-piece", "centre")))
    lower = arm_links(parts, "lower_arm", *arms.get("lower_arm", ("one-piece", "centre")))
    ball = parts.of("upright", "lower_ball_joint")
    ends = lower[0].chassis, lower[1].chassis, ball
    return finished(
        points,
        wheel,
        (tyre_of(wheel, parts),),
        errors,
        links=(*upper[:2], *lower[:2], tie_rod(parts, steered)),
        kingpin=(ball, parts.of("upright", "upper_ball_joint")),
        spring=spring_of(parts, spring_on, ends),
        lock=ball,
        notes={"upper_arm_fit_mm": upper[2], "lower_arm_fit_mm": lower[2]},
    )


def strut(points, wheel, *, arms=None, errors=None, spring_on="upright", steered=True) -> Body:
    parts = Parts(points, errors)
    lower = arm_links(parts, "lower_arm", *(arms or {}).get("lower_arm", ("one-piece", "centre")))
    ball = parts.of("upright", "lower_ball_joint")
    axis = parts.points["strut_top"] - parts.points["strut_lower"]
    axis = tilted(axis / np.linalg.norm(axis), *parts.errors.get("upright.strut_axis", (0.0, 0.0)))
    top = parts.of("chassis", "strut_top")
    return finished(
        points,
        wheel,
        (tyre_of(wheel, parts),),
        errors,
        links=(*lower[:2], tie_rod(parts, steered)),
        strut=(top, parts.of("upright", "strut_lower"), axis),
        kingpin=(ball, ball),
        spring=spring_of(parts, spring_on, (lower[0].chassis, lower[1].chassis, ball)),
        lock=ball,
        notes={"lower_arm_fit_mm": lower[2]},
    )


def rods(parts: Parts, links: dict, steer_link: str | None, part: str, steered: bool) -> tuple[Link, ...]:
    made = []
    for name, (inner, outer) in links.items():
        holder = "rack" if steered and name == steer_link else "chassis"
        own = np.linalg.norm(np.subtract(outer, inner)) + parts.extra(f"{name}.length")
        ends = (
            np.asarray(inner, float) + parts.shift(f"{holder}.{name}_inner") + parts.mount(holder == "rack"),
            np.asarray(outer, float) + parts.shift(f"{part}.{name}_outer"),
        )
        made.append(Link(*ends, float(own), name == steer_link))
    return tuple(made)


def five_link(links, wheel, *, steer_link=None, points=None, errors=None, steered=True) -> Body:
    """links: name to (inner, outer)."""
    parts = Parts(points or {}, errors)
    tyre = tyre_of(wheel, parts)
    return finished(
        points,
        wheel,
        (tyre,),
        errors,
        links=rods(parts, links, steer_link, "upright", steered),
        spring=spring_of(parts, "upright"),
        lock=tyre.centre,
        notes={"steer_link": steer_link},
    )


def semi_trailing_arm(points, wheel, *, errors=None) -> Body:
    """The arm's own hinge is laid on the line of the chassis pivots, centred; what it carries goes with it."""
    parts = Parts(points, errors)
    own = parts.of("arm", "hinge_inner"), parts.of("arm", "hinge_outer")
    held = parts.of("chassis", "hinge_inner"), parts.of("chassis", "hinge_outer")
    turn = shortest_turn(own[1] - own[0], held[1] - held[0])
    tyre, spring = tyre_of(wheel, parts, "arm"), spring_of(parts, "upright")

    def laid(point):
        return (held[0] + held[1]) / 2 + turn @ (point - (own[0] + own[1]) / 2)

    return finished(
        points,
        wheel,
        (Tyre(laid(tyre.centre), turn @ tyre.spin, tyre.radius),),
        errors,
        links=(),
        hinge=held,
        spring=spring and Spring(spring.chassis, laid(spring.outer)),
    )


def shortest_turn(one, other) -> np.ndarray:
    one, other = one / np.linalg.norm(one), other / np.linalg.norm(other)
    across = np.cross(one, other)
    skew = np.array([[0, -across[2], across[1]], [across[2], 0, -across[0]], [-across[1], across[0], 0]])
    return np.eye(3) + skew + skew @ skew / (1 + one @ other)


def solid_axle(links, left_wheel, right_wheel, *, points=None, errors=None) -> Body:
    """The whole axle in car coordinates; the right wheel's dict says right=True."""
    parts = Parts(points or {}, errors)
    right_wheel = dict(right_wheel, right=True)
    tyres = tyre_of(left_wheel, parts, "axle", "_left"), tyre_of(right_wheel, parts, "axle", "_right")
    return finished(
        points,
        left_wheel,
        tyres,
        errors,
        links=rods(parts, links, None, "axle", False),
        spring=spring_of(parts, "upright"),
    )
