"""From errors to the values a study asks for: build, align, put in position, measure, take. Arrays in, arrays out.

`Response` is made once per study and stage and is read-only afterwards, so that threads share it. Builds go through
in blocks of a fixed size, so the same errors give the same bits however they are cut into chunks of whole blocks.
"""

from copy import copy
from dataclasses import dataclass
from types import SimpleNamespace

import numpy as np

from study.alignment import NOT_ALIGNED, Setting, align, bench_of, judge_gains
from study.assembly import corner_of
from study.build import HANDS, build_model
from study.kernel import solve as kernel
from study.measures import KEYS, AxleView
from study.stations import STEP, Hand, Spot

BLOCK = 6_144  # builds at a time: fewer cost more interpreter time and keep threads waiting for it, more take more memory
BEFORE_LEAVES_OUT = ("toe", "camber", "caster")
NO_STUDY = SimpleNamespace(errors=(), alignment=None, sides="mirrored", jigs=(), measures=())


@dataclass(frozen=True)
class Values:
    """Outcome of N builds. values (M, N) and positions (P, N), NaN where a build has none; status (N,) 0 = sound.

    settings, ran_out (A, N): the adjusters of left, then right hand where it is built apart.
    """

    values: np.ndarray
    positions: np.ndarray
    status: np.ndarray
    settings: np.ndarray
    ran_out: np.ndarray


@dataclass(frozen=True)
class Request:
    """One measure at one position, in car terms."""

    of: str
    side: str
    bump_mm: float
    roll_deg: float
    rack_mm: float


def requests_of(measure) -> list[Request]:
    """The positions that a study's measure asks for, in the order of its sweep."""
    at = {"bump": measure.bump_mm, "roll": measure.roll_deg, "rack": measure.rack_mm}
    spots = [at | {measure.over: x} for x in measure.sweep] if measure.over else [at]
    return [Request(measure.of, measure.side, s["bump"], s["roll"], s["rack"]) for s in spots]


def _requests(measures):
    return [request for measure in measures for request in requests_of(measure)]


TAKES = {
    "range": lambda x, v: v.max(axis=0) - v.min(axis=0),
    "max": lambda x, v: v.max(axis=0),
    "min": lambda x, v: v.min(axis=0),
    "max-abs": lambda x, v: np.abs(v).max(axis=0),
    "slope": lambda x, v: ((x - x.mean()) @ v) / ((x - x.mean()) ** 2).sum(),
}


def taken(measure, positions):
    """The measure (N,) from its values at its positions (p, N)."""
    return TAKES[measure.take](np.array(measure.sweep), positions) if measure.over else positions[0]


class Response:
    """The studied car as a function of its errors.

    stage "before" leaves toe, camber and caster as built; "after" sets them. `stepless`: steps of adjusters left out.
    """

    def __init__(self, geometry, study=NO_STUDY, *, stage="after", stepless=False):
        self.geometry, self.study, self.stage, self.stepless = geometry, study, stage, stepless
        self.solid = geometry.linkage == "solid-axle"
        self.alike = self.solid or (study.sides == "mirrored" and geometry.right_is_mirror)
        corners = {hand: corner_of(geometry, hand) for hand in (("left",) if self.alike else HANDS)}
        self.model = build_model(corners, study)
        self.hands = {hand: self._hand(hand, corner) for hand, corner in corners.items()}
        self.starts = {hand: self._bench_start(found) for hand, found in self.hands.items() if found.bench.by}
        self._ask(tuple(study.measures), _requests(study.measures))

    def asking(self, measures=None, *, requests=None, visits=(), stepless=None) -> "Response":
        """The same car asked for other measures, or for bare requests (then `values` is empty); hands are shared.

        visits: measures whose positions a build has to reach without being measured there. Raises PositionError.
        """
        other = copy(self)
        other.stepless = self.stepless if stepless is None else stepless
        if requests is None:
            measures = self.measures if measures is None else tuple(measures)
            requests = _requests(measures)
        other._ask(measures or (), requests, visits=_requests(visits))
        return other

    def _hand(self, hand, corner):
        study = self.study if self.stage == "after" else _unaligned(self.study)
        return Hand(
            hand, corner, effects=self.model.effects[hand], bench=bench_of(corner, study), bands=self.model.bands,
            scalars=self.model.scalars, vehicle=self.geometry.vehicle,
        )  # fmt: skip

    # --- which views the requests need

    def _ask(self, measures, requests, visits=()):
        """Solve every station now, so that a position out of reach is an error before any work is done."""
        self.measures, self.requests = measures, requests
        self.rates: dict[tuple[str, Spot], set[str]] = {}
        for request in [*requests, *visits]:
            self.rates |= {view[:2]: set() for view in self._views_of(request) if view[:2] not in self.rates}
        for request in requests:
            for hand in self._hands_of(request):
                name, spot = self._spot(hand, request)
                self.rates[name, spot].update(self.hands[name].rates_for(KEYS[request.of]))
        for name, hand in self.hands.items():
            hand.reach([spot for owner, spot in self.rates if owner == name])
        self.steps = self._ordered(visits)

    def _ordered(self, visits):
        """(number of the request, None for a visit; request; views that nobody needs later), position by position."""
        steps = [*enumerate(self.requests), *((None, request) for request in visits)]
        steps.sort(key=lambda step: (step[1].bump_mm, abs(step[1].roll_deg), abs(step[1].rack_mm)))
        last = {view: i for i, (_, request) in enumerate(steps) for view in self._views_of(request)}
        done = [[] for _ in steps]
        for view, at in last.items():
            done[at].append(view)
        return [(*step, views) for step, views in zip(steps, done, strict=True)]

    def _views_of(self, request):
        """Keys (hand that is solved, spot, wheel where one body carries both) of the views that a request reads."""
        needs, found = KEYS[request.of].needs, []
        for hand in self._hands_of(request):
            name, spot = self._spot(hand, request)
            spots = [spot]
            spots += [spot.at_rest()] if "rest" in needs and spot.rack_mm else []
            spots += [spot._replace(locked=True)] if "locked" in needs and spot.rack_mm else []
            found += [(name, one, hand if self.solid else "") for one in spots]
        return found

    def _scope(self, request):
        return KEYS[request.of].scope_on(self.solid)

    def _hands_of(self, request):
        return HANDS if self._scope(request) == "axle" else (request.side,)

    def _spot(self, hand, request):
        """(name of the hand that is solved, the position as that hand sees it)."""
        flip = -1.0 if hand == "right" and not self.solid else 1.0
        spot = Spot(request.bump_mm + 0.0, flip * request.roll_deg + 0.0, flip * request.rack_mm + 0.0)
        return ("left" if self.alike else hand), spot

    # --- evaluation

    def evaluate(self, errors) -> Values:
        """Values of builds with errors (D, N) in mm and degrees."""
        errors = np.asarray(errors, float)
        parts = [self._block(errors[:, i : i + BLOCK]) for i in range(0, max(errors.shape[1], 1), BLOCK)]
        return Values(*(np.concatenate(pieces, axis=-1) for pieces in zip(*parts, strict=True)))

    def _block(self, errors):
        n = errors.shape[1]
        with np.errstate(all="ignore"):
            set_up = {name: self._aligned(name, hand, errors) for name, hand in self.hands.items()}
            status = np.zeros(n, np.uint8)
            for _, setting in set_up.values():
                status = np.maximum(status, setting.status.astype(np.uint8))
            shelf = _Shelf(self, {name: block for name, (block, _) in set_up.items()}, np.zeros(n, np.uint8))
            rows = np.empty((len(self.requests), n))
            for number, request, done in self.steps:
                if number is None:
                    shelf.visit(request)
                else:
                    rows[number] = shelf.value(request)
                shelf.drop(done)
            status = np.where(shelf.status > 0, shelf.status, status).astype(np.uint8)
            rows[:, status > 0] = np.nan
            values = self._take(rows, n)
        settings = np.concatenate([s.settings for _, s in set_up.values()])
        return values, rows, status, settings, np.concatenate([s.ran_out for _, s in set_up.values()])

    def _take(self, rows, n):
        out, at = np.empty((len(self.measures), n)), 0
        for i, measure in enumerate(self.measures):
            count = max(len(measure.sweep), 1)
            out[i] = taken(measure, rows[at : at + count])
            at += count
        return out

    # --- alignment

    def _bench_start(self, hand):
        """(nominal angles (A, 1), gains (A, A), sensitivities (A, D)) of the bench at design. Raises AlignmentError."""
        d, a = hand.scalars, len(hand.bench.by)
        moves = np.concatenate((np.zeros((d + a, 1)), np.eye(d + a) * STEP, -np.eye(d + a) * STEP), axis=1)
        angles, _ = hand.angles(hand.block(moves[:d], moves[d:]))
        slope = (angles[:, 1 : 1 + d + a] - angles[:, 1 + d + a :]) / (2.0 * STEP)
        gains = slope[:, d:]
        judge_gains(hand.bench, gains)
        return angles[:, :1], gains, slope[:, :d]

    def _aligned(self, name, hand, errors):
        a, n = len(hand.bench.by), errors.shape[1]
        if not a:
            none = np.zeros((0, n))
            return hand.block(errors, none), Setting(none, none.astype(bool), np.zeros(n, int), np.zeros(n))
        nominal, gains, slope = self.starts[name]
        left = np.stack([errors[hand.bands[name][target]] for target in hand.bench.targets])
        start = np.linalg.solve(gains, left - slope @ errors)
        setting = align(
            hand.bench, lambda settings: hand.angles(hand.block(errors, settings))[0],
            goal=nominal + left, start=start, gains=gains, stepless=self.stepless,
        )  # fmt: skip
        return hand.block(errors, setting.settings), setting


class _Shelf:
    """The views of one block, made when first asked for and dropped when done; status (N,): the worst of all their poses."""

    def __init__(self, response, blocks, status):
        self.response, self.blocks, self.views, self.status = response, blocks, {}, status

    def drop(self, keys):
        for key in keys:
            self.views.pop(key, None)

    def view(self, hand, request):
        name, spot = self.response._spot(hand, request)
        rest = locked = None
        needs = KEYS[request.of].needs
        if "rest" in needs and spot.rack_mm:
            rest = self._view(name, hand, spot.at_rest())
        if "locked" in needs and spot.rack_mm:
            locked = self._view(name, hand, spot._replace(locked=True))
        view = self._view(name, hand, spot)
        view.rest, view.locked = rest or view.rest, locked or view.locked
        return view

    def _view(self, name, hand, spot):
        key = (name, spot, hand if self.response.solid else "")
        if key not in self.views:
            rates = tuple(sorted(self.response.rates[name, spot]))
            self.views[key] = self.response.hands[name].view(self.blocks[name], spot, rates=rates, wheel=hand)
            self.status = np.maximum(self.status, self.views[key].pose.status.astype(np.uint8))
        return self.views[key]

    def visit(self, request):
        """Put the builds into a position without measuring them there."""
        for hand in self.response._hands_of(request):
            self.view(hand, request)

    def value(self, request):
        info = KEYS[request.of]
        if self.response._scope(request) == "side":
            return info.value(self.view(request.side, request), None)
        left, right = self.view("left", request), self.view("right", request)
        axle = AxleView(
            left=left,
            right=right,
            vehicle=self.response.geometry.vehicle,
            solid=self.response.solid,
            rack_mm=request.rack_mm,
        )
        return info.value(None, axle)


def _unaligned(study):
    """The study's alignment without what the stage "before" leaves out."""
    kept = tuple(a for a in study.alignment or () if a.target not in BEFORE_LEAVES_OUT)
    return SimpleNamespace(alignment=kept or None)


STATUS_TEXT = {
    kernel.CLOSED: "sound",
    kernel.NOT_CLOSED: "does not assemble",
    kernel.OTHER_BRANCH: "assembles on the other branch",
    NOT_ALIGNED: "cannot be aligned",
}
