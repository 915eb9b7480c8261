"""Nominal poses at every position a study asks for, and the poses of its builds around them.

A `Station` is one position (bump, roll, rack) of one hand, solved once for the nominal: its pose, pivot order, branch
and first-order effects of every scalar there are where the builds' iterations start. Inputs are those of the hand: a
right corner is mirrored, so roll and rack change sign before they come here.
"""

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from catalog.errors import InputError
from study.alignment import Bench
from study.assembly import Corner, assemble
from study.build import built_features
from study.kernel import solve as kernel
from study.kernel.rows import linearise, road_plane
from study.kernel.twists import twists
from study.measures import KEYS
from study.measures.view import View

STEP = 0.05  # mm or degrees of the differences that give the starting effects
LEAST_MOBILITY = 1e-6


class PositionError(InputError):
    """A position that the nominal linkage cannot reach, or a design position that is singular."""


class Spot(NamedTuple):
    """A position as the hand sees it; locked: the suspension is held where it stands with the rack at rest."""

    bump_mm: float
    roll_deg: float
    rack_mm: float
    locked: bool = False

    def at_rest(self) -> "Spot":
        return Spot(self.bump_mm, self.roll_deg, 0.0)


class Station(NamedTuple):
    """Nominal of one spot: rotation (3, 3), rest (3, 1) mm, elimination order, branch sign, effects (6, Q) on (t, Gibbs)."""

    spot: Spot
    rotation: np.ndarray
    rest: np.ndarray
    order: kernel.Order
    sign: float
    effects: np.ndarray


@dataclass(frozen=True)
class Block:
    """Some builds of one hand, assembled: kernel rows, parts, and each build's own zero of bump (N,) mm."""

    rows: object
    parts: object
    rise: np.ndarray
    moves: np.ndarray

    @property
    def n(self) -> int:
        return len(self.rise)


class Hand:
    """One corner with what moves it: effects of the errors, alignment bench, bands."""

    def __init__(self, corner: Corner, *, effects=(), bench: Bench, bands=None, scalars=0, vehicle=None):
        self.corner, self.effects, self.bench = corner, tuple(effects), bench
        self.bands, self.scalars, self.vehicle = bands or {}, scalars, vehicle
        self._stations: dict[Spot, Station] = {}
        self.station(Spot(0.0, 0.0, 0.0))

    def block(self, errors, settings) -> Block:
        """Assemble builds from errors (D, N) and adjuster settings (A, N)."""
        n = errors.shape[1]
        built = built_features(self.corner, self.effects, errors, self.bench.extra(settings))
        rows, parts = assemble(self.corner, built, n)
        ride = self.bands.get("ride_height")
        rise = np.zeros(n) if ride is None else errors[ride]
        return Block(rows, parts, rise, np.concatenate((errors, settings)))

    def station(self, spot: Spot) -> Station:
        """The station of a spot, solved at first asking. Raises PositionError."""
        if spot not in self._stations:
            self._stations[spot] = self._solve_station(spot)
        return self._stations[spot]

    def _solve_station(self, spot):
        if spot.rack_mm and not self.corner.has_rack:
            raise PositionError(
                f"rack {spot.rack_mm:g} mm: this {self.corner.linkage} has no steer link; ask for it at rack 0"
            )
        nominal = self.block(np.zeros((self.scalars, 1)), np.zeros((len(self.bench.by), 1)))
        rows, road = self._rows_and_road(nominal, spot)
        start = self._start_of(spot)
        rotation, t, worst = kernel.solve_carefully(
            rows.turned(start.rotation), road, rest=start.rest, count=1, least_steps=1
        )
        self._judge(spot, worst[0])
        rotation = rotation[:, :, 0] @ start.rotation
        jacobian = np.empty((6, 6, 1))
        linearise(rows.turned(rotation), road, np.eye(3)[:, :, None], t, jacobian)
        order = kernel.pivot_order(jacobian[:, :, 0])
        sign = float(kernel.determinant_sign(jacobian)[0])
        self._judge_branch(spot, sign, jacobian[:, :, 0])
        q = self.scalars + len(self.bench.by)
        bare = Station(spot, rotation, t, order, sign, np.zeros((6, q)))
        return bare._replace(effects=self._effects(bare)) if q else bare

    def _start_of(self, spot):
        """Where the nominal's homotopy starts: its design pose, or for a held suspension its pose with the rack at rest."""
        if spot.locked:
            return self.station(spot.at_rest())
        design = self._stations.get(Spot(0.0, 0.0, 0.0))
        if design is not None:
            return design
        return Station(spot, np.eye(3), self.corner.origin[:, None], None, 0.0, np.zeros((6, 0)))

    def _judge(self, spot, worst):
        if not worst <= kernel.TOLERANCE_MM:
            raise PositionError(
                f"bump {spot.bump_mm:g} mm, roll {spot.roll_deg:g}°, rack {spot.rack_mm:g} mm: the nominal linkage does "
                f"not reach this position (rows left open by {worst:.3g} mm); ask for less travel"
            )

    def _judge_branch(self, spot, sign, jacobian):
        values = kernel.singular_values(jacobian)
        if not values[-1] > LEAST_MOBILITY * values[0]:
            raise PositionError(
                f"bump {spot.bump_mm:g} mm, roll {spot.roll_deg:g}°, rack {spot.rack_mm:g} mm: the position is singular "
                f"(least over greatest singular value {values[-1] / values[0]:.1e}): the links do not hold the wheel; check points"
            )
        design = self._stations.get(Spot(0.0, 0.0, 0.0))
        if design is not None and not spot.locked and sign != design.sign:
            raise PositionError(
                f"bump {spot.bump_mm:g} mm, roll {spot.roll_deg:g}°, rack {spot.rack_mm:g} mm: the nominal linkage has "
                "gone over a dead point on the way there; ask for less travel"
            )

    def _effects(self, bare: Station):
        """Central differences of the pose over every scalar and setting: where iterations start, never a result."""
        q = bare.effects.shape[1]
        moves = np.concatenate((np.eye(q), -np.eye(q)), axis=1) * STEP
        block = self.block(moves[: self.scalars], moves[self.scalars :])
        pose, _ = self.poses(block, bare)
        gibbs = _gibbs_of(pose.rotation)
        spread = np.concatenate((pose.t, gibbs))
        slope = (spread[:, :q] - spread[:, q:]) / (2.0 * STEP)
        return np.where(np.isfinite(slope), slope, 0.0)

    def _rows_and_road(self, block, spot):
        rows = block.rows.racked(spot.rack_mm) if spot.rack_mm else block.rows
        if spot.locked:
            return block.parts.locked(rows, self.view(block, spot.at_rest()))
        return rows, road_plane(
            roll_rad=np.radians(spot.roll_deg), ground_mm=self.corner.ground_mm, rise_mm=spot.bump_mm + block.rise
        )

    def poses(self, block: Block, station: Station):
        """Kernel poses of a block at a station, and what `twists` needs of them."""
        rows, road = self._rows_and_road(block, station.spot)
        rows = rows.turned(station.rotation)
        start = station.effects @ block.moves
        pose, jacobian = kernel.solve(
            rows, road, gibbs=start[3:], t=station.rest + start[:3], rest=station.rest, order=station.order
        )
        kernel.judge_branch(pose, station.sign)
        return pose, (rows, road, jacobian)

    def view(self, block: Block, spot: Spot, *, rates=(), rest=None, locked=None, suffix="") -> View:
        """The View of a block at a spot with the twists named in `rates`; `suffix` picks a solid axle's wheel."""
        station = self.station(spot)
        pose, (rows, road, jacobian) = self.poses(block, station)
        found = {}
        if rates:
            given = twists(rows, road, pose, jacobian, order=station.order, inputs=rates)
            found = dict(zip(rates, given, strict=True))
        features = {name: _turned(station.rotation, p) for name, p in block.parts.body.items()}
        wheel = 1 if suffix == "_right" else 0
        features["wheel_centre"] = features.get(f"wheel_centre{suffix}", features.get("wheel_centre"))
        features["wheel_axis"] = features.get(f"wheel_axis{suffix}", features.get("wheel_axis"))
        features["radius_mm"] = self.corner.radius_mm[wheel]
        if spot.locked:
            road = road_plane(
                roll_rad=np.radians(spot.roll_deg), ground_mm=self.corner.ground_mm, rise_mm=spot.bump_mm + block.rise
            )
        return View(
            pose=pose, twists=found, features=features, road=road, parts=block.parts, vehicle=self.vehicle,
            rack_mm=spot.rack_mm, rest=rest, locked=locked,
        )  # fmt: skip

    def rates_for(self, info) -> tuple[str, ...]:
        """The twists that a measure reads on this linkage."""
        rates = set(info.rates) - {"axis", "solid-roll"}
        if "axis" in info.rates and self.corner.linkage == "five-link":
            rates |= {"bump", "rack"}
        if "solid-roll" in info.rates and self.corner.solid:
            rates.add("roll")
        if not self.corner.has_rack:
            rates.discard("rack")
        return tuple(sorted(rates))

    def angles(self, block: Block) -> tuple[np.ndarray, np.ndarray]:
        """The bench's target angles (A, N) deg of a block at design, NaN where it does not assemble; and its status (N,)."""
        infos = [KEYS[f"{target}_deg"] for target in self.bench.targets]
        rates = tuple(sorted({rate for info in infos for rate in self.rates_for(info)}))
        view = self.view(block, Spot(0.0, 0.0, 0.0), rates=rates)
        values = np.stack([info.evaluate(view) for info in infos])
        return np.where(view.pose.status == kernel.CLOSED, values, np.nan), view.pose.status


def _turned(rotation, p):
    return rotation @ p


def _gibbs_of(rotation):
    """Gibbs vectors (3, N) of rotation matrices (3, 3, N): axial part over (1 + trace)."""
    r = rotation
    axial = np.stack((r[2, 1] - r[1, 2], r[0, 2] - r[2, 0], r[1, 0] - r[0, 1]))
    return axial / (1.0 + r[0, 0] + r[1, 1] + r[2, 2])
