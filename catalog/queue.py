"""The queue of studies: queued, running (claimed, with a heartbeat), then done, failed or cancelled."""

import os
import socket
import uuid
from collections.abc import Sequence
from dataclasses import dataclass
from datetime import datetime, timedelta
from typing import TYPE_CHECKING, Any

from catalog.errors import InputError
from catalog.results import Tables, final_stage, store_results
from catalog.rows import fetch_rows, insert_rows, now

if TYPE_CHECKING:
    from duckdb import DuckDBPyConnection

STALE_S = 60.0


class StudyNotFound(InputError):
    """No study of that number."""


@dataclass(frozen=True, slots=True)
class Job:
    """A study as the queue knows it; times are UTC."""

    id: int
    title: str
    state: str
    method: str
    size: int
    seed: int
    sides: str
    revision_id: int
    geometry: str
    text: str
    version: str
    created: datetime
    by: str
    worker: str | None
    heartbeat: datetime | None
    started: datetime | None
    finished: datetime | None
    done: int
    total: int | None
    error: str | None
    result_hash: str | None
    final_stage: str | None


_SELECT = """
    SELECT s.id, s.title, s.state::VARCHAR AS state, s.method, s.size, s.seed, s.sides, s.revision_id,
           g.name || '@' || r.number AS geometry, s.text, s.version, s.created, s.by_whom AS "by", s.worker,
           s.heartbeat, s.started, s.finished, s.done_builds AS done, s.total_builds AS total, s.error,
           s.result_hash, s.final_stage
    FROM kept.studies s JOIN kept.revisions r ON r.id = s.revision_id
    JOIN kept.geometries g ON g.id = r.geometry_id
"""


def worker_name() -> str:
    """A new worker's name, "host:process:token"; each worker takes one at its start."""
    return f"{socket.gethostname()}:{os.getpid()}:{uuid.uuid4().hex[:8]}"


def enqueue(
    con: "DuckDBPyConnection",
    *,
    text: str,
    title: str,
    method: str,
    size: int,
    seed: int,
    sides: str,
    revision_id: int,
    version: str,
    by: str,
) -> int:
    """Queue a study of a registered revision; gives its number."""
    study_id = con.execute("SELECT coalesce(max(id), 0) + 1 FROM kept.studies").fetchone()[0]
    row = {"id": study_id, "text": text, "title": title, "method": method, "size": size, "seed": seed}
    row |= {"sides": sides, "revision_id": revision_id, "version": version, "by_whom": by}
    row |= {"state": "queued", "created": now(), "done_builds": 0, "ranked": False}
    insert_rows(con, "studies", [row])
    return study_id


def get(con: "DuckDBPyConnection", study_id: int) -> Job:
    """The study of that number. Raises StudyNotFound."""
    found = fetch_rows(con, _SELECT + "WHERE s.id = ?", [study_id])
    if not found:
        raise StudyNotFound(f"study {study_id} is not in the catalog; `holdtight studies` lists them.")
    return Job(**found[0])


def list_studies(con: "DuckDBPyConnection", *, states: Sequence[str] = ()) -> list[Job]:
    """All studies by number, or those in the given states."""
    where = "WHERE list_contains(?, s.state::VARCHAR)" if states else ""
    found = fetch_rows(con, _SELECT + where + " ORDER BY s.id", [list(states)] if states else [])
    return [Job(**row) for row in found]


def claim(
    con: "DuckDBPyConnection", worker: str, *, study_id: int | None = None, stale_s: float = STALE_S
) -> Job | None:
    """Take the first study that waits, or one whose worker is gone; None when there is nothing to take.

    A worker is gone when its heartbeat is older than stale_s (s) or its process on this host has ended.
    study_id: take just this one, if it can be taken.
    """
    candidates = list_studies(con, states=["queued", "running"])
    for job in candidates:
        if (
            (study_id is None or job.id == study_id)
            and _free(job, stale_s=stale_s)
            and _take(con, job, worker)
        ):
            return get(con, job.id)
    return None


def heartbeat(con: "DuckDBPyConnection", study_id: int, worker: str, *, total: int | None = None) -> bool:
    """Sign of life, and the number of builds to run where known; False when the study is no longer ours."""
    query = """
        UPDATE kept.studies SET heartbeat = ?, total_builds = coalesce(?, total_builds)
        WHERE id = ? AND state = 'running' AND worker = ? RETURNING id
    """
    return _changed(con, query, [now(), total, study_id, worker])


def cancel(con: "DuckDBPyConnection", study_ids: Sequence[int]) -> dict[int, str]:
    """Cancel queued and running studies; gives the state of each afterwards (done and failed ones stay)."""
    for study_id in study_ids:
        get(con, study_id)
    query = """
        UPDATE kept.studies SET state = 'cancelled', finished = ?
        WHERE list_contains(?, id) AND state IN ('queued', 'running')
    """
    con.execute(query, [now(), list(study_ids)])
    return {study_id: get(con, study_id).state for study_id in study_ids}


def release(con: "DuckDBPyConnection", study_id: int, worker: str) -> bool:
    """Put a running study of this worker back into the queue (clean end of a worker); its chunks stay."""
    query = """
        UPDATE kept.studies SET state = 'queued', worker = NULL, heartbeat = NULL
        WHERE id = ? AND state = 'running' AND worker = ? RETURNING id
    """
    return _changed(con, query, [study_id, worker])


def fail(con: "DuckDBPyConnection", study_id: int, worker: str, *, error: str) -> bool:
    """End a running study of this worker as failed; False when it is no longer ours."""
    query = """
        UPDATE kept.studies SET state = 'failed', error = ?, finished = ?
        WHERE id = ? AND state = 'running' AND worker = ? RETURNING id
    """
    return _changed(con, query, [error, now(), study_id, worker])


def finish(con: "DuckDBPyConnection", study_id: int, worker: str, *, tables: Tables) -> bool:
    """Keep the results and end the study as done, in the caller's one transaction.

    False, and nothing is kept, when the study is no longer ours or was cancelled.
    """
    if not is_ours(con, study_id, worker):
        return False
    digest = store_results(con, study_id, tables)
    query = """
        UPDATE kept.studies SET state = 'done', finished = ?, result_hash = ?, final_stage = ?, ranked = ?
        WHERE id = ? RETURNING id
    """
    ranked = bool(tables.get("ranking"))
    return _changed(con, query, [now(), digest, final_stage(tables), ranked, study_id])


def is_ours(con: "DuckDBPyConnection", study_id: int, worker: str) -> bool:
    """Whether the study is running and claimed by this worker."""
    query = "SELECT 1 FROM kept.studies WHERE id = ? AND state = 'running' AND worker = ?"
    return con.execute(query, [study_id, worker]).fetchone() is not None


def _free(job: Job, *, stale_s: float) -> bool:
    if job.state == "queued" or job.heartbeat is None:
        return True
    return now() - job.heartbeat > timedelta(seconds=stale_s) or _known_dead(job.worker or "")


def _known_dead(worker: str) -> bool:
    """Whether the worker's process was on this host and has ended."""
    host, _, rest = worker.rpartition(":")[0].rpartition(":")
    if host != socket.gethostname() or not rest.isdigit() or os.name == "nt":
        return False  # on Windows signal 0 is Ctrl-C: there the heartbeat alone tells
    try:
        os.kill(int(rest), 0)
    except ProcessLookupError:
        return True
    except OSError:
        return False
    return False


def _take(con: "DuckDBPyConnection", job: Job, worker: str) -> bool:
    query = """
        UPDATE kept.studies SET state = 'running', worker = ?, heartbeat = ?, started = coalesce(started, ?)
        WHERE id = ? AND state IN ('queued', 'running') AND worker IS NOT DISTINCT FROM ? RETURNING id
    """
    moment = now()
    return _changed(con, query, [worker, moment, moment, job.id, job.worker])


def _changed(con: "DuckDBPyConnection", query: str, parameters: list[Any]) -> bool:
    return bool(con.execute(query, parameters).fetchall())
