"""The power law of single edges, and what a flow and a drop prove of each other."""

from decimal import Decimal
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from dec.calculus.complex import Complex
from dec.solvers.balanced import BalancedFlow
from dec.solvers.bounds import linear_bound
from dec.solvers.edge_law import drop_of, flow_of, power_bound
from dec.solvers.posed import posed

from .slow_poisson import fenchel_gaps

exponents = st.one_of(st.sampled_from([1.0, 1.852, 2.0]), st.floats(1.0, 2.0))
conductances = st.floats(1e-6, 1e6)
flows = st.one_of(st.just(0.0), st.floats(1e-9, 1e9), st.floats(-1e9, -1e-9))


def plain_flow(values):
    values = np.asarray(values, dtype=float).reshape(-1, 1)
    return BalancedFlow(values, np.zeros_like(values), np.zeros_like(values), np.zeros_like(values))


def test_the_drop_is_positive_in_the_direction_of_flow_and_a_square_for_exponent_two():
    """By hand: 3 through conductance 1/2 under the square law costs 3 * 3 / (1/2) = 18."""
    assert drop_of(np.array([3.0, -3.0, 0.0]), np.array([0.5]), np.array([2.0])).tolist() == [18.0, -18.0, 0.0]
    assert flow_of(np.array([18.0, -18.0, 0.0]), np.array([0.5]), np.array([2.0])).tolist() == [3.0, -3.0, 0.0]


def test_exponent_one_is_proportional_also_where_a_metric_makes_the_conductance_negative():
    one = np.array([1.0])
    assert flow_of(np.array([6.0]), np.array([-0.5]), one).tolist() == [-3.0]
    assert drop_of(np.array([-3.0]), np.array([-0.5]), one).tolist() == [6.0]


@given(flows, conductances, exponents)
def test_flow_and_drop_are_inverse(flow, c, n):
    there = drop_of(np.array([flow]), np.array([c]), np.array([n]))
    assert flow_of(there, np.array([c]), np.array([n]))[0] == pytest.approx(flow, rel=1e-12)


@given(flows, flows, conductances, exponents)
def test_the_sum_of_gaps_is_bounded_from_above_and_by_less_than_four_times(flow, u_tail, c, n):
    """The gap itself with sixty digits; it is never negative."""
    problem = posed(Complex.from_edges([0], [1]), [0, 0], [c], {1: 0.0}, n, "refuse")
    u = np.array([[u_tail], [0.0]])
    gap = fenchel_gaps(problem.network, u[:, 0], [flow], [c], [n])[0]
    bound = Fraction(float(power_bound(problem, u, plain_flow([flow]))[0]))
    energies = (abs(flow) ** (n + 1) / c, abs(flow * u_tail), (c * abs(u_tail)) ** (1 + 1 / n) / c)
    scale = Fraction(max(energies))
    assert gap >= -(Decimal(10) ** -50) * Decimal(max(energies))
    assert bound**2 / 2 >= Fraction(gap)
    assert bound**2 / 2 <= 4 * Fraction(gap) * Fraction(1.000001) + scale * Fraction(10) ** -18


@given(flows, conductances, exponents, st.floats(-1e-6, 1e-6))
def test_the_bound_is_the_gap_itself_where_flow_and_drop_nearly_agree(flow, c, n, change):
    if flow == 0:
        return
    drop = float(drop_of(np.array([flow]), np.array([c]), np.array([n]))[0])
    problem = posed(Complex.from_edges([0], [1]), [0, 0], [c], {1: 0.0}, n, "refuse")
    u = np.array([[drop * (1 + change)], [0.0]])
    gap = float(fenchel_gaps(problem.network, u[:, 0], [flow], [c], [n])[0])
    energy = abs(flow * drop)
    bound = float(power_bound(problem, u, plain_flow([flow]))[0])
    assert bound**2 / 2 == pytest.approx(gap, rel=1e-5, abs=1e-22 * energy)


@given(flows, flows, conductances)
def test_exponent_one_has_the_bound_of_the_linear_law(flow, u_tail, c):
    problem = posed(Complex.from_edges([0], [1]), [0, 0], [c], {1: 0.0}, 1.0, "refuse")
    u = np.array([[u_tail], [0.0]])
    linear, power = (bound(problem, u, plain_flow([flow]))[0] for bound in (linear_bound, power_bound))
    assert power >= linear * (1 - 1e-15)
    assert power == pytest.approx(linear, rel=1e-12, abs=1e-13 * (abs(flow) + c * abs(u_tail)) / np.sqrt(c))
