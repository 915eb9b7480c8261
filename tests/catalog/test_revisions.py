"""Registered revisions: numbered, found again, never changed."""

import json

import pytest
from catalog_samples import ALL, MEASURES, WISHBONES, geometry

from catalog.revisions import RevisionNotFound, by_id, find, list_revisions, load, measures_of, register
from catalog.rows import unit_of
from catalog.store import Catalog


@pytest.fixture(scope="module")
def catalog(tmp_path_factory):
    """A catalog with two revisions of the wishbones and one of every other linkage."""
    made = Catalog(tmp_path_factory.mktemp("revisions") / "a.duckdb")
    with made.write() as con:
        for text in [*ALL.values(), WISHBONES.replace("560, 290", "560, 291")]:
            register(con, geometry(text), measures=MEASURES, by="tester", why="because")
    return made


def test_the_same_content_is_the_same_revision(catalog):
    with catalog.write() as con:
        again = register(con, geometry("# new comment\n" + WISHBONES), measures={}, by="other", why="again")
        assert (again.spec, again.is_new, again.by) == ("example-front@1", False, "tester")
        assert "new comment" not in load(con, again).text
        assert len(list_revisions(con)) == 6


def test_changed_content_is_a_new_revision_with_when_who_and_why(catalog):
    with catalog.read() as con:
        newest = find(con, "example-front")
        assert (newest.number, newest.by, newest.why) == (2, "tester", "because")
        assert newest.created is not None
        assert find(con, "example-front@1").number == 1
        assert by_id(con, newest.id) == newest
        assert [r.spec for r in list_revisions(con, newest_only=True)].count("example-front@2") == 1


def test_geometries_come_back_as_they_were(catalog):
    with catalog.read() as con:
        for text in ALL.values():
            wanted = geometry(text)
            assert load(con, find(con, f"{wanted.name}@1")) == wanted


def test_measures_come_back_with_units(catalog):
    with catalog.read() as con:
        found = measures_of(con, find(con, "example-front"))
        assert found == {"left": MEASURES["left"], "right": {}, "axle": MEASURES["axle"]}
        row = con.execute("SELECT value, unit FROM measures WHERE measure = 'track_mm' LIMIT 1").fetchone()
        assert row == (1280.0, "mm")


@pytest.mark.parametrize(
    "key, unit",
    [
        ("camber_deg", "deg"),
        ("camber_gain_deg_per_mm", "deg/mm"),
        ("track_change_mm_per_mm", "mm/mm"),
        ("swing_arm_curvature_per_m", "1/m"),
        ("roll_steer_deg_per_deg", "deg/deg"),
        ("anti_dive_pct", "%"),
        ("motion_ratio", "1"),
    ],
)
def test_the_unit_stands_in_the_key(key, unit):
    assert unit_of(key) == unit


def test_unknown_names_and_revisions_are_explained(catalog):
    with catalog.read() as con:
        with pytest.raises(RevisionNotFound, match="did you mean 'example-front'"):
            find(con, "exmple-front")
        with pytest.raises(RevisionNotFound, match="no revision '9'; it has 1 to 2"):
            find(con, "example-front@9")
        with pytest.raises(RevisionNotFound, match="no revision ''"):
            find(con, "example-front@")
        with pytest.raises(RevisionNotFound):
            by_id(con, 99)


def test_the_public_views_show_revisions_and_points(catalog):
    with catalog.read() as con:
        rows = con.execute(
            "SELECT spec, newest FROM geometries WHERE geometry = 'example-front' ORDER BY 1"
        ).fetchall()
        assert rows == [("example-front@1", False), ("example-front@2", True)]
        query = "SELECT y_mm FROM points WHERE geometry = ? AND revision = 2 AND point = ? AND side = ?"
        assert con.execute(query, ["example-front", "wheel_centre", "right"]).fetchone() == (-640.0,)
        record = con.execute("SELECT record FROM kept.revisions LIMIT 1").fetchone()[0]
        assert json.loads(record)["left"]["wheel"]["loaded_radius_mm"] == 265.0
