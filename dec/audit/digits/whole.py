"""Whole numbers in the place of fractions, with every balance kept: total unimodularity at work."""

import numpy as np
from scipy.sparse import csr_array

from dec.arrays import BoolArray, IntArray
from dec.audit.exactly import net_inflow
from dec.errors import InputError, UnsolvableError

__all__ = ["half_up", "whole_flows"]


def whole_flows(tail: IntArray, head: IntArray, n_vertices: int, fine: IntArray, parts: int) -> IntArray:
    """Whole flows with the balances of the given ones, each the floor or the ceiling of what it stands for.

    Parameters
    ----------
    tail, head : int64 arrays, shape (m,)
        Parallel edges and self-loops are ordinary edges.
    n_vertices : int
    fine : int64 array, shape (m,)
        Flows in steps of 1 / `parts`; the sum of their sizes stays below 2**62.
    parts : int
        Steps that make one unit.

    Returns
    -------
    int64 array, shape (m,)
        In units. Inflow minus outflow is that of ``fine / parts`` at every vertex, exactly. Each flow is the nearest
        whole number, a half upwards, save where a vertex needs the other neighbour.

    Raises
    ------
    InputError
        If inflow minus outflow of some vertex is not a whole number of units.

    Notes
    -----
    The incidence matrix is totally unimodular, so that whole bounds and whole balances have a whole solution wherever
    they have one at all, and the given flow is one. Source: Hoffman and Kruskal, Integral boundary points of convex
    polyhedra, 1956; found by one maximum flow (Dinic 1970) from the vertices that nearest whole numbers leave with too
    much to those with too little, through edges that may still take their other neighbour.

    Examples
    --------
    >>> tail, head = np.array([0, 1, 1]), np.array([1, 2, 2])
    >>> whole_flows(tail, head, 3, np.array([10, 5, 5]), 10)
    array([1, 0, 1])
    """
    wanted = net_inflow(tail, head, fine, n_vertices)
    if (wanted % parts).any():
        vertex = int(np.argmax(wanted % parts != 0))
        message = (
            f"inflow minus outflow must be whole at every vertex, vertex {vertex} has {wanted[vertex]} / {parts}; "
            "round what goes in there as an edge of its own"
        )
        raise InputError(message)
    low = fine // parts
    rest = fine - low * parts
    whole = low + (2 * rest >= parts)
    excess = net_inflow(tail, head, whole, n_vertices) - wanted // parts
    if excess.any():
        free = np.flatnonzero((rest != 0) & (tail != head))
        raised = whole[free] > low[free]
        # an edge that can still rise takes excess from its tail to its head, one that can still fall the other way
        source, sink = np.where(raised, head[free], tail[free]), np.where(raised, tail[free], head[free])
        moved = _moved(source, sink, np.abs(2 * rest[free] - parts), excess)
        whole[free[moved]] += np.where(raised[moved], -1, 1)
    return whole


def half_up(fine: IntArray, parts: int) -> IntArray:
    """The nearest whole numbers to ``fine / parts``, halves upwards; int64 array of the same shape.

    The difference of two of them lies less than one unit from the difference of what they stand for.

    Examples
    --------
    >>> half_up(np.array([-5, 5, 14, 15]), 10)
    array([0, 1, 1, 2])
    """
    return np.asarray((2 * fine + parts) // (2 * parts), dtype=np.int64)


def _moved(source: IntArray, sink: IntArray, cost: IntArray, excess: IntArray) -> BoolArray:
    """Return the arcs, of capacity 1 each, along which all excess reaches the vertices that lack it."""
    from scipy.sparse.csgraph import maximum_flow

    n = len(excess)
    order = np.lexsort((cost, sink, source))  # of parallel arcs the cheapest move first
    key = source[order] * n + sink[order]
    pairs, first, count = np.unique(key, return_index=True, return_counts=True)
    giving, lacking = np.flatnonzero(excess > 0), np.flatnonzero(excess < 0)
    tails = np.concatenate([pairs // n, np.full(len(giving), n), lacking])
    heads = np.concatenate([pairs % n, giving, np.full(len(lacking), n + 1)])
    room = np.concatenate([count, excess[giving], -excess[lacking]]).astype(np.int32)
    found = maximum_flow(csr_array((room, (tails, heads)), shape=(n + 2, n + 2)), n, n + 1)
    if found.flow_value != int(excess[giving].sum()):  # pragma: no cover - the given flow shows that there is one
        message = f"no whole flow was found: {found.flow_value} of {int(excess[giving].sum())} units could be moved"
        raise UnsolvableError(message)
    carried = np.asarray(csr_array(found.flow)[pairs // n, pairs % n]).ravel()
    rank = np.arange(len(order)) - np.repeat(first, count)
    moved = np.zeros(len(source), dtype=bool)
    moved[order] = rank < np.repeat(carried, count)
    return moved
