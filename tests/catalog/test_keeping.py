"""Copies and checks of a catalog, and hard treatment in short; tests/hard has it at length."""

import os
import shutil
from pathlib import Path

import duckdb
import pytest

from catalog import keeping
from catalog.errors import HoldtightError
from catalog.keeping import backup, check
from catalog.store import Catalog, CatalogFailed, CatalogForeign, CatalogGone
from study.crew import Crew
from study.runner import Watch, enqueue, work
from tests.hard.disk import deleted_while_working, full_at_the_start
from tests.hard.kill import end_politely, kill
from tests.hard.shop import Shop
from tests.study.command_line import command
from tests.study.small_studies import DEMO, TOE, small_study

OLD = sorted((Path(__file__).parents[1] / "old_catalogs").glob("*.duckdb"))
SIZES = {"sobol": 8, "morris": 4, "spread": 64, "linear": None, "worst": None}


@pytest.fixture(scope="module")
def finished(tmp_path_factory):
    """A catalog with a finished study of each method."""
    store = Catalog(tmp_path_factory.mktemp("shop") / "shop.duckdb")
    for method, size in SIZES.items():
        enqueue(store, small_study("camber_deg", method=method, size=size, alignment=TOE), DEMO.parent, by="test")
    assert work(store, crew=Crew(0), watch=Watch()) == [1, 2, 3, 4, 5]
    return store


@pytest.fixture
def copied(finished, tmp_path):
    """A copy of it to be harmed."""
    return Catalog(shutil.copy(finished.path, tmp_path / "copy.duckdb"))


def harm(store, *queries):
    with duckdb.connect(str(store.path)) as con:
        for query in queries:
            assert con.execute(query).fetchone() != (0,), query


def test_a_sound_catalog_has_nothing_wrong(finished):
    report = check(finished)
    assert report.wrong == []
    assert report.checked["studies"] == 5 and report.checked["revisions"] == 1 and report.checked["chunks"] > 20
    done = command("check", "--catalog", finished.path, "--json").json
    assert done["sound"] and done["checked"] == report.checked


@pytest.mark.parametrize("old", OLD, ids=[path.stem for path in OLD])
def test_catalogs_of_every_schema_version_are_sound(old, tmp_path):
    assert check(Catalog(shutil.copy(old, tmp_path / "old.duckdb"))).wrong == []


@pytest.mark.parametrize(
    ("query", "named"),
    [
        ("UPDATE kept.build_values SET value = value + 1e-12 WHERE study_id = 1 AND build_no = 3 AND stage = 'after'", "study 1, chunk"),
        ("UPDATE kept.builds SET status = 1 WHERE study_id = 3 AND build_no = 3", "study 3, chunk"),
        ("UPDATE kept.stats SET mean = mean + 1e-12 WHERE study_id = 3", "study 3: its results"),
        ("DELETE FROM kept.ranking WHERE study_id = 1 AND rank = 1", "study 1: its results"),
        ("UPDATE kept.studies SET done_builds = done_builds + 1 WHERE id = 2", "study 2"),
        ("DELETE FROM kept.chunks WHERE study_id = 2 AND chunk_no = 0", "study 2"),
        ("UPDATE kept.revisions SET record = json_merge_patch(record, '{\"name\": \"other\"}')", "front-wishbone@1"),
    ],
)  # fmt: skip
def test_what_was_altered_is_named(copied, query, named):
    harm(copied, query)
    done = command("check", "--catalog", copied.path)
    assert done.code == 1
    assert any(named in line for line in done.out.splitlines() if line.startswith("wrong: ")), done.out
    assert done.out.strip().endswith("wrong; restore a backup")


def test_a_block_that_the_disk_lost_is_reported(copied):
    content = bytearray(copied.path.read_bytes())
    for place in range(len(content) // 4, len(content) - 5000, len(content) // 8):
        content[place : place + 4096] = bytes(4096)
    copied.path.write_bytes(bytes(content))
    done = command("check", "--catalog", copied.path)
    assert done.code in (1, 2) and "damaged" in done.out + done.err
    assert "Traceback" not in done.err


def test_a_backup_is_the_same_catalog_and_never_overwrites(finished, tmp_path):
    target = tmp_path / "backup.duckdb"
    done = command("backup", target, "--catalog", finished.path, "--json").json
    assert done == {"file": str(target), "bytes": target.stat().st_size}
    assert check(Catalog(target)).checked == check(finished).checked
    before = target.read_bytes()
    again = command("backup", target, "--catalog", finished.path)
    assert again.code == 2 and "does not overwrite" in again.err
    assert target.read_bytes() == before and list(tmp_path.iterdir()) == [target]


def test_a_backup_holds_what_stands_in_the_log_alone(copied, tmp_path):
    code = "import duckdb, os, sys; con = duckdb.connect(sys.argv[1]); con.execute(sys.argv[2]); os._exit(0)"
    query = "SET checkpoint_threshold = '1GB'; UPDATE kept.studies SET title = 'from the log'"
    keeping.subprocess.run([keeping.sys.executable, "-c", code, str(copied.path), query], check=True)
    assert Path(f"{copied.path}.wal").stat().st_size
    backup(copied, tmp_path / "backup.duckdb")
    with Catalog(tmp_path / "backup.duckdb").read() as con:
        assert con.execute("SELECT DISTINCT title FROM kept.studies").fetchall() == [("from the log",)]


@pytest.mark.parametrize("name", ["no/such/folder.duckdb", "."])
def test_a_backup_that_has_no_place_is_refused(finished, tmp_path, name):
    with pytest.raises(keeping.BackupRefused):
        backup(finished, tmp_path / name)


def test_a_backup_that_fails_leaves_nothing(finished, tmp_path, monkeypatch):
    monkeypatch.setattr(keeping, "_COPY", keeping._COPY + "raise OSError('No space left on device')")
    with pytest.raises(keeping.BackupFailed, match="make room"):
        backup(finished, tmp_path / "backup.duckdb")
    assert list(tmp_path.iterdir()) == []


def test_a_log_of_another_catalog_is_to_be_moved_away(copied, tmp_path):
    other = Path(shutil.copy(OLD[-1], tmp_path / "other.duckdb"))
    code = "import duckdb, os, sys; con = duckdb.connect(sys.argv[1]); con.execute('CREATE TABLE t (n INT)'); os._exit(0)"
    keeping.subprocess.run([keeping.sys.executable, "-c", code, str(other)], check=True)
    os.replace(f"{other}.wal", f"{copied.path}.wal")
    for opened in (copied.read, copied.write):
        with pytest.raises(CatalogForeign, match=r"move \S+copy.duckdb.wal away"), opened():
            pass


def test_a_catalog_taken_away_is_not_made_anew(copied):
    with copied.read():
        pass
    copied.path.unlink()
    for opened in (copied.read, copied.write):
        with pytest.raises(CatalogGone, match="taken away"), opened():
            pass
    assert not copied.path.exists()


def test_a_full_disk_is_told_as_one(finished):
    with pytest.raises(CatalogFailed, match="make room"), finished.read():
        raise duckdb.IOException('Could not write file "x": No space left on device')


# --- hard treatment in short


@pytest.fixture
def shop(tmp_path):
    return Shop(tmp_path)


def assert_held(shop):
    assert shop.broken == [] and sum(shop.said.values())


def test_a_study_that_is_killed_twice_loses_nothing(shop):
    kill(shop, times=2, size=64, seed=1)
    end_politely(shop, times=1, seed=1)
    assert_held(shop)


@pytest.mark.skipif(not hasattr(os, "fork"), reason="limits of a process are not there")
def test_no_room_and_a_lost_catalog_lose_nothing(shop):
    assert shop.do("add", "front-wishbone.toml")[0] == 0
    full_at_the_start(shop)
    deleted_while_working(shop)
    assert_held(shop)


def test_errors_of_the_store_are_ours():
    assert issubclass(CatalogGone, HoldtightError) and CatalogGone.exit_code == 1
