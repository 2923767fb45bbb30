"""Every method on every small problem: the answer, its checks, its refusals."""

import importlib.util
import sys
from functools import cache

import numpy as np
import pytest

from dec.errors import AccuracyError, InputError
from dec.solvers.diagonal import DiagonalGradients
from dec.solvers.direct import Cholmod, Direct
from dec.solvers.elimination import Elimination
from dec.solvers.multigrid import Multigrid
from dec.solvers.petsc import Petsc
from dec.solvers.problem import LinearProblem

from ..solvers.linear_cases import (  # noqa: TID252  # one set of problems serves two folders
    CASES,
    exact_solution,
    graph,
    random_graph,
    right_side,
    square,
)

METHODS = {
    "direct": Direct(),
    "cholmod": Cholmod(),
    "ruge_stuben": Multigrid("ruge_stuben"),
    "smoothed_aggregation": Multigrid("smoothed_aggregation"),
    "rootnode": Multigrid("rootnode"),
    "elimination": Elimination(),
    "elimination, two samples": Elimination(samples=2, seed=5),
    "gradients": DiagonalGradients(),
    "gamg": Petsc("gamg"),
    "hypre": Petsc("hypre"),
}
OPTIONAL = {"cholmod": "sksparse", "gamg": "petsc4py", "hypre": "petsc4py"}
ITERATIVE = ("ruge_stuben", "elimination", "gradients")


@pytest.fixture(params=METHODS)
def method(request):
    part = OPTIONAL.get(request.param)
    if part and importlib.util.find_spec(part) is None:
        pytest.skip(f"{part} is not installed")
    return METHODS[request.param]


def energy(problem, x):
    return float(x @ (problem.matrix @ x))


@cache
def solved(case):
    """A problem, a right-hand side, and the exact solution."""
    problem = CASES[case]()
    b = right_side(problem)
    return problem, b, exact_solution(problem, b)


@pytest.mark.parametrize("case", CASES)
def test_a_method_gives_the_exact_solution_to_its_tolerance(method, case):
    problem, b, expected = solved(case)
    answer = method.prepare(problem).solve(b, rtol=1e-12)
    rest = b - problem.matrix @ answer.x
    assert answer.residual <= 1e-12 or answer.floor is not None
    assert answer.residual == pytest.approx(np.linalg.norm(rest) / max(np.linalg.norm(b), 1e-300), rel=1e-6, abs=1e-18)
    assert answer.backward_error <= 1e-12
    # in the energy norm the condition number enters by its root only: weights over eight decades lose half of that
    error = energy(problem, answer.x - expected)
    assert error <= 1e-14 * energy(problem, expected) + 1e-300
    for k in np.flatnonzero(problem.singular):
        assert abs(answer.x[problem.component == k].mean()) <= 1e-12 * np.abs(answer.x).max()


@pytest.mark.parametrize("case", CASES)
def test_several_columns_give_what_each_gives_alone(method, case):
    problem = CASES[case]()
    prepared = method.prepare(problem)
    b = right_side(problem, 11)
    b[:, 4] = 0.0
    answer = prepared.solve(b, rtol=1e-10)
    assert answer.x.shape == b.shape
    assert not answer.x[:, 4].any()
    for k in range(11):
        alone = prepared.solve(b[:, k], rtol=1e-10).x
        difference = energy(problem, answer.x[:, k] - alone)
        assert difference <= 1e-10 * energy(problem, alone) + 1e-300
    assert prepared.solve(b[:, :0]).x.shape == (problem.n, 0)


def test_a_method_gives_the_same_bits_twice(method):
    problem = random_graph(300, 900, 7)
    b = right_side(problem)
    one, other = (method.prepare(problem).solve(b) for _ in range(2))
    assert np.array_equal(one.x, other.x)
    assert np.array_equal(one.history, other.history)


def test_nothing_that_was_given_is_changed(method):
    problem = random_graph(300, 900, 8, fixed=[0])
    b = right_side(problem, 3)
    before = problem.matrix.data.copy(), problem.matrix.indices.copy(), b.copy()
    method.prepare(problem).solve(b)
    after = problem.matrix.data, problem.matrix.indices, b
    assert all(np.array_equal(one, other) for one, other in zip(before, after, strict=True))


@pytest.mark.parametrize(("weight", "size"), [(1e-200, 1e-150), (1e200, 1e100)])
def test_the_unit_of_conductances_and_sources_makes_no_difference(method, weight, size):
    tail, head = square(12)
    problem = graph(tail, head, 144, np.full(len(tail), weight))
    b = size * right_side(graph(tail, head, 144))
    answer = method.prepare(problem).solve(b)
    assert np.abs(problem.matrix @ answer.x - b).max() <= 1e-7 * np.abs(b).max()


def test_a_right_side_of_zero_gives_zero(method):
    problem = graph(*square(6), 36)
    answer = method.prepare(problem).solve(np.zeros(36))
    assert not answer.x.any()
    assert answer.residual == 0


def test_what_a_singular_component_cannot_take_stays_in_the_residual(method):
    problem = graph(*square(6), 36)
    b = right_side(problem) + 1.0
    with pytest.raises(AccuracyError) as caught:
        method.prepare(problem).solve(b)
    expected = 6.0 / np.linalg.norm(b)  # the norm of 36 ones
    assert caught.value.partial.residual == pytest.approx(expected, rel=1e-6)


@pytest.mark.parametrize("name", ITERATIVE)
def test_too_few_steps_are_an_error_that_carries_the_partial_answer(name):
    problem = graph(*square(70), 4900, 10 ** np.random.default_rng(0).uniform(0, 3, 2 * 69 * 70))
    b = right_side(problem)
    with pytest.raises(AccuracyError, match=r"must reach .* 1e-08, got .* after 1 step") as caught:
        METHODS[name].prepare(problem).solve(b, max_iterations=1)
    partial = caught.value.partial
    rest = np.linalg.norm(b - problem.matrix @ partial.x) / np.linalg.norm(b)
    assert partial.residual == pytest.approx(rest)
    assert partial.residual > 1e-8
    assert partial.iterations <= 1


@pytest.mark.parametrize("kind", ["ruge_stuben", "smoothed_aggregation", "rootnode"])
def test_multigrid_that_stops_early_is_never_accepted(kind):
    """Conductances over twelve decades on a grid: PyAMG returns normally with a residual near one."""
    random = np.random.default_rng(4)
    problem = graph(*square(60), 3600, 10 ** random.uniform(-6, 6, 2 * 59 * 60))
    b = right_side(problem)
    with pytest.raises(AccuracyError) as caught:
        Multigrid(kind).prepare(problem).solve(b)
    assert caught.value.partial.residual > 1e-6


def test_a_residual_at_the_rounding_floor_is_accepted_and_both_numbers_are_stated(method):
    problem = random_graph(60, 200, 3, -2, 2, [0])
    b = right_side(problem)
    answer = method.prepare(problem).solve(b, rtol=1e-30)
    assert answer.backward_error <= 10 * 2.0**-52
    assert answer.residual <= 10 * answer.floor


def test_columns_at_the_rounding_floor_are_accepted_in_few_steps():
    """Conductances over twelve decades: no column can reach the tolerance, and none goes on for a thousand steps."""
    problem = graph(*square(60), 3600, 10 ** np.random.default_rng(4).uniform(-6, 6, 2 * 59 * 60))
    answer = Elimination(samples=2).prepare(problem).solve(right_side(problem, 3), rtol=1e-12)
    assert answer.iterations < 300
    assert answer.residual <= 10 * answer.floor
    assert answer.backward_error <= 1e-14


@pytest.mark.parametrize("bad", [np.ones(4), np.ones((5, 2, 1)), [1, 2, np.nan, 0, 0], ["a"] * 5])
def test_a_right_side_that_does_not_fit_is_refused(method, bad):
    prepared = method.prepare(LinearProblem.of_matrix(np.eye(5)))
    with pytest.raises(InputError, match="right-hand side"):
        prepared.solve(bad)


@pytest.mark.parametrize(("name", "part"), [("cholmod", "sksparse"), ("gamg", "petsc4py"), ("hypre", "petsc4py")])
def test_a_part_that_is_not_installed_is_named(monkeypatch, name, part):
    monkeypatch.setitem(sys.modules, part, None)
    with pytest.raises(InputError, match=r'pip install "dec\['):
        METHODS[name].prepare(graph(*square(3), 9))
