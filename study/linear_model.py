"""The linear model of one stage of a study: signed effects, shares of variance, stacks, draws."""

import numpy as np

from study.methods import linear
from study.response import TAKES, taken


def is_nonlinear(measure) -> bool:
    """Whether what the measure takes of its sweep is no linear function of it (all but the slope)."""
    return measure.over is not None and measure.take != "slope"


class LinearModel:
    """Made from one batch of central differences about the drawing.

    nominal (P,) at every position; signed (M, D): effects per mm or degree, zeros where `take` is not linear, NaN where a
    measure or a build of the batch has no value; shares
    (M, G) of variance by source; rss (M,): standard deviation, NaN where not linear; worst_low, worst_high (M,): offsets.
    """

    def __init__(self, work, stage, values):
        self.work, self.stage = work, stage
        self.measures = work.study.measures
        _, h = linear.steps(work.model.field.sd())
        effects = linear.effects(values, h)
        self.nominal = values[:, 0]
        self.signed = self._of_measures(effects)
        self.field, self.effects, self.problem = self._with_steps(effects)
        per_measure = self._of_measures(self.effects)
        stack = linear.stack(np.nan_to_num(per_measure), self.field, self.problem)
        lost = np.where(np.isfinite(per_measure).all(axis=1), 0.0, np.nan)
        self.shares, self.rss = stack.shares + lost[:, None], stack.rss + lost
        self.worst_low, self.worst_high = stack.worst_low + lost, stack.worst_high + lost
        for i, measure in enumerate(self.measures):
            if is_nonlinear(measure):
                self.shares[i], self.rss[i] = self._taken_shares(i, measure), np.nan

    def nominal_of(self, i) -> float:
        """The drawing's value of measure i."""
        return float(taken(self.measures[i], self.nominal[self.work.position_slices[i]][:, None])[0])

    def draws(self, count) -> np.ndarray:
        """Values (M, count) of independent builds of the linear model."""
        drawn = linear.draws(
            self.nominal, self.effects, self.field, seed=self.work.study.seed, count=count
        )
        slices = self.work.position_slices
        return np.stack([taken(m, drawn[rows]) for m, rows in zip(self.measures, slices, strict=True)])

    def _of_measures(self, effects):
        out = np.zeros((len(self.measures), effects.shape[1]))
        for i, (measure, rows) in enumerate(zip(self.measures, self.work.position_slices, strict=True)):
            if not is_nonlinear(measure):
                out[i] = taken(measure, effects[rows])
        return out

    def _taken_shares(self, i, measure):
        rows, x = self.work.position_slices[i], np.array(measure.sweep)
        if not np.isfinite(self.effects[rows]).all():
            return np.nan
        return linear.taken_shares(
            self.nominal[rows], np.nan_to_num(self.effects[rows]), self.field, self.problem,
            lambda v: TAKES[measure.take](x, v), seed=self.work.study.seed,
        )  # fmt: skip

    def _with_steps(self, effects):
        """Field, effects and problem with what stepped adjusters leave, at the stage that has them."""
        if self.stage != "after":
            return self.work.model.field, effects, self.work.model.problem
        smooth = self.work.smooth
        return smooth.field, smooth.effects(effects), smooth.problem
