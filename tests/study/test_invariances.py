"""What must not change, or must change in one way only: mirror, axes, units, shift along the car, scale;
exact rates."""

import copy

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from catalog.geometry_file import parse_geometry
from study.measures import KEYS
from study.nominal import evaluate, sweep
from tests.strategies import LINKAGES, SPRING, STEERS, UNIT_MM, axis_systems, shifted, spec_of, specs, toml_text

CAR = {"axle": "front", "wheelbase": 2500, "cg_height": 400, "brake_share": 0.6, "drive_share": 0.3}
PLACED_ALONG = ("side_view_ic_x_mm",)


def geometry_of(spec, **how):
    return parse_geometry(toml_text(spec, **how), source="case.toml")


def full_spec(linkage):
    spec = spec_of(linkage, vehicle=CAR | {"axle": "rear" if linkage == "solid-axle" else "front"})
    spec["wheel"] |= {"camber_deg": -1.2, "toe_deg": 0.15}
    spec["points"] = spec.get("points", {}) | SPRING
    return spec


def position_of(linkage, scale=1.0):
    rack = 9.0 if linkage in STEERS else 0.0
    return {"bump_mm": 22.0 * scale, "roll_deg": 1.4, "rack_mm": rack * scale}


def same(one, two, tolerance=1e-9, *, skip=(), change=lambda key, value: value):
    """All values of two evaluations alike; `change` says what the second should be from the first."""
    for side in ("left", "right", "axle"):
        assert set(one[side]) == set(two[side])
        for key, value in one[side].items():
            if key in skip:
                continue
            assert (value is None) == (two[side][key] is None), (side, key)
            if value is not None:
                wanted = change(key, value)
                assert two[side][key] == pytest.approx(wanted, rel=tolerance, abs=tolerance), (side, key)


# --- mirror


@pytest.mark.parametrize("linkage", LINKAGES)
@settings(max_examples=2)
@given(data=st.data())
def test_a_right_hand_file_is_its_mirrored_left_hand_file(linkage, data):
    """A solid axle's links are given for the whole axle: mirrored, they make the mirrored car."""
    spec = data.draw(specs(linkage))
    if linkage == "solid-axle":
        return same_car_seen_from_the_other_side(spec)
    position = position_of(linkage)
    same(evaluate(geometry_of(spec), **position), evaluate(geometry_of(spec, side="right"), **position), 1e-11)


def same_car_seen_from_the_other_side(spec):
    mirror = copy.deepcopy(spec)
    mirror["links"] = {name: tuple([x, -y, z] for x, y, z in ends) for name, ends in spec["links"].items()}
    one = evaluate(geometry_of(spec), bump_mm=20.0, roll_deg=1.5)
    two = evaluate(geometry_of(mirror), bump_mm=20.0, roll_deg=-1.5)
    swapped = {"left": two["right"], "right": two["left"], "axle": two["axle"]}
    same(one, swapped, change=lambda key, value: -value if key.startswith("cross_") else value)


@pytest.mark.parametrize("linkage", LINKAGES[:4])
def test_the_right_wheel_sees_the_mirrored_road_and_rack(linkage):
    geometry, position = geometry_of(full_spec(linkage)), position_of(linkage)
    mirrored = {name: value * (1 if name == "bump_mm" else -1) for name, value in position.items()}
    one, two = evaluate(geometry, **position), evaluate(geometry, **mirrored)
    same(
        {"left": one["left"], "right": one["right"], "axle": {}},
        {"left": two["right"], "right": two["left"], "axle": {}},
        1e-11,
    )


# --- axes and units


def test_every_axis_system_and_unit_gives_the_same_measures():
    spec = full_spec("double-wishbone")
    wanted = evaluate(geometry_of(spec))
    for units in UNIT_MM:
        for axes in axis_systems():
            same(wanted, evaluate(geometry_of(spec, axes=axes, units=units)))


@pytest.mark.parametrize("linkage", LINKAGES)
@settings(max_examples=2)
@given(data=st.data())
def test_axes_and_units_do_not_matter_anywhere(linkage, data):
    spec, position = data.draw(specs(linkage)), position_of(linkage)
    how = {"axes": data.draw(st.sampled_from(axis_systems())), "units": data.draw(st.sampled_from(list(UNIT_MM)))}
    same(evaluate(geometry_of(spec), **position), evaluate(geometry_of(spec, **how), **position))


# --- a shift along the car


@pytest.mark.parametrize("linkage", LINKAGES)
@settings(max_examples=2)
@given(data=st.data(), along=st.floats(-3000, 3000))
def test_a_shift_along_the_car_changes_no_angle_and_no_rate(linkage, data, along):
    spec, position = data.draw(specs(linkage)), position_of(linkage)
    moved = shifted(spec, lambda p: [p[0] + along, p[1], p[2]])
    one, two = evaluate(geometry_of(spec), **position), evaluate(geometry_of(moved), **position)
    same(one, two, 1e-8, skip=PLACED_ALONG)
    for side in ("left", "right"):
        if one[side]["side_view_ic_x_mm"] is not None:
            gap = two[side]["side_view_ic_x_mm"] - one[side]["side_view_ic_x_mm"]
            assert gap == pytest.approx(along, abs=1e-8 * abs(one[side]["side_view_ic_x_mm"]) + 1e-6)


@pytest.mark.parametrize("linkage", LINKAGES)
def test_a_lift_of_everything_changes_nothing(linkage):
    spec, position = full_spec(linkage), position_of(linkage)
    lifted = shifted(spec, lambda p: [p[0], p[1], p[2] - 480.0])
    same(evaluate(geometry_of(spec), **position), evaluate(geometry_of(lifted), **position), 1e-8)


# --- scale


def scaled_value(c):
    powers = {"deg/mm": -1, "1/m": -1, "mm": 1}
    return lambda key, value: value * c ** powers.get(KEYS[key].unit, 0)


@pytest.mark.parametrize("linkage", LINKAGES)
@settings(max_examples=2)
@given(data=st.data(), c=st.floats(0.6, 1.6))
def test_scaling_lengths_scales_lengths_and_leaves_angles(linkage, data, c):
    spec = data.draw(specs(linkage))
    grown = shifted(spec, lambda p: [c * v for v in p])
    grown["wheel"]["loaded_radius"] = c * spec["wheel"]["loaded_radius"]
    for name in ("wheelbase", "cg_height"):
        grown["vehicle"][name] = c * spec["vehicle"][name]
    one = evaluate(geometry_of(spec), **position_of(linkage))
    two = evaluate(geometry_of(grown), **position_of(linkage, c))
    same(one, two, 1e-8, change=scaled_value(c))


def test_units_of_measures_are_those_that_scaling_knows():
    assert {info.unit for info in KEYS.values()} <= {"deg", "mm", "deg/mm", "mm/mm", "1/m", "deg/deg", "%"}


# --- exact rates against central differences of the program's own poses

RATES = {
    "camber_gain_deg_per_mm": ("camber_deg", "bump_mm", 1.0),
    "bump_steer_deg_per_mm": ("toe_deg", "bump_mm", 1.0),
    "track_change_mm_per_mm": ("half_track_mm", "bump_mm", 1.0),
    "roll_camber_deg_per_deg": ("camber_deg", "roll_deg", -1.0),
    "roll_steer_deg_per_deg": ("toe_deg", "roll_deg", -1.0),
}
STEPS = {"bump_mm": 0.8, "roll_deg": 0.08}


@pytest.mark.parametrize("at_limit", [False, True])
@pytest.mark.parametrize("linkage", LINKAGES)
def test_exact_rates_equal_central_differences(linkage, at_limit):
    """Also at bump 60, roll 3, rack 30 together."""
    rack = 30.0 if linkage in STEERS else 0.0
    at = {"bump_mm": 60.0, "roll_deg": 3.0, "rack_mm": rack} if at_limit else position_of(linkage)
    names = list(at)
    places = [list(at.values())]
    for name, step in STEPS.items():
        for share in (1.0, -1.0, 0.5, -0.5):
            places.append([at[n] + share * step * (n == name) for n in names])
    keys = {*RATES, "camber_deg", "toe_deg", "half_track_mm"}
    found = sweep(geometry_of(full_spec(linkage)), [tuple(place) for place in places], keys=keys)
    tilt = np.tan(np.radians(at["roll_deg"]))  # the road's origin itself goes sideways on a tilted road
    for side, hand in (("left", 1.0), ("right", -1.0)):
        for rate, (key, name, sign) in RATES.items():
            first = 1 if name == "bump_mm" else 5
            values = [found[first + i][side][key] for i in range(4)]
            wide = (values[0] - values[1]) / (2 * STEPS[name])
            slope = sign * (4 * (values[2] - values[3]) / STEPS[name] - wide) / 3
            if name == "roll_deg":
                slope *= hand
            elif key == "half_track_mm":
                slope -= hand * tilt
            assert found[0][side][rate] == pytest.approx(slope, abs=3e-9), (side, rate)
