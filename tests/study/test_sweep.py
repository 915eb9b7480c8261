"""Sweeps along one input and over two, their bands and their charts; camber in roll of a catalog's geometries."""

import json
import sys
import xml.etree.ElementTree as ElementTree

import pytest

from catalog.store import Catalog
from study import nominal, tasks
from study.chart_file import ChartFileError, ending_of
from study.commands import main
from study.crew import Crew
from study.runner import Watch, enqueue, register, work
from study.sweeps import Asked, SweepError, Travel, banded_rows, grid, nominal_rows
from tests.study.small_studies import DEMO, TOE, corner, demo, run_study, small_study

SVG = "{http://www.w3.org/2000/svg}"
MIRRORED = {"method": "spread", "size": 64, "alignment": TOE}


def asked(over="bump", ends=(-20.0, 20.0), count=5, *, keys=("camber_deg",), sides=("left",), **held):
    at = {"bump": 0.0, "roll": 0.0, "rack": 0.0} | held
    return Asked(Travel.of(over, start=ends[0], stop=ends[1], count=count), at, keys, sides)


@pytest.fixture(scope="module")
def shop(tmp_path_factory):
    """A catalog with two geometries and a finished study of the first."""
    path = tmp_path_factory.mktemp("shop") / "shop.duckdb"
    catalog = Catalog(path)
    enqueue(catalog, small_study("camber_deg", **MIRRORED), DEMO.parent, by="test")
    register(catalog, corner(), by="test", why="test")
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(tasks, "CURVE_KEYS", {"bump": ("camber_deg",)})
        work(catalog, crew=Crew(0), watch=Watch())
    return path


@pytest.fixture
def holdtight(shop, capsys, monkeypatch):
    """Run a command on the shop's catalog; gives (exit code, what it printed, what it complained of)."""

    def run(*words):
        monkeypatch.setattr(sys, "argv", ["holdtight", *map(str, words), "--catalog", str(shop)])
        capsys.readouterr()
        try:
            main()
            code = 0
        except SystemExit as end:
            code = end.code or 0
        return code, *capsys.readouterr()

    return run


# --- along one input


def test_rows_are_the_measures_at_each_position():
    rows = nominal_rows(demo(), asked("rack", (-10.0, 10.0), 3, keys=("toe_deg", "track_mm"), sides=("left", "right"), bump=5.0))
    assert {(row["key"], row["side"]) for row in rows} == {("toe_deg", "left"), ("toe_deg", "right"), ("track_mm", "axle")}
    for row in rows:
        at = nominal.evaluate(demo(), bump_mm=5.0, rack_mm=row["x"])[row["side"]]
        assert row["nominal"] == pytest.approx(at[row["key"]], abs=1e-9)


@pytest.mark.parametrize("sides", ["mirrored", "independent"])
def test_the_band_is_that_of_the_study_itself(monkeypatch, sides):
    monkeypatch.setattr(tasks, "CURVE_KEYS", {"bump": ("camber_deg",)})
    monkeypatch.setattr(tasks, "CURVE_BUILDS", 32)
    study = small_study("camber_deg", sides=sides, **MIRRORED)
    kept = run_study(demo(), study)[0]["curves"]
    along = asked("bump", (-30.0, 30.0), tasks.CURVE_POSITIONS)
    assert banded_rows(demo(), study, along, stage="after", count=32) == kept


def test_both_sides_have_a_band_of_their_own():
    study = small_study("camber_deg", sides="independent", **MIRRORED)
    rows = banded_rows(demo(), study, asked(count=2, sides=("left", "right")), stage="after", count=16)
    left, right = ([row for row in rows if row["side"] == side] for side in ("left", "right"))
    assert [row["nominal"] for row in left] == pytest.approx([row["nominal"] for row in right])
    assert all(a["q05"] < a["nominal"] < a["q95"] and a["q05"] != b["q05"] for a, b in zip(left, right, strict=True))


def test_json_carries_the_band(holdtight):
    code, out, err = holdtight("sweep", "--study", 1, "--measures", "camber_deg,track_mm", "--positions", 3, "--json")
    assert code == 0, err
    found = json.loads(out)
    assert (found["geometry"], found["study"], found["builds"], found["stage"]) == ("front-wishbone@1", 1, 256, "after")
    for row in found["rows"]:
        assert row["band"]["camber_deg"]["q05"] < row["camber_deg"] < row["band"]["camber_deg"]["q95"]
    assert [row["bump_mm"] for row in found["rows"]] == [-30.0, 0.0, 30.0]


# --- over two inputs


def test_a_map_has_a_row_a_position_of_the_first_input():
    found = grid(demo(), asked("bump", (-10.0, 10.0), 2, keys=("toe_deg", "ackermann_pct")), Travel("rack", (0.0, 5.0, 10.0)))
    assert [len(row) for row in found["toe_deg"]] == [3, 3]
    assert found["toe_deg"][1][2] == pytest.approx(nominal.evaluate(demo(), bump_mm=10, rack_mm=10)["left"]["toe_deg"])
    assert [row[0] for row in found["ackermann_pct"]] == [None, None]


def test_a_map_of_too_many_positions_is_refused():
    with pytest.raises(SweepError, match="at most"):
        grid(demo(), asked(count=1001), Travel("rack", (0.0, 5.0)))


def test_map_as_json_and_table(holdtight, tmp_path):
    words = ("sweep", "front-wishbone", "--against", "rack", "--against-from", 0, "--against-to", 10, "--against-positions", 3,
             "--positions", 2, "--measures", "bump_steer_deg_per_mm", "--roll", 1)  # fmt: skip
    code, out, err = holdtight(*words, "--json")
    assert code == 0, err
    found = json.loads(out)
    assert found["positions"] == {"bump_mm": [-30.0, 30.0], "rack_mm": [0.0, 5.0, 10.0]} and found["held"] == {"roll_deg": 1.0}
    assert [len(row) for row in found["measures"][0]["values"]] == [3, 3]
    _, out, _ = holdtight(*words)
    assert "bump_steer_deg_per_mm [deg/mm], left side, roll 1° held" in " ".join(out.split())


# --- chart files


@pytest.mark.parametrize("ending", ["svg", "png", "pdf", "html", "json"])
def test_the_ending_decides(holdtight, tmp_path, ending):
    path = tmp_path / f"new/curves.{ending}"
    code, out, err = holdtight("sweep", "front-wishbone", "--positions", 3, "--chart", path)
    assert code == 0, err
    assert str(path) in out.replace("\n", "")
    start = {"svg": b"<svg", "png": b"\x89PNG", "pdf": b"%PDF", "html": b"<!DOCTYPE html>", "json": b"{"}[ending]
    content = path.read_bytes()
    assert content.startswith(start)
    if ending != "pdf":
        assert b"camber along bump, nominal: left" in content


def test_a_chart_with_a_band_names_its_study(holdtight, tmp_path):
    path = tmp_path / "band.json"
    assert holdtight("sweep", "--study", 1, "--positions", 3, "--measures", "camber_deg", "--chart", path)[0] == 0
    spec = json.loads(path.read_text())
    assert "study 1, after alignment" in spec["title"]["subtitle"] and "left, right alike" in spec["title"]["subtitle"]
    assert len(spec["datasets"]["band"]) == 3


def test_a_map_is_drawn(holdtight, tmp_path):
    path = tmp_path / "map.svg"
    words = ("--against", "rack", "--positions", 3, "--against-positions", 3, "--measures", "toe_deg,track_mm")
    assert holdtight("sweep", "front-wishbone", *words, "--chart", path)[0] == 0
    texts = [node.text for node in ElementTree.parse(path).getroot().iter(f"{SVG}text")]
    assert sum(str(text)[:1] in "+−" for text in texts) > 9


def test_camber_in_roll_of_the_catalog(holdtight, tmp_path):
    path = tmp_path / "roll.html"
    code, out, err = holdtight("geometries", "--chart", path)
    assert code == 0, err
    text = path.read_text(encoding="utf-8")
    assert "front-wishbone@1" in text and corner().name + "@1" in text and 'role="img"' in text
    code, out, _ = holdtight("geometries", "front-wishbone", "--chart", path, "--json")
    assert [row["name"] for row in json.loads(out)] == ["front-wishbone"]
    assert corner().name not in path.read_text(encoding="utf-8")


# --- wrong input


@pytest.mark.parametrize(
    ("words", "named"),
    [
        ("sweep", "--study"),
        ("sweep front-wishbone --chart curves.gif", "curves.gif"),
        ("sweep front-wishbone --against bump", "--against bump"),
        ("sweep front-wishbone --against rack --study 1", "--against"),
        ("sweep front-wishbone --against-to 3", "--against-to 3"),
        ("sweep front-wishbone --against yaw", "yaw"),
        ("sweep front-wishbone --over roll --roll 1", "--roll 1"),
        ("sweep front-wishbone --from 3 --to 3", "bump"),
        ("sweep front-wishbone --measures ,", "--measures"),
        ("sweep --study 9", "9"),
        ("geometries no-such", "no-such"),
        ("geometries --chart roll.doc", "roll.doc"),
    ],
)
def test_wrong_input_is_named_in_a_line_or_two(holdtight, words, named):
    code, out, err = holdtight(*words.split())
    assert code == 2 and named in err and out == ""
    assert len(err.splitlines()) <= 3 and "Traceback" not in err


def test_a_study_of_another_geometry_is_refused(holdtight):
    code, _, err = holdtight("sweep", corner().name, "--study", 1)
    assert code == 2 and "front-wishbone@1" in err


def test_endings_in_any_case(tmp_path):
    assert ending_of(tmp_path / "A.SVG") == "svg"
    with pytest.raises(ChartFileError, match="ending"):
        ending_of(tmp_path / "chart")
