"""Every measure against its definition, taken by differences of independent poses; signs on plain cases."""

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from catalog.geometry_file import parse_geometry
from study.measures import KEYS
from study.nominal import evaluate
from tests import strategies
from tests.independent import Impossible
from tests.independent_measures import disagreements
from tests.independent_measures import evaluate as by_differences
from tests.strategies import LINKAGES, SPRING, STEERS, bodies_of, shifted, spec_of, specs, toml_text, vehicle_of

FRONT = {"axle": "front", "wheelbase": 2500, "cg_height": 400, "brake_share": 0.6, "drive_share": 0.3}


def program(spec, **position):
    return evaluate(parse_geometry(toml_text(spec), source="case.toml"), **position)


def positions(linkage):
    either = st.floats(3, 25).flatmap(lambda d: st.sampled_from([d, -d]))
    rack = st.one_of(st.just(0.0), either) if linkage in STEERS else st.just(0.0)
    travel = {"bump_mm": st.floats(-40, 50), "roll_deg": st.floats(-3, 3), "rack_mm": rack}
    return st.fixed_dictionaries(travel)


@pytest.mark.parametrize("linkage", LINKAGES)
@settings(max_examples=8)
@given(data=st.data())
def test_every_measure_is_as_defined_anywhere(linkage, data):
    spec, position = data.draw(specs(linkage)), data.draw(positions(linkage))
    try:
        expected = by_differences(*bodies_of(spec), vehicle_of(spec), **position)
    except Impossible:
        assume(False)
    assert not disagreements(expected, program(spec, **position))


@pytest.mark.parametrize("linkage", LINKAGES)
def test_every_measure_is_as_defined_at_design(linkage):
    spec = spec_of(linkage, vehicle=FRONT | {"axle": "rear" if linkage == "solid-axle" else "front"})
    spec["points"] = spec.get("points", {}) | SPRING
    expected = by_differences(*bodies_of(spec), vehicle_of(spec))
    assert not disagreements(expected, program(spec))


@pytest.mark.parametrize("linkage", LINKAGES)
def test_all_keys_are_there_each_in_its_place(linkage):
    found = program(spec_of(linkage))
    solid = linkage == "solid-axle"
    per_axle = {key for key, info in KEYS.items() if info.scope == "axle" or (solid and key.endswith("_pct"))}
    assert set(found["axle"]) == per_axle
    assert set(found["left"]) == set(found["right"]) == set(KEYS) - per_axle


@pytest.mark.parametrize("linkage", LINKAGES)
@settings(max_examples=5)
@given(data=st.data(), grid=st.sampled_from([25.0, 50.0]))
def test_round_numbers_and_level_arms_are_no_special_case(linkage, data, grid):
    """Points on a coarse grid: many rows of the equations have zeros, arms are level, hinges lie along the car."""
    spec = shifted(data.draw(specs(linkage)), lambda p: [grid * round(v / grid) for v in p])
    spec["wheel"] |= {"camber_deg": 0.0, "toe_deg": 0.0}
    try:
        expected = by_differences(*bodies_of(spec), vehicle_of(spec))
    except (Impossible, np.linalg.LinAlgError):
        assume(False)
    assert not disagreements(expected, program(spec))


def test_sides_that_differ():
    spec = spec_of("double-wishbone", vehicle=FRONT)
    other = spec_of("double-wishbone", vehicle=FRONT)
    other["points"]["upper_ball_joint"] = [-26.0, 643.0, 447.0]
    other["points"]["tie_rod_inner"] = [-118.0, 361.0, 213.5]
    text = toml_text(spec) + "[right.points]\n"
    text += "upper_ball_joint = [-26, -643, 447]\ntie_rod_inner = [-118, -361, 213.5]\n"
    position = {"bump_mm": 20.0, "roll_deg": 1.2, "rack_mm": -9.0}
    found = evaluate(parse_geometry(text, source="case.toml"), **position)
    expected = by_differences(bodies_of(spec)[0], bodies_of(other)[1], vehicle_of(spec), **position)
    assert not disagreements(expected, found)
    gap = found["left"]["caster_deg"] - found["right"]["caster_deg"]
    assert abs(gap) > 0.1
    assert found["axle"]["cross_caster_deg"] == pytest.approx(gap, abs=1e-12)


def test_file_angles_come_back_with_their_signs():
    """Positive toe points the wheels at each other, positive camber puts the contact point inboard."""
    spec = spec_of("double-wishbone")
    spec["wheel"] |= {"toe_deg": 0.4, "camber_deg": 1.5}
    found = program(spec)
    for side in ("left", "right"):
        assert found[side]["toe_deg"] == pytest.approx(0.4, abs=1e-9)
        assert found[side]["camber_deg"] == pytest.approx(1.5, abs=1e-9)
        assert found[side]["half_track_mm"] < spec["wheel"]["centre"][1] - 5
    assert found["axle"]["track_mm"] == pytest.approx(2 * found["left"]["half_track_mm"], abs=1e-9)


def test_steering_axis_signs():
    spec = spec_of("double-wishbone")
    spec["points"] |= {"upper_ball_joint": [-30.0, 640.0, 450.0], "lower_ball_joint": [10.0, 700.0, 150.0]}
    found = program(spec)
    for side in ("left", "right"):
        assert found[side]["caster_deg"] == pytest.approx(7.5946, abs=1e-3)  # atan 40/300, top rearward
        assert found[side]["kingpin_deg"] == pytest.approx(11.3099, abs=1e-3)  # atan 60/300, top inboard
        assert found[side]["trail_mm"] == pytest.approx(30.0, abs=1e-6)  # at x 30, y 730 on the ground
        assert found[side]["scrub_radius_mm"] == pytest.approx(15.0, abs=1e-6)
        assert found[side]["kingpin_offset_mm"] == pytest.approx(745 - 671.0, abs=1e-6)  # y 671 at z 295


def test_rack_to_the_left_behind_the_axle_toes_the_left_wheel_in():
    found = program(spec_of("double-wishbone", vehicle=FRONT), rack_mm=10.0)
    assert found["left"]["toe_deg"] > 2
    assert found["right"]["toe_deg"] < -2
    ahead = spec_of("double-wishbone", vehicle=FRONT)
    for name in ("tie_rod_inner", "tie_rod_outer"):
        ahead["points"][name][0] *= -1
    assert program(ahead, rack_mm=10.0)["left"]["toe_deg"] < -2


@pytest.mark.parametrize("linkage", LINKAGES)
def test_rates_have_the_sign_of_what_happens(linkage):
    spec = spec_of(linkage)
    here, bump = program(spec), program(spec, bump_mm=2.0)
    leaning_left = program(spec, roll_deg=-0.5)["left"]
    for side in ("left", "right"):
        for rate, angle in (("camber_gain_deg_per_mm", "camber_deg"), ("bump_steer_deg_per_mm", "toe_deg")):
            change = bump[side][angle] - here[side][angle]
            assert change == pytest.approx(2 * here[side][rate], abs=2e-3)
        grown = bump[side]["half_track_mm"] - here[side]["half_track_mm"]
        assert grown == pytest.approx(2 * here[side]["track_change_mm_per_mm"], abs=0.02)
    left = here["left"]
    for rate, angle in (("roll_camber_deg_per_deg", "camber_deg"), ("roll_steer_deg_per_deg", "toe_deg")):
        assert leaning_left[angle] - left[angle] == pytest.approx(0.5 * left[rate], abs=0.01)


def test_spring_shortens_in_bump_and_the_arm_carries_it():
    spec = spec_of("double-wishbone")
    spec["points"] |= SPRING
    on_arm = program(spec | {"spring_on": "lower_arm"})["left"]["motion_ratio"]
    on_upright = program(spec)["left"]["motion_ratio"]
    assert 0.3 < on_arm < on_upright < 1.1
    assert program(spec_of("double-wishbone"))["left"]["motion_ratio"] is None


def test_missing_and_zero_shares():
    with_nothing = program(spec_of("double-wishbone"))["left"]
    assert with_nothing["anti_dive_pct"] is None
    spec = spec_of("double-wishbone", vehicle=FRONT | {"brake_share": 0.0})
    del spec["vehicle"]["drive_share"]
    found = program(spec)["left"]
    assert found["anti_dive_pct"] == 0
    assert found["drive_anti_lift_pct"] is None
    assert found["anti_squat_pct"] is None


def test_rest_of_rack_leaves_travel_measures_open():
    found = program(spec_of("double-wishbone", vehicle=FRONT))
    assert found["axle"]["ackermann_pct"] is None
    assert found["left"]["steer_lift_mm"] is None
    no_wheelbase = {"axle": "front"}
    steered = program(spec_of("double-wishbone", vehicle=no_wheelbase), rack_mm=8.0)
    assert steered["axle"]["ackermann_pct"] is None
    assert steered["left"]["steer_lift_mm"] is not None


def test_all_axis_systems_are_made():
    assert len(strategies.axis_systems()) == 24
