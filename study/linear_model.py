"""The linear model of one stage of a study: signed effects, shares of variance, stacks, draws."""

import numpy as np

from study.linear_steps import step_moves
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
        """Zones, effects and groups; every stepped adjuster adds ±half a step as one more scalar of its band's source."""
        model = self.work.model
        added = self._steps(effects) if self.stage == "after" else []
        if not added:
            return model.field, effects, model.problem
        groups, halves, columns = zip(*added, strict=True)
        field = ZoneField(model.field.zones + tuple(Zone("length", (half,)) for half in halves))
        problem = Problem(np.concatenate((model.problem.group_of, groups)), len(model.sources), model.problem.names)
        return field, np.concatenate((effects, np.stack(columns, axis=1)), axis=1), problem

    def _steps(self, effects):
        """(source, half a step in mm, effect (P,) per mm) of every stepped adjuster.

        A setting that is off by δ leaves the stepped angles off by M δ, M = inv((G⁻¹)_SS) with G the gains and S the
        stepped ones, since the stepless adjusters are set again; what follows from an angle is known from its band.
        """
        response, found = self.work.stepless(self.stage), []
        for name, hand in response.hands.items():
            stepped = np.flatnonzero(hand.bench.step)
            shared = name != "left" and hand.bands[name] == hand.bands["left"]
            if not len(stepped) or shared:
                continue
            rows = [hand.bands[name][hand.bench.targets[k]] for k in stepped]
            apart = step_moves(response.starts[name][1], stepped)
            for j, k in enumerate(stepped):
                column = effects[:, rows] @ apart[:, j]
                found.append((self.work.model.problem.group_of[rows[j]], hand.bench.step[k] / 2.0, column))
        return found
