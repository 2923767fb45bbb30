"""MSH 2.2 and 4.1, text and binary: blocks in order, groups by name, fields by number."""

import struct
from pathlib import Path

import meshio
import numpy as np
import pytest

from dec.errors import InputError
from dec.files import read
from dec.files.msh import read_msh
from dec.files.parts import KINDS
from dec.files.sources import Source

# The unit square, its corners numbered 10, 30, 20, 40 in file order, two triangles in two blocks, its left side named.
NODES = {10: (0, 0, 0), 30: (1, 0, 0), 20: (1, 1, 0.5), 40: (0, 1, 0)}
NAMES = '$PhysicalNames\n2\n1 5 "left side"\n2 7 "plate"\n$EndPhysicalNames\n'


def text_41(*, names: str = NAMES, entities: str = "", elements: str = "", more: str = "") -> bytes:
    entities = entities or "0 1 2 0\n1 0 0 0 0 1 0 1 -5 0\n1 0 0 0 1 1 0 1 7 0\n2 0 0 0 1 1 0 0 0\n"
    elements = elements or "3 3 7 9\n2 1 2 1\n8 10 30 20\n1 1 1 1\n7 40 10\n2 2 2 1\n9 10 20 40\n"
    nodes = "2 4 10 40\n2 1 0 1\n10\n0 0 0\n2 2 1 3\n30\n20\n40\n1 0 0 0 0\n1 1 0.5 0 0\n0 1 0 0 0\n"
    return (
        f"$MeshFormat\n4.1 0 8\n$EndMeshFormat\n{names}$Entities\n{entities}$EndEntities\n"
        f"$Nodes\n{nodes}$EndNodes\n$Elements\n{elements}$EndElements\n{more}"
    ).encode()


def text_22(*, elements: str = "", more: str = "", version: str = "2.2") -> bytes:
    nodes = "".join(f"{tag} {x} {y} {z}\n" for tag, (x, y, z) in NODES.items())
    elements = elements or "3\n8 2 2 7 1 10 30 20\n7 1 2 5 1 40 10\n9 2 0 10 20 40\n"
    return (
        f"$MeshFormat\n{version} 0 8\n$EndMeshFormat\n{NAMES}$Nodes\n4\n{nodes}$EndNodes\n"
        f"$Elements\n{elements}$EndElements\n{more}"
    ).encode()


def binary_22(order: str) -> bytes:
    nodes = b"".join(struct.pack(order + "i3d", tag, *point) for tag, point in NODES.items())
    rows = [(2, 1, 2, 8, 7, 1, 10, 30, 20), (1, 1, 2, 7, 5, 1, 40, 10), (2, 1, 0, 9, 10, 20, 40)]
    elements = b"".join(struct.pack(f"{order}{len(row)}i", *row) for row in rows)
    one = struct.pack(order + "i", 1)
    return (
        b"$MeshFormat\n2.2 1 8\n"
        + one
        + b"\n$EndMeshFormat\n"
        + NAMES.encode()
        + b"$Nodes\n4\n"
        + nodes
        + b"\n$EndNodes\n$Elements\n3\n"
        + elements
        + b"\n$EndElements\n"
    )


def binary_41(order: str, size: str) -> bytes:
    def pack(kinds: str, *values: float) -> bytes:
        return struct.pack(order + kinds.replace("s", size), *values)

    entities = pack("4s", 0, 1, 2, 0) + pack("i6dsis", 1, 0, 0, 0, 0, 1, 0, 1, -5, 0)
    entities += pack("i6dsis", 1, 0, 0, 0, 1, 1, 0, 1, 7, 0) + pack("i6dss", 2, 0, 0, 0, 1, 1, 0, 0, 0)
    nodes = pack("4s", 1, 4, 10, 40) + pack("3is", 2, 1, 0, 4) + pack("4s", *NODES)
    nodes += b"".join(pack("3d", *point) for point in NODES.values())
    elements = pack("4s", 3, 3, 7, 9) + pack("3is4s", 2, 1, 2, 1, 8, 10, 30, 20)
    elements += pack("3is3s", 1, 1, 1, 1, 7, 40, 10) + pack("3is4s", 2, 2, 2, 1, 9, 10, 20, 40)
    head = b"$MeshFormat\n4.1 1 " + (b"8" if size == "Q" else b"4") + b"\n" + pack("i", 1) + b"\n$EndMeshFormat\n"
    return (
        head
        + NAMES.encode()
        + b"$Entities\n"
        + entities
        + b"\n$EndEntities\n$Nodes\n"
        + nodes
        + b"\n$EndNodes\n$Elements\n"
        + elements
        + b"\n$EndElements\n"
    )


FILES = {
    "4.1 text": text_41(),
    "2.2 text": text_22(),
    "2 text": text_22(version="2"),
    "2.2 little": binary_22("<"),
    "2.2 big": binary_22(">"),
    "4.1 little": binary_41("<", "Q"),
    "4.1 big, narrow": binary_41(">", "I"),
    "4.1 text, carriage returns": text_41().replace(b"\n", b"\r\n"),
    "2.2 text, carriage returns": text_22().replace(b"\n", b"\r\n"),
}


@pytest.mark.parametrize("name", FILES)
def test_the_same_square_in_every_version_is_the_same(name: str, tmp_path: Path):
    (tmp_path / "t.msh").write_bytes(FILES[name])
    square = read(tmp_path / "t.msh")
    assert square.complex.points.tolist() == [list(point) for point in NODES.values()]
    assert square.complex.faces.flat.tolist() == [0, 1, 2, 0, 2, 3]
    side = square.regions["left side"]
    edge = side.cells[0]
    assert (side.degree, len(side.cells)) == (1, 1)
    assert {square.complex.tail[edge], square.complex.head[edge]} == {0, 3}
    assert (square.regions["plate"].degree, square.regions["plate"].cells.tolist()) == (2, [0])
    assert square.notes == ("1 line of the file names parts only; the faces make the complex",)


FIELDS = (
    '$NodeData\n1\n"T"\n1\n0.5\n3\n0\n1\n4\n40 4\n20 3\n10 1\n30 2\n$EndNodeData\n'
    '$ElementData\n1\n"U"\n1\n0\n3\n0\n3\n2\n9 1 2 3\n8 4 5 6\n$EndElementData\n'
)


@pytest.mark.parametrize("text", [text_41(more=FIELDS), text_22(more=FIELDS)])
def test_fields_are_matched_by_number_not_by_position(text: bytes, tmp_path: Path):
    """The reader of meshio 5.3.5 throws the numbers away, which is why this one is our own."""
    (tmp_path / "t.msh").write_bytes(text)
    square = read(tmp_path / "t.msh")
    assert square.field("T").values.ravel().tolist() == [1, 2, 3, 4]
    assert square.field("U").values.tolist() == [[4, 5, 6], [1, 2, 3]]
    assert not any("leaves out" in note for note in square.notes)  # the line element needs no value


def test_a_binary_field_is_matched_by_number():
    rows = b"".join(struct.pack("<id", tag, value) for tag, value in ((40, 4), (20, 3), (10, 1), (30, 2)))
    more = b'$NodeData\n1\n"T"\n1\n0.5\n3\n0\n1\n4\n' + rows + b"\n$EndNodeData\n"
    parts = read_msh(Source("t.msh", binary_22("<") + more))
    assert parts.point_data["T"].ravel().tolist() == [1, 2, 3, 4]


def test_what_a_field_leaves_out_is_nan_and_told():
    more = '$ElementData\n1\n"U"\n1\n0\n3\n0\n1\n1\n9 2.5\n$EndElementData\n'
    parts = read_msh(Source("t.msh", text_41(more=more)))
    np.testing.assert_array_equal(parts.cell_data["U"].ravel(), [np.nan, np.nan, 2.5])
    assert parts.notes == ("field U leaves out 1 of 2; nan stands there",)


def test_steps_of_one_field_get_names_of_their_own():
    more = FIELDS.replace("T", "U") + FIELDS.replace("3\n0\n", "3\n1\n").replace('"T"', '"V"')
    parts = read_msh(Source("t.msh", text_41(more=more)))
    assert sorted(parts.cell_data) == ["U (step 0)", "U (step 1)"]
    assert sorted(parts.point_data) == ["U", "V"]


def test_groups_without_a_name_are_told():
    notes = read_msh(Source("t.msh", text_41(names=""))).notes
    assert notes == ("physical groups without a name were not kept: 5, 7",)


def test_one_name_for_groups_of_two_dimensions_gives_two_regions(tmp_path: Path):
    """The reader of meshio 5.3.5 keeps the last of them only."""
    (tmp_path / "t.msh").write_bytes(text_41(names=NAMES.replace("left side", "plate")))
    assert sorted(read(tmp_path / "t.msh").regions) == ["plate (edges)", "plate (faces)"]


def test_a_group_that_is_no_part_of_the_mesh_is_refused_by_name(tmp_path: Path):
    diagonal = text_41().replace(b"7 40 10\n", b"7 40 30\n")
    (tmp_path / "t.msh").write_bytes(diagonal)
    with pytest.raises(
        InputError, match=r"t\.msh: group 'left side' holds 1 edges, 1 of them are no edges of the faces"
    ):
        read(tmp_path / "t.msh")


def test_named_faces_of_a_solid_are_found_by_their_corners(tmp_path: Path):
    """One hexahedron and one tetrahedron on top of half of it; a quadrilateral and a triangle are named."""
    cube = [(0, 0, 0), (1, 0, 0), (1, 1, 0), (0, 1, 0), (0, 0, 1), (1, 0, 1), (1, 1, 1), (0, 1, 1), (9, 9, 9)]
    text = (
        "$MeshFormat\n2.2 0 8\n$EndMeshFormat\n$PhysicalNames\n"
        '3\n2 1 "skin"\n3 2 "body"\n0 3 "probe"\n$EndPhysicalNames\n'
        "$Nodes\n9\n" + "".join(f"{k + 1} {x} {y} {z}\n" for k, (x, y, z) in enumerate(cube)) + "$EndNodes\n"
        "$Elements\n5\n1 5 2 2 1 1 2 3 4 5 6 7 8\n2 3 2 1 1 6 5 1 2\n3 4 2 2 1 5 6 7 9\n4 2 2 1 1 7 9 5\n5 15 2 3 1 9\n"
        "$EndElements\n"
    )
    (tmp_path / "t.msh").write_text(text)
    solid = read(tmp_path / "t.msh")
    K, skin = solid.complex, solid.regions["skin"]
    assert K.counts[3] == 2
    assert list(K.solids) == ["tetra", "hexahedron"]
    assert "tetrahedra are numbered before hexahedra, each in file order" in solid.notes
    assert skin.degree == 2
    assert sorted(sorted(K.faces.row(face).tolist()) for face in skin.cells) == [[0, 1, 4, 5], [4, 6, 8]]
    assert solid.regions["body"].cells.tolist() == [0, 1]
    assert (solid.regions["probe"].degree, solid.regions["probe"].cells.tolist()) == (0, [8])


def test_quadratic_elements_are_read_by_their_corners_and_told(tmp_path: Path):
    text = text_22(elements="1\n1 9 2 0 1 10 30 20 40 40 40\n")
    (tmp_path / "t.msh").write_bytes(text)
    surface = read(tmp_path / "t.msh")
    assert surface.complex.faces.flat.tolist() == [0, 1, 2]
    assert surface.notes == ("1 triangle6 cell was read by its corners; the other nodes stay as unused points",)


@pytest.mark.parametrize("kind", ["gmsh22", "gmsh"])
def test_what_meshio_writes_reads_back(kind: str, tmp_path: Path, capsys: pytest.CaptureFixture[str]):
    """In binary: the text that meshio 5.3.5 writes with NumPy 2 holds words like np.float64(0.0)."""
    rng = np.random.default_rng(2)
    points, cells = rng.random((6, 3)), [("tetra", np.array([[0, 1, 2, 3], [1, 2, 3, 5]]))]
    data = meshio.Mesh(points, cells, point_data={"U": rng.random((6, 3))}, cell_data={"q": [rng.random(2)]})
    meshio.write(tmp_path / "t.msh", data, file_format=kind, binary=True)
    capsys.readouterr()
    solid = read(tmp_path / "t.msh")
    np.testing.assert_array_equal(solid.complex.points, points)
    np.testing.assert_array_equal(solid.complex.solids["tetra"], cells[0][1])
    np.testing.assert_array_equal(solid.field("U").values, data.point_data["U"])
    np.testing.assert_array_equal(solid.field("q").values[:, 0], data.cell_data["q"][0])


def test_the_element_types_are_those_of_meshio():
    from meshio._common import num_nodes_per_cell
    from meshio.gmsh.common import _gmsh_to_meshio_type

    from dec.files.msh import _ELEMENTS

    for number, name in _ELEMENTS.items():
        assert _gmsh_to_meshio_type[number] == name
        assert {kind.nodes for kind in KINDS.values() if kind.name == name} == {num_nodes_per_cell[name]}


@pytest.mark.parametrize(
    ("text", "words"),
    [
        (b"$NOD\n1\n", r"line 1: \$NOD has no \$EndNOD"),
        (b"hello", "must begin with .MeshFormat"),
        (text_22(version="4.0"), "MSH version must be 2.2 or 4.1, found '4.0'"),
        (text_22(version="1"), "MSH version must be 2.2 or 4.1, found '1'"),
        (binary_22("<").replace(b"\1\0\0\0\n$End", b"\7\0\0\0\n$End"), "must be 1, found 07000000"),
        (
            text_22().replace(b"Nodes", b"Knots"),
            r"must have a section \$Nodes, it has MeshFormat, PhysicalNames, Knots",
        ),
        (text_22().replace(b"$Nodes\n4", b"$Nodes\n5"), r"\$Nodes promises 20 more numbers, found 16"),
        (text_22().replace(b"$Nodes\n4", b"$Nodes\nx"), "line 10: a count must stand here, found 'x'"),
        (text_22().replace(b"0.5", b"0,5"), "line 13: a number must stand here, found '0,5'"),
        (text_22().replace(b"30 1 0", b"10 1 0"), "node numbers must differ, 10 is given twice"),
        (text_22().replace(b"$Elements\n3", b"$Elements\n4"), "4 elements are promised, found 3"),
        (text_22(elements="1\n8 2 2 7 1 10 30\n"), "element 8 of kind triangle must have 8 numbers, it has 7"),
        (text_22(elements="1\n8 2\n"), "line 18: an element needs number, type and tags, found '8 2'"),
        (text_22(elements="1\n8 99 0 1\n"), "elements of type 99 are not read; save the mesh in first or second order"),
        (text_22(elements="1\n8 2 0 10 30 50\n"), "element 8 uses node 50, which the file does not list"),
        (text_22(elements="2\n8 2 0 10 30 20\n8 2 0 10 30 40\n"), "element numbers must differ, 8 is given twice"),
        (text_41().replace(b"3 3 7 9", b"3 4 7 9"), "4 elements are promised, found 3"),
        (text_41().replace(b"2 4 10 40", b"2 5 10 40"), "5 nodes are promised, found 4"),
        (text_41().replace(b"3 3 7 9", b"9 3 7 9"), r"\$Elements promises 3 more numbers, found 0"),
        (binary_41("<", "Q").replace(b"$EndElements", b"$EndElement_"), r"\$Elements has no \$EndElements"),
        (text_22(more=FIELDS.replace("40 4", "50 4")), r"\$NodeData 'T' names number 50, which is not there"),
        (text_22(more=FIELDS.replace("40 4", "20 4")), r"\$NodeData 'T' gives a number twice"),
        (text_22(more=FIELDS.replace("1\n4\n40", "1\n5\n40")), r"\$NodeData promises 10 more numbers, found 8"),
        (
            text_22(more=FIELDS.replace("0.5\n3", "0.5\nx")),
            r"line 23: \$NodeData must begin with names, times and counts",
        ),
        (text_22(elements="1\n8 6 0 10 20 30 40 10 20\n"), "found 1 of kind wedge; split them into tetrahedra"),
    ],
)
def test_a_broken_file_is_refused_with_its_place(text: bytes, words: str, tmp_path: Path):
    (tmp_path / "t.msh").write_bytes(text)
    with pytest.raises(InputError, match=words):
        read(tmp_path / "t.msh")


@pytest.mark.parametrize(
    ("nodes", "element"),
    [("2.7 1 0 0", "1 2 2 1 1 1 2 3"), ("2 1 0 0", "1 2 2 1 1 1 3 2.5"), ("2 1 0 0", "1 2.9 2 1 1 1 2 3")],
)
def test_a_number_that_must_be_whole_is_not_cut_to_one(nodes: str, element: str):
    text = (
        "$MeshFormat\n2.2 0 8\n$EndMeshFormat\n$Nodes\n3\n1 0 0 0\n" + nodes + "\n3 0 1 0\n$EndNodes\n"
        "$Elements\n1\n" + element + "\n$EndElements\n"
    )
    with pytest.raises(InputError, match="must be a whole number"):
        read_msh(Source("part.msh", text.encode()))


def test_a_count_of_five_thousand_digits_is_one_clear_error(tmp_path):
    path = tmp_path / "m.msh"
    path.write_bytes(text_22().replace(b"$Nodes\n4\n", b"$Nodes\n" + b"9" * 5000 + b"\n"))
    with pytest.raises(InputError, match="digits"):
        read(path)
