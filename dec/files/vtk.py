"""Legacy VTK files, through meshio; the counts that the file promises are held against what came out."""

import math
import re
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from urllib.parse import unquote

import numpy as np

from dec.arrays import FloatArray
from dec.errors import InputError
from dec.files.meshio_fence import fenced, parts_of
from dec.files.parts import MeshParts
from dec.files.sources import Source, printable, whole_count

__all__ = ["read_vtk"]

_DATASET = re.compile(rb"^[ \t]*DATASET[ \t]+(\w+)", re.MULTILINE | re.IGNORECASE)
_COUNT = re.compile(
    rb"[ \t]*(POINTS|CELLS|CELL_TYPES|POINT_DATA|CELL_DATA|DIMENSIONS|[XYZ]_COORDINATES)((?:[ \t]+\d+)+)", re.IGNORECASE
)
_SECTION = {"POINT_DATA": "POINT", "CELL_DATA": "CELL"}
_ARRAY = re.compile(
    rb"[ \t]*(?:(?:SCALARS|VECTORS|TENSORS|COLOR_SCALARS)[ \t]+(\S+)[ \t]+\w+|(\S+)[ \t]+\d+[ \t]+\d+[ \t]+[A-Za-z]\w+)"
    rb"[ \t\r\d]*$", re.IGNORECASE,
)  # fmt: skip
_PLACES = {"POINT": "vertices", "CELL": "cells", "": "neither vertices nor cells"}
_LONGEST = 10_000  # no heading is longer; a line of binary numbers may be
_SMALL = 1_000_000  # points of a grid that may be declared without a value for each
_WAY_OUT = "save it as VTU (unstructured grid)"


def read_vtk(source: Source) -> MeshParts:
    """The points, cells and fields of a legacy VTK file with an unstructured, structured or rectilinear grid.

    Names written with per cent signs (``Random%20Data``) are decoded.

    Parameters
    ----------
    source : Source

    Returns
    -------
    MeshParts

    Raises
    ------
    InputError
        If the file is of another kind, cannot be read, holds less than it promises, declares more than a file of
        its size can hold, or has two arrays of one name.
    """
    dataset = _DATASET.search(source.data)
    if not source.data.startswith(b"# vtk DataFile") or not dataset:
        message = f"{source.name} must begin with # vtk DataFile and have a DATASET line; it does not"
        raise InputError(message)
    if dataset[1].upper() == b"POLYDATA":
        message = f"{source.name}: POLYDATA is not read; {_WAY_OUT}, or as PLY or OBJ"
        raise InputError(message)
    headings = _headings(source)
    _refuse_large(source, headings.counts)
    mesh, notes = fenced(source, "vtk", _WAY_OUT)
    parts = parts_of(source, mesh, notes, _WAY_OUT)
    n_cells = len(parts.kinds)
    if dataset[1].upper() == b"UNSTRUCTURED_GRID":
        _refuse_other(source, headings, "POINTS", len(parts.points), "points")
        _refuse_other(source, headings, "CELL_TYPES", n_cells, "cells")
    _refuse_other(source, headings, "POINT_DATA", len(parts.points), "rows of point data")
    _refuse_other(source, headings, "CELL_DATA", n_cells, "rows of cell data")
    point_data, cell_data = _decoded(parts.point_data), _decoded(parts.cell_data)
    said = [*parts.notes, *_unread(headings.arrays, {"POINT": point_data, "CELL": cell_data})]
    return MeshParts(parts.points, parts.kinds, parts.nodes, point_data, cell_data, notes=tuple(said))


@dataclass(frozen=True, slots=True)
class _Headings:
    """What a file declares.

    Attributes
    ----------
    counts : mapping of keyword to list of list of int
        The whole numbers behind each occurrence of a keyword that announces how many of something follow.
    arrays : set of (str, str)
        Section, "POINT", "CELL" or "" for neither, and name of each array.
    """

    counts: Mapping[str, list[list[int]]]
    arrays: set[tuple[str, str]]


def _headings(source: Source) -> _Headings:
    counts: dict[str, list[list[int]]] = {}
    arrays: set[tuple[str, str]] = set()
    section = ""
    for line in _candidates(source.data):
        count = _COUNT.match(line)
        if count:
            keyword = count[1].decode("ascii").upper()
            place = f"{source.name}: {keyword}"
            counts.setdefault(keyword, []).append([whole_count(n.decode("ascii"), place) for n in count[2].split()])
            section = _SECTION.get(keyword, section)
            continue
        heading = _ARRAY.match(line)
        if heading:
            name = unquote((heading[1] or heading[2]).decode("utf-8", "replace"))
            if (section, name) in arrays:
                message = f"{source.name}: two arrays at {_PLACES[section]} are named {printable(name)!r}; rename one"
                raise InputError(message)
            arrays.add((section, name))
    return _Headings(counts, arrays)


def _refuse_large(source: Source, counts: Mapping[str, list[list[int]]]) -> None:
    """Refuse counts that the file cannot hold, before anything of that size is made."""
    room = max(len(source.data), _SMALL)
    sizes = [(keyword, row[0]) for keyword, rows in counts.items() if keyword != "DIMENSIONS" for row in rows]
    sizes += [("the grid", math.prod(row)) for row in counts.get("DIMENSIONS", ())]
    axes = [max((row[0] for row in counts.get(f"{axis}_COORDINATES", ())), default=1) for axis in "XYZ"]
    for what, size in (*sizes, ("the grid", math.prod(axes))):
        if size > room:
            message = (
                f"{source.name}: {what} of {size} entries cannot stand in a file of {len(source.data)} bytes; "
                "the header may be damaged, or the values are missing"
            )
            raise InputError(message)


def _candidates(data: bytes) -> Iterator[bytes]:
    """Yield the lines that begin like a word or end like one, which rows of numbers do not."""
    array = np.frombuffer(data, dtype=np.uint8)
    ends = np.flatnonzero(array == ord("\n"))
    if not data.endswith(b"\n"):
        ends = np.append(ends, len(data))
    starts = np.concatenate([[0], ends[:-1] + 1]).astype(np.int64)
    starts, ends = starts[ends > starts], ends[ends > starts]
    first = array[starts]
    last = array[np.maximum(np.where(array[ends - 1] == ord("\r"), ends - 2, ends - 1), 0)]
    is_number = np.isin(first, np.frombuffer(b"0123456789+-.", np.uint8)) & (last < ord("A"))
    for start, end in zip(starts[~is_number].tolist(), ends[~is_number].tolist(), strict=True):
        yield data[start : min(end, start + _LONGEST)]


def _unread(declared: set[tuple[str, str]], tables: Mapping[str, Mapping[str, FloatArray]]) -> list[str]:
    notes = []
    for section, place in _PLACES.items():
        lost = sorted(name for where, name in declared if where == section and name not in tables.get(section, ()))
        if lost:
            notes.append(f"arrays at {place} not read: {printable(', '.join(lost[:8]))}; {_WAY_OUT} to keep them")
    return notes


def _refuse_other(source: Source, headings: _Headings, keyword: str, found: int, what: str) -> None:
    promised = headings.counts.get(keyword)
    if promised and promised[0][0] != found:
        message = (
            f"{source.name}: {promised[0][0]} {what} are promised, the mesh has {found}; the copy may be incomplete"
        )
        raise InputError(message)


def _decoded(table: Mapping[str, FloatArray]) -> dict[str, FloatArray]:
    return {unquote(name): values for name, values in table.items()}
