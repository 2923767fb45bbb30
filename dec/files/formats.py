"""The one table of mesh formats: suffix, reader, and what the format can carry."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass

from dec.files.msh import read_msh
from dec.files.obj import read_obj
from dec.files.off import read_off
from dec.files.parts import MeshParts
from dec.files.ply import read_ply
from dec.files.sources import Source
from dec.files.stl import read_stl
from dec.files.vtk import read_vtk
from dec.files.vtu_reading import read_vtu

__all__ = ["MESH_FORMATS", "TABLE_SUFFIXES", "WAYS_OUT", "MeshFormat"]


@dataclass(frozen=True, slots=True)
class MeshFormat:
    """How a mesh format is read, and what it can carry.

    Attributes
    ----------
    name : str
    read : callable
        Takes a Source to MeshParts; raises nothing but InputError.
    cells : frozenset of str
        Kinds among "edges", "triangles", "quads", "polygons", "tetrahedra", "hexahedra".
    fields : frozenset of str
        Places among "vertices" and "cells" where it holds fields.
    """

    name: str
    read: Callable[[Source], MeshParts]
    cells: frozenset[str]
    fields: frozenset[str] = frozenset()


_FACES = frozenset({"triangles", "quads", "polygons"})
_SOLIDS = frozenset({"tetrahedra", "hexahedra"})
_EDGES = frozenset({"edges"})
_BOTH = frozenset({"vertices", "cells"})

MESH_FORMATS: Mapping[str, MeshFormat] = {
    ".stl": MeshFormat("STL", read_stl, frozenset({"triangles"})),
    ".obj": MeshFormat("OBJ", read_obj, _FACES | _EDGES),
    ".off": MeshFormat("OFF", read_off, _FACES),
    ".ply": MeshFormat("PLY", read_ply, _FACES | _EDGES, _BOTH),
    ".vtu": MeshFormat("VTU", read_vtu, _FACES | _SOLIDS | _EDGES, _BOTH),
    ".vtk": MeshFormat("legacy VTK", read_vtk, _FACES | _SOLIDS | _EDGES, _BOTH),
    ".msh": MeshFormat("MSH", read_msh, _SOLIDS | _EDGES | frozenset({"triangles", "quads"}), _BOTH),
}
TABLE_SUFFIXES = (".csv", ".tsv", ".txt", ".parquet")
WAYS_OUT: Mapping[str, str] = {
    ".xlsx": "save the sheet as CSV UTF-8", ".xls": "save the sheet as CSV UTF-8",
    ".ods": "save the sheet as CSV UTF-8",
    ".step": "export a mesh (STL, OBJ, VTU)", ".stp": "export a mesh (STL, OBJ, VTU)",
    ".iges": "export a mesh (STL, OBJ, VTU)", ".igs": "export a mesh (STL, OBJ, VTU)",
    ".vtp": "save it as VTU, PLY or OBJ", ".pvtu": "save it as one VTU file", ".pvd": "give one VTU file of the series",
    ".gz": "unpack it first", ".zip": "unpack it first",
}  # fmt: skip
