"""Releases: frozen once, superseded by later issues, checked at every look, stale when the geometry went on."""

import hashlib
import shutil
from datetime import datetime
from pathlib import Path

import pytest
from catalog_samples import MEASURES, WISHBONES, geometry, with_study

from catalog import releases
from catalog.errors import InputError, WorkError
from catalog.release_files import MANIFEST, manifest_of, of_study
from catalog.revisions import register
from catalog.store import Catalog

FILES = {"note.txt": b"note\n", "charts/one.svg": b"<svg/>"}


def row(place=1, feature="chassis.upper_front_pivot", **more):
    return {
        "place": place, "feature": feature, "name": feature, "shop_name": None, "kind": "point", "x_mm": 120.0, "y_mm": 330.0,
        "z_mm": -0.1, "right_x_mm": None, "right_y_mm": None, "right_z_mm": None, "length_mm": None, "right_length_mm": None,
        "form": "ball", "half": [0.3], "axis": None, "zone": "S⌀0.6 mm", "callout": "⌖ S⌀0.6 | A | B | C", "datums": "A|B|C",
        "distribution": "uniform over the zone", "process": None, "condition": "welded", "checked": "CMM", "verdict": "hold",
        "figures": "26 % of camber gain", "evidence": {"measures": [{"st": 0.26, "effect": [0.1, None]}]}, "remark": "",
        "reason": "first issue",
    } | more  # fmt: skip


def record(drawing="FS-101", issue="A", **more):
    return {
        "drawing": drawing, "issue": issue, "part": "chassis", "study_id": 1, "revision_id": 1, "geometry": "example-front@1",
        "title": "study 1", "reason": "first issue", "by_whom": "ann", "created": datetime(2025, 12, 1, 10, 0, 0, 123456),
        "supersedes": None, "supersedes_hash": None, "uncovered": [], "warnings": ["mind ✓"], "facts": {"good_share": 0.97},
        "result_hash": None, "version": "0.1.0",
    } | more  # fmt: skip


def files(more=()):
    found = FILES | dict(more)
    return found | {MANIFEST: manifest_of(found)}


def freeze(catalog, *, rows=None, contents=None, **more):
    with catalog.write() as con:
        old = releases.current(con, more.get("drawing", "FS-101"))
        chain = {"supersedes": old and old.id, "supersedes_hash": old and old.record_hash}
        return releases.freeze(con, record(**{**chain, **more}), rows or [row()], contents or files())


@pytest.fixture(scope="module")
def fresh(tmp_path_factory):
    return with_study(tmp_path_factory.mktemp("fresh") / "shop.duckdb")[0].path


@pytest.fixture
def catalog(fresh, tmp_path):
    return Catalog(shutil.copy(fresh, tmp_path))


def looked_up(catalog, function, *words, **more):
    with catalog.read() as con:
        return function(con, *words, **more)


def test_what_is_frozen_comes_back_to_the_last_bit(catalog):
    rows = [row(1), row(2, "chassis.lower_front_pivot", half=[0.1 + 0.2], x_mm=1 / 3, form="cylinder", axis=[0.0, 0.6, 0.8])]
    made = freeze(catalog, rows=rows)
    found = looked_up(catalog, releases.find, "FS-101", "A")
    assert found == made and found.record_hash == releases.record_hash(record(), rows)
    assert looked_up(catalog, releases.load_rows, found) == rows
    assert looked_up(catalog, releases.load_files, found) == files()
    assert (found.by, found.created, found.warnings, found.facts) == ("ann", record()["created"], ["mind ✓"], {"good_share": 0.97})


def test_the_same_issue_again_is_refused_with_who_and_when(catalog):
    freeze(catalog)
    for issue in ("A", "a", " A "):
        with pytest.raises(releases.ReleaseExists, match=r"issue A .*by ann on 2025-12-01.*next issue") as caught:
            freeze(catalog, issue=issue)
        assert isinstance(caught.value, InputError)
    with pytest.raises(releases.ReleaseExists):
        freeze(catalog, drawing="fs-101")
    assert len(looked_up(catalog, releases.list_releases)) == 1


def test_a_drawing_stays_with_its_part(catalog):
    freeze(catalog)
    with pytest.raises(releases.ReleaseOtherPart, match=r"FS-101 is of the part chassis .*not of upright"):
        freeze(catalog, issue="B", part="upright")


def test_a_later_issue_supersedes_and_changes_nothing_of_the_earlier(catalog):
    first = freeze(catalog)
    second = freeze(catalog, issue="B", rows=[row(half=[0.5])])
    assert (second.supersedes, second.supersedes_issue, second.supersedes_hash) == (first.id, "A", first.record_hash)
    old, new = looked_up(catalog, releases.issues, "FS-101")
    assert (old.superseded_by, new.superseded_by) == ("B", None)
    assert looked_up(catalog, releases.load_rows, old) == [row()]
    assert looked_up(catalog, releases.current, "FS-101") == new
    assert looked_up(catalog, releases.find, "FS-101") == new
    assert releases.summary(old)["current"] is False and releases.summary(new)["supersedes"] == "A"


def test_an_issue_released_in_between_stops_the_other(catalog):
    freeze(catalog)
    with pytest.raises(releases.ReleaseOvertaken, match="issue A was released in the meantime") as caught:
        freeze(catalog, issue="B", supersedes=None)
    assert isinstance(caught.value, WorkError)


def test_a_refused_release_leaves_nothing(catalog):
    broken = files() | {"note.txt": b"not what the manifest says"}
    with pytest.raises(releases.ReleaseAltered):
        freeze(catalog, contents=broken)
    with catalog.read() as con:
        for table in ("releases", "release_rows", "release_files", "release_contents"):
            assert con.execute(f"SELECT count(*) FROM kept.{table}").fetchone() == (0,)


def test_contents_are_kept_once(catalog):
    freeze(catalog)
    freeze(catalog, issue="B", contents=files({"table.csv": b"1"}))
    with catalog.read() as con:
        assert con.execute("SELECT count(*) FROM kept.release_contents").fetchone() == (5,)  # 3 files, 2 manifests
        assert con.execute("SELECT count(*) FROM kept.release_files").fetchone() == (7,)
    assert looked_up(catalog, of_study, 1, version="0.1.0", under="charts/") == {"charts/one.svg": b"<svg/>"}
    assert looked_up(catalog, of_study, 1, version="0.2.0", under="charts/") == {}
    assert looked_up(catalog, of_study, 2, version="0.1.0", under="charts/") == {}


TAMPERED_ROWS = (
    "UPDATE kept.release_rows SET callout = '⌖ S⌀6'",
    "UPDATE kept.release_rows SET half = [0.31]",
    "UPDATE kept.release_rows SET evidence = '{}'",
    "DELETE FROM kept.release_rows",
    "INSERT INTO kept.release_rows BY NAME SELECT * REPLACE (2 AS place) FROM kept.release_rows",
    "UPDATE kept.releases SET by_whom = 'bo'",
    "UPDATE kept.releases SET warnings = '[]'",
    "UPDATE kept.releases SET created = created + INTERVAL 1 DAY",
)
TAMPERED_FILES = (
    "UPDATE kept.release_contents SET content = 'x'::BLOB WHERE sha256 = (SELECT sha256 FROM kept.release_files WHERE path = 'note.txt')",
    "DELETE FROM kept.release_contents",
    "DELETE FROM kept.release_files WHERE path = 'note.txt'",
    "UPDATE kept.release_files SET path = '../note.txt' WHERE path = 'note.txt'",
    "INSERT INTO kept.release_files SELECT release_id, 'more.txt', sha256, bytes FROM kept.release_files WHERE path = 'note.txt'",
    "DELETE FROM kept.release_files WHERE path = 'manifest.sha256'",
)


@pytest.mark.parametrize("change", TAMPERED_ROWS)
def test_altered_rows_are_noticed(catalog, change):
    freeze(catalog)
    with catalog.write() as con:
        con.execute(change)
    made = looked_up(catalog, releases.find, "FS-101", "A")
    with pytest.raises(releases.ReleaseAltered, match="issue A: .*restore a copy"):
        looked_up(catalog, releases.load_rows, made)
    with pytest.raises(releases.ReleaseAltered):
        looked_up(catalog, releases.load_files, made)
    assert looked_up(catalog, releases.altered, made)


@pytest.mark.parametrize("change", TAMPERED_FILES)
def test_altered_files_are_noticed(catalog, change):
    made = freeze(catalog)
    with catalog.write() as con:
        con.execute(change)
    with pytest.raises(releases.ReleaseAltered, match="files are not those"):
        looked_up(catalog, releases.load_files, made)
    assert not looked_up(catalog, releases.altered, made)


def test_the_module_has_no_way_to_change_a_release():
    for path in ("releases.py", "release_files.py"):
        text = (Path(releases.__file__).parent / path).read_text(encoding="utf-8")
        assert not any(word in text for word in ("UPDATE ", "DELETE ", "REPLACE "))


def test_manifest_is_that_of_sha256sum():
    lines = manifest_of(FILES).decode().splitlines()
    assert lines == [f"{hashlib.sha256(FILES[path]).hexdigest()}  {path}" for path in ("charts/one.svg", "note.txt")]


def test_stale_when_the_geometry_has_a_newer_revision(catalog):
    made = freeze(catalog)
    assert not made.stale and made.newest == "example-front@1"
    with catalog.write() as con:
        moved = WISHBONES.replace("[130, 260, 130]", "[130, 260, 132.5]")
        register(con, geometry(moved), measures=MEASURES, by="bo", why="raised")
    found = looked_up(catalog, releases.find, "FS-101")
    assert found.stale and found.newest == "example-front@2"
    assert looked_up(catalog, releases.moved_points, found) == {"lower_front_pivot": pytest.approx(2.5)}
    assert not looked_up(catalog, releases.altered, found)
    with catalog.read() as con:
        assert con.execute('SELECT stale, newest_revision, "current" FROM releases').fetchall() == [(True, 2, True)]


def test_unknown_drawings_and_issues_name_what_is_there(catalog):
    with pytest.raises(releases.ReleaseNotFound, match="holdtight release"):
        looked_up(catalog, releases.issues, "FS-101")
    freeze(catalog)
    freeze(catalog, issue="B")
    with pytest.raises(releases.ReleaseNotFound, match="did you mean 'FS-101'"):
        looked_up(catalog, releases.issues, "FS-110")
    with pytest.raises(releases.ReleaseNotFound, match="no issue 'C'; it has A, B"):
        looked_up(catalog, releases.find, "FS-101", "C")
    assert looked_up(catalog, releases.current, "FS-110") is None


def test_the_view_has_a_row_a_feature(catalog):
    freeze(catalog, rows=[row(1), row(2, "chassis.lower_front_pivot")])
    freeze(catalog, issue="B")
    with catalog.read() as con:
        found = con.execute(
            'SELECT drawing, issue, feature, callout, supersedes, superseded_by, "current", stale FROM releases ORDER BY release, place'
        ).fetchall()
        uncommented = con.execute(
            "SELECT column_name FROM duckdb_columns() WHERE table_name IN"
            " ('releases', 'release_rows', 'release_files', 'release_contents') AND comment IS NULL"
        ).fetchall()
    assert [line[1:3] for line in found] == [
        ("A", "chassis.upper_front_pivot"), ("A", "chassis.lower_front_pivot"), ("B", "chassis.upper_front_pivot"),
    ]  # fmt: skip
    assert [line[4:] for line in found] == [(None, "B", False, False)] * 2 + [("A", None, True, False)]
    assert uncommented == []
