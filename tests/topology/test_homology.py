"""Homology of whole complexes against dense Smith normal forms, and the limits of what is attempted."""

import numpy as np
import pytest

from dec.calculus.complex import Complex, grid
from dec.errors import TopologyError
from dec.topology import homology as counted
from dec.topology import smith
from dec.topology.homology import cycles, homology

from .known_spaces import faces_along_words, heap, triangles_of_random_corners
from .slow_smith import homology as slow_homology


def matrices(K):
    return tuple(K.coboundary(k) for k in range(K.dim))


def assert_as_dense(K):
    found = homology(matrices(K))
    assert list(zip(found.ranks, found.torsion, strict=True)) == slow_homology(matrices(K), K.counts)
    assert sum((-1) ** k * rank for k, rank in enumerate(found.ranks)) == K.euler


@pytest.mark.parametrize("seed", range(40))
def test_any_polygons(seed):
    random = np.random.default_rng(seed)
    n_faces = int(random.integers(1, 16))
    faces = [random.permutation(7)[: random.integers(3, 5)].tolist() for _ in range(n_faces)]
    assert_as_dense(Complex.from_faces(faces, 7))


@pytest.mark.parametrize("seed", range(60))
def test_polygons_that_repeat_corners(seed):
    random = np.random.default_rng(seed)
    n_faces = int(random.integers(1, 9))
    faces = [random.integers(0, 5, random.integers(3, 7)).tolist() for _ in range(n_faces)]
    assert_as_dense(Complex.from_faces(faces, 5))
    assert_as_dense(faces_along_words(seed))


def test_the_faces_along_words_have_all_kinds_of_torsion():
    found = {homology(matrices(faces_along_words(seed))).torsion[1] for seed in range(60)}
    assert {(), (2,), (3,), (4,), (6,)} <= found


@pytest.mark.parametrize("seed", range(20))
def test_triangles_of_random_corners(seed):
    assert_as_dense(triangles_of_random_corners(18 + seed, 9, seed))


@pytest.mark.parametrize("seed", range(40))
def test_any_tetrahedra(seed):
    assert_as_dense(heap(1 + seed % 14, 7, seed))


@pytest.mark.parametrize("seed", range(20))
def test_tetrahedra_that_repeat_corners(seed):
    assert_as_dense(Complex.from_cells({"tetra": np.random.default_rng(seed).integers(0, 5, (8, 4))}))


def test_a_cell_that_meets_one_face_twice_the_same_way_encloses_nothing():
    # bottom 0123 glued to the top, turned so that both look outward: the face counts twice
    K = Complex.from_cells({"hexahedron": [[0, 1, 2, 3, 0, 3, 2, 1]]})
    assert 2 in np.abs(K.coboundary(2).data)
    assert_as_dense(K)


@pytest.mark.parametrize("seed", range(6))
def test_a_solid_with_cells_taken_out(seed):
    whole = grid((4, 4, 4)).solids["hexahedron"]
    assert_as_dense(Complex.from_cells({"hexahedron": whole[np.random.default_rng(seed).random(27) < 0.6]}))


def full(monkeypatch):
    """Make every boundary with an entry count as full, so that dense elimination has to do with it."""
    monkeypatch.setattr(smith, "_FEW", 1)
    monkeypatch.setattr(smith, "_FULL", 10**9)
    monkeypatch.setattr(smith, "_TURNS", 1)


@pytest.mark.parametrize("seed", range(20))
def test_boundaries_that_are_full_from_the_start_give_the_same(seed, monkeypatch):
    full(monkeypatch)
    assert_as_dense(heap(14, 7, seed))
    assert_as_dense(triangles_of_random_corners(18 + seed, 9, seed))
    assert_as_dense(faces_along_words(seed))


def test_a_heap_of_tetrahedra_is_counted_the_same_by_sparse_and_by_dense_elimination(monkeypatch):
    full(monkeypatch)
    dense = [homology(matrices(heap(n, 45))) for n in (250, 270, 300)]
    monkeypatch.setattr(smith, "_FEW", 10**9)
    assert [homology(matrices(heap(n, 45))) for n in (250, 270, 300)] == dense
    assert all(found.ranks[1] > 0 < found.ranks[2] for found in dense)
    assert [found.torsion[1] for found in dense] == [(2,), (), ()]


def test_the_allowance_of_steps_is_far_above_what_a_sponge_takes(monkeypatch):
    """What each entry adds is enough for 12 x 12 x 12 cells, half of them missing: the most tangled of real shapes."""
    monkeypatch.setattr(smith, "_STEPS", 0)
    random = np.random.default_rng(0)
    cells = grid((13, 13, 13)).solids["hexahedron"][random.random(12**3) < 0.5]
    b0, b1, b2, b3 = Complex.from_cells({"hexahedron": cells}).betti()
    assert (b0 > 1, b1 > 10, b2 > 1, b3) == (True, True, True, 0)


def test_an_elimination_that_fills_up_is_refused_with_a_way_out(monkeypatch):
    words = "cannot be counted exactly in reasonable time: [0-9,]+ equations between [0-9,]+ cells .*take a part"
    K = heap(1400, 100)
    assert K.betti() == (1, 49, 207, 0)  # full, and counted
    monkeypatch.setattr(smith, "_PRODUCTS", 1000)
    with pytest.raises(TopologyError, match=words):
        heap(1400, 100).betti()
    for name in ("_STEPS", "_STEPS_EACH"):
        monkeypatch.setattr(smith, name, 0)
    with pytest.raises(TopologyError, match=words):
        cycles(matrices(K), 2)


def test_a_graph_needs_no_elimination(monkeypatch):
    monkeypatch.setattr(counted, "follow", None)
    random = np.random.default_rng(0)
    K = Complex.from_edges(*random.integers(0, 300, (2, 700)), 300)
    assert homology(matrices(K)).ranks == (K.n_components, K.n_components - K.euler)
