"""How far off the rule of `integrate_field` may be, estimated from the field itself."""

import numpy as np
from numpy.typing import ArrayLike

from dec.arrays import FloatArray
from dec.calculus.complex import Complex
from dec.calculus.soundness import repeating_cells
from dec.errors import InputError
from dec.geometry.corners import FaceBlock, edge_vectors, embedded, face_blocks
from dec.geometry.fields import across, field_values, integration_degree, mean_beside
from dec.geometry.gradients import Gradients, cell_gradients
from dec.geometry.measures import face_area_vectors
from dec.geometry.neighbours import Rows, cells_at
from dec.geometry.ranges import derivative_ranges, value_ranges

__all__ = ["is_single_precision", "rule_error"]

_LOW_BITS = np.uint32(0xFF)  # of a 32-bit mantissa: round numbers have none of them set


def rule_error(K: Complex, values: ArrayLike, *, at: str = "vertices", quantity: str = "circulation") -> FloatArray:
    """An estimate of the error of `integrate_field` in every value of its cochain; not a guaranteed bound.

    Parameters
    ----------
    K : Complex
        With points, shape (n0, m).
    values : array_like, shape (n, m)
        The field, as `integrate_field` takes it.
    at : "vertices" or "cells"
    quantity : "circulation" or "flux"

    Returns
    -------
    float64 array, shape (n1,) or (n2,)
        In the unit of the cochain, never negative. Values at vertices: of third order along edges (length cubed),
        of fourth through faces. Values in cells: of second order along edges, of third through faces. An allowance
        of 4 eps times the sum of the magnitudes that the rule adds up is included, so that it is not zero for a
        linear field either; eps is that of 32-bit numbers where the field came in such
        (`is_single_precision`). Where a mesh is too coarse to show a second difference, as in a single triangle, only
        that allowance is left.

    Raises
    ------
    InputError
        As `integrate_field`, or if a face of a surface repeats a corner: what it encloses is not known, and so
        neither is what the field does across it.

    Notes
    -----
    The trapezoid rule on an edge of length h is off by h^3 / 12 times the second derivative along it of the
    component that it integrates, and the corner rule on a triangle by area / 24 times the sum over its sides of h^2
    times such a derivative (Stroud, Approximate Calculation of Multiple Integrals, 1971, chapter 8; from memory). In
    their place stands h times the range of the first derivative over all cells that touch either end: that spans two
    or three times h, which is the margin of safety; there is no other factor. On surfaces in space, cells turned by
    more than 30 degrees from the edge are left out, since a crease says nothing about the field. Polygons count
    their whole area with every side, in place of the diagonals of their fan. At a vertex or facet where more than 512
    cells meet, a bound from the extremes of each component stands for the range. Values in cells: the range of what is
    integrated over the cells that meet there and their neighbours, a quarter of it between cells, twice it beside a
    single cell, whose value is carried from its middle to its side, and once at an edge on the skin of a solid.

    Measured on fields with no curl and no divergence (the meshes that come with the project, 1,464 to 4,842 faces or
    cells): summed round each face or cell the estimate exceeds the true defect everywhere, for values at vertices
    by 2.7 to 7.3 times in the median and 1.5 to 3.4 at the lowest hundredth, for values in cells by 9 to 17 and 2.9
    to 3.8.

    Examples
    --------
    >>> from dec.calculus.complex import grid
    >>> K = grid((5, 2))
    >>> field = np.stack([K.points[:, 0] ** 2, 0 * K.points[:, 0]], axis=1)
    >>> rule_error(K, field)[:8].round(6).tolist()  # the true error is 1/6 throughout
    [0.166667, 0.166667, 0.333333, 0.333333, 0.333333, 0.333333, 0.166667, 0.166667]
    """
    degree = integration_degree(K, at, quantity)
    _refuse_repeats(K)
    field = field_values(K, values, at)
    rounding = 4 * float(np.finfo(np.float32 if is_single_precision(field) else np.float64).eps)
    if at == "cells":
        return _from_jumps(K, field, degree, quantity, rounding)
    if degree == 1:
        return _along_edges(K, field, quantity, rounding)
    return _through_faces(K, field, rounding)


def _refuse_repeats(K: Complex) -> None:
    # a solid cell may be collapsed into one with fewer corners, as mesh makers do: its skin still closes
    repeating = repeating_cells(K) if K.dim == 2 else np.empty(0, np.int64)
    if len(repeating):
        face = int(repeating[0])
        assert K.faces is not None
        others = f" (and {len(repeating) - 1} more)" if len(repeating) > 1 else ""
        message = (
            f"a face must name each corner once, face {face} (from 0) has the corners {K.faces.row(face).tolist()}"
            f"{others}; take it out, or split it where it meets itself"
        )
        raise InputError(message)


def is_single_precision(values: FloatArray) -> bool:
    """Whether numbers were stored with 32 bits: all fit a 32-bit float, and most use its last bits.

    Examples
    --------
    >>> is_single_precision(np.array([0.1, 0.7])), is_single_precision(np.array([0.1, 0.7], dtype="f4").astype(float))
    (False, True)
    >>> is_single_precision(np.array([1.0, 0.5, 3.0]))  # exact in either
    False
    """
    with np.errstate(over="ignore"):
        single = values.astype(np.float32)
    if not (single == values).all():
        return False
    used = single[single != 0]
    return bool(np.count_nonzero(used.view(np.uint32) & _LOW_BITS) * 2 > len(used))


def _along_edges(K: Complex, field: FloatArray, quantity: str, rounding: float) -> FloatArray:
    step = embedded(edge_vectors(K))
    length, along = _unit(step)
    left = along if quantity == "circulation" else across(along)
    ends = np.stack([K.tail, K.head], axis=1)
    found = cell_gradients(K, field)
    ranges = derivative_ranges(left, along, ends, *cells_at(K, 0), found.matrices, found.axes, found.sound, K.dim == 1)
    size = np.abs(embedded(field))
    terms = np.einsum("ij,ij->i", size[K.tail] + size[K.head], np.abs(left)) * length / 2
    return np.asarray(length**2 / 12 * ranges + rounding * terms)


def _through_faces(K: Complex, field: FloatArray, rounding: float) -> FloatArray:
    result = np.empty(K.counts[2])
    found, near, size = cell_gradients(K, field), cells_at(K, 0), np.linalg.norm(field, axis=1)
    areas, normals = _unit(face_area_vectors(K))
    for block in face_blocks(K):
        curved = _over_sides(block, normals[block.faces], found, near)
        p, corner = np.linalg.norm(block.offsets, axis=2), size[block.corners]
        terms = np.zeros(len(p))
        for i in range(1, p.shape[1] - 1):
            terms += p[:, i] * p[:, i + 1] * (corner[:, 0] + corner[:, i] + corner[:, i + 1]) / 6
        result[block.faces] = areas[block.faces] / 24 * curved + rounding * terms
    return result


def _over_sides(block: FaceBlock, normals: FloatArray, found: Gradients, near: Rows) -> FloatArray:
    """Return, added up over the sides of each face, length times range of the derivative along the side."""
    p, width = block.offsets, block.corners.shape[1]
    total = np.zeros(len(p))
    for i in range(width):
        j = (i + 1) % width
        length, along = _unit(p[:, j] - p[:, i])
        ends = block.corners[:, [i, j]]
        total += length * derivative_ranges(normals, along, ends, *near, found.matrices, found.axes, found.sound, False)
    return total


def _from_jumps(K: Complex, field: FloatArray, degree: int, quantity: str, rounding: float) -> FloatArray:
    if degree == 2:
        left = face_area_vectors(K)
    else:
        left = edge_vectors(K) if quantity == "circulation" else across(edge_vectors(K))
    ranges = value_ranges(left, cells_at(K, degree), _facets_of_cells(K), cells_at(K, K.dim - 1), field)
    ranges *= _part_of_range(K, degree)
    terms = np.einsum("ij,ij->i", mean_beside(K, np.abs(field), degree), np.abs(left))
    return np.asarray(ranges + rounding * terms)


def _part_of_range(K: Complex, degree: int) -> FloatArray:
    """Return which part of the range of cell values near by counts as error, for every cell of a degree."""
    if degree == K.dim:
        return np.full(K.counts[degree], 0.25)
    one_sided = K.incidences.uses == 1
    if degree == K.dim - 1:
        return np.where(one_sided, 2.0, 0.25)
    return np.where(abs(K.boundary(2)).astype(np.int64) @ one_sided > 0, 1.0, 0.25)


def _facets_of_cells(K: Complex) -> Rows:
    if K.dim == 2:
        assert K.walks is not None
        return K.walks.offsets, K.walks.edges.astype(np.int64)
    matrix = K.coboundary(K.dim - 1)
    return matrix.indptr.astype(np.int64), matrix.indices.astype(np.int64)


def _unit(vectors: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return the lengths and the vectors of length one; zero stays zero."""
    length = np.sqrt(np.einsum("ij,ij->i", vectors, vectors))
    return length, vectors / np.where(length > 0, length, 1)[:, None]
