"""Residual and error bound of a solution in exact arithmetic, rounded upwards once at the end."""

from fractions import Fraction
from math import ceil, inf, isqrt, nextafter

import numpy as np

from dec.arrays import AnyArray, BoolArray, FloatArray, IntArray, ObjectArray
from dec.topology.graphs import components, joined, spanning_forest, tree_flows

__all__ = ["exact_proof", "root_above"]

_BITS = 64  # below the largest term of a sum


def exact_proof(
    tail: IntArray, head: IntArray, conductance: FloatArray, source: FloatArray, is_fixed: BoolArray,
    potential: FloatArray, flow: FloatArray,
) -> tuple[float, float]:  # fmt: skip
    """What does not balance in the flow that potentials drive, and how far they are from the exact ones at most.

    Parameters
    ----------
    tail, head : int64 arrays, shape (n1,)
    conductance : float64 array, shape (n1,)
        Positive.
    source : float64 array, shape (n0,)
        In a part where no potential is fixed its surplus is spread evenly.
    is_fixed : bool array, shape (n0,)
    potential, flow : float64 arrays, shapes (n0,) and (n1,)

    Returns
    -------
    residual : float
        Euclidean norm over the vertices without a fixed potential, in the unit of the flow.
    bound : float
        On |u - u*| in the energy norm. The flow is first made to balance exactly, along the breadth-first tree that
        starts from the fixed vertices taken as one, then from the lowest vertex of each other part.

    Notes
    -----
    Every float is a whole number times a power of two, so that all this is exact. Source: Prager and Synge,
    Approximations in elasticity based on the concept of function space, Quarterly of Applied Mathematics 5 (1947).

    Examples
    --------
    >>> ends = np.array([0]), np.array([1])
    >>> exact_proof(*ends, np.ones(1), np.array([1.0, -1.0]), np.zeros(2, bool), np.array([0.5, -0.25]), np.ones(1))
    (0.3535533905932738, 0.25)
    """
    n = len(source)
    c, u, carried = _fractions(conductance), _fractions(potential), _fractions(flow)
    wanted = _spread(tail, head, _fractions(source), is_fixed)
    driven = c * (u[tail] - u[head])
    missed = wanted + _net_inflow(tail, head, driven, n)
    residual = root_above(sum((missed[~is_fixed] ** 2).tolist(), Fraction(0)))
    number, count = joined(np.flatnonzero(is_fixed), n)
    surplus = np.full(count, Fraction(0), dtype=object)
    np.add.at(surplus, number, wanted + _net_inflow(tail, head, carried, n))
    roots = number[np.flatnonzero(is_fixed)[:1]]
    surplus[roots] = Fraction(0)
    forest = spanning_forest(number[tail], number[head], count, roots=roots)
    repair, _ = tree_flows(number[tail], number[head], forest, surplus)
    terms = ((carried + repair - driven) ** 2 / c).tolist()
    return residual, root_above(_sum_above(terms))


def root_above(square: Fraction) -> float:
    """The least float found whose square is no smaller; within a few units in its last place of the root.

    Examples
    --------
    >>> root_above(Fraction(9, 4)), Fraction(root_above(Fraction(2))) ** 2 >= 2
    (1.5, True)
    """
    if not square:
        return 0.0
    shift = (square.denominator.bit_length() - square.numerator.bit_length()) // 2 + _BITS
    root = float(Fraction(isqrt(int(square * Fraction(4) ** shift))) / Fraction(2) ** shift)
    while Fraction(root) ** 2 < square:
        root = nextafter(root, inf)
    return root


def _fractions(values: FloatArray) -> ObjectArray:
    return np.array([Fraction(value) for value in values.tolist()], dtype=object)


def _net_inflow(tail: IntArray, head: IntArray, flow: AnyArray, n: int) -> ObjectArray:
    total = np.full(n, Fraction(0), dtype=object)
    np.add.at(total, head, flow)
    np.subtract.at(total, tail, flow)
    return total


def _spread(tail: IntArray, head: IntArray, source: ObjectArray, is_fixed: BoolArray) -> ObjectArray:
    """Return the sources less the mean surplus of every part without a fixed potential."""
    count, label = components(tail, head, len(source))
    total = np.full(count, Fraction(0), dtype=object)
    np.add.at(total, label, source)
    total[label[is_fixed]] = Fraction(0)
    share = total / np.bincount(label, minlength=count).astype(object)
    return np.asarray(source - share[label], dtype=object)


def _sum_above(terms: list[Fraction]) -> Fraction:
    """Return a sum of fractions, each rounded upwards to 64 bits below the largest: safe, and short."""
    largest = max(terms, default=Fraction(0))
    if not largest:
        return Fraction(0)
    scale = Fraction(2) ** (_BITS + largest.denominator.bit_length() - largest.numerator.bit_length())
    return sum(ceil(term * scale) for term in terms) / scale
