"""The linear model about the drawing: signed effects, shares of variance and stacks."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from study.methods import spread
from study.methods.problem import Problem
from study.methods.products import product
from study.zone_field import ZoneField

_STEP_SHARE = 0.1
_LEAST_STEP = 1e-4
_AT_ONCE = 8192


@dataclass(frozen=True)
class Stack:
    """What the zones add up to at each position (P): offsets are from the drawing's value, in its unit.

    `shares` (P, G) of the variance by source, adding to 1 (0 where nothing varies); `rss`: standard
    deviation, the root of the sum of g'Cg; `mean`: offset of the mean; `worst_low`, `worst_high`: the sum of
    the zones' extremes.
    """

    shares: np.ndarray
    rss: np.ndarray
    mean: np.ndarray
    worst_low: np.ndarray
    worst_high: np.ndarray


def steps(sd: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Errors (D, 1 + 2D) of one batch, the drawing and then ±h of each scalar in turn, and h (D,)."""
    sd = np.asarray(sd, dtype=float)
    h = np.maximum(_STEP_SHARE * sd, _LEAST_STEP)
    errors = np.zeros((len(sd), 1 + 2 * len(sd)))
    errors[:, 1::2], errors[:, 2::2] = np.diag(h), -np.diag(h)
    return errors, h


def effects(values: np.ndarray, h: np.ndarray) -> np.ndarray:
    """Signed effects (P, D) per mm or degree of each scalar, from values (P, 1 + 2D) of `steps`."""
    return (values[:, 1::2] - values[:, 2::2]) / (2.0 * h)


def stack(effects: np.ndarray, field: ZoneField, problem: Problem) -> Stack:
    """Stack of the effects (P, D) over the zones."""
    gradients = effects.T
    by_zone = field.quadratic(gradients)
    by_source = np.zeros((problem.n_groups, len(effects)))
    np.add.at(by_source, [int(problem.group_of[rows.start]) for rows in field.rows], by_zone)
    total = by_source.sum(axis=0)
    return Stack(
        shares=(by_source / np.where(total > 0.0, total, 1.0)).T,
        rss=np.sqrt(total),
        mean=effects @ field.mean(),
        worst_low=-field.support(-gradients).sum(axis=0),
        worst_high=field.support(gradients).sum(axis=0),
    )


def draws(nominal: np.ndarray, effects: np.ndarray, field: ZoneField, *, seed: int, count: int) -> np.ndarray:
    """Values (P, count) of the linear model in independent builds, from nominal (P,) and effects (P, D)."""
    values = np.empty((len(nominal), count))
    for start in range(0, count, _AT_ONCE):
        errors = _errors(field, seed=seed, first=start, count=min(_AT_ONCE, count - start))
        values[:, start : start + _AT_ONCE] = nominal[:, None] + product(effects, errors)
    return values


def taken_shares(
    nominal: np.ndarray,
    effects: np.ndarray,
    field: ZoneField,
    problem: Problem,
    take: Callable[[np.ndarray], np.ndarray],
    *,
    seed: int,
    count: int = 4096,
) -> np.ndarray:
    """Shares (G,) by source of the variance of what `take` takes, (P, N) to (N,), of the linear model.

    A range or a greatest value of a linear model is not linear, so its variance does not split into sums:
    each source's scalars in turn are drawn anew, the others frozen, and half the mean square of the change
    (the total index after Jansen) is taken, divided by the sum over the sources. For a linear `take` (slope)
    this tends to the exact shares that `stack` gives.
    """
    a = _errors(field, seed=seed, first=0, count=count)
    b = _errors(field, seed=seed, first=count, count=count)
    values = nominal[:, None] + product(effects, a)
    taken = take(values)
    parts = []
    for member in problem.membership():
        changed = take(values + product(effects[:, member], b[member] - a[member]))
        parts.append(0.5 * np.mean((changed - taken) ** 2))
    parts = np.array(parts)
    total = parts.sum()
    return parts / total if total > 0.0 else np.zeros(problem.n_groups)


def _errors(field: ZoneField, *, seed: int, first: int, count: int) -> np.ndarray:
    problem = Problem(np.zeros(field.n_scalars, dtype=int), 1)
    return field.to_errors(spread.draw(problem, size=first + count, seed=seed, first=first, count=count).T)
