"""Which zone each feature of a geometry gets: names and wildcards of a study's [errors] table."""

import difflib
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from catalog.errors import InputError
from study import zones
from study.zones import Zone

_GIVES = {"point": "a point", "length": "a length", "angles": "a direction"}
_TAKES = {
    "point": "plus_minus, diameter, or diameter with axis and depth",
    "length": "length (or one plus_minus number)",
    "angles": "tilt_deg",
}


class PatternError(InputError):
    """An entry of [errors] that names nothing, does not suit what it names, or is ambiguous."""


@dataclass(frozen=True, slots=True)
class Feature:
    """A toleranced feature: its "part.feature" name and kind ("point", "length" or "angles")."""

    name: str
    kind: str


def match(patterns: Sequence[tuple[str, Zone]], features: Sequence[Feature]) -> dict[str, Zone]:
    """Zone of each feature that a pattern names, in the order of the features; the others are held perfect.

    An exact name wins; among wildcards the one with most letters outside its `*`. Raises PatternError.
    """
    named = [(pattern, zone, _named_by(pattern, zone, features)) for pattern, zone in patterns]
    found = {}
    for feature in features:
        claims = [(pattern, zone) for pattern, zone, names in named if feature.name in names]
        if claims:
            found[feature.name] = zones.for_kind(_winner(claims, feature), feature.kind)
    return found


def near(word: str, known: Iterable[str], *, count: int = 4) -> str:
    """`did you mean "a", "b"?`, or the known words when nothing is near."""
    known = list(known)
    close = difflib.get_close_matches(word, known, n=count, cutoff=0.55)
    if close:
        return "did you mean " + " or ".join(f'"{name}"' for name in close) + "?"
    more = ", …" if len(known) > 12 else ""
    return "known are " + ", ".join(known[:12]) + more


def _named_by(pattern: str, zone: Zone, features: Sequence[Feature]) -> frozenset[str]:
    matched = [feature for feature in features if _matches(pattern.split("*"), feature.name)]
    fitting = [feature for feature in matched if zones.fits(zone, feature.kind)]
    if not matched:
        hint = near(pattern.replace("*", ""), [feature.name for feature in features])
        raise PatternError(f'[errors] "{pattern}" names no feature of this geometry; {hint}')
    if not fitting:
        first = matched[0]
        raise PatternError(
            f'[errors] "{pattern}" gives a zone for {_GIVES[zones.KIND[zone.form]]}, but {first.name} is '
            f"{_GIVES[first.kind]}; give {_TAKES[first.kind]} there"
        )
    return frozenset(feature.name for feature in fitting)


def _matches(parts: list[str], name: str) -> bool:
    """Whether the parts between the wildcards stand in the name in their order; each is looked for once."""
    first, *middle = parts
    if not middle:
        return name == first
    *middle, last = middle
    if not (name.startswith(first) and name.endswith(last) and len(name) >= len(first) + len(last)):
        return False
    at, end = len(first), len(name) - len(last)
    for part in middle:
        at = name.find(part, at, end)
        if at < 0:
            return False
        at += len(part)
    return True


def _winner(claims: Sequence[tuple[str, Zone]], feature: Feature) -> Zone:
    for pattern, zone in claims:
        if pattern == feature.name:
            return zone
    most = max(_letters(pattern) for pattern, _ in claims)
    best = [(pattern, zone) for pattern, zone in claims if _letters(pattern) == most]
    if len(best) > 1:
        raise PatternError(
            f'[errors] "{best[0][0]}" and "{best[1][0]}" both name {feature.name} with {most} letters '
            f'outside wildcards; add an entry "{feature.name}" or make one of them longer'
        )
    return best[0][1]


def _letters(pattern: str) -> int:
    return sum(letter.isalnum() for letter in pattern)
