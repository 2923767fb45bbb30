# ruff: noqa: E501
"""Inputs that cannot be used, each with the words its one error line must hold.

`BAD_INPUTS` is a list of (name, maker). A maker writes into a folder and returns the `BadInput` to be read from it.
Where an input only fails once a column is used, `value` names the column.
"""

import os
import struct
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

__all__ = ["BAD_INPUTS", "BadInput", "Maker", "triangle_vtu"]


@dataclass(frozen=True)
class BadInput:
    """What to read, and what the error must say."""

    path: Path
    says: str
    names: str
    nodes: Path | None = None
    value: str | None = None


Maker = Callable[[Path], BadInput]


def _file(
    name: str, content: bytes, says: str, *, nodes: bytes | None = None, names: str = "", value: str | None = None
) -> Maker:
    def make(folder: Path) -> BadInput:
        (folder / name).write_bytes(content)
        if nodes is not None:
            (folder / "nodes.csv").write_bytes(nodes)
        return BadInput(folder / name, says, names or name, folder / "nodes.csv" if nodes is not None else None, value)

    return make


def triangle_vtu(*, connectivity: str = "0 1 2", offsets: str = "3", types: str = "5", points: str = "0 0 0 1 0 0 0 1 0", field: str = "1 2 3") -> bytes:  # fmt: skip
    """Return a VTU file of text arrays with one triangle."""
    return f"""<?xml version="1.0"?>
<VTKFile type="UnstructuredGrid" version="0.1" byte_order="LittleEndian">
<UnstructuredGrid><Piece NumberOfPoints="3" NumberOfCells="1">
<Points><DataArray type="Float64" NumberOfComponents="3" format="ascii">{points}</DataArray></Points>
<Cells>
<DataArray type="Int64" Name="connectivity" format="ascii">{connectivity}</DataArray>
<DataArray type="Int64" Name="offsets" format="ascii">{offsets}</DataArray>
<DataArray type="UInt8" Name="types" format="ascii">{types}</DataArray>
</Cells>
<PointData><DataArray type="Float64" Name="head" format="ascii">{field}</DataArray></PointData>
</Piece></UnstructuredGrid></VTKFile>
""".encode()


def _folder(folder: Path) -> BadInput:
    (folder / "edges.csv").mkdir()
    return BadInput(folder / "edges.csv", "a folder", "edges.csv")


def _device(folder: Path) -> BadInput:
    (folder / "edges.csv").symlink_to("/dev/null")
    return BadInput(folder / "edges.csv", "a device", "edges.csv")


def _pipe(folder: Path) -> BadInput:
    os.mkfifo(folder / "edges.csv")
    return BadInput(folder / "edges.csv", "a pipe", "edges.csv")


def _missing(folder: Path) -> BadInput:
    return BadInput(folder / "edges.csv", "no such file", "edges.csv")


def _circle_of_links(folder: Path) -> BadInput:
    (folder / "edges.csv").symlink_to(folder / "edges.csv")
    return BadInput(folder / "edges.csv", "cannot be read", "edges.csv")


_EDGES = b"id,from,to,flow\nP1,A,B,1.5\n"
_BINARY_STL = b" " * 80 + struct.pack("<I", 2) + struct.pack("<12fH", *[0.0] * 12, 0)
_BOMB = (
    b'<?xml version="1.0"?><!DOCTYPE VTKFile [<!ENTITY a "ha">'
    + b"".join(b'<!ENTITY %c "%s">' % (98 + i, b"&%c;" % (97 + i) * 10) for i in range(9))
    + b']><VTKFile type="UnstructuredGrid">&j;</VTKFile>'
)
_MSH = b"""$MeshFormat
2.2 0 8
$EndMeshFormat
$Nodes
3
1 0 0 0
2 1 0 0
3 0 1 0
$EndNodes
$Elements
1
1 2 2 0 1 1 2 0
$EndElements
"""

BAD_INPUTS: list[tuple[str, Maker]] = [
    ("missing file", _missing),
    ("empty file", _file("edges.csv", b"", "empty")),
    ("header only", _file("edges.csv", b"id,from,to,flow\n", "no rows")),
    ("blank lines only", _file("edges.csv", b"\n\n  \n", "only blank lines")),
    ("Windows-1252 text", _file("edges.csv", b"id,from,to\nP1,A,B\nP2,Z\xfcrich,B\n", 'line 3: byte FC is not UTF-8; it reads as "Zürich"')),
    ("UTF-16 text", _file("edges.csv", "id,from,to\nP1,A,B\n".encode("utf-16"), "UTF-16")),
    ("zero byte", _file("edges.csv", b"id,from,to\nP1,A\0,B\n", "line 2: a zero byte")),
    ("row with too many cells", _file("edges.csv", _EDGES + b"P2,A,B,1,5\n", "line 3: a row must have 4 cells")),
    ("row with too few cells", _file("edges.csv", _EDGES + b"P2,A,B\n", "line 3: a row must have 4 cells")),
    ("repeated heading", _file("edges.csv", b"id,from,to,to\nP1,A,B,C\n", "'to' stands over columns 3 and 4")),
    ("column without heading", _file("edges.csv", b"id,from,to,\nP1,A,B,4\n", "column 4 must have a heading")),
    ("open quotation mark", _file("edges.csv", b'id,from,to\nP1,A,"B\nP2,A,B\n', "line 2: a quotation mark")),
    ("carriage return in a line", _file("edges.csv", b"id,from,to\nP1,A\rB,C\n", "line 2: a carriage return")),
    ("no column from", _file("edges.csv", b"id,form,to\nP1,A,B\n", "did you mean 'form'")),
    ("empty end of an edge", _file("edges.csv", b"id,from,to\nP1,A,B\n\nP2,,B\n", "line 4: from is empty")),
    ("repeated edge id", _file("edges.csv", _EDGES + b"P1,B,C,2\n", "line 3: edge id 'P1' is used before (edges.csv line 2)")),
    ("unknown vertex", _file("edges.csv", b"id,from,to\nP1,J12,J 13\n", "line 2: to names 'J 13'", nodes=b"id\nJ12\nJ13\n")),
    ("repeated node id", _file("edges.csv", _EDGES, "line 3: node id 'A'", nodes=b"id\nA\nA\nB\n", names="nodes.csv")),
    ("text for a coordinate", _file("edges.csv", _EDGES, "line 2: x 'east'", nodes=b"id,x,y\nA,east,1\nB,2,2\n", names="nodes.csv")),
    ("text in a number column", _file("edges.csv", _EDGES + b"P2,A,B,#VALUE!\n", "line 3: flow '#VALUE!'", value="flow")),
    ("infinity", _file("edges.csv", _EDGES + b"P2,A,B,inf\n", "line 3: flow 'inf'", value="flow")),
    ("number beyond all floats", _file("edges.csv", _EDGES + b"P2,A,B,1e999\n", "line 3: flow must be finite", value="flow")),
    ("decimal comma", _file("edges.csv", b"id;from;to;flow\nP1;A;B;1,234\n", "line 2: flow '1,234' can be read two ways; the decimal sign is . (--decimal)", value="flow")),
    ("mesh for a node table", _file("part.obj", b"v 0 0 0\n", "holds its own points", nodes=b"id\nA\n")),
    ("unknown suffix", _file("part.step", b"ISO-10303-21;\n", "export a mesh")),
    ("folder", _folder),
    ("device", _device),
    ("pipe", _pipe),
    ("circle of links", _circle_of_links),
    ("truncated VTU", _file("part.vtu", triangle_vtu()[:300], "the XML breaks off")),
    ("VTU with a short array", _file("part.vtu", triangle_vtu(points="0 0 0 1 0 0 0 1"), "Points promises 3 rows of 3, found 8 numbers")),
    ("VTU with a short field", _file("part.vtu", triangle_vtu(field="1 2"), "PointData head promises 3 rows of 1, found 2 numbers")),
    ("VTU with a point too high", _file("part.vtu", triangle_vtu(connectivity="0 1 3"), "cell 0 uses point 3, the piece has 3")),
    ("VTU with a word for a number", _file("part.vtu", triangle_vtu(field="1 x 3"), "found 'x'")),
    ("VTU with a wedge", _file("part.vtu", triangle_vtu(connectivity="0 1 2 0 1 2", offsets="6", types="13"), "1 of kind wedge")),
    ("VTU with a coordinate nan", _file("part.vtu", triangle_vtu(points="0 0 0 1 0 0 0 nan 0"), "coordinates must be finite, point 2")),
    ("XML that unfolds without end", _file("part.vtu", _BOMB, "must not declare a document type or entities")),
    ("truncated binary STL", _file("part.stl", _BINARY_STL, "2 facets promise 184 bytes, found 134")),
    ("truncated text STL", _file("part.stl", b"solid a\nfacet normal 0 0 1\nouter loop\nvertex 0 0 0\n", "ends inside facet 1")),
    ("OBJ with a point too high", _file("part.obj", b"v 0 0 0\nv 1 0 0\nv 0 1 0\nf 1 2 4\n", "line 4: face uses point 4, the file has 3 (numbering starts at 1)")),
    ("OBJ with point zero", _file("part.obj", b"v 0 0 0\nv 1 0 0\nv 0 1 0\n\nf 0 1 2\n", "line 5: face uses point 0")),
    ("OBJ with points only", _file("part.obj", b"v 0 0 0\nv 1 0 0\n", "found 2 points only")),
    ("truncated OFF", _file("part.off", b"OFF\n3 1 3\n0 0 0\n1 0 0\n0 1 0\n", "3 points and 1 faces are promised, found 3 lines")),
    ("truncated binary PLY", _file("part.ply", b"ply\nformat binary_little_endian 1.0\nelement vertex 3\nproperty float x\nproperty float y\nend_header\n" + b"\0" * 17, "3 records of vertex are promised, the file ends after 2")),
    ("legacy VTK polydata", _file("part.vtk", b"# vtk DataFile Version 3.0\nt\nASCII\nDATASET POLYDATA\nPOINTS 1 float\n0 0 0\n", "POLYDATA is not read")),
    ("truncated legacy VTK", _file("part.vtk", b"# vtk DataFile Version 3.0\nt\nASCII\nDATASET UNSTRUCTURED_GRID\nPOINTS 3 float\n0 0 0 1 0 0 0\n", "cannot be read as VTK")),
    ("MSH with node zero", _file("part.msh", _MSH, "element 1 uses node 0, which the file does not list")),
    ("truncated MSH", _file("part.msh", _MSH[:65], "$Nodes has no $EndNodes")),
]  # fmt: skip
