"""Tolerance zones: from the unit cube to errors, with their moments and extreme points.

Errors are arrays (k, N): k scalars of one feature, in mm along the car's axes (angles in degrees).
The spread of a normal law follows from the zone: R/(3 cp) for plus-minus, R/(3.44 cp) for a disc and
R/(3.76 cp) for a ball, so that cp = 1 leaves 99.73 % inside each.
"""

from dataclasses import dataclass, replace
from functools import cache

import numpy as np
from scipy.special import gammainc, gammaincinv, ndtr, ndtri

SCALARS = {"box": 3, "ball": 3, "cylinder": 3, "length": 1, "tilt": 2}
KIND = {"box": "point", "ball": "point", "cylinder": "point", "length": "length", "tilt": "angles"}
SIGMAS = {1: 3.0, 2: 3.44, 3: 3.76}
_TINY = 2.0**-53


@dataclass(frozen=True, slots=True)
class Zone:
    """One tolerance zone and the law of the errors in it.

    `half`: half widths (box: three, length: one), (R,) of a ball, (R, depth) of a cylinder, (degrees,) of a
    tilt. `axis`: unit vector of a cylinder. `shift`: mean of the law, one number per scalar, () for zeros.
    `truncated`: what lies outside the zone is rejected. `process`: the process it was taken from.
    """

    form: str
    half: tuple[float, ...]
    axis: tuple[float, float, float] | None = None
    distribution: str = "uniform"
    cp: float = 1.0
    truncated: bool = False
    shift: tuple[float, ...] = ()
    process: str | None = None

    def __post_init__(self) -> None:
        object.__setattr__(self, "shift", self.shift or (0.0,) * SCALARS[self.form])

    @property
    def n_scalars(self) -> int:
        return SCALARS[self.form]


def fits(zone: Zone, kind: str) -> bool:
    """Whether the zone suits a feature of this kind ("point", "length", "angles")."""
    return KIND[zone.form] == kind or (kind == "length" and _is_one_number(zone))


def for_kind(zone: Zone, kind: str) -> Zone:
    """The same zone as a feature of this kind takes it: one plus-minus number on a length is a length."""
    if kind == "length" and _is_one_number(zone):
        return replace(zone, form="length", half=zone.half[:1], shift=zone.shift[:1])
    return zone


def scale(zone: Zone, factor: float) -> Zone:
    """The zone `factor` times as wide, with the same law, axis and shift; it is no process any more."""
    return replace(zone, half=tuple(factor * h for h in zone.half), process=None)


def to_errors(zone: Zone, unit: np.ndarray) -> np.ndarray:
    """Errors (k, N) that the unit cube (k, N) stands for; uniform by volume or by inverse distribution."""
    unit = np.ascontiguousarray(np.clip(unit, _TINY, 1.0 - _TINY))
    shift = np.array(zone.shift)[:, None]
    if zone.form in ("box", "length"):
        columns = [_line(zone, h, s, u) for h, s, u in zip(zone.half, zone.shift, unit, strict=True)]
        return np.array(columns)
    if zone.form == "cylinder":
        along = _line(zone, zone.half[1], 0.0, unit[2])
        return _turned(frame(zone), np.vstack([_round(zone, 2, unit[:2]), along])) + shift
    return _round(zone, zone.n_scalars, unit) + shift


def mean(zone: Zone) -> np.ndarray:
    """Mean error (k,)."""
    if zone.form in ("box", "length"):
        return np.array([_line_moments(zone, h, s)[0] for h, s in zip(zone.half, zone.shift, strict=True)])
    return np.array(zone.shift)


def covariance(zone: Zone) -> np.ndarray:
    """Exact covariance of the errors (k, k), truncation and shift included."""
    if zone.form in ("box", "length"):
        return np.diag([_line_moments(zone, h, s)[1] for h, s in zip(zone.half, zone.shift, strict=True)])
    if zone.form == "cylinder":
        disc = _round_variance(zone, 2)
        own = np.diag([disc, disc, _line_moments(zone, zone.half[1], 0.0)[1]])
        return frame(zone) @ own @ frame(zone).T
    return _round_variance(zone, zone.n_scalars) * np.eye(zone.n_scalars)


def sd(zone: Zone) -> np.ndarray:
    """Standard deviation of each scalar (k,)."""
    return np.sqrt(np.diag(covariance(zone)))


def support(zone: Zone, gradients: np.ndarray) -> np.ndarray:
    """Greatest g·e over the zone (M,), for gradients (k, M)."""
    return np.einsum("km,km->m", gradients, extreme(zone, gradients))


def extreme(zone: Zone, gradients: np.ndarray) -> np.ndarray:
    """The point of the zone (k, M) where g·e is greatest.

    The zone stands about its shift, as its process makes it; with `truncated` it stays where the drawing
    puts it. Where a gradient vanishes its coordinate stays in the middle.
    """
    gradients = np.asarray(gradients, dtype=float)
    if zone.form in ("box", "length"):
        low, high = np.array([_ends(zone, h, s) for h, s in zip(zone.half, zone.shift, strict=True)]).T
        middle, reach = (low + high) / 2, (high - low) / 2
        return middle[:, None] + reach[:, None] * np.sign(gradients)
    shift = np.array(zone.shift)[:, None]
    if zone.form == "cylinder":
        own = frame(zone).T @ gradients
        disc = zone.half[0] * _directions(own[:2])
        return frame(zone) @ np.vstack([disc, zone.half[1] * np.sign(own[2])]) + shift
    return zone.half[0] * _directions(gradients) + shift


def walk(zone: Zone, unit: np.ndarray) -> np.ndarray:
    """Errors (k, N) of a screening walk: a box of half side sqrt(3) sigma per scalar about the mean.

    The box has the mean and covariance of the zone (0.775 R for a uniform ball). The sides of a slanted
    cylinder's box are the columns of the symmetric root of its covariance, so that scalar j stays the
    one nearest axis j.
    """
    values, vectors = np.linalg.eigh(covariance(zone))
    root = (vectors * np.sqrt(np.maximum(values, 0.0))) @ vectors.T
    return mean(zone)[:, None] + _turned(np.sqrt(3.0) * root, 2.0 * unit - 1.0)


def frame(zone: Zone) -> np.ndarray:
    """A cylinder's own axes as columns (3, 3): two across it, the first nearest x, then along it.

    For a cylinder along x the first is y.
    """
    along = np.array(zone.axis, dtype=float)
    along /= np.linalg.norm(along)
    start = np.array([0.0, 1.0, 0.0]) if abs(along[0]) > 0.999 else np.array([1.0, 0.0, 0.0])
    across = start - (start @ along) * along
    across /= np.linalg.norm(across)
    return np.column_stack([across, np.cross(along, across), along])


def accepted_share(zone: Zone) -> float:
    """Share of the pieces made that inspection lets pass; 1 when nothing is rejected."""
    if not zone.truncated:
        return 1.0
    if zone.form in ("box", "length"):
        pairs = zip(zone.half, zone.shift, strict=True)
        return float(np.prod([_line_accepted(zone, h, s) for h, s in pairs]))
    if zone.distribution == "uniform":
        return 1.0
    n = 2 if zone.form == "cylinder" else zone.n_scalars
    share = gammainc(n / 2, (SIGMAS[n] * zone.cp) ** 2 / 2)
    return float(share * (_line_accepted(zone, 1.0, 0.0) if zone.form == "cylinder" else 1.0))


def _is_one_number(zone: Zone) -> bool:
    return zone.form == "box" and len(set(zone.half)) == 1 and len(set(zone.shift)) == 1


def _ends(zone: Zone, half: float, shift: float) -> tuple[float, float]:
    """Ends of a plus-minus zone: the drawing's, or those about the shift when nothing is rejected."""
    if not zone.truncated:
        return shift - half, shift + half
    if zone.distribution == "uniform":
        return max(-half, shift - half), min(half, shift + half)
    return -half, half


def _line(zone: Zone, half: float, shift: float, unit: np.ndarray) -> np.ndarray:
    low, high = _ends(zone, half, shift)
    if zone.distribution == "uniform" or half == 0.0:
        return low + (high - low) * unit
    sigma = half / (SIGMAS[1] * zone.cp)
    if not zone.truncated:
        return shift + sigma * ndtri(unit)
    if shift < 0.0:  # the tail below is where ndtr keeps its digits
        return -_line(zone, half, -shift, 1.0 - unit)
    a, b = ndtr((low - shift) / sigma), ndtr((high - shift) / sigma)
    return np.clip(shift + sigma * ndtri(a + (b - a) * unit), low, high)


def _line_moments(zone: Zone, half: float, shift: float) -> tuple[float, float]:
    low, high = _ends(zone, half, shift)
    if zone.distribution == "uniform" or half == 0.0:
        return (low + high) / 2, (high - low) ** 2 / 12
    sigma = half / (SIGMAS[1] * zone.cp)
    if not zone.truncated:
        return shift, sigma**2
    peak = min(max(shift, low), high)
    low, high = max(low, peak - 12 * sigma), min(high, peak + 12 * sigma)
    nodes, weights = _gauss()
    x = (low + high) / 2 + (high - low) / 2 * nodes
    weights = weights * np.exp(-(((x - shift) ** 2) - (peak - shift) ** 2) / (2 * sigma**2))
    weights /= weights.sum()
    centre = weights @ x
    return float(centre), float(weights @ (x - centre) ** 2)


@cache
def _gauss() -> tuple[np.ndarray, np.ndarray]:
    return np.polynomial.legendre.leggauss(160)


def _line_accepted(zone: Zone, half: float, shift: float) -> float:
    if half == 0.0:
        return 1.0 if shift == 0.0 else 0.0
    if zone.distribution == "uniform":
        return max(0.0, 1.0 - abs(shift) / (2 * half))
    sigma = half / (SIGMAS[1] * zone.cp)
    return float(ndtr((half - abs(shift)) / sigma) - ndtr((-half - abs(shift)) / sigma))


def _round(zone: Zone, n: int, unit: np.ndarray) -> np.ndarray:
    """Errors in a disc (n = 2) or ball (n = 3) about zero."""
    radius = zone.half[0]
    sigma = radius / (SIGMAS[n] * zone.cp)
    if zone.distribution == "normal" and not zone.truncated:
        return sigma * ndtri(unit)
    if zone.distribution == "uniform":
        r = radius * unit[0] ** (1 / n)
    else:
        passed = gammainc(n / 2, (SIGMAS[n] * zone.cp) ** 2 / 2)
        r = np.minimum(sigma * np.sqrt(2 * gammaincinv(n / 2, passed * unit[0])), radius)
    if n == 2:
        turn = 2 * np.pi * unit[1]
        return r * np.array([np.cos(turn), np.sin(turn)])
    height, turn = 2 * unit[1] - 1, 2 * np.pi * unit[2]
    across = np.sqrt(1 - height**2)
    return r * np.array([across * np.cos(turn), across * np.sin(turn), height])


def _round_variance(zone: Zone, n: int) -> float:
    radius = zone.half[0]
    if zone.distribution == "uniform":
        return radius**2 / (n + 2)
    sigma = radius / (SIGMAS[n] * zone.cp)
    if not zone.truncated:
        return sigma**2
    x = (SIGMAS[n] * zone.cp) ** 2 / 2
    return sigma**2 * float(gammainc(n / 2 + 1, x) / gammainc(n / 2, x))


def _turned(matrix: np.ndarray, array: np.ndarray) -> np.ndarray:
    """matrix (k, k) times array (k, N), column by column the same bits however many columns there are."""
    return sum(matrix[:, j, None] * array[j] for j in range(len(array)))


def _directions(gradients: np.ndarray) -> np.ndarray:
    size = np.linalg.norm(gradients, axis=0)
    return gradients / np.where(size > 0.0, size, 1.0)
