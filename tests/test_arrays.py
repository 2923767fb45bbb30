"""Input becomes a checked, read-only array."""

from fractions import Fraction

import numpy as np
import pytest

from dec.arrays import exact_array, float_array, frozen, index_array, number_array
from dec.errors import InputError


def test_frozen_arrays_cannot_be_written():
    array = frozen(np.zeros(3))
    with pytest.raises(ValueError, match="read-only"):
        array[0] = 1.0


@pytest.mark.parametrize("check", [index_array, float_array, number_array])
def test_what_comes_back_shares_nothing_with_the_callers_array(check):
    given = np.array([1, 2, 3])
    assert not np.shares_memory(check(given, "x"), given)


@pytest.mark.parametrize("dtype", [np.int8, np.uint16, np.uint64, ">i4", "<i8"])
def test_whole_numbers_of_any_width_and_byte_order_become_native_int64(dtype):
    array = index_array(np.array([1, 2], dtype), "x")
    assert array.dtype == np.dtype("=i8")
    assert array.tolist() == [1, 2]


def test_the_largest_integer_of_64_bits_is_kept_whether_it_came_signed_or_not():
    for dtype in (np.int64, np.uint64):
        given = np.array([2**63 - 1], dtype)
        assert index_array(given, "x").tolist() == number_array(given, "x").tolist() == [2**63 - 1]
        assert number_array(given, "x").dtype == np.int64


@pytest.mark.parametrize("empty", [[], (), np.array([]), np.array([], np.uint8)])
def test_an_empty_list_is_one_of_whole_numbers(empty):
    assert index_array(empty, "x").dtype == np.int64
    assert index_array(empty, "x").shape == (0,)


@pytest.mark.parametrize(
    ("values", "ndim", "message"),
    [
        ([1.0, 2.0], 1, r"x must hold whole numbers, got float64; convert it with .astype\(int\)"),
        (["1"], 1, "x must hold whole numbers, got text$"),
        ([True], 1, "x must hold whole numbers, got bool"),
        ([2**70], 1, "x must hold whole numbers, got object$"),
        ([2**63], 1, "x holds 9223372036854775808, which does not fit a 64-bit signed integer"),
        ([[1, 2], [3]], 1, "x must be a rectangular array of whole numbers"),
        ([[1, 2]], 1, r"x must have 1 axis, got shape \(1, 2\)"),
        ([1, 2], 2, r"x must have 2 axes, got shape \(2,\)"),
        (np.ma.array([1, 2], mask=[0, 1]), 1, "x must be a plain array, got a masked one"),
    ],
)
def test_what_is_no_array_of_whole_numbers_is_refused(values, ndim, message):
    with pytest.raises(InputError, match=message):
        index_array(values, "x", ndim=ndim)


@pytest.mark.parametrize(
    "values", [[1, 2.5], np.array([1, 2.5], np.float32), [1, Fraction(5, 2)], np.array([1, 2.5], ">f8")]
)
def test_real_numbers_of_any_kind_become_native_float64(values):
    array = float_array(values, "x")
    assert array.dtype == np.dtype("=f8")
    assert array.tolist() == [1.0, 2.5]


@pytest.mark.parametrize(
    ("values", "message"),
    [
        (["1.5"], "x must hold real numbers, got text"),
        ([1j], "x must hold real numbers, got complex128"),
        ([True], "x must hold real numbers, got bool"),
        ([None], "x must hold real numbers, got NoneType None at 0"),
        ([1, "2", None], "x must hold real numbers, got"),
        (np.array([1, "2"], object), "x must hold real numbers, got str '2' at 1"),
        ([10**400], "x holds a number beyond the range of float64"),
        ([1.0, np.nan], "x must be finite, got nan at 1"),
        ([[0, 1], [np.inf, 2]], r"x must be finite, got inf at \(1, 0\)"),
        (np.nan, "x must be finite, got nan$"),
    ],
)
def test_what_is_no_array_of_finite_real_numbers_is_refused(values, message):
    with pytest.raises(InputError, match=message):
        float_array(values, "x")


def test_nan_passes_where_it_may():
    assert np.isnan(float_array([1.0, np.nan], "x", finite=False)).tolist() == [False, True]


def test_exact_numbers_stay_python_objects():
    array = exact_array([np.int64(3), 2**80, Fraction(1, 3)], "x")
    assert array.tolist() == [3, 2**80, Fraction(1, 3)]
    assert [type(v) for v in array] == [int, int, Fraction]


@pytest.mark.parametrize("dtype", [np.int32, np.uint64, np.int8])
def test_an_empty_array_of_integers_is_int64(dtype):
    assert number_array(np.zeros(0, dtype), "x").dtype == np.int64
