"""Entries of the inverse of a sparse matrix where its Cholesky factor has entries, and resistances from them."""

from typing import Any, NamedTuple

import numpy as np
from scipy.sparse import coo_array, csc_array

from dec.arrays import AnyArray, BoolArray, FloatArray, IntArray
from dec.errors import InputError
from dec.topology.compiled import compiled

__all__ = ["resistances", "selected_inverse"]

_EPS = float(np.finfo(np.float64).eps)
_ASYMMETRY = 1e-8
_PROBES = 8


class _Factor(NamedTuple):
    """L D L^T of the matrix with its rows and columns in another order.

    ``place`` (n,): where each row went; ``start`` (n + 1,), ``row``, ``below``: L below its unit diagonal, column by
    column, rows ascending; ``pivot`` (n,): D.
    """

    place: IntArray
    start: AnyArray
    row: AnyArray
    below: FloatArray
    pivot: FloatArray


def selected_inverse(factor: Any) -> csc_array:
    """Entries of the inverse of a symmetric positive definite matrix, on the pattern of its Cholesky factor.

    That holds at least the pattern of the matrix.

    Parameters
    ----------
    factor : scipy.sparse.linalg.SuperLU
        Of an (n, n) matrix, made with ``permc_spec="MMD_AT_PLUS_A"``, ``diag_pivot_thresh=0.0`` and
        ``options={"SymmetricMode": True}``.

    Returns
    -------
    csc_array of float64, shape (n, n)
        Both triangles, in the order of the matrix; in the inverse of its unit.

    Raises
    ------
    InputError
        If the factor is not that of a symmetric positive definite matrix, pivots off the diagonal, or has lost entries
        that the recursion needs, which cancellation may do but never does in a matrix without positive entries off
        the diagonal.

    Notes
    -----
    The work is that of the factorisation, the memory that of the factor. Sources: Takahashi, Fagan and Chin, Formation
    of a sparse bus impedance matrix and its application to short circuit study, 8th PICA conference 1973; Erisman and
    Tinney, On computing certain elements of the inverse of a sparse matrix, Comm. ACM 18 (1975).

    Examples
    --------
    >>> from scipy.sparse.linalg import splu
    >>> matrix = csc_array([[2.0, -1.0], [-1.0, 1.0]])
    >>> options = {"SymmetricMode": True}
    >>> factor = splu(matrix, permc_spec="MMD_AT_PLUS_A", diag_pivot_thresh=0.0, options=options)
    >>> selected_inverse(factor).toarray()
    array([[1., 1.],
           [1., 2.]])
    """
    place, start, row, below, pivot = _symmetric(factor)
    diagonal, entries = backward(start, row, below, pivot)
    here = np.argsort(place).astype(row.dtype)
    one, other = here[row], np.repeat(here, np.diff(start))
    i, j = np.concatenate([here, one, other]), np.concatenate([here, other, one])
    return coo_array((np.concatenate([diagonal, entries, entries]), (i, j)), shape=factor.shape).tocsc()


def resistances(factor: Any, start: IntArray, end: IntArray) -> tuple[FloatArray, FloatArray]:
    """Effective resistances between pairs of vertices of a network, and how far rounding may have moved each.

    Parameters
    ----------
    factor : scipy.sparse.linalg.SuperLU
        As for `selected_inverse`, of the weighted Laplacian without the rows and columns of the grounded vertices.
    start, end : int64 arrays, shape (k,)
        Rows of the matrix, -1 for a grounded vertex; each pair is an entry of the matrix, as the ends of an edge are.

    Returns
    -------
    resistance : float64 array, shape (k,)
        In the inverse of the unit of the conductances; 0 from a vertex to itself.
    doubt : float64 array, shape (k,)
        An estimate of the largest error, not a proven bound.

    Raises
    ------
    InputError
        As `selected_inverse`, and if a row does not exist or a pair is no entry; the message names the first.

    Notes
    -----
    With the inverse X of the matrix A, X_aa + X_bb - 2 X_ab. Its error has two parts. (1) What the difference takes
    from its terms: some eps (X_aa + X_bb), more of them where rows of the factor are long. (2) What it costs that A
    and its factor are rounded, which is as if the diagonal of A had changed by some eps: with x = X (e_a - e_b), some
    eps sum A_ii x_i^2. That sum is the variance of b_a - b_b for b = X r, where r_i is normal with variance A_ii; the
    largest square of eight such b, from a fixed seed, stands for it. Source: Klein and Randic, Resistance distance,
    J. Math. Chem. 12 (1993).

    Examples
    --------
    Two conductors of 1 from vertex 0 over vertex 1 to the ground.

    >>> from scipy.sparse.linalg import splu
    >>> matrix = csc_array([[1.0, -1.0], [-1.0, 2.0]])
    >>> options = {"SymmetricMode": True}
    >>> factor = splu(matrix, permc_spec="MMD_AT_PLUS_A", diag_pivot_thresh=0.0, options=options)
    >>> resistances(factor, np.array([0, 1, 0]), np.array([1, -1, -1]))[0]
    array([1., 1., 2.])
    """
    start, end = np.asarray(start, np.int64), np.asarray(end, np.int64)
    _refuse_rows(start, end, factor.shape[0])
    columns = _symmetric(factor)
    apart = (start >= 0) & (end >= 0) & (start != end)
    at = _positions(columns, start, end, apart)
    diagonal, entries = backward(columns.start, columns.row, columns.below, columns.pivot)
    own = np.append(diagonal[columns.place], 0.0)  # row -1 is the ground
    resistance = own[start] + own[end]
    resistance[apart] -= 2.0 * entries[at]
    rough = own * np.append(_roundings(columns), 0.0)
    doubt = _EPS * (rough[start] + rough[end] + 4.0 * _spread(factor, columns, start, end))
    same = start == end
    resistance[same] = doubt[same] = 0.0
    return np.maximum(resistance, 0.0), doubt


def _roundings(columns: _Factor) -> FloatArray:
    """Return how many eps each diagonal entry of the inverse may be off; equal weights were seen to lose r/4."""
    n = len(columns.place)
    length = np.bincount(columns.row, minlength=n) + np.diff(columns.start)
    return (8.0 + length / 4.0)[columns.place]


def _spread(factor: Any, columns: _Factor, start: IntArray, end: IntArray) -> FloatArray:
    """Return the largest of a few estimates of sum A_ii x_i^2 for x = X (e_start - e_end)."""
    n = len(columns.place)
    squares = np.bincount(columns.row, columns.below**2 * np.repeat(columns.pivot, np.diff(columns.start)), minlength=n)
    weight = np.sqrt(columns.pivot + squares)[columns.place]
    random = np.random.default_rng(0)
    largest = np.zeros(len(start))
    for _ in range(_PROBES):
        answer = np.append(factor.solve(weight * random.standard_normal(n)), 0.0)
        np.maximum(largest, (answer[start] - answer[end]) ** 2, out=largest)
    return largest


def _positions(columns: _Factor, start: IntArray, end: IntArray, apart: BoolArray) -> IntArray:
    """Return which entry below the diagonal stands for each pair of different rows."""
    n = len(columns.place)
    i, j = columns.place[start[apart]], columns.place[end[apart]]
    asked = np.minimum(i, j) * n + np.maximum(i, j)
    held = np.repeat(np.arange(n) * n, np.diff(columns.start)) + columns.row
    at = np.searchsorted(held, asked)
    missing = np.append(held, -1)[at] != asked
    if missing.any():
        k = np.flatnonzero(apart)[np.argmax(missing)]
        message = (
            f"each pair must be an entry of the matrix, got rows {start[k]} and {end[k]} at pair {k}; solve for a unit "
            "flow between the two instead"
        )
        raise InputError(message)
    return at


def _refuse_rows(start: IntArray, end: IntArray, n: int) -> None:
    wrong = (start < -1) | (start >= n) | (end < -1) | (end >= n)
    if wrong.any():
        k = int(np.argmax(wrong))
        message = f"rows must lie in 0 .. {n - 1}, or be -1 for the ground, got {start[k]} and {end[k]} at pair {k}"
        raise InputError(message)


def _symmetric(factor: Any) -> _Factor:
    """Return L and D from U = D L^T, whose rows are the columns of L."""
    if not np.array_equal(factor.perm_r, factor.perm_c):
        _refuse("keep every pivot on the diagonal", f"another for row {_first(factor.perm_r != factor.perm_c)}")
    upper, lower = factor.U, factor.L
    pivot = upper.diagonal()
    positive = pivot > 0.0
    if not positive.all():
        _refuse("have positive pivots", f"{pivot[_first(~positive)]} in step {_first(~positive)}")
    probe = np.random.default_rng(0).random(len(pivot)) + 0.5
    size = abs(upper) @ probe
    apart = np.abs(upper @ probe - pivot * (lower.T @ probe)) > _ASYMMETRY * size
    if apart.any():
        _refuse("be that of a symmetric matrix", f"different triangles in step {_first(apart)}")
    by_row = upper.tocsr()  # linear time, and leaves each row ascending
    start, row, below = strictly_above(by_row.indptr, by_row.indices, by_row.data, pivot)
    open_column = first_open(start, row)
    if open_column >= 0:
        _refuse("hold every entry that elimination fills", f"one that cancelled, missed by step {open_column}")
    return _Factor(np.asarray(factor.perm_c, np.int64), start, row, below, pivot)


def _first(where: BoolArray) -> int:
    return int(np.argmax(where))


def _refuse(what: str, found: str) -> None:
    message = f"the factor must {what}, got {found}; entries of the inverse must be solved for one by one here"
    raise InputError(message)


@compiled
def strictly_above(
    indptr: AnyArray, indices: AnyArray, data: FloatArray, pivot: FloatArray
) -> tuple[AnyArray, AnyArray, FloatArray]:
    """Return the rows right of the diagonal over their pivots; a zero, which pads a supernode, is no entry."""
    n = len(pivot)
    start = np.zeros(n + 1, indptr.dtype)
    column = np.empty(len(data) - n, indices.dtype)
    value = np.empty(len(data) - n, np.float64)
    filled = 0
    for i in range(n):
        for p in range(indptr[i], indptr[i + 1]):
            if indices[p] > i and data[p] != 0.0:
                column[filled], value[filled] = indices[p], data[p] / pivot[i]
                filled += 1
        start[i + 1] = filled
    return start, column[:filled], value[:filled]


@compiled
def first_open(start: AnyArray, row: AnyArray) -> int:
    """Return the first column whose rows after its first are not all rows of the column of that first; -1 for none.

    Where there is none, L has an entry for any two rows of a column, by induction along the elimination tree.
    """
    for j in range(len(start) - 1):
        if start[j] == start[j + 1]:
            continue
        first = row[start[j]]
        t, last = start[first], start[first + 1]
        for p in range(start[j] + 1, start[j + 1]):
            t = position(row, t, last, row[p])
            if t == last or row[t] != row[p]:
                return j
    return -1


@compiled
def position(row: AnyArray, low: int, high: int, wanted: int) -> int:
    """Return the first place of low .. high - 1 that holds the wanted row or a later one; high if none does."""
    if low < high and row[low] >= wanted:
        return low
    while low < high:
        middle = (low + high) >> 1
        if row[middle] < wanted:
            low = middle + 1
        else:
            high = middle
    return low


@compiled
def backward(start: AnyArray, row: AnyArray, below: FloatArray, pivot: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return the diagonal of the inverse and its entries below, from the last column to the first.

    Z_ij = -sum_k Z_ik L_kj and Z_jj = 1 / d_j - sum_k L_kj Z_kj over the rows k of column j of L.
    """
    n = len(pivot)
    diagonal = np.empty(n, below.dtype)
    entries = np.zeros(len(below), below.dtype)
    for j in range(n - 1, -1, -1):
        first, last = start[j], start[j + 1]
        for p in range(first, last):
            k = row[p]
            entries[p] -= diagonal[k] * below[p]
            if last - p - 1 == start[k + 1] - start[k]:
                same_rows(start[k], p, last, below, entries)
            else:
                some_rows(start[k], start[k + 1], p, last, row, below, entries)
        total = 1.0 / pivot[j]
        for p in range(first, last):
            total -= below[p] * entries[p]
        diagonal[j] = total
    return diagonal, entries


@compiled
def same_rows(t: int, p: int, last: int, below: FloatArray, entries: FloatArray) -> None:
    """Add what column k = row[p] gives to the entries p .. last - 1, whose later rows are all of its rows."""
    total, factor = 0.0 * below[p], below[p]
    for q in range(p + 1, last):
        z = entries[t]
        entries[q] -= z * factor
        total += z * below[q]
        t += 1
    entries[p] -= total


@compiled
def some_rows(t: int, end: int, p: int, last: int, row: AnyArray, below: FloatArray, entries: FloatArray) -> None:
    """Add what column k = row[p] gives to the entries p .. last - 1, whose later rows are some of its rows."""
    total, factor = 0.0 * below[p], below[p]
    few = 8 * (last - p - 1) < end - t
    for q in range(p + 1, last):
        if few:
            t = position(row, t, end, row[q])
        else:
            while row[t] < row[q]:
                t += 1
        z = entries[t]
        entries[q] -= z * factor
        total += z * below[q]
    entries[p] -= total
