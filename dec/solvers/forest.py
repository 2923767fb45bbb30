"""Networks without loops: flows follow from the balance alone, and potentials from the flows."""

import numpy as np

from dec.arrays import FloatArray
from dec.solvers.balanced import BalancedFlow, Carrier
from dec.solvers.edge_law import drop_of, flow_of
from dec.solvers.outcome import centred
from dec.topology.graphs import spanning_forest, tree_potentials

__all__ = ["BECAUSE", "forest_solution"]

BECAUSE = "the network has no loops, so the flows follow from the balance alone, and the potentials from the flows"


def forest_solution(carrier: Carrier) -> tuple[FloatArray, BalancedFlow]:
    """Potentials and flows of a network in which every edge belongs to the forest, under any law.

    Parameters
    ----------
    carrier : Carrier
        One for which `is_whole` is true.

    Returns
    -------
    potential : float64 array, shape (n0, m)
        Each edge's difference is right to the rounding of one addition, however far apart the conductances are.
    flow : BalancedFlow

    Examples
    --------
    >>> from dec.calculus.complex import Complex
    >>> from dec.solvers.posed import posed
    >>> problem = posed(Complex.from_edges([0, 1], [1, 2]), [3, 0, 0], [1e12, 1.0], {2: 7.0}, 1.0, "refuse")
    >>> forest_solution(Carrier(problem, problem.conductance))[0].tolist()
    [[10.000000000003], [10.0], [7.0]]
    """
    problem, chosen = carrier.problem, carrier.chosen
    c, n, start = problem.conductance[:, None], problem.exponent[:, None], problem.start
    between_fixed = problem.is_fixed[problem.tail] & problem.is_fixed[problem.head]
    driven = np.zeros((len(problem.edges), start.shape[1]))
    driven[between_fixed] = flow_of(-problem.differences(start), c, n)[between_fixed]
    flow = carrier.balance(driven, np.zeros_like(driven))
    difference = -drop_of(flow.value, c, n)
    difference += np.where(problem.is_fixed[problem.tail, None], start[problem.tail], 0.0)
    difference -= np.where(problem.is_fixed[problem.head, None], start[problem.head], 0.0)
    tail, head = carrier.number[problem.tail[chosen]], carrier.number[problem.head[chosen]]
    roots = carrier.number[np.flatnonzero(problem.is_fixed)[:1]]
    forest = spanning_forest(tail, head, carrier.count, roots=roots)
    potential = np.empty_like(start)
    for j in range(start.shape[1]):
        column = np.ascontiguousarray(difference[chosen, j])
        potential[:, j] = tree_potentials(tail, head, forest, column)[carrier.number]
    potential[problem.is_fixed] = start[problem.is_fixed]
    return centred(problem, potential), flow
