"""Differences with step h, their inverse, and definite sums that telescope."""

from fractions import Fraction
from typing import Any

import numpy as np

from dec.arrays import AnyArray, ObjectArray
from dec.calculus.sums import Terms, exact_sum
from dec.errors import InputError
from dec.findings import Finding
from dec.steps.kinds import (
    LARGEST_INT,
    count_of,
    fitted,
    fractions_of,
    is_exact,
    largest,
    positive_step,
    refuse_few,
    series,
)

__all__ = ["antidifference", "check_telescoping", "definite_sum", "difference"]


def difference(values: Any, h: Any = 1, order: int = 1) -> AnyArray:
    """Difference quotients with step h, ``(f(x + h) - f(x)) / h``, taken `order` times.

    Parameters
    ----------
    values : array_like, shape (n,) or (n, m)
        f at places h apart. Floats, integers, Fractions or decimal text.
    h : number
        The step, in the unit of x. With 1 these are the plain forward differences.
    order : int
        How often.

    Returns
    -------
    array, shape (n - order,) or (n - order, m)
        float64 from floats, rounded at every step, nan where a nan enters. Exact from exact values: integers stay
        integers for h = 1 (int64 where no difference can leave it, else Python integers), Fractions otherwise. The
        unit is that of the values over that of h, `order` times.

    Raises
    ------
    InputError
        If there are not more rows than `order`, h is not positive, or h is a float and the values are exact.

    Notes
    -----
    Source: Noerlund, Vorlesungen ueber Differenzenrechnung, 1924, chapter 1; Graham, Knuth and Patashnik, Concrete
    Mathematics, 2nd ed. 1994, section 2.6.

    Examples
    --------
    >>> difference([41, 43, 47, 53, 61])
    array([2, 4, 6, 8])
    >>> difference(["0.1", "0.4"], h="0.5").tolist()
    [Fraction(3, 5)]
    """
    array, times = series(values, "values"), count_of(order, "order")
    step = positive_step(h, exact=is_exact(array))
    refuse_few(array, "values", times + 1)
    if array.dtype == np.int64 and largest(array) * 2**times > LARGEST_INT:
        array = array.astype(object)
    result: AnyArray = np.diff(array, n=times, axis=0)
    if not is_exact(array):
        return np.asarray(result / step**times)
    if step == 1 or not times:
        return result
    return np.asarray(result.astype(object) * (1 / Fraction(step) ** times))


def antidifference(values: Any, h: Any = 1, start: Any = 0) -> AnyArray:
    """The series whose difference quotients are the given ones: `start`, then h times the running sums.

    Parameters
    ----------
    values : array_like, shape (n,) or (n, m)
    h : number
        The step.
    start : number or array_like, shape (m,)
        The first value.

    Returns
    -------
    array, shape (n + 1,) or (n + 1, m)
        float64 from floats, rounded at every addition (`definite_sum` rounds once); exact from exact values.

    Raises
    ------
    InputError
        If h is not positive, `start` does not fit, or one of them is a float and the values are exact.

    Examples
    --------
    >>> antidifference([2, 4, 6, 8], start=41)
    array([41, 43, 47, 53, 61])
    """
    array = series(values, "values")
    exact = is_exact(array)
    step = positive_step(h, exact=exact)
    first = np.asarray(fitted(start, "start", exact=exact))
    if first.ndim > array.ndim - 1 or first.shape not in ((), array.shape[1:]):
        message = f"start must be one number or one for each of the columns {array.shape[1:]}, got shape {first.shape}"
        raise InputError(message)
    if not exact:
        rows = np.concatenate([np.broadcast_to(first, (1, *array.shape[1:])), array * step])
        return np.asarray(np.cumsum(rows, axis=0))
    narrow = array.dtype == np.int64 and isinstance(step, int) and first.dtype == np.int64
    if not (narrow and largest(array) * len(array) * step + largest(first) <= LARGEST_INT):
        array, first = array.astype(object), first.astype(object)
    rows = np.concatenate([np.broadcast_to(first, (1, *array.shape[1:])), array * step])
    return np.asarray(np.cumsum(rows, axis=0))


def definite_sum(values: Any, first: int = 0, last: int | None = None, h: Any = 1) -> Any:
    """The definite sum: h times the values at rows `first` up to, not including, `last`.

    Parameters
    ----------
    values : array_like, shape (n,) or (n, m)
    first, last : int
        Rows, 0 <= first <= last <= n; by default all.
    h : number
        The step.

    Returns
    -------
    int or Fraction from exact values; float from floats
        The exact sum of the floats, rounded once. One value a column as an array where there are columns.

    Raises
    ------
    InputError
        If the rows are not there, h does not fit, or a value that counts is nan or infinite.

    Notes
    -----
    The fundamental theorem: the definite sum of ``difference(f, h)`` is ``f[last] - f[first]``, exactly for exact
    values. For floats the differences are rounded before they are added; `check_telescoping` decides it unrounded.
    Source: Graham, Knuth and Patashnik, section 2.6.

    Examples
    --------
    >>> definite_sum([1, 4, 9, 16], 1, 3)
    13
    >>> definite_sum([0.1] * 10)
    1.0
    """
    array = series(values, "values")
    exact = is_exact(array)
    step = positive_step(h, exact=exact)
    start, stop = _rows(first, last, len(array))
    terms = Terms.of_chain(np.ones(stop - start, np.int64))
    part = array[start:stop]
    _refuse_not_finite(part, start)
    if part.ndim == 1:
        return _in_kind(exact_sum(terms, part), step, exact=exact)
    totals = [_in_kind(exact_sum(terms, column), step, exact=exact) for column in part.T]
    if not exact:
        return np.array(totals, dtype=np.float64)
    return _objects(totals)


def check_telescoping(values: Any, first: int = 0, last: int | None = None) -> Finding:
    """Whether the steps from row `first` to row `last` add up to end minus start, decided exactly.

    Parameters
    ----------
    values : array_like, shape (n,)
        Floats count as the dyadic fractions that they are.
    first, last : int
        Rows, 0 <= first <= last <= n - 1; by default the whole period.

    Returns
    -------
    Finding
        ``left`` adds the differences row by row, never rounded, ``right`` is end minus start.

    Raises
    ------
    InputError
        If the rows are not there, a value that counts is nan or infinite, or there are columns.

    Examples
    --------
    >>> check_telescoping([0.1, 1e16, 0.7]).difference
    Fraction(0, 1)
    """
    array = series(values, "values")
    if array.ndim != 1:
        message = f"one series at a time: values have {array.shape[1]} columns, give values[:, j]"
        raise InputError(message)
    refuse_few(array, "values", 1)
    start, stop = _rows(first, last, len(array) - 1)
    count = stop - start
    ends = start + np.arange(count)
    terms = Terms(
        np.ones(count, np.int64), 2 * np.arange(count + 1), np.stack([ends, ends + 1], axis=1).ravel(),
        np.tile(np.array([-1, 1], np.int8), count),
    )  # fmt: skip
    _refuse_not_finite(array[start : stop + 1], start)
    left = Fraction(exact_sum(terms, array))
    before, after = fractions_of(array[[start, stop]]).tolist()
    right = after - before
    return Finding("the steps add up to end minus start", left == right, left - right, Fraction(0), (), left, right)


def _rows(first: int, last: int | None, count: int) -> tuple[int, int]:
    start = count_of(first, "first")
    stop = count if last is None else count_of(last, "last")
    if not start <= stop <= count:
        message = f"first and last must be rows with first <= last <= {count}, got {start} and {stop}"
        raise InputError(message)
    return start, stop


def _refuse_not_finite(part: AnyArray, start: int) -> None:
    if not is_exact(part) and not np.isfinite(part).all():
        row, *column = np.argwhere(~np.isfinite(part))[0].tolist()
        where = f"row {start + row}" + (f" of series {column[0]}" if column else "")
        message = f"values must be finite to be added, got {part[row, *column]} at {where}"
        raise InputError(message)


def _in_kind(total: int | Fraction, step: Any, *, exact: bool) -> Any:
    if exact:
        return total * step
    try:
        return float(Fraction(total) * Fraction(step))
    except OverflowError:
        message = "the sum is beyond the range of float64 (1.8e308); give exact values, or values in a larger unit"
        raise InputError(message) from None


def _objects(values: list[Any]) -> ObjectArray:
    result = np.empty(len(values), dtype=object)
    result[:] = values
    return result
