"""Difference calculus against published numbers; sources and basis in the JSON files I1 to I9."""

import json
import math
from decimal import ROUND_DOWN, Decimal
from fractions import Fraction
from pathlib import Path

import numpy as np
import pytest

from dec.steps import (
    antidifference,
    check_telescoping,
    definite_sum,
    difference,
    extend,
    falling_power,
    fill,
    forward_series,
    growth,
    interest,
    summation_by_parts,
)


def entry(name):
    data = json.loads((Path(__file__).parent / f"{name}.json").read_text(encoding="utf-8"))
    return data["input"], data["expected"]


def test_i1_bernoullis_sum_of_tenth_powers():
    given, known = entry("I1")
    power = given["power"]
    total = forward_series([k**power for k in range(power + 1)]).antidifference()
    for n in given["n"]:
        direct = definite_sum(np.array([k**power for k in range(1, n + 1)], dtype=object))
        assert total.at(n + 1) == direct == int(known[f"sum_k10_1..{n}"])


def test_i1_the_same_sum_by_falling_powers():
    """k**10 is the sum of Stirling numbers of the second kind times falling powers; these sum like powers integrate."""
    given, known = entry("I1")
    row = [1]
    for n in range(1, given["power"] + 1):
        row = [0, *(row[k - 1] + k * (row[k] if k < n else 0) for k in range(1, n + 1))]
    for n in given["n"]:
        total = sum(s * Fraction(falling_power(n + 1, m + 1), m + 1) for m, s in enumerate(row))
        assert total == int(known[f"sum_k10_1..{n}"])


def test_i2_newton_forward_interpolation_of_the_hyperbolic_cosine():
    given, known = entry("I2")
    series = forward_series(given["y"], given["x"][0], "0.1")
    assert series.leading.tolist()[1:] == [Fraction(text) for text in known["leading_differences"]]
    value = series.at(given["at"])
    assert value == Fraction(known["p3"].split()[0]) == Fraction("1.160944632")
    assert Decimal("1.160944632").quantize(Decimal("1e-6"), rounding=ROUND_DOWN) == Decimal(given["p3"])  # as printed
    # the fourth derivative is cosh itself, between its values at 0.5 and 0.8
    low, high = series.remainder(given["at"], Fraction(math.cosh(0.5)), Fraction(math.cosh(0.8)))
    assert [float(value + low), float(value + high)] == pytest.approx([float(b) for b in known["bounds"]], abs=1.3e-6)
    assert low <= Fraction(known["true"]) - value + Fraction(1, 10**6)
    assert float(value + high) == pytest.approx(math.cosh(0.56), abs=2e-6)


def test_i4_interpolation_in_a_table_of_four_integers():
    given, known = entry("I4")
    series = forward_series(given["y"], given["x"][0], 4)
    assert series.at(given["at"]) == Fraction(known["y(25)"])
    # as a gap: the table at every unit, with three unknown rows between two known ones
    cells = [None] * 13
    cells[::4] = given["y"]
    assert fill(cells, order=3, largest=0).values[5] == Fraction(known["y(25)"])


@pytest.mark.parametrize("n", range(1, 26))
def test_i5_identities_of_concrete_mathematics(n):
    _, known = entry("I5")
    assert known["sum k 2^k"] == "(n-1) 2^(n+1)+2"
    k = list(range(n + 1))
    assert definite_sum([j * 2**j for j in k]) == (n - 1) * 2 ** (n + 1) + 2
    # the same by parts, as the book does it: u = k, v = 2**k, its own difference
    parts = summation_by_parts(range(n + 2), [2**j for j in range(n + 2)])
    assert parts.boundary - parts.rest == (n - 1) * 2 ** (n + 1) + 2
    powers = growth(1, range(n + 1))
    assert difference(powers).tolist() == powers[:-1].tolist()
    harmonic = antidifference([falling_power(j, -1) for j in range(n)])  # 1 / (j + 1) is the falling power -1
    assert harmonic.tolist() == [sum((Fraction(1, i) for i in range(1, j + 1)), Fraction(0)) for j in range(n + 1)]
    assert definite_sum(harmonic[:n]) == n * harmonic[n] - n
    weighted = definite_sum([j * h for j, h in enumerate(harmonic[:n])])
    assert weighted == Fraction(n * (n - 1), 2) * (harmonic[n] - Fraction(1, 2))
    for m in range(-4, 6):
        x = list(range(n, n + 4))
        assert difference(falling_power(x, m)).tolist() == [m * v for v in falling_power(x, m - 1)[:-1]]


def test_i6_compound_interest_factors():
    _, known = entry("I6")
    for name, published in known.items():
        kind, percent, periods = name.split()
        rate, n = Fraction(int(percent.rstrip("%")), 100), int(periods)
        future = growth(rate, n)
        assert interest(rate).solve([1], n + 1)[-1] == future
        saved = interest(rate).solve([0], n + 1, forcing=1)[-1]  # 1 at the end of each period
        present = definite_sum(growth(rate, range(-n, 0)))
        assert saved == (future - 1) / rate == present * future
        factor = {"F/P": future, "P/A": present, "F/A": saved, "A/P": 1 / present}[kind]
        assert abs(factor - Fraction(str(published))) <= Fraction(5, 100000)


def test_i8_hostile_sums_telescope_and_add_up():
    data = json.loads((Path(__file__).parent / "I8.json").read_text(encoding="utf-8"))
    given = data["input"]
    for texts, times, known in zip(given["cases"], given["repeats"], data["expected"]["sums"], strict=True):
        values = [float(text) for text in texts] * times
        assert definite_sum(values) == float(known)
        assert check_telescoping(values).difference == 0
        exact = [Fraction(text) for text in texts] * times
        assert definite_sum(difference(exact)) == exact[-1] - exact[0]


def test_i9_the_table_of_the_difference_engine():
    given, known = entry("I9")
    values = known["values"]
    assert given["x"] == "0..8"
    assert values == [x * x + x + 41 for x in range(9)]
    assert set(difference(values, order=2).tolist()) == {known["second_difference"]}
    # turned by adding only: the first three values give all of it
    carried = extend(values[:3], after=6, order=2, largest=0)
    assert carried.values.tolist() == values
    assert not carried.remainder.any()
    assert antidifference(antidifference([2] * 7, start=2), start=41).tolist() == values
