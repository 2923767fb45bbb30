"""VTU in and out, against meshio's reader and writer and against files written out by hand."""

import base64
import lzma
import struct
import tracemalloc
import zlib
from pathlib import Path

import meshio
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from dec.calculus.complex import Complex, grid
from dec.calculus.dataset import Dataset, Field
from dec.errors import InputError, OutputError
from dec.files import read, vtu_bytes, vtu_notes
from dec.files.parts import KINDS, MeshParts
from dec.files.sources import Source
from dec.files.vtu_reading import read_vtu

POINTS = np.array([[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0], [2, 0, 1], [2, 1, 0.5]], dtype=float)
MIXED = [("triangle", [[0, 1, 2]]), ("quad", [[1, 4, 5, 2]]), ("triangle", [[0, 2, 3]])]


def mesh(seed: int = 3) -> meshio.Mesh:
    rng = np.random.default_rng(seed)
    return meshio.Mesh(
        POINTS,
        MIXED,
        point_data={"head": rng.random(6), "U": rng.random((6, 3))},
        cell_data={"q": [rng.random(1), rng.random(1), rng.random(1)]},
    )


def file(piece: str, *, appended: bytes = b"", root: str = 'byte_order="LittleEndian"') -> bytes:
    head = f'<VTKFile type="UnstructuredGrid" version="1.0" {root}><UnstructuredGrid>{piece}</UnstructuredGrid>'
    return head.encode() + appended + b"</VTKFile>"


def piece(arrays: dict[str, str], n_points: int = 3, n_cells: int = 1, more: str = "") -> str:
    """Return a piece whose arrays are given as the attributes and text of their elements."""
    return (
        f'<Piece NumberOfPoints="{n_points}" NumberOfCells="{n_cells}">'
        f'<Points><DataArray type="Float64" NumberOfComponents="3" {arrays["points"]}</DataArray></Points>'
        f'<Cells><DataArray type="Int32" Name="connectivity" {arrays["connectivity"]}</DataArray>'
        f'<DataArray type="Int32" Name="offsets" {arrays["offsets"]}</DataArray>'
        f'<DataArray type="UInt8" Name="types" {arrays["types"]}</DataArray></Cells>{more}</Piece>'
    )


TRIANGLE = {
    "points": (np.array([0, 0, 1, 1, 0, 1, 0, 1, 1.5]), "f8"),
    "connectivity": (np.array([0, 1, 2]), "i4"),
    "offsets": (np.array([3]), "i4"),
    "types": (np.array([5]), "u1"),
}


def is_triangle(parts: MeshParts) -> bool:
    return parts.points.ravel().tolist() == TRIANGLE["points"][0].tolist() and parts.nodes.flat.tolist() == [0, 1, 2]


@pytest.mark.parametrize(
    "options", [{"binary": False}, {"compression": None}, {"compression": "zlib"}, {"compression": "lzma"}]
)
def test_what_meshio_writes_reads_back(options: dict[str, object], tmp_path: Path, capsys: pytest.CaptureFixture[str]):
    given_mesh = mesh()
    meshio.vtu.write(tmp_path / "t.vtu", given_mesh, **options)
    capsys.readouterr()
    surface = read(tmp_path / "t.vtu")
    close = 1e-11 if options.get("binary") is False else 0  # its text has twelve digits
    np.testing.assert_allclose(surface.complex.points, POINTS, rtol=close)
    assert [surface.complex.faces.row(k).tolist() for k in range(3)] == [[0, 1, 2], [1, 4, 5, 2], [0, 2, 3]]
    np.testing.assert_allclose(surface.field("U").values, given_mesh.point_data["U"], rtol=close)
    np.testing.assert_allclose(surface.field("q").values[:, 0], np.concatenate(given_mesh.cell_data["q"]), rtol=close)


@pytest.mark.parametrize("size", [4, 8])
@pytest.mark.parametrize("order", ["<", ">"])
@pytest.mark.parametrize("packing", ["", "zlib", "lzma"])
@pytest.mark.parametrize("form", ["binary", "binary apart", "base64", "raw"])
def test_every_way_to_store_an_array_gives_the_same_mesh(size: int, order: str, packing: str, form: str):
    """Encoded here by the letter of the format, in blocks of 24 bytes.

    The points fill three blocks, so that the length of their last one is written as 0; the others end in a short one.
    """
    kind = order + ("I" if size == 4 else "Q")
    pack = {"zlib": zlib.compress, "lzma": lzma.compress}.get(packing, bytes)

    def encoded(values: np.ndarray, dtype: str) -> tuple[bytes, bytes]:
        raw = values.astype(order + dtype).tobytes()
        if not packing:
            return struct.pack(kind, len(raw)), raw
        blocks = [pack(raw[at : at + 24]) for at in range(0, len(raw), 24)]
        head = [len(blocks), 24, len(raw) % 24, *map(len, blocks)]
        return struct.pack(f"{order}{len(head)}{kind[1]}", *head), b"".join(blocks)

    appended, elements = b"", {}
    for name, (values, dtype) in TRIANGLE.items():
        head, body = encoded(values, dtype)
        if form == "raw":
            elements[name], appended = f'format="appended" offset="{len(appended)}">', appended + head + body
            continue
        apart = form == "binary apart" or bool(packing)
        text = base64.b64encode(head) + base64.b64encode(body) if apart else base64.b64encode(head + body)
        if form == "base64":
            elements[name], appended = f'format="appended" offset="{len(appended)}">', appended + text
        else:
            elements[name] = f'format="binary">\n  {text.decode()}\n'
    name = {"zlib": "vtkZLibDataCompressor", "lzma": "vtkLZMADataCompressor"}.get(packing)
    root = f'byte_order="{"LittleEndian" if order == "<" else "BigEndian"}" header_type="UInt{8 * size}"'
    root += f' compressor="{name}"' if name else ""
    block = b'<AppendedData encoding="%s">\n _' % form.encode() + appended + b"\n</AppendedData>"
    data = file(piece(elements), root=root, appended=block if appended else b"")
    assert is_triangle(read_vtu(Source("t.vtu", data)))


def text_piece(shift: float = 0.0, more: str = "") -> str:
    points = " ".join(map(str, TRIANGLE["points"][0] + shift))
    arrays = {
        "points": f'format="ascii">{points}',
        "connectivity": 'format="ascii">0 1 2',
        "offsets": ">3",
        "types": ">5",
    }
    return piece(arrays, more=more)


def test_pieces_are_put_together_and_told():
    """The reader of meshio 5.3.5 keeps the cells of the last piece only, which is why this one is our own."""
    fields = [f'<CellData><DataArray type="Float32" Name="q">{k}.5</DataArray></CellData>' for k in (1, 2)]
    parts = read_vtu(Source("t.vtu", file(text_piece(0, fields[0]) + text_piece(4, fields[1]))))
    assert parts.nodes.flat.tolist() == [0, 1, 2, 3, 4, 5]
    assert parts.cell_data["q"].ravel().tolist() == [1.5, 2.5]
    assert parts.points[3].tolist() == [4, 4, 5]
    assert parts.notes == ("2 pieces were put together; points on their seams stay double",)


def test_pieces_with_different_fields_are_refused():
    more = '<PointData><DataArray type="Float32" Name="head">1 2 3</DataArray></PointData>'
    with pytest.raises(InputError, match="must have the same fields, head is not alike"):
        read_vtu(Source("t.vtu", file(text_piece(0, more) + text_piece(1))))


def test_an_empty_piece_is_no_fault():
    empty = '<Piece NumberOfPoints="0" NumberOfCells="0"></Piece>'
    assert is_triangle(read_vtu(Source("t.vtu", file(text_piece() + empty))))


def test_text_fields_and_ghost_marks_are_told():
    more = (
        '<PointData><Array type="String" Name="names">65 0</Array></PointData>'
        '<CellData><DataArray type="UInt8" Name="vtkGhostType">1</DataArray></CellData>'
    )
    notes = read_vtu(Source("t.vtu", file(text_piece(more=more)))).notes
    assert notes[0] == "PointData names holds no numbers and was not read"
    assert notes[1].startswith("vtkGhostType marks 1 CellData rows")


def test_whole_numbers_that_no_float_holds_are_told():
    more = f'<CellData><DataArray type="Int64" Name="key">{2**53 + 1}</DataArray></CellData>'
    assert "key holds whole numbers from 2**53 on" in read_vtu(Source("t.vtu", file(text_piece(more=more)))).notes[0]


TWIN = '<DataArray type="Int8" Name="a">1 2 3</DataArray>'


def coded(raw: bytes, promised: int) -> str:
    return base64.b64encode(struct.pack("<I", promised) + raw).decode()


@pytest.mark.parametrize(
    ("data", "words"),
    [
        (file(text_piece()).replace(b"UnstructuredGrid", b"PolyData"), "type UnstructuredGrid, found VTKFile PolyData"),
        (file(""), "must hold a Piece"),
        (
            file(text_piece(), root='compressor="vtkLZ4DataCompressor"'),
            "vtkLZ4DataCompressor are not read; save with zlib",
        ),
        (file(text_piece(), root='byte_order="PDP"'), "byte order PDP"),
        (file(text_piece()).replace(b">3<", b">4<"), "connectivity promises 4 rows of 1, found 3 numbers"),
        (file(text_piece()).replace(b">3<", b">-3<"), "the offsets of the cells must rise, they fall at cell 0"),
        (file(text_piece()).replace(b">5<", b">42<"), "kind polyhedron .first: cell 0., which is not read"),
        (file(text_piece()).replace(b">5<", b">9<"), "cell 0 is of kind quad and must have 4 points, it has 3"),
        (file(text_piece()).replace(b">5<", b">555<"), "types holds numbers from 555 to 555, beyond its type u1"),
        (file(text_piece()).replace(b'"types"', b'"kinds"'), "there is no array types"),
        (file(text_piece()).replace(b"0 1 2<", b"0 -1 2<"), "cell 0 uses point -1, the piece has 3"),
        (file(text_piece()).replace(b'OfCells="1"', b'OfCells="x"'), "NumberOfCells of a Piece must be a number"),
        (file(text_piece()).replace(b'Components="3"', b'Components="x"'), "Points has x components"),
        (file(text_piece()).replace(b'"Float64"', b'"Float16"'), "Points is of type Float16"),
        (file(text_piece()).replace(b'"ascii"', b'"hex"'), "format 'hex', it must be ascii, binary or appended"),
        (
            file(
                piece(
                    {
                        "points": f'format="binary">{coded(b"1" * 48, 72)}',
                        "connectivity": ">",
                        "offsets": ">",
                        "types": ">",
                    }
                )
            ),
            "Points promises 72 bytes, found 48",
        ),
        (
            file(piece({"points": 'format="binary">AB', "connectivity": ">", "offsets": ">", "types": ">"})),
            "Points promises 4 bytes, found 0",
        ),
        (
            file(piece({"points": 'format="binary">A*=!AAAA', "connectivity": ">", "offsets": ">", "types": ">"})),
            "Points cannot be decoded",
        ),
        (
            file(
                piece(
                    {
                        "points": f'format="binary">{coded(b"1" * 71, 71)}',
                        "connectivity": ">",
                        "offsets": ">",
                        "types": ">",
                    }
                )
            ),
            "Points has 71 bytes, no multiple of 8",
        ),
        (
            file(piece({"points": 'format="appended" offset="9">', "connectivity": ">", "offsets": ">", "types": ">"})),
            "Points starts at 9 of 0 appended bytes",
        ),
        (file(text_piece(), appended=b'<AppendedData encoding="raw">_12'), "the appended data have no end"),
        (b"<a><b></a>", "line 1: the XML breaks off"),
        (b"hello", "line 1: the XML breaks off"),
        (
            file(text_piece(more=f"<PointData>{2 * TWIN}</PointData>")),
            "two arrays named 'a'",
        ),
    ],
)
def test_a_broken_file_is_refused_with_what_was_promised_and_found(data: bytes, words: str):
    with pytest.raises(InputError, match=words):
        read_vtu(Source("t.vtu", data))


def test_a_packed_block_never_unfolds_beyond_its_promise():
    """A block of a thousand million zeros packs into a megabyte; only the promised bytes are unfolded."""
    packed = zlib.compress(b"\0" * 10_000_000)
    head = struct.pack("<4I", 1, 72, 72, len(packed))
    text = base64.b64encode(head) + base64.b64encode(packed)
    arrays = {"points": f'format="binary">{text.decode()}', "connectivity": ">0 1 2", "offsets": ">3", "types": ">5"}
    with pytest.raises(InputError, match="Points promises 72 bytes, found 73"):
        read_vtu(Source("t.vtu", file(piece(arrays), root='compressor="vtkZLibDataCompressor"')))


@pytest.mark.parametrize(
    "declaration", [b"<!DOCTYPE a>", b'<!DOCTYPE a [<!ENTITY x "y">]>', b'<!DOCTYPE a SYSTEM "file:///etc/passwd">']
)
def test_a_document_type_is_refused(declaration: bytes):
    for data in (
        declaration + file(text_piece()),
        (declaration.decode() + file(text_piece()).decode()).encode("utf-16"),
    ):
        with pytest.raises(InputError, match="must not declare a document type or entities"):
            read_vtu(Source("t.vtu", data))


def test_the_kinds_of_cells_are_those_of_meshio():
    """Numbers and node counts against meshio's own tables; 11 (voxel) is one that it does not know."""
    from meshio._common import num_nodes_per_cell
    from meshio._vtk_common import vtk_to_meshio_type

    for number, kind in KINDS.items():
        if kind.name not in ("voxel", "polygon", "pixel", "triangle7"):
            assert (vtk_to_meshio_type[number], num_nodes_per_cell[kind.name]) == (kind.name, kind.nodes)


def test_pixels_and_voxels_are_turned_into_quads_and_hexahedra(tmp_path: Path):
    """A pixel and a voxel count along the axes; a quad and a hexahedron go round. Unit square and cube."""
    axes = np.stack(np.meshgrid([0, 1], [0, 1], [0, 1], indexing="ij"), axis=-1).reshape(-1, 3)[:, ::-1] + 0.0
    for number, count in ((8, 4), (11, 8)):
        text = " ".join(map(str, axes[:count].ravel()))
        nodes = " ".join(map(str, range(count)))
        arrays = {"points": f">{text}", "connectivity": f">{nodes}", "offsets": f">{count}", "types": f">{number}"}
        (tmp_path / "t.vtu").write_bytes(file(piece(arrays, n_points=count)))
        corners = read(tmp_path / "t.vtu").complex
        loop = corners.faces.flat if number == 8 else corners.solids["hexahedron"][0]
        walk = axes[loop]
        sides = np.abs(np.diff(np.concatenate([walk[:4], walk[:1]]), axis=0)).sum(axis=1)
        assert sides.tolist() == [1, 1, 1, 1]  # along edges, never along the diagonal
        if number == 11:
            assert np.abs(walk[4:] - walk[:4]).sum(axis=1).tolist() == [1, 1, 1, 1]


COMPLEXES = {
    "edges": Complex.from_edges([0, 2, 1, 1], [1, 1, 2, 1], 4, points=np.random.default_rng(1).random((4, 3))),
    "triangles": Complex.from_faces(np.array([[0, 1, 2], [3, 2, 1]]), points=np.random.default_rng(2).random((4, 3))),
    "polygons": Complex.from_faces(
        [[0, 1, 2], [2, 1, 3, 4], [4, 3, 5, 6, 0]], points=np.random.default_rng(3).random((7, 3))
    ),
    "tetra": Complex.from_cells({"tetra": [[0, 1, 2, 3]]}, points=[[0, 0, 0], [1, 0, 0], [0, 1, 0], [0, 0, 1]]),
    "both": Complex.from_cells(
        {"tetra": [[0, 1, 2, 8]], "hexahedron": [list(range(8))]}, points=np.random.default_rng(4).random((9, 3))
    ),
    "grid": grid((3, 2, 2)),
}


@pytest.mark.parametrize("name", COMPLEXES)
def test_what_is_written_reads_back_equal_here_and_in_meshio(name: str, tmp_path: Path):
    K, rng = COMPLEXES[name], np.random.default_rng(6)
    fields = [
        Field('a <b> & "c"', "vertices", rng.random((K.counts[0], 3))),
        Field("q", "cells", rng.random((K.counts[-1], 1))),
        Field("both", "vertices", rng.random((K.counts[0], 1))),
        Field("both", "cells", rng.random((K.counts[-1], 9))),
    ]
    fields[1].values[0] = np.nan
    (tmp_path / "t.vtu").write_bytes(vtu_bytes(K, fields))
    back = read(tmp_path / "t.vtu")
    assert back.complex.counts == K.counts
    np.testing.assert_array_equal(back.complex.points, K.points)
    for kind, corners in K.solids.items():
        np.testing.assert_array_equal(back.complex.solids[kind], corners)
    for k in range(K.dim if name != "grid" else 0):  # a grid numbers its edges axis by axis
        assert (back.complex.coboundary(k) != K.coboundary(k)).nnz == 0
    for field in fields:
        np.testing.assert_array_equal(back.field(field.name, field.at).values, field.values)
    other = meshio.vtu.read(tmp_path / "t.vtu")
    np.testing.assert_array_equal(other.points, K.points)
    np.testing.assert_array_equal(np.concatenate(other.cell_data["q"]), fields[1].values[:, 0])
    assert sum(len(block.data) for block in other.cells) == K.counts[-1]


@given(st.integers(1, 40), st.sampled_from([1, 2, 3]), st.integers(0, 2**32 - 1))
def test_any_field_reads_back_bit_for_bit(n: int, width: int, seed: int):
    raw = np.random.default_rng(seed).bytes(8 * n * width)
    values = np.frombuffer(raw, dtype=float).reshape(n, width)
    points = np.arange(3.0 * n).reshape(n, 3) + 1
    parts = read_vtu(
        Source("t.vtu", vtu_bytes(Complex.from_edges([0], [n - 1], points=points), [Field("U", "vertices", values)]))
    )
    np.testing.assert_array_equal(parts.point_data["U"][:, :width], values)
    assert width != 2 or not parts.point_data["U"][:, 2].any()


def test_a_flat_mesh_is_padded_out_and_comes_back_flat_and_both_are_told(tmp_path: Path):
    K = Complex.from_faces([[0, 1, 2]], points=[[0, 0], [1, 0], [0, 1]])
    U = Field("U", "vertices", np.array([[1.0, 2], [3, 4], [5, 6]]))
    data = Dataset(K, {}, {"U": {"vertices": U}})
    assert vtu_notes(data) == (
        "VTU points have three coordinates: the missing ones were written as 0",
        "VTU vectors have three components: the third of U was written as 0",
    )
    (tmp_path / "t.vtu").write_bytes(vtu_bytes(data))
    back = read(tmp_path / "t.vtu")
    np.testing.assert_array_equal(back.complex.points, K.points)
    np.testing.assert_array_equal(back.field("U").values, U.values)
    assert back.notes == (
        "every z is exactly 0: the mesh is read as flat, with two coordinates, and so are the fields U",
    )
    assert vtu_notes(COMPLEXES["polygons"]) == ()


def test_the_same_mesh_gives_the_same_bytes_with_neither_clock_nor_version():
    K = COMPLEXES["polygons"]
    text = vtu_bytes(K)
    assert text == vtu_bytes(Complex.from_faces([[0, 1, 2], [2, 1, 3, 4], [4, 3, 5, 6, 0]], points=K.points.copy()))
    assert b"<!--" not in text


def test_what_the_format_cannot_hold_is_refused(tmp_path: Path):
    flat = Complex.from_faces([[0, 1, 2]])
    with pytest.raises(OutputError, match="needs points of one to three coordinates, the complex has none"):
        vtu_bytes(flat)
    K = COMPLEXES["triangles"]
    bad = [
        (Field("w", "edges", np.ones((5, 1))), "at vertices and cells, not at edges"),
        (Field("w", "cells", np.ones((5, 1))), r"must have 2 rows at cells, it has shape \(5, 1\)"),
        (Field("a\nb", "cells", np.ones((2, 1))), "must have a printable name"),
        (Field("", "cells", np.ones((2, 1))), "must have a printable name"),
    ]
    for field, words in bad:
        with pytest.raises(OutputError, match=words):
            vtu_bytes(K, [field])
    with pytest.raises(OutputError, match="given twice at cells"):
        vtu_bytes(K, [Field("w", "cells", np.ones((2, 1)))] * 2)
    with pytest.raises(OutputError, match="must hold edges, faces or solid cells"):
        vtu_bytes(Complex.from_edges([], [], 2, points=[[0, 0], [1, 1]]))
    (tmp_path / "e.csv").write_text("from,to,flow\nA,B,1\n")
    (tmp_path / "n.csv").write_text("id,x,y\nA,0,0\nB,1,1\n")
    net = read(tmp_path / "e.csv", tmp_path / "n.csv")
    with pytest.raises(OutputError, match="no place for column"):
        vtu_bytes(net)
    flow = Field("flow", "cells", net.column("flow", 1).numbers()[:, None])
    assert meshio.vtu.read(_saved(tmp_path, vtu_bytes(net, [flow]))).cell_data["flow"][0].tolist() == [1]


def _saved(folder: Path, data: bytes) -> Path:
    (folder / "out.vtu").write_bytes(data)
    return folder / "out.vtu"


def test_the_sample_meshes_are_those_that_meshio_reads():
    """Points and fields of every VTU file in meshes/ against meshio, value for value."""
    for path in sorted((Path(__file__).parents[2] / "meshes").glob("*.vtu")):
        ours, theirs = read_vtu(Source(path.name, path.read_bytes())), meshio.vtu.read(path)
        np.testing.assert_array_equal(ours.points, theirs.points)
        np.testing.assert_array_equal(ours.nodes.flat, np.concatenate([block.data.ravel() for block in theirs.cells]))
        for name, values in theirs.point_data.items():
            np.testing.assert_array_equal(ours.point_data[name], values.reshape(len(values), -1))
        for name, blocks in theirs.cell_data.items():
            np.testing.assert_array_equal(ours.cell_data[name], np.concatenate(blocks).reshape(len(ours.kinds), -1))


MANY = "9" * 5000


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ('OfPoints="3"', f'OfPoints="{MANY}"', "NumberOfPoints of a Piece: a number of 5000 digits"),
        ('Components="3"', f'Components="{MANY}"', "components of Points: a number of 5000 digits"),
        ('format="ascii"', f'format="appended" offset="{MANY}"', "offset of Points: a number of 5000 digits"),
    ],
)
def test_a_number_of_5000_digits_is_no_count(old: str, new: str, words: str):
    data = file(text_piece()).decode()
    assert old in data
    with pytest.raises(InputError, match=words):
        read_vtu(Source("t.vtu", data.replace(old, new).encode()))


@pytest.mark.parametrize("block", [73, 2**31, 2**63, 2**64 - 1])
@pytest.mark.parametrize("n_blocks", [1, 2])
def test_packed_blocks_that_promise_more_than_the_array_holds_are_refused_before_they_are_unpacked(
    block: int, n_blocks: int
):
    packed = zlib.compress(b"\0" * 30_000_000)
    head = struct.pack(f"<{3 + n_blocks}Q", n_blocks, block, 0, *[len(packed)] * n_blocks)
    text = base64.b64encode(head) + base64.b64encode(packed * n_blocks)
    arrays = {"points": f'format="binary">{text.decode()}', "connectivity": ">0 1 2", "offsets": ">3", "types": ">5"}
    data = file(piece(arrays), root='header_type="UInt64" compressor="vtkZLibDataCompressor"')
    tracemalloc.start()
    with pytest.raises(InputError, match=f"room for 72 bytes, its packed blocks promise {n_blocks * block};"):
        read_vtu(Source("t.vtu", data))
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert peak < 10_000_000  # the file itself is 40 to 80 kB


def test_counts_so_large_that_nothing_bounds_the_blocks_are_one_line_of_error():
    head = struct.pack("<4Q", 1, 2**63, 0, 12)
    text = base64.b64encode(head) + base64.b64encode(b"x" * 12)
    arrays = {"points": f'format="binary">{text.decode()}', "connectivity": ">", "offsets": ">", "types": ">"}
    data = file(piece(arrays, n_points=10**18 - 1), root='header_type="UInt64" compressor="vtkZLibDataCompressor"')
    with pytest.raises(InputError, match="Points cannot be decoded"):
        read_vtu(Source("t.vtu", data))
