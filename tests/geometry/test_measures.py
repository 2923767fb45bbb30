"""Lengths, area vectors and volumes."""

import numpy as np
import pytest
from hypothesis import given, settings

from dec.calculus.complex import Complex, grid
from dec.errors import InputError
from dec.geometry.measures import (
    cell_volumes,
    edge_lengths,
    edge_vectors,
    face_area_vectors,
    face_areas,
    face_centres,
    is_flat,
)

from . import slow
from .shapes import (
    delaunay,
    hexahedra,
    icosahedron,
    joined,
    mixed_solid,
    polygon_soups,
    sample,
    tetrahedron_soups,
    triangle_soups,
)


def test_an_edge_vector_runs_from_tail_to_head():
    K = Complex.from_edges([1], [0], points=[[1.0, 2.0], [4.0, 6.0]])
    assert edge_vectors(K).tolist() == [[-3.0, -4.0]]
    assert edge_lengths(K).tolist() == [5.0]


def test_a_counter_clockwise_face_has_an_area_vector_towards_the_viewer():
    K = Complex.from_faces([[0, 1, 2], [0, 2, 1]], points=[[0, 0], [2, 0], [0, 3]])
    assert face_area_vectors(K).tolist() == [[0, 0, 3], [0, 0, -3]]
    assert face_areas(K).tolist() == [3, 3]


def test_a_right_handed_tetrahedron_has_positive_volume_and_outward_faces():
    K = Complex.from_cells({"tetra": [[0, 1, 2, 3]]}, points=[[0, 0, 0], [1, 0, 0], [0, 1, 0], [0, 0, 6]])
    assert cell_volumes(K).tolist() == [1.0]
    outward = K.coboundary(2).toarray()[0][:, None] * face_area_vectors(K)
    assert np.einsum("ij,ij->i", outward, face_centres(K) - K.points.mean(axis=0)).min() > 0


@settings(deadline=None)
@given(polygon_soups())
def test_area_vectors_of_ragged_polygons_are_those_of_a_triangle_fan(K):
    expected = np.array([slow.area_vector(K, f) for f in range(K.counts[2])])
    np.testing.assert_allclose(face_area_vectors(K), expected, atol=1e-9)


@settings(deadline=None)
@given(triangle_soups(dim=2))
def test_area_vectors_of_plane_triangles_are_half_a_determinant(K):
    corners = K.points[K.faces.flat.reshape(-1, 3)]
    expected = np.linalg.det(np.stack([corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0]], axis=1)) / 2
    vectors = face_area_vectors(K)
    np.testing.assert_allclose(vectors[:, 2], expected, atol=1e-12)
    assert not vectors[:, :2].any()


@settings(deadline=None)
@given(tetrahedron_soups())
def test_tetrahedra_have_a_sixth_of_a_determinant(K):
    p = K.points[K.solids["tetra"]]
    np.testing.assert_allclose(cell_volumes(K), np.linalg.det(p[:, 1:] - p[:, :1]) / 6, atol=1e-10)


def test_hexahedra_with_warped_faces_fill_space_without_gap_or_overlap():
    K = hexahedra((3, 2, 2), jitter=0.1, seed=4)
    expected = [slow.volume(K, c) for c in range(K.counts[3])]
    np.testing.assert_allclose(cell_volumes(K), expected, rtol=1e-12)
    moved = Complex.from_cells(K.solids, points=K.points.copy())
    inner = np.zeros(K.counts[0], dtype=bool)
    lone = np.flatnonzero(K.incidences.uses == 1)
    inner[np.setdiff1d(np.arange(K.counts[0]), K.faces.flat.reshape(-1, 4)[lone])] = True
    assert inner.any()
    points = K.points + np.where(inner[:, None], [0.07, -0.03, 0.05], 0)
    moved = Complex.from_cells(K.solids, points=points)
    assert abs(cell_volumes(moved) - cell_volumes(K)).max() > 1e-3
    assert cell_volumes(moved).sum() == pytest.approx(cell_volumes(K).sum(), rel=1e-13)


def test_a_mixture_of_kinds_keeps_the_numbering_of_the_cells():
    assert cell_volumes(mixed_solid()).tolist() == pytest.approx([1 / 6, 1], rel=1e-15)


def test_a_cell_given_left_handed_has_negative_volume():
    K = hexahedra((1, 1, 1))
    turned = Complex.from_cells({"hexahedron": K.solids["hexahedron"][:, [4, 5, 6, 7, 0, 1, 2, 3]]}, points=K.points)
    assert cell_volumes(turned).tolist() == [-1.0]


def test_area_vectors_round_every_closed_surface_add_up_to_zero():
    for K in (icosahedron(), joined("bracket.stl"), sample("torus.off")[0]):
        vectors = face_area_vectors(K)
        assert np.abs(vectors.sum(axis=0)).max() <= 1e-14 * face_areas(K).sum()


def test_area_vectors_round_every_warped_hexahedron_add_up_to_zero():
    K = hexahedra(jitter=0.2)
    assert np.abs(K.coboundary(2).astype(float) @ face_area_vectors(K)).max() < 1e-14


def test_a_grid_that_closes_on_itself_has_the_same_step_everywhere():
    for shape, step in (((4, 3), (0.1, 0.3)), ((3, 4, 5), (0.1, 0.2, 0.7)), ((2, 1, 3), (1, 2, 3))):
        K = grid(shape, spacing=step, origin=1e6, periodic=True)
        axis = np.repeat(np.arange(len(shape)), K.counts[0])
        assert edge_lengths(K).tolist() == np.array(step)[axis].tolist()
        assert (edge_vectors(K) >= 0).all()
    planes = np.repeat([0.1 * 0.2, 0.1 * 0.7, 0.2 * 0.7], 60)
    K = grid((3, 4, 5), spacing=(0.1, 0.2, 0.7), periodic=True)
    np.testing.assert_allclose(face_areas(K), planes, rtol=1e-15)
    np.testing.assert_allclose(cell_volumes(K), np.full(60, 0.1 * 0.2 * 0.7), rtol=1e-15)


def test_a_closed_grid_agrees_with_an_open_one_where_both_have_a_cell():
    step = (0.5, 0.25, 2.0)
    closed, open_ = grid((3, 3, 3), spacing=step, periodic=True), grid((4, 4, 4), spacing=step)
    assert set(map(tuple, face_area_vectors(closed).tolist())) == set(map(tuple, face_area_vectors(open_).tolist()))
    assert cell_volumes(closed).tolist() == cell_volumes(open_).tolist() == [0.25] * 27


def test_areas_of_a_large_mesh_do_not_depend_on_how_it_is_cut_into_blocks(monkeypatch):
    random = np.random.default_rng(2)
    loops = [random.permutation(50)[: random.integers(3, 8)] for _ in range(200)]
    K = Complex.from_faces(loops, 50, points=random.normal(size=(50, 3)))
    solid, surface = delaunay(3, 40, 3), icosahedron()
    whole = face_area_vectors(K), cell_volumes(solid), face_area_vectors(surface)
    monkeypatch.setattr("dec.geometry.corners._FACES_AT_ONCE", 7)
    for one, other in zip(whole, (face_area_vectors(K), cell_volumes(solid), face_area_vectors(surface)), strict=True):
        assert one.tolist() == other.tolist()


@settings(max_examples=20, deadline=None)
@given(polygon_soups())
def test_a_far_origin_costs_no_more_digits_than_the_coordinates_have_lost(K):
    far = Complex.from_faces([K.faces.row(f) for f in range(K.counts[2])], K.counts[0], points=K.points + 2**30)
    assert np.abs(face_area_vectors(far) - face_area_vectors(K)).max() < 1e-4


def test_a_mesh_is_flat_when_every_z_is_exactly_the_same():
    assert is_flat(Complex.from_faces([[0, 1, 2]], points=[[0, 0, 0.1], [1, 0, 0.1], [0, 1, 0.1]]))
    assert not is_flat(Complex.from_faces([[0, 1, 2]], points=[[0, 0, 0.1], [1, 0, 0.1], [0, 1, np.nextafter(0.1, 1)]]))
    assert is_flat(grid((2, 2)))


def test_measures_without_points_name_what_is_missing():
    K = Complex.from_faces([[0, 1, 2]])
    for measure in (edge_lengths, face_areas, is_flat, face_centres):
        with pytest.raises(InputError, match=r"needs? points, this complex has none"):
            measure(K)
    with pytest.raises(InputError, match="points in 3 coordinates, got 2"):
        face_areas(Complex.from_cells({"tetra": [[0, 1, 2, 3]]}, points=np.zeros((4, 2))))
    with pytest.raises(InputError, match="areas need faces, this complex has dimension 1"):
        face_areas(Complex.from_edges([0], [1], points=[[0.0], [1.0]]))
    with pytest.raises(InputError, match="volumes need solid cells, this complex has dimension 2"):
        cell_volumes(icosahedron())
