"""Points and triangles, one at a time, for kernels: triples of numbers in, triples out."""

from __future__ import annotations

from numba import njit


@njit(cache=True)
def dot(a, b):  # type: ignore[no-untyped-def]
    """Scalar product of two triples."""
    return a[0] * b[0] + a[1] * b[1] + a[2] * b[2]


@njit(cache=True)
def between(a, b):  # type: ignore[no-untyped-def]
    """From a to b."""
    return b[0] - a[0], b[1] - a[1], b[2] - a[2]


@njit(cache=True)
def row(array, k):  # type: ignore[no-untyped-def]
    """Row k of an array (n, 3) as a triple."""
    # Tuples stay in registers; rows of arrays, a hundred a sample, made this ten times slower.
    return array[k, 0], array[k, 1], array[k, 2]


@njit(cache=True)
def mixed(weights, a, b, c):  # type: ignore[no-untyped-def]
    """The point with barycentric ``weights`` in triangle a, b, c."""
    u, v, w = weights
    return u * a[0] + v * b[0] + w * c[0], u * a[1] + v * b[1] + w * c[1], u * a[2] + v * b[2] + w * c[2]


@njit(cache=True)
def closest(p, a, b, c):  # type: ignore[no-untyped-def]
    """Barycentric weights of the point of triangle a, b, c that is nearest to p (by the regions of its plane)."""
    ab, ac, ap = between(a, b), between(a, c), between(a, p)
    d1, d2 = dot(ab, ap), dot(ac, ap)
    if d1 <= 0.0 and d2 <= 0.0:
        return 1.0, 0.0, 0.0
    bp = between(b, p)
    d3, d4 = dot(ab, bp), dot(ac, bp)
    if d3 >= 0.0 and d4 <= d3:
        return 0.0, 1.0, 0.0
    vc = d1 * d4 - d3 * d2
    if vc <= 0.0 and d1 >= 0.0 and d3 <= 0.0:
        t = d1 / (d1 - d3) if d1 > d3 else 0.0
        return 1.0 - t, t, 0.0
    cp = between(c, p)
    d5, d6 = dot(ab, cp), dot(ac, cp)
    if d6 >= 0.0 and d5 <= d6:
        return 0.0, 0.0, 1.0
    vb = d5 * d2 - d1 * d6
    if vb <= 0.0 and d2 >= 0.0 and d6 <= 0.0:
        t = d2 / (d2 - d6) if d2 > d6 else 0.0
        return 1.0 - t, 0.0, t
    va = d3 * d6 - d5 * d4
    if va <= 0.0 and d4 - d3 >= 0.0 and d5 - d6 >= 0.0:
        span = (d4 - d3) + (d5 - d6)
        t = (d4 - d3) / span if span > 0.0 else 0.0
        return 0.0, 1.0 - t, t
    total = va + vb + vc
    if total <= 0.0:
        return 1.0, 0.0, 0.0
    return va / total, vb / total, vc / total
