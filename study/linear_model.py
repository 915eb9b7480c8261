"""The linear model of one stage of a study: signed effects, shares of variance, stacks, draws."""

import numpy as np

from study.methods import linear
from study.methods.problem import Problem
from study.response import TAKES, taken
from study.zone_field import ZoneField
from study.zones import Zone


def is_nonlinear(measure) -> bool:
    """Whether what the measure takes of its sweep is no linear function of it (all but the slope)."""
    return measure.over is not None and measure.take != "slope"


class LinearModel:
    """Made from one batch of central differences about the drawing.

    nominal (P,) at every position; signed (M, D): effects per mm or degree, zeros where `take` is not linear; shares
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
        stack = linear.stack(self._of_measures(self.effects), self.field, self.problem)
        self.shares, self.rss = stack.shares.copy(), stack.rss.copy()
        self.worst_low, self.worst_high = stack.worst_low, stack.worst_high
        for i, measure in enumerate(self.measures):
            if is_nonlinear(measure):
                self.shares[i], self.rss[i] = self._taken_shares(i, measure), np.nan

    def nominal_of(self, i) -> float:
        """The drawing's value of measure i."""
        return float(taken(self.measures[i], self.nominal[self.work.position_slices[i]][:, None])[0])

    def draws(self, count) -> np.ndarray:
        """Values (M, count) of independent builds of the linear model."""
        drawn = linear.draws(
            self.nominal, np.nan_to_num(self.effects), self.field, seed=self.work.study.seed, count=count
        )
        slices = self.work.position_slices
        return np.stack([taken(m, drawn[rows]) for m, rows in zip(self.measures, slices, strict=True)])

    def _of_measures(self, effects):
        out = np.zeros((len(self.measures), effects.shape[1]))
        for i, (measure, rows) in enumerate(zip(self.measures, self.work.position_slices, strict=True)):
            if not is_nonlinear(measure):
                out[i] = np.nan_to_num(taken(measure, effects[rows]))
        return out

    def _taken_shares(self, i, measure):
        rows, x = self.work.position_slices[i], np.array(measure.sweep)
        return linear.taken_shares(
            self.nominal[rows], np.nan_to_num(self.effects[rows]), self.field, self.problem,
            lambda v: TAKES[measure.take](x, v), seed=self.work.study.seed,
        )  # fmt: skip

    def _with_steps(self, effects):
        """Zones, effects and groups; a stepped adjuster adds ±step/2, in degrees, as one more scalar of its band's source."""
        model = self.work.model
        added = self._step_bands() if self.stage == "after" else []
        if not added:
            return model.field, effects, model.problem
        rows = [row for row, _ in added]
        group_of = np.concatenate((model.problem.group_of, model.problem.group_of[rows]))
        field = ZoneField(model.field.zones + tuple(Zone("length", (half,)) for _, half in added))
        problem = Problem(group_of, len(model.sources), model.problem.names)
        return field, np.concatenate((effects, effects[:, rows]), axis=1), problem

    def _step_bands(self):
        """(row of the band, half a step in degrees) of every stepped adjuster, the others holding their own angles."""
        response, found = self.work.stepless(self.stage), []
        for name, hand in response.hands.items():
            if not hand.bench.by:
                continue
            apart = np.abs(1.0 / np.diag(np.linalg.inv(response.starts[name][1])))
            for target, step, gain in zip(hand.bench.targets, hand.bench.step, apart, strict=True):
                if step:
                    found.append((hand.bands[name][target], gain * step / 2.0))
        return found
