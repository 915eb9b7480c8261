"""Sample blocks without a value: what is dropped, and when indices are withheld."""

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np

WITHHELD_ABOVE = 0.005


@dataclass(frozen=True)
class Blocks:
    """Values by block and what became of the blocks.

    `values` (M, blocks, rows); `kept` (M, blocks): usable for that measure; `failed` (blocks, rows): builds
    that could not be assembled; `dropped`: blocks with such a build; `withheld`: too many of them;
    `withheld_measures` (M,): too many builds where this measure is undefined.
    """

    values: np.ndarray
    kept: np.ndarray
    failed: np.ndarray
    dropped: int
    withheld: bool
    withheld_measures: np.ndarray

    @property
    def unassembled(self) -> int:
        return int(self.failed.sum())

    def undefined(self) -> np.ndarray:
        """(M,) further blocks dropped for this measure alone."""
        return self.kept.shape[1] - self.dropped - self.kept.sum(axis=1)

    def counters(self) -> dict[str, Any]:
        """What a result says of its blocks."""
        return {
            "blocks": self.kept.sum(axis=1),
            "undefined_blocks": self.undefined(),
            "dropped_blocks": self.dropped,
            "unassembled": self.unassembled,
            "builds": self.failed.size,
            "withheld": self.withheld,
            "withheld_measures": self.withheld_measures,
        }

    def alike(self) -> Iterator[tuple[np.ndarray, np.ndarray]]:
        """(measure numbers, kept blocks) for each set of measures that keep the same blocks."""
        wanted = ~self.withheld_measures & (self.kept.sum(axis=1) >= 2) & (not self.withheld)
        patterns: dict[bytes, list[int]] = {}
        for number in np.flatnonzero(wanted):
            patterns.setdefault(self.kept[number].tobytes(), []).append(int(number))
        for numbers in patterns.values():
            yield np.array(numbers), self.kept[numbers[0]]


def unassembled_builds(values: np.ndarray) -> np.ndarray:
    """(builds,) bool: no measure (M, builds) has a value."""
    return np.isnan(values).all(axis=0)


def into_blocks(values: np.ndarray, rows: int, *, unassembled: np.ndarray | None = None) -> Blocks:
    """Values (M, builds) in whole blocks of `rows` builds; `unassembled` (builds,) is found when None."""
    failed = unassembled_builds(values) if unassembled is None else np.asarray(unassembled, dtype=bool)
    missing = ~np.isfinite(values)
    values = values.reshape(len(values), values.shape[1] // rows, rows)
    assembled = max(int((~failed).sum()), 1)
    undefined = (missing & ~failed).sum(axis=1) / assembled
    failed = failed.reshape(-1, rows)
    bad_blocks = failed.any(axis=1)
    return Blocks(
        values=values,
        kept=~missing.reshape(values.shape).any(axis=2) & ~bad_blocks,
        failed=failed,
        dropped=int(bad_blocks.sum()),
        withheld=bool(failed.mean() > WITHHELD_ABOVE) if failed.size else False,
        withheld_measures=undefined > WITHHELD_ABOVE,
    )
