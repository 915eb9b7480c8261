import numpy as np
import pytest

from study import zones
from study.methods import linear, spread
from study.zone_entries import parse_zone
from study.zone_field import ZoneField
from tests.study.method_models import REFERENCE, clutch_deg, scalars, sourced

CLUTCH = ZoneField(
    tuple(parse_zone({"length": 0.05, "distribution": "normal", "cp": cp}) for cp in (1.0, 1.5, 0.8))
)
MIXED = ZoneField(
    (
        parse_zone({"diameter": 0.6, "axis": [1, 2, 2], "depth": 1.0}),
        parse_zone({"plus_minus": [1.0, 0.5, 0.2], "shift": 0.1}),
        parse_zone({"length": 0.2, "distribution": "normal"}),
    )
)


def clutch_effects():
    """Exact partial derivatives in degrees per mm."""
    sizes = REFERENCE["clutch"]
    a, c, e = sizes["a_mm"], sizes["c_mm"], sizes["e_mm"]
    cos = (a + c) / (e - c)
    outer = -np.degrees(1.0) / np.sqrt(1.0 - cos**2)
    return outer * np.array([1.0 / (e - c), (e + a) / (e - c) ** 2, -(a + c) / (e - c) ** 2])


def test_steps_hold_the_drawing_and_both_sides_of_each_scalar():
    errors, h = linear.steps(np.array([0.5, 0.0, 0.01]))
    assert h == pytest.approx([0.05, 1e-4, 1e-3]) and errors.shape == (3, 7)
    assert not errors[:, 0].any() and (np.count_nonzero(errors[:, 1:], axis=0) == 1).all()
    np.testing.assert_allclose(errors[:, 1::2], -errors[:, 2::2])


def test_clutch_angle_effects_and_root_sum_square():
    known = REFERENCE["clutch"]
    errors, h = linear.steps(CLUTCH.sd())
    values = clutch_deg(errors)
    assert values[0, 0] == pytest.approx(known["angle_deg"], abs=1e-3)
    effects = linear.effects(values, h)
    np.testing.assert_allclose(effects[0], clutch_effects(), rtol=1e-4)
    stack = linear.stack(effects, CLUTCH, scalars(3))
    assert stack.rss[0] == pytest.approx(np.linalg.norm(clutch_effects() * CLUTCH.sd()), rel=1e-4)
    assert stack.worst_high[0] == pytest.approx(np.abs(clutch_effects()).sum() * 0.05, rel=1e-4)
    assert stack.worst_low[0] == pytest.approx(-stack.worst_high[0])
    unit = spread.draw(scalars(3), size=100_000, seed=1, first=0, count=100_000).T
    sampled = spread.summary(clutch_deg(CLUTCH.to_errors(unit)))
    assert sampled.sd[0] == pytest.approx(stack.rss[0], rel=0.02)


def test_shares_add_up_by_source_and_use_the_whole_covariance():
    effects = np.array([[1.0, -2.0, 0.5, 1.0, 0.3, -0.7, 4.0], np.zeros(7)])
    stack = linear.stack(effects, MIXED, sourced(3, 3, 1))
    slanted = effects[0, :3] @ zones.covariance(MIXED.zones[0]) @ effects[0, :3]
    assert stack.shares[0, 0] == pytest.approx(slanted / stack.rss[0] ** 2)
    assert stack.shares[0].sum() == pytest.approx(1.0) and not stack.shares[1].any()
    assert stack.mean[0] == pytest.approx(0.1 * (1.0 + 0.3 - 0.7))
    values = linear.draws(np.array([5.0, 6.0]), effects, MIXED, seed=0, count=20_000)
    assert values[0].std() == pytest.approx(stack.rss[0], rel=0.03)
    assert values[0].mean() == pytest.approx(5.0 + stack.mean[0], abs=0.03) and (values[1] == 6.0).all()
    uniform = values[0] - 5.0
    assert uniform.max() <= stack.worst_high[0] * 1.5 and uniform.min() >= stack.worst_low[0] * 1.5


def test_two_zones_of_one_source_are_added():
    field = ZoneField((parse_zone({"length": 0.3}), parse_zone({"length": 0.4})))
    stack = linear.stack(np.array([[1.0, 1.0]]), field, sourced(2))
    assert stack.shares.tolist() == [[1.0]] and stack.rss[0] == pytest.approx(0.5 / np.sqrt(3.0))


def test_draws_are_the_same_for_the_same_seed_0_included():
    effects = np.ones((1, 7))
    once, again, other = (
        linear.draws(np.zeros(1), effects, MIXED, seed=seed, count=10_000) for seed in (0, 0, 1)
    )
    assert np.array_equal(once, again) and not np.array_equal(once, other)


def test_shares_of_a_slope_tend_to_the_exact_ones():
    rng = np.random.default_rng(3)
    effects, problem = rng.normal(size=(5, 7)), sourced(3, 3, 1)
    x = np.linspace(-30.0, 30.0, 5)
    slope = x / (x @ x)
    found = linear.taken_shares(
        np.zeros(5), effects, MIXED, problem, lambda values: slope @ values, seed=2, count=20_000
    )
    exact = linear.stack((slope @ effects)[None], MIXED, problem).shares[0]
    np.testing.assert_allclose(found, exact, atol=0.02)


def test_shares_of_a_range_see_only_what_changes_along_the_sweep():
    effects = np.zeros((5, 7))
    effects[:, 0] = 100.0  # lifts the whole curve: no part in its range
    effects[:, 6] = np.linspace(-1.0, 1.0, 5)
    found = linear.taken_shares(
        np.linspace(0.0, 1.0, 5),
        effects,
        MIXED,
        sourced(3, 3, 1),
        lambda values: np.ptp(values, axis=0),
        seed=2,
    )
    assert found == pytest.approx([0.0, 0.0, 1.0])
    still = linear.taken_shares(
        np.zeros(5), np.zeros((5, 7)), MIXED, sourced(3, 3, 1), lambda values: np.ptp(values, axis=0), seed=2
    )
    assert not still.any()
