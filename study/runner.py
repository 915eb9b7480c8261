"""Runs queued studies: claims one, has its tasks done, keeps each finished one, ends with the result tables.

The catalog is held only for the moment of a claim, a chunk or a result. Every task is a pure function of the study and
its geometry, so a study that was interrupted goes on with the tasks that are not kept yet and ends with the same bits.
"""

import contextlib
import threading
import time
from collections.abc import Callable
from concurrent.futures import FIRST_COMPLETED, ThreadPoolExecutor, wait
from dataclasses import dataclass, field
from functools import partial
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path

import numpy as np
from threadpoolctl import threadpool_limits

from catalog import processes, queue, revisions
from catalog.chunks import drop_chunks, kept_cuts, load_chunk, store_chunk
from catalog.errors import HoldtightError, InputError, WorkError
from catalog.store import Catalog, CatalogBusy, CatalogFailed, CatalogGone, CatalogMissing, CatalogNotWritable
from study.cluster import ClusterLost, ClusterPool
from study.crew import LONG_POSES, Crew
from study.dossier import kept_study
from study.plain_work import from_plain, to_plain, work_of
from study.study_file import Study, read_study
from study.tabulate import tables
from study.tasks import Outcome

HEARTBEAT_S = 10.0
HELD_BYTES, KEEP_BYTES = 16 * 2**20, 8 * 2**20
KEEP_S = 1.0  # finished tasks wait this long for others, since a write to the catalog has a price of its own,
KEEP_TIMES = 4.0  # and so many times what the last write took, unless they grow large


class StudyDoesNotFit(InputError):
    """A study that asks its geometry for what it does not have or cannot do."""


class Stopped(WorkError):
    """The worker was asked to stop; what is finished is kept."""


def program_version() -> str:
    try:
        return version("holdtight")
    except PackageNotFoundError:
        return "unknown"


def register(catalog: Catalog, geometry, *, by: str, why: str) -> revisions.Revision:
    """Judge a geometry's mobility, evaluate it and keep it as a revision (the same content is the same revision)."""
    from study.nominal import evaluate

    with contextlib.suppress(CatalogMissing), catalog.read() as con:
        same = revisions.known(con, geometry)
        if same is not None:
            return same
    found = evaluate(geometry)
    with catalog.write() as con:
        return revisions.register(con, geometry, measures=found, by=by, why=why)


def read_asked(catalog: Catalog, path: Path) -> Study:
    """The study of a file, with the processes of the catalog; without one yet, with those that it will start with."""
    try:
        with catalog.read() as con:
            book = processes.resolver(con)
    except CatalogMissing:
        book = processes.initial()
    return read_study(path, processes=book, looser=book.looser)


def geometry_of(catalog: Catalog, study: Study, folder: Path, *, by: str):
    """The revision and the geometry that a study names: a file beside it, or NAME@REVISION of the catalog."""
    if "@" in study.geometry or not study.geometry.endswith(".toml"):
        with catalog.read() as con:
            revision = revisions.find(con, study.geometry)
            return revision, revisions.load(con, revision)
    from catalog.geometry_file import read_geometry

    geometry = read_geometry(folder / study.geometry)
    return register(catalog, geometry, by=by, why="named by a study"), geometry


def check(catalog: Catalog, study: Study, folder: Path, *, by: str) -> revisions.Revision:
    """The revision that a study names; StudyDoesNotFit where the study asks of it what it does not have or cannot do."""
    revision, geometry = geometry_of(catalog, study, folder, by=by)
    try:
        with threadpool_limits(1):
            work_of(geometry, study)
    except InputError as error:
        raise StudyDoesNotFit(f'study "{study.title}" on {revision.spec}: {error}') from None
    return revision


def enqueue(catalog: Catalog, study: Study, folder: Path, *, by: str) -> int:
    """Check a study and queue it. Gives its number."""
    revision = check(catalog, study, folder, by=by)
    with catalog.write() as con:
        number = queue.enqueue(
            con, text=study.text, title=study.title, method=study.method, size=study.size, seed=study.seed,
            sides=study.sides, revision_id=revision.id, version=program_version(), by=by,
        )  # fmt: skip
        processes.keep(con, number, study.resolved)
        return number


@dataclass
class Watch:
    """What a worker tells and listens to: called with (job, done builds, total builds); `stop` ends it between tasks.

    stopped: whether it left something undone for that.
    """

    progress: Callable = lambda job, done, total: None
    stop: threading.Event = field(default_factory=threading.Event)
    stopped: bool = False


def work(
    catalog: Catalog, *, crew: Crew, watch: Watch, study_id: int | None = None, pool: ClusterPool | None = None
) -> list[int]:
    """Run queued studies (or just one) until none is left. Gives the numbers of those that were finished.

    A study that fails is marked so and the next one is taken; with `study_id` its error is raised. Tasks are done here
    and by the `crew`, or by the workers of a `pool`; when that is lost the study goes back into the queue. Raises ClusterLost.
    """
    worker, finished = queue.worker_name(), []
    while not watch.stop.is_set():
        job = _claimed(catalog, worker, study_id)
        if job is None:
            break
        try:
            if _Run(catalog, job, worker, crew=crew, watch=watch, pool=pool).run():
                finished.append(job.id)
        except Stopped:
            watch.stopped = True
            break
        except ClusterLost:
            with catalog.write() as con:
                queue.release(con, job.id, worker)
            raise
        except (CatalogBusy, CatalogFailed, CatalogGone, CatalogNotWritable):  # no fault of the study: it can go on later
            with contextlib.suppress(HoldtightError), catalog.write() as con:
                queue.release(con, job.id, worker)
            raise
        except HoldtightError as error:
            with catalog.write() as con:
                queue.fail(con, job.id, worker, error=str(error))
            if study_id is not None:
                raise
        except Exception as error:
            with catalog.write() as con:
                queue.fail(con, job.id, worker, error=f"fault of the program: {type(error).__name__}: {error}")
            raise
        if study_id is not None:
            break
    return finished


def _claimed(catalog, worker, study_id):
    """The next study to run, cleared of what another version of the program has begun; None without one."""
    with catalog.write() as con:
        job = queue.claim(con, worker, study_id=study_id)
        if job is None or job.version == program_version():
            return job
        drop_chunks(con, job.id, worker, version=program_version())
        return queue.get(con, job.id)


class _Run:
    """One study, from its claim to its results."""

    def __init__(self, catalog, job, worker, *, crew, watch, pool):
        self.catalog, self.job, self.worker, self.watch = catalog, job, worker, watch
        self.crew, self.pool = crew, pool
        self.started = time.monotonic()
        self.last_sign, self.write_s = self.started, 0.0
        self.last_keep = None

    def run(self) -> bool:
        """Do what is not kept yet and finish; False when the study was cancelled or taken over."""
        with self.catalog.read() as con:
            geometry = revisions.load(con, revisions.by_id(con, self.job.revision_id))
            self.study = kept_study(con, self.job)
            found = kept_cuts(con, self.job.id)
        with threadpool_limits(1):  # helpers have one thread each too, and the same bits
            self.work = work_of(geometry, self.study)
        self.total = sum(map(self.work.kept_builds, self.work.tasks))
        outcomes = self._kept(found)
        self.done = sum(self.work.kept_builds(task) for task in self.work.tasks if task.number in outcomes)
        with ThreadPoolExecutor(1) as self.side:
            if not self._do([t for t in self.work.tasks if t.number not in outcomes], outcomes):
                return False
            return self._finish(outcomes)

    def _kept(self, found):
        """What an earlier worker left finished; none of it where it was cut in another way."""
        outcomes = _Outcomes(self._load)
        ours = {(t.number, t.stage, self.work.first_build(t), self.work.kept_builds(t)) for t in self.work.tasks}
        if ours.issuperset(found):
            outcomes.numbers.update(number for number, *_ in found)
            return outcomes
        with self.catalog.write() as con:
            drop_chunks(con, self.job.id, self.worker, version=self.job.version)
        return outcomes

    def _load(self, number):
        task = self.work.tasks[number]
        with self.catalog.read() as con:
            arrays, status = load_chunk(con, self.job.id, stage=task.stage, chunk_no=number)
        return _from_arrays(task, arrays, status)

    def _do(self, tasks, outcomes):
        """Tasks to the crew or a pool, at most two a thread in flight; the main thread keeps what comes back, in any order."""
        waiting, running, fresh = list(reversed(tasks)), {}, []
        with self._hands(tasks) as hands:
            while waiting or running or fresh:
                while waiting and len(running) < 2 * hands.size:
                    task = waiting.pop()
                    running[hands.submit(task)] = task
                ready = wait(running, timeout=0.1, return_when=FIRST_COMPLETED).done if running else ()
                fresh += [(running.pop(future), *future.result()) for future in ready]
                last = not (waiting or running)
                if not self._go_on(fresh, outcomes, last=last):
                    return False
        return True

    @contextlib.contextmanager
    def _hands(self, tasks):
        """Who does the tasks: `submit` makes a future of (outcome, seconds), `size` are done at a time."""
        plain = partial(to_plain, self.work.geometry, self.study)
        if self.pool is not None:
            with self.pool.of(from_plain, plain()) as hands:
                yield hands
            return
        poses = sum(self.work.builds(task) for task in tasks) * len(self.work.after.rates)
        helpers = len(tasks) - 1 if poses >= LONG_POSES else 0
        with threadpool_limits(1), self.crew.of(self._timed, plain, helpers=helpers) as hands:
            yield hands

    def _timed(self, task):
        start = time.monotonic()
        return self.work.run(task), time.monotonic() - start

    def _go_on(self, fresh, outcomes, *, last) -> bool:
        """Keep what is fresh, a second's worth at a time, and stop where asked to; False when the study is not ours any more."""
        stop = self.watch.stop.is_set()
        patience = min(max(KEEP_S, KEEP_TIMES * self.write_s), HEARTBEAT_S) if fresh else HEARTBEAT_S
        late = time.monotonic() - self.last_sign > patience or sum(o.values.nbytes for _, o, _ in fresh) > KEEP_BYTES
        if last and fresh:  # while they are written the tables are made
            self.last_keep = self.side.submit(self._keep, list(fresh))
        elif (stop or last or late) and not (self._keep(fresh) if fresh else self._alive()):
            return False
        if stop or last or late:
            for task, outcome, _ in fresh:
                outcomes.add(task.number, outcome, hold=last)
                self.done += len(outcome.status)
            fresh.clear()
            self.watch.progress(self.job, self.done, self.total)
        if stop and not last:
            with self.catalog.write() as con:
                queue.release(con, self.job.id, self.worker)
            raise Stopped(f"study {self.job.id}: stopped; what is finished is kept, `holdtight work` goes on with it")
        return True

    def _keep(self, fresh) -> bool:
        """Finished tasks into the catalog, in one transaction."""
        begun = time.monotonic()
        with self.catalog.write() as con:
            ours = self._sign(con) and all(self._store(con, *one) for one in fresh)
        self.last_sign = time.monotonic()
        self.write_s = self.last_sign - begun
        return ours

    def _store(self, con, task, outcome, seconds):
        values, more = _to_arrays(task, outcome, len(self.study.measures))
        return store_chunk(
            con,
            self.job.id,
            self.worker,
            stage=task.stage,
            chunk_no=task.number,
            first_build=self.work.first_build(task),
            values=values,
            status=outcome.status,
            seconds=seconds,
            more=more,
        )

    def _alive(self):
        self.last_sign = time.monotonic()
        with self.catalog.write() as con:
            return self._sign(con)

    def _sign(self, con):
        return queue.heartbeat(con, self.job.id, self.worker, total=self.total)

    def _finish(self, outcomes):
        with threadpool_limits(1):
            found, facts = tables(self.work, outcomes)
        if self.last_keep is not None and not self.last_keep.result():
            return False
        facts["seconds"] = time.monotonic() - self.started
        facts["stages"] = list(self.work.stages)
        with self.catalog.write() as con:
            return self._sign(con) and queue.finish(con, self.job.id, self.worker, tables={"study": [facts], **found})


class _Outcomes:
    """Finished tasks by number: in memory up to HELD_BYTES, beyond that read back from the catalog when asked for."""

    def __init__(self, load):
        self.load, self.numbers, self.held, self.size = load, set(), {}, 0

    def __contains__(self, number) -> bool:
        return number in self.numbers

    def __getitem__(self, number) -> Outcome:
        return self.held[number] if number in self.held else self.load(number)

    def add(self, number, outcome, *, hold=False) -> None:
        self.numbers.add(number)
        if hold or self.size + outcome.values.nbytes <= HELD_BYTES:
            self.held[number] = outcome
            self.size += outcome.values.nbytes


def _to_arrays(task, outcome, measures):
    """(values of the measures, further arrays by name) as the catalog keeps a chunk."""
    if task.kind != "draws":
        return np.empty((0, len(outcome.status))), {task.kind: outcome.values}
    return outcome.values[:measures], {"alignment": outcome.values[measures:]}


def _from_arrays(task, arrays, status):
    if task.kind != "draws":
        return Outcome(arrays[task.kind], status)
    alignment = arrays.get("alignment", np.empty((0, len(status))))
    return Outcome(np.concatenate((arrays.get("value", np.empty((0, len(status)))), alignment)), status)
