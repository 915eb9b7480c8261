"""Geometries side by side, and the same shop building each of them: which one forgives more.

The same study is run on every geometry with the same draws, feature by feature of the same name, so that the
differences are paired: what is left between two geometries is the geometries', not the luck of the draw.
"""

from dataclasses import dataclass

import numpy as np

from study.measures import KEYS
from study.nominal import sweep
from study.response import Response
from study.stations import PositionError
from study.verdicts import is_good

BUILDS = 4096
RESAMPLES = 200
Z95 = 1.959964


@dataclass(frozen=True)
class Built:
    """One geometry built BUILDS times: values (M, N), NaN where a build failed; good (N,) flags."""

    label: str
    values: np.ndarray
    good: np.ndarray


@dataclass(frozen=True)
class Against:
    """A geometry against the first: differences with their 95 % intervals.

    good: (difference of the share, low, high); sd_ratio (M, 3): this one's standard deviation over the first's, low, high.
    """

    label: str
    good: tuple[float, float, float]
    sd_ratio: np.ndarray


def build_alike(geometries: dict, asked, *, builds: int = BUILDS) -> list[Built]:
    """Every geometry (label → record) built on the same draws with the errors, alignment and measures of one study.

    Raises PatternError, AlignmentError or PositionError where the study does not fit a geometry.
    """
    responses = {label: Response(geometry, asked) for label, geometry in geometries.items()}
    drawn = _draws({name: width for response in responses.values() for name, width in _widths(response).items()}, asked.seed, builds)
    found = []
    for label, response in responses.items():
        unit = np.concatenate([drawn[name] for name in _widths(response)])
        values = response.evaluate(response.model.field.to_errors(unit))
        found.append(Built(label, values.values, is_good(values, asked.measures)))
    return found


def _widths(response):
    return {source.name: sum(len(rows) for rows in source.columns) for source in response.model.sources}


def _draws(widths, seed, builds):
    """Uniform draws (k, builds) by source name: a source's draws do not depend on which others there are."""
    keys = {name: [int(b) for b in name.encode()] for name in widths}
    return {
        name: np.random.Generator(np.random.PCG64(np.random.SeedSequence([seed, *keys[name]]))).random((width, builds))
        for name, width in widths.items()
    }  # fmt: skip


def against_first(built: list[Built], *, seed: int) -> list[Against]:
    """Paired differences of every geometry to the first; intervals by paired resampling of the builds."""
    first = built[0]
    n = len(first.good)
    picks = np.random.default_rng([seed, 77]).integers(0, n, (RESAMPLES, n))
    return [Against(other.label, _paired(other.good, first.good), _ratios(other, first, picks)) for other in built[1:]]


def _paired(a, b):
    gap = a.astype(float) - b
    half = Z95 * gap.std() / np.sqrt(len(gap))
    return float(gap.mean()), float(gap.mean() - half), float(gap.mean() + half)


def _ratios(other, first, picks):
    out = np.full((len(first.values), 3), np.nan)
    for i, (a, b) in enumerate(zip(other.values, first.values, strict=True)):
        both = np.isfinite(a) & np.isfinite(b)
        if both.sum() < 2 or np.nanstd(b[both]) == 0:
            continue
        a, b = np.where(both, a, np.nan), np.where(both, b, np.nan)
        again = np.nanstd(a[picks], axis=1) / np.nanstd(b[picks], axis=1)
        out[i] = np.nanstd(a) / np.nanstd(b), *np.quantile(again, (0.025, 0.975))
    return out


CURVES = {"bump": (("toe_deg", "camber_deg", "roll_centre_height_mm"), 30.0), "roll": (("camber_deg",), 2.0), "rack": (("camber_deg",), 20.0)}
CURVE_POSITIONS = 13


def curves_of(records: dict) -> list[dict]:
    """Nominal curves of every geometry (label → record) as rows of a curves table, its label in the place of the side.

    An input that one of them cannot reach is left out.
    """
    rows = []
    for axis, (keys, travel) in CURVES.items():
        at = np.linspace(-travel, travel, CURVE_POSITIONS)
        spots = [tuple(float(x) if name == axis else 0.0 for name in ("bump", "roll", "rack")) for x in at]
        try:
            found = {label: sweep(record, spots, keys) for label, record in records.items()}
        except PositionError:
            continue
        for label, values in found.items():
            for key in keys:
                side = "axle" if KEYS[key].scope == "axle" else "left"
                rows += [
                    {"stage": "nominal", "axis": axis, "x": float(x), "key": key, "unit": KEYS[key].unit, "side": label,
                     "nominal": value[side][key], "q05": None, "q25": None, "q50": None, "q75": None, "q95": None}
                    for x, value in zip(at, values, strict=True)
                ]  # fmt: skip
    return rows
