"""STL, binary and text: exact weld, order kept, counts held against the bytes."""

import struct
from pathlib import Path

import meshio
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from dec.errors import InputError
from dec.files import read
from dec.files.sources import Source
from dec.files.stl import read_stl, weld

POINTS = np.array([[0, 0, 0], [1, 0, 0], [1, 1, 0.5], [0, 1, 0.25]], dtype=float)
TRIANGLES = np.array([[0, 1, 2], [0, 2, 3]])
FACET = b"facet normal 0 0 1\n outer loop\n  vertex 0 0 0\n  vertex 1 0 0\n  vertex 0 1 0\n endloop\nendfacet\n"


def binary(corners: np.ndarray, header: bytes = b"") -> bytes:
    """Write by the letter of the format, one facet after the other."""
    rows = b"".join(struct.pack("<12fH", 0, 0, 0, *facet.ravel(), 0) for facet in corners)
    return header.ljust(80) + struct.pack("<I", len(corners)) + rows


@given(st.lists(st.tuples(*[st.sampled_from([0.0, -0.0, 1.0, 0.1, np.float32(0.1).item()])] * 3), max_size=30))
def test_the_weld_joins_exactly_the_equal_corners_in_order_of_appearance(corners):
    """Against a dict of tuples, where 0.0 and -0.0 are one key."""
    number: dict[tuple[float, ...], int] = {}
    expected = [number.setdefault(corner, len(number)) for corner in corners]
    points, labels = weld(np.array(corners, dtype=float).reshape(-1, 3))
    assert labels.tolist() == expected
    assert [tuple(point) for point in points.tolist()] == list(number)
    assert not np.signbit(points).any()


def test_a_binary_file_reads_back_corner_by_corner_and_tells_the_weld():
    parts = read_stl(Source("t.stl", binary(POINTS[TRIANGLES])))
    np.testing.assert_array_equal(parts.points[parts.nodes.flat.reshape(-1, 3)], POINTS[TRIANGLES])
    assert len(parts.points) == 4
    assert parts.notes == ("welded 6 corners to 4 points, exactly equal coordinates only",)


def test_a_binary_file_that_begins_with_solid_is_binary():
    assert len(read_stl(Source("t.stl", binary(POINTS[TRIANGLES], b"solid part"))).kinds) == 2


@pytest.mark.parametrize("is_binary", [True, False])
def test_what_meshio_writes_reads_back(is_binary: bool, tmp_path: Path):
    meshio.Mesh(POINTS, [("triangle", TRIANGLES)]).write(tmp_path / "t.stl", binary=is_binary)
    surface = read(tmp_path / "t.stl")
    np.testing.assert_array_equal(surface.complex.points[surface.complex.faces.flat.reshape(-1, 3)], POINTS[TRIANGLES])


@pytest.mark.parametrize(
    "change", [bytes.upper, lambda t: t.replace(b"\n", b"\r\n"), lambda t: t.replace(b" ", b"\t ")]
)
def test_text_may_be_in_capitals_with_any_blanks(change):
    parts = read_stl(Source("t.stl", change(b"solid x\n" + FACET + b"endsolid x\n")))
    assert parts.points.tolist() == [[0, 0, 0], [1, 0, 0], [0, 1, 0]]
    assert parts.nodes.flat.tolist() == [0, 1, 2]


def test_the_facets_keep_their_order_and_turning_whatever_their_normals_say():
    turned = FACET.replace(b"0 0 1\n", b"0 0 -1\n", 1)
    assert read_stl(Source("t.stl", b"solid\n" + turned + b"endsolid\n")).nodes.flat.tolist() == [0, 1, 2]


def test_several_solids_are_groups(tmp_path: Path):
    moved = FACET.replace(b"vertex 0", b"vertex 5")
    text = (
        b"solid Left Wall\n"
        + FACET * 2
        + b"endsolid\nsolid\n"
        + moved
        + b"endsolid\nsolid Left Wall\n"
        + FACET
        + b"endsolid"
    )
    (tmp_path / "t.stl").write_bytes(text)
    regions = read(tmp_path / "t.stl").regions
    assert {name: region.cells.tolist() for name, region in regions.items()} == {
        "Left Wall": [0, 1], "solid (2)": [2], "Left Wall (3)": [3],
    }  # fmt: skip


def test_one_solid_is_no_group():
    assert read_stl(Source("t.stl", b"solid Left\n" + FACET + b"endsolid\n")).groups == ()


@pytest.mark.parametrize(
    ("text", "words"),
    [
        (b"solid\n" + FACET, "1 endsolid is missing"),
        (b"solid\n" + FACET + b"endsolid\nendsolid\n", "1 endsolid is too many"),
        (
            b"solid\n" + FACET.replace(b"1 0 0", b"1 0") + b"endsolid\n",
            "line 5: a line of 4 words that begins with vertex",
        ),
        (b"solid\n" + FACET.replace(b"1 0 0", b"1 0 x") + b"endsolid\n", "line 5: a number must stand here, found 'x'"),
        (b"solid\n" + FACET.replace(b"  vertex 1 0 0\n", b"") + b"endsolid\n", "line 6: .* vertex must stand here"),
        (b"solid\n" + FACET + b"hello\nendsolid\n", "line 9: .* facet must stand here, found 'hello'"),
        (b"solid\nendsolid\n", "must hold triangles, it has none"),
        (b"\0" * 84, "must hold triangles, it has none"),
        (b"\0" * 83, "84-byte header"),
        (binary(POINTS[TRIANGLES])[:-1], "2 facets promise 184 bytes, found 183"),
        (binary(POINTS[TRIANGLES]) + b"x", "2 facets promise 184 bytes, found 185"),
    ],
)
def test_a_file_that_leaves_the_format_is_refused_with_its_place(text: bytes, words: str):
    with pytest.raises(InputError, match=words):
        read_stl(Source("t.stl", text))


def test_32_bit_coordinates_far_from_the_origin_show_as_repeated_corners(tmp_path: Path):
    """A body of 1 cm at national-grid coordinates: 32 bits cannot tell its corners apart, and `check` must say so."""
    (tmp_path / "t.stl").write_bytes(binary(POINTS[TRIANGLES] * 0.01 + [500_000, 4_500_000, 0]))
    surface = read(tmp_path / "t.stl")
    assert surface.complex.counts[0] < 4
    assert not all(finding.holds for finding in surface.complex.check())


def test_the_bracket_closes_once_it_is_welded():
    """Counts from the table in meshes/README.md, which its own script counts another way."""
    bracket = read(Path(__file__).parents[2] / "meshes" / "bracket.stl").complex
    assert bracket.counts == (1055, 3171, 2114)
    assert bracket.euler == -2
    assert bracket.boundary_loops() == []
