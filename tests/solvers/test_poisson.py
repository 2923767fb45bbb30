"""Linear Poisson problems: signs, shapes, dense references, and every way to ask for the impossible."""

import json

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from dec.calculus.complex import Complex, grid
from dec.errors import AccuracyError, InputError, UnsolvableError
from dec.geometry.metric import Metric
from dec.solvers import linear
from dec.solvers.direct import Direct
from dec.solvers.elimination import Elimination
from dec.solvers.poisson import solve_poisson

from .slow_poisson import dense_laplacian, dense_solution, multigraphs, net_inflow, random_network

SQUARE = np.array([[0, 0], [1, 0], [1, 1], [0, 1]], dtype=float)


def path(n=3, **names):
    return Complex.from_edges(np.arange(n - 1), np.arange(1, n), **names)


def numbers(largest):
    """Either sign, zero, and nothing so small that its square is no float."""
    return st.one_of(st.just(0.0), st.floats(1e-100, largest), st.floats(-largest, -1e-100))


@st.composite
def problems(draw):
    """A multigraph, conductances, balanced or held sources."""
    K = draw(multigraphs())
    n, m = K.counts
    c = np.array(draw(st.lists(st.floats(1e-3, 1e3), min_size=m, max_size=m)))
    source = np.array(draw(st.lists(numbers(100), min_size=n, max_size=n)))
    held = draw(st.dictionaries(st.integers(0, n - 1), numbers(100), max_size=3))
    for part in range(K.n_components):
        members = np.flatnonzero(K.component_labels == part)
        if not set(members.tolist()) & set(held):
            source[members] -= source[members].mean()
    source[np.abs(source) < 1e-100] = 0.0
    return K, c, source, held


def test_signs_are_pinned_by_hand():
    """What is put in at 0 runs along the edges to 2: down from 3 to 1, and out at the fixed end."""
    K = Complex.from_edges([0, 2], [1, 1])
    solution = solve_poisson(K, [1, 0, 0], fixed={2: 1.0}, conductance=[1.0, 1.0])
    assert solution.potential.values.tolist() == [3.0, 2.0, 1.0]
    assert solution.flow.values.tolist() == [1.0, -1.0]  # the second edge points against the flow
    inflow = K.boundary(1).astype(float) @ solution.flow.values
    assert np.add(inflow, [1, 0, 0]).tolist() == [0.0, 0.0, 1.0]
    L = Metric.weighted(K).laplacian(0)
    assert (L @ solution.potential.values).tolist() == [1.0, 0.0, -1.0]


@given(problems())
def test_potentials_and_flows_are_those_of_a_dense_solution(problem):
    K, c, source, held = problem
    solution = solve_poisson(K, source, conductance=c, fixed=held, unbalanced="spread")
    u = dense_solution(K, source, c, held)
    scale = np.abs(u).max() + np.abs(source).max() / 1e-3 + 1e-12
    assert np.abs(solution.potential.values - u).max() <= 1e-9 * scale
    flow = -c * (u[K.head] - u[K.tail])
    assert np.abs(solution.flow.values - flow).max(initial=0) <= 1e-9 * (np.abs(c).max(initial=0) + 1) * scale


@given(problems())
def test_flows_balance_to_rounding_and_fixed_potentials_are_met_exactly(problem):
    K, c, source, held = problem
    solution = solve_poisson(K, source, conductance=c, fixed=held, unbalanced="spread")
    free = np.setdiff1d(np.arange(K.counts[0]), list(held))
    left = (net_inflow(K, solution.flow.values) + source)[free]
    assert np.abs(left).max(initial=0) <= 1e-13 * (np.abs(source).max() + np.abs(solution.flow.values).max(initial=0))
    for vertex, value in held.items():
        assert solution.potential.values[vertex] == value


@given(problems())
def test_the_residual_is_the_one_that_a_dense_matrix_gives(problem):
    K, c, source, held = problem
    solution = solve_poisson(K, source, conductance=c, fixed=held, unbalanced="spread")
    free = np.setdiff1d(np.arange(K.counts[0]), list(held))
    left = (source - dense_laplacian(K, c) @ solution.potential.values)[free]
    size = np.abs(c).max(initial=0) * np.abs(solution.potential.values).max(initial=0)
    assert np.linalg.norm(left) <= 1e-8 * np.linalg.norm(source[free]) + 1e-13 * size * K.counts[1]
    assert solution.residual >= 0


@given(problems())
def test_what_is_not_fixed_has_mean_zero_in_each_component(problem):
    K, c, source, held = problem
    u = solve_poisson(K, source, conductance=c, fixed=held, unbalanced="spread").potential.values
    for part in range(K.n_components):
        members = np.flatnonzero(K.component_labels == part)
        if not set(members.tolist()) & set(held):
            assert abs(u[members].mean()) <= 1e-14 * np.abs(u).max()


@given(problems(), st.one_of(st.just(0.0), st.floats(1e-3, 50), st.floats(-50, -1e-3)))
def test_solutions_are_linear_in_sources_and_fixed_potentials(problem, factor):
    K, c, source, held = problem
    one = solve_poisson(K, source, conductance=c, fixed=held, unbalanced="spread")
    other = solve_poisson(
        K, factor * source, conductance=c, fixed={v: factor * x for v, x in held.items()}, unbalanced="spread"
    )
    u = one.potential.values
    assert other.potential.values == pytest.approx(
        factor * u, rel=1e-8, abs=1e-9 * (1 + abs(factor)) * (np.abs(u).max() + 1)
    )


@given(st.data())
def test_columns_are_solved_together_as_they_are_one_by_one(data):
    K, c, source, held = data.draw(problems())
    columns = np.stack([source, 2 * source, np.zeros_like(source)], axis=1)
    both = solve_poisson(K, columns, conductance=c, fixed=held, unbalanced="spread")
    assert both.potential.values.shape == (K.counts[0], 3)
    assert both.flow.values.shape == (K.counts[1], 3)
    assert both.error_bound.shape == both.energy[0].shape == (3,)
    assert isinstance(both.residual, float)
    for j in range(3):
        one = solve_poisson(K, columns[:, j], conductance=c, fixed=held, unbalanced="spread")
        scale = np.abs(one.potential.values).max() + 1e-12
        assert np.abs(both.potential.values[:, j] - one.potential.values).max() <= 1e-9 * scale


def test_fixed_potentials_may_differ_between_columns():
    solution = solve_poisson(path(), np.zeros((3, 2)), fixed=([0, 2], [[1.0, 10.0], [3.0, 30.0]]))
    assert solution.potential.values.tolist() == [[1, 10], [2, 20], [3, 30]]


def test_ids_name_sources_and_fixed_vertices():
    K = path(vertex_ids=["tank", "J", "farm"])
    by_id = solve_poisson(K, {"farm": -2.0}, fixed={"tank": 10.0})
    by_number = solve_poisson(K, [0, 0, -2.0], fixed=([0], 10.0))
    assert by_id.potential.values.tolist() == by_number.potential.values.tolist() == [10, 8, 6]
    assert solve_poisson(K, K.cochain(0, [0, 0, -2]), fixed={"tank": 10.0}).potential.values.tolist() == [10, 8, 6]


def test_a_vertex_alone_has_the_potential_zero_or_the_one_it_was_given():
    K = Complex.from_edges([0], [1], 4)
    solution = solve_poisson(K, [1, -1, 0, 9], fixed={3: 5.0})
    assert solution.potential.values.tolist() == [0.5, -0.5, 0.0, 5.0]
    assert solution.n_components == 3
    assert (
        solution.gauge
        == "mean potential zero in each of the 2 components without a fixed one; elsewhere as fixed at 1 vertex"
    )


def test_problems_without_unknowns_edges_or_vertices_are_solved():
    everything_fixed = solve_poisson(path(), [5, 5, 5], fixed={0: 1.0, 1: 2.0, 2: 4.0})
    assert everything_fixed.flow.values.tolist() == [-1, -2]
    assert everything_fixed.residual == everything_fixed.error_bound == 0.0
    assert solve_poisson(Complex.from_edges([], [], 2), [0, 0]).potential.values.tolist() == [0, 0]
    nothing = solve_poisson(Complex.from_edges([], [], 0), [])
    assert nothing.potential.values.shape == (0,)
    assert nothing.n_components == 0


def test_parallel_edges_add_up_and_self_loops_carry_nothing():
    K = Complex.from_edges([0, 1, 0], [1, 0, 0])
    solution = solve_poisson(K, [3, -3], conductance=[1.0, 2.0, 100.0])
    assert solution.potential.values.tolist() == [0.5, -0.5]
    assert solution.flow.values.tolist() == [1.0, -2.0, 0.0]


def test_a_metric_gives_its_vertex_laplacian():
    rng = np.random.default_rng(0)
    K = grid((6, 5), spacing=(0.5, 2.0))
    metric = Metric(K)
    source = rng.normal(size=30)
    source -= source.mean()
    solution = solve_poisson(K, source, conductance=metric)
    assert metric.laplacian(0) @ solution.potential.values == pytest.approx(source, abs=1e-12)
    assert solution.error_bound < 1e-12


def test_a_metric_with_negative_weights_is_solved_without_a_bound_and_says_why():
    kite = Complex.from_faces([[0, 1, 2], [1, 0, 3]], points=[[0, 0], [2, 0], [1, 0.2], [1, -0.2]])
    metric = Metric(kite)
    source = np.array([1.0, -2.0, 0.5, 0.5])
    solution = solve_poisson(kite, source, conductance=metric)
    assert metric.laplacian(0) @ solution.potential.values == pytest.approx(source, abs=1e-12)
    assert net_inflow(kite, solution.flow.values) == pytest.approx(-source, abs=1e-14)
    assert solution.error_bound is None
    assert solution.energy is None
    assert "no error bound: 1 edges have a negative weight" in solution.notes[-1]
    assert "no error bound" in repr(solution)


def test_weights_of_exactly_zero_carry_nothing_and_keep_the_bound():
    K = Complex.from_faces([[0, 1, 2], [0, 2, 3]], points=SQUARE)
    metric = Metric(K)
    assert (metric.weights(1) == 0).sum() == 1
    solution = solve_poisson(K, [1, 0, -1, 0], conductance=metric)
    assert solution.flow.values[metric.weights(1) == 0].tolist() == [0.0]
    assert solution.potential.values == pytest.approx([1, 0, -1, 0], abs=1e-15)
    assert solution.error_bound is not None
    assert "1 edges have the weight zero" in solution.notes[0]


def test_weights_of_zero_may_part_a_complex():
    K = Complex.from_edges([0, 1, 2], [1, 2, 3])

    class Cut(Metric):
        """A metric whose middle edge weighs nothing."""

        def weights(self, k):
            return np.array([1.0, 0.0, 1.0])

    cut = Cut.weighted(K)
    solution = solve_poisson(K, [1, -1, 2, -2], conductance=cut)
    assert solution.n_components == 2
    assert solution.flow.values.tolist() == [1, 0, 2]


def test_flux_through_the_boundary_enters_as_source():
    """A strip 4 long and 2 wide, flux density 3 in on the left, out on the right: the potential falls by 12."""
    K = grid((5, 3))
    x, y = K.points.T
    across = np.where((y == 0) | (y == 2), 0.5, 1.0)
    source = 3.0 * across * ((x == 0).astype(float) - (x == 4))
    u = solve_poisson(K, source, conductance=Metric(K)).potential.values
    assert u == pytest.approx(6 - 3 * x)


@pytest.mark.parametrize("method", ["direct", "elimination", "multigrid", "gradients"])
def test_every_method_gives_the_same_potentials_and_a_bound_that_holds(method):
    """The bound is never below the method's own error and at most twice that; a direct solve tells the error."""
    rng = np.random.default_rng(8)
    K = grid((50, 50))
    c, source = 10 ** rng.uniform(-1, 1, K.counts[1]), rng.normal(size=(2500, 2))
    good = solve_poisson(K, source, conductance=c, fixed={0: 0.0}, method="direct")
    solution = solve_poisson(K, source, conductance=c, fixed={0: 0.0}, method=method, rtol=1e-5)
    away = solution.potential.values - good.potential.values
    error = np.sqrt((c[:, None] * (away[K.head] - away[K.tail]) ** 2).sum(axis=0))
    assert solution.method == method
    assert (solution.error_bound >= error - good.error_bound).all()
    assert (solution.error_bound <= 2 * error + 2 * good.error_bound).all()
    assert np.abs(net_inflow(K, solution.flow.values) + source)[1:].max() < 1e-12
    assert solution.because == "asked for"


def test_a_method_object_with_options_is_taken_as_it_is():
    K = grid((6, 6))
    source = np.eye(36)[0] - np.eye(36)[35]
    solution = solve_poisson(K, source, method=Elimination(samples=2))
    assert solution.method == "elimination"
    assert solution.potential.values == pytest.approx(dense_solution(K, source, np.ones(60)), abs=1e-7)
    with pytest.raises(InputError, match="method must be one of auto, direct"):
        solve_poisson(K, source, method="guess")


def test_where_the_exact_factor_breaks_down_elimination_takes_over(monkeypatch):
    def broken(self, problem):
        message = "singular to working precision"
        raise UnsolvableError(message)

    monkeypatch.setattr(Direct, "prepare", broken)
    K = grid((4, 4))
    source = np.eye(16)[0] - np.eye(16)[15]
    solution = solve_poisson(K, source)
    assert (solution.method, solution.because[:17]) == ("elimination", "direct broke down")
    assert solution.potential.values == pytest.approx(dense_solution(K, source, np.ones(24)), abs=1e-7)
    with pytest.raises(UnsolvableError, match="singular"):
        solve_poisson(K, source, method="direct")


def attempted(*args, **options):
    """The solution and no message, or the partial one and its message."""
    try:
        return solve_poisson(*args, **options), None
    except AccuracyError as error:
        return error.partial, str(error)


def test_potentials_that_are_worth_nothing_are_refused_even_where_their_residual_is_rounding():
    """Eighteen decades between conductances on a network with loops: the bound tells, the residual does not."""
    rng = np.random.default_rng(1)
    refused = 0
    for _ in range(40):
        K, c = random_network(rng, 60, 9)
        solution, message = attempted(K, rng.normal(size=K.counts[0]), conductance=c, unbalanced="spread")
        share = solution.error_bound / np.sqrt(solution.energy[1])
        assert (share <= 1e-2) == (message is None)
        said = message or " ".join(solution.notes)
        assert (share > 1e-3) == ("% in the energy norm" in said)
        refused += message is not None
    assert 0 < refused < 20


def test_potentials_rounded_as_well_as_can_be_are_accepted_however_little_flows():
    """1 + 1e-77 is no float and 1 is the best there is, though the flow that it drives is wrong by all of it."""
    solution = solve_poisson(path(2), [1e-77, 0], fixed={1: 1.0})
    assert solution.potential.values.tolist() == [1.0, 1.0]
    assert solution.flow.values.tolist() == [1e-77]
    assert solution.error_bound == pytest.approx(1e-77)
    assert "lies below what float64 potentials can hold" in solution.notes[-1]


def test_a_tolerance_below_what_float64_potentials_can_hold_is_told_with_both_numbers():
    K, c = random_network(np.random.default_rng(3), 200, 6)
    source = np.random.default_rng(4).normal(size=K.counts[0])
    solution = solve_poisson(K, source, conductance=c, unbalanced="spread", rtol=1e-15)
    assert solution.residual > 1e-15
    assert solution.backward_error <= 10 * 2.0**-52
    assert any("1e-15" in note and "backward error" in note for note in solution.notes)


def test_a_tolerance_that_is_not_reached_is_an_error_that_carries_the_result(monkeypatch):
    solve = linear.System.solve
    monkeypatch.setattr(linear.System, "solve", lambda self, residual, rtol: 0.3 * solve(self, residual, rtol))
    K = grid((4, 4))
    with pytest.raises(AccuracyError) as caught:
        solve_poisson(K, np.eye(16)[0] - np.eye(16)[15])
    partial = caught.value.partial
    assert "must reach a relative residual of 1e-08, got " in str(caught.value)
    assert partial.residual > 1e-3
    exact = dense_solution(K, np.eye(16)[0] - np.eye(16)[15], np.ones(24))
    error = partial.potential.values - exact
    assert partial.error_bound >= np.sqrt(((error[K.head] - error[K.tail]) ** 2).sum())


REFUSED = {
    "conductance must have shape (2,), one number an edge, got (3,)": {"conductance": [1, 1, 1]},
    "conductance must be positive and finite, got 0.0 at edge e1": {"conductance": [1, 0]},
    "conductance must be positive and finite, got -2.0 at edge e0": {"conductance": [-2, 1]},
    "got nan at edge e1": {"conductance": [1, np.nan]},
    "conductance must hold real numbers, got text": {"conductance": ["1", "2"]},
    "the metric lives on another complex": {"conductance": Metric.weighted(path())},
    "source must have shape (3,) or (3, m), one number or row a vertex, got (2,)": {"source": [1, 2]},
    "source must be finite, got nan at vertex b": {"source": [0, np.nan, 0]},
    "got (3, 0)": {"source": np.zeros((3, 0))},
    "no vertex 'x'": {"source": {"x": 1.0}},
    "source must be a cochain of degree 0 on the complex of the problem, got degree 0 on another": {
        "source": path().cochain(0, [1, 0, -1])
    },
    "no vertex 'q'": {"fixed": {"q": 1.0}},
    "fixed must name vertices 0 .. 2, got -1": {"fixed": ([0, -1], [1.0, 2.0])},
    "fixed names vertex a twice": {"fixed": ([0, 2, 0], [1.0, 2.0, 1.0])},
    "fixed must give one potential for each of 2 vertices, got shape (3,)": {"fixed": ([0, 2], [1.0, 2.0, 3.0])},
    "fixed must give one potential for each of 1 vertices and 1 columns, got shape (1, 2)": {
        "fixed": ([0], [[1.0, 2.0]])
    },
    "fixed must be finite, got inf": {"fixed": {"a": np.inf}},
    "fixed must be a mapping of vertex to potential, or a pair": {"fixed": 3.0},
    "rtol must be a number between 0 and 1, got 0": {"rtol": 0},
    'unbalanced must be "refuse" or "spread", got \'ignore\'': {"unbalanced": "ignore"},
}


@pytest.mark.parametrize("message", REFUSED)
def test_what_cannot_be_used_is_refused_with_what_was_found_and_where(message):
    K = path(vertex_ids=["a", "b", "c"], edge_ids=["e0", "e1"])
    asked = {"source": [1, 0, -1], **REFUSED[message]}
    with pytest.raises(InputError) as caught:
        solve_poisson(K, asked.pop("source"), **asked)
    assert message in str(caught.value)


def test_arguments_are_not_changed_and_results_cannot_be():
    K, source, c = path(), np.array([1.0, 0, -1.0]), np.ones(2)
    solution = solve_poisson(K, source, conductance=c)
    assert (source.tolist(), c.tolist()) == ([1, 0, -1], [1, 1])
    with pytest.raises(ValueError, match="read-only"):
        solution.potential.values[0] = 5
    source[0] = 7
    assert solution.potential.values.tolist() == [1, 0, -1]


def test_the_same_problem_gives_the_same_bytes():
    K, c = random_network(np.random.default_rng(5), 50, 3)
    source = np.random.default_rng(6).normal(size=K.counts[0])
    texts = {solve_poisson(K, source, conductance=c, unbalanced="spread").to_json() for _ in range(3)}
    assert len(texts) == 1
    assert json.loads(texts.pop())["schema"] == "dec.solve/1"
