"""PLY: points, polygons and edges with named scalar properties, as text or binary of either byte order.

Read here and not through meshio, which takes ``vertex_index`` in text files for an error and reads the scalars of
binary faces column after column although they lie face after face (measured with meshio 5.3.5).
"""

import numpy as np

from dec.arrays import AnyArray, FloatArray, IntArray
from dec.errors import InputError
from dec.files.parts import POLYGON, MeshParts, field_array
from dec.files.ply_records import Column, Element, Property, binary_records, text_records
from dec.files.sources import Source, printable, whole_count
from dec.topology.polygons import Ragged

__all__ = ["read_ply"]

_TYPES = {
    "char": "i1", "int8": "i1", "uchar": "u1", "uint8": "u1", "short": "i2", "int16": "i2", "ushort": "u2",
    "uint16": "u2", "int": "i4", "int32": "i4", "uint": "u4", "uint32": "u4", "int64": "i8", "uint64": "u8",
    "float": "f4", "float32": "f4", "double": "f8", "float64": "f8",
}  # fmt: skip
_ORDERS = {"ascii": "", "binary_little_endian": "<", "binary_big_endian": ">"}
_LINE = 3


def read_ply(source: Source) -> MeshParts:
    """The points, faces, edges and scalar properties of a PLY file.

    Every scalar property of the points is a field at vertices, every one of the faces (or of the edges, in a file
    without faces) a field at cells. Lists other than the corners of a face are not read, and noted.

    Parameters
    ----------
    source : Source

    Returns
    -------
    MeshParts

    Raises
    ------
    InputError
        If the header cannot be read or names an element or property twice, the data end early, or a face or edge
        names a point that is not there.

    Notes
    -----
    Source: Turk, The PLY Polygon File Format, 1994 (from memory, held against meshio's writer in a test).
    """
    form, elements, body, first_line = _header(source)
    if form == "ascii":
        tables, left_over = text_records(source, body, first_line, elements)
    else:
        tables, left_over = binary_records(source, body, elements, _ORDERS[form])
    known = {element.name for element in elements}
    if "tristrips" in known:
        message = f"{source.name}: triangle strips are not read; export triangles"
        raise InputError(message)
    notes = [f"element {name} was not read" for name in sorted(known - {"vertex", "face", "edge"})]
    if left_over:
        notes.append(f"{left_over} after the last promised record not read; the header may promise too few")
    points, point_data = _points(source, tables.get("vertex", {}), notes)
    cells, kind, cell_data = _cells(source, tables, len(points), notes)
    return MeshParts(points, np.full(len(cells), kind), cells, point_data, cell_data, notes=tuple(notes))


def _header(source: Source) -> tuple[str, list[Element], int, int]:
    """Return the form, the elements, where the data begin and on which line."""
    end = source.data.find(b"end_header")
    stop = source.data.find(b"\n", end)
    if not source.data.startswith(b"ply") or end < 0 or stop < 0:
        message = f"{source.name} must begin with the line ply and have a line end_header; it does not"
        raise InputError(message)
    form = ""
    elements: list[Element] = []
    for number, line in enumerate(source.data[:end].decode("utf-8", "replace").split("\n"), start=1):
        words = printable(line.strip()).split()
        place = f"{source.name} line {number}"
        if not words or words[0] in ("ply", "comment", "obj_info"):
            continue
        if words[0] == "format" and len(words) == 3 and words[1] in _ORDERS:
            form = words[1]
        elif words[0] == "element" and len(words) == 3 and words[2].isdecimal():
            _refuse_again(words[1], [element.name for element in elements], "element", place)
            elements.append(Element(words[1], whole_count(words[2], place), []))
        elif words[0] == "property" and elements:
            found = _property(words[1:], place)
            _refuse_again(found.name, [each.name for each in elements[-1].properties], "property", place)
            elements[-1].properties.append(found)
        else:
            message = f"{place}: a format, element or property must stand here, found {line.strip()[:60]!r}"
            raise InputError(message)
    if not form:
        message = f"{source.name}: the header must give the format as one of {', '.join(_ORDERS)}"
        raise InputError(message)
    return form, elements, stop + 1, source.data.count(b"\n", 0, stop + 1) + 1


def _refuse_again(name: str, known: list[str], what: str, place: str) -> None:
    if name in known:
        message = f"{place}: {what} {name} stands there a second time; rename one of the two"
        raise InputError(message)


def _property(words: list[str], place: str) -> Property:
    is_list = words[:1] == ["list"]
    types = words[1:3] if is_list else words[:1]
    if (
        len(words) != (4 if is_list else 2)
        or not all(word in _TYPES for word in types)
        or (is_list and _TYPES[types[0]][0] == "f")
    ):
        message = f"{place}: a property must be TYPE NAME or list TYPE TYPE NAME, found {' '.join(words)[:60]!r}"
        raise InputError(message)
    if is_list:
        return Property(words[3], _TYPES[types[1]], _TYPES[types[0]])
    return Property(words[1], _TYPES[types[0]], None)


def _points(source: Source, table: dict[str, Column], notes: list[str]) -> tuple[FloatArray, dict[str, FloatArray]]:
    axes: list[str] = [axis for axis in ("x", "y", "z") if axis in table]
    if axes[:2] != ["x", "y"] or any(isinstance(table[axis], Ragged) for axis in axes):
        message = f"{source.name}: the points must have properties x and y, found {', '.join(table) or 'none'}"
        raise InputError(message)
    points = np.stack([np.asarray(table[axis], dtype=np.float64) for axis in axes], axis=1)
    return points, _scalars(table, axes, "points", notes)


def _scalars(table: dict[str, Column], used: list[str], what: str, notes: list[str]) -> dict[str, FloatArray]:
    fields = {}
    for name, values in table.items():
        if isinstance(values, Ragged):
            if name not in used:
                notes.append(f"list {name} of the {what} was not read")
        elif name not in used:
            fields[name] = field_array(values, name, notes)
    return fields


def _cells(
    source: Source, tables: dict[str, dict[str, Column]], n_points: int, notes: list[str]
) -> tuple[Ragged, int, dict[str, FloatArray]]:
    faces, edges = tables.get("face", {}), tables.get("edge", {})
    name = next((name for name in ("vertex_indices", "vertex_index") if isinstance(faces.get(name), Ragged)), "")
    if name and len(faces[name]):
        corners = faces[name]
        assert isinstance(corners, Ragged)
        _refuse_fractions(source, corners.flat, name)
        if "vertex1" in edges:
            notes.append(f"{len(edges['vertex1'])} edges of the file were not read; the faces make the complex")
        _refuse_outside(source, corners, n_points, "face")
        _refuse_short(source, corners)
        return corners, POLYGON, _scalars(faces, [name], "faces", notes)
    if "vertex1" in edges and "vertex2" in edges:
        ends = np.stack([_as_index(source, edges[end], end) for end in ("vertex1", "vertex2")], axis=1)
        pairs = Ragged(ends.ravel(), np.arange(len(ends) + 1) * 2, 2)
        _refuse_outside(source, pairs, n_points, "edge")
        return pairs, _LINE, _scalars(edges, ["vertex1", "vertex2"], "edges", notes)
    message = (
        f"{source.name} must hold faces with a list vertex_indices, or edges; found {', '.join(tables) or 'nothing'}"
    )
    raise InputError(message)


def _as_index(source: Source, values: Column, name: str) -> IntArray:
    if isinstance(values, Ragged):
        message = f"{source.name}: {name} must be one number for each edge, the header makes it a list"
        raise InputError(message)
    _refuse_fractions(source, values, name)
    return values.astype(np.int64)


def _refuse_fractions(source: Source, values: AnyArray, name: str) -> None:
    if values.dtype.kind not in "iu":
        message = f"{source.name}: {name} must be of a type of whole numbers, such as int; found {values.dtype}"
        raise InputError(message)


def _refuse_short(source: Source, corners: Ragged) -> None:
    if int(corners.lengths.min()) < 3:
        face = int(np.argmin(corners.lengths))
        message = f"{source.name}: face {face} (from 0) must have at least three corners, has {corners.lengths[face]}"
        raise InputError(message)


def _refuse_outside(source: Source, corners: Ragged, n_points: int, what: str) -> None:
    bad = np.flatnonzero((corners.flat < 0) | (corners.flat >= n_points))
    if len(bad):
        cell = int(np.searchsorted(corners.offsets, bad[0], side="right")) - 1
        message = (
            f"{source.name}: {what} {cell} uses point {corners.flat[bad[0]]}, the file has {n_points} (both counted "
            "from 0)"
        )
        raise InputError(message)
