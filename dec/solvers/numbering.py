"""Numbering of unknowns for speed: factors and matrices in depth-first order of elimination."""

import numpy as np

from dec.arrays import AnyArray, FloatArray, IntArray
from dec.topology.compiled import compiled

__all__ = ["depth_first", "permuted", "reordered", "unsigned"]


def unsigned(*largest: int) -> type[np.uint32] | type[np.int64]:
    """The type for array positions up to these.

    Compiled loops index faster by an unsigned type, since a negative position would count from the end.

    Examples
    --------
    >>> unsigned(2**32).__name__
    'int64'
    """
    return np.uint32 if max(largest) < 2**32 else np.int64


@compiled
def depth_first(column: IntArray, row: AnyArray) -> tuple[AnyArray, IntArray]:
    """Return the columns, each before all its rows, with near relatives together; and where each part begins.

    ``row`` holds numbers of columns; the number n stands for the ground and joins nothing. A part is what hangs
    together without the ground; its last column is the one without rows.
    """
    n = len(column) - 1
    begin = np.zeros(n + 2, np.int64)
    for p in range(len(row)):
        begin[row[p] + 1] += 1
    for v in range(n + 1):
        begin[v + 1] += begin[v]
    below = np.empty(len(row), row.dtype)  # for each row, the columns that have it
    following = begin[:-1].copy()
    for v in range(n):
        for p in range(column[v], column[v + 1]):
            below[following[row[p]]] = v
            following[row[p]] += 1
    following[:] = begin[:-1]
    seen = np.zeros(n, np.bool_)
    order = np.empty(n, row.dtype)
    stack = np.empty(n, row.dtype)
    part = np.empty(n + 1, np.int64)
    done, n_parts = 0, 0
    for root in range(n - 1, -1, -1):
        if seen[root]:
            continue
        part[n_parts] = done
        n_parts += 1
        stack[0] = root
        seen[root] = True
        height = 1
        while height:
            v = stack[height - 1]
            if following[v] < begin[v + 1]:
                child = below[following[v]]
                following[v] += 1
                if not seen[child]:
                    seen[child] = True
                    stack[height] = child
                    height += 1
            else:
                order[done] = v
                done += 1
                height -= 1
    part[n_parts] = n
    return order, part[: n_parts + 1].copy()


@compiled
def reordered(
    order: AnyArray, vertex: AnyArray, column: IntArray, row: AnyArray, share: FloatArray, indptr: AnyArray,
    indices: AnyArray, data: FloatArray, new_column: AnyArray, new_row: AnyArray, new_share: FloatArray,
    entry: FloatArray,
) -> int:  # fmt: skip
    """Write the factor's columns in another order, and the matrix beside it; return the number of entries.

    ``order``: the columns; ``vertex``: which vertex each eliminates; ``row``: columns, n for the ground. An entry of
    the matrix above the diagonal that the factor lacks is added with a share of zero.
    """
    n = len(order)
    place = np.empty(n + 1, np.int64)  # of each column
    place[n] = n
    seat = np.empty(n, np.int64)  # of each vertex
    for i in range(n):
        place[order[i]] = i
        seat[vertex[order[i]]] = i
    found = np.full(n + 1, -1, np.int64)
    filled = 0
    new_column[0] = 0
    for i in range(n):
        first = filled
        c = order[i]
        for p in range(column[c], column[c + 1]):
            j = place[row[p]]
            new_row[filled], new_share[filled], entry[filled] = j, share[p], 0.0
            found[j] = filled
            filled += 1
        v = vertex[c]
        for p in range(indptr[v], indptr[v + 1]):
            j = seat[indices[p]]
            if j > i and found[j] >= first:
                entry[found[j]] = data[p]
            elif j > i:
                new_row[filled], new_share[filled], entry[filled] = j, 0.0, data[p]
                filled += 1
        new_column[i + 1] = filled
    return filled


@compiled
def permuted(
    order: AnyArray, indptr: AnyArray, indices: AnyArray, data: FloatArray, new_indptr: AnyArray,
    new_indices: AnyArray, new_data: FloatArray,
) -> None:  # fmt: skip
    """Write the matrix with rows and columns in another order; columns of a row stay in the order they were in."""
    n = len(order)
    place = np.empty(n, np.int64)
    for i in range(n):
        place[order[i]] = i
    filled = 0
    new_indptr[0] = 0
    for i in range(n):
        v = order[i]
        for p in range(indptr[v], indptr[v + 1]):
            new_indices[filled] = place[indices[p]]
            new_data[filled] = data[p]
            filled += 1
        new_indptr[i + 1] = filled
