"""The commands a decision is made with: compare, allocate, and the pivots to hold over the catalog."""

import json

import pytest
from typer.testing import CliRunner

from catalog.errors import HoldtightError
from catalog.store import Catalog
from study.commands import app
from study.crew import Crew
from study.runner import Watch, enqueue, read_asked, work
from tests.study.small_studies import DEMO

TEXT = """
title = "Processes of the front"
geometry = "front-wishbone.toml"
method = "spread"
size = 256
seed = 3
sides = "mirrored"
cars = 12

[errors]
"chassis.lower_*" = { process = "jig-welded-bracket" }
"chassis.upper_*" = { diameter = 1.0 }

[alignment]
toe = { by = "tie_rod", within_deg = 0.03 }

[[measures]]
of = "anti_dive_pct"
limits = [2.6, 6.6]

[[measures]]
of = "roll_centre_height_mm"
"""


@pytest.fixture(scope="module")
def shop(tmp_path_factory):
    """(catalog path, other geometry's file): one finished study whose brackets are named processes."""
    folder = tmp_path_factory.mktemp("shop")
    text = DEMO.read_text(encoding="utf-8")
    (folder / "front-wishbone.toml").write_text(text, encoding="utf-8")
    other = folder / "other.toml"
    other.write_text(text.replace('"front-wishbone"', '"other-front"').replace("[88, 308, 156.5]", "[88, 308, 160.0]"), encoding="utf-8")
    (folder / "study.toml").write_text(TEXT, encoding="utf-8")
    store = Catalog(folder / "shop.duckdb")
    enqueue(store, read_asked(store, folder / "study.toml"), folder, by="test")
    assert work(store, crew=Crew(0), watch=Watch()) == [1]
    return store.path, other


def told(*words, catalog):
    found = CliRunner().invoke(app, [*map(str, words), "--catalog", str(catalog), "--json"], catch_exceptions=False)
    assert found.exit_code == 0, found.output
    return json.loads(found.stdout)


def test_allocate_prices_the_cheapest_that_holds_and_what_money_buys(shop, tmp_path):
    found = told("allocate", 1, "--share", 0.9, "--frontier", "--chart", tmp_path / "cost.svg", catalog=shop[0])
    assert {row["source"] for row in found["processes"]} == {"chassis.lower_front_pivot", "chassis.lower_rear_pivot"}
    assert {row["as_drawn"] for row in found["processes"]} == {"jig-welded-bracket"}
    assert found["chosen"]["low"] >= 0.9
    assert found["saving"] == pytest.approx(found["as_drawn"]["cost"] - found["chosen"]["cost"])
    costs = [row["cost"] for row in found["frontier"]]
    assert costs == sorted(costs) and len(costs) >= 2
    assert "Cost against good share" in (tmp_path / "cost.svg").read_text(encoding="utf-8")


@pytest.mark.parametrize(("words", "said"), [((1, "--share", 0.9999), "no listed combination meets"), ((7,), "study 7 is not in the catalog")])
def test_allocate_says_why_not(shop, words, said):
    with pytest.raises(HoldtightError, match=said):
        CliRunner().invoke(app, ["allocate", *map(str, words), "--catalog", str(shop[0])], catch_exceptions=False)


def test_compare_pairs_the_draws(shop, tmp_path):
    path, other = shop
    found = told("compare", "front-wishbone", other, "--study", 1, "--chart", tmp_path / "both.svg", catalog=path)
    assert found["geometries"] == ["front-wishbone@1", "other-front"]
    gap = found["against_first"][0]
    assert gap["sd_ratio"]["roll_centre_height_mm"] == pytest.approx([1.0, 1.0, 1.0], abs=0.1)
    share = found["good_share"]
    assert gap["good_share_difference"][0] == pytest.approx(share["other-front"] - share["front-wishbone@1"])
    assert gap["good_share_difference"][1] <= gap["good_share_difference"][0] <= gap["good_share_difference"][2]
    assert "other-front" in (tmp_path / "both.svg").read_text(encoding="utf-8")


def test_comparing_a_geometry_with_itself_finds_no_difference(shop, tmp_path):
    twin = tmp_path / "twin.toml"
    twin.write_text(DEMO.read_text(encoding="utf-8").replace('"front-wishbone"', '"twin"'), encoding="utf-8")
    gap = told("compare", "front-wishbone", twin, "--study", 1, catalog=shop[0])["against_first"][0]
    assert gap["good_share_difference"] == [0.0, 0.0, 0.0]
    assert all(ratio == pytest.approx([1.0, 1.0, 1.0]) for ratio in gap["sd_ratio"].values())


def test_the_catalog_knows_which_pivots_to_hold(shop):
    found = told("critical", "--linkage", "double-wishbone", "--axle", "front", catalog=shop[0])
    held = {row["source"]: row for row in found["hold"]}
    assert "chassis.lower_rear_pivot" in held
    row = held["chassis.lower_rear_pivot"]
    assert row["geometries"] == ["front-wishbone@1"] and row["since"] and "anti_dive_pct" in row["measures"]
    assert not any(row["source"].startswith("alignment.") for row in found["critical"])
    assert told("critical", "--axle", "rear", catalog=shop[0]) == {"hold": [], "critical": []}
