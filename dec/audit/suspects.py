"""Which readings stand out, what cannot be told apart from them, and what would explain them."""

import numpy as np

from dec.arrays import BoolArray, FloatArray, IntArray
from dec.audit.adjustment import Adjustment
from dec.audit.names import edge_names
from dec.audit.readings import Readings
from dec.audit.record import Suspect
from dec.calculus.complex import Complex
from dec.topology.graphs import bridges

__all__ = ["CRITICAL", "DETECTABLE", "edge_suspects", "edge_tests"]

# Two-sided normal quantile for 0.1 %, and the non-centrality for a power of 80 % at it. Source: Baarda, A Testing
# Procedure for Use in Geodetic Networks, 1968.
CRITICAL = 3.2905
DETECTABLE = 4.13
_MOST = 20


def edge_tests(readings: Readings, adjustment: Adjustment) -> tuple[FloatArray, FloatArray]:
    """Each reading's own test and the smallest error it would show.

    Parameters
    ----------
    readings : Readings
    adjustment : Adjustment

    Returns
    -------
    statistic : float64 array, shape (n1,)
        |correction| over its standard deviation; nan where nothing can contradict the reading.
    detectable : float64 array, shape (n1,)
        4.13 sd / sqrt(redundancy), in the unit of the readings: found in 80 % of cases at a 0.1 % false-alarm rate.
    """
    n = len(readings.value)
    nothing = np.full(n, np.nan), np.full(n, np.nan)
    if readings.sd is None or adjustment.redundancy is None:
        return nothing
    statistic, detectable = nothing
    checked = np.flatnonzero((adjustment.standing == "checked") & (adjustment.redundancy > 0))
    root = np.sqrt(adjustment.redundancy[checked])
    statistic[checked] = np.abs(adjustment.correction[checked]) / (readings.sd[checked] * root)
    detectable[checked] = DETECTABLE * readings.sd[checked] / root
    return statistic, detectable


def edge_suspects(
    network: Complex, readings: Readings, adjustment: Adjustment, statistic: FloatArray, *, balance: bool
) -> tuple[Suspect, ...]:
    """Readings whose own test exceeds 3.29, at most twenty, worst first.

    Parameters
    ----------
    network : Complex
    readings : Readings
    adjustment : Adjustment
    statistic : float64 array, shape (n1,)
    balance : bool
        Which law.

    Returns
    -------
    tuple of Suspect
        They rank what to look at and never decide whether the law holds.
    """
    loud = np.flatnonzero(statistic > CRITICAL)
    loud = loud[np.argsort(-statistic[loud], kind="stable")][:_MOST]
    partners = _parallel if balance else _two_cuts
    found = []
    for edge, name in zip(loud.tolist(), edge_names(network, loud), strict=True):
        others = edge_names(network, partners(network, readings.measured, adjustment, edge))
        estimate = _estimate(readings, adjustment, edge)
        same = tuple(("edge", other) for other in others)
        found.append(
            Suspect("edge", name, float(statistic[edge]), estimate, same, _hint(readings, adjustment, edge, estimate))
        )
    return tuple(found)


def _estimate(readings: Readings, adjustment: Adjustment, edge: int) -> float:
    """Return what all other readings say the value is."""
    assert adjustment.redundancy is not None
    return float(readings.value[edge] + adjustment.correction[edge] / adjustment.redundancy[edge])


def _hint(readings: Readings, adjustment: Adjustment, edge: int, estimate: float) -> str | None:
    assert readings.sd is not None
    assert adjustment.redundancy is not None
    spread = float(readings.sd[edge] / np.sqrt(adjustment.redundancy[edge]))
    value = float(readings.value[edge])
    if abs(estimate + value) < CRITICAL * spread < abs(estimate - value):
        return "same size, opposite sign: is the meter or the direction of the edge the wrong way round?"
    return None


def _parallel(network: Complex, measured: BoolArray, adjustment: Adjustment, edge: int) -> IntArray:
    """Return the checked edges between the same two groups of vertices."""
    group = adjustment.group
    ends = np.sort(np.stack([group[network.tail], group[network.head]], axis=1), axis=1)
    same = (ends == ends[edge]).all(axis=1) & (adjustment.standing == "checked") & measured
    same[edge] = False
    return np.flatnonzero(same)


def _two_cuts(network: Complex, measured: BoolArray, adjustment: Adjustment, edge: int) -> IntArray:
    """Return the checked edges that become bridges when this one is taken away: every loop has both or neither."""
    rest = measured.copy()
    rest[edge] = False
    used = np.flatnonzero(rest)
    group = adjustment.group
    cut = bridges(group[network.tail[used]], group[network.head[used]], int(group.max()) + 1)
    checked: BoolArray = adjustment.standing[used] == "checked"
    return np.asarray(used[cut & checked])
