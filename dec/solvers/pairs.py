"""Sums and products of floats together with their rounding errors, so that nothing is lost where it counts."""

from dec.arrays import FloatArray

__all__ = ["UNIT", "pair_product", "pair_sum"]

UNIT = 2.0**-53  # half the distance from 1 to the next float64: the relative error of one operation

_SPLITTER = 2.0**27 + 1.0


def pair_sum(a: FloatArray, b: FloatArray) -> tuple[FloatArray, FloatArray]:
    """The rounded sum and its rounding error: a + b == sum + error exactly.

    Parameters
    ----------
    a, b : float64 arrays of one shape
        In one unit, which both results keep.

    Returns
    -------
    rounded, error : float64 arrays

    Notes
    -----
    Source: Knuth, The Art of Computer Programming 2, 1969, section 4.2.2 (from memory). Exact unless the sum
    overflows.

    Examples
    --------
    >>> import numpy as np
    >>> pair_sum(np.array([1.0]), np.array([1e-20]))
    (array([1.]), array([1.e-20]))
    """
    rounded = a + b
    part = rounded - a
    return rounded, (a - (rounded - part)) + (b - part)


def pair_product(a: FloatArray, b: FloatArray) -> tuple[FloatArray, FloatArray]:
    """The rounded product and its rounding error: a * b == product + error exactly.

    Parameters
    ----------
    a, b : float64 arrays of one shape

    Returns
    -------
    rounded, error : float64 arrays
        nan where a factor is beyond 1e300; not exact where the product is below 1e-290.

    Notes
    -----
    Source: Dekker, A floating-point technique for extending the available precision, Numerische Mathematik 18
    (1971) (from memory).

    Examples
    --------
    >>> import numpy as np
    >>> rounded, error = pair_product(np.array([1.0 + 2.0**-30]), np.array([1.0 + 2.0**-30]))
    >>> error * 2.0**60
    array([1.])
    """
    rounded = a * b
    a_high, a_low = _halves(a)
    b_high, b_low = _halves(b)
    error = ((a_high * b_high - rounded) + a_high * b_low + a_low * b_high) + a_low * b_low
    return rounded, error


def _halves(a: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return two numbers of at most 26 bits that add up to each number."""
    scaled = _SPLITTER * a
    high = scaled - (scaled - a)
    return high, a - high
