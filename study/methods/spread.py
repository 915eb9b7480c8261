"""Independent builds: distributions, shares inside limits with exact intervals, chances for cars."""

import math
from dataclasses import dataclass

import numpy as np
from scipy.stats import beta

from study.methods.blocks import unassembled_builds
from study.methods.problem import Problem

WALKS = False
_BUILDS_AT_ONCE = 65_536
QUANTILES = (0.005, 0.025, 0.05, 0.25, 0.5, 0.75, 0.95, 0.975, 0.995)


@dataclass(frozen=True)
class Summary:
    """Statistics (M,) of the builds where a measure is defined; NaN where there are fewer than two.

    `low`, `high`: least and greatest; `quantiles` (M, 9) at QUANTILES; `defined`: builds with a value;
    `correlations` (M, M) over the builds where all of the measures that have values are defined.
    """

    mean: np.ndarray
    sd: np.ndarray
    low: np.ndarray
    high: np.ndarray
    quantiles: np.ndarray
    defined: np.ndarray
    correlations: np.ndarray
    builds: int
    unassembled: int


@dataclass(frozen=True)
class GoodShare:
    """Share of all builds inside all limits with its 95 % interval; by measure `measure_…` (M,).

    `lost` (M,): share of all builds outside this measure's limits or without the value that they need.
    """

    share: float
    low: float
    high: float
    good: int
    builds: int
    measure_share: np.ndarray
    measure_low: np.ndarray
    measure_high: np.ndarray
    lost: np.ndarray


def block(problem: Problem) -> int:
    """One build."""
    return 1


def builds(problem: Problem, size: int) -> int:
    """As many as asked for."""
    return size


def draw(problem: Problem, *, size: int, seed: int, first: int, count: int) -> np.ndarray:
    """Builds first … first + count, unit cube (count, D): the same in any chunking."""
    generator = np.random.PCG64(seed)
    generator.advance(first * problem.n_scalars)
    return np.random.Generator(generator).random((count, problem.n_scalars))


def independent_rows(problem: Problem, size: int) -> np.ndarray:
    """All of them."""
    return np.arange(size)


def analyse(
    problem: Problem,
    values: np.ndarray,
    *,
    seed: int,
    resamples: int = 100,
    unassembled: np.ndarray | None = None,
) -> Summary:
    """Statistics of values (M, builds); takes the arguments of the other methods and draws nothing."""
    return summary(values, unassembled=unassembled)


def summary(values: np.ndarray, *, unassembled: np.ndarray | None = None) -> Summary:
    """Statistics of values (M, builds), NaN where a build has none."""
    failed = unassembled_builds(values) if unassembled is None else np.asarray(unassembled, dtype=bool)
    rows = [_statistics(row[np.isfinite(row) & ~failed]) for row in values]
    table = np.array(rows).reshape(len(values), 5 + len(QUANTILES))
    return Summary(
        mean=table[:, 0],
        sd=table[:, 1],
        low=table[:, 2],
        high=table[:, 3],
        defined=table[:, 4].astype(int),
        quantiles=table[:, 5:],
        correlations=_correlations(values, ~failed),
        builds=values.shape[1],
        unassembled=int(failed.sum()),
    )


def good_share(values: np.ndarray, limits: np.ndarray, bad: np.ndarray) -> GoodShare:
    """Share of builds inside `limits` (M, 2), infinite where there is none, from values (M, builds).

    `bad` (builds,): builds that count as bad whatever their values (not assembled, adjuster run out).
    Shares divide by all builds. A missing value is outside any finite limit.
    """
    limits = np.asarray(limits, dtype=float)
    bad = np.asarray(bad, dtype=bool)
    limited = np.isfinite(limits).any(axis=1)[:, None]
    inside = ((values >= limits[:, :1]) & (values <= limits[:, 1:])) | ~limited
    n = values.shape[1]
    good = int((inside.all(axis=0) & ~bad).sum())
    by_measure = (inside & ~bad).sum(axis=1)
    spans = np.array([clopper_pearson(int(k), n) for k in by_measure]).reshape(len(values), 2)
    low, high = clopper_pearson(good, n)
    return GoodShare(
        share=good / n if n else math.nan,
        low=low,
        high=high,
        good=good,
        builds=n,
        measure_share=by_measure / n if n else np.full(len(values), math.nan),
        measure_low=spans[:, 0],
        measure_high=spans[:, 1],
        lost=(~inside).mean(axis=1) if n else np.full(len(values), math.nan),
    )


def clopper_pearson(good: int, builds: int, *, confidence: float = 0.95) -> tuple[float, float]:
    """Exact interval of the share `good` of `builds` (C. J. Clopper, E. S. Pearson 1934), or NaNs."""
    if builds == 0:
        return math.nan, math.nan
    tail = (1.0 - confidence) / 2
    low = 0.0 if good == 0 else float(beta.ppf(tail, good, builds - good + 1))
    high = 1.0 if good == builds else float(beta.ppf(1.0 - tail, good + 1, builds - good))
    return low, high


def all_cars(share: float, cars: int) -> float:
    """Chance that all of `cars` are inside."""
    return share**cars


def wilks_builds(*, share: float = 0.95, confidence: float = 0.95) -> int:
    """Builds that, all inside, show the share with the confidence (S. S. Wilks 1941, first order)."""
    return math.ceil(math.log(1.0 - confidence) / math.log(share))


def _statistics(row: np.ndarray) -> list[float]:
    if len(row) < 2:
        return [math.nan] * 4 + [len(row)] + [math.nan] * len(QUANTILES)
    return [row.mean(), row.std(ddof=1), row.min(), row.max(), len(row), *np.quantile(row, QUANTILES)]


def _correlations(values: np.ndarray, kept: np.ndarray) -> np.ndarray:
    """Pearson correlations (M, M) over the `kept` builds (builds,); NaN with a constant measure or one never defined.

    Taken some builds at a time: no second copy of what may be large.
    """
    found = np.full((len(values), len(values)), math.nan)
    known = [i for i, row in enumerate(values) if np.isfinite(row[kept]).any()]
    whole = kept.copy()
    for i in known:
        whole &= np.isfinite(values[i])
    builds = np.flatnonzero(whole)
    if len(builds) < 2:
        return found
    mean = np.array([values[i][whole].mean() for i in known])
    noise = 64 * np.finfo(float).eps * np.array([np.abs(values[i][whole]).max() for i in known])
    sums = np.zeros((len(known), len(known)))
    for start in range(0, len(builds), _BUILDS_AT_ONCE):
        part = values[np.ix_(known, builds[start : start + _BUILDS_AT_ONCE])] - mean[:, None]
        sums += np.einsum("in,jn->ij", part, part)
    covariance = sums / len(builds)
    size = np.sqrt(np.diag(covariance))
    size = np.where(size > noise, size, math.nan)
    found[np.ix_(known, known)] = covariance / np.outer(size, size)
    return np.clip(found, -1.0, 1.0)
