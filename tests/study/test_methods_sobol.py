import numpy as np
import pytest
from SALib.analyze.sobol import analyze
from SALib.sample.sobol import sample

from study.methods import sobol
from study.methods.ranking import ranks
from tests.study.method_models import (
    REFERENCE,
    g_function,
    ishigami,
    outside_problem,
    scalars,
    several,
    sourced,
)


def drawn(problem, size, seed=5):
    return sobol.draw(problem, size=size, seed=seed, first=0, count=size)


@pytest.mark.parametrize("seed", [0, 1, 2024])
@pytest.mark.parametrize(
    "problem", [scalars(3), sourced(3, 1, 2), sourced(5, 1)], ids=["scalars", "mixed", "two"]
)
def test_sample_equals_the_library_bit_for_bit(problem, seed):
    expected = sample(outside_problem(problem), 64, calc_second_order=False, seed=seed)
    assert np.array_equal(drawn(problem, 64, seed), expected)


def test_indices_and_intervals_equal_the_library_on_the_same_draws():
    problem = sourced(3, 1, 2, 1)
    values = several(drawn(problem, 256))
    counts = sobol.counts_of(np.random.default_rng(9), 256, 100)
    found = sobol.indices(values.reshape(len(values), 256, -1), counts)
    for number, row in enumerate(values):
        expected = analyze(outside_problem(problem), row, calc_second_order=False, num_resamples=100, seed=9)
        for key, name in (("S1", "s1"), ("ST", "st")):
            np.testing.assert_allclose(found[name][number], expected[key], rtol=0, atol=1e-12)
            half = (found[f"{name}_high"] - found[f"{name}_low"])[number] / 2
            np.testing.assert_allclose(half, expected[f"{key}_conf"], rtol=0, atol=1e-12)


def test_counts_do_not_depend_on_how_many_draws_are_made_at_once():
    n_blocks, resamples = 2**17 + 3, 40
    counts = sobol.counts_of(np.random.default_rng(2), n_blocks, resamples)
    taken = np.random.default_rng(2).integers(n_blocks, size=(n_blocks, resamples))
    for column in (0, resamples - 1):
        assert np.array_equal(counts[column], np.bincount(taken[:, column], minlength=n_blocks))


@pytest.mark.parametrize("name", ["ishigami", "ishigami_weak"])
def test_ishigami(name):
    known = REFERENCE[name]
    problem = scalars(3)
    unit = drawn(problem, 8192)
    values = ishigami(unit, known["a"], known["b"])
    found = sobol.analyse(problem, values[None], seed=5)
    np.testing.assert_allclose(found.s1[0], known["s1"], atol=0.01)
    np.testing.assert_allclose(found.st[0], known["st"], atol=0.01)
    ab = values[sobol.independent_rows(problem, 8192)]
    assert ab.var() == pytest.approx(known["variance"], rel=0.01)
    assert list(found.rank[0]) == list(np.argsort(np.argsort(-np.array(known["st"]))) + 1)


def test_g_function():
    known = REFERENCE["g_function"]
    problem = scalars(8)
    values = g_function(drawn(problem, 8192), np.array(known["a"]))
    found = sobol.analyse(problem, values[None], seed=5)
    np.testing.assert_allclose(found.s1[0], known["s1"], atol=0.01)
    np.testing.assert_allclose(found.st[0], known["st"], atol=0.01)
    assert values[sobol.independent_rows(problem, 8192)].var() == pytest.approx(known["variance"], rel=0.02)
    order = np.argsort(found.rank[0])
    assert list(order[:4]) == [0, 1, 2, 3]
    assert not found.tied[0, :4].any() and found.tied[0, order[5:]].any()


def test_groups_count_what_their_scalars_do_together():
    known = REFERENCE["groups"]
    grouped, split = sourced(2, 1), scalars(3)

    def model(unit):
        x = 2.0 * unit - 1.0
        return (x[:, 0] * x[:, 1] + 0.1 * x[:, 2])[None]

    whole = sobol.analyse(grouped, model(drawn(grouped, 4096)), seed=5)
    assert whole.s1[0, 0] == pytest.approx(known["group_s1"], abs=0.01)
    assert whole.st[0, 0] == pytest.approx(known["group_s1"], abs=0.01)
    apart = sobol.analyse(split, model(drawn(split, 4096)), seed=5)
    np.testing.assert_allclose(apart.s1[0, :2], 0.0, atol=0.02)
    assert apart.st[0, :2].sum() == pytest.approx(known["scalars_st_sum"], abs=0.02)


def test_intervals_hold_the_exact_indices_about_as_often_as_they_say():
    known = REFERENCE["ishigami"]
    problem = scalars(3)
    held = []
    for seed in range(40):
        values = ishigami(drawn(problem, 256, seed), known["a"], known["b"])
        found = sobol.analyse(problem, values[None], seed=seed)
        held.append((found.st_low[0] <= known["st"]) & (found.st_high[0] >= known["st"]))
    assert np.mean(held) > 0.9


def test_a_single_source_has_all_the_variance():
    problem = sourced(3)
    found = sobol.analyse(problem, drawn(problem, 512).sum(axis=1)[None], seed=5)
    assert found.s1[0, 0] == pytest.approx(1.0, abs=0.02) and found.st[0, 0] == pytest.approx(1.0, abs=0.02)
    assert found.rank.tolist() == [[1]] and found.tied.tolist() == [[False]]


def test_equal_sources_are_tied_and_unequal_ones_are_not():
    problem = scalars(3)
    unit = drawn(problem, 512)
    found = sobol.analyse(problem, (unit @ np.array([1.0, 1.0, 3.0]))[None], seed=5)
    assert found.rank[0, 2] == 1 and sorted(found.rank[0, :2]) == [2, 3]
    last = found.rank[0].argmax()
    assert list(np.flatnonzero(found.tied[0])) == [last]


def test_neighbours_are_told_apart_by_their_paired_difference():
    rng = np.random.default_rng(8)
    common, own = rng.normal(size=(1, 200, 1)), rng.normal(size=(1, 200, 1))
    values = np.array([[0.9, 1.0]])
    together = values[:, None] + 0.5 * common * [1.0, 1.0] + 0.01 * own * [0.0, 1.0]
    rank, tied = ranks(values, together)
    assert rank.tolist() == [[2, 1]] and not tied.any()
    against = values[:, None] + 0.04 * common * [1.0, -1.0]
    assert ranks(values, against)[1].tolist() == [[True, False]]


def test_blocks_of_builds_that_could_not_be_assembled_are_dropped_and_counted():
    problem = sourced(2, 1)
    values = several(drawn(problem, 1024))
    broken = values.copy()
    broken[:, [4, 5, 402]] = np.nan  # two in one block of four
    found = sobol.analyse(problem, broken, seed=5)
    assert (found.dropped_blocks, found.unassembled, found.builds) == (2, 3, 4096)
    assert not found.withheld and found.failures is None and (found.blocks == 1022).all()
    kept = np.delete(values.reshape(6, 1024, 4), [1, 100], axis=1).reshape(6, -1)
    assert np.array_equal(found.st, sobol.analyse(problem, kept, seed=5).st)


def test_a_measure_undefined_in_some_builds_loses_its_own_blocks_only():
    problem = sourced(2, 1)
    values = several(drawn(problem, 1024))
    broken = values.copy()
    broken[1, 4] = np.nan
    broken[2] = np.nan
    found = sobol.analyse(problem, broken, seed=5)
    assert list(found.undefined_blocks) == [0, 1, 1024, 0, 0, 0] and found.dropped_blocks == 0
    assert list(found.withheld_measures) == [False, False, True, False, False, False]
    assert np.isnan(found.st[2]).all() and np.isfinite(found.st[[0, 1, 3, 4, 5]]).all()
    whole = sobol.analyse(problem, values, seed=5)
    assert np.array_equal(found.st[0], whole.st[0]) and not found.withheld


def test_too_many_failures_are_ranked_instead():
    problem = scalars(3)
    unit = drawn(problem, 512)
    values = several(unit)
    values[:, unit[:, 1] > 0.9] = np.nan
    found = sobol.analyse(problem, values, seed=5)
    assert found.withheld and np.isnan(found.st).all() and found.unassembled == (unit[:, 1] > 0.9).sum()
    assert found.failures.rank[0, 1] == 1 and found.failures.st[0, 1] == pytest.approx(1.0, abs=0.05)
    assert found.failures.st.shape == (1, 3) and not found.failures.withheld
    assert not found.withheld_measures.any()  # no measure is to blame


def test_failures_can_be_named_apart_from_values():
    problem = scalars(2)
    values = several(drawn(problem, 256))
    failed = np.zeros(values.shape[1], dtype=bool)
    failed[17] = True
    found = sobol.analyse(problem, values, seed=5, unassembled=failed)
    assert (found.dropped_blocks, found.unassembled) == (1, 1)
    assert (found.blocks == 255).all() and not found.undefined_blocks.any()


def test_all_builds_without_value_give_no_indices():
    problem = scalars(2)
    found = sobol.analyse(problem, np.full((2, 4 * 16), np.nan), seed=5)
    assert found.withheld and np.isnan(found.st).all() and found.dropped_blocks == 16
