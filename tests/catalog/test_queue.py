"""The queue: claims, takeover, chunks kept once, results kept for good."""

import subprocess
import sys
import threading
from pathlib import Path

import numpy as np
import pytest
from catalog_samples import queue_study, result_tables, with_study

from catalog.chunks import done_chunks, load_chunk, store_chunk
from catalog.queue import (
    StudyNotFound,
    cancel,
    claim,
    fail,
    finish,
    get,
    heartbeat,
    list_studies,
    release,
    worker_name,
)
from catalog.results import ResultsKept, critical, load_results, load_status, load_values, store_results

ROOT = Path(__file__).parents[2]
A, B = "far:1:a", "far:2:b"


def put(con, study, worker, chunk_no, *, stage="after", value=0.0, more=None):
    values = np.arange(8.0).reshape(2, 4) + value
    values[0, 1] = np.nan
    return store_chunk(
        con, study, worker, stage=stage, chunk_no=chunk_no, first_build=4 * chunk_no, values=values,
        status=np.array([0, 1, 0, 0]), seconds=0.5, more=more,
    )  # fmt: skip


def test_a_study_goes_through_the_queue(tmp_path):
    catalog, [first, second] = with_study(tmp_path / "a.duckdb", n=2)
    with catalog.write() as con:
        job = claim(con, A)
        assert (job.id, job.state, job.worker, job.geometry) == (first, "running", A, "example-front@1")
        assert claim(con, B).id == second and claim(con, "far:3:c") is None
        assert heartbeat(con, first, A, total=640) and not heartbeat(con, first, B)
        assert get(con, first).total == 640
    with catalog.write() as con:
        assert not finish(con, first, B, tables=result_tables())
        assert finish(con, first, A, tables=result_tables())
        assert not heartbeat(con, first, A) and not put(con, first, A, 0)
        assert fail(con, second, B, error="no kernel")
        assert get(con, second).error == "no kernel"
        assert [job.state for job in list_studies(con)] == ["done", "failed"]
        assert [job.id for job in list_studies(con, states=["done"])] == [first]
        assert claim(con, A) is None


def test_one_study_can_be_claimed_by_number(tmp_path):
    catalog, [first, second] = with_study(tmp_path / "a.duckdb", n=2)
    with catalog.write() as con:
        assert claim(con, A, study_id=second).id == second
        assert claim(con, B, study_id=second) is None
        assert get(con, first).state == "queued"


def test_a_study_is_taken_over_only_from_a_worker_that_is_gone(tmp_path):
    catalog, [study] = with_study(tmp_path / "a.duckdb")
    ended = subprocess.Popen([sys.executable, "-c", ""])
    ended.wait()
    here = worker_name().split(":")[0]
    with catalog.write() as con:
        claim(con, A)
        assert claim(con, B) is None
        con.execute("UPDATE kept.studies SET heartbeat = heartbeat - INTERVAL 61 SECONDS")
        assert put(con, study, A, 0)  # a finished chunk is a sign of life
        assert claim(con, B) is None
        con.execute("UPDATE kept.studies SET heartbeat = heartbeat - INTERVAL 61 SECONDS")
        assert claim(con, B).done == 4
        assert not put(con, study, A, 1) and done_chunks(con, study, stage="after") == {0}
        con.execute("UPDATE kept.studies SET worker = ?", [f"{here}:{ended.pid}:x"])
        mine = worker_name()
        assert claim(con, mine).worker == mine
        assert claim(con, worker_name()) is None  # this process lives


def test_a_released_study_is_queued_again_with_its_chunks(tmp_path):
    catalog, [study] = with_study(tmp_path / "a.duckdb")
    with catalog.write() as con:
        claim(con, A)
        put(con, study, A, 0)
        assert release(con, study, A) and not release(con, study, A)
        again = claim(con, B)
        assert again.done == 4 and done_chunks(con, study, stage="after") == {0}


def test_threads_never_claim_the_same_study(tmp_path):
    catalog, studies = with_study(tmp_path / "a.duckdb", n=4)
    claimed = []

    def work(worker):
        while True:
            with catalog.write() as con:
                job = claim(con, worker)
            if job is None:
                return
            claimed.append(job.id)

    threads = [threading.Thread(target=work, args=(f"far:{i}:t",)) for i in range(3)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert sorted(claimed) == studies


def test_processes_never_claim_the_same_study(tmp_path):
    catalog, studies = with_study(tmp_path / "a.duckdb", n=5)
    code = """
import sys
from catalog.queue import claim
from catalog.store import Catalog
while True:
    with Catalog(sys.argv[1]).write() as con:
        job = claim(con, sys.argv[2])
    if job is None:
        break
    print(job.id)
"""
    command = [sys.executable, "-c", code, str(catalog.path)]
    running = [
        subprocess.Popen([*command, name], cwd=ROOT, stdout=subprocess.PIPE, text=True) for name in (A, B)
    ]
    claimed = [int(line) for process in running for line in process.communicate()[0].split()]
    assert sorted(claimed) == studies and [process.returncode for process in running] == [0, 0]


def test_cancelling_stops_what_waits_or_runs_and_leaves_what_is_done(tmp_path):
    catalog, [done, running, waiting] = with_study(tmp_path / "a.duckdb", n=3)
    with catalog.write() as con:
        claim(con, A)
        finish(con, done, A, tables=result_tables())
        claim(con, A)
        assert cancel(con, [done, running, waiting]) == {
            done: "done",
            running: "cancelled",
            waiting: "cancelled",
        }
        assert not put(con, running, A, 0) and not heartbeat(con, running, A)
        assert not finish(con, running, A, tables=result_tables())
        assert load_results(con, running)["ranking"] == []
        with pytest.raises(StudyNotFound, match="study 77"):
            cancel(con, [77])


def test_a_chunk_is_kept_once_and_comes_back_bit_by_bit(tmp_path):
    catalog, [study] = with_study(tmp_path / "a.duckdb")
    demand = np.array([[0.1, -0.0, 1e-300, np.inf]])
    with catalog.write() as con:
        claim(con, A)
        assert put(con, study, A, 1, value=10.0, more={"demand": demand})
        assert put(con, study, A, 1, value=99.0)
        assert put(con, study, A, 0) and put(con, study, A, 0, stage="before")
        assert done_chunks(con, study, stage="after") == {0, 1}
        assert get(con, study).done == 12
        values = load_values(con, study, stage="after")
        nan = np.nan
        np.testing.assert_array_equal(values, [[0, nan, 2, 3, 10, nan, 12, 13], [4, 5, 6, 7, 14, 15, 16, 17]])
        assert load_status(con, study, stage="after").tolist() == [0, 1, 0, 0] * 2
        arrays, status = load_chunk(con, study, stage="after", chunk_no=1)
        assert arrays["demand"].tobytes() == demand.tobytes() and status.tolist() == [0, 1, 0, 0]
        np.testing.assert_array_equal(arrays["value"], values[:, 4:])


def test_results_come_back_as_stored_and_are_kept_for_good(tmp_path):
    catalog, [study] = with_study(tmp_path / "a.duckdb")
    tables = result_tables()
    tables["histogram"] = [
        {"stage": "after", "measure_no": 0, "left": 0.1, "right": 0.2, "count": np.int64(7)}
    ]
    tables["worst"] = [
        {"stage": "after", "measure_no": 0, "direction": "low", "value": np.nan, "error": None}
    ]
    with catalog.write() as con:
        claim(con, A)
        assert finish(con, study, A, tables=tables)
        found = load_results(con, study)
        for row, wanted in zip(found["ranking"], tables["ranking"], strict=True):
            assert {key: row[key] for key in wanted} == wanted
        assert found["ranking"][0]["verdict"] is None and found["ranking"][2]["tied"] is True
        assert found["stats"][0]["position"] == {"bump_mm": 5.0} and found["stats"][0]["builds"] == 640
        assert found["histogram"] == tables["histogram"] and found["worst"][0]["value"] is None
        facts = found["study"][0]
        assert (facts["geometry"], facts["builds"], facts["withheld"]) == ("example-front@1", 640, False)
        assert facts["stages"] == ["before", "after"] and facts["perfect"] is None
        assert get(con, study).final_stage == "after" and len(get(con, study).result_hash) == 64
        with pytest.raises(ResultsKept):
            store_results(con, study, tables)
        with pytest.raises(KeyError, match="no column"):
            store_results(con, 5, {"ranking": [{"colour": 1}]})
        with pytest.raises(KeyError, match="no result table"):
            store_results(con, 6, {"rankings": []})


def test_critical_pivots_are_the_best_three_of_the_newest_ranked_study(tmp_path):
    catalog, [old, new] = with_study(tmp_path / "a.duckdb", n=2)
    with catalog.write() as con:
        claim(con, A)
        finish(con, old, A, tables=result_tables(measures=5))
        claim(con, A)
        finish(con, new, A, tables=result_tables(stages=("before",)) | {"stats": []})
        third = queue_study(con, 1, title="without ranking")
        claim(con, A)
        finish(con, third, A, tables={"study": [{"builds": 1}], "stats": result_tables()["stats"]})
        rows = critical(con)
        assert [row["study"] for row in rows] == [new] * 6
        assert [row["rank"] for row in rows] == [1, 2, 3] * 2 and {row["stage"] for row in rows} == {"before"}
        assert con.execute("SELECT count(*) FROM indices WHERE final AND study = ?", [old]).fetchone() == (
            25,
        )
        assert con.execute("SELECT count(*) FROM spreads").fetchone() == (2,)
