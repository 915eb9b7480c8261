"""Helper processes: the same bits whoever does a task, whatever befalls a helper, and none that outlives its work."""

import os
import signal
import subprocess
import sys
import threading
import time

import pytest

from catalog import queue
from catalog.store import Catalog
from study import crew as crews
from study import runner, tasks
from study.crew import Crew, HelperLost, worth_starting
from study.plain_work import to_plain
from study.runner import Watch, enqueue, work
from study.study_file import parse_study
from study.tasks import StudyWork
from tests.study.small_studies import DEMO, ROOT, TOE, demo, small_study, study_text

KEYS = ("camber_deg", "toe_deg", "roll_centre_height_mm")


@pytest.fixture(autouse=True)
def every_study_is_long(monkeypatch):
    monkeypatch.setattr(tasks, "BUILDS_PER_TASK", 128)
    monkeypatch.setattr(runner, "LONG_POSES", 0)
    monkeypatch.setattr(runner, "KEEP_S", 0.0)


@pytest.fixture
def catalog(tmp_path):
    return Catalog(tmp_path / "shop.duckdb")


def ask(catalog, *, size=600):
    text = study_text(*KEYS, method="spread", size=size, alignment=TOE)
    return enqueue(catalog, parse_study(text, source="s.toml"), DEMO.parent, by="tests")


def job(catalog, number):
    with catalog.read() as con:
        return queue.get(con, number)


def ready(crew, *, seconds=60.0):
    """Start a crew and wait until its helpers can take tasks."""
    crew.start(crew.size)
    end = time.monotonic() + seconds
    while not all(helper.is_ready for helper in crew.helpers):
        assert time.monotonic() < end, "helpers do not get ready"
        time.sleep(0.02)
    return crew


def hash_of(catalog, crew, watch=None):
    number = ask(catalog)
    assert work(catalog, crew=crew, watch=watch or Watch(), study_id=number) == [number]
    return job(catalog, number).result_hash


def test_helpers_give_the_same_bits_and_serve_one_study_after_the_other(catalog):
    alone = hash_of(catalog, Crew(0))
    with ready(Crew(2)) as crew:
        answers = []
        for helper in crew.helpers:
            helper.do = lambda plain, task, do=helper.do: (answers.append(task), do(plain, task))[1]
        assert hash_of(catalog, crew) == hash_of(catalog, crew) == alone
        assert len(answers) > 4
        pids = [helper.process.pid for helper in crew.helpers]
    assert all(gone(pid) for pid in pids)


def test_helpers_killed_half_way_change_no_bit(catalog):
    alone = hash_of(catalog, Crew(0))
    with ready(Crew(2)) as crew:
        first, second = crew.helpers

        def progress(job, done, total):
            first.process.kill()
            if done > total / 2:
                second.process.kill()

        assert hash_of(catalog, crew, Watch(progress=progress)) == alone
        assert first.lost


@pytest.mark.skipif(os.name == "nt", reason="signals of POSIX")
def test_a_helper_that_stands_still_holds_up_nothing(catalog, monkeypatch):
    alone = hash_of(catalog, Crew(0))
    with ready(Crew(1)) as crew:
        monkeypatch.setattr(crews, "STANDS_STILL_S", 1.0)
        helper = crew.helpers[0]
        helper.process.send_signal(signal.SIGSTOP)
        assert hash_of(catalog, crew) == alone and helper.lost
        crew.start(1)
        assert crew.helpers[0] is not helper  # another one for the next study


def test_helpers_that_cannot_start_are_missed_by_nobody(catalog, monkeypatch):
    monkeypatch.setattr(sys, "executable", "/nowhere/python")
    with Crew(3) as crew:
        assert hash_of(catalog, crew)
        assert not any(helper.is_ready for helper in crew.helpers)


def test_a_task_that_fails_in_a_helper_fails_here_with_its_own_error():
    asked = small_study("camber_deg", method="spread", size=16)
    made = StudyWork(demo(), asked)
    wrong = tasks.Task(0, "before", "no such kind", 0, 1)
    with ready(Crew(1)) as crew:
        plain = to_plain(made.geometry, asked)
        with pytest.raises(HelperLost):
            crew.helpers[0].do(plain, wrong)
        with crew.of(made.run, lambda: plain, helpers=1) as hands, pytest.raises(AttributeError, match="no such kind"):
            hands.submit(wrong).result(30)


def test_tasks_of_an_ended_study_hold_up_neither_the_next_one_nor_the_end_of_the_program():
    hold, begun = threading.Event(), threading.Event()

    def slow(task):
        begun.set()
        hold.wait(20)
        return task

    with Crew(1) as crew:
        with crew.of(slow, str, helpers=0) as hands:
            futures = [hands.submit(n) for n in range(6)]
            assert begun.wait(10)
        assert all(f.cancelled() for f in futures[2:])
        with crew.of(lambda task: task, str, helpers=0) as hands:
            assert [hands.submit(n).result(10) for n in range(4)] == [0, 1, 2, 3]
        hold.set()


@pytest.mark.skipif(os.name == "nt", reason="signals of POSIX")
def test_a_program_killed_takes_its_helpers_along():
    code = (
        "import time; from study.crew import Crew\ncrew = Crew(2); crew.start(2)\n"
        "print(*(h.process.pid for h in crew.helpers), flush=True)\n"
        "while not all(h.is_ready for h in crew.helpers): time.sleep(0.05)\nprint('ready', flush=True); time.sleep(60)"
    )
    program = subprocess.Popen([sys.executable, "-c", code], cwd=ROOT, stdout=subprocess.PIPE, text=True)
    pids = [int(word) for word in program.stdout.readline().split()]
    assert program.stdout.readline() == "ready\n"
    program.send_signal(signal.SIGKILL)
    program.wait()
    end = time.monotonic() + 10
    while not all(gone(pid) for pid in pids):
        assert time.monotonic() < end, "a helper lives on"
        time.sleep(0.05)


def gone(pid):
    """Whether a process has ended; one that nobody has fetched yet counts as ended."""
    try:
        os.kill(pid, 0)
        with open(f"/proc/{pid}/stat", encoding="ascii", errors="replace") as file:
            return file.read().rpartition(")")[2].split()[0] == "Z"
    except OSError:
        return True


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ('method = "sobol"\nsize = 1024', True), ('method = "sobol"\nsize = 64', False), ('method = "spread"\nsize = 20000', True),
        ('method = "spread"\nsize = "many"', False), ('method = "spread"', False), ("no toml [", False), ("size = [[1]]\nmethod=1", False),
        ('method = "sobol"\nsize = inf', False), ('method = "spread"\nsize = 1e400', False),
    ],
)  # fmt: skip
def test_the_first_guess_of_a_long_study_never_fails(tmp_path, text, expected):
    path = tmp_path / "s.toml"
    path.write_text(text, encoding="utf-8")
    assert (worth_starting(path) > 0) is expected
    assert not worth_starting(tmp_path) and not worth_starting(tmp_path / "none.toml")
    path.write_bytes(b"\xff\xfe\x00")
    assert not worth_starting(path)


def test_a_helper_finds_modules_where_this_process_does_and_not_in_the_working_folder(tmp_path, monkeypatch):
    (tmp_path / "numpy.py").write_text("raise SystemExit('the wrong numpy')", encoding="utf-8")
    monkeypatch.chdir(tmp_path)
    monkeypatch.setattr(sys, "path", ["", *(path for path in sys.path if path)])
    assert "" not in crews._environment()["PYTHONPATH"].split(os.pathsep)
    with ready(Crew(1)) as crew:
        assert crew.helpers[0].is_ready
