"""As-built cars: points measured on a car, kept for good with the revision of the geometry that it was built to.

The file is a CSV like a points file (name, x, y, z), in the axes and units of the geometry's own file, car coordinates.
Names are trade names or the shop's own names of the points; the side is that of a column `side` (left | right), else of
a prefix right. or left., else the one that the geometry's file gives. Links of a solid axle have no side: left is kept.
"""

import csv
import hashlib
import json
import math
import re
from collections.abc import Sequence
from dataclasses import dataclass
from datetime import datetime
from pathlib import Path
from typing import TYPE_CHECKING

from catalog.axes import axes_matrix, to_iso
from catalog.errors import InputError
from catalog.geometry import Geometry, Point
from catalog.linkages import LINKAGES, SPRING_POINTS
from catalog.points_csv import COLUMNS, PointsTable, Row, parse_points
from catalog.revisions import Revision
from catalog.rows import fetch_rows, insert_rows, now
from catalog.toml_text import one_line, read_text, shown

if TYPE_CHECKING:
    from duckdb import DuckDBPyConnection

SIDES = ("left", "right")
MOST_OFF_MM = 100.0
_WHEEL = "wheel_centre"
_MOST_NAME, _MOST_NOTE = 100, 2000


class AsBuiltError(InputError):
    """Measured points that cannot be taken, or a measurement that is not there."""


@dataclass(frozen=True, slots=True)
class Measured:
    """A measured point: mm, ISO axes, car coordinates, with its place on the drawing."""

    side: str
    point: str
    position: Point
    nominal: Point

    @property
    def offset(self) -> Point:
        """Measured minus drawing (mm): x forward, y to the left, z up, on both sides of the car."""
        return tuple(round(a - b, 9) for a, b in zip(self.position, self.nominal, strict=True))

    @property
    def position_mm(self) -> float:
        """Actual position: twice the distance from the drawing's place, mm, as a diameter is compared with it."""
        return 2.0 * math.sqrt(sum(v * v for v in self.offset))


@dataclass(frozen=True, slots=True)
class Given:
    """What a file gives: its points, the names of the rows left out, and its text."""

    points: tuple[Measured, ...]
    left_out: tuple[str, ...]
    text: str


@dataclass(frozen=True, slots=True)
class AsBuilt:
    """A kept measurement; is_new is true only from the add call that made it."""

    id: int
    revision_id: int
    geometry: str
    car: str
    created: datetime
    by: str
    note: str
    points: tuple[Measured, ...]
    is_new: bool = False


def read_measured(path: Path, geometry: Geometry) -> Given:
    """The measured points of a CSV file. Raises AsBuiltError or GeometryFileError."""
    return parse_measured(read_text(path, error=AsBuiltError), source=path.name, geometry=geometry)


def parse_measured(text: str, *, source: str, geometry: Geometry) -> Given:
    """The measured points of a CSV text. source: names it in errors."""
    table = parse_points(text, source=source, units=geometry.given_units)
    side_column = _side_column(text, table)
    used: dict[tuple[str, str], Row] = {}
    left_out = []
    for row in table.rows:
        slot = _slot(row, side_column, geometry, source)
        if slot is None:
            left_out.append(row.name)
        elif slot in used:
            _refuse(source, row, f"measures {' '.join(slot)} again, after line {used[slot].line}; keep one")
        else:
            used[slot] = row
    if not used:
        raise AsBuiltError(
            f"{source}: no row names a point of {geometry.name}; its points are {', '.join(_names(geometry))}"
        )
    places = table.positions(list(used.values()))
    points = tuple(
        _measured(slot, place, geometry, used[slot], source) for slot, place in zip(used, places, strict=True)
    )
    return Given(points, tuple(dict.fromkeys(left_out)), text)


def add(con: "DuckDBPyConnection", revision: Revision, given: Given, *, car: str, by: str, note: str = "") -> AsBuilt:
    """Keep a measurement of a car; the same points of the same car again are the measurement that is there."""
    car = car.strip()
    if not 0 < len(car) <= _MOST_NAME:
        raise AsBuiltError(f"car {shown(car)}: give the car a name of 1 to {_MOST_NAME} letters")
    if len(note) > _MOST_NOTE:
        raise AsBuiltError(f"note: has more than {_MOST_NOTE} letters; shorten it")
    content = sorted([p.side, p.point, *p.position] for p in given.points)
    digest = hashlib.sha256(json.dumps(content).encode()).hexdigest()
    query = "SELECT id FROM kept.as_built WHERE revision_id = ? AND car = ? AND content_hash = ?"
    same = con.execute(query, [revision.id, car, digest]).fetchone()
    if same:
        return get(con, same[0])
    number = con.execute("SELECT coalesce(max(id), 0) + 1 FROM kept.as_built").fetchone()[0]
    row = {"id": number, "revision_id": revision.id, "car": car, "created": now(), "by_whom": by, "note": note}
    insert_rows(con, "as_built", [row | {"text": given.text, "content_hash": digest}])
    axes = ("x_mm", "y_mm", "z_mm")
    insert_rows(con, "as_built_points", [
        {"as_built_id": number, "side": p.side, "point": p.point, **dict(zip(axes, p.position, strict=True))}
        for p in given.points
    ])  # fmt: skip
    made = get(con, number)
    return AsBuilt(**{key: getattr(made, key) for key in AsBuilt.__slots__} | {"is_new": True})


def get(con: "DuckDBPyConnection", number: int) -> AsBuilt:
    """The measurement of that number. Raises AsBuiltError."""
    found = _found(con, "WHERE b.id = ?", [number])
    if not found:
        raise AsBuiltError(f"measurement {number} is not in the catalog; `holdtight as-built list` lists them")
    return found[0]


def list_as_built(con: "DuckDBPyConnection", *, geometry: str | None = None) -> list[AsBuilt]:
    """All measurements by number, or those of one geometry (its name)."""
    return _found(con, "WHERE g.name = ?", [geometry]) if geometry else _found(con, "", [])


def nominal_of(geometry: Geometry, side: str, point: str) -> Point:
    """A point's place on the drawing (mm, ISO axes, car coordinates)."""
    of = getattr(geometry, side)
    return of.wheel.centre if point == _WHEEL else of.points[point]


def _found(con: "DuckDBPyConnection", where: str, parameters: Sequence) -> list[AsBuilt]:
    tables = f"""
        FROM kept.as_built b JOIN kept.revisions r ON r.id = b.revision_id
        JOIN kept.geometries g ON g.id = r.geometry_id {where}
    """
    rows = fetch_rows(con, f"""
        SELECT b.id, b.revision_id, g.name || '@' || r.number AS geometry, b.car, b.created, b.by_whom AS "by", b.note
        {tables} ORDER BY b.id
    """, parameters)  # fmt: skip
    points: dict[int, list[Measured]] = {}
    for number, side, point, *values in con.execute(f"""
        WITH b AS (SELECT b.id, b.revision_id {tables})
        SELECT b.id, m.side, m.point, m.x_mm, m.y_mm, m.z_mm, n.x_mm, n.y_mm, n.z_mm
        FROM b JOIN kept.as_built_points m ON m.as_built_id = b.id
        JOIN kept.points n ON n.revision_id = b.revision_id AND n.side = m.side AND n.point = m.point
        ORDER BY b.id, m.rowid
    """, list(parameters)).fetchall():  # fmt: skip
        points.setdefault(number, []).append(Measured(side, point, tuple(values[:3]), tuple(values[3:])))
    return [AsBuilt(**row, points=tuple(points.get(row["id"], ()))) for row in rows]


def _names(geometry: Geometry) -> list[str]:
    return [*geometry.left.points, _WHEEL]


def _side_column(text: str, table: PointsTable) -> int | None:
    """Place of the column `side` in the header, where there is one."""
    for number, line in enumerate(re.split(r"\r\n|\n|\r", text), start=1):
        cells = [cell.strip().lower() for cell in next(csv.reader([line], delimiter=table.separator), [])]
        if line.lstrip().startswith("#") or len(cells) < len(COLUMNS):
            continue
        is_row = any(row.line == number for row in table.rows)
        return cells.index("side") if not is_row and "side" in cells else None
    return None


def _slot(row: Row, side_column: int | None, geometry: Geometry, source: str) -> tuple[str, str] | None:
    """(side, point) that a row measures; None where its name is no point of the geometry."""
    prefix, name = _split(row.name, geometry)
    said = row.cells[side_column].strip().lower() if side_column is not None and side_column < len(row.cells) else ""
    if said and said not in SIDES:
        _refuse(source, row, f'side {shown(said)} must be "left" or "right"')
    if name is None:
        return None
    if said and prefix and said != prefix:
        _refuse(source, row, f"says {said} in its column and {prefix} in its name; make them agree")
    one_for_both = LINKAGES[geometry.linkage].whole_axle and name not in (*SPRING_POINTS, _WHEEL)
    return ("left" if one_for_both else said or prefix or geometry.given_side), name


def _split(name: str, geometry: Geometry) -> tuple[str | None, str | None]:
    """(side that the name itself tells, trade name) of a row's name: a trade name, or the shop's own."""
    by_shop = {shop: trade for trade, shop in geometry.shop_names.items()}
    trade = by_shop.get(name, name)
    side = next((each for each in SIDES if trade.startswith(f"{each}.")), None)
    trade = trade.removeprefix(f"{side}.")
    return side, trade if trade in _names(geometry) else None


def _measured(slot: tuple[str, str], place: Sequence[float], geometry: Geometry, row: Row, source: str) -> Measured:
    position = to_iso(tuple(place), matrix=axes_matrix(geometry.given_axes), units=geometry.given_units)
    found = Measured(*slot, position=position, nominal=nominal_of(geometry, *slot))
    off = found.position_mm / 2
    if off > MOST_OFF_MM:
        _refuse(
            source, row,
            f"is {off:.0f} mm from the {slot[0]} {slot[1]} of the drawing; check axes ({geometry.given_axes}), "
            f"units ({geometry.given_units}) and side",
        )  # fmt: skip
    return found


def _refuse(source: str, row: Row, told: str) -> None:
    raise AsBuiltError(one_line(f"{source}: line {row.line}, {shown(row.name)}: {told}"))
