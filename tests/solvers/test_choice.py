"""The table of choices: which method, by which facts, and the sentence that says why."""

import re

import numpy as np
import pytest
from scipy.sparse import eye_array

from dec.errors import AccuracyError, InputError, UnsolvableError
from dec.solvers.choice import TABLE, choose, method_named
from dec.solvers.diagonal import DiagonalGradients
from dec.solvers.direct import Direct
from dec.solvers.elimination import Elimination
from dec.solvers.multigrid import Multigrid
from dec.solvers.problem import LinearProblem

from .linear_cases import graph, random_graph, right_side, square


@pytest.mark.parametrize(
    ("problem", "columns", "method", "says"),
    [
        (lambda: graph(*square(20), 400), 1, Direct(), "400 unknowns are at most 5000"),
        (lambda: random_graph(9000, 60_000, 0), 1, DiagonalGradients(), r"probe foresees about \d+ cheap steps"),
        (lambda: graph(*square(120), 14_400), 1, Direct(), "14400 unknowns are at most 20000"),
        (lambda: graph(*square(160), 25_600), 1, Elimination(), "25600 unknowns, and plain conjugate gradients"),
        (lambda: graph(*square(160), 25_600), 30, Elimination(samples=2), "30 right-hand sides"),
    ],
)
def test_each_row_of_the_table_is_taken_where_its_facts_hold(problem, columns, method, says):
    choice = choose(problem(), columns)
    assert choice.method == method
    assert re.search(says, choice.because)


def test_every_row_says_why_in_one_sentence_without_solving():
    problem = graph(*square(160), 25_600)
    for row in TABLE:
        text = row.why(problem, 3)
        assert "\n" not in text
        assert len(text) > 30


def test_positive_entries_are_named_in_the_reason():
    weight = np.ones(2 * 159 * 160)
    weight[::3] = -0.2
    choice = choose(graph(*square(160), 25_600, weight))
    assert "33% positive off-diagonal entries are left out of the preconditioner alone" in choice.because


def test_rows_that_add_up_to_less_than_zero_go_to_multigrid():
    n = 25_600
    matrix = graph(*square(160), n).matrix
    problem = LinearProblem.of_matrix(matrix - 1e-5 * eye_array(n))
    assert choose(problem).method == Multigrid("smoothed_aggregation")


def test_methods_are_found_by_name_or_taken_as_given():
    problem = graph(*square(5), 25)
    assert method_named("auto", problem).method == Direct()
    assert method_named("elimination", problem).method == Elimination()
    own = Elimination(samples=3)
    assert method_named(own, problem).method is own
    for wrong in ("fastest", 3, None):
        with pytest.raises(InputError, match="auto, direct, cholmod, multigrid, elimination, gradients, petsc"):
            method_named(wrong, problem)


def test_an_unknown_kind_of_multigrid_is_refused():
    with pytest.raises(InputError, match="ruge_stuben"):
        Multigrid("fast")


def test_a_matrix_that_is_not_definite_is_an_error_not_an_answer():
    """Eigenvalues 3 and -1: direct either sees it or solves it; conjugate gradients break down and say so."""
    problem = LinearProblem.of_matrix(np.array([[1.0, -2.0], [-2.0, 1.0]]))
    b = np.array([1.0, 1.0])
    for method in (DiagonalGradients(), Elimination()):
        with pytest.raises(AccuracyError):
            method.prepare(problem).solve(b)
    singular = LinearProblem.of_matrix(np.array([[1.0, -1.0], [-1.0, 1.0]]))  # told that it is definite
    with pytest.raises((UnsolvableError, AccuracyError)):
        Direct().prepare(singular).solve(b)


def test_a_hundred_columns_share_one_preparation():
    problem = graph(*square(40), 1600, None, [0])
    b = right_side(problem, 100)
    answer = Elimination(samples=2).prepare(problem).solve(b)
    assert answer.residual <= 1e-8
    rest = np.linalg.norm(b - problem.matrix @ answer.x, axis=0) / np.linalg.norm(b, axis=0)
    assert rest.max() == pytest.approx(answer.residual)


def test_two_threads_and_one_give_the_same_bits(monkeypatch):
    from dec.solvers import gradients

    problem = graph(*square(60), 3600, None, [0])
    b = right_side(problem)
    one = Elimination().prepare(problem).solve(b)
    monkeypatch.setattr(gradients, "_WORTH_A_THREAD", 10)
    monkeypatch.setattr(gradients.os, "cpu_count", lambda: 2)
    two = Elimination().prepare(problem).solve(b)
    assert np.array_equal(one.x, two.x)
    assert np.array_equal(one.history, two.history)
