"""What least squares makes of readings, by either law."""

from dataclasses import dataclass

import numpy as np

from dec.arrays import BoolArray, FloatArray, IntArray, ObjectArray

__all__ = ["Adjustment", "relative_gap", "standings"]


@dataclass(frozen=True, slots=True)
class Adjustment:
    """Best consistent values, what can be checked, and how well.

    Attributes
    ----------
    adjusted : float64 array, shape (n1,)
        nan where a value does not follow.
    correction : float64 array, shape (n1,)
        Adjusted value minus reading; nan where there is none.
    redundancy : float64 array, shape (n1,), or None
        0 to 1 at measured edges, nan elsewhere; None where the network is too large for all of them.
    adjusted_sd : float64 array, shape (n1,), or None
        nan where a value does not follow, or where there are too many inferred ones to work out.
    standing : object array of str, shape (n1,)
        checked, unchecked, inferred or unknown.
    dof : int
        Independent checks.
    chi_square : float
        Sum of squared corrections over their readings' variances.
    group : int64 array, shape (n0,)
        Balance: vertices joined because they are open or because an edge between them is not measured. Loop: fixed
        vertices joined.
    closes_to : float
        Largest amount by which the adjusted values miss the law, over the largest value that went in or came out.
    part : int64 array, shape (n0,)
        What measured edges join, groups taken as one vertex.
    potential, potential_sd : float64 arrays, shape (n0,), or None
        Loop law.
    """

    adjusted: FloatArray
    correction: FloatArray
    redundancy: FloatArray | None
    adjusted_sd: FloatArray | None
    standing: ObjectArray
    dof: int
    chi_square: float
    group: IntArray
    closes_to: float
    part: IntArray
    potential: FloatArray | None = None
    potential_sd: FloatArray | None = None


def standings(measured: BoolArray, checked: BoolArray, inferred: BoolArray) -> ObjectArray:
    """The word for each edge; object array of shape (n1,)."""
    words = np.where(measured, np.where(checked, "checked", "unchecked"), np.where(inferred, "inferred", "unknown"))
    return words.astype(object)


def relative_gap(gap: FloatArray, *values: FloatArray) -> float:
    """Largest gap over the largest of the values; 0 where there is nothing to close."""
    size = max(float(np.nanmax(np.abs(array), initial=0.0)) for array in values)
    worst = float(np.abs(gap).max(initial=0.0))
    return worst / size if size > 0 else worst
