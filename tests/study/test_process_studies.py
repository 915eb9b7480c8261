"""Studies that name processes of the catalog, and the command that keeps processes."""

import os

import pytest

from catalog import processes, queue
from catalog.results import load_results
from catalog.store import Catalog
from study import tasks
from study.crew import Crew
from study.dossier import kept_study
from study.runner import Watch, enqueue, read_asked, work
from study.study_file import StudyFileError
from study.verdicts import looser
from study.zones import Zone
from tests.study.command_line import command, refused
from tests.study.small_studies import DEMO, study_text

ERRORS = {
    "chassis.*": '{ process = "iso-13920-B@350" }',
    "chassis.upper_*": '{ process = "jig-welded-bracket", shift = 0.1 }',
    "tie_rod.length": '{ process = "iso-2768-c@380" }',
    "upright.hub_axis": '{ process = "machined-hub-bore" }',
}
SHOP = {"source": "shop trial", "by": "ann"}


@pytest.fixture
def shop(tmp_path, monkeypatch):
    """A folder with the demo geometry and a study that names processes; no catalog yet."""
    monkeypatch.chdir(tmp_path)
    monkeypatch.delenv("HOLDTIGHT_CATALOG", raising=False)
    monkeypatch.setattr(tasks, "CURVE_BUILDS", 8)
    (tmp_path / DEMO.name).write_bytes(DEMO.read_bytes())
    write(tmp_path, ERRORS)
    return tmp_path


def write(folder, errors, name="study.toml", **more):
    text = study_text("camber_deg", errors=errors, method="spread", size=64, **more)
    (folder / name).write_text(text, encoding="utf-8")


def asked(folder, store=None):
    return read_asked(store or Catalog(folder / "holdtight.duckdb"), folder / "study.toml")


# --- reading


def test_a_study_may_name_the_initial_processes_before_there_is_a_catalog(shop):
    study = asked(shop)
    assert sorted(os.listdir(shop)) == [DEMO.name, "study.toml"]
    zones = dict(study.errors)
    assert zones["chassis.*"] == Zone("box", (2.0, 2.0, 2.0), process="iso-13920-B@350")
    assert zones["chassis.upper_*"] == Zone("ball", (0.5,), shift=(0.1,) * 3, process="jig-welded-bracket")
    assert zones["upright.hub_axis"].half == (0.05,)
    assert study.ladder["iso-13920-B@350"] == Zone("box", (4.0,) * 3, process="iso-13920-C@350")
    assert study.ladder["iso-13920-C@350"].process == "iso-13920-D@350"
    assert study.ladder["jig-welded-bracket"] == Zone("box", (1.5,) * 3, process="hand-welded-bracket")
    assert "hand-welded-bracket" not in study.ladder


def test_the_catalog_s_own_rows_are_taken_once_it_is_there(shop):
    store = Catalog(shop / "holdtight.duckdb")
    with store.write() as con:
        processes.add(con, name="jig-welded-bracket", zone={"diameter": 0.8}, **SHOP)
        processes.retire(con, "iso-13920-C", by="ann")
    study = asked(shop, store)
    assert dict(study.errors)["chassis.upper_*"].half == (0.4,)
    assert "jig-welded-bracket" not in study.ladder
    assert study.ladder["iso-13920-B@350"].process == "iso-13920-D@350"


@pytest.mark.parametrize(
    ("zone", "word"),
    [
        ('{ process = "iso-13920-B" }', "goes by nominal dimension"),
        ('{ process = "iso-13920-B@5000" }', "2 to 4000 mm"),
        ('{ process = "jig-weldet-bracket" }', "did you mean jig-welded-bracket"),
        ('{ process = "jig-welded-bracket", diameter = 1.0 }', "leave out diameter"),
        ('{ process = "machined-hub-bore" }', "gives a zone for a direction"),
    ],
)
def test_a_process_that_cannot_be_taken_is_told_with_its_place(shop, zone, word):
    write(shop, {"chassis.lower_*": zone})
    for name in ("queue", "run"):
        err = refused(name, "study.toml")
        assert word in err and "chassis.lower_*" in err
    if (shop / "holdtight.duckdb").exists():
        assert command("studies", "--json").json == []


def test_jigs_may_name_processes_too(shop):
    write(shop, ERRORS)
    text = (shop / "study.toml").read_text(encoding="utf-8")
    jig = '[jigs.floor]\npivots = ["chassis.lower_front_pivot", "chassis.lower_rear_pivot"]\nprocess = "hand-welded-bracket"\n'
    (shop / "study.toml").write_text(text + jig, encoding="utf-8")
    assert asked(shop).jigs[0].shift.process == "hand-welded-bracket"


# --- keeping


def run_one(store, number):
    assert work(store, crew=Crew(0), watch=Watch(), study_id=number) == [number]
    with store.read() as con:
        return queue.get(con, number), load_results(con, number)


def test_a_queued_study_stays_what_it_was_when_a_process_changes(shop):
    store = Catalog(shop / "holdtight.duckdb")
    first, second = (enqueue(store, asked(shop, store), shop, by="ann") for _ in range(2))
    job, _ = run_one(store, first)
    with store.write() as con:
        processes.add(con, name="jig-welded-bracket", zone={"diameter": 0.2}, **SHOP)
        processes.retire(con, "machined-hub-bore", by="ann")
        processes.retire(con, "iso-13920-C", by="ann")
    again, _ = run_one(store, second)
    assert job.result_hash and again.result_hash == job.result_hash
    with store.read() as con:
        study = kept_study(con, again)
        rows = con.execute("SELECT asked, version FROM kept.study_processes WHERE study_id = ?", [second]).fetchall()
    assert dict(study.errors)["chassis.upper_*"].half == (0.5,)
    assert study.ladder["iso-13920-B@350"].process == "iso-13920-C@350"
    assert {version for _, version in rows} == {1} and len(rows) >= len(ERRORS)

    write(shop, {**ERRORS, "upright.hub_axis": '{ process = "welded-hub-axis" }'})
    changed, _ = run_one(store, enqueue(store, asked(shop, store), shop, by="ann"))
    assert changed.result_hash != job.result_hash


def test_a_kept_study_is_the_study_that_was_asked_for(shop):
    store = Catalog(shop / "holdtight.duckdb")
    study = asked(shop)
    number = enqueue(store, study, shop, by="ann")
    with store.read() as con:
        assert kept_study(con, queue.get(con, number)) == study


def test_a_study_without_its_kept_processes_says_so(shop):
    store = Catalog(shop / "holdtight.duckdb")
    number = enqueue(store, asked(shop), shop, by="ann")
    with store.write() as con:
        con.execute("DELETE FROM kept.study_processes")
    with store.read() as con, pytest.raises(StudyFileError, match=f"was not kept with study {number}"):
        kept_study(con, queue.get(con, number))


def test_a_verdict_moves_a_source_to_its_next_looser_process(shop):
    study = asked(shop)
    work_ = tasks.StudyWork(_geometry(), study)
    sources = {source.name: source for source in work_.model.sources}
    wider = looser(sources["chassis.upper_front_pivot"], study.ladder)
    assert (wider.form, wider.half, wider.process, wider.shift) == ("box", (1.5,) * 3, "hand-welded-bracket", (0.1,) * 3)
    rod = looser(sources["tie_rod.length"], study.ladder)
    assert (rod.form, rod.half, rod.process) == ("length", (2.5,), "iso-2768-v@380")


def _geometry():
    from tests.study.small_studies import demo

    return demo()


def test_the_process_s_name_reaches_the_results(shop):
    limited = 'of = "camber_deg"\nlimits = [-1.6, -0.9]'
    text = study_text(limited, errors=ERRORS, method="spread", size=64)
    (shop / "study.toml").write_text(text, encoding="utf-8")
    store = Catalog(shop / "holdtight.duckdb")
    _, found = run_one(store, enqueue(store, asked(shop, store), shop, by="ann"))
    row = next(row for row in found["verdicts"] if row["source"] == "chassis.upper_front_pivot")
    assert (row["process"], row["looser_process"]) == ("jig-welded-bracket", "hand-welded-bracket")


# --- the command


def test_processes_are_listed_before_there_is_a_catalog(shop):
    rows = {row["process"]: row for row in command("processes", "--json").json}
    assert rows["cnc-upright"]["zone"] == {"diameter": 0.1} and rows["cnc-upright"]["looser"] == "manual-mill-upright"
    assert rows["iso-13920-B"]["ranges"][0] == {"from_mm": 2.0, "from_included": True, "up_to_mm": 30.0, "zone": {"plus_minus": 1.0}}
    assert rows["manual-mill-upright"]["tighter"] == ["cnc-upright"] and rows["cnc-upright"]["created"] is None
    assert "There is no catalog yet" in command("processes").out
    assert not (shop / "holdtight.duckdb").exists()


def test_one_process_is_shown(shop):
    found = command("processes", "iso-13920-B@350", "--json").json
    assert found["zone"]["plus_minus"] == 2.0
    assert (found["looser"], found["tighter"]) == ("iso-13920-C@350", "iso-13920-A@350")
    out = command("processes", "iso-13920-B@350").out
    assert "±2 mm" in out and "secondary pages" in out and "not opened" in out
    assert "above 120" in command("processes", "iso-13920-B").out
    assert "S⌀0.1 mm, normal, cp 1" in command("processes", "cnc-upright").out


def test_a_process_is_added_changed_and_retired(shop):
    words = ("--source", "20 cars measured", "--jig-cost", 25, "--piece-cost", 0.5, "--looser", "hand-welded-bracket", "--by", "ann")
    made = command("processes", "--add", "own-jig", "--zone", 'diameter=0.8, axis="z", depth=0.5', *words, "--json").json
    assert (made["version"], made["zone"]) == (1, {"diameter": 0.8, "axis": "z", "depth": 0.5})
    assert (made["jig_cost"], made["piece_cost"], made["by"], made["looser"]) == (25.0, 0.5, "ann", "hand-welded-bracket")
    more = ("--distribution", "normal", "--cp", 1.2, "--truncated", "--remark", "inspected")
    second = command("processes", "--add", "own-jig", "--zone", "plus_minus=[0.4, 0.4, 0.6]", *words, *more, "--json").json
    assert (second["version"], second["distribution"], second["cp"], second["truncated"]) == (2, "normal", 1.2, True)
    assert "version 2 is retired" in command("processes", "--retire", "own-jig").out
    names = [row["process"] for row in command("processes", "--json").json]
    assert "own-jig" not in names
    every = [row for row in command("processes", "--all", "--json").json if row["process"] == "own-jig"]
    assert [(row["version"], bool(row["retired"])) for row in every] == [(1, True), (2, True)]
    lines = [line.split()[:3] for line in command("processes", "--all").out.splitlines() if "own-jig" in line]
    assert [(name, version) for name, version, _ in lines] == [("own-jig", "1"), ("own-jig", "2")]
    assert lines[0][2] == every[0]["retired"][:10]
    assert "was retired" in refused("processes", "own-jig")


ADD = ("--add", "new")


@pytest.mark.parametrize(
    ("words", "said"),
    [
        (("--zone", "plus_minus=1"), "--zone goes with --add"),
        (("--cp", "1"), "--cp goes with --add"),
        (("--jig-cost", "1"), "--jig-cost goes with --add"),
        ((*ADD, "--retire", "cnc-upright"), "--add and --retire do not go together"),
        (("cnc-upright", "--all"), "do not go together"),
        ((*ADD, "--source", "x"), "--zone is missing"),
        ((*ADD, "--zone", "plus_minus=1"), "--source is missing"),
        ((*ADD, "--source", "x", "--zone", "0.8"), "is no list of keys"),
        ((*ADD, "--source", "x", "--zone", ""), "is no list of keys"),
        ((*ADD, "--source", "x", "--zone", "plus_minus=1 }\nother = { a=1"), "is no list of keys"),
        ((*ADD, "--source", "x", "--zone", "plus_minus=1, cp=2"), "give it by --cp"),
        ((*ADD, "--source", "x", "--zone", "plus_minus=1, shift=2"), "it belongs to a study"),
        ((*ADD, "--source", "x", "--zone", "plus_minus=1000"), "at most 100 mm"),
        ((*ADD, "--source", "x", "--zone", "plus_minus=1, colour=3"), "unknown key colour"),
        ((*ADD, "--source", "x", "--zone", 'diameter=1, axis="z"'), "depth is missing"),
        ((*ADD, "--source", "x", "--zone", "diameter=1", "--distribution", "flat"), '"uniform" or "normal"'),
        ((*ADD, "--source", "x", "--zone", "diameter=1", "--looser", "cnc-upright"), "is tighter than"),
        (("--add", "a\x1b[2Jb", "--source", "x", "--zone", "diameter=1"), "a name has letters"),
        (("--retire", "nothing"), "is not in the catalog"),
        (("nothing",), "is not in the catalog"),
    ],
)
def test_processes_says_what_is_wrong(shop, words, said):
    err = refused("processes", *words)
    assert said in err and "\x1b" not in err
