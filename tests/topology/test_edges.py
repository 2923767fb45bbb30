"""Edges told apart, and the matrix of differences along them."""

import numpy as np
import pytest

from dec.errors import TopologyError
from dec.topology.edges import edge_coboundary, index_type, sparse_signs, unique_pairs


def test_a_difference_is_head_minus_tail():
    # the sign convention of the whole package, by hand: edge 0 runs 2 -> 0, edge 1 runs 0 -> 1
    matrix = edge_coboundary(np.array([2, 0]), np.array([0, 1]), 3)
    assert matrix.toarray().tolist() == [[1, 0, -1], [-1, 1, 0]]
    assert (matrix @ np.array([10.0, 25.0, 3.0])).tolist() == [7.0, 15.0]


def test_a_self_loop_has_an_empty_row_and_parallel_edges_have_one_each():
    matrix = edge_coboundary(np.array([0, 1, 0, 1]), np.array([1, 1, 1, 0]), 2)
    assert matrix.toarray().tolist() == [[-1, 1], [0, 0], [-1, 1], [1, -1]]
    assert matrix.nnz == 6


def test_incidence_is_int8_with_sorted_indices_no_stored_zeros_and_cannot_be_written():
    matrix = edge_coboundary(np.array([3, 1, 2]), np.array([0, 1, 3]), 4)
    assert matrix.dtype == np.int8
    assert (matrix.data != 0).all()
    for row in range(3):
        columns = matrix.indices[matrix.indptr[row] : matrix.indptr[row + 1]]
        assert (np.diff(columns) > 0).all()
    for part in (matrix.data, matrix.indices, matrix.indptr):
        assert not part.flags.writeable


def test_the_index_type_is_int32_until_it_does_not_suffice():
    assert index_type(2**31 - 1) is np.int32
    assert index_type(5, 2**31) is np.int64
    assert edge_coboundary(np.array([0]), np.array([1]), 2).indices.dtype == np.int32


@pytest.mark.parametrize(("tail", "head", "name"), [([0, 3], [1, 1], "tail"), ([0, 1], [1, -1], "head")])
def test_an_end_that_is_no_vertex_is_named_with_its_edge(tail, head, name):
    with pytest.raises(TopologyError, match=rf"edge 1: {name} must be a vertex 0 .. 2, got (3|-1)"):
        edge_coboundary(np.array(tail), np.array(head), 3)


def test_vertices_without_edges_have_empty_columns():
    assert edge_coboundary(np.array([], np.int64), np.array([], np.int64), 5).shape == (0, 5)


def pairs_one_by_one(low, high):
    distinct = sorted(set(zip(low.tolist(), high.tolist(), strict=True)))
    number = {pair: index for index, pair in enumerate(distinct)}
    return distinct, [number[pair] for pair in zip(low.tolist(), high.tolist(), strict=True)]


# 3 x 7 values pack with their position into 63 bits; 2**40 x 2**22 values leave no room for it
@pytest.mark.parametrize(("n_low", "n_high"), [(3, 7), (1, 1), (2**40, 2**22), (2**31, 2**31)])
@pytest.mark.parametrize("m", [1, 2, 5, 400])
def test_pairs_are_told_apart_as_one_by_one_packed_or_not(n_low, n_high, m):
    random = np.random.default_rng(m)
    low, high = random.integers(0, n_low, m), random.integers(0, n_high, m)
    again = random.integers(0, m, 3 * m)  # every branch must meet repeats
    low, high = np.concatenate([low, low[again]]), np.concatenate([high, high[again]])
    if n_low > 3:
        low[0] = n_low - 1
    first, second, which = unique_pairs(low, high, n_high)
    distinct, numbers = pairs_one_by_one(low, high)
    assert list(zip(first.tolist(), second.tolist(), strict=True)) == distinct
    assert which.tolist() == numbers
    assert first.dtype == second.dtype == np.int64


def test_pairs_come_in_the_order_of_numpy_unique_over_rows():
    random = np.random.default_rng(5)
    rows = random.integers(0, 30, (2000, 2))
    distinct, numbers = np.unique(rows, axis=0, return_inverse=True)
    first, second, which = unique_pairs(rows[:, 0], rows[:, 1], 30)
    assert np.array_equal(np.stack([first, second], axis=1), distinct)
    assert np.array_equal(which, numbers.ravel())


def test_pairs_that_fit_no_63_bits_are_refused_rather_than_mixed_up():
    with pytest.raises(TopologyError, match="do not fit 63 bits"):
        unique_pairs(np.array([2**40]), np.array([0]), 2**40)


def test_no_pairs_give_no_pairs():
    first, second, which = unique_pairs(np.array([], np.int64), np.array([], np.int64), 4)
    assert len(first) == len(second) == len(which) == 0


def test_entries_at_one_place_add_up_and_vanish_at_zero():
    rows, columns = np.array([0, 4, 4, 6]), np.array([2, 0, 2, 2, 1, 1])
    signs = np.array([1, -1, 1, -1, 1, -1], np.int8)
    matrix = sparse_signs(rows, columns, signs, 3)
    assert matrix.toarray().tolist() == [[-1, 0, 1], [0, 0, 0], [0, 0, 0]]
    assert matrix.nnz == 2


def test_an_entry_too_large_for_int8_is_refused_with_its_cell():
    once = sparse_signs(np.array([0, 0, 127]), np.zeros(127, np.int64), np.ones(127, np.int8), 1)
    assert once.toarray().tolist() == [[0], [127]]
    with pytest.raises(TopologyError, match="cell 1 runs through one boundary cell more than 127 times"):
        sparse_signs(np.array([0, 0, 128]), np.zeros(128, np.int64), np.ones(128, np.int8), 1)
