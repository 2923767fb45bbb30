"""Faces or cells given twice, which would be counted twice in a balance."""

import numpy as np

from dec.arrays import IntArray
from dec.calculus.complex import Complex
from dec.errors import InputError

__all__ = ["refuse_repeated", "repeated_cells"]


def refuse_repeated(K: Complex) -> None:
    """Return quietly, or raise InputError naming the first two top cells with the same corners."""
    repeated = repeated_cells(K)
    if len(repeated):
        what = "face" if K.dim == 2 else "cell"
        first, second = repeated[0].tolist()
        count = f"{len(repeated)} such pair{'s' if len(repeated) > 1 else ''}"
        message = (
            f"every {what} must be given once, {what}s {first} and {second} have the same corners ({count}); "
            "take one of the two out, dec check lists them"
        )
        raise InputError(message)


def repeated_cells(K: Complex) -> IntArray:
    """Pairs of top cells with the same corners, the earlier first, where three or more cells meet at a facet.

    Parameters
    ----------
    K : Complex
        Of dimension 2 or 3.

    Returns
    -------
    int64 array, shape (n, 2)
        By second cell. Two cells that share all their facets with each other alone are not among them: they close.

    Examples
    --------
    >>> repeated_cells(Complex.from_faces([[0, 1, 2], [1, 3, 2], [2, 0, 1]])).tolist()
    [[0, 2]]
    """
    uses = K.incidences
    crowded = np.unique(uses.cell[uses.uses[uses.facet] > 2])
    pairs = [np.empty((0, 2), np.int64)]
    for numbers, corners in _corners(K, crowded):
        rows = np.sort(corners, axis=1)
        order = np.lexsort(rows.T[::-1])
        same = (rows[order[1:]] == rows[order[:-1]]).all(axis=1)
        pairs.append(np.stack([numbers[order[:-1]][same], numbers[order[1:]][same]], axis=1))
    found = np.concatenate(pairs)
    return found[np.argsort(found[:, 1], kind="stable")]


def _corners(K: Complex, cells: IntArray) -> list[tuple[IntArray, IntArray]]:
    """Return cells by number of corners, and their corners as a rectangular array."""
    blocks = []
    if K.dim == 3:
        first = 0
        for corners in K.solids.values():
            chosen = cells[(cells >= first) & (cells < first + len(corners))]
            blocks.append((chosen, corners[chosen - first]))
            first += len(corners)
        return blocks
    assert K.faces is not None
    lengths = K.faces.lengths[cells]
    for length in np.unique(lengths).tolist():
        chosen = cells[lengths == length]
        blocks.append((chosen, K.faces.flat[K.faces.offsets[chosen][:, None] + np.arange(length)]))
    return blocks
