"""Processes: the tables of standards, the ladder, versions that never change, and what studies keep of them."""

import tomllib
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from catalog_samples import with_study

from catalog import processes
from catalog.process_book import Book, Range
from catalog.process_tables import initial_processes
from catalog.processes import ProcessError, ProcessNotFound
from catalog.store import Catalog
from catalog.zone_spread import spread, suits
from study import zones
from study.zone_entries import parse_zone

ROOT = Path(__file__).parents[2]
TABLES = tomllib.loads((ROOT / "tests" / "references" / "tolerance-tables.toml").read_text(encoding="utf-8"))
BOOK = processes.initial()
SHOP = {"source": "shop trial", "by": "ann"}


def cases():
    """(process, lower edge, upper edge, ± mm or None) of every cell of the reference tables."""
    for table in ("iso_13920", "iso_2768_1", "iso_286_1"):
        said = TABLES[table]
        for name, row in (said.get("half_mm") or said["width_um"]).items():
            scale = 1.0 if "half_mm" in said else 1 / 2000
            for low, high, value in zip(said["edges_mm"], said["edges_mm"][1:], row, strict=False):
                yield said["process"] + name, low, high, None if value < 0 else value * scale


@pytest.fixture
def catalog(tmp_path):
    return Catalog(tmp_path / "a.duckdb")


@pytest.fixture(scope="module")
def unchanged(tmp_path_factory):
    """A catalog in which nothing is kept by the tests that use it."""
    return Catalog(tmp_path_factory.mktemp("shop") / "a.duckdb")


# --- tables


@pytest.mark.parametrize("name", sorted({name for name, *_ in cases()}))
def test_the_tables_are_those_of_the_references(name):
    edges = [low for of, low, *_ in cases() if of == name][0]
    for of, low, high, half in cases():
        if of != name:
            continue
        inside = [high, (low + high) / 2, low + 0.01] + ([low] if low == edges else [])
        for nominal in inside:
            if half is None:
                with pytest.raises(ProcessError, match="outside its nominal dimensions"):
                    BOOK(f"{name}@{nominal}")
            else:
                zone = BOOK(f"{name}@{nominal}")
                assert zone == {"plus_minus": pytest.approx(half, rel=1e-12)} | {
                    "distribution": "uniform", "cp": 1.0, "truncated": False,
                }  # fmt: skip


def test_an_upper_edge_belongs_to_its_range():
    assert BOOK("iso-13920-B@30")["plus_minus"] == 1.0
    assert BOOK("iso-13920-B@30.01")["plus_minus"] == 2.0
    assert BOOK("iso-13920-B@2")["plus_minus"] == 1.0
    assert BOOK("iso-286-IT7@30")["plus_minus"] == 0.0105
    with pytest.raises(ProcessError, match="above 3 to 4000 mm"):
        BOOK("iso-2768-v@3")


def test_grades_follow_their_formula():
    said, rule = TABLES["iso_286_1"], TABLES["iso_286_1_formula"]
    edges = np.array(said["edges_mm"], float)
    d = np.sqrt(edges[:-1] * edges[1:])
    unit = 0.45 * d ** (1 / 3) + 0.001 * d
    for grade, times in rule["times_i"].items():
        off = np.abs(np.array(said["width_um"][grade]) / (times * unit) - 1)
        assert off[0] < rule["first_step_within"] and (off[1:] < rule["within"]).all(), grade


def test_every_initial_row_says_where_it_is_from():
    for process in initial_processes():
        if process.ranges:
            assert "secondary pages" in process.source and "not opened" in process.source
        else:
            assert "common practice" in process.source
        assert "invented" in process.remark


def test_the_initial_ladders_hold():
    for process in initial_processes():
        BOOK.check(process)
    assert BOOK.ladder("iso-13920-B@350") == [f"iso-13920-{c}@350" for c in "ABCD"]
    assert BOOK.ladder("line-bored-bracket")[-1] == "hand-welded-bracket"
    assert BOOK.ladder("iso-2768-c@2") == ["iso-2768-f@2", "iso-2768-m@2", "iso-2768-c@2"]  # v begins above 3 mm
    assert BOOK.ladder("iso-2768-m@3000") == ["iso-2768-m@3000", "iso-2768-c@3000", "iso-2768-v@3000"]  # f ends at 2000


def test_every_initial_zone_is_one_that_a_study_takes():
    for process in initial_processes():
        for zone in [process.zone] if process.zone else [each.zone for each in process.ranges]:
            assert min(parse_zone({**zone, **process.law()}).half) > 0.0


# --- asking


@pytest.mark.parametrize(
    ("asked", "word"),
    [
        ("iso-13920-B", "goes by nominal dimension .2 to 4000 mm."),
        ("iso-13920-B@1.99", "1.99 mm is outside its nominal dimensions, 2 to 4000 mm"),
        ("iso-13920-B@4000.1", "outside its nominal dimensions"),
        ("iso-13920-B@", "must be a number above 0"),
        ("iso-13920-B@-3", "must be a number above 0"),
        ("iso-13920-B@nan", "must be a number above 0"),
        ("iso-13920-B@1_0", "must be a number above 0"),
        ("iso-13920-B@3,5", "must be a number above 0"),
        ("cnc-upright@30", "leave @30 out"),
        ("cnc-uprigt", "did you mean cnc-upright"),
        ("zzz", "holdtight processes"),
    ],
)
def test_a_process_that_is_asked_for_wrongly_says_how(asked, word):
    with pytest.raises((ProcessError, ProcessNotFound), match=word):
        BOOK(asked)


def test_a_catalog_gives_what_the_book_gives(catalog):
    with catalog.write() as con:
        assert [p.name for p in processes.list_processes(con)] == [p.name for p in initial_processes()]
        for mine, theirs in zip(processes.list_processes(con), initial_processes(), strict=True):
            assert replace(mine, created=None) == theirs
        assert processes.resolver(con)("iso-13920-B@350")["plus_minus"] == 2.0
        assert processes.looser(con, "iso-13920-B@350") == "iso-13920-C@350"
        assert processes.tighter(con, "iso-13920-B@350") == "iso-13920-A@350"
        assert processes.looser(con, "hand-welded-bracket") is None
        assert processes.tighter(con, "cnc-upright") is None
        assert processes.cost(con, "line-bored-bracket") == (40.0, 1.5)
        assert processes.get(con, "iso-13920-B@350").name == "iso-13920-B"


# --- versions


def test_a_change_is_a_new_version_and_the_old_row_stays(catalog):
    with catalog.write() as con:
        before = processes.get(con, "cnc-upright")
        made = processes.add(con, name="cnc-upright", zone={"diameter": 0.15}, looser="manual-mill-upright", **SHOP)
        assert (made.version, made.retired, made.by) == (2, None, "ann")
        old, new = [p for p in processes.list_processes(con, retired=True) if p.name == "cnc-upright"]
        assert new == made and old.retired is not None and old.retired_by == "ann"
        assert replace(old, retired=None, retired_by=None) == before
        assert processes.resolver(con)("cnc-upright")["diameter"] == 0.15
        again = processes.add(con, name="cnc-upright", zone={"diameter": 0.15}, looser="manual-mill-upright", **SHOP)
        assert again == made
        assert len(processes.list_processes(con, retired=True)) == len(initial_processes()) + 1


def test_a_retired_process_is_passed_over_in_the_ladder(catalog):
    with catalog.write() as con:
        gone = processes.retire(con, "jig-welded-bracket", by="bob")
        assert gone.retired is not None and gone.retired_by == "bob"
        assert processes.looser(con, "line-bored-bracket") == "hand-welded-bracket"
        assert processes.tighter(con, "hand-welded-bracket") == "line-bored-bracket"
        with pytest.raises(ProcessNotFound, match='"jig-welded-bracket" was retired on 20'):
            processes.get(con, "jig-welded-bracket")
        with pytest.raises(ProcessNotFound, match="was retired"):
            processes.retire(con, "jig-welded-bracket", by="bob")
        back = processes.add(con, name="jig-welded-bracket", zone={"diameter": 0.8}, **SHOP)
        assert back.version == 2


def test_the_nearest_of_several_tighter_ones_is_next(catalog):
    with catalog.write() as con:
        for name, width in (("a", 0.4), ("b", 0.6), ("c", 0.5)):
            processes.add(con, name=name, zone={"length": width}, looser="tape-set-length", **SHOP)
        assert processes.tighter(con, "tape-set-length") == "b"


def test_a_shop_may_have_its_own_ranges(catalog):
    ranges = [Range(0.0, False, 100.0, {"length": 0.2}), Range(100.0, False, 900.0, {"length": 0.4})]
    with catalog.write() as con:
        processes.add(con, name="sawn", zone=None, ranges=ranges, **SHOP)
        book = processes.resolver(con)
    assert [book(f"sawn@{nominal}")["length"] for nominal in (100, 100.1, 900)] == [0.2, 0.4, 0.4]
    with pytest.raises(ProcessError, match="above 0 to 900 mm"):
        book("sawn@901")


# --- refusals

BALL = {"diameter": 0.5}


@pytest.mark.parametrize(
    ("change", "word"),
    [
        ({"name": "a@b"}, "a name has letters"),
        ({"name": ""}, "a name has letters"),
        ({"name": "x" * 61}, "at most 60"),
        ({"zone": None}, "give a zone"),
        ({"zone": BALL, "ranges": [Range(1, True, 2, BALL)]}, "not both"),
        ({"zone": None, "ranges": [Range(1, True, 3, BALL), Range(2, False, 4, BALL)]}, "follow each other"),
        ({"zone": None, "ranges": [Range(3, True, 3, BALL)]}, "from less to more"),
        ({"zone": {}}, "exactly one of"),
        ({"zone": {"diameter": 1, "length": 1}}, "exactly one of"),
        ({"zone": {"diametre": 1}}, "unknown key diametre"),
        ({"zone": {"diameter": 1, "axis": "z"}}, "go together"),
        ({"zone": {"length": 1, "axis": "z", "depth": 1}}, "go together"),
        ({"zone": {"diameter": -1}}, "diameter = -1"),
        ({"zone": {"diameter": float("nan")}}, "diameter = nan"),
        ({"zone": {"plus_minus": [1, 1]}}, "plus_minus"),
        ({"zone": {"plus_minus": [0, 0, 0]}}, "plus_minus"),
        ({"zone": {"length": True}}, "length = True"),
        ({"distribution": "triangular"}, '"uniform" or "normal"'),
        ({"cp": 1.3}, 'goes with distribution = "normal"'),
        ({"cp": 20, "distribution": "normal"}, "0.1 to 10"),
        ({"jig_cost": -1}, "jig_cost = -1"),
        ({"piece_cost": float("inf")}, "piece_cost = inf"),
        ({"source": " "}, "say where the zone comes from"),
        ({"remark": "x" * 3000}, "more than 2000 letters"),
        ({"looser": "nowhere"}, '"nowhere" is not in the catalog'),
        ({"looser": "new"}, "closes a circle, new < new"),
        ({"looser": "cnc-upright"}, 'process "cnc-upright" is tighter than "new"'),
        ({"looser": "tape-set-length"}, "it is for lengths, the other for points"),
        ({"looser": "welded-hub-axis"}, "it is for directions"),
        ({"looser": "iso-13920-B"}, "only iso-13920-B goes by nominal dimension"),
        ({"zone": {"plus_minus": 0.3}, "looser": "jig-welded-bracket"}, "the other for points and lengths"),
    ],
)
def test_a_process_that_breaks_a_rule_is_refused(unchanged, change, word):
    with unchanged.write() as con:
        with pytest.raises((ProcessError, ProcessNotFound), match=word):
            processes.add(con, **{"name": "new", "zone": BALL, **SHOP} | change)
        assert len(processes.list_processes(con, retired=True)) == len(initial_processes())


def test_a_ladder_with_a_circle_is_refused(unchanged):
    with unchanged.write() as con, pytest.raises(ProcessError, match="circle, hand-welded-bracket < line-bored-bracket <"):
        processes.add(con, name="hand-welded-bracket", zone={"plus_minus": 0.1}, looser="line-bored-bracket", **SHOP)


def test_a_new_version_may_not_be_tighter_than_what_stands_below_it(unchanged):
    with unchanged.write() as con:
        with pytest.raises(ProcessError, match='"jig-welded-bracket" is tighter than "line-bored-bracket"'):
            processes.add(con, name="jig-welded-bracket", zone={"diameter": 0.05}, **SHOP)
        assert processes.get(con, "jig-welded-bracket").version == 1
        with pytest.raises(ProcessError, match="is tighter than .* at 30 mm"):
            ranges = [Range(2, True, 4000, {"plus_minus": 0.5})]
            processes.add(con, name="iso-13920-C", zone=None, ranges=ranges, **SHOP)


# --- spreads


@pytest.mark.parametrize("law", [("uniform", 1.0), ("normal", 1.0), ("normal", 0.4), ("normal", 1.7)])
@pytest.mark.parametrize("truncated", [False, True])
@pytest.mark.parametrize(
    "zone",
    [
        {"plus_minus": 0.7}, {"plus_minus": [0.7, 0.2, 0.0]}, {"diameter": 1.4}, {"length": 0.3}, {"tilt_deg": 0.2},
        {"diameter": 1.4, "axis": "z", "depth": 0.5},
    ],
)  # fmt: skip
def test_spreads_are_those_of_the_zones_that_are_drawn(zone, law, truncated):
    keys = {"distribution": law[0], "cp": law[1], "truncated": truncated}
    drawn = parse_zone({**zone, **keys})
    assert spread(zone, **keys) == pytest.approx(float(np.sqrt((zones.sd(drawn) ** 2).mean())), rel=1e-6)
    assert {kind for kind in ("point", "length", "angles") if zones.fits(drawn, kind)} == suits(zone)


# --- studies

RESOLVED = {
    "cnc-upright": {"zone": {"diameter": 0.1, "cp": 1.0}, "looser": "iso-13920-B@30"},
    "iso-13920-B@30": {"zone": {"plus_minus": 1.0}, "looser": None},
}


def test_a_study_keeps_what_its_processes_stood_for(tmp_path):
    catalog, [study, other] = with_study(tmp_path / "a.duckdb", n=2)
    with catalog.write() as con:
        processes.keep(con, study, RESOLVED)
        processes.add(con, name="cnc-upright", zone={"diameter": 0.2}, **SHOP)
    with catalog.read() as con:
        kept, none = processes.of_study(con, study), processes.of_study(con, other)
        used = con.execute("SELECT process, version FROM processes WHERE studies > 0").fetchall()
    assert kept("cnc-upright") == {"diameter": 0.1, "cp": 1.0} and kept("iso-13920-B@30") == {"plus_minus": 1.0}
    assert (kept.looser("cnc-upright"), kept.looser("iso-13920-B@30")) == ("iso-13920-B@30", None)
    assert set(used) == {("cnc-upright", 1), ("iso-13920-B", 1)}
    with pytest.raises(ProcessNotFound, match=f"not kept with study {other}"):
        none("cnc-upright")


def test_the_view_has_a_row_for_each_range(catalog):
    with catalog.write() as con:
        processes.retire(con, "cnc-upright", by="bob")
        query = "SELECT in_force, zone, looser, tighter FROM processes WHERE process = ? ORDER BY from_mm"
        rows = con.execute(query, ["iso-13920-B"]).fetchall()
        assert len(rows) == 6 and {row[2:] for row in rows} == {("iso-13920-C", "iso-13920-A")}
        assert con.execute(query, ["cnc-upright"]).fetchall() == [
            (False, '{"diameter": 0.1}', "manual-mill-upright", None)
        ]
        assert con.execute("SELECT tighter FROM processes WHERE process = 'manual-mill-upright'").fetchall() == [(None,)]


@pytest.mark.parametrize("old", sorted((ROOT / "tests" / "old_catalogs").glob("v*.duckdb")), ids=lambda path: path.stem)
def test_an_older_catalog_gets_the_initial_processes_once(tmp_path, old):
    path = tmp_path / old.name
    path.write_bytes(old.read_bytes())
    for _ in range(2):
        with Catalog(path).write() as con:
            assert processes.resolver(con).in_force.keys() == BOOK.in_force.keys()
            assert con.execute("SELECT max(id) FROM kept.processes").fetchone() == (len(initial_processes()),)


def test_a_saved_catalog_still_gives_what_a_study_kept(tmp_path):
    path = tmp_path / "v0005.duckdb"
    path.write_bytes((ROOT / "tests" / "old_catalogs" / path.name).read_bytes())
    with Catalog(path).read() as con:
        kept = processes.of_study(con, 1)
    assert kept("cnc-upright") == {"diameter": 0.1} and kept.looser("cnc-upright") is None


def test_a_book_of_nothing_knows_nothing():
    with pytest.raises(ProcessNotFound, match="not in the catalog"):
        Book([])("x")
