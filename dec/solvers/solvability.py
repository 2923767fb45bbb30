"""Whether sources add up, decided by exact sums before anything is factored."""

from dataclasses import dataclass
from fractions import Fraction
from math import fsum

import numpy as np

from dec.arrays import BoolArray, FloatArray, IntArray
from dec.calculus.complex import Complex
from dec.errors import UnsolvableError
from dec.solvers.pairs import UNIT, pair_sum

__all__ = ["Sources", "balanced_sources", "component_sums", "part_name"]

_NAMED = 3


@dataclass(frozen=True, slots=True)
class Sources:
    """Sources that add up to zero in every component without a fixed potential.

    Attributes
    ----------
    value, rest, doubt : float64 arrays, shape (n0, m)
        The sources are ``value + rest`` up to `doubt`; rest holds what rounding leaves of spreading a surplus, some
        2^-53 of it, and doubt what rounding leaves of that. Both are zero where nothing was spread.
    notes : tuple of str
        What was spread, and where.
    """

    value: FloatArray
    rest: FloatArray
    doubt: FloatArray
    notes: tuple[str, ...]


def balanced_sources(
    network: Complex, source: FloatArray, label: IntArray, has_outlet: BoolArray, *, spread: bool
) -> Sources:
    """Sources that the network can carry, or an error that names the component which cannot.

    Parameters
    ----------
    network : Complex
        For the names in messages.
    source : float64 array, shape (n0, m)
        What is put in at each vertex.
    label : int64 array, shape (n0,)
        Component of each vertex.
    has_outlet : bool array, shape (n_components,)
        Whether a potential is fixed there, so that any surplus can leave.
    spread : bool
        Whether a surplus beyond rounding is spread evenly over its component instead of being refused.

    Returns
    -------
    Sources
        A surplus of at most n 2^-52 sum |source|, which rounding of balanced data explains, is always spread evenly.

    Raises
    ------
    UnsolvableError
        If a component without a fixed potential has a larger surplus; the message names its first vertices.

    Examples
    --------
    >>> K = Complex.from_edges([0], [1])
    >>> part = np.zeros(2, dtype=np.int64)
    >>> balanced_sources(K, np.array([[2.0], [1.0]]), part, np.array([False]), spread=True).value.tolist()
    [[0.5], [-0.5]]
    """
    count = len(has_outlet)
    size = np.bincount(label, minlength=count)
    value, rest, doubt, notes = source.copy(), np.zeros_like(source), np.zeros_like(source), []
    for j in range(source.shape[1]):
        surplus, left, gross = component_sums(source[:, j], label, count)
        surplus[has_outlet] = left[has_outlet] = 0.0
        large = np.abs(surplus) > size * 2.0**-52 * gross
        if large.any() and not spread:
            raise UnsolvableError(_refusal(network, label, surplus, large, j if source.shape[1] > 1 else None))
        parts = np.flatnonzero(surplus)
        if len(parts):
            share, share_rest = _negative_shares(surplus, left, size)
            value[:, j], rest[:, j] = pair_sum(source[:, j], share[label])
            rest[:, j] += share_rest[label]
            doubt[:, j] = 2 * UNIT * (np.abs(rest[:, j]) + np.abs(share_rest)[label]) + (UNIT**2 * np.abs(share))[label]
            notes.extend(_spread_notes(network, label, surplus, size, large, parts))
    return Sources(value, rest, doubt, tuple(dict.fromkeys(notes)))


def component_sums(values: FloatArray, label: IntArray, count: int) -> tuple[FloatArray, FloatArray, FloatArray]:
    """The exact sum of the values of each component, rounded once, what rounding left, and the sum of magnitudes.

    Parameters
    ----------
    values : float64 array, shape (n0,)
    label : int64 array, shape (n0,)
        0 .. count - 1, every number used.
    count : int

    Returns
    -------
    total, left, gross : float64 arrays, shape (count,)
        ``total + left`` is the sum to twice the precision; total is zero only where the sum is.

    Notes
    -----
    Source: Shewchuk, Adaptive precision floating-point arithmetic, Discrete Comput. Geom. 18 (1997), as in `math.fsum`.

    Examples
    --------
    >>> component_sums(np.array([1e16, 1.0, -1e16, 0.1]), np.array([0, 0, 0, 1]), 2)[0]
    array([1. , 0.1])
    """
    total, left = np.zeros(count), np.zeros(count)
    used = np.flatnonzero(values)
    order = used if count == 1 else used[np.argsort(label[used], kind="stable")]
    ordered = label[order]
    starts = np.flatnonzero(np.diff(ordered, prepend=-1))
    sizes = np.diff(starts, append=len(order))
    single = sizes == 1
    total[ordered[starts[single]]] = values[order[starts[single]]]
    for start, size in zip(starts[~single].tolist(), sizes[~single].tolist(), strict=True):
        terms = values[order[start : start + size]].tolist()
        part = ordered[start]
        total[part], left[part] = _exact_sum(terms)
    gross: FloatArray = np.bincount(label, weights=np.abs(values), minlength=count).astype(np.float64)
    return total, left, gross


def part_name(network: Complex, label: IntArray, part: int) -> str:
    """A component in words: its number and its first vertices.

    Examples
    --------
    >>> K = Complex.from_edges([0, 2], [1, 3], vertex_ids=["A", "B", "C", "D"])
    >>> part_name(K, K.component_labels, 1)
    'part 2 (vertices C, D)'
    """
    members = np.flatnonzero(label == part)
    names = [str(network.vertex_ids[v]) if network.vertex_ids is not None else str(v) for v in members[:_NAMED]]
    more = f", ... ({len(members):,} in all)" if len(members) > _NAMED else ""
    return f"part {part + 1} ({'vertex' if len(members) == 1 else 'vertices'} {', '.join(names)}{more})"


def _exact_sum(terms: list[float]) -> tuple[float, float]:
    try:
        total = fsum(terms)
        return total, fsum([*terms, -total])
    except OverflowError:  # a partial sum passes the largest float, though the sum may not
        exact = sum(map(Fraction, terms), Fraction(0))
        total = float(exact)
        return total, float(exact - Fraction(total))


def _negative_shares(surplus: FloatArray, left: FloatArray, size: IntArray) -> tuple[FloatArray, FloatArray]:
    """Return minus the surplus per vertex of each component, as a rounded value and the rest."""
    share, rest = np.zeros(len(size)), np.zeros(len(size))
    for part in np.flatnonzero(surplus).tolist():
        exact = -(Fraction(surplus[part]) + Fraction(left[part])) / int(size[part])
        share[part] = float(exact)
        rest[part] = float(exact - Fraction(share[part]))
    return share, rest


def _refusal(network: Complex, label: IntArray, surplus: FloatArray, large: BoolArray, column: int | None) -> str:
    part = int(np.argmax(large))
    where = "" if column is None else f" in column {column}"
    others = int(large.sum()) - 1
    more = f"; {others:,} other part{'s' if others > 1 else ''} likewise" if others else ""
    return (
        f"{part_name(network, label, part)} has no fixed potential, yet its sources add up to {surplus[part]:.12g}"
        f"{where} instead of 0{more}; fix a potential there, correct a source, or spread the surplus evenly with "
        'unbalanced="spread"'
    )


def _spread_notes(
    network: Complex, label: IntArray, surplus: FloatArray, size: IntArray, large: BoolArray, parts: IntArray
) -> list[str]:
    notes = []
    for part in parts[:_NAMED].tolist():
        within = "" if large[part] else " (within rounding)"
        notes.append(
            f"the sources of {part_name(network, label, part)} add up to {surplus[part]:.6g}{within}: spread evenly "
            f"over its {size[part]:,} vertices"
        )
    if len(parts) > _NAMED:
        notes.append(f"the same in {len(parts) - _NAMED:,} other parts")
    return notes
