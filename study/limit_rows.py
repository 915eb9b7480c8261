"""Limits as rows of a linear programme on variances: gradient of what is limited, and its room from mean to limit."""

from dataclasses import dataclass

import numpy as np

from study import zones
from study.linear_model import LinearModel
from study.methods import linear, spread
from study.methods.problem import Problem

MEAN_BUILDS = 1024


@dataclass(frozen=True)
class LimitRows:
    """gradients (R, D) and room (R,) of every limit; sides: how many limits were asked; added (R,): variance of shim steps.

    A point measure or a slope gives one row a limit. The range of a sweep stays below its limit where every pair of
    positions does: a row for each ordered pair. A maximum, minimum or greatest size gives a row for each position.
    """

    gradients: np.ndarray
    room: np.ndarray
    added: np.ndarray
    sides: int
    model: object

    @classmethod
    def of(cls, work) -> "LimitRows":
        """From a batch of central differences and the mean of independent builds as drawn, at the last stage."""
        response = work.stepless(work.stages[-1])
        errors, _ = linear.steps(work.model.field.sd())
        lines = LinearModel(work, work.stages[-1], response.evaluate(errors).positions)
        scalars = Problem(np.zeros(work.model.scalars, int), 1)
        unit = spread.draw(scalars, size=MEAN_BUILDS, seed=work.study.seed + 4, first=0, count=MEAN_BUILDS)
        mean = np.nanmean(response.evaluate(work.model.field.to_errors(unit.T)).positions, axis=1)
        gradients, room, sides = [], [], 0
        effects = np.nan_to_num(lines.effects)
        for measure, rows in zip(work.study.measures, work.position_slices, strict=True):
            if measure.limits:
                weights, ends = _rows_of(measure, mean[rows])
                gradients.append(weights @ effects[rows])
                room.append(ends)
                sides += int(np.isfinite(measure.limits).sum())
        d = work.model.scalars
        all_gradients = np.concatenate(gradients) if gradients else np.zeros((0, effects.shape[1]))
        added = np.zeros(len(all_gradients))
        for zone, rows in zip(lines.field.zones, lines.field.rows, strict=True):
            if rows.start >= d:
                added += _quadratic(all_gradients[:, rows], zone)
        return cls(all_gradients[:, :d], np.concatenate(room) if room else np.zeros(0), added, sides, work.model)

    def variance(self, source: int, zone: zones.Zone) -> np.ndarray:
        """Variance (R,) that a source gives every row when made in this zone."""
        columns = self.model.sources[source].columns
        return sum(_quadratic(self.gradients[:, list(rows)], zone) for rows in columns)

    def fixed(self, chosen) -> np.ndarray:
        """Variance (R,) of all sources that have no choice, shim steps included."""
        parts = [
            self.variance(number, source.zone) for number, source in enumerate(self.model.sources) if number not in chosen
        ]  # fmt: skip
        return self.added + sum(parts, np.zeros(len(self.room)))


def _quadratic(gradients, zone):
    return np.einsum("rk,kl,rl->r", gradients, zones.covariance(zone), gradients)


def _rows_of(measure, mean):
    """(weights (R, p) over the positions, room (R,)) of one measure's finite limits."""
    low, high = measure.limits
    eye, size = np.eye(len(mean)), len(mean)
    if measure.take == "range":
        pairs = [(i, j) for i in range(size) for j in range(size) if i != j]
        weights = np.array([eye[i] - eye[j] for i, j in pairs])
        return weights, high - weights @ mean
    if measure.take == "max-abs":
        return np.concatenate((eye, -eye)), np.concatenate((high - mean, high + mean))
    if measure.take in ("max", "min"):
        end = high if measure.take == "max" else low
        sign = 1.0 if measure.take == "max" else -1.0
        return (sign * eye, sign * (end - mean)) if np.isfinite(end) else (np.zeros((0, size)), np.zeros(0))
    if measure.take == "slope":
        x = np.array(measure.sweep) - np.mean(measure.sweep)
        eye = (x / (x @ x))[None]
        mean = eye @ mean
    found = [(eye, high - mean)] if np.isfinite(high) else []
    found += [(-eye, mean - low)] if np.isfinite(low) else []
    return np.concatenate([w for w, _ in found]), np.concatenate([r for _, r in found])
