"""Falling powers, whose differences are what powers' derivatives are."""

from fractions import Fraction
from typing import Any

import numpy as np

from dec.arrays import AnyArray
from dec.errors import InputError
from dec.steps.kinds import LARGEST_INT, MOST_FACTORS, is_exact, largest, numbers, plain, positive_step

__all__ = ["falling_power"]


def falling_power(x: Any, m: int, h: Any = 1) -> Any:
    """The falling power ``x (x - h) ... (x - (m - 1) h)``, m factors.

    Parameters
    ----------
    x : number or array_like
        Floats, integers, Fractions or decimal text.
    m : int
        The exponent; a negative one gives ``1 / ((x + h) ... (x + |m| h))``.
    h : number
        The step.

    Returns
    -------
    number or array of the shape of x
        float64 from floats. Exact from exact x: int64 from int64 where no product can leave it, else Python integers;
        Fractions where h or x is one or m is negative.

    Raises
    ------
    InputError
        If m is no whole number, h does not fit, or a factor below the line is zero.

    Notes
    -----
    Its difference quotient with step h is m times the falling power of exponent m - 1, and the product of the powers
    m of x and n of x - m h is the power m + n. Source: Graham, Knuth and Patashnik, Concrete Mathematics, 2nd ed.
    1994, section 2.6, there for h = 1.

    Examples
    --------
    >>> falling_power(5, 3), falling_power(0, -2), falling_power("0.5", 2)
    (60, Fraction(1, 2), Fraction(-1, 4))
    """
    if isinstance(m, bool) or not isinstance(m, int | np.integer):
        message = f"m must be a whole number, got {m!r:.60}"
        raise InputError(message)
    if abs(m) > MOST_FACTORS:
        message = f"m must be at most {MOST_FACTORS:,}, got {m}; so many factors would take too long"
        raise InputError(message)
    single = isinstance(x, str) or np.ndim(x) == 0
    array = np.asarray(plain(x, "x")) if single else numbers(x, "x")
    if single and array.dtype.kind in "iu":
        array = array.astype(object)  # a Python int has no end
    step = positive_step(h, exact=is_exact(array))
    result = _product(array, int(m), step)
    return result.item() if single else result


def _product(x: AnyArray, m: int, step: Any) -> AnyArray:
    factors = [-k * step for k in range(m)] if m >= 0 else [k * step for k in range(1, -m + 1)]
    if x.dtype == np.int64:
        reach = largest(x) + abs(m) * step
        if not isinstance(step, int) or m < 0 or max(reach, 1) ** max(m, 1) > LARGEST_INT:
            x = x.astype(object)
    result: AnyArray = np.ones(x.shape, dtype=np.int64).astype(x.dtype)
    for shift in factors:
        result = np.asarray(result * (x + shift), dtype=x.dtype)
    if m >= 0:
        return result
    if (result == 0).any():
        at = x.ravel().tolist()[int(np.argmax((result == 0).ravel()))]
        message = f"the falling power {m} of {at} with step {step} divides by zero"
        raise InputError(message)
    if result.dtype == object:
        return np.asarray(np.full(result.shape, Fraction(1), dtype=object) / result, dtype=object)
    return np.asarray(1.0 / result)
