"""Errors to built features: which scalars a study draws, and what part of which hand each one moves.

A source is one drawing feature: `part.feature`. Its scalars are columns of the error matrix E (D, N), in mm or
degrees along the part's axes (the car's axes at design, of the left corner). With sides = "mirrored" both hands read the
same scalars; with "independent" each hand has its own, and both form one group.
"""

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from catalog.errors import InputError
from study import patterns
from study.assembly import Corner, Feature
from study.methods.problem import Problem
from study.zone_field import ZoneField
from study.zones import Zone

HANDS = ("left", "right")
BOTH = ("both",)


class BuildError(InputError):
    """A study that names what its geometry does not have."""


@dataclass(frozen=True, slots=True)
class Source:
    """One error source. columns: per hand ("both", or "left" and "right") the rows of E; axes: names of its scalars.

    unit: "mm" or "deg", that of its scalars.
    """

    name: str
    kind: str
    unit: str
    axes: tuple[str, ...]
    zone: Zone
    columns: tuple[tuple[int, ...], ...]
    hands: tuple[str, ...]

    def of_hand(self, hand: str) -> tuple[int, ...]:
        """Rows of E that move this hand; empty where the source is the other hand's alone."""
        if self.hands == BOTH:
            return self.columns[0]
        return self.columns[self.hands.index(hand)] if hand in self.hands else ()


@dataclass(frozen=True, slots=True)
class Effect:
    """Moves one feature of a hand: error += matrix (k, m) @ E[rows] (m rows)."""

    feature: str
    rows: tuple[int, ...]
    matrix: np.ndarray | None = None


@dataclass(frozen=True)
class BuildModel:
    """All sources of a study, and what they move on each hand.

    scalars: number D of rows of E; bands: hand → alignment target → row of E (absent: 0); perfect: features without a zone.
    """

    sources: tuple[Source, ...]
    effects: dict[str, tuple[Effect, ...]]
    bands: dict[str, dict[str, int]]
    scalars: int
    perfect: tuple[str, ...]

    @cached_property
    def field(self) -> ZoneField:
        """The zones of all scalars, in the order of the rows of E."""
        return ZoneField(tuple(source.zone for source in self.sources for _ in source.columns))

    @cached_property
    def problem(self) -> Problem:
        """What the methods need to know: the source of every scalar."""
        group_of = np.empty(self.scalars, int)
        for number, source in enumerate(self.sources):
            for rows in source.columns:
                group_of[list(rows)] = number
        return Problem(group_of, len(self.sources), tuple(source.name for source in self.sources))


def build_model(corners: dict[str, Corner], study) -> BuildModel:
    """The sources of a study on the nominal corners ("left", and "right" unless one body carries both wheels).

    Raises PatternError or BuildError where the study names what is not there.
    """
    left = corners["left"]
    hands = BOTH if study.sides == "mirrored" or left.solid else HANDS
    maker = _Collector(hands, left)
    features = list(left.features.values()) + maker.extra_features()
    wanted = patterns.match(study.errors, features)
    for feature in features:
        if feature.name in wanted:
            maker.add(feature, wanted[feature.name])
    for jig in study.jigs:
        maker.add_jig(jig, corners)
    for adjuster in study.alignment or ():
        maker.add_band(adjuster)
    perfect = tuple(f.name for f in features if f.name not in wanted)
    return BuildModel(
        tuple(maker.sources),
        {hand: tuple(found) for hand, found in maker.effects.items()},
        maker.bands,
        maker.count,
        perfect,
    )


MOUNT = "rack.mount"


class _Collector:
    def __init__(self, hands, left):
        self.hands, self.left = hands, left
        self.sources, self.count = [], 0
        self.effects = {hand: [] for hand in HANDS}
        self.bands = {hand: {} for hand in HANDS}

    def extra_features(self):
        """The rack's mount moves both ends together."""
        if self.left.rack_part == "rack":
            return [Feature(MOUNT, "point", np.zeros(3))]
        return []

    def _columns(self, zone, sets):
        columns = []
        for _ in range(sets):
            columns.append(tuple(range(self.count, self.count + zone.n_scalars)))
            self.count += zone.n_scalars
        return tuple(columns)

    def add(self, feature, zone):
        mount = feature.name == MOUNT
        hands = BOTH if mount else self.hands
        columns = self._columns(zone, len(hands))
        unit = "deg" if feature.kind == "angles" else "mm"
        source = Source(feature.name, feature.kind, unit, feature.axes, zone, columns, hands)
        self.sources.append(source)
        for hand in HANDS:
            target = f"rack.{self.left.steer_link}_inner" if mount else feature.name
            mirror = np.diag([1.0, -1.0, 1.0]) if mount and hand == "right" else None
            self.effects[hand].append(Effect(target, source.of_hand(hand), mirror))

    def add_jig(self, jig, corners):
        """A rigid shift and turn about the group's centroid that its pivots share, besides their own errors."""
        pivots = [self._pivot(jig, name) for name in jig.pivots]
        for name, zone, unit in ((f"jig.{jig.name}", jig.shift, "mm"), (f"jig.{jig.name}.turn", jig.rotation, "deg")):
            if zone is None:
                continue
            columns = self._columns(zone, len(self.hands))
            source = Source(name, "jig", unit, ("x", "y", "z"), zone, columns, self.hands)
            self.sources.append(source)
            for hand, corner in corners.items():
                places = np.stack([corner.features[pivot].nominal for pivot in pivots])
                for pivot, lever in zip(pivots, places - places.mean(axis=0), strict=True):
                    matrix = np.eye(3) if unit == "mm" else np.radians(_turning(lever))
                    self.effects[hand].append(Effect(pivot, source.of_hand(hand), matrix))

    def _pivot(self, jig, name):
        feature = self.left.features.get(name)
        if feature is None or feature.kind != "point" or not name.startswith("chassis."):
            known = [n for n, f in self.left.features.items() if n.startswith("chassis.") and f.kind == "point"]
            raise BuildError(f'jigs.{jig.name}: pivots names "{name}", which is no chassis pivot; {patterns.near(name, known)}')
        return name

    def add_band(self, adjuster):
        hands = HANDS if self.left.solid else self.hands
        columns = self._columns(adjuster.band, len(hands))
        unit = "mm" if adjuster.target == "ride_height" else "deg"
        source = Source(
            f"alignment.{adjuster.target}", "length", unit, (adjuster.target,), adjuster.band, columns, hands
        )
        self.sources.append(source)
        for hand in HANDS:
            self.bands[hand][adjuster.target] = source.of_hand(hand)[0]


def _turning(lever):
    """Matrix (3, 3) of θ → θ × lever."""
    x, y, z = lever
    return np.array([[0.0, z, -y], [-z, 0.0, x], [y, -x, 0.0]])


def built_features(corner: Corner, effects, errors: np.ndarray, extra=()) -> dict[str, np.ndarray]:
    """Built features of one hand from E (D, N); `extra`: (feature, error (k, N)) of adjusters on top.

    Untouched features come back with one column, which broadcasts.
    """
    moved: dict[str, np.ndarray] = {}
    for effect in effects:
        error = errors[list(effect.rows)]
        if effect.matrix is not None:
            error = effect.matrix @ error
        moved[effect.feature] = moved[effect.feature] + error if effect.feature in moved else error
    for name, error in extra:
        moved[name] = moved[name] + error if name in moved else error
    return {
        name: feature.built(moved.get(name, np.zeros((len(feature.axes), 1))))
        for name, feature in corner.features.items()
    }
