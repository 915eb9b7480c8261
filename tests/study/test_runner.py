"""Studies run through a catalog: the same bits however they are run, interrupted, accompanied or cancelled."""

import os
import signal
import subprocess
import sys
import time

import pytest

from catalog import queue, results, revisions
from catalog.errors import HoldtightError
from catalog.store import Catalog
from study import runner, tasks
from study.crew import Crew
from study.runner import Watch, enqueue, register, work
from study.tasks import StudyWork
from tests.study.small_studies import DEMO, ROOT, TOE, demo, run_study, small_study, study_text

SMALL = {"BUILDS_PER_TASK": 256, "CURVE_BUILDS": 8, "CURVE_KEYS": {"bump": ("camber_deg",)}}
KEYS = ("camber_deg", "roll_centre_height_mm")
# a worker of its own: small tasks, each kept at once, and a pause in each so that there is time to interrupt it
WORKER = f"""
import sys, time
from study import runner, tasks
from study.commands import main
runner.KEEP_S = 0.0
vars(tasks).update({SMALL})
done = tasks.StudyWork.run
tasks.StudyWork.run = lambda self, task: (time.sleep(0.3), done(self, task))[1]
sys.argv = ["holdtight", "work", "--threads", "2"]
main()
"""


@pytest.fixture
def catalog(tmp_path):
    return Catalog(tmp_path / "shop.duckdb")


@pytest.fixture(autouse=True)
def small_tasks(monkeypatch):
    for name, value in SMALL.items():
        monkeypatch.setattr(tasks, name, value)


@pytest.fixture
def keep_at_once(monkeypatch):
    monkeypatch.setattr(runner, "KEEP_S", 0.0)


@pytest.fixture
def worker(catalog):
    """Start `work` in a process of its own; what still runs at the end is ended."""
    started = []

    def start():
        environment = os.environ | {"HOLDTIGHT_CATALOG": str(catalog.path), "PYTHONPATH": str(ROOT)}
        pipes = {"stdin": subprocess.DEVNULL, "stdout": subprocess.PIPE, "stderr": subprocess.PIPE}
        started.append(subprocess.Popen([sys.executable, "-c", WORKER], env=environment, text=True, **pipes))
        return started[-1]

    yield start
    for process in started:
        if process.poll() is None:
            process.kill()
        process.communicate()


def ask(catalog, **asked):
    """Queue a study of the demo geometry; gives its number."""
    return enqueue(catalog, small_study(*KEYS, **asked), DEMO.parent, by="test")


def job(catalog, number):
    with catalog.read() as con:
        return queue.get(con, number)


def tables_of(catalog, number):
    with catalog.read() as con:
        return results.load_results(con, number)


def run_all(catalog, *, crew=None):
    return work(catalog, crew=crew or Crew(0), watch=Watch())


def wait_for(condition, *, process, seconds=180.0):
    """Wait until a condition holds while the process lives; gives what the condition gave."""
    end = time.monotonic() + seconds
    while time.monotonic() < end:
        found = condition()
        if found:
            return found
        assert process.poll() is None, process.communicate()
        time.sleep(0.2)
    raise AssertionError("waited in vain")


def chunks_of(catalog, number):
    with catalog.read() as con:
        query = "SELECT stage, chunk_no, n_builds, hash FROM kept.chunks WHERE study_id = ? ORDER BY chunk_no, hash"
        return con.execute(query, [number]).fetchall()


def same_numbers(mine, theirs):
    """Whether result tables agree to rounding."""
    for name in ("ranking", "stats"):
        for row, other in zip(mine[name], theirs[name], strict=True):
            for key, value in row.items():
                near = isinstance(value, float | list) and key != "effect_axes"
                assert other[key] == (pytest.approx(value, rel=1e-9, abs=1e-12) if near else value), (name, key)


@pytest.mark.parametrize("method", ["sobol", "spread"])
def test_one_thread_and_two_give_the_same_bits(catalog, method):
    sizes = {"sobol": 64, "spread": 600}
    numbers = [ask(catalog, method=method, size=sizes[method], alignment=TOE) for _ in range(2)]
    for number, helpers in zip(numbers, (0, 1), strict=True):
        work(catalog, crew=Crew(helpers), watch=Watch(), study_id=number)
    one, two = (job(catalog, number) for number in numbers)
    assert one.state == two.state == "done"
    assert one.result_hash and one.result_hash == two.result_hash
    assert sorted(chunks_of(catalog, one.id)) == sorted(chunks_of(catalog, two.id))
    assert len(chunks_of(catalog, one.id)) > 4


def test_the_size_of_chunks_does_not_change_the_numbers(monkeypatch):
    found, asked = [], small_study(*KEYS, method="sobol", size=64, alignment=TOE)
    for size in (100, 4096):
        monkeypatch.setattr(tasks, "BUILDS_PER_TASK", size)
        found.append(run_study(demo(), asked)[0])
    same_numbers(*found)


@pytest.mark.parametrize("method", ["sobol", "morris", "spread"])
def test_seed_0_is_a_seed_like_any_other(method):
    sizes = {"sobol": 16, "morris": 8, "spread": 64}
    asked = [small_study("camber_deg", method=method, size=sizes[method], seed=seed) for seed in (0, 0, 1)]
    first, again, other = (run_study(demo(), study)[0] for study in asked)
    assert first == again
    assert first["stats"] != other["stats"] or first["ranking"] != other["ranking"]


def test_seed_0_is_kept_and_builds_really_run_are_counted(catalog, keep_at_once):
    number, seen = ask(catalog, method="spread", size=700, seed=0, alignment=TOE), []
    work(catalog, crew=Crew(1), watch=Watch(progress=lambda job, done, total: seen.append((done, total))))
    effects, curves = 1 + 2 * 13, 1 + SMALL["CURVE_BUILDS"]  # four points of three scalars and one band
    builds = 2 * (700 + effects) + curves
    assert tables_of(catalog, number)["study"][0]["builds"] == builds
    assert (job(catalog, number).done, job(catalog, number).total, job(catalog, number).seed) == (builds, builds, 0)
    counts, totals = zip(*seen, strict=True)
    assert list(counts) == sorted(counts) and counts[-1] == builds and set(totals) == {builds}


def test_a_study_killed_twice_ends_with_the_bits_of_one_that_was_not(catalog, worker):
    asked = {"method": "spread", "size": 1500, "alignment": TOE}
    number = ask(catalog, **asked)
    for end, state in ((signal.SIGINT, "queued"), (signal.SIGKILL, "running")):
        process, before = worker(), job(catalog, number).done
        wait_for(lambda before=before: job(catalog, number).done > before, process=process)
        process.send_signal(end)
        process.communicate(timeout=180)
        assert process.returncode == (1 if end == signal.SIGINT else -signal.SIGKILL)
        left = job(catalog, number)
        assert left.state == state and 0 < left.done < left.total
    kept = chunks_of(catalog, number)
    assert run_all(catalog, crew=Crew(1)) == [number]

    untouched = ask(catalog, **asked)
    run_all(catalog)
    assert job(catalog, number).result_hash == job(catalog, untouched).result_hash
    assert set(kept) < set(chunks_of(catalog, number))
    assert chunks_of(catalog, number) == chunks_of(catalog, untouched)
    assert job(catalog, number).done == job(catalog, untouched).done == job(catalog, number).total


def test_others_queue_ask_and_cancel_while_a_worker_runs(catalog, worker):
    long, process = ask(catalog, method="spread", size=20000), worker()
    wait_for(lambda: job(catalog, long).done, process=process)
    short = ask(catalog, method="spread", size=64)
    with catalog.read() as con:
        assert [(j.id, j.state) for j in queue.list_studies(con)] == [(long, "running"), (short, "queued")]
    with catalog.write() as con:
        assert queue.cancel(con, [long]) == {long: "cancelled"}
    out, err = process.communicate(timeout=180)
    assert process.returncode == 0, err
    assert out.strip() == f"finished: {short}"
    assert (job(catalog, long).state, job(catalog, short).state) == ("cancelled", "done")
    assert job(catalog, long).done < 20000
    assert work(catalog, crew=Crew(0), watch=Watch(), study_id=long) == []


def test_a_study_that_fails_says_why_and_the_next_one_runs(catalog):
    geometry = demo()
    revision = register(catalog, geometry, by="test", why="test")
    asked = {"title": "t", "method": "spread", "size": 64, "seed": 0, "sides": "mirrored", "version": "0", "by": "test"}
    text = study_text("no_such_measure", method="spread", size=64)
    with catalog.write() as con:
        bad = queue.enqueue(con, text=text, revision_id=revision.id, **asked)
    good = ask(catalog, method="spread", size=64)
    assert run_all(catalog) == [good]
    assert job(catalog, bad).state == "failed" and "no_such_measure" in job(catalog, bad).error
    assert job(catalog, good).state == "done"


def test_a_fault_in_a_task_fails_the_study_and_is_not_hidden(catalog, monkeypatch):
    number = ask(catalog, method="spread", size=64)
    monkeypatch.setattr(StudyWork, "run", lambda self, task: 1 / 0)
    with pytest.raises(ZeroDivisionError):
        run_all(catalog)
    assert job(catalog, number).state == "failed" and "ZeroDivisionError" in job(catalog, number).error


def test_a_stop_leaves_the_study_queued_with_what_is_finished(catalog, keep_at_once):
    number, watch = ask(catalog, method="spread", size=2000), Watch()
    watch.progress = lambda job, done, total: watch.stop.set()
    assert work(catalog, crew=Crew(0), watch=watch) == []
    assert job(catalog, number).state == "queued"
    assert 0 < job(catalog, number).done < job(catalog, number).total
    assert run_all(catalog) == [number]


@pytest.mark.parametrize("version", ["0.0.1", None])
def test_what_another_version_has_begun_is_done_anew(catalog, keep_at_once, monkeypatch, version):
    """Also where its chunks alone tell, since a checkout may change without its version."""
    untouched, number = ask(catalog, method="spread", size=2000), ask(catalog, method="spread", size=2000)
    work(catalog, crew=Crew(0), watch=Watch(), study_id=untouched)
    watch = Watch()
    watch.progress = lambda job, done, total: watch.stop.set()
    monkeypatch.setattr(tasks, "BUILDS_PER_TASK", 100)  # the other version cuts in another way
    assert work(catalog, crew=Crew(0), watch=watch) == [] and job(catalog, number).done
    with catalog.write() as con:
        con.execute("UPDATE kept.studies SET version = coalesce(?, version) WHERE id = ?", [version, number])
    monkeypatch.setattr(tasks, "BUILDS_PER_TASK", SMALL["BUILDS_PER_TASK"])
    assert run_all(catalog) == [number]
    found, wanted = job(catalog, number), job(catalog, untouched)
    assert found.result_hash == wanted.result_hash and found.version == wanted.version
    assert found.done == found.total == wanted.done
    assert chunks_of(catalog, number) == chunks_of(catalog, untouched)


def test_a_study_names_a_revision_that_stays_when_the_file_changes(catalog, tmp_path):
    file = tmp_path / "front-wishbone.toml"
    text = DEMO.read_text(encoding="utf-8")
    numbers = []
    for version in (text, text.replace("[88, 308, 156.5]", "[88, 308, 158.5]")):
        file.write_text(version, encoding="utf-8")
        numbers.append(enqueue(catalog, small_study("bump_steer_deg_per_mm"), tmp_path, by="test"))
    assert [job(catalog, number).geometry for number in numbers] == ["front-wishbone@1", "front-wishbone@2"]
    with catalog.read() as con:
        first, second = (revisions.load(con, revisions.by_id(con, job.revision_id)) for job in queue.list_studies(con))
    assert first.left.points["tie_rod_inner"] == demo().left.points["tie_rod_inner"]
    assert second.left.points["tie_rod_inner"] == (88.0, 308.0, 158.5)
    old = small_study("bump_steer_deg_per_mm", geometry="front-wishbone@1")
    assert job(catalog, enqueue(catalog, old, tmp_path, by="test")).geometry == "front-wishbone@1"


@pytest.mark.parametrize(
    ("asked", "word"),
    [
        ({"alignment": {"toe": '{ by = "tie_rods", within_deg = 0.1 }'}}, "tie_rod"),
        ({"errors": {"chasis.*": "{ plus_minus = 1.0 }"}}, "chasis"),
        ({"geometry": "nowhere@3"}, "nowhere"),
        ({"geometry": "nowhere.toml"}, "nowhere.toml"),
    ],
)
def test_a_study_that_cannot_run_is_refused_before_it_is_queued(catalog, asked, word):
    register(catalog, demo(), by="test", why="test")
    with pytest.raises(HoldtightError, match=word):
        ask(catalog, **asked)
    with catalog.read() as con:
        assert queue.list_studies(con) == []
