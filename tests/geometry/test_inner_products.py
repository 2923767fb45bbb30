"""Inner products, codifferential and Laplacian of a metric."""

import numpy as np
import pytest

from dec.calculus.complex import Complex, grid
from dec.errors import InputError, TopologyError
from dec.geometry.metric import Metric

from .shapes import delaunay, hexahedra, icosahedron, kite, octagons_and_squares, sample


def metrics():
    yield Metric(sample("annulus.vtu")[0], "barycentric")
    yield Metric(icosahedron())
    yield Metric(delaunay(5, 40))
    yield Metric(delaunay(5, 14, 3))
    yield Metric(octagons_and_squares())
    yield Metric(hexahedra(jitter=0.05), "barycentric")
    yield Metric(grid((3, 4, 3), periodic=(True, False, True), spacing=(1, 0.3, 2)))
    K = Complex.from_edges([0, 1, 1, 2], [1, 2, 2, 2], 4)
    yield Metric.weighted(K, vertices=[1, 2, 3, 4], edges=[0.5, 2, 1, 7])


def test_the_codifferential_is_the_adjoint_of_the_derivative():
    random = np.random.default_rng(11)
    for metric in metrics():
        K = metric.complex
        for k in range(K.dim):
            a = K.cochain(k, random.normal(size=K.counts[k]))
            b = K.cochain(k + 1, random.normal(size=K.counts[k + 1]))
            delta = metric.codifferential(b)
            size = np.abs(metric.weights(k)) @ np.abs(a.values * delta.values)
            size += np.abs(metric.weights(k + 1)) @ np.abs(a.d().values * b.values)
            assert abs(metric.inner(a.d(), b) - metric.inner(a, delta)) <= 1e-13 * size


def test_the_codifferential_of_a_flow_is_what_comes_in_less_what_goes_out():
    K = Complex.from_edges([0, 1, 1], [1, 2, 3])
    flow = K.cochain(1, [5, 2, 4])
    assert Metric.weighted(K, vertices=[1, 2, 1, 1]).codifferential(flow).values.tolist() == [-5, -0.5, 2, 4]


def test_the_weak_laplacian_is_symmetric_and_gives_the_two_squared_lengths():
    random = np.random.default_rng(12)
    for metric in metrics():
        K = metric.complex
        for k in range(K.dim + 1):
            L = metric.laplacian(k)
            assert L.shape == (K.counts[k], K.counts[k])
            assert L.has_sorted_indices
            scale = abs(L).max()
            assert abs(L - L.T).max() <= 1e-12 * scale
            a = K.cochain(k, random.normal(size=K.counts[k]))
            total = metric.inner(a.d(), a.d()) if k < K.dim else 0.0
            if k:
                delta = metric.codifferential(a)
                total += metric.inner(delta, delta)
            size = np.abs(a.values) @ (abs(L) @ np.abs(a.values))
            assert abs(a.values @ (L @ a.values) - total) <= 1e-12 * size


def test_the_vertex_laplacian_is_the_dense_product():
    metric = Metric(delaunay(8, 10))
    d = metric.complex.coboundary(0).toarray().astype(float)
    np.testing.assert_allclose(metric.laplacian(0).toarray(), d.T @ np.diag(metric.weights(1)) @ d, atol=1e-12)
    assert metric.star(1).toarray().tolist() == np.diag(metric.weights(1)).tolist()


def test_columns_are_snapshots():
    metric = Metric(icosahedron())
    K = metric.complex
    values = np.random.default_rng(3).normal(size=(K.counts[1], 3))
    w = K.cochain(1, values)
    for i in range(3):
        one = K.cochain(1, values[:, i])
        assert metric.inner(w, w)[i] == pytest.approx(metric.inner(one, one), rel=1e-14)
        assert metric.norm(w)[i] == pytest.approx(metric.norm(one), rel=1e-14)
        np.testing.assert_allclose(metric.codifferential(w).values[:, i], metric.codifferential(one).values, rtol=1e-12)


def test_weights_are_read_only_and_a_star_is_a_copy():
    metric = Metric(icosahedron())
    with pytest.raises(ValueError, match="read-only"):
        metric.weights(0)[0] = 1
    metric.star(0).data[0] = 7
    assert metric.weights(0)[0] != 7


def test_a_norm_needs_positive_weights_and_says_which_one_is_not():
    metric = Metric(kite())
    w = metric.complex.cochain(1, np.ones(5))
    assert isinstance(metric.inner(w, w), float)
    with pytest.raises(InputError, match=r'edge 0 \(0, 1\) has the circumcentric weight -2.4; use kind="barycentric"'):
        metric.norm(w)
    assert Metric(metric.complex, "barycentric").norm(w) > 0
    metric = Metric(Complex.from_faces([[0, 1, 2]], points=[[0, 0], [1, 0], [0, 1], [5, 5]]), "barycentric")
    with pytest.raises(InputError, match="divides by the weights, and vertex 3 has the barycentric weight 0; leave"):
        metric.laplacian(1)


def test_cochains_of_another_complex_or_degree_are_refused():
    metric, other = Metric(icosahedron()), icosahedron()
    with pytest.raises(TopologyError, match="lives on another complex"):
        metric.norm(other.cochain(0, np.ones(12)))
    K = metric.complex
    with pytest.raises(TopologyError, match=r"got degree 0 with shape \(12,\) and degree 1 with shape \(30,\)"):
        metric.inner(K.cochain(0, np.ones(12)), K.cochain(1, np.ones(30)))


def test_exact_cochains_are_measured_as_floats():
    metric = Metric(icosahedron())
    K = metric.complex
    assert metric.inner(K.cochain(0, [2] * 12), K.cochain(0, [3] * 12)) == pytest.approx(6 * metric.weights(0).sum())
