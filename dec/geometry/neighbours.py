"""Which top cells meet at a cell of lower degree."""

from typing import TypeAlias

import numpy as np
from scipy.sparse import csr_array

from dec.arrays import AnyArray, IntArray
from dec.calculus.complex import Complex

__all__ = ["Rows", "cells_at"]

Rows: TypeAlias = tuple[IntArray, IntArray]


def cells_at(K: Complex, degree: int) -> Rows:
    """The cells of highest dimension at every cell of a degree, as rows of one flat array.

    Parameters
    ----------
    K : Complex
    degree : int
        0 .. dim; for dim every cell is alone.

    Returns
    -------
    offsets : int64 array, shape (n_k + 1,)
    cells : int64 array
        Those at cell i are ``cells[offsets[i]:offsets[i + 1]]``; one that meets it in two places is there twice.

    Examples
    --------
    >>> cells_at(Complex.from_faces([[0, 1, 2], [2, 1, 3]]), 1)[0].tolist()
    [0, 1, 2, 4, 5, 6]
    """
    top = K.counts[-1]
    if degree == K.dim:
        return np.arange(top + 1), np.arange(top)
    if degree == 0:
        return _at_vertices(K)
    if degree == K.dim - 1:
        uses = K.incidences
        return _offsets(uses.uses), uses.cell
    faces_of_edges = abs(K.coboundary(1)).astype(np.int32)
    matrix = (abs(K.coboundary(2)).astype(np.int32) @ faces_of_edges).tocsc()
    return matrix.indptr.astype(np.int64), matrix.indices.astype(np.int64)


def _at_vertices(K: Complex) -> Rows:
    if K.dim == 1:
        corners: list[AnyArray] = [np.stack([K.tail, K.head], axis=1)]
    elif K.dim == 2:
        assert K.faces is not None
        return _turned(K.faces.flat, K.faces.offsets, K.counts[0])
    else:
        corners = list(K.solids.values())
    sizes = np.concatenate([np.full(len(c), c.shape[1]) for c in corners])
    return _turned(np.concatenate([c.ravel() for c in corners]), _offsets(sizes), K.counts[0])


def _turned(vertices: IntArray, offsets: IntArray, n_vertices: int) -> Rows:
    """Return the cells at every vertex, from the vertices of every cell."""
    ones = np.ones(len(vertices), dtype=np.int8)
    matrix = csr_array((ones, vertices, offsets), shape=(len(offsets) - 1, n_vertices)).tocsc()
    return matrix.indptr.astype(np.int64), matrix.indices.astype(np.int64)


def _offsets(sizes: AnyArray) -> IntArray:
    return np.concatenate([[0], np.cumsum(sizes)]).astype(np.int64)
