"""Flows that balance at every vertex: what a flow lacks is carried along a spanning forest, and rounding is kept."""

from dataclasses import dataclass

import numpy as np

from dec.arrays import BoolArray, FloatArray, IntArray
from dec.solvers.pairs import UNIT, pair_sum
from dec.solvers.posed import Posed
from dec.topology.compiled import compiled
from dec.topology.graphs import Forest, joined, spanning_forest

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
    chosen, edges : int64 array
        Edges of the forest, ascending, and by the vertex below them.
    forest : Forest
        Of the joined vertices and the chosen edges, in that order.

    Notes
    -----
    Source: Kruskal, On the shortest spanning subtree of a graph, Proc. AMS 7 (1956), by classes of strength.
    """

    def __init__(self, problem: Posed, strength: FloatArray) -> None:
        fixed = np.flatnonzero(problem.is_fixed)
        self.problem = problem
        self.number, self.count = joined(fixed, len(problem.label))
        self._tail, self._head = tail, head = self.number[problem.tail], self.number[problem.head]
        order = np.argsort(-_power_of_two(strength), kind="stable")
        self.chosen = chosen = np.flatnonzero(_forest_edges(order, tail, head, np.arange(self.count)))
        forest = spanning_forest(tail[chosen], head[chosen], self.count, roots=self.number[fixed[:1]])
        self.forest: Forest = forest
        self.below = np.flatnonzero(forest.via >= 0)
        self.edges = chosen[forest.via[self.below]]
        self.sign = np.where(tail[self.edges] == self.below, 1.0, -1.0)

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
        columns = [self._surplus(value[:, j], rest[:, j], j) for j in range(value.shape[1])]
        result = np.zeros_like(self.problem.source)
        for j, (high, low, _) in enumerate(columns):
            result[:, j] = (high + low)[self.number]
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
        new_value, new_rest = pair_sum(value, rest)
        slack, carried = np.zeros_like(value), np.empty((len(self.edges), value.shape[1]))
        for j in range(value.shape[1]):
            high, low, left_out = self._surplus(new_value[:, j], new_rest[:, j], j)
            _add_to_parents(self.forest.order, self.forest.parent, high, low, left_out)
            along, along_rest = pair_sum(self.sign * high[self.below], self.sign * low[self.below])
            carried[:, j] = along
            new_value[self.edges, j], rounding = pair_sum(new_value[self.edges, j], along)
            small = (new_rest[self.edges, j], rounding, along_rest)
            new_rest[self.edges, j] = sum(small)
            # adding up the small parts rounds too, and so did adding up the slack
            slack[self.edges, j] = 1.001 * left_out[self.below] + 2 * UNIT * sum(np.abs(part) for part in small)
        return BalancedFlow(new_value, new_rest, slack, carried)

    def _surplus(self, value: FloatArray, rest: FloatArray, column: int) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Return what every vertex has to send away: rounded, the rest, and what is missing from both at most."""
        high, low, slack = np.zeros(self.count), np.zeros(self.count), np.zeros(self.count)
        # free vertices have a number of their own; what is put in where the potential is fixed does not matter
        high[self.number] = self.problem.source[:, column]
        low[self.number] = self.problem.source_rest[:, column]
        slack[self.number] = self.problem.source_doubt[:, column]
        _add_flows(self._tail, self._head, np.ascontiguousarray(value), np.ascontiguousarray(rest), high, low, slack)
        return high, low, slack


def _power_of_two(strength: FloatArray) -> IntArray:
    """Return the class of each strength: its binary exponent; what is not positive comes last."""
    exponent = np.frexp(np.maximum(strength, 0.0))[1].astype(np.int16)
    exponent[strength <= 0] = -2000
    return exponent  # type: ignore[return-value]


@compiled
def _forest_edges(order: IntArray, tail: IntArray, head: IntArray, parent: IntArray) -> BoolArray:
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
def _add_flows(
    tail: IntArray, head: IntArray, value: FloatArray, rest: FloatArray, high: FloatArray, low: FloatArray,
    slack: FloatArray,
) -> None:  # fmt: skip
    """Add flows at heads, take them off at tails: rounded sums, the sums of their errors, and what those may lack."""
    for e in range(len(tail)):
        large, small = value[e], rest[e]
        for v in (head[e], tail[e]):
            a = high[v]
            once = a + large
            part = once - a
            error = low[v] + ((a - (once - part)) + (large - part))
            twice = once + small
            part = twice - once
            low[v] = error + ((once - (twice - part)) + (small - part))
            slack[v] += UNIT * (abs(error) + abs(low[v]))
            high[v] = twice
            large, small = -large, -small


@compiled
def _add_to_parents(order: IntArray, parent: IntArray, high: FloatArray, low: FloatArray, slack: FloatArray) -> None:
    """Add to every vertex what its descendants hold, leaves first, in the same three parts."""
    for k in range(len(order) - 1, -1, -1):
        v = order[k]
        p = parent[v]
        if p < 0:
            continue
        a, b = high[p], high[v]
        total = a + b
        part = total - a
        low[p] += (a - (total - part)) + (b - part)
        slack[p] += slack[v] + UNIT * abs(low[p])
        low[p] += low[v]
        slack[p] += UNIT * abs(low[p])
        high[p] = total
