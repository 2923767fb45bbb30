"""Linear problems: what is made of a graph or a matrix, what is known of it, and what is refused."""

import numpy as np
import pytest
from scipy.sparse import coo_array, csr_array

from dec.errors import InputError, TopologyError
from dec.solvers.facts import Facts
from dec.solvers.problem import LinearProblem

from .linear_cases import CASES, graph, path, random_graph, square


def test_the_matrix_of_a_graph_is_its_laplacian_with_the_sign_that_makes_it_positive():
    problem = graph([0, 1], [1, 2], 3, [2.0, 5.0])
    assert problem.matrix.toarray().tolist() == [[2, -2, 0], [-2, 7, -5], [0, -5, 5]]


@pytest.mark.parametrize("case", CASES)
def test_a_problem_equals_the_dense_matrix_built_edge_by_edge_and_its_kernel_is_as_stated(case):
    problem = CASES[case]()
    dense = problem.matrix.toarray()
    assert problem.matrix.has_canonical_format
    assert np.array_equal(dense, dense.T)
    for k in range(problem.n_components):
        part = dense[np.ix_(problem.component == k, problem.component == k)]
        values = np.linalg.eigvalsh(part)
        assert (abs(values[0]) < 1e-12 * max(values[-1], 1)) == problem.singular[k]
        assert values[1:].min(initial=1) > 1e-12 * values[-1]
    outside = problem.component[:, None] != problem.component
    assert not dense[outside].any()


def test_fixed_vertices_leave_the_matrix_and_enter_the_right_hand_side():
    tail, head, weight = np.array([0, 1, 2, 3, 0, 4]), np.array([1, 2, 3, 0, 2, 4]), np.arange(1.0, 7)
    fixed = np.array([False, True, False, True, False])
    whole = LinearProblem.of_graph(tail, head, 5, weight).matrix.toarray()
    problem = LinearProblem.of_graph(tail, head, 5, weight, fixed)
    assert problem.vertices.tolist() == [0, 2, 4]
    assert np.array_equal(problem.matrix.toarray(), whole[~fixed][:, ~fixed])
    assert np.array_equal(problem.coupling.toarray(), -whole[~fixed][:, fixed])
    assert problem.singular.tolist() == [False, True]
    assert problem.grounding.tolist() == [4.0 + 1.0, 2.0 + 3.0, 0.0]


def test_of_matrix_finds_components_and_takes_the_kernel_as_told():
    matrix = graph([0, 2], [3, 1], 5).matrix
    problem = LinearProblem.of_matrix(matrix, singular=True)
    assert problem.component.tolist() == [0, 1, 1, 0, 2]
    assert problem.singular.all()
    told = LinearProblem.of_matrix(matrix, [0, 1, 1, 0, 2], [True, False, True])
    assert told.singular.tolist() == [True, False, True]


def test_an_unsorted_matrix_with_entries_in_parts_is_handled_and_left_as_it_was():
    unsorted = csr_array((np.array([-1.0, 2.0, 1.5, -0.5, -0.5]), np.array([1, 0, 1, 0, 0]), np.array([0, 2, 5])))
    copy = unsorted.copy()
    assert LinearProblem.of_matrix(unsorted).matrix.toarray().tolist() == [[2.0, -1.0], [-1.0, 1.5]]
    assert np.array_equal(unsorted.indices, copy.indices)
    assert np.array_equal(unsorted.data, copy.data)


@pytest.mark.parametrize(
    ("matrix", "says"),
    [
        (np.ones((2, 3)), r"square, got shape \(2, 3\)"),
        (np.array([[1.0, np.inf], [np.inf, 1.0]]), "finite numbers, got inf in row 0"),
        (np.array([[1.0, -1.0], [-0.5, 1.0]]), r"symmetric, but entries \(0, 1\) and \(1, 0\) differ by"),
        (np.array([[1.0, -1.0], [0.0, 1.0]]), "symmetric"),
        (np.array([[0.0, -1.0], [-1.0, 1.0]]), r"diagonal must be positive where a row is not empty, got 0.0 in row 0"),
        ("no matrix", "sparse or dense array of real numbers"),
    ],
)
def test_a_matrix_that_cannot_be_used_is_refused(matrix, says):
    with pytest.raises(InputError, match=says):
        LinearProblem.of_matrix(matrix)


@pytest.mark.parametrize("component", [[0, 1], [0, -1, 0], [[0, 0, 0]]])
def test_labels_that_do_not_fit_are_refused(component):
    with pytest.raises(InputError, match="component must hold"):
        LinearProblem.of_matrix(np.eye(3), component)


def test_flags_that_do_not_fit_are_refused():
    with pytest.raises(InputError, match="singular must say yes or no for each of 3 components"):
        LinearProblem.of_matrix(np.eye(3), singular=[True, False])


@pytest.mark.parametrize(
    ("arguments", "error", "says"),
    [
        (([0], [3], 3, [1.0]), TopologyError, r"vertex 0 .. 2, got 3"),
        (([-1], [1], 3, [1.0]), TopologyError, r"vertex 0 .. 2, got -1"),
        (([0], [1, 2], 3, [1.0]), TopologyError, "as long"),
        (([0], [1], 3, [np.nan]), InputError, "conductance must be finite, got nan at 0"),
        (([0], [1], 3, [1.0], [True]), TopologyError, "each of 3 vertices"),
    ],
)
def test_a_graph_that_does_not_fit_is_refused(arguments, error, says):
    with pytest.raises(error, match=says):
        LinearProblem.of_graph(*map(np.asarray, arguments[:2]), arguments[2], *map(np.asarray, arguments[3:]))


def test_balanced_takes_the_mean_off_singular_components_alone():
    problem = graph([0, 2], [1, 3], 5, None, [4])
    mixed = LinearProblem(problem.matrix, problem.component, np.array([True, False]), problem.vertices)
    values = np.array([[1.0, 5.0], [3.0, 5.0], [7.0, 1.0], [9.0, 2.0]])
    assert mixed.balanced(values).tolist() == [[-1.0, 0.0], [1.0, 0.0], [7.0, 1.0], [9.0, 2.0]]
    assert values[0, 0] == 1.0


@pytest.mark.parametrize("case", CASES)
def test_the_norm_is_the_largest_row_sum(case):
    problem = CASES[case]()
    assert problem.norm == pytest.approx(np.abs(problem.matrix.toarray()).sum(axis=1).max(initial=0.0), rel=1e-12)


def test_a_row_sum_that_is_rounding_is_no_ground():
    random = np.random.default_rng(0)
    L = graph(*square(10), 100, random.random(180)).matrix
    problem = LinearProblem.of_matrix(L + coo_array(([0.5], ([3], [3])), shape=(100, 100)))
    assert np.flatnonzero(problem.grounding).tolist() == [3]


def test_facts_are_what_a_count_by_hand_gives():
    matrix = csr_array(np.array([[5.0, -1.0, 0.25, 0.0], [-1, 2, 0, 0], [0.25, 0, 9, -8], [0, 0, -8, 9]]))
    facts = Facts(matrix, np.zeros(1, bool))
    assert (facts.n, facts.n_entries, facts.largest_degree, facts.n_positive) == (4, 10, 2, 1)
    assert facts.share_low == 1.0
    assert facts.share_positive == 2 / 6
    assert facts.weight_ratio == 8.0


def test_the_probe_foresees_the_steps_where_they_are_few_and_many_where_they_are_many():
    from dec.solvers.diagonal import DiagonalGradients

    mixing = random_graph(3000, 30_000, 0)
    b = mixing.balanced(np.random.default_rng(1).standard_normal(mixing.n))
    taken = DiagonalGradients().prepare(mixing).solve(b).iterations
    assert mixing.facts.steps_with_diagonal == pytest.approx(taken, rel=0.3)
    assert graph(*square(80), 6400).facts.steps_with_diagonal > 40
    assert graph(*path(3000), 3000).facts.steps_with_diagonal > 40
    assert graph([], [], 3).facts.steps_with_diagonal == np.inf
