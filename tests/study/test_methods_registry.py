"""What every method has in common."""

import subprocess
import sys

import numpy as np
import pytest
from threadpoolctl import threadpool_limits

from study.methods import METHODS, SAMPLED
from tests.study.method_models import several, sourced

PROBLEM = sourced(3, 1, 2, 3, 1)
SIZE = 32
each_sampled = pytest.mark.parametrize("method", [METHODS[name] for name in SAMPLED], ids=SAMPLED)


def whole(method, seed=7, size=SIZE):
    return method.draw(PROBLEM, size=size, seed=seed, first=0, count=size)


def alike(one, other):
    """Every array and number of two results, bit for bit."""
    for name, value in vars(one).items():
        second = getattr(other, name)
        if isinstance(value, np.ndarray):
            assert np.array_equal(value, second, equal_nan=value.dtype.kind == "f"), name
        elif value is None or isinstance(value, int | float | bool):
            assert value == second, name


def test_names_are_those_of_study_files():
    assert list(METHODS) == ["linear", "morris", "sobol", "spread", "worst"] and len(METHODS) == 5
    with pytest.raises(KeyError):
        METHODS["sobl"]


@each_sampled
def test_sample_is_a_unit_cube_of_whole_blocks(method):
    unit = whole(method)
    assert unit.shape == (method.builds(PROBLEM, SIZE), PROBLEM.n_scalars)
    assert method.builds(PROBLEM, SIZE) == SIZE * method.block(PROBLEM)
    assert unit.min() >= 0.0 and unit.max() <= 1.0


@each_sampled
@pytest.mark.parametrize("step", [1, 5, 8, 31])
def test_chunks_are_rows_of_the_whole_sample(method, step):
    parts = [
        method.draw(PROBLEM, size=SIZE, seed=7, first=first, count=min(step, SIZE - first))
        for first in range(0, SIZE, step)
    ]
    assert np.array_equal(np.vstack(parts), whole(method))


@each_sampled
def test_seed_0_is_a_seed_like_any_other(method):
    assert np.array_equal(whole(method, seed=0), whole(method, seed=0))
    assert not np.array_equal(whole(method, seed=0), whole(method, seed=1))
    values = several(whole(method, seed=0))
    once, again, other = (method.analyse(PROBLEM, values, seed=seed) for seed in (0, 0, 1))
    alike(once, again)
    if method is not METHODS["spread"]:
        low = "st_low" if method is METHODS["sobol"] else "mu_star_low"
        assert not np.array_equal(getattr(once, low), getattr(other, low))


@each_sampled
def test_a_doubled_sample_begins_with_the_single_one(method):
    assert np.array_equal(whole(method, size=2 * SIZE)[: method.builds(PROBLEM, SIZE)], whole(method))


@each_sampled
def test_same_bits_on_one_thread_and_on_two(method):
    values = several(whole(method, size=512))
    with threadpool_limits(1):
        once = method.analyse(PROBLEM, values, seed=3)
    with threadpool_limits(2):
        again = method.analyse(PROBLEM, values, seed=3)
    alike(once, again)


@each_sampled
def test_all_measures_at_once_equal_each_by_itself(method):
    values = several(whole(method))
    together = method.analyse(PROBLEM, values, seed=3)
    alone = method.analyse(PROBLEM, values[2:3], seed=3)
    for name, value in vars(alone).items():
        if isinstance(value, np.ndarray) and value.ndim == 2 and name != "correlations":
            np.testing.assert_allclose(getattr(together, name)[2], value[0], rtol=1e-12, atol=1e-12)


@each_sampled
def test_constant_measure_gives_zeros_without_warnings(method, recwarn):
    unit = whole(method)
    result = method.analyse(PROBLEM, np.full((2, len(unit)), 86.013), seed=3)
    name = {"sobol": "st", "morris": "mu_star", "spread": "sd"}[method.__name__.split(".")[-1]]
    assert (np.abs(getattr(result, name)) < 1e-12).all() and not recwarn.list


@each_sampled
def test_no_measures_give_empty_results(method):
    unit = whole(method)
    result = method.analyse(PROBLEM, np.empty((0, len(unit))), seed=3, unassembled=np.zeros(len(unit), bool))
    assert result.builds == len(unit)


@each_sampled
def test_independent_rows_are_rows(method):
    rows = method.independent_rows(PROBLEM, SIZE)
    assert len(np.unique(rows)) == len(rows)
    assert len(rows) == {"sobol": 2 * SIZE, "morris": 0, "spread": SIZE}[method.__name__.split(".")[-1]]
    assert rows.size == 0 or (rows.min() >= 0 and rows.max() < method.builds(PROBLEM, SIZE))


def test_methods_are_imported_only_when_used():
    code = "import sys, study.methods; sys.exit(any(m in sys.modules for m in ('numpy', 'scipy', 'SALib')))"
    assert subprocess.run([sys.executable, "-c", code], check=False).returncode == 0
