"""A vector field of a dataset, integrated for an audit, and its sums over boundaries, walks and groups."""

from dataclasses import dataclass

import numpy as np
from scipy.sparse import csr_array

from dec.arrays import AnyArray, BoolArray, FloatArray, IntArray
from dec.audit.meshes.limits import Sums
from dec.calculus.cochain import Cochain
from dec.calculus.complex import Complex
from dec.calculus.dataset import Dataset
from dec.errors import InputError
from dec.geometry.accuracy import is_single_precision, rule_error
from dec.geometry.corners import embedded, solid_blocks
from dec.geometry.fields import field_rule, integrate_field, mean_beside
from dec.geometry.measures import edge_lengths, face_areas, face_centres
from dec.topology.polygons import Walks

__all__ = [
    "Integrals", "boundary_sums", "centres", "group_sums", "integrated", "mesh_counts", "middles", "row_sums",
    "walk_places", "walk_sums",
]  # fmt: skip


# An estimate beyond this part of the field's size says that the mesh does not resolve the field, or that a value is
# wrong. On the sample meshes sound fields stay below 0.1 (values at vertices) and 0.24 (in cells); the median of noise
# is 0.2 to 0.5.
_SHARE = {"vertices": 0.125, "cells": 0.3}
_FAINT = 0.1  # of the median magnitude: a field fainter than that is not held against its own size


@dataclass(frozen=True, slots=True)
class Integrals:
    """A field, integrated.

    Attributes
    ----------
    cochain : Cochain
        Circulation along edges, or flux across edges or through faces.
    error : float64 array, of the shape of its values
        Estimated error of the rule.
    rule : str
        The rule in words.
    at : str
        Where the field is given.
    size : float64 array, of the shape of the values
        What each integral would be if the field ran straight along the edge or through the face.
    doubtful : bool array, of the shape of the values
        True where the estimated error is no small part of that.
    """

    cochain: Cochain
    error: FloatArray
    rule: str
    at: str
    size: FloatArray
    doubtful: BoolArray


def integrated(data: Dataset, name: str, at: str | None, quantity: str) -> Integrals:
    """The named field along edges ("circulation") or across edges and through faces ("flux").

    Parameters
    ----------
    data : Dataset
    name : str
    at : "vertices", "cells" or None
        As `Dataset.field`.
    quantity : "circulation" or "flux"

    Returns
    -------
    Integrals

    Raises
    ------
    InputError
        If the dataset is no mesh or has no points, or the field is missing, scalar, of the wrong width or not finite.
    """
    K = data.complex
    source = f"{data.inputs[0].name}: " if data.inputs else ""
    if K.dim < 2:
        message = (
            f"{source}a field is audited on a mesh with faces, this has dimension {K.dim}; "
            "on a network name an edge column with value"
        )
        raise InputError(message)
    if K.points is None:
        message = f"{source}a field is integrated along edges of known place, this mesh has no points; give points="
        raise InputError(message)
    field = data.field(name, at)
    components = field.values.shape[1] if field.values.ndim == 2 else 1
    needed = K.points.shape[1]
    if components != needed:
        hint = "save it with one for each coordinate"
        if components == 1:
            hint = "a scalar has no circulation or flux"
        message = f"{source}field {name!r} must have {needed} components, like the points, got {components}; {hint}"
        raise InputError(message)
    try:
        cochain = integrate_field(K, field.values, at=field.at, quantity=quantity)
    except InputError as error:
        message = f"{source}field {name!r}: {error}"
        raise InputError(message) from None
    errors = rule_error(K, field.values, at=field.at, quantity=quantity)
    rule = field_rule(K, field.at, quantity)
    if is_single_precision(field.values):
        rule += "; the field is stored with 32 bits, and the estimated error allows for their rounding"
    size = _straight(K, field.values, field.at, cochain.degree)
    least = _FAINT * float(np.median(np.linalg.norm(field.values, axis=1))) * _measure(K, cochain.degree)
    doubtful = errors > _SHARE[field.at] * np.maximum(size, least)
    return Integrals(cochain, errors, rule, field.at, size, doubtful)


def _measure(K: Complex, degree: int) -> FloatArray:
    return edge_lengths(K) if degree == 1 else face_areas(K)


def _straight(K: Complex, field: FloatArray, at: str, degree: int) -> FloatArray:
    """Return the mean magnitude of the field at each edge or face, times its length or area."""
    size = np.linalg.norm(field, axis=1)
    if at == "cells":
        mean = mean_beside(K, size[:, None], degree)[:, 0]
    elif degree == 1:
        mean = (size[K.tail] + size[K.head]) / 2
    else:
        assert K.faces is not None
        mean = np.bincount(K.faces.rows, weights=size[K.faces.flat], minlength=len(K.faces)) / K.faces.lengths
    return np.asarray(mean * _measure(K, degree))


def boundary_sums(integrals: Integrals, sign: AnyArray | None = None) -> Sums:
    """Sums over the boundary of every cell one degree up: circulation round faces, flux out of cells.

    Parameters
    ----------
    integrals : Integrals
    sign : int8 array, shape (n_{k+1},), or None
        -1 turns a cell round.
    """
    cochain = integrals.cochain
    matrix = cochain.complex.coboundary(cochain.degree)
    value = np.asarray(cochain.d().values)
    pattern = csr_array((np.ones(matrix.nnz), matrix.indices, matrix.indptr), shape=matrix.shape)
    return Sums(
        value if sign is None else sign * value, np.asarray(pattern @ np.abs(cochain.values)),
        np.asarray(pattern @ integrals.error), np.diff(matrix.indptr), np.asarray(pattern @ integrals.size),
        np.asarray(pattern @ integrals.doubtful.astype(np.float64)),
    )  # fmt: skip


def walk_sums(integrals: Integrals, walks: Walks) -> Sums:
    """Sums along walks, as they run."""
    rows = np.repeat(np.arange(len(walks)), np.diff(walks.offsets))
    return row_sums(integrals, rows, len(walks), walks.edges, walks.signs)


def group_sums(integrals: Integrals, groups: list[IntArray], sign: AnyArray) -> Sums:
    """Sums over groups of cells of the degree of the cochain, each cell times its sign."""
    cells = np.concatenate([np.empty(0, np.int64), *groups])
    rows = np.repeat(np.arange(len(groups)), [len(group) for group in groups])
    return row_sums(integrals, rows, len(groups), cells, sign[cells])


def row_sums(
    integrals: Integrals,
    rows: IntArray,
    n_rows: int,
    cells: AnyArray | slice = slice(None),
    signs: AnyArray | None = None,
) -> Sums:
    """Sums over the entries of each row.

    Parameters
    ----------
    integrals : Integrals
    rows : int64 array, shape (k,)
        To which sum each entry belongs.
    n_rows : int
    cells : int array, shape (k,), or slice
        The cell of each entry; by default all cells in order.
    signs : int array, shape (k,), or None
    """
    values, error = integrals.cochain.values[cells], integrals.error[cells]
    size, doubtful = integrals.size[cells], integrals.doubtful[cells].astype(np.float64)
    if signs is not None:
        values, error, size, doubtful = (
            a * b for a, b in zip((values, error, size, doubtful), (signs, *[np.abs(signs)] * 3), strict=True)
        )
    value, gross, errors, sizes, doubts = (
        np.bincount(rows, weights=weights, minlength=n_rows).astype(np.float64)
        for weights in (values, np.abs(values), error, size, doubtful)
    )
    return Sums(value, gross, errors, np.bincount(rows, minlength=n_rows), sizes, doubts)


def centres(K: Complex, degree: int) -> FloatArray:
    """Mean of the corners of every face (2) or solid cell (3); float64 array of shape (n_k, 3)."""
    if degree == 2:
        return face_centres(K)
    assert K.points is not None
    result = np.empty((K.counts[3], 3))
    for block in solid_blocks(K):
        result[block.cells] = K.points[block.corners[:, 0]] + block.offsets.mean(axis=1)
    return result


def middles(K: Complex, degree: int, cells: IntArray) -> FloatArray:
    """Mean of the corners of several edges (1) or faces (2) together; float64 array of shape (3,), nan for none."""
    assert K.points is not None
    if not len(cells):
        return np.full(3, np.nan)
    if degree == 1:
        corners = np.concatenate([K.tail[cells], K.head[cells]])
    else:
        assert K.faces is not None
        lengths = K.faces.lengths[cells]
        within = np.arange(int(lengths.sum())) - np.repeat(np.cumsum(lengths) - lengths, lengths)
        corners = K.faces.flat[np.repeat(K.faces.offsets[cells], lengths) + within]
    return np.asarray(embedded(K.points[corners]).mean(axis=0))


def walk_places(K: Complex, walks: Walks) -> FloatArray:
    """Mean of the vertices of every walk; float64 array of shape (n, 3)."""
    assert K.points is not None
    points = embedded(K.points)[np.where(walks.signs > 0, K.tail[walks.edges], K.head[walks.edges])]
    sizes = np.diff(walks.offsets)
    row = np.repeat(np.arange(len(sizes)), sizes)
    sums = [np.bincount(row, weights=points[:, k], minlength=len(sizes)) for k in range(3)]
    return np.asarray((np.stack(sums) / np.maximum(sizes, 1)).T)


def mesh_counts(K: Complex) -> tuple[dict[str, int], tuple[int, ...]]:
    """The counts of an audit: cells by dimension, components, boundary loops, holes; and the Betti numbers."""
    names = ("vertices", "edges", "faces", "cells")
    betti = K.betti()
    counts = {
        **dict.fromkeys(names, 0), **dict(zip(names, K.counts, strict=False)), "components": K.n_components,
        "boundary_loops": len(K.boundary_walks()) if K.dim == 2 else 0, "holes": betti[1],
    }  # fmt: skip
    return counts, betti
