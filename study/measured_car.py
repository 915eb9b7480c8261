"""A car whose pivots were measured: put through the build model, and compared with a study's zones.

Measured points of chassis and rack go in as the errors of those features; the parts stay as drawn and the car is then
assembled. Points of uprights, arms and axle are what the assembly brings about, so they are no input.
"""

from collections.abc import Mapping
from dataclasses import dataclass
from types import SimpleNamespace

import numpy as np

from catalog.errors import WorkError
from study.assembly import corner_of
from study.build import HANDS, build_model
from study.measures import KEYS
from study.response import STATUS_TEXT, Request, Response
from study.zone_words import zone_text
from study.zones import Zone

_PLACEHOLDER = Zone("box", (1.0, 1.0, 1.0))
Offset = tuple[float, float, float]
Offsets = Mapping[tuple[str, str], Offset]  # (side, feature) → mm in the car's axes, y to the left


class NotAssembled(WorkError):
    """The measured points give a car that does not go together."""


@dataclass(frozen=True, slots=True)
class Evaluated:
    """measures: {"left": {key: value}, "right": …, "axle": …}; settings: what the alignment took, rows of plain values."""

    measures: dict[str, dict[str, float | None]]
    settings: list[dict]


@dataclass(frozen=True, slots=True)
class Inspection:
    """A measured point against its zone. actual_mm, limit_mm: diameters, None where the zone has none."""

    zone: str
    actual_mm: float | None
    limit_mm: float | None
    inside: bool


def feature_of(geometry, point: str) -> str | None:
    """The chassis or rack feature that a measured point shows; None for a point of another part."""
    features = corner_of(geometry, "left").features
    return next((f"{part}.{point}" for part in ("chassis", "rack") if f"{part}.{point}" in features), None)


def evaluate(geometry, offsets: Offsets, *, bump_mm=0.0, roll_deg=0.0, rack_mm=0.0, alignment=None) -> Evaluated:
    """All measures of the measured car at one position; `alignment`: a study's adjusters, set as the workshop would.

    Raises NotAssembled, PositionError.
    """
    features = dict.fromkeys(feature for _, feature in offsets)
    asked = SimpleNamespace(
        errors=tuple((feature, _PLACEHOLDER) for feature in features), alignment=alignment, sides="independent",
        jigs=(), measures=(),
    )  # fmt: skip
    response = Response(geometry, asked)
    wanted = [
        (side, key)
        for key, info in KEYS.items()
        for side in (("axle",) if info.scope_on(response.solid) == "axle" else HANDS)
    ]
    at = float(bump_mm), float(roll_deg), float(rack_mm)
    response = response.asking(requests=[Request(key, side, *at) for side, key in wanted])
    values = response.evaluate(_errors(response, offsets))
    if values.status[0]:
        raise NotAssembled(f"the car of the measured points {STATUS_TEXT[int(values.status[0])]}; check the points")
    found: dict[str, dict[str, float | None]] = {"left": {}, "right": {}, "axle": {}}
    for (side, key), value in zip(wanted, values.positions[:, 0], strict=True):
        found[side][key] = float(value) if np.isfinite(value) else None
    return Evaluated(found, _settings(response, values))


def inspect(geometry, study, offsets: Offsets) -> dict[tuple[str, str], Inspection]:
    """Every measured chassis or rack point against the zone that a study gives its feature; those without are left out."""
    hands = ("left",) if geometry.linkage == "solid-axle" else HANDS
    model = build_model({hand: corner_of(geometry, hand) for hand in hands}, study)
    zones = {source.name: source.zone for source in model.sources}
    return {
        (side, feature): judged(zones[feature], _of_hand(offset, side, solid=len(hands) == 1))
        for (side, feature), offset in offsets.items()
        if feature in zones
    }


def judged(zone: Zone, offset) -> Inspection:
    """An offset (3,) in the part's axes against a drawing's zone; the mean shift of its law does not move the zone."""
    offset, words = np.asarray(offset, float), zone_text(zone)
    if zone.form == "ball":
        actual, limit = 2.0 * float(np.linalg.norm(offset)), 2.0 * zone.half[0]
        return Inspection(words, actual, limit, actual <= limit + 1e-9)
    if zone.form == "cylinder":
        along = float(offset @ np.array(zone.axis))
        actual = 2.0 * float(np.linalg.norm(offset - along * np.array(zone.axis)))
        limit = 2.0 * zone.half[0]
        return Inspection(words, actual, limit, actual <= limit + 1e-9 and abs(along) <= zone.half[1] + 1e-9)
    return Inspection(words, None, None, bool((np.abs(offset) <= np.array(zone.half) + 1e-9).all()))


def _of_hand(offset, side, *, solid):
    """An offset in the part's own axes: those of the left corner, so mirrored on the right."""
    return np.array(offset, float) * (1.0, -1.0 if side == "right" and not solid else 1.0, 1.0)


def _errors(response, offsets):
    errors = np.zeros((response.model.scalars, 1))
    for source in response.model.sources:
        for side in HANDS:
            offset = offsets.get((side, source.name))
            if offset is not None:
                errors[list(source.of_hand(side)), 0] = _of_hand(offset, side, solid=response.solid)
    return errors


def _settings(response, values):
    places = [
        (hand, target, by)
        for hand, found in response.hands.items()
        for target, by in zip(found.bench.targets, found.bench.by, strict=True)
    ]
    return [
        {"side": hand, "adjuster": target, "by": by, "setting_mm": float(values.settings[i, 0]),
         "ran_out": bool(values.ran_out[i, 0])}
        for i, (hand, target, by) in enumerate(places)
    ]  # fmt: skip
