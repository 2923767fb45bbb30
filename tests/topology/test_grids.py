"""Grids in one to three axes, pinned by hand, and against counting corners one by one."""

import itertools

import numpy as np
import pytest

from dec.calculus.complex import grid


def ends(K):
    return list(zip(K.tail.tolist(), K.head.tolist(), strict=True))


def test_edges_of_one_axis_run_to_the_higher_vertex():
    K = grid(4)
    assert ends(K) == [(0, 1), (1, 2), (2, 3)]
    assert K.coboundary(0).toarray()[0].tolist() == [-1, 1, 0, 0]


def test_the_last_edge_of_a_closed_axis_runs_back_to_the_first_vertex():
    assert ends(grid(3, periodic=True)) == [(0, 1), (1, 2), (2, 0)]
    assert ends(grid(2, periodic=True)) == [(0, 1), (1, 0)]
    assert ends(grid(1, periodic=True)) == [(0, 0)]


def test_two_axes_are_numbered_row_by_row_with_edges_along_the_first_axis_first():
    K = grid((2, 3))
    assert ends(K) == [(0, 3), (1, 4), (2, 5), (0, 1), (1, 2), (3, 4), (4, 5)]
    assert K.points.tolist() == [[0, 0], [0, 1], [0, 2], [1, 0], [1, 1], [1, 2]]


def test_a_face_of_two_axes_is_turned_from_the_first_axis_to_the_second():
    K = grid((2, 2))
    # corners 0 (0,0), 2 (1,0), 3 (1,1), 1 (0,1): counter-clockwise where the first axis is x and the second is y
    assert K.faces.row(0).tolist() == [0, 2, 3, 1]
    # along 0 -> 2, along 2 -> 3, against 1 -> 3, against 0 -> 1
    assert K.walks.edges.tolist() == [0, 3, 1, 2]
    assert K.walks.signs.tolist() == [1, 1, -1, -1]
    x, y = K.points[K.faces.row(0)].T
    assert (x * np.roll(y, -1) - np.roll(x, -1) * y).sum() / 2 == 1.0


def test_faces_of_three_axes_come_by_plane_and_a_cell_counts_them_outward():
    K = grid((2, 2, 2))
    assert K.counts == (8, 12, 6, 1)
    # planes xy, xz, yz, each at the low end first; d = Dx Fyz - Dy Fxz + Dz Fxy
    assert K.coboundary(2).toarray().tolist() == [[-1, 1, 1, -1, -1, 1]]
    for face, sign in enumerate(K.coboundary(2).toarray()[0]):
        p = K.points[K.faces.row(face)]
        assert np.cross(p[1] - p[0], p[2] - p[0]) @ (p.mean(axis=0) - 0.5) == 0.5 * sign


def test_the_solid_corners_of_a_grid_are_in_the_order_of_a_vtk_hexahedron():
    K = grid((2, 2, 2))
    corners = K.points[K.solids["hexahedron"][0]]
    expected = [[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0], [0, 0, 1], [1, 0, 1], [1, 1, 1], [0, 1, 1]]
    assert corners.tolist() == expected


SHAPES = [
    (shape, closed)
    for n_axes in (1, 2, 3)
    for shape in itertools.product((1, 2, 3), repeat=n_axes)
    for closed in itertools.product((False, True), repeat=n_axes)
]


@pytest.mark.parametrize(("shape", "closed"), SHAPES)
def test_a_grid_has_the_cells_and_the_homology_of_a_product_of_lines_and_circles(shape, closed):
    K = grid(shape, periodic=closed)
    # Kuenneth: polynomials multiply. One axis has n vertices and n - 1 edges, or n when closed.
    counts = betti = np.array([1])
    for n, circle in zip(shape, closed, strict=True):
        counts = np.convolve(counts, [n, n if circle else n - 1])
        betti = np.convolve(betti, [1, 1 if circle else 0])
    assert K.counts == tuple(counts.tolist())
    assert K.betti() == tuple(betti.tolist())
    for k in range(1, K.dim):
        assert not (K.coboundary(k).astype(int) @ K.coboundary(k - 1).astype(int)).count_nonzero()
    assert K.is_orientable
    assert K.is_manifold == all(n > 1 or circle for n, circle in zip(shape, closed, strict=True))


@pytest.mark.parametrize(("shape", "closed"), [s for s in SHAPES if all(n > 1 or c for n, c in zip(*s, strict=True))])
def test_nothing_is_wrong_with_a_grid_however_short_its_closed_axes(shape, closed):
    assert [f.name for f in grid(shape, periodic=closed).check() if not f.holds] == []


@pytest.mark.parametrize("closed", [(False, False, False), (True, False, True), (True, True, True)])
def test_edges_and_faces_of_a_grid_join_the_neighbours_that_the_indices_say(closed):
    shape = (3, 4, 5)
    K = grid(shape, periodic=closed)
    number = np.arange(60).reshape(shape)
    expected = []
    for axis in range(3):
        for index in np.ndindex(*shape):
            beyond = list(index)
            beyond[axis] += 1
            if closed[axis] or beyond[axis] < shape[axis]:
                expected.append((number[index], number[tuple(np.mod(beyond, shape))]))
    assert ends(K) == expected
    assert K.walks is not None
    for face in range(K.counts[2]):
        corners = K.faces.row(face).tolist()
        sides = list(zip(corners, corners[1:] + corners[:1], strict=True))
        for (a, b), edge, sign in zip(sides, K.walks.edges[4 * face :], K.walks.signs[4 * face :], strict=False):
            assert (a, b) == ends(K)[edge][:: int(sign)]
