"""Where the corners of cells lie, in pieces that fit the cache, and across the seam of a periodic grid too."""

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from dec.arrays import AnyArray, FloatArray, IntArray
from dec.calculus.complex import Complex
from dec.errors import InputError
from dec.topology.polygons import Ragged

__all__ = [
    "FaceBlock", "SolidBlock", "cell_name", "cross", "edge_vectors", "embedded", "face_blocks", "positions",
    "solid_blocks", "summed",
]  # fmt: skip

_NAMES = ("vertex", "edge", "face", "cell")
_FACES_AT_ONCE = 32_768
_UNIT_CUBE = np.array([[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0], [0, 0, 1], [1, 0, 1], [1, 1, 1], [0, 1, 1]])

# Beyond this, products such as the square of an area or of a volume leave float64.
LARGEST = 1e60


@dataclass(frozen=True, slots=True)
class FaceBlock:
    """Faces with one number of corners.

    Attributes
    ----------
    faces : slice or int64 array
        Which faces, n of them.
    entries : slice or int64 array
        Where their n w corners stand in ``K.faces.flat``; ``out[block.entries] = values.ravel()`` puts values back.
    corners : int64 array, shape (n, w)
    offsets : float64 array, shape (n, w, m)
        From the first corner of each face, so the first is zero; true steps across the seam of a periodic grid.
    """

    faces: slice | IntArray
    entries: slice | IntArray
    corners: IntArray
    offsets: FloatArray

    def positions(self, points: FloatArray) -> FloatArray:
        """Places of the corners, carried on past the seam of a periodic grid; float64 array of shape (n, w, m)."""
        return points[self.corners[:, :1]] + self.offsets


@dataclass(frozen=True, slots=True)
class SolidBlock:
    """Solid cells of one kind: a slice of the numbering, corners (n, w) and offsets (n, w, 3) from the first corner."""

    kind: str
    cells: slice
    corners: IntArray
    offsets: FloatArray


def positions(K: Complex) -> FloatArray:
    """The points of a complex; float64 array of shape (n0, m).

    Raises
    ------
    InputError
        If it has none, solid cells have fewer than three coordinates, or one is beyond 1e60, where squares of areas
        and volumes overflow.

    Examples
    --------
    >>> positions(Complex.from_edges([0], [1], points=[[0, 0], [3, 4]])).shape
    (2, 2)
    """
    if K.points is None:
        message = "lengths and areas need points, this complex has none; give points=, or weights to Metric.weighted"
        raise InputError(message)
    if K.dim == 3 and K.points.shape[1] != 3:
        message = f"solid cells need points in 3 coordinates, got {K.points.shape[1]}"
        raise InputError(message)
    largest = max(-float(K.points.min(initial=0.0)), float(K.points.max(initial=0.0)))
    if largest > LARGEST:
        message = f"coordinates must stay within {LARGEST:g}, got {largest:g}; choose a larger unit"
        raise InputError(message)
    return K.points


def edge_vectors(K: Complex) -> FloatArray:
    """From tail to head along every edge; float64 array of shape (n1, m), in the unit of the points.

    On a grid the step is the spacing along the axis of the edge, also where the edge runs round the end of a
    periodic axis; elsewhere it is ``points[head] - points[tail]``.

    Raises
    ------
    InputError
        If the complex has no points.

    Examples
    --------
    >>> from dec.calculus.complex import grid
    >>> edge_vectors(grid(3, spacing=2, periodic=True)).ravel().tolist()
    [2.0, 2.0, 2.0]
    """
    points = positions(K)
    if K.lattice is None:
        vectors = points.take(K.head, axis=0)
        vectors -= points.take(K.tail, axis=0)
        return vectors
    vectors = np.zeros((K.counts[1], points.shape[1]))
    shape, first = K.lattice.shape, 0
    for axis, (step, closes) in enumerate(zip(K.lattice.spacing, K.lattice.periodic, strict=True)):
        along = shape[axis] if closes else shape[axis] - 1
        count = int(np.prod(shape)) // shape[axis] * along
        vectors[first : first + count, axis] = step
        first += count
    return vectors


def face_blocks(K: Complex) -> Iterator[FaceBlock]:
    """The faces in blocks of equal corner number, at most 32,768 at once; see `FaceBlock`.

    Raises
    ------
    InputError
        If the complex has no points or no faces.
    """
    points = positions(K)
    if K.faces is None:
        message = f"areas need faces, this complex has dimension {K.dim}"
        raise InputError(message)
    steps = None if K.lattice is None else edge_vectors(K)
    for faces, entries, corners in _rows(K.faces):
        if steps is None:
            offsets = points[corners]
            offsets -= offsets[:, :1].copy()
        else:
            offsets = _walked(K, steps, entries, corners)
        yield FaceBlock(faces, entries, corners, offsets)


def _rows(faces: Ragged) -> Iterator[tuple[slice | IntArray, slice | IntArray, IntArray]]:
    if faces.width is not None:
        corners = faces.flat.reshape(-1, faces.width)
        for first in range(0, len(corners), _FACES_AT_ONCE):
            last = min(first + _FACES_AT_ONCE, len(corners))
            yield slice(first, last), slice(first * faces.width, last * faces.width), corners[first:last]
        return
    lengths = faces.lengths
    for width in np.unique(lengths).tolist():
        alike = np.flatnonzero(lengths == width)
        for first in range(0, len(alike), _FACES_AT_ONCE):
            numbers = alike[first : first + _FACES_AT_ONCE]
            places = faces.offsets[numbers][:, None] + np.arange(width)
            yield numbers, places.ravel(), faces.flat[places]


def _walked(K: Complex, steps: FloatArray, entries: slice | IntArray, corners: IntArray) -> FloatArray:
    """Return the offsets of corners by adding up the steps of the walk round each face."""
    assert K.walks is not None
    sides = steps[K.walks.edges[entries]] * K.walks.signs[entries][:, None]
    sides = sides.reshape(*corners.shape, -1)
    offsets = np.zeros_like(sides)
    np.cumsum(sides[:, :-1], axis=1, out=offsets[:, 1:])
    return offsets


def solid_blocks(K: Complex) -> Iterator[SolidBlock]:
    """The solid cells in blocks of one kind, at most 32,768 at once; see `SolidBlock`.

    Raises
    ------
    InputError
        If the complex has no points in three coordinates, or no solid cells.
    """
    points = positions(K)
    if K.dim != 3:
        message = f"volumes need solid cells, this complex has dimension {K.dim}"
        raise InputError(message)
    first = 0
    for kind, corners in K.solids.items():
        for start in range(0, len(corners), _FACES_AT_ONCE):
            rows = corners[start : start + _FACES_AT_ONCE]
            if K.lattice is None:
                offsets = points[rows]
                offsets -= offsets[:, :1].copy()
            else:
                offsets = np.broadcast_to(_UNIT_CUBE * np.array(K.lattice.spacing), (len(rows), 8, 3))
            yield SolidBlock(kind, slice(first + start, first + start + len(rows)), rows, offsets)
        first += len(corners)


def embedded(vectors: AnyArray) -> FloatArray:
    """The same vectors with three components, zeros added; float64 array of shape (..., 3).

    Examples
    --------
    >>> embedded(np.array([[1.0, 2.0]])).tolist()
    [[1.0, 2.0, 0.0]]
    """
    if vectors.shape[-1] == 3:
        return vectors
    result = np.zeros((*vectors.shape[:-1], 3))
    result[..., : vectors.shape[-1]] = vectors
    return result


def cross(left: FloatArray, right: FloatArray) -> FloatArray:
    """Cross products of vectors with one to three components; float64 array of shape (..., 3).

    Examples
    --------
    >>> cross(np.array([1.0, 0.0]), np.array([0.0, 2.0])).tolist()
    [0.0, 0.0, 2.0]
    """
    size = left.shape[-1]
    result = np.zeros((*np.broadcast_shapes(left.shape, right.shape)[:-1], 3))
    if size == 1:
        return result
    for k, (i, j) in enumerate(((1, 2), (2, 0), (0, 1))):
        if max(i, j) < size:
            np.multiply(left[..., i], right[..., j], out=result[..., k])
            result[..., k] -= left[..., j] * right[..., i]
    return result


def summed(at: AnyArray, values: AnyArray, n: int) -> FloatArray:
    """The values added up by number: float64 array of shape (n,).

    Examples
    --------
    >>> summed(np.array([0, 2, 2]), np.array([1.0, 2.0, 3.0]), 4).tolist()
    [1.0, 0.0, 5.0, 0.0]
    """
    return np.asarray(np.bincount(at, weights=values, minlength=n), dtype=np.float64)


def cell_name(K: Complex, degree: int, number: int) -> str:
    """What an error calls a cell: vertices by id where they have ids, edges with their ends too.

    Examples
    --------
    >>> cell_name(Complex.from_edges([0, 1], [1, 2]), 1, 1)
    'edge 1 (1, 2)'
    """
    if degree == 0:
        return f"vertex {number if K.vertex_ids is None else repr(K.vertex_ids[number])}"
    if degree == 1:
        ends = (int(K.tail[number]), int(K.head[number]))
        names = ends if K.vertex_ids is None else tuple(K.vertex_ids[list(ends)])
        label = number if K.edge_ids is None else repr(K.edge_ids[number])
        return f"edge {label} {names}"
    return f"{_NAMES[degree]} {number}"
