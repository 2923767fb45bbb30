"""OBJ, OFF and PLY against parsers written out plainly here, and against meshio where it can read them."""

import struct
from pathlib import Path

import meshio
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from dec.errors import InputError
from dec.files import read
from dec.files.obj import read_obj
from dec.files.off import read_off
from dec.files.parts import MeshParts
from dec.files.ply import read_ply
from dec.files.sources import Source

COORDINATE = st.floats(allow_nan=False, allow_infinity=False)
SURFACES = st.integers(3, 7).flatmap(
    lambda n: st.tuples(
        st.lists(st.tuples(COORDINATE, COORDINATE, COORDINATE), min_size=n, max_size=n),
        st.lists(st.lists(st.integers(0, n - 1), min_size=3, max_size=6), min_size=1, max_size=6),
    )
)


def loops(parts: MeshParts) -> list[list[int]]:
    return [parts.nodes.row(k).tolist() for k in range(len(parts.nodes))]


def ply_header(form: str, n_points: int, n_faces: int, count: str = "uchar", index: str = "int", more: str = "") -> str:
    return (
        f"ply\nformat {form} 1.0\ncomment c\nelement vertex {n_points}\nproperty double x\nproperty double y\n"
        f"property double z\nelement face {n_faces}\nproperty list {count} {index} vertex_index\n{more}end_header\n"
    )


@given(SURFACES)
def test_an_off_file_reads_back_exactly(surface):
    points, faces = surface
    text = f"OFF\n# made here\n{len(points)} {len(faces)} 0\n"
    text += "".join(" ".join(map(repr, point)) + "\n" for point in points)
    text += "".join(f"{len(face)} {' '.join(map(str, face))} 255 0 0\n\n" for face in faces)
    parts = read_off(Source("t.off", text.encode()))
    assert parts.points.tolist() == [list(point) for point in points]
    assert loops(parts) == faces


@given(SURFACES, st.data())
def test_an_obj_file_reads_back_exactly_forwards_and_backwards(surface, data: st.DataObject):
    """Each corner is written as a number from 1 or back from the last point, plain or with texture and normal."""
    points, faces = surface
    form = st.sampled_from(["{}", "{}/1", "{}/1/2", "{}//2"])
    text = "mtllib a/b.mtl\n" + "".join("v " + " ".join(map(repr, point)) + "\nvn 0 0 1\n" for point in points)
    for face in faces:
        numbers = [v + 1 if data.draw(st.booleans()) else v - len(points) for v in face]
        text += "f " + " ".join(data.draw(form).format(v) for v in numbers) + "\nusemtl c/d\n"
    parts = read_obj(Source("t.obj", text.encode()))
    assert parts.points.tolist() == [list(point) for point in points]
    assert loops(parts) == faces


@given(
    SURFACES, st.sampled_from(["ascii", "binary_little_endian", "binary_big_endian"]), st.sampled_from(["uchar", "int"])
)
def test_a_ply_file_reads_back_exactly_with_its_face_values(surface, form: str, count: str):
    points, faces = surface
    head = ply_header(form, len(points), len(faces), count, more="property float q\n").encode()
    if form == "ascii":
        body = "".join(" ".join(map(repr, point)) + "\n" for point in points)
        body += "".join(f"{len(face)} {' '.join(map(str, face))} {k}.5\n" for k, face in enumerate(faces))
        raw = body.encode()
    else:
        order, length = "<>"[form == "binary_big_endian"], "B" if count == "uchar" else "i"
        raw = b"".join(struct.pack(order + "3d", *point) for point in points)
        raw += b"".join(
            struct.pack(f"{order}{length}{len(face)}if", len(face), *face, k + 0.5) for k, face in enumerate(faces)
        )
    parts = read_ply(Source("t.ply", head + raw))
    assert parts.points.tolist() == [list(point) for point in points]
    assert loops(parts) == faces
    assert parts.cell_data["q"].ravel().tolist() == [k + 0.5 for k in range(len(faces))]


def test_a_negative_obj_index_counts_from_the_points_above_its_line():
    text = b"v 0 0 0\nv 1 0 0\nv 0 1 0\nf -3 -2 -1\nv 9 9 9\nf -1 -2 -3\n"
    assert loops(read_obj(Source("t.obj", text))) == [[0, 1, 2], [3, 2, 1]]


def test_obj_lines_may_go_on_after_a_backslash_and_hold_comments():
    text = b"v 0 0 0 # first\nv 1 0 \\\n0\n  v 0 1 0\nf 1 \\\r\n2 3 # f 9 9 9\n#f 1 1 1\n"
    parts = read_obj(Source("t.obj", text))
    assert parts.points.tolist() == [[0, 0, 0], [1, 0, 0], [0, 1, 0]]
    assert loops(parts) == [[0, 1, 2]]


def test_obj_groups_and_objects_are_regions(tmp_path: Path):
    faces = "f 1 2 3\n"
    text = "v 0 0 0\nv 1 0 0\nv 0 1 1\no the duct\ng in wall\n" + faces + "g out\n" + faces * 2 + "o lid\ng\n" + faces
    (tmp_path / "t.obj").write_text(text)
    regions = {name: region.cells.tolist() for name, region in read(tmp_path / "t.obj").regions.items()}
    assert regions == {"the duct": [0, 1, 2], "in": [0], "wall": [0], "out": [1, 2], "lid": [3]}


def test_an_obj_file_of_lines_is_a_graph(tmp_path: Path):
    (tmp_path / "t.obj").write_text("v 0 0 0\nv 1 0 0\nv 0 1 1\nl 1 2 3\nl -1 1\n")
    graph = read(tmp_path / "t.obj").complex
    assert (graph.tail.tolist(), graph.head.tolist()) == ([0, 1, 2], [1, 2, 0])


def test_lines_beside_faces_are_told(tmp_path: Path):
    (tmp_path / "t.obj").write_text("v 0 0 0\nv 1 0 0\nv 0 1 1\nf 1 2 3\nl 1 2\n")
    surface = read(tmp_path / "t.obj")
    assert surface.complex.counts == (3, 3, 1)
    assert surface.notes == ("1 line of the file names parts only; the faces make the complex",)


def test_a_ply_file_of_edges_is_a_graph_with_fields(tmp_path: Path):
    text = (
        "ply\nformat ascii 1.0\nelement vertex 2\nproperty float x\nproperty float y\nproperty uchar kind\n"
        "element edge 1\nproperty int vertex1\nproperty int vertex2\nproperty float flow\nend_header\n"
        "0 0 7\n1 0.5 8\n1 0 2.5\n"
    )
    (tmp_path / "t.ply").write_text(text)
    graph = read(tmp_path / "t.ply")
    assert (graph.complex.tail.tolist(), graph.complex.head.tolist()) == ([1], [0])
    assert graph.complex.points.tolist() == [[0, 0], [1, 0.5]]
    assert graph.field("flow").values.tolist() == [[2.5]]
    assert graph.field("kind").values.ravel().tolist() == [7, 8]


def test_the_corner_count_of_a_binary_face_is_read_without_a_sign():
    head = ply_header("binary_little_endian", 1, 2, count="char").encode()
    raw = struct.pack("<3d", 0, 0, 0) + 2 * (b"\xc8" + struct.pack("<200i", *[0] * 200))
    assert read_ply(Source("t.ply", head + raw)).nodes.lengths.tolist() == [200, 200]


def test_elements_and_lists_of_ply_that_are_not_read_are_told():
    text = ply_header("ascii", 3, 1, more="property list uchar float uv\nelement camera 1\nproperty int a\n")
    parts = read_ply(Source("t.ply", (text + "0 0 0\n1 0 0\n0 1 0\n3 0 1 2 2 0.5 0.5\n1\n").encode()))
    assert loops(parts) == [[0, 1, 2]]
    assert parts.notes == ("element camera was not read", "list uv of the faces was not read")


def test_ply_elements_may_come_in_any_order():
    text = (
        "ply\r\nformat ascii 1.0\r\nelement face 1\r\nproperty list uchar int vertex_indices\r\n"
        "element vertex 3\r\nproperty int z\r\nproperty int y\r\nproperty int x\r\nend_header\r\n"
        "3 2 1 0\r\n1 2 3\r\n4 5 6\r\n7 8 9\r\n"
    )
    parts = read_ply(Source("t.ply", text.encode()))
    assert parts.points.tolist() == [[3, 2, 1], [6, 5, 4], [9, 8, 7]]
    assert loops(parts) == [[2, 1, 0]]


@pytest.mark.parametrize(
    ("name", "options"), [("t.obj", {}), ("t.off", {}), ("t.ply", {"binary": True}), ("t.ply", {"binary": False})]
)
def test_what_meshio_writes_reads_back(name: str, options: dict[str, bool], tmp_path: Path):
    points, triangles = np.random.default_rng(5).random((9, 3)), np.array([[0, 1, 2], [2, 1, 8], [3, 7, 4]])
    meshio.Mesh(points, [("triangle", triangles)]).write(tmp_path / name, **options)
    surface = read(tmp_path / name).complex
    np.testing.assert_array_equal(surface.faces.flat.reshape(-1, 3), triangles)
    np.testing.assert_allclose(surface.points, points, atol=5e-17 if name == "t.ply" else 1e-15)


@pytest.mark.parametrize(
    ("reader", "text", "words"),
    [
        (read_obj, b"v 0 0\n", "line 1: a point needs 3 numbers"),
        (read_obj, b"v 0 0 0\nf 1 1\n", "line 2: at least 3 points must be named, found 'f 1 1'"),
        (read_obj, b"v 0 0 0\nf 1 1 /1\n", "line 2: a number must stand here, found '/1'"),
        (read_obj, b"v 0 0 0\nf 1 1 1.5\n", "line 2: the number of a point must be a whole number, found 1.5"),
        (read_obj, b"v 0 0 0\n\nf 1 1 -2\n", "line 3: face uses point -2, the file has 1"),
        (read_obj, b"v 0 0 0\nl 1 2\n", "line 2: line uses point 2, the file has 1"),
        (read_obj, b"v 0 0 0\nsurf 0 1\n", r"line 2: free-form geometry \(surf\) is no mesh"),
        (read_off, b"COFF\n1 1 1\n", "must begin with the word OFF and hold text, found 'COFF'"),
        (read_off, b"OFF BINARY\n", "hold text"),
        (read_off, b"# only a comment\n", "must begin with the word OFF"),
        (read_off, b"OFF\n", "ends after the heading"),
        (read_off, b"OFF\n1 x 0\n", "line 2: the numbers of points and faces must stand here, found '1 x 0'"),
        (read_off, b"OFF 1 1 0\n0 0 0\n3 0 0\n", "line 3: a face must be a count and that many points"),
        (
            read_off,
            b"OFF 1 1 0\n0 0 0\n3 0 0 1\n",
            r"line 3: face uses point 1, the file has 1 \(numbering starts at 0\)",
        ),
        (read_off, b"OFF 1 1 0\n0 0 0\n3 0 0 0.5\n", "line 3: the number of a point must be a whole number"),
        (read_ply, b"plx\n", "must begin with the line ply"),
        (read_ply, b"ply\nelement vertex 1\nend_header\n", "must give the format"),
        (read_ply, b"ply\nformat ascii 1.0\nhello\nend_header\n", "line 3: .* found 'hello'"),
        (
            read_ply,
            b"ply\nformat ascii 1.0\nelement vertex 1\nproperty real x\nend_header\n",
            "line 4: a property must be",
        ),
        (
            read_ply,
            b"ply\nformat ascii 1.0\nelement vertex 1\nproperty int x\nend_header\n1\n",
            "must have properties x and y",
        ),
        (read_ply, ply_header("ascii", 1, 1).encode() + b"0 0 0\n3 0 0\n", "line 12: vertex_index must stand next"),
        (read_ply, ply_header("ascii", 1, 1).encode() + b"0 0 0\n3 0 0 0 7\n", "line 12: nothing more must stand next"),
        (
            read_ply,
            ply_header("ascii", 1, 1).encode() + b"0 0 0\n",
            "1 records of face are promised, the file ends after 0",
        ),
        (read_ply, ply_header("ascii", 1, 1).encode() + b"0 0 0\n3 0 0 1\n", "face 0 uses point 1, the file has 1"),
        (read_ply, ply_header("ascii", 1, 1).encode() + b"0 0 0\n2 0 0\n", "at least three corners, has 2"),
        (read_ply, ply_header("ascii", 1, 0).encode() + b"0 0 0\n", "must hold faces"),
        (read_ply, ply_header("binary_big_endian", 10**9, 1).encode() + b"\0" * 50, "1000000000 records of vertex"),
        (
            read_ply,
            ply_header("ascii", 1, 0).replace("face 0", "tristrips 1").encode() + b"0 0 0\n3 0 0 0\n",
            "triangle strips",
        ),
    ],
)
def test_a_file_that_leaves_the_format_is_refused_with_its_place(reader, text: bytes, words: str):
    with pytest.raises(InputError, match=words):
        reader(Source("t.xyz", text))


def test_the_moebius_strip_and_the_torus_are_what_their_table_says():
    """Counts from meshes/README.md; one border and no orientation, and none and an orientation."""
    folder = Path(__file__).parents[2] / "meshes"
    strip, torus = read(folder / "moebius.obj").complex, read(folder / "torus.off").complex
    assert (strip.counts, torus.counts) == ((150, 270, 120), (288, 864, 576))
    assert (strip.is_orientable, torus.is_orientable) == (False, True)
    assert (len(strip.boundary_loops()), len(torus.boundary_loops())) == (1, 0)


SQUARE = b"v 0 0 0\nv 1 0 0\nv 0 1 0\nf 1 2 3\n"


@pytest.mark.parametrize(
    ("lines", "notes"),
    [
        (b"vt 0 0\nvn 0 0 1\ns off\nusemtl red\nmtllib a.mtl\nbevel on\n", ()),
        (b"fo 1 2 3\n\nfo 1 2 3\n", ("2 lines with fo not read (first: line 5)",)),
        (
            b"p 1\n# p 1\nhello\n",
            ("1 line with p not read (first: line 5)", "1 line with hello not read (first: line 7)"),
        ),
        (b"v 1 1 1 1\nv 2 1 1 .5 .5 .5\n", ("1 line with the colour of a point, colour not read (first: line 6)",)),
        (b"\xff\x1b[2J 1\n", ("1 line with \ufffd\\x1b[2J not read (first: line 5)",)),
    ],
)
def test_obj_statements_that_are_not_read_are_told_unless_they_only_say_how_it_looks(lines: bytes, notes):
    assert read_obj(Source("t.obj", SQUARE + lines)).notes == notes


def test_many_unknown_obj_words_are_told_in_few_notes():
    lines = "".join(f"word{k} 1\n" for k in range(3000)).encode()
    notes = read_obj(Source("t.obj", SQUARE + lines)).notes
    assert len(notes) == 9
    assert notes[-1] == "2992 lines with other words not read (first: line 13)"


@pytest.mark.parametrize("line", [b"F 1 2 3\n", b"V 2 2 2\n", b"  L 1 2\n", b"G wall\n", b"O part\n"])
def test_an_obj_statement_in_capitals_is_refused_and_not_left_out(line: bytes):
    small = line.split()[0].lower().decode()
    with pytest.raises(InputError, match=f"line 5: a statement must be written in small letters.*; write {small}$"):
        read_obj(Source("t.obj", SQUARE + line))


TRIANGLE = b"0 0 0\n1 0 0\n0 1 0\n3 0 1 2\n"


def test_what_follows_the_last_promised_record_of_a_ply_file_is_told():
    head = ply_header("ascii", 3, 1).encode()
    said = "after the last promised record not read; the header may promise too few"
    assert read_ply(Source("t.ply", head + TRIANGLE + b"\n3 2 1 0\n\n")).notes == (f"1 line {said}",)
    assert read_ply(Source("t.ply", head + TRIANGLE + b" \n\r\n")).notes == ()
    head = ply_header("binary_big_endian", 3, 1).encode()
    body = struct.pack(">9d", *range(9)) + struct.pack(">Biii", 3, 0, 1, 2)
    assert read_ply(Source("t.ply", head + body + body)).notes == (f"85 bytes {said}",)
    assert read_ply(Source("t.ply", head + body + b"\r\n")).notes == ()


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ("vertex 3", "vertex " + "3" * 5000, r"line 4: a number of 5000 digits \(333333333333\.\.\.\) is no count"),
        ("face 1", "face " + "9" * 19, "line 8: a number of 19 digits"),
        ("double z", "double y", "line 7: property y stands there a second time"),
        ("element face 1", "element vertex 1", "line 8: element vertex stands there a second time"),
        ("uchar int", "uchar float", "vertex_index must be of a type of whole numbers, such as int; found float64"),
    ],
)
def test_a_ply_header_that_promises_what_cannot_be_is_refused(old: str, new: str, words: str):
    text = ply_header("ascii", 3, 1)
    assert old in text
    with pytest.raises(InputError, match=words):
        read_ply(Source("t.ply", text.replace(old, new).encode() + TRIANGLE))


@pytest.mark.parametrize(
    ("kind", "words"),
    [("float", "vertex2 must be of a type of whole numbers"), ("list uchar int", "must be one number")],
)
def test_a_ply_edge_must_end_at_whole_numbers(kind: str, words: str):
    head = (
        "ply\nformat ascii 1.0\nelement vertex 2\nproperty float x\nproperty float y\n"
        f"element edge 1\nproperty int vertex1\nproperty {kind} vertex2\nend_header\n0 0\n1 0\n"
    )
    with pytest.raises(InputError, match=words):
        read_ply(Source("t.ply", (head + ("0 nan\n" if kind == "float" else "0 1 1\n")).encode()))
