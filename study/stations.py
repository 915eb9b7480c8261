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
from study.build import HANDS, built_features
from study.kernel import solve as kernel
from study.kernel.rows import linearise, residuals, road_plane
from study.kernel.twists import twists
from study.measures import KEYS
from study.measures.view import View, mirrored

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
    """Some builds of one hand, assembled: kernel rows, parts, each wheel's own zero of bump (nw, N) mm, and all moves (Q, N)."""

    rows: object
    parts: object
    rise: np.ndarray
    moves: np.ndarray

    @property
    def n(self) -> int:
        return self.rise.shape[1]


class Hand:
    """One corner with what moves it: effects of the errors, alignment bench, bands."""

    def __init__(self, name: str, corner: Corner, *, effects, bench: Bench, bands, scalars: int, vehicle):
        self.name, self.corner, self.effects, self.bench = name, corner, tuple(effects), bench
        self.bands, self.scalars, self.vehicle = bands, scalars, vehicle
        self._stations: dict[Spot, Station] = {}
        self.station(Spot(0.0, 0.0, 0.0))

    def block(self, errors, settings) -> Block:
        """Assemble builds from errors (D, N) and adjuster settings (A, N)."""
        n = errors.shape[1]
        built = built_features(self.corner, self.effects, errors, self.bench.extra(settings))
        rows, parts = assemble(self.corner, built, n)
        ride = [self.bands[hand].get("ride_height") for hand in (HANDS if self.corner.solid else (self.name,))]
        rise = np.stack([np.zeros(n) if row is None else errors[row] for row in ride])
        return Block(rows, parts, rise, np.concatenate((errors, settings)))

    def station(self, spot: Spot) -> Station:
        """The station of a spot, solved at first asking. Raises PositionError."""
        if spot not in self._stations:
            self.reach([spot])
        return self._stations[spot]

    def reach(self, spots) -> None:
        """Solve the stations of these spots, all that are not known yet side by side. Raises PositionError."""
        new = [spot for spot in dict.fromkeys(spots) if spot not in self._stations]
        for spot in new:
            if spot.rack_mm and not self.corner.has_rack:
                raise PositionError(
                    f"rack {spot.rack_mm:g} mm: this {self.corner.linkage} has no steer link; ask for it at rack 0"
                )
        free = [spot for spot in new if not spot.locked]
        with np.errstate(all="ignore"):  # what is not finite is judged, and told, as out of reach
            if free:
                self._stations |= {found.spot: found for found in self._solve_stations(free)}
            for spot in new:
                if spot.locked:
                    start, block = self.station(spot.at_rest()), self._nominal(1)
                    self._stations[spot] = self._solve_from(start, *self._rows_and_road(block, spot), [spot])[0]

    def _nominal(self, count):
        return self.block(np.zeros((self.scalars, count)), np.zeros((len(self.bench.by), count)))

    def _solve_stations(self, spots):
        """Stations of spots that are no held ones, each drawn from the design pose."""
        block = self._nominal(len(spots))
        bump, roll, rack = np.array([spot[:3] for spot in spots]).T
        rows = block.rows.racked(rack) if rack.any() else block.rows
        road = road_plane(roll_rad=np.radians(roll), ground_mm=self.corner.ground_mm, rise_mm=bump + block.rise)
        design = self._stations.get(Spot(0.0, 0.0, 0.0))
        start = design or Station(spots[0], np.eye(3), self.corner.origin[:, None], None, 0.0, np.zeros((6, 0)))
        return self._solve_from(start, rows, road, spots)

    def _solve_from(self, start, rows, road, spots):
        """The nominal's homotopy from a start to every spot, a column each."""
        rotations, t, worst = kernel.solve_carefully(
            rows.turned(start.rotation), road, rest=start.rest, count=len(spots), least_steps=1
        )
        found = []
        for i, spot in enumerate(spots):
            self._judge(spot, worst[i])
            rotation = rotations[:, :, i] @ start.rotation
            found.append(self._station_at(spot, rows.take([i]), road.take([i]), rotation, t[:, [i]]))
        return found

    def _station_at(self, spot, rows, road, rotation, t):
        jacobian = np.empty((6, 6, 1))
        linearise(rows.turned(rotation), road, np.eye(3)[:, :, None], t, jacobian)
        order = kernel.pivot_order(jacobian[:, :, 0])
        sign = float(kernel.determinant_sign(jacobian)[0])
        self._judge_branch(spot, sign, jacobian[:, :, 0])
        q = self.scalars + len(self.bench.by)
        bare = Station(spot, rotation, t, order, sign, np.zeros((6, q)))
        return bare._replace(effects=self._effects(bare, jacobian[:, :, 0])) if q else bare

    def _where(self, spot):
        """The position as it was asked for: that of a right corner is mirrored."""
        sign = -1.0 if self.name == "right" else 1.0
        return (
            f"bump {spot.bump_mm:g} mm, roll {sign * spot.roll_deg + 0.0:g}°, rack {sign * spot.rack_mm + 0.0:g} mm"
            + (", right side" if self.name == "right" else "")
        )  # fmt: skip

    def _judge(self, spot, worst):
        if not worst <= kernel.TOLERANCE_MM:
            how = f"rows left open by {worst:.3g} mm" if np.isfinite(worst) else "it would go over a dead point"
            raise PositionError(
                f"{self._where(spot)}: the nominal linkage does not reach this position ({how}); ask for less travel"
            )

    def _judge_branch(self, spot, sign, jacobian):
        values = kernel.singular_values(jacobian)
        if not values[-1] > LEAST_MOBILITY * values[0]:
            raise PositionError(
                f"{self._where(spot)}: the position is singular "
                f"(least over greatest singular value {values[-1] / values[0]:.1e}): the links do not hold the wheel; check points"
            )
        design = self._stations.get(Spot(0.0, 0.0, 0.0))
        if design is not None and not spot.locked and sign != design.sign:
            raise PositionError(
                f"{self._where(spot)}: the nominal linkage has "
                "gone over a dead point on the way there; ask for less travel"
            )

    def _effects(self, bare: Station, jacobian):
        """First-order effects of every scalar and setting on (t, Gibbs): where iterations start, never a result.

        −J⁻¹ ∂F/∂e, with ∂F/∂e by central differences of the rows that stay open when the nominal pose is kept.
        """
        q = bare.effects.shape[1]
        moves = np.concatenate((np.eye(q), -np.eye(q)), axis=1) * STEP
        rows, road = self._rows_and_road(self.block(moves[: self.scalars], moves[self.scalars :]), bare.spot)
        here = np.broadcast_to(np.eye(3)[:, :, None], (3, 3, 2 * q))
        open_ = residuals(rows.turned(bare.rotation), road, here, np.broadcast_to(bare.rest, (3, 2 * q)))
        slope = -np.linalg.solve(jacobian, (open_[:, :q] - open_[:, q:]) / (2.0 * STEP))
        slope[3:] *= 0.5  # a Gibbs vector is half the turn
        return np.where(np.isfinite(slope), slope, 0.0)

    def _rows_and_road(self, block, spot):
        rows = block.rows.racked(spot.rack_mm) if spot.rack_mm else block.rows
        if spot.locked:
            return block.parts.locked(rows, self.view(block, spot.at_rest(), wheel="left"))
        return rows, self._road(block, spot)

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

    def view(self, block: Block, spot: Spot, *, rates=(), wheel="") -> View:
        """The View of a block at a spot with the twists named in `rates`; `wheel`: the side, where one body carries both."""
        station = self.station(spot)
        pose, (rows, road, jacobian) = self.poses(block, station)
        given = twists(rows, road, pose, jacobian, order=station.order, inputs=rates) if rates else ()
        if spot.locked:
            road = self._road(block, spot)
        suffix, number = (f"_{wheel}", HANDS.index(wheel)) if self.corner.solid else ("", 0)
        found = View(
            pose=pose, twists=dict(zip(rates, given, strict=True)), parts=block.parts, vehicle=self.vehicle,
            features=_of_wheel(block.parts.body, suffix, station.rotation) | {"radius_mm": self.corner.radius_mm[number]},
            anchors=_of_wheel(block.parts.chassis, suffix), rack_mm=spot.rack_mm,
            road=road._replace(height=road.height[number : number + 1]),
        )  # fmt: skip
        return mirrored(found) if suffix == "_right" else found

    def _road(self, block, spot):
        roll = np.radians(spot.roll_deg)
        return road_plane(roll_rad=roll, ground_mm=self.corner.ground_mm, rise_mm=spot.bump_mm + block.rise)

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
        view = self.view(block, Spot(0.0, 0.0, 0.0), rates=rates, wheel="left")
        values = np.stack([info.evaluate(view) for info in infos])
        return np.where(view.pose.status == kernel.CLOSED, values, np.nan), view.pose.status


def _of_wheel(points, suffix, rotation=None):
    """Named points without those of the other wheel, the own wheel's under their plain names; turned where asked for."""
    out = {}
    for name, point in points.items():
        if suffix and name.endswith(("_left", "_right")):
            if not name.endswith(suffix):
                continue
            name = name.removesuffix(suffix)
        out[name] = point if rotation is None else rotation @ point
    return out
