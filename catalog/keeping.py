"""Copies of the catalog, and whether what a catalog holds is still what was put into it."""

import contextlib
import json
import os
import subprocess
import sys
import time
import uuid
from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING

from catalog import migrate, queue, releases, results
from catalog.chunks import chunk_hash, load_chunk
from catalog.errors import InputError, WorkError
from catalog.geometry import content_hash
from catalog.store import Catalog, CatalogFailed, CatalogForeign

if TYPE_CHECKING:
    from duckdb import DuckDBPyConnection

SLICE_S, PAUSE_S = 0.3, 0.1  # a long check gives way to writers again and again
BIG = ("builds", "build_values")  # read chunk by chunk
SEARCH = "worst"  # the method that goes on until it has found: its builds are not known before
LATER_TABLES = ("verdicts",)  # of result tables: what a study of an earlier schema could not have
LATER_COLUMNS = ("lost_share",)
_COPY = """
import os, shutil, sys
shutil.copyfile(sys.argv[1], sys.argv[2])
with open(sys.argv[2], "rb+") as file:
    os.fsync(file.fileno())
"""


class BackupRefused(InputError):
    """The backup's name is taken or its folder is not there."""


class BackupFailed(WorkError):
    """The copy could not be written."""


@dataclass(frozen=True, slots=True)
class Finding:
    """Something that is wrong: what kind of thing, which one, and what is the matter."""

    what: str
    name: str
    problem: str


@dataclass(slots=True)
class Report:
    """What was checked (number of each kind) and what was found wrong."""

    schema_version: int = 0
    checked: dict[str, int] = field(default_factory=dict)
    wrong: list[Finding] = field(default_factory=list)


def backup(catalog: Catalog, target: Path) -> int:
    """Copy the catalog to a new file while others go on using it; gives its size in bytes.

    The file appears under its name only when it is whole and on the disk. Raises BackupRefused, BackupFailed.
    """
    _check_target(target)
    beside = target.with_name(f".{target.name}.{os.getpid()}-{uuid.uuid4().hex[:8]}.copy")
    try:
        with catalog.still():
            _copy(catalog.path, beside)
        _opens(beside)
        _put(beside, target)
    finally:
        with contextlib.suppress(OSError):
            beside.unlink(missing_ok=True)
    return target.stat().st_size


def check(catalog: Catalog, *, progress: Callable[[str, int, int], None] = lambda what, done, total: None) -> Report:
    """Compare everything in a catalog with the hashes it was kept with. Other processes may go on writing.

    progress: called with the kind of thing, how many of them are checked, and how many there are.
    """
    report = Report()
    with catalog.read() as con:
        report.schema_version = migrate.schema_version(con)
        plan = {
            "tables": _column(con, "SELECT table_name FROM duckdb_tables() WHERE schema_name = 'kept' ORDER BY 1"),
            "revisions": _column(con, "SELECT id FROM kept.revisions ORDER BY id"),
            "studies": _column(con, "SELECT id FROM kept.studies ORDER BY id"),
            "chunks": con.execute(
                "SELECT study_id, stage, chunk_no, hash FROM kept.chunks ORDER BY study_id, chunk_no"
            ).fetchall(),
            "releases": _column(con, "SELECT id FROM kept.releases ORDER BY id"),
            "as-built cars": _column(con, "SELECT id FROM kept.as_built ORDER BY id"),
        }
    for what, names in plan.items():
        report.checked[what] = 0
        for finding in _checked(catalog, what, names):
            report.checked[what] += 1
            report.wrong += finding
            progress(what, report.checked[what], len(names))
    return report


def _checked(catalog: Catalog, what: str, names: list) -> Iterator[list[Finding]]:
    """The findings of each thing; the catalog is held for a moment at a time."""
    look, waiting = _LOOKS[what], list(reversed(names))
    while waiting:
        found, end = [], time.monotonic() + SLICE_S
        try:
            with catalog.read() as con:
                while waiting and time.monotonic() < end:
                    name = waiting[-1]
                    found.append([Finding(what, label, problem) for label, problem in look(con, name)])
                    waiting.pop()
        except (CatalogForeign, CatalogFailed) as problem:
            found.append([Finding(what, str(waiting.pop()), str(problem))])
        except (ValueError, TypeError, LookupError, AttributeError) as problem:  # damage may read as anything
            said = f"it is damaged and cannot be read ({type(problem).__name__}: {problem})"
            found.append([Finding(what, str(waiting.pop()), said)])
        yield from found
        if waiting:
            time.sleep(PAUSE_S)


def _table(con: "DuckDBPyConnection", name: str) -> Iterable[tuple[str, str]]:
    if name not in BIG:  # reading every value makes the database compare its own sums
        con.execute(f"SELECT bit_xor(hash(t)) FROM kept.{name} t").fetchall()
    return ()


def _revision(con: "DuckDBPyConnection", number: int) -> Iterable[tuple[str, str]]:
    query = """
        SELECT g.name || '@' || r.number, r.record, r.content_hash FROM kept.revisions r
        JOIN kept.geometries g ON g.id = r.geometry_id WHERE r.id = ?
    """
    found = con.execute(query, [number]).fetchone()
    if found is None:
        yield f"revision {number}", "its geometry is missing"
    elif content_hash(json.loads(found[1])) != found[2]:
        yield found[0], "its record is not what was registered"


def _study(con: "DuckDBPyConnection", number: int) -> Iterable[tuple[str, str]]:
    label = f"study {number}"
    try:
        job = queue.get(con, number)
    except queue.StudyNotFound:
        yield label, "its revision is missing"
        return
    yield from ((label, problem) for problem in _miscounted(con, job))
    if job.state == "done":
        kept = results.load_results(con, number)
        if not any(results.result_hash(form) == job.result_hash for form in _forms(kept)):
            yield label, "its results are not those that it ended with"


def _miscounted(con: "DuckDBPyConnection", job: queue.Job) -> Iterable[str]:
    where = "WHERE study_id = ?"
    kept, chunks = con.execute(f"SELECT sum(n_builds), count(*) FROM kept.chunks {where}", [job.id]).fetchone()
    if (kept or 0) != job.done:
        yield f"{job.done} builds are counted, {kept or 0} are kept in its {chunks} chunks"
    if job.state == "done" and job.method != SEARCH and job.total is not None and job.done != job.total:
        yield f"it is done with {job.done} of {job.total} builds"
    query = f"SELECT count(*), count(DISTINCT (stage, chunk_no)) FROM kept.chunks {where}"
    rows, distinct = con.execute(query, [job.id]).fetchone()
    if rows != distinct:
        yield f"{rows - distinct} chunks are kept twice"
    query = f"SELECT count(*) FROM kept.builds {where}"
    found = con.execute(query, [job.id]).fetchone()[0]
    if found != (kept or 0):
        yield f"{found} builds are kept, its chunks count {kept or 0}"


def _forms(kept: dict[str, list[dict]]) -> Iterator[dict[str, list[dict]]]:
    """Result tables as they may have been hashed: without what later schemas added, or what was not given."""
    for tables in (results.TABLES, [name for name in results.TABLES if name not in LATER_TABLES]):
        for dropped in (lambda key: False, lambda key: key in LATER_COLUMNS, lambda key: True):
            yield {
                name: [{k: v for k, v in row.items() if v is not None or not dropped(k)} for row in kept[name]]
                for name in tables
            }


def _chunk(con: "DuckDBPyConnection", key: tuple) -> Iterable[tuple[str, str]]:
    study_id, stage, number, kept = key
    arrays, status = load_chunk(con, study_id, stage=stage, chunk_no=number)
    if not any(chunk_hash(form, status) == kept for form in _with_empty(arrays, len(status))):
        yield f"study {study_id}, chunk {number} {stage}", "its values are not those that were computed"


def _with_empty(arrays: dict, builds: int) -> Iterator[dict]:
    """A chunk's arrays with those that had no rows: they leave nothing in the catalog but their name in the hash."""
    import numpy as np

    for names in ((), ("value",), ("alignment",), ("alignment", "value")):
        yield {**{name: np.empty((0, builds)) for name in names}, **arrays}


def _release(con: "DuckDBPyConnection", number: int) -> Iterable[tuple[str, str]]:
    found = [release for release in releases.list_releases(con) if release.id == number]
    if not found:
        yield f"release {number}", "its revision is missing"
        return
    try:
        releases.load_files(con, found[0])
    except releases.ReleaseAltered as problem:
        yield found[0].label, str(problem).partition(": ")[2]


def _as_built(con: "DuckDBPyConnection", number: int) -> Iterable[tuple[str, str]]:
    query = "SELECT count(*) FROM kept.as_built_points WHERE as_built_id = ?"
    if not con.execute(query, [number]).fetchone()[0]:
        yield f"as-built car {number}", "its points are missing"


_LOOKS = {
    "tables": _table, "revisions": _revision, "studies": _study, "chunks": _chunk, "releases": _release,
    "as-built cars": _as_built,
}  # fmt: skip


def _column(con: "DuckDBPyConnection", query: str) -> list:
    return [row[0] for row in con.execute(query).fetchall()]


def _check_target(target: Path) -> None:
    if target.exists() or target.is_symlink():
        raise BackupRefused(f"{target}: is there already; a backup does not overwrite, name a new file.")
    if not target.parent.is_dir():
        raise BackupRefused(f"{target}: the folder {target.parent} does not exist; make it first.")
    wal = target.with_name(target.name + ".wal")
    if wal.exists():
        raise BackupRefused(f"{target}: {wal.name} of another catalog is there; move it away or name another file.")


def _copy(path: Path, beside: Path) -> None:
    words = [sys.executable, "-I", "-S", "-X", "utf8", "-c", _COPY, str(path.absolute()), str(beside.absolute())]
    done = subprocess.run(words, capture_output=True, encoding="utf-8", errors="replace", check=False)
    if done.returncode:
        reason = (done.stderr.strip().splitlines() or ["no reason given"])[-1]
        raise BackupFailed(f"{beside.parent}: the copy could not be written ({reason}); make room or name another folder.")


def _opens(beside: Path) -> None:
    try:
        with Catalog(beside).read() as con:
            con.execute("SELECT count(*) FROM kept.studies").fetchall()
    except (InputError, WorkError) as problem:
        raise BackupFailed(f"the copy cannot be opened ({problem}); check the catalog with `holdtight check`.") from None


def _put(beside: Path, target: Path) -> None:
    """Give the whole copy its name, unless another took it in the meantime."""
    try:
        os.link(beside, target)
    except FileExistsError:
        raise BackupRefused(f"{target}: is there already; a backup does not overwrite, name a new file.") from None
    except OSError:  # a file system without hard links
        _check_target(target)
        os.replace(beside, target)
    with contextlib.suppress(OSError):  # not every system lets a folder be opened
        folder = os.open(target.parent, os.O_RDONLY)
        try:
            os.fsync(folder)
        finally:
            os.close(folder)
