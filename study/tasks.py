"""The work of a study cut into tasks, each a pure function of plain data: what threads run and a kill may interrupt.

A task belongs to a stage and has a kind: "effects" (the batch of central differences about the drawing), "draws" (some
blocks of the method's sample), "curves" (builds along bump, roll and rack), "worst" (the search for the worst build),
"lots" (whole lots of cars, each lot built in the same jigs), "verdict" (some sources, each alone in its next looser process).
Its outcome is one array (rows, builds) and a status (builds,).
"""

from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from catalog.errors import InputError
from study.bands import builds_along
from study.methods import METHODS, SAMPLED, linear, spread
from study.methods.problem import Problem
from study.position_words import position_text
from study.response import BLOCK, Response, requests_of
from study.smooth import Smooth
from study.stations import PositionError, Spot
from study.study_measures import Measure
from study.verdicts import AS_DRAWN, VERDICT_BUILDS, flags_alone, judged

BUILDS_PER_TASK = BLOCK
CURVE_BUILDS = 256
SMOOTH = ("sobol", "morris")  # methods that split variance: taken without the jumps of stepped adjusters
LOTS, LOT_BUILDS = 256, 65_536  # as many lots as the builds allow, LOTS at the most and 16 at the least
CURVE_KEYS = {
    "bump": ("toe_deg", "camber_deg", "roll_centre_height_mm"),
    "roll": ("toe_deg", "camber_deg"),
    "rack": ("toe_deg", "camber_deg"),
}
CURVE_TRAVEL = {"bump": 30.0, "roll": 2.0, "rack": 20.0}
CURVE_POSITIONS = 13


class LimitError(InputError):
    """Limits on a measure that has no value."""


@dataclass(frozen=True)
class Task:
    """One chunk of work. first, count: blocks of the sample (draws) or sources (verdict, from AS_DRAWN), else 0 and 1."""

    number: int
    stage: str
    kind: str
    first: int
    count: int


@dataclass(frozen=True)
class Outcome:
    """values (rows, builds) and status (builds,); for kind "draws" the rows are measures, settings, ran_out."""

    values: np.ndarray
    status: np.ndarray


def stages_of(study) -> tuple[str, ...]:
    """The stages a study runs, the last being the one its answer is read at."""
    return ("before", "after") if study.alignment is not None else ("before",)


def even_cuts(total: int, most: int) -> list[tuple[int, int]]:
    """(first, count) of as few cuts of at most `most` as possible, as alike as possible: threads end together."""
    parts = -(-total // most)
    ends = [total * i // parts for i in range(parts + 1)]
    return [(a, b - a) for a, b in zip(ends[:-1], ends[1:], strict=True)]


class StudyWork:
    """A study on its geometry, ready to run: made once, read-only afterwards, shared by the threads."""

    def __init__(self, geometry, study):
        _keep_freed_memory()
        self.geometry, self.study = geometry, study
        self.stages = stages_of(study)
        self.method = METHODS[study.method]
        self.after = Response(geometry, study, stage=self.stages[-1])
        self.model = self.after.model
        self.warnings: list[str] = []
        self._judge_limits()

    def _judge_limits(self):
        """Refuse limits on what the drawing itself has no value of. Raises LimitError."""
        nominal = self.after.evaluate(np.zeros((self.model.scalars, 1)))
        for measure, value in zip(self.study.measures, nominal.values[:, 0], strict=True):
            if measure.limits and not np.isfinite(value):
                raise LimitError(
                    f'measure "{measure.name}": has limits, but {measure.of} has no value on this geometry there '
                    f"({position_text(measure)}); give it a position where it is defined, or leave it out"
                )
            if not np.isfinite(value):
                self.warnings.append(f"{measure.name} has no value on the drawing ({position_text(measure)})")
            elif measure.limits and not measure.limits[0] <= value <= measure.limits[1]:
                low, high = measure.limits
                self.warnings.append(f"{measure.name}: the drawing's own {value:.4g} is outside its limits {low:g} to {high:g}")
        if self.model.perfect:
            self.warnings.append(f"held perfect, since [errors] does not name them: {', '.join(self.model.perfect)}")

    @cached_property
    def before(self) -> Response:
        return self.after if len(self.stages) == 1 else Response(self.geometry, self.study, stage="before")

    @cached_property
    def tasks(self) -> tuple[Task, ...]:
        """All tasks in order; the same study always gives the same list."""
        found = []
        for stage in reversed(self.stages):
            cuts = [("effects", 0, 1)]
            if self.study.method in SAMPLED:
                cuts += [("draws", first, count) for first, count in self._cuts()]
            elif self.study.method == "worst":
                cuts.append(("worst", 0, 1))
            if stage == self.stages[-1]:
                cuts.append(("curves", 0, 1))
                cuts += [("lots", 0, 1)] if self.lots else []
                if judged(self.study):
                    each = even_cuts(1 + len(self.model.sources), max(1, BUILDS_PER_TASK // VERDICT_BUILDS))
                    cuts += [("verdict", AS_DRAWN + first, count) for first, count in each]
            found += [(stage, *cut) for cut in cuts]
        return tuple(Task(i, *task) for i, task in enumerate(found))

    @property
    def lots(self) -> int:
        """How many lots of `cars` cars are built to tell the chance that a whole lot is good; 0 where no jig is shared."""
        shared = any(jig.varies == "once" for jig in self.study.jigs)
        limited = any(measure.limits for measure in self.study.measures)
        if not (shared and limited and self.study.cars):
            return 0
        return max(16, min(LOTS, LOT_BUILDS // self.study.cars))

    def _cuts(self):
        block = self.method.block(self.problem)
        blocks = self.method.builds(self.problem, self.study.size) // block
        return even_cuts(blocks, max(1, BUILDS_PER_TASK // block))

    def builds(self, task: Task) -> int:
        """How many builds a task runs: of a search those it starts with, of a verdict those that it may need."""
        if task.kind == "draws":
            return task.count * self.method.block(self.problem)
        if task.kind == "curves":
            return CURVE_BUILDS + 1
        if task.kind == "lots":
            return self.lots * self.study.cars
        if task.kind == "verdict":
            return task.count * VERDICT_BUILDS
        return 1 + 2 * self.model.scalars

    def kept_builds(self, task: Task) -> int:
        """How many builds a task's outcome holds."""
        return 1 + self.model.scalars if task.kind == "worst" else self.builds(task)

    def first_build(self, task: Task) -> int:
        """Number of a task's first build among those of its kind."""
        return task.first * self.method.block(self.problem) if task.kind == "draws" else 0

    def response(self, stage) -> Response:
        return self.after if stage == self.stages[-1] else self.before

    def run(self, task: Task) -> Outcome:
        """Do one task."""
        return getattr(self, f"_run_{task.kind}")(task)

    def _run_effects(self, task):
        errors, _ = linear.steps(self.model.field.sd())
        found = self.stepless(task.stage).evaluate(errors)
        return Outcome(found.positions, found.status)

    def stepless(self, stage) -> Response:
        """The response that the linear model is taken of: adjusters without steps."""
        if not any(a.step_mm for a in self.study.alignment or ()):
            return self.response(stage)
        return self._stepless if stage == "after" else self.response(stage)

    @cached_property
    def _stepless(self):
        return self.after.asking(stepless=True)

    @cached_property
    def smooth(self) -> Smooth:
        """The study at its last stage without steps: what shares are taken of."""
        return Smooth(self.model, self.stepless(self.stages[-1]))

    @property
    def problem(self) -> Problem:
        """The scalars that the method draws: for shares of variance the residuals of stepped adjusters too."""
        return self.smooth.problem if self.study.method in SMOOTH else self.model.problem

    def _run_draws(self, task):
        unit = self.method.draw(self.problem, size=self.study.size, seed=self.study.seed, first=task.first, count=task.count)
        smooth = self.study.method in SMOOTH
        field = self.smooth.field if smooth else self.model.field
        errors = (field.walk if getattr(self.method, "WALKS", False) else field.to_errors)(unit.T)
        if smooth and task.stage == "after":
            found = self.smooth.evaluate(errors)
        else:
            found = self.response(task.stage).evaluate(errors[: self.model.scalars])
        return Outcome(np.concatenate((found.values, found.settings, found.ran_out)), found.status)

    def _run_lots(self, task):
        """Values and stops of lots × cars builds; the scalars of jigs that are made once are alike within a lot."""
        cars, scalars = self.study.cars, Problem(np.zeros(self.model.scalars, int), 1)
        size = self.lots * cars
        unit = spread.draw(scalars, size=size, seed=self.study.seed + 2, first=0, count=size).T
        once = {f"jig.{jig.name}{tail}" for jig in self.study.jigs if jig.varies == "once" for tail in ("", ".turn")}
        for source in self.model.sources:
            for rows in source.columns if source.name in once else ():
                unit[list(rows)] = np.repeat(unit[list(rows), ::cars], cars, axis=1)
        found = self.response(task.stage).evaluate(self.model.field.to_errors(unit))
        return Outcome(np.concatenate((found.values, found.settings, found.ran_out)), found.status)

    @cached_property
    def judge(self) -> Response:
        """The response of the limited measures alone: what good builds are told by."""
        limited = tuple(measure for measure in self.study.measures if measure.limits)
        others = tuple(measure for measure in self.study.measures if not measure.limits)
        return self.after.asking(limited, visits=others)

    def _run_verdict(self, task):
        """Flags of good builds (1, count × N), source by source loosened alone; NaN where none was needed."""
        flags, status = flags_alone(self, range(task.first, task.first + task.count))
        return Outcome(flags.reshape(1, -1), status.ravel())

    def _run_worst(self, task):
        """Rows: per measure and direction the value, then the errors; last the builds run and those without a value."""
        response = self.response(task.stage)
        if self.smooth.residuals and task.stage == "after":
            found = self._worst_by_steps(response, self.smooth)
        else:
            found = self.method.search(lambda e: response.evaluate(e).values, self.model.field, seed=self.study.seed)
        rows = np.concatenate((found.values[:, :, None], found.errors), axis=2)
        counts = np.repeat([[float(found.builds)], [float(found.unassembled)]], rows.shape[2], axis=1)
        return Outcome(np.concatenate((rows.reshape(-1, rows.shape[2]), counts)), np.zeros(rows.shape[2], np.uint8))

    def _worst_by_steps(self, response, smooth):
        """Search without steps, what a step leaves being further scalars; then the worst of real builds about there."""
        found = self.method.search(lambda e: smooth.evaluate(e).values, smooth.field, seed=self.study.seed)
        found = replace(found, errors=found.errors[:, :, : self.model.scalars])
        return self.method.confirm(lambda e: response.evaluate(e).values, self.model.field, found, seed=self.study.seed)

    # --- curves

    @cached_property
    def curve_measures(self) -> tuple[Measure, ...]:
        """The measures of the curves: each of CURVE_KEYS swept as far as the nominal reaches (at most CURVE_TRAVEL)."""
        found = []
        for axis, keys in CURVE_KEYS.items():
            reach = self._reach(axis)
            if reach:
                steps = tuple(float(x) for x in np.linspace(-reach, reach, CURVE_POSITIONS))
                found += [
                    Measure(f"{axis}:{key}", key, "left", 0.0, 0.0, 0.0, axis, steps, "range", None) for key in keys
                ]
        return tuple(found)

    def _reach(self, axis):
        hands = self.after.hands.items()
        if axis == "rack" and not all(hand.corner.has_rack for _, hand in hands):
            return 0.0
        travel = CURVE_TRAVEL[axis]
        for _ in range(4):
            try:
                for name, hand in hands:
                    for end in (-travel, travel):
                        at = {"bump": 0.0, "roll": 0.0, "rack": 0.0} | {axis: end if axis == "bump" or name == "left" else -end}
                        hand.station(Spot(at["bump"], at["roll"], at["rack"]))
                return travel
            except PositionError:
                travel /= 2.0
        return 0.0

    def _run_curves(self, task):
        found = builds_along(self.after.asking(self.curve_measures), seed=self.study.seed, count=CURVE_BUILDS)
        return Outcome(found.positions, found.status)

    @cached_property
    def position_slices(self) -> tuple[slice, ...]:
        """Rows of an "effects" outcome that belong to each measure."""
        counts = np.cumsum([0] + [len(requests_of(m)) for m in self.study.measures])
        return tuple(slice(int(a), int(b)) for a, b in zip(counts[:-1], counts[1:], strict=True))


def _keep_freed_memory():
    """Let the C library keep freed memory for the next array instead of giving it back page by page.

    glibc raises its threshold to the size of the largest block freed so far; the kernel's arrays of a few megabytes
    then stop costing page faults (a third of its time). Elsewhere this is one array made and dropped.
    """
    np.empty(2**25 - 2**14, np.uint8)
