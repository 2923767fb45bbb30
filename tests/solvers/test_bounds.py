"""The bound is never below the error, and hardly above it."""

from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from dec.calculus.complex import Complex, grid
from dec.solvers import linear
from dec.solvers.balanced import BalancedFlow, Carrier
from dec.solvers.bounds import energy_between, linear_bound
from dec.solvers.linear import solve_linear
from dec.solvers.poisson import solve_poisson
from dec.solvers.posed import posed

from .slow_poisson import (
    error_from_below,
    exact_residual,
    exact_solution,
    exact_sources,
    multigraphs,
    random_network,
    root,
)


def random_problem(rng, most, decades):
    """Sources only, fixed potentials only, or both; one component or several."""
    K, c = random_network(rng, most, decades, connected=rng.random() < 0.7)
    n = K.counts[0]
    source = rng.normal(size=n) * 10 ** rng.uniform(-3, 3)
    fixed = None
    if rng.random() < 0.6:
        held = rng.permutation(n)[: int(rng.integers(1, min(n, 4) + 1))]
        fixed = (held, rng.normal(size=len(held)) * 10 ** rng.uniform(-3, 3))
        if rng.random() < 0.3:
            source[:] = 0.0
    return posed(K, source, c, fixed, 1.0, "spread"), source


def error_of(problem, source, potential):
    exact = exact_sources(source, problem.label, problem.has_outlet)
    left = exact_residual(problem.network, exact, problem.conductance, potential, problem.is_fixed)
    return error_from_below(problem.network, left, problem.conductance, problem.is_fixed)


def test_the_bound_is_never_below_the_error_and_hardly_above_on_200_random_problems():
    """Exact sums, weights over twelve decades, up to 300 vertices."""
    rng = np.random.default_rng(20)
    ratios = []
    for trial in range(200):
        problem, source = random_problem(rng, 300 if trial % 5 == 0 else 60, 6)
        outcome = solve_linear(problem, 1e-8, "auto")
        error = error_of(problem, source, outcome.potential[:, 0])
        assert outcome.reached
        assert outcome.bound[0] >= error
        if error:
            ratios.append(outcome.bound[0] / error)
    assert len(ratios) > 150
    assert np.median(ratios) < 1.01
    assert np.quantile(ratios, 0.95) < 2


def test_potentials_that_are_far_off_have_a_bound_that_says_so():
    """Not only what a solver returns: any potentials at all."""
    rng = np.random.default_rng(21)
    for size in (1e-12, 1e-3, 1e6):
        for _ in range(10):
            problem, source = random_problem(rng, 30, 3)
            outcome = solve_linear(problem, 1e-8, "auto")
            wrong = outcome.potential + size * rng.normal(size=outcome.potential.shape) * ~problem.is_fixed[:, None]
            bound = linear_bound(problem, wrong, outcome.flow)[0]
            error = error_of(problem, source, wrong[:, 0])
            assert error <= bound <= 1.001 * error + 1e-9 * outcome.bound[0]


def test_a_flow_that_is_far_off_counts_as_much_as_the_potential():
    """Prager and Synge: (f + c du)^2 / c adds up to the squares of both errors."""
    rng = np.random.default_rng(22)
    K, c = random_network(rng, 20, 2)
    problem = posed(K, rng.normal(size=K.counts[0]), c, None, 1.0, "spread")
    outcome = solve_linear(problem, 1e-8, "auto")
    carrier = Carrier(problem, problem.conductance)
    other = carrier.balance(outcome.flow.value + rng.normal(size=outcome.flow.value.shape), outcome.flow.rest)
    potential = outcome.potential + rng.normal(size=outcome.potential.shape)
    apart = ((other.value - outcome.flow.value)[:, 0] ** 2 / c).sum()
    away = (c * problem.differences(potential - outcome.potential)[:, 0] ** 2).sum()
    assert linear_bound(problem, potential, other)[0] ** 2 == pytest.approx(apart + away, rel=1e-9)


@given(st.data())
def test_small_multigraphs_keep_below_their_bound(data):
    K = data.draw(multigraphs(most=6))
    n, m = K.counts
    c = np.array(data.draw(st.lists(st.floats(1e-6, 1e6), min_size=m, max_size=m)))
    source = np.array(data.draw(st.lists(st.floats(-1e3, 1e3), min_size=n, max_size=n)))
    held = data.draw(st.dictionaries(st.integers(0, n - 1), st.floats(-1e3, 1e3), max_size=2))
    problem = posed(K, source, c, held, 1.0, "spread")
    outcome = solve_linear(problem, 1e-8, "auto")
    assert outcome.bound[0] >= error_of(problem, source, outcome.potential[:, 0])


@pytest.mark.parametrize("scale", [1e-200, 1e-100, 1.0, 1e100, 1e160])
def test_the_bound_holds_at_any_scale_of_source_and_conductance(scale):
    K = Complex.from_edges([0, 1, 0, 2], [1, 2, 2, 3])
    source = np.array([0.1, 0.7, -0.3, -0.5]) * scale
    for factor in (1e-100, 1.0, 1e100):
        c = np.array([1.0, 3.0, 0.7, 1e-3]) * factor
        problem = posed(K, source, c, None, 1.0, "spread")
        outcome = solve_linear(problem, 1e-8, "direct")
        error = error_of(problem, source, outcome.potential[:, 0])
        assert 0 < error <= outcome.bound[0] <= 1.1 * error


def test_what_a_flow_may_lack_and_what_a_product_may_lose_enlarge_the_bound():
    problem = posed(Complex.from_edges([0], [1]), [0, 0], [4.0], {1: 0.0}, 1.0, "refuse")
    one = np.ones((1, 1))
    vague = BalancedFlow(3 * one, 0 * one, 0.5 * one, 0 * one)
    assert linear_bound(problem, np.array([[0.0], [0.0]]), vague)[0] == pytest.approx(3.5 / 2, rel=1e-14)
    # 1e305 is too large for its product with a difference to be split: the product's rounding is an allowance
    problem = posed(Complex.from_edges([0], [1]), [0, 0], [1e305], {1: 0.0}, 1.0, "refuse")
    c, u = Fraction(1e305), Fraction(0.1)
    flow = BalancedFlow(one * (1e305 * 0.1), 0 * one, 0 * one, 0 * one)
    lost = abs(Fraction(1e305 * 0.1) - c * u)
    assert lost
    assert Fraction(linear_bound(problem, np.array([[0.1], [0.0]]), flow)[0]) >= lost / Fraction(
        np.sqrt(1e305)
    ) * Fraction(0.999)


def test_a_solution_without_error_has_the_bound_zero():
    solution = solve_poisson(Complex.from_edges([0, 1, 0], [1, 2, 2]), [3, 0, -3.0])
    assert solution.potential.values.tolist() == [1.0, 0.0, -1.0]
    assert solution.error_bound == 0.0


def exact_energy(problem, source):
    exact = exact_sources(source, problem.label, problem.has_outlet)
    fixed = {int(v): Fraction(problem.start[v, 0]) for v in np.flatnonzero(problem.is_fixed)}
    u = exact_solution(problem.network, exact, problem.conductance, fixed)
    edges = zip(problem.tail, problem.head, problem.conductance.tolist(), strict=True)
    return sum((Fraction(c) * (u[b] - u[a]) ** 2 for a, b, c in edges), Fraction(0))


def test_the_exact_energy_lies_between_dirichlet_and_thomson():
    rng = np.random.default_rng(23)
    for _ in range(40):
        problem, source = random_problem(rng, 10, 2)
        exact = exact_energy(problem, source)
        outcome = solve_linear(problem, 1e-8, "auto")
        rough = outcome.potential + 1e-3 * rng.normal(size=outcome.potential.shape) * ~problem.is_fixed[:, None]
        bound = linear_bound(problem, rough, outcome.flow)
        carrier = Carrier(problem, problem.conductance)
        stirred = carrier.balance(outcome.flow.value + rng.normal(size=outcome.flow.value.shape), outcome.flow.rest)
        stirred_bound = linear_bound(problem, outcome.potential, stirred)
        for low, high in (
            outcome.energy,
            energy_between(problem, rough, outcome.flow, bound),
            energy_between(problem, outcome.potential, stirred, stirred_bound),
        ):
            assert 0 <= low[0] <= exact <= high[0]
        low, high = outcome.energy
        assert high[0] - low[0] <= 1e-9 * high[0]


def test_the_energy_of_a_unit_current_is_the_resistance():
    """Two paths of resistance 2 and 3 in parallel: 6/5."""
    K = Complex.from_edges([0, 1, 0], [1, 2, 2])
    low, high = solve_poisson(K, [1, 0, -1], conductance=[1, 1, 1 / 3]).energy
    assert low <= 6 / 5 <= high
    low, high = solve_poisson(K, np.zeros(3), conductance=[1, 1, 1 / 3], fixed={0: 6.0, 2: 0.0}).energy
    assert low <= 30 <= high <= 30 * (1 + 1e-12)


def test_energies_of_sources_and_fixed_potentials_together_are_enclosed_too():
    """One edge of conductance 1 from 2 to a source of 1: the flow is 1, the energy 1."""
    low, high = solve_poisson(Complex.from_edges([0, 1], [1, 2]), [0, 1, 0], fixed={0: 2.0, 2: 2.5}).energy
    exact = Fraction(1, 4) ** 2 + Fraction(3, 4) ** 2
    assert low <= exact <= high <= float(exact) * (1 + 1e-12)


def test_a_loose_solve_has_a_bound_near_its_loose_error():
    """What an iteration leaves behind: the error is taken from a far better solution."""
    K = grid((40, 40))
    source = np.random.default_rng(24).normal(size=1600)
    good = solve_poisson(K, source, unbalanced="spread").potential.values
    loose = good + 1e-5 * np.random.default_rng(25).normal(size=1600)
    problem = posed(K, source, None, None, 1.0, "spread")
    flow = solve_linear(problem, 1e-8, "auto").flow
    error = root(Fraction(float(((np.diff((loose - good)[np.stack([K.tail, K.head])], axis=0)) ** 2).sum())))
    assert linear_bound(problem, loose[:, None], flow)[0] == pytest.approx(error, rel=1e-6)


@pytest.mark.parametrize("columns", [1, 2])
def test_the_bound_of_many_edges_adds_up_over_blocks_of_them(columns):
    K = grid((160, 160))  # 50,880 edges, two blocks
    rng = np.random.default_rng(3)
    c = 10 ** rng.uniform(-3, 3, K.counts[1])
    source = rng.normal(size=(K.counts[0], columns))
    problem = posed(K, source, c, {0: 0.0}, 1.0, "refuse")
    flow = Carrier(problem, c).balance(rng.normal(size=(len(c), columns)), np.zeros((len(c), columns)))
    u = rng.normal(size=source.shape)
    u[0] = 0.0
    drive = c[:, None] * (u[K.head] - u[K.tail])
    plain = np.sqrt(((flow.value + drive) ** 2 / c[:, None]).sum(axis=0))
    assert linear_bound(problem, u, flow) == pytest.approx(plain, rel=1e-9)
    assert (linear_bound(problem, u, flow) >= plain * (1 - 1e-12)).all()


def test_a_correction_changes_flow_and_measure_alike_over_blocks():
    K = grid((160, 160))
    rng = np.random.default_rng(4)
    c = 10 ** rng.uniform(-3, 3, K.counts[1])
    problem = posed(K, np.zeros(K.counts[0]), c, {0: 0.0}, 1.0, "refuse")
    flow, change = rng.normal(size=(len(c), 2)), rng.normal(size=(K.counts[0], 2))
    before, step = flow.copy(), change[K.head] - change[K.tail]
    size = linear._move(problem, flow, change)
    assert flow == pytest.approx(before - c[:, None] * step, rel=1e-12, abs=1e-12)
    assert size == pytest.approx(np.sqrt((c[:, None] * step**2).sum(axis=0)), rel=1e-12)
