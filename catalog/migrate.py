"""Numbered migrations of a catalog file, all in one transaction, on a copy that replaces the file."""

import contextlib
import hashlib
import os
import sys
import uuid
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from catalog.errors import WorkError

MIGRATIONS = Path(__file__).parent / "migrations"
BLOCK_BYTES = "65536"  # a quarter of the usual: a small catalog stays small, a big one is no bigger
WINDOWS = os.name == "nt"
VIEWS = Path(__file__).parent / "views.sql"


class MigrationFailed(WorkError):
    """A migration did not go through; the catalog file is as it was."""


@dataclass(frozen=True, slots=True)
class Migration:
    """One numbered step of the schema."""

    number: int
    path: Path


def migrations() -> list[Migration]:
    """All migrations of this program in order."""
    found = [Migration(int(path.name[:4]), path) for path in MIGRATIONS.glob("[0-9][0-9][0-9][0-9]_*.sql")]
    return sorted(found, key=lambda step: step.number)


def newest_version() -> int:
    """Schema version that this program writes."""
    return migrations()[-1].number


def schema_version(con: Any) -> int | None:
    """Schema version of an open file; None when it is no catalog."""
    try:
        return con.execute("SELECT max(version) FROM kept.schema_migrations").fetchone()[0]
    except Exception:  # whatever a foreign file answers, it is foreign
        return None


def create(path: Path) -> None:
    """A new catalog at path; another process that makes it at the same moment wins."""
    fresh = _beside(path, "new")
    try:
        _apply(fresh, since=0, catalog=path)
        try:
            os.link(fresh, path)
        except FileExistsError:
            return
        except OSError:  # a file system without hard links
            os.replace(fresh, path)
    finally:
        _remove(fresh)


def upgrade(con: Any, path: Path) -> None:
    """Bring the file at path, held open by con, to the newest schema.

    A copy is migrated and then replaces the file, so that a failure leaves the old file untouched. On Windows, where a
    file that is open can be neither copied nor replaced, the file itself is migrated in one transaction.
    """
    since = schema_version(con)
    if WINDOWS:
        _migrate(con, since=since or 0, catalog=path)
        return
    con.execute("CHECKPOINT")
    copy = _beside(path, "migrating")
    try:
        _copy(path, copy)
        _apply(copy, since=since or 0, catalog=path)
        os.replace(copy, path)
    finally:
        _remove(copy)


def refresh_views(con: Any) -> None:
    """Put the public views of this program into an open catalog if they are not there."""
    text = VIEWS.read_text(encoding="utf-8")
    digest = hashlib.sha256(text.encode()).hexdigest()
    if con.execute("SELECT sha256 FROM kept.schema_views").fetchall() == [(digest,)]:
        return
    con.execute("BEGIN")
    con.execute(text)
    con.execute("DELETE FROM kept.schema_views")
    con.execute("INSERT INTO kept.schema_views VALUES (?)", [digest])
    con.execute("COMMIT")


def program_version() -> str:
    """Version of the installed program."""
    from importlib.metadata import PackageNotFoundError, version

    try:
        return version("holdtight")
    except PackageNotFoundError:
        return "unknown"


def _apply(path: Path, *, since: int, catalog: Path) -> None:
    import duckdb

    place = os.fsencode(path).decode()  # the database takes UTF-8 whatever the locale
    with duckdb.connect(place, config={"default_block_size": BLOCK_BYTES}) as con:
        _migrate(con, since=since, catalog=catalog)


def _migrate(con: Any, *, since: int, catalog: Path) -> None:
    import duckdb

    con.execute("BEGIN")
    for step in (step for step in migrations() if step.number > since):
        try:
            con.execute(step.path.read_text(encoding="utf-8"))
            now = datetime.now(UTC).replace(tzinfo=None)
            row = [step.number, step.path.name, now, program_version()]
            con.execute("INSERT INTO kept.schema_migrations VALUES (?, ?, ?, ?)", row)
        except duckdb.Error as problem:
            first = str(problem).splitlines()[0]
            raise MigrationFailed(
                f"{catalog}: migration {step.path.name} failed ({first}); the catalog is as it was."
                " Use the version of the program that wrote it, and report this."
            ) from problem
    con.execute("COMMIT")
    _load_processes(con)
    refresh_views(con)
    con.execute("CHECKPOINT")


def _load_processes(con: Any) -> None:
    from catalog.processes import load_initial

    con.execute("BEGIN")
    load_initial(con)
    con.execute("COMMIT")


def _copy(path: Path, copy: Path) -> None:
    import subprocess

    # closing any handle of this process on the file would drop the lock con holds: another process copies
    code = "import shutil, sys; shutil.copyfile(sys.argv[1], sys.argv[2])"
    done = subprocess.run(
        [sys.executable, "-I", "-S", "-X", "utf8", "-c", code, str(path), str(copy)],
        capture_output=True,
        encoding="utf-8",
        errors="replace",
        check=False,
    )
    if done.returncode:
        reason = (done.stderr.strip().splitlines() or ["no reason given"])[-1]
        raise MigrationFailed(
            f"{path}: no copy could be made beside it ({reason}); make room or allow writing there."
        )


def _beside(path: Path, what: str) -> Path:
    return path.with_name(f".{path.name}.{os.getpid()}-{uuid.uuid4().hex[:8]}.{what}")


def _remove(path: Path) -> None:
    for leftover in (path, path.with_name(path.name + ".wal")):
        with contextlib.suppress(OSError):  # a virus scanner may still look at it
            leftover.unlink(missing_ok=True)
