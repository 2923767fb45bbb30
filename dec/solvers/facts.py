"""What is measured of a matrix before a method is chosen; each figure when it is first asked for, and once."""

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from scipy.sparse import csr_array

from dec.arrays import BoolArray, FloatArray

__all__ = ["Facts"]

_SAMPLE = 20_000  # rows that the mean distance from the diagonal is taken over
_PROBE = 3  # steps at most
_CLEARLY_FEW = 20.0


@dataclass(frozen=True, eq=False)
class Facts:
    """Counts and ratios of a symmetric matrix.

    Parameters
    ----------
    matrix : csr_array, shape (n, n)
        Symmetric and canonical, with a stored diagonal.
    singular : bool array, shape (n_components,)

    Examples
    --------
    >>> facts = Facts(csr_array(np.array([[1.0, -1.0, 0.0], [-1.0, 4.0, -3.0], [0.0, -3.0, 3.0]])), np.ones(1, bool))
    >>> facts.n_entries, facts.largest_degree, facts.share_low, facts.weight_ratio
    (7, 2, 1.0, 3.0)
    """

    matrix: csr_array
    singular: BoolArray

    @property
    def n(self) -> int:
        """Number of unknowns."""
        return int(self.matrix.shape[0])

    @property
    def n_entries(self) -> int:
        """Stored entries, diagonal included."""
        return int(self.matrix.nnz)

    @cached_property
    def diagonal(self) -> FloatArray:
        """The diagonal, float64, shape (n,)."""
        return np.asarray(self.matrix.diagonal())

    @cached_property
    def largest_degree(self) -> int:
        """Off-diagonal entries of the fullest row."""
        return max(int(np.diff(self.matrix.indptr).max(initial=1)) - 1, 0)

    @cached_property
    def share_low(self) -> float:
        """Share of the rows with at most two off-diagonal entries."""
        return float((np.diff(self.matrix.indptr) <= 3).mean()) if self.n else 1.0

    @cached_property
    def n_positive(self) -> int:
        """Positive off-diagonal entries, each pair counted once."""
        if np.count_nonzero(np.signbit(self.matrix.data)) == self.n_entries - np.count_nonzero(self.diagonal):
            return 0  # found twice as fast
        return int(np.count_nonzero(self.matrix.data > 0) - np.count_nonzero(self.diagonal > 0)) // 2

    @cached_property
    def share_positive(self) -> float:
        """Positive off-diagonal entries over all off-diagonal entries."""
        return 2 * self.n_positive / max(self.n_entries - self.n, 1)

    @cached_property
    def weight_ratio(self) -> float:
        """Largest over smallest size of a negative off-diagonal entry; 1 where there is none."""
        negative = self.matrix.data < 0
        if not negative.any():
            return 1.0
        return float(self.matrix.data.min() / self.matrix.data.max(where=negative, initial=-np.inf))

    @cached_property
    def spread(self) -> float:
        """Mean distance of a row's first entry from the diagonal, over n: about 0.3 for random numbering."""
        if not self.n_entries:
            return 0.0
        rows = np.unique(np.linspace(0, self.n - 1, min(self.n, _SAMPLE)).astype(np.int64))
        first = self.matrix.indices[np.minimum(self.matrix.indptr[rows], self.n_entries - 1)]
        return float(np.abs(first - rows).mean() / self.n)

    @cached_property
    def steps_with_diagonal(self) -> float:
        """Steps to 1e-8 that conjugate gradients with the diagonal will about take, from the first two or three.

        As if the residual of a random right-hand side (seeded) went on falling as fast as in the last step looked at.
        Where they are few, that is right; on meshes it is far too few, and still many.
        """
        if not self.n or not self.diagonal.all():
            return np.inf
        r = np.random.default_rng(0).random(self.n) - 0.5
        if self.singular.all():
            r -= r.mean()
        aim = 1e-8 * _norm(r)
        p, inner, rest, foreseen = np.zeros(self.n), 1.0, _norm(r), np.inf
        for step in range(1, _PROBE + 1):
            z = r / self.diagonal
            inner, before = float(np.einsum("i,i", z, r)), inner
            p *= inner / before
            p += z
            q = self.matrix @ p
            q *= inner / float(np.einsum("i,i", p, q))
            r -= q
            rest, rest_before = _norm(r), rest
            if rest <= aim:
                return float(step)
            rate = rest / rest_before
            foreseen = step + np.log(rest / aim) / -np.log(rate) if rate < 1 else np.inf
            if step > 1 and foreseen < _CLEARLY_FEW:
                break
        return float(foreseen)


def _norm(values: FloatArray) -> float:
    return float(np.sqrt(np.einsum("i,i", values, values)))
