"""Tetrahedra and hexahedra: their faces told apart, and which face is turned outward."""

import numpy as np
from scipy.sparse import csr_array

from dec.arrays import AnyArray, IntArray, SignArray, frozen
from dec.errors import TopologyError
from dec.topology.edges import sparse_signs, unique_pairs
from dec.topology.polygons import Ragged, standard_loops

__all__ = ["CORNERS", "FACES", "faces_of_cells"]

# Corner order of the VTK file format (tetra: det > 0; hexahedron: bottom square, then top), each face outward.
FACES = {
    "tetra": np.array([[1, 2, 3], [0, 3, 2], [0, 1, 3], [0, 2, 1]]),
    "hexahedron": np.array([[0, 3, 2, 1], [4, 5, 6, 7], [0, 1, 5, 4], [1, 2, 6, 5], [2, 3, 7, 6], [3, 0, 4, 7]]),
}
CORNERS = {"tetra": 4, "hexahedron": 8}


def faces_of_cells(cells: dict[str, IntArray], n_vertices: int) -> tuple[Ragged, csr_array]:
    """The distinct faces of solid cells, and the matrix that adds them up outward round each cell.

    Parameters
    ----------
    cells : dict of kind to int array, shape (n, 4) or (n, 8)
        Cells are numbered through the kinds in the order given.
    n_vertices : int
        Number of vertices, n0.

    Returns
    -------
    faces : Ragged
        Triangles first, then quadrilaterals, each in lexicographic order of its ascending corners. A face starts
        at its lowest corner and goes on to the lower of that corner's two neighbours.
    coboundary : csr_array of int8, shape (n3, n2)
        +1 where the stored face is turned out of the cell, -1 where into it, for cells of positive volume.

    Raises
    ------
    TopologyError
        If a corner lies outside 0 .. n0 - 1, or two cells join the same four corners in a different order.

    Examples
    --------
    >>> faces, coboundary = faces_of_cells({"tetra": np.array([[0, 1, 2, 3]])}, 4)
    >>> faces.flat.reshape(-1, 3).tolist(), coboundary.toarray().tolist()
    ([[0, 1, 2], [0, 1, 3], [0, 2, 3], [1, 2, 3]], [[-1, 1, -1, 1]])
    """
    triangles: list[AnyArray] = []
    squares: list[AnyArray] = []
    owners: dict[int, list[AnyArray]] = {3: [], 4: []}
    first = 0
    for kind, corners in cells.items():
        _refuse_outside(kind, corners, n_vertices)
        sides = corners[:, FACES[kind]]
        width = sides.shape[2]
        (triangles if width == 3 else squares).append(sides.reshape(-1, width))
        owners[width].append(np.repeat(np.arange(first, first + len(corners)), sides.shape[1]))
        first += len(corners)
    tri, tri_which, tri_sign = _tell_apart(triangles, 3, n_vertices)
    quad, quad_which, quad_sign = _tell_apart(squares, 4, n_vertices)
    n_tri, n_quad = len(tri), len(quad)
    flat = np.concatenate([tri.ravel(), quad.ravel()])
    offsets = np.concatenate([np.arange(n_tri) * 3, 3 * n_tri + np.arange(n_quad + 1) * 4])
    common = None if n_tri and n_quad else (4 if n_quad else 3)
    faces = Ragged(frozen(flat), frozen(offsets.astype(np.int64)), common)
    owner = np.concatenate([np.empty(0, np.int64), *owners[3], *owners[4]])
    which = np.concatenate([tri_which, quad_which + n_tri]).astype(np.int64)
    sign = np.concatenate([tri_sign, quad_sign])
    order = np.argsort(owner, kind="stable")
    rows_ptr = np.concatenate([[0], np.cumsum(np.bincount(owner, minlength=first))])
    return faces, sparse_signs(rows_ptr, which[order], sign[order], n_tri + n_quad)


def _tell_apart(blocks: list[AnyArray], width: int, n_vertices: int) -> tuple[IntArray, IntArray, SignArray]:
    """Return distinct faces in standard form, which of them each given one is, and how it is turned against it."""
    if not sum(len(block) for block in blocks):
        return np.empty((0, width), np.int64), np.empty(0, np.int64), np.empty(0, np.int8)
    given = np.concatenate(blocks)
    standard, sign = standard_loops(given)
    ascending = standard if width == 3 else np.sort(given, axis=1)
    _, _, pair = unique_pairs(ascending[:, 0], ascending[:, 1], n_vertices)
    if width == 3:
        _, _, which = unique_pairs(pair, ascending[:, 2], n_vertices)
    else:
        _, _, other = unique_pairs(ascending[:, 2], ascending[:, 3], n_vertices)
        _, _, which = unique_pairs(pair, other, int(other.max()) + 1)
    distinct = np.empty((int(which.max()) + 1, width), np.int64)
    distinct[which] = standard
    if width == 4:
        clash = (distinct[which] != standard).any(axis=1)
        if clash.any():
            at = int(np.argmax(clash))
            corners = ascending[at].tolist()
            message = f"two cells join corners {corners} in different orders; one of the cells is twisted"
            raise TopologyError(message)
    return distinct, which.astype(np.int64), sign


def _refuse_outside(kind: str, corners: IntArray, n_vertices: int) -> None:
    if corners.size and (int(corners.min()) < 0 or int(corners.max()) >= n_vertices):
        cell, corner = np.argwhere((corners < 0) | (corners >= n_vertices))[0]
        message = f"{kind} {cell} names vertex {corners[cell, corner]}; there are vertices 0 .. {n_vertices - 1}"
        raise TopologyError(message)
