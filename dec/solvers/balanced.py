"""Flows that balance at every vertex: what a flow lacks is carried along a spanning forest, and rounding is kept."""

from dataclasses import dataclass

import numpy as np

from dec.arrays import AnyArray, BoolArray, FloatArray
from dec.solvers.pairs import UNIT, pair_sum
from dec.solvers.posed import Posed
from dec.topology.compiled import compiled
from dec.topology.edges import blocks, index_type
from dec.topology.graphs import joined

__all__ = ["BalancedFlow", "Carrier"]


@dataclass(frozen=True, slots=True)
class BalancedFlow:
    """A flow whose balance is exact, known to twice the precision of float64.

    Attributes
    ----------
    value : float64 array, shape (k, m)
    rest : float64 array, shape (k, m)
        The flow that balances exactly is ``value + rest``, within `slack`.
    slack : float64 array, shape (k, m)
        At most this much is missing from value + rest; some 2^-104 of the flows that meet there.
    carried : float64 array, shape (n, m)
        What had to be carried along each of the n edges of the forest, in the order of `Carrier.edges`.
    """

    value: FloatArray
    rest: FloatArray
    slack: FloatArray
    carried: FloatArray


class Carrier:
    """A spanning forest of strong edges, ready to make flows balance.

    All vertices of fixed potential count as one, the root of their component, which takes any surplus. Elsewhere the
    exact sources add up to zero, so the root balances when all others do.

    Parameters
    ----------
    problem : Posed
    strength : float64 array, shape (k,)
        How cheaply an edge carries more; the forest takes the strongest edges, told apart by powers of two.

    Attributes
    ----------
    number : int64 array, shape (n0,)
        Number of each vertex after those of fixed potential were joined.
    count : int
        Vertices afterwards.
    chosen, edges : int array
        Edges of the forest, ascending, and in the order in which they carry: from the leaves to the roots.

    Notes
    -----
    Source: Kruskal, On the shortest spanning subtree of a graph, Proc. AMS 7 (1956), by classes of strength.
    """

    def __init__(self, problem: Posed, strength: FloatArray) -> None:
        fixed = np.flatnonzero(problem.is_fixed)
        self.problem = problem
        self.number, self.count = joined(fixed, len(problem.label))
        itype = index_type(self.count, len(strength))
        renumbered = (self.number[ends] if len(fixed) > 1 else ends for ends in (problem.tail, problem.head))
        self._tail, self._head = (np.asarray(ends, itype) for ends in renumbered)
        is_chosen = _forest_edges(
            _strongest_first(strength, itype), self._tail, self._head, np.arange(self.count, dtype=itype)
        )
        self.chosen = chosen = np.flatnonzero(is_chosen)
        root = int(self.number[fixed[0]]) if len(fixed) else -1
        self._order, self._parent, self._via = _leaves_first(
            self._tail, self._head, chosen.astype(itype), self.count, root
        )
        self.edges = self._via[self._order]

    @property
    def is_whole(self) -> bool:
        """Whether every edge belongs to the forest, save those that join a vertex, or the fixed ones, to themselves."""
        return len(self.chosen) == int((self._tail != self._head).sum())

    def lacking(self, value: FloatArray, rest: FloatArray) -> FloatArray:
        """Inflow minus outflow plus source of every vertex, to full precision even where large flows cancel.

        Parameters
        ----------
        value, rest : float64 arrays, shape (k, m)
            The flow is their sum.

        Returns
        -------
        float64 array, shape (n0, m)
            Zero where the potential is fixed.
        """
        result = np.empty_like(self.problem.source)
        for j in range(value.shape[1]):
            surplus = self._surplus(value[:, j], rest[:, j], j)
            result[:, j] = (surplus[:, 0] + surplus[:, 1])[self.number]
        result[self.problem.is_fixed] = 0.0
        return result

    def balance(self, value: FloatArray, rest: FloatArray) -> BalancedFlow:
        """The flow changed along the forest so that it balances exactly.

        Parameters
        ----------
        value, rest : float64 arrays, shape (k, m)
            The flow is their sum.

        Returns
        -------
        BalancedFlow
            Every vertex without a fixed potential has inflow minus outflow plus source zero.

        Notes
        -----
        A sum of floats is kept as a rounded value and the sum of its rounding errors; the error of that second sum is
        at most 2^-53 of its size at every step, and is added up in `slack`. Source: Ogita, Rump and Oishi, Accurate
        sum and dot product, SIAM J. Sci. Comput. 26 (2005), algorithm 4.4 (from memory).
        """
        new_value, new_rest, slack = (np.zeros(value.shape, order="F") for _ in range(3))
        carried = np.empty((len(self.edges), value.shape[1]), order="F")
        for part in blocks(len(value)):
            new_value[part], new_rest[part] = pair_sum(value[part], rest[part])
        for j in range(value.shape[1]):
            flow = new_value[:, j], new_rest[:, j], slack[:, j], carried[:, j]
            surplus = self._surplus(*flow[:2], j)
            _carry(self._order, self._parent, self._via, self._tail, surplus, *flow)
        return BalancedFlow(new_value, new_rest, slack, carried)

    def _surplus(self, value: FloatArray, rest: FloatArray, column: int) -> FloatArray:
        """Return what every vertex has to send away: rounded, the rest, and what is missing from both at most."""
        surplus = np.zeros((self.count, 3))
        # free vertices have a number of their own; what is put in where the potential is fixed does not matter
        given = (self.problem.source, self.problem.source_rest, self.problem.source_doubt)
        for k, values in enumerate(given):
            surplus[self.number, k] = values[:, column]
        _add_flows(self._tail, self._head, np.ascontiguousarray(value), np.ascontiguousarray(rest), surplus)
        return surplus


def _strongest_first(strength: FloatArray, itype: type[np.signedinteger]) -> AnyArray:
    """Return the edges by binary exponent of their strength, large first; what is not positive comes last."""
    exponent = np.frexp(np.maximum(strength, 0.0))[1].astype(np.int16)
    exponent[strength <= 0] = -2000
    if (exponent == exponent[:1]).all():
        return np.arange(len(strength), dtype=itype)
    return np.argsort(-exponent, kind="stable").astype(itype)


@compiled
def _forest_edges(order: AnyArray, tail: AnyArray, head: AnyArray, parent: AnyArray) -> BoolArray:
    """Return which edges, taken in this order, join two parts that nothing joined before."""
    inside = np.zeros(len(tail), np.bool_)
    for k in range(len(order)):
        e = order[k]
        a, b = tail[e], head[e]
        while parent[a] != a:
            parent[a] = parent[parent[a]]
            a = parent[a]
        while parent[b] != b:
            parent[b] = parent[parent[b]]
            b = parent[b]
        if a != b:
            parent[max(a, b)] = min(a, b)
            inside[e] = True
    return inside


@compiled
def _leaves_first(
    tail: AnyArray, head: AnyArray, edges: AnyArray, count: int, root: int
) -> tuple[AnyArray, AnyArray, AnyArray]:
    """Return the vertices of a forest that have a parent, each before it, and every vertex's parent and edge to it.

    Leaves are taken off one by one, the root excepted; what is left is the root of its tree. The edges at a vertex
    are kept as their number and their bitwise sum, which is the last edge when there is but one.
    """
    degree = np.zeros(count, edges.dtype)
    via = np.zeros(count, edges.dtype)
    parent = np.full(count, -1, edges.dtype)
    order = np.empty(len(edges), edges.dtype)
    for k in range(len(edges)):
        e = edges[k]
        for v in (tail[e], head[e]):
            degree[v] += 1
            via[v] ^= e
    filled = 0
    for start in range(count):
        v = start
        while degree[v] == 1 and v != root:
            e = via[v]
            p = head[e] if tail[e] == v else tail[e]
            order[filled], parent[v], degree[v] = v, p, 0
            filled += 1
            degree[p] -= 1
            via[p] ^= e
            if p > start:  # its turn comes
                break
            v = p
    return order, parent, via


@compiled
def _add_flows(tail: AnyArray, head: AnyArray, value: FloatArray, rest: FloatArray, surplus: FloatArray) -> None:
    """Add flows at heads, take them off at tails: rounded sums, the sums of their errors, and what those may lack."""
    for e in range(len(tail)):
        large, small = value[e], rest[e]
        for v in (head[e], tail[e]):
            a = surplus[v, 0]
            once = a + large
            part = once - a
            error = surplus[v, 1] + ((a - (once - part)) + (large - part))
            twice = once + small
            part = twice - once
            low = error + ((once - (twice - part)) + (small - part))
            surplus[v, 0], surplus[v, 1] = twice, low
            surplus[v, 2] += UNIT * (abs(error) + abs(low))
            large, small = -large, -small


@compiled
def _carry(
    order: AnyArray, parent: AnyArray, via: AnyArray, tail: AnyArray, surplus: FloatArray, value: FloatArray,
    rest: FloatArray, slack: FloatArray, carried: FloatArray,
) -> None:  # fmt: skip
    """Send what every vertex has, and its descendants sent it, along its edge to its parent, leaves first.

    What arrives is kept in the same three parts. What is sent is added to the flow; adding up its small parts rounds
    too, and so did adding up the slack.
    """
    for k in range(len(order)):
        v, p, e = order[k], parent[order[k]], via[order[k]]
        a, b = surplus[p, 0], surplus[v, 0]
        total = a + b
        part = total - a
        low = surplus[p, 1] + ((a - (total - part)) + (b - part))
        doubt = surplus[p, 2] + surplus[v, 2] + UNIT * abs(low)
        low += surplus[v, 1]
        surplus[p, 0], surplus[p, 1], surplus[p, 2] = total, low, doubt + UNIT * abs(low)
        sent, sent_low = b, surplus[v, 1]
        if tail[e] != v:
            sent, sent_low = -sent, -sent_low
        along = sent + sent_low
        part = along - sent
        along_rest = (sent - (along - part)) + (sent_low - part)
        carried[k] = along
        a = value[e]
        total = a + along
        part = total - a
        rounding = (a - (total - part)) + (along - part)
        value[e] = total
        slack[e] = 1.001 * surplus[v, 2] + 2 * UNIT * (abs(rest[e]) + abs(rounding) + abs(along_rest))
        rest[e] = rest[e] + rounding + along_rest
