import itertools

import numpy as np
import pytest

from study.methods import linear, worst
from study.zone_entries import parse_zone
from study.zone_field import ZoneField
from tests.study.method_models import clutch_deg

LENGTHS = ZoneField(tuple(parse_zone({"length": 0.05}) for _ in range(3)))
POINTS = ZoneField(
    (parse_zone({"diameter": 2.0}), parse_zone({"plus_minus": 1.0}), parse_zone({"length": 0.2}))
)
EFFECTS = np.random.default_rng(4).normal(size=(4, 7))


def test_clutch_worst_case_is_the_worst_corner():
    found = worst.search(clutch_deg, LENGTHS, seed=0)
    corners = np.array(list(itertools.product((-0.05, 0.05), repeat=3))).T
    every = clutch_deg(corners)[0]
    assert found.values[0] == pytest.approx([every.min(), every.max()])
    np.testing.assert_allclose(found.errors[0, 1], corners[:, every.argmax()])
    assert found.nominal[0] == clutch_deg(np.zeros((3, 1)))[0, 0]


def test_linear_model_reaches_its_stack_at_once():
    found = worst.search(lambda errors: EFFECTS @ errors, POINTS, seed=0)
    stack = linear.stack(EFFECTS, POINTS, problem_of(POINTS))
    np.testing.assert_allclose(found.values, np.column_stack([stack.worst_low, stack.worst_high]), rtol=1e-6)
    np.testing.assert_allclose(np.einsum("md,mkd->mk", EFFECTS, found.errors), found.values)


def problem_of(field):
    from study.methods.problem import Problem

    return Problem(np.zeros(field.n_scalars, dtype=int), 1)


def test_curved_model_goes_beyond_the_linear_stack_and_inside_the_zone():
    def model(errors):
        return (errors[:1] + 0.8 * errors[1:2] ** 2 - 0.3 * (errors[3:4] - 0.4) ** 2).reshape(1, -1)

    found = worst.search(model, POINTS, seed=1, rounds=12)
    turn = np.linspace(0.0, 2.0 * np.pi, 20_001)
    on_ball = np.cos(turn) + 0.8 * np.sin(turn) ** 2
    assert found.values[0, 1] == pytest.approx(on_ball.max(), abs=0.02)
    low = on_ball.min() - 0.3 * 1.4**2
    assert found.values[0, 0] == pytest.approx(low, abs=0.02)
    inside = np.linalg.norm(found.errors[0, :, :3], axis=1)
    assert (inside <= 1.0 + 1e-12).all() and (np.abs(found.errors[0, :, 3:6]) <= 1.0).all()


def test_builds_that_cannot_be_assembled_are_passed_by():
    def model(errors):
        values = EFFECTS @ errors
        values[:, errors[6] > 0.1] = np.nan
        return values

    found = worst.search(model, POINTS, seed=2)
    assert found.unassembled > 0 and np.isfinite(found.values).all()
    assert (found.errors[:, :, 6] <= 0.1).all()


def test_measure_without_a_value_and_measure_that_nothing_moves():
    def model(errors):
        n = errors.shape[1]
        return np.vstack([np.full(n, np.nan), np.full(n, 3.0), errors.sum(axis=0)])

    found = worst.search(model, POINTS, seed=2)
    assert np.isnan(found.values[0]).all() and found.values[1].tolist() == [3.0, 3.0]
    assert not found.errors[1].any() and found.values[2, 0] == pytest.approx(-found.values[2, 1])


def test_same_result_whatever_the_batches_and_every_seed_is_honoured():
    sizes = []

    def model(errors):
        sizes.append(errors.shape[1])
        return (EFFECTS @ errors) ** 2

    once, again, other = (worst.search(model, POINTS, seed=seed) for seed in (0, 0, 1))
    assert np.array_equal(once.values, again.values) and np.array_equal(once.errors, again.errors)
    assert once.builds == again.builds and max(sizes) <= 4096 and sum(sizes) == 2 * once.builds + other.builds
    assert (once.values[:, 1] >= once.nominal).all()
