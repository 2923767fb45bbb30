"""Conjugate gradients with the diagonal: best where a graph mixes fast, as networks with hubs do."""

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from dec.arrays import AnyArray, FloatArray, IntArray, frozen
from dec.solvers.descent import Descent
from dec.solvers.gradients import ScaledSystem
from dec.solvers.numbering import permuted, unsigned
from dec.solvers.problem import LinearProblem

__all__ = ["DiagonalGradients", "diagonal_system", "inverted", "matrix_arrays"]

_MOST_STEPS = 20_000


@dataclass(frozen=True, slots=True)
class DiagonalGradients:
    """Conjugate gradients, preconditioned by the diagonal (Jacobi).

    Examples
    --------
    >>> problem = LinearProblem.of_graph(np.array([0, 1, 2]), np.array([1, 2, 0]), 3, np.ones(3))
    >>> answer = DiagonalGradients().prepare(problem).solve([3.0, 0.0, -3.0])
    >>> answer.x.round(12) + 0.0, answer.iterations
    (array([ 1.,  0., -1.]), 1)
    """

    name: ClassVar[str] = "gradients"

    def prepare(self, problem: LinearProblem) -> Descent:
        """Nothing but the diagonal; unknowns are sorted by component where there are several."""
        order = None if problem.n_components <= 1 else np.argsort(problem.component, kind="stable")
        return Descent(problem, diagonal_system(problem, order), order, self.name, _MOST_STEPS, ())


def diagonal_system(problem: LinearProblem, order: IntArray | None) -> ScaledSystem:
    """The matrix with its diagonal for a factor.

    Parameters
    ----------
    problem : LinearProblem
    order : int64 array, shape (n,), or None
        Sorted by component.

    Returns
    -------
    ScaledSystem
    """
    size = np.bincount(problem.component, minlength=problem.n_components)
    part = np.concatenate([[0], np.cumsum(size)]).astype(np.int64)
    inverse = inverted(problem.facts.diagonal)
    return ScaledSystem(
        *matrix_arrays(problem, order), inverse if order is None else inverse[order], part, problem.singular.copy()
    )


def inverted(pivot: FloatArray) -> FloatArray:
    """One over each pivot, 0 for 0; float64, shape (n,)."""
    with np.errstate(over="ignore"):
        return np.divide(1.0, pivot, out=np.zeros_like(pivot), where=pivot > 0)


def matrix_arrays(problem: LinearProblem, order: AnyArray | None) -> tuple[AnyArray, AnyArray, FloatArray]:
    """The matrix as compiled loops take it: unsigned positions, in another order where one is given."""
    matrix = problem.matrix
    itype = unsigned(problem.n, matrix.nnz)
    positions = [a.view(itype) if a.itemsize == np.dtype(itype).itemsize else a.astype(itype) for a in
                 (matrix.indptr, matrix.indices)]  # fmt: skip
    arrays = (*positions, matrix.data)
    if order is not None:
        new = np.empty(problem.n + 1, itype), np.empty(matrix.nnz, itype), np.empty(matrix.nnz)
        permuted(order, *_readable(arrays), *new)
        arrays = new
    return _readable(arrays)


def _readable(arrays: tuple[AnyArray, ...]) -> tuple[AnyArray, AnyArray, FloatArray]:
    """Return read-only views, so that compiled loops meet one type whatever the caller's flags are."""
    indptr, indices, data = (frozen(a.view()) for a in arrays)
    return indptr, indices, data
