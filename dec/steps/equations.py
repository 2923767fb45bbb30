"""Linear difference equations with constant coefficients, solved exactly."""

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import comb
from typing import Any

import numpy as np

from dec.arrays import AnyArray, float_array
from dec.errors import InputError
from dec.steps.kinds import Number, count_of, fitted, is_exact, positive_step, series

__all__ = ["LinearEquation"]


@dataclass(frozen=True, init=False)
class LinearEquation:
    """The equation ``y[n] = c[0] y[n - 1] + ... + c[k - 1] y[n - k] + forcing``.

    Parameters
    ----------
    coefficients : sequence of numbers, length k >= 1
        c, the latest value's first; floats, integers, Fractions or decimal text.

    Raises
    ------
    InputError
        If there is none, or one is no number.

    Examples
    --------
    >>> LinearEquation([1, 1]).solve([0, 1], 10)
    array([0, 1, 1, 2, 3, 5, 8, 13, 21, 34], dtype=object)
    >>> LinearEquation([1, 1]).at(100, [0, 1])
    354224848179261915075
    """

    coefficients: tuple[Number, ...]

    def __init__(self, coefficients: Sequence[Any] | AnyArray) -> None:
        array = series(coefficients, "coefficients")
        if array.ndim != 1 or not len(array):
            message = f"coefficients must be one row of at least 1 number, got shape {array.shape}"
            raise InputError(message)
        _refuse_infinite(array, "coefficients")
        object.__setattr__(self, "coefficients", tuple(array.tolist()))

    @classmethod
    def of_differences(cls, coefficients: Sequence[Any] | AnyArray, h: Any = 1) -> "LinearEquation":
        """The equation that ``a[0] y + a[1] Dy + ... + a[k] D^k y = 0``, D being the difference quotient with step h.

        Parameters
        ----------
        coefficients : sequence of numbers, length k + 1
            a, of which the last is not zero.
        h : number
            The step.

        Returns
        -------
        LinearEquation

        Raises
        ------
        InputError
            If k < 1, the last coefficient is zero, or h does not fit.

        Examples
        --------
        >>> LinearEquation.of_differences([1, 0, 1]).coefficients  # D D y = -y
        (Fraction(2, 1), Fraction(-2, 1))
        """
        array = series(coefficients, "coefficients")
        exact = is_exact(array)
        step = positive_step(h, exact=exact)
        if array.ndim != 1 or len(array) < 2 or array[-1] == 0:
            message = "coefficients must be one row of at least 2 numbers, the last not zero, got "
            message += f"{array.tolist()!r:.60}"
            raise InputError(message)
        k = len(array) - 1
        a = [(Fraction(v) if exact else v) / step**j for j, v in enumerate(array.tolist())]
        shifted = [sum(a[j] * comb(j, i) * (-1) ** (j - i) for j in range(i, k + 1)) for i in range(k + 1)]
        return cls([-shifted[i] / shifted[k] for i in range(k - 1, -1, -1)])

    @property
    def order(self) -> int:
        """How many values before determine the next, k."""
        return len(self.coefficients)

    @property
    def is_exact(self) -> bool:
        """Whether the coefficients are integers and Fractions."""
        return not any(isinstance(c, float) for c in self.coefficients)

    def roots(self) -> AnyArray:
        """Roots of the characteristic polynomial: each root r gives a solution r**n; complex128, rounded.

        Solutions stay bounded where no root is larger than 1 in size and those of size 1 are simple.

        Raises
        ------
        InputError
            If a coefficient is beyond the range of float64.

        Examples
        --------
        >>> LinearEquation([0, 4]).roots().round(12)
        array([-2.+0.j,  2.+0.j])
        """
        rounded = float_array(np.array(self.coefficients, dtype=object), "coefficients")
        found = np.roots([1.0, *(-rounded)]).astype(np.complex128)
        return np.sort_complex(found)

    def solve(self, initial: Any, count: int, forcing: Any = 0) -> AnyArray:
        """The solution from its first k values.

        Parameters
        ----------
        initial : array_like, shape (k,) or (k, m)
            y[0] .. y[k - 1]; columns are solved at once.
        count : int
            Rows wanted, k among them.
        forcing : number, or array_like of shape (count - k,) or (count - k, m)
            What is added at rows k, k + 1, ...

        Returns
        -------
        array, shape (count,) or (count, m)
            float64 from floats, rounded at every step. From exact coefficients, values and forcing an object array
            of Python integers and Fractions, without any rounding: their digits grow with n.

        Raises
        ------
        InputError
            If shapes do not fit, or exact numbers and floats are mixed.

        Examples
        --------
        >>> debt = LinearEquation(["1.01"])  # at 1 % a month, paid off by 300
        >>> balance = debt.solve([1000], 4, forcing=-300)
        >>> [str(value) for value in balance]
        ['1000', '710', '4171/10', '121271/1000']
        """
        first = self._initial(initial)
        exact, k = is_exact(first), self.order
        rows = count_of(count, "count", k)
        added = np.asarray(fitted(forcing, "forcing", exact=exact))
        wanted = (rows - k, *first.shape[1:])
        if added.ndim == 1 and len(wanted) == 2:
            added = added[:, None]
        if added.shape != () and (added.ndim != len(wanted) or added.shape[0] != wanted[0]):
            message = f"forcing must be one number or have shape {wanted}, got {np.shape(forcing)}"
            raise InputError(message)
        try:
            added = np.broadcast_to(added, wanted)
        except ValueError:
            message = f"forcing must be one number or have shape {wanted}, got {np.shape(forcing)}"
            raise InputError(message) from None
        return self._exactly(first, added.astype(object)) if exact else self._in_floats(first, added)

    def at(self, n: int, initial: Any) -> Any:
        """The value y[n] of the solution without forcing, without the values between: about log n steps.

        Parameters
        ----------
        n : int
            At least 0.
        initial : array_like, shape (k,) or (k, m)

        Returns
        -------
        number, or array of shape (m,)
            Of the kind of coefficients and values.

        Raises
        ------
        InputError
            As `solve`.

        Notes
        -----
        The power x**n modulo the characteristic polynomial has the weights of the initial values. Source: Fiduccia,
        An efficient formula for linear recurrences, SIAM J. Comput. 14 (1985) 106.
        """
        first = self._initial(initial)
        weights = self._weights(count_of(n, "n"))
        if first.ndim == 1:
            return sum(w * y for w, y in zip(weights, first.tolist(), strict=True))
        total = weights[0] * first[0]
        for w, row in zip(weights[1:], first[1:], strict=True):
            total = total + w * row
        return total

    def _initial(self, initial: Any) -> AnyArray:
        array = series(initial, "initial")
        if len(array) != self.order:
            message = f"initial must hold {self.order} rows, one for each coefficient, got {len(array)}"
            raise InputError(message)
        if is_exact(array) and self.is_exact:
            return array.astype(object)
        _refuse_infinite(array, "initial")
        wrong = "the coefficients are floats" if is_exact(array) else "the coefficients are exact"
        if is_exact(array) != self.is_exact and not self._could_be_floats(array):
            message = f"initial and coefficients must both be exact or both be floats; {wrong}"
            raise InputError(message)
        return np.asarray(fitted(array, "initial", exact=False))

    def _could_be_floats(self, array: AnyArray) -> bool:
        """Return whether what is exact of the two is plain integers only, which count as either."""
        return array.dtype == np.int64 if is_exact(array) else all(isinstance(c, int) for c in self.coefficients)

    def _exactly(self, first: AnyArray, added: AnyArray) -> AnyArray:
        k = self.order
        y = np.empty((k + len(added), *first.shape[1:]), dtype=object)
        y[:k] = first
        for n in range(k, len(y)):
            value = added[n - k]
            for j, c in enumerate(self.coefficients):
                if c:
                    value = value + c * y[n - 1 - j]
            y[n] = value
        return y

    def _in_floats(self, first: AnyArray, added: AnyArray) -> AnyArray:
        from scipy.signal import lfilter

        k, c = self.order, float_array(np.array(self.coefficients, dtype=object), "coefficients")
        source = added.astype(np.float64)
        for row in range(min(k, len(source))):  # the first values act like forcing on a solution that starts from zero
            source[row] += np.tensordot(c[row:], first[::-1][: k - row], axes=1)
        later = lfilter([1.0], np.concatenate([[1.0], -c]), source, axis=0) if len(source) else source
        return np.concatenate([first, later])

    def _weights(self, n: int) -> list[Any]:
        """Return x**n modulo x**k - c[0] x**(k - 1) - ... - c[k - 1], its lowest coefficient first."""
        result: list[Any] = [1] + [0] * (self.order - 1)
        for bit in f"{n:b}":
            result = self._reduced(np.convolve(np.array(result, dtype=object), np.array(result, dtype=object)).tolist())
            if bit == "1":
                result = self._reduced([0, *result])
        return result

    def _reduced(self, polynomial: list[Any]) -> list[Any]:
        while len(polynomial) > self.order:
            top = polynomial.pop()
            for j, c in enumerate(self.coefficients):
                polynomial[len(polynomial) - 1 - j] += top * c
        return polynomial


def _refuse_infinite(array: AnyArray, name: str) -> None:
    if not is_exact(array) and not np.isfinite(array).all():
        at = int(np.argwhere(~np.isfinite(array))[0][0])
        message = f"{name} must be finite, got {array[at]} at {at}"
        raise InputError(message)
