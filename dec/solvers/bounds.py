"""What a potential and a balanced flow prove together: a distance to the exact solution, and bounds on the energy."""

import numpy as np

from dec.arrays import FloatArray
from dec.solvers.balanced import BalancedFlow
from dec.solvers.drive import drive_pair
from dec.solvers.outcome import norm
from dec.solvers.pairs import UNIT, pair_sum
from dec.solvers.posed import Posed
from dec.topology.edges import blocks

__all__ = ["energy_between", "linear_bound"]


def linear_bound(problem: Posed, potential: FloatArray, flow: BalancedFlow) -> FloatArray:
    """The root of the sum over edges of (f + c du)^2 / c, rounded upwards: the error in the energy norm is no larger.

    Parameters
    ----------
    problem : Posed
        With positive conductances c and exponents of 1.
    potential : float64 array, shape (n0, m)
        Any u that has the fixed values.
    flow : BalancedFlow
        Any f that balances at all other vertices.

    Returns
    -------
    float64 array, shape (m,)
        Its square is ``|u - u*|^2 + |f - f*|^2`` for the exact solution u*, f* = -c du*; in the unit of energy.

    Notes
    -----
    The three vectors f* + c du, f + c du and f - f* form a right-angled triangle in the norm sum q^2 / c. Source:
    Prager and Synge, Approximations in elasticity based on the concept of function space, Quarterly of Applied
    Mathematics 5 (1947).

    Rounding. The product c du and the flow f are kept with their rests, and f + c du is formed from the large parts
    first. What remains is the allowance of c du and the slack of f, the rounding of the small parts (three operations:
    4 x 2^-53 of their magnitudes covers it) and that of the last sum (2^-53 of the gap); all of them enlarge the gap
    of the edge. Quotients, squares, the sum over k edges and its root are low by at most (k + 8) 2^-53 of themselves,
    and summing by blocks adds no more than 8 2^-53 for the second root; the result is raised by 2 (k + 8) 2^-53.

    Examples
    --------
    >>> from dec.calculus.complex import Complex
    >>> from dec.solvers.balanced import Carrier
    >>> from dec.solvers.posed import posed
    >>> problem = posed(Complex.from_edges([0], [1]), [1, -1], None, None, 1.0, "refuse")
    >>> flow = Carrier(problem, problem.conductance).balance(np.zeros((1, 1)), np.zeros((1, 1)))
    >>> round(float(linear_bound(problem, np.array([[0.5], [-0.25]]), flow)[0]), 12)  # u* = (1/2, -1/2), f* = 1
    0.25
    """
    norms = []
    for part in blocks(len(problem.edges)):
        c = problem.conductance[part, None]
        drive, drive_rest, allowance = drive_pair(c, potential[problem.tail[part]], potential[problem.head[part]])
        near, near_rest = pair_sum(flow.value[part], drive)
        small = (flow.rest[part], drive_rest, near_rest)
        allowance += 4 * UNIT * _magnitudes(small)
        gap = np.abs(near + (small[0] + small[1] + small[2])) * (1.0 + 2 * UNIT) + allowance + flow.slack[part]
        norms.append(norm(gap / np.sqrt(c)))
    whole = norm(np.array(norms).reshape(-1, potential.shape[1]))
    return whole * (1.0 + 2 * (len(problem.edges) + 8) * UNIT)


def energy_between(problem: Posed, potential: FloatArray, flow: BalancedFlow, bound: FloatArray) -> FloatArray:
    """The energy dissipated by the exact solution lies between these: float64 array of shape (2, m), low and high.

    Parameters
    ----------
    problem, potential, flow
        As `linear_bound`.
    bound : float64 array, shape (m,)
        What `linear_bound` gave.

    Notes
    -----
    The energy is the sum of c (d u*)^2. With sources only, any balanced flow has at least that energy (Thomson); with
    fixed potentials only, any potential that has them does (Dirichlet); the other side is less by the square of the
    bound. With both, the exact flow lies on a sphere round (f - c du) / 2 with half the bound as radius (Prager and
    Synge).
    """
    with np.errstate(over="ignore", invalid="ignore"):  # an energy beyond the largest float is infinite
        return _enclosed(problem, potential, flow, bound)


def _enclosed(problem: Posed, potential: FloatArray, flow: BalancedFlow, bound: FloatArray) -> FloatArray:
    slack = 1.0 + 4 * (len(problem.edges) + 8) * UNIT
    c = problem.conductance[:, None]
    if problem.is_level:
        high = (flow.value**2 / c).sum(axis=0) * slack
        low = high / slack**2 - bound**2 * slack
    elif not problem.source[~problem.is_fixed].any():
        high = (c * problem.differences(potential) ** 2).sum(axis=0) * slack
        low = high / slack**2 - bound**2 * slack
    else:
        middle = np.sqrt((((flow.value - c * problem.differences(potential)) / 2) ** 2 / c).sum(axis=0))
        radius = bound / 2
        low, high = np.maximum(middle / slack - radius, 0.0) ** 2 / slack, (middle * slack + radius) ** 2 * slack
    return np.stack([np.fmax(low, 0.0), high])


def _magnitudes(parts: tuple[FloatArray, ...]) -> FloatArray:
    total = np.abs(parts[0])
    for part in parts[1:]:
        total += np.abs(part)
    return total
