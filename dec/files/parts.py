"""What every mesh reader hands over: points, cells in file order, fields, named groups."""

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np

from dec.arrays import AnyArray, FloatArray, IntArray
from dec.errors import InputError
from dec.topology.polygons import Ragged

__all__ = ["KINDS", "POLYGON", "Group", "Kind", "MeshParts", "field_array", "kind_named", "ragged_of"]


@dataclass(frozen=True, slots=True)
class Kind:
    """One kind of cell: its name, dimension, number of nodes (0: any), and which nodes are its corners, in order.

    The numbers under which they are listed, and the order of nodes, are those of the VTK file formats.
    """

    name: str
    dimension: int
    nodes: int
    corners: tuple[int, ...] = ()


def _kind(name: str, dimension: int, nodes: int, corners: int) -> Kind:
    return Kind(name, dimension, nodes, tuple(range(corners)))


# Source: VTK file formats, cell types (numbers as in vtkCellType.h, from memory, held against meshio's table in a test)
KINDS: Mapping[int, Kind] = {
    1: _kind("vertex", 0, 1, 1),
    3: _kind("line", 1, 2, 2),
    5: _kind("triangle", 2, 3, 3),
    7: Kind("polygon", 2, 0),
    8: Kind("pixel", 2, 4, (0, 1, 3, 2)),
    9: _kind("quad", 2, 4, 4),
    10: _kind("tetra", 3, 4, 4),
    11: Kind("voxel", 3, 8, (0, 1, 3, 2, 4, 5, 7, 6)),
    12: _kind("hexahedron", 3, 8, 8),
    13: _kind("wedge", 3, 6, 6),
    14: _kind("pyramid", 3, 5, 5),
    21: _kind("line3", 1, 3, 2),
    22: _kind("triangle6", 2, 6, 3),
    23: _kind("quad8", 2, 8, 4),
    24: _kind("tetra10", 3, 10, 4),
    25: _kind("hexahedron20", 3, 20, 8),
    26: _kind("wedge15", 3, 15, 6),
    27: _kind("pyramid13", 3, 13, 5),
    28: _kind("quad9", 2, 9, 4),
    29: _kind("hexahedron27", 3, 27, 8),
    34: _kind("triangle7", 2, 7, 3),
    35: _kind("line4", 1, 4, 2),
}
POLYGON = 7
_NUMBER_OF = {kind.name: number for number, kind in KINDS.items()}


def kind_named(name: str) -> int | None:
    """The number of a kind of cell; None where it is not known."""
    return _NUMBER_OF.get(name)


@dataclass(frozen=True, slots=True)
class Group:
    """A named set of cells: indices into all cells of the file, in file order."""

    name: str
    dimension: int
    cells: IntArray


@dataclass(frozen=True, slots=True)
class MeshParts:
    """A mesh file taken apart, nothing interpreted.

    Attributes
    ----------
    points : float64 array, shape (n0, 2 or 3)
    kinds : int64 array, shape (n_cells,)
        Keys of `KINDS`.
    nodes : Ragged
        Node numbers of each cell, from 0, in the order of the VTK formats.
    point_data, cell_data : mapping of name to float64 array, shape (n0 or n_cells, components)
    groups : tuple of Group
    notes : tuple of str
    """

    points: FloatArray
    kinds: IntArray
    nodes: Ragged
    point_data: Mapping[str, FloatArray] = field(default_factory=dict)
    cell_data: Mapping[str, FloatArray] = field(default_factory=dict)
    groups: tuple[Group, ...] = ()
    notes: tuple[str, ...] = ()


def ragged_of(rows: Sequence[IntArray]) -> Ragged:
    """Blocks of rows one after the other, each of shape (n, k)."""
    lengths = np.concatenate([np.empty(0, np.int64), *(np.full(len(r), r.shape[1], np.int64) for r in rows)])
    flat = np.concatenate([np.empty(0, np.int64), *(r.ravel() for r in rows)])
    width = int(lengths[0]) if len(lengths) and (lengths == lengths[0]).all() else None
    return Ragged(flat, np.concatenate([[0], np.cumsum(lengths)]).astype(np.int64), width)


def field_array(values: AnyArray, name: str, notes: list[str]) -> FloatArray:
    """A field as float64, one row per point or cell; what a float cannot hold is noted.

    Raises
    ------
    InputError
        If the values are not real numbers.
    """
    if values.dtype.kind not in "iufb":
        message = f"field {name} must hold real numbers, got {values.dtype}; leave it out of the file"
        raise InputError(message)
    flat = values.reshape(len(values), math.prod(values.shape[1:]))
    result = flat.astype(np.float64)
    if values.dtype.kind in "iu" and values.dtype.itemsize == 8 and (np.abs(result) >= 2.0**53).any():
        notes.append(f"field {name} holds whole numbers from 2**53 on; they were read to the nearest float")
    return result
