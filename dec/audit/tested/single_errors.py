"""Each possible error by itself: how loud it is, how large, and what a test at a given rate allows."""

from dataclasses import dataclass

import numpy as np
from scipy.special import ndtri

from dec.arrays import FloatArray, IntArray
from dec.audit.adjusted.evidence import Evidence

__all__ = [
    "CRITICAL", "DETECTABLE", "LEADING", "RATE", "SingleErrors", "critical_for", "rate_for", "single_errors",
]  # fmt: skip

# Two-sided normal quantile for 0.1 %, and the non-centrality for a power of 80 % at it. Source: Baarda, A Testing
# Procedure for Use in Geodetic Networks, 1968.
RATE = 0.001
CRITICAL = 3.2905
DETECTABLE = 4.13
# Errors looked at one by one where there are too many for all: those with the largest corrections.
LEADING = 200


@dataclass(frozen=True, slots=True)
class SingleErrors:
    """The test of every possible error that could be worked out.

    Attributes
    ----------
    error : int64 array, shape (k,)
        Which errors; ascending.
    weight : float64 array, shape (k,)
        h' M h: the inverse variance of its estimate.
    statistic : float64 array, shape (k,)
        Its size over its standard deviation.
    estimate : float64 array, shape (k,)
        Its size: reading minus what all else says; what leaves unseen; by how much a held value lies too high.
    is_all : bool
        Whether every error that something can contradict is among them.
    """

    error: IntArray
    weight: FloatArray
    statistic: FloatArray
    estimate: FloatArray
    is_all: bool


def single_errors(evidence: Evidence) -> SingleErrors:
    """The test of every possible error; only of the 200 leading ones where there are too many.

    Parameters
    ----------
    evidence : Evidence

    Returns
    -------
    SingleErrors
    """
    chosen, diagonal = np.flatnonzero(evidence.testable), evidence.diagonal
    is_exact = diagonal is not None and not evidence.relative_error
    is_cut = not is_exact and len(chosen) > LEADING
    if is_cut:
        rough, tiny = evidence.rough[chosen], np.finfo(np.float64).tiny
        size = rough if diagonal is None else 1.0 / np.maximum(diagonal[chosen], tiny)
        loud = np.abs(evidence.score[chosen]) * np.sqrt(size)
        chosen = np.sort(chosen[np.argsort(-loud, kind="stable")[:LEADING]])
    weight = evidence.weights(chosen)
    seen = weight > 0  # and not nan
    is_all = bool(seen.all()) and not is_cut
    chosen, weight = chosen[seen], weight[seen]
    score = evidence.score[chosen]
    return SingleErrors(chosen, weight, np.abs(score) / np.sqrt(weight), score / weight, is_all)


def rate_for(n_tests: int, alpha: float) -> float:
    """The chance of a single test, so that any of so many independent ones exceeds its limit with chance alpha.

    Source: Sidak, Rectangular confidence regions for the means of multivariate normal distributions, J. Amer. Statist.
    Assoc. 62 (1967).

    Examples
    --------
    >>> rate_for(1, 0.05), round(rate_for(100, 0.05), 6)
    (0.05, 0.000513)
    """
    return float(-np.expm1(np.log1p(-alpha) / max(n_tests, 1)))


def critical_for(n_tests: int, alpha: float) -> float:
    """The two-sided normal limit of a single test at `rate_for` of so many, in standard deviations.

    Examples
    --------
    >>> round(critical_for(1, 0.05), 2), round(critical_for(100, 0.05), 2)
    (1.96, 3.47)
    """
    return float(-ndtri(rate_for(n_tests, alpha) / 2))
