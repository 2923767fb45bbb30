"""Exact ranks and the Betti numbers that are counted with them."""

from fractions import Fraction

import numpy as np
import pytest

from dec.calculus.complex import Complex, grid
from dec.errors import TopologyError
from dec.topology import ranks
from dec.topology.ranks import exact_rank, first_betti, top_betti


def slow_rank(matrix):
    """Gaussian elimination in Fractions."""
    rows = [[Fraction(int(v)) for v in row] for row in matrix]
    rank = 0
    for column in range(len(rows[0]) if rows else 0):
        pivot = next((i for i in range(rank, len(rows)) if rows[i][column]), None)
        if pivot is None:
            continue
        rows[rank], rows[pivot] = rows[pivot], rows[rank]
        for i in range(rank + 1, len(rows)):
            factor = rows[i][column] / rows[rank][column]
            rows[i] = [a - factor * b for a, b in zip(rows[i], rows[rank], strict=True)]
        rank += 1
    return rank


def slow_betti(K):
    ranks = [0, *(slow_rank(K.coboundary(k).toarray()) for k in range(K.dim)), 0]
    return tuple(n - ranks[k] - ranks[k + 1] for k, n in enumerate(K.counts))


@pytest.mark.parametrize("seed", range(60))
def test_the_rank_is_that_of_elimination_in_fractions(seed):
    random = np.random.default_rng(seed)
    shape = random.integers(1, 12, 2)
    low_rank = random.integers(-3, 4, (shape[0], 3)) @ random.integers(-2, 3, (3, shape[1]))
    sparse = random.integers(-2, 3, shape) * (random.random(shape) < 0.4)
    for matrix in (low_rank, sparse):
        rows = [{c: int(v) for c, v in enumerate(row) if v} for row in matrix]
        assert exact_rank(rows) == slow_rank(matrix)


def test_entries_that_grow_beyond_64_bits_do_not_disturb_the_rank():
    # a Hilbert-like integer matrix: determinant not zero, yet far below rounding
    n = 12
    lcm = int(np.lcm.reduce(np.arange(1, 2 * n, dtype=object)))
    hilbert = [[lcm // (i + j + 1) for j in range(n)] for i in range(n)]
    assert exact_rank([dict(enumerate(row)) for row in hilbert]) == n
    twice = [*hilbert, [3 * a - 7 * b for a, b in zip(hilbert[2], hilbert[5], strict=True)]]
    assert exact_rank([dict(enumerate(row)) for row in twice]) == n


def test_no_rows_and_empty_rows_have_rank_zero_and_entries_of_zero_do_not_count():
    assert exact_rank([]) == 0
    assert exact_rank([{}, {3: 0}]) == 0
    assert exact_rank([{3: 0, 4: 2}]) == 1


@pytest.mark.parametrize("seed", range(40))
def test_betti_numbers_of_any_polygons_agree_with_dense_ranks(seed):
    random = np.random.default_rng(seed)
    n_faces = int(random.integers(1, 16))
    K = Complex.from_faces([random.permutation(7)[: random.integers(3, 5)].tolist() for _ in range(n_faces)], 7)
    assert K.betti() == slow_betti(K)
    assert sum((-1) ** k * b for k, b in enumerate(K.betti())) == K.euler


@pytest.mark.parametrize("seed", range(40))
def test_betti_numbers_of_faces_that_repeat_corners_agree_with_dense_ranks(seed):
    random = np.random.default_rng(seed)
    K = Complex.from_faces([random.integers(0, 5, random.integers(3, 7)).tolist() for _ in range(8)], 5)
    assert K.betti() == slow_betti(K)


@pytest.mark.parametrize("seed", range(40))
def test_betti_numbers_of_any_tetrahedra_agree_with_dense_ranks(seed):
    random = np.random.default_rng(seed)
    n_cells = int(random.integers(1, 14))
    K = Complex.from_cells({"tetra": np.array([random.permutation(7)[:4] for _ in range(n_cells)])})
    assert K.betti() == slow_betti(K)


@pytest.mark.parametrize("seed", range(20))
def test_betti_numbers_of_tetrahedra_that_repeat_corners_agree_with_dense_ranks(seed):
    random = np.random.default_rng(seed)
    K = Complex.from_cells({"tetra": random.integers(0, 5, (8, 4))})
    assert K.betti() == slow_betti(K)


def test_a_cell_that_meets_one_face_twice_the_same_way_encloses_nothing():
    # bottom 0123 glued to the top, turned so that both look outward: the face counts twice
    K = Complex.from_cells({"hexahedron": [[0, 1, 2, 3, 0, 3, 2, 1]]})
    assert 2 in np.abs(K.coboundary(2).data)
    assert K.betti() == slow_betti(K)


@pytest.mark.parametrize("seed", range(6))
def test_a_solid_with_cells_taken_out_has_the_betti_numbers_of_dense_ranks(seed):
    random = np.random.default_rng(seed)
    whole = grid((4, 4, 4)).solids["hexahedron"]
    K = Complex.from_cells({"hexahedron": whole[random.random(27) < 0.6]})
    assert K.betti() == slow_betti(K)


def test_a_shell_with_a_void_and_a_tunnel_is_counted():
    whole = grid((6, 4, 4)).solids["hexahedron"].reshape(5, 3, 3, 8)
    keep = np.ones((5, 3, 3), dtype=bool)
    keep[1, 1, 1] = False  # a void
    keep[3, 1, :] = False  # a tunnel from face to face
    K = Complex.from_cells({"hexahedron": whole[keep]})
    assert K.betti() == (1, 1, 1, 0)


def test_the_parts_are_what_betti_adds_up():
    K = grid((3, 3), periodic=True)
    assert top_betti(K.incidences, K.sheets) == 1
    assert first_betti(K.coboundary(1), K.forest) == 2


def heap_of_tetrahedra(n_cells, n_vertices):
    random = np.random.default_rng(0)
    return Complex.from_cells({"tetra": np.array([random.permutation(n_vertices)[:4] for _ in range(n_cells)])})


def test_an_elimination_that_fills_up_is_refused_with_a_way_out(monkeypatch):
    K = heap_of_tetrahedra(3000, 150)
    monkeypatch.setattr(ranks, "_STEPS", 0)
    monkeypatch.setattr(ranks, "_STEPS_EACH", 2)
    words = "cannot be counted exactly in reasonable time: [0-9,]+ equations between [0-9,]+ cells .*take a part"
    with pytest.raises(TopologyError, match=words):
        K.betti()


def test_the_allowance_of_steps_is_far_above_what_a_sponge_takes(monkeypatch):
    """A third of it is enough for 12 x 12 x 12 cells, half of them missing: the most tangled of real shapes."""
    monkeypatch.setattr(ranks, "_STEPS", 0)
    monkeypatch.setattr(ranks, "_STEPS_EACH", ranks._STEPS_EACH / 3)
    random = np.random.default_rng(0)
    cells = grid((13, 13, 13)).solids["hexahedron"][random.random(12**3) < 0.5]
    b0, b1, b2, b3 = Complex.from_cells({"hexahedron": cells}).betti()
    assert (b0 > 1, b1 > 10, b2 > 1, b3) == (True, True, True, 0)
