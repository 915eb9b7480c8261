import numpy as np
import pytest
from SALib.analyze.morris import analyze
from SALib.sample.morris import sample

from study.methods import morris
from study.zone_entries import parse_zone
from study.zone_field import ZoneField
from tests.study.method_models import outside_problem, scalars, several, sourced


def ungrouped(problem):
    return {key: value for key, value in outside_problem(problem).items() if key != "groups"}


def drawn(problem, size, seed=5):
    return morris.draw(problem, size=size, seed=seed, first=0, count=size)


@pytest.mark.parametrize("seed", [0, 1, 2024])
@pytest.mark.parametrize("problem", [scalars(2), sourced(3, 1, 2), scalars(40)], ids=["2", "6", "40"])
def test_trajectories_equal_the_library_bit_for_bit(problem, seed):
    assert np.array_equal(drawn(problem, 20, seed), sample(ungrouped(problem), 20, seed=seed))


def test_effects_equal_the_library():
    problem = sourced(3, 1, 2)
    unit = drawn(problem, 30)
    values = several(unit)
    found = morris.analyse(problem, values, seed=5)
    for number, row in enumerate(values):
        expected = analyze(ungrouped(problem), unit, row, num_resamples=10, seed=1)
        for key in ("mu", "mu_star", "sigma"):
            scale = np.abs(expected["mu_star"]).max()
            np.testing.assert_allclose(getattr(found, key)[number], expected[key], atol=1e-9 * scale)


def test_intervals_are_as_wide_as_the_librarys():
    problem = scalars(3)
    unit = drawn(problem, 200)
    values = several(unit)
    found = morris.analyse(problem, values, seed=5, resamples=1000)
    expected = analyze(ungrouped(problem), unit, values[1], num_resamples=1000, seed=1)
    half = (found.mu_star_high - found.mu_star_low)[1] / 2
    np.testing.assert_allclose(half, np.asarray(expected["mu_star_conf"], dtype=float), rtol=0.15)


def test_linear_function_has_its_effects_over_the_walk_and_no_sigma():
    field = ZoneField((parse_zone({"diameter": 0.6}), parse_zone({"length": 0.2})))
    problem = sourced(3, 1)
    effects = np.array([1.0, -2.0, 0.5, 3.0])
    values = effects @ field.walk(drawn(problem, 16).T)
    found = morris.analyse(problem, values[None], seed=5)
    width = 2.0 * np.sqrt(3.0) * field.sd()
    np.testing.assert_allclose(found.mu[0], effects * width)
    np.testing.assert_allclose(found.mu_star[0], np.abs(effects) * width)
    np.testing.assert_allclose(found.sigma[0], 0.0, atol=1e-12)
    np.testing.assert_allclose(found.mu_star_high, found.mu_star_low)
    ball = np.linalg.norm(effects[:3] * width[:3])
    assert found.source_mu_star[0] == pytest.approx([ball, 3.0 * width[3]])
    assert list(found.rank[0]) == [2, 1] and not found.tied.any()


def test_a_broken_trajectory_is_dropped_and_too_many_are_withheld():
    problem = sourced(2, 1)
    unit = drawn(problem, 200)
    values = several(unit)
    values[:, 6] = np.nan
    found = morris.analyse(problem, values, seed=5)
    assert (found.dropped_blocks, found.unassembled, found.builds) == (1, 1, 800) and not found.withheld
    assert (found.blocks == 199).all() and np.isfinite(found.mu).all()
    values[:, unit[:, 2] > 0.9] = np.nan
    found = morris.analyse(problem, values, seed=5)
    assert found.withheld and np.isnan(found.mu).all()
    assert found.failures.rank[0, 1] == 1
