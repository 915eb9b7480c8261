"""The builds that a sampled method drew at one stage of a study, gathered from its tasks."""

from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True)
class Drawn:
    """values (M, N), NaN where a build has none; settings (A, N) mm and ran_out (A, N) of adjusters; status (N,), 0 = sound.

    rows: which of the builds are independent of each other, an index (n,) or a slice of all; none of a screening walk.
    """

    values: np.ndarray
    settings: np.ndarray
    ran_out: np.ndarray
    status: np.ndarray
    rows: np.ndarray | slice

    @property
    def has_independent(self) -> bool:
        return isinstance(self.rows, slice) or len(self.rows) > 0

    def independent(self):
        """(values, unassembled (n,), ran out (n,)) of the independent builds."""
        return self.values[:, self.rows], self.status[self.rows] > 0, self.ran_out[:, self.rows].any(axis=0)


def gathered(work, tasks, outcomes) -> Drawn | None:
    """The outcomes of "draws" tasks, filled in task by task so that none is held twice; None without tasks."""
    if not tasks:
        return None
    m, adjusters = len(work.study.measures), sum(len(h.bench.by) for h in work.response(tasks[0].stage).hands.values())
    ends = np.cumsum([0] + [work.builds(task) for task in tasks])
    n = int(ends[-1])
    values, settings = np.empty((m, n)), np.empty((adjusters, n))
    ran_out, status = np.empty((adjusters, n), bool), np.empty(n, np.uint8)
    for task, start, end in zip(tasks, ends[:-1], ends[1:], strict=True):
        outcome = outcomes[task.number]
        values[:, start:end], status[start:end] = outcome.values[:m], outcome.status
        settings[:, start:end] = outcome.values[m : m + adjusters]
        ran_out[:, start:end] = outcome.values[m + adjusters :] > 0
    return Drawn(values, settings, ran_out, status, _rows(work, n))


def _rows(work, n):
    rows = work.method.independent_rows(work.problem, work.study.size)
    return slice(None) if len(rows) == n else rows  # no copy of what may be large
