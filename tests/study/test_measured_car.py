"""Measured cars: put through the build model, compared with zones, and printed."""

import numpy as np
import pytest

from study import measured_car, nominal
from study.measured_car import Inspection, feature_of, judged
from study.study_file import parse_study
from study.zone_entries import parse_zone
from tests.catalog.catalog_samples import ALL, geometry
from tests.study.command_line import command, refused
from tests.study.small_studies import DEMO, TOE, corner, demo, effects_of, run_study, small_study, study_text

KEYS = ("camber_deg", "toe_deg", "bump_steer_deg_per_mm", "half_track_mm", "caster_deg")


# --- features


def test_points_of_chassis_and_rack_are_put_in_place_others_are_not():
    car = demo()
    assert feature_of(car, "upper_front_pivot") == "chassis.upper_front_pivot"
    assert feature_of(car, "tie_rod_inner") == "rack.tie_rod_inner"
    assert [feature_of(car, point) for point in ("upper_ball_joint", "tie_rod_outer", "wheel_centre")] == [None] * 3


@pytest.mark.parametrize("name", ALL)
def test_a_car_measured_as_drawn_is_as_drawn(name):
    car = geometry(ALL[name])
    names = [feature_of(car, point) for point in car.left.points]
    offsets = {("left", feature): (0.0, 0.0, 0.0) for feature in names if feature}
    assert offsets
    found, drawn = measured_car.evaluate(car, offsets).measures, nominal.evaluate(car)
    for side, values in drawn.items():
        for key, value in values.items():
            assert found[side][key] == (None if value is None else pytest.approx(value, rel=1e-9, abs=1e-9)), key


# --- evaluation


def test_a_rack_end_that_is_low_turns_the_wheel_as_two_solvers_say(kinematics):
    car = corner()
    wanted = kinematics["spatial_corner"]["rack_end_error_1_mm_static_toe_deg"]
    drawn = nominal.evaluate(car)["left"]["toe_deg"]
    moved = [
        measured_car.evaluate(car, {("left", "rack.tie_rod_inner"): tuple(sign * v for v in np.eye(3)[axis])}).measures
        for axis in range(3) for sign in (1, -1)
    ]  # fmt: skip
    turns = [abs(found["left"]["toe_deg"] - drawn) for found in moved]
    assert any(turn == pytest.approx(wanted, abs=0.002) for turn in turns)
    assert all(found["right"]["toe_deg"] == pytest.approx(drawn, abs=1e-9) for found in moved)


@pytest.mark.parametrize("feature", ["chassis.upper_front_pivot", "chassis.lower_rear_pivot", "rack.tie_rod_inner"])
def test_small_offsets_do_what_the_linear_method_says(feature):
    car = demo()
    study = small_study(*KEYS, errors={"chassis.*": "{ plus_minus = 1.0 }", "rack.*": "{ plus_minus = 1.0 }"})
    found, drawn = run_study(car, study), nominal.evaluate(car)["left"]
    offset = (0.02, -0.03, 0.01)
    built = measured_car.evaluate(car, {("left", feature): offset}).measures["left"]
    for i, key in enumerate(KEYS):
        effect = effects_of(found, measure_no=i)[feature]
        assert built[key] - drawn[key] == pytest.approx(np.dot(effect, offset), abs=2e-5), key


def test_both_sides_out_alike_stay_alike():
    offsets = {
        (side, "chassis.lower_front_pivot"): (0.5, sign * 0.8, -0.7) for side, sign in (("left", 1), ("right", -1))
    }
    found = measured_car.evaluate(demo(), offsets, bump_mm=15).measures
    for key, value in found["left"].items():
        assert found["right"][key] == (None if value is None else pytest.approx(value, rel=1e-9, abs=1e-9)), key
    assert found["axle"]["cross_camber_deg"] == pytest.approx(0.0, abs=1e-9)


def test_the_parts_keep_their_sizes_when_a_pivot_is_out():
    """A pivot moved on the drawing brings longer legs with it; the same pivot measured there does not."""
    car = demo()
    offset = (0.0, -2.0, 0.0)
    text = DEMO.read_text(encoding="utf-8").replace("[152, 286, 124]", "[152, 284, 124]")
    drawn = nominal.evaluate(geometry(text))["left"]["camber_deg"]
    built = measured_car.evaluate(car, {("left", "chassis.lower_front_pivot"): offset}).measures["left"]["camber_deg"]
    assert drawn == pytest.approx(-1.25, abs=1e-6)
    assert abs(built + 1.25) > 0.1


def test_an_alignment_brings_the_angles_back_and_says_what_it_took():
    offsets = {("left", "chassis.upper_front_pivot"): (0.3, 1.5, -1.0), ("right", "rack.tie_rod_inner"): (0.0, 0.0, 1.5)}
    alignment = small_study("camber_deg", alignment=TOE).alignment
    built = measured_car.evaluate(demo(), offsets).measures
    aligned = measured_car.evaluate(demo(), offsets, alignment=alignment)
    drawn = nominal.evaluate(demo())
    for side in ("left", "right"):
        assert abs(built[side]["toe_deg"] - drawn[side]["toe_deg"]) > 0.01
        assert aligned.measures[side]["toe_deg"] == pytest.approx(drawn[side]["toe_deg"], abs=1e-7)
        assert built[side]["camber_deg"] != drawn[side]["camber_deg"] or side == "right"
    assert [(row["side"], row["adjuster"], row["by"]) for row in aligned.settings] == [
        ("left", "toe", "tie_rod"), ("right", "toe", "tie_rod"),
    ]  # fmt: skip
    assert all(abs(row["setting_mm"]) > 0.01 and not row["ran_out"] for row in aligned.settings)


def test_a_car_that_does_not_go_together_is_an_error():
    offsets = {("left", f"chassis.upper_{end}_pivot"): (0.0, -500.0, 0.0) for end in ("front", "rear")}
    with pytest.raises(measured_car.NotAssembled, match="measured points"):
        measured_car.evaluate(demo(), offsets)


# --- zones

CASES = [
    ({"diameter": 1.0}, (0.3, 0.0, 0.4), (1.0, 1.0, True)),
    ({"diameter": 1.0}, (0.3, 0.01, 0.4), (2 * (0.25 + 0.0001) ** 0.5, 1.0, False)),
    ({"diameter": 1.0, "axis": "z", "depth": 2.0}, (0.3, 0.4, -1.9), (1.0, 1.0, True)),
    ({"diameter": 1.0, "axis": "z", "depth": 2.0}, (0.3, 0.4, 2.1), (1.0, 1.0, False)),
    ({"diameter": 1.0, "axis": [1, 1, 0], "depth": 2.0}, (1.0, 1.0, 0.1), (0.2, 1.0, True)),
    ({"plus_minus": 0.5}, (0.5, -0.5, 0.5), (None, None, True)),
    ({"plus_minus": [0.5, 0.1, 0.5]}, (0.5, -0.2, 0.5), (None, None, False)),
    ({"plus_minus": 0.5, "shift": 0.4}, (0.6, 0.0, 0.0), (None, None, False)),
]


@pytest.mark.parametrize(("zone", "offset", "wanted"), CASES)
def test_a_point_is_judged_by_its_zone(zone, offset, wanted):
    found = judged(parse_zone(zone), offset)
    actual, limit, inside = wanted
    assert isinstance(found, Inspection) and found.inside is inside
    assert found.actual_mm == (None if actual is None else pytest.approx(actual))
    assert found.limit_mm == limit


def test_a_slanted_zone_is_mirrored_on_the_right():
    text = study_text("camber_deg", errors={"chassis.*": "{ diameter = 0.2, axis = [0, 1, 1], depth = 5 }"})
    study = parse_study(text, source="x")
    along = {("left", "chassis.upper_front_pivot"): (0, 1.0, 1.0), ("right", "chassis.upper_front_pivot"): (0, -1.0, 1.0)}
    assert [found.inside for found in measured_car.inspect(demo(), study, along).values()] == [True, True]
    crossed = {("right", "chassis.upper_front_pivot"): (0, 1.0, 1.0)}
    assert not measured_car.inspect(demo(), study, crossed)["right", "chassis.upper_front_pivot"].inside


# --- the command

POINTS = """name,x,y,z
upper_front_pivot,112.4,352.1,306.8
right.upper_front_pivot,112.1,-352.6,307.3
lower_ball_joint,7,676,134.5
jack_point,1,2,3
"""


@pytest.fixture
def shop(tmp_path, monkeypatch):
    """A folder with the demo geometry in a catalog, a queued study and a file of measured points."""
    monkeypatch.chdir(tmp_path)
    monkeypatch.delenv("HOLDTIGHT_CATALOG", raising=False)
    (tmp_path / DEMO.name).write_bytes(DEMO.read_bytes())
    (tmp_path / "car.csv").write_text(POINTS, encoding="utf-8")
    text = study_text("camber_deg", errors={"chassis.*": "{ diameter = 1.0 }"}, alignment=TOE, method="spread", size=16)
    (tmp_path / "study.toml").write_text(text, encoding="utf-8")
    assert command("queue", "study.toml").code == 0
    return tmp_path


def test_the_command_keeps_lists_shows_and_evaluates(shop):
    words = ("as-built", "add", "front-wishbone@1", "car.csv", "--car", "No. 3", "--by", "ann", "--note", "first")
    made = command(*words, "--study", 1, "--json").json
    assert (made["as_built"], made["geometry"], made["new"], made["left_out"]) == (1, "front-wishbone@1", True, ["jack_point"])
    assert [(p["side"], p["point"], p["inside"]) for p in made["points"]] == [
        ("left", "upper_front_pivot", True), ("right", "upper_front_pivot", False), ("left", "lower_ball_joint", None),
    ]  # fmt: skip
    first = made["points"][0]
    assert (first["dx_mm"], first["dy_mm"], first["dz_mm"], first["zone"], first["limit_mm"]) == (0.4, 0.1, -0.2, "S⌀1 mm", 1.0)
    assert first["position_mm"] == pytest.approx(2 * 0.21**0.5)
    assert not command(*words, "--json").json["new"]
    [row] = command("as-built", "--json").json
    assert (row["car"], row["points"], row["greatest_mm"], row["by"]) == ("No. 3", 3, pytest.approx(2 * 0.46**0.5), "ann")
    assert command("as-built", "list", "front-wishbone@1", "--json").json == [row]
    shown = command("as-built", "show", 1, "--study", 1).out
    assert "OUTSIDE" in shown and "+0.400" in shown and "datums" in shown
    found = command("as-built", "evaluate", 1, "--study", 1, "--bump", 10, "--json").json
    assert found["position"] == {"bump_mm": 10.0, "roll_deg": 0.0, "rack_mm": 0.0}
    assert found["drawn"] == nominal.evaluate(demo(), bump_mm=10)
    assert found["built"]["left"]["camber_deg"] != found["drawn"]["left"]["camber_deg"]
    assert [row["side"] for row in found["settings"]] == ["left", "right"] and found["aligned"]["left"]
    plain = command("as-built", "evaluate", 1).out
    assert "as built" in plain and "difference" in plain and "aligned" not in plain


def test_the_command_says_what_is_wrong(shop):
    (shop / "other.toml").write_text(DEMO.read_text(encoding="utf-8").replace('"front-wishbone"', '"other"'), encoding="utf-8")
    (shop / "no-pivots.csv").write_text("upper_ball_joint,-14,648,344.5\n", encoding="utf-8")
    command("add", "other.toml")
    command("as-built", "add", "other", "car.csv", "--car", "a")
    command("as-built", "add", "front-wishbone", "no-pivots.csv", "--car", "a")
    for words, said in (
        (("ad",), 'did you mean "add"'),
        (("add", "front-wishbone", "car.csv"), "--car NAME"),
        (("add", "front-wishbone@7", "car.csv", "--car", "a"), "has no revision '7'"),
        (("add", "front-wishbone.toml", "car.csv", "--car", "a"), "`holdtight add` registers it"),
        (("add", "front-wishbone", "none.csv", "--car", "a"), "does not exist"),
        (("add", "front-wishbone", "car.csv", "--car", "a", "--study", 9), "study 9 is not in the catalog"),
        (("add", "front-wishbone", "car.csv", "--car", "a", "--bump", 9), "--bump goes with evaluate"),
        (("show",), "give the number"),
        (("show", "x"), "must be the number"),
        (("show", 9), "measurement 9 is not in the catalog"),
        (("show", 1, "--study", 1), "is of front-wishbone@1, not of other"),
        (("show", 1, "--car", "b"), "go with add"),
        (("list", "--study", 1), "--study goes with add, show and evaluate"),
        (("list", "nothing"), "is not in the catalog"),
        (("evaluate", 2), "no chassis or rack point was measured"),
        (("evaluate", 1, "--bump", 900), "does not reach this position"),
    ):
        assert said in refused("as-built", *words), words
