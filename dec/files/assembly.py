"""The parts of a mesh file become a Dataset: the cells of the highest dimension make the complex."""

import numpy as np

from dec.arrays import FloatArray, IntArray, frozen
from dec.calculus.complex import Complex
from dec.calculus.dataset import Dataset, Field, Input
from dec.errors import InputError, TopologyError
from dec.files.parts import KINDS, POLYGON, MeshParts
from dec.files.regions import regions_of
from dec.topology.polygons import Ragged

__all__ = ["assemble"]

_SOLIDS = ("tetra", "hexahedron")
_DIMENSION_NAMES = ("points", "lines", "faces", "solid cells")


def assemble(parts: MeshParts, source: Input) -> Dataset:
    """A complex with its fields and regions.

    The cells of the highest dimension make the complex, in file order; tetrahedra are numbered before hexahedra.
    Cells of lower dimension only serve to name regions. Of a quadratic cell its corners are used. Where every z is
    exactly zero the points become (n0, 2), and with them the fields whose third component is zero throughout. Each
    of these is told in the notes.

    Parameters
    ----------
    parts : MeshParts
    source : Input
        The file, for messages and for the dataset.

    Returns
    -------
    Dataset

    Raises
    ------
    InputError
        If a coordinate is not finite, a cell names a point that is not there, there are no cells, or a kind of cell
        is not supported; the message names it.
    """
    notes = list(parts.notes)
    _refuse_bad_points(parts, source.name)
    _refuse_bad_nodes(parts, source.name)
    kinds = [KINDS[int(kind)] for kind in np.unique(parts.kinds)]
    top = max((kind.dimension for kind in kinds), default=0)
    if top == 0:
        message = f"{source.name} must hold edges, faces or solid cells, found {_points(len(parts.points))} only"
        raise InputError(message)
    order, corners = _top_cells(parts, top, source.name, notes)
    points, fields = _flattened(parts, order, notes)
    try:
        complex_ = _complex(points, corners, top)
    except (InputError, TopologyError) as error:
        message = f"{source.name}: {error}"
        raise InputError(message) from None
    regions = regions_of(complex_, parts, order, source.name)
    return Dataset(complex_, {}, _by_place(fields), regions, (source,), tuple(notes))


def _points(count: int) -> str:
    return f"{count} point{'' if count == 1 else 's'}"


def _refuse_bad_points(parts: MeshParts, name: str) -> None:
    bad = ~np.isfinite(parts.points).all(axis=1)
    if bad.any():
        point = int(np.argmax(bad))
        message = f"{name}: coordinates must be finite, point {point} (from 0) is {parts.points[point].tolist()}"
        raise InputError(message)


def _refuse_bad_nodes(parts: MeshParts, name: str) -> None:
    flat, n_points = parts.nodes.flat, len(parts.points)
    if len(flat) and (int(flat.min()) < 0 or int(flat.max()) >= n_points):
        at = int(np.argmax((flat < 0) | (flat >= n_points)))
        cell = int(np.searchsorted(parts.nodes.offsets, at, side="right")) - 1
        message = f"{name}: cell {cell} uses point {flat[at]}, the file has {n_points} (both counted from 0)"
        raise InputError(message)


def _top_cells(parts: MeshParts, top: int, name: str, notes: list[str]) -> tuple[IntArray, Ragged]:
    """Return which cells of the file make the complex, in its order, and their corners."""
    dimension = np.zeros(max(KINDS) + 1, dtype=np.int64)
    for number, kind in KINDS.items():
        dimension[number] = kind.dimension
    chosen = np.flatnonzero(dimension[parts.kinds] == top)
    _note_lower(parts.kinds, dimension, top, notes)
    _note_quadratic(parts.kinds[chosen], notes)
    _refuse_unsupported(parts.kinds[chosen], name)
    if top == 3:
        size = _corner_count(parts, chosen)
        if (np.diff(size) < 0).any():
            notes.append("tetrahedra are numbered before hexahedra, each in file order")
        chosen = chosen[np.argsort(size, kind="stable")]
    return chosen, _corners(parts, chosen)


def _note_lower(kinds: IntArray, dimension: IntArray, top: int, notes: list[str]) -> None:
    for lower in range(top):
        count = int((dimension[kinds] == lower).sum())
        if count:
            name = _DIMENSION_NAMES[lower]
            which = f"{name[:-1]} of the file names" if count == 1 else f"{name} of the file name"
            notes.append(f"{count} {which} parts only; the {_DIMENSION_NAMES[top]} make the complex")


def _note_quadratic(kinds: IntArray, notes: list[str]) -> None:
    for number, count in zip(*np.unique(kinds, return_counts=True), strict=True):
        kind = KINDS[int(number)]
        if kind.nodes > len(kind.corners) > 0:
            which = f"{kind.name} cell was read by its" if count == 1 else f"{kind.name} cells were read by their"
            notes.append(f"{count} {which} corners; the other nodes stay as unused points")


def _refuse_unsupported(kinds: IntArray, name: str) -> None:
    for number, count in zip(*np.unique(kinds, return_counts=True), strict=True):
        kind = KINDS[int(number)]
        if kind.dimension == 3 and len(kind.corners) not in (4, 8):
            message = (
                f"{name}: solid cells must be tetrahedra or hexahedra, found {count} of kind {kind.name}; "
                "split them into tetrahedra in the meshing program"
            )
            raise InputError(message)


def _corner_count(parts: MeshParts, cells: IntArray) -> IntArray:
    of_kind = np.zeros(max(KINDS) + 1, dtype=np.int64)
    for number, kind in KINDS.items():
        of_kind[number] = len(kind.corners)
    count = of_kind[parts.kinds[cells]]
    return np.where(parts.kinds[cells] == POLYGON, parts.nodes.lengths[cells], count)


def _corners(parts: MeshParts, cells: IntArray) -> Ragged:
    length = _corner_count(parts, cells)
    offsets = np.concatenate([[0], np.cumsum(length)]).astype(np.int64)
    slot = np.arange(offsets[-1]) - np.repeat(offsets[:-1], length)
    kinds = parts.kinds[cells]
    for number, kind in KINDS.items():
        if kind.corners != tuple(range(len(kind.corners))):  # corners in another order than ours
            rows = np.repeat(kinds == number, length)
            slot[rows] = np.array(kind.corners)[slot[rows]]
    flat = parts.nodes.flat[np.repeat(parts.nodes.offsets[:-1][cells], length) + slot]
    width = int(length[0]) if len(length) and (length == length[0]).all() else None
    return Ragged(flat, offsets, width)


def _complex(points: FloatArray, corners: Ragged, top: int) -> Complex:
    if top == 1:
        ends = corners.flat.reshape(-1, 2)
        return Complex.from_edges(ends[:, 0], ends[:, 1], len(points), points=points)
    if top == 2:
        if corners.width is not None:
            return Complex.from_faces(corners.flat.reshape(-1, corners.width), points=points)
        return Complex.from_faces([corners.row(i) for i in range(len(corners))], points=points)
    length = corners.lengths
    solids = {}
    for kind, width in zip(_SOLIDS, (4, 8), strict=True):
        rows = np.repeat(length == width, length)
        if rows.any():
            solids[kind] = corners.flat[rows].reshape(-1, width)
    return Complex.from_cells(solids, points=points)


def _flattened(parts: MeshParts, order: IntArray, notes: list[str]) -> tuple[FloatArray, list[Field]]:
    """Return points and fields without the third component where the mesh is flat at z = 0."""
    points = parts.points
    fields = [Field(name, "vertices", values) for name, values in parts.point_data.items()]
    fields += [Field(name, "cells", values[order]) for name, values in parts.cell_data.items()]
    leaves_plane = any(f.values.ndim == 2 and f.values.shape[1] == 3 and f.values[:, 2].any() for f in fields)
    if points.shape[1] == 3 and not points[:, 2].any() and not leaves_plane:
        points = points[:, :2].copy()
        padded = [_is_padded(field.values) for field in fields]
        fields = [
            Field(field.name, field.at, field.values[:, :2].copy()) if flat else field
            for field, flat in zip(fields, padded, strict=True)
        ]
        names = ", ".join(dict.fromkeys(field.name for field, flat in zip(fields, padded, strict=True) if flat))
        also = f", and so are the fields {names}" if names else ""
        notes.append(f"every z is exactly 0: the mesh is read as flat, with two coordinates{also}")
    for field in fields:
        frozen(field.values)
    return points, fields


def _is_padded(values: FloatArray) -> bool:
    return values.shape[1] == 3 and not values[:, 2].any()


def _by_place(fields: list[Field]) -> dict[str, dict[str, Field]]:
    places: dict[str, dict[str, Field]] = {}
    for field in fields:
        places.setdefault(field.name, {})[field.at] = field
    return places
