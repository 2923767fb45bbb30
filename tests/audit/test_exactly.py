"""Whole-number arithmetic on readings: one unit, no wrapping, and limits decided exactly."""

from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from dec.audit.exactly import as_floats, as_text, common_unit, net_inflow, within
from dec.calculus.columns import Column, Decimals


def decimals(*texts: str) -> Decimals:
    return Column("y", np.array(texts, dtype=object)).decimals()


def test_columns_of_different_places_share_the_finest_unit():
    (one, other), places = common_unit(decimals("1.5", ""), decimals("0.25"))
    assert (one.tolist(), other.tolist(), places) == ([150, 0], [25], 2)
    assert one.dtype == other.dtype == np.int64


def test_numbers_whose_sum_might_wrap_become_python_integers():
    small, places = common_unit(decimals(*["1152921504606846975"] * 3))
    assert (small[0].dtype, places) == (np.int64, 0)
    large, _ = common_unit(decimals(*["1152921504606846975"] * 5))
    assert large[0].dtype == object
    assert sum(large[0]) == 5 * 1152921504606846975
    fine, places = common_unit(decimals("9000000000000000000"), decimals("0.000000000000000001"))
    assert (fine[0].dtype, fine[0].tolist(), places) == (object, [9 * 10**36], 18)
    zero, _ = common_unit(decimals("0"), decimals("1e-300"))
    assert zero[0].tolist() == [0]


def test_net_inflow_is_positive_at_the_head():
    tail, head = np.array([0, 1, 2, 1]), np.array([1, 2, 2, 0])
    assert net_inflow(tail, head, np.array([5, 3, 7, 1]), 3).tolist() == [-4, 1, 3]
    large = np.array([10**30, 3, 7, 1], dtype=object)
    assert net_inflow(tail, head, large, 3).tolist() == [1 - 10**30, 10**30 - 4, 3]


@given(st.lists(st.integers(-(10**25), 10**25), max_size=6), st.integers(0, 30))
def test_floats_are_the_nearest_and_text_is_exact(numbers: list[int], places: int):
    array = np.array(numbers, dtype=object)
    assert as_floats(array, places).tolist() == [float(Fraction(n, 10**places)) for n in numbers]
    for n in numbers:
        assert Fraction(as_text(n, places)) == Fraction(n, 10**places)


@given(st.lists(st.integers(-(2**60), 2**60), max_size=6), st.integers(0, 30))
def test_machine_integers_give_the_nearest_floats_too(numbers: list[int], places: int):
    array = np.array(numbers, dtype=np.int64)
    assert as_floats(array, places).tolist() == [float(Fraction(n, 10**places)) for n in numbers]


@pytest.mark.parametrize(
    ("integers", "places", "limit", "expected"),
    [
        ([3, -3, 4], 1, 0.3, [True, True, False]),  # 0.3 as written, though the float lies below it
        ([1, 0], 400, 0.0, [False, True]),
        ([10**40, 10**40 + 1], 10, 1e30, [True, False]),
        ([2**62], 0, 1e300, [True]),
    ],
)
def test_a_limit_is_taken_as_written_in_decimal(integers: list[int], places: int, limit: float, expected: list[bool]):
    dtype = np.int64 if max(integers) < 2**63 else object
    assert within(np.array(integers, dtype=dtype), places, limit).tolist() == expected
