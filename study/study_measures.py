"""The [[measures]] of a study file: which measure, where or over which sweep, within which limits."""

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from catalog.errors import InputError
from study.patterns import near
from study.study_entries import AtEntry, MeasureEntry, OverEntry

_INPUTS = ("bump", "roll", "rack")
_MOST_POSITIONS = 201
_MOST_ROLL = 45.0


class MeasureError(InputError):
    """An entry of [[measures]] that breaks a rule."""


@dataclass(frozen=True, slots=True)
class Measure:
    """One value asked of every build: `of` at (bump_mm, roll_deg, rack_mm), or what `take` takes of a sweep.

    `over` is the swept input ("bump", "roll" or "rack"; its own field is then 0) and `sweep` its positions
    (mm or degrees); None and () without a sweep.
    `limits`: (low, high), either may be infinite.
    """

    name: str
    of: str
    side: str
    bump_mm: float
    roll_deg: float
    rack_mm: float
    over: str | None
    sweep: tuple[float, ...]
    take: str | None
    limits: tuple[float, float] | None


def measures(entries: Sequence[MeasureEntry], *, sides: str) -> tuple[Measure, ...]:
    """Measures of the entries, each with a name of its own. Raises MeasureError."""
    from study.measures import KEYS

    found: dict[str, Measure] = {}
    for number, entry in enumerate(entries, start=1):
        try:
            measure = _measure(entry, KEYS, sides)
            if measure.name in found:
                raise MeasureError(f'name "{measure.name}" is taken already; give this measure a name')
        except MeasureError as error:
            raise MeasureError(f"measures[{number}]: {error}") from None
        found[measure.name] = measure
    return tuple(found.values())


def _measure(entry: MeasureEntry, known: Mapping[str, Any], sides: str) -> Measure:
    if entry.of not in known:
        raise MeasureError(f'of = "{entry.of}" is not a known measure; {near(entry.of, known)}')
    limits = _limits(entry.limits)
    if known[entry.of].scope == "axle":
        _check_axle(entry, sides)
    at = entry.at or AtEntry()
    over, sweep = _sweep(entry, at)
    name = entry.name or _name(entry, at, over, sweep)
    side = entry.side or "left"
    return Measure(name, entry.of, side, at.bump, at.roll, at.rack, over, sweep, entry.take, limits)


def _check_axle(entry: MeasureEntry, sides: str) -> None:
    if entry.side is not None:
        raise MeasureError(f'side = "{entry.side}": {entry.of} belongs to the axle; leave side out')
    if sides != "mirrored":
        return
    if entry.of.startswith("cross_"):
        raise MeasureError(
            f'{entry.of} is zero by construction with sides = "mirrored" (left and right are built alike); '
            'set sides = "independent" or leave the measure out'
        )
    if entry.limits is not None:
        raise MeasureError(
            f'{entry.of} may carry no limits with sides = "mirrored": it is that of a car built alike on '
            'both sides, not of your cars; set sides = "independent" or leave the limits out'
        )


def _limits(given: list[float] | None) -> tuple[float, float] | None:
    if given is None:
        return None
    low, high = given
    if not low < high or (math.isinf(low) and math.isinf(high)):
        raise MeasureError(f"limits = {given} must be low, high with low below high and at least one of them finite")
    return float(low), float(high)


def _sweep(entry: MeasureEntry, at: AtEntry) -> tuple[str | None, tuple[float, ...]]:
    if entry.over is None:
        if entry.take is not None:
            raise MeasureError(f'take = "{entry.take}" takes from a sweep; add over, or leave take out')
        return None, ()
    swept = [name for name in _INPUTS if getattr(entry.over, name) is not None]
    if len(swept) != 1:
        said = " and ".join(swept) if swept else "none"
        raise MeasureError(f"over sweeps exactly one of bump, roll, rack; given: {said}")
    if entry.take is None:
        raise MeasureError("over needs take: range, max, min, slope or max-abs")
    if swept[0] in at.model_fields_set:
        raise MeasureError(f"{swept[0]} stands in at and in over; leave it out of at")
    return swept[0], _positions(swept[0], entry.over)


def _positions(name: str, over: OverEntry) -> tuple[float, ...]:
    start, end, count = getattr(over, name)
    shown = f"over {name} = [{start:g}, {end:g}, {count:g}]"
    if count != int(count) or not 2 <= count <= _MOST_POSITIONS:
        raise MeasureError(f"{shown}: the third number counts positions; give 2 to {_MOST_POSITIONS}")
    most = _MOST_ROLL if name == "roll" else 1000.0
    if start == end or max(abs(start), abs(end)) > most:
        raise MeasureError(f"{shown}: from and to must differ and lie within ±{most:g}")
    count = int(count)
    return tuple(start + (end - start) * i / (count - 1) for i in range(count))


def _name(entry: MeasureEntry, at: AtEntry, over: str | None, sweep: tuple[float, ...]) -> str:
    parts = [entry.of] + (["right"] if entry.side == "right" else [])
    if over is not None:
        parts += [entry.take, f"over {over} {sweep[0]:g}…{sweep[-1]:g}"]
    fixed = [f"{name} {getattr(at, name):g}" for name in _INPUTS if getattr(at, name) != 0.0 and name != over]
    if fixed:
        parts.append("at " + ", ".join(fixed))
    return " ".join(parts)
