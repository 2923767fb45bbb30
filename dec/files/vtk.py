"""Legacy VTK files, through meshio; the counts that the file promises are held against what came out."""

import re
from collections.abc import Mapping
from urllib.parse import unquote

from dec.arrays import FloatArray
from dec.errors import InputError
from dec.files.meshio_fence import fenced, parts_of
from dec.files.parts import MeshParts
from dec.files.sources import Source

__all__ = ["read_vtk"]

_DATASET = re.compile(rb"^[ \t]*DATASET[ \t]+(\w+)", re.MULTILINE | re.IGNORECASE)
_COUNT = rb"^[ \t]*%s[ \t]+(\d+)"
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
        If the file is of another kind, cannot be read, or holds less than it promises.
    """
    dataset = _DATASET.search(source.data)
    if not source.data.startswith(b"# vtk DataFile") or not dataset:
        message = f"{source.name} must begin with # vtk DataFile and have a DATASET line; it does not"
        raise InputError(message)
    if dataset[1].upper() == b"POLYDATA":
        message = f"{source.name}: POLYDATA is not read; {_WAY_OUT}, or as PLY or OBJ"
        raise InputError(message)
    mesh, notes = fenced(source, "vtk", _WAY_OUT)
    parts = parts_of(source, mesh, notes, _WAY_OUT)
    n_cells = len(parts.kinds)
    if dataset[1].upper() == b"UNSTRUCTURED_GRID":
        _refuse_other(source, "POINTS", len(parts.points), "points")
        _refuse_other(source, "CELL_TYPES", n_cells, "cells")
    _refuse_other(source, "POINT_DATA", len(parts.points), "rows of point data")
    _refuse_other(source, "CELL_DATA", n_cells, "rows of cell data")
    return MeshParts(
        parts.points, parts.kinds, parts.nodes, _decoded(parts.point_data), _decoded(parts.cell_data), notes=parts.notes
    )


def _refuse_other(source: Source, keyword: str, found: int, what: str) -> None:
    promised = re.search(_COUNT % keyword.encode("ascii"), source.data, re.MULTILINE | re.IGNORECASE)
    if promised and int(promised[1]) != found:
        message = (
            f"{source.name}: {int(promised[1])} {what} are promised, the mesh has {found}; the copy may be incomplete"
        )
        raise InputError(message)


def _decoded(table: Mapping[str, FloatArray]) -> dict[str, FloatArray]:
    return {unquote(name): values for name, values in table.items()}
