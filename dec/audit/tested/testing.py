"""Every test of a measured network, made and gathered: single errors, suspects, several at once, what chance gives."""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np

from dec.arrays import FloatArray, IntArray
from dec.audit.adjusted.adjustment import Adjustment
from dec.audit.given.asked import Asked
from dec.audit.given.deviations import percentage
from dec.audit.given.model import Model
from dec.audit.record import Suspect
from dec.audit.tested.inseparable import NOTHING, members
from dec.audit.tested.repeated_readings import reading_suspects
from dec.audit.tested.robust import least_absolute
from dec.audit.tested.several_errors import Several, several_errors
from dec.audit.tested.single_errors import CRITICAL, DETECTABLE, RATE, critical_for, rate_for, single_errors
from dec.audit.tested.suspects import MOST_SUSPECTS, Naming, suspects_among
from dec.audit.verdict import Limits

__all__ = ["Tested", "tested"]


@dataclass(frozen=True, slots=True)
class Tested:
    """What single errors show; arrays over all K possible errors: edges of the model, then places.

    Attributes
    ----------
    statistic, estimate, estimate_sd, detectable : float64 arrays, shape (K,)
        nan where nothing can contradict the error, or where it was not worked out.
    class_number : int64 array, shape (K,)
        From 1; errors with the same number cannot be told apart; 0 where nothing can contradict the error.
    suspects : tuple of Suspect
    critical : float
        Limit of a single test.
    critical_said : str
    several : mapping or None
        Errors that together explain what the readings contradict.
    chance : mapping or None
        How many single tests there were, one a class, how many exceed the limit, and how many chance alone would give;
        None also where only the loudest errors were looked at, of which chance says nothing.
    robust : mapping or None
    is_all : bool
        Whether every possible error was worked out.
    relative_error : float
        Of the weights that were estimated; 0 where they are exact.
    """

    statistic: FloatArray
    estimate: FloatArray
    estimate_sd: FloatArray
    detectable: FloatArray
    class_number: IntArray
    suspects: tuple[Suspect, ...]
    critical: float
    critical_said: str
    several: dict[str, Any] | None
    chance: dict[str, Any] | None
    robust: dict[str, Any] | None
    is_all: bool
    relative_error: float


def tested(
    model: Model, adjustment: Adjustment, classes_beside: Callable[[IntArray], IntArray], naming: Naming,
    asked: Asked, limits: Limits, *, balance: bool,
) -> Tested:  # fmt: skip
    """Make all tests of one audit.

    Parameters
    ----------
    model : Model
    adjustment : Adjustment
    classes_beside : function of an int64 array
        Classes of errors, shape (K,), beside some that are there for certain.
    naming : Naming
    asked : Asked
    limits : Limits
    balance : bool
        Which law.

    Returns
    -------
    Tested
    """
    classes = classes_beside(NOTHING)
    evidence, n = adjustment.evidence, len(classes)
    _, number = np.unique(classes[classes >= 0], return_inverse=True)
    class_number = np.zeros(n, np.int64)
    class_number[classes >= 0] = number + 1
    n_classes = int(class_number.max(initial=0))
    critical = critical_for(n_classes, limits.alpha) if asked.sidak else CRITICAL
    said = f"Sidak's limit for {n_classes} tests at {limits.alpha:g} in all" if asked.sidak else f"{RATE:g} a test"
    nothing = np.full(n, np.nan)
    if model.readings.sd is None:
        return Tested(nothing, nothing, nothing, nothing, class_number, (), critical, said, None, None, None, True, 0.0)
    single = single_errors(evidence)
    statistic, estimate, spread, detectable = (nothing.copy() for _ in range(4))
    statistic[single.error], estimate[single.error] = single.statistic, single.estimate
    spread[single.error] = single.weight**-0.5
    detectable[single.error] = DETECTABLE * spread[single.error]
    if evidence.diagonal is not None and evidence.relative_error:
        _add_estimates(evidence.score, evidence.diagonal, statistic, estimate, spread, detectable)
    suspects = suspects_among(
        single, classes, model, adjustment, naming, critical, limits.alpha,
        in_proportion=isinstance(asked.common_sd, str) and percentage(asked.common_sd) is not None,
    )  # fmt: skip
    suspects += reading_suspects(naming.network, model, adjustment, critical, MOST_SUSPECTS)
    suspects = tuple(sorted(suspects, key=lambda s: -s.statistic)[:MOST_SUSPECTS])
    several, repeats = None, model.readings.repeats
    together = max(critical, critical_for(n_classes, limits.alpha))  # chance alone makes the loudest of many loud
    among = (0.0, 0) if repeats is None else (repeats.chi_square, repeats.dof)
    if suspects and adjustment.dof > 0:
        several = _several(
            several_errors(evidence, single, adjustment.chi_square, adjustment.dof, limits.alpha, together, among),
            classes_beside, model, naming,
        )  # fmt: skip
    return Tested(
        statistic, estimate, spread, detectable, class_number, suspects, critical, said, several,
        _chance(statistic, class_number, critical, rate_for(n_classes, limits.alpha) if asked.sidak else RATE)
        if single.is_all or evidence.diagonal is not None else None,
        _robust(model, adjustment, naming, balance=balance) if asked.robust else None,
        single.is_all, evidence.relative_error,
    )  # fmt: skip


def _add_estimates(
    score: FloatArray, diagonal: FloatArray, statistic: FloatArray, estimate: FloatArray, spread: FloatArray,
    detectable: FloatArray,
) -> None:  # fmt: skip
    """Fill in, from estimated weights, what was not worked out exactly."""
    rest = np.flatnonzero(np.isnan(statistic) & (diagonal > 0))
    spread[rest] = diagonal[rest] ** -0.5
    statistic[rest], estimate[rest] = np.abs(score[rest]) * spread[rest], score[rest] / diagonal[rest]
    detectable[rest] = DETECTABLE * spread[rest]


def _several(
    found: Several, classes_beside: Callable[[IntArray], IntArray], model: Model, naming: Naming
) -> dict[str, Any]:
    rows = []
    for k, error in enumerate(found.error.tolist()):
        kind, name = naming(error)
        alike = members(classes_beside(np.delete(found.error, k)), error)
        is_reading = error < len(model.tail)
        value = float(model.readings.value[error]) if is_reading else None
        rows.append({
            "kind": kind, "id": name, "value": value,
            "estimate": float(found.estimate[k]) if value is None else value - float(found.estimate[k]),
            "sd": float(found.sd[k]), "statistic": float(found.statistic[k]),
            "inseparable_from": [dict(zip(("kind", "id"), naming(e), strict=True)) for e in alike.tolist()],
        })  # fmt: skip
    return {
        "found": rows, "chi_square": found.chi_square, "dof": found.dof, "limit": found.limit, "holds": found.holds,
        "why_stopped": found.why_stopped,
    }  # fmt: skip


def _chance(statistic: FloatArray, class_number: IntArray, critical: float, each: float) -> dict[str, Any]:
    n_classes, loud = int(class_number.max(initial=0)), np.unique(class_number[statistic > critical])
    return {"tests": n_classes, "exceed": len(loud), "expected": float(n_classes * each), "limit": critical}


def _robust(model: Model, adjustment: Adjustment, naming: Naming, *, balance: bool) -> dict[str, Any]:
    change = least_absolute(model, adjustment, balance=balance)
    size = np.nan_to_num(np.abs(change) / model.sd)
    loud = np.flatnonzero(size > CRITICAL)
    loud = loud[np.argsort(-size[loud], kind="stable")][:MOST_SUSPECTS]
    rows = []
    for error in loud.tolist():
        kind, name = naming(error)
        value = float(model.readings.value[error])
        rows.append({"kind": kind, "id": name, "value": value, "estimate": value + float(change[error]),
                     "times_sd": float(size[error])})  # fmt: skip
    return {
        "method": "least sum of absolute changes over their standard deviations, by linear programming",
        "changed": int((size > 1e-9).sum()), "large": rows,
    }  # fmt: skip
