"""Whole-number arithmetic on readings: one decimal unit for all, and sums that cannot wrap."""

from fractions import Fraction
from math import floor

import numpy as np

from dec.arrays import AnyArray, BoolArray, FloatArray, IntArray
from dec.calculus.columns import Decimals

__all__ = ["as_floats", "as_text", "common_unit", "net_inflow", "within"]

_ROOM = 2**62


def common_unit(*given: Decimals) -> tuple[list[AnyArray], int]:
    """The integers of several columns in the finest unit of them all, and its decimal places.

    int64 where the sum of all magnitudes stays below 2**62, so that no sum of them, in any order, can wrap; Python
    integers otherwise.
    """
    places = max((g.places for g in given), default=0)
    scales = [10 ** (places - g.places) for g in given]
    total = sum(_magnitude(g.integers) * scale for g, scale in zip(given, scales, strict=True))
    dtype = np.int64 if total < _ROOM else object
    return [g.integers.astype(dtype) * scale for g, scale in zip(given, scales, strict=True)], places


def net_inflow(tail: IntArray, head: IntArray, flow: AnyArray, n_vertices: int) -> AnyArray:
    """Inflow minus outflow of every vertex; array of shape (n0,) and the dtype of `flow`."""
    total = np.zeros(n_vertices, dtype=flow.dtype)
    np.add.at(total, head, flow)
    np.subtract.at(total, tail, flow)
    return total


def as_floats(integers: AnyArray, places: int) -> FloatArray:
    """Whole numbers of units of 10**-places as the nearest floats."""
    if integers.dtype == np.int64 and places <= 22 and np.abs(integers).max(initial=0) < 2**53:
        return np.asarray(integers / 10.0**places)
    return np.array([float(Fraction(int(i), 10**places)) for i in integers], dtype=np.float64)


def as_text(integer: int, places: int) -> str:
    """A whole number of units of 10**-places as exact decimal text.

    Examples
    --------
    >>> as_text(-50, 3)
    '-0.05'
    """
    whole, rest = divmod(abs(integer), 10**places)
    digits = f"{whole}.{rest:0{places}d}".rstrip("0").rstrip(".") if places else str(whole)
    return f"-{digits}" if integer < 0 else digits


def within(integers: AnyArray, places: int, limit: float | Fraction) -> BoolArray:
    """Whether each |integer| * 10**-places is at most the limit as written in decimal; decided exactly."""
    written = limit if isinstance(limit, Fraction) else Fraction(repr(float(limit)))
    most = floor(written * 10**places)
    return np.asarray(np.abs(integers) <= most, dtype=bool)


def _magnitude(integers: AnyArray) -> int:
    if integers.dtype == np.int64:
        # float64 sums of magnitudes are right to a relative 1e-9 here, and the room is a factor 2
        rough = float(np.abs(integers.astype(np.float64)).sum())
        return int(rough * 1.001) + 1
    return sum(abs(int(i)) for i in integers)
