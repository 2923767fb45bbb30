"""Integrating vector fields: signs, rules, exactness, refusals."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from dec.calculus.complex import Complex, grid
from dec.calculus.exact import check_stokes
from dec.errors import InputError
from dec.geometry.fields import across, field_rule, integrate_field
from dec.geometry.measures import cell_volumes, edge_vectors, face_area_vectors, face_areas, face_centres

from . import slow
from .shapes import (
    delaunay,
    hexahedra,
    icosahedron,
    joined,
    mixed_solid,
    octagons_and_squares,
    polygon_soups,
    sample,
    tetrahedron_soups,
)

SQUARE = Complex.from_faces([[0, 1, 2, 3]], points=[[0, 0], [2, 0], [2, 1], [0, 1]])


def surfaces():
    return [
        icosahedron(),
        joined("bracket.stl"),
        sample("torus.off")[0],
        sample("moebius.obj")[0],
        sample("annulus.vtu")[0],
    ]


def test_circulation_is_positive_along_the_edge():
    K = Complex.from_edges([0, 2], [1, 1], points=[[0.0, 0], [3, 0], [5, 0]])
    assert integrate_field(K, [[2, 7]] * 3).values.tolist() == [6, -4]
    assert integrate_field(K, [[2, 0], [4, 0], [1, 0]]).values.tolist() == [9, -5]


def test_flux_across_an_edge_is_positive_to_its_right():
    K = Complex.from_faces([[0, 1, 2]], points=[[0, 0], [1, 0], [0, 1]])
    assert list(zip(K.tail.tolist(), K.head.tolist(), strict=True)) == [(0, 1), (0, 2), (1, 2)]
    # the edge (0, 1) runs east, its right is south; (0, 2) runs north, its right is east
    assert integrate_field(K, [[0, 5]] * 3, quantity="flux").values.tolist() == [-5, 0, 5]
    assert integrate_field(K, [[3, 0]] * 3, quantity="flux").values.tolist() == [0, 3, 3]


def test_the_derivative_of_a_plane_flux_is_the_net_outward_flux_of_a_counter_clockwise_face():
    # hand figures: the field (x, y) leaves a region at twice its area
    assert integrate_field(SQUARE, SQUARE.points, quantity="flux").d().values.tolist() == [4]
    clockwise = Complex.from_faces([[0, 3, 2, 1]], points=SQUARE.points)
    assert integrate_field(clockwise, SQUARE.points, quantity="flux").d().values.tolist() == [-4]


def test_flux_through_a_face_is_positive_along_its_area_vector():
    K = Complex.from_faces([[0, 1, 2], [0, 2, 1], [0, 1, 3]], points=[[0, 0, 0], [2, 0, 0], [0, 3, 0], [0, 0, 1]])
    w = integrate_field(K, [[0, 0, 5]] * 4, quantity="flux")
    assert (w.degree, w.values.tolist()) == (2, [15, -15, 0])


def test_the_derivative_of_a_flux_in_a_solid_is_the_net_outward_flux_of_a_cell():
    for K in (delaunay(1, 12, 3), hexahedra(), mixed_solid(), grid((3, 3, 2), spacing=(1, 2, 0.5))):
        w = integrate_field(K, K.points, quantity="flux")
        np.testing.assert_allclose(w.d().values, 3 * cell_volumes(K), rtol=1e-9, atol=1e-14)


def test_a_linear_field_without_divergence_has_no_net_flux_out_of_warped_cells():
    K = hexahedra(jitter=0.2)
    field = K.points @ np.array([[1.0, 0.3, -2.0], [0.7, 2.0, 0.1], [5.0, -1.0, -3.0]])
    w = integrate_field(K, field, quantity="flux")
    assert np.abs(w.d().values).max() < 1e-13 * np.abs(w.values).max()
    assert np.abs(integrate_field(K, K.points, quantity="flux").d().values / cell_volumes(K) - 3).max() < 0.5


def test_a_mesh_in_a_plane_of_space_has_its_flux_across_edges():
    K = Complex.from_faces([[0, 1, 2, 3]], points=np.column_stack([SQUARE.points, [7.5] * 4]))
    w = integrate_field(K, K.points, quantity="flux")
    assert (w.degree, w.d().values.tolist()) == (1, [4])
    assert across(np.array([[1.0, 2.0, 9.0]])).tolist() == [[2, -1, 0]]


def test_rigid_rotation_circulates_by_twice_its_rate_times_the_area_vector():
    rate, point = np.array([0.3, -1.7, 0.9]), np.array([5.0, 3.0, -2.0])
    for K in [*surfaces(), delaunay(2, 20, 3), hexahedra(jitter=0.2)]:
        field = np.cross(rate, K.points - point)
        w = integrate_field(K, field)
        gross = abs(K.coboundary(1)).astype(float) @ (
            np.linalg.norm(edge_vectors(K), axis=1) * (np.abs(field).max() + np.abs(K.points).max())
        )
        defect = np.abs(w.d().values - 2 * face_area_vectors(K) @ rate)
        assert (defect <= 1e-15 * gross).all()


def test_rigid_rotation_circulates_exactly_round_ragged_polygons():
    K = octagons_and_squares()
    field = 0.5 * np.column_stack([-K.points[:, 1], K.points[:, 0]])
    np.testing.assert_allclose(integrate_field(K, field).d().values, face_areas(K), rtol=1e-13)


def test_a_constant_field_has_no_net_flux_through_closed_meshes():
    for K in (icosahedron(), joined("bracket.stl"), sample("torus.off")[0]):
        constant = np.broadcast_to([3.0, -2.0, 0.7], (K.counts[0], 3))
        w = integrate_field(K, constant, quantity="flux")
        assert abs(w.values.sum()) <= 1e-14 * np.abs(w.values).sum()
        cells = np.broadcast_to([3.0, -2.0, 0.7], (K.counts[2], 3))
        v = integrate_field(K, cells, at="cells", quantity="flux")
        assert abs(v.values.sum()) <= 1e-14 * np.abs(v.values).sum()


def test_a_rotation_has_no_net_flux_out_of_any_tetrahedron():
    K, fields, _ = sample("elbow.vtu")
    w = integrate_field(K, fields["flow"], quantity="flux")
    gross = abs(K.coboundary(2)).astype(float) @ np.abs(w.values)
    assert (np.abs(w.d().values) <= 1e-14 * gross.max()).all()


def test_samples_have_the_figures_that_their_description_gives():
    # meshes/README.md: closed forms there
    K, points, _ = sample("bracket.vtu")
    w = integrate_field(K, points["air"], quantity="flux")
    assert np.abs(w.values).sum() == pytest.approx(36454.303, abs=5e-4)
    assert abs(w.values.sum()) < 1e-13 * 36454
    K, points, _ = sample("annulus.vtu")
    loops = [abs(loop @ integrate_field(K, points["vortex"])) for loop in K.boundary_loops()]
    assert sorted(loops) == pytest.approx([56 * np.sin(2 * np.pi / 56), 112 * np.sin(2 * np.pi / 112)], rel=1e-12)
    K, points, _ = sample("wing.vtu")
    loops = [abs(loop @ integrate_field(K, points["air"])) for loop in K.boundary_loops()]
    assert sorted(loops) == pytest.approx([9.9958, 9.9965], abs=5e-5)


def test_net_fluxes_of_all_faces_add_up_to_the_boundary_exactly():
    for name, field in (("annulus.vtu", "vortex"), ("wing.vtu", "air")):
        K, points, _ = sample(name)
        for quantity in ("flux", "circulation"):
            w = integrate_field(K, points[field], quantity=quantity)
            assert check_stokes(K.region(np.arange(K.counts[2])), w).holds
    K, points, _ = sample("elbow.vtu")
    w = integrate_field(K, points["flow"], quantity="flux")
    assert check_stokes(K.chain(3, np.ones(K.counts[3], int)), w).holds


@settings(deadline=None)
@given(polygon_soups(), st.integers(0, 2**32 - 1))
def test_vertex_data_follow_the_stated_rules_on_ragged_polygons(K, seed):
    field = np.random.default_rng(seed).normal(size=K.points.shape)
    circulation = integrate_field(K, field).values
    for e, (a, b) in enumerate(zip(K.tail, K.head, strict=True)):
        assert circulation[e] == pytest.approx(np.dot((field[a] + field[b]) / 2, K.points[b] - K.points[a]), abs=1e-12)
    if not (K.points[:, 2] == K.points[0, 2]).all():
        flux = integrate_field(K, field, quantity="flux").values
        expected = [slow.fan_flux(K, f, field) for f in range(K.counts[2])]
        np.testing.assert_allclose(flux, expected, atol=1e-10)


@settings(deadline=None)
@given(tetrahedron_soups(), st.integers(0, 2**32 - 1))
def test_both_kinds_of_data_follow_the_stated_rules_in_solids(K, seed):
    random = np.random.default_rng(seed)
    field, cells = random.normal(size=K.points.shape), random.normal(size=(K.counts[3], 3))
    flux = integrate_field(K, field, quantity="flux").values
    np.testing.assert_allclose(flux, [slow.fan_flux(K, f, field) for f in range(K.counts[2])], atol=1e-10)
    check_cell_data(K, cells)


def check_cell_data(K, cells):
    along = integrate_field(K, cells, at="cells").values
    steps = edge_vectors(K)
    for e in range(K.counts[1]):
        beside = slow.cells_at_edge(K, e)
        assert along[e] == pytest.approx(np.dot(cells[beside].mean(axis=0), steps[e]), abs=1e-11)
    if K.dim == 3:
        through = integrate_field(K, cells, at="cells", quantity="flux").values
        matrix = K.coboundary(2).toarray()
        for f, area in enumerate(face_area_vectors(K)):
            beside = np.flatnonzero(matrix[:, f])
            assert through[f] == pytest.approx(np.dot(cells[beside].mean(axis=0), area), abs=1e-10)


def test_cell_data_follow_the_stated_rules_on_every_kind_of_mesh():
    random = np.random.default_rng(0)
    graph = Complex.from_edges([0, 1], [1, 2], points=random.normal(size=(3, 3)))
    for K in (graph, delaunay(3, 12), octagons_and_squares(), icosahedron(), hexahedra((2, 2, 1), 0.1), mixed_solid()):
        check_cell_data(K, random.normal(size=(K.counts[-1], K.points.shape[1])))
    K = delaunay(3, 12)
    cells = random.normal(size=(K.counts[2], 2))
    flux = integrate_field(K, cells, at="cells", quantity="flux").values
    for e, (dx, dy) in enumerate(edge_vectors(K)):
        mean = cells[slow.cells_at_edge(K, e)].mean(axis=0)
        assert flux[e] == pytest.approx(np.dot(mean, [dy, -dx]), abs=1e-13)
    K = icosahedron()
    cells = random.normal(size=(20, 3))
    flux = integrate_field(K, cells, at="cells", quantity="flux").values
    np.testing.assert_allclose(flux, np.einsum("ij,ij->i", cells, face_area_vectors(K)), rtol=1e-14)


def test_a_grid_that_closes_on_itself_is_integrated_across_its_seam():
    K = grid((4, 5), spacing=(0.5, 0.25), periodic=True)
    field = np.random.default_rng(1).normal(size=(20, 2)).reshape(4, 5, 2)
    along = integrate_field(K, field.reshape(-1, 2)).values.reshape(2, 4, 5)
    for i in range(4):
        for j in range(5):
            assert along[0, i, j] == pytest.approx((field[i, j] + field[(i + 1) % 4, j])[0] / 2 * 0.5, rel=1e-14)
            assert along[1, i, j] == pytest.approx((field[i, j] + field[i, (j + 1) % 5])[1] / 2 * 0.25, rel=1e-14)
    assert integrate_field(K, field.reshape(-1, 2), quantity="flux").d().values.sum() == pytest.approx(0, abs=1e-13)
    # a periodic function: the gradient of a wave has no circulation, and its flux is the integral of its Laplacian
    K = grid((24, 24), spacing=1 / 24, periodic=True)
    wave = lambda p: np.stack([np.cos(2 * np.pi * p[:, 0]), np.cos(4 * np.pi * p[:, 1])], axis=1)  # noqa: E731
    assert np.abs(integrate_field(K, wave).d().values).max() < 1e-15
    centres = face_centres(K)
    source = -2 * np.pi * np.sin(2 * np.pi * centres[:, 0]) - 4 * np.pi * np.sin(4 * np.pi * centres[:, 1])
    assert np.abs(integrate_field(K, wave, quantity="flux").d().values - source / 576).max() < 3e-4
    K = grid((3, 4, 5), periodic=True)
    w = integrate_field(K, np.random.default_rng(2).normal(size=(60, 3)), quantity="flux")
    assert w.d().values.sum() == pytest.approx(0, abs=1e-12)


def test_a_callable_is_integrated_exactly_up_to_the_stated_degree():
    # circulation of gradients of quartics, by the two-point Gauss rule
    K = delaunay(6, 20, 3)
    x, y, z = K.points.T
    cubic = lambda p: np.stack([4 * p[:, 0] ** 3 * p[:, 1], p[:, 0] ** 4, 3 * p[:, 2] ** 2], axis=1)  # noqa: E731
    potential = K.cochain(0, x**4 * y + z**3)
    straight = integrate_field(K, lambda p: np.stack([p[:, 0] ** 3, p[:, 1] ** 3, p[:, 2] ** 3], axis=1))
    np.testing.assert_allclose(straight.values, K.cochain(0, (x**4 + y**4 + z**4) / 4).d().values, atol=1e-13)
    assert np.abs(integrate_field(K, cubic).values - potential.d().values).max() > 1e-4
    # flux of quadratic fields through triangles: div (x^2, y z, 0) = 2 x + z over each tetrahedron
    quadratic = lambda p: np.stack([p[:, 0] ** 2, p[:, 1] * p[:, 2], 0 * p[:, 0]], axis=1)  # noqa: E731
    centres = K.points[K.solids["tetra"]].mean(axis=1)
    expected = (2 * centres[:, 0] + centres[:, 2]) * cell_volumes(K)
    np.testing.assert_allclose(integrate_field(K, quadratic, quantity="flux").d().values, expected, atol=1e-13)
    assert "exact for cubic fields" in field_rule(K, "vertices", "circulation", is_function=True)
    assert "exact for quadratic fields" in field_rule(K, "vertices", "flux", is_function=True)


def test_a_callable_flux_through_ragged_polygons_and_across_edges_is_right():
    K = hexahedra(jitter=0.15)
    quadratic = lambda p: np.stack([p[:, 0] ** 2, -2 * p[:, 0] * p[:, 1], 0 * p[:, 0]], axis=1)  # noqa: E731
    assert np.abs(integrate_field(K, quadratic, quantity="flux").d().values).max() < 1e-14
    flat = octagons_and_squares()
    w = integrate_field(flat, lambda p: np.stack([p[:, 0] ** 3, 0 * p[:, 0]], axis=1), quantity="flux")
    square = np.flatnonzero(flat.faces.lengths == 4)
    p = flat.points[flat.faces.flat[flat.faces.offsets[square][0] + np.arange(4)]]
    centre, radius = p.mean(axis=0), np.linalg.norm(p[0] - p.mean(axis=0))
    # integral of 3 x^2 over a square on its corner: 3 (c^2 + r^2 / 6) 2 r^2
    assert w.d().values[square[0]] == pytest.approx(3 * (centre[0] ** 2 + radius**2 / 6) * 2 * radius**2, rel=1e-13)


def test_the_rule_is_named_for_what_is_integrated():
    assert field_rule(icosahedron(), "vertices", "circulation").startswith("trapezoid rule")
    assert field_rule(icosahedron(), "vertices", "flux").startswith("mean of the vectors at the three corners of each")
    assert "fan out" in field_rule(hexahedra(), "vertices", "flux")
    assert field_rule(SQUARE, "vertices", "flux").startswith("trapezoid rule")
    assert field_rule(SQUARE, "cells", "circulation").startswith(
        "mean of the vectors of the faces that meet at each edge"
    )
    assert field_rule(hexahedra(), "cells", "flux").startswith(
        "mean of the vectors of the cells that meet at each face"
    )
    assert field_rule(icosahedron(), "cells", "flux").startswith("the vector of each face itself")


@pytest.mark.parametrize("bad", [np.nan, np.inf, -np.inf])
def test_a_value_that_is_not_finite_is_refused_with_its_place(bad):
    field = np.ones((4, 2))
    field[2, 1] = bad
    with pytest.raises(InputError, match=rf"field must be finite, got \[1.0, {bad}\] at vertex 2"):
        integrate_field(SQUARE, field)
    with pytest.raises(InputError, match=rf"got \[{bad}, {bad}\] at face 0"):
        integrate_field(SQUARE, [[bad, bad]], at="cells")
    named = Complex.from_edges([0], [1], points=[[0.0], [1.0]], vertex_ids=["A", "B"])
    with pytest.raises(InputError, match="at vertex 'B'"):
        integrate_field(named, [[0], [bad]])
    with pytest.raises(InputError, match=r"at the place \(2.0, 0.21"):
        integrate_field(SQUARE, lambda p: np.where(p < 1, p, bad))


def test_a_field_of_the_wrong_shape_is_refused_with_a_guess_at_the_reason():
    K = icosahedron()
    with pytest.raises(
        InputError, match=r"field has 12 rows of 2; the mesh has 20 faces and 12 vertices in 3-D.*missing its last"
    ):
        integrate_field(K, np.ones((12, 2)))
    with pytest.raises(InputError, match=r'It has one row for each of the faces: at="cells"\?'):
        integrate_field(K, np.ones((20, 3)))
    with pytest.raises(InputError, match=r'so 20 rows of 3 are needed for at="cells".* at="vertices"\?'):
        integrate_field(K, np.ones((12, 3)), at="cells")
    with pytest.raises(
        InputError, match=r"field has 4 rows of 3; .*Keep the first 2 components if the others are zero"
    ):
        integrate_field(SQUARE, np.ones((4, 3)))
    with pytest.raises(InputError, match="field has 12 rows of 1"):
        integrate_field(K, np.ones(12))
    with pytest.raises(InputError, match=r"field has shape \(2, 2, 2\)"):
        integrate_field(K, np.ones((2, 2, 2)))
    with pytest.raises(InputError, match=r"field must return a vector for every place, so shape \(4, 2\), got \(2,\)"):
        integrate_field(SQUARE, lambda _: np.ones(2))
    with pytest.raises(InputError, match="field must hold real numbers"):
        integrate_field(SQUARE, [["a", "b"]] * 4)


def test_what_cannot_be_integrated_is_refused():
    with pytest.raises(InputError, match='at must be "vertices" or "cells", got \'faces\''):
        integrate_field(SQUARE, SQUARE.points, at="faces")
    with pytest.raises(InputError, match='quantity must be "circulation" or "flux", got \'curl\''):
        integrate_field(SQUARE, SQUARE.points, quantity="curl")
    with pytest.raises(InputError, match="a flux needs faces in a plane or in space, got dimension 1"):
        integrate_field(grid(3), np.ones((3, 1)), quantity="flux")
    with pytest.raises(InputError, match="need points, this complex has none"):
        integrate_field(Complex.from_edges([0], [1]), np.ones((2, 2)))
    dangling = Complex.from_edges([0, 1, 2, 2], [1, 2, 0, 3], points=np.eye(4)[:, :2]).with_faces([[0, 1, 2]])
    with pytest.raises(
        InputError, match=r"edge 3 \(2, 3\) has no face beside it to take a value from; use data at vertices"
    ):
        integrate_field(dangling, [[1, 1]], at="cells")
