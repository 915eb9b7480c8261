"""A shop folder with the demo geometry, and its `holdtight` commands as processes of their own."""

import itertools
import json
import multiprocessing
import os
import shutil
import signal
import sys
import tempfile
import time
from dataclasses import dataclass, field
from pathlib import Path

from catalog import queue
from catalog.keeping import check
from catalog.store import Catalog
from tests.study.small_studies import DEMO, TOE, study_text

SMALL = {"BUILDS_PER_TASK": 256}  # what changes a task's own numbers would have to be changed in helpers too
# a process that has imported everything starts the others, so that their time goes into the work
_START = multiprocessing.get_context("forkserver" if hasattr(os, "fork") else "spawn")
_START.set_forkserver_preload(["tests.hard.shop", "study.runner", "study.commands.queue_command", "scipy.stats", "SALib.sample.sobol"])


def _command(words, folder, environment, pause, said, prepare, helpers):
    """Be `holdtight WORDS`: small tasks, each kept at once and `pause` seconds longer than it need be.

    helpers: even the shortest study gets helper processes.
    """
    for number, name in ((1, "out"), (2, "err")):
        os.dup2(os.open(f"{said}.{name}", os.O_WRONLY | os.O_CREAT | os.O_TRUNC, 0o666), number)
    os.environ.update(environment)
    os.chdir(folder)
    from study import runner, tasks
    from study.commands import main

    runner.KEEP_S = runner.KEEP_TIMES = 0.0
    if helpers:
        runner.LONG_POSES = 0
    vars(tasks).update(SMALL)
    done = tasks.StudyWork.run
    tasks.StudyWork.run = lambda self, task: (time.sleep(pause), done(self, task))[1]
    sys.argv = ["holdtight", *words]
    if prepare:
        prepare()
    main()


class Command:
    """A running `holdtight` command; signals and waiting as of a subprocess."""

    def __init__(self, words, folder: Path, said: Path, *, pause=0.0, prepare=None, helpers=False, catalog: Path):
        self.said = said
        environment = {"HOLDTIGHT_CATALOG": str(catalog)}
        asked = ([str(word) for word in words], str(folder), environment, pause, str(said), prepare, helpers)
        self.process = _START.Process(target=_command, args=asked, daemon=True)
        self.process.start()

    def poll(self):
        return self.process.exitcode

    def send_signal(self, number: int) -> None:
        if self.process.is_alive():
            os.kill(self.process.pid, number)

    def communicate(self, timeout=600.0) -> tuple[str, str]:
        self.process.join(timeout)
        if self.process.is_alive():
            self.send_signal(signal.SIGKILL)
            raise TimeoutError(f"a command did not end within {timeout:g} s")
        found = []
        for name in ("out", "err"):
            path = Path(f"{self.said}.{name}")
            found.append(path.read_text(encoding="utf-8") if path.exists() else "")
            path.unlink(missing_ok=True)
        return tuple(found)

    @property
    def returncode(self):
        return self.process.exitcode


@dataclass
class Shop:
    """A folder with a catalog; `said` counts checks that held, `broken` names those that did not."""

    folder: Path
    said: dict[str, int] = field(default_factory=dict)
    broken: list[str] = field(default_factory=list)

    def __post_init__(self):
        shutil.copy(DEMO, self.folder)
        self._numbers = itertools.count()
        self.store = Catalog(self.folder / "shop.duckdb")

    def study(self, name="study", *, size=64, seed=1, method="sobol") -> Path:
        """A study file of a sobol study with two stages."""
        path = self.folder / f"{name}.toml"
        text = study_text("camber_deg", "roll_centre_height_mm", method=method, size=size, seed=seed, alignment=TOE)
        path.write_text(text, encoding="utf-8")
        return path

    def start(self, *words, catalog: Path | None = None, **options) -> Command:
        """`holdtight WORDS` on this catalog; options: pause (s) in every task, prepare: called before the command, helpers."""
        said = self.folder / f".said-{next(self._numbers)}"
        return Command(words, self.folder, said, catalog=catalog or self.store.path, **options)

    def do(self, *words, **options) -> tuple[int, str, str]:
        """(exit code, output, errors) of `holdtight WORDS`."""
        process = self.start(*words, **options)
        out, err = process.communicate()
        return process.returncode, out, err

    def ask(self, path: Path) -> int:
        code, out, err = self.do("queue", path, "--json")
        assert code == 0, err
        return json.loads(out)["study"]

    def job(self, number) -> queue.Job:
        with self.store.read() as con:
            return queue.get(con, number)

    def chunks(self, number) -> list[tuple]:
        with self.store.read() as con:
            query = "SELECT stage, chunk_no, first_build, n_builds, hash FROM kept.chunks WHERE study_id = ? ORDER BY 1, 2"
            return con.execute(query, [number]).fetchall()

    def expect(self, what: str, holds: bool, detail="") -> bool:
        """Count a check that holds, note one that does not."""
        self.said[what] = self.said.get(what, 0) + bool(holds)
        if not holds:
            self.broken.append(f"{what}: {detail}".strip(": "))
        return bool(holds)

    def expect_sound(self) -> None:
        wrong = check(self.store).wrong
        self.expect("catalog sound", not wrong, "; ".join(f"{f.name}: {f.problem}" for f in wrong[:5]))

    def verdict(self) -> int:
        """Print the counts and the closing line; gives the exit code."""
        for what, count in self.said.items():
            print(f"{count:6}  {what}")
        for line in self.broken[:20]:
            print(f"BROKEN  {line}")
        print(f"verdict: {'all of it held' if not self.broken else f'{len(self.broken)} did not hold'}")
        return bool(self.broken)


def in_a_shop(run) -> int:
    """Call `run` with a shop in a folder of its own, which is removed afterwards."""
    with tempfile.TemporaryDirectory(prefix="holdtight-hard-") as folder:
        shop = Shop(Path(folder))
        start = time.monotonic()
        run(shop)
        print(f"{time.monotonic() - start:.0f} s")
        return shop.verdict()
