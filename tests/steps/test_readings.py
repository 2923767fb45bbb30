"""Readings filled and carried on, against Lagrange's formula in Fractions, and their stated remainders."""

from fractions import Fraction
from itertools import combinations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from dec.errors import InputError
from dec.steps import difference, extend, fill, forward_series

from .given import exact_series


def lagrange(nodes, values, t):
    total, size = Fraction(0), Fraction(0)
    for i, a in zip(nodes, values, strict=True):
        weight = Fraction(1)
        for j in nodes:
            if j != i:
                weight *= Fraction(t - j, i - j)
        total += weight * Fraction(a)
        size += abs(weight)
    return total, size


def nearest(known, t, k):
    """The k + 1 readings in a row of the known ones whose farther end is nearest; the earliest such."""
    stretches = [known[i : i + k + 1] for i in range(len(known) - k)]
    return min(stretches, key=lambda s: (max(abs(t - s[0]), abs(s[-1] - t)), s))


@st.composite
def gapped(draw):
    values = draw(exact_series(least=6, most=14))
    k = draw(st.integers(0, 4))
    rows = np.zeros(values.shape, dtype=bool)
    inner = st.booleans()
    for j in range(1 if values.ndim == 1 else values.shape[1]):
        column = [False, *(draw(inner) for _ in range(len(values) - 2)), False]
        while column.count(False) < k + 1:
            column[column.index(True)] = False
        if values.ndim == 1:
            rows[:] = column
        else:
            rows[:, j] = column
    return values, rows, k


def with_gaps(values, gaps):
    cells = values.astype(object)
    cells[gaps] = None
    return cells


@given(gapped())
@settings(max_examples=300)
def test_a_gap_takes_the_polynomial_through_the_nearest_readings_and_is_off_by_at_most_the_remainder(case):
    """The true values are known here, so the bound on their differences is too."""
    values, gaps, k = case
    true = values.astype(object)
    table = true if true.ndim == 2 else true[:, None]
    size = [
        max((abs(d) for d in difference(table[:, j], order=k + 1).tolist()), default=0) if len(table) > k + 1 else 0
        for j in range(table.shape[1])
    ]
    filled = fill(with_gaps(values, gaps), order=k, largest=size if true.ndim == 2 else size[0])
    assert filled.is_read.tolist() == (~gaps).tolist()
    found, remainder, amplified = (
        t if t.ndim == 2 else t[:, None] for t in (filled.values, filled.remainder, filled.amplification)
    )
    holes = gaps if gaps.ndim == 2 else gaps[:, None]
    for j in range(table.shape[1]):
        known = [i for i in range(len(table)) if not holes[i, j]]
        for t in range(len(table)):
            if not holes[t, j]:
                assert (found[t, j], remainder[t, j], amplified[t, j]) == (table[t, j], 0, 0)
                continue
            nodes = nearest(known, t, k)
            value, total = lagrange(nodes, [table[i, j] for i in nodes], t)
            assert (found[t, j], amplified[t, j]) == (value, total)
            assert abs(Fraction(table[t, j]) - value) <= remainder[t, j]


@given(exact_series(least=3, most=9, columns=1), st.integers(0, 3), st.integers(0, 3), st.data())
@settings(max_examples=200)
def test_carrying_on_is_the_forward_series_of_the_last_readings_and_back_that_of_the_first(values, after, before, data):
    row = values[:, 0]
    k = data.draw(st.integers(0, len(row) - 1))
    carried = extend(row, after, before, order=k, largest=5)
    tail, front = forward_series(row[len(row) - k - 1 :]), forward_series(row[: k + 1])
    assert carried.values[before : before + len(row)].tolist() == row.tolist()
    assert carried.values[before + len(row) :].tolist() == [tail.at(k + 1 + i) for i in range(after)]
    assert carried.values[:before].tolist() == [front.at(-before + i) for i in range(before)]
    for i in range(after):
        low, high = tail.remainder(k + 1 + i, -5, 5)
        assert carried.remainder[before + len(row) + i] == high == -low


def test_a_polynomial_comes_back_whole_from_any_gaps_and_nothing_remains():
    true = np.array([[t**3 - 5 * t, 7 - t] for t in range(15)], dtype=object)
    for gaps in combinations(range(1, 9), 3):
        cells = true.copy()
        cells[list(gaps), 0] = None
        filled = fill(cells)
        assert filled.values.tolist() == true.tolist()
        assert not filled.remainder.any()
        assert filled.largest.tolist() == [0, 0]


def test_a_perturbed_reading_moves_the_value_by_no_more_than_the_amplification():
    random = np.random.default_rng(5)
    clean = np.sin(0.3 * np.arange(30))
    clean[[4, 5, 11, 20]] = np.nan
    base = fill(clean)
    for _ in range(50):
        error = random.uniform(-1e-3, 1e-3, 30)
        moved = fill(clean + error, largest=1.0)
        gaps = ~base.is_read
        assert (np.abs(moved.values - base.values)[gaps] <= 1e-3 * base.amplification[gaps] * (1 + 1e-9)).all()


def test_floats_are_filled_as_floats_and_the_seen_differences_state_the_remainder():
    true = np.exp(0.1 * np.arange(12))
    cells = true.copy()
    cells[[6, 9]] = np.nan
    filled = fill(cells, order=2)
    assert filled.values.dtype == filled.remainder.dtype == np.float64
    assert filled.largest == pytest.approx(np.abs(np.diff(true[:6], 3)).max())
    assert (np.abs(filled.values - true) <= filled.remainder * 2).all()
    assert filled.remainder[6] == pytest.approx(filled.largest * 2 * 1 * 1 / 6)
    assert (filled.values[filled.is_read] == true[filled.is_read]).all()


def test_nothing_to_fill_asks_for_nothing():
    filled = fill([1, 2], order=3)
    assert filled.values.tolist() == [1, 2]
    assert filled.is_read.all()


def test_results_cannot_be_written_to():
    filled = fill(["1", "", "3", "4", "5"], order=1)
    for array in (filled.values, filled.is_read, filled.remainder, filled.amplification):
        with pytest.raises(ValueError, match="read-only"):
            array[0] = 0


@pytest.mark.parametrize(
    ("ask", "message"),
    [
        (lambda: fill([np.nan, 1.0, 2.0]), r"a gap at row 0, outside the first and last reading \(1 and 2\)"),
        (lambda: fill([["1", "2"], ["3", ""]]), "a gap at row 1 of series 1, outside"),
        (lambda: fill([None, None]), "readings must hold something, got none"),
        (lambda: fill([1, None, 3], order=3, largest=1), "order 3 needs 4 readings, got 2 in series 0"),
        (
            lambda: fill([1, None, 3, 4], order=1),
            "no 3 readings in a row in series 0, .* largest=..., or a lower order",
        ),
        (lambda: fill([1, None, 3, 4], order=1, largest=-1), "largest must be one number of at least 0"),
        (lambda: fill([1, None, 3, 4], order=1, largest=0.5), "largest must be exact where the data are"),
        (lambda: fill([[1.0], [np.nan], [2.0]], order=1, largest=[np.nan]), "largest must be finite, got nan at 0"),
        (lambda: fill([1, None, 3], order=-1), "order must be a whole number, at least 0, got -1"),
        (lambda: fill([1.0, np.inf, 3.0]), "readings must be finite, got inf at 1"),
        (lambda: extend([1.0, np.nan, 3.0], 1), "readings must have no gap to be carried on, got one at 1"),
        (lambda: extend([1, 2, 3], -1), "after must be a whole number, at least 0, got -1"),
        (lambda: extend([1, 2], 1, order=1), "no 3 readings in a row in series 0"),
    ],
)
def test_what_cannot_be_used_is_refused_with_a_way_out(ask, message):
    with pytest.raises(InputError, match=message):
        ask()
