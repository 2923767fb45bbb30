"""What a flow lacks is carried along strong edges, and the result balances exactly."""

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from dec.calculus.complex import Complex, grid
from dec.solvers import balanced
from dec.solvers.balanced import Carrier
from dec.solvers.forest import forest_solution
from dec.solvers.posed import posed

from .slow_poisson import exact_sources, fractions, multigraphs, random_network


def carrier_of(K, source, conductance=None, fixed=None):
    problem = posed(K, source, conductance, fixed, 1.0, "spread")
    return Carrier(problem, problem.conductance)


def assert_balances(carrier, flow, source):
    """In fractions: what is missing from value + rest at a vertex is no more than the slacks of its edges."""
    problem = carrier.problem
    for j in range(flow.value.shape[1]):
        left = exact_sources(source[:, j], problem.label, problem.has_outlet)
        allowed = fractions(problem.source_doubt[:, j])
        parts = zip(*(fractions(part[:, j]) for part in (flow.value, flow.rest, flow.slack)), strict=True)
        for a, b, (value, rest, slack) in zip(problem.tail, problem.head, parts, strict=True):
            left[b] += value + rest
            left[a] -= value + rest
            allowed[a] += slack
            allowed[b] += slack
        for v in np.flatnonzero(~problem.is_fixed):
            assert abs(left[v]) <= allowed[v], (v, left[v], allowed[v])


@given(st.data())
def test_a_flow_balances_exactly_after_carrying(data):
    K = data.draw(multigraphs())
    n, m = K.counts
    wide = st.floats(-1e9, 1e9)
    shape = st.integers(1, 2).map(lambda k: k)
    k = data.draw(shape)
    source = np.array(data.draw(st.lists(wide, min_size=n * k, max_size=n * k))).reshape(n, k)
    flow = np.array(data.draw(st.lists(wide, min_size=m * k, max_size=m * k)), dtype=float).reshape(m, k)
    fixed = data.draw(st.sets(st.integers(0, n - 1), max_size=3))
    carrier = carrier_of(K, source, fixed=dict.fromkeys(sorted(fixed), 0.0))
    result = carrier.balance(flow, np.zeros_like(flow))
    assert_balances(carrier, result, source)
    assert (result.slack <= 1e-29 * (np.abs(flow).sum() + np.abs(source).sum() + 1)).all()
    unchanged = np.setdiff1d(np.arange(m), carrier.edges)
    assert np.array_equal(result.value[unchanged], flow[unchanged])


def test_large_flows_that_cancel_leave_the_small_one_right():
    K = Complex.from_edges([0, 0, 1], [1, 1, 2])
    carrier = carrier_of(K, [1.0, 0, -1.0], [1.0, 4.0, 1.0])
    flow = np.array([[1e20], [-1e20], [0.0]])
    assert carrier.lacking(flow, np.zeros_like(flow)).ravel().tolist() == [1.0, 0.0, -1.0]
    result = carrier.balance(flow, np.zeros_like(flow))
    assert_balances(carrier, result, np.array([[1.0], [0], [-1.0]]))
    assert result.value[2, 0] == 1.0
    assert result.value[1, 0] + result.rest[1, 0] == -1e20
    assert result.rest[1, 0] == 1.0


def test_the_forest_takes_the_strongest_of_several_ways():
    K = Complex.from_edges([0, 0, 1, 0], [1, 2, 2, 1])
    assert carrier_of(K, np.zeros(3), [1.0, 1e-3, 8.0, 64.0]).chosen.tolist() == [2, 3]


def test_edges_that_a_metric_makes_negative_are_taken_last():
    K = Complex.from_edges([0, 0, 1], [1, 2, 2])
    problem = posed(K, np.zeros(3), None, None, 1.0, "refuse")
    assert Carrier(problem, np.array([-5.0, 1e-300, 1.0])).chosen.tolist() == [1, 2]


def test_fixed_vertices_take_what_others_lack_each_in_its_component():
    K = Complex.from_edges([0, 1, 3, 4], [1, 2, 4, 5])
    carrier = carrier_of(K, [1.0, 1, 1, 0, 2, 0], fixed={0: 5.0, 2: 7.0, 5: 1.0})
    flow = carrier.balance(np.zeros((4, 1)), np.zeros((4, 1)))
    assert_balances(carrier, flow, np.array([[1.0], [1], [1], [0], [2], [0]]))
    assert flow.value[2:].ravel().tolist() == [0.0, 2.0]


def test_compiled_and_interpreted_kernels_give_the_same_bits():
    rng = np.random.default_rng(2)
    n, m = 200, 500
    ends = [np.concatenate([rng.integers(0, n, m), np.zeros(6000, np.int64)]) for _ in range(2)]
    flows = [np.concatenate([rng.normal(size=m) * 10 ** rng.uniform(-8, 8, m), np.zeros(6000)]) for _ in range(2)]
    results = []
    for how in (lambda kernel: kernel.interpreted, lambda kernel: balanced.compiled(kernel.interpreted)):
        surplus, changed = np.zeros((n, 3)), [flow.copy() for flow in flows]
        slack, carried = np.zeros(len(ends[0])), np.zeros(n)
        how(balanced._add_flows)(*ends, *changed, surplus)
        inside = how(balanced._forest_edges)(np.arange(len(ends[0])), *ends, np.arange(n))
        order, parent, via = how(balanced._leaves_first)(*ends, np.flatnonzero(inside), n, 7)
        how(balanced._carry)(order, parent, via, ends[0], surplus, *changed, slack, carried)
        parts = (surplus, *changed, slack, carried, order, parent, via)
        results.append(np.concatenate([part.ravel() for part in parts]))
    assert np.array_equal(*results)
    assert slack.any()
    assert carried.any()


@given(st.data())
def test_the_forest_hangs_from_its_root_and_its_vertices_carry_after_those_below_them(data):
    K = data.draw(multigraphs())
    n = K.counts[0]
    chosen = np.flatnonzero(balanced._forest_edges(np.arange(K.counts[1]), K.tail, K.head, np.arange(n)))
    root = data.draw(st.integers(-1, n - 1))
    order, parent, via = balanced._leaves_first(K.tail, K.head, chosen, n, root)
    assert sorted(via[order]) == chosen.tolist()
    assert len(chosen) == n - K.n_components
    assert root < 0 or parent[root] == -1
    turn = np.full(n, n)
    turn[order] = np.arange(len(order))
    for v in order:
        assert turn[parent[v]] > turn[v]
        assert {v, parent[v]} == {K.tail[via[v]], K.head[via[v]]}


def test_a_network_without_loops_is_solved_by_adding_up():
    """A river: sources join, drops add up, and twelve decades of conductance do no harm."""
    K = Complex.from_edges([0, 1, 3], [2, 2, 2], 4)
    carrier = carrier_of(K, [1.0, 2.0, 0.0, 0.0], [1e6, 2e-6, 1.0], fixed={3: 10.0})
    assert carrier.is_whole
    potential, flow = forest_solution(carrier)
    assert flow.value.ravel().tolist() == [1.0, 2.0, -3.0]
    assert potential.ravel().tolist() == [13.0 + 1e-6, 1e6 + 13.0, 13.0, 10.0]


def test_edges_between_fixed_vertices_carry_what_their_potentials_drive():
    K = Complex.from_edges([0, 0, 1], [1, 1, 2])
    carrier = carrier_of(K, [0.0, 0.0, 4.0], [3.0, 1.0, 2.0], fixed={0: 5.0, 1: 1.0})
    potential, flow = forest_solution(carrier)
    assert flow.value.ravel().tolist() == [12.0, 4.0, -4.0]
    assert potential.ravel().tolist() == [5.0, 1.0, 3.0]


def test_loops_parallel_edges_and_two_fixed_ends_are_no_forest_but_self_loops_are():
    assert not carrier_of(Complex.from_edges([0, 0], [1, 1]), [0.0, 0]).is_whole
    assert not carrier_of(Complex.from_edges([0, 1], [1, 2]), [0.0, 0, 0], fixed={0: 0.0, 2: 0.0}).is_whole
    assert carrier_of(Complex.from_edges([0, 1, 1], [1, 2, 1]), [0.0, 0, 0], fixed={0: 0.0}).is_whole


def test_large_networks_take_the_compiled_way_and_balance_too():
    rng = np.random.default_rng(0)
    K, c = grid((60, 60)), 10 ** rng.uniform(-6, 6, 2 * 60 * 59)
    source = rng.normal(size=(3600, 1))
    carrier = carrier_of(K, source, c)
    flow = carrier.balance(rng.normal(size=(len(c), 1)), np.zeros((len(c), 1)))
    assert_balances(carrier, flow, source)


def test_random_networks_balance_in_fractions():
    rng = np.random.default_rng(11)
    for _ in range(10):
        K, c = random_network(rng, 60, 6)
        source = rng.normal(size=(K.counts[0], 1)) * 10 ** rng.uniform(-6, 6, (K.counts[0], 1))
        carrier = carrier_of(K, source, c)
        assert_balances(carrier, carrier.balance(c[:, None] * 1e3, np.zeros((len(c), 1))), source)
