"""Tasks on the workers of a scheduler on this machine: the same bits, whoever dies, and a line when nobody answers."""

import os
import signal
import socket
import subprocess
import sys
import threading
import time

import pytest

from catalog import processes, queue
from catalog.store import Catalog
from study import runner, tasks
from study.crew import Crew
from study.plain_work import from_plain, to_plain
from study.runner import Watch, enqueue, work
from study.study_file import parse_study
from tests.study.command_line import command
from tests.study.small_studies import DEMO, ROOT, TOE, demo, small_study, study_text

pytest.importorskip("distributed")
SMALL = {"BUILDS_PER_TASK": 128, "CURVE_BUILDS": 8, "CURVE_KEYS": {"bump": ("camber_deg",)}}
# a worker process with small tasks and a pause in each, so that there is time to kill it or to stop
PRELOAD = f"""
import time
from study import tasks
vars(tasks).update({SMALL})
if tasks.StudyWork.run.__name__ == "run":  # a worker reads this file twice
    done = tasks.StudyWork.run
    tasks.StudyWork.run = lambda self, task, done=done: (time.sleep(0.15), done(self, task))[1]
"""
QUIET = {"stdin": subprocess.DEVNULL, "stdout": subprocess.DEVNULL, "stderr": subprocess.DEVNULL}


@pytest.fixture(autouse=True)
def small_tasks(monkeypatch):
    for name, value in SMALL.items():
        monkeypatch.setattr(tasks, name, value)
    monkeypatch.setattr(runner, "KEEP_S", 0.0)


@pytest.fixture(scope="module")
def start(tmp_path_factory):
    """Start `dask WORDS`; what still runs at the end is killed."""
    started, folder = [], tmp_path_factory.mktemp("dask")
    (folder / "small.py").write_text(PRELOAD, encoding="utf-8")

    def start(*words):
        environment = os.environ | {"PYTHONPATH": str(ROOT)}
        words = [sys.executable, "-m", "dask", *map(str, words)]
        started.append(subprocess.Popen(words, cwd=folder, env=environment, **QUIET))
        return started[-1]

    yield start
    for process in started:
        process.kill()
        process.wait()


@pytest.fixture(scope="module")
def scheduler(start):
    """Address of a scheduler; its workers are started by start_worker."""
    port = free_port()
    start("scheduler", "--host", "127.0.0.1", "--port", port, "--no-dashboard")
    return f"127.0.0.1:{port}"


def start_worker(start, scheduler):
    return start("worker", scheduler, "--no-nanny", "--no-dashboard", "--nthreads", 1, "--host", "127.0.0.1", "--preload", "small.py")


@pytest.fixture(scope="module")
def workers(start, scheduler):
    return [start_worker(start, scheduler) for _ in range(2)]


@pytest.fixture
def catalog(tmp_path):
    return Catalog(tmp_path / "shop.duckdb")


def free_port() -> int:
    with socket.socket() as one:
        one.bind(("127.0.0.1", 0))
        return one.getsockname()[1]


def ask(catalog, *, size=400):
    asked = small_study("camber_deg", method="spread", size=size, alignment=TOE)
    return enqueue(catalog, asked, DEMO.parent, by="test")


def job(catalog, number):
    with catalog.read() as con:
        return queue.get(con, number)


def wait_for(condition, *, seconds=30.0):
    end = time.monotonic() + seconds
    while time.monotonic() < end:
        if condition():
            return
        time.sleep(0.05)
    raise AssertionError("waited in vain")


def test_a_study_from_plain_data_is_the_study():
    book = processes.initial()
    text = study_text("camber_deg", alignment=TOE, errors={"chassis.*": '{ process = "iso-2768-f@12" }'})
    study = parse_study(text, source="study", processes=book, looser=book.looser)
    again = from_plain(to_plain(demo(), study))
    assert study.resolved and study.ladder and again.study == study
    assert again.geometry == demo()


def test_a_worker_killed_half_way_changes_no_bit(catalog, workers, scheduler):
    from study.cluster import connected

    first, second = ask(catalog), ask(catalog)
    work(catalog, crew=Crew(0), watch=Watch(), study_id=first)
    killed = threading.Event()

    def progress(job, done, total):
        if done > 100 and not killed.is_set():
            workers[0].kill()
            killed.set()

    with connected(scheduler) as pool:
        assert work(catalog, crew=Crew(0), watch=Watch(progress=progress), study_id=second, pool=pool) == [second]
    one, two = job(catalog, first), job(catalog, second)
    assert killed.is_set() and workers[0].wait(10) == -signal.SIGKILL and workers[1].poll() is None
    assert one.result_hash and one.result_hash == two.result_hash


def test_ctrl_c_ends_soon_and_keeps_what_is_finished(catalog, workers, scheduler):
    number = ask(catalog, size=6000)
    words = ["study.commands", "work", "--cluster", scheduler, "--catalog", str(catalog.path)]
    code = f"import sys; from study import runner, tasks; runner.KEEP_S = 0.0; vars(tasks).update({SMALL}); "
    code += f"sys.argv = {words}; from study.commands import main; main()"
    pipes = {"stdin": subprocess.DEVNULL, "stdout": subprocess.PIPE, "stderr": subprocess.PIPE, "text": True}
    process = subprocess.Popen([sys.executable, "-c", code], cwd=ROOT, **pipes)
    try:
        wait_for(lambda: job(catalog, number).state == "running" and job(catalog, number).done > 0)
        process.send_signal(signal.SIGINT)
        start = time.monotonic()
        out, err = process.communicate(timeout=20)
        took = time.monotonic() - start
    finally:
        process.kill()
    assert process.returncode == 1 and out.startswith("stopped") and "Traceback" not in err, (out, err)
    assert took < 5.0  # two seconds on a machine that does nothing else
    assert job(catalog, number).state == "queued" and job(catalog, number).done > 0


@pytest.mark.parametrize(("address", "code", "words"), [("127.0.0.1:{port}", 1, "no scheduler answers"), ("nowhere:port", 2, "HOST:PORT")])
def test_an_address_where_no_scheduler_is_gives_a_line(catalog, address, code, words, monkeypatch):
    monkeypatch.setattr("study.cluster.CONNECT_S", 1.0)
    number = ask(catalog)
    done = command("work", "--cluster", address.format(port=free_port()), "--catalog", catalog.path)
    assert done.code == code and words in done.err and len(done.err.strip().splitlines()) == 1, done.err
    assert job(catalog, number).state == "queued"


def test_workers_of_another_version_give_a_line_and_the_study_back(catalog, workers, scheduler, monkeypatch):
    monkeypatch.setattr("study.cluster.makers_of_numbers", lambda: "holdtight 99")
    number = ask(catalog)
    done = command("work", "--cluster", scheduler, "--catalog", catalog.path)
    assert done.code == 1 and "holdtight 99" in done.err and "same versions" in done.err
    assert job(catalog, number).state == "queued"


def test_a_scheduler_that_is_lost_gives_the_study_back(catalog, start):
    from study.cluster import ClusterLost, connected

    port, number = free_port(), ask(catalog, size=6000)
    boss = start("scheduler", "--host", "127.0.0.1", "--port", port, "--no-dashboard")
    start_worker(start, f"127.0.0.1:{port}")
    watch = Watch(progress=lambda job, done, total: boss.kill() if done else None)
    with pytest.raises(ClusterLost, match="lost"), connected(f"127.0.0.1:{port}") as pool:
        work(catalog, crew=Crew(0), watch=watch, pool=pool)
    assert job(catalog, number).state == "queued" and job(catalog, number).done > 0
