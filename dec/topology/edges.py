"""Edges: pairs of vertices told apart, and the signed matrix that takes differences along them."""

from collections.abc import Iterator

import numpy as np
from scipy.sparse import csr_array

from dec.arrays import AnyArray, IntArray, SignArray
from dec.errors import TopologyError

__all__ = [
    "blocks", "edge_coboundary", "index_type", "pair_limit", "sealed", "sparse_signs", "unique_numbers", "unique_pairs",
]  # fmt: skip

_BLOCK = 2**15


def index_type(*counts: int) -> type[np.int32] | type[np.int64]:
    """The narrower of int32 and int64 that holds every count.

    Examples
    --------
    >>> index_type(10, 2**31).__name__
    'int64'
    """
    return np.int32 if max(counts, default=0) < 2**31 else np.int64


def blocks(count: int) -> Iterator[slice]:
    """Slices that cover so many entries, each short enough that what is computed on it stays in the processor's cache.

    Examples
    --------
    >>> [(part.start, part.stop) for part in blocks(70_000)]
    [(0, 32768), (32768, 65536), (65536, 70000)]
    """
    return (slice(start, min(start + _BLOCK, count)) for start in range(0, count, _BLOCK))


def unique_pairs(low: AnyArray, high: AnyArray, n_high: int) -> tuple[IntArray, IntArray, AnyArray]:
    """Pairs of whole numbers told apart, in lexicographic order.

    Parameters
    ----------
    low, high : int arrays, shape (m,)
        Non-negative; ``high < n_high``.
    n_high : int
        Number of values that `high` can take.

    Returns
    -------
    first, second : int64 arrays, shape (k,)
        The distinct pairs, ascending.
    which : int32 or int64 array, shape (m,)
        Which of them each given pair is.

    Raises
    ------
    TopologyError
        If a pair cannot be packed into 63 bits (more than 3e9 values on either side).

    Examples
    --------
    >>> unique_pairs(np.array([2, 0, 2]), np.array([5, 7, 5]), 8)
    (array([0, 2]), array([7, 5]), array([1, 0, 1], dtype=int32))
    """
    n_low = int(low.max(initial=-1)) + 1
    limit = pair_limit(n_low, n_high)
    key = np.empty(len(low), np.int64)
    for part in blocks(len(low)):
        key[part] = low[part].astype(np.int64) * n_high + high[part]
    distinct, which = unique_numbers(key, limit)
    first = distinct // max(n_high, 1)
    distinct -= first * n_high
    return first, distinct, which


def pair_limit(n_low: int, n_high: int) -> int:
    """Number of pairs there can be.

    Raises
    ------
    TopologyError
        If it does not fit 63 bits.
    """
    if n_low * int(n_high) >= 2**63:
        message = f"pairs below {n_low} x {n_high} do not fit 63 bits; use fewer vertices"
        raise TopologyError(message)
    return n_low * int(n_high)


def unique_numbers(key: IntArray, limit: int) -> tuple[IntArray, AnyArray]:
    """Whole numbers told apart, in ascending order.

    Parameters
    ----------
    key : int64 array, shape (m,)
        From 0 to limit - 1. Overwritten.
    limit : int

    Returns
    -------
    distinct : int64 array, shape (k,)
    which : int32 or int64 array, shape (m,)
        Which of them each given number is.

    Notes
    -----
    Number and position share one 64-bit word where they fit, so that one plain sort of integers does it; a sort that
    returns positions takes twice as long.

    Examples
    --------
    >>> unique_numbers(np.array([47, 5, 47]), 50)
    (array([ 5, 47]), array([1, 0, 1], dtype=int32))
    """
    m = len(key)
    bits = max(m - 1, 0).bit_length()
    packs = limit.bit_length() + bits <= 63
    if packs:
        for part in blocks(m):
            key[part] = (key[part] << bits) | np.arange(part.start, part.stop)
        key.sort()
    else:
        order = np.argsort(key)
    which = np.empty(m, dtype=index_type(m))
    distinct = [np.empty(0, np.int64)]
    before, count = -1, 0
    for part in blocks(m):
        place = key[part] & ((1 << bits) - 1) if packs else order[part]
        number = key[part] >> bits if packs else key[place]
        is_new = np.empty(len(number), dtype=bool)
        is_new[0] = number[0] != before
        np.not_equal(number[1:], number[:-1], out=is_new[1:])
        rank = np.cumsum(is_new, dtype=which.dtype)
        rank += count - 1
        which[place] = rank
        distinct.append(number[is_new])
        before, count = number[-1], count + len(distinct[-1])
    return np.concatenate(distinct), which


def edge_coboundary(tail: IntArray, head: IntArray, n_vertices: int) -> csr_array:
    """Differences along edges: the matrix that takes vertex values to edge values.

    Parameters
    ----------
    tail, head : int arrays, shape (n1,)
        End points of each edge; the edge runs from tail to head.
    n_vertices : int
        Number of vertices, n0.

    Returns
    -------
    csr_array of int8, shape (n1, n0)
        -1 at the tail, +1 at the head; an empty row for a self-loop. It has no unit: volts on vertices become
        volts along edges. Widen it before multiplying it with another incidence matrix: int8 wraps in silence.

    Raises
    ------
    TopologyError
        If an end point lies outside 0 .. n0 - 1; the message names the edge.

    Notes
    -----
    Source: Biggs, Algebraic Graph Theory, 2nd ed. 1993, chapter 4 (transposed, head positive).

    Examples
    --------
    >>> edge_coboundary(np.array([0, 1]), np.array([1, 2]), 3).toarray()
    array([[-1,  1,  0],
           [ 0, -1,  1]], dtype=int8)
    """
    n_edges = len(tail)
    for name, ends in (("tail", tail), ("head", head)):
        if n_edges and not 0 <= int(ends.min()) <= int(ends.max()) < n_vertices:
            edge = int(np.argmax((ends < 0) | (ends >= n_vertices)))
            message = f"edge {edge}: {name} must be a vertex 0 .. {n_vertices - 1}, got {ends[edge]}"
            raise TopologyError(message)
    itype = index_type(2 * n_edges, n_vertices)
    indices = np.empty((n_edges, 2), dtype=itype)
    signs = np.empty((n_edges, 2), dtype=np.int8)
    for part in blocks(n_edges):
        start, end = tail[part], head[part]
        indices[part, 0], indices[part, 1] = np.minimum(start, end), np.maximum(start, end)
        signs[part, 0], signs[part, 1] = start > end, start < end
    signs *= 2
    signs -= 1
    indptr = np.arange(0, 2 * n_edges + 1, 2, dtype=itype)
    is_loop = tail == head
    if is_loop.any():
        indices, signs = indices[~is_loop], signs[~is_loop]
        indptr = np.concatenate([[0], np.cumsum(2 * ~is_loop)]).astype(itype)
    return sealed(csr_array((signs.ravel(), indices.ravel(), indptr), shape=(n_edges, n_vertices)))


def sealed(matrix: csr_array) -> csr_array:
    """Return the matrix, made read-only and known to be canonical: indices sorted, no duplicates."""
    matrix.has_sorted_indices = True
    matrix.has_canonical_format = True
    for part in (matrix.data, matrix.indices, matrix.indptr):
        part.setflags(write=False)
    return matrix


def sparse_signs(rows_ptr: AnyArray, columns: AnyArray, signs: SignArray, n_columns: int) -> csr_array:
    """Return the canonical int8 matrix of signed entries given row by row; equal places are added, zeros dropped.

    Parameters
    ----------
    rows_ptr : int array, shape (n_rows + 1,)
        Where each row's entries begin.
    columns, signs : int arrays, shape (m,)
    n_columns : int

    Raises
    ------
    TopologyError
        If entries add up to more than int8 holds.
    """
    n_rows = len(rows_ptr) - 1
    itype = index_type(len(columns), n_columns)
    matrix = csr_array(
        (signs.astype(np.int8), columns.astype(itype), np.asarray(rows_ptr).astype(itype)), shape=(n_rows, n_columns)
    )
    matrix.sort_indices()
    repeated = matrix.indices[1:] == matrix.indices[:-1]
    inner = matrix.indptr[1:-1]
    repeated[inner[(inner > 0) & (inner < len(columns))] - 1] = False
    if repeated.any():
        wide = matrix.astype(np.int64)
        wide.sum_duplicates()
        wide.eliminate_zeros()
        if wide.nnz and int(np.abs(wide.data).max()) > np.iinfo(np.int8).max:
            row = int(np.searchsorted(wide.indptr, np.argmax(np.abs(wide.data)), side="right")) - 1
            message = f"cell {row} runs through one boundary cell more than 127 times"
            raise TopologyError(message)
        matrix = csr_array((wide.data.astype(np.int8), wide.indices, wide.indptr), shape=(n_rows, n_columns))
    return sealed(matrix)
