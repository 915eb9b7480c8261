"""One wheel in one position, resolved in road axes: what every measure is a pure function of.

Road axes: x forward, y along the road to the left, z the road normal m; origin on the road at y = 0. Right wheels stand
in mirrored coordinates, so the same formulas and signs serve both. Components first, builds last; mm and radians.
Quantities are computed when first asked for and kept, since many measures share them.
"""

from functools import cached_property

import numpy as np

from study.kernel.vectors import cross, dot, turn_each, unit


class View:
    """A wheel's pose and twists.

    pose: kernel Pose; twists: dict input → (6, N); features: body features of this wheel (wheel_centre, wheel_axis,
    ball joints, … (3, N), radius_mm) in the pose's frame; anchors: chassis points (spring_inner, strut_top); road: kernel
    Road of this wheel (height (1, N)); parts: what tells steering axis, lock, spring and fit; vehicle: object with axle,
    wheelbase_mm, …; rest, locked: the same wheel with the rack at rest, and with the suspension held, where asked for.
    """

    def __init__(self, *, pose, twists, features, anchors, road, parts, vehicle, rack_mm=0.0):
        self.pose, self.twists, self.features, self.anchors, self.road = pose, twists, features, anchors, road
        self.parts, self.vehicle, self.rack_mm = parts, vehicle, rack_mm
        self.rest = self.locked = None

    def undefined(self):
        """NaN for every build."""
        return np.full(self.pose.t.shape[1], np.nan)

    def body_point(self, name):
        """A body feature's place in the car (3, N) mm."""
        return turn_each(self.pose.rotation, self.features[name]) + self.pose.t

    def to_road(self, vector):
        """A vector (3, N) of the car's axes in road axes."""
        _, s, c = self.road.normal
        return np.stack((vector[0], c * vector[1] - s * vector[2], s * vector[1] + c * vector[2]))

    def place(self, point):
        """A point (3, N) of the car in road axes; the origin is the road point with y = 0 (x as in the car)."""
        c = self.road.normal[2]
        at = point.copy()
        at[2] = at[2] - self.road.height[0] / c
        return self.to_road(at)

    @cached_property
    def axis(self):
        """Spin axis s, pointing outboard."""
        return self.to_road(turn_each(self.pose.rotation, self.features["wheel_axis"]))

    @cached_property
    def centre(self):
        """Wheel centre W."""
        return self.place(self.body_point("wheel_centre"))

    @cached_property
    def _down(self):
        """In-plane direction of the wheel closest to the road normal, before and after norming, and its length."""
        s = self.axis
        w = -s[2] * s
        w[2] += 1.0
        size = np.sqrt(1.0 - s[2] * s[2])
        return w, w / size, size

    @cached_property
    def contact(self):
        """Contact point C = W − r u."""
        return self.centre - self.features["radius_mm"] * self._down[1]

    @cached_property
    def across(self):
        """The wheel's own horizontal axis a (the spin axis laid on the road), pointing outboard."""
        x, y = self.axis[0], self.axis[1]
        size = np.hypot(x, y)
        return np.stack((x / size, y / size, np.zeros_like(x)))

    @cached_property
    def heading(self):
        """The wheel's heading f in the road plane."""
        a = self.across
        return np.stack((a[1], -a[0], a[2]))

    @cached_property
    def origin(self):
        """The body's origin."""
        return self.place(self.pose.t)

    def twist(self, name):
        """Twist for an input in road axes: (v of the body's origin (3, N), ω (3, N))."""
        t = self.twists[name]
        return self.to_road(t[:3]), self.to_road(t[3:])

    @cached_property
    def bump(self):
        return self.twist("bump")

    def velocity(self, point, twist):
        """Velocity of the upright-fixed point that stands at `point` (road axes)."""
        v, w = twist
        return v + cross(w, point - self.origin)

    @cached_property
    def contact_fixed(self):
        """v: velocity per mm of road rise of the upright-fixed point at C."""
        return self.velocity(self.contact, self.bump)

    @cached_property
    def contact_moving(self):
        """c: velocity of the contact point itself per mm of road rise, dC = dW − r du."""
        s = self.axis
        w, u, size = self._down
        ds = cross(self.bump[1], s)
        dw = -ds[2] * s - s[2] * ds
        du = (dw - u * dot(u, dw)) / size
        return self.velocity(self.centre, self.bump) - self.features["radius_mm"] * du

    def lean_rate(self, name):
        """d(s·m) per unit of the input; in roll the road normal turns too (dm/dφ is the road's own y)."""
        rate = cross(self.twist(name)[1], self.axis)[2]
        return rate + self.axis[1] if name == "roll" else rate

    def camber_rate(self, name):
        """d camber (rad) per unit of the input."""
        return -self.lean_rate(name) / self._down[2]

    def toe_rate(self, name):
        """d toe (rad) per unit of the input, of atan2(s_x, s_y)."""
        x, y = self.axis[0], self.axis[1]
        dx, dy, _ = cross(self.twist(name)[1], self.axis)
        if name == "roll":
            dy = dy - self.axis[2]
        return (y * dx - x * dy) / (x * x + y * y)

    @cached_property
    def locked_twist(self):
        """Twist per mm of rack with the suspension held, t_rack + α t_bump, α such that the lock row holds (car axes)."""
        rack, bump = self.twists["rack"], self.twists["bump"]
        lock = self.parts.lock_rate(self)
        return rack - bump * (lock(rack) / lock(bump))

    @cached_property
    def steering_axis(self):
        """(point on the axis, k pointing up) in road axes; None where nothing steers."""
        found = self.parts.steering_axis(self)
        if found is None:
            return None
        point, along = found
        k = self.to_road(unit(along))
        return self.place(point), k * np.where(k[2] < 0, -1.0, 1.0)

    def axis_at_height(self, height):
        """The steering axis' point at a height above the road."""
        point, k = self.steering_axis
        return point + k * ((height - point[2]) / k[2])


MIRROR = np.array([1.0, -1.0, 1.0])


def mirrored(view: View) -> View:
    """The right wheel of a body that carries both wheels, in mirrored coordinates: y → −y, roll → −roll.

    R → M R M, points → M p, twists v → M v, ω → −M ω; per unit of roll the twist changes sign with the roll.
    """
    flip = MIRROR[:, None]
    pose = view.pose._replace(rotation=view.pose.rotation * MIRROR[:, None, None] * MIRROR[None, :, None], t=view.pose.t * flip)
    twists = {
        name: np.concatenate((t[:3] * flip, -t[3:] * flip)) * (-1.0 if name == "roll" else 1.0) for name, t in view.twists.items()
    }
    road = view.road._replace(
        normal=view.road.normal * flip, normal_roll=-view.road.normal_roll * flip, height_roll=-view.road.height_roll
    )
    features = {name: value if np.isscalar(value) else value * flip for name, value in view.features.items()}
    anchors = {name: point * flip for name, point in view.anchors.items()}
    return View(
        pose=pose, twists=twists, features=features, anchors=anchors, road=road, parts=view.parts, vehicle=view.vehicle,
        rack_mm=view.rack_mm,
    )  # fmt: skip


def screw_axis(twist, t):
    """Axis of a twist (6, N) whose v is that of the point t: (a point on it, its direction ω)."""
    w = twist[3:]
    return t + cross(w, twist[:3]) / dot(w, w), w


class AxleView:
    """Left and right Views of one axle (right in mirrored coordinates); `vehicle` as in View; `solid`: one body carries both."""

    def __init__(self, *, left, right, vehicle, solid=False, rack_mm=0.0):
        self.left, self.right, self.vehicle, self.solid, self.rack_mm = left, right, vehicle, solid, rack_mm

    def undefined(self):
        return self.left.undefined()


__all__ = ["AxleView", "View", "mirrored", "screw_axis"]
