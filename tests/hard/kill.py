"""Workers killed at random moments while others queue and ask: no chunk lost, none counted twice, the same result.

    python -m tests.hard.kill --times 100
"""

import argparse
import random
import signal
import sys
import threading
import time
from pathlib import Path

from tests.hard.shop import Shop, in_a_shop


def untouched(shop: Shop, *, size: int) -> int:
    """The number of the study, run without any interruption."""
    number = shop.ask(shop.study(size=size))
    code, out, err = shop.do("work", "--threads", "2")
    shop.expect("uninterrupted run ends well", code == 0, err)
    return number


class Others(threading.Thread):
    """Queues studies and asks the catalog in processes of its own, until it is told to stop."""

    def __init__(self, shop: Shop):
        super().__init__(daemon=True)
        self.shop, self.stop, self.queued = shop, threading.Event(), []
        self.path = shop.study("other", size=8, seed=2)

    def run(self):
        turn = 0
        while not self.stop.is_set():
            turn += 1
            words = ("queue", self.path, "--json") if turn % 4 == 0 else ("studies", "--json")
            words = ("sql", "SELECT count(*) FROM studies", "--csv") if turn % 4 == 2 else words
            code, out, err = self.shop.do(*words)
            if self.shop.expect("commands beside", code == 0, f"{words[0]}: {err}") and words[0] == "queue":
                number = out.split('"study":')[1].split(",")[0]
                code, out, err = self.shop.do("cancel", number)
                self.shop.expect("commands beside", code == 0, f"cancel: {err}")
            self.stop.wait(0.2)


def kill(shop: Shop, *, times: int, size: int, seed: int, pairs: bool = True) -> None:
    """Kill workers `times` times, two at once every third time; then let one finish and compare."""
    chance, first = random.Random(seed), untouched(shop, size=size)
    numbers, kills, grown, twice, helped = [], 0, 0, 0, 0
    others = Others(shop)
    others.start()
    current = None
    while kills < times:
        if current is None or shop.job(current).state == "done":
            current = shop.ask(shop.study(size=size))
            numbers.append(current)
        before = shop.chunks(current)
        helpers = kills % 4 == 3
        workers = [shop.start("work", "--threads", "2", pause=0.05, helpers=helpers) for _ in range(1 + (pairs and kills % 3 == 2))]
        twice, helped = twice + len(workers) - 1, helped + helpers
        _let_run(shop, current, len(before), kills % 3, chance)
        for process in workers:
            alive = process.poll() is None
            process.send_signal(signal.SIGKILL)
            process.communicate()
            kills += alive
        after = shop.chunks(current)
        shop.expect("kept chunks stay after a kill", set(before) <= set(after), f"study {current}")
        shop.expect("kept once", len({c[:2] for c in after}) == len(after), f"study {current}")
        grown += len(after) > len(before)
    others.stop.set()
    others.join()
    code, out, err = shop.do("work", "--threads", "2")
    shop.expect("a dead worker's study is taken over", code == 0 and shop.job(current).state == "done", out + err)
    _compare(shop, first, numbers)
    shop.expect("no helper outlives its worker", not _helpers_left(), _helpers_left())
    print(
        f"{kills} kills ({twice} rounds with two workers, {helped} with helper processes, {grown} rounds got chunks in), "
        f"{len(numbers)} studies"
    )


def _helpers_left(*, seconds=10.0) -> list[str]:
    """Numbers of helper processes that still run after a while, where the system lists processes in /proc."""
    end = time.monotonic() + seconds
    while found := [p.parent.name for p in Path("/proc").glob("[0-9]*/cmdline") if b"study.crew" in _read(p)]:
        if time.monotonic() > end:
            break
        time.sleep(0.2)
    return found


def _read(path: Path) -> bytes:
    try:
        return path.read_bytes()
    except OSError:  # it has ended meanwhile
        return b""


def _let_run(shop: Shop, number: int, kept: int, mode: int, chance) -> None:
    """Wait for a moment to kill at: soon after the start, soon after the claim, or soon after a chunk."""
    end, worker = time.monotonic() + 10.0, shop.job(number).worker
    while mode and time.monotonic() < end:
        job = shop.job(number)
        if job.state == "done" or (job.worker != worker if mode == 1 else len(shop.chunks(number)) > kept):
            break
        time.sleep(0.1)
    time.sleep(chance.uniform(0.0, 1.0))


def _compare(shop: Shop, first: int, numbers: list[int]) -> None:
    wanted, kept = shop.job(first), shop.chunks(first)
    for number in numbers:
        job = shop.job(number)
        shop.expect("result as without kills", job.result_hash == wanted.result_hash, f"study {number}: {job.state} {job.error}")
        shop.expect("chunks as without kills", shop.chunks(number) == kept, f"study {number}")
        shop.expect("builds counted once", job.done == job.total == wanted.done, f"study {number}: {job.done} of {job.total}")
    shop.expect_sound()


def end_politely(shop: Shop, *, times: int, seed: int) -> None:
    """SIGINT and SIGTERM at random moments of the work: the end within two seconds, the study queued again."""
    chance, longest = random.Random(seed), 0.0
    for turn in range(times):
        number = shop.ask(shop.study("long", size=2048, seed=turn))
        process = shop.start("work", "--threads", "2", helpers=turn % 2 == 0)
        while shop.job(number).state != "running":
            time.sleep(0.1)
        time.sleep(chance.uniform(0.0, 1.5))
        process.send_signal((signal.SIGINT, signal.SIGTERM)[turn % 2])
        start = time.monotonic()
        out, err = process.communicate(timeout=60)
        took = time.monotonic() - start
        longest = max(longest, took)
        shop.expect("ends within 2 s", took <= 2.0, f"{took:.1f} s")
        shop.expect("exit code 1 and what to do", process.returncode == 1 and "goes on" in out, out + err)
        job = shop.job(number)
        shop.expect("study is queued again", job.state == "queued" and job.worker is None, job.state)
        shop.do("cancel", number)
    shop.expect_sound()
    print(f"{times} requests to stop, the longest took {longest:.1f} s")


def main() -> int:
    asked = argparse.ArgumentParser(description=__doc__)
    asked.add_argument("--times", type=int, default=100, help="kills (default 100)")
    asked.add_argument("--stops", type=int, default=10, help="polite requests to stop (default 10)")
    asked.add_argument("--size", type=int, default=256, help="size of the study (default 256)")
    asked.add_argument("--seed", type=int, default=1, help="of the moments (default 1)")
    given = asked.parse_args()

    def both(shop):
        kill(shop, times=given.times, size=given.size, seed=given.seed)
        end_politely(shop, times=given.stops, seed=given.seed)

    return in_a_shop(both)


if __name__ == "__main__":
    sys.exit(main())
