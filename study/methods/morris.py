"""Screening by elementary effects, scalar by scalar.

The trajectories are those of SALib's `sample.morris.sample` (four levels, no groups), row for row and bit
for bit; mu*, mu and sigma are its `analyze.morris` ones, taken over all measures at once. An effect is the
change over the whole width of the walk, 2 sqrt(3) sigma of that scalar's zone.
"""

import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from study.methods.blocks import into_blocks
from study.methods.problem import Problem
from study.methods.products import product
from study.methods.ranking import half_width, ranks
from study.methods.sobol import draw_counts

WALKS = True
_LEVELS = 4
_DELTA = _LEVELS / (2.0 * (_LEVELS - 1))


@dataclass(frozen=True)
class Screening:
    """Elementary effects by scalar (M, D) with 95 % bootstrap intervals of mu*; NaN where withheld.

    By source (M, G): `source_mu_star`, the root of the sum of squares of its scalars' mu*, with its interval,
    `rank` from 1 and `tied` (not told apart from the one ranked just above). Counters as in sobol.Indices.
    """

    mu: np.ndarray
    mu_star: np.ndarray
    mu_star_low: np.ndarray
    mu_star_high: np.ndarray
    sigma: np.ndarray
    source_mu_star: np.ndarray
    source_low: np.ndarray
    source_high: np.ndarray
    rank: np.ndarray
    tied: np.ndarray
    blocks: np.ndarray
    undefined_blocks: np.ndarray
    dropped_blocks: int
    unassembled: int
    builds: int
    withheld: bool
    withheld_measures: np.ndarray
    failures: "Screening | None" = None


def block(problem: Problem) -> int:
    """Builds of one trajectory."""
    return problem.n_scalars + 1


def builds(problem: Problem, size: int) -> int:
    """Builds of `size` trajectories."""
    return size * block(problem)


def draw(problem: Problem, *, size: int, seed: int, first: int, count: int) -> np.ndarray:
    """Trajectories first … first + count, unit cube (count · block, D); the same in any chunking."""
    step = np.arange(block(problem))[:, None]
    rows = np.empty((count, block(problem), problem.n_scalars))
    for index, (place, sign, start) in enumerate(_trajectories(problem.n_scalars, seed, first + count)):
        if index >= first:
            moved = np.where(place < step, 1.0, -1.0)
            rows[index - first] = start + _DELTA / 2.0 * (moved * sign + 1.0)
    return rows.reshape(-1, problem.n_scalars)


def independent_rows(problem: Problem, size: int) -> np.ndarray:
    """None: the builds of a trajectory depend on each other."""
    return np.empty(0, dtype=int)


def analyse(
    problem: Problem,
    values: np.ndarray,
    *,
    seed: int,
    resamples: int = 100,
    unassembled: np.ndarray | None = None,
) -> Screening:
    """Elementary effects of all measures from values (M, builds); NaN where a build has none.

    `unassembled` (builds,) and what is dropped or withheld: as in sobol.analyse.
    """
    blocks = into_blocks(values, block(problem), unassembled=unassembled)
    found = _empty(len(values), problem)
    directions = _directions(problem.n_scalars, seed, blocks.values.shape[1])
    for numbers, kept in blocks.alike():
        effects = elementary_effects(blocks.values[numbers][:, kept], *(array[kept] for array in directions))
        for key, array in _summary(problem, effects, seed=seed, resamples=resamples).items():
            found[key][numbers] = array
    failures = None
    if blocks.withheld:
        failed = blocks.failed.reshape(1, -1).astype(float)
        none_failed = np.zeros(failed.shape[1], dtype=bool)
        failures = analyse(problem, failed, seed=seed, resamples=resamples, unassembled=none_failed)
    return Screening(**found, **blocks.counters(), failures=failures)


def elementary_effects(values: np.ndarray, place: np.ndarray, sign: np.ndarray) -> np.ndarray:
    """Effects (M, trajectories, D) from values (M, trajectories, D + 1).

    `place` (trajectories, D): the step at which each scalar moves; `sign`: up (+1) or down (-1).
    """
    steps = np.diff(values, axis=2)
    index = np.broadcast_to(place, (len(values), *place.shape))
    return np.take_along_axis(steps, index, axis=2) * sign / _DELTA


def _summary(problem: Problem, effects: np.ndarray, *, seed: int, resamples: int) -> dict[str, np.ndarray]:
    n = effects.shape[1]
    weights = draw_counts(n, resamples, seed=seed).astype(float) / n
    drawn = product(weights, np.abs(effects))
    mu_star = np.abs(effects).mean(axis=1)
    half = half_width(drawn)
    member = problem.membership().astype(float).T
    source, source_drawn = np.sqrt(product(mu_star**2, member)), np.sqrt(product(drawn**2, member))
    source_half = half_width(source_drawn)
    rank, tied = ranks(source, source_drawn)
    return {
        "mu": effects.mean(axis=1),
        "mu_star": mu_star,
        "mu_star_low": mu_star - half,
        "mu_star_high": mu_star + half,
        "sigma": effects.std(axis=1, ddof=1),
        "source_mu_star": source,
        "source_low": source - source_half,
        "source_high": source + source_half,
        "rank": rank,
        "tied": tied,
    }


def _trajectories(
    n_scalars: int, seed: int, count: int
) -> Iterator[tuple[np.ndarray, np.ndarray, np.ndarray]]:
    """Place in the order, sign and start of each trajectory's scalars."""
    rng = np.random.default_rng(seed)
    grid = np.linspace(0.0, 1.0 - _DELTA, _LEVELS // 2)
    for _ in range(count):
        order = np.arange(n_scalars)
        rng.shuffle(order)
        sign = rng.choice([-1, 1], n_scalars)
        yield order, sign, rng.choice(grid, n_scalars)


def _directions(n_scalars: int, seed: int, count: int) -> tuple[np.ndarray, np.ndarray]:
    place, sign = np.empty((count, n_scalars), dtype=int), np.empty((count, n_scalars))
    for index, (order, up, _) in enumerate(_trajectories(n_scalars, seed, count)):
        place[index], sign[index] = order, up
    return place, sign


def _empty(n_measures: int, problem: Problem) -> dict[str, np.ndarray]:
    by_scalar, by_source = (n_measures, problem.n_scalars), (n_measures, problem.n_groups)
    names = ("mu", "mu_star", "mu_star_low", "mu_star_high", "sigma")
    found = {name: np.full(by_scalar, math.nan) for name in names}
    found |= {name: np.full(by_source, math.nan) for name in ("source_mu_star", "source_low", "source_high")}
    found["rank"] = np.zeros(by_source, dtype=int)
    found["tied"] = np.zeros(by_source, dtype=bool)
    return found
