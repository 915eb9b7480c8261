"""Curves along bump, roll or rack: the nominal, and the band of the builds of a study.

The builds are independent draws of the study's own errors, put through its alignment; the same study gives the same
builds along every sweep.
"""

import math

import numpy as np

from study.measures import KEYS
from study.methods import spread
from study.methods.problem import Problem
from study.response import Values
from study.study_measures import Measure

QUANTILES = {"q05": 0.05, "q25": 0.25, "q50": 0.5, "q75": 0.75, "q95": 0.95}


def swept(key: str, *, side: str, over: str, positions, held=None) -> Measure:
    """A measure asked for at every position of `over`; `held`: the other inputs by name (bump, roll, rack)."""
    at = {"bump": 0.0, "roll": 0.0, "rack": 0.0} | (held or {}) | {over: 0.0}
    sweep = tuple(map(float, positions))
    return Measure(f"{over}:{key}", key, side, at["bump"], at["roll"], at["rack"], over, sweep, "range", None)


def builds_along(response, *, seed: int, count: int) -> Values:
    """The nominal and `count` builds of a study's car (a Response asked for swept measures); the nominal comes first."""
    scalars = response.model.scalars
    unit = spread.draw(Problem(np.zeros(scalars, int), 1), size=count, seed=seed + 1, first=0, count=count)
    errors = np.concatenate((np.zeros((scalars, 1)), response.model.field.to_errors(unit.T)), axis=1)
    return response.evaluate(errors)


def curve_rows(measures, positions, *, stage: str, solid: bool) -> list[dict]:
    """Rows of a result table `curves` from values (P, 1 + N) of swept measures, NaN where a build has none."""
    rows, at = [], 0
    for measure in measures:
        info = KEYS[measure.of]
        side = "axle" if info.scope_on(solid) == "axle" else measure.side
        for x in measure.sweep:
            line = positions[at]
            rows.append({
                "stage": stage, "axis": measure.over, "x": x, "key": measure.of, "unit": info.unit, "side": side,
                "nominal": float(line[0]) if math.isfinite(line[0]) else None, **_quantiles(line[1:]),
            })  # fmt: skip
            at += 1
    return rows


def _quantiles(values):
    values = values[np.isfinite(values)]
    if not len(values):
        return dict.fromkeys(QUANTILES)
    return dict(zip(QUANTILES, map(float, np.quantile(values, list(QUANTILES.values()))), strict=True))
