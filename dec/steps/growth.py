"""Growth with step h, and its cosine and sine: the solutions of the plainest difference equations."""

from fractions import Fraction
from typing import Any

import numpy as np

from dec.arrays import AnyArray, FloatArray
from dec.errors import InputError
from dec.steps.kinds import MOST_FACTORS, fitted, is_exact, numbers, plain, positive_step

__all__ = ["cosine", "growth", "sine"]

_WHOLE = 4 * 2.0**-52  # x / h counts as whole within its own rounding


def growth(rate: Any, x: Any, h: Any = 1) -> Any:
    """Growth at a rate with step h, ``(1 + rate * h) ** (x / h)``: its difference quotient is `rate` times itself.

    Parameters
    ----------
    rate : number or array_like
        Per unit of x; negative for decay.
    x : number or array_like
        In the unit of h. `rate` and x spread over each other as NumPy arrays do.
    h : number
        The step; exact where rate and x are.

    Returns
    -------
    number or array
        Fractions from exact rate and x, for whole numbers of steps. float64 from floats, of a relative error of a few
        times 2**-52 (1 + |log of the result|) where 1 + rate h is not close to zero.

    Raises
    ------
    InputError
        If rate and x are not both exact or both floats, exact x is no whole number of steps, x / h is no whole number
        and 1 + rate h negative, or zero would be divided by.

    Notes
    -----
    As h goes to 0 it becomes exp(rate x). Source: Graham, Knuth and Patashnik, Concrete Mathematics, 2nd ed. 1994,
    section 2.6, there for h = 1 and rate 1.

    Examples
    --------
    >>> growth("0.05", 2), growth(1, [0, 1, 2, 3]).tolist()
    (Fraction(441, 400), [Fraction(1, 1), Fraction(2, 1), Fraction(4, 1), Fraction(8, 1)])
    """
    rates, places, step = _given(rate, "rate", x, h)
    if is_exact(rates):
        return _spread(lambda a, n: _power(1 + a * Fraction(step), n), rates, _whole_steps(places, step))
    base, n = np.broadcast_arrays(1 + rates * step, places / step)
    nearest = np.rint(n)
    with np.errstate(invalid="ignore"):  # of infinite x
        is_whole = np.abs(n - nearest) <= _WHOLE * np.abs(n)
        is_odd = nearest % 2 == 1
    _refuse_where((base < 0) & ~is_whole, n, "x / h must be a whole number where 1 + rate h is negative")
    _refuse_where((base == 0) & (n < 0), n, "x / h must not be negative where 1 + rate h is zero")
    sign = np.where((base < 0) & is_odd, -1.0, 1.0)
    near_one = np.abs(rates * step) < 0.5
    small = np.log1p(np.where(near_one, rates * step, 0.0))  # keeps the digits that 1 + rate h would lose
    logs = np.where(near_one, small, np.log(np.abs(np.where(base == 0, 1.0, base))))
    result = sign * np.exp(np.where(base < 0, nearest, n) * logs)
    return _as_given(np.where(base == 0, np.where(n == 0, 1.0, 0.0), result))


def cosine(frequency: Any, x: Any, h: Any = 1) -> Any:
    """The cosine with step h: the real part of growth at the imaginary rate ``i * frequency``.

    Parameters
    ----------
    frequency : number or array_like
        Radians per unit of x.
    x, h : number or array_like, number
        As in `growth`.

    Returns
    -------
    number or array
        Fractions from exact frequency and x, for whole numbers of steps; float64 from floats.

    Raises
    ------
    InputError
        As `growth`.

    Notes
    -----
    With step h its difference quotient is -frequency times the sine, and that of the sine frequency times the cosine.
    The squares of both add up to (1 + frequency**2 h**2)**(x / h), not to 1: this oscillation grows, and does so the
    less the smaller h is. `leapfrog` has one that does not grow.

    Examples
    --------
    >>> cosine(1, [0, 1, 2, 3, 4]).tolist() == [1, 1, 0, -2, -4]
    True
    """
    return _circular(frequency, x, h, part=0)


def sine(frequency: Any, x: Any, h: Any = 1) -> Any:
    """The sine with step h: the imaginary part of growth at the imaginary rate ``i * frequency``; see `cosine`.

    Examples
    --------
    >>> sine("0.5", [0, 1, 2]).tolist()
    [Fraction(0, 1), Fraction(1, 2), Fraction(1, 1)]
    """
    return _circular(frequency, x, h, part=1)


def _circular(frequency: Any, x: Any, h: Any, *, part: int) -> Any:
    rates, places, step = _given(frequency, "frequency", x, h)
    if is_exact(rates):
        return _spread(lambda w, n: _turn(w * Fraction(step), n)[part], rates, _whole_steps(places, step))
    turn, n = np.broadcast_arrays(rates * step, places / step)
    size, angle = np.exp(0.5 * n * np.log1p(turn**2)), n * np.arctan(turn)
    return _as_given(size * (np.sin(angle) if part else np.cos(angle)))


def _given(rate: Any, name: str, x: Any, h: Any) -> tuple[AnyArray, AnyArray, Any]:
    rates, places = (
        np.asarray(plain(v, n) if isinstance(v, str) or np.ndim(v) == 0 else numbers(v, n), dtype=None)
        for v, n in ((rate, name), (x, "x"))
    )
    if is_exact(rates) != is_exact(places):
        if is_exact(rates) and rates.dtype != object:  # plain integers count as either
            rates = np.asarray(fitted(rates, name, exact=False, finite=False))
        elif is_exact(places) and places.dtype != object:
            places = np.asarray(fitted(places, "x", exact=False, finite=False))
        else:
            message = f"{name} and x must both be exact or both be floats, got {rates.dtype} and {places.dtype}"
            raise InputError(message)
    try:
        np.broadcast_shapes(rates.shape, places.shape)
    except ValueError:
        message = f"{name} and x must spread over each other, got shapes {rates.shape} and {places.shape}"
        raise InputError(message) from None
    return rates, places, positive_step(h, exact=is_exact(rates))


def _whole_steps(places: AnyArray, step: Any) -> AnyArray:
    steps = np.empty(places.size, dtype=object)
    for at, place in enumerate(places.ravel().tolist()):
        number = Fraction(place) / Fraction(step)
        if number.denominator != 1:
            message = f"x must be a whole number of steps {step} to stay exact, got {place}; give floats for the rest"
            raise InputError(message)
        if abs(number.numerator) > MOST_FACTORS:
            message = f"x must be at most {MOST_FACTORS:,} steps to stay exact, got {number.numerator}; give floats"
            raise InputError(message)
        steps[at] = number.numerator
    return steps.reshape(places.shape)


def _spread(function: Any, rates: AnyArray, steps: AnyArray) -> Any:
    result = np.frompyfunc(function, 2, 1)(rates.astype(object), steps)
    return result if isinstance(result, np.ndarray) and result.ndim else Fraction(result)


def _power(base: Fraction, n: int) -> Fraction:
    if n < 0 and base == 0:
        message = f"x / h must not be negative where 1 + rate h is zero, got {n}"
        raise InputError(message)
    return Fraction(base) ** n


def _turn(turn: Fraction, n: int) -> tuple[Fraction, Fraction]:
    """Return real and imaginary part of (1 + i turn)**n, by repeated squaring."""
    real, imaginary = Fraction(1), Fraction(0)
    a, b = Fraction(1), Fraction(turn)
    if n < 0:
        size = a * a + b * b
        a, b, n = a / size, -b / size, -n
    while n:
        if n & 1:
            real, imaginary = real * a - imaginary * b, real * b + imaginary * a
        a, b = a * a - b * b, 2 * a * b
        n >>= 1
    return real, imaginary


def _refuse_where(bad: AnyArray, n: FloatArray, what: str) -> None:
    if bad.any():
        message = f"{what}, got {n[bad].ravel()[0]}"
        raise InputError(message)


def _as_given(result: FloatArray) -> Any:
    return result if result.ndim else float(result)
