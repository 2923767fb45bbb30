"""Conjugate gradients in compiled loops, preconditioned by a diagonal or by a factor L D L^T.

Hestenes and Stiefel, Methods of conjugate gradients for solving linear systems, J. Res. NBS 49 (1952); preconditioned
as in Saad, Iterative methods for sparse linear systems, 2nd ed. 2003, algorithm 9.1. With a factor, A times the
direction follows from A times the preconditioned residual by the same recurrence (Chronopoulos and Gear, s-step
iterative methods for symmetric linear systems, J. Comput. Appl. Math. 25 (1989)), so that one sweep over the factor
does the work of a product with the matrix too: a matrix entry above the diagonal lies where the factor has one.
"""

import os
from collections.abc import Callable, Iterator
from concurrent.futures import ThreadPoolExecutor
from contextlib import contextmanager
from typing import NamedTuple

import numpy as np

from dec.arrays import AnyArray, BoolArray, FloatArray, IntArray
from dec.topology.compiled import compiled

__all__ = ["FactoredSystem", "ScaledSystem", "Vectors", "descend"]

_WORTH_A_THREAD = 100_000  # rows from which handing one half over costs little beside it


class ScaledSystem(NamedTuple):
    """A matrix in CSR and the inverse of its diagonal, 0 for 0, and the parts that it falls into.

    ``part`` (k + 1,): where each part begins; ``singular`` (k,): whether constants on it are in the kernel, so that its
    mean is taken off.
    """

    indptr: AnyArray
    indices: AnyArray
    data: FloatArray
    inverse: FloatArray
    part: IntArray
    singular: BoolArray


class FactoredSystem(NamedTuple):
    """A matrix and a factor in one numbering, in which every row of a column comes after it.

    ``column, row, share``: the factor, see `dec.solvers.factor`; row n is the ground. ``entry``: the matrix at the same
    places, with zeros where only the factor has an entry (and a zero share where only the matrix has one).
    ``diagonal`` (n,): of the matrix. ``inverse``: of the pivots, 0 for 0. ``part, singular``: as in `ScaledSystem`.
    """

    column: AnyArray
    row: AnyArray
    share: FloatArray
    entry: FloatArray
    diagonal: FloatArray
    inverse: FloatArray
    part: IntArray
    singular: BoolArray


class Vectors(NamedTuple):
    """The state of an iteration: x, residual r, direction p, q = A p, z = the preconditioned residual, w = A z.

    z and w have one entry more, for the ground. ``mean`` (k,): mean of z on each singular part, 0 on others.
    ``numbers``: r.z of the last step, and the norm of r.
    """

    x: FloatArray
    r: FloatArray
    p: FloatArray
    q: FloatArray
    z: FloatArray
    w: FloatArray
    mean: FloatArray
    numbers: FloatArray

    @classmethod
    def at_start(cls, residual: FloatArray, n_parts: int) -> "Vectors":
        """The state before the first step from x = 0; the residual is used up."""
        n = len(residual)
        norm = np.sqrt(np.einsum("i,i", residual, residual))
        return cls(
            np.zeros(n), residual, np.zeros(n), np.zeros(n), np.zeros(n + 1), np.zeros(n + 1), np.zeros(n_parts),
            np.array([1.0, norm]),
        )  # fmt: skip


def descend(system: ScaledSystem | FactoredSystem, vectors: Vectors, stop: float, n_steps: int) -> list[float]:
    """Take steps until the residual's norm is at most `stop`; return the norm after each.

    Fewer steps than asked, with a larger norm, mean that the matrix was not positive along a direction.
    """
    v = vectors
    norms: list[float] = []
    with _halves(len(v.x)) as both:
        while len(norms) < n_steps:
            turned = _turn_scaled(system, v, both) if isinstance(system, ScaledSystem) else _turn_factored(system, v)
            inner, curvature = turned
            if not curvature > 0.0:
                break
            v.numbers[1] = np.sqrt(both(advance, inner / curvature, v.p, v.q, v.x, v.r))
            norms.append(float(v.numbers[1]))
            if not v.numbers[1] > stop:
                break
    return norms


def _turn_scaled(a: ScaledSystem, v: Vectors, both: Callable[..., float]) -> tuple[float, float]:
    """Write the next direction p and q = A p; return r.z and p.q, or zeros where there is none."""
    inner = scaled_square(a.part, a.singular, a.inverse, v.r, v.mean)
    if not inner > 0.0:
        return 0.0, 0.0
    turn_scaled(inner / v.numbers[0], a.part, v.mean, a.inverse, v.r, v.p)
    v.numbers[0] = inner
    return inner, both(multiply, a.indptr, a.indices, a.data, v.p, v.q)


def _turn_factored(a: FactoredSystem, v: Vectors) -> tuple[float, float]:
    """Write the next direction p and q = A p; return r.z and p.q, or zeros where there is none."""
    forward(a.column, a.row, a.share, a.inverse, v.r, v.z)
    inner = backward(a.column, a.row, a.share, a.entry, a.diagonal, a.part, a.singular, v.r, v.z, v.w, v.mean)
    if not inner > 0.0:
        return 0.0, 0.0
    curvature = turn(inner / v.numbers[0], a.part, v.mean, v.z, v.w, v.p, v.q)
    v.numbers[0] = inner
    return inner, curvature


@contextmanager
def _halves(n: int) -> Iterator[Callable[..., float]]:
    """A function that runs a loop on the lower and the upper half of the rows and adds what they return.

    Large halves run at the same time on a second thread, where there is a second processor; the sums are the same.
    """
    middle = n // 2
    if n < _WORTH_A_THREAD or (os.cpu_count() or 1) < 2:

        def in_turn(loop: Callable[..., float], *args: object) -> float:
            return loop(0, middle, *args) + loop(middle, n, *args)

        yield in_turn
        return

    with ThreadPoolExecutor(1) as helper:

        def at_once(loop: Callable[..., float], *args: object) -> float:
            upper = helper.submit(loop, middle, n, *args)
            return loop(0, middle, *args) + upper.result()

        yield at_once


@compiled
def scaled_square(part: IntArray, singular: BoolArray, inverse: FloatArray, r: FloatArray, mean: FloatArray) -> float:
    """Write the mean of z = D^-1 r on singular parts, which `turn_scaled` takes off; return r.z with it off."""
    inner = 0.0
    for k in range(len(singular)):
        sum_z, sum_r = 0.0, 0.0
        for i in range(part[k], part[k + 1]):
            z = inverse[i] * r[i]
            sum_z += z
            sum_r += r[i]
            inner += z * r[i]
        mean[k] = sum_z / (part[k + 1] - part[k]) if singular[k] else 0.0
        inner -= mean[k] * sum_r
    return inner


@compiled
def turn_scaled(
    beta: float, part: IntArray, mean: FloatArray, inverse: FloatArray, r: FloatArray, p: FloatArray
) -> None:
    """Write p = D^-1 r + beta p, with D^-1 r less its mean on singular parts."""
    for k in range(len(mean)):
        for i in range(part[k], part[k + 1]):
            p[i] = inverse[i] * r[i] - mean[k] + beta * p[i]


@compiled
def multiply(
    first: int, last: int, indptr: AnyArray, indices: AnyArray, data: FloatArray, p: FloatArray, q: FloatArray
) -> float:
    """Write q = A p in a range of rows; return its share of p.q."""
    product = 0.0
    for i in range(first, last):
        t = 0.0
        for k in range(indptr[i], indptr[i + 1]):
            t += data[k] * p[indices[k]]
        q[i] = t
        product += t * p[i]
    return product


@compiled
def advance(first: int, last: int, alpha: float, p: FloatArray, q: FloatArray, x: FloatArray, r: FloatArray) -> float:
    """Add alpha p to x and take alpha q off r in a range of rows; return its share of r.r."""
    total = 0.0
    for i in range(first, last):
        x[i] += alpha * p[i]
        r[i] -= alpha * q[i]
        total += r[i] * r[i]
    return total


@compiled
def forward(
    column: AnyArray, row: AnyArray, share: FloatArray, inverse: FloatArray, r: FloatArray, z: FloatArray
) -> None:
    """Write z = D^-1 L^-1 r, given z = 0."""
    for i in range(len(r)):
        t = z[i] + r[i]
        for k in range(column[i], column[i + 1]):
            z[row[k]] += share[k] * t
        z[i] = t * inverse[i]
    z[len(r)] = 0.0


@compiled
def backward(
    column: AnyArray, row: AnyArray, share: FloatArray, entry: FloatArray, diagonal: FloatArray, part: IntArray,
    singular: BoolArray, r: FloatArray, z: FloatArray, w: FloatArray, mean: FloatArray,
) -> float:  # fmt: skip
    """Write L^-T z over z and w = A z, given w = 0; return r.z with the mean of z off on singular parts."""
    inner = 0.0
    for k in range(len(singular) - 1, -1, -1):
        sum_z, sum_r, product = 0.0, 0.0, 0.0
        for i in range(part[k + 1] - 1, part[k] - 1, -1):
            t = z[i]
            for j in range(column[i], column[i + 1]):
                t += share[j] * z[row[j]]
            z[i] = t
            above = diagonal[i] * t
            for j in range(column[i], column[i + 1]):
                above += entry[j] * z[row[j]]
                w[row[j]] += entry[j] * t
            w[i] += above
            sum_z += t
            sum_r += r[i]
            product += t * r[i]
        mean[k] = sum_z / (part[k + 1] - part[k]) if singular[k] else 0.0
        inner += product - mean[k] * sum_r
    return inner


@compiled
def turn(
    beta: float, part: IntArray, mean: FloatArray, z: FloatArray, w: FloatArray, p: FloatArray, q: FloatArray
) -> float:
    """Write p = z + beta p, with z less its mean on singular parts, and q = w + beta q; leave z = w = 0; return p.q."""
    curvature = 0.0
    for k in range(len(mean)):
        for i in range(part[k], part[k + 1]):
            p[i] = z[i] - mean[k] + beta * p[i]
            q[i] = w[i] + beta * q[i]
            curvature += p[i] * q[i]
            z[i] = 0.0
            w[i] = 0.0
    return curvature
