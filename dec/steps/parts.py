"""Summation by parts."""

from fractions import Fraction
from typing import Any, NamedTuple

import numpy as np

from dec.arrays import AnyArray
from dec.errors import InputError
from dec.findings import Finding
from dec.steps.kinds import fractions_of, is_exact, refuse_few, series

__all__ = ["Parts", "check_summation_by_parts", "summation_by_parts"]


class Parts(NamedTuple):
    """The two parts of a sum of u times the differences of v: the sum is `boundary` minus `rest`.

    Attributes
    ----------
    boundary : number, or array of shape (m,)
        u v at the last row minus u v at the first.
    rest : number, or array of shape (m,)
        The sum of v one row on times the differences of u.
    """

    boundary: Any
    rest: Any


def summation_by_parts(u: Any, v: Any) -> Parts:
    """The sum of ``u[i] * (v[i + 1] - v[i])`` in two parts, its ends and a sum over the differences of u.

    Parameters
    ----------
    u, v : array_like, shape (n,) or (n, m)
        Of one shape, both exact or both floats.

    Returns
    -------
    Parts
        Exact from exact values, rounded from floats.

    Raises
    ------
    InputError
        If shapes or kinds differ, or there is no row.

    Notes
    -----
    Source: Abel 1826; Graham, Knuth and Patashnik, Concrete Mathematics, 2nd ed. 1994, section 2.6.

    Examples
    --------
    >>> summation_by_parts([0, 1, 2, 3], [1, 2, 4, 8])
    Parts(boundary=24, rest=14)
    """
    left, right = _both(u, v)
    ends = left[-1] * right[-1] - left[0] * right[0]
    rest = (right[1:] * np.diff(left, axis=0)).sum(axis=0)
    return Parts(ends, rest)


def check_summation_by_parts(u: Any, v: Any) -> Finding:
    """Whether summation by parts holds of two series, decided exactly whatever the numbers are.

    Parameters
    ----------
    u, v : array_like, shape (n,)

    Returns
    -------
    Finding
        ``left`` adds u times the differences of v, ``right`` is the boundary minus the rest; never rounded.

    Raises
    ------
    InputError
        As `summation_by_parts`, or if a value is nan or infinite or there are columns.

    Examples
    --------
    >>> check_summation_by_parts([0.1, 0.2, 1e16], [3.0, 0.7, 1e-9]).holds
    True
    """
    left, right = _both(u, v)
    if left.ndim != 1:
        message = f"one series at a time: there are {left.shape[1]} columns, give u[:, j] and v[:, j]"
        raise InputError(message)
    for array, name in ((left, "u"), (right, "v")):
        if not is_exact(array) and not np.isfinite(array).all():
            at = int(np.argmax(~np.isfinite(array)))
            message = f"{name} must be finite, got {array[at]} at {at}"
            raise InputError(message)
    a, b = fractions_of(left), fractions_of(right)
    direct = Fraction((a[:-1] * np.diff(b)).sum())
    parts = summation_by_parts(a, b)
    other = Fraction(parts.boundary - parts.rest)
    name = "the sum is the boundary minus the sum by parts"
    return Finding(name, direct == other, direct - other, Fraction(0), (), direct, other)


def _both(u: Any, v: Any) -> tuple[AnyArray, AnyArray]:
    left, right = series(u, "u"), series(v, "v")
    if left.shape != right.shape:
        message = f"u and v must have one shape, got {left.shape} and {right.shape}"
        raise InputError(message)
    if is_exact(left) != is_exact(right):
        message = f"u and v must both be exact or both be floats, got {left.dtype} and {right.dtype}"
        raise InputError(message)
    refuse_few(left, "u", 1)
    return (left.astype(object), right.astype(object)) if is_exact(left) else (left, right)
