"""VTU files out: the same mesh and fields give the same bytes, and what the format cannot hold is refused."""

import base64
from collections.abc import Sequence
from xml.sax.saxutils import quoteattr

import numpy as np

from dec.arrays import AnyArray, FloatArray, IntArray
from dec.calculus.complex import Complex
from dec.calculus.dataset import Dataset, Field
from dec.errors import OutputError

__all__ = ["vtu_bytes", "vtu_notes"]

_TYPES = {"i8": "Int64", "u1": "UInt8", "f8": "Float64"}
_LINE, _TRIANGLE, _POLYGON, _QUAD = 3, 5, 7, 9
_SOLIDS = {"tetra": 10, "hexahedron": 12}


def vtu_bytes(data: Dataset | Complex, fields: Sequence[Field] | None = None) -> bytes:
    r"""A VTU file with the top cells of a complex and fields at its vertices and cells.

    Parameters
    ----------
    data : Dataset or Complex
        Edges, polygons, tetrahedra and hexahedra, with points of one to three coordinates.
    fields : sequence of Field or None
        What to write with it. None writes all fields of a dataset, and then refuses one that holds more than fields.

    Returns
    -------
    bytes
        XML with base64 arrays, little-endian, uncompressed: compression libraries differ in their bytes. Missing
        coordinates and the third component of a field with two are written as 0, as `vtu_notes` tells.

    Raises
    ------
    OutputError
        If there are no points or no cells, a field does not fit the mesh, or the dataset holds columns or regions,
        which the format has no place for.

    Notes
    -----
    Source: VTK File Formats, section XML file formats (from memory, held against meshio's reader in a test).

    Examples
    --------
    >>> K = Complex.from_faces([[0, 1, 2]], points=[[0, 0], [1, 0], [0, 1]])
    >>> vtu_bytes(K)[:22], vtu_bytes(K) == vtu_bytes(K)
    (b'<?xml version="1.0"?>\n', True)
    """
    complex_ = data.complex if isinstance(data, Dataset) else data
    if fields is None:
        fields = _all_fields(data) if isinstance(data, Dataset) else ()
    points = _padded(_points(complex_))
    connectivity, offsets, types = _cells(complex_)
    if not len(types):
        message = "a VTU file must hold edges, faces or solid cells; the complex has none"
        raise OutputError(message)
    _refuse_fields(complex_, fields)
    order = 'byte_order="LittleEndian" header_type="UInt64"'
    lines = [
        '<?xml version="1.0"?>',
        f'<VTKFile type="UnstructuredGrid" version="1.0" {order}>',
        "<UnstructuredGrid>",
        f'<Piece NumberOfPoints="{len(points)}" NumberOfCells="{len(types)}">',
        *_section("Points", [("Points", points)]),
        *_section("Cells", [("connectivity", connectivity), ("offsets", offsets), ("types", types)]),
        *_section("PointData", [(f.name, _padded(f.values, 2)) for f in fields if f.at == "vertices"]),
        *_section("CellData", [(f.name, _padded(f.values, 2)) for f in fields if f.at == "cells"]),
        "</Piece>",
        "</UnstructuredGrid>",
        "</VTKFile>",
        "",
    ]
    return "\n".join(lines).encode("utf-8")


def vtu_notes(data: Dataset | Complex, fields: Sequence[Field] | None = None) -> tuple[str, ...]:
    """What `vtu_bytes` adds to the data, in words: zeros for missing coordinates and third components."""
    complex_ = data.complex if isinstance(data, Dataset) else data
    if fields is None:
        fields = _all_fields(data) if isinstance(data, Dataset) else ()
    notes = []
    if _points(complex_).shape[1] < 3:
        notes.append("VTU points have three coordinates: the missing ones were written as 0")
    padded = list(dict.fromkeys(f.name for f in fields if f.values.ndim == 2 and f.values.shape[1] == 2))
    if padded:
        notes.append(f"VTU vectors have three components: the third of {', '.join(padded)} was written as 0")
    return tuple(notes)


def _all_fields(data: Dataset) -> list[Field]:
    lost = [f"column {name}" for table in data.columns.values() for name in table]
    lost += [f"region {name}" for name in data.regions]
    if lost:
        message = f"a VTU file has no place for {', '.join(lost[:5])}; name the fields to write, without them"
        raise OutputError(message)
    return [field for places in data.fields.values() for field in places.values()]


def _points(complex_: Complex) -> FloatArray:
    points = complex_.points
    if points is None or points.shape[1] > 3:
        found = "none" if points is None else points.shape[1]
        message = f"a VTU file needs points of one to three coordinates, the complex has {found}"
        raise OutputError(message)
    return points


def _cells(complex_: Complex) -> tuple[IntArray, IntArray, AnyArray]:
    """Return node numbers, where each cell ends, and its VTK type."""
    if complex_.dim == 1:
        ends = np.stack([complex_.tail, complex_.head], axis=1)
        return ends.ravel(), 2 * np.arange(1, len(ends) + 1), np.full(len(ends), _LINE, "u1")
    if complex_.dim == 2 and complex_.faces is not None:
        length = complex_.faces.lengths
        types = np.where(length == 3, _TRIANGLE, np.where(length == 4, _QUAD, _POLYGON)).astype("u1")
        return complex_.faces.flat, complex_.faces.offsets[1:], types
    if not complex_.solids:
        message = f"the cells of a complex of dimension {complex_.dim} without corners cannot be written as VTU"
        raise OutputError(message)
    width = np.concatenate([np.full(len(rows), rows.shape[1]) for rows in complex_.solids.values()])
    types = np.concatenate([np.full(len(rows), _SOLIDS[kind], "u1") for kind, rows in complex_.solids.items()])
    return np.concatenate([rows.ravel() for rows in complex_.solids.values()]), np.cumsum(width), types


def _padded(values: FloatArray, least: int = 1) -> FloatArray:
    """Return rows of three, with zeros where there were at least so many but fewer than three."""
    if values.ndim == 2 and least <= values.shape[1] < 3:
        return np.concatenate([values, np.zeros((len(values), 3 - values.shape[1]))], axis=1)
    return values


def _refuse_fields(complex_: Complex, fields: Sequence[Field]) -> None:
    rows = {"vertices": complex_.counts[0], "cells": complex_.counts[-1]}
    seen = set()
    for field in fields:
        if field.at not in rows:
            message = f"field {field.name}: a VTU file holds values at vertices and cells, not at {field.at}"
            raise OutputError(message)
        if len(field.values) != rows[field.at] or field.values.ndim > 2:
            message = (
                f"field {field.name} must have {rows[field.at]} rows at {field.at}, it has shape {field.values.shape}"
            )
            raise OutputError(message)
        if not field.name or not field.name.isprintable():
            message = f"field {field.name!r} must have a printable name to be written as VTU"
            raise OutputError(message)
        if (field.name, field.at) in seen:
            message = f"field {field.name} is given twice at {field.at}; rename one"
            raise OutputError(message)
        seen.add((field.name, field.at))


def _section(tag: str, arrays: Sequence[tuple[str, AnyArray]]) -> list[str]:
    if not arrays:
        return []
    return [f"<{tag}>", *(_data_array(name, values) for name, values in arrays), f"</{tag}>"]


def _data_array(name: str, values: AnyArray) -> str:
    kind = {"i": "i8", "u": "u1", "f": "f8"}[values.dtype.kind]
    raw = np.ascontiguousarray(values, dtype="<" + kind).tobytes()
    text = base64.b64encode(len(raw).to_bytes(8, "little") + raw).decode("ascii")
    components = f' NumberOfComponents="{values.shape[1]}"' if values.ndim == 2 and values.shape[1] > 1 else ""
    return f'<DataArray type="{_TYPES[kind]}" Name={quoteattr(name)}{components} format="binary">{text}</DataArray>'
