"""Vector fields become cochains: circulation along edges, flux across edges or through faces."""

from collections.abc import Callable
from typing import TypeAlias

import numpy as np
from numpy.typing import ArrayLike
from scipy.sparse import csr_array

from dec.arrays import FloatArray, float_array
from dec.calculus.cochain import Cochain
from dec.calculus.complex import Complex
from dec.errors import InputError
from dec.geometry.corners import LARGEST, cell_name, cross, edge_vectors, face_blocks, positions
from dec.geometry.measures import face_area_vectors, is_flat
from dec.geometry.neighbours import cells_at

__all__ = [
    "FieldFunction", "across", "field_rule", "field_values", "integrate_field", "integration_degree", "mean_beside",
]  # fmt: skip

FieldFunction: TypeAlias = Callable[[FloatArray], ArrayLike]

_PLURALS = ("vertices", "edges", "faces", "cells")
_GAUSS = ((1 - 3**-0.5) / 2, (1 + 3**-0.5) / 2)


def integrate_field(
    K: Complex, field: ArrayLike | FieldFunction, *, at: str = "vertices", quantity: str = "circulation"
) -> Cochain:
    """The circulation of a vector field along edges, or its flux across edges or through faces, as a cochain.

    Parameters
    ----------
    K : Complex
        With points, shape (n0, m).
    field : array_like, shape (n, m), or callable
        One vector for every vertex or every cell of highest dimension, with as many components as the points. A
        callable takes places, shape (p, m), and returns vectors, shape (p, m); then `at` has no meaning.
    at : "vertices" or "cells"
        Where the vectors of an array belong.
    quantity : "circulation" or "flux"

    Returns
    -------
    Cochain of float64, in the unit of the field times that of length, or of area for a flux through faces
        circulation: degree 1, field . edge from tail to head. flux on a mesh in a plane (`is_flat`): degree 1,
        field . n with n the edge turned by a right angle to the right, so that its derivative is the net outward
        flux of every counter-clockwise face. flux through a surface in space or a solid: degree 2, field . area
        vector of the face as it is turned; in a solid the derivative is the net outward flux of every cell of
        positive volume.

    Raises
    ------
    InputError
        If the complex has no points, a word is not known, the field has the wrong shape or a value that is not
        finite (the message names the vertex, cell or place), or there is nothing to integrate over.

    Notes
    -----
    `field_rule` says in a sentence which rule is used; `dec.geometry.accuracy` estimates its error. Sources:
    trapezoid rule, two-point Gauss rule, and the rules of degree 1 (corners) and 2 (mid-sides) on triangles,
    Stroud, Approximate Calculation of Multiple Integrals, 1971, chapter 8 (from memory).

    Examples
    --------
    >>> K = Complex.from_faces([[0, 1, 2, 3]], points=[[0, 0], [1, 0], [1, 1], [0, 1]])
    >>> rotation = [[0, 0], [0, 1], [-1, 1], [-1, 0]]
    >>> integrate_field(K, rotation).d().values
    array([2.])
    >>> integrate_field(K, lambda p: p, quantity="flux").d().values.round(12)
    array([2.])
    """
    degree = integration_degree(K, at, quantity)
    directions = _directions(K, quantity, degree)
    if callable(field):
        values = _sampled_along(K, field, directions) if degree == 1 else _sampled_through(K, field)
        return Cochain(K, degree, values)
    array = field_values(K, field, at)
    if at == "cells":
        array = mean_beside(K, array, degree)
        return Cochain(K, degree, _dot(array, directions))
    if degree == 1:
        total = array.take(K.tail, axis=0)
        total += array.take(K.head, axis=0)
        return Cochain(K, 1, _dot(total, directions) * 0.5)
    return Cochain(K, 2, _through_faces(K, array))


def field_rule(K: Complex, at: str, quantity: str, *, is_function: bool = False) -> str:
    """The rule by which `integrate_field` integrates, in one sentence for reports.

    Raises
    ------
    InputError
        As `integrate_field`.

    Examples
    --------
    >>> field_rule(Complex.from_edges([0], [1], points=[[0.0], [1.0]]), "vertices", "circulation")
    'trapezoid rule: the mean of the vectors at both ends of each edge (exact for linear fields)'
    """
    degree = integration_degree(K, at, quantity)
    if is_function:
        if degree == 1:
            return "two-point Gauss rule along each edge (exact for cubic fields)"
        return "mid-sides of the triangles that fan out from each face's first corner (exact for quadratic fields)"
    if at == "vertices":
        if degree == 1:
            return "trapezoid rule: the mean of the vectors at both ends of each edge (exact for linear fields)"
        if K.faces is not None and K.faces.width == 3:
            return "mean of the vectors at the three corners of each face (exact for linear fields)"
        return (
            "mean of the vectors at the three corners of the triangles that fan out from each face's first corner "
            "(exact for linear fields)"
        )
    if degree == K.dim:
        return f"the vector of each {('', 'edge', 'face')[degree]} itself (exact for constant fields)"
    return (
        f"mean of the vectors of the {_PLURALS[K.dim]} that meet at each {('', 'edge', 'face')[degree]}, of one alone "
        "at the boundary (first order, exact for constant fields)"
    )


def integration_degree(K: Complex, at: str, quantity: str) -> int:
    """The degree on which an integral lives: 1, or 2 for a flux through a surface in space or a solid.

    Raises
    ------
    InputError
        If a word is not known, the complex has no points, or a flux has no faces in a plane or in space.

    Examples
    --------
    >>> K = Complex.from_faces([[0, 1, 2]], points=[[0, 0, 1], [1, 0, 1], [0, 1, 1]])
    >>> integration_degree(K, "vertices", "flux")
    1
    """
    if at not in {"vertices", "cells"}:
        message = f'at must be "vertices" or "cells", got {at!r}'
        raise InputError(message)
    if quantity not in {"circulation", "flux"}:
        message = f'quantity must be "circulation" or "flux", got {quantity!r}'
        raise InputError(message)
    points = positions(K)
    if quantity == "circulation":
        return 1
    if K.dim < 2 or points.shape[1] < 2:
        message = (
            f"a flux needs faces in a plane or in space, got dimension {K.dim} and points in {points.shape[1]} "
            'coordinates; quantity="circulation" needs edges only'
        )
        raise InputError(message)
    return 1 if K.dim == 2 and is_flat(K) else 2


def across(vectors: FloatArray) -> FloatArray:
    """Vectors in a plane turned by a right angle to the right; same shape, a third component becomes 0.

    Examples
    --------
    >>> across(np.array([[1.0, 0.0], [0.0, 1.0]])).tolist()
    [[0.0, -1.0], [1.0, 0.0]]
    """
    turned = np.zeros_like(vectors)
    turned[:, 0] = vectors[:, 1]
    turned[:, 1] -= vectors[:, 0]
    return turned


def field_values(K: Complex, field: ArrayLike, at: str) -> FloatArray:
    """A vector for every vertex or top cell, checked; float64 array of shape (n, m).

    Raises
    ------
    InputError
        If the shape does not fit, or a value is not finite; the message names its vertex or cell.

    Examples
    --------
    >>> K = Complex.from_edges([0], [1], points=[[0.0, 0.0], [1.0, 0.0]])
    >>> field_values(K, [[1, 2], [3, 4]], "vertices").shape
    (2, 2)
    """
    points = positions(K)
    array = float_array(field, "field", finite=False)
    degree = 0 if at == "vertices" else K.dim
    if array.shape != (K.counts[degree], points.shape[1]):
        raise InputError(_shape_message(K, array, at))
    bad = ~np.isfinite(array).all(axis=1)
    if bad.any():
        at_cell = int(np.argmax(bad))
        message = f"field must be finite, got {array[at_cell].tolist()} at {cell_name(K, degree, at_cell)}"
        raise InputError(message)
    largest = max(-float(array.min(initial=0.0)), float(array.max(initial=0.0)))
    if largest > LARGEST:
        message = f"field values must stay within {LARGEST:g}, got {largest:g}; choose a larger unit"
        raise InputError(message)
    return array


def mean_beside(K: Complex, values: FloatArray, degree: int) -> FloatArray:
    """The mean of the values of the top cells that meet at each cell of a degree; float64 array of shape (n_k, m).

    Raises
    ------
    InputError
        If no top cell meets one of them; the message names it.

    Examples
    --------
    >>> K = Complex.from_faces([[0, 1, 2], [2, 1, 3]])
    >>> mean_beside(K, np.array([[1.0], [4.0]]), 1).ravel().tolist()
    [1.0, 1.0, 2.5, 4.0, 4.0]
    """
    if degree == K.dim:
        return values
    offsets, cells = cells_at(K, degree)
    number = np.diff(offsets)
    if not number.all():
        alone = cell_name(K, degree, int(np.argmin(number)))
        kind = ("", "edge", "face", "cell")[K.dim]
        message = f"{alone} has no {kind} beside it to take a value from; use data at vertices"
        raise InputError(message)
    sums = csr_array((np.ones(len(cells)), cells, offsets), shape=(len(number), len(values))) @ values
    return np.asarray(sums / number[:, None])


def _shape_message(K: Complex, array: FloatArray, at: str) -> str:
    n, top, m = K.counts[0], K.counts[-1], positions(K).shape[1]
    rows, columns = (array.shape[0], array.shape[1] if array.ndim == 2 else 1) if array.ndim else (1, 1)
    found = f"{rows} rows of {columns}" if array.ndim < 3 else f"shape {array.shape}"
    wanted = n if at == "vertices" else top
    guess = ""
    if rows != wanted and rows in {n, top}:
        other = "vertices" if rows == n else "cells"
        guess = f' It has one row for each of the {"vertices" if rows == n else _PLURALS[K.dim]}: at="{other}"?'
    if columns == m - 1:
        guess += " Is it missing its last component?"
    elif columns > m:
        guess += f" Keep the first {m} components if the others are zero."
    return (
        f"field has {found}; the mesh has {top} {_PLURALS[K.dim]} and {n} vertices in {m}-D, "
        f'so {wanted} rows of {m} are needed for at="{at}".{guess}'
    )


def _directions(K: Complex, quantity: str, degree: int) -> FloatArray:
    if degree == 2:
        return face_area_vectors(K)
    vectors = edge_vectors(K)
    return vectors if quantity == "circulation" else across(vectors)


def _dot(left: FloatArray, right: FloatArray) -> FloatArray:
    return np.asarray(np.einsum("ij,ij->i", left, right))


def _through_faces(K: Complex, array: FloatArray) -> FloatArray:
    result = np.empty(K.counts[2])
    for block in face_blocks(K):
        p, values = block.offsets, array[block.corners]
        flux = np.zeros(len(p))
        for i in range(1, block.corners.shape[1] - 1):
            mean = values[:, 0] + values[:, i] + values[:, i + 1]
            flux += _dot(mean, cross(p[:, i], p[:, i + 1]))
        result[block.faces] = flux / 6
    return result


def _called(field: FieldFunction, places: FloatArray) -> FloatArray:
    values = float_array(field(places.copy()), "field", finite=False)
    if values.shape != places.shape:
        message = f"field must return a vector for every place, so shape {places.shape}, got {values.shape}"
        raise InputError(message)
    bad = ~np.isfinite(values).all(axis=1)
    if bad.any():
        at = int(np.argmax(bad))
        message = f"field must be finite, got {values[at].tolist()} at the place {tuple(places[at].tolist())}"
        raise InputError(message)
    return values


def _sampled_along(K: Complex, field: FieldFunction, directions: FloatArray) -> FloatArray:
    start, step = positions(K)[K.tail], edge_vectors(K)
    one, two = (_dot(_called(field, start + s * step), directions) for s in _GAUSS)
    return (one + two) / 2


def _sampled_through(K: Complex, field: FieldFunction) -> FloatArray:
    points = positions(K)
    result = np.empty(K.counts[2])
    for block in face_blocks(K):
        p, offsets = block.positions(points), block.offsets
        flux = np.zeros(len(p))
        for i in range(1, p.shape[1] - 1):
            corners = (p[:, 0], p[:, i], p[:, i + 1])
            middles = [(a + b) / 2 for a, b in zip(corners, (*corners[1:], corners[0]), strict=True)]
            mean = sum(_called(field, middle) for middle in middles)
            flux += _dot(np.asarray(mean), cross(offsets[:, i], offsets[:, i + 1]))
        result[block.faces] = flux / 6
    return result
