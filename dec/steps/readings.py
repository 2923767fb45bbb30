"""Regular readings with gaps filled, or carried on, by polynomials through the nearest readings."""

from dataclasses import dataclass
from fractions import Fraction
from math import factorial
from typing import Any

import numpy as np

from dec.arrays import AnyArray, BoolArray, IntArray, frozen
from dec.errors import InputError
from dec.steps.kinds import MOST_FACTORS, count_of, fitted, fractions_of, is_exact, series_with_gaps

__all__ = ["Filled", "extend", "fill"]

_WAY_OUT = "give bounds on the next difference as largest=..., or a lower order"


@dataclass(frozen=True, eq=False)
class Filled:
    """Readings without gaps, and how far the values put in can be off.

    Attributes
    ----------
    values : array, shape (n,) or (n, m)
        The readings as they were, and the values put in; Fractions among exact ones.
    is_read : bool array of the same shape
        True for readings, False for values put in.
    remainder : array of the same shape
        Bound on true value minus value put in, for exact readings; 0 where read. It holds if no difference of order
        `order` + 1 of the true values is larger than `largest`.
    amplification : array of the same shape
        Readings that are off by at most e move the value by at most e times this; 0 where read.
    order : int
        Degree of the polynomials.
    largest : number, or array of shape (m,)
        Bound on the differences of order `order` + 1, given or the largest seen among the readings. Largest seen is
        a measure of how smooth they are, no guarantee.
    """

    values: AnyArray
    is_read: BoolArray
    remainder: AnyArray
    amplification: AnyArray
    order: int
    largest: Any


def fill(readings: Any, order: int = 3, largest: Any = None) -> Filled:
    """Regular readings with their gaps filled.

    Parameters
    ----------
    readings : array_like, shape (n,) or (n, m)
        One row a step; nan, None and empty text are gaps.
    order : int
        Degree of the polynomials: each gap takes the order + 1 readings nearest to it, earlier ones first.
    largest : number or array_like, shape (m,), or None
        Bound on the plain differences of order `order` + 1, not divided by the step; None takes the largest seen.

    Returns
    -------
    Filled

    Raises
    ------
    InputError
        If a gap lies before the first or after the last reading (see `extend`), there are too few readings for the
        order, or none in a row from which the remainder could be judged.

    Notes
    -----
    The polynomial is the forward-difference series where the readings used lie in a row, and Newton's with divided
    differences otherwise. At a place t steps along, with readings at t_0 .. t_k, the remainder is the product of the
    (t - t_i), over (k + 1)!, times a weighted mean of differences of order k + 1. Source: Steffensen, Interpolation,
    1927; that divided differences on whole places are such means is the positivity of discrete B-splines, de Boor, A
    Practical Guide to Splines, 1978.

    Examples
    --------
    >>> filled = fill(["0", "1", "8", "", "64", "125", "216", "343", "512"])
    >>> filled.values.tolist(), filled.remainder[3]
    ([0, 1, 8, Fraction(27, 1), 64, 125, 216, 343, 512], Fraction(0, 1))
    """
    values, present = series_with_gaps(readings, "readings")
    for has, where in _columns(present):
        known = np.flatnonzero(has)
        gaps = np.flatnonzero(~has)
        if not len(known):
            message = f"readings must hold something, got none{where}"
            raise InputError(message)
        outside = gaps[(gaps < known[0]) | (gaps > known[-1])]
        if len(outside):
            message = (
                f"readings have a gap at row {outside[0]}{where}, outside the first and last reading "
                f"({known[0]} and {known[-1]}); leave such rows out and ask steps.extend for them"
            )
            raise InputError(message)
    return _completed(values, present, order, largest)


def extend(readings: Any, after: int = 0, before: int = 0, order: int = 3, largest: Any = None) -> Filled:
    """Regular readings carried on beyond their end, or back before their start.

    Parameters
    ----------
    readings : array_like, shape (n,) or (n, m)
        One row a step, without gaps.
    after, before : int
        Rows to put on at the end and at the start.
    order : int
        Degree of the polynomials, through the order + 1 last or first readings. Remainder and amplification grow
        like the distance to the power order + 1; they are stated, look at them.
    largest : number or array_like, shape (m,), or None
        As for `fill`.

    Returns
    -------
    Filled
        Of n + before + after rows.

    Raises
    ------
    InputError
        If there are gaps, too few readings for the order, or none in a row from which the remainder could be judged.

    Examples
    --------
    >>> carried = extend([0, 1, 8, 27, 65], after=2, order=2, largest=7)
    >>> carried.values[5:].tolist(), carried.remainder[5:].tolist(), carried.amplification[5:].tolist()
    ([Fraction(122, 1), Fraction(198, 1)], [Fraction(7, 1), Fraction(28, 1)], [Fraction(7, 1), Fraction(17, 1)])
    """
    values, present = series_with_gaps(readings, "readings")
    if not present.all():
        at = np.argwhere(~present)[0].tolist()
        message = f"readings must have no gap to be carried on, got one at {at[0] if len(at) == 1 else tuple(at)}; "
        message += "fill it first with steps.fill"
        raise InputError(message)
    for name, rows in (("before", before), ("after", after)):
        if count_of(rows, name) > MOST_FACTORS:
            message = f"{name} must be at most {MOST_FACTORS:,} rows, got {rows}; no series is known so far on"
            raise InputError(message)
    pads = [(count_of(before, "before"), count_of(after, "after")), *[(0, 0)] * (values.ndim - 1)]
    return _completed(np.pad(values, pads), np.pad(present, pads), order, largest)


def _columns(present: BoolArray) -> list[tuple[BoolArray, str]]:
    """Return for each column where it has readings, and its name in messages."""
    if present.ndim == 1:
        return [(present, "")]
    return [(present[:, j], f" of series {j}") for j in range(present.shape[1])]


def _completed(values: AnyArray, present: BoolArray, order: int, largest: Any) -> Filled:
    k, exact = count_of(order, "order"), is_exact(values)
    one = values.ndim == 1
    table, has = (values[:, None], present[:, None]) if one else (values, present)
    bounds = _bounds(table, has, k, largest, exact=exact)
    result = table.astype(object) if exact else table.copy()
    remainder, amplification = (np.zeros(table.shape, dtype=result.dtype) for _ in range(2))
    alike: dict[bytes, list[int]] = {}
    for column, pattern in enumerate(np.packbits(has, axis=0).T):
        alike.setdefault(pattern.tobytes(), []).append(column)
    for members in alike.values():
        columns = np.array(members)
        gaps, known = np.flatnonzero(~has[:, columns[0]]), np.flatnonzero(has[:, columns[0]])
        if not len(gaps):
            continue
        if len(known) <= k:
            message = f"order {k} needs {k + 1} readings, got {len(known)} in series {columns[0]}; give a lower order"
            raise InputError(message)
        nodes = _nearest(known, gaps, k)
        weights, reach = _weights(nodes, gaps, exact=exact)
        rows = fractions_of(table[:, columns]) if exact else table[:, columns]
        result[np.ix_(gaps, columns)] = (weights[:, :, None] * rows[nodes]).sum(axis=1)
        remainder[np.ix_(gaps, columns)] = reach[:, None] * bounds[columns]
        amplification[np.ix_(gaps, columns)] = np.abs(weights).sum(axis=1)[:, None]
    result, is_read, remainder, amplification = (
        frozen(t[:, 0].copy() if one else t) for t in (result, has.copy(), remainder, amplification)
    )
    return Filled(result, is_read, remainder, amplification, k, bounds.tolist()[0] if one else frozen(bounds))


def _nearest(known: IntArray, gaps: IntArray, k: int) -> IntArray:
    """Return the k + 1 known rows nearest to each gap, the earlier where two stretches reach as far; ascending."""
    place = np.searchsorted(known, gaps)
    best = np.clip(place - k - 1, 0, len(known) - k - 1)
    reach = _farthest(known, gaps, best, k)
    for shift in range(k + 1):
        other = np.clip(place - k + shift, 0, len(known) - k - 1)
        distance = _farthest(known, gaps, other, k)
        nearer = distance < reach
        best, reach = np.where(nearer, other, best), np.where(nearer, distance, reach)
    return np.asarray(known[best[:, None] + np.arange(k + 1)])


def _farthest(known: IntArray, gaps: IntArray, first: IntArray, k: int) -> IntArray:
    return np.asarray(np.maximum(np.abs(gaps - known[first]), np.abs(known[first + k] - gaps)))


def _weights(nodes: IntArray, gaps: IntArray, *, exact: bool) -> tuple[AnyArray, AnyArray]:
    """Return Lagrange's weights of the readings, shape (g, k + 1), and the size of the remainder's factor, (g,)."""
    k = nodes.shape[1] - 1
    kind = object if exact else np.float64
    away = (gaps[:, None] - nodes).astype(kind)
    weights = np.ones(nodes.shape, dtype=kind)
    for i in range(k + 1):
        for j in range(k + 1):
            if i != j:
                apart = nodes[:, i] - nodes[:, j]
                ratio = fractions_of(away[:, j]) / fractions_of(apart) if exact else away[:, j] / apart
                weights[:, i] = weights[:, i] * ratio
    product = np.abs(np.prod(away, axis=1))
    scale = factorial(k + 1)
    return weights, (fractions_of(product) * Fraction(1, scale) if exact else product / scale)


def _bounds(table: AnyArray, has: BoolArray, k: int, largest: Any, *, exact: bool) -> AnyArray:
    """Return the bound on the differences of order k + 1 in every column, given or the largest seen; shape (m,)."""
    kind, m = (object if exact else np.float64), table.shape[1]
    if largest is not None:
        given = np.asarray(fitted(largest, "largest", exact=exact))
        if given.shape not in ((), (m,)) or (given < 0).any():
            message = f"largest must be one number of at least 0, or one for each of {m} series, got {largest!r:.60}"
            raise InputError(message)
        return np.broadcast_to(given.astype(kind), m).copy()
    rows = len(table) - k - 1
    whole = np.ones((max(rows, 0), m), dtype=bool)
    for shift in range(k + 2 if rows > 0 else 0):
        whole &= has[shift : shift + rows]
    untold = ~whole.any(axis=0) & ~has.all(axis=0)
    if untold.any():
        column = int(np.argmax(untold))
        message = (
            f"no {k + 2} readings in a row in series {column}, so nothing tells how far order {k} is off; {_WAY_OUT}"
        )
        raise InputError(message)
    filled = table.astype(object) if exact else table
    with np.errstate(invalid="ignore"):
        sizes = np.abs(np.diff(filled, n=k + 1, axis=0)) if rows > 0 else np.zeros(whole.shape, dtype=kind)
    return np.asarray(np.where(whole, sizes, 0).max(axis=0, initial=0)).astype(kind)
