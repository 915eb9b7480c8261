"""Chunks of builds: durable one by one, each kept once."""

import hashlib
from collections.abc import Mapping
from typing import TYPE_CHECKING

from catalog.queue import is_ours
from catalog.rows import insert_rows, now

if TYPE_CHECKING:
    import numpy as np
    from duckdb import DuckDBPyConnection


def done_chunks(con: "DuckDBPyConnection", study_id: int, *, stage: str) -> set[int]:
    """Numbers of the chunks that are kept."""
    query = "SELECT chunk_no FROM kept.chunks WHERE study_id = ? AND stage = ?"
    return {row[0] for row in con.execute(query, [study_id, stage]).fetchall()}


def kept_cuts(con: "DuckDBPyConnection", study_id: int) -> list[tuple[int, str, int, int]]:
    """How a study's kept chunks were cut: (number, stage, first build, builds) of each."""
    query = "SELECT chunk_no, stage, first_build, n_builds FROM kept.chunks WHERE study_id = ?"
    return con.execute(query, [study_id]).fetchall()


def store_chunk(
    con: "DuckDBPyConnection",
    study_id: int,
    worker: str,
    *,
    stage: str,
    chunk_no: int,
    first_build: int,
    values: "np.ndarray",
    status: "np.ndarray",
    seconds: float | None = None,
    more: "Mapping[str, np.ndarray] | None" = None,
) -> bool:
    """Keep one chunk in the caller's one transaction; a chunk that is there already is left as it is.

    values (measures, builds), NaN where there is none; status (builds,), 0 is assembled;
    more: further arrays (rows, builds) by name, for instance demand in mm or deg.
    Counts as a sign of life. False, and nothing is kept, when the study is no longer ours or was cancelled.
    """
    if not is_ours(con, study_id, worker):
        return False
    if chunk_no in done_chunks(con, study_id, stage=stage):
        return True
    arrays = {"value": values, **(more or {})}
    n_builds = len(status)
    _check_shapes(arrays, n_builds)
    row = {"study_id": study_id, "stage": stage, "chunk_no": chunk_no, "first_build": first_build}
    row |= {"n_builds": n_builds, "seconds": seconds, "hash": chunk_hash(arrays, status)}
    insert_rows(con, "chunks", [row])
    for kind, array in arrays.items():
        _insert_values(con, [study_id, stage, chunk_no, kind], array, first_build)
    _insert_status(con, [study_id, stage, chunk_no], status, first_build)
    query = "UPDATE kept.studies SET heartbeat = ?, done_builds = done_builds + ? WHERE id = ?"
    con.execute(query, [now(), n_builds, study_id])
    return True


def drop_chunks(con: "DuckDBPyConnection", study_id: int, worker: str, *, version: str) -> None:
    """Forget what another version of the program has kept of a study that this worker runs.

    Chunks are cut and computed by one version: those of two would make a result that neither would give.
    """
    if not is_ours(con, study_id, worker):
        return
    for table in ("build_values", "builds", "chunks"):
        con.execute(f"DELETE FROM kept.{table} WHERE study_id = ?", [study_id])
    con.execute("UPDATE kept.studies SET version = ?, done_builds = 0 WHERE id = ?", [version, study_id])


def load_chunk(
    con: "DuckDBPyConnection", study_id: int, *, stage: str, chunk_no: int
) -> "tuple[dict[str, np.ndarray], np.ndarray]":
    """A kept chunk as it was stored: (arrays (rows, builds) by name, status (builds,)), the same bits."""
    import numpy as np

    key = [study_id, stage, chunk_no]
    where = "study_id = ? AND stage = ? AND chunk_no = ?"
    query = f"SELECT status FROM kept.builds WHERE {where} ORDER BY build_no"
    status = con.execute(query, key).fetchnumpy()["status"].astype(np.uint8)
    query = f"SELECT kind, value FROM kept.build_values WHERE {where} ORDER BY kind, measure_no, build_no"
    found = con.execute(query, key).fetchnumpy()
    kinds, values = np.asarray(found["kind"], dtype=str), np.ma.filled(found["value"], np.nan)
    return {str(k): values[kinds == k].reshape(-1, len(status)) for k in np.unique(kinds)}, status


def chunk_hash(arrays: "Mapping[str, np.ndarray]", status: "np.ndarray") -> str:
    """sha256 (hex) over the bits of a chunk's arrays."""
    import numpy as np

    digest = hashlib.sha256(np.ascontiguousarray(status, dtype=np.uint8).tobytes())
    for name in sorted(arrays):
        digest.update(name.encode())
        digest.update(np.ascontiguousarray(arrays[name], dtype=float).tobytes())
    return digest.hexdigest()


def _check_shapes(arrays: "Mapping[str, np.ndarray]", n_builds: int) -> None:
    for name, array in arrays.items():
        if array.ndim != 2 or array.shape[1] != n_builds:
            raise ValueError(f"{name} has shape {array.shape}, must be (rows, {n_builds})")


def _insert_values(con: "DuckDBPyConnection", key: list, array: "np.ndarray", first_build: int) -> None:
    import numpy as np

    rows, builds = array.shape
    if not array.size:
        return
    columns = {
        "m": np.repeat(np.arange(rows, dtype=np.int32), builds),
        "b": np.tile(np.arange(first_build, first_build + builds, dtype=np.int64), rows),
        "v": np.ascontiguousarray(array, dtype=float).ravel(),
    }
    _insert(con, "INSERT INTO kept.build_values SELECT ?, ?, ?, ?, m, b, v FROM chunk_in", key, columns)


def _insert_status(con: "DuckDBPyConnection", key: list, status: "np.ndarray", first_build: int) -> None:
    import numpy as np

    columns = {
        "b": np.arange(first_build, first_build + len(status), dtype=np.int64),
        "s": np.ascontiguousarray(status, dtype=np.uint8),
    }
    _insert(con, "INSERT INTO kept.builds SELECT ?, ?, ?, b, s FROM chunk_in", key, columns)


def _insert(con: "DuckDBPyConnection", query: str, key: list, columns: "dict[str, np.ndarray]") -> None:
    con.register("chunk_in", columns)
    try:
        con.execute(query, key)
    finally:
        con.unregister("chunk_in")
