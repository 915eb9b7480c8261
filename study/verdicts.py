"""Which tolerances may be opened: each source alone moved to its next looser process, then the open ones together.

A verdict is a counterfactual: the same draws are built again with one source in its next looser process (without
processes, in twice its zone). `hold`: the share of good builds falls below the wanted one; `open`: it stays above;
`watch`: its interval straddles it. A set is proposed only if it passes together.

Where the first builds leave no doubt no more are made: a look after FIRST_LOOK builds ends a verdict only by its 99.9 %
interval, so that the last look keeps its own level (the rule of J. L. Haybittle 1971 and R. Peto et al. 1976).
"""

from dataclasses import dataclass, replace

import numpy as np

from study import zones
from study.methods import spread
from study.methods.problem import Problem
from study.zone_field import ZoneField

VERDICT_BUILDS, FIRST_LOOK = 2048, 512
BEYOND_DOUBT = 0.999
HOLD, WATCH, OPEN = "hold", "watch", "open"
AS_DRAWN = -1
NOT_BUILT = 4  # status of builds that were not needed


@dataclass(frozen=True)
class Share:
    """A share of good builds with its Clopper–Pearson interval, 95 % unless said."""

    share: float
    low: float
    high: float

    @classmethod
    def of(cls, good, *, confidence: float = 0.95) -> "Share":
        """From flags (N,)."""
        low, high = spread.clopper_pearson(int(good.sum()), len(good), confidence=confidence)
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
    """Which of the same independent draws (N,) are good when built in these zones."""
    return _built(work, [field], first=0, count=builds)[0][0]


def flags_alone(work, numbers):
    """Flags and status, each (F, VERDICT_BUILDS), with one source loosened a row; AS_DRAWN: none.

    Flags are 1 or 0, and NaN where builds were not made because the first ones had decided.
    """
    sources, ladder = work.model.sources, work.study.ladder
    fields = [field_with(work.model, {} if n == AS_DRAWN else {n: looser(sources[n], ladder)}) for n in numbers]
    flags, status = np.full((len(fields), VERDICT_BUILDS), np.nan), np.full((len(fields), VERDICT_BUILDS), NOT_BUILT, np.uint8)
    flags[:, :FIRST_LOOK], status[:, :FIRST_LOOK] = _built(work, fields, first=0, count=FIRST_LOOK)
    open_ = [i for i, n in enumerate(numbers) if n == AS_DRAWN or _first_verdict(flags[i, :FIRST_LOOK], work) == WATCH]
    if open_:
        rest = _built(work, [fields[i] for i in open_], first=FIRST_LOOK, count=VERDICT_BUILDS - FIRST_LOOK)
        flags[open_, FIRST_LOOK:], status[open_, FIRST_LOOK:] = rest
    return flags, status


def _first_verdict(good, work):
    """What the first builds say beyond doubt, else `watch`."""
    return verdict_of(Share.of(good, confidence=BEYOND_DOUBT), work.study.wanted_share)


def _built(work, fields, *, first, count):
    """Flags and status, each (F, count), of the same draws built in several fields of zones, side by side."""
    scalars = Problem(np.zeros(work.model.scalars, int), 1)
    unit = spread.draw(scalars, size=first + count, seed=work.study.seed + 3, first=first, count=count).T
    found = work.judge.evaluate(np.concatenate([field.to_errors(unit) for field in fields], axis=1))
    return is_good(found, work.judge.measures).reshape(-1, count), found.status.reshape(-1, count)


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
        good = _flags_unless_held(work, field_with(work.model, changed))
        builds += len(good)
        share = Share.of(good)
        if len(good) == VERDICT_BUILDS and verdict_of(share, wanted) == OPEN:
            return sorted(chosen), share, builds
        chosen = chosen[1:]
    return [], None, builds


def _flags_unless_held(work, field):
    """Flags of all builds, or of the first alone where they hold beyond doubt."""
    first = good_flags(work, field, builds=FIRST_LOOK)
    if _first_verdict(first, work) == HOLD:
        return first
    rest, _ = _built(work, [field], first=FIRST_LOOK, count=VERDICT_BUILDS - FIRST_LOOK)
    return np.concatenate((first, rest[0]))


def _is_band(work, number):
    return work.model.sources[number].name.startswith("alignment.")


def judged(study) -> bool:
    """Whether a study has verdicts: a ranking alone has none."""
    return any(measure.limits for measure in study.measures) and study.method in ("sobol", "morris", "spread")
