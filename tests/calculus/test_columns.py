"""Columns: what counts as a number, digit for digit, and how anything else is refused."""

from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from dec.calculus.columns import Column, Decimals, reads_as_number
from dec.errors import InputError


def column(*cells: str, decimal: str = ".", lines=None) -> Column:
    return Column("flow", np.array(cells, dtype=object), "edges.csv", lines, decimal)


def exact(decimals: Decimals) -> list[Fraction]:
    return [Fraction(int(i), 10**decimals.places) for i in decimals.integers]


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("12", 12), ("-0.5", "-1/2"), ("+.5", "1/2"), ("5.", 5), ("007", 7), ("1e3", 1000), ("1.25E-2", "1/80"),
        (" 7 ", 7), ("\u00a07", 7), ("-0", 0), ("12345678901234567890.1", "123456789012345678901/10"), ("0e5", 0),
    ],
)  # fmt: skip
def test_a_number_is_read_as_float_and_exactly(text: str, value: int | str):
    assert column(text).numbers().tolist() == [float(Fraction(value))]
    assert exact(column(text).decimals()) == [Fraction(value)]


@pytest.mark.parametrize(
    "text",
    [
        "nan", "NaN", "inf", "-Infinity", "1_000", "\uff11\uff12", "\u0663", "\u00b2", "\u00bd", "  ", "+-1", "--1",
        "0x10", "1e", "e5", ".", "+", "1 2", "1.2.3", "1e5.5", "1j", "True", "None", "5\0", "1d5", "#VALUE!",
        "1'000", "\u22125",
    ],
)  # fmt: skip
def test_anything_else_is_refused_with_its_line_and_a_way_out(text: str):
    found = column("1.25", text, lines=np.array([2, 7]))
    for read in (found.numbers, found.decimals):
        with pytest.raises(InputError, match=r"^edges\.csv line 7: flow .* is not a number; leave the cell empty"):
            read()


@pytest.mark.parametrize("text", ["9" * 401, "0." + "1" * 5000, "0" * 5000 + "1", "1" * 100_000 + "x"])
def test_a_number_of_many_digits_is_refused_at_once_and_not_printed_whole(text: str):
    with pytest.raises(InputError, match=rf"has {len(text)} characters; numbers of at most 400") as caught:
        column(text).decimals()
    assert len(str(caught.value)) < 200


@pytest.mark.parametrize("text", ["1e400", "-1e999", "1" + "0" * 350])
def test_a_number_beyond_all_floats_is_refused(text: str):
    with pytest.raises(InputError, match="row 0: flow must be finite, got"):
        column(text).numbers()


@pytest.mark.parametrize("text", ["0e999999999", "1e-999999999", "1e-401"])
def test_an_exponent_that_would_fill_the_memory_is_refused(text: str):
    with pytest.raises(InputError, match="is out of range: at most 400 decimal places or final zeros"):
        column("1", text).decimals()


def test_the_wrong_number_is_blamed_and_not_a_right_one_before_it():
    with pytest.raises(InputError, match="row 2: flow 'x'"):
        column(" 1.5 ", "2e1", "x").numbers()


@pytest.mark.parametrize(("text", "decimal"), [("1,5", "."), ("1.5", ","), ("1.234,5", ","), ("1,234.5", ".")])
def test_a_number_with_the_other_decimal_sign_is_refused(text: str, decimal: str):
    with pytest.raises(InputError, match=r"row 1: flow .* can be read two ways; the decimal sign is"):
        column("7", text, decimal=decimal).numbers()


def test_a_decimal_comma_is_read_where_it_was_said():
    found = column("1,50", "", "-,25e1", decimal=",")
    np.testing.assert_array_equal(found.numbers(), [1.5, np.nan, -2.5])
    assert exact(found.decimals()) == [Fraction(3, 2), 0, Fraction(-5, 2)]


def test_an_empty_cell_is_no_reading():
    found = column("0", "", "1.5")
    assert found.present().tolist() == [True, False, True]
    assert found.decimals().present.tolist() == [True, False, True]
    assert column("", "").decimals().integers.tolist() == [0, 0]


def test_places_are_those_of_the_finest_reading_and_large_integers_do_not_wrap():
    found = column("1.5", "2", "0.125", "3e2").decimals()
    assert (found.places, found.integers.tolist(), found.integers.dtype) == (3, [1500, 2000, 125, 300000], np.int64)
    large = column("9223372036854775807", "0.1").decimals()
    assert (large.places, large.integers.dtype) == (1, object)
    assert large.integers.tolist() == [92233720368547758070, 1]


@given(st.lists(st.from_regex(r"[+-]?[0-9]{1,22}(\.[0-9]{0,22})?(e[+-]?[0-9]{1,2})?", fullmatch=True), max_size=5))
def test_plain_and_other_numbers_side_by_side_are_read_as_one_by_one(texts: list[str]):
    found = column(*texts, "").decimals()
    assert exact(found) == [*map(Fraction, texts), 0]
    assert (found.integers.dtype == np.int64) == all(abs(int(i)) < 2**62 for i in found.integers)
    assert column(*texts, "").numbers().tolist()[:-1] == [float(text) for text in texts]


@pytest.mark.parametrize("size", [2**61 - 1, 2**61, 2**62 - 1, 2**62, 2**63])
def test_integers_are_of_64_bits_just_while_they_stay_below_2_to_the_62(size: int):
    for cells in (column(str(size), "-1"), column(str(-size), "1e0")):
        found = cells.decimals().integers
        assert (abs(found.tolist()[0]), found.dtype == np.int64) == (size, size < 2**62)


def test_numbers_that_came_as_numbers_stay_what_they_are():
    whole = Column("n", np.array([2**63 - 1, -(2**63)]))
    assert whole.decimals().integers.tolist() == [2**63 - 1, -(2**63)]
    floats = Column("n", np.array([0.1, np.nan, 5e-324]))
    assert exact(floats.decimals()) == [Fraction("0.1"), 0, Fraction("5e-324")]
    assert floats.present().tolist() == [True, False, True]
    with pytest.raises(InputError, match="table row 1: n must be finite, got inf"):
        Column("n", np.array([1.0, np.inf])).numbers()


@given(st.lists(st.decimals(allow_nan=False, allow_infinity=False, min_value=-(10**30), max_value=10**30, places=7)))
def test_decimals_are_exact_and_floats_the_nearest(values):
    found = column(*[str(value) for value in values])
    assert exact(found.decimals()) == [Fraction(value) for value in values]
    assert found.numbers().tolist() == [float(value) for value in values]


@given(st.text(alphabet="0123456789.,+-eE _\uff11", max_size=8))
def test_what_reads_as_a_number_is_what_float_reads_in_plain_digits(text: str):
    if reads_as_number(text):
        assert "_" not in text
        assert text.isascii()
        float(text)


def test_yes_and_no_in_many_spellings():
    assert column("yes", "No", " X ", "TRUE", "", "0", "1", "n").flags().tolist() == [1, 0, 1, 1, 0, 0, 1, 0]
    assert Column("open", np.array([1.0, 0.0, np.nan])).flags().tolist() == [True, False, False]
    for cells in (np.array(["1", "maybe"], dtype=object), np.array([0, 2])):
        with pytest.raises(InputError, match="row 1: open must be yes or no"):
            Column("open", cells).flags()


def test_what_a_column_gives_cannot_be_changed():
    found = column("1", "2")
    with pytest.raises(ValueError, match="read-only"):
        found.numbers()[0] = 5
    with pytest.raises(ValueError, match="read-only"):
        found.decimals().integers[0] = 5
