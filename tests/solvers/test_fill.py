"""Entries of a factor, counted against a factor made densely."""

import networkx as nx
import numpy as np
import pytest
from scipy.sparse import csc_array, csr_array, eye_array
from scipy.sparse.linalg import splu

from dec.solvers.fill import factor_entries, sparse_order
from dec.solvers.minimum_degree import minimum_degree
from dec.solvers.problem import LinearProblem


def dense_count(matrix: np.ndarray, order: np.ndarray) -> int:
    """Eliminate one vertex after the other and join its neighbours."""
    graph = nx.from_numpy_array((matrix != 0).astype(int))
    graph.remove_edges_from(nx.selfloop_edges(graph))
    count = 0
    for v in order.tolist():
        near = list(graph[v])
        count += len(near)
        graph.remove_node(v)
        graph.add_edges_from((a, b) for i, a in enumerate(near) for b in near[i + 1 :])
    return count


@pytest.mark.parametrize("seed", range(30))
def test_entries_are_those_of_elimination(seed: int):
    rng = np.random.default_rng(seed)
    n, m = int(rng.integers(1, 25)), int(rng.integers(0, 60))
    problem = LinearProblem.of_graph(rng.integers(0, n, m), rng.integers(0, n, m), n, np.ones(m))
    order = rng.permutation(n)
    expected = dense_count(problem.matrix.toarray(), order)
    matrix = problem.matrix
    assert factor_entries(matrix.indptr, matrix.indices, order, 10**9) == expected


def test_counting_ends_beyond_the_most():
    square = csr_array(np.ones((40, 40)))
    everything = 40 * 39 // 2
    assert factor_entries(square.indptr, square.indices, np.arange(40), everything) == everything
    assert factor_entries(square.indptr, square.indices, np.arange(40), 50) > 50


@pytest.mark.parametrize("seed", range(60))
def test_minimum_degree_orders_everything_and_counts_its_own_fill(seed: int):
    """Giving up at one entry less than the factor has, and not at what it has, shows that the count is right."""
    rng = np.random.default_rng(seed)
    n, m = int(rng.integers(1, 60)), int(rng.integers(0, 200))
    matrix = LinearProblem.of_graph(rng.integers(0, n, m), rng.integers(0, n, m), n, np.ones(m)).matrix
    order = minimum_degree(matrix.indptr, matrix.indices, 10**9)
    assert sorted(order.tolist()) == list(range(n))
    entries = dense_count(matrix.toarray(), order)
    assert minimum_degree(matrix.indptr, matrix.indices, entries).tolist() == order.tolist()
    if entries:
        assert minimum_degree(matrix.indptr, matrix.indices, entries - 1) is None


def test_minimum_degree_fills_no_more_than_the_library_s_order():
    """Against SuperLU's multiple minimum degree on street grids; and no fill on trees, whatever the numbering."""
    rng = np.random.default_rng(3)
    for side in (20, 45):
        at = rng.permutation(side * side).reshape(side, side)
        tail = np.concatenate([at[:, :-1].ravel(), at[:-1].ravel()])
        head = np.concatenate([at[:, 1:].ravel(), at[1:].ravel()])
        kept = rng.random(len(tail)) < 0.9
        ground = np.arange(side * side) == 0
        problem = LinearProblem.of_graph(tail[kept], head[kept], side * side, np.ones(kept.sum()), ground)
        matrix = problem.matrix + 0.01 * eye_array(side * side - 1)
        options = {"SymmetricMode": True}
        theirs = splu(csc_array(matrix), permc_spec="MMD_AT_PLUS_A", diag_pivot_thresh=0, options=options)
        order = minimum_degree(problem.matrix.indptr, problem.matrix.indices, 10**9)
        ours = factor_entries(problem.matrix.indptr, problem.matrix.indices, order, 10**9)
        assert ours < 1.2 * (theirs.L.nnz - problem.n)


def test_a_tree_has_no_fill_a_hub_comes_last_and_a_dense_graph_is_told_from_them():
    n = 3000
    rng = np.random.default_rng(1)
    parent = (rng.random(n - 1) * np.arange(1, n)).astype(np.int64)
    tree = LinearProblem.of_graph(parent, np.arange(1, n), n, np.ones(n - 1))
    assert factor_entries(tree.matrix.indptr, tree.matrix.indices, sparse_order(tree, n), n) == n - 1
    hub = LinearProblem.of_graph(np.zeros(n - 1, np.int64), np.arange(1, n), n, np.ones(n - 1))
    assert sparse_order(hub, n)[-1] == 0
    mixed = LinearProblem.of_graph(rng.integers(0, n, 4 * n), rng.integers(0, n, 4 * n), n, np.ones(4 * n))
    assert sparse_order(mixed, 40 * n) is None


def test_rows_too_full_to_be_looked_at_are_counted_all_the_same():
    n = 400
    full = np.repeat(np.arange(30), n), np.tile(np.arange(n), 30)
    problem = LinearProblem.of_graph(*full, n, np.ones(30 * n))
    assert minimum_degree(problem.matrix.indptr, problem.matrix.indices, 0) is not None
    assert sparse_order(problem, 1000) is None


def test_the_interpreted_order_is_the_compiled_one():
    rng = np.random.default_rng(5)
    n = 2000
    matrix = LinearProblem.of_graph(rng.integers(0, n, 2 * n), rng.integers(0, n, 2 * n), n, np.ones(2 * n)).matrix
    compiled_order = minimum_degree(matrix.indptr, matrix.indices, 10**9)
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr("dec.topology.compiled.SMALL", 10**9)
        assert minimum_degree(matrix.indptr, matrix.indices, 10**9).tolist() == compiled_order.tolist()
