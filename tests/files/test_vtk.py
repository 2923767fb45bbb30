"""Legacy VTK through meshio, with its faults fenced off."""

import re
import sys
import tempfile
import threading
import tracemalloc
import warnings
from pathlib import Path

import meshio
import numpy as np
import pytest

from dec.errors import InputError
from dec.files import read
from dec.files.meshio_fence import fenced
from dec.files.sources import Source
from dec.files.vtk import read_vtk

HEAD = "# vtk DataFile Version 3.0\nmade here\nASCII\nDATASET "
SQUARE = HEAD + (
    "UNSTRUCTURED_GRID\nPOINTS 4 float\n0 0 0 1 0 0 1 1 0.5 0 1 0\nCELLS 2 8\n3 0 1 2\n3 0 2 3\nCELL_TYPES 2\n5\n5\n"
    "POINT_DATA 4\nVECTORS wind%20speed float\n1 0 0 2 0 0 3 0 0 4 0 0\n"
    "CELL_DATA 2\nSCALARS q double\nLOOKUP_TABLE default\n1.5 2.5\n"
)


def write(folder: Path, text: str) -> Path:
    (folder / "t.vtk").write_text(text)
    return folder / "t.vtk"


def test_fields_are_read_with_decoded_names(tmp_path: Path):
    square = read(write(tmp_path, SQUARE))
    assert square.field("wind speed").values[:, 0].tolist() == [1, 2, 3, 4]
    assert square.field("q").values.ravel().tolist() == [1.5, 2.5]
    assert square.notes == ()


@pytest.mark.parametrize("kind", ["vtk42", "vtk51"])
@pytest.mark.parametrize("is_binary", [True, False])
def test_big_endian_and_32_bit_arrays_become_native_and_wide(kind: str, is_binary: bool, tmp_path: Path):
    points = np.array([[0, 0, 0], [1, 0, 0], [1, 1, 0.5], [0, 1, 0]], dtype=np.float32)
    head = np.arange(4, dtype=np.float32) / 3
    mesh = meshio.Mesh(
        points,
        [("triangle", np.array([[0, 1, 2]], np.int32)), ("quad", np.array([[0, 1, 2, 3]], np.int32))],
        point_data={"head": head},
    )
    meshio.write(tmp_path / "t.vtk", mesh, file_format=kind, binary=is_binary)
    surface = read(tmp_path / "t.vtk")
    values = surface.field("head").values
    assert (surface.complex.points.dtype, values.dtype, surface.complex.faces.flat.dtype) == ("=f8", "=f8", "=i8")
    np.testing.assert_array_equal(surface.complex.points, points)
    np.testing.assert_allclose(values[:, 0], head, rtol=0 if is_binary else 1e-7)


def test_a_structured_grid_is_hexahedra(tmp_path: Path):
    text = (
        HEAD
        + "STRUCTURED_POINTS\nDIMENSIONS 3 2 2\nORIGIN 0 0 0\nSPACING 1 1 1\n"
        + "POINT_DATA 12\nSCALARS T float\nLOOKUP_TABLE default\n"
    )
    block = read(write(tmp_path, text + " ".join(map(str, range(12))) + "\n"))
    assert block.complex.counts == (12, 20, 11, 2)
    x, y, z = block.complex.points.T
    np.testing.assert_array_equal(block.field("T").values[:, 0], x + 3 * y + 6 * z)


def test_polydata_which_ends_meshio_is_an_input_error(tmp_path: Path):
    text = HEAD + "POLYDATA\nPOINTS 3 float\n0 0 0 1 0 0 0 1 0\nPOLYGONS 1 4\n3 0 1 2\n"
    path = write(tmp_path, text)
    with pytest.raises(SystemExit):  # the fault that the fence is for
        meshio.read(path)
    with pytest.raises(InputError, match=r"t\.vtk: POLYDATA is not read; save it as VTU"):
        read(path)


@pytest.mark.parametrize(
    ("change", "words"),
    [
        (("CELL_TYPES 2\n5\n5\n", "CELL_TYPES 2\n5\n9\n"), r"t\.vtk cannot be read as VTK"),
        (("CELL_TYPES 2\n5\n5\n", "CELL_TYPES 1\n5\n"), "rows of cell data|cannot be read"),
        (("CELL_DATA 2", "CELL_DATA 3"), "cannot be read as VTK|rows of cell data"),
        (("POINT_DATA 4", "POINT_DATA 5"), "cannot be read as VTK|rows of point data"),
        (("3 0 2 3", "3 0 2 4"), r"t\.vtk: cell 1 uses point 4, the file has 4"),
        (("1.5 2.5", "1.5 x"), "cannot be read as VTK|break off"),
        (("0 1 0\n", "0 1 nan\n"), "coordinates must be finite, point 3"),
        ((SQUARE[:26], "# vtk datafile version 3.0"), "must begin with # vtk DataFile"),
        (("DATASET UNSTRUCTURED_GRID", ""), "have a DATASET line"),
        (("CELL_TYPES 2\n5\n5\n", "CELL_TYPES 2\n5\n4\n"), "cannot be read as VTK|promised"),
    ],
)
def test_a_broken_file_is_one_line_of_error(change: tuple[str, str], words: str, tmp_path: Path, capfd):
    text = SQUARE.replace(*change)
    assert text != SQUARE
    with pytest.raises(InputError, match=words) as caught:
        read(write(tmp_path, text))
    assert str(caught.value).isprintable()
    assert capfd.readouterr() == ("", "")


class _Reader:
    """Stands for a meshio module whose reader does what a test asks for."""

    def __init__(self, act):
        self.act = act

    def read(self, path: Path) -> object:
        assert path.read_bytes() == b"data"
        return self.act()


def _exit() -> None:
    print("Error: no")  # noqa: T201
    sys.exit(1)


def _say(text: str, category: type[Warning]) -> None:
    # as NumPy warns from within: in the name of the module that called it
    warnings.warn_explicit(text, category, "_vtk_42.py", 1, module="meshio.vtk._vtk_42")


def _warn() -> str:
    _say("odd\n value", RuntimeWarning)
    _say("old", DeprecationWarning)
    print("Warning:\n skipped", file=sys.stderr)  # noqa: T201
    return "a mesh"


def _stop() -> str:
    _say("string or file could not be read to its end due to unmatched data", DeprecationWarning)
    return "half a mesh"


def _interrupt() -> None:
    raise KeyboardInterrupt


def test_whatever_a_reader_does_is_a_note_or_one_input_error(monkeypatch: pytest.MonkeyPatch, capfd):
    source = Source("t.vtk", b"data")
    for act, words in (
        (_exit, "t.vtk cannot be read as VTK .1.; save it"),
        (lambda: {}[0], "(0)"),
        (_stop, "break off"),
    ):
        monkeypatch.setattr(meshio, "vtk", _Reader(act))
        with pytest.raises(InputError, match=words):
            fenced(source, "vtk", "save it otherwise")
    monkeypatch.setattr(meshio, "vtk", _Reader(_warn))
    assert fenced(source, "vtk", "") == ("a mesh", ["the reader says: Warning: skipped", "the reader says: odd value"])
    monkeypatch.setattr(meshio, "vtk", _Reader(_interrupt))
    with pytest.raises(KeyboardInterrupt):
        fenced(source, "vtk", "")
    assert capfd.readouterr() == ("", "")


def test_other_threads_keep_their_output_and_warnings_while_a_reader_speaks(monkeypatch: pytest.MonkeyPatch, capfd):
    """The first reader goes on only when another thread has printed and warned, and a second fence is waiting."""
    inside, done = threading.Event(), threading.Event()
    notes: dict[str, list[str]] = {}

    def slow() -> str:
        inside.set()
        assert done.wait(20)
        print("from the reader")  # noqa: T201
        return "a mesh"

    def read_one(name: str) -> None:
        notes[name] = fenced(Source("t.vtk", b"data"), "vtk", "")[1]

    monkeypatch.setattr(meshio, "vtk", _Reader(slow))
    seen: list[str] = []
    monkeypatch.setattr(warnings, "showwarning", lambda text, *_, **__: seen.append(str(text)))
    stdout, stderr, shown = sys.stdout, sys.stderr, warnings.showwarning
    threads = [threading.Thread(target=read_one, args=(name,)) for name in ("first", "second")]
    threads[0].start()
    assert inside.wait(20)
    threads[1].start()
    print("from another thread")  # noqa: T201
    _say("of another thread", RuntimeWarning)
    done.set()
    for thread in threads:
        thread.join(20)
    assert notes == {name: ["the reader says: from the reader"] for name in ("first", "second")}
    assert seen == ["of another thread"]
    assert capfd.readouterr() == ("from another thread\n", "")
    assert (sys.stdout, sys.stderr, warnings.showwarning) == (stdout, stderr, shown)


def test_a_temporary_folder_without_room_is_an_input_error(monkeypatch: pytest.MonkeyPatch, tmp_path: Path):
    """/dev/full takes no byte: writing to it fails as on a full disk."""
    (tmp_path / "mesh.vtk").symlink_to("/dev/full")

    class Full:
        def __init__(self, **_: object) -> None:
            pass

        def __enter__(self) -> str:
            return str(tmp_path)

        def __exit__(self, *_: object) -> None:
            pass

    monkeypatch.setattr(tempfile, "TemporaryDirectory", Full)
    with pytest.raises(InputError, match=r"t\.vtk: no room .* \(No space left on device\); .* TMPDIR"):
        read_vtk(Source("t.vtk", SQUARE.encode()))


TWICE = "SCALARS a double\nLOOKUP_TABLE default\n1 2 3 4\nFIELD FieldData 1\n%s 1 4 float\n5 6 7 8\n"
POINT_DATA = SQUARE[: SQUARE.index("CELL_DATA")]


@pytest.mark.parametrize("name", ["a", "%61"])
def test_two_arrays_of_one_name_are_refused_as_only_the_last_would_stay(name: str):
    with pytest.raises(InputError, match="two arrays at vertices are named 'a'; rename one"):
        read_vtk(Source("t.vtk", (POINT_DATA + TWICE % name).encode()))
    assert sorted(read_vtk(Source("t.vtk", (POINT_DATA + TWICE % "b").encode())).point_data) == ["a", "b", "wind speed"]


def test_one_name_at_vertices_and_at_cells_is_no_clash():
    text = SQUARE.replace("SCALARS q", "SCALARS wind%20speed")
    parts = read_vtk(Source("t.vtk", text.encode()))
    assert (list(parts.point_data), list(parts.cell_data), parts.notes) == (["wind speed"], ["wind speed"], ())


@pytest.mark.parametrize(
    ("text", "note"),
    [
        (POINT_DATA + "COLOR_SCALARS paint 3\n" + "0 0 0 " * 4 + "\n", "arrays at vertices not read: paint"),
        # meshio leaves the cell data out as soon as there is a polygon
        (SQUARE.replace("CELL_TYPES 2\n5\n5\n", "CELL_TYPES 2\n7\n7\n"), "arrays at cells not read: q"),
        (
            SQUARE.replace("POINTS 4", "FIELD FieldData 1\nTime 1 1 double\n0.5\nPOINTS 4"),
            "arrays at neither vertices nor cells not read: Time",
        ),
    ],
)
def test_arrays_that_the_reader_leaves_out_are_told(text: str, note: str):
    assert read_vtk(Source("t.vtk", text.encode())).notes == (
        note + "; save it as VTU (unstructured grid) to keep them",
    )


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("STRUCTURED_POINTS\nDIMENSIONS 3000 3000 3000\nORIGIN 0 0 0\nSPACING 1 1 1\n", "the grid of 27000000000"),
        (
            "RECTILINEAR_GRID\nDIMENSIONS 1 1 1\n"
            + "".join(f"{axis}_COORDINATES 2000 float\n{'0 ' * 2000}\n" for axis in "XYZ"),
            "the grid of 8000000000",
        ),
        ("STRUCTURED_GRID\nDIMENSIONS 9000 9000 9000\nPOINTS 1 float\n0 0 0\n", "the grid of 729000000000"),
        ("UNSTRUCTURED_GRID\nPOINTS 900000000000 float\n0 0 0\n", "POINTS of 900000000000 entries"),
        ("UNSTRUCTURED_GRID\nPOINTS " + "9" * 5000 + " float\n0 0 0\n", "POINTS: a number of 5000 digits"),
        ("STRUCTURED_POINTS\nDIMENSIONS 1 1 " + "9" * 5000 + "\n", "DIMENSIONS: a number of 5000 digits"),
    ],
)
def test_counts_beyond_the_file_are_refused_before_anything_is_made(text: str, words: str):
    tracemalloc.start()
    with pytest.raises(InputError, match=words) as caught:
        read_vtk(Source("t.vtk", (HEAD + text).encode()))
    assert re.search("cannot stand in a file of|is no count", str(caught.value))
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert peak < 10_000_000
