"""The linear engine as Poisson problems use it: one Laplacian, prepared once, solved for many residuals."""

import numpy as np

from dec.arrays import FloatArray
from dec.errors import AccuracyError, UnsolvableError
from dec.solvers.choice import Choice, method_named
from dec.solvers.elimination import Elimination
from dec.solvers.method import Method, Prepared
from dec.solvers.posed import Posed
from dec.solvers.problem import LinearProblem

__all__ = ["System"]


class System:
    """The Laplacian of a posed problem with given conductances, ready to solve.

    Parameters
    ----------
    problem : Posed
    conductance : float64 array, shape (k,)
        May differ from the problem's own.
    method : str or method object

    Attributes
    ----------
    method, because : str
    notes : tuple of str
        What the preparation had to say.
    iterations : int
        Of all solves so far.

    Raises
    ------
    InputError
        If there is no such method, or a part that it needs is not installed.
    AccuracyError, UnsolvableError
        If the method asked for broke down.
    """

    def __init__(self, problem: Posed, conductance: FloatArray, method: str | Method) -> None:
        self._free = ~problem.is_fixed
        fixed = problem.is_fixed if problem.is_fixed.any() else None
        linear = LinearProblem.of_graph(problem.tail, problem.head, len(problem.label), conductance, fixed)
        choice, self._prepared = _prepared(linear, method, problem)
        self.method, self.because, self.notes = choice.method.name, choice.because, self._prepared.notes
        self.iterations = 0

    def solve(self, residual: FloatArray, rtol: float) -> FloatArray:
        """Potentials x with L x = residual, zero where fixed.

        Parameters
        ----------
        residual : float64 array, shape (n0, m)
        rtol : float

        Returns
        -------
        float64 array, shape (n0, m)
            What was reached, where the engine could not reach rtol: callers measure the outcome themselves.
        """
        x = np.zeros_like(residual)
        if not residual.any():
            return x
        try:
            answer = self._prepared.solve(residual[self._free], rtol)
        except AccuracyError as error:
            if not hasattr(error.partial, "x"):
                raise
            answer = error.partial  # type: ignore[assignment]
        x[self._free] = answer.x
        self.iterations += answer.iterations
        return x


def _prepared(linear: LinearProblem, method: str | Method, problem: Posed) -> tuple[Choice, Prepared]:
    """Return the method and what it prepared; where the chosen one breaks down, elimination, which never subtracts."""
    choice = method_named(method, linear, problem.source.shape[1])
    try:
        return choice, choice.method.prepare(linear)
    except (AccuracyError, UnsolvableError):
        if method != "auto" or not problem.is_positive:
            raise
    second = Elimination()
    because = f"{choice.method.name} broke down on conductances that are too far apart for it"
    return Choice(second, because), second.prepare(linear)
