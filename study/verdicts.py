"""Which tolerances may be opened: each source alone moved to its next looser process, then the open ones together.

A verdict is a counterfactual: the same draws are built again with one source in its next looser process (without
processes, in twice its zone). `hold`: the share of good builds falls below the wanted one; `open`: it stays above;
`watch`: its interval straddles it. A set is proposed only if it passes together.
"""

from dataclasses import dataclass, replace

import numpy as np

from study import zones
from study.methods import spread
from study.methods.problem import Problem
from study.zone_field import ZoneField

VERDICT_BUILDS = 2048
HOLD, WATCH, OPEN = "hold", "watch", "open"
AS_DRAWN = -1


@dataclass(frozen=True)
class Share:
    """A share of good builds with its 95 % Clopper–Pearson interval."""

    share: float
    low: float
    high: float

    @classmethod
    def of(cls, good) -> "Share":
        """From flags (N,)."""
        low, high = spread.clopper_pearson(int(good.sum()), len(good))
        return cls(float(good.mean()), low, high)


def verdict_of(share: Share, wanted: float) -> str:
    """`hold`, `watch` or `open` for a counterfactual share."""
    if share.high < wanted:
        return HOLD
    return OPEN if share.low >= wanted else WATCH


def looser(source, ladder) -> zones.Zone:
    """The source's zone in its next looser process, or twice as wide where it has none."""
    zone = source.zone
    found = ladder.get(zone.process) if zone.process else None
    if found is None:
        return zones.scale(zone, 2.0)
    return replace(zones.for_kind(found, source.kind), shift=zone.shift)


def field_with(model, changed: dict[int, zones.Zone]) -> ZoneField:
    """The study's zones with those of some sources (by number) changed."""
    return ZoneField(tuple(
        changed.get(number, source.zone) for number, source in enumerate(model.sources) for _ in source.columns
    ))  # fmt: skip


def good_flags(work, field: ZoneField, *, builds: int = VERDICT_BUILDS):
    """Which of the same independent draws (N,) are good when built in these zones, and their status (N,)."""
    flags, status = good_of_each(work, [field], builds=builds)
    return flags[0], status[0]


def good_of_each(work, fields, *, builds: int = VERDICT_BUILDS):
    """The same for several fields of zones (F), built side by side: flags and status, each (F, N)."""
    scalars = Problem(np.zeros(work.model.scalars, int), 1)
    unit = spread.draw(scalars, size=builds, seed=work.study.seed + 3, first=0, count=builds).T
    found = work.judge.evaluate(np.concatenate([field.to_errors(unit) for field in fields], axis=1))
    return is_good(found, work.judge.measures).reshape(-1, builds), found.status.reshape(-1, builds)


def is_good(values, measures) -> np.ndarray:
    """Flags (N,) of builds that assemble, align within reach and lie inside all limits."""
    good = (values.status == 0) & ~values.ran_out.any(axis=0)
    for row, measure in zip(values.values, measures, strict=True):
        if measure.limits:
            good &= (row >= measure.limits[0]) & (row <= measure.limits[1])
    return good


def open_together(work, alone: dict[int, Share]) -> tuple[list[int], Share | None, int]:
    """(numbers of the sources that may be opened together, their share, builds run).

    Begins with every drawing feature that is `open` alone and drops the one that costs most until the rest passes.
    """
    wanted = work.study.wanted_share
    chosen = [n for n, share in alone.items() if verdict_of(share, wanted) == OPEN and not _is_band(work, n)]
    chosen.sort(key=lambda n: alone[n].share)
    builds = 0
    while chosen:
        changed = {n: looser(work.model.sources[n], work.study.ladder) for n in chosen}
        good, _ = good_flags(work, field_with(work.model, changed))
        builds += len(good)
        share = Share.of(good)
        if verdict_of(share, wanted) == OPEN:
            return sorted(chosen), share, builds
        chosen = chosen[1:]
    return [], None, builds


def _is_band(work, number):
    return work.model.sources[number].name.startswith("alignment.")


def judged(study) -> bool:
    """Whether a study has verdicts: a ranking alone has none."""
    return any(measure.limits for measure in study.measures) and study.method in ("sobol", "morris", "spread")
