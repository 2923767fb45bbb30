"""PETSc's multigrid on one process, where petsc4py is installed."""

import weakref
from dataclasses import dataclass
from typing import Any, ClassVar, Literal

import numpy as np
from numpy.typing import ArrayLike
from scipy.sparse import csr_array

from dec.arrays import FloatArray
from dec.errors import AccuracyError, InputError
from dec.solvers.method import Answer, Check, answer_of, power_above
from dec.solvers.problem import LinearProblem

__all__ = ["Petsc"]

_MOST_STEPS = 1_000


@dataclass(frozen=True, slots=True)
class Petsc:
    """Conjugate gradients of PETSc, preconditioned by its multigrid.

    Parameters
    ----------
    kind : "gamg" or "hypre"
        Aggregation, or the classical kind from the library of that name, which bears conductances that are farther
        apart.
    """

    kind: Literal["gamg", "hypre"] = "gamg"
    name: ClassVar[str] = "petsc"

    def __post_init__(self) -> None:
        if self.kind not in {"gamg", "hypre"}:
            message = f'kind must be "gamg" or "hypre", got {self.kind!r}'
            raise InputError(message)

    def prepare(self, problem: LinearProblem) -> "PetscReady":
        """Hand the grounded matrix to PETSc and set its preconditioner up.

        Raises
        ------
        InputError
            If petsc4py is not installed, or was built without this kind.
        AccuracyError
            If PETSc could not set its multigrid up.
        """
        try:
            from petsc4py import PETSc
        except ImportError:
            message = 'method "petsc" needs petsc4py, which is not installed; pip install "dec[petsc]"'
            raise InputError(message) from None
        kept = problem.grounded
        if not len(kept):
            return PetscReady(problem, None, None, 1.0, RuntimeError)
        inner = csr_array(problem.matrix[kept][:, kept])
        scale = power_above(inner.data)
        positions = inner.indptr.astype(PETSc.IntType), inner.indices.astype(PETSc.IntType)
        matrix = PETSc.Mat().createAIJ(size=inner.shape, csr=(*positions, inner.data / scale), comm=PETSc.COMM_SELF)
        solver = PETSc.KSP().create(comm=PETSc.COMM_SELF)
        ready = PetscReady(problem, solver, matrix, scale, PETSc.Error)
        # what Python drops, PETSc only marks for a clean-up that never comes
        weakref.finalize(ready, _destroy, solver, matrix).atexit = False
        try:
            solver.getPC().setType(self.kind)
        except PETSc.Error:
            message = f'this PETSc was built without "{self.kind}"; take kind "gamg" or another method'
            raise InputError(message) from None
        solver.setOperators(matrix)
        solver.setType("cg")
        solver.setNormType(PETSc.KSP.NormType.UNPRECONDITIONED)
        try:
            solver.setUp()
        except PETSc.Error as error:
            raise AccuracyError(_failure(self.kind, error)) from None
        return ready


@dataclass(frozen=True, slots=True, eq=False, weakref_slot=True)
class PetscReady:
    """A PETSc solver that has been set up, for the matrix over `scale`, a power of two."""

    problem: LinearProblem
    solver: Any
    matrix: Any
    scale: float
    failure: type[Exception]
    name: ClassVar[str] = "petsc"
    notes: ClassVar[tuple[str, ...]] = ()

    def solve(self, b: ArrayLike, rtol: float = 1e-8, max_iterations: int | None = None) -> Answer:
        """Solve for one right-hand side or several; see `dec.solvers.method.Prepared`."""
        right = self.problem.right_side(b)
        columns = right[:, None] if right.ndim == 1 else right
        x = np.zeros_like(columns)
        limit = _MOST_STEPS if max_iterations is None else max_iterations
        steps = 0
        for k in range(columns.shape[1]):
            x[:, k], taken = self._column(columns[:, k], rtol, limit)
            steps = max(steps, taken)
        x = x.reshape(right.shape)
        check = Check.of(self.problem, x, right, rtol)
        return answer_of(x, check, steps, np.array([float(check.residual.max(initial=0.0))]), rtol, self.name)

    def _column(self, b: FloatArray, rtol: float, limit: int) -> tuple[FloatArray, int]:
        x = np.zeros_like(b)
        if self.solver is None or not b.any():
            return x, 0
        kept = self.problem.grounded
        inner = self.problem.balanced(b)[kept]
        size = power_above(inner)
        right, answer = self.matrix.createVecs()
        try:
            right.setArray(inner / size)
            self.solver.setTolerances(rtol=0.5 * rtol, atol=0.0, max_it=limit)
            self.solver.solve(right, answer)
            x[kept] = answer.getArray() * (size / self.scale)
        except self.failure as error:
            raise AccuracyError(_failure(self.solver.getPC().getType(), error)) from None
        finally:
            _destroy(right, answer)
        return self.problem.balanced(x), int(self.solver.getIterationNumber())


def _failure(kind: str, error: Exception) -> str:
    reason = str(error).strip().splitlines()[-1:] or [type(error).__name__]  # its other lines say where in PETSc
    return f"petsc could not use its multigrid {kind} ({reason[0]}); take another method"


def _destroy(*objects: Any) -> None:
    for item in objects:
        item.destroy()
