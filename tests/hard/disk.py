"""Broken disks and wrong files: each gives a line that says what to do, the right exit code, and nothing is lost.

    python -m tests.hard.disk

As root a small disk is mounted; where that is not allowed, the size of files is limited instead.
"""

import argparse
import ctypes
import os
import shutil
import subprocess
import sys
import time
from pathlib import Path

from catalog import migrate
from tests.hard.shop import Shop, in_a_shop

DROP_BOUND, CAPABILITIES = 24, 41  # of Linux: PR_CAPBSET_DROP, and how many capabilities there are
ROOM_KIB = 512  # left on the disk that gets full


def says(shop: Shop, case: str, done: tuple[int, str, str], *, code: int, words: tuple[str, ...]) -> None:
    """The exit code is right, and a line or three say what to do."""
    got, out, err = done
    print(f"        {case}: {err.strip() or out.strip()}")
    told = all(word in err for word in words) and len(err.strip().splitlines()) <= 3 and "fault of the program" not in err
    shop.expect("cases told well", got == code and told, f"{case}: exit {got}, not {code}, or not said {words}: {err.strip()}")


def full_while_working(shop: Shop, *, mounted: bool) -> None:
    """The disk gets full during a chunk; with room again the study ends as one that had room all the time."""
    place, loop = shop.folder / "small", None
    place.mkdir()
    file = place / "shop.duckdb"
    first = shop.ask(shop.study(size=256))
    shop.do("work")
    shutil.copy(shop.store.path, file)
    room = file.stat().st_size // 1024 + ROOM_KIB
    loop = mounted and _mount(place, room)
    if loop:
        shutil.copy(shop.store.path, file)
    print(f"        by {'a small disk' if loop else 'a limit of the size of files'}")
    limit = None if loop else _Limit(room * 1024)
    try:
        _until_full(shop, file, first, limit, (lambda: _mount(place, 64 * 1024, again=True)) if loop else (lambda: None))
    finally:
        if loop:
            subprocess.run(["umount", str(place)], check=False)


def _until_full(shop, file, first, limit, make_room):
    code, out, err = shop.do("queue", shop.study(size=256), catalog=file)
    shop.expect("queued on the small disk", code == 0, err)
    done = shop.do("work", catalog=file, prepare=limit)
    for _ in range(6):
        if done[0]:
            break
        shop.do("queue", shop.study(size=256), catalog=file)
        done = shop.do("work", catalog=file, prepare=limit)
    says(shop, "disk full", done, code=1, words=("disk is full", "make room"))
    before = _states(shop, file)
    make_room()
    code, out, err = shop.do("work", catalog=file)
    hashes, states = _hashes(shop, file), _states(shop, file)
    shop.expect("goes on with room again", code == 0 and set(states) == {"done"}, f"{err} {before} then {states}")
    shop.expect("results as with room", set(hashes) == {shop.job(first).result_hash}, hashes)
    code, out, err = shop.do("check", catalog=file)
    shop.expect("nothing is wrong after a full disk", code == 0, out)


class _Limit:
    """Called in the command's process: no file gets bigger than this many bytes."""

    def __init__(self, most: int):
        self.most = most

    def __call__(self):
        import resource

        resource.setrlimit(resource.RLIMIT_FSIZE, (self.most, self.most))


def _hashes(shop, file):
    out = shop.do("sql", "SELECT DISTINCT result_hash FROM studies", "--csv", catalog=file)[1]
    return out.split()[1:]


def _states(shop, file):
    return shop.do("sql", "SELECT state::VARCHAR AS state FROM studies", "--csv", catalog=file)[1].split()[1:]


def _mount(place: Path, kib: int, *, again=False) -> bool:
    options = f"size={kib}k" + (",remount" if again else "")
    command = ["mount", "-t", "tmpfs", "-o", options, "tmpfs", str(place)]
    if os.geteuid() or not shutil.which("mount"):
        return False
    return subprocess.run(command, capture_output=True, check=False).returncode == 0


def full_at_the_start(shop: Shop) -> None:
    """No room for a new catalog: nothing is left behind."""
    file = shop.folder / "none" / "shop.duckdb"
    file.parent.mkdir()
    done = shop.do("add", "front-wishbone.toml", catalog=file, prepare=_Limit(20_000))
    says(shop, "no room for a new catalog", done, code=1, words=("disk is full",))
    shop.expect("nothing is left behind", not list(file.parent.iterdir()), list(file.parent.iterdir()))
    done = shop.do("backup", "small-copy.duckdb", prepare=_Limit(100_000))
    says(shop, "no room for a backup", done, code=1, words=("make room",))
    shop.expect("nothing is left behind", not list(shop.folder.glob("*small-copy*")))


def _as_a_plain_user():
    """Of root: give up what lets it pass over permissions; the files stay its own."""
    if os.geteuid():
        return
    libc = ctypes.CDLL(None, use_errno=True)
    for number in range(CAPABILITIES):
        libc.prctl(DROP_BOUND, number, 0, 0, 0)
    header, none = (ctypes.c_uint32 * 2)(0x20080522, 0), (ctypes.c_uint32 * 6)()
    if libc.capset(header, none):
        raise OSError(ctypes.get_errno(), "capabilities cannot be given up")


def read_only(shop: Shop) -> None:
    """A catalog, then a folder, that may only be read."""
    place = shop.folder / "shelf"
    place.mkdir()
    file = place / "shop.duckdb"
    shutil.copy(shop.store.path, file)
    for name, mode, folder_mode in (("read-only file", 0o444, 0o777), ("read-only folder", 0o666, 0o555)):
        file.chmod(mode)
        place.chmod(folder_mode)
        says(shop, name, shop.do("work", catalog=file, prepare=_as_a_plain_user), code=2, words=("read-only",))
        code, out, err = shop.do("studies", catalog=file, prepare=_as_a_plain_user)
        shop.expect("read-only catalogs are read", code == 0, f"{name}: {err}")
        copy = shop.folder / f"copy-{name[10:]}.duckdb"
        code, out, err = shop.do("backup", copy, catalog=file, prepare=_as_a_plain_user)
        shop.expect("read-only catalogs are copied", code == 0, f"{name}: {err}")
    done = shop.do("add", shop.folder / "front-wishbone.toml", catalog=place / "new.duckdb", prepare=_as_a_plain_user)
    says(shop, "new catalog in a read-only folder", done, code=2, words=("may not be written", "choose another"))
    done = shop.do("backup", place / "copy.duckdb", prepare=_as_a_plain_user)
    says(shop, "backup into a read-only folder", done, code=1, words=("another folder",))
    file.chmod(0o000)
    says(shop, "unreadable file", shop.do("studies", catalog=file, prepare=_as_a_plain_user), code=2, words=("permissions",))
    place.chmod(0o777)


def deleted_while_working(shop: Shop) -> None:
    """The file is taken away under a worker: it says so and makes no new, empty one."""
    file = shop.folder / "gone.duckdb"
    shutil.copy(shop.store.path, file)
    shop.do("queue", shop.study(size=1024, seed=3), catalog=file)
    process = shop.start("work", "--threads", "1", catalog=file, pause=0.3)
    end = time.monotonic() + 60
    while "running" not in _states(shop, file) and time.monotonic() < end:
        time.sleep(0.1)
    away = file.with_name("away.duckdb")
    file.rename(away)
    out, err = process.communicate()
    says(shop, "deleted while working", (process.returncode, out, err), code=1, words=("taken away", "back"))
    shop.expect("no empty catalog in its place", not file.exists())
    away.rename(file)
    code, out, err = shop.do("work", catalog=file)
    shop.expect("goes on when it is back", code == 0 and set(_states(shop, file)) == {"done"}, err)


def wrong_files(shop: Shop) -> None:
    """Truncated, foreign, newer, and beside another catalog's log."""
    whole = shop.store.path.read_bytes()
    cases = {
        "truncated": (whole[: len(whole) // 2], ("damaged", "restore")),
        "cut to its head": (whole[:100], ("damaged", "restore")),
        "empty": (b"", ("damaged", "restore")),
        "text": (b"name,x,y,z\n" * 500, ("no catalog", "restore")),
    }
    for name, (content, words) in cases.items():
        file = shop.folder / f"{name.replace(' ', '-')}.duckdb"
        file.write_bytes(content)
        for words_given in (("studies",), ("work",), ("backup", shop.folder / f"of-{file.name}")):
            says(shop, f"{name}, {words_given[0]}", shop.do(*words_given, catalog=file), code=2, words=words)
        shop.expect("wrong files are left as they are", file.read_bytes() == content, name)
    _foreign_and_newer(shop)
    _another_log(shop)


def _foreign_and_newer(shop):
    import duckdb

    foreign, newer = shop.folder / "foreign.duckdb", shop.folder / "newer.duckdb"
    with duckdb.connect(str(foreign)) as con:
        con.execute("CREATE TABLE cars AS SELECT 1 AS car")
    says(shop, "another program's file", shop.do("work", catalog=foreign), code=2, words=("no catalog of ours", "name another"))
    shutil.copy(shop.store.path, newer)
    known = migrate.newest_version()
    with duckdb.connect(str(newer)) as con:
        con.execute("UPDATE kept.schema_migrations SET version = version + 1 WHERE version = ?", [known])
    for name in ("studies", "work", "check"):
        words = (f"version {known + 1}", f"up to {known}", "newer program")
        says(shop, f"newer schema, {name}", shop.do(name, catalog=newer), code=2, words=words)


_LOG = """
import duckdb, os, sys
con = duckdb.connect(sys.argv[1])
con.execute("SET checkpoint_threshold = '1GB'")
con.execute("CREATE TABLE extra AS SELECT 1 AS n")
os._exit(0)
"""


def _another_log(shop):
    mine, other = shop.folder / "mine.duckdb", shop.folder / "other.duckdb"
    shutil.copy(shop.store.path, mine)
    code, out, err = shop.do("add", "front-wishbone.toml", catalog=other)
    shop.expect("another catalog is made", code == 0, err)
    subprocess.run([sys.executable, "-c", _LOG, str(other)], check=True)
    log, wanted = other.with_name("other.duckdb.wal"), mine.with_name("mine.duckdb.wal")
    shop.expect("another catalog's log is there", log.exists())
    os.replace(log, wanted)
    for name in ("studies", "work"):
        says(shop, f"another's log, {name}", shop.do(name, catalog=mine), code=2, words=("mine.duckdb.wal away",))
    wanted.unlink()
    code, out, err = shop.do("check", catalog=mine)
    shop.expect("sound once it is away", code == 0, out + err)


def disk(shop: Shop) -> None:
    mounted = os.geteuid() == 0
    full_while_working(shop, mounted=mounted)
    full_at_the_start(shop)
    read_only(shop)
    deleted_while_working(shop)
    wrong_files(shop)
    shop.expect_sound()


def main() -> int:
    argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter).parse_args()
    return in_a_shop(disk)


if __name__ == "__main__":
    sys.exit(main())
