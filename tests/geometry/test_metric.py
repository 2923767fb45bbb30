"""Weights of the circumcentric, the barycentric and the weighted metric."""

import json
from pathlib import Path

import numpy as np
import pytest
from hypothesis import assume, given, settings

from dec.calculus.complex import Complex, grid
from dec.errors import InputError
from dec.geometry.measures import cell_volumes, edge_lengths, face_areas
from dec.geometry.metric import Metric

from . import slow
from .shapes import (
    delaunay,
    hexahedra,
    icosahedron,
    joined,
    kite,
    mixed_solid,
    octagons_and_squares,
    sample,
    tetrahedron_soups,
    triangle_soups,
)

G7 = json.loads((Path(__file__).parents[1] / "reference" / "G7.json").read_text(encoding="utf-8"))
SQUARE = [[0, 0], [1, 0], [1, 1], [0, 1]]


def split_square():
    return Complex.from_faces([[0, 1, 2], [0, 2, 3]], points=SQUARE)


def assert_weights(K, kind, rtol=1e-9, scale=1e-12):
    metric, measures = Metric(K, kind), slow.measures(K)
    for k, dual in enumerate(slow.duals(K, kind)):
        size = np.abs(dual).max()
        np.testing.assert_allclose(metric.weights(k) * measures[k], dual, rtol=rtol, atol=scale * size, err_msg=str(k))


def test_cotangent_weights_have_their_known_values():
    # G7: Duffin 1959; Pinkall and Polthier 1993 (from memory)
    square = split_square()
    assert Metric(square).weights(1)[slow.edge_of(square, 0, 2)] == G7["square_diagonal"]
    assert kite().points.tolist() == G7["kite"]["points"]
    edge = slow.edge_of(kite(), *G7["kite"]["edge"])
    assert Metric(kite()).weights(1)[edge] == pytest.approx(G7["kite"]["weight"], abs=G7["tolerance"])
    triangle = Complex.from_faces([[0, 1, 2]], points=[[0, 0], [1, 0], [0.5, 3**0.5 / 2]])
    np.testing.assert_allclose(Metric(triangle).weights(1), 1 / (2 * 3**0.5), atol=G7["tolerance"])


def test_a_graph_has_one_by_length_on_edges_and_half_the_lengths_at_vertices():
    K = Complex.from_edges([0, 1, 1, 1], [1, 2, 2, 3], points=[[0, 0], [3, 4], [3, 6], [3, 4.5]])
    for kind in ("circumcentric", "barycentric"):
        metric = Metric(K, kind)
        assert metric.weights(1).tolist() == [1 / 5, 1 / 2, 1 / 2, 2]
        assert metric.weights(0).tolist() == [2.5, 4.75, 2, 0.25]


@pytest.mark.parametrize("kind", ["circumcentric", "barycentric"])
@pytest.mark.parametrize("seed", range(3))
def test_weights_of_random_triangles_and_tetrahedra_are_those_added_up_flag_by_flag(kind, seed):
    assert_weights(delaunay(seed, 12), kind)
    assert_weights(delaunay(seed, 9, 3), kind, rtol=1e-7, scale=1e-9)


@settings(max_examples=40, deadline=None)
@given(triangle_soups())
def test_weights_of_any_triangles_are_those_added_up_flag_by_flag(K):
    areas, lengths = face_areas(K), edge_lengths(K)
    assume(lengths.min() > 0.1 and areas.min() > 0.1)
    for kind in ("circumcentric", "barycentric"):
        assert_weights(K, kind, rtol=1e-8, scale=1e-10)


@settings(max_examples=15, deadline=None)
@given(tetrahedron_soups())
def test_weights_of_any_tetrahedra_of_either_hand_are_those_added_up_flag_by_flag(K):
    assume(edge_lengths(K).min() > 0.5 and face_areas(K).min() > 0.5 and np.abs(cell_volumes(K)).min() > 0.5)
    for kind in ("circumcentric", "barycentric"):
        assert_weights(K, kind, rtol=1e-7, scale=1e-8)


def test_weights_of_octagons_and_squares_are_those_added_up_flag_by_flag():
    K = octagons_and_squares(3)
    assert sorted(set(K.faces.lengths.tolist())) == [4, 8]
    for kind in ("circumcentric", "barycentric"):
        assert_weights(K, kind)
        assert Metric(K, kind).positive
    # a side between two octagons: (1 + sqrt 2) / 2 from either centre
    inner = Metric(K).weights(1)[K.incidences.uses == 2]
    np.testing.assert_allclose(inner, np.where(inner > 2, 1 + 2**0.5, 1 + 2**0.5 / 2), rtol=1e-12)


def test_weights_of_boxes_and_warped_hexahedra_are_those_added_up_flag_by_flag():
    assert_weights(hexahedra((2, 1, 2)), "circumcentric")
    assert_weights(hexahedra((2, 1, 2)), "barycentric")
    assert_weights(hexahedra((2, 1, 1), jitter=0.1), "barycentric")
    assert_weights(mixed_solid(), "circumcentric")
    assert_weights(mixed_solid(), "barycentric")


@pytest.mark.parametrize("kind", ["circumcentric", "barycentric"])
def test_a_grid_has_the_weights_of_the_same_cells_given_one_by_one(kind):
    spacing = (1.0, 0.5, 2.0)
    for regular, cells in (
        (grid((4, 3, 3), spacing=spacing), hexahedra((3, 2, 2), spacing=spacing)),
        (
            grid((3, 2), spacing=0.1),
            Complex.from_faces(grid((3, 2)).faces.flat.reshape(-1, 4), points=grid((3, 2), spacing=0.1).points),
        ),
    ):
        one, other = Metric(regular, kind), Metric(cells, kind)
        for k in range(regular.dim + 1):
            rows = [keys(regular, k), keys(cells, k)]
            assert sorted(rows[0]) == sorted(rows[1])
            ordered = [
                np.array(m.weights(k))[np.lexsort(np.array(r).T[::-1])] for m, r in zip((one, other), rows, strict=True)
            ]
            np.testing.assert_allclose(*ordered, rtol=1e-9)


def keys(K, k):
    if k == 0:
        return [(v,) for v in range(K.counts[0])]
    if k == 1:
        return [tuple(sorted(ends)) for ends in zip(K.tail.tolist(), K.head.tolist(), strict=True)]
    if k == 2:
        return [tuple(sorted(K.faces.row(f).tolist())) for f in range(K.counts[2])]
    return [tuple(sorted(row.tolist())) for row in K.solids["hexahedron"]]


@pytest.mark.parametrize("shape", [(5,), (4, 3), (3, 4, 5), (2, 1, 3), (1, 1, 1)])
def test_a_grid_that_closes_on_itself_has_the_same_weights_everywhere(shape):
    steps = (0.1, 0.3, 0.7)[: len(shape)]
    K = grid(shape, spacing=steps, origin=-17.3, periodic=True)
    for kind in ("circumcentric", "barycentric"):
        metric = Metric(K, kind)
        for k in range(K.dim + 1):
            per_axis = metric.weights(k).reshape(-1, K.counts[0])
            assert (per_axis == per_axis[:, :1]).all()
        assert metric.weights(0)[0] == pytest.approx(np.prod(steps), rel=1e-14)
        assert metric.weights(K.dim)[0] == pytest.approx(1 / np.prod(steps), rel=1e-14)
        expected = [np.prod(steps) / h**2 for h in steps]
        np.testing.assert_allclose(metric.weights(1).reshape(len(shape), -1)[:, 0], expected, rtol=1e-14)


def test_vertex_weights_add_up_to_the_area_or_volume():
    surfaces = [sample(n)[0] for n in ("annulus.vtu", "torus.off")] + [joined("bracket.stl"), octagons_and_squares()]
    for K in surfaces:
        for kind in ("circumcentric", "barycentric"):
            assert Metric(K, kind).weights(0).sum() == pytest.approx(face_areas(K).sum(), rel=1e-12)
    for K in (sample("elbow.vtu")[0], delaunay(1, 30, 3), hexahedra()):
        for kind in ("circumcentric", "barycentric"):
            assert Metric(K, kind).weights(0).sum() == pytest.approx(np.abs(cell_volumes(K)).sum(), rel=1e-9)


def test_the_circumcentric_laplacian_of_a_linear_function_is_zero_at_inner_vertices():
    for K in (delaunay(2, 60), sample("annulus.vtu")[0], octagons_and_squares(3), delaunay(2, 60, 3), hexahedra()):
        residual = Metric(K).laplacian(0) @ K.points
        rim = np.zeros(K.counts[0], dtype=bool)
        lone = np.flatnonzero(K.incidences.uses == 1)
        for facet in lone:
            rim[[K.tail[facet], K.head[facet]] if K.dim == 2 else K.faces.row(facet)] = True
        assert not rim.all()
        assert np.abs(residual[~rim]).max() < 1e-11
        assert np.abs(residual[rim]).max() > 1e-3


def test_the_barycentric_laplacian_of_a_linear_function_is_not_zero_on_a_general_mesh():
    K = delaunay(2, 60)
    inner = np.setdiff1d(
        np.arange(60), np.concatenate([K.tail[K.incidences.uses == 1], K.head[K.incidences.uses == 1]])
    )
    assert np.abs((Metric(K, "barycentric").laplacian(0) @ K.points)[inner]).max() > 1e-3


def test_weights_do_not_depend_on_how_faces_are_turned_or_cells_are_given():
    K = delaunay(4, 20)
    random = np.random.default_rng(0)
    faces = K.faces.flat.reshape(-1, 3).copy()
    faces[::2] = faces[::2, ::-1]
    turned = Complex.from_faces(faces, points=K.points)
    for kind in ("circumcentric", "barycentric"):
        for k in range(3):
            np.testing.assert_allclose(
                Metric(turned, kind).weights(k), Metric(K, kind).weights(k), rtol=1e-9, atol=1e-12
            )
    T = delaunay(4, 12, 3)
    cells = np.array([random.permutation(row) for row in T.solids["tetra"]])
    mirrored = Complex.from_cells({"tetra": cells}, points=T.points)
    for k in range(4):
        np.testing.assert_allclose(Metric(mirrored).weights(k), Metric(T).weights(k), rtol=1e-7, atol=1e-9)


def test_barycentric_weights_are_positive_where_circumcentric_ones_are_not():
    for K in (kite(), split_square(), delaunay(0, 40), delaunay(0, 20, 3)):
        assert Metric(K, "barycentric").positive
        assert not Metric(K).positive


def test_check_names_the_cells_whose_weight_is_not_positive():
    findings = {f.name: f for f in Metric(kite()).check()}
    edges = findings["every edge has a positive weight"]
    assert (edges.holds, edges.measured, edges.allowed, edges.where) == (False, 1, 0, (0,))
    assert findings["every face has a positive weight"].holds
    assert all(f.holds for f in Metric(icosahedron()).check())
    assert repr(Metric(kite())) == "<Metric: circumcentric, not positive on 2 vertices, 1 edge>"
    assert repr(Metric(icosahedron())) == "<Metric: circumcentric, positive>"


def right_angled(step, origin, turn=0.0):
    """Squares cut by diagonals, whose weight is zero but for rounding."""
    base = grid((6, 6), spacing=step, origin=origin)
    a, b, c, d = base.faces.flat.reshape(-1, 4).T
    points = base.points @ np.array([[np.cos(turn), np.sin(turn)], [-np.sin(turn), np.cos(turn)]])
    return Complex.from_faces(np.concatenate([np.stack([a, b, c], 1), np.stack([a, c, d], 1)]), points=points)


@pytest.mark.parametrize(
    ("step", "origin", "turn"), [(0.1, 0.0, 0.0), (0.1, 1234.5, 0.0), (1 / 3, -7.7, 0.6), (1, 0, 0)]
)
def test_a_weight_that_is_zero_but_for_rounding_counts_as_zero(step, origin, turn):
    K = right_angled(step, origin, turn)
    metric = Metric(K)
    diagonal = np.flatnonzero(np.abs(edge_lengths(K) - step * 2**0.5) < step / 10)
    assert len(diagonal) == 25
    finding = next(f for f in metric.check() if "edge" in f.name)
    assert finding.where == tuple(diagonal.tolist())
    with pytest.raises(
        InputError, match=r"divides by the weights, and edge \d+ \(\d+, \d+\) has the circumcentric weight"
    ):
        metric.codifferential(K.cochain(2, np.ones(K.counts[2])))


def test_a_small_weight_that_is_known_to_be_positive_is_not_taken_for_zero():
    K = Complex.from_faces([[0, 1, 2], [0, 2, 3]], points=[[0, 0], [1, 0], [1, 1 - 2**-40], [0, 1]])
    weight = Metric(K).weights(1)[1]
    assert 0 < weight < 1e-11
    assert Metric(K).check()[1].holds
    tiny = Complex.from_faces(icosahedron().faces.flat.reshape(-1, 3), points=icosahedron().points * 1e-60)
    assert Metric(tiny).positive


def test_a_weighted_metric_needs_no_points_and_has_ones_by_default():
    K = Complex.from_faces([[0, 1, 2], [0, 2, 3]])
    metric = Metric.weighted(K, edges=[1, 2, 3, 4, 5])
    assert metric.kind == "weighted"
    assert metric.positive
    assert [metric.weights(k).tolist() for k in range(3)] == [[1] * 4, [1, 2, 3, 4, 5], [1, 1]]


@pytest.mark.parametrize("bad", [0.0, -1.0, np.nan, np.inf])
def test_weights_that_are_not_positive_are_refused_with_their_cell(bad):
    K = Complex.from_edges([0, 1], [1, 2], vertex_ids=["S", "J1", "T"], edge_ids=["P7", "P8"])
    with pytest.raises(InputError, match=rf"positive and finite, got {bad} at edge 'P8' \('J1', 'T'\); a sign belongs"):
        Metric.weighted(K, edges=[1, bad])
    with pytest.raises(InputError, match=rf"got {bad} at vertex 'S'"):
        Metric.weighted(K, vertices=[bad, 1, 1])


def test_metrics_that_cannot_be_made_are_refused_with_a_reason():
    with pytest.raises(InputError, match="kind must be 'circumcentric' or 'barycentric', got 'galerkin'"):
        Metric(icosahedron(), "galerkin")
    with pytest.raises(InputError, match="need points, this complex has none"):
        Metric(Complex.from_faces([[0, 1, 2]]))
    with pytest.raises(InputError, match="must be 2, one each, got 3"):
        Metric.weighted(Complex.from_edges([0, 1], [1, 2]), edges=[1, 2, 3])
    with pytest.raises(InputError, match="there are no faces to weigh in a complex of dimension 1"):
        Metric.weighted(Complex.from_edges([0], [1]), faces=[1])
    with pytest.raises(InputError, match=r"degree must be 0 \.\. 2 for a complex of dimension 2, got 3"):
        Metric(icosahedron()).star(3)
    metric = Metric(icosahedron())
    with pytest.raises(InputError, match="needs a cochain of degree 1 or more"):
        metric.codifferential(metric.complex.cochain(0, np.ones(12)))


def test_cells_without_extent_or_circumcentre_are_refused_by_name():
    flat = [[0, 0], [1, 0], [2, 0], [0, 1]]
    corner = [[0, 0, 0], [1, 0, 0], [0, 1, 0], [1, 1, 0]]
    for kind in ("circumcentric", "barycentric"):
        with pytest.raises(InputError, match="face 1 has zero area"):
            Metric(Complex.from_faces([[0, 1, 3], [0, 1, 2]], points=flat), kind)
        with pytest.raises(InputError, match=r"edge 0 \(0, 1\) has zero length.*merge its ends"):
            Metric(Complex.from_edges([0, 1], [1, 2], points=[[1.0], [1.0], [2.0]]), kind)
        with pytest.raises(InputError, match="face 0 gives a corner twice running"):
            Metric(Complex.from_faces([[0, 1, 1, 3]], points=flat), kind)
        with pytest.raises(InputError, match="cell 0 has zero volume"):
            Metric(Complex.from_cells({"tetra": [[0, 1, 2, 3]]}, points=corner), kind)
    quad = Complex.from_faces([[0, 1, 2], [0, 2, 3, 4]], points=[[5, 5], [0, 0], [1, 0], [2, 3], [0, 1]])
    with pytest.raises(InputError, match=r'face 1 has no circumcentre.*kind="barycentric"'):
        Metric(quad)
    assert Metric(quad, "barycentric").positive
    warped = Complex.from_faces([[0, 1, 2, 3]], points=[[0, 0, 0.1], [1, 0, 0], [1, 1, 0.1], [0, 1, 0]])
    with pytest.raises(InputError, match="face 0 has no circumcentre"):
        Metric(warped)
    with pytest.raises(InputError, match=r"(face|cell) 0 has no circumcentre"):
        Metric(hexahedra((1, 1, 1), jitter=0.1))


def test_corners_kept_in_32_bits_still_lie_on_a_circle():
    turn = np.array([[np.cos(0.3), np.sin(0.3)], [-np.sin(0.3), np.cos(0.3)]])
    points = (np.array([[0, 0], [3, 0], [3, 1], [0, 1]]) @ turn).astype(np.float32)
    assert Metric(Complex.from_faces([[0, 1, 2, 3]], points=points)).weights(1) == pytest.approx(
        [1 / 6, 3 / 2, 3 / 2, 1 / 6], rel=1e-5
    )
