"""What the methods have to know of a study: how many scalars there are and which source each belongs to."""

from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True, eq=False)
class Problem:
    """`group_of` (D,): number of the source (0 … n_groups - 1) of each scalar; `names` of the sources."""

    group_of: np.ndarray
    n_groups: int
    names: tuple[str, ...] = ()

    @property
    def n_scalars(self) -> int:
        return len(self.group_of)

    def membership(self) -> np.ndarray:
        """(G, D) bool: the scalars of each source."""
        return np.asarray(self.group_of)[None, :] == np.arange(self.n_groups)[:, None]
