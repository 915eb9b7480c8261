"""The only opener of the catalog file: who may write when, and what a file has to be.

DuckDB admits one writing process or many reading ones, so the file is held only for the moment of use.
"""

import contextlib
import os
import random
import re
import threading
import time
from collections.abc import Iterator
from pathlib import Path
from typing import TYPE_CHECKING

from catalog import migrate
from catalog.errors import InputError, WorkError

if TYPE_CHECKING:
    from duckdb import DuckDBPyConnection

DEFAULT_NAME = "holdtight.duckdb"
WAIT_S = 20.0
BUSY = ("Could not set lock", "different configuration", "already open in", "being used by another process")
DENIED = ("Permission denied", "Read-only file system", "Access is denied")
DAMAGE = ("Could not read enough bytes", "Corrupt database", "checksum")
FULL = ("No space left on device", "File too large", "Disk quota exceeded", "There is not enough space")
_turns: dict[Path, threading.Lock] = {}
_turns_guard = threading.Lock()


class CatalogMissing(InputError):
    """There is no catalog at that path."""


class CatalogForeign(InputError):
    """The file is no catalog of this program, or it is damaged."""


class CatalogTooNew(InputError):
    """The file was written by a newer program."""


class CatalogNotWritable(InputError):
    """The file or its folder may not be written."""


class CatalogBusy(WorkError):
    """Another process held the file for the whole waiting time."""


class CatalogFailed(WorkError):
    """The database refused an operation, for instance because the disk is full."""


class CatalogGone(WorkError):
    """The file was there and was taken away while it was in use."""


def catalog_path(given: str | os.PathLike | None = None) -> Path:
    """The catalog's path: the one given, else HOLDTIGHT_CATALOG, else holdtight.duckdb here."""
    return Path(given or os.environ.get("HOLDTIGHT_CATALOG") or DEFAULT_NAME)


class Catalog:
    """One catalog file, opened for each use: ``with Catalog(path).write() as con``.

    wait_s: how long (s) to wait for another process or thread before CatalogBusy.
    """

    def __init__(self, path: str | os.PathLike | None = None, *, wait_s: float = WAIT_S) -> None:
        self.path = catalog_path(path)
        self.wait_s = wait_s
        self._seen = False

    @contextlib.contextmanager
    def write(self) -> "Iterator[DuckDBPyConnection]":
        """One transaction: committed at the end, rolled back on any exception. Makes a missing catalog."""
        with self._turn(), self._opened(read_only=False) as con:
            con.execute("BEGIN")
            try:
                yield con
                con.execute("COMMIT")
            except BaseException:
                with contextlib.suppress(Exception):
                    con.execute("ROLLBACK")
                raise
            con.execute("CHECKPOINT")

    @contextlib.contextmanager
    def read(self, *, locked_down: bool = False) -> "Iterator[DuckDBPyConnection]":
        """A read-only connection; locked_down: no files, no network, no settings (for free SQL)."""
        with self._turn(), self._opened(read_only=True) as con:
            if locked_down:
                con.execute("SET enable_progress_bar = false")  # it would stand among the answer
                con.execute("SET temp_directory = ''")
                con.execute("SET enable_external_access = false")
                con.execute("SET lock_configuration = true")
            yield con

    @contextlib.contextmanager
    def still(self) -> "Iterator[DuckDBPyConnection]":
        """The file at rest: all that is kept stands in it, and nobody writes to it meanwhile. To copy it.

        It is held for reading: what is held for writing, nobody else can read on Windows. Opening the file within this
        process would drop the lock on other systems: let another process copy.
        """
        deadline = time.monotonic() + self.wait_s
        while True:
            refused = self._put_down()
            with self.read() as con:
                if not _has_content(_wal(self.path)):
                    yield con
                    return
            if refused or time.monotonic() > deadline:
                raise refused or CatalogBusy(f"{self.path}: others went on writing for {self.wait_s:g} s; try again.")

    def _put_down(self) -> CatalogNotWritable | None:
        """All that is kept into the file; what refused it where it may not be written."""
        try:
            with self._turn(), self._opened(read_only=False) as con:
                con.execute("CHECKPOINT")
        except CatalogNotWritable as problem:
            return problem
        return None

    @contextlib.contextmanager
    def _turn(self) -> Iterator[None]:
        """One user of the file at a time within this process."""
        with _turns_guard:
            turn = _turns.setdefault(self.path.absolute(), threading.Lock())
        if not turn.acquire(timeout=self.wait_s):
            raise CatalogBusy(
                f"{self.path}: another task of this process held it for {self.wait_s:g} s; try again."
            )
        try:
            yield
        finally:
            turn.release()

    @contextlib.contextmanager
    def _opened(self, *, read_only: bool) -> "Iterator[DuckDBPyConnection]":
        import duckdb

        con = self._open(read_only=read_only)
        try:
            yield con
        except duckdb.Error as problem:
            if any(sign in str(problem) for sign in DAMAGE):
                raise CatalogForeign(
                    f"{self.path}: is damaged ({_first_line(problem)}); restore a copy."
                ) from problem
            raise self._failed(problem) from problem
        finally:
            con.close()

    def _failed(self, problem: Exception) -> CatalogFailed:
        if any(sign in str(problem) for sign in FULL):
            return CatalogFailed(
                f"{self.path}: the disk is full; make room and do this again. What was kept before is still there."
            )
        return CatalogFailed(f"{self.path}: the catalog refused this: {_first_line(problem)}")

    def _open(self, *, read_only: bool) -> "DuckDBPyConnection":
        """An open connection to a catalog of the newest schema."""
        deadline = time.monotonic() + self.wait_s
        while True:
            con = self._connect(read_only=read_only, deadline=deadline)
            try:
                found = self._checked_version(con)
                if found == migrate.newest_version():
                    if not read_only:
                        migrate.refresh_views(con)
                    return con
                if not read_only:
                    with self._making():
                        migrate.upgrade(con, self.path)
            except BaseException:
                con.close()
                raise
            con.close()
            if read_only:  # an older schema can only be brought up by a writer
                self._open(read_only=False).close()

    def _checked_version(self, con: "DuckDBPyConnection") -> int:
        found, newest = migrate.schema_version(con), migrate.newest_version()
        if found is None:
            raise CatalogForeign(f"{self.path}: is a DuckDB file but no catalog of ours; name another.")
        if found > newest:
            raise CatalogTooNew(
                f"{self.path}: has catalog schema version {found}, this program knows up to {newest};"
                " use the newer program."
            )
        return found

    def _connect(self, *, read_only: bool, deadline: float) -> "DuckDBPyConnection":
        import duckdb

        pause = 0.01
        while True:
            self._check_path(read_only=read_only)
            try:
                before = _identity(self.path)
                con = duckdb.connect(_text(self.path), read_only=read_only)
            except duckdb.Error as problem:
                self._raise_unless_busy(problem, read_only=read_only, late=time.monotonic() > deadline)
            else:
                if before == _identity(self.path):
                    self._seen = True
                    return con
                con.close()  # a migration put another file here between: this is the old one
            time.sleep(random.uniform(0.5, 1.5) * pause)
            pause = min(0.2, pause * 1.5)

    def _check_path(self, *, read_only: bool) -> None:
        path = self.path
        if _text(path) is None:
            raise CatalogForeign(f"{path}: the name is not UTF-8, which the catalog's needs; choose another.")
        if path.is_dir():
            raise CatalogForeign(f"{path}: is a folder; name a file, for instance {path / DEFAULT_NAME}.")
        if not path.exists():
            if self._seen:
                raise self._gone()
            if read_only:
                raise CatalogMissing(f"{path}: there is no catalog; `holdtight add` makes one.")
            if not path.parent.is_dir():
                raise CatalogMissing(f"{path}: the folder {path.parent} does not exist; make it first.")
            if not os.access(path.parent, os.W_OK):
                raise CatalogNotWritable(
                    f"{path}: the folder {path.parent} may not be written; choose another."
                )
            with self._making():
                migrate.create(path)
        elif not read_only and not (os.access(path, os.W_OK) and os.access(path.parent, os.W_OK)):
            raise CatalogNotWritable(f"{path}: file or folder is read-only; allow writing or use a copy.")

    def _gone(self) -> CatalogGone:
        return CatalogGone(f"{self.path}: the catalog was taken away meanwhile; put it or a backup back, then go on.")

    @contextlib.contextmanager
    def _making(self) -> Iterator[None]:
        """What goes wrong with the disk while a file is made or migrated, as an error of ours."""
        import duckdb

        try:
            yield
        except (duckdb.Error, OSError, migrate.MigrationFailed) as problem:
            text = str(problem)
            if isinstance(problem, PermissionError) or any(sign in text for sign in DENIED):
                raise CatalogNotWritable(
                    f"{self.path}: the folder {self.path.parent} may not be written; choose another."
                ) from problem
            if isinstance(problem, migrate.MigrationFailed) and not any(sign in text for sign in FULL):
                raise
            raise self._failed(problem) from problem

    def _raise_unless_busy(self, problem: Exception, *, read_only: bool, late: bool) -> None:
        text = str(problem)
        busy = any(sign in text for sign in BUSY)
        if busy and not late:
            return
        if busy:
            holder = re.search(r"PID (\d+)", text)
            who = f"process {holder.group(1)}" if holder else "another process"
            raise CatalogBusy(
                f"{self.path}: {who} held the catalog for {self.wait_s:g} s; try again when it is done."
            ) from problem
        if any(sign in text for sign in DENIED):
            what = "read" if read_only else "written"
            raise CatalogNotWritable(f"{self.path}: may not be {what}; change its permissions.") from problem
        if "locks are not supported" in text:
            raise CatalogNotWritable(
                f"{self.path}: its disk knows no file locks, so it is only read there; put the catalog on a disk of this machine."
            ) from problem
        if "version number" in text:
            raise CatalogTooNew(
                f"{self.path}: {_first_line(problem)}; use a newer duckdb package."
            ) from problem
        if any(sign in text for sign in FULL):
            raise self._failed(problem) from problem
        if "WAL" in text and ("does not match" in text or "replaying" in text):
            wal = _wal(self.path)
            raise CatalogForeign(
                f"{self.path}: {wal.name} beside it is of another catalog, of an older copy, or damaged;"
                f" move {wal} away, then try again."
            ) from problem
        if "database does not exist" in text:  # taken away between look and open
            if self._seen:
                raise self._gone() from problem
            raise CatalogMissing(f"{self.path}: there is no catalog any more.") from problem
        raise CatalogForeign(
            f"{self.path}: is no catalog or is damaged ({_first_line(problem)}); restore a copy."
        ) from problem


def _text(path: Path) -> str | None:
    """The path as the database takes it, UTF-8 whatever the locale; None for a name that is none."""
    try:
        return os.fsencode(path).decode()
    except UnicodeDecodeError:
        return None


def _has_content(path: Path) -> bool:
    try:
        return path.stat().st_size > 0
    except FileNotFoundError:
        return False


def _wal(path: Path) -> Path:
    return path.with_name(path.name + ".wal")


def _identity(path: Path) -> tuple[int, int] | None:
    try:
        found = path.stat()
    except FileNotFoundError:
        return None
    return (found.st_dev, found.st_ino)


def _first_line(problem: Exception) -> str:
    return str(problem).splitlines()[0].rstrip(". ") if str(problem) else type(problem).__name__
