"""Several errors at once: found one after the other, each weighed against the others."""

from dataclasses import dataclass

import numpy as np
from scipy.linalg import cho_factor, cho_solve
from scipy.special import chdtri

from dec.arrays import FloatArray, IntArray
from dec.audit.adjusted.evidence import Evidence
from dec.audit.tested.single_errors import SingleErrors

__all__ = ["Several", "several_errors"]

_MOST = 10
# Of an error's weight, what must be left beside those already taken; less is rounding, and it says the same as they do.
_LEFT = 1e-9
_STARTS = 10
_FEW = 5
# Errors to choose among: in larger networks those with the loudest single tests.
_POOL = 20_000


@dataclass(frozen=True, slots=True)
class Several:
    """Errors that together explain what the readings contradict.

    Attributes
    ----------
    error : int64 array, shape (k,)
        In the order of their statistics, largest first.
    estimate, sd, statistic : float64 arrays, shape (k,)
        Each beside all the others.
    chi_square : float
        Of the rest.
    dof : int
    limit : float or None
    holds : bool or None
        Whether the rest passes the global test; None where nothing is left to check.
    why_stopped : str
    """

    error: IntArray
    estimate: FloatArray
    sd: FloatArray
    statistic: FloatArray
    chi_square: float
    dof: int
    limit: float | None
    holds: bool | None
    why_stopped: str


def several_errors(
    evidence: Evidence, single: SingleErrors, chi_square: float, dof: int, alpha: float, critical: float,
    among: tuple[float, int] = (0.0, 0),
) -> Several:  # fmt: skip
    """Errors taken one after the other while one stands out, at most ten; those that others then explain are dropped.

    Where two to five are found, the search is made anew from each of the next loudest; the fewest errors are kept, and
    of as many those that explain most.

    Parameters
    ----------
    evidence : Evidence
    single : SingleErrors
        The errors to choose among: all, or the 20,000 loudest.
    chi_square : float
    dof : int
    alpha, critical : float
    among : tuple of float and int
        Chi-square and checks among several readings of one edge, which these errors leave as they are.

    Returns
    -------
    Several

    Notes
    -----
    With errors H taken, M becomes M - M H (H' M H)^-1 H' M: one solve for each taken, the rest is vectors. Source:
    Teunissen, Testing Theory, 2000, chapter 4; taking out what is no longer significant: Kok, On data snooping and
    multiple outlier testing, NOAA Technical Report NOS NGS 30, 1984.
    """
    search = _Search(evidence, single)
    found, why = search.run(dof, critical)
    if 1 < len(found) <= _FEW:  # two errors may look like a third one at first
        for start in search.starts(critical):
            other, says = search.run(dof, critical, start)
            if (len(other), -search.explained(other)) < (len(found), -search.explained(found) * (1 + 1e-9)):
                found, why = other, says
    search.taken = found
    return search.result(chi_square, dof, among, alpha, why)


class _Search:
    """Errors taken so far, as places among those to choose from, and their columns of M."""

    def __init__(self, evidence: Evidence, single: SingleErrors) -> None:
        if len(single.error) > _POOL:
            loud = np.sort(np.argpartition(-single.statistic, _POOL)[:_POOL])
            single = SingleErrors(
                single.error[loud], single.weight[loud], single.statistic[loud], single.estimate[loud], is_all=False
            )
        self.evidence, self.single = evidence, single
        self.taken: list[int] = []
        self.score = evidence.score[single.error]
        self._column: dict[int, FloatArray] = {}

    def run(self, dof: int, critical: float, start: int | None = None) -> tuple[list[int], str]:
        """Take errors one after the other, from a given one or from the loudest; return them and why it stopped."""
        self.taken, seen = [] if start is None else [start], set[frozenset[int]]()
        while True:
            if len(self.taken) >= min(_MOST, dof):
                few = f"{_MOST} errors are the most that are looked for" if dof > _MOST else "no check is left"
                return self.taken, few
            best, statistic = self.best()
            if best < 0 or statistic <= critical:
                return self.taken, "no further error stands out"
            self.taken.append(best)
            self.drop(critical)
            if frozenset(self.taken) in seen:
                return self.taken, "no further error stands out beside those found"
            seen.add(frozenset(self.taken))

    def starts(self, critical: float) -> list[int]:
        """The loudest errors after the first, one of those that are equally loud."""
        found: list[int] = []
        order = np.argsort(-self.single.statistic, kind="stable")
        last = float(self.single.statistic[order[0]])
        for k in order.tolist():
            here = float(self.single.statistic[k])
            if here <= critical or len(found) == _STARTS:
                break
            if here < last * (1 - 1e-9):
                found.append(k)
                last = here
        return found

    def column(self, k: int) -> FloatArray:
        """M between all errors to choose from and one of them."""
        if k not in self._column:
            found = self.evidence.columns(self.single.error[[k]])[:, 0]
            self._column[k] = found[self.single.error]
        return self._column[k]

    def fitted(self, taken: list[int]) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Estimates of the taken ones, their covariance, and their columns."""
        if not taken:
            return np.zeros(0), np.zeros((0, 0)), np.zeros((len(self.score), 0))
        columns = np.stack([self.column(k) for k in taken], axis=1)
        inner = columns[taken]
        factor = cho_factor((inner + inner.T) / 2)
        return cho_solve(factor, self.score[taken]), cho_solve(factor, np.eye(len(taken))), columns

    def best(self) -> tuple[int, float]:
        """The loudest error beside those taken, and its statistic; -1 where none is left."""
        estimate, covariance, columns = self.fitted(self.taken)
        score = self.score - columns @ estimate
        weight = self.single.weight - ((columns @ covariance) * columns).sum(axis=1)
        free = weight > _LEFT * self.single.weight
        free[self.taken] = False
        if not free.any():
            return -1, 0.0
        statistic = np.where(free, np.abs(score) / np.sqrt(np.where(free, weight, 1.0)), 0.0)
        k = int(np.argmax(statistic >= statistic.max() * (1 - 1e-9)))  # of equals the first, whatever their rounding
        return k, float(statistic[k])

    def explained(self, taken: list[int]) -> float:
        """How much of chi-square the errors take away."""
        return float(self.score[taken] @ self.fitted(taken)[0])

    def drop(self, critical: float) -> None:
        """Drop the errors that are no longer significant beside the others."""
        while self.taken:
            estimate, covariance, _ = self.fitted(self.taken)
            statistic = np.abs(estimate) / np.sqrt(covariance.diagonal())
            weakest = int(np.argmin(statistic))
            if statistic[weakest] > critical:
                break
            del self.taken[weakest]

    def result(self, chi_square: float, dof: int, among: tuple[float, int], alpha: float, why: str) -> Several:
        """Everything about those taken."""
        estimate, covariance, _ = self.fitted(self.taken)
        sd = np.sqrt(covariance.diagonal())
        statistic = np.abs(estimate) / sd
        order = np.argsort(-statistic, kind="stable")
        left = max(chi_square - self.explained(self.taken), 0.0) + among[0]
        rest = dof - len(self.taken) + among[1]
        limit = float(chdtri(rest, alpha)) if rest else None
        return Several(
            self.single.error[np.array(self.taken, dtype=np.int64)][order], estimate[order], sd[order],
            statistic[order], left, rest, limit, None if limit is None else left <= limit, why,
        )  # fmt: skip
