"""Adjusted values on a grid finer than any digit that is published, where their balances are exact."""

import numpy as np

from dec.arrays import FloatArray, IntArray
from dec.audit.exactly import net_inflow
from dec.errors import AccuracyError
from dec.topology.graphs import spanning_forest, tree_flows

__all__ = ["balanced_grid", "steps_for"]

_MOST_BITS, _LEAST_BITS = 40, 10
_FIRST_SLACK = 16  # steps that rounding alone may put between a value and the whole number it stands for


def steps_for(amount: FloatArray) -> int:
    """How many steps of the grid make one unit: a power of two, fine enough and safe from overflow.

    Parameters
    ----------
    amount : float64 array
        Values in units.

    Raises
    ------
    AccuracyError
        If the values are so many units large that floating-point numbers do not tell their fractions.

    Examples
    --------
    >>> steps_for(np.array([1.5, 1000.0])) == 2**40
    True
    """
    largest, total = float(np.abs(amount).max(initial=0.0)), float(np.abs(amount).sum())
    bits = min(_MOST_BITS, 52 - int(np.frexp(largest)[1]), 60 - int(np.frexp(total)[1]))
    if not np.isfinite(total) or bits < _LEAST_BITS:
        message = (
            f"a unit must be large enough that adjusted values tell its fractions, got values of {largest:.3g} units; "
            "publish fewer digits"
        )
        raise AccuracyError(message)
    return int(2**bits)


def balanced_grid(
    tail: IntArray, head: IntArray, n_vertices: int, amount: FloatArray, put_in: IntArray, outside: int
) -> tuple[IntArray, int]:
    """Flows in whole steps of a fine grid that balance exactly.

    Parameters
    ----------
    tail, head : int64 arrays, shape (m,)
    n_vertices : int
    amount : float64 array, shape (m,)
        Flows in units, balanced up to rounding.
    put_in : int64 array, shape (n_vertices,)
        What goes in at each vertex, in whole units.
    outside : int
        The vertex that takes what is left over.

    Returns
    -------
    fine : int64 array, shape (m,)
        Inflow minus outflow plus ``put_in * parts`` is zero at every vertex but the outside. Each value lies between
        floor and ceiling of its amount: it is the whole number itself where rounding may be all that parts the two.
    parts : int
        Steps a unit.

    Raises
    ------
    AccuracyError
        If the amounts are too far from balance for that, or too large for their fractions to be told.

    Notes
    -----
    Flows that stand for whole numbers are set to them. What the others miss is whole in each of their connected parts
    and small, hence zero, so a spanning forest of them can carry it away.

    Examples
    --------
    >>> tail, head = np.array([0, 1, 1]), np.array([1, 2, 2])
    >>> fine, parts = balanced_grid(tail, head, 3, np.array([0.3 / 0.1, 1.3, 1.7]), np.array([3, 0, 0]), 2)
    >>> (fine / parts).round(6).tolist(), int(fine[0] - fine[1] - fine[2])
    ([3.0, 1.3, 1.7], 0)
    """
    parts = steps_for(np.append(amount, put_in))
    start = np.rint(amount * parts).astype(np.int64)
    nearest = np.rint(amount).astype(np.int64)
    bottom = np.floor(amount).astype(np.int64) * parts
    top = np.ceil(amount).astype(np.int64) * parts
    slack = _FIRST_SLACK
    missed = 0
    while slack < parts // 8:
        free = (np.abs(start - nearest * parts) > slack) & (tail != head)
        fine = np.where(free, start, nearest * parts)
        surplus = net_inflow(tail, head, fine, n_vertices) + put_in * parts
        forest = spanning_forest(tail, head, n_vertices, roots=np.array([outside]), usable=free)
        carried, left = tree_flows(tail, head, forest, surplus)
        left[outside] = 0
        missed = int(np.abs(left).max(initial=0))
        fine += carried
        if not missed and ((fine >= bottom) & (fine <= top)).all():
            return fine, parts
        slack *= 4
    message = (
        "adjusted values must balance to a small part of one unit before they can be rounded, "
        f"but some miss by {missed / parts:.3g} units; publish fewer digits, or audit with a stricter solver"
    )
    raise AccuracyError(message)
