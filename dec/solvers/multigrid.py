"""Algebraic multigrid: PyAMG, with a vertex of each singular component grounded, and its answer checked."""

import warnings
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from typing import Any, ClassVar, Literal

import numpy as np
from numpy.typing import ArrayLike
from scipy.sparse import csr_array

from dec.arrays import FloatArray
from dec.errors import AccuracyError, InputError
from dec.solvers.method import Answer, Check, answer_of, power_above
from dec.solvers.problem import LinearProblem

__all__ = ["Multigrid"]

_MOST_CYCLES = 300
_MOST_RESTARTS = 3
_BREAKDOWN = (ArithmeticError, ValueError, RuntimeError, IndexError, np.linalg.LinAlgError)
_MODERATE = (1e-60, 1e60)  # sizes of entries whose products no loop of PyAMG takes for zero or infinite


@dataclass(frozen=True, slots=True)
class Multigrid:
    """PyAMG's hierarchies as a preconditioner of conjugate gradients.

    Parameters
    ----------
    kind : "ruge_stuben", "smoothed_aggregation" or "rootnode"

    Examples
    --------
    >>> problem = LinearProblem.of_graph(np.array([0, 1]), np.array([1, 2]), 3, np.array([1.0, 2.0]))
    >>> Multigrid().prepare(problem).solve([3.0, 0.0, -3.0]).x.round(9)
    array([ 2.5, -0.5, -2. ])
    """

    kind: Literal["ruge_stuben", "smoothed_aggregation", "rootnode"] = "ruge_stuben"
    name: ClassVar[str] = "multigrid"

    def __post_init__(self) -> None:
        if self.kind not in {"ruge_stuben", "smoothed_aggregation", "rootnode"}:
            message = f'kind must be "ruge_stuben", "smoothed_aggregation" or "rootnode", got {self.kind!r}'
            raise InputError(message)

    def prepare(self, problem: LinearProblem) -> "Hierarchy":
        """Build the hierarchy of the grounded matrix.

        Raises
        ------
        AccuracyError
            If PyAMG breaks down.
        """
        import pyamg

        kept = problem.grounded
        if not len(kept):
            return Hierarchy(problem, None, 1.0)
        inner = csr_array(problem.matrix if len(kept) == problem.n else problem.matrix[kept][:, kept])
        inner.sort_indices()
        scale = power_above(inner.data)
        if _MODERATE[0] < scale < _MODERATE[1]:
            scale = 1.0
        else:
            inner = csr_array((inner.data / scale, inner.indices, inner.indptr), shape=inner.shape)
        with _fenced():
            try:
                return Hierarchy(problem, getattr(pyamg, f"{self.kind}_solver")(inner), scale)
            except _BREAKDOWN as error:
                message = f"multigrid ({self.kind}) broke down on {problem.n} unknowns: {error}; take elimination"
                raise AccuracyError(message) from None


@dataclass(frozen=True, slots=True, eq=False)
class Hierarchy:
    """A hierarchy of coarser and coarser matrices, ready to solve, for the matrix over `scale`, a power of two."""

    problem: LinearProblem
    levels: Any
    scale: float
    name: ClassVar[str] = "multigrid"
    notes: ClassVar[tuple[str, ...]] = ()

    def solve(self, b: ArrayLike, rtol: float = 1e-8, max_iterations: int | None = None) -> Answer:
        """Solve for one right-hand side or several; see `dec.solvers.method.Prepared`."""
        right = self.problem.right_side(b)
        limit = _MOST_CYCLES if max_iterations is None else max_iterations
        columns = right[:, None] if right.ndim == 1 else right
        x = np.zeros_like(columns)
        longest: list[float] = []
        for k in range(columns.shape[1]):
            x[:, k], history = self._column(columns[:, k], rtol, limit)
            longest = max(longest, history, key=len)
        x = x.reshape(right.shape)
        check = Check.of(self.problem, x, right, rtol)
        return answer_of(x, check, max(len(longest) - 1, 0), np.array(longest), rtol, self.name)

    def _column(self, b: FloatArray, rtol: float, limit: int) -> tuple[FloatArray, list[float]]:
        """Return x and the relative residuals on the way; what it returns is not yet good enough for certain."""
        from threadpoolctl import threadpool_limits

        x = np.zeros_like(b)
        check = Check.of(self.problem, x, b, rtol)
        history = [float(check.residual[0])]
        kept = self.problem.grounded
        if self.levels is None:
            return x, history
        with _fenced(), threadpool_limits(1, "blas"):  # two threads on two busy cores are ten times slower
            for _ in range(_MOST_RESTARTS):
                if check.met or len(history) > limit:
                    break
                left = self.problem.balanced(check.left)[kept]
                size = power_above(left)
                norms: list[float] = []
                aim = 0.5 * rtol / max(float(check.residual[0]), rtol)
                most = limit + 1 - len(history)
                try:
                    step = self.levels.solve(left / size, tol=aim, accel="cg", maxiter=most, residuals=norms)
                except _BREAKDOWN:
                    break
                trial = np.array(x)
                trial[kept] += step * (size / self.scale)
                trial = self.problem.balanced(trial)
                check_then = Check.of(self.problem, trial, b, rtol)
                scale = history[-1] / norms[0] if norms and norms[0] > 0 else 0.0
                history.extend(scale * norm for norm in norms[1:])
                if not check_then.residual[0] < check.residual[0]:
                    break
                x, check = trial, check_then
        return x, history


@contextmanager
def _fenced() -> Iterator[None]:
    """PyAMG between a fixed and the caller's state of NumPy's global random numbers, which it draws from.

    Its warnings are not passed on: every answer is checked, which says more.
    """
    state = np.random.get_state()  # noqa: NPY002
    np.random.seed(0)  # noqa: NPY002
    try:
        with warnings.catch_warnings(), np.errstate(all="ignore"):
            warnings.simplefilter("ignore")
            yield
    finally:
        np.random.set_state(state)  # noqa: NPY002
