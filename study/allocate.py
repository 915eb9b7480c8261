"""The cheapest process for every source that still gives the wanted share of good builds.

A mixed-integer linear programme on variances (`scipy.optimize.milp`): one process per source, for every measure limit
a row that keeps k standard deviations between the mean and the limit, jigs as binaries that the sources of a jig group
share. Its answer is built through the kernel; k is corrected and the programme solved again, five times at most.
"""

from dataclasses import dataclass, replace

import numpy as np
from scipy.optimize import Bounds, LinearConstraint, milp
from scipy.special import ndtri

from catalog.errors import WorkError
from study import zones
from study.limit_rows import LimitRows
from study.verdicts import OPEN, Share, field_with, good_flags, verdict_of

CORRECTIONS = 5
VERIFY_BUILDS = 4096
FRONTIER = (0.80, 0.90, 0.95, 0.98, 0.99, 0.995)


class NothingMeets(WorkError):
    """No listed combination of processes meets the wanted share."""


@dataclass(frozen=True)
class Option:
    """A process that a source may be made by: its zone, the jig's cost once, the cost per piece."""

    process: str
    zone: zones.Zone
    jig_cost: float
    piece_cost: float


@dataclass(frozen=True)
class Choice:
    """A combination: option number by source number, its cost for all cars, and its share of good builds, built."""

    chosen: dict[int, int]
    cost: float
    share: Share
    builds: int


class Allocation:
    """The programme of one study. options: source number → what it may be made by; the other sources stay as drawn."""

    def __init__(self, work, options: dict[int, list[Option]], *, cars: int):
        self.work, self.options, self.cars = work, options, cars
        self.pieces = cars * (1 if work.after.solid else 2)
        self.rows = LimitRows.of(work)
        self.places = [(s, k) for s in sorted(options) for k in range(len(options[s]))]
        self.jigs = sorted({(self._group(s), options[s][k].process) for s, k in self.places if options[s][k].jig_cost})

    def _group(self, source):
        """What shares a jig: the jig group that holds the source, else the source alone."""
        name = self.work.model.sources[source].name
        return next((jig.name for jig in self.work.study.jigs if name in jig.pivots), name)

    def cost_of(self, chosen) -> float:
        """Cost of a combination for all cars: pieces, and every jig that it needs once."""
        jigs = {
            (self._group(s), self.options[s][k].process): self.options[s][k].jig_cost for s, k in chosen.items()
        }  # fmt: skip
        return sum(self.pieces * self.options[s][k].piece_cost for s, k in chosen.items()) + sum(jigs.values())

    def cheapest(self, wanted: float) -> Choice:
        """The cheapest combination whose built share is at or above the wanted one, its interval too. Raises NothingMeets."""
        k, best, builds = -ndtri((1.0 - wanted) / max(self.rows.sides, 1)), None, 0
        low_k, high_k = 0.0, None
        for _ in range(CORRECTIONS):
            chosen = self._solve(k)
            if chosen is None:
                high_k, share = k, None
            else:
                share = self.built_share(chosen)
                builds += VERIFY_BUILDS
            if share is not None and verdict_of(share, wanted) == OPEN:
                found = Choice(chosen, self.cost_of(chosen), share, builds)
                best = found if best is None or found.cost < best.cost else best
                high_k = k
            elif share is not None:
                low_k = k
            k = 0.5 * (low_k + high_k) if high_k is not None else 1.25 * k
        if best is None:
            raise NothingMeets(
                f"no listed combination meets a good share of {100 * wanted:g} % (tried {CORRECTIONS} times): list tighter "
                "processes, narrow the alignment bands or widen the limits"
            )
        return replace(best, builds=builds)

    def frontier(self, shares=FRONTIER) -> list[Choice]:
        """Cheapest combinations for rising shares, each once: what one more step of money buys."""
        found = []
        for wanted in shares:
            try:
                choice = self.cheapest(wanted)
            except NothingMeets:
                break
            if all(choice.chosen != other.chosen for other in found):
                found.append(choice)
        return sorted(found, key=lambda choice: choice.cost)

    def built_share(self, chosen) -> Share:
        """Share of good builds of a combination, through the kernel."""
        changed = {s: self.options[s][k].zone for s, k in chosen.items()}
        good = good_flags(self.work, field_with(self.work.model, changed), builds=VERIFY_BUILDS)
        return Share.of(good)

    def _solve(self, k):
        """Option by source at the least cost with k standard deviations to every limit, or None."""
        n, m = len(self.places), len(self.jigs)
        objective = np.array([self.pieces * self.options[s][j].piece_cost for s, j in self.places])
        price = {(self._group(s), o.process): o.jig_cost for s in self.options for o in self.options[s]}
        objective = np.concatenate((objective, [price[jig] for jig in self.jigs]))
        constraints = [self._one_each(n, m), *self._jigs(n, m), *self._variances(n, m, k)]
        answer = milp(objective, constraints=constraints, integrality=np.ones(n + m), bounds=Bounds(0, 1))
        if not answer.success:
            return None
        picked = np.round(answer.x[:n]).astype(bool)
        return {s: j for (s, j), taken in zip(self.places, picked, strict=True) if taken}

    def _one_each(self, n, m):
        rows = np.zeros((len(self.options), n + m))
        for i, source in enumerate(sorted(self.options)):
            rows[i, [p for p, (s, _) in enumerate(self.places) if s == source]] = 1.0
        return LinearConstraint(rows, 1.0, 1.0)

    def _jigs(self, n, m):
        """A process with a jig is taken only with its jig: x ≤ y."""
        out = []
        for place, (s, j) in enumerate(self.places):
            jig = (self._group(s), self.options[s][j].process)
            if jig in self.jigs:
                row = np.zeros(n + m)
                row[place], row[n + self.jigs.index(jig)] = 1.0, -1.0
                out.append(LinearConstraint(row, -np.inf, 0.0))
        return out

    def _variances(self, n, m, k):
        """Σ variances ≤ (room / k)², the sources without a choice on the right side."""
        room = (np.maximum(self.rows.room, 0.0) / k) ** 2 - self.rows.fixed(self.options)
        if not len(room):
            return []
        weights = np.zeros((len(room), n + m))
        for place, (s, j) in enumerate(self.places):
            weights[:, place] = self.rows.variance(s, self.options[s][j].zone)
        scale = np.maximum(np.abs(room), 1e-12)[:, None]
        return [LinearConstraint(weights / scale, -np.inf, room / scale[:, 0])]
