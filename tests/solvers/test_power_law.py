"""Power-law networks: against solutions made backwards, sixty-digit gaps and cases where Newton steps break."""

from decimal import Decimal
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from dec.calculus.complex import Complex, grid
from dec.errors import AccuracyError, InputError, UnsolvableError
from dec.geometry.metric import Metric
from dec.solvers.balanced import Carrier
from dec.solvers.edge_law import drop_of, flow_of, power_bound, power_energy
from dec.solvers.poisson import solve_poisson
from dec.solvers.posed import posed
from dec.solvers.power_law import _Search, _State

from .slow_poisson import dense_solution, fenchel_gaps, multigraphs, net_inflow, random_network

SQUARE = 2.0


def drops(K, solution):
    u = solution.potential.values
    return u[K.tail] - u[K.head]


def assert_law(K, solution, c, n, tolerance=1e-7):
    flow = solution.flow.values
    driven = flow_of(drops(K, solution), np.asarray(c, float), np.broadcast_to(n, flow.shape))
    assert np.allclose(flow, driven, atol=tolerance * max(np.abs(flow).max(initial=0), 1e-300))


def test_the_sign_and_the_meaning_of_conductance_are_pinned_by_hand():
    """Loss 1/2 q^2 from 0 to 1, so conductance 2; a source of 4 needs a drop of 8."""
    K = Complex.from_edges([0], [1])
    solution = solve_poisson(K, [4, -4], conductance=[2.0], exponent=SQUARE)
    assert solution.flow.values.tolist() == [4.0]
    assert solution.potential.values.tolist() == [4.0, -4.0]


def test_exponent_one_is_the_linear_problem():
    K, c = random_network(np.random.default_rng(0), 40, 2)
    source = np.random.default_rng(1).normal(size=K.counts[0])
    linear = solve_poisson(K, source, conductance=c, fixed={0: 3.0})
    exponents = np.full(len(c), 1.0)
    exponents[-1] = np.nextafter(1.0, 2.0)  # one edge a hair off, so that the other way of solving is taken
    power = solve_poisson(K, source, conductance=c, fixed={0: 3.0}, exponent=exponents)
    assert "Newton" in power.method
    assert "Newton" not in linear.method
    assert power.flow.values == pytest.approx(linear.flow.values, abs=1e-9)
    assert power.potential.values == pytest.approx(linear.potential.values, abs=1e-9)


@pytest.mark.parametrize("decades", [0, 3])
@pytest.mark.parametrize("exponent", [1.2, 1.852, 2.0, "mixed"])
def test_solutions_made_backwards_come_back(exponent, decades):
    """Potentials first, then the flows they drive, then the sources that these flows need."""
    rng = np.random.default_rng(4)
    for _ in range(6):
        K, c = random_network(rng, 80, decades)
        n = rng.choice([1.0, 1.5, 1.852, 2.0], len(c)) if exponent == "mixed" else np.full(len(c), exponent)
        u = rng.normal(size=K.counts[0]) * 10 ** rng.uniform(-3, 3)
        flow = flow_of(u[K.tail] - u[K.head], c, n)
        held = {0: u[0], K.counts[0] - 1: u[-1]}
        solution = solve_poisson(K, -net_inflow(K, flow), conductance=c, fixed=held, exponent=n)
        assert solution.flow.values == pytest.approx(flow, abs=1e-7 * np.abs(flow).max())
        assert solution.potential.values == pytest.approx(u, abs=1e-7 * np.abs(u).max())
        assert solution.potential.values[[0, -1]].tolist() == [u[0], u[-1]]


@settings(max_examples=60)
@given(st.data())
def test_any_multigraph_is_solved_balances_and_is_certified(data):
    K = data.draw(multigraphs(most=8))
    n, m = K.counts
    c = np.array(data.draw(st.lists(st.floats(1e-3, 1e3), min_size=m, max_size=m)))
    powers = np.array(data.draw(st.lists(st.floats(1, 2), min_size=m, max_size=m)))
    source = np.array(data.draw(st.lists(st.integers(-50, 50), min_size=n, max_size=n)), dtype=float)
    held = data.draw(st.dictionaries(st.integers(0, n - 1), st.integers(-20, 20), max_size=3))
    solution = solve_poisson(K, source, conductance=c, exponent=powers, fixed=held, unbalanced="spread")
    flow, free = solution.flow.values, np.setdiff1d(np.arange(n), list(held))
    for part in range(K.n_components):
        members = np.flatnonzero(K.component_labels == part)
        if not set(members) & set(held):
            source[members] -= source[members].mean()
    assert np.abs((net_inflow(K, flow) + source)[free]).max(initial=0) <= 1e-13 * (np.abs(flow).max(initial=0) + 50)
    gaps = fenchel_gaps(K, solution.potential.values, flow, c, powers)
    assert Fraction(solution.error_bound) ** 2 / 2 >= Fraction(sum(gaps)) * Fraction(999, 1000) - Fraction(10) ** -24
    energy = float((np.abs(flow) ** (powers + 1) / c).sum())
    hidden = 0.0 if flow.any() else 1e-28  # by the rounding of what is spread
    assert solution.error_bound <= 1e-8 * np.sqrt(energy) * (1 + 1e-9) + hidden


def test_every_gap_is_non_negative_and_the_certificate_covers_their_sum():
    rng = np.random.default_rng(5)
    for n in (1.3, 1.852, 2.0):
        K, c = random_network(rng, 60, 6)
        solution = solve_poisson(K, rng.normal(size=K.counts[0]), conductance=c, exponent=n, unbalanced="spread")
        gaps = fenchel_gaps(K, solution.potential.values, solution.flow.values, c, np.full(len(c), n))
        assert min(gaps) >= -(Decimal(10) ** -45)
        assert Fraction(sum(gaps)) <= Fraction(solution.error_bound) ** 2 / 2


@pytest.mark.parametrize("exponent", [1.5, 1.852, 2.0])
@pytest.mark.parametrize("detector", [1e-6, 1.0, 1e6])
def test_a_pipe_without_flow_in_a_balanced_bridge_does_not_break_it(exponent, detector):
    """The derivative of the flow with respect to the drop is infinite there."""
    K = Complex.from_edges([0, 0, 1, 2, 1], [1, 2, 3, 3, 2])
    c = np.array([1.0, 3.0, 1 / 2, 3 / 2, detector])
    solution = solve_poisson(K, np.zeros(4), conductance=c, fixed={0: 12.0, 3: 0.0}, exponent=exponent)
    assert abs(solution.flow.values[4]) < 1e-7
    assert solution.potential.values == pytest.approx([12, 8, 8, 0], abs=1e-9)
    by_source = solve_poisson(K, [1, 0, 0, -1], conductance=c, exponent=exponent)
    assert abs(by_source.flow.values[4]) < 1e-7
    assert by_source.error_bound < 1e-10


def test_a_symmetric_grid_with_a_hundred_idle_edges_is_solved():
    K = grid((15, 15))
    solution = solve_poisson(K, np.zeros(225), fixed={0: 1.0, 224: -1.0}, exponent=SQUARE)
    u = solution.potential.values.reshape(15, 15)
    assert u == pytest.approx(-u[::-1, ::-1].T, abs=1e-9)
    assert np.diagonal(u[::-1]) == pytest.approx(0.0, abs=1e-9)
    assert_law(K, solution, np.ones(K.counts[1]), SQUARE)


def test_conductances_a_million_times_apart_side_by_side_and_in_a_row():
    K = Complex.from_edges([0, 0, 1, 1], [1, 1, 2, 2])
    c = [1.0, 1e12, 1e-12, 1.0]
    solution = solve_poisson(K, [1, 0, -1], conductance=c, exponent=SQUARE)
    share = 1 / (1 + 1e-6)
    assert solution.flow.values == pytest.approx([1e-6 * share, share, 1e-6 * share, share], rel=1e-9)


def test_a_part_at_rest_beside_a_part_in_motion_stays_at_rest():
    K = Complex.from_edges([0, 1, 0, 3, 4, 3], [1, 2, 2, 4, 5, 5], 7)
    solution = solve_poisson(K, [1e6, 0, -1e6, 0, 0, 0, 0], exponent=SQUARE)
    assert solution.flow.values[3:].tolist() == [0, 0, 0]
    assert solution.potential.values[3:].tolist() == [0, 0, 0, 0]
    assert solution.gauge == "mean potential zero in each of the 3 components without a fixed one"


def test_a_slow_part_beside_a_fast_part_is_solved_as_well():
    K = Complex.from_edges([0, 1, 0, 3, 4, 3], [1, 2, 2, 4, 5, 5])
    both = solve_poisson(K, [1e6, 0, -1e6, 1e-6, 0, -1e-6], exponent=SQUARE)
    assert both.flow.values[3:] == pytest.approx(both.flow.values[:3] * 1e-12, rel=1e-6)


def test_nothing_in_nothing_out_is_solved_by_nothing():
    K = Complex.from_edges([0, 1, 0], [1, 2, 2])
    solution = solve_poisson(K, np.zeros(3), exponent=SQUARE)
    assert solution.flow.values.tolist() == [0, 0, 0]
    assert (solution.residual, solution.error_bound, solution.energy) == (0.0, 0.0, (0.0, 0.0))
    assert solve_poisson(K, np.zeros(3), fixed={0: 0.1, 1: 0.1}, exponent=1.5).error_bound == 0.0


def test_networks_without_loops_need_no_iteration_under_any_law():
    K = Complex.from_edges([0, 1, 1], [1, 2, 3])
    solution = solve_poisson(K, [6, -1, -2, -3], conductance=[1.0, 2.0, 0.5], exponent=[2.0, 1.0, 2.0], fixed={0: 0.0})
    assert solution.flow.values.tolist() == [6, 2, 3]
    assert solution.potential.values.tolist() == [0, -36, -37, -54]
    assert (solution.method, solution.iterations) == ("forest", 0)


def test_columns_are_solved_each_for_itself():
    K, c = random_network(np.random.default_rng(7), 20, 1)
    source = np.random.default_rng(8).normal(size=(K.counts[0], 3))
    both = solve_poisson(K, source, conductance=c, exponent=1.7, unbalanced="spread")
    for j in range(3):
        one = solve_poisson(K, source[:, j], conductance=c, exponent=1.7, unbalanced="spread")
        assert both.flow.values[:, j] == pytest.approx(one.flow.values, rel=1e-12)
        assert both.error_bound[j] == pytest.approx(one.error_bound)
        assert both.energy[0][j] == pytest.approx(one.energy[0])


def test_the_solution_scales_as_the_law_says():
    """Flows times 3 and potentials times 3^n solve sources times 3."""
    K, c = random_network(np.random.default_rng(9), 30, 2)
    source = np.random.default_rng(10).normal(size=K.counts[0])
    source -= source.mean()
    one = solve_poisson(K, source, conductance=c, exponent=1.852, unbalanced="spread")
    three = solve_poisson(K, 3 * source, conductance=c, exponent=1.852, unbalanced="spread")
    assert three.flow.values == pytest.approx(3 * one.flow.values, abs=1e-9)
    assert three.potential.values == pytest.approx(3**1.852 * one.potential.values, rel=1e-7, abs=1e-9)


def test_the_energy_is_enclosed_with_sources_and_with_fixed_potentials():
    """Three pipes side by side, K = 1, 4, 9: 11 in all is split 6 : 3 : 2 at a loss of 36; 11 * 36 = 396."""
    K = Complex.from_edges([0] * 3, [1] * 3)
    c = 1 / np.array([1.0, 4.0, 9.0])
    for solution in (
        solve_poisson(K, [11, -11], conductance=c, exponent=SQUARE),
        solve_poisson(K, [0, 0], conductance=c, exponent=SQUARE, fixed={0: 36.0, 1: 0.0}),
    ):
        low, high = solution.energy
        assert low <= 396 <= high
        assert high - low < 1e-6


def test_rough_flows_and_potentials_enclose_the_energy_more_widely():
    K = Complex.from_edges([0] * 3, [1] * 3)
    c = 1 / np.array([1.0, 4.0, 9.0])
    by_source = posed(K, [11, -11], c, None, SQUARE, "refuse")
    by_heads = posed(K, [0, 0], c, {0: 36.0, 1: 0.0}, SQUARE, "refuse")
    for problem, u, stir in (
        (by_source, [18.0, -18.0], [1.0, -1.0, 0.0]),
        (by_source, [20.0, -18.0], [0.0, 1.0, -1.0]),
        (by_heads, [36.0, 0.0], [1.0, 1.0, 0.0]),
        (by_heads, [36.0, 0.0], [-1.0, 0.0, 1.0]),
    ):
        value = np.array([[6.0], [3.0], [2.0]]) + np.array(stir)[:, None]
        flow = Carrier(problem, c).balance(value, np.zeros((3, 1)))
        low, high = power_energy(problem, flow, power_bound(problem, np.array(u)[:, None], flow))[:, 0]
        assert low <= 396 <= high
        assert 0 < low < 0.999 * high


def test_steps_are_few_because_each_nearly_squares_the_gap():
    K, c = random_network(np.random.default_rng(13), 200, 2)
    source = np.random.default_rng(14).normal(size=K.counts[0])
    solution = solve_poisson(K, source, conductance=c, exponent=SQUARE, unbalanced="spread")
    assert 3 <= solution.iterations <= 12


def test_flows_are_as_near_to_the_exact_ones_as_the_energy_norm_says():
    """Lindqvist's inequality, which the enclosure of the energy rests on, at random places."""
    rng = np.random.default_rng(12)
    a, b = rng.normal(size=(2, 100_000)) * 10 ** rng.uniform(-3, 3, (2, 100_000))
    for p in (2.0, 2.3, 2.852, 3.0):
        excess = np.abs(b) ** p - np.abs(a) ** p - p * np.abs(a) ** (p - 1) * np.sign(a) * (b - a)
        least = np.abs(b - a) ** p / (2 ** (p - 1) - 1)
        assert (excess >= least * (1 - 1e-6) - 1e-12 * (np.abs(a) ** p + np.abs(b) ** p)).all()


def test_exponents_that_differ_leave_the_energy_open():
    K = Complex.from_edges([0, 0], [1, 1])
    solution = solve_poisson(K, [1, -1], exponent=[1.0, 2.0])
    assert solution.energy is None
    assert solution.error_bound < 1e-12


def test_wrong_exponents_are_named():
    K = Complex.from_edges([0, 0], [1, 1], edge_ids=["P1", "P2"])
    with pytest.raises(InputError, match=r"exponent must be 1 to 2 .* got 2.5 at edge P2"):
        solve_poisson(K, [1, -1], exponent=[1.0, 2.5])
    with pytest.raises(InputError, match="got nan at edge P1"):
        solve_poisson(K, [1, -1], exponent=np.nan)
    with pytest.raises(InputError, match=r"one for each of 2 edges, got shape \(3,\)"):
        solve_poisson(K, [1, -1], exponent=[1.0, 2.0, 2.0])


def test_a_surplus_is_refused_under_a_power_law_too():
    with pytest.raises(UnsolvableError, match="add up to 1 instead of 0"):
        solve_poisson(Complex.from_edges([0, 0], [1, 1]), [2, -1], exponent=SQUARE)


def test_a_metric_with_negative_weights_has_no_power_law():
    kite = Complex.from_faces([[0, 1, 2], [1, 0, 3]], points=[[0, 0], [2, 0], [1, 0.2], [1, -0.2]])
    with pytest.raises(InputError, match="exponents other than 1 need positive conductances"):
        solve_poisson(kite, np.zeros(4), conductance=Metric(kite), exponent=SQUARE)


def test_numbers_too_small_for_an_energy_are_not_called_solved():
    """1e-150 cubed is no float: a solution cannot be certified, and the error says so and carries it."""
    K = Complex.from_edges([0, 1, 0], [1, 2, 2])
    with pytest.raises(AccuracyError, match="Fenchel") as caught:
        solve_poisson(K, [1e-150, 0, -1e-150], exponent=SQUARE)
    assert caught.value.partial.flow.values.shape == (3,)


def test_a_large_network_takes_the_compiled_way_and_agrees_with_the_small_one():
    K = grid((50, 50))
    source = np.zeros(2500)
    source[[0, -1]] = [1, -1]
    solution = solve_poisson(K, source, exponent=1.852)
    assert_law(K, solution, np.ones(K.counts[1]), 1.852)
    assert np.abs(net_inflow(K, solution.flow.values) + source).max() < 1e-14
    linear = dense_solution(grid((4, 4)), np.eye(16)[0] - np.eye(16)[15], np.ones(24))
    near = solve_poisson(grid((4, 4)), np.eye(16)[0] - np.eye(16)[15], exponent=1 + 1e-9)
    assert near.potential.values == pytest.approx(linear, abs=1e-7)


def test_a_step_that_is_fifty_times_too_long_is_cut_to_where_the_content_falls():
    """Two pipes side by side under the square law; the best split of 3 is 2 : 1 for conductances 4 : 1."""
    problem = posed(Complex.from_edges([0, 0], [1, 1]), [3, -3], [4.0, 1.0], None, SQUARE, "refuse")
    search = _Search(problem, "direct")
    start, best = np.array([[0.5], [2.5]]), np.array([[2.0], [1.0]])
    du = np.full((2, 1), -1.0)
    way = 50 * (best - start)
    slopes = [float((way * (drop_of(start + t * way, search.c, search.n) + du)).sum()) for t in (0.0, 0.02)]
    assert slopes[0] < 0
    assert slopes[1] == pytest.approx(0, abs=1e-9)
    length = search._length(start, way, du)
    there = float((way * (drop_of(start + length * way, search.c, search.n) + du)).sum())
    assert 0 < length < 0.04
    assert abs(there) <= 0.5 * abs(slopes[0])
    assert search._length(start, best - start, du) == 1.0


def test_one_step_is_newtons():
    """By hand: two equal pipes under exponent 1.5 that carry 1.6 and 1.4, and should carry 1.5 each."""
    problem = posed(Complex.from_edges([0, 0], [1, 1]), [3, -3], None, None, 1.5, "refuse")
    change = (1.4**1.5 - 1.6**1.5) / (1.5 * (1.6**0.5 + 1.4**0.5))
    state = _Search(problem, "direct")._step(_State(np.zeros((2, 1)), np.array([[1.6], [1.4]])), 1e-2)
    assert state.q.ravel() == pytest.approx([1.6 + change, 1.4 - change], rel=1e-12)
    assert state.q[0, 0] == pytest.approx(1.5, abs=1e-4)


@pytest.mark.parametrize("exponent", [1.0, 1.5, 2.0])
def test_where_all_is_spread_nothing_flows_and_that_is_an_answer(exponent: float):
    solution = solve_poisson(Complex.from_edges([0], [1]), [1, 1], exponent=exponent, unbalanced="spread")
    assert solution.flow.values.tolist() == [0.0]
    assert solution.potential.values.tolist() == [0.0, 0.0]
    assert solution.error_bound < 1e-30
