"""The demo studies of the linkages beside the double wishbone, at a reduced size: builds sound, angles reached, values sane."""

import re
import tomllib
from functools import cache

import numpy as np
import pytest

from catalog.geometry_file import read_geometry
from study.nominal import evaluate, sweep
from study.response import Response
from study.study_file import parse_study, read_study
from study.tabulate import tables
from study.tasks import StudyWork
from tests.study.demo import STUDIES

SMALL = {
    "front-strut-towers": 32,
    "rear-five-link-sides": 128,
    "rear-trailing-arm-brackets": 8,
    "rear-solid-axle-rods": 32,
}
NOMINAL = {  # plausible ranges at design: "side key": low, high
    "front-strut": {
        "left caster_deg": (1, 6), "left kingpin_deg": (8, 15), "left scrub_radius_mm": (-20, 30), "left trail_mm": (5, 30),
        "left camber_gain_deg_per_mm": (-0.03, -0.005), "left motion_ratio": (0.9, 1.0), "left anti_dive_pct": (0, 40),
        "axle roll_centre_height_mm": (0, 120),
    },
    "rear-five-link": {
        "left camber_gain_deg_per_mm": (-0.04, -0.01), "left bump_steer_deg_per_mm": (-0.003, 0.003),
        "left anti_squat_pct": (0, 60), "axle roll_centre_height_mm": (20, 120),
    },
    "rear-trailing-arm": {
        "left camber_gain_deg_per_mm": (-0.06, -0.01), "left bump_steer_deg_per_mm": (0, 0.01),
        "left anti_squat_pct": (0, 60), "left anti_lift_pct": (50, 150), "axle roll_centre_height_mm": (50, 250),
        "left motion_ratio": (0.4, 0.8),
    },
    "rear-solid-axle": {
        "axle roll_centre_height_mm": (330, 345), "axle anti_squat_pct": (0, 60), "left camber_gain_deg_per_mm": (-1e-9, 1e-9),
        "left roll_steer_deg_per_deg": (-0.1, 0.1), "left camber_deg": (-1e-9, 1e-9),
    },
}  # fmt: skip


@cache
def geometry(name):
    return read_geometry(STUDIES / f"{name}.toml")


@cache
def small_run(name):
    """(work, tables, facts) of a demo study at its reduced size, without its limits: their verdicts take most builds."""
    text = (STUDIES / f"{name}.toml").read_text(encoding="utf-8")
    text = re.sub(r"(?m)^size = .*", f"size = {SMALL[name]}", text)
    study = parse_study(re.sub(r"(?m)^limits = .*\n", "", text), source=name)
    work = StudyWork(read_geometry(STUDIES / study.geometry), study)
    return work, *tables(work, {task.number: work.run(task) for task in work.tasks})


@pytest.mark.parametrize("name", NOMINAL)
def test_the_nominal_is_a_plausible_axle(name):
    found = evaluate(geometry(name))
    for key, (low, high) in NOMINAL[name].items():
        side, measure = key.split()
        assert low <= found[side][measure] <= high, (key, found[side][measure])
    left, right = found["left"], found["right"]
    same = [k for k, v in left.items() if v is not None and name != "rear-solid-axle"]
    assert {k: left[k] for k in same} == pytest.approx({k: right[k] for k in same}, abs=1e-9)


@pytest.mark.parametrize("name", NOMINAL)
def test_the_nominal_moves_as_far_as_a_car_does(name):
    at = [(bump, roll, 0.0) for bump in (-60.0, 0.0, 60.0) for roll in (-3.0, 0.0, 3.0)]
    toes = [found["left"]["toe_deg"] for found in sweep(geometry(name), at, keys=("toe_deg",))]
    assert np.ptp(toes) < 1.5


@pytest.mark.parametrize("name", SMALL)
def test_all_builds_are_sound_and_shares_are_whole(name):
    work, rows, facts = small_run(name)
    assert facts["unassembled"] == 0 and not facts["withheld"] and facts["builds"] > 500
    for number in range(len(work.study.measures)):
        for stage in work.stages:
            own = [r for r in rows["ranking"] if (r["measure_no"], r["stage"]) == (number, stage)]
            assert sum(row["linear_share"] for row in own) == pytest.approx(1.0, abs=1e-6)
            assert [row["rank"] for row in own] == list(range(1, len(own) + 1))
            if work.study.method == "sobol":
                assert sum(row["st"] for row in own) == pytest.approx(1.0, abs=0.35)
    shipped = {row["measure"]: row["nominal"] for row in rows["stats"] if row["stage"] == "after"}
    for measure in read_study(STUDIES / f"{name}.toml").measures:
        if measure.limits:
            assert measure.limits[0] < shipped[measure.name] < measure.limits[1]


@pytest.mark.parametrize("name", SMALL)
def test_builds_stay_about_the_drawing(name):
    _, rows, _ = small_run(name)
    for row in rows["stats"]:
        if row["sd"] and row["rss"]:
            assert row["sd"] == pytest.approx(row["rss"], rel=0.5), row["measure"]
            assert abs(row["mean"] - row["nominal"]) < row["sd"], row["measure"]


@pytest.mark.parametrize("name", SMALL)
def test_the_alignment_reaches_its_goals_within_the_adjusters_travel(name):
    work, rows, _ = small_run(name)
    study = work.study
    wanted = {a.target: a for a in study.alignment if a.by}
    assert all(row["ran_out_share"] == 0.0 for row in rows["demand"])
    if study.method != "morris":  # whose walks are no sample of builds
        assert {row["adjuster"].split()[0] for row in rows["demand"]} == set(wanted)
    if not wanted:
        return
    text = re.sub(r"(?m)^ride_height = .*\n", "", study.text[: study.text.index("[[measures]]")])
    text += "".join(f'[[measures]]\nof = "{target}_deg"\n' for target in wanted)
    response = Response(work.geometry, parse_study(text, source=name), stage="after", stepless=True)
    errors = response.model.field.to_errors(np.random.default_rng(5).uniform(size=(response.model.scalars, 64)))
    found = response.evaluate(errors)
    assert (found.status == 0).all()
    for adjuster, values in zip(wanted.values(), found.values, strict=True):
        goal = evaluate(work.geometry)["left"][f"{adjuster.target}_deg"]
        left = errors[response.model.bands["left"][adjuster.target]]
        assert values == pytest.approx(goal + left, abs=1e-7) and np.abs(left).max() <= adjuster.within


def test_the_five_links_come_from_the_shops_table():
    read = geometry("rear-five-link")
    assert read.left.points["upper_front_inner"] == (-2362.0, 395.0, 398.0)
    assert read.left.wheel.centre == (-2480.0, 705.0, 290.0) and len(read.links) == 5
    assert read.shop_names["toe_link_inner"] == "TL_IN" and read.shop_names["wheel_centre"] == "W-2L"
    assert read.ignored_points == ("P-231", "P-232") and read.points_text.count("\n") == 15


def test_every_geometry_and_study_of_the_demo_is_named_in_its_readme():
    readme = (STUDIES / "README.md").read_text(encoding="utf-8")
    for path in sorted(STUDIES.glob("*.toml")):
        assert f"`{path.name}`" in readme
        table = tomllib.loads(path.read_text(encoding="utf-8"))
        if "linkage" in table:
            assert table["name"] == path.stem
        else:
            assert (STUDIES / table["geometry"]).is_file()
