"""Sums and products with their rounding errors are exact."""

from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from dec.calculus.complex import Complex
from dec.solvers.drive import downhill_flow, drive_pair
from dec.solvers.pairs import pair_product, pair_sum
from dec.solvers.posed import posed

moderate = st.floats(-1e100, 1e100).filter(lambda x: x == 0 or abs(x) > 1e-100)


def exact(*values):
    return sum((Fraction(float(value)) for value in values), Fraction(0))


@given(moderate, moderate)
def test_a_sum_is_its_two_parts_exactly(a, b):
    rounded, error = pair_sum(np.array([a]), np.array([b]))
    assert rounded[0] == a + b
    assert exact(rounded[0], error[0]) == Fraction(a) + Fraction(b)


@given(moderate, moderate)
def test_a_product_is_its_two_parts_exactly(a, b):
    rounded, error = pair_product(np.array([a]), np.array([b]))
    assert rounded[0] == a * b
    assert exact(rounded[0], error[0]) == Fraction(a) * Fraction(b)


@given(st.floats(1e-300, 1e300), st.floats(-1e5, 1e5), st.floats(-1e5, 1e5))
def test_conductance_times_difference_lies_within_its_allowance(c, u_tail, u_head):
    drive, rest, allowance = drive_pair(np.array([[c]]), np.array([[u_tail]]), np.array([[u_head]]))
    difference = Fraction(c) * (Fraction(u_head) - Fraction(u_tail)) - exact(drive[0, 0], rest[0, 0])
    assert abs(difference) <= Fraction(float(allowance[0, 0]))
    assert allowance[0, 0] <= 2.0**-100 * abs(drive[0, 0]) or not 1e-280 < abs(drive[0, 0]) < 1e290


def test_a_conductance_whose_product_cannot_be_split_has_an_allowance_instead():
    drive, rest, allowance = drive_pair(np.array([[1e305]]), np.array([[0.1]]), np.array([[0.4]]))
    assert np.isfinite([drive[0, 0], rest[0, 0]]).all()
    assert allowance[0, 0] == pytest.approx(2.0**-53 * abs(drive[0, 0]))


def test_a_flow_over_many_blocks_is_the_one_of_single_edges():
    rng = np.random.default_rng(3)
    tail, head = rng.integers(0, 500, (2, 70_000))
    K = Complex.from_edges(tail, head, 500)
    c, u = rng.uniform(1, 2, 70_000), rng.normal(size=(500, 2))
    value, rest = downhill_flow(posed(K, np.zeros((500, 2)), c, None, 1.0, "refuse"), u)
    for e in (0, 1, 32_767, 32_768, 69_999):
        for j in range(2):
            there = Fraction(c[e]) * (Fraction(u[tail[e], j]) - Fraction(u[head[e], j]))
            assert abs(exact(value[e, j], rest[e, j]) - there) <= abs(there) * Fraction(2) ** -100
