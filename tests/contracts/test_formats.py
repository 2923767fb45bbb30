"""One walk over all mesh formats: what the table says a format can carry, it carries; what is broken, it refuses.

The files are written here by hand or by meshio, never by our own writer.
"""

import random
from collections.abc import Callable, Iterator
from pathlib import Path

import meshio
import numpy as np
import pytest

from dec.errors import InputError
from dec.files import read
from dec.files.formats import MESH_FORMATS, TABLE_SUFFIXES, WAYS_OUT

POINTS = np.array(
    [[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0.5], [0, 0, 1], [1, 0, 1], [1, 1, 1], [0, 1, 1.5], [2, 2, 2]], float
)
CELLS = {
    "edges": ("line", [[0, 1], [2, 1]]),
    "triangles": ("triangle", [[0, 1, 2], [3, 2, 1]]),
    "quads": ("quad", [[0, 1, 2, 3], [4, 7, 6, 5]]),
    "polygons": ("polygon", [[0, 1, 2, 6, 7], [5, 4, 3, 2, 1]]),
    "tetrahedra": ("tetra", [[0, 1, 2, 4], [1, 2, 4, 8]]),
    "hexahedra": ("hexahedron", [[0, 1, 2, 3, 4, 5, 6, 7]]),
}
CASES = [(suffix, cells) for suffix, form in MESH_FORMATS.items() for cells in sorted(form.cells)]


def _lines(rows: list[list[float]], start: str = "") -> str:
    return "".join(start + " ".join(map(repr, row)) + "\n" for row in rows)


def _obj(path: Path, kind: str, cells: list[list[int]]) -> None:
    word = "l " if kind == "line" else "f "
    path.write_text(_lines(POINTS.tolist(), "v ") + _lines([[v + 1 for v in cell] for cell in cells], word))


def _off(path: Path, _: str, cells: list[list[int]]) -> None:
    body = _lines(POINTS.tolist()) + _lines([[len(cell), *cell] for cell in cells])
    path.write_text(f"OFF\n{len(POINTS)} {len(cells)} 0\n{body}")


def _stl(path: Path, _: str, cells: list[list[int]]) -> None:
    meshio.Mesh(POINTS, [("triangle", cells)]).write(path, binary=True)


def _fields(n_cells: int) -> tuple[dict[str, np.ndarray], dict[str, np.ndarray]]:
    return {"head": np.arange(9) / 7, "U": np.random.default_rng(7).random((9, 3))}, {"q": np.arange(n_cells) / 3}


def _through_meshio(path: Path, kind: str, cells: list[list[int]]) -> None:
    point_data, cell_data = _fields(len(cells))
    options = {".vtu": {"compression": "zlib"}, ".vtk": {"file_format": "vtk42"}, ".msh": {"file_format": "gmsh22"}}
    mesh = meshio.Mesh(POINTS, [(kind, np.array(cells))], point_data=point_data, cell_data={"q": [cell_data["q"]]})
    meshio.write(path, mesh, **options[path.suffix])


def _ply(path: Path, kind: str, cells: list[list[int]]) -> None:
    point_data, cell_data = _fields(len(cells))
    table = np.column_stack([POINTS, point_data["head"], point_data["U"]])
    names = ["x", "y", "z", "head", "U_x", "U_y", "U_z"]
    shape = "element face {}\nproperty list uchar int vertex_indices\n"
    rows: list[list[float]] = [[len(cell), *cell, q] for cell, q in zip(cells, cell_data["q"].tolist(), strict=True)]
    if kind == "line":
        shape = "element edge {}\nproperty int vertex1\nproperty int vertex2\n"
        rows = [row[1:] for row in rows]
    head = "ply\nformat ascii 1.0\nelement vertex 9\n" + "".join(f"property double {name}\n" for name in names)
    path.write_text(
        head + shape.format(len(cells)) + "property double q\nend_header\n" + _lines(table.tolist()) + _lines(rows)
    )


WRITERS: dict[str, Callable[[Path, str, list[list[int]]], None]] = {
    ".obj": _obj,
    ".off": _off,
    ".stl": _stl,
    ".ply": _ply,
    ".vtu": _through_meshio,
    ".vtk": _through_meshio,
    ".msh": _through_meshio,
}


def _written(suffix: str, cells: str, folder: Path) -> Path:
    path = folder / f"part{suffix}"
    if suffix == ".vtk" and cells == "polygons":
        kind, loops = CELLS[cells]
        meshio.write(path, meshio.Mesh(POINTS, [(kind, np.array(loops))]), file_format="vtk", binary=False)
        return path
    WRITERS[suffix](path, *CELLS[cells])
    return path


def test_every_format_has_a_sample_here():
    assert set(WRITERS) == set(MESH_FORMATS)
    assert not set(MESH_FORMATS) & (set(TABLE_SUFFIXES) | set(WAYS_OUT))


@pytest.mark.parametrize(("suffix", "cells"), CASES)
def test_a_format_carries_the_cells_it_lists_in_order_and_as_turned(suffix: str, cells: str, tmp_path: Path, capsys):
    part = read(_written(suffix, cells, tmp_path))
    capsys.readouterr()
    K, expected = part.complex, CELLS[cells][1]
    if cells == "edges":
        got = np.stack([K.tail, K.head], axis=1).tolist()
    elif cells in ("tetrahedra", "hexahedra"):
        got = next(iter(K.solids.values())).tolist()
    else:
        got = [K.faces.row(k).tolist() for k in range(len(K.faces))]
    if suffix == ".stl":  # it has no numbers of its own
        np.testing.assert_array_equal(K.points[np.array(got)], POINTS[np.array(expected)])
    else:
        assert got == expected
        np.testing.assert_array_equal(K.points, POINTS)
    assert K.counts[-1] == len(expected)
    assert (part.inputs[0].name, part.inputs[0].bytes) == (f"part{suffix}", (tmp_path / f"part{suffix}").stat().st_size)


@pytest.mark.parametrize(
    ("suffix", "cells"), [case for case in CASES if MESH_FORMATS[case[0]].fields and case != (".vtk", "polygons")]
)
def test_a_format_carries_the_fields_it_lists_exactly(suffix: str, cells: str, tmp_path: Path, capsys):
    part = read(_written(suffix, cells, tmp_path))
    capsys.readouterr()
    point_data, cell_data = _fields(part.complex.counts[-1])
    np.testing.assert_array_equal(part.field("head", "vertices").values[:, 0], point_data["head"])
    np.testing.assert_array_equal(part.field("q", "cells").values[:, 0], cell_data["q"])
    vectors = [part.field(name).values for name in ("U", "U_x", "U_y", "U_z") if name in part.fields]
    np.testing.assert_array_equal(np.concatenate(vectors, axis=1), point_data["U"])


@pytest.mark.parametrize("suffix", [s for s, form in MESH_FORMATS.items() if not form.fields])
def test_a_format_that_lists_no_fields_gives_none(suffix: str, tmp_path: Path):
    assert read(_written(suffix, "triangles", tmp_path)).fields == {}


@pytest.mark.parametrize("suffix", MESH_FORMATS)
def test_the_suffix_may_be_written_in_capitals(suffix: str, tmp_path: Path, capsys):
    path = _written(suffix, "triangles", tmp_path)
    capsys.readouterr()
    assert read(path.rename(tmp_path / f"PART{suffix.upper()}")).complex.counts[2] == 2


def _damaged(data: bytes, count: int) -> Iterator[bytes]:
    draw = random.Random(1)
    letters = b'0129-. \n"abc;,<>/\xff\x00e$'
    for _ in range(count):
        copy, at = bytearray(data), draw.randrange(len(data))
        length = draw.randint(1, 30)
        match draw.randrange(4):
            case 0:
                del copy[max(at, 1) :]
            case 1:
                copy[at] = draw.choice(letters)
            case 2:
                del copy[at : at + length]
            case 3:
                copy[at:at] = copy[at : at + length]
        yield bytes(copy) or b" "


@pytest.mark.parametrize(("suffix", "cells"), CASES)
def test_a_damaged_file_is_read_or_refused_in_one_line_and_nothing_else(suffix: str, cells: str, tmp_path: Path, capfd):
    """Cut short, one byte changed, a stretch taken out or doubled: 150 times each, always the same ones."""
    path = _written(suffix, cells, tmp_path)
    capfd.readouterr()
    refused = 0
    for data in _damaged(path.read_bytes(), 150):
        path.write_bytes(data)
        try:
            read(path)
        except InputError as error:
            refused += 1
            assert str(error).isprintable()  # noqa: PT017
            assert path.name in str(error)  # noqa: PT017
    assert refused > 20
    assert capfd.readouterr() == ("", "")
