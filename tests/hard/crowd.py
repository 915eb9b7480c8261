"""One worker and a crowd of processes that add, queue, ask and cancel: nobody is refused, nobody waits long.

    python -m tests.hard.crowd --seconds 60 --people 8
"""

import argparse
import json
import random
import sys
import threading
import time

from tests.hard.shop import Shop, in_a_shop
from tests.study.small_studies import DEMO

MOST_WAIT_S = 20.0  # the program's own bound


class Person(threading.Thread):
    """One command after the other, each in a process of its own."""

    def __init__(self, shop: Shop, number: int, end: float):
        super().__init__(daemon=True)
        self.shop, self.chance, self.end, self.number = shop, random.Random(number), end, number
        self.mine, self.took, self.failures = [], {}, []

    def run(self):
        while time.monotonic() < self.end:
            kind = self.chance.choice(("add", "queue", "queue", "studies", "sql", "cancel"))
            if kind == "cancel" and not self.mine:
                continue
            start = time.monotonic()
            code, out, err = self.shop.do(kind, *self._words(kind))
            self.took.setdefault(kind, []).append(time.monotonic() - start)
            if code or "Traceback" in err:
                self.failures.append(f"{kind}: exit {code}: {err.strip()}")
            elif kind == "queue":
                self.mine.append(json.loads(out)["study"])

    def _words(self, kind) -> tuple:
        if kind == "add":
            path = self.shop.folder / f"person-{self.number}.toml"
            text = DEMO.read_text(encoding="utf-8").replace("156.5", f"{156.5 + self.chance.randint(1, 999) / 1000}")
            path.write_text(text.replace('name = "front-wishbone"', f'name = "car-{self.number}"'), encoding="utf-8")
            return (path, "--why", "crowd")
        if kind == "queue":
            return (self.shop.study(f"ask-{self.number}", size=self.chance.choice((8, 64)), seed=self.number), "--json")
        if kind == "sql":
            return ("SELECT state, count(*) FROM studies GROUP BY state",)
        return (self.mine.pop(),) if kind == "cancel" else ("--json",)


def crowd(shop: Shop, *, seconds: float, people: int) -> None:
    """Let them all at one catalog, then run what is left and compare the counts."""
    shop.ask(shop.study(size=512))
    end = time.monotonic() + seconds
    there = [Person(shop, number, end) for number in range(people)]
    for person in there:
        person.start()
    rounds = 0
    while time.monotonic() < end or any(person.is_alive() for person in there):
        code, out, err = shop.do("work", "--threads", "1")
        rounds += 1
        shop.expect("worker ends well", code == 0 and "Traceback" not in err, err)
    for person in there:
        person.join()
    _tell(shop, there)
    code, out, err = shop.do("work")
    left = [row for row in json.loads(shop.do("studies", "--json")[1]) if row["state"] not in ("done", "cancelled")]
    shop.expect("nothing is left over", code == 0 and not left, f"{err}{left}")
    shop.expect_sound()


def _tell(shop: Shop, there) -> None:
    for kind in ("add", "queue", "studies", "sql", "cancel"):
        took = sorted(t for person in there for t in person.took.get(kind, ()))
        if took:
            print(f"{len(took):6}  {kind}: median {took[len(took) // 2]:.1f} s, longest {took[-1]:.1f} s")
            shop.expect("kinds of command with bounded waits", took[-1] < MOST_WAIT_S, f"{kind} {took[-1]:.1f} s")
    for person in there:
        for failure in person.failures:
            shop.expect("no failure shown", False, failure)
    shop.expect("people without a failure", not any(person.failures for person in there))


def main() -> int:
    asked = argparse.ArgumentParser(description=__doc__)
    asked.add_argument("--seconds", type=float, default=60.0)
    asked.add_argument("--people", type=int, default=8)
    given = asked.parse_args()
    return in_a_shop(lambda shop: crowd(shop, seconds=given.seconds, people=given.people))


if __name__ == "__main__":
    sys.exit(main())
