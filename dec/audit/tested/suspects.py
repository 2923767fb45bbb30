"""Which errors stand out, what cannot be told apart from them, and what would explain them."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy.special import chdtri

from dec.arrays import IntArray
from dec.audit.adjusted.adjustment import Adjustment
from dec.audit.adjusted.evidence import Evidence
from dec.audit.given.model import Model
from dec.audit.names import edge_names, vertex_names
from dec.audit.record import Suspect
from dec.audit.tested.hints import Hint, hint_for
from dec.audit.tested.inseparable import members
from dec.audit.tested.single_errors import SingleErrors
from dec.calculus.complex import Complex

__all__ = ["MOST_SUSPECTS", "Naming", "suspects_among"]

MOST_SUSPECTS = 20
_MOST_NAMED = 200


@dataclass(frozen=True, slots=True)
class Naming:
    """What each possible error is called.

    Attributes
    ----------
    network : Complex
    model : Model
    place : function of the number of a place
        Name of a group of vertices that balance only together, or of a held vertex.
    at_vertex : str
        What a reading at a vertex is: "supply" or "potential".
    unit : str or None
        Of the readings, for hints.
    """

    network: Complex
    model: Model
    place: Callable[[int], str]
    at_vertex: str
    unit: str | None = None

    def __call__(self, error: int) -> tuple[str, str]:
        """Kind and id of an error."""
        own, m = self.model.n_edges, len(self.model.tail)
        if error < own:
            return "edge", str(edge_names(self.network, np.array([error]))[0])
        if error < m:
            return self.at_vertex, str(vertex_names(self.network, self.model.vertex[[error - own]])[0])
        return "vertex", self.place(error - m)


def suspects_among(
    single: SingleErrors, classes: IntArray, model: Model, adjustment: Adjustment, naming: Naming, critical: float,
    alpha: float, *, in_proportion: bool = False,
) -> tuple[Suspect, ...]:  # fmt: skip
    """Errors whose own test exceeds the limit, one of a class, at most twenty, loudest first.

    Parameters
    ----------
    single : SingleErrors
    classes : int64 array, shape (K,)
    model : Model
    adjustment : Adjustment
    naming : Naming
    critical : float
    alpha : float
        Of the global test that each would be followed by.
    in_proportion : bool
        Whether common errors are shares of the readings.

    Returns
    -------
    tuple of Suspect
        They rank what to look at and never decide whether the law holds. Of a class the one leads that a turned sign
        explains, else one that a unit explains, else the first.
    """
    if model.readings.sd is None:
        return ()
    loud = np.flatnonzero(single.statistic > critical)
    loud = loud[np.argsort(-single.statistic[loud], kind="stable")]
    found: list[Suspect] = []
    named: set[int] = set()
    for k in loud.tolist():
        error = int(single.error[k])
        label = int(classes[error])
        if label in named:
            continue
        if len(found) == MOST_SUSPECTS:
            break
        named.add(label)
        others = members(classes, error)
        found.append(_suspect(k, single, others, model, adjustment, naming, critical, alpha, in_proportion))
    return tuple(found)


def _suspect(
    k: int, single: SingleErrors, others: IntArray, model: Model, adjustment: Adjustment, naming: Naming,
    critical: float, alpha: float, in_proportion: bool,
) -> Suspect:  # fmt: skip
    at = np.minimum(np.searchsorted(single.error, others), len(single.error) - 1)
    together = [k, *at[single.error[at] == others].tolist()]
    hints = {i: _hint(single, i, model, critical, naming.unit) for i in together}
    rank = {i: 2 if (h := hints[i]) is None or h.factor is None else int(h.factor != -1.0) for i in together}
    lead = min(together, key=lambda i: (rank[i], i))
    error = int(single.error[lead])
    rest = sorted({int(single.error[k]), *others.tolist()} - {error})
    more = f"; {len(rest) - _MOST_NAMED:,} more are of its class in the tables" if len(rest) > _MOST_NAMED else ""
    kind, name = naming(error)
    statistic, hint = float(single.statistic[lead]), hints[lead]
    is_reading = error < len(model.tail)
    return Suspect(
        kind, name, statistic,
        float(model.readings.value[error] - single.estimate[lead]) if is_reading else float(single.estimate[lead]),
        tuple(naming(e) for e in rest[:_MOST_NAMED]),
        (_place_hint(single, lead, naming.at_vertex) if hint is None else hint.text) + more,
        float(single.weight[lead] ** -0.5),
        _outcomes(single, lead, model, adjustment, hint, alpha, in_proportion),
    )  # fmt: skip


def _hint(single: SingleErrors, k: int, model: Model, critical: float, unit: str | None) -> Hint | None:
    error = int(single.error[k])
    if error >= len(model.tail):
        return None
    value, spread = float(model.readings.value[error]), float(single.weight[k] ** -0.5)
    return hint_for(value, value - float(single.estimate[k]), spread, critical, unit)


def _place_hint(single: SingleErrors, k: int, at_vertex: str) -> str:
    amount = float(single.estimate[k])
    if at_vertex == "supply":
        return "more arrives than leaves: a leak, or a demand not stated?" if amount > 0 else "more leaves than arrives"
    return "the held value lies too high against all else" if amount > 0 else "the held value lies too low"


def _outcomes(
    single: SingleErrors, k: int, model: Model, adjustment: Adjustment, hint: Hint | None, alpha: float,
    in_proportion: bool,
) -> dict[str, dict[str, object]]:  # fmt: skip
    """Return the global test as it would be without the suspect, and with the hinted factor on it."""
    score, weight, error = float(single.estimate[k] * single.weight[k]), float(single.weight[k]), int(single.error[k])
    chi_square, dof = adjustment.chi_square, adjustment.dof
    among, n_among, own, n_own = _among_readings(model, error)
    left_out = _outcome(chi_square - score**2 / weight + among - own, dof - 1 + n_among - n_own, alpha)
    found: dict[str, dict[str, object]] = {"left_out": left_out}
    if hint is not None and hint.factor is not None:
        changed = _scaled(adjustment.evidence, chi_square, error, weight, model, hint.factor, in_proportion)
        found["turned" if hint.factor == -1 else "scaled"] = {
            "factor": hint.factor, **_outcome(changed + among, dof + n_among, alpha)
        }  # fmt: skip
    return found


def _among_readings(model: Model, error: int) -> tuple[float, int, float, int]:
    """Return chi-square and checks among several readings of one edge, of all edges and of that of an error."""
    repeats = model.readings.repeats
    if repeats is None:
        return 0.0, 0, 0.0, 0
    rows = np.flatnonzero(repeats.edge == error)
    if repeats.sd is None or not len(rows):
        return repeats.chi_square, repeats.dof, 0.0, 0
    away = (repeats.value[rows] - model.readings.value[error]) / repeats.sd[rows]
    return repeats.chi_square, repeats.dof, float(away @ away), len(rows) - 1


def _scaled(
    evidence: Evidence, chi_square: float, error: int, weight: float, model: Model, factor: float,
    in_proportion: bool,
) -> float:  # fmt: skip
    """Return chi-square with a reading and its standard deviation multiplied.

    With U K U' added to the covariance, M becomes M - M U (1 + K U' M U)^-1 K U' M, by the identity of Sherman,
    Morrison and Woodbury; U is the reading's own error, and what a common error that is a share of it moves else.
    """
    n, step = evidence.n_edges, (factor - 1.0) * float(model.readings.value[error])
    score = float(evidence.score[error]) + step * weight
    changed = chi_square + step * (2.0 * score - step * weight)
    more = (factor**2 - 1.0) * float(model.sd[error]) ** 2
    if evidence.common is None or not in_proportion:
        return changed - more * score**2 / (1.0 + more * weight)
    row = evidence.common[[error]]
    moved = (factor - 1.0) * (evidence.common @ row.T).toarray()
    column = evidence.of_readings(moved)[:, 0]
    seen = np.array([score, float(moved[:, 0] @ evidence.score[:n]) + step * column[error]])
    inner = np.array([[weight, column[error]], [column[error], moved[:, 0] @ column[:n]]])
    added = np.array([[more + (factor - 1.0) ** 2 * float(row.power(2).sum()), 1.0], [1.0, 0.0]])
    return float(changed - seen @ np.linalg.solve(np.eye(2) + added @ inner, added @ seen))


def _outcome(chi_square: float, dof: int, alpha: float) -> dict[str, object]:
    limit = float(chdtri(dof, alpha)) if dof else None
    kept = max(chi_square, 0.0)
    return {"chi_square": kept, "dof": dof, "limit": limit, "holds": None if limit is None else kept <= limit}
