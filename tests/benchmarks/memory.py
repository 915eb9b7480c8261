"""Peak memory of a spread study of some size, printed in MiB with its time: `python -m tests.benchmarks.memory BUILDS`."""

import re
import sys
import tempfile
import time
from pathlib import Path

from catalog.store import Catalog
from study.crew import Crew
from study.runner import Watch, enqueue, work
from study.study_file import parse_study

STUDY = Path(__file__).parent / "sixteen-sources.toml"


def main(builds: int) -> None:
    """The sixteen-source study as `spread`, two tasks at a time: peak of this process and its helper together."""
    text = STUDY.read_text(encoding="utf-8").replace('"sobol"', '"spread"').replace("size = 1024", f"size = {builds}")
    with tempfile.TemporaryDirectory() as folder:
        store = Catalog(f"{folder}/c.duckdb")
        start = time.perf_counter()
        number = enqueue(store, parse_study(text, source="memory"), STUDY.parent, by="benchmark")
        with Crew(1) as crew:
            assert work(store, crew=crew, watch=Watch(), study_id=number) == [number]
            kib = sum(peak_kib(pid) for pid in ("self", *(helper.process.pid for helper in crew.helpers)))
        print(kib // 1024, round(time.perf_counter() - start, 1))


def peak_kib(process) -> int:
    """Greatest memory of a process so far; what it shares with others counts in full."""
    text = Path(f"/proc/{process}/status").read_text(encoding="ascii")
    return int(re.search(r"VmHWM:\s+(\d+)", text)[1])


if __name__ == "__main__":
    main(int(sys.argv[1]))
