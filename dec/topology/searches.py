"""The loops behind `dec.topology.graphs`: union-find, searches, and walks along a tree.

They take and return plain arrays; what the arrays mean is said where they are called.
"""

import numpy as np

from dec.arrays import BoolArray, IntArray, SignArray
from dec.topology.compiled import compiled

__all__ = ["breadth_first", "climb", "drain", "fill_loops", "loop_lengths", "low_links", "union"]


@compiled
def union(tail: IntArray, head: IntArray, parent: IntArray) -> IntArray:
    """Return the lowest vertex of each component."""
    for e in range(len(tail)):
        a, b = tail[e], head[e]
        while parent[a] != a:
            parent[a] = parent[parent[a]]
            a = parent[a]
        while parent[b] != b:
            parent[b] = parent[parent[b]]
            b = parent[b]
        if a < b:
            parent[b] = a
        else:
            parent[a] = b
    for v in range(len(parent)):  # the root is the lowest vertex, so every parent is final before its child
        parent[v] = parent[parent[v]]
    return parent


@compiled
def breadth_first(
    tail: IntArray, head: IntArray, start: IntArray, edge_at: IntArray, roots: IntArray, usable: BoolArray
) -> tuple[IntArray, IntArray, IntArray, IntArray]:
    """Return order, parent, edge to the parent and depth of every vertex."""
    n = len(start) - 1
    order = np.empty(n, np.int64)
    parent = np.full(n, -2, np.int64)
    via = np.full(n, -1, np.int64)
    depth = np.zeros(n, np.int64)
    filled = 0
    for k in range(len(roots) + n):
        root = roots[k] if k < len(roots) else k - len(roots)
        if parent[root] != -2:
            continue
        parent[root] = -1
        order[filled] = root
        done, filled = filled, filled + 1
        while done < filled:
            v = order[done]
            done += 1
            for i in range(start[v], start[v + 1]):
                e = edge_at[i]
                w = tail[e] + head[e] - v
                if usable[e] and parent[w] == -2:
                    parent[w] = v
                    via[w] = e
                    depth[w] = depth[v] + 1
                    order[filled] = w
                    filled += 1
    return order, parent, via, depth


@compiled
def low_links(tail: IntArray, head: IntArray, start: IntArray, edge_at: IntArray) -> BoolArray:
    """Return which edges are bridges; depth first, with a stack of our own."""
    n = len(start) - 1
    is_bridge = np.zeros(len(tail), np.bool_)
    entered = np.full(n, -1, np.int64)
    low = np.zeros(n, np.int64)
    came_by = np.full(n, -1, np.int64)
    following = start[:-1].copy()
    stack = np.empty(n, np.int64)
    clock = 0
    for root in range(n):
        if entered[root] >= 0:
            continue
        stack[0] = root
        height = 1
        entered[root] = low[root] = clock
        clock += 1
        while height:
            v = stack[height - 1]
            if following[v] < start[v + 1]:
                e = edge_at[following[v]]
                following[v] += 1
                w = tail[e] + head[e] - v
                if e == came_by[v] or w == v:
                    continue
                if entered[w] < 0:
                    entered[w] = low[w] = clock
                    clock += 1
                    came_by[w] = e
                    stack[height] = w
                    height += 1
                elif entered[w] < low[v]:
                    low[v] = entered[w]
            else:
                height -= 1
                if height:
                    above = stack[height - 1]
                    low[above] = min(low[above], low[v])
                    if low[v] > entered[above]:
                        is_bridge[came_by[v]] = True
    return is_bridge


@compiled
def loop_lengths(tail: IntArray, head: IntArray, parent: IntArray, depth: IntArray, edges: IntArray) -> IntArray:
    """Return the number of edges in the loop that each edge closes through the forest; -1 where it closes none."""
    sizes = np.ones(len(edges), np.int64)
    for k in range(len(edges)):
        a, b = tail[edges[k]], head[edges[k]]
        while a != b:
            sizes[k] += 1
            if depth[a] >= depth[b]:
                a = parent[a]
            else:
                b = parent[b]
            if a < 0:  # past a root: the ends lie in different trees
                sizes[k] = -1
                break
    return sizes


@compiled
def fill_loops(
    tail: IntArray, head: IntArray, parent: IntArray, via: IntArray, depth: IntArray, edges: IntArray,
    offsets: IntArray, legs: IntArray, signs: SignArray,
) -> None:  # fmt: skip
    """Write the loops: each edge, then from its head through the tree back to its tail."""
    for k in range(len(edges)):
        a, b = tail[edges[k]], head[edges[k]]
        front, back = offsets[k], offsets[k + 1]
        legs[front] = edges[k]
        signs[front] = 1
        front += 1
        while a != b:
            if depth[a] >= depth[b]:  # the way back ends by coming down to the tail
                back -= 1
                legs[back] = via[a]
                signs[back] = 1 if head[via[a]] == a else -1
                a = parent[a]
            else:
                legs[front] = via[b]
                signs[front] = 1 if tail[via[b]] == b else -1
                front += 1
                b = parent[b]


@compiled
def climb(
    tail: IntArray, head: IntArray, order: IntArray, parent: IntArray, via: IntArray, difference: IntArray,
    potential: IntArray,
) -> None:  # fmt: skip
    """Write the potentials, each from its parent."""
    for k in range(len(order)):
        v = order[k]
        e = via[v]
        if e < 0:
            continue
        if head[e] == v:
            potential[v] = potential[parent[v]] + difference[e]
        else:
            potential[v] = potential[parent[v]] - difference[e]


@compiled
def drain(tail: IntArray, order: IntArray, parent: IntArray, via: IntArray, flow: IntArray, left: IntArray) -> None:
    """Write the flows, leaves first; what is left moves to the parent."""
    for k in range(len(order) - 1, -1, -1):
        v = order[k]
        e = via[v]
        if e < 0:
            continue
        if tail[e] == v:
            flow[e] = left[v]
        else:
            flow[e] = -left[v]
        left[parent[v]] += left[v]
        left[v] = 0 * left[v]
