"""Anti-dive, anti-lift and anti-squat from the side-view velocity under a braking or driving force.

100 · share · tan θ · wheelbase / cg_height; tan θ = ± the velocity along f per mm of road rise (+ at a front axle, − at a
rear one) of the upright-fixed point at C where the torque is reacted on the upright or axle, of the wheel centre where
the chassis reacts it. Share 0 gives 0; a missing share, wheelbase or height leaves the measure undefined.
"""

from study.kernel.vectors import dot
from study.measures.registry import measure


def _percent(view, *, share, at_chassis):
    vehicle = view.vehicle
    if share == 0:
        return 0.0 * view.pose.t[0]
    if share is None or vehicle.wheelbase_mm is None or vehicle.cg_height_mm is None:
        return view.undefined()
    moved = view.velocity(view.centre, view.bump) if at_chassis else view.contact_fixed
    tan = dot(view.heading, moved) * (1.0 if vehicle.axle == "front" else -1.0)
    return 100.0 * share * tan * vehicle.wheelbase_mm / vehicle.cg_height_mm


def _braking(view, axle):
    if view.vehicle.axle != axle:
        return view.undefined()
    return _percent(view, share=view.vehicle.brake_share, at_chassis=view.vehicle.brakes == "inboard")


def _driving(view, axle):
    if view.vehicle.axle != axle:
        return view.undefined()
    return _percent(view, share=view.vehicle.drive_share, at_chassis=view.vehicle.drive_torque == "chassis")


ANTI = {
    "anti_dive_pct": (_braking, "front", "front axle's resistance to dive in braking"),
    "anti_lift_pct": (_braking, "rear", "rear axle's resistance to lift in braking"),
    "anti_squat_pct": (_driving, "rear", "driven rear axle's resistance to squat"),
    "drive_anti_lift_pct": (_driving, "front", "driven front axle's resistance to lift"),
}


def _register(key, function, axle, meaning):
    @measure(key, "%", sign="+ resists", rates=("bump",), meaning=meaning, solid_mean=True)
    def side(view):
        return function(view, axle)


for _key, (_function, _axle, _meaning) in ANTI.items():
    _register(_key, _function, _axle, _meaning)
