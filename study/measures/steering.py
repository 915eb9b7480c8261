"""The steering axis and what steering does: caster, kingpin, scrub, trail, steer camber, lift, Ackermann."""

import numpy as np

from study.kernel.vectors import cross, dot
from study.measures.registry import KEYS, measure
from study.measures.wheel import toe


def _with_axis(function):
    """Undefined where the linkage has no steering axis."""

    def guarded(view):
        return view.undefined() if view.steering_axis is None else function(view)

    guarded.__doc__ = function.__doc__
    return guarded


AXIS = {"rates": ("axis",)}


@measure("caster_deg", "deg", sign="+ top rearward", meaning="steering axis in side view, atan2(−k_x, k_z)", **AXIS)
@_with_axis
def caster(view):
    k = view.steering_axis[1]
    return np.degrees(np.arctan2(-k[0], k[2]))


@measure("kingpin_deg", "deg", sign="+ top inboard", meaning="steering axis in front view, atan2(−k_y, k_z)", **AXIS)
@_with_axis
def kingpin(view):
    k = view.steering_axis[1]
    return np.degrees(np.arctan2(-k[1], k[2]))


@measure(
    "scrub_radius_mm", "mm", sign="+ axis inboard of the contact point",
    meaning="steering axis at ground to contact point, along the wheel's own horizontal axis", **AXIS,
)  # fmt: skip
@_with_axis
def scrub_radius(view):
    return dot(view.across, view.contact - view.axis_at_height(0.0))


@measure(
    "trail_mm", "mm", sign="+ axis ahead of the contact point",
    meaning="contact point to steering axis at ground, along the wheel's heading", **AXIS,
)  # fmt: skip
@_with_axis
def trail(view):
    return dot(view.heading, view.axis_at_height(0.0) - view.contact)


@measure(
    "kingpin_offset_mm", "mm", sign="+ axis inboard of the wheel centre",
    meaning="steering axis to wheel centre at wheel-centre height, along the wheel's own horizontal axis", **AXIS,
)  # fmt: skip
@_with_axis
def kingpin_offset(view):
    return dot(view.across, view.centre - view.axis_at_height(view.centre[2]))


@measure(
    "steer_camber_deg_per_deg", "deg/deg", sign="steer +: this wheel is the inner one", rates=("bump", "rack"),
    meaning="change of camber per degree of steer, suspension held",
)  # fmt: skip
def steer_camber(view):
    if not view.parts.steers:
        return view.undefined()
    turn = cross(view.to_road(view.locked_twist[3:]), view.axis)
    x, y, z = view.axis
    camber_rate = -turn[2] / np.sqrt(1.0 - z * z)
    steer_rate = -(y * turn[0] - x * turn[1]) / (x * x + y * y)
    return camber_rate / steer_rate


@measure(
    "steer_lift_mm", "mm", sign="+ the body sinks there", needs=("rest", "locked"),
    meaning="rise of the contact point along the road normal, in the body, from rack 0 to this rack travel, suspension held",
)  # fmt: skip
def steer_lift(view):
    if view.locked is None or view.rack_mm == 0:
        return view.undefined()
    return view.locked.contact[2] - view.rest.contact[2]


@measure(
    "ackermann_pct", "%", scope="axle", sign="100: rolls without scrub", needs=("rest",),
    meaning="100 (δi − δo)/(δi − δA), cot δA = cot δi + track/wheelbase; δ from rack 0 at the same bump and roll",
)  # fmt: skip
def ackermann(axle):
    wheelbase = axle.vehicle.wheelbase_mm
    if axle.rack_mm == 0 or wheelbase is None or axle.left.rest is None:
        return axle.undefined()
    left = np.radians(toe(axle.left.rest) - toe(axle.left))
    right = np.radians(toe(axle.right) - toe(axle.right.rest))
    inner = np.where(left > 0, left, -right)
    outer = np.where(left > 0, right, -left)
    ideal = np.arctan2(1.0, 1.0 / np.tan(inner) + KEYS["track_mm"].evaluate(axle) / wheelbase)
    return 100.0 * (inner - outer) / (inner - ideal)


CROSSED = ("camber_deg", "caster_deg", "kingpin_deg", "toe_deg", "scrub_radius_mm", "trail_mm", "half_track_mm")


def _register_cross(key):
    info = KEYS[key]

    @measure(
        f"cross_{key}", info.unit, scope="axle", sign="+ left greater", rates=info.rates, needs=info.needs,
        meaning=f"{key} of the left minus that of the right, each with its own sign",
    )  # fmt: skip
    def cross_measure(axle):
        return info.evaluate(axle.left) - info.evaluate(axle.right)


for _key in CROSSED:
    _register_cross(_key)
