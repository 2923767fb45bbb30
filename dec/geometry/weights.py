"""Weights as a caller gives them, and as a diagonal matrix."""

import numpy as np
from numpy.typing import ArrayLike
from scipy.sparse import csr_array

from dec.arrays import FloatArray, float_array
from dec.calculus.complex import Complex
from dec.errors import InputError
from dec.geometry.corners import cell_name
from dec.topology.edges import index_type

__all__ = ["PLURALS", "SINGULARS", "diagonal", "given_weights", "scaled"]

PLURALS = ("vertices", "edges", "faces", "cells")
SINGULARS = ("vertex", "edge", "face", "cell")


def scaled(values: FloatArray, factors: FloatArray) -> FloatArray:
    """Each row of the values times its factor: float64 array of the shape of the values.

    Examples
    --------
    >>> scaled(np.ones((2, 2)), np.array([2.0, 3.0])).tolist()
    [[2.0, 2.0], [3.0, 3.0]]
    """
    return values * (factors if values.ndim == 1 else factors[:, None])


def diagonal(values: FloatArray) -> csr_array:
    """A diagonal matrix: csr_array of float64, shape (n, n), which shares nothing with the values.

    Examples
    --------
    >>> diagonal(np.array([2.0, 0.5])).toarray().tolist()
    [[2.0, 0.0], [0.0, 0.5]]
    """
    n = len(values)
    places = np.arange(n + 1, dtype=index_type(n + 1))
    return csr_array((values.copy(), places[:-1].copy(), places), shape=(n, n))


def given_weights(complex: Complex, k: int, given: ArrayLike | None) -> FloatArray:
    """Weights that a caller gave for the k-cells, checked, or ones: float64 array of shape (n_k,).

    Raises
    ------
    InputError
        If there are too few or too many, or one is not positive and finite; the message names its cell.

    Examples
    --------
    >>> given_weights(Complex.from_edges([0], [1]), 1, [2]).tolist()
    [2.0]
    """
    count = complex.counts[k]
    if given is None:
        return np.ones(count)
    array = float_array(given, f"weights of {PLURALS[k]}", ndim=1, finite=False)
    if len(array) != count:
        message = f"weights of {PLURALS[k]} must be {count}, one each, got {len(array)}"
        raise InputError(message)
    bad = ~((array > 0) & np.isfinite(array))
    if bad.any():
        at = int(np.argmax(bad))
        message = (
            f"weights must be positive and finite, got {array[at]} at {cell_name(complex, k, at)}; "
            "a sign belongs in the value on the cell, and a cell without a value is left out of the complex"
        )
        raise InputError(message)
    return array
