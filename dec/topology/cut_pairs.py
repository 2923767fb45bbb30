"""Pairs of edges that part a graph only together: which edges every loop holds both or none of."""

import numpy as np

from dec.arrays import IntArray
from dec.topology.compiled import compiled
from dec.topology.graphs import adjacency

__all__ = ["cut_classes"]


def cut_classes(tail: IntArray, head: IntArray, n_vertices: int) -> IntArray:
    """Class of each edge: two edges share it exactly when every loop that holds one holds the other.

    That is, when the loss of both, and of neither alone, parts their component.

    Parameters
    ----------
    tail, head : int64 arrays, shape (n1,)
        Within 0 .. n0 - 1; parallel edges and self-loops are ordinary edges.
    n_vertices : int
        n0.

    Returns
    -------
    int64 array, shape (n1,)
        The lowest edge of the class; -1 for a bridge, which no loop holds. A self-loop, and an edge that no other edge
        parts the graph with, is a class alone.

    Notes
    -----
    Exact and the same at every run; the time grows as n0 + n1 log n1 at most. Take a depth-first forest: an edge
    outside it runs from a vertex to one of its ancestors and covers the tree edges between them. Tree edges are in one
    class exactly when the same edges cover them, and an edge outside is in the class of those that it alone covers.
    Equal sets are told by two figures: how many edges cover a tree edge, and which one of these ends deepest (the
    first of several). If one edge is that for two tree edges, they lie on one path to the root, all that covers the
    lower one covers the upper one too, and equal numbers make the sets equal.

    Source: Georgiadis, Giannis, Italiano and Kosinas, Computing vertex-edge cut-pairs and 2-edge cuts in practice, SEA
    2021, for the number and the highest of the covering edges as marks of a set.

    Examples
    --------
    Two loops that meet in vertex 2, one of three edges and one of two, and a bridge.

    >>> cut_classes(np.array([0, 1, 2, 2, 3, 3]), np.array([1, 2, 0, 3, 2, 4]), 5)
    array([ 0,  0,  0,  3,  3, -1])
    """
    tail, head = np.asarray(tail, np.int64), np.asarray(head, np.int64)
    start, edge_at = adjacency(tail, head, n_vertices)
    order, parent, via = depth_first(tail, head, start, edge_at)
    covers, deepest = covering(tail, head, start, edge_at, order, parent, via)
    return _lowest_of_equals(covers, deepest)


def _lowest_of_equals(covers: IntArray, deepest: IntArray) -> IntArray:
    """Return the lowest edge with the same two figures; -1 where nothing covers the edge."""
    figures = deepest * (int(covers.max(initial=0)) + 1) + covers  # below n1 (n1 + 1), so int64 holds it
    _, first, member = np.unique(figures, return_index=True, return_inverse=True)
    return np.where(covers > 0, first[member], -1)


@compiled
def depth_first(
    tail: IntArray, head: IntArray, start: IntArray, edge_at: IntArray
) -> tuple[IntArray, IntArray, IntArray]:
    """Return the vertices in the order they are entered, and the parent and the edge to it of each; -1 at a root."""
    n = len(start) - 1
    order = np.empty(n, np.int64)
    parent = np.full(n, -1, np.int64)
    via = np.full(n, -1, np.int64)
    entered = np.zeros(n, np.bool_)
    following = start[:-1].copy()
    filled = 0
    for root in range(n):
        if entered[root]:
            continue
        entered[root] = True
        order[filled] = root
        filled += 1
        v = root
        while v >= 0:
            if following[v] == start[v + 1]:
                v = parent[v]
                continue
            e = edge_at[following[v]]
            following[v] += 1
            w = tail[e] + head[e] - v
            if not entered[w]:
                entered[w] = True
                order[filled] = w
                filled += 1
                parent[w], via[w] = v, e
                v = w
    return order, parent, via


@compiled
def covering(
    tail: IntArray, head: IntArray, start: IntArray, edge_at: IntArray, order: IntArray, parent: IntArray,
    via: IntArray,
) -> tuple[IntArray, IntArray]:  # fmt: skip
    """Return how many edges cover each edge, and which of these ends deepest; an edge outside covers itself.

    The edges are taken by their upper ends, those entered last first, so the first to cover a tree edge is the one
    asked for.
    """
    n = len(order)
    entered = np.empty(n, np.int64)
    for k in range(n):
        entered[order[k]] = k
    covers = np.zeros(len(tail), np.int64)
    deepest = np.arange(len(tail))
    above = np.arange(n)  # nearest ancestor, or the vertex itself, whose edge to the parent is not covered so far
    balance = np.zeros(n, np.int64)  # edges from here up, less edges that come up to here
    for k in range(n - 1, -1, -1):
        v = order[k]
        for i in range(start[v], start[v + 1]):
            e = edge_at[i]
            w = tail[e] + head[e] - v
            if w == v:
                covers[e] = 1
            elif entered[w] > k and via[w] != e:  # v is the upper end
                covers[e] = 1
                balance[w] += 1
                balance[v] -= 1
                mark_path(w, k, e, entered, parent, via, above, deepest)
    for k in range(n - 1, -1, -1):
        v = order[k]
        if via[v] >= 0:
            covers[via[v]] = balance[v]
            balance[parent[v]] += balance[v]
    return covers, deepest


@compiled
def mark_path(
    w: int, last: int, e: int, entered: IntArray, parent: IntArray, via: IntArray, above: IntArray, deepest: IntArray
) -> None:
    """Write e at the edges of the path up from w, as far as the vertex entered as `last`, that no edge covers so far.

    `above` steps over what is covered: path halving, Tarjan and van Leeuwen, J. ACM 31 (1984).
    """
    while True:
        while above[w] != w:
            above[w] = above[above[w]]
            w = above[w]
        if entered[w] <= last:
            break
        deepest[via[w]] = e
        above[w] = parent[w]
