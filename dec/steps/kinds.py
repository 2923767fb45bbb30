"""What callers give as series, steps and places: floats, or exact numbers, never an unnoticed mixture."""

from fractions import Fraction
from typing import Any, TypeAlias

import numpy as np

from dec.arrays import AnyArray, BoolArray, ObjectArray, float_array, number_array
from dec.calculus.columns import Column, Decimals
from dec.errors import InputError

__all__ = [
    "LARGEST_INT", "MOST_FACTORS", "Number", "count_of", "fitted", "fractions_of", "is_exact", "largest", "numbers",
    "plain", "positive_step", "refuse_few", "series", "series_with_gaps", "shown",
]  # fmt: skip

Number: TypeAlias = int | float | Fraction

LARGEST_INT = 2**63 - 1
MOST_FACTORS = 100_000  # of one product, or rows beyond a series: more would not end in reasonable time


def is_exact(values: AnyArray) -> bool:
    """Whether an array holds integers or Fractions."""
    return bool(values.dtype != np.float64)


def largest(values: AnyArray) -> int:
    """Largest size of the entries of an integer array, as a Python integer."""
    return max(-int(values.min()), int(values.max())) if values.size else 0


def numbers(values: Any, name: str) -> AnyArray:
    """Numbers of one kind, in any shape: float64, int64 or exact objects.

    Parameters
    ----------
    values : array_like of float, of int, of int and Fraction, or of decimal text; Column or Decimals
        nan stays nan.
    name : str
        What the caller calls it.

    Raises
    ------
    InputError
        If an entry is none of these, or is left empty among exact ones; the message names the first.

    Examples
    --------
    >>> numbers(["1.5", "2"], "flow").tolist()
    [Fraction(3, 2), Fraction(2, 1)]
    """
    array, present = _numbers_with_gaps(values, name)
    if is_exact(array) and not present.all():
        where = tuple(int(i) for i in np.argwhere(~present)[0])
        place = where[0] if len(where) == 1 else where
        message = f"{name} must have a value everywhere, got none at {place}; steps.fill fills gaps"
        raise InputError(message)
    return array


def series(values: Any, name: str) -> AnyArray:
    """As `numbers`, in shape (n,) or (n, m)."""
    array = numbers(values, name)
    _refuse_axes(array, name)
    return array


def series_with_gaps(values: Any, name: str) -> tuple[AnyArray, BoolArray]:
    """A series and where it has a value: nan, None and empty text are gaps.

    Raises
    ------
    InputError
        As `numbers`, or if a float is infinite or the shape is neither (n,) nor (n, m).

    Examples
    --------
    >>> series_with_gaps(["1.5", "", "2"], "flow")[1]
    array([ True, False,  True])
    """
    array, present = _numbers_with_gaps(values, name)
    _refuse_axes(array, name)
    if not is_exact(array) and np.isinf(array).any():
        where = np.argwhere(np.isinf(array))[0].tolist()
        message = f"{name} must be finite, got {array[tuple(where)]} at {where[0] if len(where) == 1 else tuple(where)}"
        raise InputError(message)
    return array, present


def plain(value: Any, name: str) -> Number:
    """One number as a Python int, Fraction or float; decimal text is exact.

    Raises
    ------
    InputError
        If it is no single finite number.

    Examples
    --------
    >>> plain("0.25", "h"), plain(np.int64(2), "h")
    (Fraction(1, 4), 2)
    """
    array = numbers([value], name) if isinstance(value, str) else numbers(value, name)
    if array.size != 1 or array.ndim > 1:
        message = f"{name} must be one number, got {value!r:.60}"
        raise InputError(message)
    number: Number = array.ravel().tolist()[0]
    if isinstance(number, float) and not np.isfinite(number):
        message = f"{name} must be finite, got {number}"
        raise InputError(message)
    return number


def fitted(value: Any, name: str, *, exact: bool, finite: bool = True) -> Any:
    """A number or an array as floats, or exact where the data are.

    Raises
    ------
    InputError
        If a float is given next to exact data, or one is nan or infinite where it must be finite.

    Examples
    --------
    >>> fitted(Fraction(1, 4), "h", exact=False)
    0.25
    """
    single = isinstance(value, str) or np.ndim(value) == 0
    given = plain(value, name) if single else numbers(value, name)
    if exact and (isinstance(given, float) or (isinstance(given, np.ndarray) and not is_exact(given))):
        found = f"got {given!r}" if single else "got floats"
        message = (
            f"{name} must be exact where the data are, an int, a Fraction or decimal text, {found}; or give floats for "
            "all of it"
        )
        raise InputError(message)
    if exact:
        return given
    if isinstance(given, np.ndarray):
        return float_array(given, name, finite=finite)
    try:
        return float(given)
    except OverflowError:
        message = f"{name} is beyond the range of float64 (1.8e308)"
        raise InputError(message) from None


def positive_step(h: Any, *, exact: bool) -> Any:
    """The step h, fitted to the data and positive."""
    step = fitted(h, "h", exact=exact)
    if np.ndim(step) or step <= 0:
        message = f"h must be one positive number, got {h!r:.60}"
        raise InputError(message)
    return step


def count_of(value: Any, name: str, least: int = 0) -> int:
    """A whole number that is at least `least`.

    Raises
    ------
    InputError
        If it is not.
    """
    if isinstance(value, bool) or not isinstance(value, int | np.integer) or value < least:
        message = f"{name} must be a whole number, at least {least}, got {value!r:.60}"
        raise InputError(message)
    return int(value)


def refuse_few(values: AnyArray, name: str, least: int) -> None:
    """Return quietly, or raise InputError where there are fewer than `least` rows."""
    if len(values) < least:
        message = f"{name} must have at least {least} rows for this, got {len(values)}"
        raise InputError(message)


def shown(number: Any) -> str:
    """A number as a message shows it: a Fraction as decimal text where it has one.

    Examples
    --------
    >>> shown(Fraction(-5, 8)), shown(Fraction(1, 3)), shown(2.5)
    ('-0.625', '1/3', '2.5')
    """
    if not isinstance(number, Fraction):
        return str(number)
    twos = (number.denominator & -number.denominator).bit_length() - 1
    fives, rest = 0, number.denominator >> twos
    while rest % 5 == 0:
        fives, rest = fives + 1, rest // 5
    places = max(twos, fives)
    if rest != 1 or not places:
        return str(number)
    whole, decimals = divmod(abs(number.numerator) * 10**places // number.denominator, 10**places)
    return f"{'-' if number < 0 else ''}{whole}.{decimals:0{places}d}"


def fractions_of(values: Any) -> ObjectArray:
    """Exact numbers, or the exact values of finite floats, as an object array of Fractions in the same shape."""
    array = np.asarray(values)
    result = np.empty(array.size, dtype=object)
    result[:] = [Fraction(value) for value in array.ravel().tolist()]
    return result.reshape(array.shape)


def _refuse_axes(array: AnyArray, name: str) -> None:
    if array.ndim not in (1, 2):
        message = f"{name} must have shape (n,) or (n, m), one row a step and one column a series, got {array.shape}"
        raise InputError(message)


def _numbers_with_gaps(values: Any, name: str) -> tuple[AnyArray, BoolArray]:
    if isinstance(values, Column):
        values = values.decimals()
    if isinstance(values, Decimals):
        return _in_units(values), np.asarray(values.present)
    if not isinstance(values, np.ndarray) or values.dtype.kind in "OUT":
        cells = _cells(values)
        if cells is not None:
            is_text = np.array([isinstance(cell, str) for cell in cells.ravel()], dtype=bool).reshape(cells.shape)
            empty = np.array([_is_empty(cell) for cell in cells.ravel()], dtype=bool).reshape(cells.shape)
            if is_text.any():
                return _read(cells, is_text, empty, name)
            if any(cell is None for cell in cells.ravel()):
                return _with_gaps(cells, empty, name)
    array = number_array(values, name)
    present = np.ones(array.shape, dtype=bool) if is_exact(array) else ~np.isnan(array)
    return array, present


def _cells(values: Any) -> ObjectArray | None:
    """Return the entries as objects where there are any that NumPy would not take for numbers."""
    if isinstance(values, np.ma.MaskedArray):
        return None
    try:
        cells = np.array(values, dtype=object)
    except ValueError:
        return None
    return cells if any(cell is None or isinstance(cell, str) for cell in cells.ravel()) else None


def _is_empty(cell: object) -> bool:
    return cell is None or cell == "" or (isinstance(cell, float) and np.isnan(cell))


def _with_gaps(cells: ObjectArray, empty: BoolArray, name: str) -> tuple[AnyArray, BoolArray]:
    kept = [cell for cell, gap in zip(cells.ravel(), empty.ravel(), strict=True) if not gap]
    if any(isinstance(cell, float) for cell in kept) or not kept:
        return number_array(np.where(empty, np.nan, cells).astype(np.float64), name), ~empty
    return number_array(np.where(empty, 0, cells), name), ~empty


def _read(cells: ObjectArray, is_text: BoolArray, empty: BoolArray, name: str) -> tuple[AnyArray, BoolArray]:
    odd = ~is_text & ~empty
    if odd.any():
        at = np.argwhere(odd)[0].tolist()
        message = f"{name} must be all text or all numbers, got {cells[tuple(at)]!r} among text at {at}"
        raise InputError(message)
    texts = np.where(empty, "", cells)
    if texts.ndim != 2:
        found = Column(name, texts.ravel(), "series").decimals()
        return _in_units(found).reshape(texts.shape), ~empty
    columns = [_in_units(Column(name, texts[:, j], f"series {j}").decimals()) for j in range(texts.shape[1])]
    return np.stack(columns, axis=1) if columns else texts.astype(np.int64), ~empty


def _in_units(decimals: Decimals) -> AnyArray:
    if not decimals.places:
        return np.asarray(decimals.integers)
    unit = 10**decimals.places
    result = np.empty(len(decimals.integers), dtype=object)
    result[:] = [Fraction(number, unit) for number in decimals.integers.tolist()]
    return result
