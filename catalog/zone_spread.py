"""How far the errors of a zone spread, and which features it suits, from its keys alone: what a ladder is judged by."""

import math
from collections.abc import Mapping
from typing import Any

SIGMAS = {1: 3.0, 2: 3.44, 3: 3.76}


def spread(zone: Mapping[str, Any], *, distribution: str, cp: float, truncated: bool) -> float:
    """Root mean square over the axes of the standard deviations of a zone's errors (mm; degrees of a tilt).

    zone: keys as in a study file; the law is about the middle of the zone.
    """

    def variance(half: float, axes: int) -> float:
        if distribution == "uniform":
            return half**2 / (axes + 2)
        sigmas = SIGMAS[axes] * cp
        return (half / sigmas) ** 2 * (_kept_variance(axes, sigmas**2 / 2) if truncated else 1.0)

    if "plus_minus" in zone:
        halves = zone["plus_minus"] if isinstance(zone["plus_minus"], list | tuple) else [zone["plus_minus"]]
        return math.sqrt(sum(variance(half, 1) for half in halves) / len(halves))
    if "length" in zone:
        return math.sqrt(variance(zone["length"], 1))
    if "tilt_deg" in zone:
        return math.sqrt(variance(zone["tilt_deg"], 2))
    if "depth" in zone:
        return math.sqrt((2 * variance(zone["diameter"] / 2, 2) + variance(zone["depth"], 1)) / 3)
    return math.sqrt(variance(zone["diameter"] / 2, 3))


def suits(zone: Mapping[str, Any]) -> frozenset[str]:
    """The kinds of features that take the zone: point, length, angles."""
    if "tilt_deg" in zone:
        return frozenset({"angles"})
    if "length" in zone:
        return frozenset({"length"})
    if isinstance(zone.get("plus_minus"), int | float):
        return frozenset({"point", "length"})
    return frozenset({"point"})


def _kept_variance(axes: int, x: float) -> float:
    """Variance of a normal law cut off at a radius of sqrt(2 x) sigmas, against that of the whole law."""
    below = math.erf(math.sqrt(x)) if axes % 2 else 1.0 - math.exp(-x)
    if axes == 3:
        below -= math.sqrt(x) * math.exp(-x) / math.gamma(1.5)
    return 1.0 - x ** (axes / 2) * math.exp(-x) / (math.gamma(axes / 2 + 1) * below)
