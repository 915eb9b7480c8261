"""Peak memory of a spread study of some size, printed in MiB with its time: `python -m tests.benchmarks.memory BUILDS`."""

import re
import resource
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
    """The sixteen-source study as `spread`, its sweeps cut to three positions, run on two threads."""
    text = STUDY.read_text(encoding="utf-8").replace('"sobol"', '"spread"').replace("size = 1024", f"size = {builds}")
    text = re.sub(r"(bump = \[-?\d+, \d+), \d+\]", r"\1, 3]", text)
    with tempfile.TemporaryDirectory() as folder:
        store = Catalog(f"{folder}/c.duckdb")
        start = time.perf_counter()
        number = enqueue(store, parse_study(text, source="memory"), STUDY.parent, by="benchmark")
        assert work(store, crew=Crew(1), watch=Watch(), study_id=number) == [number]
        print(resource.getrusage(resource.RUSAGE_SELF).ru_maxrss // 1024, round(time.perf_counter() - start, 1))


if __name__ == "__main__":
    main(int(sys.argv[1]))
