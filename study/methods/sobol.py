"""Sobol' indices by source: scrambled sequence, A, B and their cross-overs by group.

The sample is that of SALib's `sample.sobol.sample` (groups, no second order), row for row and bit for bit;
the estimators are its `analyze.sobol` ones (first order after Saltelli et al. 2010, total after Jansen),
taken over all measures at once with the bootstrap as a product with a matrix of counts.
"""

import math
from dataclasses import dataclass

import numpy as np
from scipy.stats import qmc

from study.methods.blocks import into_blocks
from study.methods.problem import Problem
from study.methods.products import product
from study.methods.ranking import half_width, ranks

WALKS = False
_EPS = np.finfo(float).eps
_STREAM = 20_010  # keeps the bootstrap's draws apart from any other use of the study's number
_ROWS_AT_ONCE = 4096
_VALUES_AT_ONCE = 2**20


@dataclass(frozen=True)
class Indices:
    """First-order and total indices (M, G) with 95 % bootstrap intervals; NaN where withheld.

    `rank` from 1 by total index; `tied`: not told apart from the source ranked just above. `blocks` (M,)
    used; `undefined_blocks` (M,) dropped for this measure alone; `dropped_blocks` for builds that could not
    be assembled, `unassembled` of `builds`. `failures`: indices of "cannot be assembled" when `withheld`.
    """

    s1: np.ndarray
    s1_low: np.ndarray
    s1_high: np.ndarray
    st: np.ndarray
    st_low: np.ndarray
    st_high: np.ndarray
    rank: np.ndarray
    tied: np.ndarray
    blocks: np.ndarray
    undefined_blocks: np.ndarray
    dropped_blocks: int
    unassembled: int
    builds: int
    withheld: bool
    withheld_measures: np.ndarray
    failures: "Indices | None" = None


def block(problem: Problem) -> int:
    """Builds that belong together: A, one cross-over per source, B."""
    return problem.n_groups + 2


def builds(problem: Problem, size: int) -> int:
    """Builds of a base sample of `size`."""
    return size * block(problem)


def draw(problem: Problem, *, size: int, seed: int, first: int, count: int) -> np.ndarray:
    """Blocks first … first + count of the sample, unit cube (count · block, D); the same in any chunking."""
    n_scalars = problem.n_scalars
    sequence = qmc.Sobol(d=2 * n_scalars, scramble=True, seed=seed)
    if first:
        sequence.fast_forward(first)
    base = sequence.random(count) if _balanced(first, count) else _quiet_random(sequence, count)
    a, b = base[:, :n_scalars], base[:, n_scalars:]
    rows = np.empty((count, block(problem), n_scalars))
    rows[:, 0], rows[:, -1] = a, b
    rows[:, 1:-1] = np.where(problem.membership()[None], b[:, None, :], a[:, None, :])
    return rows.reshape(-1, n_scalars)


def independent_rows(problem: Problem, size: int) -> np.ndarray:
    """Rows of A and B: the builds from which means, quantiles and good shares may be taken."""
    starts = np.arange(size) * block(problem)
    return np.column_stack([starts, starts + block(problem) - 1]).ravel()


def analyse(
    problem: Problem,
    values: np.ndarray,
    *,
    seed: int,
    resamples: int = 100,
    unassembled: np.ndarray | None = None,
) -> Indices:
    """Indices of all measures from values (M, builds); NaN where a build has none.

    `unassembled` (builds,): builds that could not be assembled; when None, those without any value. Whole
    blocks with one are dropped; above 0.5 % all indices are withheld and the failures are ranked instead.
    """
    blocks = into_blocks(values, block(problem), unassembled=unassembled)
    found = _empty(len(values), problem.n_groups)
    for numbers, kept in blocks.alike():
        counts = draw_counts(int(kept.sum()), resamples, seed=seed)
        at_once = max(1, _VALUES_AT_ONCE // blocks.values[0].size)
        for start in range(0, len(numbers), at_once):
            some = numbers[start : start + at_once]
            for key, array in indices(blocks.values[some][:, kept], counts).items():
                found[key][some] = array
    failures = None
    if blocks.withheld:
        failed = blocks.failed.reshape(1, -1).astype(float)
        none_failed = np.zeros(failed.shape[1], dtype=bool)
        failures = analyse(problem, failed, seed=seed, resamples=resamples, unassembled=none_failed)
    return Indices(**found, **blocks.counters(), failures=failures)


def draw_counts(n_blocks: int, resamples: int, *, seed: int) -> np.ndarray:
    """How often each resample takes each block (R, blocks), drawn for the study's seed (0 included)."""
    return counts_of(np.random.default_rng([seed, _STREAM]), n_blocks, resamples)


def counts_of(rng: np.random.Generator, n_blocks: int, resamples: int) -> np.ndarray:
    """Counts (R, blocks) of the index draws rng.integers(n_blocks, size=(n_blocks, R))."""
    counts = np.zeros(resamples * n_blocks, dtype=np.uint16)
    offsets = np.arange(resamples) * n_blocks
    at_once = max(1, 2**22 // resamples)
    for start in range(0, n_blocks, at_once):
        taken = rng.integers(n_blocks, size=(min(at_once, n_blocks - start), resamples)) + offsets
        counts += np.bincount(taken.ravel(), minlength=counts.size).astype(np.uint16)
    return counts.reshape(resamples, n_blocks)


def indices(values: np.ndarray, counts: np.ndarray) -> dict[str, np.ndarray]:
    """Indices (M, G) and their intervals from values (M, blocks, G + 2) and resample counts (R, blocks)."""
    values = _normalised(values)
    n_blocks = values.shape[1]
    weights = np.vstack([np.ones((1, n_blocks), dtype=counts.dtype), counts])
    first, total = _estimates(values, weights)
    s1, st = first[:, 0], total[:, 0]
    s1_half, st_half = half_width(first[:, 1:]), half_width(total[:, 1:])
    rank, tied = ranks(st, total[:, 1:])
    return {
        "s1": s1,
        "s1_low": s1 - s1_half,
        "s1_high": s1 + s1_half,
        "st": st,
        "st_low": st - st_half,
        "st_high": st + st_half,
        "rank": rank,
        "tied": tied,
    }


def _normalised(values: np.ndarray) -> np.ndarray:
    """Each measure about its mean, in standard deviations; a constant one becomes zeros."""
    mean = values.mean(axis=(1, 2), keepdims=True)
    sd = values.std(axis=(1, 2), keepdims=True)
    noise = 64 * _EPS * np.abs(values).max(axis=(1, 2), keepdims=True)
    return np.where(sd > noise, (values - mean) / np.where(sd > noise, sd, 1.0), 0.0)


def _estimates(values: np.ndarray, weights: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """First-order and total indices (M, R, G) under each row of weights (R, blocks)."""
    n_measures, n_blocks, n_rows = values.shape
    sums = np.zeros((n_measures, len(weights), 2 * n_rows - 2))
    for start in range(0, n_blocks, _ROWS_AT_ONCE):
        part = values[:, start : start + _ROWS_AT_ONCE]
        sums += product(weights[:, start : start + _ROWS_AT_ONCE].astype(float), _terms(part))
    sums /= n_blocks
    variance = (sums[:, :, 1] / 2 - (sums[:, :, 0] / 2) ** 2)[:, :, None]
    known = variance > _EPS
    shares = np.where(known, sums[:, :, 2:] / np.where(known, variance, 1.0), 0.0)
    return shares[:, :, : n_rows - 2], 0.5 * shares[:, :, n_rows - 2 :]


def _terms(part: np.ndarray) -> np.ndarray:
    """Per block, what the estimators average: A + B, A² + B², B (AB - A), (A - AB)²."""
    a, b, cross = part[:, :, :1], part[:, :, -1:], part[:, :, 1:-1]
    change = cross - a
    return np.concatenate([a + b, a**2 + b**2, b * change, change**2], axis=2)


def _empty(n_measures: int, n_groups: int) -> dict[str, np.ndarray]:
    names = ("s1", "s1_low", "s1_high", "st", "st_low", "st_high")
    found = {name: np.full((n_measures, n_groups), math.nan) for name in names}
    found["rank"] = np.zeros((n_measures, n_groups), dtype=int)
    found["tied"] = np.zeros((n_measures, n_groups), dtype=bool)
    return found


def _balanced(first: int, count: int) -> bool:
    return first > 0 or count & (count - 1) == 0


def _quiet_random(sequence: qmc.Sobol, count: int) -> np.ndarray:
    """The first `count` points without the warning that they alone are not a power of two."""
    points = sequence.random(1 << (count - 1).bit_length())
    return points[:count]
