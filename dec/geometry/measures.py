"""Lengths, area vectors and volumes."""

import numpy as np

from dec.arrays import FloatArray
from dec.calculus.complex import Complex
from dec.errors import InputError
from dec.geometry.corners import cross, edge_vectors, embedded, face_blocks, positions, solid_blocks
from dec.topology.solids import FACES

__all__ = ["cell_volumes", "edge_lengths", "edge_vectors", "face_area_vectors", "face_areas", "face_centres", "is_flat"]


def edge_lengths(K: Complex) -> FloatArray:
    """Length of every edge; float64 array of shape (n1,), in the unit of the points.

    Raises
    ------
    InputError
        If the complex has no points.

    Examples
    --------
    >>> edge_lengths(Complex.from_edges([0], [1], points=[[0, 0], [3, 4]])).tolist()
    [5.0]
    """
    vectors = edge_vectors(K)
    return np.asarray(np.sqrt(np.einsum("ij,ij->i", vectors, vectors)))


def face_area_vectors(K: Complex) -> FloatArray:
    """Area vector of every face, normal to it as it is turned; float64 array of shape (n2, 3).

    Parameters
    ----------
    K : Complex
        Of dimension 2 or 3, with points; points in a plane count as lying in z = 0.

    Returns
    -------
    float64 array, shape (n2, 3)
        Half the sum of r_i x r_{i+1} with r_i from the first corner to corner i, in the squared unit of the points.
        A counter-clockwise face of a plane mesh has a positive z component. The same for every surface spanned by
        the corners of a warped face, so that the vectors round a closed surface add up to zero.

    Raises
    ------
    InputError
        If the complex has no points or no faces.

    Notes
    -----
    Source: Stokes' theorem for half the field c x r with constant c, textbook.

    Examples
    --------
    >>> K = Complex.from_faces([[0, 1, 2, 3]], points=[[0, 0], [2, 0], [2, 1], [0, 1]])
    >>> face_area_vectors(K).tolist()
    [[0.0, 0.0, 2.0]]
    """
    result = np.empty((len(K.faces) if K.faces is not None else 0, 3))
    for block in face_blocks(K):
        offsets, width = block.offsets, block.corners.shape[1]
        total = cross(offsets[:, 1], offsets[:, 2])
        for i in range(2, width - 1):
            total += cross(offsets[:, i], offsets[:, i + 1])
        total *= 0.5
        result[block.faces] = total
    return result


def face_areas(K: Complex) -> FloatArray:
    """Area of every face, never negative; float64 array of shape (n2,).

    The length of the area vector: for a warped face, the area of its projection along that vector.

    Raises
    ------
    InputError
        If the complex has no points or no faces.

    Examples
    --------
    >>> face_areas(Complex.from_faces([[0, 2, 1]], points=[[0, 0], [2, 0], [0, 1]])).tolist()
    [1.0]
    """
    vectors = face_area_vectors(K)
    return np.asarray(np.sqrt(np.einsum("ij,ij->i", vectors, vectors)))


def face_centres(K: Complex) -> FloatArray:
    """Mean of the corners of every face; float64 array of shape (n2, 3).

    Raises
    ------
    InputError
        If the complex has no points or no faces.

    Examples
    --------
    >>> face_centres(Complex.from_faces([[0, 1, 2]], points=[[0, 0], [3, 0], [0, 3]])).tolist()
    [[1.0, 1.0, 0.0]]
    """
    points = positions(K)
    result = np.zeros((len(K.faces) if K.faces is not None else 0, 3))
    for block in face_blocks(K):
        centre = points[block.corners[:, 0]] + block.offsets.sum(axis=1) / block.corners.shape[1]
        result[block.faces] = embedded(centre)
    return result


def cell_volumes(K: Complex) -> FloatArray:
    """Volume of every solid cell, positive when its corners are in right-handed order; float64 array of shape (n3,).

    Parameters
    ----------
    K : Complex
        Of dimension 3, with points in three coordinates.

    Returns
    -------
    float64 array, shape (n3,)
        Tetrahedra: a sixth of the determinant of three edges. Hexahedra: each face is split into four triangles
        about the mean of its corners, the same ones for both its cells, so that neighbours leave neither gap nor
        overlap; the volume within follows from the divergence theorem.

    Raises
    ------
    InputError
        If the complex has no points in three coordinates, or no solid cells.

    Notes
    -----
    With four triangles (c, p_i, p_{i+1}) a face of area vector A adds a third of c . A, exactly.

    Examples
    --------
    >>> points = [[0, 0, 0], [1, 0, 0], [0, 1, 0], [0, 0, 6]]
    >>> cell_volumes(Complex.from_cells({"tetra": [[0, 1, 2, 3], [0, 2, 1, 3]]}, points=points)).tolist()
    [1.0, -1.0]
    """
    result = np.empty(K.counts[3] if K.dim == 3 else 0)
    for block in solid_blocks(K):
        p = block.offsets
        if block.kind == "tetra":
            result[block.cells] = np.einsum("ij,ij->i", p[:, 1], cross(p[:, 2], p[:, 3])) / 6
            continue
        volume = np.zeros(len(p))
        for a, b, c, d in FACES[block.kind].tolist():
            diagonals = cross(p[:, c] - p[:, a], p[:, d] - p[:, b])
            volume += np.einsum("ij,ij->i", p[:, a] + p[:, b] + p[:, c] + p[:, d], diagonals)
        result[block.cells] = volume / 24
    return result


def is_flat(K: Complex) -> bool:
    """Whether the points lie in a plane z = constant: fewer than three coordinates, or all z exactly equal.

    Raises
    ------
    InputError
        If the complex has no points.

    Examples
    --------
    >>> is_flat(Complex.from_faces([[0, 1, 2]], points=[[0, 0, 7], [1, 0, 7], [0, 1, 7]]))
    True
    """
    if K.points is None:
        message = "whether a mesh is flat needs points, this complex has none; give points="
        raise InputError(message)
    z = K.points[:, 2:]
    return bool((z == z[:1]).all())
