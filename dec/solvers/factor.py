"""Approximate Cholesky factors of graph Laplacians: vertices eliminated one by one, their stars replaced by trees.

The published method: Kyng and Sachdeva, Approximate Gaussian elimination for Laplacians, FOCS 2016; in the practical
form of Gao, Kyng and Spielman, Robust and practical solution of Laplacian equations by approximate elimination, 2023
(AC, and AC-k with k samples). The step numbers in the comments are those of elimination of one vertex there: (1) pick
a vertex of low degree, (2) merge its parallel edges (`gather`), (3) order its neighbours by weight, (4) for each,
sample one heavier neighbour and join the two, (5) write the column.
"""

from typing import NamedTuple

import numpy as np

from dec.arrays import AnyArray, FloatArray, IntArray
from dec.topology.compiled import compiled

__all__ = ["Edges", "Factor", "Queue", "Star", "eliminate", "half_edges"]

_DEAD = -1
_END = -1
_LEAST = 1e-300  # no edge vanishes by underflow, so what hangs together stays so
_MANY = 32  # neighbours from which a library sort is faster than insertion


class Factor(NamedTuple):
    """L D L^T, column by column in the order of elimination.

    ``vertex`` (n,): which vertex each column eliminates; ``column`` (n + 1,): where its entries begin; ``row``: the
    neighbours, n for the ground; ``share``: minus the entries of L below its unit diagonal, which add up to 1 in a
    column; ``pivot`` (n,): D, zero for a vertex that had no neighbour left.
    """

    vertex: AnyArray
    column: AnyArray
    row: AnyArray
    share: FloatArray
    pivot: FloatArray


class Edges(NamedTuple):
    """The graph that is left, as half-edges.

    A vertex owns the slots ``start[v] : start[v + 1]`` and, chained by ``following`` from ``extra[v]``, slots that
    eliminated vertices gave up. ``target`` is the other end (-1: no longer there), ``twin`` the same edge's slot at
    that end, ``weight`` its conductance, ``degree`` the slots in use, ``ground`` the conductance to the ground.
    """

    start: AnyArray
    target: AnyArray
    twin: AnyArray
    weight: FloatArray
    following: AnyArray
    extra: AnyArray
    degree: AnyArray
    ground: FloatArray


class Queue(NamedTuple):
    """Vertices by degree: doubly linked lists, one a degree up to the last, which takes all that have more.

    A vertex that loses edges moves at once, one that gains them when its turn comes.
    """

    first: AnyArray
    next: AnyArray
    previous: AnyArray
    key: AnyArray


class Star(NamedTuple):
    """Scratch: the neighbours of one vertex, parallel edges merged.

    ``place`` (n,): position of each vertex among the neighbours, or -1. For each neighbour ``vertex``, ``weight``,
    ``uses``, the number of its slots, and the ``first`` of them in ``slot``, chained by ``link``. ``order``: neighbours
    from light to heavy; ``heavier``: weight of each in that order and of all after it.
    """

    place: AnyArray
    vertex: AnyArray
    weight: FloatArray
    uses: AnyArray
    first: AnyArray
    slot: AnyArray
    link: AnyArray
    order: AnyArray
    heavier: FloatArray


@compiled
def half_edges(
    indptr: AnyArray, indices: AnyArray, data: FloatArray, copies: int, start: AnyArray, target: AnyArray,
    twin: AnyArray, weight: FloatArray,
) -> None:  # fmt: skip
    """Write the half-edges of the negative entries above the diagonal, each in so many copies of equal weight."""
    n = len(start) - 1
    filled = start[:-1].copy()
    for i in range(n):
        for p in range(indptr[i], indptr[i + 1]):
            j = indices[p]
            if j > i and data[p] < 0.0:
                for _ in range(copies):
                    a, b = filled[i], filled[j]
                    target[a], target[b] = j, i
                    twin[a], twin[b] = b, a
                    weight[a] = weight[b] = -data[p] / copies
                    filled[i] += 1
                    filled[j] += 1


@compiled
def eliminate(
    edges: Edges, queue: Queue, star: Star, samples: int, random: AnyArray, room: int
) -> tuple[AnyArray, IntArray, AnyArray, FloatArray, FloatArray]:
    """Return the fields of the Factor; uses up the edges and the queue.

    `random`: one uint64 that is not 0. `room`: entries to make place for at first.
    """
    start, target, twin, weight, following, extra, degree, ground = edges
    place, neighbour, total, uses, first, slot, link, order, heavier = star
    n = len(extra)
    vertex = np.empty(n, extra.dtype)
    column = np.zeros(n + 1, np.int64)
    row = np.empty(room, extra.dtype)
    share = np.empty(room, np.float64)
    pivot = np.zeros(n, np.float64)
    filled, low = 0, 0
    for step in range(n):
        low = lowest_list(queue.first, queue.next, queue.previous, queue.key, degree, low)  # (1)
        v = take_first(queue.first, queue.next, queue.previous, low)
        vertex[step] = v
        near = gather(v, start, target, weight, following, extra, place, neighbour, total, uses, first, slot, link)
        if ground[v] > 0.0:
            neighbour[near], total[near], uses[near], first[near] = n, ground[v], 1, _END
            near += 1
        order_by_weight(near, total, order, heavier)  # (3)
        if filled + near > len(row):
            row, share = enlarged(row, filled + near), enlarged(share, filled + near)
        whole = heavier[0] if near else 0.0
        pivot[step] = whole
        for a in range(near):
            p = order[a]
            u = neighbour[p]
            row[filled + a], share[filled + a] = u, total[p] / whole  # (5)
            draws = min(uses[p], samples) if a < near - 1 else 0
            s = first[p]
            for _ in range(draws):  # (4)
                t = neighbour[order[drawn(a, near, heavier, random)]]
                w = max(total[p] / draws * (heavier[a + 1] / whole), _LEAST)
                if t == n:
                    ground[u] += w
                elif u == n:
                    ground[t] += w
                else:
                    move_edge(slot[s], t, u, w, target, twin, weight, following, extra)
                    degree[t] += 1
                    s = link[s]
            if u < n:
                degree[u] -= drop_edges(s, slot, link, target, twin)
        low = move_down(near, neighbour, degree, low, queue.first, queue.next, queue.previous, queue.key)
        filled += near
        column[step + 1] = filled
    return vertex, column, row[:filled], share[:filled], pivot


@compiled
def enlarged(array: AnyArray, needed: int) -> AnyArray:
    """Return a copy with room for half as much again, and for what is needed."""
    larger = np.empty(max(needed, len(array) + len(array) // 2), array.dtype)
    larger[: len(array)] = array
    return larger


@compiled
def uniform(random: AnyArray) -> float:
    """Return the next number of [0, 1); xorshift, Marsaglia, J. Statistical Software 8 (2003)."""
    x = random[0]
    x ^= x << np.uint64(13)
    x ^= x >> np.uint64(7)
    x ^= x << np.uint64(17)
    random[0] = x
    return np.float64(x >> np.uint64(11)) * 2.0**-53


@compiled
def gather(
    v: int, start: AnyArray, target: AnyArray, weight: FloatArray, following: AnyArray, extra: AnyArray,
    place: AnyArray, neighbour: AnyArray, total: FloatArray, uses: AnyArray, first: AnyArray, slot: AnyArray,
    link: AnyArray,
) -> int:  # fmt: skip
    """Write the neighbours of v, parallel edges merged; return how many."""
    near, used = 0, 0
    own, end = start[v], start[v + 1]
    h = own if own < end else extra[v]
    while h != _END:
        u = target[h]
        if u != _DEAD:
            p = place[u]
            if p < 0:
                p = near
                near += 1
                place[u], neighbour[p], total[p], uses[p], first[p] = p, u, 0.0, 0, _END
            total[p] += weight[h]
            uses[p] += 1
            slot[used], link[used], first[p] = h, first[p], used
            used += 1
        if own < end:  # first v's own slots, then the chain
            own += 1
            h = own if own < end else extra[v]
        else:
            h = following[h]
    for p in range(near):
        place[neighbour[p]] = -1
    return near


@compiled
def order_by_weight(near: int, total: FloatArray, order: AnyArray, heavier: FloatArray) -> None:
    """Write the neighbours from light to heavy, and the sums of weights from each on, added from the heavy end."""
    if near > _MANY:
        order[:near] = np.argsort(total[:near], kind="mergesort")
    else:
        for a in range(near):
            w = total[a]
            b = a - 1
            while b >= 0 and total[order[b]] > w:
                order[b + 1] = order[b]
                b -= 1
            order[b + 1] = a
    sum_so_far = 0.0
    for a in range(near - 1, -1, -1):
        sum_so_far += total[order[a]]
        heavier[a] = sum_so_far


@compiled
def drawn(a: int, near: int, heavier: FloatArray, random: AnyArray) -> int:
    """Return a position after `a`, drawn with probability proportional to weight."""
    x = uniform(random) * heavier[a + 1]
    low, high = a + 1, near - 1
    while low < high:  # the last position whose sum from there on exceeds x
        middle = (low + high + 1) >> 1
        if heavier[middle] > x:
            low = middle
        else:
            high = middle - 1
    return low


@compiled
def move_edge(
    h: int, t: int, u: int, w: float, target: AnyArray, twin: AnyArray, weight: FloatArray, following: AnyArray,
    extra: AnyArray,
) -> None:  # fmt: skip
    """Make an edge from t to u of one from the eliminated vertex to u: its slot `h` goes to t, u keeps its own."""
    o = twin[h]
    target[o], weight[o] = t, w
    target[h], weight[h] = u, w
    following[h], extra[t] = extra[t], h


@compiled
def drop_edges(s: int, slot: AnyArray, link: AnyArray, target: AnyArray, twin: AnyArray) -> int:
    """Take the edges of a chain away from their other end; return how many."""
    dropped = 0
    while s != _END:
        target[twin[slot[s]]] = _DEAD
        dropped += 1
        s = link[s]
    return dropped


@compiled
def lowest_list(
    head: AnyArray, following: AnyArray, previous: AnyArray, key: AnyArray, degree: AnyArray, low: int
) -> int:
    """Return the lowest list that holds a vertex; vertices met on the way that have gained edges move up."""
    last = len(head) - 1
    while True:
        v = head[low]
        if v < 0:
            low += 1
        elif min(degree[v], last) > low:
            take_first(head, following, previous, low)
            put_first(head, following, previous, key, v, min(degree[v], last))
        else:
            return low


@compiled
def take_first(head: AnyArray, following: AnyArray, previous: AnyArray, low: int) -> int:
    """Return the first vertex of a list, taken out."""
    v = head[low]
    after = following[v]
    head[low] = after
    if after >= 0:
        previous[after] = -1
    return v  # type: ignore[no-any-return]


@compiled
def put_first(head: AnyArray, following: AnyArray, previous: AnyArray, key: AnyArray, v: int, list_number: int) -> None:
    """Put a vertex at the front of a list."""
    after = head[list_number]
    key[v], following[v], previous[v] = list_number, after, -1
    if after >= 0:
        previous[after] = v
    head[list_number] = v


@compiled
def move_down(
    near: int, neighbour: AnyArray, degree: AnyArray, low: int, head: AnyArray, following: AnyArray,
    previous: AnyArray, key: AnyArray,
) -> int:  # fmt: skip
    """Move the neighbours that have lost edges to the lists of their degrees; return the lowest list in use."""
    last = len(head) - 1
    for p in range(near):
        v = neighbour[p]
        if v < len(degree) and min(degree[v], last) < key[v]:
            wanted = min(degree[v], last)
            before, after = previous[v], following[v]
            if before >= 0:
                following[before] = after
            else:
                head[key[v]] = after
            if after >= 0:
                previous[after] = before
            put_first(head, following, previous, key, v, wanted)
            low = min(low, wanted)
    return low
