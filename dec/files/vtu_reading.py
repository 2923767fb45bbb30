"""VTU: unstructured grids in XML, with fields at points and cells.

Read here and not through meshio, which keeps the cells of the last piece only, cuts cell data that are too long,
and cannot say what a broken array promised (measured with meshio 5.3.5).
"""

import math
import re
from xml.etree.ElementTree import Element, ParseError

import numpy as np

from dec.arrays import AnyArray, FloatArray, IntArray
from dec.errors import InputError
from dec.files.parts import KINDS, MeshParts, field_array
from dec.files.sources import Source, whole_count
from dec.files.vtu_arrays import ArrayReader
from dec.topology.polygons import Ragged

__all__ = ["check_kinds", "read_vtu"]

_APPENDED = re.compile(rb"<AppendedData\b([^>]*)>")
_UNREAD = {2: "poly-vertex", 4: "poly-line", 6: "triangle strip", 42: "polyhedron"}


def read_vtu(source: Source) -> MeshParts:
    """The points, cells and fields of a VTU file: text, base64 or raw appended data, with zlib, LZMA or no compression.

    Several pieces are put one after the other; points on their seams stay double.

    Parameters
    ----------
    source : Source

    Returns
    -------
    MeshParts

    Raises
    ------
    InputError
        If the XML is broken or declares entities, a data array does not hold what it promises, or a kind of cell
        is not known.

    Notes
    -----
    Source: VTK File Formats, section XML file formats (from memory, held against meshio's writer in a test).
    """
    root, appended, is_raw = _parsed(source)
    if root.tag != "VTKFile" or root.get("type") != "UnstructuredGrid":
        message = (
            f"{source.name} must be a VTKFile of type UnstructuredGrid, found {root.tag} "
            f"{root.get('type', '')}; save it as an unstructured grid"
        )
        raise InputError(message)
    reader = ArrayReader.of(source.name, root.attrib, appended, is_raw=is_raw)
    notes: list[str] = []
    pieces = [_Piece(reader, element, notes) for element in root.iterfind("UnstructuredGrid/Piece")]
    if not pieces:
        message = f"{source.name} must hold a Piece, it has none; the copy may be incomplete"
        raise InputError(message)
    if len(pieces) > 1:
        notes.append(f"{len(pieces)} pieces were put together; points on their seams stay double")
    return _joined(source.name, pieces, notes)


def _parsed(source: Source) -> tuple[Element, bytes, bool]:
    """Return the root element, the appended data after their underscore, and whether those are raw bytes."""
    from defusedxml import DefusedXmlException
    from defusedxml.ElementTree import fromstring

    data, appended, is_raw = source.data, b"", False
    opening = _APPENDED.search(data)
    if opening:
        end = data.rfind(b"</AppendedData>")
        start = data.find(b"_", opening.end()) + 1
        if end < 0 or not 0 < start <= end:
            message = f"{source.name}: the appended data have no end; the copy may be incomplete"
            raise InputError(message)
        is_raw = b'"raw"' in opening[1] or b"'raw'" in opening[1]
        appended = data[start:end] if is_raw else b"".join(data[start:end].split())
        # the bytes in between are no XML where they are raw
        data = data[: opening.end()] + data[end:]
    try:
        return fromstring(data, forbid_dtd=True), appended, is_raw
    except DefusedXmlException:
        message = f"{source.name} must not declare a document type or entities; save it again without"
        raise InputError(message) from None
    except (ParseError, ValueError, LookupError) as error:
        line = f" line {error.position[0]}" if isinstance(error, ParseError) else ""
        message = f"{source.name}{line}: the XML breaks off ({error}); the copy may be incomplete"
        raise InputError(message) from None


class _Piece:
    """One piece: its own points, cells and fields."""

    def __init__(self, reader: ArrayReader, element: Element, notes: list[str]) -> None:
        n_points = _count(reader.name, element, "NumberOfPoints")
        n_cells = _count(reader.name, element, "NumberOfCells")
        found = element.find("Points/DataArray")
        if found is None and n_points:
            message = f"{reader.name}: {n_points} points are promised, there is no Points array"
            raise InputError(message)
        points = np.empty((0, 3)) if found is None else reader.read(found, "Points", n_points)
        self.points = points.reshape(n_points, math.prod(points.shape[1:])).astype(np.float64)
        if n_points and self.points.shape[1] not in (2, 3):
            message = f"{reader.name}: points must have 2 or 3 coordinates, found {self.points.shape[1]}"
            raise InputError(message)
        self.kinds, self.nodes = _cells(reader, element, n_points, n_cells)
        self.point_data = _fields(reader, element.find("PointData"), n_points, "PointData", notes)
        self.cell_data = _fields(reader, element.find("CellData"), n_cells, "CellData", notes)


def _count(name: str, element: Element, attribute: str) -> int:
    text = element.get(attribute, "").strip()
    if not text.isdecimal():
        message = f"{name}: {attribute} of a Piece must be a number, found {text!r}"
        raise InputError(message)
    return whole_count(text, f"{name}: {attribute} of a Piece")


def _cells(reader: ArrayReader, piece: Element, n_points: int, n_cells: int) -> tuple[IntArray, Ragged]:
    arrays = {array.get("Name"): array for array in piece.iterfind("Cells/DataArray")}
    if not n_cells:
        return np.empty(0, np.int64), Ragged(np.empty(0, np.int64), np.zeros(1, np.int64), None)
    missing = [name for name in ("connectivity", "offsets", "types") if name not in arrays]
    if missing:
        message = f"{reader.name}: {n_cells} cells are promised, there is no array {' and '.join(missing)}"
        raise InputError(message)
    kinds = _whole(reader, arrays["types"], "types", n_cells)
    ends = _whole(reader, arrays["offsets"], "offsets", n_cells)
    offsets = np.concatenate([[0], ends])
    if (np.diff(offsets) < 0).any():
        message = (
            f"{reader.name}: the offsets of the cells must rise, they fall at cell "
            f"{int(np.argmax(np.diff(offsets) < 0))}"
        )
        raise InputError(message)
    flat = _whole(reader, arrays["connectivity"], "connectivity", int(offsets[-1]))
    bad = np.flatnonzero((flat < 0) | (flat >= n_points))
    if len(bad):
        cell = int(np.searchsorted(offsets, bad[0], side="right")) - 1
        message = (
            f"{reader.name}: cell {cell} uses point {flat[bad[0]]}, the piece has {n_points} (both counted from 0)"
        )
        raise InputError(message)
    length = np.diff(offsets)
    check_kinds(reader.name, kinds, length)
    width = int(length[0]) if (length == length[0]).all() else None
    return kinds, Ragged(flat, offsets, width)


def _whole(reader: ArrayReader, element: Element, what: str, rows: int) -> IntArray:
    values = reader.read(element, what, rows)
    if values.dtype.kind not in "iu":
        message = f"{reader.name}: {what} must be whole numbers, found {element.get('type')}"
        raise InputError(message)
    return values.ravel().astype(np.int64)


def check_kinds(name: str, kinds: IntArray, lengths: IntArray) -> None:
    """Return quietly if each cell is of a known kind and has as many nodes as its kind.

    Raises
    ------
    InputError
        Naming the first cell that does not.
    """
    for number in np.unique(kinds):
        cells = np.flatnonzero(kinds == number)
        if int(number) not in KINDS:
            what = _UNREAD.get(int(number), f"number {number}")
            message = (
                f"{name}: {len(cells)} cells are of kind {what} (first: cell {cells[0]}), which is not read; "
                "convert them"
            )
            raise InputError(message)
        kind = KINDS[int(number)]
        wrong = lengths[cells] < 3 if not kind.nodes else lengths[cells] != kind.nodes
        if wrong.any():
            cell = int(cells[np.argmax(wrong)])
            must = kind.nodes or "at least 3"
            message = f"{name}: cell {cell} is of kind {kind.name} and must have {must} points, it has {lengths[cell]}"
            raise InputError(message)


def _fields(
    reader: ArrayReader, section: Element | None, rows: int, place: str, notes: list[str]
) -> dict[str, FloatArray]:  # fmt: skip
    fields: dict[str, FloatArray] = {}
    for element in section if section is not None else ():
        name = element.get("Name", "")
        if element.tag != "DataArray" or element.get("type") == "String":
            notes.append(f"{place} {name or element.tag} holds no numbers and was not read")
            continue
        if name in fields:
            message = f"{reader.name}: {place} has two arrays named {name!r}; rename one"
            raise InputError(message)
        values: AnyArray = reader.read(element, f"{place} {name}", rows)
        if name == "vtkGhostType" and values.any():
            notes.append(f"vtkGhostType marks {int(np.count_nonzero(values))} {place} rows as copies or hidden; "
                         "they are read like any other")  # fmt: skip
        fields[name] = field_array(values, name, notes)
    return fields


def _joined(name: str, pieces: list[_Piece], notes: list[str]) -> MeshParts:
    first = np.cumsum([0, *(len(piece.points) for piece in pieces)])
    flat = [piece.nodes.flat + shift for piece, shift in zip(pieces, first, strict=False)]
    lengths = np.concatenate([piece.nodes.lengths for piece in pieces])
    width = int(lengths[0]) if len(lengths) and (lengths == lengths[0]).all() else None
    nodes = Ragged(np.concatenate(flat), np.concatenate([[0], np.cumsum(lengths)]).astype(np.int64), width)
    columns = {piece.points.shape[1] for piece in pieces if len(piece.points)}
    if len(columns) > 1:
        message = f"{name}: the pieces must agree on the number of coordinates, found {sorted(columns)}"
        raise InputError(message)
    points = np.concatenate([piece.points for piece in pieces if len(piece.points)] or [np.empty((0, 3))])
    kinds = np.concatenate([piece.kinds for piece in pieces])
    point_data = _stacked(name, [piece.point_data for piece in pieces if len(piece.points)])
    cell_data = _stacked(name, [piece.cell_data for piece in pieces if len(piece.kinds)])
    return MeshParts(points, kinds, nodes, point_data, cell_data, notes=tuple(dict.fromkeys(notes)))


def _stacked(name: str, tables: list[dict[str, FloatArray]]) -> dict[str, FloatArray]:
    shapes = [{field: values.shape[1] for field, values in table.items()} for table in tables]
    if any(shape != shapes[0] for shape in shapes):
        odd = next(min(set(shape.items()) ^ set(shapes[0].items()))[0] for shape in shapes if shape != shapes[0])
        message = f"{name}: the pieces must have the same fields, {odd} is not alike in all of them"
        raise InputError(message)
    return {field: np.concatenate([table[field] for table in tables]) for field in (tables[0] if tables else ())}
