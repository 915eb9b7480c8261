"""Releases of drawings: frozen rows, superseded by later issues, never edited; every look at one checks its hashes."""

import json
import unicodedata
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import datetime
from difflib import get_close_matches
from typing import TYPE_CHECKING, Any

from catalog import release_files
from catalog.errors import InputError, WorkError
from catalog.release_files import sha256
from catalog.rows import fetch_rows, insert_rows, plain

if TYPE_CHECKING:
    from duckdb import DuckDBPyConnection

_JSON = ("uncovered", "warnings", "facts")
_RECORD = (
    "drawing", "issue", "part", "study_id", "revision_id", "geometry", "title", "reason", "by_whom", "created",
    "supersedes", "supersedes_hash", "uncovered", "warnings", "facts", "result_hash", "version",
)  # fmt: skip


class ReleaseNotFound(InputError):
    """No such drawing, or no such issue of it."""


class ReleaseExists(InputError):
    """That issue of that drawing is released already."""


class ReleaseOtherPart(InputError):
    """The drawing was released for another part before."""


class ReleaseOvertaken(WorkError):
    """Someone released another issue of the drawing in the meantime."""


class ReleaseAltered(WorkError):
    """Rows or files are not those that were released."""


@dataclass(frozen=True, slots=True)
class Release:
    """One issue of one drawing; times are UTC, newest_revision is that of its geometry now."""

    id: int
    drawing: str
    issue: str
    part: str
    study_id: int
    revision_id: int
    geometry: str
    title: str
    reason: str
    by: str
    created: datetime
    supersedes: int | None
    supersedes_hash: str | None
    uncovered: list
    warnings: list
    facts: dict
    result_hash: str | None
    version: str
    record_hash: str
    files_hash: str
    supersedes_issue: str | None
    superseded_by: str | None
    newest_revision: int
    n_rows: int

    @property
    def stale(self) -> bool:
        """Whether the geometry has a newer revision than the one that was studied."""
        return self.newest_revision > int(self.geometry.rpartition("@")[2])

    @property
    def newest(self) -> str:
        """NAME@REVISION of the geometry now."""
        return f"{self.geometry.rpartition('@')[0]}@{self.newest_revision}"

    @property
    def label(self) -> str:
        return f"drawing {self.drawing}, issue {self.issue}"


_SELECT = """
    SELECT k.* EXCLUDE (drawing_key, issue_key, by_whom), k.by_whom AS "by", b.issue AS supersedes_issue,
           a.issue AS superseded_by,
           (SELECT max(o.number) FROM kept.revisions o WHERE o.geometry_id = r.geometry_id) AS newest_revision,
           (SELECT count(*) FROM kept.release_rows t WHERE t.release_id = k.id) AS n_rows
    FROM kept.releases k JOIN kept.revisions r ON r.id = k.revision_id
    LEFT JOIN kept.releases b ON b.id = k.supersedes LEFT JOIN kept.releases a ON a.supersedes = k.id
"""


def key(text: str) -> str:
    """What tells drawings and issues apart: letters and digits in whatever case, spaces counted once."""
    return " ".join(unicodedata.normalize("NFKC", text).casefold().split())


def list_releases(con: "DuckDBPyConnection") -> list[Release]:
    """All releases by drawing, oldest issue first."""
    return _releases(con, "ORDER BY k.drawing_key, k.id", [])


def issues(con: "DuckDBPyConnection", drawing: str) -> list[Release]:
    """All issues of a drawing, oldest first. Raises ReleaseNotFound."""
    found = _releases(con, "WHERE k.drawing_key = ? ORDER BY k.id", [key(drawing)])
    if not found:
        raise ReleaseNotFound(f"drawing {drawing!r} is not released; {_near(con, drawing)}")
    return found


def find(con: "DuckDBPyConnection", drawing: str, issue: str | None = None) -> Release:
    """That issue of a drawing, or its newest. Raises ReleaseNotFound."""
    found = issues(con, drawing)
    if issue is None:
        return found[-1]
    for release in found:
        if key(release.issue) == key(issue):
            return release
    raise ReleaseNotFound(
        f"drawing {found[0].drawing} has no issue {issue!r}; it has {', '.join(r.issue for r in found)}"
    )


def current(con: "DuckDBPyConnection", drawing: str) -> Release | None:
    """The newest issue of a drawing; None when it was never released."""
    found = _releases(con, "WHERE k.drawing_key = ? ORDER BY k.id DESC LIMIT 1", [key(drawing)])
    return found[0] if found else None


def refuse_taken(con: "DuckDBPyConnection", drawing: str, issue: str, *, part: str) -> None:
    """Raise ReleaseExists or ReleaseOtherPart where this issue may not be released."""
    for old in _releases(con, "WHERE k.drawing_key = ? ORDER BY k.id DESC", [key(drawing)]):
        if key(old.issue) == key(issue):
            raise ReleaseExists(
                f"{old.label} was released by {old.by} on {old.created:%Y-%m-%d} (study {old.study_id}) and does not"
                " change any more; give this one the next issue"
            )
        if old.part != part:
            raise ReleaseOtherPart(
                f"drawing {old.drawing} is of the part {old.part} (issue {old.issue}, {old.by},"
                f" {old.created:%Y-%m-%d}), not of {part}; a drawing is of one part, give another number"
            )


def summary(release: Release) -> dict[str, Any]:
    """What programs are told of a release, as plain JSON values."""
    told = ("id", "drawing", "issue", "part", "study_id", "geometry", "title", "reason", "by", "superseded_by", "stale", "newest",
            "uncovered", "warnings", "facts", "version", "record_hash", "n_rows")  # fmt: skip
    names = {"id": "release", "study_id": "study", "n_rows": "features"}
    said = {names.get(name, name): getattr(release, name) for name in told}
    said |= {"released": f"{release.created.isoformat()}Z", "supersedes": release.supersedes_issue}
    return said | {"current": release.superseded_by is None}


def record_hash(record: Mapping[str, Any], rows: Sequence[Mapping[str, Any]]) -> str:
    """sha256 (hex) over a release (its keys as columns of kept.releases) and its rows (those of release_rows)."""
    content = {name: record.get(name) for name in _RECORD}
    content["created"] = record["created"].isoformat()
    ordered = sorted((dict(row) for row in rows), key=lambda row: row["place"])
    return sha256(_canonical({"release": content, "rows": ordered}))


def freeze(
    con: "DuckDBPyConnection",
    record: Mapping[str, Any],
    rows: Sequence[Mapping[str, Any]],
    files: Mapping[str, bytes],
) -> Release:
    """Keep a release for good; gives it as it is kept.

    record: columns of kept.releases without id, keys and hashes; its `supersedes` is the release that was current
    when it was prepared. rows: columns of kept.release_rows, all of them. files: contents by path, the manifest too.
    Raises ReleaseExists, ReleaseOtherPart, ReleaseOvertaken.
    """
    refuse_taken(con, record["drawing"], record["issue"], part=record["part"])
    newest = current(con, record["drawing"])
    if (newest.id if newest else None) != record["supersedes"]:
        raise ReleaseOvertaken(
            f"drawing {record['drawing']}: issue {newest.issue if newest else '–'} was released in the meantime;"
            " release again, so that the note names it"
        )
    release_id = con.execute("SELECT coalesce(max(id), 0) + 1 FROM kept.releases").fetchone()[0]
    hashes = {"record_hash": record_hash(record, rows), "files_hash": sha256(files[release_files.MANIFEST])}
    keys = {"id": release_id, "drawing_key": key(record["drawing"]), "issue_key": key(record["issue"])}
    insert_rows(con, "releases", [{**record, **keys, **hashes}])
    insert_rows(con, "release_rows", [{**row, "release_id": release_id} for row in rows])
    release_files.keep(con, release_id, files)
    made = find(con, record["drawing"], record["issue"])
    load_files(con, made)
    return made


def load_rows(con: "DuckDBPyConnection", release: Release) -> list[dict[str, Any]]:
    """The rows of a release in the order of its note. Raises ReleaseAltered where they are not those released."""
    query = "SELECT * EXCLUDE (release_id) FROM kept.release_rows WHERE release_id = ? ORDER BY place"
    rows = [{**row, "evidence": json.loads(row["evidence"])} for row in fetch_rows(con, query, [release.id])]
    record = {name: getattr(release, "by" if name == "by_whom" else name) for name in _RECORD}
    if record_hash(record, rows) != release.record_hash:
        raise ReleaseAltered(
            f"{release.label}: what the catalog holds is not what was released (its hash was"
            f" {release.record_hash[:12]}…); restore a copy of the catalog"
        )
    return rows


def load_files(con: "DuckDBPyConnection", release: Release) -> dict[str, bytes]:
    """The files of a release by path, as they were handed out. Raises ReleaseAltered where one is not."""
    load_rows(con, release)
    files = release_files.load(con, release.id, files_hash=release.files_hash)
    if files is None:
        raise ReleaseAltered(
            f"{release.label}: its files are not those that were released; restore a copy of the catalog"
        )
    return files


def altered(con: "DuckDBPyConnection", release: Release) -> bool:
    """Whether the rows of a release are not those that were released."""
    try:
        load_rows(con, release)
    except ReleaseAltered:
        return True
    return False


def moved_points(con: "DuckDBPyConnection", release: Release) -> dict[str, float]:
    """How far (mm) points lie in the newest revision from where they were studied; what did not move is left out."""
    query = """
        SELECT p.point, max(sqrt((q.x_mm - p.x_mm)**2 + (q.y_mm - p.y_mm)**2 + (q.z_mm - p.z_mm)**2)) AS moved
        FROM kept.points p JOIN kept.revisions r ON r.id = p.revision_id
        JOIN kept.revisions n ON n.geometry_id = r.geometry_id AND n.number = ?
        JOIN kept.points q ON q.revision_id = n.id AND q.side = p.side AND q.point = p.point
        WHERE p.revision_id = ? GROUP BY p.point HAVING moved > 0.0005 ORDER BY moved DESC, p.point
    """
    return dict(con.execute(query, [release.newest_revision, release.revision_id]).fetchall())


def _releases(con: "DuckDBPyConnection", rest: str, parameters: list) -> list[Release]:
    found = fetch_rows(con, _SELECT + rest, parameters)
    return [Release(**{**row, **{name: json.loads(row[name]) for name in _JSON}}) for row in found]


def _near(con: "DuckDBPyConnection", drawing: str) -> str:
    names = [name for (name,) in con.execute("SELECT DISTINCT drawing FROM kept.releases ORDER BY 1").fetchall()]
    close = get_close_matches(drawing, names, n=3, cutoff=0.5)
    if close:
        return f"did you mean {' or '.join(repr(name) for name in close)}?"
    return "`holdtight releases` lists what is, `holdtight release` makes one"


def _canonical(value: Any) -> bytes:
    text = json.dumps(plain(value), sort_keys=True, separators=(",", ":"), ensure_ascii=False, allow_nan=False)
    return text.encode("utf-8", "surrogatepass")
