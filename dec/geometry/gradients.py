"""The gradient of a field given at vertices, one constant matrix for every cell of highest dimension."""

from dataclasses import dataclass

import numpy as np

from dec.arrays import BoolArray, FloatArray
from dec.calculus.complex import Complex
from dec.geometry.corners import cross, edge_vectors, embedded, face_blocks, positions
from dec.geometry.measures import cell_volumes

__all__ = ["Gradients", "cell_gradients"]


@dataclass(frozen=True, slots=True)
class Gradients:
    """Gradients of a vector field in the cells of highest dimension.

    Attributes
    ----------
    matrices : float64 array, shape (n, 3, 3)
        Component by direction; zero in directions off the cell.
    axes : float64 array, shape (n, 3)
        Unit normal of a face, unit vector along an edge, zero for a solid cell.
    sound : bool array, shape (n,)
        False for a cell of no extent, whose gradient is not known and given as zero.
    """

    matrices: FloatArray
    axes: FloatArray
    sound: BoolArray


def cell_gradients(K: Complex, values: FloatArray) -> Gradients:
    """The gradient in every cell of highest dimension.

    Parameters
    ----------
    K : Complex
        With points, shape (n0, m).
    values : float64 array, shape (n0, m)
        At the vertices.

    Returns
    -------
    Gradients
        Of the linear interpolant in edges, triangles and tetrahedra; in polygons and hexahedra the mean of the
        gradient of the boundary's interpolant, exact for linear fields on plane polygons and on all hexahedra.

    Raises
    ------
    InputError
        If the complex has no points.

    Notes
    -----
    The integral of the field times the outward normal over the boundary of the cell, by the measure of the cell:
    the divergence theorem, textbook.

    Examples
    --------
    >>> K = Complex.from_faces([[0, 1, 2]], points=[[0, 0], [1, 0], [0, 1]])
    >>> cell_gradients(K, np.array([[0.0, 0.0], [0.0, 1.0], [-1.0, 0.0]])).matrices[0].tolist()
    [[0.0, -1.0, 0.0], [1.0, 0.0, 0.0], [0.0, 0.0, 0.0]]
    """
    if K.dim == 1:
        return _along_edges(K, values)
    return _in_faces(K, values) if K.dim == 2 else _in_solids(K, values)


def _along_edges(K: Complex, values: FloatArray) -> Gradients:
    step = embedded(edge_vectors(K))
    square = np.einsum("ij,ij->i", step, step)
    sound = square > 0
    inverse = np.divide(1.0, square, out=np.zeros_like(square), where=sound)
    change = embedded(values[K.head] - values[K.tail]) * inverse[:, None]
    return Gradients(change[:, :, None] * step[:, None, :], step * np.sqrt(inverse)[:, None], sound)


def _in_faces(K: Complex, values: FloatArray) -> Gradients:
    n = K.counts[2]
    matrices, axes, sound = np.zeros((n, 3, 3)), np.zeros((n, 3)), np.zeros(n, dtype=bool)
    for block in face_blocks(K):
        p, width = block.offsets, block.corners.shape[1]
        area = cross(p[:, 1], p[:, 2])
        for i in range(2, width - 1):
            area += cross(p[:, i], p[:, i + 1])
        double = np.sqrt(np.einsum("ij,ij->i", area, area))
        good = double > 0
        inverse = np.divide(1.0, double, out=np.zeros_like(double), where=good)[:, None]
        normal = area * inverse
        total = np.zeros((len(p), 3, 3))
        # differences from the first corner lose no digits to a large constant field
        f = embedded(values[block.corners] - values[block.corners[:, :1]])
        for i in range(width):
            j = (i + 1) % width
            outward = cross(embedded(p[:, j] - p[:, i]), normal)
            total += (f[:, i] + f[:, j])[:, :, None] * outward[:, None, :]
        matrices[block.faces] = total * inverse[:, :, None]
        axes[block.faces], sound[block.faces] = normal, good
    return Gradients(matrices, axes, sound)


def _in_solids(K: Complex, values: FloatArray) -> Gradients:
    # through every face: field times area vector, and a third of place . area vector for the volume within
    n, centre = K.counts, positions(K).mean(axis=0)
    values = values - values.mean(axis=0)
    flux, bulk = np.zeros((n[2], 3, 3)), np.zeros(n[2])
    for block in face_blocks(K):
        p, place = block.offsets, block.positions(positions(K)) - centre
        f = values[block.corners]
        tensor, third = np.zeros((len(p), 3, 3)), np.zeros(len(p))
        for i in range(1, block.corners.shape[1] - 1):
            area = cross(p[:, i], p[:, i + 1])
            mean = f[:, 0] + f[:, i] + f[:, i + 1]
            tensor += mean[:, :, None] * area[:, None, :]
            third += np.einsum("ij,ij->i", place[:, 0] + place[:, i] + place[:, i + 1], area)
        flux[block.faces], bulk[block.faces] = tensor / 6, third / 18
    d = K.coboundary(2).astype(np.float64)
    volume = cell_volumes(K) if K.lattice is not None else d @ bulk
    sound = volume != 0
    inverse = np.divide(1.0, volume, out=np.zeros_like(volume), where=sound)
    matrices = (d @ flux.reshape(-1, 9)).reshape(-1, 3, 3) * inverse[:, None, None]
    return Gradients(matrices, np.zeros((n[3], 3)), sound)
