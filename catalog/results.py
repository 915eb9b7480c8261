"""Result tables of finished studies, and the values of their builds."""

import hashlib
import json
from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

from catalog.errors import WorkError
from catalog.rows import column_types, fetch_rows, insert_rows, plain

if TYPE_CHECKING:
    import numpy as np
    from duckdb import DuckDBPyConnection

TABLES = ("ranking", "stats", "histogram", "curves", "demand", "worst", "correlations", "failures", "verdicts")
STUDY_COLUMNS = ("id", "title", "geometry", "method", "size", "seed", "sides", "state", "text")
Tables = Mapping[str, Sequence[Mapping[str, Any]]]


class ResultsKept(WorkError):
    """The study has its results already; they do not change."""


def store_results(con: "DuckDBPyConnection", study_id: int, tables: Tables) -> str:
    """Keep the result tables of a study, once; gives their sha256 (hex).

    tables: {"study": [facts], "ranking": [rows], …}; anything a method does not give is None.
    Of the "study" row only what the studies table does not know already is kept.
    Raises ResultsKept when there are results, KeyError for an unknown table or column.
    """
    unknown = set(tables) - {"study", *TABLES}
    if unknown:
        raise KeyError(f"no result table {', '.join(sorted(unknown))}; there are study, {', '.join(TABLES)}")
    if con.execute("SELECT 1 FROM kept.study_facts WHERE study_id = ?", [study_id]).fetchone():
        raise ResultsKept(f"study {study_id} has its results already; queue it again for new ones.")
    facts = dict(tables["study"][0]) if tables.get("study") else {}
    kept = {key: value for key, value in facts.items() if key not in STUDY_COLUMNS}
    insert_rows(con, "study_facts", [kept | {"study_id": study_id}])
    for name in TABLES:
        insert_rows(con, name, [{**row, "study_id": study_id} for row in tables.get(name, ())])
    return result_hash({name: tables.get(name, ()) for name in TABLES})


def load_results(con: "DuckDBPyConnection", study_id: int) -> dict[str, list[dict[str, Any]]]:
    """The tables of a finished study as they were stored: {"study": [row], "ranking": [rows], …}."""
    found = {"study": _study_row(con, study_id)}
    for name in TABLES:
        json_columns = [c for c, kind in column_types(con, name).items() if kind == "JSON"]
        query = f"SELECT * EXCLUDE (study_id) FROM kept.{name} WHERE study_id = ? ORDER BY rowid"
        found[name] = [_decoded(row, json_columns) for row in fetch_rows(con, query, [study_id])]
    return found


def result_hash(tables: Tables) -> str:
    """sha256 (hex) over the canonical JSON of result tables."""
    canonical = json.dumps(plain(tables), sort_keys=True)
    return hashlib.sha256(canonical.encode()).hexdigest()


def load_values(con: "DuckDBPyConnection", study_id: int, *, stage: str, kind: str = "value") -> "np.ndarray":
    """Values of all stored builds, shape (rows, builds), in order of build number; NaN where there is none.

    kind: "value" for the measures, or the name of another array given to store_chunk.
    """
    import numpy as np

    where = "study_id = ? AND stage = ? AND kind = ?"
    key = [study_id, stage, kind]
    shape = con.execute(
        f"SELECT coalesce(max(measure_no) + 1, 0), coalesce(max(build_no) + 1, 0) FROM kept.build_values"
        f" WHERE {where}",
        key,
    ).fetchone()
    values = np.full(shape, np.nan)
    for row in range(shape[0]):  # one row at a time keeps the memory near that of the answer
        query = f"SELECT build_no, value FROM kept.build_values WHERE {where} AND measure_no = ?"
        found = con.execute(query, [*key, row]).fetchnumpy()
        values[row, found["build_no"]] = np.ma.filled(found["value"], np.nan)
    return values


def load_status(con: "DuckDBPyConnection", study_id: int, *, stage: str) -> "np.ndarray":
    """Status of all stored builds, shape (builds,), uint8, in order of build number; 0 is assembled."""
    query = "SELECT status FROM kept.builds WHERE study_id = ? AND stage = ? ORDER BY build_no"
    return con.execute(query, [study_id, stage]).fetchnumpy()["status"]


def critical(con: "DuckDBPyConnection", *, best: int = 3) -> list[dict[str, Any]]:
    """Rows of critical_pivots: the best (1 to 3) sources a measure, of the newest study a revision."""
    query = "SELECT * FROM critical_pivots WHERE rank <= ? ORDER BY geometry, revision, measure_no, rank"
    return fetch_rows(con, query, [best])


def leading(con: "DuckDBPyConnection", *, most: int) -> tuple[int, list[dict[str, Any]]]:
    """(rows of critical_pivots, and by measure and drawing feature in how many revisions it is the strongest, most first)."""
    total = con.execute("SELECT count(*) FROM critical_pivots").fetchone()[0]
    query = """
        SELECT measure, source, count(*) AS revisions FROM critical_pivots
        WHERE "rank" = 1 AND NOT starts_with(source, 'alignment.') GROUP BY ALL ORDER BY revisions DESC, measure, source LIMIT ?
    """
    return total, fetch_rows(con, query, [most])


def holds(con: "DuckDBPyConnection", *, linkage: str | None = None, axle: str | None = None) -> list[dict[str, Any]]:
    """Sources whose verdict is `hold` in the newest judged study of a geometry's newest revision, over the catalog.

    A row a source: geometries (specs), since (UTC, when a study first said so), measures it leads (rank 1 to 3).
    linkage, axle: only these geometries.
    """
    query = """
        WITH judged AS (
            SELECT s.id, s.finished, s.final_stage, r.geometry_id, r.number, g.name || '@' || r.number AS spec
            FROM kept.studies s JOIN kept.revisions r ON r.id = s.revision_id JOIN kept.geometries g ON g.id = r.geometry_id
            WHERE s.state = 'done' AND (? IS NULL OR r.linkage = ?) AND (? IS NULL OR r.axle = ?)
              AND s.id IN (SELECT study_id FROM kept.verdicts)
        ), newest AS (
            SELECT * FROM judged
            QUALIFY row_number() OVER (PARTITION BY geometry_id ORDER BY number DESC, finished DESC, id DESC) = 1
        ), leads AS (
            SELECT n.id, k.source, list(k.measure ORDER BY k.measure_no) AS measures FROM newest n
            JOIN kept.ranking k ON k.study_id = n.id AND k.stage = n.final_stage AND k."rank" <= 3 GROUP BY ALL
        ), first_said AS (
            SELECT v.source, min(j.finished) AS since FROM judged j JOIN kept.verdicts v ON v.study_id = j.id
            WHERE v.verdict = 'hold' GROUP BY ALL
        )
        SELECT v.source, list(n.spec ORDER BY n.spec) AS geometries, any_value(f.since) AS since,
               list_distinct(flatten(list(coalesce(l.measures, [])))) AS measures
        FROM newest n JOIN kept.verdicts v ON v.study_id = n.id AND v.verdict = 'hold'
        JOIN first_said f ON f.source = v.source
        LEFT JOIN leads l ON l.id = n.id AND l.source = v.source
        GROUP BY v.source ORDER BY len(geometries) DESC, v.source
    """
    return fetch_rows(con, query, [linkage, linkage, axle, axle])


def final_stage(tables: Tables) -> str | None:
    """The stage at which the answer is read: after where it was run, else before."""
    stages = {row.get("stage") for name in ("ranking", "stats", "worst") for row in tables.get(name, ())}
    return "after" if "after" in stages else "before" if "before" in stages else None


def _study_row(con: "DuckDBPyConnection", study_id: int) -> list[dict[str, Any]]:
    query = """
        SELECT s.study AS id, s.title, s.geometry || '@' || s.revision AS geometry, s.method, s.size, s.seed,
               s.sides, s.state, coalesce(f.version, s.version) AS version, k.text,
               f.* EXCLUDE (study_id, version)
        FROM studies s JOIN kept.studies k ON k.id = s.study
        LEFT JOIN kept.study_facts f ON f.study_id = s.study
        WHERE s.study = ?
    """
    json_columns = [c for c, kind in column_types(con, "study_facts").items() if kind == "JSON"]
    return [_decoded(row, json_columns) for row in fetch_rows(con, query, [study_id])]


def _decoded(row: dict[str, Any], json_columns: Sequence[str]) -> dict[str, Any]:
    for name in json_columns:
        if isinstance(row.get(name), str):
            row[name] = json.loads(row[name])
    return row
