"""What measures ask of a built corner beyond its pose: steering axis, lock, spring, arm fit."""

from dataclasses import dataclass

import numpy as np

from study.kernel.rows import Road, Rows
from study.kernel.vectors import cross, dot, norm, unit
from study.measures.view import screw_axis


@dataclass(frozen=True)
class Parts:
    """Built parts of one corner: body features by short name (3, N) in the body's frame, chassis points in the car's axes.

    Of a solid axle the names that belong to one wheel end in _left and _right; a View holds those of its own wheel.
    axis_kind: "joints" (two body points), "strut" (body point to chassis point), "screw", or None.
    lock_kind: "spring" (constant spring length on the body) or "height" of the body point `lock_point`.
    """

    body: dict
    chassis: dict
    axis_kind: str | None
    steers: bool
    lock_kind: str
    arm_spring: tuple | None
    fits: dict

    @classmethod
    def of(cls, corner, built, arm_bores, fits):
        kind = {"double-wishbone": "joints", "strut": "strut", "five-link": "screw"}.get(corner.linkage)
        on_arm = bool(corner.springs) and corner.spring_on == "lower_arm"
        chassis = {f"spring_inner{w}": spring[0][:, None] for w, spring in corner.springs.items()}
        if "chassis.strut_top" in built:
            chassis["strut_top"] = built["chassis.strut_top"]
        return cls(
            _body_features(corner, built),
            chassis,
            kind,
            corner.has_rack,
            "spring" if corner.springs and not on_arm else "height",
            _arm_spring(corner, built, arm_bores) if on_arm else None,
            fits,
        )

    def fit(self, view, arm):
        """Spacing of the built chassis pivots minus that of the bores (N,) mm; undefined for legs."""
        return self.fits.get(arm, view.undefined()) + np.zeros(view.pose.t.shape[1])

    def steering_axis(self, view):
        """(a point of the axis, its direction) in the car's axes, or None."""
        if self.axis_kind is None:
            return None
        if self.axis_kind == "screw":
            return screw_axis(view.locked_twist, view.pose.t) if self.steers else None
        low = view.body_point("lower_ball_joint")
        high = view.anchors["strut_top"] if self.axis_kind == "strut" else view.body_point("upper_ball_joint")
        return low, high - low

    def lock_rate(self, view):
        """Function twist (6, N) → rate (N,) of what the held suspension keeps constant."""
        if self.lock_kind == "height":
            lever = view.body_point("lock_point") - view.pose.t
            return lambda twist: (twist[:3] + cross(twist[3:], lever))[2]
        return lambda twist: self._spring_rate_of(view, twist)

    def _spring_rate_of(self, view, twist):
        outer = view.body_point("spring_outer")
        moved = twist[:3] + cross(twist[3:], outer - view.pose.t)
        return dot(unit(outer - view.anchors["spring_inner"]), moved)

    def spring_rate(self, view):
        """d(spring length) per mm of road rise (N,), or None without a spring."""
        if "spring_inner" not in view.anchors:
            return None
        bump = view.twists["bump"]
        if self.arm_spring is None:
            return self._spring_rate_of(view, bump)
        (front, rear), local = self.arm_spring
        joint = view.body_point("lower_ball_joint")
        axes, radius = _hinge_axes(front, rear, joint)
        moved = bump[:3] + cross(bump[3:], joint - view.pose.t)
        turn = axes[0] * (dot(axes[2], moved) / radius)
        lever = axes[0] * local[0] + axes[1] * local[1] + axes[2] * local[2]
        return dot(unit(front + lever - view.anchors["spring_inner"]), cross(turn, lever))

    def locked(self, rows: Rows, view) -> tuple[Rows, Road]:
        """Rows (unturned) and "road" that hold the suspension where `view` has it: the lock in the tyre row's place."""
        n = view.pose.t.shape[1]
        road = Road(np.array([[0.0], [0.0], [1.0]]), np.zeros((1, n)), np.zeros((3, 1)), np.zeros(1))
        if self.lock_kind == "height":
            point = np.broadcast_to(self.body["lock_point"], (3, n))[:, None]
            held = rows._replace(wheel_centre=point, wheel_radius=np.zeros((1, 1)))
            return held, road._replace(height=view.body_point("lock_point")[2][None])
        outer = np.broadcast_to(self.body["spring_outer"], (3, n))[:, None]
        inner = np.broadcast_to(self.chassis["spring_inner"], (3, n))[:, None]
        length = norm(view.body_point("spring_outer") - self.chassis["spring_inner"])[None]
        held = rows._replace(
            link_body=np.concatenate((rows.link_body, outer), axis=1),
            link_chassis=np.concatenate((rows.link_chassis, inner), axis=1),
            link_length=np.concatenate((rows.link_length, length)),
            wheel_centre=np.empty((3, 0, n)), wheel_axis=np.empty((3, 0, n)), wheel_radius=np.empty((0, 1)),
            rack=np.concatenate((rows.rack, [[0.0]])),
        )  # fmt: skip
        return held, road._replace(height=np.zeros((0, n)))


def _body_features(corner, built):
    """Body features that views and locks need, by short name (3, N) in the body's frame."""
    part = corner.body
    out = {}
    for suffix in corner.wheels:
        out[f"wheel_centre{suffix}"] = built[f"{part}.wheel_centre{suffix}"]
        out[f"wheel_axis{suffix}"] = built[f"{part}.hub_axis{suffix}"]
    for name in ("upper_ball_joint", "lower_ball_joint"):
        if f"{part}.{name}" in built:
            out[name] = built[f"{part}.{name}"]
    if corner.spring_on != "lower_arm":
        out |= {f"spring_outer{w}": (spring[1] - corner.origin)[:, None] for w, spring in corner.springs.items()}
    centre = "wheel_centre_left" if corner.solid else "wheel_centre"
    out["lock_point"] = out.get("lower_ball_joint", out[centre])
    return out


def _arm_spring(corner, built, arm_bores):
    """(built hinge ends of the lower arm, the spring's end in the arm's own hinge frame)."""
    own = np.stack([corner.features[f"chassis.lower_{end}_pivot"].nominal for end in ("front", "rear")], axis=1)
    joint = corner.features["upright.lower_ball_joint"].nominal[:, None] + corner.origin[:, None]
    joint = built.get("lower_arm.lower_ball_joint", joint)
    local = _in_hinge_frame(own[:, :1], own[:, 1:], joint, corner.springs[""][1][:, None])
    return arm_bores["lower_arm"], local


def _hinge_axes(front, rear, joint):
    """Right-handed axes of an arm: along its hinge, out to the joint, normal to both; and the joint's radius."""
    along = unit(front - rear)
    reach = joint - front
    out = reach - along * dot(along, reach)
    radius = norm(out)
    out = out / radius
    return (along, out, cross(along, out)), radius


def _in_hinge_frame(front, rear, joint, point):
    axes, _ = _hinge_axes(front, rear, joint)
    return np.stack([dot(axis, point - front) for axis in axes])
