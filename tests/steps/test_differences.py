"""Differences, sums and their rules, against the definitions in Fractions."""

from decimal import Decimal
from fractions import Fraction
from itertools import pairwise

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from dec.calculus.columns import Column
from dec.calculus.complex import Complex, grid
from dec.calculus.exact import check_line_integral, check_stokes
from dec.errors import InputError
from dec.steps import (
    antidifference,
    check_summation_by_parts,
    check_telescoping,
    definite_sum,
    difference,
    falling_power,
    summation_by_parts,
)

from .given import STEPS, columns_of, exact_series, float_series, is_plain


def slow_difference(column, h, order=1):
    for _ in range(order):
        column = [(b - a) / Fraction(h) for a, b in pairwise(column)]
    return column


@given(exact_series(least=2), STEPS, st.data())
@settings(max_examples=300)
def test_a_difference_is_the_quotient_of_the_definition_and_stays_exact(values, h, data):
    order = data.draw(st.integers(0, len(values) - 1))
    result = difference(values, h, order)
    assert result.shape == (len(values) - order, *values.shape[1:])
    assert is_plain(result)
    assert columns_of(result) == [slow_difference(column, h, order) for column in columns_of(values)]


@given(exact_series(), STEPS, st.data())
@settings(max_examples=200)
def test_difference_and_antidifference_undo_each_other_exactly(values, h, data):
    start = data.draw(st.one_of(st.integers(-(2**70), 2**70), st.fractions(max_denominator=9)))
    total = antidifference(values, h, start)
    assert is_plain(total)
    assert columns_of(difference(total, h)) == columns_of(values)
    assert all(column[0] == start for column in columns_of(total))
    again = antidifference(difference(total, h), h, total[0])
    assert columns_of(again) == columns_of(total)


@given(exact_series(least=2), STEPS, st.data())
@settings(max_examples=200)
def test_the_definite_sum_of_a_difference_is_end_minus_start_exactly(values, h, data):
    first = data.draw(st.integers(0, len(values) - 1))
    last = data.draw(st.integers(first, len(values) - 1))
    total = definite_sum(difference(values, h), first, last, h)
    expected = [column[last] - column[first] for column in columns_of(values)]
    assert (total.tolist() if values.ndim == 2 else [total]) == expected


@given(float_series(), st.data())
@settings(max_examples=300)
def test_steps_of_floats_of_any_size_add_up_to_end_minus_start_exactly(values, data):
    first = data.draw(st.integers(0, len(values) - 1))
    last = data.draw(st.integers(first, len(values) - 1))
    finding = check_telescoping(values, first, last)
    assert finding.holds
    assert finding.difference == 0
    assert finding.left == sum((Fraction(values[i + 1]) - Fraction(values[i]) for i in range(first, last)), Fraction(0))
    assert finding.right == Fraction(values[last]) - Fraction(values[first])


def hostile(random, count, kind):
    """Values over 30 orders of magnitude, as floats, or as decimal text of as many places."""
    floats = random.standard_normal(count) * 10.0 ** random.integers(-15, 16, count)
    return floats if kind == "floats" else [f"{Decimal(v):.18f}" for v in floats]


def exactly(values):
    return values if isinstance(values, np.ndarray) else [Fraction(v) for v in values]


@pytest.mark.parametrize("kind", ["floats", "decimals"])
@pytest.mark.parametrize("seed", range(3))
def test_any_path_region_and_period_telescopes_to_exactly_zero(kind, seed):
    random = np.random.default_rng(seed)
    K = grid((12, 9))
    heights = exactly(hostile(random, K.counts[0], kind))
    walk = [0]
    for _ in range(400):
        ends = np.concatenate([K.head[K.tail == walk[-1]], K.tail[K.head == walk[-1]]])
        walk.append(int(random.choice(ends)))
    finding = check_line_integral(K.path(walk), K.cochain(0, heights))
    assert finding.holds
    assert finding.left == Fraction(heights[walk[-1]]) - Fraction(heights[0])
    home = check_line_integral(K.path([*walk, *reversed(walk[:-1])], closed=False), K.cochain(0, heights))
    assert (home.left, home.right) == (0, 0)

    flows = exactly(hostile(random, K.counts[1], kind))
    region = random.permutation(K.counts[2])[:40]
    assert check_stokes(K.region(region), K.cochain(1, flows)).difference == 0
    sphere = Complex.from_faces([[0, 1, 2], [0, 2, 3], [0, 3, 1], [3, 2, 1]])
    closed = check_stokes(sphere.region(range(4)), sphere.cochain(1, flows[:6]))
    assert (closed.left, closed.right) == (0, 0)

    series = hostile(random, 1000, kind)
    for first, last in [(0, 999), (17, 17), *np.sort(random.integers(0, 1000, (20, 2)), axis=1).tolist()]:
        finding = check_telescoping(series, first, last)
        assert finding.difference == 0
        assert finding.right == Fraction(series[last]) - Fraction(series[first])
    round_trip = [*series, *series[-2::-1]]
    assert (check_telescoping(round_trip).left, check_telescoping(round_trip).right) == (0, 0)
    if kind == "decimals":
        assert definite_sum(difference(series, "0.25"), h="0.25") == Fraction(series[-1]) - Fraction(series[0])
    else:  # so that the test is not idle: rounded differences do not add up
        assert float(np.diff(series).sum()) != series[-1] - series[0]


@given(exact_series(columns=2), exact_series(columns=2), STEPS)
@settings(max_examples=200)
def test_the_product_rule_holds_with_the_second_factor_one_step_on(f, g, h):
    n = min(len(f), len(g))
    f, g = f[:n].astype(object), g[:n].astype(object)
    if n < 2:
        return
    left = difference(f * g, h)
    right = f[:-1] * difference(g, h) + difference(f, h) * g[1:]
    assert columns_of(left) == columns_of(right)


@given(st.lists(st.integers(-6, 6), min_size=1, max_size=5), exact_series(least=2, columns=1), STEPS)
@settings(max_examples=200)
def test_the_chain_rule_holds_with_the_inner_step_as_the_outer_one(coefficients, inner, h):
    """The difference quotient of F(g(x)) is that of F at g(x), with the step h Dg(x), times Dg(x)."""

    def outer(y):
        return sum(c * y**k for k, c in enumerate(coefficients))

    g = [Fraction(v) for v in inner[:, 0].tolist()]
    whole = difference([outer(y) for y in g], h).tolist()
    for x, slope in enumerate(difference(g, h).tolist()):
        step = Fraction(h) * slope
        factor = (outer(g[x] + step) - outer(g[x])) / step if step else 0
        assert whole[x] == factor * slope
        if step > 0:
            assert factor == difference([outer(g[x]), outer(g[x] + step)], step)[0]


@given(exact_series(), exact_series())
@settings(max_examples=150)
def test_summation_by_parts_is_exact_on_exact_series(u, v):
    if u.ndim != v.ndim:
        return
    n, shape = min(len(u), len(v)), min(u.shape[1:], v.shape[1:])
    u, v = (w[:n] if w.ndim == 1 else w[:n, : shape[0]] for w in (u, v))
    parts = summation_by_parts(u, v)
    for j, (a, b) in enumerate(zip(columns_of(u), columns_of(v), strict=True)):
        boundary, rest = (parts.boundary, parts.rest) if u.ndim == 1 else (parts.boundary[j], parts.rest[j])
        assert boundary == a[-1] * b[-1] - a[0] * b[0]
        assert boundary - rest == sum(a[i] * (b[i + 1] - b[i]) for i in range(n - 1))


@given(float_series(), float_series())
@settings(max_examples=150)
def test_summation_by_parts_is_decided_exactly_on_floats(u, v):
    n = min(len(u), len(v))
    finding = check_summation_by_parts(u[:n], v[:n])
    assert finding.holds
    a, b = [Fraction(x) for x in u.tolist()], [Fraction(x) for x in v.tolist()]
    assert finding.left == sum((a[i] * (b[i + 1] - b[i]) for i in range(n - 1)), Fraction(0))


@given(st.one_of(st.integers(-(2**65), 2**65), st.fractions(max_denominator=20)), st.integers(-6, 8), STEPS)
@settings(max_examples=200)
def test_the_difference_of_a_falling_power_is_its_exponent_times_the_next_lower_one(x, m, h):
    def power(y, k):
        try:
            return falling_power(y, k, h)
        except InputError:
            return None

    values = [power(y, k) for y, k in ((x, m), (x + h, m), (x, m - 1))]
    if None in values:
        assert min(m, m - 1) < 0
        return
    low, high, lower = values
    assert (high - low) / Fraction(h) == m * lower
    if m >= 0:
        product = Fraction(1)
        for k in range(m):
            product *= x - k * Fraction(h)
        assert low == product


def test_falling_powers_of_int64_leave_it_before_they_wrap():
    x = np.array([3, 2**20, -(2**20)])
    result = falling_power(x, 4)
    assert result.tolist() == [v * (v - 1) * (v - 2) * (v - 3) for v in x.tolist()]
    assert falling_power(np.array([5, 6]), 3).dtype == np.int64
    assert falling_power(2**62, 3) == 2**62 * (2**62 - 1) * (2**62 - 2)
    assert falling_power(np.array([2.5]), 2).tolist() == [3.75]
    assert falling_power(3, 0) == 1
    with pytest.raises(InputError, match="the falling power -2 of -1 with step 1 divides by zero"):
        falling_power([4, -1], -2)


@pytest.mark.parametrize("values", [[2**63 - 1, -(2**63), 2**63 - 1], [-(2**63), 2**63 - 1, 0]])
def test_int64_never_wraps(values):
    array = np.array(values)
    a, b, c = values
    assert difference(array).tolist() == [b - a, c - b]
    assert difference(array, order=2).tolist() == [c - 2 * b + a]
    assert antidifference(np.array([2**62, 2**62, 2**62])).tolist() == [0, 2**62, 2**63, 3 * 2**62]
    assert antidifference(np.array([1]), start=2**63 - 1).tolist() == [2**63 - 1, 2**63]
    assert antidifference(np.array([2**40]), h=2**40).tolist() == [0, 2**80]
    assert definite_sum(np.full(5, 2**62)) == 5 * 2**62
    parts = summation_by_parts(array, array)
    assert parts.boundary == c * c - a * a


def test_narrow_integers_are_widened_before_they_are_subtracted():
    assert difference(np.array([30000, -30000], dtype=np.int16)).tolist() == [-60000]
    assert difference(np.array([0, 255], dtype=np.uint8)[::-1]).tolist() == [-255]
    assert difference(np.array([0, 2**64 - 1], dtype=np.uint64)).tolist() == [2**64 - 1]
    assert antidifference(np.array([100, 100], dtype=np.int8)).tolist() == [0, 100, 200]


def test_small_integers_stay_int64_and_floats_stay_floats():
    assert difference([1, 4, 9]).dtype == np.int64
    assert antidifference([1, 4, 9]).dtype == np.int64
    assert antidifference([1, 4, 9], h=3, start=2).tolist() == [2, 5, 17, 44]
    assert difference([1.0, 4.0], h=Fraction(1, 4)).tolist() == [12.0]
    assert antidifference([1.5, 2.5], h="0.5", start=1).tolist() == [1.0, 1.75, 3.0]
    assert definite_sum([1e100, 1.0, -1e100, 1.0], h=0.5) == 1.0
    assert definite_sum(np.array([[0.1, 1e16], [0.2, 1.0], [0.3, -1e16]])).tolist() == [0.6, 1.0]
    assert np.isnan(difference([1.0, np.nan, 2.0])).all()


def test_decimal_text_of_every_source_is_read_exactly():
    known = [Fraction(1, 5), Fraction(-3, 10)]
    texts = ["0.1", "0.3", "0"]
    column = Column("flow", np.array(texts, dtype=object), "edges.csv")
    for given_as in (
        texts,
        np.array(texts),
        np.array(texts, dtype=object),
        pd.Series(texts),
        column,
        column.decimals(),
    ):
        assert difference(given_as).tolist() == known
    table = difference(np.array([["0.1", "7"], ["0.3", "9"]]))
    assert table.tolist() == [[Fraction(1, 5), 2]]
    assert difference(["1e20", "3e20"]).tolist() == [2 * 10**20]


@pytest.mark.parametrize(
    ("ask", "message"),
    [
        (lambda: difference([1, 2], h=0.5), "h must be exact where the data are, .* got 0.5"),
        (lambda: difference(["1", "2"], h=0.1), "h must be exact where the data are"),
        (lambda: difference([1.0, 2.0], h=0), "h must be one positive number, got 0"),
        (lambda: difference([1, 2], h=[1, 2]), r"h must be one positive number, got \[1, 2\]"),
        (lambda: difference([1, 2], h=-1), "h must be one positive number, got -1"),
        (lambda: difference([1.0, 2.0], h=np.inf), "h must be finite, got inf"),
        (lambda: difference([1, 2], order=2), "values must have at least 3 rows for this, got 2"),
        (lambda: difference([1, 2], order=1.5), "order must be a whole number, at least 0, got 1.5"),
        (lambda: difference([[[1]], [[2]]]), r"values must have shape \(n,\) or \(n, m\)"),
        (lambda: difference(5), r"values must have shape \(n,\) or \(n, m\)"),
        (lambda: difference(["1", "", "3"]), "values must have a value everywhere, got none at 1"),
        (lambda: difference([1, None, 3]), "values must have a value everywhere, got none at 1"),
        (lambda: difference(["1", "x"]), "series row 1: values 'x' is not a number"),
        (lambda: difference(["1", 2]), r"values must be all text or all numbers, got 2 among text at \[1\]"),
        (lambda: difference([True, False]), "values must hold real numbers, got bool"),
        (lambda: difference([1j, 2]), "values must hold real numbers, got complex128"),
        (lambda: difference([Decimal("0.1"), Decimal("0.2")]), "got Decimal"),
        (lambda: difference([[1, 2], [3]]), "values must be a rectangular array"),
        (lambda: difference(np.ma.masked_array([1, 2], [0, 1])), "got a masked one"),
        (lambda: antidifference([1, 2], start=0.5), "start must be exact where the data are, .* got 0.5"),
        (lambda: antidifference([[1, 2]], start=[1, 2, 3]), r"start must be one number or one for each"),
        (lambda: antidifference([1, 2], start=[1, 2]), r"start must be one number or one for each"),
        (lambda: definite_sum([1, 2], 1, 5), "first and last must be rows with first <= last <= 2, got 1 and 5"),
        (lambda: definite_sum([1.0, np.nan]), "values must be finite to be added, got nan at row 1"),
        (lambda: definite_sum([[1.0, 2.0], [3.0, np.inf]], 1), "got inf at row 1 of series 1"),
        (lambda: definite_sum([1e308, 1e308]), "the sum is beyond the range of float64"),
        (lambda: check_telescoping([[1, 2], [3, 4]]), "one series at a time: values have 2 columns"),
        (lambda: check_telescoping([1.0, np.inf]), "values must be finite to be added, got inf at row 1"),
        (lambda: check_telescoping([np.nan]), "values must be finite to be added, got nan at row 0"),
        (lambda: check_telescoping([]), "values must have at least 1 rows for this, got 0"),
        (lambda: summation_by_parts([1, 2], [1, 2, 3]), r"u and v must have one shape, got \(2,\) and \(3,\)"),
        (lambda: summation_by_parts([1, 2], [1.0, 2.0]), "must both be exact or both be floats"),
        (lambda: check_summation_by_parts([1.0, np.nan], [1.0, 2.0]), "u must be finite, got nan at 1"),
        (lambda: check_summation_by_parts([[1]], [[2]]), "one series at a time: there are 1 columns"),
        (lambda: falling_power(2, 1.5), "m must be a whole number, got 1.5"),
        (lambda: falling_power(2, 2, 0.5), "h must be exact where the data are"),
        (lambda: falling_power([], 2, -1), "h must be one positive number"),
    ],
)
def test_what_cannot_be_used_is_refused_with_what_was_found(ask, message):
    with pytest.raises(InputError, match=message):
        ask()
