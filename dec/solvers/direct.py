"""Exact factors: SuperLU with a symmetric ordering, and CHOLMOD where it is installed."""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np
from numpy.typing import ArrayLike
from scipy.sparse import csc_array

from dec.arrays import FloatArray
from dec.errors import AccuracyError, InputError, UnsolvableError
from dec.solvers.method import Answer, Check, answer_of
from dec.solvers.problem import LinearProblem

__all__ = ["Cholmod", "Direct"]

_MOST_REFINEMENTS = 3


@dataclass(frozen=True, slots=True)
class Direct:
    """SciPy's SuperLU, with minimum degree on the matrix's own pattern and no pivoting off the diagonal.

    Examples
    --------
    >>> problem = LinearProblem.of_graph(np.array([0, 1]), np.array([1, 2]), 3, np.array([1.0, 2.0]))
    >>> Direct().prepare(problem).solve([3.0, 0.0, -3.0]).x
    array([ 2.5, -0.5, -2. ])
    """

    name: ClassVar[str] = "direct"

    def prepare(self, problem: LinearProblem) -> "Factored":
        """Factor the matrix with the first unknown of each singular component grounded."""
        from scipy.sparse.linalg import splu

        def factor(inner: csc_array) -> Callable[[FloatArray], FloatArray]:
            options = {"SymmetricMode": True}
            lower_upper = splu(inner, permc_spec="MMD_AT_PLUS_A", diag_pivot_thresh=0.0, options=options)
            return lower_upper.solve

        return _factored(problem, self.name, factor)


@dataclass(frozen=True, slots=True)
class Cholmod:
    """CHOLMOD through scikit-sparse, an optional part."""

    name: ClassVar[str] = "cholmod"

    def prepare(self, problem: LinearProblem) -> "Factored":
        """Factor the matrix with the first unknown of each singular component grounded.

        Raises
        ------
        InputError
            If scikit-sparse is not installed.
        """
        try:
            from sksparse import cholmod
        except ImportError:
            message = 'method "cholmod" needs scikit-sparse, which is not installed; pip install "dec[cholmod]"'
            raise InputError(message) from None

        def factor(inner: csc_array) -> Callable[[FloatArray], FloatArray]:
            from scipy.sparse import csc_matrix

            return cholmod.cholesky(csc_matrix(inner))  # type: ignore[no-any-return]

        return _factored(problem, self.name, factor)


@dataclass(frozen=True, slots=True, eq=False)
class Factored:
    """An exact factor, ready to solve."""

    problem: LinearProblem
    name: str
    apply: Callable[[FloatArray], FloatArray] | None
    notes: tuple[str, ...] = ()

    def solve(self, b: ArrayLike, rtol: float = 1e-8, max_iterations: int | None = None) -> Answer:
        """Solve for one right-hand side or several, refining where that helps; see `dec.solvers.method.Prepared`."""
        right = self.problem.right_side(b)
        limit = _MOST_REFINEMENTS if max_iterations is None else min(max_iterations, _MOST_REFINEMENTS)
        x = self._once(right)
        check = Check.of(self.problem, x, right, rtol)
        history = [float(check.residual.max(initial=0.0))]
        while not check.met and len(history) <= limit:
            refined = self.problem.balanced(x + self._once(check.left))
            check_then = Check.of(self.problem, refined, right, rtol)
            worst = float(check_then.residual.max(initial=0.0))
            if not worst < history[-1]:
                break
            history.append(worst)
            x, check = refined, check_then
        return answer_of(x, check, len(history) - 1, np.array(history), rtol, self.name)

    def _once(self, b: FloatArray) -> FloatArray:
        x = np.zeros_like(b)
        if self.apply is not None and b.size:
            x[self.problem.grounded] = self.apply(self.problem.balanced(b)[self.problem.grounded])
        return self.problem.balanced(x)


def _factored(problem: LinearProblem, name: str, factor: Callable[[csc_array], Any]) -> Factored:
    kept = problem.grounded
    if not len(kept):
        return Factored(problem, name, None)
    inner = csc_array(problem.matrix if len(kept) == problem.n else problem.matrix[kept][:, kept])
    try:
        return Factored(problem, name, factor(inner))
    except MemoryError:
        message = f"{name} ran out of memory on {problem.n} unknowns; take method elimination or multigrid"
        raise AccuracyError(message) from None
    except (RuntimeError, ArithmeticError, ValueError) as error:
        if type(error).__name__ not in {"RuntimeError", "CholmodNotPositiveDefiniteError"}:
            raise
        message = (
            f"the matrix must be positive definite apart from constants on singular components, but {name} could not "
            f"factor it ({error}); check the signs of its entries"
        )
        raise UnsolvableError(message) from None
