"""A study without the jumps of stepped adjusters: they are set exactly, and what a step leaves is drawn instead.

What is left after the nearest step depends on every error that moves the angle, in a saw-tooth: shares of variance by
source would then book the workshop's rounding on pivots that have no part in it. Here the residual of every stepped
adjuster, uniform over ± half a step, is one more scalar of the source that tells how far off the workshop leaves that
angle. Sobol' and Morris draw so; spread, the worst build and verdicts are taken with the real steps.
"""

from dataclasses import dataclass

import numpy as np

from study.methods.problem import Problem
from study.zone_field import ZoneField
from study.zones import Zone


@dataclass(frozen=True)
class Residual:
    """What one stepped adjuster leaves: half a step (mm), its source's number, and degrees per mm (S,) by row of the bands."""

    half_mm: float
    source: int
    rows: tuple[int, ...]
    moves: np.ndarray


class Smooth:
    """field and problem: the study's scalars (D) and after them one for each residual; evaluate takes errors of all."""

    def __init__(self, model, response):
        self.model, self.response = model, response
        self.residuals = [r for name, hand in response.hands.items() for r in self._of_hand(name, hand)]
        self.field = ZoneField(model.field.zones + tuple(Zone("length", (r.half_mm,)) for r in self.residuals))
        group_of = np.concatenate((model.problem.group_of, [r.source for r in self.residuals])).astype(int)
        self.problem = Problem(group_of, model.problem.n_groups, model.problem.names)

    def _of_hand(self, name, hand):
        stepped = np.flatnonzero(hand.bench.step)
        shared = name != "left" and hand.bands[name] == hand.bands["left"]
        if not len(stepped) or shared:
            return []
        rows = tuple(hand.bands[name][hand.bench.targets[k]] for k in stepped)
        apart = step_moves(self.response.starts[name][1], stepped)
        groups = self.model.problem.group_of
        return [
            Residual(float(hand.bench.step[k]) / 2.0, int(groups[rows[j]]), rows, apart[:, j]) for j, k in enumerate(stepped)
        ]

    def own_errors(self, errors) -> np.ndarray:
        """Errors (D, N) of the study's own scalars with the residuals moved into their bands."""
        d = self.model.scalars
        own = errors[:d].copy()
        for left, residual in zip(errors[d:], self.residuals, strict=True):
            own[list(residual.rows)] += residual.moves[:, None] * left
        return own

    def evaluate(self, errors):
        """Values of builds with errors (D + residuals, N)."""
        return self.response.evaluate(self.own_errors(errors))

    def effects(self, effects) -> np.ndarray:
        """Effects (P, D + residuals) of all scalars from those of the study's own (P, D)."""
        more = [effects[:, list(r.rows)] @ r.moves for r in self.residuals]
        return np.concatenate((effects, np.array(more).reshape(len(more), len(effects)).T), axis=1)


def step_moves(gains, stepped) -> np.ndarray:
    """M (S, S): degrees of the stepped angles per mm of the stepped settings, the other adjusters set again.

    gains G (A, A): degrees per mm; stepped: their numbers. M = inv((G⁻¹)_SS).
    """
    return np.linalg.inv(np.linalg.inv(gains)[np.ix_(stepped, stepped)])
