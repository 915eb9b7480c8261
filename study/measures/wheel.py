"""What the wheel shows: camber, toe, track and their rates in bump and roll."""

import numpy as np

from study.measures.registry import measure


@measure("camber_deg", "deg", sign="+ top outboard", meaning="lean of the wheel to the road normal, −asin(s·m)")
def camber(view):
    return -np.degrees(np.arcsin(view.axis[2]))


@measure("toe_deg", "deg", sign="+ toe-in", meaning="steer of the wheel to straight ahead, atan2(s_x, s_y)")
def toe(view):
    return np.degrees(np.arctan2(view.axis[0], view.axis[1]))


@measure("half_track_mm", "mm", meaning="contact point from the car's centre plane, along the road")
def half_track(view):
    return view.contact[1]


@measure(
    "camber_gain_deg_per_mm", "deg/mm", sign="+ top goes outboard in bump", rates=("bump",),
    meaning="change of camber per mm of road rise",
)  # fmt: skip
def camber_gain(view):
    return np.degrees(view.camber_rate("bump"))


@measure(
    "bump_steer_deg_per_mm", "deg/mm", sign="+ toes in in bump", rates=("bump",),
    meaning="change of toe per mm of road rise",
)  # fmt: skip
def bump_steer(view):
    return np.degrees(view.toe_rate("bump"))


@measure(
    "track_change_mm_per_mm", "mm/mm", sign="+ outboard", rates=("bump",),
    meaning="sideways velocity of the contact point per mm of road rise",
)  # fmt: skip
def track_change(view):
    return view.contact_moving[1]


@measure(
    "roll_camber_deg_per_deg", "deg/deg", sign="1: leans with the body", rates=("roll",),
    meaning="change of camber per degree of roll towards this wheel, both contacts on the tilted road",
)  # fmt: skip
def roll_camber(view):
    return -view.camber_rate("roll")


@measure(
    "roll_steer_deg_per_deg", "deg/deg", sign="+ as outer wheel toes in", rates=("roll",),
    meaning="change of toe per degree of roll towards this wheel",
)  # fmt: skip
def roll_steer(view):
    return -view.toe_rate("roll")


@measure(
    "motion_ratio", "mm/mm", sign="+ compressed in bump", rates=("bump",),
    meaning="spring compression per mm of road rise; needs the spring points",
)  # fmt: skip
def motion_ratio(view):
    rate = view.parts.spring_rate(view)
    return view.undefined() if rate is None else -rate


@measure(
    "upper_arm_fit_mm", "mm", sign="+ the built chassis pivots are too far apart",
    meaning="spacing of the built chassis pivots minus that of the one-piece upper arm's bores",
)  # fmt: skip
def upper_arm_fit(view):
    return view.parts.fit(view, "upper_arm")


@measure(
    "lower_arm_fit_mm", "mm", sign="+ the built chassis pivots are too far apart",
    meaning="spacing of the built chassis pivots minus that of the one-piece lower arm's bores",
)  # fmt: skip
def lower_arm_fit(view):
    return view.parts.fit(view, "lower_arm")


@measure("track_mm", "mm", scope="axle", meaning="left contact point to right contact point, along the road")
def track(axle):
    return axle.left.contact[1] + axle.right.contact[1]
