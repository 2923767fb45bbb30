"""Conjugate gradients for several right-hand sides at once: matrix and factor are read once for all of them.

Every column has its own steps; one that has converged stands still until the others have.
"""

import numpy as np

from dec.arrays import AnyArray, BoolArray, FloatArray, IntArray
from dec.solvers.gradients import FactoredSystem, ScaledSystem
from dec.topology.compiled import compiled

__all__ = ["descend_columns"]

_GAIN = 0.7  # a column whose residual falls by less in a run of steps is left


def descend_columns(
    system: ScaledSystem | FactoredSystem, r: FloatArray, stop: FloatArray, limit: int, run: int
) -> tuple[FloatArray, FloatArray]:
    """Solutions, and the norms of the residuals on the way.

    Parameters
    ----------
    system : ScaledSystem or FactoredSystem
    r : float64 array, shape (n, m)
        Right-hand sides, balanced on singular parts; used up.
    stop : float64 array, shape (m,)
        Norms at which columns are done.
    limit : int
        Steps at most.
    run : int
        Steps after which columns that hardly gain are left.

    Returns
    -------
    x : float64 array, shape (n, m)
        Of columns that hardly gain any more, what was reached: they are left for the caller to look at one by one.
    norms : float64 array, shape (steps + 1, m)
    """
    n, m = r.shape
    x, p, q = np.zeros((n, m)), np.zeros((n, m)), np.zeros((n, m))
    z, w = np.zeros((n + 1, m)), np.zeros((n + 1, m))
    mean = np.zeros((len(system.singular), m))
    inner = np.ones(m)
    norms = [np.sqrt(np.einsum("ij,ij->j", r, r))]
    best, active = norms[0], norms[0] > stop
    while active.any() and len(norms) <= limit:
        inner_before = inner
        if isinstance(system, ScaledSystem):
            inner = scale_block(system.part, system.singular, system.inverse, r, z, mean)
            multiply_block(system.indptr, system.indices, system.data, z, w)
        else:
            a = system
            forward_block(a.column, a.row, a.share, a.inverse, r, z)
            inner = backward_block(
                a.column, a.row, a.share, a.entry, a.diagonal, a.part, a.singular, r, z, w, mean
            )  # fmt: skip
        active &= inner > 0.0
        inner = np.where(active, inner, 1.0)
        curvature = turn_block(np.where(active, inner / inner_before, 0.0), system.part, mean, z, w, p, q)
        active &= curvature > 0.0
        alpha = np.divide(inner, curvature, out=np.zeros(m), where=active)
        norms.append(advance_block(alpha, p, q, x, r))
        active &= norms[-1] > stop
        if len(norms) % run == 0:
            reached = np.min(norms[-run:], axis=0)
            active &= reached <= _GAIN * best
            best = np.minimum(best, reached)
    return x, np.array(norms)


@compiled
def scale_block(
    part: IntArray, singular: BoolArray, inverse: FloatArray, r: FloatArray, z: FloatArray, mean: FloatArray
) -> FloatArray:
    """Write z = D^-1 r, and its mean on singular parts; return r.z with it off."""
    m = r.shape[1]
    inner = np.zeros(m)
    for k in range(len(singular)):
        sum_r = np.zeros(m)
        mean[k] = 0.0
        for i in range(part[k], part[k + 1]):
            for c in range(m):
                z[i, c] = inverse[i] * r[i, c]
                mean[k, c] += z[i, c]
                sum_r[c] += r[i, c]
                inner[c] += z[i, c] * r[i, c]
        for c in range(m):
            mean[k, c] = mean[k, c] / (part[k + 1] - part[k]) if singular[k] else 0.0
            inner[c] -= mean[k, c] * sum_r[c]
    return inner


@compiled
def multiply_block(indptr: AnyArray, indices: AnyArray, data: FloatArray, z: FloatArray, w: FloatArray) -> None:
    """Write w = A z, given w = 0."""
    m = z.shape[1]
    for i in range(len(indptr) - 1):
        for k in range(indptr[i], indptr[i + 1]):
            j = indices[k]
            for c in range(m):
                w[i, c] += data[k] * z[j, c]


@compiled
def forward_block(
    column: AnyArray, row: AnyArray, share: FloatArray, inverse: FloatArray, r: FloatArray, z: FloatArray
) -> None:
    """Write z = D^-1 L^-1 r, given z = 0."""
    n, m = r.shape
    for i in range(n):
        for c in range(m):
            z[i, c] += r[i, c]
        for k in range(column[i], column[i + 1]):
            j = row[k]
            for c in range(m):
                z[j, c] += share[k] * z[i, c]
        for c in range(m):
            z[i, c] *= inverse[i]
    z[n] = 0.0


@compiled
def backward_block(
    column: AnyArray, row: AnyArray, share: FloatArray, entry: FloatArray, diagonal: FloatArray, part: IntArray,
    singular: BoolArray, r: FloatArray, z: FloatArray, w: FloatArray, mean: FloatArray,
) -> FloatArray:  # fmt: skip
    """Write L^-T z over z, its mean on singular parts, and w = A z, given w = 0; return r.z with the mean off."""
    m = r.shape[1]
    inner = np.zeros(m)
    for k in range(len(singular) - 1, -1, -1):
        sum_r = np.zeros(m)
        mean[k] = 0.0
        for i in range(part[k + 1] - 1, part[k] - 1, -1):
            for j in range(column[i], column[i + 1]):
                h = row[j]
                for c in range(m):
                    z[i, c] += share[j] * z[h, c]
            for c in range(m):
                w[i, c] += diagonal[i] * z[i, c]
                mean[k, c] += z[i, c]
                sum_r[c] += r[i, c]
                inner[c] += z[i, c] * r[i, c]
            for j in range(column[i], column[i + 1]):
                h = row[j]
                if entry[j] != 0.0:
                    for c in range(m):
                        w[i, c] += entry[j] * z[h, c]
                        w[h, c] += entry[j] * z[i, c]
        for c in range(m):
            mean[k, c] = mean[k, c] / (part[k + 1] - part[k]) if singular[k] else 0.0
            inner[c] -= mean[k, c] * sum_r[c]
    return inner


@compiled
def turn_block(
    beta: FloatArray, part: IntArray, mean: FloatArray, z: FloatArray, w: FloatArray, p: FloatArray, q: FloatArray
) -> FloatArray:
    """Write p = z + beta p, z less its mean on singular parts, and q = w + beta q; leave z = w = 0; return p.q."""
    m = len(beta)
    curvature = np.zeros(m)
    for k in range(len(mean)):
        for i in range(part[k], part[k + 1]):
            for c in range(m):
                p[i, c] = z[i, c] - mean[k, c] + beta[c] * p[i, c]
                q[i, c] = w[i, c] + beta[c] * q[i, c]
                curvature[c] += p[i, c] * q[i, c]
                z[i, c] = 0.0
                w[i, c] = 0.0
    return curvature


@compiled
def advance_block(alpha: FloatArray, p: FloatArray, q: FloatArray, x: FloatArray, r: FloatArray) -> FloatArray:
    """Add alpha p to x and take alpha q off r; return the norms of r."""
    n, m = x.shape
    total = np.zeros(m)
    for i in range(n):
        for c in range(m):
            x[i, c] += alpha[c] * p[i, c]
            r[i, c] -= alpha[c] * q[i, c]
            total[c] += r[i, c] * r[i, c]
    return np.sqrt(total)
