"""Input becomes a checked, read-only array here, and nowhere else."""

from collections.abc import Sequence
from fractions import Fraction
from numbers import Real
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from dec.errors import InputError

__all__ = [
    "AnyArray", "BoolArray", "FloatArray", "IntArray", "ObjectArray", "SignArray",
    "exact_array", "float_array", "frozen", "index_array", "number_array",
]  # fmt: skip

AnyArray = NDArray[Any]
BoolArray = NDArray[np.bool_]
FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]
ObjectArray = NDArray[np.object_]
SignArray = NDArray[np.int8]

_LARGEST_INT = 2**63 - 1
_WHOLE = {
    "f": "; convert it with .astype(int) if that is meant",
    "b": "; numpy.flatnonzero turns a mask into the numbers it marks",
}


def frozen(array: AnyArray) -> AnyArray:
    """Return the array itself, made read-only."""
    array.setflags(write=False)
    return array


def index_array(values: ArrayLike, name: str, *, ndim: int | None = 1) -> IntArray:
    """Whole numbers as an int64 array.

    Parameters
    ----------
    values : array_like of int
        Signed or unsigned integers of any width; floats are refused even where they are whole.
    name : str
        What the caller calls it; opens the message of an error.
    ndim : int or None
        Number of axes it must have; None takes any.

    Returns
    -------
    int64 array, a copy that shares nothing with the caller's

    Raises
    ------
    InputError
        If the values are not whole numbers, are masked, do not fit int64, or have the wrong number of axes.

    Examples
    --------
    >>> index_array([3, 1, 2], "tail")
    array([3, 1, 2])
    """
    array = _as_array(values, name, "whole numbers")
    if array.size == 0 and array.dtype == np.float64:  # what NumPy makes of an empty list
        array = array.astype(np.int64)
    if array.dtype.kind not in "iu":
        way_out = _WHOLE.get(array.dtype.kind, "")
        message = f"{name} must hold whole numbers, got {_kind(array)}{way_out}"
        raise InputError(message)
    _refuse_other_axes(array, name, ndim)
    if array.dtype == np.uint64 and array.size and int(array.max()) > _LARGEST_INT:
        message = f"{name} holds {array.max()}, which does not fit a 64-bit signed integer"
        raise InputError(message)
    return np.array(array, dtype=np.int64)


def float_array(values: ArrayLike, name: str, *, ndim: int | None = None, finite: bool = True) -> FloatArray:
    """Real numbers as a float64 array.

    Parameters
    ----------
    values : array_like of int or float
        In the caller's unit, which is kept.
    name : str
        What the caller calls it.
    ndim : int or None
        Number of axes it must have; None takes any.
    finite : bool
        Whether nan and infinity are refused.

    Returns
    -------
    float64 array, a copy

    Raises
    ------
    InputError
        If the values are not real numbers (text that looks like one is none), are masked, have the wrong number of
        axes, or are not finite where they must be; the message names the first.

    Examples
    --------
    >>> float_array([1, 2.5], "flow")
    array([1. , 2.5])
    """
    raw = _as_array(values, name, "real numbers")
    if raw.dtype.kind not in "iufO":
        message = f"{name} must hold real numbers, got {_kind(raw)}"
        raise InputError(message)
    if raw.dtype == object:
        for index, value in enumerate(raw.ravel()):
            if isinstance(value, bool) or not isinstance(value, Real):
                message = f"{name} must hold real numbers, got {type(value).__name__} {value!r} at {index}"
                raise InputError(message)
    try:
        array = np.array(raw, dtype=np.float64)
    except OverflowError:
        message = f"{name} holds a number beyond the range of float64 (1.8e308)"
        raise InputError(message) from None
    _refuse_other_axes(array, name, ndim)
    if finite:
        refuse_not_finite(array, name)
    return array


def refuse_not_finite(array: FloatArray, name: str) -> None:
    """Return quietly, or raise InputError naming the first nan or infinity."""
    bad = ~np.isfinite(array)
    if bad.any():
        where = tuple(int(i) for i in np.argwhere(bad)[0])
        place = f" at {where[0] if len(where) == 1 else where}" if where else ""
        message = f"{name} must be finite, got {array[where]}{place}"
        raise InputError(message)


def exact_array(values: Sequence[Any] | AnyArray, name: str) -> ObjectArray:
    """Exact numbers (int and Fraction) as an object array, a copy.

    Raises
    ------
    InputError
        If an entry is neither an int nor a Fraction; the message names the first.

    Examples
    --------
    >>> exact_array([1, Fraction(1, 3)], "height").tolist()
    [1, Fraction(1, 3)]
    """
    array = np.array(values, dtype=object)
    flat = array.ravel()
    for index, value in enumerate(flat):
        if isinstance(value, np.integer):
            flat[index] = int(value)
        elif isinstance(value, bool) or not isinstance(value, int | Fraction):
            message = f"{name} must hold int or Fraction objects, got {type(value).__name__} {value!r} at {index}"
            raise InputError(message)
    return flat.reshape(array.shape)


def number_array(values: ArrayLike, name: str) -> AnyArray:
    """Numbers as float64, int64 or exact objects, whichever the input is.

    Parameters
    ----------
    values : array_like
        Floats up to 64 bits become float64, integers int64, and int or Fraction objects stay exact; integers that
        int64 does not hold become Python integers. One float among integers in a list makes all of them floats.
    name : str
        What the caller calls it.

    Returns
    -------
    float64, int64 or object array, a copy

    Raises
    ------
    InputError
        If the values are of any other kind (text, complex, bool, Decimal).

    Examples
    --------
    >>> number_array([1, 2], "w").dtype, number_array([1, Fraction(1, 2)], "w").dtype
    (dtype('int64'), dtype('O'))
    """
    array = _as_array(values, name, "numbers")
    if array.dtype.kind == "f" and array.dtype.itemsize > 8:
        message = f"{name} holds {array.dtype} numbers, wider than float64; give them as Fraction objects to stay exact"
        raise InputError(message)
    if array.dtype.kind == "f":
        # NumPy turns a list of integers into floats, and so rounds them, when int64 does not hold them all
        if array is not values and array.size and np.abs(array).max() >= 2.0**63:
            given = np.array(values, dtype=object)
            if all(isinstance(value, int | np.integer) for value in given.ravel()):
                return exact_array(given, name)
        return np.array(array, dtype=np.float64)
    if array.dtype.kind in "iu":
        wide = array.dtype == np.uint64 and array.size and int(array.max()) > _LARGEST_INT
        return array.astype(object) if wide else np.array(array, dtype=np.int64)
    if array.dtype == object:
        return exact_array(array, name)
    message = f"{name} must hold real numbers, got {_kind(array)}"
    raise InputError(message)


def _as_array(values: ArrayLike, name: str, what: str) -> AnyArray:
    if isinstance(values, np.ma.MaskedArray):
        message = f"{name} must be a plain array, got a masked one; fill the masked entries or leave them out first"
        raise InputError(message)
    try:
        return np.asarray(values)
    except ValueError as error:
        message = f"{name} must be a rectangular array of {what}: {error}"
        raise InputError(message) from None


def _kind(array: AnyArray) -> str:
    return "text" if array.dtype.kind in "US" else str(array.dtype)


def _refuse_other_axes(array: AnyArray, name: str, ndim: int | None) -> None:
    if ndim is not None and array.ndim != ndim:
        message = f"{name} must have {ndim} {'axis' if ndim == 1 else 'axes'}, got shape {array.shape}"
        raise InputError(message)
