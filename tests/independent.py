"""A second solution of the linkages, written apart from the program so that the two can disagree.

A rigid body is held here by four points whose twelve coordinates are the unknowns, with no rotation anywhere:
six distances keep the body rigid, and any point of the body is a fixed affine mix of the four. Link lengths,
the strut's sliding length and the tyre's touch are further equations, solved one pose at a time by
`scipy.optimize.root` with a complex-step Jacobian. The semi-trailing arm turns about its hinge, one angle only.

Millimetres, ISO axes of the car, left corner; a right corner is handed over as its mirror image.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace

import numpy as np
from scipy.optimize import brentq, root
from scipy.spatial.transform import Rotation

EDGE_MM = 250.0
PAIRS = np.array([(0, 1), (0, 2), (0, 3), (1, 2), (1, 3), (2, 3)]).T


@dataclass(frozen=True)
class Link:
    """A rod or a leg: its chassis end, its end on the body (at design) and its own length."""

    chassis: np.ndarray
    body: np.ndarray
    length: float
    steered: bool = False


@dataclass(frozen=True)
class Tyre:
    centre: np.ndarray
    spin: np.ndarray
    radius: float


@dataclass(frozen=True)
class Spring:
    """A spring between a chassis point and a point of the body, or of an arm given by its three joints."""

    chassis: np.ndarray
    outer: np.ndarray
    arm: tuple[np.ndarray, np.ndarray, np.ndarray] | None = None


@dataclass(frozen=True)
class Body:
    """An upright, or a whole axle, with all that holds it. Errors are put in by changing points and lengths."""

    links: tuple[Link, ...]
    tyres: tuple[Tyre, ...]
    ground: float
    strut: tuple[np.ndarray, np.ndarray, np.ndarray] | None = None  # chassis top, body point, body direction
    hinge: tuple[np.ndarray, np.ndarray] | None = None
    kingpin: tuple[np.ndarray, np.ndarray] | None = None  # body points, lower and upper; strut: lower only twice
    spring: Spring | None = None
    lock: np.ndarray | None = None
    notes: dict = field(default_factory=dict)


class Impossible(Exception):
    """The body cannot be put together at the position asked for."""


@dataclass(frozen=True)
class Pose:
    """Where a body is: the four points (4, 3) and the strut's sliding length."""

    corners: np.ndarray
    home: np.ndarray
    slide: float = 0.0

    def point(self, at_design) -> np.ndarray:
        return mix(self.corners, weights(self.home, np.asarray(at_design, float)))

    def direction(self, at_design) -> np.ndarray:
        origin = self.home[0]
        return self.point(origin + np.asarray(at_design, float)) - self.point(origin)

    def back(self, where) -> np.ndarray:
        """The design coordinates of the body point that now is at `where`."""
        turn = self.turn()
        return self.home[0] + turn.T @ (np.asarray(where, float) - self.corners[0])

    def turn(self) -> np.ndarray:
        now = (self.corners[1:] - self.corners[0]).T
        return now @ np.linalg.inv((self.home[1:] - self.home[0]).T)


def tetrahedron(centre) -> np.ndarray:
    return np.asarray(centre, float) + EDGE_MM * np.array([[0, 0, 0], [1, 0, 0], [0, 1, 0], [0, 0, 1.0]])


def weights(home, at_design) -> np.ndarray:
    rest = (at_design - home[0]) / EDGE_MM
    return np.concatenate([[1.0 - rest.sum()], rest])


def mix(corners, share) -> np.ndarray:
    return share @ corners


def plane(ground: float, bump_mm: float, roll_rad: float) -> tuple[np.ndarray, float]:
    """Road plane seen from the body: unit normal and its distance from the origin."""
    normal = np.array([0.0, np.sin(roll_rad), np.cos(roll_rad)])
    return normal, ground * np.cos(roll_rad) + bump_mm


def tyre_gap(normal, height, centre, spin, radius):
    across = spin @ normal
    return centre @ normal - radius * np.sqrt(1 - across**2) - height


def spring_square(body: Body, corners, home):
    spring = body.spring
    if spring.arm is None:
        outer = mix(corners, weights(home, spring.outer))
        return ((outer - spring.chassis) ** 2).sum(-1)
    front, rear, ball = spring.arm
    now = mix(corners, weights(home, ball))
    return ((carried(front, rear, ball, now, spring.outer) - spring.chassis) ** 2).sum(-1)


def carried(front, rear, ball, ball_now, point):
    """Where a point of an arm is, once its ball joint has turned about the line of its two bores."""
    parts = np.linalg.solve(np.stack(triad(front, rear, ball), axis=1), point - front)
    along, out, up = triad(front, rear, ball_now)
    return front + parts[0] * along + parts[1] * out + parts[2] * up


def triad(front, rear, ball):
    along = (rear - front) / np.sqrt(((rear - front) ** 2).sum())
    reach = ball - front
    out = reach - (reach * along).sum(-1)[..., None] * along if reach.ndim > 1 else reach - (reach @ along) * along
    out = out / np.sqrt((out**2).sum(-1))[..., None]
    return along, out, np.cross(np.broadcast_to(along, out.shape), out)


def equations(body: Body, home, bump_mm, roll_rad, rack_mm, hold):
    """The residuals in mm as a function of the unknowns (..., 12 or 13). `hold` replaces the tyre's touch."""
    normal, height = plane(body.ground, bump_mm, roll_rad)
    edges = np.linalg.norm(home[PAIRS[0]] - home[PAIRS[1]], axis=1)
    shares = np.array([weights(home, link.body) for link in body.links])
    ends = np.array([link.chassis + [0.0, rack_mm * link.steered, 0.0] for link in body.links])
    lengths = np.array([link.length for link in body.links])
    wheels = [(weights(home, t.centre), weights(home, t.centre + t.spin), t.radius) for t in body.tyres]

    def residuals(unknowns):
        corners = unknowns[..., :12].reshape(*unknowns.shape[:-1], 4, 3)
        spans = corners[..., PAIRS[0], :] - corners[..., PAIRS[1], :]
        rods = shares @ corners - ends
        rows = [
            ((spans * spans).sum(-1) - edges**2) / (2 * edges),
            ((rods * rods).sum(-1) - lengths**2) / (2 * lengths),
        ]
        if body.strut is not None:
            top, lower, axis = body.strut
            low = mix(corners, weights(home, lower))
            along = mix(corners, weights(home, lower + axis)) - low
            rows.append(top - low - unknowns[..., 12:13] * along)
        if hold is None:
            for to_centre, to_spin, radius in wheels:
                centre = mix(corners, to_centre)
                rows.append(tyre_gap(normal, height, centre, mix(corners, to_spin) - centre, radius)[..., None])
        elif body.spring is not None:
            rows.append((spring_square(body, corners, home) - hold**2)[..., None] / (2 * hold))
        else:
            rows.append(mix(corners, weights(home, body.lock))[..., 2:3] - hold)
        return np.concatenate(rows, axis=-1)

    return residuals


def solve(body: Body, start: Pose, *, bump_mm=0.0, roll_rad=0.0, rack_mm=0.0, hold=None) -> Pose:
    """One pose near another. `hold`, in mm, locks the suspension in place of the tyre's touch."""
    if body.hinge is not None:
        return turn_about_hinge(body, start, bump_mm, roll_rad)
    residuals = equations(body, start.home, bump_mm, roll_rad, rack_mm, hold)
    extra = [start.slide] if body.strut is not None else []
    first = np.concatenate([start.corners.ravel(), extra])
    count = len(first)

    def jacobian(unknowns):
        nudged = unknowns[None, :] + 1e-30j * np.eye(count)
        return (residuals(nudged).imag / 1e-30).T

    found = root(residuals, first, jac=jacobian, method="hybr", options={"xtol": 1e-13})
    unknowns = found.x - np.linalg.solve(jacobian(found.x), residuals(found.x))
    left_over = np.abs(residuals(unknowns)).max()
    if not left_over < 1e-9:
        raise Impossible(f"bump {bump_mm}, roll {roll_rad}, rack {rack_mm}: {left_over} mm left over")
    return Pose(unknowns[:12].reshape(4, 3), start.home, float(unknowns[12]) if extra else 0.0)


def turn_about_hinge(body: Body, start: Pose, bump_mm, roll_rad) -> Pose:
    inner, outer = body.hinge
    axis = (outer - inner) / np.linalg.norm(outer - inner)
    normal, height = plane(body.ground, bump_mm, roll_rad)
    tyre = body.tyres[0]

    def gap(angle):
        turn = Rotation.from_rotvec(angle * axis)
        return tyre_gap(normal, height, inner + turn.apply(tyre.centre - inner), turn.apply(tyre.spin), tyre.radius)

    bracket = np.linspace(-0.6, 0.6, 13)
    gaps = np.array([gap(angle) for angle in bracket])
    crossing = np.flatnonzero(np.sign(gaps[:-1]) != np.sign(gaps[1:]))
    if not len(crossing):
        raise Impossible("the arm does not reach the road")
    nearest = crossing[np.argmin(np.abs(bracket[crossing]))]
    angle = brentq(gap, bracket[nearest], bracket[nearest + 1], xtol=1e-16, rtol=1e-15)
    return Pose(inner + Rotation.from_rotvec(angle * axis).apply(start.home - inner), start.home)


def at_home(body: Body) -> Pose:
    home = tetrahedron(body.tyres[0].centre)
    slide = 0.0 if body.strut is None else float(np.linalg.norm(body.strut[0] - body.strut[1]))
    return Pose(home, home, slide)


def pose(body: Body, *, bump_mm=0.0, roll_rad=0.0, rack_mm=0.0) -> Pose:
    """The pose at a position, walked to from design in small steps so that it stays on the design's branch."""
    now = at_home(body)
    steps = int(max(1, np.ceil(max(abs(bump_mm) / 15, abs(roll_rad) / 0.03, abs(rack_mm) / 10))))
    for share in np.arange(0 if body.notes.get("errors") else 1, steps + 1) / steps:
        now = solve(body, now, bump_mm=share * bump_mm, roll_rad=share * roll_rad, rack_mm=share * rack_mm)
    return now


def held_length(body: Body, now: Pose) -> float:
    """What the lock keeps: the spring's length, or the height of the locked point in the body."""
    if body.spring is not None:
        return float(np.sqrt(spring_square(body, now.corners, now.home)))
    return float(now.point(body.lock)[2])


def steered(body: Body, now: Pose, *, rack_mm: float, hold: float) -> Pose:
    return solve(body, now, rack_mm=rack_mm, hold=hold)


def mirrored(body: Body) -> Body:
    """The mirror image: for a right corner made from car coordinates."""
    flip = np.array([1.0, -1.0, 1.0])
    spring = body.spring and Spring(
        body.spring.chassis * flip,
        body.spring.outer * flip,
        body.spring.arm and tuple(point * flip for point in body.spring.arm),
    )
    return replace(
        body,
        links=tuple(Link(k.chassis * flip, k.body * flip, k.length, k.steered) for k in body.links),
        tyres=tuple(Tyre(t.centre * flip, t.spin * flip, t.radius) for t in body.tyres),
        strut=body.strut and tuple(item * flip for item in body.strut),
        hinge=body.hinge and tuple(item * flip for item in body.hinge),
        kingpin=body.kingpin and tuple(item * flip for item in body.kingpin),
        spring=spring,
        lock=None if body.lock is None else body.lock * flip,
    )


def spin_axis(camber_deg: float, toe_deg: float) -> np.ndarray:
    camber, toe = np.radians([camber_deg, toe_deg])
    return np.array([np.cos(camber) * np.sin(toe), np.cos(camber) * np.cos(toe), -np.sin(camber)])


def ground_of(tyre: Tyre) -> float:
    return float(tyre.centre[2] - tyre.radius * np.sqrt(1 - tyre.spin[2] ** 2))
