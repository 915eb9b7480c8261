"""Instant centres and roll centre, from the velocities of the whole mechanism."""

import numpy as np

from study.measures.registry import measure

LEAST_CURVATURE_PER_M = 1e-6
LEAST_SLOPE = 1e-6


def _inverse_turn(turn, *, least=LEAST_CURVATURE_PER_M / 1000.0):
    """1/turn (mm per radian), undefined where the curvature is below the least one."""
    return 1.0 / np.where(np.abs(turn) < least, np.nan, turn)


@measure(
    "swing_arm_curvature_per_m", "1/m", sign="+ centre inboard", rates=("bump",),
    meaning="inverse of the front-view swing arm, 1000 ω_x/v_z; finite when the arms are parallel",
)  # fmt: skip
def swing_arm_curvature(view):
    return 1000.0 * view.bump[1][0]


@measure(
    "swing_arm_mm", "mm", sign="+ centre inboard", rates=("bump",),
    meaning="horizontal front-view distance from the contact point to the instant centre, v_z/ω_x",
)  # fmt: skip
def swing_arm(view):
    return _inverse_turn(view.bump[1][0])


@measure(
    "front_view_ic_y_mm", "mm", rates=("bump",), sign="from the car's centre plane, + towards this side",
    meaning="front-view instant centre of the upright, sideways: C_y − v_z/ω_x",
)  # fmt: skip
def front_view_ic_y(view):
    return view.contact[1] - swing_arm(view)


@measure(
    "front_view_ic_z_mm", "mm", rates=("bump",), sign="+ above ground",
    meaning="front-view instant centre of the upright, height above ground: v_y/ω_x",
)  # fmt: skip
def front_view_ic_z(view):
    return view.contact_fixed[1] * swing_arm(view)


@measure(
    "side_view_ic_x_mm", "mm", rates=("bump",), sign="+ forward",
    meaning="side-view instant centre, lengthways: C_x + v_z/ω_y",
)  # fmt: skip
def side_view_ic_x(view):
    return view.contact[0] + _inverse_turn(view.bump[1][1])


@measure(
    "side_view_ic_z_mm", "mm", rates=("bump",), sign="+ above ground",
    meaning="side-view instant centre, height above ground: −v_x/ω_y",
)  # fmt: skip
def side_view_ic_z(view):
    return -view.contact_fixed[0] * _inverse_turn(view.bump[1][1])


def _line_height(view):
    """Height at y = 0 of the line through C normal to c in front view: half track × c_y."""
    return view.contact[1] * view.contact_moving[1]


@measure(
    "roll_centre_height_mm", "mm", scope="axle", sign="+ above ground", rates=("bump", "solid-roll"),
    meaning="mean height at y = 0 of the two lines through the contact points normal to their paths; "
    "solid axle: the point of its transverse plane that roll does not move sideways",
)  # fmt: skip
def roll_centre_height(axle):
    if axle.solid:
        view = axle.left
        v, w = view.twist("roll")
        middle_x = 0.5 * (view.centre[0] + axle.right.centre[0])
        at = view.origin
        return at[2] + (v[1] + w[2] * (middle_x - at[0])) / w[0]
    return 0.5 * (_line_height(axle.left) + _line_height(axle.right))


@measure(
    "roll_centre_offset_mm", "mm", scope="axle", sign="+ left", rates=("bump",),
    meaning="where the left and the right line cross, sideways; undefined for nearly parallel lines and a solid axle",
)  # fmt: skip
def roll_centre_offset(axle):
    if axle.solid:
        return axle.undefined()
    left, right = axle.left.contact_moving[1], axle.right.contact_moving[1]
    slope = np.where(np.abs(left + right) < LEAST_SLOPE, np.nan, left + right)
    return (_line_height(axle.left) - _line_height(axle.right)) / slope
