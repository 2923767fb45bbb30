"""Ratios of dual to primal measure: how long, wide or large the dual of a cell is, against the cell itself."""

from dataclasses import dataclass
from functools import reduce
from itertools import combinations

import numpy as np

from dec.arrays import AnyArray, FloatArray
from dec.calculus.complex import Complex
from dec.errors import InputError
from dec.geometry.circumcentres import cell_circumcentres, side_ratios
from dec.geometry.corners import cell_name, cross, embedded, face_blocks, positions, summed
from dec.geometry.measures import cell_volumes, edge_lengths, face_area_vectors, face_areas, face_centres

__all__ = ["Ratios", "barycentric", "circumcentric", "lattice"]


@dataclass(frozen=True, slots=True)
class Ratios:
    """Dual measure by primal measure of every cell, by degree.

    Attributes
    ----------
    values : tuple of float64 array, shapes (n0,), (n1,), ...
    slack : tuple of float64 array, same shapes
        What rounding of the points and of the formula can make of a ratio that is zero.
    """

    values: tuple[FloatArray, ...]
    slack: tuple[FloatArray, ...]

    @classmethod
    def exact(cls, values: tuple[FloatArray, ...]) -> "Ratios":
        """Ratios whose sign is beyond doubt."""
        return cls(values, tuple(np.zeros(len(v)) for v in values))


def circumcentric(K: Complex) -> Ratios:
    """Ratios of circumcentric duals, with sign: negative where a circumcentre lies on the far side.

    Parameters
    ----------
    K : Complex
        A graph, or a surface or solid whose faces and cells have circumcentres, with points.

    Returns
    -------
    Ratios
        For triangles an edge has half the sum of the cotangents of the angles opposite it.

    Raises
    ------
    InputError
        If a cell is degenerate or has no circumcentre; the message names it.

    Notes
    -----
    With h the distance from a side to the circumcentre of its face, positive inward, and D the dual length of the
    face (1 in a surface): an edge has the dual measure sum of h (surface) or h D / 2 (solid), and a vertex
    1 / (2 dim) times the sum of length times dual measure over its edges. Source: Pinkall and Polthier, Computing
    discrete minimal surfaces and their conjugates, 1993 (cotangents); Hirani, thesis, Caltech 2003, section 2.4
    (signs; from memory).

    Examples
    --------
    >>> square = [[0, 0], [1, 0], [1, 1], [0, 1]]
    >>> circumcentric(Complex.from_faces([[0, 1, 2], [0, 2, 3]], points=square)).values[1].tolist()
    [0.5, 0.0, 0.5, 0.5, 0.5]
    """
    lengths = _lengths(K)
    if K.dim == 1:
        return Ratios.exact((_vertex_measures(K, lengths, 1 / lengths), 1 / lengths))
    _refuse_repeated_corners(K)
    areas = _areas(K)
    ratio, doubt = side_ratios(K)
    if K.dim == 2:
        edges, slack = _at_edges(K, ratio), _at_edges(K, doubt)
        top: tuple[FloatArray, ...] = (1 / areas,)
        unsure: tuple[FloatArray, ...] = (np.zeros(len(areas)),)
    else:
        dual, dual_slack = _face_duals(K, areas)
        sides = np.diff(K.walks.offsets) if K.walks is not None else 0
        at_side, slack_at_side = np.repeat(dual, sides), np.repeat(dual_slack, sides)
        edges = _at_edges(K, ratio * at_side) / 2
        slack = _at_edges(K, np.abs(ratio) * slack_at_side + doubt * (np.abs(at_side) + slack_at_side)) / 2
        volumes = np.abs(_volumes(K))
        top, unsure = (dual / areas, 1 / volumes), (dual_slack / areas, np.zeros(len(volumes)))
    return Ratios(
        (_vertex_measures(K, lengths, edges), edges, *top), (_vertex_measures(K, lengths, slack), slack, *unsure)
    )


def barycentric(K: Complex) -> Ratios:
    """Ratios of barycentric duals, positive on every sound mesh of convex cells.

    Parameters
    ----------
    K : Complex
        With points.

    Returns
    -------
    Ratios
        The dual of a cell is made of the flat pieces between its own centre and the centres of the faces and solid
        cells round it; a centre is the mean of the corners. All pieces count as positive.

    Raises
    ------
    InputError
        If a cell is degenerate; the message names it.

    Notes
    -----
    Source: barycentric subdivision, Munkres, Elements of Algebraic Topology, 1984, section 15.

    Examples
    --------
    >>> triangle = Complex.from_faces([[0, 1, 2]], points=[[0, 0], [6, 0], [0, 6]])
    >>> [r.round(12).tolist() for r in barycentric(triangle).values[::2]]
    [[6.0, 6.0, 6.0], [0.055555555556]]
    """
    lengths = _lengths(K)
    if K.dim == 1:
        return Ratios.exact((_vertex_measures(K, lengths, 1 / lengths), 1 / lengths))
    _refuse_repeated_corners(K)
    areas = _areas(K)
    if K.dim == 2:
        vertices, edges = _pieces_of_faces(K)
        return Ratios.exact((vertices, edges / lengths, 1 / areas))
    volumes = np.abs(_volumes(K))
    vertices, edges, faces = _pieces_of_cells(K)
    return Ratios.exact((vertices, edges / lengths, faces / areas, 1 / volumes))


def lattice(K: Complex) -> Ratios:
    """Ratios on a regular grid, where circumcentric and barycentric duals agree: products over the axes.

    Raises
    ------
    InputError
        If the complex is no grid.

    Examples
    --------
    >>> from dec.calculus.complex import grid
    >>> lattice(grid(3, spacing=2.0)).values[0].tolist()
    [1.0, 2.0, 1.0]
    """
    if K.lattice is None:
        message = "this complex is no grid; make it with grid()"
        raise InputError(message)
    across, along = [], []
    for n, step, closes in zip(K.lattice.shape, K.lattice.spacing, K.lattice.periodic, strict=True):
        dual = np.full(n, step)
        if not closes:
            dual[0] -= step / 2
            dual[-1] -= step / 2
        across.append(dual)
        along.append(np.full(n if closes else n - 1, 1 / step))
    axes = range(len(across))
    values = []
    for degree in range(len(across) + 1):
        parts = [
            reduce(np.multiply.outer, [along[a] if a in chosen else across[a] for a in axes]).ravel()
            for chosen in combinations(axes, degree)
        ]
        values.append(np.concatenate(parts))
    return Ratios.exact(tuple(values))


def _lengths(K: Complex) -> FloatArray:
    lengths = edge_lengths(K)
    _refuse(K, 1, lengths <= 0, "length", "merge its ends or take it out")
    return lengths


def _areas(K: Complex) -> FloatArray:
    areas = face_areas(K)
    _refuse(K, 2, areas <= 0, "area", "take it out")
    return areas


def _volumes(K: Complex) -> FloatArray:
    volumes = cell_volumes(K)
    _refuse(K, 3, volumes == 0, "volume", "take it out")
    return volumes


def _refuse(K: Complex, degree: int, bad: AnyArray, what: str, way_out: str) -> None:
    if bad.any():
        name = cell_name(K, degree, int(np.argmax(bad)))
        message = f"{name} has zero {what}, so its weight would be infinite; {way_out}"
        raise InputError(message)


def _refuse_repeated_corners(K: Complex) -> None:
    if K.walks is None or K.faces is None:
        return
    short = np.diff(K.walks.offsets) != K.faces.lengths
    if short.any():
        face = int(np.argmax(short))
        message = f"face {face} gives a corner twice running, {K.faces.row(face).tolist()}; give each corner once"
        raise InputError(message)


def _at_edges(K: Complex, at_sides: FloatArray) -> FloatArray:
    assert K.walks is not None
    return summed(K.walks.edges, at_sides, K.counts[1])


def _vertex_measures(K: Complex, lengths: FloatArray, edge_ratios: FloatArray) -> FloatArray:
    shares = lengths**2 * edge_ratios / (2 * K.dim)
    n = K.counts[0]
    return summed(K.tail, shares, n) + summed(K.head, shares, n)


def _face_duals(K: Complex, areas: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return the signed dual length of every face of a solid, and what rounding can do to it."""
    points, n_faces = positions(K), K.counts[2]
    assert K.faces is not None
    centres, doubt = cell_circumcentres(K)
    normals = face_area_vectors(K) / areas[:, None]
    place = points[K.faces.flat[K.faces.offsets[:-1]]]
    uses = K.coboundary(2).tocoo()
    cell, face = uses.row, uses.col
    outward = normals[face] * (uses.data * np.sign(cell_volumes(K))[cell])[:, None]
    height = np.einsum("ij,ij->i", place[face] - centres[cell], outward)
    return (
        summed(face, height, n_faces),
        summed(face, doubt[cell], n_faces),
    )


def _pieces_of_faces(K: Complex) -> tuple[FloatArray, FloatArray]:
    """Return dual area of every vertex and dual length of every edge of a surface."""
    assert K.faces is not None
    corner, side = np.empty(len(K.faces.flat)), np.empty(len(K.faces.flat))
    for block in face_blocks(K):
        p, width = block.offsets, block.corners.shape[1]
        centre = p.mean(axis=1)
        halves, lengths = np.empty(block.corners.shape), np.empty(block.corners.shape)
        for i in range(width):
            start, end = p[:, i] - centre, p[:, (i + 1) % width] - centre
            halves[:, i] = np.linalg.norm(cross(start, end), axis=1) / 4
            lengths[:, i] = np.linalg.norm(start + end, axis=1) / 2
        corner[block.entries] = (halves + np.roll(halves, 1, axis=1)).ravel()
        side[block.entries] = lengths.ravel()
    return summed(K.faces.flat, corner, K.counts[0]), _at_edges(K, side)


def _pieces_of_cells(K: Complex) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Return dual volume of every vertex, dual area of every edge and dual length of every face of a solid."""
    assert K.faces is not None
    assert K.walks is not None
    n, points = K.counts, positions(K)
    centres = np.empty((n[3], 3))
    first = 0
    for corners in K.solids.values():
        centres[first : first + len(corners)] = points[corners].mean(axis=1)
        first += len(corners)
    face_centre = face_centres(K)
    uses = K.coboundary(2).tocoo()
    cell, face = uses.row.astype(np.int64), uses.col.astype(np.int64)
    faces = summed(face, np.linalg.norm(face_centre[face] - centres[cell], axis=1), n[2])
    vertices, edges = np.zeros(n[0]), np.zeros(n[1])
    following, width = K.faces.following(), K.faces.lengths[face]
    for i in range(int(width.max(initial=0))):
        c, f = cell[width > i], face[width > i]
        entry = K.faces.offsets[f] + i
        start, end = points[K.faces.flat[entry]] - centres[c], points[following[entry]] - centres[c]
        inward = face_centre[f] - centres[c]
        middle = cross((start + end) / 2, embedded(inward))
        edges += summed(K.walks.edges[entry], np.linalg.norm(middle, axis=1) / 2, n[1])
        volume = np.abs(np.einsum("ij,ij->i", cross(start, end), inward)) / 12
        vertices += summed(K.faces.flat[entry], volume, n[0])
        vertices += summed(following[entry], volume, n[0])
    return vertices, edges, faces
