"""How many entries an exact factor would have, counted without making it."""

import numpy as np

from dec.arrays import AnyArray, IntArray
from dec.solvers.minimum_degree import minimum_degree
from dec.solvers.problem import LinearProblem
from dec.topology.compiled import compiled

__all__ = ["factor_entries", "sparse_order"]


def sparse_order(problem: LinearProblem, most: int) -> IntArray | None:
    """An order of elimination in which a Cholesky factor has few entries; None where it would have more than that.

    Parameters
    ----------
    problem : LinearProblem
    most : int
        Entries below the diagonal at which to give up.

    Returns
    -------
    int64 array, shape (n,), or None

    Examples
    --------
    >>> path = LinearProblem.of_graph(np.array([0, 1]), np.array([1, 2]), 3, np.array([1.0, 2.0]))
    >>> sparse_order(path, 10), sparse_order(path, 1)
    (array([0, 1, 2]), None)
    """
    matrix = problem.matrix
    order = minimum_degree(matrix.indptr, matrix.indices, most)
    if order is None or factor_entries(matrix.indptr, matrix.indices, order, most) > most:
        return None
    return order


def factor_entries(indptr: AnyArray, indices: AnyArray, order: IntArray, most: int) -> int:
    """Entries below the diagonal of the Cholesky factor of a symmetric matrix, its rows taken in a given order.

    Parameters
    ----------
    indptr, indices : int arrays
        Pattern of the matrix, both triangles.
    order : int64 array, shape (n,)
    most : int
        Counting ends once it is exceeded.

    Notes
    -----
    Each row's entries are found by climbing the elimination tree. Source: Liu, The role of elimination trees in
    sparse factorization, SIAM J. Matrix Anal. Appl. 11 (1990), section 4.
    """
    place = np.empty(len(order), np.int64)
    place[order] = np.arange(len(order))
    return int(_climbed(indptr, indices, order, place, most))


@compiled
def _climbed(indptr: AnyArray, indices: AnyArray, order: IntArray, place: IntArray, most: int) -> int:
    n = len(order)
    parent, mark = np.full(n, -1), np.full(n, -1)
    count = 0
    for i in range(n):
        mark[i] = i
        for p in range(indptr[order[i]], indptr[order[i] + 1]):
            k = place[indices[p]]
            while k < i and mark[k] != i:
                if parent[k] < 0:
                    parent[k] = i
                mark[k] = i
                count += 1
                k = parent[k]
        if count > most:
            break
    return count
