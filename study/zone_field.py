"""The zones of a whole study side by side: all its scalars as one array of errors."""

from dataclasses import dataclass, field

import numpy as np

from study import zones
from study.zones import Zone


@dataclass(frozen=True)
class ZoneField:
    """Zones whose scalars follow each other as the rows of errors (D, N); mm, degrees for angles."""

    zones: tuple[Zone, ...]
    rows: tuple[slice, ...] = field(init=False)

    def __post_init__(self) -> None:
        ends = np.cumsum([zone.n_scalars for zone in self.zones], dtype=int).tolist()
        starts = [0, *ends[:-1]]
        object.__setattr__(self, "rows", tuple(slice(a, b) for a, b in zip(starts, ends, strict=False)))

    @property
    def n_scalars(self) -> int:
        return self.rows[-1].stop if self.rows else 0

    def to_errors(self, unit: np.ndarray) -> np.ndarray:
        """Errors (D, N) that the unit cube (D, N) stands for."""
        return self._stacked(zones.to_errors, unit)

    def walk(self, unit: np.ndarray) -> np.ndarray:
        """Errors (D, N) of a screening walk over the unit cube (D, N)."""
        return self._stacked(zones.walk, unit)

    def extreme(self, gradients: np.ndarray) -> np.ndarray:
        """Errors (D, P) at which each gradient (D, P) reaches its greatest value."""
        return self._stacked(zones.extreme, gradients)

    def mean(self) -> np.ndarray:
        """Mean errors (D,)."""
        return np.concatenate([zones.mean(zone) for zone in self.zones] or [np.empty(0)])

    def sd(self) -> np.ndarray:
        """Standard deviation of each scalar (D,)."""
        return np.concatenate([zones.sd(zone) for zone in self.zones] or [np.empty(0)])

    def quadratic(self, gradients: np.ndarray) -> np.ndarray:
        """Variance g' C g that each zone gives (zones, P), for gradients (D, P)."""
        parts = [
            np.einsum("kp,kl,lp->p", gradients[rows], zones.covariance(zone), gradients[rows])
            for zone, rows in zip(self.zones, self.rows, strict=True)
        ]
        return np.array(parts).reshape(len(self.zones), gradients.shape[1])

    def support(self, gradients: np.ndarray) -> np.ndarray:
        """Greatest g·e in each zone (zones, P), for gradients (D, P)."""
        parts = [zones.support(zone, gradients[rows]) for zone, rows in zip(self.zones, self.rows, strict=True)]
        return np.array(parts).reshape(len(self.zones), gradients.shape[1])

    def _stacked(self, function, array: np.ndarray) -> np.ndarray:
        out = np.empty(array.shape)
        for zone, rows in zip(self.zones, self.rows, strict=True):
            out[rows] = function(zone, array[rows])
        return out
