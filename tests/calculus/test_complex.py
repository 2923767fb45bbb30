"""Making complexes, asking them, and what is refused."""

import copy
import pickle

import numpy as np
import pytest

from dec.calculus.complex import Complex, grid
from dec.errors import InputError, TopologyError


def test_parallel_edges_self_loops_and_directions_are_kept():
    K = Complex.from_edges([1, 0, 0, 2], [0, 1, 1, 2])
    assert K.tail.tolist() == [1, 0, 0, 2]
    assert K.head.tolist() == [0, 1, 1, 2]
    assert K.counts == (3, 4)
    assert K.betti() == (2, 3)


def test_the_number_of_vertices_is_given_or_taken_from_points_ids_or_edges():
    assert Complex.from_edges([0], [1], 5).counts == (5, 1)
    assert Complex.from_edges([0], [1], points=[[0, 0], [1, 0], [2, 0]]).counts == (3, 1)
    assert Complex.from_edges([0], [1], vertex_ids=["A", "B", "C"]).counts == (3, 1)
    assert Complex.from_edges([0], [4]).counts == (5, 1)
    assert Complex.from_faces([[0, 1, 2]], 7).counts == (7, 3, 1)
    assert Complex.from_cells({"tetra": [[0, 1, 2, 5]]}).counts == (6, 6, 4, 1)


def test_the_callers_arrays_are_copied_and_stay_writable():
    tail, faces, points = np.array([0, 1]), np.array([[0, 1, 2]]), np.zeros((3, 2))
    K, S = Complex.from_edges(tail, [1, 2], points=points), Complex.from_faces(faces)
    tail[0], faces[0, 0], points[0, 0] = 2, 2, 9.0
    assert K.tail.tolist() == [0, 1]
    assert K.points[0, 0] == 0.0
    assert S.faces.row(0).tolist() == [0, 1, 2]
    cells = np.array([[0, 1, 2, 3]])
    solid = Complex.from_cells({"tetra": cells})
    cells[0, 0] = 3
    assert solid.solids["tetra"].tolist() == [[0, 1, 2, 3]]


COMPLEXES = {
    "graph": Complex.from_edges([0, 1], [1, 2], vertex_ids=["A", "B", "C"], edge_ids=[1, 2], points=np.zeros((3, 2))),
    "surface": Complex.from_faces([[0, 1, 2], [2, 1, 3, 4]], points=np.zeros((5, 3))),
    "solid": Complex.from_cells({"tetra": [[0, 1, 2, 3]], "hexahedron": [[4, 5, 6, 7, 8, 9, 10, 11]]}),
    "grid": grid((2, 3, 2), periodic=(False, True, False)),
}


def arrays_of(K):
    parts = [K.tail, K.head, K.points, K.vertex_ids, K.edge_ids, *K.solids.values()]
    if K.walks is not None:
        parts += [K.walks.edges, K.walks.signs, K.walks.offsets, K.faces.flat, K.faces.offsets]
    for k in range(K.dim):
        for matrix in (K.coboundary(k), K.boundary(k + 1)):
            parts += [matrix.data, matrix.indices, matrix.indptr]
    return [part for part in parts if part is not None]


@pytest.mark.parametrize("kind", COMPLEXES)
def test_no_array_of_a_complex_can_be_written_and_no_attribute_set(kind):
    K = COMPLEXES[kind]
    assert not any(array.flags.writeable for array in arrays_of(K))
    assert not K.component_labels.flags.writeable
    for name in ("tail", "points", "counts", "anything"):
        with pytest.raises(AttributeError, match="a complex never changes"):
            setattr(K, name, None)


@pytest.mark.parametrize("kind", COMPLEXES)
@pytest.mark.parametrize("way", [lambda K: pickle.loads(pickle.dumps(K)), copy.deepcopy])
def test_a_complex_survives_pickling_and_is_as_unchangeable_as_before(kind, way):
    K = COMPLEXES[kind]
    K.betti()  # what has been computed so far need not travel
    again = way(K)
    assert type(again) is Complex
    assert again.counts == K.counts
    assert again.lattice == K.lattice
    for one, other in zip(arrays_of(K), arrays_of(again), strict=True):
        assert np.array_equal(one, other)
        assert one.dtype == other.dtype
    assert not any(array.flags.writeable for array in arrays_of(again))
    assert again.betti() == K.betti()


def test_int8_wraps_in_a_product_so_a_degree_of_200_shows_as_minus_56_until_widened():
    # the trap that the docstring of coboundary warns of
    K = Complex.from_edges([0] * 200, range(1, 201))
    narrow = K.boundary(1) @ K.coboundary(0)
    assert narrow[0, 0] == -56
    assert (K.boundary(1).astype(int) @ K.coboundary(0))[0, 0] == 200


def test_a_vertex_of_degree_200_is_right_everywhere():
    n = 200
    K = Complex.from_faces([[0, i, i % n + 1] for i in range(1, n + 1)])
    assert (K.counts, K.betti(), K.is_manifold) == ((201, 400, 200), (1, 0, 0), True)
    f = K.cochain(0, [7] + [2] * n)
    assert f.d().values.tolist() == [-5] * n + [0] * n
    spokes = K.chain(1, [1] * n + [0] * n)
    assert spokes.boundary().coefficients.tolist() == [-n] + [1] * n
    assert spokes @ f.d() == -5 * n
    assert not f.d().d().values.any()
    laplacian = K.boundary(1).astype(np.int64) @ K.coboundary(0).astype(np.int64)
    assert laplacian.diagonal().tolist() == [n] + [3] * n
    assert K.path([1, 0, 200]).coefficients.tolist() == [-1] + [0] * (n - 2) + [1] + [0] * n
    assert [f.name for f in K.check() if not f.holds] == []


@pytest.mark.parametrize(("cells", "words"), [
    (Complex.from_edges([0], [1]), "<Complex: 2 vertices, 1 edge; 1 component>"),
    (Complex.from_faces([[0, 1, 2], [5, 6, 7]], 8), "<Complex: 8 vertices, 6 edges, 2 faces; 4 components>"),
    (grid((101, 101)), "<Complex: 10,201 vertices, 20,200 edges, 10,000 faces; 1 component>"),
])  # fmt: skip
def test_a_complex_shows_its_counts(cells, words):
    assert repr(cells) == words


@pytest.mark.parametrize(
    ("make", "error", "message"),
    [
        (lambda: Complex.from_edges([0, 1], [1]), InputError, "tail and head must have equal length, got 2 and 1"),
        (lambda: Complex.from_edges([0.0], [1]), InputError, r"tail must hold whole numbers, got float64; convert it"),
        (lambda: Complex.from_edges([[0]], [[1]]), InputError, r"tail must have 1 axis, got shape \(1, 1\)"),
        (lambda: Complex.from_edges(["A"], ["B"]), InputError, "tail must hold whole numbers, got text"),
        (lambda: Complex.from_edges([0], [2], 2), TopologyError, "edge 0: head must be a vertex 0 .. 1, got 2"),
        (lambda: Complex.from_edges([0], [1], -1), InputError, "n_vertices must not be negative, got -1"),
        (lambda: Complex.from_edges([0], [1], 2.0), InputError, "n_vertices must hold whole numbers"),
        (lambda: Complex.from_edges([0], [1], points=5.0), InputError, r"points must have 2 axes, got shape \(\)"),
        (lambda: Complex.from_edges([0], [1], points=np.zeros((2, 4))), InputError, "points must have 1 to 3 coord"),
        (lambda: Complex.from_edges([0], [1], 3, points=np.zeros((2, 2))), InputError, "one row for each of 3 vert"),
        (
            lambda: Complex.from_edges([0], [1], points=[[0, 0], [0, np.nan]]),
            InputError,
            r"points must be finite, got nan at \(1, 1\)",
        ),
        (
            lambda: Complex.from_edges([0], [1], points=[["0", "1"], ["2", "3"]]),
            InputError,
            "points must hold real numbers, got text",
        ),
        (
            lambda: Complex.from_edges([0], [1], vertex_ids=["A", "A"]),
            InputError,
            "vertex id 'A' is used twice, at 0 and 1",
        ),
        (lambda: Complex.from_edges([0], [1], edge_ids=["A", "B"]), InputError, "edge_ids must hold 1 names, got 2"),
        (
            lambda: Complex.from_edges([0], [1], vertex_ids=[["A"], "B"]),
            InputError,
            r"vertex id \['A'\] at 0 must be hashable",
        ),
        (lambda: Complex.from_edges([0], [1], vertex_ids=7), InputError, "vertex_ids must be a list of names, got 7"),
        (
            lambda: Complex.from_edges([0], [1], vertex_ids="AB"),
            InputError,
            "vertex_ids must be a list of names, got 'AB'",
        ),
        (lambda: Complex.from_faces([[0, 1]]), TopologyError, r"face 0 must have at least three corners, got \[0, 1\]"),
        (lambda: Complex.from_faces([[0, 1, 5]], 3), TopologyError, "face 0 names vertex 5; there are vertices 0 .. 2"),
        (lambda: Complex.from_cells({"wedge": [[0, 1, 2, 3, 4, 5]]}), InputError, "tetra or hexahedron, got 'wedge'"),
        (
            lambda: Complex.from_cells({"tetra": [[0, 1, 2]]}),
            InputError,
            r"tetra must have shape \(n, 4\), got \(1, 3\)",
        ),
        (lambda: Complex.from_cells({"tetra": [0, 1, 2, 3]}), InputError, r"tetra must have 2 axes, got shape \(4,\)"),
        (
            lambda: Complex.from_cells([[0, 1, 2, 3]]),
            InputError,
            "cells must map tetra or hexahedron to corners, got list",
        ),
        (lambda: grid(()), InputError, r"on each of 1 to 3 axes, got \(\)"),
        (lambda: grid((2, 0)), InputError, r"at least 1 vertex on each of 1 to 3 axes, got \(2, 0\)"),
        (lambda: grid((2, 2, 2, 2)), InputError, "1 to 3 axes"),
        (lambda: grid(3, spacing=0.0), InputError, "spacing must be positive, got 0.0"),
        (lambda: grid(3, spacing=np.inf), InputError, "spacing must be finite, got inf"),
        (lambda: grid((3, 3), spacing=[1, 2, 3]), InputError, "spacing must be one number or one for each of 2 axes"),
        (
            lambda: grid((3, 3), periodic=[True] * 3),
            InputError,
            "periodic must be one number or one for each of 2 axes",
        ),
    ],
)
def test_what_makes_no_complex_is_refused_in_one_line_that_names_it(make, error, message):
    with pytest.raises(error, match=message) as caught:
        make()
    assert "\n" not in str(caught.value)


@pytest.mark.parametrize("k", [-1, 2, True, 0.0, "0"])
def test_there_is_no_coboundary_but_those_of_the_degrees_below_the_dimension(k):
    K = COMPLEXES["surface"]
    with pytest.raises(InputError, match=rf"degree must be 0 .. 1 for a complex of dimension 2, got {k!r}"):
        K.coboundary(k)
    with pytest.raises(InputError, match=r"degree must be 1 .. 2 for a complex of dimension 2, got"):
        K.boundary(k if k != 2 else 3)


def test_boundary_is_the_transpose_of_coboundary():
    for K in COMPLEXES.values():
        for k in range(K.dim):
            assert (K.boundary(k + 1).toarray() == K.coboundary(k).toarray().T).all()


def test_a_graph_has_no_faces_to_ask_about():
    K = COMPLEXES["graph"]
    for ask in (lambda: K.incidences, lambda: K.fans, K.boundary_loops, K.boundary_walks):
        with pytest.raises(TopologyError, match="dimension 1"):
            ask()
    assert K.is_orientable is True
    assert K.turning_proposal().tolist() == K.reversing_loop().tolist() == []


@pytest.mark.parametrize(
    ("ask", "error", "message"),
    [
        (lambda K: K.path(["A", "D"]), InputError, "no vertex 'D' among the 3 vertex ids"),
        (lambda K: K.path(["A", "C"]), TopologyError, "vertices 'A' and 'C' must share an edge, there is none"),
        (lambda K: K.region([0]), InputError, "a graph without faces has no region"),
        (lambda K: K.chain(2, []), InputError, "degree must be 0 .. 1"),
        (lambda K: K.cochain(1, [1, 2, 3]), InputError, r"shape \(2,\) or \(2, m\) on degree 1, got \(3,\)"),
    ],
)
def test_a_graph_with_names_is_asked_by_names(ask, error, message):
    with pytest.raises(error, match=message):
        ask(COMPLEXES["graph"])


@pytest.mark.parametrize(
    ("ask", "error", "message"),
    [
        (lambda K: K.path([0, 9]), InputError, "vertices must be 0 .. 4, got 9"),
        (lambda K: K.path([0, -1]), InputError, "vertices must be 0 .. 4, got -1"),
        (lambda K: K.path(["A"]), InputError, "vertices must hold whole numbers, got text"),
        (lambda K: K.path([0], closed=True), TopologyError, "vertices 0 and 0 must share an edge"),
        (lambda K: K.region([2]), InputError, "face 2 is not there; there are 0 .. 1"),
        (lambda K: K.region([-1]), InputError, "face -1 is not there"),
        (lambda K: K.region([1, 1]), InputError, "face 1 is given twice"),
        (lambda K: K.region([True, False]), InputError, "faces must hold whole numbers, got bool"),
        (
            lambda K: K.with_faces("triangles"),
            TopologyError,
            "faces can be put on a graph only; this complex has dimension 2",
        ),
    ],
)
def test_a_surface_without_names_is_asked_by_numbers(ask, error, message):
    with pytest.raises(error, match=message):
        ask(COMPLEXES["surface"])


def test_a_path_through_parallel_edges_is_ambiguous_and_says_so():
    K = Complex.from_edges([0, 1], [1, 0])
    with pytest.raises(TopologyError, match=r"vertices 0 and 1 share 2 edges; say which by a chain of edges"):
        K.path([0, 1])


def test_a_path_goes_through_a_self_loop_along_its_direction():
    assert Complex.from_edges([0, 1], [1, 1]).path([0, 1, 1]).coefficients.tolist() == [1, 1]


def test_paths_and_regions_of_nothing_are_zero():
    K = COMPLEXES["surface"]
    assert not K.path([]).coefficients.any()
    assert not K.path([3]).coefficients.any()
    assert not K.path([], closed=True).coefficients.any()
    assert not K.region([]).coefficients.any()


@pytest.mark.parametrize("K", [Complex.from_edges([], []), Complex.from_faces([]), Complex.from_cells({})])
def test_a_complex_of_nothing_answers_every_question(K):
    assert set(K.counts) == {0}
    assert set(K.betti()) == {0}
    assert (K.euler, K.n_components, K.is_manifold, K.is_orientable) == (0, 0, True, True)
    assert all(finding.holds for finding in K.check())


def test_what_is_done_to_a_matrix_that_was_handed_out_does_not_reach_the_complex():
    K = Complex.from_edges([0, 1], [1, 2])
    taken = K.coboundary(0)
    taken.data = abs(taken.data)
    K.boundary(1).data = np.zeros(4, np.int8)
    assert K.coboundary(0).toarray().tolist() == [[-1, 1, 0], [0, -1, 1]]
    assert K.cochain(0, [5, 7, 4]).d().values.tolist() == [2, -3]


@pytest.mark.parametrize("value", ["yes", "1", 0.5, 2, None, [True, "no"], np.array([1.0, 0.0])])
def test_a_grid_closes_by_true_or_false_only(value):
    with pytest.raises(InputError, match="periodic must be True or False, or one of them for each axis, got"):
        grid((3, 3), periodic=value)


@pytest.mark.parametrize("value", [True, np.True_, 1, [True, 1], np.array([True, True])])
def test_a_grid_closes_by_any_kind_of_true(value):
    assert grid((3, 3), periodic=value).lattice.periodic == (True, True)


@pytest.mark.parametrize(
    "make",
    [
        lambda: Complex.from_edges([0], [2**31]),
        lambda: Complex.from_edges([10**7], [0]),
        lambda: Complex.from_faces([[0, 1, 2**40]]),
        lambda: Complex.from_cells({"tetra": [[0, 1, 2, 2**62]]}),
    ],
)
def test_a_vertex_number_far_beyond_the_number_of_cells_is_refused_before_any_array_of_that_size(make):
    words = r"vertex numbers must run from 0 without wide gaps, got \d+ among \d corners; .*n_vertices"
    with pytest.raises(InputError, match=words):
        make()


def test_many_vertices_may_be_asked_for_and_ten_million_need_no_reason():
    assert Complex.from_edges([0], [10**7 - 1]).counts == (10**7, 1)
    assert Complex.from_edges([0], [10**7], 10**7 + 1).counts == (10**7 + 1, 1)
