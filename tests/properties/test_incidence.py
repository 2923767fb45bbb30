"""What holds of the incidence of every complex."""

import itertools
import pickle

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from dec.calculus.complex import Complex
from dec.topology.edges import unique_pairs
from dec.topology.holes import hole_walks

from .complexes import complexes, dense, loops, networks, slow_rank, solids, surfaces


@given(complexes())
@settings(deadline=None, max_examples=300)
def test_the_boundary_of_a_boundary_is_the_integer_zero_matrix(K):
    for k in range(1, K.dim):
        product = np.array(dense(K, k), dtype=object).reshape(K.counts[k + 1], K.counts[k]) @ np.array(
            dense(K, k - 1), dtype=object
        ).reshape(K.counts[k], K.counts[k - 1])
        assert not product.any()


@given(complexes())
@settings(deadline=None, max_examples=200)
def test_incidence_is_canonical_read_only_int8(K):
    for k in range(K.dim):
        for matrix in (K.coboundary(k), K.boundary(k + 1)):
            assert matrix.dtype == np.int8
            assert (matrix.data != 0).all()
            assert not any(part.flags.writeable for part in (matrix.data, matrix.indices, matrix.indptr))
            for a, b in itertools.pairwise(matrix.indptr.tolist()):
                assert (np.diff(matrix.indices[a:b]) > 0).all()


@given(complexes())
@settings(deadline=None, max_examples=200)
def test_betti_numbers_are_those_of_dense_elimination_in_fractions(K):
    ranks = [0, *(slow_rank(dense(K, k)) for k in range(K.dim)), 0]
    assert K.betti() == tuple(n - ranks[k] - ranks[k + 1] for k, n in enumerate(K.counts))


@given(complexes())
@settings(deadline=None, max_examples=100)
def test_euler_is_the_alternating_sum_of_cells_and_of_betti_numbers(K):
    assert K.euler == sum((-1) ** k * b for k, b in enumerate(K.betti()))


@given(complexes())
@settings(deadline=None, max_examples=100)
def test_a_complex_answers_the_same_after_pickling(K):
    again = pickle.loads(pickle.dumps(K))
    assert again.counts == K.counts
    assert [dense(again, k) for k in range(K.dim)] == [dense(K, k) for k in range(K.dim)]
    assert [(f.name, f.holds, f.where) for f in again.check()] == [(f.name, f.holds, f.where) for f in K.check()]


@given(st.lists(loops(), max_size=9), st.randoms(use_true_random=False))
@settings(deadline=None, max_examples=150)
def test_turning_a_face_or_starting_it_elsewhere_changes_only_the_sign_of_its_row(faces, random):
    K = Complex.from_faces(faces, 7)
    turned = [random.random() < 0.5 for _ in faces]
    changed = []
    for face, turn in zip(faces, turned, strict=True):
        first = random.randrange(len(face))
        loop = face[first:] + face[:first]
        changed.append(loop[::-1] if turn else loop)
    other = Complex.from_faces(changed, 7)
    assert other.tail.tolist() == K.tail.tolist()
    assert other.head.tolist() == K.head.tolist()
    signs = np.where(turned, -1, 1)
    assert (other.coboundary(1).toarray() == K.coboundary(1).toarray() * signs[:, None]).all()


@given(surfaces())
@settings(deadline=None, max_examples=200)
def test_boundary_loops_are_closed_use_each_open_edge_at_most_once_and_all_of_them_where_no_edge_branches(K):
    uses = np.abs(K.coboundary(1).toarray().astype(int)).sum(axis=0)
    total = np.zeros(K.counts[1], int)
    for loop in K.boundary_loops():
        assert loop.is_closed
        assert loop.coefficients.any()
        total += np.abs(loop.coefficients)
    assert (total <= (uses == 1)).all()
    if not (uses > 2).any():
        assert (total == (uses == 1)).all()


@given(surfaces())
@settings(deadline=None, max_examples=200)
def test_the_turned_faces_of_an_orientable_surface_have_its_boundary_loops_as_boundary(K):
    if K.is_orientable is not True:
        return
    boundary = K.chain(2, K.sheets.sign).boundary().coefficients
    assert np.abs(boundary).tolist() == (K.incidences.uses == 1).astype(int).tolist()
    rest = boundary.copy()
    for loop in K.boundary_loops():
        c = loop.coefficients
        agreement = {int(boundary[e] * c[e]) for e in np.flatnonzero(c)}
        assert len(agreement) == 1
        rest -= agreement.pop() * c
    assert not rest.any()


@given(surfaces(repeats=True))
@settings(deadline=None, max_examples=200)
def test_a_reversing_walk_exists_exactly_where_not_all_sheets_can_be_turned_alike(K):
    walk = K.reversing_loop().tolist()
    assert bool(walk) == bool((K.sheets.sign == 0).any())
    if walk:
        assert walk[0] == walk[-1]
        uses = K.incidences
        one, two, _ = uses.pairs()
        neighbours = {frozenset(pair) for pair in zip(one.tolist(), two.tolist(), strict=True)}
        assert all(frozenset(step) in neighbours for step in itertools.pairwise(walk))


@given(surfaces())
@settings(deadline=None, max_examples=150)
def test_there_are_as_many_holes_as_the_first_betti_number_and_faces_fill_no_combination_of_them(K):
    walks = hole_walks(K.tail, K.head, K.incidences, K.sheets, K.forest, K.boundary_walks())
    if (K.incidences.uses > 2).any():
        assert walks is None
        return
    assert len(walks) == K.betti()[1]
    rows = dense(K, 1)
    for a, b in itertools.pairwise(walks.offsets.tolist()):
        row = [0] * K.counts[1]
        for e, s in zip(walks.edges[a:b].tolist(), walks.signs[a:b].tolist(), strict=True):
            row[e] += s
        assert K.chain(1, row).is_closed
        rows.append(row)
    assert slow_rank(rows) == slow_rank(dense(K, 1)) + len(walks)


@given(networks(), st.data())
@settings(deadline=None, max_examples=200)
def test_a_random_walk_has_end_minus_start_as_its_boundary(K, data):
    keys = [frozenset((a, b)) for a, b in zip(K.tail.tolist(), K.head.tolist(), strict=True)]
    at = start = data.draw(st.integers(0, K.counts[0] - 1))
    walk = [start]
    for _ in range(data.draw(st.integers(0, 8))):
        out = [e for e in range(K.counts[1]) if at in keys[e] and keys.count(keys[e]) == 1]
        if not out:
            break
        e = data.draw(st.sampled_from(out))
        at = int(K.tail[e] + K.head[e]) - at
        walk.append(at)
    expected = [0] * K.counts[0]
    expected[at] += 1
    expected[start] -= 1
    assert K.path(walk).boundary().coefficients.tolist() == expected


@given(solids())
@settings(deadline=None, max_examples=100)
def test_faces_of_solid_cells_start_at_the_lowest_corner_and_go_on_to_the_lower_neighbour(K):
    keys = []
    for i in range(K.counts[2]):
        loop = K.faces.row(i).tolist()
        assert loop[0] == min(loop)
        assert loop[1] < loop[-1]
        keys.append((len(loop), sorted(loop)))
    assert keys == sorted(keys)


@given(st.lists(st.tuples(st.integers(0, 2**40), st.integers(0, 2**22 - 1)), min_size=1, max_size=40), st.booleans())
@settings(deadline=None, max_examples=200)
def test_pairs_are_told_apart_as_a_set_would_whether_or_not_they_pack_with_their_position(pairs, small):
    if small:
        pairs = [(a % 5, b % 5) for a, b in pairs]
    low, high = np.array(pairs).T
    first, second, which = unique_pairs(low, high, 2**22)
    distinct = sorted(set(pairs))
    assert list(zip(first.tolist(), second.tolist(), strict=True)) == distinct
    assert [distinct[i] for i in which] == pairs
