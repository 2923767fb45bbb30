"""Columns: numbers as they were written."""

from decimal import Decimal
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from dec.calculus.columns import Column
from dec.errors import InputError


def column(*cells, decimal="."):
    return Column("flow", np.array(cells, dtype=object), "edges.csv", np.arange(2, 2 + len(cells)), decimal)


def test_numbers_are_read_as_floats_and_empty_cells_as_nan():
    values = column("1.50", "", "-2", "+.5", "3.", "1e-3", "007").numbers()
    assert values[[0, 2, 3, 4, 5, 6]].tolist() == [1.5, -2.0, 0.5, 3.0, 0.001, 7.0]
    assert np.isnan(values).tolist() == [False, True] + [False] * 5
    assert not values.flags.writeable


def test_decimals_are_whole_numbers_of_the_finest_unit_written():
    found = column("1.50", "", "-2", "0.125", "3e2").decimals()
    assert (found.integers.tolist(), found.places) == ([1500, 0, -2000, 125, 300000], 3)
    assert found.present.tolist() == [True, False, True, True, True]
    assert found.integers.dtype == np.int64


def test_decimals_that_int64_does_not_hold_are_python_integers():
    found = column("12345678901234567890", "0.5").decimals()
    assert found.integers.tolist() == [123456789012345678900, 5]


def test_a_decimal_comma_is_read_only_where_it_is_asked_for():
    assert column("1,5", "-0,25", decimal=",").numbers().tolist() == [1.5, -0.25]
    assert column("1,5", decimal=",").decimals().integers.tolist() == [15]
    for cells, decimal in ((("1,5",), "."), (("1.234",), ","), (("1.234,5",), ","), (("1,234.5",), ".")):
        with pytest.raises(InputError, match=r"edges.csv line 2: flow .* can be read two ways"):
            column(*cells, decimal=decimal).numbers()


@pytest.mark.parametrize(
    "cell", ["abc", "1.2.3", "nan", "inf", "-Infinity", "1_000", "0x10", "1e", "--1", "1 2", "١٢", "½"]
)
def test_text_that_is_no_plain_number_is_refused_with_its_line(cell):
    for read in (column("1", cell).numbers, column("1", cell).decimals):
        with pytest.raises(InputError, match=r"edges.csv line 3: flow") as caught:
            read()
        assert "\n" not in str(caught.value)


def test_a_number_beyond_float64_is_refused_with_its_line():
    with pytest.raises(InputError, match=r"edges.csv line 3: flow must be finite, got '1e999'"):
        column("1", "1e999").numbers()


def test_columns_of_floats_and_integers_need_no_text():
    floats = Column("flow", np.array([0.1, np.nan, 2.5]))
    assert floats.present().tolist() == [True, False, True]
    assert floats.decimals().integers.tolist() == [1, 0, 25]
    integers = Column("flow", np.array([3, -4]))
    assert integers.numbers().tolist() == [3.0, -4.0]
    assert (integers.decimals().integers.tolist(), integers.decimals().places) == ([3, -4], 0)
    with pytest.raises(InputError, match="table row 1: flow must be finite, got inf"):
        Column("flow", np.array([1.0, np.inf])).numbers()


def test_flags_are_yes_or_no_in_the_usual_words():
    yes, no = ["1", "yes", "TRUE", "y", " x "], ["0", "no", "False", "n", ""]
    assert column(*yes, *no).flags().tolist() == [True] * 5 + [False] * 5
    assert Column("open", np.array([1, 0])).flags().tolist() == [True, False]
    with pytest.raises(InputError, match=r"edges.csv line 2: flow must be yes or no .* got 'maybe'"):
        column("maybe").flags()


@given(
    st.lists(
        st.decimals(allow_nan=False, allow_infinity=False, places=6, min_value=-(10**9), max_value=10**9), max_size=20
    )
)
@settings(deadline=None)
def test_decimals_have_exactly_the_value_of_the_text(numbers):
    found = column(*map(str, numbers)).decimals()
    assert [Fraction(int(i), 10**found.places) for i in found.integers] == [Fraction(Decimal(n)) for n in numbers]


@given(st.lists(st.floats(allow_nan=False, allow_infinity=False), max_size=20))
@settings(deadline=None)
def test_floats_count_as_the_decimal_that_python_prints_and_text_reads_back_as_the_same_float(values):
    texts = [repr(v) for v in values]
    assert column(*texts).numbers().tolist() == values
    found = Column("flow", np.array(values, dtype=float)).decimals()
    assert [Fraction(int(i), 10**found.places) for i in found.integers] == [Fraction(Decimal(t)) for t in texts]
