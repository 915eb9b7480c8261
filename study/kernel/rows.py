"""The scalar rows that hold a rigid body, their residuals (mm) and their exact Jacobians.

Shapes: components first, then rows, builds last. A body point p stands in the body's own frame, whose axes are the
car's at design and whose origin is a point of the body; its place in the car is R p + t. A twist (v, ω) is the velocity
of that origin and the turn rate, so the body point moves with v + ω × (R p).

Row order everywhere: links, guides, tyres.
"""

from typing import NamedTuple

import numpy as np

from study.kernel.vectors import cross, dot, norm, turn, turn_each


class Rows(NamedTuple):
    """What holds one body in N builds (lengths in mm).

    link:  |R p + t − g| = L         link_body p (3, nl, N), link_chassis g (3, nl, N), link_length L (nl, N)
    guide: (R n)·(g − t − R p) = 0   guide_body p, guide_normal n, guide_chassis g, each (3, ng, N)
    tyre:  m·W − r·√(1 − (m·s)²) = h wheel_centre W, wheel_axis s (3, nw, N), wheel_radius r (nw, 1)
    rack:  (nl, 1), the share of the rack travel (along +y) that each link's chassis end follows
    """

    link_body: np.ndarray
    link_chassis: np.ndarray
    link_length: np.ndarray
    guide_body: np.ndarray
    guide_normal: np.ndarray
    guide_chassis: np.ndarray
    wheel_centre: np.ndarray
    wheel_axis: np.ndarray
    wheel_radius: np.ndarray
    rack: np.ndarray

    @property
    def count(self) -> int:
        return self.link_length.shape[0] + self.guide_body.shape[1] + self.wheel_centre.shape[1]

    def turned(self, rotation) -> "Rows":
        """The same rows for a body frame turned by one rotation matrix (3, 3)."""
        return self._replace(
            link_body=turn(rotation, self.link_body),
            guide_body=turn(rotation, self.guide_body),
            guide_normal=turn(rotation, self.guide_normal),
            wheel_centre=turn(rotation, self.wheel_centre),
            wheel_axis=turn(rotation, self.wheel_axis),
        )

    def racked(self, travel_mm) -> "Rows":
        """The same rows with the rack moved by `travel_mm` (scalar or (N,)) along +y."""
        chassis = self.link_chassis.copy()
        chassis[1] += self.rack * travel_mm
        return self._replace(link_chassis=chassis)

    def take(self, builds) -> "Rows":
        """The rows of some builds only (an index array or mask)."""
        thin = self.wheel_radius.shape[-1] == 1
        radius = self.wheel_radius if thin else self.wheel_radius[..., builds]
        return Rows(*(a[..., builds] for a in self[:8]), wheel_radius=radius, rack=self.rack)


class Road(NamedTuple):
    """The road plane m·x = h seen from the body.

    normal m (3, 1) or (3, N); height h (nw, N) mm; height_roll = dh/dφ (1,) or (N,) mm per radian,
    normal_roll = dm/dφ, shaped like normal.
    """

    normal: np.ndarray
    height: np.ndarray
    normal_roll: np.ndarray
    height_roll: np.ndarray

    def take(self, builds) -> "Road":
        return Road(*(a if a.shape[-1] == 1 else a[..., builds] for a in self))


def road_plane(*, roll_rad, ground_mm, rise_mm) -> Road:
    """The road plane: rolled about the x line on the design ground at y = 0, then moved by `rise_mm` along its normal.

    m = (0, sin φ, cos φ), h = z_g cos φ + z. roll_rad is a scalar or (N,), rise_mm (nw, N) or (N,).
    """
    phi = np.atleast_1d(np.asarray(roll_rad, float))
    s, c, zero = np.sin(phi), np.cos(phi), np.zeros_like(phi)
    height = ground_mm * c + np.atleast_2d(rise_mm)
    return Road(np.stack((zero, s, c)), height, np.stack((zero, c, -s)), -ground_mm * s)


def residuals(rows, road, rotation, t):
    """Residual of every row (n, N) in mm at the pose (rotation (3, 3, N), t (3, N))."""
    out = np.empty((rows.count, t.shape[1]))
    nl, ng = rows.link_length.shape[0], rows.guide_body.shape[1]
    if nl:
        arm = turn_each(rotation, rows.link_body)
        arm += t[:, None]
        arm -= rows.link_chassis
        np.subtract(norm(arm), rows.link_length, out=out[:nl])
    if ng:
        reach = rows.guide_chassis - t[:, None]
        normal = turn_each(rotation, rows.guide_normal)
        out[nl : nl + ng] = dot(normal, reach - turn_each(rotation, rows.guide_body))
    if nl + ng < rows.count:
        out[nl + ng :] = _tyre_residual(rows, road, rotation, t)
    return out


def _tyre_residual(rows, road, rotation, t):
    m = road.normal[:, None]
    centre = turn_each(rotation, rows.wheel_centre) + t[:, None]
    lean = dot(m, turn_each(rotation, rows.wheel_axis))
    return dot(m, centre) - rows.wheel_radius * np.sqrt(1.0 - lean * lean) - road.height


def linearise(rows, road, rotation, t, jacobian):
    """Residuals (n, N) and, written into `jacobian` (n, 6, N), the rows' gradients over the twist (v, ω).

    link:  û, (R p) × û with û the unit vector from the chassis end to the body end;
    guide: −R n, (R n) × (g − t);
    tyre:  m, (R W) × m + r (m·s)/√(1 − (m·s)²) · (s × m).
    """
    out = np.empty((rows.count, t.shape[1]))
    nl, ng = rows.link_length.shape[0], rows.guide_body.shape[1]
    if nl:
        _link_rows(rows, rotation, t, out[:nl], jacobian[:nl])
    if ng:
        _guide_rows(rows, rotation, t, out[nl : nl + ng], jacobian[nl : nl + ng])
    if nl + ng < rows.count:
        _tyre_rows(rows, road, rotation, t, out[nl + ng :], jacobian[nl + ng :])
    return out


def _link_rows(rows, rotation, t, out, jacobian):
    lever = turn_each(rotation, rows.link_body)
    arm = lever + t[:, None]
    arm -= rows.link_chassis
    length = norm(arm)
    np.subtract(length, rows.link_length, out=out)
    arm /= length
    _write(jacobian, arm, lever, arm)


def _guide_rows(rows, rotation, t, out, jacobian):
    reach = rows.guide_chassis - t[:, None]
    normal = turn_each(rotation, rows.guide_normal)
    out[...] = dot(normal, reach - turn_each(rotation, rows.guide_body))
    _write(jacobian, -normal, normal, reach)


def _tyre_rows(rows, road, rotation, t, out, jacobian):
    m = road.normal[:, None]
    lever = turn_each(rotation, rows.wheel_centre)
    axis = turn_each(rotation, rows.wheel_axis)
    lean = dot(m, axis)
    upright = np.sqrt(1.0 - lean * lean)
    out[...] = dot(m, lever + t[:, None]) - rows.wheel_radius * upright - road.height
    moment = cross(lever, m) + (rows.wheel_radius * lean / upright) * cross(axis, m)
    jacobian[:, :3] = np.broadcast_to(m, moment.shape).swapaxes(0, 1)
    jacobian[:, 3:] = moment.swapaxes(0, 1)


def _write(jacobian, direction, a, b):
    """Rows [direction, a × b] straight into the Jacobian, without a copy of the cross product."""
    for i in range(3):
        j, k = (i + 1) % 3, (i + 2) % 3
        jacobian[:, i] = direction[i]
        np.multiply(a[j], b[k], out=jacobian[:, 3 + i])
        jacobian[:, 3 + i] -= a[k] * b[j]


def tyre_roll_rate(rows, road, rotation, t):
    """−∂F/∂φ of the tyre rows (nw, N), mm per radian: what the body must do when the road rolls under it."""
    m, dm = road.normal[:, None], road.normal_roll[:, None]
    centre = turn_each(rotation, rows.wheel_centre) + t[:, None]
    axis = turn_each(rotation, rows.wheel_axis)
    lean = dot(m, axis)
    tip = rows.wheel_radius * lean * dot(dm, axis) / np.sqrt(1.0 - lean * lean)
    return road.height_roll - dot(dm, centre) - tip
