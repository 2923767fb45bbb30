"""Decay, interest and oscillation as difference equations."""

from typing import Any

from dec.steps.equations import LinearEquation
from dec.steps.kinds import plain, positive_step

__all__ = ["decay", "interest", "leapfrog", "oscillation"]


def decay(rate: Any, h: Any = 1) -> LinearEquation:
    """Decay: the difference quotient is -rate times the value; solved by ``growth(-rate, x, h)``.

    Parameters
    ----------
    rate : number
        Per unit of h.
    h : number
        The step.

    Returns
    -------
    LinearEquation of order 1

    Examples
    --------
    >>> decay("0.25").solve([64], 4).tolist()
    [64, Fraction(48, 1), Fraction(36, 1), Fraction(27, 1)]
    """
    loss, step = _two(rate, "rate", h)
    return LinearEquation([1 - loss * step])


def interest(rate: Any, h: Any = 1) -> LinearEquation:
    """Interest: the difference quotient is rate times the value; payments are its forcing.

    Parameters
    ----------
    rate : number
        Per unit of h: "0.05" is 5 % a year, with h = Fraction(1, 12) paid monthly.
    h : number
        The step.

    Returns
    -------
    LinearEquation of order 1
    """
    gain, step = _two(rate, "rate", h)
    return LinearEquation([1 + gain * step])


def oscillation(frequency: Any, h: Any = 1) -> LinearEquation:
    """Oscillation by forward differences: the second one is -frequency**2 times the value; it grows at every step.

    Parameters
    ----------
    frequency : number
        Radians per unit of h.
    h : number
        The step.

    Returns
    -------
    LinearEquation of order 2
        Solved by `cosine` and `sine` with that frequency and step.

    Examples
    --------
    >>> oscillation(1).solve([1, 1], 5).tolist()
    [1, 1, 0, -2, -4]
    """
    w, step = _two(frequency, "frequency", h)
    return LinearEquation([0 * w + 2, -(1 + (w * step) ** 2)])


def leapfrog(frequency: Any, h: Any = 1) -> LinearEquation:
    """Oscillation by central differences: ``y[n + 1] - 2 y[n] + y[n - 1] = -(frequency h)**2 y[n]``.

    Parameters
    ----------
    frequency : number
        Radians per unit of h.
    h : number
        The step; solutions stay bounded while frequency times h is below 2.

    Returns
    -------
    LinearEquation of order 2

    Notes
    -----
    Every solution keeps ``y[n]**2 - (2 - (frequency h)**2) y[n] y[n + 1] + y[n + 1]**2`` exactly, and swings with the
    angle ``2 arcsin(frequency h / 2)`` a step. Source: Hairer, Lubich and Wanner, Geometric numerical integration
    illustrated by the Stoermer-Verlet method, Acta Numerica 12 (2003).

    Examples
    --------
    >>> leapfrog(1).solve([1, 1], 8).tolist()
    [1, 1, 0, -1, -1, 0, 1, 1]
    """
    w, step = _two(frequency, "frequency", h)
    return LinearEquation([2 - (w * step) ** 2, 0 * w - 1])


def _two(value: Any, name: str, h: Any) -> tuple[Any, Any]:
    number = plain(value, name)
    return number, positive_step(h, exact=not isinstance(number, float))
