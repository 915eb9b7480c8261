"""`work`: run what is queued."""

import contextlib
import signal
import sys
from typing import Annotated

import typer

from study.commands.common import WORKER_WAIT_S, CatalogOption, JsonOption, clean, default_threads, print_json


def run(
    threads: Annotated[int, typer.Option(help="How many tasks at a time; 0 takes one a core.", min=0, max=256)] = 0,
    cluster: Annotated[
        str | None,
        typer.Option(metavar="ADDRESS", help="A Dask scheduler, HOST:PORT, whose workers do the tasks.", show_default=False),
    ] = None,
    as_json: JsonOption = False,
    catalog: CatalogOption = None,
) -> None:
    """Run the queued studies, one after the other, until none is left. Ctrl-C stops after the tasks in hand."""
    from catalog.store import Catalog
    from study.crew import Crew
    from study.runner import work

    with Crew((threads or default_threads()) - 1) as crew, pool_at(cluster) as pool, progress_watch(quiet=as_json) as watch, stop_on_signals(watch):
        finished = work(Catalog(catalog, wait_s=WORKER_WAIT_S), crew=crew, watch=watch, pool=pool)
    if watch.stop.is_set() and watch.stopped:
        print("stopped; what is finished is kept, `holdtight work` goes on with it")
        raise typer.Exit(1)
    if as_json:
        print_json({"finished": finished})
    else:
        print(f"finished: {', '.join(map(str, finished)) or 'nothing was queued'}")


def pool_at(address: str | None):
    """The workers of the scheduler at an address, None without one."""
    if address is None:
        return contextlib.nullcontext()
    from study.cluster import connected

    return connected(address)


@contextlib.contextmanager
def progress_watch(*, quiet=False):
    """A Watch that draws a bar with the time left, where there is a terminal."""
    from rich.console import Console
    from rich.progress import BarColumn, Progress, TextColumn, TimeRemainingColumn

    from study.runner import Watch

    columns = (TextColumn("study {task.description}"), BarColumn(), TextColumn("{task.completed}/{task.total} builds"))
    bar = Progress(*columns, TimeRemainingColumn(), console=Console(stderr=True), disable=quiet or not sys.stderr.isatty(), transient=True)
    rows = {}

    def progress(job, done, total):
        if job.id not in rows:
            rows[job.id] = bar.add_task(f"{job.id} {clean(job.title)[:40]}".replace("[", "("), total=total)
        bar.update(rows[job.id], completed=done)

    with bar:
        yield Watch(progress=progress)


@contextlib.contextmanager
def stop_on_signals(watch):
    """Ctrl-C, a closed terminal and a request to terminate set the watch's stop; a second one ends at once."""

    def stop(number, frame):
        if watch.stop.is_set():
            raise KeyboardInterrupt
        watch.stop.set()

    names = ("SIGINT", "SIGTERM", "SIGHUP", "SIGBREAK")  # the last on Windows only, the one before not there
    signals = [getattr(signal, name) for name in names if hasattr(signal, name)]
    before = {s: signal.signal(s, stop) for s in signals}
    try:
        yield
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)
