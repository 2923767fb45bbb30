"""How much a field differs among the cells near an edge or a face: the loops behind the error estimates."""

import numpy as np

from dec.arrays import BoolArray, FloatArray, IntArray
from dec.topology.compiled import compiled

__all__ = ["derivative_ranges", "value_ranges"]

# A cell takes part where the direction, laid into it, keeps this part of its square: within 30 degrees of its plane.
_NEARLY_ALONG = 0.75


def derivative_ranges(
    left: FloatArray, along: FloatArray, ends: IntArray, offsets: IntArray, cells: IntArray,
    gradients: FloatArray, axes: FloatArray, sound: BoolArray, is_line: bool,
) -> FloatArray:  # fmt: skip
    """Greatest difference of ``left . G u`` among the cells at either end of each segment; float64, shape (k,).

    Parameters
    ----------
    left, along : float64 arrays, shape (k, 3)
        Both of unit length; u is the direction of `along` laid into each cell.
    ends : int64 array, shape (k, 2)
        The vertices of each segment.
    offsets, cells : int64 arrays
        The cells at each vertex, as from `dec.geometry.neighbours.cells_at`.
    gradients : float64 array, shape (n, 3, 3)
        Component by direction, zero off the cell.
    axes : float64 array, shape (n, 3)
        Unit normal of a face, unit vector along an edge, or zero for a solid cell.
    sound : bool array, shape (n,)
        False leaves a cell out.
    is_line : bool
        Whether the cells are edges. Cells of which `along` stands off by more than 30 degrees are left out.

    Examples
    --------
    >>> line, plane = np.array([[1.0, 0, 0]]), np.array([[0, 0, 1.0]] * 2)
    >>> at = np.array([0, 2, 4]), np.array([0, 1, 0, 1])
    >>> both = np.stack([np.eye(3), 4 * np.eye(3)])
    >>> derivative_ranges(line, line, np.array([[0, 1]]), *at, both, plane, np.ones(2, bool), False)
    array([3.])
    """
    return _derivative_ranges(left, along, ends, offsets, cells, gradients, axes, sound, is_line)


@compiled
def _derivative_ranges(
    left: FloatArray, along: FloatArray, ends: IntArray, offsets: IntArray, cells: IntArray,
    gradients: FloatArray, axes: FloatArray, sound: BoolArray, is_line: bool,
) -> FloatArray:  # fmt: skip
    n = len(left)
    result = np.zeros(n)
    for k in range(n):
        low, high = np.inf, -np.inf
        a0, a1, a2 = along[k, 0], along[k, 1], along[k, 2]
        for side in range(2):
            vertex = ends[k, side]
            for place in range(offsets[vertex], offsets[vertex + 1]):
                c = cells[place]
                if not sound[c]:
                    continue
                off = axes[c, 0] * a0 + axes[c, 1] * a1 + axes[c, 2] * a2
                square = off * off if is_line else 1.0 - off * off
                if square < _NEARLY_ALONG:
                    continue
                total = 0.0
                for i in range(3):
                    g = gradients[c, i]
                    total += left[k, i] * (g[0] * a0 + g[1] * a1 + g[2] * a2)
                total /= np.sqrt(square)
                low, high = min(low, total), max(high, total)
        if high > low:
            result[k] = high - low
    return result


def value_ranges(
    left: FloatArray, at: tuple[IntArray, IntArray], facets: tuple[IntArray, IntArray],
    around: tuple[IntArray, IntArray], values: FloatArray,
) -> FloatArray:  # fmt: skip
    """Greatest difference of ``left . value`` among the cells at each place and their neighbours; float64, shape (k,).

    Parameters
    ----------
    left : float64 array, shape (k, m)
    at : pair of int64 arrays
        The cells at each of the k places, as from `dec.geometry.neighbours.cells_at`.
    facets : pair of int64 arrays
        The facets of each cell, in the same form.
    around : pair of int64 arrays
        The cells at each facet, in the same form.
    values : float64 array, shape (n, m)

    Examples
    --------
    >>> two = np.array([0, 2]), np.array([0, 1])
    >>> own = np.array([0, 1, 2]), np.array([0, 0])
    >>> value_ranges(np.array([[2.0]]), (np.array([0, 1]), np.array([0])), own, two, np.array([[1.0], [4.0]]))
    array([6.])
    """
    return _value_ranges(left, *at, *facets, *around, values)


@compiled
def _value_ranges(
    left: FloatArray, offsets: IntArray, cells: IntArray, facet_offsets: IntArray, facets: IntArray,
    around_offsets: IntArray, around: IntArray, values: FloatArray,
) -> FloatArray:  # fmt: skip
    n, m = left.shape
    result = np.zeros(n)
    for k in range(n):
        low, high = np.inf, -np.inf
        for place in range(offsets[k], offsets[k + 1]):
            c = cells[place]
            for side in range(facet_offsets[c], facet_offsets[c + 1]):
                facet = facets[side]
                for near in range(around_offsets[facet], around_offsets[facet + 1]):
                    total = 0.0
                    for i in range(m):
                        total += left[k, i] * values[around[near], i]
                    low, high = min(low, total), max(high, total)
        if high > low:
            result[k] = high - low
    return result
