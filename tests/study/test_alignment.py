"""What the workshop re-sets: goals met on the true geometry, steps, stops, and what alignment cannot
remove."""

import numpy as np
import pytest

from study.alignment import NOT_ALIGNED, AlignmentError, adjusters_of, judge_gains
from study.assembly import corner_of
from study.response import Response
from tests.study.demo import response, spatial_corner, study, wishbone

ERRORS = '"chassis.*" = { plus_minus = 1.5 }\n"tie_rod.length" = { length = 2.0 }\n"upright.*" = { diameter = 0.4 }'
ANGLES = "".join(f'[[measures]]\nof = "{key}"\n' for key in ("toe_deg", "camber_deg", "caster_deg"))
ALL_THREE = (
    'toe = { by = "tie_rod", within_deg = 0.02 }\ncamber = { by = "upper_arm", within_deg = 0.05 }\n'
    'caster = { by = "lower_arm_split", within_deg = 0.1 }'
)


def drawn(model, n=300, seed=5):
    return model.field.to_errors(np.random.default_rng(seed).random((model.scalars, n)))


@pytest.mark.parametrize("geometry", [wishbone, spatial_corner])
def test_angles_end_at_the_nominal_plus_the_band(geometry):
    made = response(geometry(), errors=ERRORS, alignment=ALL_THREE, measures=ANGLES)
    errors = drawn(made.model)
    found = made.evaluate(errors)
    nominal = made.evaluate(np.zeros((made.model.scalars, 1))).values
    bands = errors[[made.model.bands["left"][target] for target in ("toe", "camber", "caster")]]
    assert (found.status == 0).all()
    np.testing.assert_allclose(found.values, nominal + bands, atol=2e-9, rtol=0)


def test_a_tie_rods_length_error_is_gone_after_toe_alignment():
    made = response(
        wishbone(), errors='"tie_rod.length" = { length = 2.0 }', alignment='toe = { by = "tie_rod", within_deg = 0.0 }',
        measures=ANGLES + '[[measures]]\nof = "toe_deg"\nat = { bump = 30, rack = 10 }\n',
    )  # fmt: skip
    found = made.evaluate(np.array([[-2.0, 0.7, 2.0], [0.0, 0.0, 0.0]]))
    nominal = made.evaluate(np.zeros((2, 1)))
    np.testing.assert_allclose(found.values, np.repeat(nominal.values, 3, axis=1), atol=1e-9)
    np.testing.assert_allclose(found.settings, [[2.0, -0.7, -2.0]], atol=1e-8)


def test_stepped_adjusters_stand_on_multiples_and_the_stepless_are_set_again():
    camber = 'camber = { by = "upper_arm", within_deg = 0.0, step_mm = 0.5, range_mm = 4.0 }'
    made = response(
        wishbone(), errors=ERRORS, alignment=f'toe = {{ by = "tie_rod", within_deg = 0.0 }}\n{camber}', measures=ANGLES
    )
    found = made.evaluate(drawn(made.model))
    steps = found.settings[1] / 0.5
    np.testing.assert_allclose(steps, np.round(steps), atol=1e-12)
    assert len(set(np.round(steps))) > 2
    np.testing.assert_allclose(found.values[0], wishbone().left.wheel.toe_deg, atol=2e-9)
    assert 0.05 < np.abs(found.values[1] - wishbone().left.wheel.camber_deg).max() < 0.12


def test_an_adjuster_that_runs_out_stays_at_its_stop_and_is_flagged():
    made = response(
        wishbone(), errors='"tie_rod.length" = { length = 2.0 }',
        alignment='toe = { by = "tie_rod", within_deg = 0.0, range_mm = 1.0 }', measures=ANGLES,
    )  # fmt: skip
    found = made.evaluate(np.array([[-2.0, -0.5, 1.5], [0.0, 0.0, 0.0]]))
    np.testing.assert_allclose(found.settings, [[1.0, 0.5, -1.0]], atol=1e-9)
    assert found.ran_out.tolist() == [[True, False, True]]
    assert (found.status == 0).all() and np.isfinite(found.values).all()
    before = response(wishbone(), stage="before", errors='"tie_rod.length" = { length = 2.0 }', measures=ANGLES)
    half_way = before.evaluate(np.array([[-1.0, 0.5]]))
    np.testing.assert_allclose(found.values[:, [0, 2]], half_way.values, atol=1e-9)


def test_ride_height_shifts_the_builds_own_zero_of_bump_in_both_stages():
    keys = {"alignment": 'ride_height = { within_mm = 2.0 }\ntoe = { by = "tie_rod", within_deg = 0.0 }'}
    measures = (
        '[[measures]]\nof = "camber_deg"\nat = { bump = 10 }\n[[measures]]\nof = "camber_deg"\nat = { bump = 11.5 }\n'
    )
    measures += '[[measures]]\nof = "toe_deg"\n'
    errors, found = np.zeros((2, 2)), {}
    for stage in ("before", "after"):
        made = response(
            wishbone(), stage=stage, measures=measures, errors='"tie_rod.length" = { length = 0.5 }', **keys
        )
        errors = np.zeros((made.model.scalars, 2))
        errors[made.model.bands["left"]["ride_height"], 0] = 1.5
        found[stage] = made.evaluate(errors).values
    assert found["before"][0, 0] == pytest.approx(found["before"][1, 1], abs=1e-9)
    assert found["after"][2, 0] == pytest.approx(found["after"][2, 1], abs=2e-9)  # toe is set where the car stands


def test_moving_a_chassis_pivot_sideways_is_mostly_removed_and_upwards_is_not():
    measures = '[[measures]]\nof = "camber_deg"\nat = { bump = 25 }\n'
    keys = {
        "errors": '"chassis.upper_*" = { plus_minus = 1.0 }', "measures": measures,
        "alignment": 'camber = { by = "upper_arm", within_deg = 0.0 }\ntoe = { by = "tie_rod", within_deg = 0.0 }',
    }  # fmt: skip
    before, after = (response(wishbone(), stage=stage, **keys) for stage in ("before", "after"))
    errors = np.zeros((before.model.scalars, 3))
    errors[[1, 4], 1], errors[[2, 5], 2] = 1.0, 1.0
    moved = [np.diff(made.evaluate(errors).values[0][[0, 1]])[0] for made in (before, after)]
    raised = [np.diff(made.evaluate(errors).values[0][[0, 2]])[0] for made in (before, after)]
    assert abs(moved[1]) < 0.02 * abs(moved[0])
    assert abs(raised[1]) > 0.2 * abs(raised[0])


def test_every_adjuster_of_a_corner_moves_the_corner():
    corner = corner_of(wishbone(), "left")
    assert set(adjusters_of(corner)) == {"tie_rod", "upper_arm", "upper_arm_split", "lower_arm", "lower_arm_split"}


def test_an_unknown_adjuster_is_named_with_the_ones_there_are():
    with pytest.raises(
        AlignmentError, match='by = "strut_top" is no adjuster of this double-wishbone; it has .*tie_rod'
    ):
        response(wishbone(), alignment='toe = { by = "strut_top", within_deg = 0.1 }')


def test_adjusters_that_do_not_set_the_angles_apart_are_refused():
    made = response(
        wishbone(),
        alignment='toe = { by = "tie_rod", within_deg = 0.1 }\ncamber = { by = "upper_arm", within_deg = 0.1 }',
    )
    bench = made.hands["left"].bench
    judge_gains(bench, made.starts["left"][1])
    for poor in (np.array([[0.5, 0.25], [0.2, 0.1]]), np.full((2, 2), np.nan), 1e-6 * np.eye(2)):
        with pytest.raises(AlignmentError, match="do not set these angles apart .toe by tie_rod, camber by upper_arm"):
            judge_gains(bench, poor)


def test_a_build_that_cannot_be_aligned_says_so():
    made = Response(
        wishbone(),
        study(
            errors='"upright.tie_rod_outer" = { plus_minus = 90 }',
            alignment='toe = { by = "tie_rod", within_deg = 0.0 }',
        ),
    )
    errors = np.zeros((made.model.scalars, 2))
    # the steering arm shrinks to nothing, so no length of the rod sets the toe
    errors[0, 1] = -(wishbone().left.points["tie_rod_outer"][0] - wishbone().left.points["lower_ball_joint"][0]) + 2.0
    found = made.evaluate(errors)
    assert found.status[0] == 0
    assert found.status[1] != 0 and np.isnan(found.values[0, 1])
    assert NOT_ALIGNED == 3
