"""How much a field differs among the cells near an edge or a face: the loops behind the error estimates."""

import numpy as np

from dec.arrays import BoolArray, FloatArray, IntArray
from dec.topology.compiled import compiled

__all__ = ["derivative_ranges", "value_ranges"]

# A cell takes part where the direction, laid into it, keeps this part of its square: within 30 degrees of its plane.
_NEARLY_ALONG = 0.75
# Where more cells than this meet, a box round all that they hold stands for them: looking at each from each edge
# there would take the square of their number.
CROWD = 512


def derivative_ranges(
    left: FloatArray, along: FloatArray, ends: IntArray, offsets: IntArray, cells: IntArray,
    gradients: FloatArray, axes: FloatArray, sound: BoolArray, is_line: bool,
) -> FloatArray:  # fmt: skip
    """Greatest difference of ``left . G u`` among the cells at either end of each segment; float64, shape (k,).

    At an end where more than 512 cells meet, an upper bound of it: from the least and greatest of every component of
    their gradients and axes. It is exact where the gradients are all the same and the cells lie in one plane.

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
    held = np.concatenate([gradients.reshape(-1, 9), axes], axis=1)
    crowded, boxes = _boxes(ends, offsets, cells, held, sound)
    return _derivative_ranges(left, along, ends, offsets, cells, gradients, axes, sound, is_line, crowded, *boxes)


def _boxes(
    places: IntArray, offsets: IntArray, cells: IntArray, values: FloatArray, sound: BoolArray | None = None
) -> tuple[IntArray, tuple[FloatArray, FloatArray]]:
    """Return which box stands for the cells at each place, -1 for none, and the lowest and highest values of each.

    A box whose lowest values are above its highest holds no cell.
    """
    which = np.full(places.shape, -1, np.int64)
    is_crowded = offsets[places + 1] - offsets[places] > CROWD
    if not is_crowded.any():
        none = np.empty((0, values.shape[1]))
        return which, (none, none)
    crowds, which[is_crowded] = np.unique(places[is_crowded], return_inverse=True)
    low, high = np.full((len(crowds), values.shape[1]), np.inf), np.full((len(crowds), values.shape[1]), -np.inf)
    for box, place in enumerate(crowds):  # each of them large
        own = cells[offsets[place] : offsets[place + 1]]
        own = own if sound is None else own[sound[own]]
        low[box], high[box] = values[own].min(axis=0, initial=np.inf), values[own].max(axis=0, initial=-np.inf)
    return which, (low, high)


@compiled
def _derivative_ranges(
    left: FloatArray, along: FloatArray, ends: IntArray, offsets: IntArray, cells: IntArray,
    gradients: FloatArray, axes: FloatArray, sound: BoolArray, is_line: bool,
    crowded: IntArray, lows: FloatArray, highs: FloatArray,
) -> FloatArray:  # fmt: skip
    n = len(left)
    result = np.zeros(n)
    for k in range(n):
        low, high = np.inf, -np.inf
        a0, a1, a2 = along[k, 0], along[k, 1], along[k, 2]
        for side in range(2):
            vertex = ends[k, side]
            box = crowded[k, side]
            if box >= 0:
                if lows[box, 0] <= highs[box, 0]:
                    least, most = _box_range(left[k], along[k], lows[box], highs[box], is_line)
                    low, high = min(low, least), max(high, most)
                continue
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


@compiled
def _box_range(
    left: FloatArray, along: FloatArray, lows: FloatArray, highs: FloatArray, is_line: bool
) -> tuple[float, float]:  # fmt: skip
    """Return between what values ``left . G u`` lies in a cell of the box; infinity first where none takes part."""
    least, most = 0.0, 0.0
    for i in range(3):
        for j in range(3):
            one, two = left[i] * along[j] * lows[3 * i + j], left[i] * along[j] * highs[3 * i + j]
            least += min(one, two)
            most += max(one, two)
    off_least, off_most = 0.0, 0.0
    for j in range(3):
        one, two = along[j] * lows[9 + j], along[j] * highs[9 + j]
        off_least += min(one, two)
        off_most += max(one, two)
    largest = min(1.0, max(off_least * off_least, off_most * off_most))
    smallest = 0.0 if off_least < 0 < off_most else min(1.0, off_least * off_least, off_most * off_most)
    if not is_line:
        smallest, largest = 1.0 - largest, 1.0 - smallest
    if largest < _NEARLY_ALONG:
        return np.inf, -np.inf
    one, two = np.sqrt(max(smallest, _NEARLY_ALONG)), np.sqrt(largest)
    return min(least / one, least / two), max(most / one, most / two)


def value_ranges(
    left: FloatArray, at: tuple[IntArray, IntArray], facets: tuple[IntArray, IntArray],
    around: tuple[IntArray, IntArray], values: FloatArray,
) -> FloatArray:  # fmt: skip
    """Greatest difference of ``left . value`` among the cells at each place and their neighbours; float64, shape (k,).

    Where more than 512 cells meet at a facet, an upper bound of it: from the least and greatest of every component of
    their values.

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
    crowded, boxes = _boxes(np.arange(len(around[0]) - 1), *around, values)
    return _value_ranges(left, *at, *facets, *around, values, crowded, *boxes)


@compiled
def _value_ranges(
    left: FloatArray, offsets: IntArray, cells: IntArray, facet_offsets: IntArray, facets: IntArray,
    around_offsets: IntArray, around: IntArray, values: FloatArray,
    crowded: IntArray, lows: FloatArray, highs: FloatArray,
) -> FloatArray:  # fmt: skip
    n, m = left.shape
    result = np.zeros(n)
    for k in range(n):
        low, high = np.inf, -np.inf
        for place in range(offsets[k], offsets[k + 1]):
            c = cells[place]
            for side in range(facet_offsets[c], facet_offsets[c + 1]):
                facet = facets[side]
                box = crowded[facet]
                if box >= 0:
                    least, most = 0.0, 0.0
                    for i in range(m):
                        one, two = left[k, i] * lows[box, i], left[k, i] * highs[box, i]
                        least += min(one, two)
                        most += max(one, two)
                    low, high = min(low, least), max(high, most)
                    continue
                for near in range(around_offsets[facet], around_offsets[facet + 1]):
                    total = 0.0
                    for i in range(m):
                        total += left[k, i] * values[around[near], i]
                    low, high = min(low, total), max(high, total)
        if high > low:
            result[k] = high - low
    return result
