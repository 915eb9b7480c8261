"""Free SQL and exports: what they give, and that they cannot do anything else."""

import csv
import io
import os
import signal
import subprocess
import sys
import time

import duckdb
import pytest

from catalog.store import Catalog
from study.commands import sql_command, tabular
from study.commands.sql_command import SqlError
from study.runner import register
from tests.study.command_line import command, refused
from tests.study.small_studies import ROOT, demo

HOSTILE = "=HYPERLINK(1)\x1b[2J\x07"


@pytest.fixture(scope="module")
def kept(tmp_path_factory):
    """A catalog with one geometry, whose reason is a hostile text."""
    catalog = Catalog(tmp_path_factory.mktemp("shop") / "shop.duckdb")
    register(catalog, demo(), by="@ann", why=HOSTILE)
    return catalog


@pytest.fixture
def shop(kept, tmp_path, monkeypatch):
    """An empty folder to work in, the catalog named by the environment; gives the catalog's bytes before."""
    monkeypatch.chdir(tmp_path)
    monkeypatch.setenv("HOLDTIGHT_CATALOG", str(kept.path))
    return kept.path.read_bytes()


# --- answers


def test_a_query_is_answered_as_table_json_and_csv(shop):
    query = "SELECT point, x_mm FROM points WHERE side = 'left' AND point LIKE 'upper%' ORDER BY point"
    assert command("sql", query, "--json").json == [
        {"point": "upper_ball_joint", "x_mm": -14.0}, {"point": "upper_front_pivot", "x_mm": 112.0},
        {"point": "upper_rear_pivot", "x_mm": -128.0},
    ]  # fmt: skip
    assert command("sql", query, "--csv").out == (
        "point,x_mm\nupper_ball_joint,-14.0\nupper_front_pivot,112.0\nupper_rear_pivot,-128.0\n"
    )
    table = command("sql", query).out
    assert "upper_rear_pivot" in table and "-128" in table and "3 rows" in table


def test_without_a_query_the_views_are_listed(shop):
    found = {row["view"]: row["what it holds"] for row in command("sql", "--json").json}
    assert {"points", "processes", "as_built_points", "studies"} <= set(found)
    assert all(found.values())


@pytest.mark.parametrize("query", ["FROM geometries", "DESCRIBE points", "SHOW TABLES", "EXPLAIN SELECT 1", "WITH a AS (SELECT 1) FROM a"])
def test_what_only_reads_is_answered(shop, query):
    assert command("sql", query).code == 0


def test_every_type_has_its_json(shop):
    query = """SELECT NULL AS a, 1.5::DECIMAL(4,2) AS b, 'nan'::DOUBLE AS c, 'inf'::DOUBLE AS d, [1, NULL] AS e,
        {'k': 'v'} AS f, TIMESTAMP '2026-12-01 10:00' AS g, 'ab'::BLOB AS h, true AS i, 2::HUGEINT AS j, 1 AS a,
        MAP {'x': 1} AS k, DATE '2026-12-01' AS l, INTERVAL 1 DAY AS m, uuid() AS n"""
    [row] = command("sql", query, "--json").json
    row.pop("n")
    assert row == {
        "a": None, "b": "1.50", "c": None, "d": None, "e": [1, None], "f": {"k": "v"}, "g": "2026-12-01T10:00:00",
        "h": "6162", "i": True, "j": 2, "a_2": 1, "k": {"x": 1}, "l": "2026-12-01", "m": "1 day, 0:00:00",
    }  # fmt: skip
    assert command("sql", query).code == command("sql", query, "--csv").code == 0


def test_long_answers_are_cut_in_tables_only(shop):
    shown = command("sql", "FROM range(300)", "--most", 5).out
    assert "only the first 5 rows are shown" in shown and "\n   5" not in shown
    assert len(command("sql", "FROM range(300)", "--json").json) == 300
    assert len(command("sql", "FROM range(300)", "--csv").out.splitlines()) == 301


def test_wide_answers_are_printed_row_by_row(shop):
    out = command("sql", "FROM geometries").out
    assert "content_hash" in out and "spec" in out and max(map(len, out.splitlines())) < 200


@pytest.mark.parametrize("form", [(), ("--json",), ("--csv",)])
def test_control_characters_stay_inert(shop, form):
    out = command("sql", "SELECT why AS \"\x1b[31mwhy\", chr(27) || '[2J' AS b FROM geometries", *form).out
    assert "HYPERLINK" in out
    assert not set(out) & {"\x1b", "\x07", "\x9b"}


# --- what is refused

ENGINE = [
    "INSERT INTO kept.geometries VALUES (9, 'x')",
    "UPDATE kept.geometries SET name = 'x'",
    "DELETE FROM kept.points",
    "CREATE TABLE t (i INTEGER)",
    "DROP VIEW points",
    "ALTER TABLE kept.points ADD COLUMN i INTEGER",
    "EXPLAIN ANALYZE INSERT INTO kept.geometries VALUES (9, 'x')",
    "ATTACH 'b.duckdb'",
    "ATTACH ':memory:' AS m",
    "COPY points TO 'x.csv'",
    "COPY points TO 'x.parquet' (FORMAT parquet)",
    "EXPLAIN ANALYZE COPY points TO 'x.csv'",
    "COPY kept.points FROM 'secret.csv'",
    "EXPORT DATABASE 'x'",
    "IMPORT DATABASE 'x'",
    "FROM read_text('secret.csv')",
    "FROM read_blob('secret.csv')",
    "FROM read_csv('secret.csv')",
    "FROM 'secret.csv'",
    "FROM glob('*')",
    "FROM read_csv('https://example.org/x.csv')",
    "INSTALL httpfs",
    "LOAD httpfs",
    "SET threads = 1",
    "SET enable_external_access = true",
    "SET lock_configuration = false",
    "RESET threads",
    "PRAGMA threads = 1",
    "PRAGMA enable_profiling",
    "CALL enable_logging()",
    "CREATE SECRET s (TYPE http)",
    "CREATE PERSISTENT SECRET s (TYPE http)",
    "FROM duckdb_secrets()",
    "SELECT getenv('HOME')",
    "SELECT * FROM query_text",
]
WHITELIST = ["CREATE TEMP TABLE t (i INTEGER)", "USE shop", "CHECKPOINT", "VACUUM", "BEGIN", "PREPARE p AS SELECT 1", "SET VARIABLE x = 1"]


@pytest.mark.parametrize("query", ENGINE)
def test_the_database_itself_refuses_all_but_reading(shop, kept, query, tmp_path):
    (tmp_path / "secret.csv").write_text("a\n1\n", encoding="utf-8")
    query_text = {"a": [1]}  # a name that a query might look for in this program
    with kept.read(locked_down=True) as con, pytest.raises(duckdb.Error):
        con.execute(query).fetchall()
    assert query_text and os.listdir(tmp_path) == ["secret.csv"]
    assert kept.path.read_bytes() == shop


@pytest.mark.parametrize("query", ENGINE + WHITELIST)
def test_the_command_says_so_in_a_line(shop, kept, query, tmp_path):
    assert refused("sql", query).startswith("holdtight: sql: ")
    assert os.listdir(tmp_path) == [] and kept.path.read_bytes() == shop


@pytest.mark.parametrize(
    ("words", "said"),
    [
        (("SELECT 1; SELECT 2",), "2 queries are given"),
        (("",), "no queries are given"),
        (("/* nothing */",), "no queries are given"),
        (("SELEC 1",), "syntax error"),
        (("SELECT x FROM points",), '"x" not found'),
        (("FROM pionts",), "points"),
        (("SELECT 1", "--csv", "--json"), "choose one"),
        (("SELECT '\x1b[2J' + 1",), "sql:"),
        (("INSERT INTO kept.points VALUES (1)",), "INSERT is refused"),
    ],
)
def test_wrong_queries_are_told_in_a_line(shop, words, said):
    err = refused("sql", *words)
    assert said in err and "\x1b" not in err and len(err.splitlines()) == 1


def test_a_missing_catalog_is_told(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    assert "there is no catalog" in refused("sql", "SELECT 1", "--catalog", "no.duckdb")
    assert "there is no catalog" in refused("export", "points", "--out", "p.csv", "--catalog", "no.duckdb")
    assert os.listdir(tmp_path) == []


ENDLESS = "SELECT count(*) FROM range(1000000000) a, range(1000000000) b WHERE hash(a.range, b.range) = 3"


def test_ctrl_c_ends_a_long_query(shop, kept):
    code = "import sys; from study.commands import main; sys.argv = ['holdtight', 'sql', sys.argv[1]]; main()"
    process = subprocess.Popen(
        [sys.executable, "-c", code, ENDLESS], cwd=ROOT, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True
    )
    time.sleep(4)
    assert process.poll() is None
    process.send_signal(signal.SIGINT)
    out, err = process.communicate(timeout=180)
    assert (process.returncode, out, err) == (1, "", "holdtight: sql: the query was stopped\n")


def test_an_error_in_the_thread_of_a_query_comes_out(kept):
    with kept.read(locked_down=True) as con, pytest.raises(SqlError, match="Conversion Error"):
        sql_command._answered(con, "SELECT 'x'::INTEGER", None)


# --- cells


@pytest.mark.parametrize(
    ("value", "cell"),
    [
        ("=1+1", "'=1+1"), ("+1", "'+1"), ("-1", "'-1"), ("@x", "'@x"), ("\tx", "'\tx"), ("\rx", "'\nx"), ("a=1", "a=1"),
        (-1.5, "-1.5"), (-2, "-2"), (None, ""), (True, "true"), ("a\r\nb", "a\nb"), ("a\x1bb", "a\ufffdb"), ([1, "=2"], '[1, "=2"]'),
        ("", ""), (1e-20, "1e-20"),
    ],
)  # fmt: skip
def test_cells_are_inert(value, cell):
    assert tabular.csv_cell(value) == cell


# --- export


def test_every_public_view_is_exported_in_both_forms(shop, kept, tmp_path):
    views = [row["view"] for row in command("sql", "--json").json]
    for view in views:
        with kept.read() as con:
            found = con.execute(f"FROM {view}")
            names, rows = [c[0] for c in found.description], found.fetchall()
        for form in ("csv", "parquet"):
            done = command("export", view, "--out", f"{view}.{form}", "--json").json
            assert done == {"view": view, "file": f"{view}.{form}", "rows": len(rows)}
        text = (tmp_path / f"{view}.csv").read_text(encoding="utf-8")
        read = list(csv.reader(io.StringIO(text)))
        assert read[0] == names and len(read) == len(rows) + 1
        back = duckdb.sql(f"FROM '{tmp_path}/{view}.parquet'")
        assert [c[0] for c in back.description] == names and back.fetchall() == rows
    assert sorted(os.listdir(tmp_path)) == sorted(f"{view}.{form}" for view in views for form in ("csv", "parquet"))


def test_formulas_are_inert_in_a_csv(shop, tmp_path):
    command("export", "geometries", "--out", "g.csv")
    [row] = csv.DictReader(io.StringIO((tmp_path / "g.csv").read_text(encoding="utf-8")))
    assert row["by_whom"] == "'@ann" and row["why"].startswith("'=HYPERLINK(1)") and "\x1b" not in row["why"]


def test_numbers_come_back_to_the_last_bit(shop, kept, tmp_path):
    command("export", "measures", "--out", "m.csv")
    rows = csv.DictReader(io.StringIO((tmp_path / "m.csv").read_text(encoding="utf-8")))
    with kept.read() as con:
        values = [value for (value,) in con.execute("SELECT value FROM measures").fetchall()]
    assert [float(row["value"]) if row["value"] else None for row in rows] == values


@pytest.mark.parametrize(
    ("words", "said"),
    [
        (("pionts", "--out", "a.csv"), 'did you mean "points"'),
        (("kept.points", "--out", "a.csv"), "is no public view"),
        (("duckdb_views", "--out", "a.csv"), "is no public view"),
        (('points" LIMIT 1 --', "--out", "a.csv"), "is no public view"),
        (("points", "--out", "a.xlsx"), "must end in .csv or .parquet"),
        (("points", "--out", "no/a.csv"), "does not exist"),
        (("points", "--out", "folder.csv"), "is a folder"),
        (("points",), "--out"),
    ],
)
def test_an_export_that_cannot_be_made_says_why(shop, tmp_path, words, said):
    (tmp_path / "folder.csv").mkdir()
    assert said in command("export", *words).err and command("export", *words).code == 2
    assert os.listdir(tmp_path) == ["folder.csv"]


def test_the_catalog_itself_is_not_overwritten(kept, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    path = tmp_path / "shop.csv"
    path.write_bytes(kept.path.read_bytes())
    assert "is the catalog itself" in refused("export", "points", "--out", "shop.csv", "--catalog", path)
    assert path.read_bytes() == kept.path.read_bytes()


@pytest.mark.parametrize("name", ["s3:x.parquet", "a'b.parquet", "a*.parquet", "-.csv", "ä b.csv"])
def test_the_file_is_the_one_that_was_asked_for(shop, tmp_path, name):
    assert command("export", "points", "--out", name).code == 0
    assert os.listdir(tmp_path) == [name]


def test_what_stands_there_stays_whole_when_writing_fails(shop, tmp_path, monkeypatch):
    (tmp_path / "p.csv").write_text("old", encoding="utf-8")

    def full(*_):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr("study.commands.export_command.write_csv", full)
    done = command("export", "points", "--out", "p.csv")
    assert done.code == 1 and "No space left" in done.err
    assert (tmp_path / "p.csv").read_text(encoding="utf-8") == "old" and os.listdir(tmp_path) == ["p.csv"]
