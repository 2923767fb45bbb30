"""Tetrahedra and hexahedra: their faces, told apart and turned."""

import itertools

import numpy as np
import pytest

from dec.errors import TopologyError
from dec.topology.polygons import edges_of_faces, face_coboundary
from dec.topology.solids import FACES, faces_of_cells

CUBE = np.array([[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0], [0, 0, 1], [1, 0, 1], [1, 1, 1], [0, 1, 1]], float)
SIMPLEX = np.array([[0, 0, 0], [1, 0, 0], [0, 1, 0], [0, 0, 1]], float)  # det > 0


def least_way(loop):
    ways = [(loop[i:] + loop[:i], 1) for i in range(len(loop))]
    ways += [(way[::-1], -1) for way, _ in ways]
    return min(ways, key=lambda way: (way[0], -way[1]))


def slow_faces_of_cells(cells):
    """Face after face with dictionaries: triangles first, each kind by its ascending corners."""
    given = []
    first = 0
    for kind, corners in cells.items():
        for c, row in enumerate(corners.tolist()):
            given += [(first + c, *least_way([row[i] for i in side])) for side in FACES[kind].tolist()]
        first += len(corners)
    faces = sorted({tuple(loop) for _, loop, _ in given}, key=lambda loop: (len(loop), sorted(loop)))
    matrix = np.zeros((first, len(faces)), int)
    for cell, loop, sign in given:
        matrix[cell, faces.index(tuple(loop))] += sign
    return [list(loop) for loop in faces], matrix.tolist()


@pytest.mark.parametrize(("kind", "points"), [("tetra", SIMPLEX), ("hexahedron", CUBE)])
def test_every_listed_face_of_a_cell_of_positive_volume_is_turned_outward(kind, points):
    # the corner order of the VTK file format; a right-hand turn round the face points away from the middle
    for side in FACES[kind]:
        p = points[side]
        normal = np.cross(p[1] - p[0], p[2] - p[0])
        assert normal @ (p.mean(axis=0) - points.mean(axis=0)) > 0


def test_a_tetrahedron_counts_plus_one_where_the_stored_face_is_turned_out_of_it():
    faces, coboundary = faces_of_cells({"tetra": np.array([[0, 1, 2, 3]])}, 4)
    # stored 012 looks up at corner 3, so into the cell; 013 is turned outward; 023 inward; 123 outward
    assert faces.flat.reshape(-1, 3).tolist() == [[0, 1, 2], [0, 1, 3], [0, 2, 3], [1, 2, 3]]
    assert coboundary.toarray().tolist() == [[-1, 1, -1, 1]]


def test_a_hexahedron_counts_plus_one_where_the_stored_face_is_turned_out_of_it():
    faces, coboundary = faces_of_cells({"hexahedron": np.arange(8)[None]}, 8)
    loops = faces.flat.reshape(-1, 4)
    assert loops.tolist() == [[0, 1, 2, 3], [0, 1, 5, 4], [0, 3, 7, 4], [1, 2, 6, 5], [2, 3, 7, 6], [4, 5, 6, 7]]
    assert coboundary.toarray().tolist() == [[-1, 1, -1, 1, 1, 1]]
    for loop, sign in zip(loops, coboundary.toarray()[0], strict=True):
        p = CUBE[loop]
        assert np.sign(np.cross(p[1] - p[0], p[2] - p[0]) @ (p.mean(axis=0) - 0.5)) == sign


def test_two_cells_use_their_common_face_opposite_ways():
    faces, coboundary = faces_of_cells({"tetra": np.array([[0, 1, 2, 3], [1, 2, 3, 4]])}, 5)
    common = faces.flat.reshape(-1, 3).tolist().index([1, 2, 3])
    assert coboundary.toarray()[:, common].tolist() == [1, -1]


def assert_sound(cells, n_vertices):
    faces, coboundary = faces_of_cells(cells, n_vertices)
    rows = [faces.row(i).tolist() for i in range(len(faces))]
    assert (rows, coboundary.toarray().tolist()) == slow_faces_of_cells(cells)
    tail, _, walks = edges_of_faces(faces, n_vertices)
    assert not (coboundary.astype(int) @ face_coboundary(walks, len(tail)).astype(int)).count_nonzero()


def test_random_tetrahedra_agree_with_telling_their_faces_apart_one_by_one():
    random = np.random.default_rng(3)
    for _ in range(20):
        assert_sound({"tetra": np.array([random.permutation(7)[:4] for _ in range(12)])}, 7)


def test_hexahedra_beside_tetrahedra_agree_with_telling_their_faces_apart_one_by_one():
    random = np.random.default_rng(4)
    number = np.arange(36).reshape(3, 4, 3)
    steps = CUBE.astype(int).tolist()
    blocks = itertools.product(range(2), range(3), range(2))
    cubes = np.array([[number[i + a, j + b, k + c] for a, b, c in steps] for i, j, k in blocks])
    for _ in range(10):
        relabel = random.permutation(36)
        hexahedra = relabel[cubes[random.permutation(len(cubes))]]
        tetrahedra = np.array([random.permutation(36)[:4] for _ in range(9)])
        assert_sound({"hexahedron": hexahedra, "tetra": tetrahedra}, 36)
        assert_sound({"tetra": tetrahedra, "hexahedron": hexahedra}, 36)


def test_tetrahedra_that_repeat_a_corner_still_have_a_boundary_without_boundary():
    random = np.random.default_rng(5)
    for _ in range(30):
        cells = {"tetra": random.integers(0, 4, (6, 4))}
        faces, coboundary = faces_of_cells(cells, 4)
        tail, _, walks = edges_of_faces(faces, 4)
        assert not (coboundary.astype(int) @ face_coboundary(walks, len(tail)).astype(int)).count_nonzero()


def test_wedges_given_as_collapsed_hexahedra_share_their_faces():
    # a wedge 012 345 as a hexahedron repeats two corners; the neighbour starts the common triangle elsewhere
    cells = {"hexahedron": np.array([[0, 1, 2, 2, 3, 4, 5, 5], [1, 2, 2, 0, 7, 8, 8, 6]])}
    assert_sound(cells, 9)
    faces, coboundary = faces_of_cells(cells, 9)
    common = [faces.row(i).tolist() for i in range(len(faces))].index([0, 1, 2, 2])
    assert coboundary.toarray()[:, common].tolist() == [-1, -1]


def test_cells_that_join_four_corners_in_different_orders_are_refused():
    cells = np.array([[0, 1, 2, 3, 4, 5, 6, 7], [0, 2, 1, 3, 8, 9, 10, 11]])
    with pytest.raises(TopologyError, match=r"two cells join corners \[0, 1, 2, 3\] in different orders"):
        faces_of_cells({"hexahedron": cells}, 12)


@pytest.mark.parametrize("kind", ["tetra", "hexahedron"])
def test_a_corner_that_is_no_vertex_is_named_with_its_cell(kind):
    width = {"tetra": 4, "hexahedron": 8}[kind]
    cells = np.stack([np.arange(width), np.arange(width)])
    cells[1, 2] = 99
    with pytest.raises(TopologyError, match=f"{kind} 1 names vertex 99; there are vertices 0 .. {width - 1}"):
        faces_of_cells({kind: cells}, width)


@pytest.mark.parametrize(
    "cells", [{}, {"tetra": np.empty((0, 4), np.int64)}, {"hexahedron": np.empty((0, 8), np.int64)}]
)
def test_no_cells_have_no_faces(cells):
    faces, coboundary = faces_of_cells(cells, 3)
    assert len(faces) == 0
    assert coboundary.shape == (0, 0)
