"""README says what is there, all of it, and nothing else: commands, options, keys, views, examples, figures."""

import re
import shutil
import tomllib
from pathlib import Path
from typing import get_args

import duckdb
import pytest
import typer.main
from pydantic import BaseModel

from catalog.geometry_file import parse_geometry
from catalog.geometry_models import GeometryTable
from catalog.linkages import LINKAGES
from catalog.store import Catalog
from study.alignment import adjusters_of
from study.assembly import corner_of
from study.commands import COMMANDS, app
from study.crew import Crew
from study.measures import KEYS
from study.methods import METHODS
from study.runner import Watch, enqueue, work
from study.study_entries import StudyEntry
from study.study_file import parse_study
from tests.study.small_studies import DEMO, TOE, demo, small_study

ROOT = Path(__file__).parents[1]
README = (ROOT / "README.md").read_text(encoding="utf-8")
EVERYWHERE = {"--help"}


def section(title: str, mark="##") -> str:
    """The text of one section, up to the next heading of its level."""
    found = re.search(rf"^{mark} {re.escape(title)}\b.*?\n(.*?)(?=^#{{1,{len(mark)}}} |\Z)", README, re.M | re.S)
    assert found, title
    return found[1]


def blocks(language: str) -> list[str]:
    return re.findall(rf"^```{language}\n(.*?)^```$", README, re.M | re.S)


def commands() -> dict:
    return typer.main.get_command(app).commands


def options_of(command) -> set[str]:
    return {name for p in command.params for name in p.opts if name.startswith("--")} - EVERYWHERE


# --- the two set-up blocks


def test_two_blocks_set_everything_up():
    run, test = blocks("sh")
    assert run.count("\n") == test.count("\n") == 1
    assert "pip install" in run and "holdtight run studies/front-brackets.toml" in run
    assert ".[test]" in test and "-m pytest -q" in test
    assert README.index(run) < README.index(test) < README.index("## Cautions")


def test_the_check_of_the_project_runs_the_same_tests():
    words = blocks("sh")[1].split("&& ")[-1].split("/")[-1].strip()
    assert words in (ROOT / ".ci" / "run").read_text(encoding="utf-8")


# --- commands


def test_every_command_has_its_section_and_no_other_has():
    listed = re.findall(r"^### (\S+)", section("Commands"), re.M)
    assert sorted(listed) == sorted(commands()) == sorted(COMMANDS)


@pytest.mark.parametrize("name", COMMANDS)
def test_every_option_stands_with_its_command_and_no_other_does(name):
    assert set(re.findall(r"--[a-z][a-z-]*", section(name, "###"))) == options_of(commands()[name])


def test_options_named_elsewhere_exist():
    known = set().union(*(options_of(command) for command in commands().values())) | EVERYWHERE | {"--quiet"}
    assert set(re.findall(r"(?<![\w-])--[a-z][a-z-]*", README)) <= known


# --- files


def models_in(annotation):
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        yield annotation
    for part in get_args(annotation):
        yield from models_in(part)


def keys_of(model) -> set[str]:
    """Keys of a table and of the tables in it."""
    found = set()
    for name, entry in model.model_fields.items():
        found.add(name)
        for inner in models_in(entry.annotation):
            found |= keys_of(inner)
    return found


@pytest.mark.parametrize(("title", "model"), [("Geometry file", GeometryTable), ("Study file", StudyEntry)])
def test_every_key_of_a_file_is_explained(title, model):
    said = " ".join(re.findall(r"`([^`\n]+)`", re.sub(r"```.*?```", "", section(title), flags=re.S)))
    words = set(re.findall(r"[a-z_]+", said))
    assert keys_of(model) - words == set()


def test_every_linkage_point_and_adjuster_is_named():
    text = section("Geometry file")
    for name, linkage in LINKAGES.items():
        assert f"`{name}`" in text
        assert all(point in text for point in linkage.allowed_points)
    adjusters = set(adjusters_of(corner_of(demo(), "left"))) | {"strut_top", "strut_top_x", "hinge_inner"}
    assert all(f"`{name}`" in section("Study file") for name in adjusters)


def test_every_source_of_the_demo_car_is_named():
    text = section("Study file")
    for feature in corner_of(demo(), "left").features:
        assert feature in text or feature.split(".")[1] in text, feature


def test_every_method_is_named():
    assert set(re.findall(r"^\| `(\w+)` \| ", section("Study file").split("| method |")[1].split("\n\n")[0], re.M)) == (
        set(METHODS)
    )


def test_example_files_are_taken():
    geometry, study = blocks("toml")
    parsed = parse_geometry(geometry, source="README")
    asked = parse_study(study, source="README")
    assert parsed.linkage == "double-wishbone" and not parsed.right_is_mirror
    assert len(asked.measures) == 2 and asked.jigs and asked.alignment
    assert set(tomllib.loads(study)) <= set(StudyEntry.model_fields)


def test_measures_named_in_the_text_exist():
    named = set(re.findall(r"\b[a-z_]+_(?:deg|mm|pct)(?:_per_[a-z]+)?\b", section("How to read a ranking")))
    assert named <= set(KEYS)


def test_files_named_in_the_text_exist():
    for path in re.findall(r"`(studies/[^`\s]*)`", README):
        assert (ROOT / path).exists(), path


def test_the_figures_of_the_roll_centre_are_those_of_the_references(kinematics):
    corner = kinematics["spatial_corner"]
    text = section("Measures")
    assert f"{float(corner['axle']['roll_centre_height_mm']):.1f} mm" in text
    assert f"{corner['arms_alone_roll_centre_height_mm']:.1f} mm on paper" in text


# --- catalog


@pytest.fixture(scope="module")
def catalog(tmp_path_factory):
    """A catalog with one finished sobol study."""
    folder = tmp_path_factory.mktemp("shop")
    shutil.copy(DEMO, folder)
    store = Catalog(folder / "shop.duckdb")
    steer = 'name = "bump steer"\nof = "bump_steer_deg_per_mm"\nlimits = [-0.001, 0.001]'
    asked = small_study(steer, "caster_deg", method="sobol", size=16, alignment=TOE)
    enqueue(store, asked, folder, by="test")
    assert work(store, crew=Crew(0), watch=Watch()) == [1]
    return store


def test_public_views_are_all_listed(catalog):
    with catalog.read() as con:
        found = con.execute("SELECT view_name FROM duckdb_views() WHERE NOT internal AND schema_name = 'main'").fetchall()
    assert set(re.findall(r"^\| `(\w+)` \|", section("Catalog and SQL"), re.M)) == {name for (name,) in found}


@pytest.mark.parametrize("number", range(len(blocks("sql"))))
def test_example_queries_run_and_find_something(catalog, number):
    with duckdb.connect(str(catalog.path), read_only=True) as con:
        assert con.execute(blocks("sql")[number]).fetchall()
