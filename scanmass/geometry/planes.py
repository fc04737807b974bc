"""Planes: through the neighbours of every point, by least squares, and the largest one in a cloud."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from numba import njit

FloatArray = npt.NDArray[np.float64]
IndexArray = npt.NDArray[np.int64]

_ALIGNED = 0.906  # cosine of 25 degrees


@njit(cache=True)
def _least_axis(xx, yy, zz, xy, yz, zx, out):  # type: ignore[no-untyped-def]
    """Least eigenvalue of a symmetric 3x3 matrix; its unit vector goes to ``out``. Returns (least, middle)."""
    scale = max(abs(xx), abs(yy), abs(zz), abs(xy), abs(yz), abs(zx))
    if scale == 0.0:
        out[0], out[1], out[2] = 0.0, 0.0, 1.0
        return 0.0, 0.0
    xx, yy, zz, xy, yz, zx = xx / scale, yy / scale, zz / scale, xy / scale, yz / scale, zx / scale
    q = (xx + yy + zz) / 3.0
    a, b, c = xx - q, yy - q, zz - q
    off = xy * xy + yz * yz + zx * zx
    p = np.sqrt((a * a + b * b + c * c + 2.0 * off) / 6.0)
    if p < 1e-14:
        out[0], out[1], out[2] = 0.0, 0.0, 1.0
        return q * scale, q * scale
    det = a * (b * c - yz * yz) - xy * (xy * c - yz * zx) + zx * (xy * yz - b * zx)
    angle = np.arccos(min(1.0, max(-1.0, det / (2.0 * p * p * p)))) / 3.0
    least = q + 2.0 * p * np.cos(angle + 2.0943951023931953)
    largest = q + 2.0 * p * np.cos(angle)
    middle = 3.0 * q - least - largest
    # The rows of (M - least) span the plane normal to the axis; the longest of their products is the safest.
    a, b, c = xx - least, yy - least, zz - least
    best = -1.0
    for pair in range(3):
        if pair == 0:
            u0, u1, u2, v0, v1, v2 = a, xy, zx, xy, b, yz
        elif pair == 1:
            u0, u1, u2, v0, v1, v2 = a, xy, zx, zx, yz, c
        else:
            u0, u1, u2, v0, v1, v2 = xy, b, yz, zx, yz, c
        w0, w1, w2 = u1 * v2 - u2 * v1, u2 * v0 - u0 * v2, u0 * v1 - u1 * v0
        length = w0 * w0 + w1 * w1 + w2 * w2
        if length > best:
            best = length
            out[0], out[1], out[2] = w0, w1, w2
    if best <= 1e-300:
        out[0], out[1], out[2] = 0.0, 0.0, 1.0
    else:
        root = np.sqrt(best)
        out[0] /= root
        out[1] /= root
        out[2] /= root
    return max(least, 0.0) * scale, max(middle, 0.0) * scale


@njit(cache=True)
def _local_planes(points, asked, index, normals, deviation):  # type: ignore[no-untyped-def]
    k = index.shape[1]
    for a in range(asked.shape[0]):
        i = asked[a]
        sx = sy = sz = sxx = syy = szz = sxy = syz = szx = 0.0
        for j in range(k):
            m = index[a, j]
            x = points[m, 0] - points[i, 0]
            y = points[m, 1] - points[i, 1]
            z = points[m, 2] - points[i, 2]
            sx += x
            sy += y
            sz += z
            sxx += x * x
            syy += y * y
            szz += z * z
            sxy += x * y
            syz += y * z
            szx += z * x
        n = k + 1.0
        least, _ = _least_axis(
            sxx / n - sx * sx / n / n,
            syy / n - sy * sy / n / n,
            szz / n - sz * sz / n / n,
            sxy / n - sx * sy / n / n,
            syz / n - sy * sz / n / n,
            szx / n - sz * sx / n / n,
            normals[a],
        )
        deviation[a] = np.sqrt(least * n / max(n - 3.0, 1.0))


def local_planes(
    points: FloatArray, index: IndexArray, asked: IndexArray | None = None
) -> tuple[FloatArray, FloatArray]:
    """Unit normals (m, 3), of either sign, and deviations (m,) of the planes through points and their neighbours.

    ``index`` (m, k) numbers the neighbours of each point ``asked`` (m,) of ``points`` (n, 3), itself not among them;
    without ``asked`` it is every point in order. The deviation is the standard deviation of the k + 1 points off
    their plane, three degrees of freedom taken off: noise, and what the surface bends within its neighbourhood. Below
    1e-8 of the neighbourhood's width it is rounding.

    >>> flat = np.array([[0.0, 0, 5], [1, 0, 5], [0, 1, 5], [1, 1, 5]])
    >>> normals, deviation = local_planes(flat, np.array([[1, 2, 3]] * 4))
    >>> np.abs(normals[0]).round(9).tolist(), bool(deviation.max() < 1e-7)
    ([0.0, 0.0, 1.0], True)
    """
    which = np.arange(len(points)) if asked is None else asked
    normals = np.empty((len(which), 3))
    deviation = np.empty(len(which))
    _local_planes(np.ascontiguousarray(points), which, np.ascontiguousarray(index), normals, deviation)
    return normals, deviation


def fit_plane(points: FloatArray, weights: FloatArray | None = None) -> tuple[FloatArray, float]:
    """Unit normal (3,) and offset of the least-squares plane {x: x.normal = offset} of points (n, 3).

    The largest component of the normal is positive.

    >>> normal, offset = fit_plane(np.array([[0.0, 0, 2], [1, 0, 2], [0, 1, 2], [1, 1, 2]]))
    >>> normal.round(9).tolist(), round(offset, 9)
    ([0.0, 0.0, 1.0], 2.0)
    """
    weight = np.ones(len(points)) if weights is None else weights
    centre = weight @ points / weight.sum()
    away = points - centre
    _, axes = np.linalg.eigh((away * weight[:, None]).T @ away)
    normal = axes[:, 0] * np.sign(axes[np.argmax(np.abs(axes[:, 0])), 0])
    return normal + 0.0, float(centre @ normal)


def plane_axes(normal: FloatArray) -> FloatArray:
    """Two unit vectors (2, 3) that with ``normal`` make a right-handed frame: first x second = normal.

    >>> np.cross(*plane_axes(np.array([0.0, 0.6, 0.8]))).round(9).tolist()
    [0.0, 0.6, 0.8]
    """
    start = np.eye(3)[np.argmin(np.abs(normal))]
    first = np.cross(start, normal)
    first /= np.linalg.norm(first)
    return np.stack([first, np.cross(normal, first)])


def largest_plane(
    points: FloatArray,
    normals: FloatArray,
    areas: FloatArray,
    tolerance: float,
    rng: np.random.Generator,
    trials: int = 150,
    sample: int = 8_000,
) -> tuple[FloatArray, float] | None:
    """The plane with the most area of surface on it, as unit normal (3,) and offset, or None without points.

    RANSAC (Fischler & Bolles 1981) from one point and its normal: a point is on a plane when it lies within
    ``tolerance`` and its own normal is within 25 degrees. Scored by the area that points stand for, so dense
    parts of an uneven scan do not win by their number, and by 1 - (distance / tolerance)^2, so a plane through
    one sheet beats one slanted through two (MSAC, Torr & Zisserman 2000). The ten best are refined by least squares.
    """
    n = len(points)
    if n < 3:
        return None
    some = rng.choice(n, min(n, sample), replace=False)
    p, m, a = points[some], normals[some], areas[some]
    starts = rng.choice(len(some), min(trials, len(some)), replace=False, p=a / a.sum() if (a > 0).all() else None)
    scored = [(_score(p, m, a, m[i], float(p[i] @ m[i]), tolerance), i) for i in starts]
    best, found = 0.0, None
    for _, i in sorted(scored, reverse=True)[:10]:
        normal, offset = m[i], float(p[i] @ m[i])
        for _ in range(4):
            on = (np.abs(p @ normal - offset) < tolerance) & (np.abs(m @ normal) > _ALIGNED)
            if on.sum() < 3:
                break
            normal, offset = fit_plane(p[on], a[on])
        if (score := _score(p, m, a, normal, offset, tolerance)) > best:
            best, found = score, (normal, offset)
    return found


def _score(p: FloatArray, m: FloatArray, a: FloatArray, normal: FloatArray, offset: float, tolerance: float) -> float:
    share = (p @ normal - offset) / tolerance
    on = (np.abs(share) < 1.0) & (np.abs(m @ normal) > _ALIGNED)
    return float(a[on] @ (1.0 - share[on] ** 2))
