"""Processes as plain records: which are in force, the zone one gives at a nominal dimension, and the ladder they make.

A process is asked for as NAME, or as NAME@NOMINAL (mm) where its zone goes by nominal dimension.
"""

import math
import re
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from datetime import datetime
from difflib import get_close_matches
from typing import Any

from catalog.errors import InputError
from catalog.zone_spread import spread, suits

Zone = Mapping[str, Any]


class ProcessError(InputError):
    """A process that breaks a rule, or one that is asked for in a wrong way."""

    def __init__(self, text: str) -> None:
        super().__init__(_printable(text))


class ProcessNotFound(ProcessError):
    """No process of that name, or it is in force no more."""


@dataclass(frozen=True, slots=True)
class Range:
    """Nominal dimensions (mm) with one zone. The upper edge belongs to it, the lower one only where the table begins."""

    from_mm: float
    from_included: bool
    up_to_mm: float
    zone: Zone

    def holds(self, nominal_mm: float) -> bool:
        edge = self.from_included and nominal_mm == self.from_mm
        return edge or self.from_mm < nominal_mm <= self.up_to_mm


@dataclass(frozen=True, slots=True)
class Process:
    """A way of making a feature. zone: keys as in a study file (mm, deg), None where `ranges` give it by nominal dimension.

    Costs are in the shop's own unit; created, retired: UTC, retired is None while it is in force.
    """

    name: str
    version: int
    zone: Zone | None
    ranges: tuple[Range, ...]
    distribution: str
    cp: float
    truncated: bool
    jig_cost: float
    piece_cost: float
    looser: str | None
    source: str
    remark: str
    created: datetime | None
    by: str
    retired: datetime | None = None
    retired_by: str | None = None

    def law(self) -> dict[str, Any]:
        """Keys of the distribution, as in a study file."""
        return {"distribution": self.distribution, "cp": self.cp, "truncated": self.truncated}

    def spread_of(self, zone: Zone) -> float:
        """Standard deviation (mm or deg) of one of its zones, mean over the axes."""
        return spread(zone, **self.law())

    def zone_at(self, nominal_mm: float | None) -> Zone | None:
        """Its zone at a nominal dimension; None where it has none there."""
        if nominal_mm is None:
            return self.zone
        return next((each.zone for each in self.ranges if each.holds(nominal_mm)), None)

    def extent(self) -> str:
        """The nominal dimensions it is for, in words."""
        first, last = self.ranges[0], self.ranges[-1]
        return f"{'' if first.from_included else 'above '}{first.from_mm:g} to {last.up_to_mm:g} mm"


class Book:
    """All processes, read once: call it with NAME or NAME@NOMINAL for the keys of zone and law."""

    def __init__(self, processes: Iterable[Process]) -> None:
        self._newest = {each.name: each for each in sorted(processes, key=lambda each: each.version)}
        self.in_force = {name: each for name, each in self._newest.items() if each.retired is None}

    def __call__(self, asked: str) -> dict[str, Any]:
        """Keys of zone and law as a study file has them. Raises ProcessNotFound, ProcessError."""
        process, nominal = self.find(asked)
        return {**process.zone_at(nominal), **process.law()}

    def find(self, asked: str) -> tuple[Process, float | None]:
        """The process in force and the nominal dimension (mm), which is checked to be one of its own."""
        name, _, said = asked.partition("@")
        process, nominal = self.get(name), _nominal(asked, said) if "@" in asked else None
        if nominal is None and process.ranges:
            raise ProcessError(
                f'process "{asked}" goes by nominal dimension ({process.extent()}); write it like "{name}@350"'
            )
        if nominal is not None and not process.ranges:
            raise ProcessError(f'process "{asked}" does not go by nominal dimension; leave @{said} out')
        if process.zone_at(nominal) is None:
            raise ProcessError(
                f'process "{asked}": {nominal:g} mm is outside its nominal dimensions, {process.extent()}; '
                "take another process, or write the zone out"
            )
        return process, nominal

    def get(self, name: str) -> Process:
        """The process of that plain name in force. Raises ProcessNotFound."""
        process = self._newest.get(name)
        if process is not None and process.retired is None:
            return process
        if process is not None:
            told = f'process "{name}" was retired on {process.retired:%Y-%m-%d}'
        else:
            told = f'process "{name}" is not in the catalog'
        close = get_close_matches(name, self.in_force, n=3, cutoff=0.5)
        hint = f"did you mean {' or '.join(close)}?" if close else "`holdtight processes` lists them"
        raise ProcessNotFound(f"{told}; {hint}")

    def looser(self, asked: str) -> str | None:
        """The next looser process, written like the one asked for; retired ones in between are passed over."""
        process, nominal = self.find(asked)
        above = self._above(process)
        if above is None or above.zone_at(nominal) is None:
            return None
        return above.name + asked[len(process.name) :]

    def tighter(self, asked: str) -> str | None:
        """The next tighter process; where several have this one above them, the one nearest to it."""
        process, nominal = self.find(asked)
        below = [each for each in self.in_force.values() if self._above(each) is process]
        zones = [(each, each.zone_at(nominal)) for each in below]
        found = [(each.spread_of(zone), each.name) for each, zone in zones if zone is not None]
        return max(found)[1] + asked[len(process.name) :] if found else None

    def ladder(self, asked: str) -> list[str]:
        """The whole ladder through a process, tightest first, each written like the one asked for."""
        way = [asked]
        while (below := self.tighter(way[0])) is not None:
            way.insert(0, below)
        while (above := self.looser(way[-1])) is not None:
            way.append(above)
        return way

    def cost(self, asked: str) -> tuple[float, float]:
        """(cost of the jig once, cost per piece) in the shop's own unit."""
        process, _ = self.find(asked)
        return process.jig_cost, process.piece_cost

    def check(self, new: Process) -> None:
        """Whether a process may come into force: its place in the ladder. Raises ProcessError, ProcessNotFound."""
        if new.looser not in (None, new.name):
            self.get(new.looser)
        after = Book([*self._newest.values(), new])
        after._check_no_circle(new)
        above = after._above(new)
        if above is not None:
            _check_step(new, above)
        for each in after.in_force.values():
            if each is not new and after._above(each) is new:
                _check_step(each, new)

    def _above(self, process: Process) -> Process | None:
        """The nearest process above that is in force."""
        seen = {process.name}
        while process.looser is not None and process.looser not in seen:
            seen.add(process.looser)
            process = self._newest[process.looser]
            if process.retired is None:
                return process
        return None

    def _check_no_circle(self, new: Process) -> None:
        way = [new.name]
        while (above := self._newest[way[-1]].looser) is not None:
            if above in way:
                raise ProcessError(
                    f'process "{new.name}": looser = "{new.looser}" closes a circle, {" < ".join([*way, above])}; '
                    "name one that is not below it"
                )
            way.append(above)


def _printable(text: str) -> str:
    """A text that may hold a name as given, without marks that steer a terminal."""
    return "".join(mark if mark.isprintable() else repr(mark)[1:-1] for mark in text)


def _nominal(asked: str, said: str) -> float:
    try:
        value = float(said)
    except ValueError:
        value = math.nan
    if not (math.isfinite(value) and value > 0 and re.fullmatch(r"[0-9.eE+-]+", said)):
        raise ProcessError(f'process "{asked}": the nominal dimension after @ must be a number above 0, in mm')
    return value


def _check_step(tight: Process, loose: Process) -> None:
    """One step of the ladder, zone by zone."""
    if bool(tight.ranges) != bool(loose.ranges):
        which = tight.name if tight.ranges else loose.name
        raise ProcessError(
            f'process "{loose.name}" cannot be the next looser one of "{tight.name}": only {which} goes by nominal dimension'
        )
    for first, second, where in _shared(tight, loose):
        if not suits(first) <= suits(second):
            raise ProcessError(
                f'process "{loose.name}" cannot be the next looser one of "{tight.name}": it is for '
                f"{_kinds(second)}, the other for {_kinds(first)}"
            )
        narrow, wide = tight.spread_of(first), loose.spread_of(second)
        if wide < narrow * (1 - 1e-9):
            raise ProcessError(
                f'process "{loose.name}" is tighter than "{tight.name}"{where}: its errors spread by {wide:.3g} '
                f"(1 sd an axis, {loose.distribution}) against {narrow:.3g} ({tight.distribution}); name a looser one, or none"
            )


def _shared(tight: Process, loose: Process) -> list[tuple[Zone, Zone, str]]:
    """Pairs of zones that two processes have at the same nominal dimensions, and where."""
    if tight.zone is not None:
        return [(tight.zone, loose.zone, "")]
    return [
        (a.zone, b.zone, f" at {min(a.up_to_mm, b.up_to_mm):g} mm")
        for a in tight.ranges
        for b in loose.ranges
        if max(a.from_mm, b.from_mm) < min(a.up_to_mm, b.up_to_mm)
    ]


def _kinds(zone: Zone) -> str:
    words = {"point": "points", "length": "lengths", "angles": "directions"}
    return " and ".join(words[kind] for kind in sorted(suits(zone), reverse=True))
