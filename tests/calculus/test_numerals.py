"""Plain decimals read all at once: the same numbers as one by one, and nothing taken for one that is none."""

import re
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from dec.calculus import numerals
from dec.calculus.numerals import plain_decimals

PLAIN = re.compile(r"[+-]?([0-9]+(\.[0-9]*)?|\.[0-9]+)")


def texts(*values: str) -> np.ndarray:
    return np.array(values, dtype=object)


def by_hand(text: str) -> bool:
    return PLAIN.fullmatch(text) is not None and sum(map(str.isdigit, text)) <= 18


@given(st.lists(st.text(alphabet="0123456789.,+-eE \0\uff11\u00b2", max_size=22), max_size=6))
def test_plain_is_what_the_pattern_says_and_the_number_is_exact(words: list[str]):
    """Against a regular expression and fractions, text by text: the slow, obvious reference."""
    found = plain_decimals(np.array([*words, ""], dtype=object)[:-1], ".")
    assert found.is_plain.tolist() == [by_hand(word) for word in words]
    for k in np.flatnonzero(found.is_plain).tolist():
        assert Fraction(int(found.integers[k]), 10 ** int(found.places[k])) == Fraction(words[k].rstrip("."))
        assert found.is_negative[k] == words[k].startswith("-")
    assert not found.integers[~found.is_plain].any()


@given(st.lists(st.decimals(allow_nan=False, allow_infinity=False, min_value=-(10**12), max_value=10**12, places=6)))
def test_floats_are_the_nearest_where_they_are_said_to_be(values):
    words = [f"{value:f}" for value in values]
    found = plain_decimals(np.array([*words, ""], dtype=object)[:-1], ".")
    for word, value, exact in zip(words, found.floats.tolist(), found.is_exact.tolist(), strict=True):
        assert not exact or (value == float(word) and str(value)[0] == str(float(word))[0])


def test_the_edges_of_what_is_plain():
    found = plain_decimals(texts("9" * 18, "9" * 19, "-0", ".5", "5.", ".", "+", "", "1.2.3", "5\0", "\x005"), ".")
    assert found.is_plain.tolist() == [1, 0, 1, 1, 1, 0, 0, 0, 0, 0, 0]
    assert found.integers[0] == 10**18 - 1
    assert str(found.floats[2]) == "-0.0"
    assert not found.is_exact[0]


def test_only_the_decimal_sign_that_was_said_is_one():
    assert plain_decimals(texts("1,5", "1.5"), ",").is_plain.tolist() == [True, False]


@pytest.mark.parametrize("at_once", [1, 2, 3])
def test_many_texts_are_read_in_parts(monkeypatch: pytest.MonkeyPatch, at_once: int):
    monkeypatch.setattr(numerals, "_AT_ONCE", at_once)
    words = texts("1", "-2.50", "", "x", "\u00e9", "1e3", "30.125")
    found = plain_decimals(words, ".")
    assert found.integers.tolist() == [1, -250, 0, 0, 0, 0, 30125]
    assert found.places.tolist() == [0, 2, 0, 0, 0, 0, 3]
    assert found.is_plain.tolist() == [1, 1, 0, 0, 0, 0, 1]
