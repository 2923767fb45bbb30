"""The power law of an edge, drop = q |q|^(n - 1) / c, and what a flow and a drop prove of each other under it."""

import numpy as np

from dec.arrays import FloatArray
from dec.solvers.balanced import BalancedFlow
from dec.solvers.outcome import norm
from dec.solvers.pairs import UNIT
from dec.solvers.posed import Posed

__all__ = ["drop_of", "flow_of", "power_bound", "power_energy"]


def flow_of(drop: FloatArray, c: FloatArray, n: FloatArray) -> FloatArray:
    """The flow that a drop drives, (c |drop|)^(1/n) with the sign of the drop.

    Parameters
    ----------
    drop : float64 array
        Tail minus head.
    c, n : float64 arrays
        Conductance and exponent of each edge.

    Returns
    -------
    float64 array

    Examples
    --------
    >>> flow_of(np.array([-18.0]), np.array([0.5]), np.array([2.0]))
    array([-3.])
    """
    return np.asarray(np.copysign((np.abs(c) * np.abs(drop)) ** (1.0 / n), c * drop))


def drop_of(flow: FloatArray, c: FloatArray, n: FloatArray) -> FloatArray:
    """The drop that a flow costs, |flow|^n / c with the sign of the flow; the inverse of `flow_of`.

    Examples
    --------
    >>> drop_of(np.array([-3.0]), np.array([0.5]), np.array([2.0]))
    array([-18.])
    """
    return np.asarray(np.copysign(np.abs(flow) ** n, flow) / c)


def power_bound(problem: Posed, potential: FloatArray, flow: BalancedFlow) -> FloatArray:
    """The root of twice the sum of the Fenchel gaps of all edges, from above and rounded upwards.

    Parameters
    ----------
    problem : Posed
    potential : float64 array, shape (n0, m)
        Any u that has the fixed values.
    flow : BalancedFlow
        Any f that balances at all other vertices.

    Returns
    -------
    float64 array, shape (m,)
        Half its square bounds both how far the content of f lies above the least one and how far the co-content of u
        does. For exponents of 1 it bounds the error in the energy norm.

    Notes
    -----
    The gap of an edge is Phi(f) + Psi(d) - f d with content Phi(f) = |f|^(n+1) / ((n+1) c), co-content Psi, its
    conjugate, and drop d = u_tail - u_head; it is never negative, and over all edges the gaps add up to the sum of
    both excesses (Millar, Some general theorems for non-linear systems, Philosophical Magazine 42 (1951), from memory;
    Rockafellar, Convex Analysis, 1970, section 31). Formed so it would drown in rounding. But with q the flow that d
    drives, it is the remainder of the first-order expansion of Phi at q, so at most Phi'' (f - q)^2 / 2 with Phi'' at
    the larger of |f| and |q|: n max(|f|, |q|)^(n-1) (f - q)^2 / (2 c). That is what is added up here. It is exact for
    n = 1, tends to the gap as f and q agree, and is never four times as large.

    Rounding. q carries a relative error of at most (12 + |ln(c |d|)|) 2^-53: three for the difference, the product
    and the exponent (each divided by n), the logarithm times the rounding of 1/n, eight for the power itself. It
    enlarges f - q together with the slack of f, and the larger flow too; the result is raised as in `linear_bound`.

    Examples
    --------
    >>> from dec.calculus.complex import Complex
    >>> from dec.solvers.balanced import Carrier
    >>> from dec.solvers.posed import posed
    >>> problem = posed(Complex.from_edges([0], [1]), [1, -1], None, None, 2.0, "refuse")
    >>> flow = Carrier(problem, problem.conductance).balance(np.zeros((1, 1)), np.zeros((1, 1)))
    >>> round(float(power_bound(problem, np.array([[1.0], [0.0]]), flow)[0]), 12)  # f = 1, drop = 1
    0.0
    """
    c, n = problem.conductance[:, None], problem.exponent[:, None]
    drop = -problem.differences(potential)
    driven = flow_of(drop, c, n)
    power = c * np.abs(drop)
    logarithm = np.abs(np.log(power, out=np.zeros_like(power), where=power > 0))
    doubt = (12.0 + logarithm) * UNIT * np.abs(driven)
    apart = np.abs((flow.value - driven) + flow.rest) * (1.0 + 4 * UNIT) + flow.slack + doubt
    apart += 2 * UNIT * np.abs(flow.rest)
    larger = np.maximum(np.abs(flow.value) + np.abs(flow.rest) + flow.slack, np.abs(driven) + doubt)
    weighed = np.sqrt(n * larger ** (n - 1.0) / c) * apart
    return norm(weighed) * (1.0 + 2 * (len(problem.edges) + 32) * UNIT)


def power_energy(problem: Posed, flow: BalancedFlow, bound: FloatArray) -> FloatArray | None:
    """The energy dissipated by the exact solution lies between these: shape (2, m), low and high.

    Parameters
    ----------
    problem : Posed
    flow : BalancedFlow
    bound : float64 array, shape (m,)
        What `power_bound` gave.

    Returns
    -------
    float64 array of shape (2, m), or None where exponents differ between edges

    Notes
    -----
    The energy is the sum of |f|^p / c with p = n + 1. Its p-th root is a norm, and since p >= 2 the gaps add up to at
    least the sum of |f - f*|^p / (p (2^(p-1) - 1) c), so the norms of f and of the exact f* differ by at most
    (p (2^(p-1) - 1) bound^2 / 2)^(1/p). Source: Lindqvist, On the equation div(|grad u|^(p-2) grad u) + lambda
    |u|^(p-2) u = 0, Proc. AMS 109 (1990), inequality I (from memory). Without fixed potentials f has at least the
    exact energy (Thomson), and at most p times the gaps more.
    """
    n = float(problem.exponent[0]) if len(problem.exponent) else 1.0
    if (problem.exponent != n).any():
        return None
    p, gaps = n + 1.0, bound**2 / 2
    slack = 1.0 + 16 * (len(problem.edges) + 16) * UNIT
    energy = (np.abs(flow.value) ** p / problem.conductance[:, None]).sum(axis=0)
    if problem.is_level:
        return np.stack([np.maximum(energy / slack - p * gaps, 0.0), energy * slack])
    apart = (p * (2 ** (p - 1.0) - 1.0) * gaps) ** (1.0 / p)
    root = energy ** (1.0 / p)
    return np.stack([np.maximum(root / slack - apart, 0.0) ** p / slack, (root * slack + apart) ** p * slack])
