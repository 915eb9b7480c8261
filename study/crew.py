"""Helper processes of this machine that do tasks beside the process that keeps the catalog.

Threads of one process speed a study up little: most array operations take microseconds, and after each a thread waits
for the interpreter's lock. A helper has its own. Lines of JSON and the bytes of arrays go through its pipes; it sees no
catalog, ends when its input ends, and whatever befalls it, its task is done here instead.
"""

import contextlib
import json
import os
import signal
import subprocess
import sys
import threading
import time
import tomllib
from collections.abc import Callable, Iterator
from concurrent.futures import CancelledError, Future, ThreadPoolExecutor
from dataclasses import astuple
from pathlib import Path
from queue import SimpleQueue

LONG_POSES = 1_000_000  # a helper takes a second or two to start: shorter work is done before
LONG_BUILDS = 10_000
THREADS = 2  # more of one process only wait for each other
STANDS_STILL_S = 600.0  # a task in a helper that takes longer is done here


class HelperLost(Exception):
    """A helper that does not answer, or not as wanted."""


def worth_starting(path: Path) -> int:
    """A first guess, before anything heavy is imported, how many helpers the study of a file could use."""
    try:
        small = path.is_file() and path.stat().st_size < 2**20
        asked = tomllib.loads(path.read_text(encoding="utf-8-sig")) if small else {}
        builds = int(asked["size"]) * (16 if asked["method"] == "sobol" else 1)
        return 0 if builds < LONG_BUILDS else builds // LONG_BUILDS + 1
    except (OSError, ValueError, KeyError, TypeError, ArithmeticError, RecursionError):
        return 0


# --- beside the catalog


class Crew:
    """Up to `size` helpers, started when first wanted and kept for the next study; `close` ends them at once."""

    def __init__(self, size: int) -> None:
        self.size = size
        self.helpers: list[_Helper] = []

    def start(self, most: int) -> None:
        """Start up to `most` helpers, no more than there are cores; they get ready by themselves."""
        self.helpers = [helper for helper in self.helpers if not helper.lost]
        while len(self.helpers) < min(self.size, most, os.cpu_count() or 1):
            self.helpers.append(_Helper())

    def close(self) -> None:
        for helper in self.helpers:
            helper.kill()
        for helper in self.helpers:
            helper.end()
        self.helpers.clear()

    def __enter__(self) -> "Crew":
        return self

    def __exit__(self, *_) -> None:
        self.close()

    @contextlib.contextmanager
    def of(self, here: Callable, plain: Callable[[], str], *, helpers: int) -> Iterator["_Shift"]:
        """An executor of one study's tasks, with up to so many helpers.

        here: task → (Outcome, seconds) in this process; plain: what helpers are given.
        """
        self.start(helpers)
        wanted = self.helpers[:helpers]
        shift = _Shift(here, plain() if wanted else "", wanted, size=1 + self.size)
        try:
            yield shift
        finally:
            shift.end()


class _Shift:
    """Tasks of one study to whoever is free: two threads of this process, or one and the helpers that are ready."""

    def __init__(self, here, plain, helpers, *, size):
        self.here, self.plain, self.size = here, plain, size
        self.free: SimpleQueue = SimpleQueue()
        self.lock, self.ended = threading.Lock(), False
        self.threads, self.ready = min(size, THREADS), 0
        for _ in range(self.threads):
            self.free.put(None)
        self.pool = ThreadPoolExecutor(size)
        for helper in helpers:
            helper.when_ready(self._joins)

    def submit(self, task) -> Future:
        """A future of (Outcome, seconds); it raises what the task raises."""
        return self.pool.submit(self._do, task)

    def _joins(self, helper):
        with self.lock:
            self.ready += 1
        self.free.put(helper)

    def _do(self, task):
        helper = self.free.get()
        try:
            with contextlib.suppress(HelperLost):
                if helper is not None and not self.ended:
                    return helper.do(self.plain, task)
            if self.ended:
                raise CancelledError
            return self.here(task)
        finally:
            self._goes_back(helper)

    def _goes_back(self, helper):
        """A thread steps back where a helper has joined, and one stays; for a lost helper a thread steps in."""
        with self.lock:
            if helper is not None and helper.lost:
                self.ready, self.threads, helper = self.ready - 1, self.threads + 1, None
            surplus = helper is None and self.threads > (1 if self.ready else min(self.size, THREADS))
            self.threads -= surplus
        if not surplus:
            self.free.put(helper)

    def end(self):
        """Nobody begins another task; those that wait for a hand are let go, lest they keep the program from ending."""
        self.ended = True
        for _ in range(self.size):
            self.free.put(None)
        self.pool.shutdown(wait=False, cancel_futures=True)


class _Helper:
    """One helper process."""

    def __init__(self) -> None:
        self.given, self.lost = None, False
        self.waiting: list[Callable] = []
        self.lock, self.one_at_a_time, self.is_ready = threading.Lock(), threading.Lock(), False
        self.process = None
        with contextlib.suppress(OSError, ValueError):
            self.process = subprocess.Popen(
                [sys.executable, "-P", "-W", "ignore", "-m", "study.crew"], stdin=subprocess.PIPE, stdout=subprocess.PIPE,
                stderr=subprocess.DEVNULL, env=_environment(), start_new_session=True,
                creationflags=getattr(subprocess, "CREATE_NEW_PROCESS_GROUP", 0),
            )  # fmt: skip
            threading.Thread(target=self._await, daemon=True).start()

    def _await(self):
        with contextlib.suppress(OSError, ValueError):
            if self.process.stdout.readline() != b"ready\n":
                return
            with self.lock:
                self.is_ready, waiting = True, self.waiting
            for call in waiting:
                call(self)

    def when_ready(self, call: Callable) -> None:
        """Call with this helper as soon as it can take tasks; never where it cannot start."""
        with self.lock:
            if self.lost:
                return
            if not self.is_ready:
                self.waiting = [call]  # of the latest study only
                return
        call(self)

    def do(self, plain: str, task):
        """(Outcome, seconds) of a task. Raises HelperLost, also where the task failed: it is then done here, and fails here."""
        stands_still = threading.Timer(STANDS_STILL_S, self.kill)
        stands_still.daemon = True
        try:
            with self.one_at_a_time:
                stands_still.start()
                return self._answer(plain, task)
        except (OSError, ValueError, KeyError, TypeError) as error:
            self.end()
            raise HelperLost(str(error)) from None
        finally:
            stands_still.cancel()

    def _answer(self, plain, task):
        import numpy as np

        from study.tasks import Outcome

        if self.given != plain:
            self._say({"study": plain})
            self.given = plain
        self._say({"task": astuple(task)})
        head = json.loads(self.process.stdout.readline())
        rows, builds = head["shape"]
        values = np.frombuffer(self._bytes(8 * rows * builds)).reshape(rows, builds)
        return Outcome(values, np.frombuffer(self._bytes(builds), np.uint8)), head["seconds"]

    def _say(self, what):
        self.process.stdin.write(json.dumps(what).encode() + b"\n")
        self.process.stdin.flush()

    def _bytes(self, count):
        found = self.process.stdout.read(count)
        if len(found) != count:
            raise ValueError("cut short")
        return bytearray(found)

    def kill(self) -> None:
        """It holds nothing that could be lost."""
        self.lost = True
        if self.process is not None:
            with contextlib.suppress(OSError):
                self.process.kill()

    def end(self) -> None:
        self.kill()
        if self.process is None:
            return
        with contextlib.suppress(subprocess.TimeoutExpired):
            self.process.wait(timeout=5)
        for pipe in (self.process.stdin, self.process.stdout):
            with contextlib.suppress(OSError, ValueError):
                pipe.close()


def _environment():
    return os.environ | {"PYTHONPATH": os.pathsep.join(path for path in sys.path if path), "OPENBLAS_NUM_THREADS": "1"}


# --- in a helper


def serve(given, taken) -> None:
    """Do the tasks that come in, until no more come. given, taken: binary pipes."""
    from threadpoolctl import threadpool_limits

    from study.plain_work import from_plain
    from study.tasks import Task

    threadpool_limits(1)
    taken.write(b"ready\n")
    taken.flush()
    work = None
    for line in given:
        asked = json.loads(line)
        if "study" in asked:
            work = from_plain(asked["study"])
            continue
        start = time.monotonic()
        outcome = work.run(Task(*asked["task"]))
        head = {"shape": outcome.values.shape, "seconds": time.monotonic() - start}
        taken.write(json.dumps(head).encode() + b"\n" + outcome.values.astype(float).tobytes() + outcome.status.tobytes())
        taken.flush()


def main() -> None:
    """A helper's life."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    taken = os.fdopen(os.dup(1), "wb")
    os.dup2(2, 1)  # whatever else is printed stays out of the pipe
    with contextlib.suppress(OSError):
        serve(sys.stdin.buffer, taken)


if __name__ == "__main__":
    main()
