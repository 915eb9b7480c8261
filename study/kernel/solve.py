"""Poses of many builds at once: Newton's method on exact Jacobians, started from the nominal's neighbourhood.

The fast path eliminates all builds side by side with the pivot order of the nominal, which a small departure keeps.
What it does not close to the tolerance goes, build by build of a batch, through a careful path (LAPACK, Newton
homotopy), so the fixed order can cost time but never a wrong pose: every returned pose is judged by its residual.
"""

from typing import NamedTuple

import numpy as np

from study.kernel.rows import Road, Rows, linearise, residuals
from study.kernel.vectors import gibbs_add, gibbs_matrix

TOLERANCE_MM = 1e-9
CLOSED, NOT_CLOSED, OTHER_BRANCH = 0, 1, 2
LEVER_MM = 200.0  # weighs a turn against a shift when pivots are compared
ROUNDS = 3
CAREFUL_STRIDE_MM = 8.0
CAREFUL_STEPS = 8, 40
CAREFUL_ITERATIONS = 12


class Order(NamedTuple):
    """Elimination order of the nominal: row and column permutations (6,), and the parity of both together."""

    rows: np.ndarray
    columns: np.ndarray
    parity: float


class Pose(NamedTuple):
    """rotation (3, 3, N); t (3, N) mm, the place of the body's origin; status (N,) of CLOSED, NOT_CLOSED, OTHER_BRANCH;

    residual (N,) mm, the worst row; sign (N,), that of the row Jacobian's determinant, which tells the branch.
    """

    rotation: np.ndarray
    t: np.ndarray
    status: np.ndarray
    residual: np.ndarray
    sign: np.ndarray


def pivot_order(jacobian) -> Order:
    """Complete pivoting of one Jacobian (6, 6), turns weighed by LEVER_MM."""
    a = np.array(jacobian, float)
    a[:, 3:] /= LEVER_MM
    n = len(a)
    rows, columns = np.arange(n), np.arange(n)
    for k in range(n):
        i, j = divmod(int(np.argmax(np.abs(a[k:, k:]))), n - k)
        a[[k, k + i]] = a[[k + i, k]]
        a[:, [k, k + j]] = a[:, [k + j, k]]
        rows[[k, k + i]], columns[[k, k + j]] = rows[[k + i, k]], columns[[k + j, k]]
        if a[k, k]:
            a[k + 1 :, k:] -= np.outer(a[k + 1 :, k] / a[k, k], a[k, k:])
    parity = np.linalg.det(np.eye(n)[rows]) * np.linalg.det(np.eye(n)[columns])
    return Order(rows, columns, float(np.sign(parity)))


def factor(a):
    """LU of matrices a (n, n, N) in place, without pivoting: rows and columns stand in pivot order already."""
    n = a.shape[0]
    for k in range(n - 1):
        a[k + 1 :, k] /= a[k, k]
        a[k + 1 :, k + 1 :] -= a[k + 1 :, k, None] * a[k, None, k + 1 :]
    return a


def substitute(lu, b):
    """Solve with the factors (n, n, N) for right sides b (n, k, N), in place."""
    n = lu.shape[0]
    for k in range(n - 1):
        b[k + 1 :] -= lu[k + 1 :, k, None] * b[k]
    for k in reversed(range(n)):
        b[k] /= lu[k, k]
        if k:
            b[:k] -= lu[:k, k, None] * b[k]
    return b


def solve(rows: Rows, road: Road, *, gibbs, t, rest, order: Order) -> tuple[Pose, np.ndarray]:
    """Poses of N builds from a start (gibbs (3, N), t (3, N) mm); also the final Jacobian (6, 6, N), rows as in `Rows`.

    rest (3, 1) mm is the nominal's place in the same frame (its rotation there is the identity), for the careful path.

    Newton with one chord step (the residual anew, the factors kept) a round. The branch is judged by `judge_branch`.
    """
    g, t = np.array(gibbs, float), np.array(t, float)
    jacobian = np.empty((6, 6, t.shape[1]))
    lu = None
    for _ in range(ROUNDS):
        rotation = gibbs_matrix(g)
        f = linearise(rows, road, rotation, t, jacobian)
        if lu is not None and np.abs(f).max() <= TOLERANCE_MM:
            break
        lu = factor(jacobian[order.rows][:, order.columns])
        g, t = _moved(g, t, _step(lu, f, order))
        f = residuals(rows, road, gibbs_matrix(g), t)
        g, t = _moved(g, t, _step(lu, f, order))
    else:
        rotation = gibbs_matrix(g)
        f = linearise(rows, road, rotation, t, jacobian)
    worst = np.abs(f).max(axis=0)
    status = np.where(worst <= TOLERANCE_MM, CLOSED, NOT_CLOSED)
    return _rescued(rows, road, rest, Pose(rotation, t, status, worst, branch_sign(lu, order)), jacobian)


def judge_branch(pose: Pose, sign) -> None:
    """Mark closed builds whose determinant has another sign than the nominal's."""
    pose.status[(pose.status == CLOSED) & (pose.sign != sign)] = OTHER_BRANCH


def _step(lu, f, order):
    """The Newton step (6, N) of residuals f, back in the order of (v, ω)."""
    step = np.empty_like(f)
    step[order.columns] = substitute(lu, -f[order.rows][:, None])[:, 0]
    return step


def _moved(g, t, step):
    return gibbs_add(0.5 * step[3:], g), t + step[:3]


def _rescued(rows, road, rest, pose, jacobian):
    """Send the builds that the fast path left open through the careful one."""
    open_ = np.flatnonzero(~(pose.residual <= TOLERANCE_MM))
    if not len(open_):
        return pose, jacobian
    some, some_road = rows.take(open_), road.take(open_)
    rotation, t, worst = solve_carefully(some, some_road, rest=rest, count=len(open_))
    pose.rotation[:, :, open_], pose.t[:, open_] = rotation, t
    pose.residual[open_] = worst
    pose.status[open_] = np.where(worst <= TOLERANCE_MM, CLOSED, NOT_CLOSED)
    part = np.empty((6, 6, len(open_)))
    linearise(some, some_road, rotation, t, part)
    jacobian[:, :, open_] = part
    pose.sign[open_] = determinant_sign(part)
    return pose, jacobian


def solve_carefully(rows, road, *, rest, count, least_steps=CAREFUL_STEPS[0]):
    """Poses from a place of rest (R = I, t = rest (3, 1) mm) by Newton homotopy.

    F(x) = (1 − λ) F(x₀), λ in equal steps of at most CAREFUL_STRIDE_MM of the widest row: the linkage is drawn gently
    from where it stands to where it should be, and so stays on its branch. Returns rotation (3, 3, N), t (3, N), worst
    residual (N,) mm; one that is not at or below the tolerance means that the linkage does not close there, an infinite
    one that it went over a dead point on the way.
    """
    t = np.broadcast_to(rest, (3, count)).copy()
    rotation = np.broadcast_to(np.eye(3)[:, :, None], (3, 3, count)).copy()
    jacobian = np.empty((6, 6, count))
    first = linearise(rows, road, rotation, t, jacobian)
    with np.errstate(all="ignore"):
        widest = min(np.nanmax(np.abs(first), initial=0.0), 1e3)
        steps = min(max(least_steps, int(np.ceil(widest / CAREFUL_STRIDE_MM))), CAREFUL_STEPS[1])
        branch, strayed = determinant_sign(jacobian), np.zeros(count, bool)
        for step in range(1, steps + 1):
            close = 1e-2 * TOLERANCE_MM if step == steps else 1e-2
            rotation, t = _newton(rows, road, rotation, t, first * (1.0 - step / steps), jacobian, close)
            strayed |= determinant_sign(jacobian) != branch
        worst = np.abs(residuals(rows, road, rotation, t)).max(axis=0)
        worst[strayed] = np.inf
    return rotation, t, np.where(np.isfinite(worst), worst, np.inf)


def _newton(rows, road, rotation, t, goal, jacobian, close):
    for _ in range(CAREFUL_ITERATIONS):
        f = linearise(rows, road, rotation, t, jacobian) - goal
        if np.nanmax(np.abs(f), initial=0.0) <= close:
            break
        step = _lapack(jacobian, -f)
        rotation = np.einsum("ijn,jkn->ikn", gibbs_matrix(0.5 * step[3:]), rotation)
        t = t + step[:3]
    return rotation, t


def solve_each(jacobian, right):
    """Solutions by pivoted LU of Jacobians (6, 6, N) for right sides (6, k, N); NaN where a Jacobian is singular or lost."""
    a = np.moveaxis(jacobian, -1, 0)
    with np.errstate(all="ignore"):
        sound = np.isfinite(a).all(axis=(1, 2))
        sound &= np.abs(np.linalg.det(np.where(sound[:, None, None], a, 0.0))) > 0
    out = np.full(right.shape, np.nan)
    if sound.any():
        out[..., sound] = np.moveaxis(np.linalg.solve(a[sound], np.moveaxis(right, -1, 0)[sound]), 0, -1)
    return out


def _lapack(jacobian, right):
    """Steps (6, N), clipped so that a wild one cannot throw the body away."""
    out = solve_each(jacobian, right[:, None])[:, 0]
    out[:3], out[3:] = np.clip(out[:3], -50.0, 50.0), np.clip(out[3:], -0.5, 0.5)
    return out


def branch_sign(lu, order: Order):
    """Sign (N,) of the row Jacobian's determinant from its factors."""
    return order.parity * np.prod(np.sign(lu[np.arange(6), np.arange(6)]), axis=0)


def determinant_sign(jacobian):
    """Sign (N,) of the determinant of Jacobians (6, 6, N), 0 where they are not finite."""
    a = np.moveaxis(jacobian, -1, 0)
    sound = np.isfinite(a).all(axis=(1, 2))
    return np.sign(np.linalg.det(np.where(sound[:, None, None], a, 0.0)))


def singular_values(jacobian):
    """Singular values (6,) of one row Jacobian (6, 6), turns weighed by LEVER_MM: the last over the first judges mobility."""
    a = np.array(jacobian, float)
    a[:, 3:] /= LEVER_MM
    return np.linalg.svd(a, compute_uv=False)
