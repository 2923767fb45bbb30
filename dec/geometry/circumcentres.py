"""Circumcentres of faces and solid cells, and how far rounding moves them."""

import numpy as np

from dec.arrays import FloatArray
from dec.calculus.complex import Complex
from dec.errors import InputError
from dec.geometry.corners import FaceBlock, SolidBlock, cell_name, cross, embedded, face_blocks, positions, solid_blocks

__all__ = ["cell_circumcentres", "side_ratios"]

_EPS = float(np.finfo(np.float64).eps)

# Corners off their circle or plane by this part of the size of a cell still count: points kept in 32 bits differ so.
_OFF_CIRCLE = 1e-6


def side_ratios(K: Complex) -> tuple[FloatArray, FloatArray]:
    """Distance of every side of every face from the circumcentre of the face, by the length of the side.

    Parameters
    ----------
    K : Complex
        Of dimension 2 or 3, with points; no face repeats a corner.

    Returns
    -------
    ratio : float64 array, shape (total sides,)
        Aligned with ``K.walks.edges``; positive where the circumcentre lies on the inner side. Half the cotangent
        of the angle opposite, for a triangle.
    doubt : float64 array, same shape
        What rounding of the points and of the formula can do to it.

    Raises
    ------
    InputError
        If a face has no area or its corners do not lie on one circle, within 1e-6 of the size of the face.

    Examples
    --------
    >>> side_ratios(Complex.from_faces([[0, 1, 2]], points=[[0, 0], [1, 0], [0, 1]]))[0].tolist()
    [0.5, 0.0, 0.5]
    """
    total = len(K.faces.flat) if K.faces is not None else 0
    ratio, doubt = np.empty(total), np.empty(total)
    reach = float(np.abs(positions(K)).max(initial=0.0))
    for block in face_blocks(K):
        by_width = _triangle_ratios if block.corners.shape[1] == 3 else _polygon_ratios
        values, unsure = by_width(K, block, reach)
        ratio[block.entries], doubt[block.entries] = values.ravel(), unsure.ravel()
    return ratio, doubt


def _triangle_ratios(K: Complex, block: FaceBlock, reach: float) -> tuple[FloatArray, FloatArray]:
    p = block.offsets
    sides = (p[:, 1], p[:, 2] - p[:, 1], -p[:, 2])
    area = cross(p[:, 1], p[:, 2])
    double = np.sqrt(np.einsum("ij,ij->i", area, area))
    _refuse(K, block, double <= 0, "has zero area; take it out")
    lengths = [np.sqrt(np.einsum("ij,ij->i", s, s)) for s in sides]
    ratio, doubt = np.empty((len(p), 3)), np.empty((len(p), 3))
    for i in range(3):
        j, k = (i + 1) % 3, (i + 2) % 3
        ratio[:, i] = np.einsum("ij,ij->i", sides[j], sides[k])
        doubt[:, i] = lengths[j] * lengths[k] + reach * (lengths[j] + lengths[k])
    ratio *= (-0.5 / double)[:, None]
    ratio += 0.0  # a right angle gives 0, not -0
    doubt *= (2 * _EPS / double)[:, None]
    return ratio, doubt


def _polygon_ratios(K: Complex, block: FaceBlock, reach: float) -> tuple[FloatArray, FloatArray]:
    p = embedded(block.offsets)
    n, width = block.corners.shape
    chord = np.einsum("ijk,ijk->ij", p, p)
    row, far = np.arange(n), np.argmax(chord, axis=1)
    one = p[row, far]
    spread = cross(one[:, None, :], p)
    widest = np.argmax(np.einsum("ijk,ijk->ij", spread, spread), axis=1)
    two, normal = p[row, widest], spread[row, widest]
    square = np.einsum("ij,ij->i", normal, normal)
    _refuse(K, block, square <= 0, "has zero area; take it out")
    lift = chord[row, far][:, None] * two - chord[row, widest][:, None] * one
    centre = cross(lift, normal) / (2 * square)[:, None]
    size = np.sqrt(chord[row, far])
    radius = np.linalg.norm(centre, axis=1)
    off = np.abs(np.linalg.norm(p - centre[:, None], axis=2) - radius[:, None]).max(axis=1)
    off = np.maximum(off, (np.abs(p @ normal[:, :, None])[:, :, 0] / np.sqrt(square)[:, None]).max(axis=1))
    way_out = 'has no circumcentre: its corners do not lie on one circle; use kind="barycentric", or split it'
    _refuse(K, block, off > _OFF_CIRCLE * size, way_out)
    area = sum(cross(p[:, i], p[:, i + 1]) for i in range(1, width - 1))
    up = area / np.linalg.norm(area, axis=1)[:, None]
    ratio = np.empty((n, width))
    for i in range(width):
        start, end = p[:, i], p[:, (i + 1) % width]
        side = end - start
        inward = cross(up, side)
        ratio[:, i] = np.einsum("ij,ij->i", centre - (start + end) / 2, inward) / np.einsum("ij,ij->i", side, side)
    steps = np.linalg.norm(np.roll(p, -1, axis=1) - p, axis=2)
    unsure = 8 * _EPS * (radius + reach) * size * size / np.sqrt(square)
    return ratio, unsure[:, None] / steps


def cell_circumcentres(K: Complex) -> tuple[FloatArray, FloatArray]:
    """Circumcentre of every solid cell, and how far rounding may have moved it.

    Parameters
    ----------
    K : Complex
        Of dimension 3, with points.

    Returns
    -------
    centres : float64 array, shape (n3, 3)
    doubt : float64 array, shape (n3,)

    Raises
    ------
    InputError
        If a cell has no volume, or the corners of a hexahedron do not lie on one sphere, within 1e-6 of its size.

    Examples
    --------
    >>> points = [[0, 0, 0], [2, 0, 0], [0, 2, 0], [0, 0, 2]]
    >>> cell_circumcentres(Complex.from_cells({"tetra": [[0, 1, 2, 3]]}, points=points))[0].tolist()
    [[1.0, 1.0, 1.0]]
    """
    points = positions(K)
    reach = float(np.abs(points).max(initial=0.0))
    centres, doubt = np.empty((K.counts[3], 3)), np.empty(K.counts[3])
    for block in solid_blocks(K):
        centre, unsure = _sphere(K, block, reach)
        centres[block.cells] = points[block.corners[:, 0]] + centre
        doubt[block.cells] = unsure
    return centres, doubt


def _sphere(K: Complex, block: SolidBlock, reach: float) -> tuple[FloatArray, FloatArray]:
    p = block.offsets
    a, b, c = (p[:, i] for i in ((1, 2, 3) if block.kind == "tetra" else (1, 3, 4)))
    six = np.einsum("ij,ij->i", a, cross(b, c))
    _refuse(K, block, six == 0, "has zero volume; take it out")
    squares = [np.einsum("ij,ij->i", v, v)[:, None] for v in (a, b, c)]
    centre = squares[0] * cross(b, c) + squares[1] * cross(c, a) + squares[2] * cross(a, b)
    centre /= 2 * six[:, None]
    radius = np.linalg.norm(centre, axis=1)
    size = np.sqrt(np.einsum("ijk,ijk->ij", p, p).max(axis=1))
    if block.kind != "tetra":
        off = np.abs(np.linalg.norm(p - centre[:, None], axis=2) - radius[:, None]).max(axis=1)
        way_out = 'has no circumcentre: its corners do not lie on one sphere; use kind="barycentric", or split it'
        _refuse(K, block, off > _OFF_CIRCLE * size, way_out)
    volume_of_sides = np.sqrt((squares[0] * squares[1] * squares[2])[:, 0])
    return centre, 8 * _EPS * (radius + reach) * volume_of_sides / np.abs(six)


def _refuse(K: Complex, block: FaceBlock | SolidBlock, bad: FloatArray, what: str) -> None:
    if not bad.any():
        return
    at = int(np.argmax(bad))
    degree, numbers = (2, block.faces) if isinstance(block, FaceBlock) else (3, block.cells)
    number = numbers.start + at if isinstance(numbers, slice) else int(numbers[at])
    message = f"{cell_name(K, degree, number)} {what}"
    raise InputError(message)
