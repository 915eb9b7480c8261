"""`studies`: the queue and what is finished."""

from study.commands.common import CatalogOption, JsonOption, print_json, print_table


def run(as_json: JsonOption = False, catalog: CatalogOption = None) -> None:
    """List the studies with their states."""
    from catalog import queue
    from catalog.store import Catalog

    with Catalog(catalog).read() as con:
        jobs = queue.list_studies(con)
    if as_json:
        print_json([
            {"study": j.id, "title": j.title, "state": j.state, "done": j.done, "total": j.total, "geometry": j.geometry,
             "method": j.method, "size": j.size, "seed": j.seed, "sides": j.sides, "error": j.error}
            for j in jobs
        ])  # fmt: skip
        return
    columns = [
        ("study", "right"),
        ("title", "left"),
        ("geometry", "left"),
        ("method", "left"),
        ("state", "left"),
        ("builds", "right"),
    ]
    rows = [
        [
            str(j.id),
            j.title,
            j.geometry,
            f"{j.method} {j.size}" if j.method in ("sobol", "morris", "spread") else j.method,
            j.state + (f": {j.error}" if j.error else ""),
            _builds(j),
        ]
        for j in jobs
    ]
    print_table("studies", columns, rows)


def _builds(job):
    if job.state == "done" or job.total is None:
        return str(job.done)
    return f"{job.done} of {job.total}"
