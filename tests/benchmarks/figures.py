"""The figures this program is held to, measured in one run beside what a person would otherwise write.

    python -m tests.benchmarks.figures            two minutes
    python -m tests.benchmarks.figures --long     with a million builds and growth curves

Ratios count; absolute times depend on the machine. Nothing here fails a test: it prints what was reached.
"""

import os
import subprocess
import sys
import tempfile
import time
from pathlib import Path

os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")

import numpy as np
from scipy.optimize import root

from study.kernel.rows import residuals
from study.kernel.vectors import gibbs_matrix
from study.stations import Spot
from study.tasks import StudyWork
from tests.study.demo import study, wishbone

BUILDS = 4096
POSITIONS = np.linspace(-30.0, 30.0, 13)
LOOP_POSES = 40
RUN_STUDY = Path(__file__).parent / "sixteen-sources.toml"


def best(function, repeats=5):
    """Least of several wall times (s): the one least disturbed by others on the machine."""
    times = []
    for _ in range(repeats):
        start = time.perf_counter()
        function()
        times.append(time.perf_counter() - start)
    return min(times)


def pose_with_twists():
    """One pose with its three twists: the batch kernel against a loop of `scipy.optimize.root` over poses.

    The loop solves each pose from the nominal and takes its twists by central differences of further solutions.
    """
    work = StudyWork(wishbone(), study(errors='"*" = { plus_minus = 1.0 }\n"upright.hub_axis" = { tilt_deg = 0.05 }'))
    hand = work.after.hands["left"]
    errors = work.model.field.to_errors(np.random.default_rng(1).random((work.model.scalars, BUILDS)))
    block = hand.block(errors, np.zeros((0, BUILDS)))
    spots = [Spot(float(z), 0.0, 0.0) for z in POSITIONS]
    for spot in spots:
        hand.station(spot)

    def batch():
        for spot in spots:
            hand.view(block, spot, rates=("bump", "rack", "roll"))

    ours = best(batch) / (BUILDS * len(spots))
    theirs = best(lambda: _loop(hand, block, spots), repeats=2) / (LOOP_POSES * 7)
    return ours, theirs


def _loop(hand, block, spots):
    """LOOP_POSES builds: one pose each and six more for the differences over bump, roll and rack."""
    for build in range(LOOP_POSES):
        spot = spots[build % len(spots)]
        for d_bump, d_roll, d_rack in ((0, 0, 0), (1e-3, 0, 0), (-1e-3, 0, 0), (0, 1e-3, 0), (0, -1e-3, 0), (0, 0, 1e-3), (0, 0, -1e-3)):
            _root_pose(hand, block, build, Spot(spot.bump_mm + d_bump, spot.roll_deg + d_roll, spot.rack_mm + d_rack))


def _root_pose(hand, block, build, spot):
    rows, road = hand._rows_and_road(block, spot)
    one, one_road = rows.take([build]), road.take([build])

    def open_rows(x):
        return residuals(one, one_road, gibbs_matrix(x[3:, None]), x[:3, None])[:, 0]

    start = np.concatenate((hand.corner.origin, np.zeros(3)))
    return root(open_rows, start, tol=1e-10)


def whole_run():
    """Seconds of a whole `run` (16 sources, 1024 base, aligned Sobol', 12 measures, sheet), imports included and alone."""
    with tempfile.TemporaryDirectory() as folder:
        command = [sys.executable, "-m", "study.commands", "run", str(RUN_STUDY), "--catalog", f"{folder}/c.duckdb", "--sheet", f"{folder}/s.html"]
        quiet = {"stdout": subprocess.DEVNULL, "stderr": subprocess.DEVNULL}
        imports = "import study.commands.run_command, study.commands.ranking_tables, study.runner, study.sheet, study.handout, duckdb, altair, rich.progress"
        whole = best(lambda: subprocess.run(command, check=True, **quiet), repeats=2)
        alone = best(lambda: subprocess.run([sys.executable, "-c", imports], check=True, **quiet), repeats=2)
    return whole, alone


def analysis():
    """Indices with 100 resamples of 12 measures at once against SALib's own analysis measure by measure; greatest difference."""
    from SALib.analyze import sobol as salib

    from study.methods import sobol
    from study.methods.problem import Problem

    problem = Problem(np.arange(16), 16)
    values = np.random.default_rng(2).normal(size=(12, 1024 * 18)).cumsum(axis=0)
    asked = {"num_vars": 16, "names": [f"x{i}" for i in range(16)], "bounds": [[0, 1]] * 16}

    def loop():
        return [salib.analyze(asked, v, calc_second_order=False, num_resamples=100, seed=5) for v in values]

    ours = best(lambda: sobol.analyse(problem, values, seed=5))
    found, theirs = sobol.analyse(problem, values, seed=5), best(loop, repeats=2)
    gap = max(np.abs(found.st[i] - one["ST"]).max() for i, one in enumerate(loop()))
    return ours, theirs, gap


def two_hands():
    """Wall time of all tasks of a study of 8192 base builds in this process alone, against it and one helper that is ready."""
    from dataclasses import replace

    from study.crew import Crew
    from study.plain_work import to_plain
    from study.study_file import read_study

    text = RUN_STUDY.read_text(encoding="utf-8").replace("size = 1024", "size = 8192")
    asked = replace(read_study(RUN_STUDY), size=8192, text=text)
    work = StudyWork(wishbone(), asked)

    def here(task):
        return work.run(task), 0.0

    def on(crew):
        with crew.of(here, lambda: to_plain(work.geometry, asked), helpers=crew.size) as hands:
            for future in [hands.submit(task) for task in work.tasks]:
                future.result()

    with Crew(1) as pair:
        pair.start(1)
        while not pair.helpers[0].is_ready:
            time.sleep(0.05)
        on(pair)
        return best(lambda: on(Crew(0)), repeats=2), best(lambda: on(pair), repeats=2)


def start_of_the_command():
    """Seconds of `--help` as a process of its own."""
    return best(lambda: subprocess.run([sys.executable, "-m", "study.commands", "--help"], check=True, stdout=subprocess.DEVNULL))


def memory(builds):
    """(peak MiB, seconds) of a spread study of so many builds, in a process of its own."""
    found = subprocess.run([sys.executable, "-m", "tests.benchmarks.memory", str(builds)], check=True, capture_output=True, text=True)
    peak, seconds = found.stdout.split()
    return float(peak), float(seconds)


def critical_over(geometries):
    """Seconds of what `critical` asks of a catalog of so many geometries with 3 studies each, opening included."""
    from catalog import results
    from tests.benchmarks.crowded_catalog import make

    with tempfile.TemporaryDirectory() as folder:
        store = make(f"{folder}/c.duckdb", geometries=geometries)

        def ask():
            with store.read() as con:
                results.holds(con)
                results.leading(con, most=60)

        return best(ask)


ALL, ONE = '"*" = { plus_minus = 1.0 }', '"tie_rod.length" = { length = 1.0 }'
SOME = '"chassis.*" = { plus_minus = 1.0 }'


def growth():
    """(what, how many, microseconds a build) of the response against builds, sources and positions: each line else alike."""
    for builds in (512, 4096, 16384, 65536):
        yield "builds", builds, _micro(builds=builds)
    for errors in (ONE, SOME, ALL):
        yield "scalars of sources", *_micro(errors=errors, count=True)
    for positions in (3, 13, 49, 99):
        yield "positions", positions, _micro(positions=positions)


def _micro(*, builds=4096, positions=13, errors=ALL, count=False):
    sweep = f'[[measures]]\nof = "toe_deg"\nover = {{ bump = [-30, 30, {positions}] }}\ntake = "range"\n'
    work = StudyWork(wishbone(), study(errors=errors, measures=sweep))
    drawn = work.model.field.to_errors(np.random.default_rng(3).random((work.model.scalars, builds)))
    micro = 1e6 * best(lambda: work.after.evaluate(drawn), repeats=3) / builds
    return (work.model.scalars, micro) if count else micro


def main():
    rows = []
    ours, theirs = pose_with_twists()
    rows.append(("pose with all its twists, 4096 builds x 13 positions", f"{1e6 * ours:.2f} us, {theirs / ours:.0f} x the loop", "500 x", theirs / ours >= 500))
    whole, alone = whole_run()
    rows.append(("whole run, 16 sources, 1024 base, 12 measures, sheet", f"{whole - alone:.2f} s after {alone:.2f} s of imports", "5 s", whole - alone < 5))
    ours, theirs, gap = analysis()
    rows.append(("indices of 12 measures at once, 100 resamples", f"{theirs / ours:.0f} x SALib's loop, differs by {gap:.0e}", "10 x", theirs / ours >= 10 and gap < 1e-12))
    one, two = two_hands()
    rows.append(("two tasks at a time (--threads 2) against one", f"{one / two:.2f} x", "1.6 x", one / two >= 1.6))
    seconds = start_of_the_command()
    rows.append(("start of the command, --help", f"{seconds:.2f} s", "0.4 s", seconds < 0.4))
    seconds = critical_over(1000)
    rows.append(("critical over 1,000 geometries with 3 studies each", f"{seconds:.2f} s", "0.3 s", seconds < 0.3))
    most = 1_000_000 if "--long" in sys.argv else 131_072
    held = {builds: memory(builds) for builds in (16_384, 131_072, most)}
    peak, took = held[most]
    rows.append((f"memory, {most:,} builds", f"{peak:.0f} MiB with a helper, {took:.0f} s", "500", peak < 500))
    for what, found, wanted, reached in rows:
        print(f"{what:<56} {found:<44} wanted {wanted:<6} {'reached' if reached else 'MISSED'}")
    if "--long" in sys.argv:
        for builds, (mib, took) in held.items():
            print(f"growth, memory          {builds:>9,} builds     {mib:6.0f} MiB in all, {took:.0f} s")
        for what, many, micro in growth():
            print(f"growth, {what:<18} {many:>6,} {micro:8.1f} us a build (toe range over bump, before alignment)")
        for geometries in (10, 100, 1000):
            print(f"growth, geometries      {geometries:>6,} {critical_over(geometries):8.3f} s for `critical`")


if __name__ == "__main__":
    main()
