"""The forward-difference series of Gregory and Newton: a polynomial through regular values, by its differences."""

from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np

from dec.arrays import AnyArray, frozen
from dec.errors import InputError
from dec.steps.kinds import (
    LARGEST_INT,
    Number,
    fitted,
    fractions_of,
    is_exact,
    largest,
    plain,
    positive_step,
    refuse_few,
    series,
)

__all__ = ["ForwardSeries", "forward_series"]


@dataclass(frozen=True, eq=False)
class ForwardSeries:
    """A polynomial by its leading differences: the sum over j of ``C((x - start) / h, j) * leading[j]``.

    Make one with `forward_series`.

    Attributes
    ----------
    start : number
        Where the differences are taken.
    h : number
        The step.
    leading : array, shape (k + 1,) or (k + 1, m), read-only
        Value, first difference, ..., k-th difference at `start`; plain differences, not divided by h.
    """

    start: Number
    h: Number
    leading: AnyArray

    @property
    def degree(self) -> int:
        """Highest degree k that the polynomial can have."""
        return len(self.leading) - 1

    def at(self, x: Any) -> Any:
        """Values of the polynomial.

        Parameters
        ----------
        x : number or array_like, shape (p,)
            Between the places given, or beyond them. Exact where the series is.

        Returns
        -------
        number, or array of shape (p,), (m,) or (p, m)
            Fractions from an exact series, float64 from floats.

        Raises
        ------
        InputError
            If x is a float and the series exact.

        Notes
        -----
        Source: Newton, Methodus differentialis, 1711; Jordan, Calculus of Finite Differences, 3rd ed. 1965
        (here nested as in Horner's rule).

        Examples
        --------
        >>> forward_series(["2854", "3162", "3544", "3992"], start=20, h=4).at(25)
        Fraction(26007, 8)
        """
        exact = is_exact(self.leading)
        places = fitted(x, "x", exact=exact, finite=False)
        s = self._steps_to(places)
        if self.leading.ndim == 2:
            s = s[..., None]
        rows = fractions_of(self.leading) if exact else self.leading
        value: Any = rows[-1]
        for j in range(self.degree - 1, -1, -1):
            value = value * (s - j) * (Fraction(1, j + 1) if exact else 1 / (j + 1)) + rows[j]
        shape = np.shape(places) + self.leading.shape[1:]
        value = np.broadcast_to(np.asarray(value), shape).copy()
        return value if shape else value.item()

    def difference(self) -> "ForwardSeries":
        """The difference quotient with the same step, one degree less.

        Examples
        --------
        >>> forward_series([0, 1, 8, 27]).difference().at(5)
        Fraction(91, 1)
        """
        rows = self.leading[1:] if self.degree else self.leading * 0
        over_h = Fraction(1, 1) / self.h if is_exact(self.leading) else 1 / self.h
        kept = rows if self.h == 1 else _kept_exact(rows) * over_h
        return ForwardSeries(self.start, self.h, frozen(kept.copy()))

    def antidifference(self, constant: Any = 0) -> "ForwardSeries":
        """The polynomial whose difference quotient this is and whose value at `start` is `constant`.

        Sums telescope through it: h times the values at a, a + h, ..., b - h add up to its value at b minus that at a.

        Raises
        ------
        InputError
            If the constant is neither one number nor one a column, or a float beside exact data.

        Examples
        --------
        >>> tenth_powers = forward_series([k**10 for k in range(11)]).antidifference()
        >>> tenth_powers.at(1001)
        Fraction(91409924241424243424241924242500, 1)
        """
        exact = is_exact(self.leading)
        first = np.asarray(fitted(constant, "constant", exact=exact))
        if first.shape not in ((), self.leading.shape[1:]):
            message = f"constant must be one number or have shape {self.leading.shape[1:]}, got {first.shape}"
            raise InputError(message)
        rows = _kept_exact(self.leading)
        row = np.broadcast_to(first.astype(rows.dtype), (1, *self.leading.shape[1:]))
        return ForwardSeries(self.start, self.h, frozen(np.concatenate([row, rows * self.h])))

    def remainder(self, x: Any, least: Any, most: Any) -> tuple[Number, Number]:
        """Bounds on what the true function has more than the polynomial.

        Parameters
        ----------
        x : number
        least, most : number
            Bounds on the derivative of order k + 1 over all places between x and those used, in the unit of the
            values over that of x to the power k + 1. Where x lies a whole number of steps from `start`, bounds on the
            difference quotient of that order do as well: nothing is asked of the function in between.

        Returns
        -------
        low, high : number
            The remainder f(x) - at(x) lies between them.

        Raises
        ------
        InputError
            If least exceeds most, or exact and floats are mixed.

        Notes
        -----
        The remainder is ``h**(k + 1) * C((x - start) / h, k + 1)`` times that derivative at one of those places.
        Source: Jordan; Kreyszig, Advanced Engineering Mathematics, section 19.3.

        Examples
        --------
        >>> forward_series([0, 1]).remainder("0.5", 2, 2)  # x**2 by its chord
        (Fraction(-1, 4), Fraction(-1, 4))
        """
        exact = is_exact(self.leading)
        place, low, high = (
            fitted(plain(v, n), n, exact=exact) for v, n in ((x, "x"), (least, "least"), (most, "most"))
        )
        if low > high:
            message = f"least must not exceed most, got {low} and {high}"
            raise InputError(message)
        factor: Any = self.h ** (self.degree + 1)
        s = self._steps_to(np.asarray(place)).item()
        for j in range(self.degree + 1):
            factor = factor * (s - j) / (j + 1)
        ends = factor * low, factor * high
        return min(ends), max(ends)

    def _steps_to(self, places: Any) -> AnyArray:
        start: Any = self.start
        step: Any = self.h
        if is_exact(self.leading):
            return np.asarray((fractions_of(places) - start) / step, dtype=object)
        return np.asarray((np.asarray(places, dtype=np.float64) - start) / step)


def forward_series(values: Any, start: Any = 0, h: Any = 1) -> ForwardSeries:
    """The polynomial of least degree through regular values, by its leading forward differences.

    Parameters
    ----------
    values : array_like, shape (k + 1,) or (k + 1, m)
        At start, start + h, ..., start + k h. Take few rows: a polynomial of high degree swings between the places
        given and far beyond them.
    start, h : number
        Exact where the values are.

    Returns
    -------
    ForwardSeries

    Raises
    ------
    InputError
        If there is no value, h is not positive, or floats stand next to exact values.

    Examples
    --------
    >>> forward_series(["1.127626", "1.185465", "1.255169", "1.337435"], "0.5", "0.1").at("0.56")
    Fraction(145118079, 125000000)
    """
    array = series(values, "values")
    exact = is_exact(array)
    refuse_few(array, "values", 1)
    step, first = positive_step(h, exact=exact), fitted(plain(start, "start"), "start", exact=exact)
    if array.dtype == np.int64 and largest(array) << len(array) > LARGEST_INT:
        array = array.astype(object)
    leading = array.copy()
    for j in range(1, len(array)):
        leading[j:] = np.diff(leading[j - 1 :], axis=0)
    return ForwardSeries(first, step, frozen(leading))


def _kept_exact(rows: AnyArray) -> AnyArray:
    return rows.astype(object) if is_exact(rows) else rows
