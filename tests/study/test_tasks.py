"""Whole small studies, from the study file to the result tables, without a catalog."""

import math
from dataclasses import replace
from functools import cache
from types import MappingProxyType

import numpy as np
import pytest

from catalog.geometry_file import parse_geometry
from study import nominal, tasks
from study.tasks import StudyWork
from tests.independent_bodies import double_wishbone
from tests.independent_measures import Corner
from tests.study.small_studies import CHASSIS, TOE, corner, demo, effects_of, rows_of, run_study, small_study

LEVELLED = TOE | {"camber": '{ by = "upper_arm", within_deg = 0.05 }'}
UPRIGHT = {"upright.*": "{ diameter = 0.4 }", "tie_rod.length": "{ length = 0.5 }"}
RATES = ("camber_gain_deg_per_mm", "bump_steer_deg_per_mm", "roll_centre_height_mm", "side_view_ic_z_mm")
STEADY = (*RATES[:3], "anti_dive_pct", "caster_deg")  # nearly linear on the demo car


@pytest.fixture(scope="module")
def wishbone():
    return demo()


@cache
def on_the_corner(build):
    """Effects of chassis errors on camber and the RATES of the textbook corner, a tuple of them by measure."""
    errors = CHASSIS | {"rack.tie_rod_inner": "{ plus_minus = 1.0 }"}
    found = run_study(corner(build=build), small_study("camber_deg", *RATES, errors=errors))
    return tuple(effects_of(found, measure_no=number) for number in range(1 + len(RATES)))


@pytest.fixture(autouse=True, scope="module")
def few_curves():
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(tasks, "CURVE_BUILDS", 16)
        patch.setattr(tasks, "CURVE_KEYS", {"bump": ("camber_deg",), "roll": ("toe_deg",)})
        yield


def ranking_of(found, key, **where):
    return {row["source"]: row[key] for row in rows_of(found, "ranking", **where)}


# --- effects against ways of finding them that do not use the program's own linear model


def independent_camber(geometry, build, feature, error):
    points = {name: np.array(point) for name, point in geometry.left.points.items()}
    wheel = geometry.left.wheel
    given = {"centre": wheel.centre, "loaded_radius": wheel.loaded_radius_mm, "camber_deg": wheel.camber_deg}
    arms = {arm: (build, "centre") for arm in ("upper_arm", "lower_arm")}
    body = double_wishbone(points, given, arms=arms, errors={feature: error})
    at = Corner(body)
    return at.angles(at.now, 0.0)[0]


@pytest.mark.parametrize("build", ["legs", "one-piece"])
def test_fore_and_aft_errors_of_pivots_agree_with_another_solver(build):
    geometry = corner(build=build)
    found = on_the_corner(build)[0]
    for pivot in ("chassis.upper_front_pivot", "chassis.lower_rear_pivot"):
        ends = [independent_camber(geometry, build, pivot, (x, 0.0, 0.0)) for x in (0.05, -0.05)]
        assert found[pivot][0] == pytest.approx((ends[0] - ends[1]) / 0.1, abs=2e-6)


def test_a_one_piece_arm_hardly_leans_the_wheel_for_a_fore_and_aft_error_but_legs_do():
    welded = on_the_corner("one-piece")[0]
    for pivot, effect in on_the_corner("legs")[0].items():
        if pivot.startswith("rack."):
            continue
        assert abs(effect[0]) > 0.03
        assert abs(welded[pivot][0]) < 0.0015
        assert abs(effect[1]) > 0.04
        assert welded[pivot][1] == pytest.approx(effect[1], rel=0.05)


def shifted(geometry, point, by):
    """The drawing itself changed: every length follows."""
    points = dict(geometry.left.points)
    points[point] = tuple(np.array(points[point]) + by)
    right = {name: (x, -y, z) for name, (x, y, z) in points.items()}
    sides = {"left": replace(geometry.left, points=MappingProxyType(points))}
    sides["right"] = replace(geometry.right, points=MappingProxyType(right))
    return replace(geometry, **sides)


@pytest.mark.parametrize(
    ("source", "point", "joint"),
    [
        ("chassis.upper_front_pivot", "upper_front_pivot", "upper_ball_joint"),
        ("chassis.lower_rear_pivot", "lower_rear_pivot", "lower_ball_joint"),
        ("rack.tie_rod_inner", "tie_rod_inner", "tie_rod_outer"),
    ],
)
def test_a_pivot_moved_square_to_its_leg_acts_like_a_changed_drawing(source, point, joint):
    """Square to the leg its length stays, so an error of the build and a change of the drawing are the same thing."""
    geometry = corner()
    leg = np.subtract(geometry.left.points[joint], geometry.left.points[point])
    way = np.cross(leg, [1.0, 0.0, 0.0])
    way /= np.linalg.norm(way)
    ends = [nominal.evaluate(shifted(geometry, point, h * way)) for h in (0.02, -0.02)]
    for number, key in enumerate(RATES):
        side = "axle" if key in ends[0]["axle"] else "left"
        changed = (ends[0][side][key] - ends[1][side][key]) / 0.04
        effect = on_the_corner("legs")[1 + number][source]
        assert np.dot(effect, way) == pytest.approx(changed, rel=2e-3, abs=1e-7)


def test_rack_end_error_gives_the_static_toe_of_the_reference(kinematics):
    errors = {"rack.tie_rod_inner": "{ plus_minus = 1.0 }"}
    found = run_study(corner(), small_study("toe_deg", errors=errors, alignment=TOE))
    known = kinematics["spatial_corner"]["rack_end_error_1_mm_static_toe_deg"]
    assert abs(effects_of(found)["rack.tie_rod_inner"][1]) == pytest.approx(known, abs=5e-4)
    assert effects_of(found, stage="after")["rack.tie_rod_inner"][1] == pytest.approx(0.0, abs=1e-6)


# --- alignment


def test_tie_rod_length_has_no_effect_left_after_toe_is_set(wishbone):
    keys = ("toe_deg", "camber_deg", "caster_deg", *RATES, 'of = "toe_deg"\nat = { bump = 25, roll = 1.0 }')
    found = run_study(wishbone, small_study(*keys, errors=UPRIGHT, alignment=TOE))
    for number, key in enumerate(keys):
        before = effects_of(found, measure_no=number)["tie_rod.length"][0]
        after = effects_of(found, measure_no=number, stage="after")["tie_rod.length"][0]
        assert abs(after) <= 1e-4 * abs(before) + 1e-7, key
    assert abs(effects_of(found)["tie_rod.length"][0]) > 0.1


def test_what_the_workshop_leaves_is_a_source_of_its_own_and_only_after(wishbone):
    found = run_study(wishbone, small_study("camber_deg", "toe_deg", alignment=LEVELLED))
    assert not any(name.startswith("alignment.") for name in effects_of(found))
    assert effects_of(found, stage="after")["alignment.camber"] == pytest.approx([1.0], abs=1e-6)
    assert effects_of(found, stage="after", measure_no=1)["alignment.toe"] == pytest.approx([1.0], abs=1e-6)
    shares = ranking_of(found, "linear_share", stage="after")
    assert shares["alignment.camber"] == pytest.approx(1.0, abs=1e-6)


def test_ride_height_is_a_source_before_and_after(wishbone):
    asked = small_study("camber_deg", alignment=TOE | {"ride_height": "{ within_mm = 2.0 }"})
    found = run_study(wishbone, asked)
    gain = nominal.evaluate(wishbone)["left"]["camber_gain_deg_per_mm"]
    for stage in ("before", "after"):
        assert effects_of(found, stage=stage)["alignment.ride_height"][0] == pytest.approx(gain, rel=0.05)


def test_an_adjuster_at_its_stop_counts_as_bad_and_is_reported(wishbone):
    limits = 'of = "camber_gain_deg_per_mm"\nlimits = [-1.0, 1.0]'
    camber = '{ by = "upper_arm", within_deg = 0.05, range_mm = 0.5 }'
    tables, facts = run_study(
        wishbone, small_study(limits, method="spread", size=512, alignment=TOE | {"camber": camber})
    )
    demand = {row["adjuster"]: row for row in tables["demand"]}
    assert 0.05 < demand["camber"]["ran_out_share"] < 0.95
    assert demand["toe"]["ran_out_share"] == 0.0
    assert max(demand["camber"]["high"], -demand["camber"]["low"]) == pytest.approx(0.5)
    assert facts["good_share"] == pytest.approx(1.0 - demand["camber"]["ran_out_share"])


def test_a_stepped_adjuster_stands_on_its_steps(wishbone):
    camber = '{ by = "upper_arm", within_deg = 0.05, step_mm = 0.5, range_mm = 4.0 }'
    asked = small_study("camber_deg", "toe_deg", method="spread", size=256, alignment=TOE | {"camber": camber})
    work = StudyWork(wishbone, asked)
    task = next(t for t in work.tasks if t.kind == "draws" and t.stage == "after")
    camber_settings = work.run(task).values[3]
    assert set(np.unique(camber_settings)) <= set(np.arange(-8, 9) * 0.5)
    assert len(np.unique(camber_settings)) > 2


# --- methods


@pytest.fixture(scope="module")
def spread_found(wishbone):
    return run_study(wishbone, small_study(*STEADY, method="spread", size=2048))


def test_linear_stack_and_spread_agree_on_a_nearly_linear_measure(wishbone, spread_found):
    found = run_study(wishbone, small_study(*STEADY))
    for number in range(len(STEADY)):
        drawn, stack = (rows_of(f, "stats", measure_no=number)[0] for f in (spread_found, found))
        assert drawn["sd"] == pytest.approx(stack["rss"], rel=0.06)
        assert drawn["mean"] == pytest.approx(drawn["nominal"], abs=0.15 * drawn["sd"])
        shares = ranking_of(found, "linear_share", measure_no=number)
        assert sum(shares.values()) == pytest.approx(1.0, abs=1e-9)


def test_worst_is_never_inside_what_spread_has_seen(wishbone, spread_found):
    found = run_study(wishbone, small_study(*STEADY, method="worst"))
    for number in range(len(STEADY)):
        seen = rows_of(spread_found, "stats", measure_no=number)[0]
        worst = {row["direction"]: row["value"] for row in rows_of(found, "worst", measure_no=number)}
        assert worst["low"] <= seen["low"] and worst["high"] >= seen["high"]
        assert all(abs(row["error"]) <= 1.0 + 1e-9 for row in rows_of(found, "worst", measure_no=number))


def test_sobol_shares_of_a_nearly_linear_measure_are_the_linear_ones(wishbone):
    found = run_study(wishbone, small_study("caster_deg", method="sobol", size=256, alignment=LEVELLED))
    for stage in ("before", "after"):
        rows = rows_of(found, "ranking", stage=stage)
        assert [row["rank"] for row in rows] == list(range(1, len(rows) + 1))
        assert [row["st"] for row in rows] == sorted((row["st"] for row in rows), reverse=True)
        for row in rows:
            assert row["st"] == pytest.approx(row["linear_share"], abs=0.06)
            assert row["st_low"] <= row["st"] <= row["st_high"]
        assert not rows[0]["tied"]


def test_morris_walks_as_far_as_the_linear_effects_say(wishbone):
    asked = small_study("caster_deg", method="morris", size=16)
    rows = rows_of(run_study(wishbone, asked), "ranking")
    for row in rows:  # a walk crosses 2·sqrt(3) standard deviations, which is the whole of a ± 1 mm zone
        assert row["mu_star"] == pytest.approx(2.0 * row["effect_per_mm"], rel=0.05)
        assert row["st"] is None


def test_a_range_has_no_single_slope_but_a_share(wishbone):
    swept = 'of = "toe_deg"\nover = { bump = [-20, 20, 5] }\ntake = "range"'
    slope = swept.replace("range", "slope")
    found = run_study(wishbone, small_study(swept, slope, "bump_steer_deg_per_mm"))
    assert all(effect is None for effect in effects_of(found).values())
    assert sum(ranking_of(found, "linear_share").values()) > 0.8
    steer = effects_of(found, measure_no=2)
    for source, effect in effects_of(found, measure_no=1).items():
        assert effect == pytest.approx(steer[source], abs=0.1 * max(map(abs, steer[source])))


def test_sides_built_apart_are_one_source_with_opposite_signs_in_a_cross_measure(wishbone):
    found = run_study(wishbone, small_study("cross_camber_deg", "roll_centre_height_mm", sides="independent"))
    for number, sign in ((0, -1.0), (1, 1.0)):
        for row in rows_of(found, "ranking", measure_no=number):
            assert row["effect_axes"] == [f"{hand} {axis}" for hand in ("left", "right") for axis in "xyz"]
            left, right = np.split(np.array(row["effect"]), 2)
            assert right == pytest.approx(sign * left, abs=1e-6 + 1e-6 * np.abs(left).max())


def test_builds_that_cannot_be_assembled_are_counted_and_ranked_instead(wishbone):
    errors = {"chassis.lower_*": "{ plus_minus = 1.0 }", "tie_rod.length": "{ length = 100.0 }"}
    limited = 'of = "camber_deg"\nlimits = [-90, 90]'
    tables, facts = run_study(wishbone, small_study(limited, method="sobol", size=32, errors=errors))
    stats = tables["stats"][0]
    assert facts["withheld"] and facts["unassembled"] > 0
    assert stats["good_share"] == pytest.approx(1.0 - stats["unassembled"] / stats["builds"])
    assert all(row["st"] is None for row in tables["ranking"])
    assert tables["failures"][0]["source"] == "tie_rod.length"
    assert facts["notes"]


# --- curves, and every linkage


def test_curves_carry_the_drawing_and_an_ordered_band(wishbone):
    tables, _ = run_study(wishbone, small_study("camber_deg", alignment=TOE))
    curve = [row for row in tables["curves"] if (row["axis"], row["key"]) == ("bump", "camber_deg")]
    swept = nominal.sweep(wishbone, [(row["x"], 0.0, 0.0) for row in curve], ["camber_deg"])
    for row, at in zip(curve, swept, strict=True):
        assert row["nominal"] == pytest.approx(at["left"]["camber_deg"], abs=1e-9)
        assert row["q05"] <= row["q25"] <= row["q50"] <= row["q75"] <= row["q95"]
        assert row["q95"] - row["q05"] > 0.1


SEMI_TRAILING = """
name = "rear"
linkage = "semi-trailing-arm"
[points]
hinge_inner = [320, 150, 240]
hinge_outer = [390, 480, 255]
[wheel]
centre = [0, 640, 265]
loaded_radius = 265
[vehicle]
axle = "rear"
"""
FIVE_LINK = """
name = "five"
linkage = "five-link"
steer_link = "toe"
[links.upper_front]
inner = [150, 340, 300]
outer = [10, 560, 305]
[links.upper_rear]
inner = [-150, 345, 290]
outer = [-20, 560, 300]
[links.lower_front]
inner = [180, 270, 130]
outer = [20, 600, 125]
[links.lower_rear]
inner = [-170, 265, 135]
outer = [-15, 600, 120]
[links.toe]
inner = [-60, 280, 160]
outer = [-90, 580, 165]
[wheel]
centre = [0, 640, 265]
loaded_radius = 265
"""
STRUT = """
name = "strut"
linkage = "strut"
[points]
strut_top = [-20, 520, 640]
strut_lower = [-2, 575, 230]
lower_front_pivot = [130, 300, 130]
lower_rear_pivot = [-150, 310, 135]
lower_ball_joint = [5, 600, 120]
tie_rod_inner = [-90, 290, 160]
tie_rod_outer = [-110, 570, 155]
[wheel]
centre = [0, 640, 265]
loaded_radius = 265
"""
SOLID_AXLE = """
name = "axle"
linkage = "solid-axle"
[links.left_lower]
inner = [480, 420, 210]
outer = [20, 480, 200]
[links.right_lower]
inner = [480, -420, 210]
outer = [20, -480, 200]
[links.upper]
inner = [430, 60, 380]
outer = [10, 50, 390]
[links.panhard]
inner = [-90, 470, 270]
outer = [-95, -460, 262]
[wheel]
centre = [0, 640, 265]
loaded_radius = 265
[vehicle]
axle = "rear"
"""
ANGLES = {"upright.strut_axis": "{ tilt_deg = 0.1 }"}


@pytest.mark.parametrize(
    ("text", "alignment", "more"),
    [
        (STRUT, {"toe": '{ by = "tie_rod", within_deg = 0.02 }', "camber": '{ by = "strut_top", within_deg = 0.1 }'}, ANGLES),
        (FIVE_LINK, {"toe": '{ by = "toe", within_deg = 0.02 }', "camber": '{ by = "upper_rear", within_deg = 0.1 }'}, {}),
        (SEMI_TRAILING, {"toe": '{ by = "hinge_outer", within_deg = 0.02 }'}, {}),
        (SOLID_AXLE, None, {"axle.*": "{ diameter = 0.5 }"}),
    ],
    ids=["strut", "five-link", "semi-trailing-arm", "solid-axle"],
)
def test_every_linkage_is_studied_whole(text, alignment, more):
    geometry = parse_geometry(text, source="inline.toml")
    keys = ("toe_deg", "camber_deg", "bump_steer_deg_per_mm", "roll_centre_height_mm")
    asked = small_study(*keys, method="spread", size=64, errors=CHASSIS | more, alignment=alignment)
    found = run_study(geometry, asked)
    stage = "after" if alignment else "before"
    for number, key in enumerate(keys):
        stats = rows_of(found, "stats", measure_no=number, stage=stage)[0]
        assert stats["unassembled"] == 0
        assert stats["sd"] > 0.0 and math.isfinite(stats["nominal"]), key
        assert any(any(effect) for effect in effects_of(found, measure_no=number, stage=stage).values())
    if alignment:
        assert effects_of(found, stage="after")["alignment.toe"] == pytest.approx([1.0], abs=1e-5)
