"""What the readings say against each possible error: one operator, from which every test is taken.

With M = P Qv P (P the weights, Qv the covariance of the corrections) the readings y say M y. An error that adds h to
the readings has the test |h' M y| / sqrt(h' M h) and the estimate h' M y / h' M h. Source: Baarda, A Testing Procedure
for Use in Geodetic Networks, 1968; Teunissen, Testing Theory, 2000, chapter 4.
"""

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from scipy.linalg import cho_factor, cho_solve, solve_triangular
from scipy.sparse import csr_array

from dec.arrays import BoolArray, FloatArray, IntArray
from dec.audit.adjusted.laplacian import BLOCK, Laplacian
from dec.errors import InputError

__all__ = ["LOUDEST_PLACES", "Evidence", "difference_evidence", "flow_evidence", "with_common"]

# Largest dense block that common errors may take: errors in all times groups.
_MOST_COMMON = 20_000_000
# Held potentials times edges above which only the loudest held ones are tested: each takes a solve.
_MOST_PLACE_WORK = 30_000_000
LOUDEST_PLACES = 20


@dataclass(frozen=True, slots=True)
class Evidence:
    """M on possible errors: first one an edge of the model, then one a place.

    Attributes
    ----------
    n_edges : int
    score : float64 array, shape (K,)
        h' M y of every possible error h; 0 where nothing can contradict it.
    diagonal : float64 array, shape (K,), or None
        h' M h; None where only single ones can be had, nan where it was left out.
    columns : function of an int64 array of k errors
        M between all errors and these; float64 array of shape (K, k).
    of_readings : function of a float64 array of shape (n_edges, k)
        M between all errors and any errors of the readings; float64 array of shape (K, k).
    testable : bool array, shape (K,)
        Whether anything can contradict it, by combinatorics.
    rough : float64 array, shape (K,)
        About 1 / h' M h, for ranking where the diagonal is not at hand.
    relative_error : float
        Standard error of the shares that the diagonal was estimated from, over themselves; 0 where it is exact. For
        flows that of the diagonal; for differences that of 1 - sd^2 times the diagonal, whose own is larger.
    common : csr_array, shape (n_edges, k), or None
        What common errors add to the readings.
    """

    n_edges: int
    score: FloatArray
    diagonal: FloatArray | None
    columns: Callable[[IntArray], FloatArray]
    of_readings: Callable[[FloatArray], FloatArray]
    testable: BoolArray
    rough: FloatArray
    relative_error: float = 0.0
    common: csr_array | None = None

    def weights(self, errors: IntArray) -> FloatArray:
        """H' M h of a few errors, worked out one by one where it is not at hand exactly; float64 array."""
        if self.diagonal is not None and not self.relative_error:
            return np.asarray(self.diagonal[errors])
        blocks = [errors[i : i + BLOCK] for i in range(0, len(errors), BLOCK)]
        found = [self.columns(block)[block, np.arange(len(block))] for block in blocks]
        return np.concatenate([np.empty(0), *found])


def flow_evidence(
    laplacian: Laplacian, used: IntArray, n_edges: int, missed: FloatArray, outside: int, figures: str = "auto"
) -> tuple[Evidence, FloatArray]:
    """M for flows, and the smallest change that makes them balance; an error at a place is what leaves there unseen.

    Parameters
    ----------
    laplacian : Laplacian
        Of the contracted graph; conductances are variances.
    used : int64 array
        Edges of the model that it holds.
    n_edges : int
    missed : float64 array, shape (n_groups,)
        Residuals.
    outside : int
        Group of the outside: amounts can vanish only in its component.
    figures : "auto", "all" or "estimate"
        The diagonal where an exact factor gives it; in any case; or by random projection where no factor gives it.

    Returns
    -------
    evidence : Evidence
        K is n_edges + n_groups.
    change : float64 array, shape (len(used),)
        By how much the flows change.

    Raises
    ------
    AccuracyError
        As `Laplacian.change`.
    """
    place = laplacian.component == laplacian.component[outside]
    place[outside] = False

    def spread(change: FloatArray, potential: FloatArray) -> FloatArray:
        found = np.zeros((n_edges + laplacian.n_vertices, change.shape[1]))
        found[used] = -change / laplacian.conductance[:, None]  # keeps digits that differences of potentials lose
        found[n_edges:][place] = potential[place]
        return found

    def of_readings(errors: FloatArray) -> FloatArray:
        return spread(*laplacian.change(laplacian.gather @ errors[used]))

    number = np.full(n_edges, -1)
    number[used] = np.arange(len(used))

    def columns(chosen: IntArray) -> FloatArray:
        missed = np.zeros((laplacian.n_vertices, len(chosen)))
        for column, error in enumerate(chosen.tolist()):
            if error >= n_edges:
                missed[error - n_edges, column] = float(place[error - n_edges])
            elif number[error] >= 0:
                missed[laplacian.head[number[error]], column] += 1.0
                missed[laplacian.tail[number[error]], column] -= 1.0
        return spread(*laplacian.change(missed))

    testable = np.zeros(n_edges + laplacian.n_vertices, dtype=bool)
    testable[used] = True
    testable[n_edges:] = place
    rough = np.ones(len(testable))
    rough[used] = laplacian.conductance
    rough[n_edges:] = np.asarray(abs(laplacian.gather) @ laplacian.conductance)
    change, potential = laplacian.change(missed)
    score = spread(change[:, None], potential[:, None])[:, 0]
    found = Evidence(n_edges, score, None, columns, of_readings, testable, rough)
    share, _, error = laplacian.figures(figures)
    if share is None:
        return found, change
    diagonal = np.zeros(len(testable))
    diagonal[used] = share / laplacian.conductance
    places = n_edges + np.flatnonzero(place)
    diagonal[places] = laplacian.to_ground()[place] if laplacian.gives_all else 0.0
    if not laplacian.gives_all and figures == "all":
        diagonal[places] = found.weights(places)
    return replace(found, diagonal=diagonal, relative_error=error), change


def difference_evidence(
    laplacian: Laplacian, used: IntArray, n_edges: int, rest: FloatArray, unchecked: BoolArray, datum: csr_array,
    datum_testable: BoolArray, figures: str = "auto",
) -> Evidence:  # fmt: skip
    """M for differences; an error at a place is one of a held potential.

    Parameters
    ----------
    laplacian : Laplacian
        Conductances are weights.
    used : int64 array
        Measured edges of the model.
    n_edges : int
    rest : float64 array, shape (len(used),)
        Reading minus adjusted value.
    unchecked : bool array, shape (len(used),)
        Bridges.
    datum : csr_array, shape (len(used), k)
        What one unit more in each held potential adds to the readings, less what is known.
    datum_testable : bool array, shape (k,)
    figures : "auto", "all" or "estimate"
        As in `flow_evidence`.

    Returns
    -------
    Evidence
        K is n_edges + k.

    Raises
    ------
    AccuracyError
        As `Laplacian.change`.
    """
    weight, turned = laplacian.conductance[:, None], datum.T.tocsr()

    def spread(pulled: FloatArray) -> FloatArray:
        pulled[unchecked] = 0.0
        found = np.zeros((n_edges + datum.shape[1], pulled.shape[1]))
        found[used] = pulled
        found[n_edges:] = turned @ pulled
        found[n_edges:][~datum_testable] = 0.0
        return found

    def projected(errors: FloatArray) -> FloatArray:
        drawn = weight * errors
        return spread(drawn + laplacian.change(laplacian.gather @ drawn)[0])

    def of_readings(errors: FloatArray) -> FloatArray:
        return projected(errors[used])

    number = np.full(n_edges, -1)
    number[used] = np.arange(len(used))

    def columns(chosen: IntArray) -> FloatArray:
        errors = np.zeros((len(used), len(chosen)))
        for column, error in enumerate(chosen.tolist()):
            if error >= n_edges:
                errors[:, column] = datum[:, [error - n_edges]].toarray().ravel()
            elif number[error] >= 0:
                errors[number[error], column] = 1.0
        return projected(errors)

    testable = np.zeros(n_edges + datum.shape[1], dtype=bool)
    testable[used], testable[n_edges:] = ~unchecked, datum_testable
    rough = np.ones(len(testable))
    rough[used] = 1.0 / laplacian.conductance
    rough[n_edges:] = 1.0 / np.maximum(np.asarray(abs(turned) @ laplacian.conductance), np.finfo(float).tiny)
    score = spread((laplacian.conductance * rest)[:, None])[:, 0]
    found = Evidence(n_edges, score, None, columns, of_readings, testable, rough)
    _, slack, error = laplacian.figures(figures)
    if slack is None:
        return found
    diagonal = np.zeros(len(testable))
    diagonal[used] = np.where(unchecked, 0.0, slack * laplacian.conductance)
    places = n_edges + np.flatnonzero(datum_testable)
    if len(places) * len(used) > _MOST_PLACE_WORK:
        diagonal[places] = np.nan
        places = places[np.argsort(-np.abs(score[places]) * np.sqrt(rough[places]), kind="stable")[:LOUDEST_PLACES]]
    diagonal[places] = found.weights(places)
    return replace(found, diagonal=diagonal, relative_error=error)


def with_common(evidence: Evidence, common: csr_array) -> Evidence:
    """M where groups of readings share errors besides their own.

    Parameters
    ----------
    evidence : Evidence
        Of the readings as if each had only its own error.
    common : csr_array, shape (n_edges, k)
        What one standard deviation of each common error adds to the readings.

    Returns
    -------
    Evidence

    Raises
    ------
    InputError
        If there are too many groups for the size of the network.

    Notes
    -----
    M - M G (1 + G' M G)^-1 G' M, by the identity of Sherman, Morrison and Woodbury.
    """
    k = common.shape[1]
    if not k:
        return evidence
    if k * len(evidence.score) > _MOST_COMMON:
        most = _MOST_COMMON // len(evidence.score)
        message = f"common errors must be at most {most} in a network of this size, got {k}; join groups"
        raise InputError(message)
    n = evidence.n_edges
    blocks = [evidence.of_readings(common[:, i : i + BLOCK].toarray()) for i in range(0, k, BLOCK)]
    shared = np.concatenate(blocks, axis=1)
    inner = cho_factor(np.eye(k) + common.T @ shared[:n], lower=True)

    def less(found: FloatArray, seen: FloatArray) -> FloatArray:
        return np.asarray(found - shared @ cho_solve(inner, seen))

    diagonal = evidence.diagonal
    if diagonal is not None:
        taken = solve_triangular(inner[0], shared.T, lower=True)
        diagonal = np.maximum(diagonal - np.einsum("ij,ij->j", taken, taken), 0.0)
        diagonal[~evidence.testable] = 0.0
    return Evidence(
        n, less(evidence.score, common.T @ evidence.score[:n]), diagonal,
        lambda chosen: less(evidence.columns(chosen), shared[chosen].T),
        lambda errors: less(evidence.of_readings(errors), shared[:n].T @ errors), evidence.testable,
        evidence.rough, evidence.relative_error, common,
    )  # fmt: skip
