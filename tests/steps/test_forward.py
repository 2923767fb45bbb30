"""The forward-difference series against binomial coefficients and polynomials."""

from fractions import Fraction
from math import comb

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from dec.errors import InputError
from dec.steps import definite_sum, difference, forward_series

from .given import STEPS, columns_of, exact_series, is_plain

PLACES = st.one_of(st.integers(-30, 30), st.fractions(max_denominator=20))


def choose(s, j):
    value = Fraction(1)
    for i in range(j):
        value *= Fraction(s - i) / (i + 1)
    return value


@given(exact_series(), PLACES, STEPS, st.lists(PLACES, min_size=1, max_size=4))
@settings(max_examples=200)
def test_the_series_is_the_sum_of_binomials_times_leading_differences_and_passes_through_the_values(
    values, start, h, x
):
    series = forward_series(values, start, h)
    n, columns = len(values), columns_of(values)
    at_nodes = series.at([start + k * h for k in range(n)])
    assert columns_of(at_nodes) == columns
    found = columns_of(series.at(x))
    for column, result in zip(columns, found, strict=True):
        leading = [sum((-1) ** (j - i) * comb(j, i) * column[i] for i in range(j + 1)) for j in range(n)]
        steps = [(Fraction(place) - start) / h for place in x]
        assert result == [sum(choose(s, j) * d for j, d in enumerate(leading)) for s in steps]
    assert is_plain(series.leading)
    single = series.at(x[0])
    assert ([single] if values.ndim == 1 else single.tolist()) == [column[0] for column in found]


@given(st.lists(st.integers(-9, 9), min_size=1, max_size=6), PLACES, STEPS, PLACES)
@settings(max_examples=150)
def test_a_polynomial_is_its_own_series_and_its_sums_telescope(coefficients, start, h, x):
    def polynomial(y):
        return sum((c * Fraction(y) ** k for k, c in enumerate(coefficients)), Fraction(0))

    places = [start + k * h for k in range(len(coefficients) + 1)]
    series = forward_series([polynomial(y) for y in places], start, h)
    assert series.at(x) == polynomial(x)
    assert series.difference().at(x) == (polynomial(x + h) - polynomial(x)) / Fraction(h)
    total = series.antidifference(constant=7)
    assert total.at(start) == 7
    assert total.difference().at(x) == polynomial(x)
    b = x + 5 * h
    assert total.at(b) - total.at(x) == definite_sum([polynomial(x + k * h) for k in range(5)], h=h)


@given(exact_series(least=2, columns=1), st.data())
@settings(max_examples=150)
def test_at_whole_steps_the_remainder_lies_within_the_bounds_of_the_next_difference(values, data):
    row = values[:, 0]
    k = data.draw(st.integers(0, len(row) - 2))
    series = forward_series(row[: k + 1])
    quotients = [Fraction(v) for v in difference(row, order=k + 1).tolist()]
    for n in range(len(row)):
        low, high = series.remainder(n, min(quotients), max(quotients))
        assert low <= Fraction(row.tolist()[n]) - series.at(n) <= high


@pytest.mark.parametrize(("x", "h"), [(0.03, 0.1), (0.17, 0.1), (0.45, 0.1), (2.0, 0.5), (-0.3, 0.2)])
@pytest.mark.parametrize("count", [1, 2, 3, 5])
def test_between_the_places_the_remainder_lies_within_the_bounds_of_the_next_derivative(x, h, count):
    """Of exp, all of whose derivatives are exp."""
    places = h * np.arange(count)
    series = forward_series(np.exp(places), 0, h)
    ends = min(x, places[0]), max(x, places[-1])
    low, high = series.remainder(x, np.exp(ends[0]), np.exp(ends[1]))
    assert low - 1e-13 <= np.exp(x) - series.at(x) <= high + 1e-13


def test_floats_stay_floats_and_int64_never_wraps():
    series = forward_series([1.0, 2.0, 4.0], h="0.5")
    assert type(series.at(0.25)) is float
    assert series.at([0.25, 1]).tolist() == [1.375, 4.0]
    assert series.difference().leading.tolist() == [2.0, 2.0]
    assert series.antidifference().at(1.0) == 1.5
    table = forward_series([[1.0, 0.0], [2.0, 5.0]]).at([0.5, 3])
    assert table.tolist() == [[1.5, 2.5], [4.0, 15.0]]
    big = forward_series(np.array([2**63 - 1, -(2**63), 2**63 - 1, -(2**63)]))
    assert big.leading.tolist() == [2**63 - 1, 1 - 2**64, 2 * (2**64 - 1), -4 * (2**64 - 1)]
    assert forward_series([5]).difference().at(3) == 0
    with pytest.raises(ValueError, match="read-only"):
        big.leading[0] = 0


@pytest.mark.parametrize(
    ("ask", "message"),
    [
        (lambda: forward_series([]), "values must have at least 1 rows"),
        (lambda: forward_series([1, 2], 0.5), "start must be exact where the data are, .* got 0.5"),
        (lambda: forward_series([1, 2], 0, 0.5), "h must be exact where the data are"),
        (lambda: forward_series([1, 2]).at(0.5), "x must be exact where the data are, .* got 0.5"),
        (lambda: forward_series([1, 2]).at([0.5, 1]), "x must be exact where the data are, .* got floats"),
        (lambda: forward_series([1, 2]).antidifference([1, 2]), r"constant must be one number or have shape \(\)"),
        (lambda: forward_series([1, 2]).remainder(3, 2, 1), "least must not exceed most, got 2 and 1"),
        (lambda: forward_series([1, 2]).remainder([3], [1, 2], 1), "least must be one number"),
    ],
)
def test_what_cannot_be_used_is_refused(ask, message):
    with pytest.raises(InputError, match=message):
        ask()
