"""Growth, its cosine and sine: the equations that they solve, exactly, and their values in floats."""

import math
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from dec.errors import InputError
from dec.steps import cosine, difference, growth, sine

from .given import STEPS

RATES = st.one_of(st.integers(-4, 4), st.fractions(min_value=-3, max_value=3, max_denominator=12))


@given(RATES, STEPS, st.integers(0, 12))
@settings(max_examples=200)
def test_growth_is_the_power_and_its_difference_quotient_is_the_rate_times_itself(rate, h, n):
    values = growth(rate, [k * h for k in range(n + 2)], h)
    assert values.tolist() == [(1 + Fraction(rate) * h) ** k for k in range(n + 2)]
    assert difference(values, h).tolist() == [rate * v for v in values[:-1]]
    assert all(type(v) is Fraction for v in values)


@given(RATES, STEPS, st.integers(-6, 8))
@settings(max_examples=200)
def test_cosine_and_sine_are_the_parts_of_the_power_and_each_others_differences(frequency, h, n):
    x = [(n + k) * h for k in range(3)]
    c, s = cosine(frequency, x, h), sine(frequency, x, h)
    turn, real, imaginary = Fraction(frequency) * h, Fraction(1), Fraction(0)
    for _ in range(abs(n)):
        if n > 0:
            real, imaginary = real - turn * imaginary, imaginary + turn * real
        else:
            size = 1 + turn * turn
            real, imaginary = (real + turn * imaginary) / size, (imaginary - turn * real) / size
    assert (c[0], s[0]) == (real, imaginary)
    assert difference(c, h).tolist() == [-frequency * v for v in s[:-1]]
    assert difference(s, h).tolist() == [frequency * v for v in c[:-1]]
    assert [a * a + b * b for a, b in zip(c, s, strict=True)] == [(1 + turn**2) ** (n + k) for k in range(3)]


@pytest.mark.parametrize("rate", [0.05, -0.3, 1.0, 1e-12, 3.0, -0.999])
@pytest.mark.parametrize("h", [1.0, 0.25, 1 / 12])
@pytest.mark.parametrize("n", [-7, 0, 1, 5, 100])
def test_growth_of_floats_is_right_to_the_rounding_of_its_logarithm(rate, h, n):
    exact = (1 + Fraction(rate) * Fraction(h)) ** n
    error = abs(Fraction(growth(rate, n * h, h)) / exact - 1)
    assert error <= 4 * 2.0**-52 * (1 + abs(n * math.log1p(rate * h)) + abs(n) * 2.0**-20)


def test_growth_of_a_small_rate_keeps_its_digits():
    assert growth(1e-12, 1e12) == pytest.approx(math.e * (1 - 0.5e-12), rel=1e-14)
    assert growth(1.0, 1.0, 2.0**-40) == pytest.approx(math.e, rel=1e-11)


def test_growth_through_zero_and_below_is_taken_for_whole_steps_only():
    assert growth(-1.0, [0.0, 1.0, 2.0]).tolist() == [1.0, 0.0, 0.0]
    assert growth(-3.0, [0.0, 1.0, 2.0, 3.0]) == pytest.approx([1.0, -2.0, 4.0, -8.0], rel=1e-14)
    assert growth(-30.0, 0.3, 0.1) == pytest.approx(-8.0, rel=1e-14)  # 0.3 / 0.1 is 2.9999999999999996
    with pytest.raises(InputError, match=r"x / h must be a whole number where 1 \+ rate h is negative, got 0.5"):
        growth(-3.0, 0.5)
    with pytest.raises(InputError, match=r"must not be negative where 1 \+ rate h is zero, got -1.0"):
        growth(-1.0, -1.0)
    with pytest.raises(InputError, match=r"must not be negative where 1 \+ rate h is zero, got -1"):
        growth(-1, -1)


@pytest.mark.parametrize("frequency", [0.3, 2.0, -1.1])
@pytest.mark.parametrize("h", [0.5, 1.0])
def test_cosine_and_sine_of_floats_are_the_parts_of_the_complex_power(frequency, h):
    x = h * np.arange(-5, 40)
    power = (1 + 1j * frequency * h) ** (x / h)
    assert cosine(frequency, x, h) == pytest.approx(power.real, rel=1e-12, abs=1e-12 * np.abs(power).max())
    assert sine(frequency, x, h) == pytest.approx(power.imag, rel=1e-12, abs=1e-12 * np.abs(power).max())
    assert cosine(1.0, 1.0, 2.0**-30) == pytest.approx(math.cos(1), rel=1e-8)


def test_rates_and_places_spread_over_each_other():
    table = growth(["0.5", "1"], np.array([[0], [1], [2]]))
    assert table.tolist() == [[1, 1], [Fraction(3, 2), 2], [Fraction(9, 4), 4]]
    assert growth(np.array([0.5, 1.0]), np.array([[0], [1], [2]])).tolist() == table.astype(float).tolist()
    assert type(growth(1, 3)) is Fraction
    assert type(growth(0.5, 3)) is float
    assert growth(1, 0.5) == pytest.approx(math.sqrt(2))


@pytest.mark.parametrize(
    ("ask", "message"),
    [
        (lambda: growth("0.05", 2.0), "rate and x must both be exact or both be floats"),
        (lambda: growth(0.05, Fraction(1, 2)), "rate and x must both be exact or both be floats"),
        (lambda: growth("0.05", 2, 0.5), "h must be exact where the data are"),
        (lambda: growth("0.05", "2.5"), "x must be a whole number of steps 1 to stay exact, got 5/2"),
        (lambda: growth(0.5, [1.0, 2.0], 0), "h must be one positive number"),
        (lambda: growth([0.5, 1.0], [1.0, 2.0, 3.0]), "rate and x must spread over each other"),
        (lambda: cosine("much", 1), "rate|frequency 'much' is not a number"),
    ],
)
def test_what_cannot_be_used_is_refused(ask, message):
    with pytest.raises(InputError, match=message):
        ask()
