"""Several readings of one edge: each against the adjusted value."""

import numpy as np

from dec.arrays import FloatArray
from dec.audit.adjusted.adjustment import Adjustment
from dec.audit.given.model import Model
from dec.audit.given.readings import Repeats
from dec.audit.names import edge_names
from dec.audit.record import Suspect
from dec.calculus.complex import Complex

__all__ = ["reading_names", "reading_statistics", "reading_suspects"]


def reading_statistics(repeats: Repeats, adjustment: Adjustment) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Correction of each reading, the test of an error in it alone, and what all else says it is.

    Parameters
    ----------
    repeats : Repeats
    adjustment : Adjustment

    Returns
    -------
    correction, statistic, estimate : float64 arrays, one a reading
        The last two are nan where nothing can contradict a reading.

    Notes
    -----
    With w = 1 / sd^2 and W their sum on an edge, an error in one reading moves the mean by w / W, and the reading
    against the others of its edge, so h' M h = w (W - w) / W + (w / W)^2 M[edge, edge], and h' M y likewise. That
    holds with common errors too, which move all readings of an edge alike.
    """
    edge, evidence = repeats.edge, adjustment.evidence
    correction = adjustment.adjusted[edge] - repeats.value
    statistic, estimate = np.full(len(edge), np.nan), np.full(len(edge), np.nan)
    if repeats.sd is None or evidence.diagonal is None:
        return correction, statistic, estimate
    own = repeats.sd**-2.0
    total = np.bincount(edge, weights=own, minlength=len(adjustment.adjusted))[edge]
    part, mean = own / total, (adjustment.adjusted - adjustment.correction)[edge]
    weight = own * (total - own) / total + part**2 * evidence.diagonal[edge]
    score = own * (repeats.value - mean) + part * evidence.score[edge]
    seen = weight > 0
    statistic[seen] = np.abs(score[seen]) / np.sqrt(weight[seen])
    estimate[seen] = repeats.value[seen] - score[seen] / weight[seen]
    return correction, statistic, estimate


def reading_names(network: Complex, repeats: Repeats) -> list[str]:
    """The sensor of each reading, or its edge and which of its readings it is."""
    names, found = edge_names(network, repeats.edge), []
    seen: dict[str, int] = {}
    for name, sensor in zip(names.tolist(), repeats.sensor.tolist(), strict=True):
        seen[name] = seen.get(name, 0) + 1
        found.append(str(sensor) if sensor else f"{name} #{seen[name]}")
    return found


def reading_suspects(
    network: Complex, model: Model, adjustment: Adjustment, critical: float, most: int
) -> tuple[Suspect, ...]:
    """Single readings of edges with several that stand out, loudest first.

    Parameters
    ----------
    network : Complex
    model : Model
    adjustment : Adjustment
    critical : float
    most : int
        Suspects to return at most.

    Returns
    -------
    tuple of Suspect
    """
    repeats = model.readings.repeats
    if repeats is None or repeats.sd is None:
        return ()
    _, statistic, estimate = reading_statistics(repeats, adjustment)
    count = np.bincount(repeats.edge, minlength=len(adjustment.adjusted))
    loud = np.flatnonzero((statistic > critical) & (count[repeats.edge] > 1))
    loud = loud[np.argsort(-statistic[loud], kind="stable")][:most]
    names = reading_names(network, repeats) if len(loud) else []
    found = []
    for k in loud.tolist():
        edge = int(repeats.edge[k])
        alone = adjustment.standing[edge] != "checked" and count[edge] == 2
        others = np.flatnonzero((repeats.edge == edge) & (np.arange(len(names)) != k)).tolist()
        same = tuple(("reading", names[other]) for other in others if alone)
        hint = f"one of {count[edge]} readings of edge {edge_names(network, np.array([edge]))[0]}"
        found.append(Suspect("reading", names[k], float(statistic[k]), float(estimate[k]), same, hint))
    return tuple(found)
