"""The catalog file: who may open it, what is refused, and what a kill leaves behind."""

import os
import signal
import subprocess
import sys
import textwrap
import threading
import time
from pathlib import Path

import duckdb
import pytest
from catalog_samples import geometry, result_tables, with_study

from catalog import migrate
from catalog.chunks import done_chunks
from catalog.queue import claim, finish, get, list_studies
from catalog.results import critical, load_results, load_values
from catalog.revisions import find, load, register
from catalog.store import (
    Catalog,
    CatalogBusy,
    CatalogFailed,
    CatalogForeign,
    CatalogMissing,
    CatalogNotWritable,
    CatalogTooNew,
    catalog_path,
)

ROOT = Path(__file__).parents[2]


def other_process(code, *arguments):
    """A Python process that has this repository's packages and prints a line when it is ready."""
    command = [sys.executable, "-c", textwrap.dedent(code), *map(str, arguments)]
    process = subprocess.Popen(command, cwd=ROOT, stdout=subprocess.PIPE, text=True)
    assert process.stdout.readline().strip() == "ready"
    return process


def end(process):
    process.kill()
    process.wait()
    process.stdout.close()


def test_the_path_is_given_or_from_the_environment(monkeypatch):
    monkeypatch.delenv("HOLDTIGHT_CATALOG", raising=False)
    assert catalog_path() == Path("holdtight.duckdb")
    monkeypatch.setenv("HOLDTIGHT_CATALOG", "/elsewhere/a.duckdb")
    assert catalog_path() == Path("/elsewhere/a.duckdb")
    assert catalog_path("b.duckdb") == Path("b.duckdb")


def test_a_missing_catalog_is_made_by_writing_and_missed_by_reading(tmp_path):
    catalog = Catalog(tmp_path / "new.duckdb")
    with pytest.raises(CatalogMissing, match="there is no catalog"), catalog.read():
        pass
    with catalog.write() as con:
        register(con, geometry(), measures={}, by="a", why="b")
    assert sorted(path.name for path in tmp_path.iterdir()) == ["new.duckdb"]
    with catalog.read() as con:
        assert find(con, "example-front").number == 1
    with pytest.raises(CatalogMissing, match="does not exist"), Catalog(tmp_path / "no" / "a.duckdb").write():
        pass


def test_an_exception_rolls_the_whole_transaction_back(tmp_path):
    catalog = Catalog(tmp_path / "a.duckdb")
    with pytest.raises(ZeroDivisionError), catalog.write() as con:
        register(con, geometry(), measures={}, by="a", why="b")
        raise ZeroDivisionError
    with catalog.read() as con:
        assert con.execute("SELECT count(*) FROM geometries").fetchone() == (0,)
    with pytest.raises(CatalogFailed, match="refused this"), catalog.write() as con:
        con.execute("SELECT no_such_column FROM geometries")


def test_every_table_view_and_column_has_its_comment(tmp_path):
    with Catalog(tmp_path / "a.duckdb").write() as con:
        bare = con.execute(
            "SELECT table_name || column_name FROM duckdb_columns() WHERE NOT internal AND comment IS NULL"
            " UNION ALL SELECT table_name FROM duckdb_tables() WHERE NOT internal AND comment IS NULL"
            " UNION ALL SELECT view_name FROM duckdb_views() WHERE NOT internal AND comment IS NULL"
        ).fetchall()
    assert bare == []


def test_foreign_truncated_and_newer_files_are_told_apart(tmp_path):
    path = tmp_path / "a.duckdb"
    for content in (b"", b"not a database " * 500):
        path.write_bytes(content)
        with pytest.raises(CatalogForeign, match="no catalog or is damaged"), Catalog(path).write():
            pass
    path.unlink()
    duckdb.connect(str(path)).execute("CREATE TABLE t (i INTEGER)").close()
    with pytest.raises(CatalogForeign, match="no catalog of ours"), Catalog(path).read():
        pass
    path.unlink()
    catalog, _ = with_study(path)
    whole = path.read_bytes()
    with catalog.write() as con:
        con.execute(
            "INSERT INTO kept.schema_migrations VALUES (4711, '4711_later.sql', now()::TIMESTAMP, '9.9')"
        )
    with pytest.raises(CatalogTooNew, match=f"4711.*up to {migrate.newest_version()}"), catalog.read():
        pass
    for share in (0.01, 0.1, 0.3):
        path.write_bytes(whole[: int(share * len(whole))])
        with pytest.raises(CatalogForeign, match="damaged"), catalog.read() as con:
            con.execute("FROM points").fetchall()
    with pytest.raises(CatalogForeign, match="is a folder"), Catalog(tmp_path).read():
        pass


def test_a_read_only_file_can_be_read_and_says_why_it_is_not_written(tmp_path, monkeypatch):
    catalog, _ = with_study(tmp_path / "a.duckdb")
    monkeypatch.setattr(os, "access", lambda path, mode: mode != os.W_OK)
    with catalog.read() as con:
        assert len(list_studies(con)) == 1
    with pytest.raises(CatalogNotWritable, match="read-only"), catalog.write():
        pass
    with pytest.raises(CatalogNotWritable, match="folder"), Catalog(tmp_path / "b.duckdb").write():
        pass


def test_free_sql_cannot_touch_files_or_settings(tmp_path):
    catalog, _ = with_study(tmp_path / "a.duckdb")
    for statement in (
        f"COPY geometries TO '{tmp_path}/x.csv'",
        f"SELECT * FROM read_text('{__file__}')",
        "SET enable_external_access = true",
        "DROP VIEW geometries",
        f"ATTACH '{tmp_path}/b.duckdb'",
    ):
        with pytest.raises(CatalogFailed), catalog.read(locked_down=True) as con:
            con.execute(statement)
    assert [path.name for path in tmp_path.iterdir()] == ["a.duckdb"]


def add_name(con, name):
    con.execute("INSERT INTO kept.geometries SELECT max(id) + 1, ? FROM kept.geometries", [name])


HOLD = """
import sys, time
from catalog.store import Catalog
with Catalog(sys.argv[1]).write() as con:
    print("ready", flush=True)
    time.sleep(float(sys.argv[2]))
"""


def test_a_catalog_held_elsewhere_is_waited_for_then_named_with_its_process(tmp_path):
    path = tmp_path / "a.duckdb"
    with_study(path)
    holder = other_process(HOLD, path, 60)
    try:
        for opened in (Catalog(path, wait_s=0.3).read, Catalog(path, wait_s=0.3).write):
            with pytest.raises(CatalogBusy, match=f"process {holder.pid} held the catalog"), opened():
                pass
    finally:
        end(holder)
    brief = other_process(HOLD, path, 0.2)
    with Catalog(path).write() as con:
        assert len(list_studies(con)) == 1
    brief.wait()
    brief.stdout.close()


def test_threads_of_one_process_take_turns(tmp_path):
    catalog, _ = with_study(tmp_path / "a.duckdb")

    def add(i):
        with Catalog(catalog.path).write() as con:
            add_name(con, f"g{i}")

    threads = [threading.Thread(target=add, args=(i,)) for i in range(8)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    with catalog.read() as con:
        assert con.execute("SELECT count(DISTINCT id) FROM kept.geometries").fetchone() == (9,)
        with pytest.raises(CatalogBusy, match="another task"), Catalog(catalog.path, wait_s=0.1).read():
            pass


WRITE_CHUNKS = """
import sys
import numpy as np
from catalog.chunks import store_chunk
from catalog.queue import claim, worker_name
from catalog.store import Catalog
catalog, worker = Catalog(sys.argv[1]), worker_name()
with catalog.write() as con:
    job = claim(con, worker)
print("ready", flush=True)
for chunk in range(1000):
    values = np.full((3, 50), float(chunk))
    with catalog.write() as con:
        store_chunk(con, job.id, worker, stage="after", chunk_no=chunk, first_build=50 * chunk, values=values,
                    status=np.zeros(50))
        if chunk == int(sys.argv[2]):
            print("inside", flush=True)
            import time; time.sleep(60)
"""


def check_whole_chunks(con, study_id):
    """Each chunk counted once and complete; gives how many there are."""
    done = done_chunks(con, study_id, stage="after")
    values = load_values(con, study_id, stage="after")
    assert done == set(range(len(done))) and get(con, study_id).done == 50 * len(done)
    assert values.shape == ((3, 50 * len(done)) if done else (0, 0))
    for chunk in done:
        assert (values[:, 50 * chunk : 50 * chunk + 50] == chunk).all()
    count = con.execute("SELECT count(*) FROM kept.build_values").fetchone()[0]
    assert count == 150 * len(done)
    return len(done)


@pytest.mark.parametrize("moment_s", [0.05, 0.23])
def test_a_kill_at_any_moment_leaves_whole_chunks_and_the_next_worker_goes_on(tmp_path, moment_s):
    catalog, [study] = with_study(tmp_path / "a.duckdb")
    writer = other_process(WRITE_CHUNKS, catalog.path, -1)
    time.sleep(moment_s)
    writer.send_signal(signal.SIGKILL)
    end(writer)
    with catalog.write() as con:
        before = check_whole_chunks(con, study)
        job = claim(con, "here:1:x")
        assert job is not None and job.id == study
        assert check_whole_chunks(con, study) == before


def test_a_kill_inside_a_transaction_keeps_nothing_of_it(tmp_path):
    catalog, [study] = with_study(tmp_path / "a.duckdb")
    writer = other_process(WRITE_CHUNKS, catalog.path, 2)
    assert writer.stdout.readline().strip() == "inside"
    end(writer)
    with catalog.read() as con:
        assert check_whole_chunks(con, study) == 2


def test_two_processes_that_make_the_same_catalog_share_it(tmp_path):
    path = tmp_path / "a.duckdb"
    code = """
    import sys
    from catalog.store import Catalog
    print("ready", flush=True)
    with Catalog(sys.argv[1]).write() as con:
        con.execute("INSERT INTO kept.geometries SELECT count(*), ? FROM kept.geometries", [sys.argv[2]])
    """
    makers = [other_process(code, path, name) for name in "ab"]
    assert [maker.wait() for maker in makers] == [0, 0]
    for maker in makers:
        maker.stdout.close()
    with Catalog(path).read() as con:
        assert con.execute("SELECT name FROM kept.geometries ORDER BY name").fetchall() == [("a",), ("b",)]
    assert [found.name for found in tmp_path.iterdir()] == ["a.duckdb"]


@pytest.fixture
def later_program(tmp_path, monkeypatch):
    """A program with one more migration; gives the path of that migration."""
    folder = tmp_path / "later"
    folder.mkdir()
    for step in migrate.migrations():
        (folder / step.path.name).write_text(step.path.read_text())
    monkeypatch.setattr(migrate, "MIGRATIONS", folder)
    return folder / f"{migrate.newest_version() + 1:04}_more.sql"


def test_an_older_catalog_is_migrated_at_opening(tmp_path, later_program):
    catalog, _ = with_study(tmp_path / "a.duckdb")
    later_program.write_text("CREATE TABLE kept.more (i INTEGER); INSERT INTO kept.more VALUES (7);")
    with catalog.read() as con:
        assert con.execute("SELECT i FROM kept.more").fetchone() == (7,)
        assert len(list_studies(con)) == 1
        assert migrate.schema_version(con) == migrate.newest_version()
    assert sorted(path.name for path in tmp_path.iterdir()) == ["a.duckdb", "later"]


@pytest.mark.parametrize("in_place", [False, True])
def test_a_failed_migration_leaves_the_old_file_as_it_was(tmp_path, later_program, monkeypatch, in_place):
    """In place as on Windows too, where all steps are one transaction."""
    monkeypatch.setattr(migrate, "WINDOWS", in_place)
    catalog, _ = with_study(tmp_path / "a.duckdb")
    before = catalog.path.read_bytes()
    later_program.write_text("CREATE TABLE kept.more (i INTEGER); SELECT * FROM kept.nowhere;")
    for opened in (catalog.read, catalog.write):
        with pytest.raises(migrate.MigrationFailed, match=later_program.name), opened():
            pass
    assert catalog.path.read_bytes() == before
    assert sorted(path.name for path in tmp_path.iterdir()) == ["a.duckdb", "later"]
    later_program.unlink()
    with catalog.read() as con:
        assert len(list_studies(con)) == 1


def test_a_writer_waiting_during_a_migration_gets_the_new_file(tmp_path, later_program):
    catalog, _ = with_study(tmp_path / "a.duckdb")
    later_program.write_text("CREATE TABLE kept.more (i INTEGER);")
    waiting = Catalog(catalog.path)
    names = []

    def add(name):
        with waiting.write() as con:
            add_name(con, name)
            names.append(name)

    threads = [threading.Thread(target=add, args=(name,)) for name in "abc"]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    with catalog.read() as con:
        assert con.execute("SELECT count(*) FROM kept.geometries").fetchone() == (4,)
        con.execute("FROM kept.more")


def test_changed_views_come_with_the_next_writing(tmp_path, monkeypatch):
    catalog, _ = with_study(tmp_path / "a.duckdb")
    views = tmp_path / "views.sql"
    views.write_text(migrate.VIEWS.read_text() + "CREATE OR REPLACE VIEW extra AS SELECT 1 AS one;")
    monkeypatch.setattr(migrate, "VIEWS", views)
    with catalog.write() as con:
        assert con.execute("FROM extra").fetchone() == (1,)


OLD = sorted((ROOT / "tests" / "old_catalogs").glob("v*.duckdb"))


@pytest.mark.parametrize("old", OLD, ids=[path.stem for path in OLD])
def test_catalogs_of_every_schema_version_still_give_their_answers(tmp_path, old):
    path = tmp_path / old.name
    path.write_bytes(old.read_bytes())
    with Catalog(path).read() as con:
        revision = find(con, "example-front")
        assert revision.spec == "example-front@1"
        assert load(con, revision) == geometry()
        assert [(job.id, job.state) for job in list_studies(con)] == [(1, "done"), (2, "queued")]
        expected = result_tables()
        found = load_results(con, 1)
        for name in ("ranking", "stats"):
            for row, wanted in zip(found[name], expected[name], strict=True):
                assert {key: row[key] for key in wanted} == wanted
        assert [row["source"] for row in critical(con)][:3] == [f"chassis.pivot_{i}" for i in range(3)]
        assert load_values(con, 1, stage="after").tolist() == [[1.0, 2.0], [3.0, 4.0]]
    with Catalog(path).write() as con:
        job = claim(con, "here:1:x")
        assert job.id == 2 and finish(con, 2, "here:1:x", tables=result_tables())


NEVER_ALONE = {2, 3, 4}  # came with version 5 in one step


def test_there_is_an_old_catalog_for_every_schema_version():
    wanted = [step.number for step in migrate.migrations() if step.number not in NEVER_ALONE]
    assert [int(path.stem[1:]) for path in OLD] == wanted
