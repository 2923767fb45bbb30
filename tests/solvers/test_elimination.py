"""Approximate elimination: exact on trees, right on average elsewhere, seeded, and good enough to precondition."""

import numpy as np
import pytest

from dec.errors import InputError
from dec.solvers import elimination
from dec.solvers.elimination import Elimination, approximate_factor
from dec.solvers.problem import LinearProblem

from .linear_cases import graph, path, random_graph, right_side, square

WIDE = np.array([1e-6, 3.0, 1e6, 2.0, 1e-3, 7.0, 1e4, 0.5])


def product(factor, n):
    """L D L^T as a dense matrix, the ground's row and column last."""
    lower = np.eye(n + 1)
    place = factor.vertex
    for k in range(n):
        for p in range(factor.column[k], factor.column[k + 1]):
            lower[factor.row[p], place[k]] -= factor.share[p]
    diagonal = np.zeros(n + 1)
    diagonal[place] = factor.pivot
    return lower @ np.diag(diagonal) @ lower.T


def random_tree(n, seed):
    random = np.random.default_rng(seed)
    return np.arange(1, n), (random.random(n - 1) * np.arange(1, n)).astype(int)


@pytest.mark.parametrize("seed", range(5))
def test_a_tree_is_factored_exactly(seed):
    n = 40
    tail, head = random_tree(n, seed)
    weight = 10 ** np.random.default_rng(seed).uniform(-3, 3, n - 1)
    problem = graph(tail, head, n, weight)
    whole = product(approximate_factor(problem, 1, seed), n)
    np.testing.assert_allclose(whole[:n, :n], problem.matrix.toarray(), rtol=1e-12, atol=1e-12)


def test_a_grounded_path_is_factored_exactly_and_the_ground_takes_the_rest():
    problem = graph(*path(9), 9, WIDE, [8])
    whole = product(approximate_factor(problem, 1, 0), 8)
    np.testing.assert_allclose(whole[:8, :8], problem.matrix.toarray(), rtol=1e-12)
    np.testing.assert_allclose(whole.sum(axis=1), 0, atol=1e-9)
    assert whole[7, 8] == -0.5


@pytest.mark.parametrize(("tail", "head"), [path(300), random_tree(300, 3), (np.arange(300), np.arange(1, 301) % 300)])
def test_trees_and_rings_are_solved_in_two_steps(tail, head):
    n = 300
    weight = 10 ** np.random.default_rng(1).uniform(-3, 3, len(tail))
    problem = graph(tail, head, n, weight)
    answer = Elimination().prepare(problem).solve(right_side(problem))
    assert answer.iterations <= 2


@pytest.mark.parametrize("samples", [1, 2])
def test_the_factor_is_the_matrix_on_average(samples):
    """5,000 seeds; every entry within five standard errors of the matrix (and one entry surely varies)."""
    problem = graph(*np.triu_indices(6, 1), 6, 1 + np.arange(15.0) ** 2, [5])
    n, runs = problem.n, 5_000
    total, squares = np.zeros((n + 1, n + 1)), np.zeros((n + 1, n + 1))
    for seed in range(runs):
        whole = product(approximate_factor(problem, samples, seed), n)
        total += whole
        squares += whole**2
    mean = total / runs
    spread = np.sqrt(np.maximum(squares / runs - mean**2, 0))
    matrix = problem.matrix.toarray()
    assert (np.abs(mean[:n, :n] - matrix) <= 5 * spread[:n, :n] / np.sqrt(runs) + 1e-12 * matrix.max()).all()
    assert spread.max() > 0.1


def test_two_samples_vary_less_than_one():
    problem = graph(*square(12), 144)
    steps = [
        np.mean(
            [Elimination(samples, seed).prepare(problem).solve(right_side(problem)).iterations for seed in range(5)]
        )
        for samples in (1, 2)
    ]
    assert steps[1] < 0.85 * steps[0]


def test_the_shares_of_a_column_add_up_to_one_and_point_forward():
    problem = random_graph(200, 700, 4, -3, 3)
    factor = approximate_factor(problem, 1, 0)
    sums = np.add.reduceat(factor.share, factor.column[:-1][np.diff(factor.column) > 0])
    np.testing.assert_allclose(sums, 1.0, rtol=1e-12)
    step = np.empty(problem.n, int)
    step[factor.vertex] = np.arange(problem.n)
    assert (step[factor.row] > np.repeat(np.arange(problem.n), np.diff(factor.column))).all()
    assert sorted(factor.vertex.tolist()) == list(range(problem.n))


def test_a_seed_fixes_the_factor():
    problem = random_graph(200, 700, 4)
    one, same, other = (approximate_factor(problem, 1, seed) for seed in (3, 3, 4))
    assert all(np.array_equal(a, b) for a, b in zip(one, same, strict=True))
    assert not np.array_equal(one.share, other.share)


def test_vertices_leave_in_order_of_degree():
    problem = graph(np.zeros(30, int), np.arange(1, 31), 31)  # the hub leaves last, or with one leaf left
    vertex = approximate_factor(problem, 1, 0).vertex
    assert 0 in vertex[-2:]


def test_positive_entries_are_left_out_of_the_factor_alone_and_it_is_said():
    ends = np.array([0, 1, 2, 3, 0, 1]), np.array([1, 2, 3, 0, 2, 3])
    obtuse = graph(*ends, 4, [2, 2, 2, 2, -0.75, 0.25], [1])
    without = graph(*ends, 4, [2, 2, 2, 2, 0, 0.25], [1])
    one, other = (approximate_factor(problem, 1, 0) for problem in (obtuse, without))
    assert all(np.array_equal(a, b) for a, b in zip(one, other, strict=True))
    prepared = Elimination().prepare(obtuse)
    assert "1 positive off-diagonal pairs" in prepared.notes[0]
    b = right_side(obtuse)
    np.testing.assert_allclose(obtuse.matrix @ prepared.solve(b, rtol=1e-13).x, b, rtol=1e-10)


def test_a_part_held_by_positive_entries_alone_is_still_solved():
    """Vertex 2 hangs on edges whose sum is positive although each entry alone is dropped from the factor."""
    matrix = np.array([[3.0, -1, 0.5], [-1, 3, 0.5], [0.5, 0.5, 1]])
    for problem in (LinearProblem.of_matrix(matrix), singular_with_a_part_by_itself()):
        b = right_side(problem)
        answer = Elimination().prepare(problem).solve(b, rtol=1e-12)
        np.testing.assert_allclose(problem.matrix @ answer.x, b, atol=1e-11)


def singular_with_a_part_by_itself():
    """Constants are the kernel; two vertices are joined to the other two by negative conductances alone."""
    weight = [9.0, 9.0, 9.0, -1.0, -1.0]
    L = graph([0, 2, 1, 0, 1], [1, 3, 2, 3, 3], 4, weight).matrix.toarray()
    assert np.linalg.eigvalsh(L)[1] > 0.1
    return LinearProblem.of_matrix(L, singular=True)


def test_numbering_for_nearness_changes_nothing_but_speed(monkeypatch):
    random = np.random.default_rng(0)
    order = random.permutation(900)
    tail, head = square(30)
    problem = graph(order[tail], order[head], 900, 10 ** random.uniform(0, 2, len(tail)))
    assert problem.facts.spread > elimination._SCATTERED
    b = right_side(problem)
    plain = Elimination().prepare(problem).solve(b, rtol=1e-12)
    monkeypatch.setattr(elimination, "_MANY", 100)
    near = Elimination().prepare(problem).solve(b, rtol=1e-12)
    np.testing.assert_allclose(near.x, plain.x, atol=1e-9 * np.abs(plain.x).max())


def test_conductances_over_twelve_decades_reach_the_rounding_floor():
    random = np.random.default_rng(4)
    problem = graph(*square(60), 3600, 10 ** random.uniform(-6, 6, 2 * 59 * 60))
    answer = Elimination().prepare(problem).solve(right_side(problem))
    assert answer.residual <= 1e-8 or answer.residual <= 10 * answer.floor
    assert answer.backward_error <= 1e-14


@pytest.mark.parametrize("wrong", [{"samples": 0}, {"seed": -1}])
def test_options_out_of_range_are_refused(wrong):
    with pytest.raises(InputError, match="samples must be 1 or more"):
        Elimination(**wrong)


def test_conductances_at_the_edge_of_float64_part_nothing():
    """Weights from 1 down to 1e-320 on a grid, whose products underflow: still a tree of positive edges."""
    weight = 10.0 ** -np.linspace(0, 320, 2 * 9 * 10)
    factor = approximate_factor(graph(*square(10), 100, np.random.default_rng(0).permutation(weight)), 1, 0)
    assert np.isfinite(factor.share).all()
    assert (factor.pivot[:-1] > 0).all()
    assert factor.pivot[-1] == 0
