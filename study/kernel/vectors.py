"""Vector helpers for arrays that carry their components first: shape (3, ...), builds last."""

import numpy as np


def cross(a, b):
    """a × b of component-first arrays; the trailing shapes broadcast."""
    out = np.empty(np.broadcast_shapes(a.shape, b.shape))
    for i in range(3):
        j, k = (i + 1) % 3, (i + 2) % 3
        np.multiply(a[j], b[k], out=out[i])
        out[i] -= a[k] * b[j]
    return out


def dot(a, b):
    """a · b of component-first arrays."""
    out = a[0] * b[0]
    out += a[1] * b[1]
    out += a[2] * b[2]
    return out


def norm(a):
    """Length of component-first vectors."""
    out = dot(a, a)
    return np.sqrt(out, out=out)


def unit(a):
    """a / |a|."""
    return a / norm(a)


def gibbs_matrix(g):
    """Rotation matrix (3, 3, N) of Gibbs vectors g (3, N), g = axis · tan(angle / 2).

    R = I + 2 / (1 + g·g) · ([g]× + [g]×²): the Cayley form, exact for any angle below 180°.
    """
    x, y, z = g
    f = 2.0 / (1.0 + x * x + y * y + z * z)
    fx, fy, fz = f * x, f * y, f * z
    xx, yy, zz = fx * x, fy * y, fz * z
    xy, xz, yz = fx * y, fx * z, fy * z
    out = np.empty((3, 3) + x.shape)
    out[0, 0], out[1, 1], out[2, 2] = 1.0 - yy - zz, 1.0 - xx - zz, 1.0 - xx - yy
    out[0, 1], out[1, 0] = xy - fz, xy + fz
    out[0, 2], out[2, 0] = xz + fy, xz - fy
    out[1, 2], out[2, 1] = yz - fx, yz + fx
    return out


def gibbs_add(h, g):
    """Gibbs vector of the rotation g followed by the rotation h: (h + g + h × g) / (1 − h·g)."""
    return (h + g + cross(h, g)) / (1.0 - dot(h, g))


def turn(rotation, p):
    """R p for one rotation matrix (3, 3) and component-first points p (3, ...)."""
    return (rotation @ p.reshape(3, -1)).reshape(p.shape)


def turn_each(rotation, p):
    """R p for rotation matrices (3, 3, N) and points p (3, N) or (3, rows, N)."""
    out = np.empty(np.broadcast_shapes(p.shape, rotation.shape[2:]))
    for i in range(3):
        np.multiply(rotation[i, 0], p[0], out=out[i])
        out[i] += rotation[i, 1] * p[1]
        out[i] += rotation[i, 2] * p[2]
    return out


def tilt(axis, normals, angles):
    """Unit vectors `axis` (3, 1) turned by angles (2, N) rad about the two normals (2, 3).

    The two angles form one rotation vector θ = a₁ n₁ + a₂ n₂ (Rodrigues' formula), so their order does not matter.
    """
    theta = normals.T @ angles
    size = norm(theta)
    return np.cos(size) * axis + np.sinc(size / np.pi) * cross(theta, axis)


def two_normals(axis):
    """The two unit normals (2, 3) of a direction (3,), the first the one nearest x, both pointing the positive way."""
    axis = np.asarray(axis, float) / np.linalg.norm(axis)
    rest = np.eye(3) - np.outer(axis, axis)
    first = rest[int(np.argmax(np.diag(rest) * (1.0, 1e-9, 1e-12)))]
    first = first / np.linalg.norm(first)
    second = np.cross(axis, first)
    return np.stack([n if n[np.argmax(np.abs(n))] > 0 else -n for n in (first, second)])
