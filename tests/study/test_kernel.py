"""The kernel's own parts: rotations, elimination, residuals, branches, and what does not close."""

import numpy as np
import pytest
from scipy.spatial.transform import Rotation

from study.assembly import assemble, corner_of
from study.build import built_features
from study.kernel import solve as kernel
from study.kernel import vectors
from study.kernel.rows import linearise, residuals, road_plane
from study.stations import PositionError, Spot
from tests.study.demo import response, spatial_corner, wishbone

RNG = np.random.default_rng(4)


def rows_of(geometry, n=1):
    corner = corner_of(geometry, "left")
    built = built_features(corner, (), np.zeros((0, n)))
    rows, _ = assemble(corner, built, n)
    return rows, road_plane(roll_rad=0.0, ground_mm=corner.ground_mm, rise_mm=np.zeros(n)), corner


def test_gibbs_vectors_are_rotations():
    g, h = RNG.normal(size=(2, 3, 20)) * 0.4
    matrices = np.moveaxis(vectors.gibbs_matrix(g), -1, 0)
    angle = 2 * np.arctan(np.linalg.norm(g, axis=0))
    expected = Rotation.from_rotvec((g / np.linalg.norm(g, axis=0) * angle).T).as_matrix()
    np.testing.assert_allclose(matrices, expected, atol=1e-14)
    both = np.moveaxis(vectors.gibbs_matrix(vectors.gibbs_add(h, g)), -1, 0)
    np.testing.assert_allclose(both, np.moveaxis(vectors.gibbs_matrix(h), -1, 0) @ matrices, atol=1e-13)


def test_tilt_turns_by_one_rotation_vector():
    axis = np.array([0.1, 0.9, -0.05])
    axis /= np.linalg.norm(axis)
    normals = vectors.two_normals(axis)
    np.testing.assert_allclose(normals @ np.column_stack([axis, *normals]), [[0, 1, 0], [0, 0, 1]], atol=1e-15)
    assert normals[0].argmax() == 0 and normals[1].argmax() == 2
    angles = np.radians([[3.0, 0.0], [-2.0, 0.0]])
    turned = vectors.tilt(axis[:, None], normals, angles)
    np.testing.assert_allclose(turned[:, 0], Rotation.from_rotvec(normals.T @ angles[:, 0]).apply(axis), atol=1e-15)
    np.testing.assert_allclose(turned[:, 1], axis, atol=1e-15)


def test_elimination_solves_like_lapack_and_knows_the_sign():
    a, b = RNG.normal(size=(6, 6, 50)) + 4 * np.eye(6)[:, :, None], RNG.normal(size=(6, 3, 50))
    lu = kernel.factor(a.copy())
    found = kernel.substitute(lu, b.copy())
    expected = np.linalg.solve(np.moveaxis(a, -1, 0), np.moveaxis(b, -1, 0))
    np.testing.assert_allclose(np.moveaxis(found, -1, 0), expected, atol=1e-10)
    order = kernel.Order(np.arange(6), np.arange(6), 1.0)
    assert (kernel.branch_sign(lu, order) == kernel.determinant_sign(a)).all()


def test_pivot_order_keeps_the_determinants_sign():
    for _ in range(20):
        a = RNG.normal(size=(6, 6))
        order = kernel.pivot_order(a)
        lu = kernel.factor(a[order.rows][:, order.columns][:, :, None])
        assert kernel.branch_sign(lu, order)[0] == np.sign(np.linalg.det(a))


def test_pivot_order_takes_the_greatest_entry_left():
    a = np.diag([1.0, 5.0, 3.0, 200.0, 800.0, 400.0])[[3, 1, 5, 0, 2, 4]]
    order = kernel.pivot_order(a)
    np.testing.assert_allclose(np.diag(a[order.rows][:, order.columns]), [5.0, 800.0, 3.0, 400.0, 1.0, 200.0])


@pytest.mark.parametrize("geometry", [wishbone, spatial_corner])
def test_jacobians_are_the_residuals_differences(geometry):
    rows, road, corner = rows_of(geometry())
    rotation = vectors.gibbs_matrix(np.array([[0.02], [-0.03], [0.01]]))
    t = corner.origin[:, None] + [[1.0], [-2.0], [3.0]]
    jacobian = np.empty((6, 6, 1))
    linearise(rows, road, rotation, t, jacobian)
    for k in range(6):
        step = np.zeros((6, 1))
        step[k] = 1e-4
        ends = []
        for sign in (1.0, -1.0):
            turned = vectors.gibbs_matrix(vectors.gibbs_add(0.5 * sign * step[3:], np.array([[0.02], [-0.03], [0.01]])))
            ends.append(residuals(rows, road, turned, t + sign * step[:3]))
        np.testing.assert_allclose((ends[0] - ends[1])[:, 0] / 2e-4, jacobian[:, k, 0], atol=2e-6)


def test_every_row_closes_to_a_billionth_of_a_millimetre():
    made = response(
        wishbone(), errors='"*" = { plus_minus = 3.0 }\n"upright.hub_axis" = { tilt_deg = 0.5 }',
        measures='[[measures]]\nof = "toe_deg"\nat = { bump = 60, roll = 3, rack = 20 }\n',
    )  # fmt: skip
    errors = made.model.field.to_errors(RNG.random((made.model.scalars, 500)))
    hand, spot = made.hands["left"], Spot(60.0, 3.0, 20.0)
    block = hand.block(errors, np.zeros((0, 500)))
    pose, (rows, road, _) = hand.poses(block, hand.station(spot))
    assert (pose.status == kernel.CLOSED).all()
    assert np.abs(residuals(rows, road, pose.rotation, pose.t)).max() <= 1e-9
    gram = np.einsum("ijn,ikn->jkn", pose.rotation, pose.rotation)
    np.testing.assert_allclose(gram, np.repeat(np.eye(3)[:, :, None], 500, axis=2), atol=1e-13)


def test_a_build_that_cannot_be_assembled_is_reported_and_harms_no_other():
    made = response(wishbone(), errors='"tie_rod.length" = { length = 100.0 }')
    found = made.evaluate(np.array([[0.5, -300.0, -0.5]]))
    alone = made.evaluate(np.array([[0.5, -0.5]]))
    assert found.status.tolist() == [0, kernel.NOT_CLOSED, 0]
    assert np.isnan(found.values[0, 1])
    np.testing.assert_allclose(found.values[0, [0, 2]], alone.values[0], atol=1e-9)


def test_a_build_on_the_other_branch_is_reported():
    made = response(wishbone(), errors='"upright.tie_rod_outer" = { plus_minus = 90.0 }')
    hand = made.hands["left"]
    over = np.zeros((3, 1))
    over[0] = -200.0  # the steering arm points backwards: the wheel would steer the other way
    block = hand.block(over, np.zeros((0, 1)))
    pose, _ = hand.poses(block, hand.station(Spot(0.0, 0.0, 0.0)))
    assert pose.status[0] != kernel.CLOSED


def test_a_position_out_of_reach_says_how_far_the_rows_stay_open():
    with pytest.raises(PositionError, match=r"bump 900 mm.*does not reach this position \((rows left open by .* mm|it would go over a dead point)\)"):
        response(wishbone(), measures='[[measures]]\nof = "toe_deg"\nat = { bump = 900 }\n')


def test_large_errors_are_still_solved_by_the_careful_path():
    made = response(wishbone(), errors='"chassis.*" = { plus_minus = 25.0 }')
    errors = made.model.field.to_errors(RNG.random((made.model.scalars, 200)))
    found = made.evaluate(errors)
    assert (found.status == 0).mean() > 0.95
    one = made.evaluate(errors[:, :1])
    assert found.values[0, 0] == pytest.approx(one.values[0, 0], abs=1e-9)


def test_hands_share_nothing_between_builds():
    made = response(wishbone(), errors='"chassis.*" = { plus_minus = 1.0 }')
    errors = made.model.field.to_errors(RNG.random((made.model.scalars, 64)))
    whole = made.evaluate(errors).values
    parts = np.concatenate([made.evaluate(errors[:, i : i + 16]).values for i in range(0, 64, 16)], axis=1)
    np.testing.assert_allclose(whole, parts, atol=1e-10)
