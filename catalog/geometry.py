"""The frozen record of a geometry: always ISO 8855 axes, mm, degrees, car coordinates (y to the left)."""

import hashlib
import json
import math
from collections.abc import Mapping
from dataclasses import asdict, dataclass, field
from types import MappingProxyType

Point = tuple[float, float, float]
NOT_CONTENT = ("ignored_points", "points_text")


@dataclass(frozen=True, slots=True)
class Wheel:
    """A wheel at design: lengths in mm, camber + top outboard, toe + toe-in."""

    centre: Point
    loaded_radius_mm: float
    camber_deg: float
    toe_deg: float

    def ground_mm(self) -> float:
        """z (mm) of the horizontal plane that touches the tyre disc."""
        return self.centre[2] - self.loaded_radius_mm * math.cos(math.radians(self.camber_deg))


@dataclass(frozen=True, slots=True)
class Side:
    """One side's points by name (mm, car coordinates) and its wheel."""

    points: Mapping[str, Point]
    wheel: Wheel


@dataclass(frozen=True, slots=True)
class Arm:
    """How an arm is made (one-piece | legs) and what locates it along its pivots (centre | front | rear)."""

    build: str
    located_by: str


@dataclass(frozen=True, slots=True)
class Vehicle:
    """What the measures need to know of the car; None where the file gives nothing."""

    axle: str
    wheelbase_mm: float | None
    cg_height_mm: float | None
    brake_share: float | None
    drive_share: float | None
    brakes: str
    drive_torque: str
    steered: bool


@dataclass(frozen=True, slots=True)
class Geometry:
    """A validated geometry. Both sides are always filled, the mirror image where only one was given.

    On a solid axle both sides hold all link points of the axle; the wheels and spring points differ.
    Points of links are named NAME_inner and NAME_outer. shop_names: the shop's own name of a point (also of
    wheel_centre; of the other side with its prefix, right.NAME) where it differs; ignored_points: rows of the points
    file that were left out; points_text: that file as given, "" without one.
    """

    name: str
    linkage: str
    note: str
    given_axes: str
    given_units: str
    given_side: str
    left: Side
    right: Side
    right_is_mirror: bool
    arms: Mapping[str, Arm]
    links: tuple[str, ...]
    steer_link: str | None
    spring_on: str
    vehicle: Vehicle
    datums: str
    text: str
    content_hash: str
    shop_names: Mapping[str, str] = field(default_factory=lambda: MappingProxyType({}))
    ignored_points: tuple[str, ...] = ()
    points_text: str = ""

    def ground_mm(self) -> float:
        """z (mm) of the design road plane."""
        return self.left.wheel.ground_mm()


def to_record(geometry: Geometry) -> dict:
    """Everything but the given text and the hash, as plain JSON values."""
    vehicle, arms = asdict(geometry.vehicle), {name: asdict(arm) for name, arm in geometry.arms.items()}
    record = {
        key: getattr(geometry, key)
        for key in ("name", "linkage", "note", "given_axes", "given_units", "given_side", "right_is_mirror")
    }
    record |= {"steer_link": geometry.steer_link, "spring_on": geometry.spring_on, "datums": geometry.datums}
    record |= {"left": _side_record(geometry.left), "right": _side_record(geometry.right)}
    record |= {"arms": arms, "links": list(geometry.links), "vehicle": vehicle}
    record |= {"shop_names": dict(geometry.shop_names), "ignored_points": list(geometry.ignored_points)}
    return record | {"points_text": geometry.points_text}


def from_record(record: Mapping, *, text: str) -> Geometry:
    """The geometry of a record made by to_record; text is the file as it was given."""
    plain = {
        **record,
        "left": _side(record["left"]),
        "right": _side(record["right"]),
        "arms": MappingProxyType({name: Arm(**arm) for name, arm in record["arms"].items()}),
        "links": tuple(record["links"]),
        "vehicle": Vehicle(**record["vehicle"]),
        "shop_names": MappingProxyType(dict(record.get("shop_names", {}))),
        "ignored_points": tuple(record.get("ignored_points", ())),
    }
    return Geometry(**plain, text=text, content_hash=content_hash(record))


def content_hash(record: Mapping) -> str:
    """sha256 (hex) over the canonical JSON of a record: spacing and comments of the file do not count.

    Nor does a points file beyond its values and names; without shop names the hash is that of records from before them.
    """
    content = {key: value for key, value in record.items() if key not in NOT_CONTENT}
    if not content.get("shop_names"):
        content.pop("shop_names", None)
    canonical = json.dumps(content, sort_keys=True, separators=(",", ":"), ensure_ascii=False, allow_nan=False)
    return hashlib.sha256(canonical.encode("utf-8", "surrogatepass")).hexdigest()


def _side_record(side: Side) -> dict:
    wheel = asdict(side.wheel)
    wheel["centre"] = list(wheel["centre"])
    return {"points": {name: list(point) for name, point in side.points.items()}, "wheel": wheel}


def _side(record: Mapping) -> Side:
    wheel = dict(record["wheel"])
    wheel["centre"] = tuple(wheel["centre"])
    points = MappingProxyType({name: tuple(point) for name, point in record["points"].items()})
    return Side(points=points, wheel=Wheel(**wheel))
