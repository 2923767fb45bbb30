"""Parts become a dataset: top cells, flat meshes, and everything that was left out is told."""

import numpy as np
import pytest

from dec.calculus.dataset import Input
from dec.errors import InputError
from dec.files.assembly import assemble
from dec.files.parts import KINDS, Group, MeshParts, field_array, ragged_of

FILE = Input("part.vtu", "", 0)
SQUARE = np.array([[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0]], dtype=float)
TILTED = np.array([[0, 0, 0.5], [1, 0, 0], [1, 1, 0], [0, 1, 0]])


def parts(points: np.ndarray, cells: list[tuple[int, list[int]]], **more: object) -> MeshParts:
    rows = [np.array([nodes]) for _, nodes in cells]
    return MeshParts(points, np.array([kind for kind, _ in cells], dtype=np.int64), ragged_of(rows), **more)


def test_a_mesh_with_every_z_zero_is_flat_and_so_are_its_padded_fields():
    fields = {"U": np.array([[1.0, 2, 0]] * 4), "W": np.array([[1.0, 2]] * 4), "s": np.ones((4, 1))}
    flat = assemble(
        parts(SQUARE, [(9, [0, 1, 2, 3])], point_data=fields, cell_data={"V": np.array([[1.0, 1, 0]])}), FILE
    )
    assert flat.complex.points.shape == (4, 2)
    assert {name: flat.field(name).values.shape for name in flat.fields} == {
        "U": (4, 2),
        "W": (4, 2),
        "s": (4, 1),
        "V": (1, 2),
    }
    assert flat.notes == (
        "every z is exactly 0: the mesh is read as flat, with two coordinates, and so are the fields U, V",
    )


def test_a_mesh_that_leaves_the_plane_keeps_three_components():
    fields = {"U": np.array([[1.0, 2, 0]] * 4)}
    tilted = assemble(parts(TILTED, [(9, [0, 1, 2, 3])], point_data=fields), FILE)
    assert tilted.complex.points.shape == (4, 3)
    assert tilted.field("U").values.shape == (4, 3)
    assert tilted.notes == ()


def test_a_mesh_at_z_zero_keeps_three_coordinates_for_a_field_that_leaves_the_plane():
    fields = {"U": np.array([[1.0, 2, 0]] * 4), "W": np.array([[1.0, 2, 3]] * 4)}
    slice_ = assemble(parts(SQUARE, [(9, [0, 1, 2, 3])], point_data=fields), FILE)
    assert slice_.complex.points.shape == (4, 3)
    assert slice_.field("U").values.shape == slice_.field("W").values.shape == (4, 3)


def test_heights_that_cancel_are_not_flat():
    points = SQUARE + np.array([[0, 0, 1], [0, 0, -1], [0, 0, 0], [0, 0, 0]])
    assert assemble(parts(points, [(9, [0, 1, 2, 3])]), FILE).complex.points.shape == (4, 3)


def test_two_components_stay_two():
    surface = assemble(parts(TILTED, [(9, [0, 1, 2, 3])], point_data={"U": np.ones((4, 2))}), FILE)
    assert surface.field("U").values.shape == (4, 2)


def test_a_name_may_stand_at_vertices_and_at_cells():
    both = assemble(
        parts(TILTED, [(9, [0, 1, 2, 3])], point_data={"U": np.ones((4, 1))}, cell_data={"U": np.zeros((1, 1))}), FILE
    )
    assert both.field("U", "vertices").values.sum() == 4
    assert both.field("U", "cells").values.sum() == 0


def test_values_that_are_not_finite_are_kept_for_their_user_to_refuse():
    values = np.array([[np.nan], [np.inf], [1], [2]])
    kept = assemble(parts(TILTED, [(9, [0, 1, 2, 3])], point_data={"U": values}), FILE)
    np.testing.assert_array_equal(kept.field("U").values, values)


def test_lower_cells_are_told_and_their_values_go_with_them():
    cells = [(3, [0, 1]), (5, [0, 1, 2]), (1, [3]), (5, [0, 2, 3])]
    surface = assemble(parts(TILTED, cells, cell_data={"q": np.array([[0.0], [1], [2], [3]])}), FILE)
    assert surface.field("q").values.ravel().tolist() == [1, 3]
    assert surface.notes == (
        "1 point of the file names parts only; the faces make the complex",
        "1 line of the file names parts only; the faces make the complex",
    )


def test_values_of_mixed_solids_follow_the_numbering_of_the_complex():
    points = np.random.default_rng(1).random((9, 3))
    cells = [(12, list(range(8))), (10, [0, 1, 2, 8]), (12, [1, 0, 3, 2, 5, 4, 7, 6]), (10, [3, 2, 1, 8])]
    solid = assemble(parts(points, cells, cell_data={"q": np.array([[12.0], [10], [12.5], [10.5]])}), FILE)
    assert solid.field("q").values.ravel().tolist() == [10, 10.5, 12, 12.5]
    assert solid.complex.solids["tetra"].tolist() == [[0, 1, 2, 8], [3, 2, 1, 8]]
    assert solid.notes == ("tetrahedra are numbered before hexahedra, each in file order",)


@pytest.mark.parametrize("number", [21, 22, 23, 24, 25, 28, 29, 34, 35])
def test_cells_with_nodes_beside_their_corners_are_read_by_the_corners(number: int):
    kind = KINDS[number]
    points = np.random.default_rng(2).random((kind.nodes, 3))
    mesh = assemble(parts(points, [(number, list(range(kind.nodes)))]), FILE)
    assert mesh.complex.dim == kind.dimension
    assert mesh.complex.counts[0] == kind.nodes
    used = np.unique(np.concatenate([mesh.complex.tail, mesh.complex.head]))
    assert used.tolist() == list(range(len(kind.corners)))
    assert mesh.notes == (f"1 {kind.name} cell was read by its corners; the other nodes stay as unused points",)


@pytest.mark.parametrize("number", [13, 14, 26, 27])
def test_a_solid_that_is_neither_tetrahedron_nor_hexahedron_is_refused_by_name(number: int):
    kind = KINDS[number]
    points = np.random.default_rng(2).random((kind.nodes, 3))
    with pytest.raises(InputError, match=rf"part\.vtu: .* found 1 of kind {kind.name}; split them"):
        assemble(parts(points, [(number, list(range(kind.nodes)))]), FILE)


def test_polygons_in_a_group_are_found_by_their_corners():
    """A pentagon that is no side of the hexahedron: five corners, so that nothing may match."""
    points = np.random.default_rng(3).random((9, 3))
    mesh = parts(points, [(12, list(range(8))), (7, [0, 1, 2, 3, 8])], groups=(Group("odd", 2, np.array([1])),))
    with pytest.raises(InputError, match="group 'odd' holds 1 faces, 1 of them are no faces of the solid cells"):
        assemble(mesh, FILE)


@pytest.mark.parametrize(
    ("mesh", "words"),
    [
        (parts(np.where(SQUARE > 0, np.inf, SQUARE), [(5, [0, 1, 2])]), "coordinates must be finite, point 1"),
        (parts(SQUARE, []), "found 4 points only"),
        (parts(SQUARE, [(1, [0])]), "found 4 points only"),
        (parts(SQUARE, [(5, [0, 1, 2]), (5, [0, 1, 4])]), "cell 1 uses point 4, the file has 4"),
        (parts(np.ones((8, 3)), [(12, list(range(8))), (12, [0, 2, 1, 3, 4, 5, 6, 7])]), "twisted"),
    ],
)
def test_parts_that_make_no_complex_are_refused_with_the_file(mesh: MeshParts, words: str):
    with pytest.raises(InputError, match=rf"part\.vtu.*{words}"):
        assemble(mesh, FILE)


def test_only_real_numbers_make_a_field():
    notes: list[str] = []
    assert field_array(np.array([True, False]), "f", notes).tolist() == [[1], [0]]
    assert field_array(np.zeros((2, 3, 3), dtype=">f4"), "f", notes).shape == (2, 9)
    with pytest.raises(InputError, match="field f must hold real numbers, got complex128"):
        field_array(np.array([1j]), "f", notes)
    assert notes == []


def test_what_a_dataset_holds_is_read_only():
    surface = assemble(parts(TILTED, [(9, [0, 1, 2, 3])], point_data={"U": np.ones((4, 3))}), FILE)
    with pytest.raises(ValueError, match="read-only"):
        surface.field("U").values[0] = 2
