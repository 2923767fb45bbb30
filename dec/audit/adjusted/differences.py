"""Loops by least squares: edges not measured are left out, what is left to check are cycles."""

import numpy as np
from scipy.sparse import csr_array

from dec.arrays import BoolArray, FloatArray, IntArray
from dec.audit.adjusted.adjustment import (
    MOST_INFERRED_WORK,
    Adjustment,
    Shared,
    chi_square_of,
    relative_gap,
    standings,
)
from dec.audit.adjusted.closures import Closures
from dec.audit.adjusted.evidence import Evidence, difference_evidence, with_common
from dec.audit.adjusted.laplacian import BLOCK, Laplacian
from dec.audit.exactly import as_floats
from dec.audit.given.model import Model
from dec.topology.edges import edge_coboundary
from dec.topology.graphs import bridges

__all__ = ["adjust_differences"]


def adjust_differences(
    model: Model, found: Closures, common: csr_array | None = None, figures: str = "auto"
) -> Adjustment:
    """Differences that close round every loop and lie nearest to the readings.

    Parameters
    ----------
    model : Model
        Without standard deviations all readings weigh the same.
    found : Closures
        How far the readings close.
    common : csr_array, shape (m, k), or None
        What one standard deviation of each common error adds to the readings.
    figures : "auto", "all" or "estimate"
        As in `adjust_flows`.

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
    when measured edges connect its ends. Common errors b = G' M y are taken from the readings first.
    """
    tail, head, measured, sd = model.tail, model.head, model.measured, model.sd
    held = np.zeros(model.n_vertices) if model.known is None else model.known.value
    group, n_groups = found.group, len(found.height)
    used = np.flatnonzero(measured)
    weight = 1.0 / sd[used] ** 2
    laplacian = Laplacian(group[tail[used]], group[head[used]], n_groups, weight, found.anchor)
    rest = np.zeros(len(used))
    rest[np.searchsorted(used, found.chords)] = as_floats(found.misclosure, found.places)
    height = found.height - found.height[laplacian.grounded]
    rest, shift = _closed(laplacian, rest, as_floats(height, found.places))
    unchecked = np.zeros(len(tail), dtype=bool)
    unchecked[used] = laplacian.settled
    datum = _datum(model, used)
    evidence = difference_evidence(
        laplacian, used, len(tail), rest, unchecked[used], datum, _datum_testable(model), figures
    )
    bias: FloatArray = np.zeros(len(tail))
    amounts: FloatArray = np.zeros(0)
    lift: FloatArray | None = None
    shared = None
    if common is not None and common.shape[1]:
        plain, evidence = evidence, with_common(evidence, common)
        shared = None if plain.diagonal is None else Shared.of(plain, sd, common)
        lift = _lifted(laplacian, common[used])
        amounts = common.T @ evidence.score[: len(tail)]
        bias = common @ amounts
        shift = shift - lift @ amounts
        rest = rest - bias[used] + laplacian.difference @ (lift @ amounts)
        rest[laplacian.settled] = 0.0
    potential = shift[group] + held
    part = laplacian.component[group]
    inferred = ~measured & (part[tail] == part[head])
    correction = np.full(len(tail), np.nan)
    correction[used] = np.where(unchecked[used], 0.0, -rest) - bias[used]
    drop = potential[head] - potential[tail]
    adjusted = np.where(measured, model.readings.value + correction, np.where(inferred, drop, np.nan))
    gap = (adjusted - drop)[measured | inferred]
    deviation = np.where(unchecked[used], 0.0, rest) / sd[used]
    every = _figures(laplacian, evidence, model, group, used, inferred, common, shared, lift, found.anchor, figures)
    return Adjustment(
        adjusted, correction, every[0], every[1], standings(measured, measured & ~unchecked, inferred),
        len(used) - (n_groups - laplacian.n_components), chi_square_of(deviation, amounts), group,
        relative_gap(gap, adjusted, model.readings.value, potential), part, evidence, laplacian.because,
        lift is not None, potential, every[2],
    )  # fmt: skip


def _closed(laplacian: Laplacian, rest: FloatArray, shift: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return what least squares leaves of the misclosures, and the potentials; a second turn mends the rounding."""
    for _ in range(2):
        pulled, step = laplacian.change(laplacian.gather @ (laplacian.conductance * rest))
        rest = rest + pulled / laplacian.conductance
        shift = shift + step
    return rest, shift


def _datum(model: Model, used: IntArray) -> csr_array:
    """Return what one unit more in each held potential adds to the measured differences, less what is known."""
    incidence = edge_coboundary(model.tail[used], model.head[used], model.n_vertices).astype(np.float64)
    return csr_array(-incidence[:, model.attached])


def _datum_testable(model: Model) -> BoolArray:
    """Return for each held vertex whether measured edges join it to another held one, or to a reading at a vertex."""
    measured = np.flatnonzero(model.measured)
    n_held = len(model.attached)
    tail = np.append(model.tail[measured], np.full(n_held, model.n_vertices - 1))
    head = np.append(model.head[measured], model.attached)
    return np.asarray(~bridges(tail, head, model.n_vertices)[len(measured) :])


def _lifted(laplacian: Laplacian, common: csr_array) -> FloatArray:
    """Return by how much each common error moves the potentials, (D' W D)^-1 D' W G."""
    columns = [np.zeros((laplacian.n_vertices, 0))]
    for first in range(0, common.shape[1], BLOCK):
        drawn = laplacian.conductance[:, None] * common[:, first : first + BLOCK].toarray()
        columns.append(laplacian.change(laplacian.gather @ drawn)[1])
    return np.concatenate(columns, axis=1)


def _figures(
    laplacian: Laplacian, evidence: Evidence, model: Model, group: IntArray, used: IntArray, inferred: BoolArray,
    common: csr_array | None, shared: Shared | None, lift: FloatArray | None, anchor: int | None, figures: str,
) -> tuple[FloatArray | None, FloatArray | None, FloatArray | None]:  # fmt: skip
    """Return redundancy, sd of adjusted differences and sd of potentials; None where not all can be had."""
    if evidence.diagonal is None:
        return None, None, None
    m, sd, tail, head = len(model.tail), model.sd, group[model.tail], group[model.head]
    share, slack, _ = laplacian.figures(figures)
    assert share is not None
    follows = np.flatnonzero(inferred)
    between = np.full(len(follows), np.nan)
    if len(follows) * len(used) <= MOST_INFERRED_WORK:
        between = laplacian.resistances(tail[follows], head[follows])
    variance, redundancy = np.full(m, np.nan), np.full(m, np.nan)
    variance[used], redundancy[used] = sd[used] ** 2 * share, slack
    variance[follows] = between
    reached = np.zeros(len(group), dtype=bool)
    if anchor is not None:
        reached = (laplacian.component == laplacian.component[anchor])[group]
    to_ground = laplacian.to_ground() if laplacian.gives_all else np.full(laplacian.n_vertices, np.nan)
    if lift is not None and common is not None and shared is not None:
        redundancy = np.where(model.measured, shared.redundancies(evidence, sd, common), np.nan)
        variance += shared.added((lift[head] - lift[tail]).T)
        to_ground = to_ground + shared.added(lift.T)
    potential_sd = np.full(len(group), np.nan)
    potential_sd[reached] = np.sqrt(to_ground)[group[reached]]
    return redundancy, np.sqrt(variance), potential_sd
