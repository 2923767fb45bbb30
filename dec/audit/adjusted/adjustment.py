"""What least squares makes of readings, by either law."""

from dataclasses import dataclass

import numpy as np
from scipy.linalg import cho_solve, cholesky, solve_triangular
from scipy.sparse import csr_array

from dec.arrays import BoolArray, FloatArray, IntArray, ObjectArray
from dec.audit.adjusted.evidence import Evidence
from dec.errors import AccuracyError

__all__ = ["MOST_INFERRED_WORK", "Adjustment", "Shared", "chi_square_of", "relative_gap", "standings"]

# Inferred edges times what each takes, vertices or measured edges: above this their standard deviations are left out,
# and the audit says so.
MOST_INFERRED_WORK = 50_000_000


_MOST_DEVIATION = 1e70  # products of two squares stay inside float64


@dataclass(frozen=True, slots=True)
class Adjustment:
    """Best consistent values, what can be checked, and how well; m edges of the model, as it numbers vertices.

    Attributes
    ----------
    adjusted : float64 array, shape (m,)
        nan where a value does not follow.
    correction : float64 array, shape (m,)
        Adjusted value minus reading; nan where there is none.
    redundancy : float64 array, shape (m,), or None
        0 to 1 at measured edges, nan elsewhere; None where the network is too large for all of them.
    adjusted_sd : float64 array, shape (m,), or None
        nan where a value does not follow, or where there are too many inferred ones to work out.
    standing : object array of str, shape (m,)
        checked, unchecked, inferred or unknown.
    dof : int
        Independent checks.
    chi_square : float
        Sum of squared corrections over their readings' variances.
    group : int64 array, shape (n_vertices,)
        Balance: vertices joined because they are open or because an edge between them is not measured. Loop: fixed
        vertices joined.
    closes_to : float
        Largest amount by which the adjusted values miss the law, over the largest value that went in or came out.
    part : int64 array, shape (n_vertices,)
        What measured edges join, groups taken as one vertex.
    evidence : Evidence
        What the readings say against each possible error.
    because : str
        How the equations were solved.
    shared : bool
        Whether readings share errors, so that parts of the network say something of each other.
    potential, potential_sd : float64 arrays, shape (n_vertices,), or None
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
    evidence: Evidence
    because: str
    shared: bool
    potential: FloatArray | None = None
    potential_sd: FloatArray | None = None


@dataclass(frozen=True, slots=True)
class Shared:
    """What k common errors G change in the figures of m edges.

    Attributes
    ----------
    root : float64 array, shape (k, k)
        Lower triangle, with root root' = 1 + G' M G; M as if each reading had only its own error.
    pulled : float64 array, shape (m, k)
        M G, with M after the common errors.
    left : float64 array, shape (m, k)
        What each common error leaves in the adjusted readings; 0 where there is no reading.
    """

    root: FloatArray
    pulled: FloatArray
    left: FloatArray

    @classmethod
    def of(cls, plain: Evidence, sd: FloatArray, common: csr_array) -> "Shared":
        """From M as if each reading had only its own error."""
        seen = plain.of_readings(common.toarray())[: plain.n_edges]
        root = cholesky(np.eye(common.shape[1]) + common.T @ seen, lower=True)
        kept = np.where(np.isnan(sd), 0.0, sd)[:, None] ** 2
        return cls(root, cho_solve((root, True), seen.T).T, common.toarray() - kept * seen)

    def added(self, moved: FloatArray) -> FloatArray:
        """Variance that common errors add to p values that they move so far, as sums of squares: nothing cancels.

        Parameters
        ----------
        moved : float64 array, shape (k, p)

        Returns
        -------
        float64 array, shape (p,)
        """
        return np.asarray((solve_triangular(self.root, moved, lower=True) ** 2).sum(axis=0))

    def redundancies(self, evidence: Evidence, sd: FloatArray, common: csr_array) -> FloatArray:
        """Diagonal of Qv P, from M after the common errors; float64 array of shape (m,)."""
        assert evidence.diagonal is not None
        own = sd**2 * evidence.diagonal[: evidence.n_edges]
        return np.asarray(own + common.multiply(self.pulled).sum(axis=1))


def chi_square_of(deviation: FloatArray, amounts: FloatArray) -> float:
    """Sum of squares of the corrections in standard deviations, common errors among them.

    Raises
    ------
    AccuracyError
        If one is so large that its square would overflow: no statistic could be worked out.
    """
    largest = max(float(np.abs(deviation).max(initial=0.0)), float(np.abs(amounts).max(initial=0.0)))
    if not largest <= _MOST_DEVIATION:
        message = (
            f"readings contradict each other by up to {largest:.0e} standard deviations, and double precision allows "
            f"{_MOST_DEVIATION:.0e}; correct the readings or their standard deviations"
        )
        raise AccuracyError(message)
    return float(deviation @ deviation + amounts @ amounts)


def standings(measured: BoolArray, checked: BoolArray, inferred: BoolArray) -> ObjectArray:
    """The word for each edge; object array of shape (m,)."""
    words = np.where(measured, np.where(checked, "checked", "unchecked"), np.where(inferred, "inferred", "unknown"))
    return words.astype(object)


def relative_gap(gap: FloatArray, *values: FloatArray) -> float:
    """Largest gap over the largest of the values; 0 where there is nothing to close."""
    size = max(float(np.nanmax(np.abs(array), initial=0.0)) for array in values)
    worst = float(np.abs(gap).max(initial=0.0))
    return worst / size if size > 0 else worst
