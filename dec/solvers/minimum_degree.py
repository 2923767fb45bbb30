"""An order of elimination that keeps a sparse factor sparse, given up as soon as it does not.

The published method: Amestoy, Davis and Duff, An approximate minimum degree ordering algorithm, SIAM J. Matrix Anal.
Appl. 17 (1996), without its supervariables: eliminated vertices stay as elements, the cliques they leave behind.
"""

from typing import NamedTuple

import numpy as np

from dec.arrays import AnyArray, IntArray
from dec.topology.compiled import compiled

__all__ = ["minimum_degree"]

_NONE = -1


class Quotient(NamedTuple):
    """What is left of the graph.

    A vertex owns the slots ``start[v] : start[v + 1]`` of ``slot``: ``n_elements[v]`` elements from the front,
    ``n_vertices[v]`` vertices up to the end. Element e has the vertices ``member[first[e] : first[e] + size[e]]``;
    size -1 where it is none, or absorbed by another.
    """

    start: IntArray
    slot: IntArray
    n_elements: IntArray
    n_vertices: IntArray
    first: IntArray
    size: IntArray


class Degrees(NamedTuple):
    """Vertices by bound on their degree: doubly linked lists."""

    head: IntArray
    after: IntArray
    before: IntArray
    degree: IntArray


def minimum_degree(indptr: AnyArray, indices: AnyArray, most: int) -> IntArray | None:
    """An order in which to eliminate the rows of a symmetric sparse matrix.

    Parameters
    ----------
    indptr, indices : int arrays
        Pattern, both triangles; the diagonal does not matter.
    most : int
        Entries of the factor below its diagonal at which to give up.

    Returns
    -------
    int64 array, shape (n,), or None
        None where the factor would have more entries in this order.

    Notes
    -----
    Rows with more than 10 sqrt(n) entries come last and are not looked at; their entries are not counted.

    Examples
    --------
    >>> star = np.array([0, 3, 4, 5, 6]), np.array([1, 2, 3, 0, 0, 0])
    >>> minimum_degree(*star, most=10)
    array([1, 2, 0, 3])
    """
    n = len(indptr) - 1
    rows = np.repeat(np.arange(n), np.diff(indptr))
    dense = np.diff(indptr) > max(16.0, 10.0 * np.sqrt(n))
    keep = (rows != indices) & ~dense[rows] & ~dense[indices]
    count = np.bincount(rows[keep], minlength=n)
    start = np.concatenate([[0], np.cumsum(count)]).astype(np.int64)
    quotient = Quotient(
        start, np.asarray(indices, np.int64)[keep], np.zeros(n, np.int64), count.astype(np.int64),
        np.zeros(n, np.int64), np.full(n, _NONE),
    )  # fmt: skip
    lists = Degrees(np.full(n + 1, _NONE), np.full(n, _NONE), np.full(n, _NONE), count.astype(np.int64))
    chosen = np.flatnonzero(~dense)
    order = np.empty(n, np.int64)
    order[len(chosen) :] = np.flatnonzero(dense)
    done = _eliminated(quotient, lists, chosen, order, int(min(most, 2**62)), len(keep))
    return order if done else None


@compiled
def _eliminated(quotient: Quotient, lists: Degrees, chosen: IntArray, order: IntArray, most: int, room: int) -> bool:
    """Write the order of the chosen vertices; return False once the factor has more than `most` entries."""
    first, size = quotient.first, quotient.size
    n, lowest, filled = len(size), 0, 0
    member = np.empty(room + n, np.int64)
    mark, seen, beyond = np.full(n, -1), np.full(n, -1), np.zeros(n, np.int64)
    for k in range(len(chosen) - 1, -1, -1):  # so that the lowest of equals comes first
        _put(lists, chosen[k], lists.degree[chosen[k]])
    for step in range(len(chosen)):
        while lists.head[lowest] < 0:
            lowest += 1
        p = lists.head[lowest]
        _take(lists, p)
        order[step] = p
        if filled + len(chosen) - step > len(member):
            larger = np.empty(2 * len(member) + n, np.int64)
            larger[:filled] = member[:filled]
            member = larger
        near = _gather(quotient, member, p, filled, mark)
        filled += near
        if filled > most:
            return False
        first[p], size[p] = filled - near, near
        _count_beyond(quotient, member[first[p] : filled], p, seen, beyond)
        for a in range(first[p], filled):
            i = member[a]
            bound = _updated(quotient, i, p, near, mark, beyond)
            bound = min(bound, lists.degree[i] + near - 1, len(chosen) - step - 2)
            _take(lists, i)
            _put(lists, i, max(bound, 0))
            lowest = min(lowest, lists.degree[i])
    return True


@compiled
def _gather(quotient: Quotient, member: IntArray, p: int, filled: int, mark: IntArray) -> int:
    """Write the neighbours of p after `filled`, and absorb its elements; return how many there are."""
    start, slot, n_elements, n_vertices, first, size = quotient
    mark[p] = p
    near = 0
    for q in range(start[p + 1] - n_vertices[p], start[p + 1]):
        v = slot[q]
        mark[v] = p
        member[filled + near] = v
        near += 1
    for q in range(start[p], start[p] + n_elements[p]):
        e = slot[q]
        if size[e] >= 0:
            for a in range(first[e], first[e] + size[e]):
                v = member[a]
                if mark[v] != p:
                    mark[v] = p
                    member[filled + near] = v
                    near += 1
            size[e] = -1
    return near


@compiled
def _count_beyond(quotient: Quotient, near: IntArray, p: int, seen: IntArray, beyond: IntArray) -> None:
    """Count, for every element that meets the neighbours of p, its vertices that are none of them."""
    start, slot, n_elements, _, _, size = quotient
    for i in near:
        for q in range(start[i], start[i] + n_elements[i]):
            e = slot[q]
            if size[e] >= 0 and e != p:
                if seen[e] != p:
                    seen[e], beyond[e] = p, size[e]
                beyond[e] -= 1


@compiled
def _updated(quotient: Quotient, i: int, p: int, near: int, mark: IntArray, beyond: IntArray) -> int:
    """Rewrite the slots of a neighbour of p, which becomes an element; return a bound on its degree."""
    start, slot, n_elements, n_vertices, _, size = quotient
    bound, kept = near - 1, start[i]
    for q in range(start[i], start[i] + n_elements[i]):
        e = slot[q]
        if size[e] >= 0 and e != p:
            if beyond[e] > 0:
                slot[kept] = e
                kept += 1
                bound += beyond[e]
            else:
                size[e] = -1  # all of it lies in the new element
    end = start[i + 1]
    at = end
    for q in range(end - 1, end - n_vertices[i] - 1, -1):
        v = slot[q]
        if mark[v] != p:
            at -= 1
            slot[at] = v
    n_vertices[i] = end - at
    slot[kept] = p
    n_elements[i] = kept + 1 - start[i]
    return int(bound + n_vertices[i])


@compiled
def _put(lists: Degrees, v: int, degree: int) -> None:
    """Put a vertex at the front of a list."""
    after = lists.head[degree]
    lists.degree[v], lists.after[v], lists.before[v] = degree, after, -1
    if after >= 0:
        lists.before[after] = v
    lists.head[degree] = v


@compiled
def _take(lists: Degrees, v: int) -> None:
    """Take a vertex out of its list."""
    before, after = lists.before[v], lists.after[v]
    if before >= 0:
        lists.after[before] = after
    else:
        lists.head[lists.degree[v]] = after
    if after >= 0:
        lists.before[after] = before
