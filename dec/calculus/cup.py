"""Cup products: the value of one cochain on the front of a cell times the value of another on its back.

The sign convention is made here. On a simplex with corners v_0 < ... < v_{p+q}, by vertex number, the product is the
left value on [v_0 .. v_p] times the right value on [v_p .. v_{p+q}], each cell taken in ascending order; stored
directions then count as everywhere. On a grid cell it is the sum, over the ways to split its axes into p front and q
back ones, of the left value on the front axes at the low end of the back ones times the right value on the back axes
at the high end of the front ones; minus where front before back is an odd permutation of the axes. With it

    d(a cup b) = da cup b + (-1)**p a cup db        for a of degree p.
"""

from itertools import combinations, pairwise
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from dec.arrays import AnyArray, IntArray, float_array
from dec.errors import TopologyError

if TYPE_CHECKING:
    from dec.calculus.cells import Cells
    from dec.calculus.lattice import Lattice
    from dec.topology.polygons import Ragged, Walks

__all__ = ["cup_values"]

_LARGEST_INT = 2**63 - 1
_TERMS = 3  # at most, of a product on one cell


class _Triangles(NamedTuple):
    """Sides of each triangle between its ascending corners, shape (n2,), and whether it is turned that way."""

    first_side: IntArray
    last_side: IntArray
    sign: IntArray


def cup_values(complex: "Cells", p: int, left: AnyArray, q: int, right: AnyArray) -> AnyArray:
    """The values of a cup product on the cells of degree p + q.

    Parameters
    ----------
    complex : Complex
    p, q : int
        Degrees of the factors; p + q at most the dimension.
    left : float64, int64 or object array, shape (n_p,) or (n_p, m)
    right : float64, int64 or object array, shape (n_q,) or (n_q, m)

    Returns
    -------
    array, shape (n_{p+q},) or (n_{p+q}, m)
        float64 if a factor is; int64 where no product can leave it, else Python integers; otherwise exact objects.

    Raises
    ------
    TopologyError
        If a cell of degree p + q is neither a simplex nor a cell of a grid; the message names it.
    """
    left, right = _one_kind(left, right)
    lattice = complex.lattice
    if lattice is not None and len(lattice.shape) == complex.dim:
        return _on_grid(lattice, p, left, q, right)
    front, back, sign = _front_and_back(complex, p, q)
    columns = [1] * (left.ndim - 1)
    signs = sign if left.dtype == np.int64 else sign.astype(left.dtype)
    product: AnyArray = left[front] * right[back]
    product *= signs.reshape(-1, *columns)
    return product


def _one_kind(left: AnyArray, right: AnyArray) -> tuple[AnyArray, AnyArray]:
    """Return both factors as floats, as int64 whose products fit, or as exact objects."""
    if np.float64 in (left.dtype, right.dtype):
        return float_array(left, "values", finite=False), float_array(right, "values", finite=False)
    if left.dtype == right.dtype == np.int64 and _TERMS * _largest(left) * _largest(right) <= _LARGEST_INT:
        return left, right
    return left.astype(object), right.astype(object)


def _largest(values: AnyArray) -> int:
    return max(-int(values.min()), int(values.max())) if values.size else 0


def _front_and_back(complex: "Cells", p: int, q: int) -> tuple[IntArray, IntArray, IntArray]:
    """Return which p-cell is the front of every simplex of degree p + q, which q-cell its back, and the sign."""
    lowest, highest, sign = _ascending(complex, p + q)
    every = np.arange(complex.counts[p + q])
    if p == 0 or q == 0:  # the cell itself times a value at its lowest or highest corner
        sign = np.ones(len(every), np.int64)
        return (lowest, every, sign) if p == 0 else (every, highest, sign)
    triangles = _triangles(complex)
    edge_sign = np.where(complex.tail <= complex.head, 1, -1)
    if p == q == 1:
        front, back = triangles.first_side, triangles.last_side
        return front, back, sign * edge_sign[front] * edge_sign[back]
    first_face, last_face = _end_faces(complex, lowest, highest)
    if p == 1:
        front, back = triangles.first_side[first_face], last_face
        return front, back, sign * edge_sign[front] * triangles.sign[back]
    front, back = first_face, triangles.last_side[last_face]
    return front, back, sign * triangles.sign[front] * edge_sign[back]


def _ascending(complex: "Cells", degree: int) -> tuple[IntArray, IntArray, IntArray]:
    """Return lowest and highest corner of every simplex, and +1 where it is stored in ascending order."""
    if degree == 0:
        every = np.arange(complex.counts[0])
        return every, every, np.ones(len(every), np.int64)
    if degree == 1:
        low, high = np.minimum(complex.tail, complex.head), np.maximum(complex.tail, complex.head)
        return low, high, np.where(complex.tail <= complex.head, 1, -1)
    columns = list(_corners(complex, degree).T)  # one corner at a time: NumPy is slow along short rows
    return np.minimum.reduce(columns), np.maximum.reduce(columns), _parity(columns)


def _parity(columns: list[IntArray]) -> IntArray:
    """Return +1 where an even number of swaps brings corners into ascending order, -1 where an odd number."""
    swaps = np.zeros(len(columns[0]), dtype=bool)
    for first, second in combinations(columns, 2):
        swaps ^= first > second
    return np.where(swaps, -1, 1)


def _corners(complex: "Cells", degree: int) -> IntArray:
    """Return the corners of the triangles or tetrahedra; shape (n_degree, degree + 1)."""
    if degree == 2:
        loops, _ = _polygons(complex)
        if (loops.lengths != 3).any():
            face = int(np.argmax(loops.lengths != 3))
            _refuse(f"face {face} has {loops.lengths[face]} corners")
        corners = np.asarray(loops.flat).reshape(-1, 3)
    else:
        first = 0
        for kind, cells in complex.solids.items():
            if kind != "tetra" and len(cells):
                _refuse(f"cell {first} is a {kind}")
            first += len(cells)
        corners = complex.solids.get("tetra", np.empty((0, 4), np.int64))
    repeated = np.zeros(len(corners), dtype=bool)
    for first_corner, second_corner in combinations(corners.T, 2):
        repeated |= first_corner == second_corner
    if repeated.any():
        cell = int(np.argmax(repeated))
        _refuse(f"{'face' if degree == 2 else 'cell'} {cell} repeats a corner: {corners[cell].tolist()}")
    return corners


def _polygons(complex: "Cells") -> tuple["Ragged", "Walks"]:
    if complex.faces is None or complex.walks is None:
        message = f"a complex of dimension {complex.dim} has no faces"
        raise TopologyError(message)
    return complex.faces, complex.walks


def _refuse(found: str) -> None:
    message = (
        "a cup product is made on simplices (edges, triangles, tetrahedra) and on the cells of dec.grid; "
        f"{found}: split such cells into simplices first"
    )
    raise TopologyError(message)


def _triangles(complex: "Cells") -> _Triangles:
    """Return the sides of triangles; side i of a walk runs from corner i to the next, so that corner i - 1 is apart."""
    a, b, c = _corners(complex, 2).T
    ab, bc, ca = _polygons(complex)[1].edges.reshape(-1, 3).T
    first = np.where(c > np.maximum(a, b), ab, np.where(a > b, bc, ca))  # apart from the highest corner
    last = np.where(c < np.minimum(a, b), ab, np.where(a < b, bc, ca))  # apart from the lowest
    return _Triangles(first, last, _parity([a, b, c]))


def _end_faces(complex: "Cells", lowest: IntArray, highest: IntArray) -> tuple[IntArray, IntArray]:
    """Return the face of every tetrahedron opposite its highest corner, and the one opposite its lowest."""
    corners = _corners(complex, 3)
    faces = complex.coboundary(2).indices.reshape(-1, 4)
    opposite = corners.sum(axis=1)[:, None] - _corners(complex, 2).sum(axis=1)[faces]
    rows = np.arange(len(corners))
    if not len(rows):
        return rows, rows
    front = faces[rows, (opposite == highest[:, None]).argmax(axis=1)]
    back = faces[rows, (opposite == lowest[:, None]).argmax(axis=1)]
    return front, back


def _on_grid(lattice: "Lattice", p: int, left: AnyArray, q: int, right: AnyArray) -> AnyArray:
    axes = range(len(lattice.shape))
    lefts, rights = _by_axes(lattice, p, left), _by_axes(lattice, q, right)
    parts = []
    for spanned in combinations(axes, p + q):
        total: AnyArray | None = None
        for front in combinations(spanned, p):
            back = tuple(axis for axis in spanned if axis not in front)
            term = _end(lefts[front], back, lattice, 0) * _end(rights[back], front, lattice, 1)
            if sum(f > b for f in front for b in back) % 2:
                term = -term
            total = term if total is None else total + term
        cells = np.asarray(total)
        parts.append(cells.reshape(int(np.prod(cells.shape[: len(axes)])), *left.shape[1:]))
    return np.concatenate(parts)


def _by_axes(lattice: "Lattice", degree: int, values: AnyArray) -> dict[tuple[int, ...], AnyArray]:
    """Return the values on the cells along each set of axes, in the shape of the grid."""
    every = list(combinations(range(len(lattice.shape)), degree))
    shapes = [
        tuple(n - (a in along and not closes) for a, (n, closes) in enumerate(zip(*_axes(lattice), strict=True)))
        for along in every
    ]
    starts = np.concatenate([[0], np.cumsum([int(np.prod(shape)) for shape in shapes])]).tolist()
    blocks = [values[start:stop] for start, stop in pairwise(starts)]
    return {
        along: block.reshape(*shape, *values.shape[1:])
        for along, shape, block in zip(every, shapes, blocks, strict=True)
    }


def _axes(lattice: "Lattice") -> tuple[tuple[int, ...], tuple[bool, ...]]:
    return lattice.shape, lattice.periodic


def _end(values: AnyArray, across: tuple[int, ...], lattice: "Lattice", end: int) -> AnyArray:
    """Return the values at the low (0) or the high end (1) of cells that reach across some axes."""
    for axis in across:
        if lattice.periodic[axis]:
            values = np.roll(values, -end, axis=axis)
        else:
            values = values.take(range(end, end + values.shape[axis] - 1), axis=axis)
    return values
