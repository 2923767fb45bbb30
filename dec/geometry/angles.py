"""Angles at the corners of faces, and what is missing to a full turn at a vertex."""

import numpy as np

from dec.arrays import FloatArray
from dec.calculus.complex import Complex
from dec.errors import InputError
from dec.geometry.corners import cross, face_blocks, positions, summed

__all__ = ["angle_defects", "corner_angles"]


def corner_angles(K: Complex) -> FloatArray:
    """Angle at every corner of every face, in radians; float64 array aligned with ``K.faces.flat``.

    Parameters
    ----------
    K : Complex
        Of dimension 2 or 3, with points.

    Returns
    -------
    float64 array, shape (total corners,)
        From 0 to 2 pi; above pi where a face is turned inward at the corner, seen along its area vector. 0 at a
        corner whose neighbour lies in the same place. Those of a plane face with w corners add up to (w - 2) pi.

    Raises
    ------
    InputError
        If the complex has no points or no faces.

    Notes
    -----
    The arc tangent of cross and dot product keeps small angles and angles near pi accurate, which the arc cosine
    does not. Source: Kahan, How Futile are Mindless Assessments of Roundoff, 2006, section 12 (from memory).

    Examples
    --------
    >>> K = Complex.from_faces([[0, 1, 2, 3]], points=[[0, 0], [1, 0], [1, 1], [0, 1]])
    >>> (corner_angles(K) / np.pi).tolist()
    [0.5, 0.5, 0.5, 0.5]
    """
    positions(K)
    result = np.empty(len(K.faces.flat) if K.faces is not None else 0)
    for block in face_blocks(K):
        p, width = block.offsets, block.corners.shape[1]
        sides = [p[:, (i + 1) % width] - p[:, i] for i in range(width)]
        turns = [cross(sides[i - 1], sides[i]) for i in range(width)]
        angles = np.empty(block.corners.shape)
        for i in range(width):
            sine = np.sqrt(np.einsum("ij,ij->i", turns[i], turns[i]))
            angles[:, i] = np.arctan2(sine, -np.einsum("ij,ij->i", sides[i - 1], sides[i]))
        if width > 3:
            area = sum(cross(p[:, i], p[:, i + 1]) for i in range(1, width - 1))
            for i in range(width):
                inward = np.einsum("ij,ij->i", turns[i], area) < 0
                angles[inward, i] = 2 * np.pi - angles[inward, i]
        result[block.entries] = angles.ravel()
    return result


def angle_defects(K: Complex) -> FloatArray:
    """What the angles at every vertex leave of a full turn, in radians; float64 array of shape (n0,).

    Parameters
    ----------
    K : Complex
        Of dimension 2, with points.

    Returns
    -------
    float64 array, shape (n0,)
        2 pi less the angles at an inner vertex, pi less the angles at a vertex of the boundary. With plane faces
        they add up to 2 pi times the Euler characteristic, whatever the points, also where a surface is not
        orientable or three faces meet at an edge.

    Raises
    ------
    InputError
        If the complex has no points, or is no surface.

    Notes
    -----
    2 pi - pi (edge ends at the vertex) + the sum over its corners of (pi - angle). Source: Banchoff, Critical points
    and curvature for embedded polyhedra, J. Differential Geometry 1 (1967), from memory.

    Examples
    --------
    >>> points = [[0, 0, 0], [1, 0, 0], [0, 1, 0], [0, 0, 1]]
    >>> corner_of_cube = Complex.from_faces([[0, 1, 2], [0, 2, 3], [0, 3, 1]], points=points)
    >>> round(float(angle_defects(corner_of_cube)[0] / np.pi), 12)
    0.5
    """
    if K.dim != 2 or K.faces is None:
        message = f"angle defects belong to a surface, this complex has dimension {K.dim}"
        raise InputError(message)
    n = K.counts[0]
    ends = np.bincount(K.tail, minlength=n) + np.bincount(K.head, minlength=n)
    corners = np.bincount(K.faces.flat, minlength=n)
    angles = summed(K.faces.flat, corner_angles(K), n)
    return np.asarray((2 - ends + corners) * np.pi - angles)
