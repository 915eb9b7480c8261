"""The command line: what it prints for programs, what it says of wrong input, and its exit codes."""

import re
import shutil
import sys

import pytest

from study import tasks
from study.commands import main
from study.measures import KEYS
from tests.study.command_line import Done
from tests.study.small_studies import DEMO, ROOT, TOE, study_text

MEASURES = (
    'of = "camber_gain_deg_per_mm"\nlimits = [-0.03, -0.024]',
    'of = "toe_deg"\nover = { bump = [-20, 20, 5] }\ntake = "range"',
    'of = "toe_deg"\nover = { bump = [-20, 20, 5] }\ntake = "slope"',
    'of = "camber_deg"\nat = { bump = 25, roll = 1.5 }',
    "roll_centre_height_mm",
)
ERRORS = {"chassis.upper_*": "{ plus_minus = 1.0 }", "upright.hub_axis": "{ tilt_deg = 0.05 }"}
SMALL = {"CURVE_BUILDS": 8, "CURVE_KEYS": {"bump": ("camber_deg",)}}


@pytest.fixture
def holdtight(capsys, monkeypatch):
    """Run a command in this process as the installed one would."""

    def run(*words):
        monkeypatch.setattr(sys, "argv", ["holdtight", *map(str, words)])
        capsys.readouterr()
        try:
            main()
            code = 0
        except SystemExit as end:
            code = end.code or 0
        return Done(code, *capsys.readouterr())

    return run


@pytest.fixture
def shop(tmp_path, monkeypatch):
    """A folder with the demo geometry, in which no catalog is yet."""
    monkeypatch.chdir(tmp_path)
    monkeypatch.delenv("HOLDTIGHT_CATALOG", raising=False)
    shutil.copy(DEMO, tmp_path)
    for name, value in SMALL.items():
        monkeypatch.setattr(tasks, name, value)
    return tmp_path


def write(folder, name, text):
    (folder / name).write_text(text, encoding="utf-8")
    return name


# --- evaluate and sweep


def test_evaluate_gives_every_measure_once(shop, holdtight):
    found = holdtight("evaluate", DEMO.name, "--bump", 25, "--roll", -1.5, "--rack", 5, "--json").json
    assert list(found) == ["geometry", "position", "left", "right", "axle"]
    assert found["position"] == {"bump_mm": 25.0, "roll_deg": -1.5, "rack_mm": 5.0}
    side = {key for key, info in KEYS.items() if info.scope == "side"}
    assert set(found["left"]) == set(found["right"]) == side
    assert set(found["axle"]) == set(KEYS) - side
    values = [v for part in ("left", "right", "axle") for v in found[part].values()]
    assert all(v is None or isinstance(v, float) for v in values)
    assert found["left"]["camber_deg"] != found["right"]["camber_deg"]


def test_evaluate_says_null_where_a_measure_is_not_defined(shop, holdtight):
    found = holdtight("evaluate", DEMO.name, "--json").json
    assert found["geometry"] == "front-wishbone"
    assert found["left"]["steer_lift_mm"] is None and found["axle"]["ackermann_pct"] is None
    assert found["left"]["camber_deg"] == pytest.approx(-1.25, abs=1e-9)
    assert found["axle"]["track_mm"] == pytest.approx(2 * found["left"]["half_track_mm"])


def test_evaluate_takes_a_name_of_the_catalog(shop, holdtight):
    assert holdtight("add", DEMO.name, "--why", "first", "--by", "ann", "--json").json == [
        {"geometry": "front-wishbone@1", "new": True, "linkage": "double-wishbone"}
    ]
    assert not holdtight("add", DEMO.name, "--json").json[0]["new"]
    by_file = holdtight("evaluate", DEMO.name, "--json").json
    for name in ("front-wishbone", "front-wishbone@1"):
        assert holdtight("evaluate", name, "--json").json == by_file | {"geometry": "front-wishbone@1"}
    listed = holdtight("geometries", "--json").json
    assert [(row["spec"], row["by"], row["why"]) for row in listed] == [("front-wishbone@1", "ann", "first")]


def test_sweep_follows_evaluate(shop, holdtight):
    words = ("--over", "roll", "--from", -1, "--to", 1, "--positions", 3, "--measures", "camber_deg,track_mm")
    found = holdtight("sweep", DEMO.name, *words, "--bump", 10, "--side", "right", "--json").json
    assert [row["roll_deg"] for row in found["rows"]] == [-1.0, 0.0, 1.0]
    for row in found["rows"]:
        at = holdtight("evaluate", DEMO.name, "--bump", 10, "--roll", row["roll_deg"], "--json").json
        assert row["camber_deg"] == pytest.approx(at["right"]["camber_deg"], abs=1e-9)
        assert row["track_mm"] == pytest.approx(at["axle"]["track_mm"], abs=1e-9)


def test_show_gives_points_and_the_file_as_it_was(shop, holdtight):
    found = holdtight("show", DEMO.name, "--json").json
    assert found["geometry"] == "front-wishbone"
    assert "[points]" in holdtight("show", DEMO.name, "--text").out
    assert "upper_front_pivot" in holdtight("show", DEMO.name).out


# --- queue, work, studies, critical, cancel


@pytest.fixture(scope="module")
def finished(tmp_path_factory):
    return tmp_path_factory.mktemp("finished") / "holdtight.duckdb"


@pytest.fixture
def worked(shop, holdtight, finished):
    """A finished sobol study with an alignment, number 1; it is run once, and each test has a copy."""
    text = study_text(*MEASURES, method="sobol", size=32, errors=ERRORS, alignment=TOE, title="brackets")
    write(shop, "study.toml", text)
    if not finished.exists():
        assert holdtight("queue", "study.toml", "--json").json["study"] == 1
        assert holdtight("work", "--threads", 2, "--json").json == {"finished": [1]}
        shutil.copy(shop / finished.name, finished)
    shutil.copy(finished, shop)
    return shop


def test_critical_keeps_its_json_contract(worked, holdtight):
    found = holdtight("critical", 1, "--json").json
    assert (found["study"], found["stage"]) == (1, "after")
    assert 0.0 <= found["good_share"] <= 1.0
    names = [m["measure"] for m in found["measures"]]
    assert names == [
        "camber_gain_deg_per_mm", "toe_deg range over bump -20…20", "toe_deg slope over bump -20…20",
        "camber_deg at bump 25, roll 1.5", "roll_centre_height_mm",
    ]  # fmt: skip
    for measure in found["measures"]:
        assert {"unit", "nominal", "mean", "sd", "ranking"} <= set(measure)
        assert measure["sd"] > 0.0
        assert [row["rank"] for row in measure["ranking"]] == [1, 2, 3, 4]
        for row in measure["ranking"]:
            wanted = {"source", "st", "st_low", "st_high", "s1", "linear_share", "effect_xyz", "effect_per_mm", "verdict"}
            assert wanted <= set(row)
            assert row["st_low"] <= row["st"] <= row["st_high"]


def test_effects_are_given_along_the_axes_but_not_of_a_range(worked, holdtight):
    gain, range_, slope, *_ = (m["ranking"] for m in holdtight("critical", 1, "--json").json["measures"])
    for row in range_:
        assert row["effect_xyz"] is None and row["effect_per_mm"] is None
    for ranking in (gain, slope):
        for row in ranking:
            scalars = {"chassis": 3, "upright": 2, "alignment": 1}[row["source"].split(".")[0]]
            assert len(row["effect_xyz"]) == scalars
            length = sum(e * e for e in row["effect_xyz"]) ** 0.5
            assert row["effect_per_mm"] == pytest.approx(length, rel=1e-9, abs=1e-15)


def test_critical_before_alignment_leaves_the_adjusters_out(worked, holdtight):
    before = holdtight("critical", 1, "--stage", "before", "--json").json
    assert before["stage"] == "before"
    sources = {row["source"] for row in before["measures"][0]["ranking"]}
    assert sources == {"chassis.upper_front_pivot", "chassis.upper_rear_pivot", "upright.hub_axis"}


def test_critical_without_an_alignment_is_before(shop, holdtight):
    write(shop, "study.toml", study_text("camber_deg", "toe_deg", errors=ERRORS))
    holdtight("queue", "study.toml")
    holdtight("work")
    found = holdtight("critical", 1, "--json").json
    assert (found["stage"], found["good_share"]) == ("before", None)
    row = found["measures"][0]["ranking"][0]
    assert row["st"] is row["s1"] is row["verdict"] is None and row["linear_share"] > 0.0
    refused = holdtight("critical", 1, "--stage", "after")
    assert refused.code == 2 and "before" in refused.err


def test_tables_say_what_was_run_and_over_the_catalog(worked, holdtight):
    shown = holdtight("critical", 1, "--most", 2).out
    builds = holdtight("critical", 1, "--json").json["builds"]
    assert f"{builds} builds run" in shown and "2 more sources" in shown
    assert "chassis.upper_rear_pivot" in shown and "Rigid geometry only" in shown
    catalog = holdtight("critical", "--json").json["critical"]
    assert {row["geometry"] for row in catalog} == {"front-wishbone"}
    assert {row["rank"] for row in catalog} <= {1, 2, 3}


def test_studies_keep_their_json_contract(worked, holdtight):
    holdtight("queue", "study.toml", "study.toml")
    found = holdtight("studies", "--json").json
    assert [(row["study"], row["title"], row["state"]) for row in found] == [
        (1, "brackets", "done"), (2, "brackets", "queued"), (3, "brackets", "queued"),
    ]  # fmt: skip
    assert found[0]["done"] == found[0]["total"] > 0
    assert (found[1]["done"], found[1]["total"]) == (0, None)
    cancelled = holdtight("cancel", 1, 3, "--json").json
    assert cancelled == [{"study": 1, "state": "done"}, {"study": 3, "state": "cancelled"}]
    assert [row["study"] for row in holdtight("queue", "study.toml", "study.toml", "--json").json] == [4, 5]


def test_run_does_it_all_and_tells_its_number(shop, holdtight):
    write(shop, "study.toml", study_text(*MEASURES[:2], method="spread", size=64, errors=ERRORS, alignment=TOE))
    found = holdtight("run", "study.toml", "--json").json
    assert found["study"] == 1 and found["geometry"] == "front-wishbone@1"
    assert (shop / "sheets" / "study-1.html").stat().st_size > 10_000
    shown = holdtight("run", "study.toml", "--sheet", "other.html")
    assert shown.code == 0 and "study 2" in shown.out
    assert (shop / "other.html").is_file()
    assert holdtight("studies", "--json").json[1]["state"] == "done"


def test_the_catalog_may_be_named_in_two_ways(shop, holdtight, monkeypatch):
    holdtight("add", DEMO.name, "--catalog", "one.duckdb")
    assert (shop / "one.duckdb").is_file()
    monkeypatch.setenv("HOLDTIGHT_CATALOG", "two.duckdb")
    holdtight("add", DEMO.name)
    assert (shop / "two.duckdb").is_file() and not (shop / "holdtight.duckdb").exists()
    assert len(holdtight("geometries", "--json").json) == 1


def test_measures_and_schemas_are_printed(shop, holdtight):
    listed = holdtight("measures", "--json").json
    assert [row["key"] for row in listed] == list(KEYS)
    assert all(row["unit"] and row["meaning"] for row in listed)
    for kind in ("geometry", "study"):
        assert holdtight("schema", kind).json["type"] == "object"


# --- wrong input


def geometry_with(old, new):
    text = DEMO.read_text(encoding="utf-8")
    assert old in text
    return text.replace(old, new)


PLAIN = study_text("camber_deg", errors=ERRORS, alignment=TOE)
RACKLESS = """
name = "rear"
linkage = "semi-trailing-arm"
[points]
hinge_inner = [320, 150, 240]
hinge_outer = [390, 480, 255]
[wheel]
centre = [0, 640, 265]
loaded_radius = 265
[vehicle]
axle = "rear"
"""
FILES = {
    "left-handed.toml": geometry_with("y-left", "y-right"),
    "unknown-key.toml": geometry_with("note = ", "nota = "),
    "metres.toml": geometry_with('units = "mm"', 'units = "m"'),
    "infinite.toml": geometry_with("[112, 352, 307]", "[inf, 352, 307]"),
    "missing-point.toml": geometry_with("tie_rod_inner     = [88, 308, 156.5]", ""),
    "not-toml.toml": 'name = "x\n[',
    "rackless.toml": RACKLESS,
    "bad-measure.toml": PLAIN.replace("camber_deg", "cambre_deg"),
    "bad-adjuster.toml": PLAIN.replace('"tie_rod"', '"tie_rods"'),
    "bad-source.toml": PLAIN.replace("upright.hub_axis", "upright.hub_axle"),
    "bad-zone.toml": PLAIN.replace("{ tilt_deg = 0.05 }", "{ diameter = 0.05 }"),
    "bad-key.toml": PLAIN.replace("seed = 1", "sead = 1"),
    "bad-size.toml": study_text("camber_deg", method="sobol", size=100),
    "bad-geometry.toml": PLAIN.replace("front-wishbone.toml", "nowhere.toml"),
    "bad-revision.toml": PLAIN.replace("front-wishbone.toml", "front-wishbone@9"),
    "far.toml": study_text('of = "camber_deg"\nat = { bump = 900 }'),
    "no-errors.toml": PLAIN.replace("[errors]", "[error]"),
    "cross.toml": study_text("cross_camber_deg", sides="mirrored"),
    "not-a-catalog.duckdb": "not a database",
}
WRONG = [
    ("evaluate nothing.toml", "nothing.toml"),
    ("evaluate left-handed.toml", "left-handed"),
    ("evaluate unknown-key.toml", "nota"),
    ("evaluate metres.toml", "units"),
    ("evaluate infinite.toml", "upper_front_pivot"),
    ("evaluate missing-point.toml", "tie_rod_inner"),
    ("evaluate not-toml.toml", "TOML"),
    ("evaluate rackless.toml --rack 5", "rack"),
    ("evaluate front-wishbone.toml --bump 900", "900"),
    ("evaluate front-wishbone.toml --bump -900", "-900"),
    ("evaluate front-wishbone.toml --bump nan", "nan"),
    ("evaluate front-wishbone@9", "front-wishbone"),
    ("evaluate front-wishbon", "front-wishbone"),
    ("sweep front-wishbone.toml --measures cambre_deg", "cambre_deg"),
    ("sweep front-wishbone.toml --over yaw", "yaw"),
    ("sweep front-wishbone.toml --positions 1", "positions"),
    ("sweep front-wishbone.toml --side both", "both"),
    ("add left-handed.toml", "left-handed"),
    ("add front-wishbone.toml --catalog not-a-catalog.duckdb", "not-a-catalog.duckdb"),
    ("studies --catalog not-a-catalog.duckdb", "not-a-catalog.duckdb"),
    ("studies --catalog missing.duckdb", "missing.duckdb"),
    ("add front-wishbone.toml --catalog nowhere/shop.duckdb", "nowhere"),
    ("queue nothing.toml", "nothing.toml"),
    ("queue bad-measure.toml", "camber_deg"),
    ("queue bad-adjuster.toml", "tie_rod"),
    ("queue bad-source.toml", "upright.hub_axis"),
    ("queue bad-zone.toml", "tilt_deg"),
    ("queue bad-key.toml", "sead"),
    ("queue bad-size.toml", "power of two"),
    ("queue bad-geometry.toml", "nowhere.toml"),
    ("queue bad-revision.toml", "front-wishbone"),
    ("queue far.toml", "900"),
    ("queue no-errors.toml", "error"),
    ("queue cross.toml", "independent"),
    ("run bad-adjuster.toml", "tie_rod"),
    ("critical 99", "99"),
    ("cancel 99", "99"),
    ("sheet 99", "99"),
    ("schema car", "car"),
]


@pytest.fixture(scope="module")
def bad_files(tmp_path_factory):
    folder = tmp_path_factory.mktemp("wrong")
    for name, text in FILES.items():
        write(folder, name, text)
    shutil.copy(DEMO, folder)
    return folder


@pytest.fixture
def wrong(bad_files, holdtight, monkeypatch):
    monkeypatch.chdir(bad_files)
    monkeypatch.delenv("HOLDTIGHT_CATALOG", raising=False)
    if not (bad_files / "holdtight.duckdb").exists():
        assert holdtight("add", DEMO.name).code == 0
    return holdtight


@pytest.mark.parametrize(("words", "named"), WRONG, ids=[words for words, _ in WRONG])
def test_wrong_input_is_a_few_lines_and_exit_code_2(wrong, words, named):
    done = wrong(*words.split())
    assert done.code == 2, done.err
    assert done.out == ""
    assert named in done.err
    lines = done.err.strip().splitlines()
    assert lines[0].startswith("holdtight: ") and 1 <= len(lines) <= 3
    assert "Traceback" not in done.err and "Warning" not in done.err


@pytest.mark.parametrize(
    "words", ["nonsense", "evaluate", "critical one", "work --threads -1", "queue --sideways", "show a b", "cancel x"]
)
def test_wrong_words_are_shown_the_usage(wrong, words):
    done = wrong(*words.split())
    assert done.code == 2 and done.out == ""
    assert re.match(r"Usage: .*holdtight ", done.err)
    assert "Error: " in done.err and "Traceback" not in done.err


def test_nothing_wrong_is_queued(wrong):
    assert wrong("studies", "--json").json == []


def test_a_study_without_results_says_so(shop, holdtight):
    write(shop, "study.toml", study_text("camber_deg", errors=ERRORS))
    holdtight("queue", "study.toml")
    for words in (("critical", 1), ("critical", 1, "--json"), ("sheet", 1)):
        done = holdtight(*words)
        assert done.code == 2 and "queued" in done.err and done.out == ""


def test_failed_work_is_exit_code_1(shop, holdtight, monkeypatch):
    write(shop, "study.toml", study_text("camber_deg", errors=ERRORS))
    monkeypatch.setattr(tasks.StudyWork, "run", lambda self, task: 1 / 0)
    monkeypatch.setattr("tempfile.tempdir", str(shop))
    holdtight("queue", "study.toml")
    done = holdtight("work")
    assert done.code == 1 and "Traceback" not in done.err
    assert "fault of the program" in done.err and list(shop.glob("holdtight-fault-*.txt"))
    assert holdtight("studies", "--json").json[0]["state"] == "failed"
    refused = holdtight("critical", 1)
    assert refused.code == 2 and "failed" in refused.err


# --- text of others


STEERING = "\x1b[31mred\x07\x9b2J"


def test_control_characters_of_others_stay_inert(shop, holdtight):
    written = STEERING.replace("\x1b", "\\u001b").replace("\x07", "\\u0007").replace("\x9b", "\\u009b")
    text = study_text("camber_deg", MEASURES[0], errors=ERRORS, title=f"brackets [bold] {written}")
    text += f'[[measures]]\nname = "toe {written}"\nof = "toe_deg"\n'
    write(shop, "study.toml", text)
    note = geometry_with('note = "', f'note = "{written} ')
    write(shop, DEMO.name, note)
    shown = [holdtight("add", DEMO.name, "--why", STEERING), holdtight("queue", "study.toml"), holdtight("work")]
    shown += [holdtight(*w) for w in (("studies",), ("critical", 1), ("critical",), ("geometries",), ("show", DEMO.name))]
    for done in shown:
        assert done.code == 0, done.err
        assert not re.search(r"[\x00-\x08\x0b-\x1f\x7f-\x9f]", done.out + done.err.replace("\r", ""))
    assert "[bold]" in shown[3].out
    assert holdtight("studies", "--json").json[0]["title"] == f"brackets [bold] {STEERING}"


def test_help_names_every_command(holdtight):
    done = holdtight("--help")
    assert done.code == 0
    for path in (ROOT / "study" / "commands").glob("*_command.py"):
        assert path.stem.removesuffix("_command").replace("_", "-") in done.out
