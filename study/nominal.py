"""Every measure of the nominal geometry at one position, or along a sweep."""

import math

import numpy as np

from study.measures import KEYS
from study.response import Request, Response


def evaluate(geometry, *, bump_mm=0.0, roll_deg=0.0, rack_mm=0.0) -> dict[str, dict[str, float | None]]:
    """All measures at one position: {"left": {key: value}, "right": …, "axle": …}; None where undefined.

    Raises PositionError where the linkage does not reach the position.
    """
    return sweep(geometry, [(bump_mm, roll_deg, rack_mm)])[0]


def sweep(geometry, positions, keys=None) -> list[dict[str, dict[str, float | None]]]:
    """The measures (all, or `keys`) at every (bump_mm, roll_deg, rack_mm), shaped as in `evaluate`."""
    solid = geometry.linkage == "solid-axle"
    asked = [
        (side, key)
        for key, info in KEYS.items()
        if keys is None or key in keys
        for side in (("axle",) if info.scope_on(solid) == "axle" else ("left", "right"))
    ]
    requests = [Request(key, side, *map(float, position)) for position in positions for side, key in asked]
    response = Response(geometry).asking(requests=requests)
    values = response.evaluate(np.zeros((0, 1))).positions[:, 0]
    out = []
    for i in range(len(positions)):
        found = {"left": {}, "right": {}, "axle": {}}
        for (side, key), value in zip(asked, values[i * len(asked) : (i + 1) * len(asked)], strict=True):
            found[side][key] = float(value) if math.isfinite(value) else None
        out.append(found)
    return out
