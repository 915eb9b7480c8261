"""What the workshop re-sets on every build: toe, camber, caster, each by its adjuster, solved together.

An adjuster is a linear move of the parts' features (a link longer, a mount shimmed outboard), so it enters a build the
way an error does. The targets are the nominal's own angles at design plus what the workshop leaves. The solution is a
quasi-Newton iteration per build: it starts from the nominal's exact neighbourhood and improves its matrix by Broyden's
rank-one update (C. G. Broyden, Math. Comp. 19, 1965), so it ends on the true, nonlinear angles.
"""

from dataclasses import dataclass

import numpy as np

from catalog.errors import InputError
from study.assembly import ARM_PIVOTS, Corner

ANGLES = ("toe", "camber", "caster")
TOLERANCE_DEG = 1e-9
MOST_PASSES = 12
LEAST_WAY_MM = 1e-6
ALIGNED, NOT_ALIGNED = 0, 3


class AlignmentError(InputError):
    """An alignment that its geometry cannot have."""


@dataclass(frozen=True)
class Bench:
    """The adjusters of one corner. moves: per adjuster ((feature, direction (k,)), …) per mm; step, reach (A,), inf/0 if none."""

    targets: tuple[str, ...]
    by: tuple[str, ...]
    moves: tuple[tuple[tuple[str, np.ndarray], ...], ...]
    step: np.ndarray
    reach: np.ndarray

    def extra(self, settings):
        """Feature errors (feature, (k, N)) of settings (A, N) mm."""
        return [
            (feature, direction[:, None] * settings[i])
            for i, moves in enumerate(self.moves)
            for feature, direction in moves
        ]


def bench_of(corner: Corner, study) -> Bench:
    """The adjusters that a study names, on this corner. Raises AlignmentError."""
    chosen = [adjuster for adjuster in study.alignment or () if adjuster.by is not None]
    known = adjusters_of(corner)
    if chosen and corner.solid:
        raise AlignmentError(
            f"alignment.{chosen[0].target}: a solid axle's wheels stand as the axle was made and are not set; "
            "leave it out ([alignment] may hold ride_height)"
        )
    for adjuster in chosen:
        if adjuster.by not in known:
            raise AlignmentError(
                f'alignment.{adjuster.target}: by = "{adjuster.by}" is no adjuster of this {corner.linkage}; '
                f"it has {', '.join(sorted(known)) or 'none'}"
            )
    return Bench(
        tuple(a.target for a in chosen),
        tuple(a.by for a in chosen),
        tuple(tuple(known[a.by]) for a in chosen),
        np.array([a.step_mm or 0.0 for a in chosen]),
        np.array([np.inf if a.range_mm is None else a.range_mm for a in chosen]),
    )


def judge_gains(bench: Bench, gains) -> None:
    """Raise AlignmentError where the gains (A, A), degrees per mm, do not set the angles apart."""
    values = np.linalg.svd(gains, compute_uv=False) if np.isfinite(gains).all() else np.zeros(1)
    if values[-1] > 1e-3 * values[0] and values[0] > 1e-4:
        return
    pairs = ", ".join(f"{t} by {b}" for t, b in zip(bench.targets, bench.by, strict=True))
    raise AlignmentError(
        f"alignment: these adjusters do not set these angles apart ({pairs}; gains {np.round(gains, 4).tolist()} degrees "
        "per mm); name other adjusters"
    )


def adjusters_of(corner: Corner) -> dict[str, list[tuple[str, np.ndarray]]]:
    """Every adjuster that a linkage has: name → moves per mm of setting.

    Links: + longer. An arm: + both legs longer, or both chassis mounts outboard; split: front + and rear −.
    strut_top: + outboard, strut_top_x: + forward; hinge_inner, hinge_outer: + forward.
    """
    one, y, x = np.ones(1), np.array([0.0, 1.0, 0.0]), np.array([1.0, 0.0, 0.0])
    found = {}
    for arm, build in corner.build.items():
        if build == "legs":
            ends = [(f"{arm}.front_leg", one), (f"{arm}.rear_leg", one)]
        else:
            ends = [(f"chassis.{pivot}", y) for pivot in ARM_PIVOTS[arm][:2]]
        found[arm] = ends
        found[f"{arm}_split"] = [ends[0], (ends[1][0], -ends[1][1])]
    if "chassis.strut_top" in corner.features:
        found["strut_top"] = [("chassis.strut_top", y)]
        found["strut_top_x"] = [("chassis.strut_top", x)]
    for hinge in ("hinge_inner", "hinge_outer"):
        if f"chassis.{hinge}" in corner.features:
            found[hinge] = [(f"chassis.{hinge}", x)]
    for name in corner.features:
        if name.endswith(".length"):
            found[name.removesuffix(".length")] = [(name, one)]
    return found


@dataclass
class Setting:
    """Outcome for N builds: settings (A, N) mm, ran_out (A, N) bool, status (N,) ALIGNED or NOT_ALIGNED, miss (N,) deg."""

    settings: np.ndarray
    ran_out: np.ndarray
    status: np.ndarray
    miss: np.ndarray


def align(bench: Bench, measure, *, goal, start, gains, stepless=False) -> Setting:
    """Set every build to its goal.

    measure: settings (A, N) → angles (A, N) deg of the built and assembled corner, NaN where it does not assemble;
    goal (A, N) deg; start (A, N) mm; gains (A, A) deg per mm, of the nominal. First all together without steps; what
    runs out stays at its stop and the others are set again; then each stepped one goes to its nearest multiple and the
    stepless ones are set again. With `stepless` the steps are left out.
    """
    n = goal.shape[1]
    state = _State(measure, goal, start.copy(), gains)
    free = np.ones((len(bench.targets), n), bool)
    stepped = bench.step > 0
    stop = _stops(bench, stepped)
    ran_out = _set_within_reach(state, free, stop, slack=np.where(stepped, bench.step / 2.0, 0.0)[:, None])
    if stepped.any() and not stepless:
        state.move_to(_stepped(state.settings, bench, stepped, stop))
        free &= ~stepped[:, None]
        ran_out |= _set_within_reach(state, free, stop, slack=np.zeros((len(stop), 1)))
    miss = np.where(free, np.abs(state.miss), 0.0).max(axis=0, initial=0.0)
    status = np.where(miss <= TOLERANCE_DEG, ALIGNED, NOT_ALIGNED)
    return Setting(state.settings, ran_out, status, miss)


def _stops(bench, stepped):
    """Where each adjuster ends (A, 1) mm: a stepped one at its last whole step."""
    reach = np.minimum(bench.reach, 1e9)
    step = np.where(stepped, bench.step, 1.0)
    return np.where(stepped, step * np.floor(reach / step + 1e-9), reach)[:, None]


def _stepped(settings, bench, stepped, stop):
    """Settings with the stepped adjusters at their nearest multiple within reach."""
    step = np.where(stepped, bench.step, 1.0)[:, None]
    return np.where(stepped[:, None], np.clip(step * np.round(settings / step), -stop, stop), settings)


def _set_within_reach(state, free, stop, *, slack):
    """Solve the free adjusters, pin what runs out at its stop (free turns False there), until nothing new runs out.

    Of several that run out the one furthest beyond is pinned first, since the others may then stay within reach. slack:
    what lies less than half a step beyond the last step still goes to that step.
    """
    ran_out = np.zeros_like(free)
    for _ in range(len(free) + 1):
        state.solve(free)
        over = np.where(free, np.abs(state.settings) - (stop + slack) * (1.0 + 1e-12), 0.0)
        beyond = (over > 0) & (over == over.max(axis=0))
        if not beyond.any():
            break
        ran_out |= beyond
        free &= ~beyond
        state.move_to(np.where(beyond, np.sign(state.settings) * stop, state.settings))
    return ran_out


class _State:
    """Settings of all builds with their angles and Broyden matrices (A, A, N)."""

    def __init__(self, measure, goal, settings, gains):
        self.measure, self.goal, self.settings, self.gains = measure, goal, settings, gains
        self.matrix = np.repeat(gains[:, :, None], goal.shape[1], axis=2)
        self.miss = measure(settings) - goal

    def solve(self, free):
        for _ in range(MOST_PASSES):
            missing = np.where(free, np.abs(self.miss), 0.0)
            if not np.nanmax(missing, initial=0.0) > TOLERANCE_DEG:
                return
            self.move_to(self.settings + self._step(free))

    def _step(self, free):
        """Newton step of the free adjusters; pinned ones get the identity's row and no step.

        Where a build's own matrix has turned singular the nominal's takes its place.
        """
        right = np.where(free, -np.nan_to_num(self.miss), 0.0).T[..., None]
        own, nominal = self._masked(self.matrix, free), self._masked(self.gains[:, :, None], free)
        own = np.where(_sound(own)[:, None, None], own, nominal)
        sound = _sound(own)
        step = np.zeros(right.shape)
        step[sound] = np.linalg.solve(own[sound], right[sound])
        return step[..., 0].T

    def _masked(self, matrix, free):
        eye = np.eye(len(free))[:, :, None]
        return np.moveaxis(np.where(free[:, None] & free[None], matrix, eye), -1, 0)

    def move_to(self, settings):
        """Measure at new settings and give the matrix Broyden's update for the way gone.

        Ways shorter than LEAST_WAY_MM are left out: rounding of the angles would drown what they tell.
        """
        step = settings - self.settings
        miss = self.measure(settings) - self.goal
        length = (step * step).sum(axis=0)
        error = miss - self.miss - np.einsum("abn,bn->an", self.matrix, step)
        told = (length > LEAST_WAY_MM**2) & np.isfinite(error).all(axis=0)
        update = np.where(told, error / np.where(told, length, 1.0), 0.0)
        self.matrix = self.matrix + update[:, None] * step[None]
        self.settings, self.miss = settings, miss


def _sound(matrices):
    """Which of the matrices (N, A, A) can be solved with."""
    largest = np.abs(matrices).max(axis=(1, 2), initial=0.0)
    scaled = np.where(np.isfinite(largest) & (largest > 0), largest, 1.0)[:, None, None]
    finite = np.isfinite(matrices).all(axis=(1, 2))
    return finite & (np.abs(np.linalg.det(np.where(finite[:, None, None], matrices / scaled, 0.0))) > 1e-9)
