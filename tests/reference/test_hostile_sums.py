"""Sums that defeat plain floating point.

Source: I8.json, the standard examples of exactly rounded summation (from memory there; the exact sums follow from the
floats themselves).
"""

import json
import math
from fractions import Fraction
from pathlib import Path

import numpy as np
import pytest

from dec.calculus.complex import Complex
from dec.calculus.exact import check_stokes, exact_integral

DATA = json.loads((Path(__file__).parent / "I8.json").read_text())
CASES = [
    ([float(text) for text in numbers] * times, known)
    for numbers, times, known in zip(
        DATA["input"]["cases"], DATA["input"]["repeats"], DATA["expected"]["sums"], strict=True
    )
]


def integral(values):
    K = Complex.from_edges(np.zeros(len(values), np.int64), np.ones(len(values), np.int64))
    return exact_integral(K.chain(1, np.ones(len(values), np.int64)), K.cochain(1, values))


@pytest.mark.parametrize(("values", "known"), CASES)
def test_the_exact_sum_rounds_to_the_known_value(values, known):
    assert float(integral(values)) == float(known) == math.fsum(values)
    assert integral(values) == sum(map(Fraction, values))


def test_plain_floats_lose_the_thousand_ones_and_the_exact_sum_does_not():
    values, _ = CASES[2]
    assert sum(values) == DATA["expected"]["naive_third"] == 0
    assert integral(values) == 1000


@pytest.mark.parametrize(("values", "known"), CASES)
def test_stokes_holds_exactly_on_a_polygon_that_carries_the_hostile_numbers(values, known):
    n = max(len(values), 3)
    K = Complex.from_faces([list(range(n))])
    order = K.walks.edges
    w = np.zeros(n)
    w[order[: len(values)]] = np.array(values) * K.walks.signs[: len(values)]
    finding = check_stokes(K.region([0]), K.cochain(1, w))
    assert finding.holds
    assert float(finding.left) == float(known)
