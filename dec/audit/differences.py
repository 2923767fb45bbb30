"""Loops by least squares: edges not measured are left out, what is left to check are cycles."""

import numpy as np

from dec.arrays import BoolArray, FloatArray, IntArray
from dec.audit.adjustment import Adjustment, relative_gap, standings
from dec.audit.closures import Closures
from dec.audit.exactly import as_floats
from dec.audit.laplacian import Laplacian
from dec.audit.readings import Known, Readings
from dec.calculus.complex import Complex
from dec.topology.graphs import bridges

__all__ = ["adjust_differences"]


def adjust_differences(network: Complex, readings: Readings, fixed: Known | None, found: Closures) -> Adjustment:
    """Differences that close round every loop and lie nearest to the readings.

    Parameters
    ----------
    network : Complex
    readings : Readings
        Without standard deviations all readings weigh the same.
    fixed : Known or None
        Potentials that are held exactly.
    found : Closures
        How far the readings close.

    Returns
    -------
    Adjustment
        Potentials are measured from the fixed ones; in a part without any, its lowest vertex has 0.

    Raises
    ------
    AccuracyError
        If the standard deviations lie too far apart.

    Notes
    -----
    Minimises sum (D p - y)^2 / sd^2 over potentials p: (D^T W D) p = D^T W y, W = diag(1 / sd^2), on the measured
    edges, with the fixed vertices joined into one; from potentials along a forest, so that what is solved for is only
    what the loops miss. Source: Strang and Borre, Linear Algebra, Geodesy, and GPS, 1997,
    chapter 8 (levelling networks). A measured edge is unchecked when it is a bridge; an edge not measured follows
    when measured edges connect its ends.
    """
    n, tail, head = network.counts[0], network.tail, network.head
    measured = readings.measured
    sd = np.ones(len(tail)) if readings.sd is None else readings.sd
    held = np.zeros(n) if fixed is None else fixed.value
    group, n_groups = found.group, len(found.height)
    used = np.flatnonzero(measured)
    weight = 1.0 / sd[used] ** 2
    laplacian = Laplacian(group[tail[used]], group[head[used]], n_groups, weight, found.anchor)
    rest = np.zeros(len(used))
    rest[np.searchsorted(used, found.chords)] = as_floats(found.misclosure, found.places)
    shift = as_floats(found.height - found.height[laplacian.grounded], found.places)
    for _ in range(2):  # the second turn takes away what rounding left of the first
        pulled, step = laplacian.change(laplacian.gather @ (weight * rest))
        rest += pulled / weight
        shift += step
    potential = shift[group] + held
    unchecked = np.zeros(len(tail), dtype=bool)
    unchecked[used] = bridges(laplacian.tail, laplacian.head, n_groups)
    part = laplacian.component[group]
    inferred = ~measured & (part[tail] == part[head])
    correction = np.full(len(tail), np.nan)
    correction[used] = np.where(unchecked[used], 0.0, -rest)
    drop = potential[head] - potential[tail]
    adjusted = np.where(measured, readings.value + correction, np.where(inferred, drop, np.nan))
    gap = (adjusted - drop)[measured | inferred]
    deviation = correction[used] / sd[used]
    redundancy, spread, potential_sd = _figures(laplacian, network, group, used, unchecked, inferred, sd, found.anchor)
    return Adjustment(
        adjusted, correction, redundancy, spread, standings(measured, measured & ~unchecked, inferred),
        len(used) - (n_groups - laplacian.n_components), float(deviation @ deviation), group,
        relative_gap(gap, adjusted, readings.value, potential), part, potential, potential_sd,
    )  # fmt: skip


def _figures(
    laplacian: Laplacian, network: Complex, group: IntArray, used: IntArray, unchecked: BoolArray, inferred: BoolArray,
    sd: FloatArray, anchor: int | None,
) -> tuple[FloatArray | None, FloatArray | None, FloatArray | None]:  # fmt: skip
    """Return redundancy, sd of adjusted differences and sd of potentials; None above the size for all."""
    if not laplacian.gives_all:
        return None, None, None
    tail, head, follows = group[network.tail], group[network.head], np.flatnonzero(inferred)
    start = np.concatenate([tail[follows], np.arange(laplacian.n_vertices)])
    end = np.concatenate([head[follows], laplacian.grounded])
    share, slack, resistance = laplacian.figures(start, end)
    between, to_ground = np.split(resistance, [len(follows)])
    kept = np.full(len(sd), np.nan)
    kept[used] = np.where(unchecked[used], 1.0, share)
    spread = sd * np.sqrt(kept)
    spread[follows] = np.sqrt(between)
    redundancy = np.full(len(sd), np.nan)
    redundancy[used] = np.where(unchecked[used], 0.0, slack)
    potential_sd = np.full(len(group), np.nan)
    if anchor is not None:
        reached = (laplacian.component == laplacian.component[anchor])[group]
        potential_sd[reached] = np.sqrt(to_ground)[group[reached]]
    return redundancy, spread, potential_sd
