"""Tasks of studies on the workers of a Dask scheduler: pure functions of plain data go out, plain arrays come back.

The process that talks to the scheduler claims studies and keeps what comes back; workers never see the catalog. A
worker process that dies loses nothing: the scheduler gives its tasks to another, and a task that takes several
processes down with it ends the study. Workers need the same versions of everything that makes the numbers.
"""

import asyncio
import contextlib
import logging
import platform
import threading
import time
from collections import OrderedDict
from collections.abc import Callable, Iterator
from concurrent.futures import CancelledError, Future
from dataclasses import astuple
from importlib.metadata import PackageNotFoundError, version

from catalog.errors import HoldtightError, InputError, WorkError

CONNECT_S = 5.0
WORKERS_S = 10.0  # how long a scheduler without workers is given to find one
CLOSE_S = 1.0
IN_FLIGHT = 256  # tasks with the scheduler at a time; it deals them out as workers come and go
STUDIES_CACHED = 4


class ClusterAddressError(InputError):
    """An address that is none."""


class ClusterLost(WorkError):
    """The scheduler or its workers cannot do tasks; the study is as good as before."""


class WorkersDied(WorkError):
    """A task during which one worker process after the other died."""


def makers_of_numbers() -> str:
    """Versions of what the bits of a result depend on."""
    names = []
    for package in ("holdtight", "numpy", "scipy", "SALib"):
        with contextlib.suppress(PackageNotFoundError):
            names.append(f"{package} {version(package)}")
    return ", ".join([*names, platform.machine()])


# --- on a worker

_ready: OrderedDict = OrderedDict()
_one_at_a_time = threading.Lock()


def run_task(make: Callable, plain: str, task: tuple, makers: str) -> tuple:
    """One task of a study: (values (rows, builds), status (builds,), seconds).

    make: function of `plain` to a StudyWork, made once per study and process; task: fields of a Task; makers: versions
    that the numbers are wanted from. Raises ClusterLost where this process has others.
    """
    from threadpoolctl import threadpool_limits

    from study.tasks import Task

    if makers != makers_of_numbers():
        raise ClusterLost(f"a worker has {makers_of_numbers()}, wanted is {makers}; install the same versions there")
    work = _work_of(make, plain)
    threadpool_limits(1)  # for good: given back by one task, it would be taken from the others of this process
    start = time.monotonic()
    outcome = work.run(Task(*task))
    return outcome.values, outcome.status, time.monotonic() - start


def _work_of(make, plain):
    with _one_at_a_time:
        if plain not in _ready:
            _ready[plain] = make(plain)
        _ready.move_to_end(plain)
        while len(_ready) > STUDIES_CACHED:
            _ready.popitem(last=False)
        return _ready[plain]


# --- beside the catalog


@contextlib.contextmanager
def connected(address: str) -> Iterator["ClusterPool"]:
    """The pool of a scheduler's workers, e.g. at "tcp://10.0.0.5:8786". Raises ClusterLost, ClusterAddressError."""
    client = _client(address)
    try:
        yield ClusterPool(client, address)
    finally:
        with contextlib.suppress(Exception):
            client.close(timeout=CLOSE_S)


def _client(address):
    try:
        from distributed import Client
    except ImportError:
        raise WorkError("a cluster needs the package distributed; pip install 'holdtight[cluster]'") from None
    _hush()
    try:
        client = Client(address, timeout=CONNECT_S, set_as_default=False, name="holdtight")
    except OSError:
        raise ClusterLost(f"no scheduler answers at {address} within {CONNECT_S:g} s; start one with `dask scheduler`") from None
    except (ValueError, TypeError, RuntimeError) as error:
        raise ClusterAddressError(f"{address!r} is not the address of a scheduler ({error}); write HOST:PORT") from None
    try:
        client.wait_for_workers(1, timeout=WORKERS_S)
    except Exception:
        client.close(timeout=CLOSE_S)
        raise ClusterLost(f"the scheduler at {address} has no workers; start some with `dask worker {address}`") from None
    return client


def _hush():
    """Errors reach the user as a line of ours, not as tracebacks of the connection's own log as well."""
    for name in list(logging.root.manager.loggerDict):
        if name.partition(".")[0] in ("distributed", "tornado"):
            logging.getLogger(name).setLevel(logging.CRITICAL + 1)


class ClusterPool:
    """The workers of one scheduler."""

    def __init__(self, client, address):
        self.client, self.address, self.makers = client, address, makers_of_numbers()

    @contextlib.contextmanager
    def of(self, make: Callable, plain: str) -> Iterator["StudyPool"]:
        """An executor of one study's tasks; what is unfinished at the end is taken back."""
        pool = StudyPool(self, make, plain)
        try:
            yield pool
        finally:
            pool.cancel()


class StudyPool:
    """Takes tasks of one study, gives futures of (Outcome, seconds)."""

    size = IN_FLIGHT // 2

    def __init__(self, cluster, make, plain):
        self.cluster, self.make, self.plain = cluster, make, plain
        self.fetching: set[Future] = set()

    def submit(self, task) -> Future:
        """Send a task. The future raises what the task raised, ClusterLost or WorkersDied."""
        client = self.cluster.client
        try:
            theirs = client.submit(run_task, self.make, self.plain, astuple(task), self.cluster.makers, pure=False)
        except Exception as error:
            raise self._lost(error) from None
        mine = asyncio.run_coroutine_threadsafe(self._fetch(theirs, task), client.loop.asyncio_loop)
        self.fetching.add(mine)
        mine.add_done_callback(self.fetching.discard)
        return mine

    async def _fetch(self, theirs, task):
        from distributed.scheduler import KilledWorker

        from study.tasks import Outcome

        try:
            values, status, seconds = await theirs
        except KilledWorker:
            raise WorkersDied(
                f"task {task.number} ({task.stage}, {task.kind}): every worker process that took it died, "
                "for want of memory perhaps; give them more, or fewer threads each"
            ) from None
        except HoldtightError:
            raise
        except (CancelledError, OSError, ImportError) as error:
            raise self._lost(error) from None
        except Exception as error:
            if "deserializ" in str(error):  # it has no holdtight, or one that is too different
                raise self._lost(error) from None
            raise
        return Outcome(values, status), seconds

    def _lost(self, error):
        said = str(error).split("\n")[0][:160] or type(error).__name__
        return ClusterLost(
            f"the scheduler at {self.cluster.address} was lost, or cannot do this work ({said}); "
            "what is finished is kept, `holdtight work` goes on with it"
        )

    def cancel(self):
        """Forget what is unfinished, without waiting for an answer: the scheduler drops what nobody wants any more."""
        for mine in list(self.fetching):
            mine.cancel()
