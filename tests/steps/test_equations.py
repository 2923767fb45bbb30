"""Linear difference equations: step by step in Fractions, by closed forms, and what the schemes keep."""

import math
from fractions import Fraction
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from dec.errors import InputError
from dec.steps import LinearEquation, cosine, decay, difference, growth, interest, leapfrog, oscillation, sine

from .given import STEPS, is_plain

NUMBERS = st.one_of(st.integers(-5, 5), st.fractions(min_value=-5, max_value=5, max_denominator=6))


def slow(coefficients, initial, count, forcing):
    y = list(initial)
    while len(y) < count:
        latest = y[::-1]
        y.append(sum((c * v for c, v in zip(coefficients, latest, strict=False)), forcing[len(y) - len(initial)]))
    return y


@st.composite
def problems(draw):
    k, m = draw(st.integers(1, 4)), draw(st.integers(1, 3))
    coefficients = draw(st.lists(NUMBERS, min_size=k, max_size=k))
    count = k + draw(st.integers(0, 9))
    initial = np.array(draw(st.lists(NUMBERS, min_size=k * m, max_size=k * m)), dtype=object).reshape(k, m)
    size = (count - k) * m
    forcing = np.array(draw(st.lists(NUMBERS, min_size=size, max_size=size)), dtype=object).reshape(count - k, m)
    return coefficients, initial, count, forcing


@given(problems())
@settings(max_examples=200)
def test_an_exact_solution_is_the_recurrence_step_by_step(problem):
    coefficients, initial, count, forcing = problem
    equation = LinearEquation(coefficients)
    y = equation.solve(initial, count, forcing if len(forcing) else 0)
    assert is_plain(y)
    for j in range(initial.shape[1]):
        expected = slow(coefficients, initial[:, j].tolist(), count, forcing[:, j].tolist())
        assert y[:, j].tolist() == expected
        if len(forcing):
            assert equation.solve(initial[:, j], count, forcing[:, j]).tolist() == expected
            alike = equation.solve(initial, count, forcing[:, j])[:, j]
            assert alike.tolist() == expected


@given(problems())
@settings(max_examples=150)
def test_a_solution_in_floats_is_the_exact_one_rounded(problem):
    coefficients, initial, count, forcing = problem
    exact = LinearEquation(coefficients).solve(initial, count, forcing if len(forcing) else 0)
    floats = LinearEquation([float(c) for c in coefficients])
    y = floats.solve(initial.astype(float), count, forcing.astype(float) if len(forcing) else 0)
    assert y.dtype == np.float64
    assert y.shape == exact.shape
    size = slow([abs(c) for c in coefficients], np.abs(initial).sum(axis=1).tolist(), count,
                np.abs(forcing).sum(axis=1).tolist())  # fmt: skip
    assert (np.abs(y - exact.astype(float)).max(axis=1) <= 1e-14 * (1 + np.array(size, dtype=float)) * count).all()


@given(problems(), st.integers(0, 40))
@settings(max_examples=150)
def test_a_single_value_is_that_of_the_whole_solution(problem, n):
    coefficients, initial, _, _ = problem
    equation = LinearEquation(coefficients)
    whole = equation.solve(initial, max(n + 1, equation.order))
    assert list(equation.at(n, initial)) == whole[n].tolist()
    assert equation.at(n, initial[:, 0]) == whole[n, 0]
    rough = LinearEquation([float(c) for c in coefficients]).at(n, initial[:, 0].astype(float))
    scale = slow([abs(c) for c in coefficients], [abs(v) for v in initial[:, 0].tolist()], n + 1, [0] * (n + 1))[n]
    assert isinstance(rough, float)
    assert rough == pytest.approx(float(whole[n, 0]), abs=1e-11 * (1 + float(scale)) * 4.0 ** min(n, 20))


@given(st.lists(NUMBERS, min_size=2, max_size=4).filter(lambda a: a[-1] != 0), STEPS, st.data())
@settings(max_examples=150)
def test_an_equation_in_differences_is_solved_by_its_solution(a, h, data):
    k = len(a) - 1
    equation = LinearEquation.of_differences(a, h)
    y = equation.solve(data.draw(st.lists(NUMBERS, min_size=k, max_size=k)), 2 * k + 3)
    rows = [difference(y, h, j).tolist() for j in range(k + 1)]
    assert all(sum(c * row[n] for c, row in zip(a, rows, strict=True)) == 0 for n in range(k + 3))


@given(NUMBERS, STEPS, NUMBERS)
def test_decay_and_interest_are_growth(rate, h, start):
    x = [n * h for n in range(8)]
    assert decay(rate, h).solve([start], 8).tolist() == [start * v for v in growth(-rate, x, h)]
    assert interest(rate, h).solve([start], 8).tolist() == [start * v for v in growth(rate, x, h)]
    y = decay(rate, h).solve([start], 8)
    assert difference(y, h).tolist() == [-rate * v for v in y[:-1]]


@given(NUMBERS, STEPS, NUMBERS, NUMBERS)
def test_oscillation_by_forward_differences_is_cosine_and_sine_with_that_step(frequency, h, a, b):
    x = [n * h for n in range(8)]
    c, s = cosine(frequency, x, h), sine(frequency, x, h)
    wanted = [a * u + b * v for u, v in zip(c, s, strict=True)]
    y = oscillation(frequency, h).solve(wanted[:2], 8)
    assert y.tolist() == wanted
    assert difference(y, h, 2).tolist() == [-(frequency**2) * v for v in wanted[:-2]]


@given(NUMBERS, STEPS, NUMBERS, NUMBERS)
def test_leapfrog_keeps_its_energy_exactly(frequency, h, a, b):
    y = leapfrog(frequency, h).solve([a, b], 30).tolist()
    middle = 2 - (frequency * Fraction(h)) ** 2
    energy = [u * u - middle * u * v + v * v for u, v in pairwise(y)]
    assert set(energy) == {energy[0]}
    assert all(y[n + 1] - 2 * y[n] + y[n - 1] == -((frequency * h) ** 2) * y[n] for n in range(1, 29))


def test_leapfrog_swings_with_its_own_angle():
    """Chebyshev polynomials of the first kind; half the step angle is arcsin(frequency h / 2)."""
    frequency, h = 1.7, 0.3
    angle = 2 * math.asin(frequency * h / 2)
    y = leapfrog(frequency, h).solve([1.0, math.cos(angle)], 400)
    assert y == pytest.approx(np.cos(angle * np.arange(400)), abs=1e-11)
    assert np.abs(leapfrog(frequency, h).roots()) == pytest.approx([1, 1])
    assert np.abs(oscillation(frequency, h).roots()) == pytest.approx([math.hypot(1, frequency * h)] * 2)
    wild = leapfrog(Fraction(5, 2)).roots()
    assert np.abs(wild).max() > 1


def test_the_shares_of_a_loan_are_paid_off_to_exactly_zero():
    """The payment by the annuity formula, common practice; P = A (1 - (1 + i)**-n) / i."""
    rate, n = Fraction(4, 1200), 360
    payment = 250000 * rate / (1 - growth(rate, -n))
    balance = interest("4", Fraction(1, 1200)).solve([250000], n + 1, forcing=-payment)
    assert balance[-1] == 0
    assert all(v > 0 for v in balance[:-1])


def test_plain_integers_stand_beside_either():
    assert LinearEquation([1, 1]).solve([0.0, 1.0], 6).tolist() == [0.0, 1.0, 1.0, 2.0, 3.0, 5.0]
    assert LinearEquation([0.5]).solve([4], 3).tolist() == [4.0, 2.0, 1.0]
    big = LinearEquation([2**40, -1]).solve(np.array([2**62, 1]), 4)
    assert big.tolist() == [2**62, 1, 2**40 - 2**62, 2**40 * (2**40 - 2**62) - 1]
    assert LinearEquation(["0.5"]).solve(["1"], 3, forcing="0.25").tolist() == [1, Fraction(3, 4), Fraction(5, 8)]
    assert LinearEquation([1.0]).at(0, [5.0]) == 5.0


@pytest.mark.parametrize(
    ("ask", "message"),
    [
        (lambda: LinearEquation([]), r"coefficients must be one row of at least 1 number, got shape \(0,\)"),
        (lambda: LinearEquation([[1]]), r"coefficients must be one row of at least 1 number"),
        (lambda: LinearEquation([1.0, np.nan]), "coefficients must be finite, got nan at 1"),
        (lambda: LinearEquation([1, 1]).solve([1], 5), "initial must hold 2 rows, one for each coefficient, got 1"),
        (lambda: LinearEquation([1]).solve([np.inf], 5), "initial must be finite, got inf at 0"),
        (lambda: LinearEquation([1, 1]).solve([1, 1], 1), "count must be a whole number, at least 2, got 1"),
        (
            lambda: LinearEquation([1]).solve([1], 3, [1]),
            r"forcing must be one number or have shape \(2,\), got \(1,\)",
        ),
        (lambda: LinearEquation([1]).solve([[1, 2]], 3, np.ones((2, 3), int)), r"have shape \(2, 2\), got \(2, 3\)"),
        (lambda: LinearEquation([1]).solve([1], 3, 0.5), "forcing must be exact where the data are, .* got 0.5"),
        (
            lambda: LinearEquation(["0.5"]).solve([1.0], 3),
            "initial and coefficients must both be exact or both be floats",
        ),
        (
            lambda: LinearEquation([0.5]).solve(["1.5"], 3),
            "must both be exact or both be floats; the coefficients are floats",
        ),
        (lambda: LinearEquation([10**400]).roots(), "coefficients holds a number beyond the range of float64"),
        (lambda: LinearEquation([1]).at(-1, [1]), "n must be a whole number, at least 0, got -1"),
        (lambda: LinearEquation.of_differences([1]), "at least 2 numbers, the last not zero, got"),
        (lambda: LinearEquation.of_differences([1, 0]), "the last not zero"),
        (lambda: decay("0.5", 0.5), "h must be exact where the data are"),
    ],
)
def test_what_cannot_be_used_is_refused(ask, message):
    with pytest.raises(InputError, match=message):
        ask()
