"""Conductance times difference, kept with its rounding error."""

import numpy as np

from dec.arrays import FloatArray
from dec.solvers.pairs import UNIT, pair_product, pair_sum
from dec.solvers.posed import Posed
from dec.topology.edges import blocks

__all__ = ["downhill_flow", "drive_pair"]

_SMALLEST = 1e-280
_TINY = 5e-324


def drive_pair(c: FloatArray, u_tail: FloatArray, u_head: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
    """The product of conductance and difference, head minus tail, to twice the precision of float64.

    Parameters
    ----------
    c : float64 array, shape (k, 1)
    u_tail, u_head : float64 arrays, shape (k, m)

    Returns
    -------
    drive, rest, allowance : float64 arrays, shape (k, m)
        ``c (u_head - u_tail)`` is ``drive + rest`` within the allowance: some 2^-104 of it, or 2^-53 where the product
        leaves the range in which its rounding error is a float (conductances above 1e300, products below 1e-280).

    Examples
    --------
    >>> one = np.ones((1, 1))
    >>> drive_pair(one / 4, one * 1e-20, one)[:2]
    (array([[0.25]]), array([[-2.5e-21]]))
    """
    du, du_rest = pair_sum(u_head, -u_tail)
    with np.errstate(over="ignore", invalid="ignore"):
        drive, rounding = pair_product(np.broadcast_to(c, du.shape), du)
    known = np.isfinite(rounding) & ((np.abs(drive) > _SMALLEST) | (du == 0))
    rounding = np.where(known, rounding, 0.0)
    rest = rounding + c * du_rest
    allowance = np.where(known, 0.0, UNIT * np.abs(drive) + _TINY)
    allowance += 4 * UNIT * (np.abs(rounding) + np.abs(rest))
    return drive, rest, allowance


def downhill_flow(problem: Posed, potential: FloatArray) -> tuple[FloatArray, FloatArray]:
    """The flow -c du that potentials drive, as a rounded value and the rest.

    Parameters
    ----------
    problem : Posed
    potential : float64 array, shape (n0, m)

    Returns
    -------
    value, rest : float64 arrays, shape (k, m)

    Examples
    --------
    >>> from dec.calculus.complex import Complex
    >>> from dec.solvers.posed import posed
    >>> problem = posed(Complex.from_edges([0], [1]), [1, -1], [2.0], None, 1.0, "refuse")
    >>> downhill_flow(problem, np.array([[0.75], [0.25]]))[0]
    array([[1.]])
    """
    shape = (len(problem.edges), potential.shape[1])
    value, rest = np.empty(shape), np.empty(shape)
    for part in blocks(len(problem.edges)):
        tail, head = potential[problem.tail[part]], potential[problem.head[part]]
        value[part], rest[part], _ = drive_pair(problem.conductance[part, None], head, tail)
    return value, rest
