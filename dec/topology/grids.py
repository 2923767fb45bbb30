"""Regular grids in one to three axes, any of them closed round its end."""

from dataclasses import dataclass
from itertools import combinations

import numpy as np
from scipy.sparse import csr_array

from dec.arrays import AnyArray, IntArray
from dec.topology.edges import sparse_signs
from dec.topology.polygons import Walks

__all__ = ["GridCells", "grid_cells"]


@dataclass(frozen=True, slots=True)
class GridCells:
    """Numbered cells of a grid.

    Attributes
    ----------
    tail, head : int64 arrays, shape (n1,)
        Edges along the first axis come first; each runs to the higher index, or round the end.
    walks : Walks or None
        Faces in the planes of axes (0, 1), (0, 2), (1, 2), each turned from the lower to the higher axis.
    corners : int64 array, shape (n2, 4), or None
        Corners of each face in walking order.
    solids : csr_array of int8, shape (n3, n2), or None
        Faces of each solid cell, outward for axes in right-handed order.
    solid_corners : int64 array, shape (n3, 8), or None
        In the corner order of VTK hexahedra.
    """

    tail: IntArray
    head: IntArray
    walks: Walks | None
    corners: IntArray | None
    solids: csr_array | None
    solid_corners: IntArray | None


def grid_cells(shape: tuple[int, ...], periodic: tuple[bool, ...]) -> GridCells:
    """The cells of a grid; the vertex (i, j, k) has number (i n_1 + j) n_2 + k.

    Parameters
    ----------
    shape : tuple of int
        Vertices along each axis, one to three axes, each at least 1.
    periodic : tuple of bool
        Which axes close: the last vertex has an edge back to the first.

    Returns
    -------
    GridCells

    Notes
    -----
    A closed axis of one vertex gives self-loops and of two gives parallel edges; both stay exact.

    Examples
    --------
    >>> cells = grid_cells((2, 2), (False, False))
    >>> cells.tail, cells.head, cells.walks.edges, cells.walks.signs
    (array([0, 1, 0, 2]), array([2, 3, 1, 3]), array([0, 3, 1, 2]), array([ 1,  1, -1, -1], dtype=int8))
    """
    axes = range(len(shape))
    numbers = np.arange(int(np.prod(shape))).reshape(shape)
    tails = [_low(numbers, a, periodic) for a in axes]
    edges = _numbered([t.shape for t in tails])
    tail = np.concatenate([t.ravel() for t in tails])
    head = np.concatenate([_high(numbers, a, periodic).ravel() for a in axes])
    if len(shape) == 1:
        return GridCells(tail, head, None, None, None, None)
    planes = list(combinations(axes, 2))
    sides, corners, face_shapes = [], [], []
    for a, b in planes:
        side = [
            _low(edges[a], b, periodic), _high(edges[b], a, periodic),
            _high(edges[a], b, periodic), _low(edges[b], a, periodic),
        ]  # fmt: skip
        low = _low(numbers, b, periodic), _high(numbers, b, periodic)
        corner = [
            _low(low[0], a, periodic), _high(low[0], a, periodic),
            _high(low[1], a, periodic), _low(low[1], a, periodic),
        ]  # fmt: skip
        face_shapes.append(side[0].shape)
        sides.append(np.stack([s.ravel() for s in side], axis=1))
        corners.append(np.stack([c.ravel() for c in corner], axis=1))
    flat = np.concatenate(sides).ravel()
    n_faces = len(flat) // 4
    signs = np.tile(np.array([1, 1, -1, -1], np.int8), n_faces)
    walks = Walks(flat, signs, np.arange(n_faces + 1) * 4, 4)
    if len(shape) == 2:
        return GridCells(tail, head, walks, np.concatenate(corners), None, None)
    faces = dict(zip(planes, _numbered(face_shapes), strict=True))
    solids, solid_corners = _solids(faces, numbers, periodic, n_faces)
    return GridCells(tail, head, walks, np.concatenate(corners), solids, solid_corners)


def _solids(
    faces: dict[tuple[int, int], IntArray], numbers: IntArray, periodic: tuple[bool, ...], n_faces: int
) -> tuple[csr_array, IntArray]:
    # (d F)(xyz) = D_x F_yz - D_y F_xz + D_z F_xy
    parts, signs = [], []
    for axis, plane, sign in ((0, (1, 2), 1), (1, (0, 2), -1), (2, (0, 1), 1)):
        parts += [_low(faces[plane], axis, periodic), _high(faces[plane], axis, periodic)]
        signs += [-sign, sign]
    columns = np.stack([p.ravel() for p in parts], axis=1)
    n_solids = len(columns)
    matrix = sparse_signs(
        np.arange(n_solids + 1) * 6, columns.ravel(), np.tile(np.array(signs, np.int8), n_solids), n_faces
    )
    corners = []
    for c in (0, 1):
        level = (_high if c else _low)(numbers, 2, periodic)
        for a, b in ((0, 0), (1, 0), (1, 1), (0, 1)):
            row = (_high if b else _low)(level, 1, periodic)
            corners.append((_high if a else _low)(row, 0, periodic).ravel())
    return matrix, np.stack(corners, axis=1)


def _numbered(shapes: list[tuple[int, ...]]) -> list[IntArray]:
    starts = np.concatenate([[0], np.cumsum([int(np.prod(s)) for s in shapes])])
    return [np.arange(starts[i], starts[i + 1]).reshape(s) for i, s in enumerate(shapes)]


def _low(array: AnyArray, axis: int, periodic: tuple[bool, ...]) -> AnyArray:
    return array if periodic[axis] else array.take(range(array.shape[axis] - 1), axis=axis)


def _high(array: AnyArray, axis: int, periodic: tuple[bool, ...]) -> AnyArray:
    return np.roll(array, -1, axis=axis) if periodic[axis] else array.take(range(1, array.shape[axis]), axis=axis)
