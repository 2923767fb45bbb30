"""Every sign convention, pinned by hand: identities alone cannot see a sign that is flipped everywhere."""

import numpy as np
import pytest

from dec.calculus.complex import Complex, grid
from dec.calculus.exact import check_line_integral, check_stokes


def test_the_derivative_of_vertex_values_is_head_minus_tail():
    K = Complex.from_edges([0, 2], [1, 1])
    assert K.cochain(0, [5, 7, 100]).d().values.tolist() == [2, -93]


def test_the_boundary_of_an_edge_is_its_head_minus_its_tail():
    K = Complex.from_edges([2], [0], 3)
    assert K.chain(1, [1]).boundary().coefficients.tolist() == [1, 0, -1]
    assert K.boundary(1).toarray().tolist() == [[1], [0], [-1]]


def test_inflow_minus_outflow_is_the_boundary_of_the_flow():
    # 3 units along 0 -> 1 and 1 unit along 1 -> 2: vertex 1 keeps 2
    K = Complex.from_edges([0, 1], [1, 2])
    assert (K.boundary(1) @ np.array([3, 1])).tolist() == [-3, 2, 1]


def test_edges_of_faces_run_from_low_to_high_vertex_in_lexicographic_order():
    K = Complex.from_faces([[3, 1, 0], [2, 3, 1]])
    assert list(zip(K.tail.tolist(), K.head.tolist(), strict=True)) == [(0, 1), (0, 3), (1, 2), (1, 3), (2, 3)]


def test_the_derivative_of_edge_values_adds_them_up_round_the_face_as_it_is_turned():
    K = Complex.from_faces([[0, 1, 2], [2, 1, 0]])
    # edges 01, 02, 12 carry 1, 10, 100: walking 0 -> 1 -> 2 -> 0 collects 1 + 100 - 10
    assert K.cochain(1, [1, 10, 100]).d().values.tolist() == [91, -91]


def test_the_derivative_of_a_flux_is_what_leaves_a_tetrahedron_of_positive_volume():
    K = Complex.from_cells({"tetra": [[0, 1, 2, 3]]}, points=[[0, 0, 0], [1, 0, 0], [0, 1, 0], [0, 0, 1]])
    # one unit through each face as it is stored: 012 and 023 are turned inward, 013 and 123 outward
    assert K.faces.flat.reshape(-1, 3).tolist() == [[0, 1, 2], [0, 1, 3], [0, 2, 3], [1, 2, 3]]
    assert K.cochain(2, [1, 10, 100, 1000]).d().values.tolist() == [-1 + 10 - 100 + 1000]
    # the field (x, 0, 0) has divergence 1: its flux, area vector times mean of x, adds up to the volume 1/6
    x = K.points[:, 0]
    fluxes = []
    for face in range(4):
        corners = K.faces.row(face)
        area = np.cross(*(K.points[corners[1:]] - K.points[corners[0]])) / 2
        fluxes.append(area[0] * x[corners].mean())
    assert K.cochain(2, fluxes).d().values[0] == pytest.approx(1 / 6, abs=1e-15)


def test_a_path_counts_plus_one_along_and_minus_one_against_an_edge():
    K = Complex.from_edges([0, 2, 2], [1, 1, 3])
    assert K.path([0, 1, 2, 3]).coefficients.tolist() == [1, -1, 1]
    assert K.path([3, 2, 1, 0]).coefficients.tolist() == [-1, 1, -1]


def test_a_path_that_turns_back_cancels_and_one_that_goes_round_twice_counts_twice():
    K = Complex.from_edges([0, 1, 2], [1, 2, 0])
    assert K.path([0, 1, 0, 1]).coefficients.tolist() == [1, 0, 0]
    assert K.path([0, 1, 2, 0, 1, 2], closed=True).coefficients.tolist() == [2, 2, 2]


def test_the_line_integral_of_differences_is_end_minus_start():
    K = Complex.from_edges([0, 2], [1, 1])
    finding = check_line_integral(K.path([0, 1, 2]), K.cochain(0, [5, 100, 7]))
    assert (finding.left, finding.right, finding.holds) == (2, 2, True)


def test_a_region_takes_faces_as_they_are_turned_and_its_boundary_keeps_them_on_the_left():
    K = Complex.from_faces([[0, 1, 4, 3], [1, 2, 5, 4]])
    assert K.region([1]).coefficients.tolist() == [0, 1]
    outline = K.region([0, 1]).boundary()
    assert outline.coefficients.tolist() == K.path([0, 1, 2, 5, 4, 3], closed=True).coefficients.tolist()
    # counter-clockwise in the plane: the enclosed area is positive
    points = np.array([[0, 0], [1, 0], [2, 0], [0, 1], [1, 1], [2, 1]])
    x, y = points[[0, 1, 2, 5, 4, 3]].T
    assert (x * np.roll(y, -1) - np.roll(x, -1) * y).sum() / 2 == 2.0


def test_boundary_loops_run_as_their_faces_do():
    K = Complex.from_faces([[0, 1, 2]])
    assert K.boundary_loops()[0].coefficients.tolist() == K.path([0, 1, 2], closed=True).coefficients.tolist()
    K = Complex.from_faces([[2, 1, 0]])
    assert K.boundary_loops()[0].coefficients.tolist() == K.path([2, 1, 0], closed=True).coefficients.tolist()


def test_the_outer_boundary_of_a_ring_runs_counter_clockwise_and_the_hole_clockwise():
    ring = [[i, 4 + i, 4 + (i + 1) % 4, (i + 1) % 4] for i in range(4)]  # 0..3 inside, 4..7 outside
    K = Complex.from_faces(ring)
    inner, outer = K.boundary_loops()
    assert inner.coefficients.tolist() == K.path([0, 3, 2, 1], closed=True).coefficients.tolist()
    assert outer.coefficients.tolist() == K.path([4, 5, 6, 7], closed=True).coefficients.tolist()


def test_stokes_compares_the_boundary_on_the_left_with_the_derivative_on_the_right():
    K = Complex.from_faces([[0, 1, 2]])
    finding = check_stokes(K.region([0]), K.cochain(1, [1, 10, 100]))
    assert (finding.left, finding.right, finding.difference) == (91, 91, 0)


def test_a_grid_is_turned_like_its_axes():
    K = grid((2, 2))
    step = K.points[K.head] - K.points[K.tail]
    field = K.cochain(1, 3.0 * K.points[K.tail, 0] * step[:, 1])
    assert field.d().values.tolist() == [3.0]  # (0, 3 x) turns counter-clockwise, with curl 3
