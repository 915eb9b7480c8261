"""Registered revisions of geometries: numbered per name, with when, by whom and why; they never change."""

import json
from collections.abc import Mapping
from dataclasses import dataclass
from datetime import datetime
from difflib import get_close_matches
from typing import TYPE_CHECKING

from catalog.errors import InputError
from catalog.geometry import Geometry, Side, from_record, to_record
from catalog.rows import fetch_rows, insert_rows, now, unit_of

if TYPE_CHECKING:
    from duckdb import DuckDBPyConnection

Measures = Mapping[str, Mapping[str, float | None]]


class RevisionNotFound(InputError):
    """No such geometry, or no such revision of it."""


@dataclass(frozen=True, slots=True)
class Revision:
    """A registered revision; is_new is true only from the register call that made it."""

    id: int
    name: str
    number: int
    linkage: str
    axle: str
    note: str
    created: datetime
    by: str
    why: str
    content_hash: str
    is_new: bool = False

    @property
    def spec(self) -> str:
        """NAME@REVISION."""
        return f"{self.name}@{self.number}"


_SELECT = """
    SELECT r.id, g.name, r.number, r.linkage, r.axle, r.note, r.created, r.by_whom AS "by", r.why,
           r.content_hash
    FROM kept.revisions r JOIN kept.geometries g ON g.id = r.geometry_id
"""


def register(
    con: "DuckDBPyConnection", geometry: Geometry, *, measures: Measures, by: str, why: str
) -> Revision:
    """Keep a geometry as a revision; the same content again is the revision that is there already.

    con: a writing connection; measures: {"left"|"right"|"axle": {key: value or None}} at design.
    """
    same = known(con, geometry)
    if same is not None:
        return same
    revision_id = con.execute("SELECT coalesce(max(id), 0) + 1 FROM kept.revisions").fetchone()[0]
    _insert_revision(con, geometry, revision_id=revision_id, by=by, why=why)
    insert_rows(con, "points", _point_rows(revision_id, geometry))
    insert_rows(con, "revision_measures", _measure_rows(revision_id, measures))
    made = _revisions(con, "WHERE r.id = ?", [revision_id])[0]
    return Revision(**{name: getattr(made, name) for name in Revision.__slots__} | {"is_new": True})


def known(con: "DuckDBPyConnection", geometry: Geometry) -> Revision | None:
    """The revision that holds this very content already, or None."""
    same = _revisions(con, "WHERE g.name = ? AND r.content_hash = ?", [geometry.name, geometry.content_hash])
    return same[0] if same else None


def find(con: "DuckDBPyConnection", spec: str) -> Revision:
    """The revision of "NAME@NUMBER", or the newest one of "NAME". Raises RevisionNotFound."""
    name, _, wanted = spec.partition("@")
    found = _revisions(con, "WHERE g.name = ? ORDER BY r.number", [name])
    if not found:
        raise RevisionNotFound(f"geometry {name!r} is not in the catalog; {_near(con, name)}")
    if not wanted and "@" not in spec:
        return found[-1]
    for revision in found:
        if str(revision.number) == wanted.strip():
            return revision
    raise RevisionNotFound(
        f"geometry {name!r} has no revision {wanted!r}; it has {found[0].number} to {found[-1].number}."
    )


def by_id(con: "DuckDBPyConnection", revision_id: int) -> Revision:
    """The revision of that number over all geometries. Raises RevisionNotFound."""
    found = _revisions(con, "WHERE r.id = ?", [revision_id])
    if not found:
        raise RevisionNotFound(f"revision number {revision_id} is not in the catalog; list the geometries.")
    return found[0]


def load(con: "DuckDBPyConnection", revision: Revision) -> Geometry:
    """The geometry of a revision, from its record: later rules for files do not change it."""
    query = "SELECT record, text FROM kept.revisions WHERE id = ?"
    record, text = con.execute(query, [revision.id]).fetchone()
    return from_record(json.loads(record), text=text)


def list_revisions(con: "DuckDBPyConnection", *, newest_only: bool = False) -> list[Revision]:
    """All revisions, by name and number."""
    newest = "QUALIFY r.number = max(r.number) OVER (PARTITION BY g.id)" if newest_only else ""
    return _revisions(con, f"{newest} ORDER BY g.name, r.number", [])


def measures_of(con: "DuckDBPyConnection", revision: Revision) -> dict[str, dict[str, float | None]]:
    """The measures kept with a revision, at design: {"left": {key: value}, "right": …, "axle": …}."""
    query = "SELECT side, key, value FROM kept.revision_measures WHERE revision_id = ? ORDER BY rowid"
    found: dict[str, dict[str, float | None]] = {"left": {}, "right": {}, "axle": {}}
    for side, key, value in con.execute(query, [revision.id]).fetchall():
        found[side][key] = value
    return found


def _revisions(con: "DuckDBPyConnection", rest: str, parameters: list) -> list[Revision]:
    return [Revision(**row) for row in fetch_rows(con, _SELECT + rest, parameters)]


def _near(con: "DuckDBPyConnection", name: str) -> str:
    names = [row[0] for row in con.execute("SELECT name FROM kept.geometries ORDER BY name").fetchall()]
    close = get_close_matches(name, names, n=3, cutoff=0.5)
    if close:
        return f"did you mean {' or '.join(repr(other) for other in close)}?"
    return "`holdtight geometries` lists what is there, `holdtight add` adds a file."


def _geometry_id(con: "DuckDBPyConnection", name: str) -> int:
    found = con.execute("SELECT id FROM kept.geometries WHERE name = ?", [name]).fetchone()
    if found:
        return found[0]
    query = "INSERT INTO kept.geometries SELECT coalesce(max(id), 0) + 1, ? FROM kept.geometries RETURNING id"
    return con.execute(query, [name]).fetchone()[0]


def _insert_revision(
    con: "DuckDBPyConnection", geometry: Geometry, *, revision_id: int, by: str, why: str
) -> None:
    geometry_id = _geometry_id(con, geometry.name)
    query = "SELECT coalesce(max(number), 0) + 1 FROM kept.revisions WHERE geometry_id = ?"
    row = {
        "id": revision_id,
        "geometry_id": geometry_id,
        "number": con.execute(query, [geometry_id]).fetchone()[0],
        "content_hash": geometry.content_hash,
        "linkage": geometry.linkage,
        "axle": geometry.vehicle.axle,
        "given_axes": geometry.given_axes,
        "given_units": geometry.given_units,
        "given_side": geometry.given_side,
        "note": geometry.note,
        "created": now(),
        "by_whom": by,
        "why": why,
        "text": geometry.text,
        "record": to_record(geometry),
    }
    insert_rows(con, "revisions", [row])


def _point_rows(revision_id: int, geometry: Geometry) -> list[dict]:
    def rows(side: str, of: Side) -> list[dict]:
        placed = {**of.points, "wheel_centre": of.wheel.centre}
        names = ("x_mm", "y_mm", "z_mm")
        return [
            {"revision_id": revision_id, "side": side, "point": name, **dict(zip(names, point, strict=True))}
            for name, point in placed.items()
        ]

    return rows("left", geometry.left) + rows("right", geometry.right)


def _measure_rows(revision_id: int, measures: Measures) -> list[dict]:
    return [
        {"revision_id": revision_id, "side": side, "key": key, "value": value, "unit": unit_of(key)}
        for side, values in measures.items()
        for key, value in values.items()
    ]
