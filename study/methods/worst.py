"""The worst builds inside the zones: to the zones' extremes along the gradient, then look again."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from study.methods import linear, spread
from study.methods.problem import Problem
from study.zone_field import ZoneField

Evaluate = Callable[[np.ndarray], np.ndarray]
_AT_ONCE = 4096
_SHORTER = (1.0, 0.5, 0.2)
_SIGNS = np.array([-1.0, 1.0])


@dataclass(frozen=True)
class Worst:
    """Least and greatest value found of each measure, (M, 2), and the errors that give them, (M, 2, D).

    `nominal` (M,); `builds` really evaluated and how many of them were `unassembled`. NaN values where a
    measure has none; a measure that nothing moves keeps the middle of the zones.
    """

    values: np.ndarray
    errors: np.ndarray
    nominal: np.ndarray
    builds: int
    unassembled: int


class _Counted:
    """Evaluates in batches of a fixed size and counts."""

    def __init__(self, evaluate: Evaluate) -> None:
        self.evaluate, self.builds, self.unassembled = evaluate, 0, 0

    def __call__(self, errors: np.ndarray) -> np.ndarray:
        parts = [self.evaluate(errors[:, k : k + _AT_ONCE]) for k in range(0, errors.shape[1], _AT_ONCE)]
        values = np.concatenate(parts, axis=1)
        self.builds += values.shape[1]
        self.unassembled += int(np.isnan(values).all(axis=0).sum())
        return values


def search(evaluate: Evaluate, field: ZoneField, *, seed: int, starts: int = 3, rounds: int = 6) -> Worst:
    """Worst builds of all measures; `evaluate` takes errors (D, n) to values (M, n), NaN where there is none.

    From the middle of the zones and from `starts` drawn builds each measure goes to the extreme of every zone
    along its gradient (central differences), both ways, or part of the way where that is further, at most
    `rounds` times. Zones are convex, so every build stays inside. The gradients of many points are one batch.
    """
    counted = _Counted(evaluate)
    points = _starts(field, seed=seed, starts=starts)
    values = counted(np.hstack([np.zeros((field.n_scalars, 1)), points]))
    nominal, values = values[:, 0], values[:, 1:]
    n_measures, n_starts = values.shape
    # one path for each start, measure and direction
    at = np.repeat(points, 2 * n_measures, axis=1)
    measure = np.tile(np.repeat(np.arange(n_measures), 2), n_starts)
    sign = np.tile(_SIGNS, n_measures * n_starts)
    score = sign * values[measure, np.repeat(np.arange(n_starts), 2 * n_measures)]
    active = np.isfinite(score)
    for _ in range(rounds):
        if not active.any():
            break
        active[active] = _advance(counted, field, at, score, measure, sign, np.flatnonzero(active))
    return _best(nominal, at, score, measure, sign, counted)


def confirm(evaluate: Evaluate, field: ZoneField, found: Worst, *, seed: int, near: int = 128, drawn: int = 4096) -> Worst:
    """The worst of real builds: those that a search on a smooth stand-in found, others near them, and drawn ones.

    Where adjusters go by steps a build's values jump, so no gradient leads to the worst of them. `near` builds about each
    found one, every zone's error on the last fifth of its way from the middle, pass through all phases of the steps.
    """
    counted = _Counted(evaluate)
    ends = found.errors.reshape(-1, field.n_scalars).T
    way = np.empty((field.n_scalars, near))
    for rows, part in zip(field.rows, np.random.default_rng([seed, 5]).uniform(0.8, 1.0, (len(field.rows), near)), strict=True):
        way[rows] = part
    middle = field.extreme(np.zeros((field.n_scalars, 1)))
    close = (middle[:, :, None] + (ends - middle)[:, :, None] * way[:, None]).reshape(field.n_scalars, -1)
    problem = Problem(np.zeros(field.n_scalars, dtype=int), 1)
    others = field.to_errors(spread.draw(problem, size=drawn, seed=seed, first=0, count=drawn).T)
    errors = np.hstack([close, others])
    values = counted(errors)
    picks = [(int(np.nanargmin(row)), int(np.nanargmax(row))) if np.isfinite(row).any() else (0, 0) for row in values]
    best = np.array([[values[m, k] for k in pick] for m, pick in enumerate(picks)]).reshape(len(values), 2)
    where = np.array([[errors[:, k] for k in pick] for pick in picks]).reshape(len(values), 2, field.n_scalars)
    nominal = counted(np.zeros((field.n_scalars, 1)))[:, 0]
    return Worst(best, where, nominal, found.builds + counted.builds, found.unassembled + counted.unassembled)


def _starts(field: ZoneField, *, seed: int, starts: int) -> np.ndarray:
    """The middle of the zones and their extremes in `starts` drawn directions (D, 1 + starts)."""
    problem = Problem(np.zeros(field.n_scalars, dtype=int), 1)
    unit = spread.draw(problem, size=starts, seed=seed, first=0, count=starts).T
    return np.hstack([field.extreme(np.zeros((field.n_scalars, 1))), field.extreme(2.0 * unit - 1.0)])


def _advance(
    counted: _Counted,
    field: ZoneField,
    at: np.ndarray,
    score: np.ndarray,
    measure: np.ndarray,
    sign: np.ndarray,
    paths: np.ndarray,
) -> np.ndarray:
    """Moves the paths of these numbers once, in place; (paths,) whether each got further."""
    places, inverse = np.unique(at[:, paths], axis=1, return_inverse=True)
    gradients = _gradients(counted, field, places)[measure[paths], :, inverse.ravel()].T
    goal = field.extreme(sign[paths] * gradients)
    here = at[:, paths]
    tried = np.stack([here + share * (goal - here) for share in _SHORTER])
    found = counted(np.hstack(list(tried)))
    found = found.reshape(len(found), len(_SHORTER), len(paths))
    reached = sign[paths] * found[measure[paths], :, np.arange(len(paths))].T
    reached = np.where(np.isfinite(reached), reached, -np.inf)
    chosen = reached.argmax(axis=0)
    best = reached[chosen, np.arange(len(paths))]
    further = best > score[paths] + 1e-9 * (1.0 + np.abs(score[paths]))
    moved = paths[further]
    at[:, moved] = tried[chosen, :, np.arange(len(paths))].T[:, further]
    score[moved] = best[further]
    return further


def _gradients(counted: _Counted, field: ZoneField, places: np.ndarray) -> np.ndarray:
    """Gradients (M, D, places) by central differences; 0 where a neighbour has no value."""
    errors, h = linear.steps(field.sd())
    around = errors[:, None, 1:]
    n_scalars, n_places = places.shape
    at_once = max(1, _AT_ONCE // (2 * n_scalars))
    found = []
    for k in range(0, n_places, at_once):
        near = places[:, k : k + at_once, None] + around
        values = counted(near.reshape(n_scalars, -1)).reshape(-1, near.shape[1], 2 * n_scalars)
        found.append((values[:, :, ::2] - values[:, :, 1::2]) / (2.0 * h))
    gradients = np.concatenate(found, axis=1).transpose(0, 2, 1)
    return np.where(np.isfinite(gradients), gradients, 0.0)


def _best(
    nominal: np.ndarray,
    at: np.ndarray,
    score: np.ndarray,
    measure: np.ndarray,
    sign: np.ndarray,
    counted: _Counted,
) -> Worst:
    values = np.full((len(nominal), 2), np.nan)
    errors = np.zeros((len(nominal), 2, len(at)))
    for m in range(len(nominal)):
        for d, direction in enumerate(_SIGNS):
            own = np.flatnonzero((measure == m) & (sign == direction) & np.isfinite(score))
            if len(own):
                best = own[np.argmax(score[own])]
                values[m, d], errors[m, d] = direction * score[best], at[:, best]
    return Worst(values, errors, nominal, counted.builds, counted.unassembled)
