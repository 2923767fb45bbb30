"""What every method of solving has in common: prepare once, solve many, and an answer that was checked."""

from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import ArrayLike

from dec.arrays import BoolArray, FloatArray
from dec.errors import AccuracyError
from dec.solvers.problem import LinearProblem

__all__ = ["Answer", "Check", "Method", "Prepared", "answer_of", "power_above"]

_EPS = float(np.finfo(np.float64).eps)
# Normwise backward error, and residual over the rounding of one product, at which no solver in float64 does better.
LARGEST_BACKWARD_ERROR = 10 * _EPS
_FLOORS = 10.0


@dataclass(frozen=True, slots=True, eq=False)
class Answer:
    """A solution and how good it is; of several columns, the worst.

    Attributes
    ----------
    x : float64 array, shape (n,) or (n, m)
        With mean zero on every singular component.
    residual : float
        ||b - A x|| / ||b||, recomputed from x; 0 for b = 0 solved by 0.
    backward_error : float
        ||b - A x|| / (||A|| ||x|| + ||b||) in the infinity norm.
    floor : float or None
        2^-52 || |A| |x| + |b| || / ||b||: below some ten times this the residual is rounding. Worked out, and not None,
        only where a residual misses `rtol`; such an answer is accepted at the floor alone, with a backward error of at
        most 10 units of rounding.
    iterations : int
        Steps taken, refinement included; 0 for a direct method that needed none.
    history : float64 array, shape (iterations + 1,) or shorter
        Relative residuals on the way, as the iteration saw them.
    """

    x: FloatArray
    residual: float
    backward_error: float
    floor: float | None
    iterations: int
    history: FloatArray


class Prepared(Protocol):
    """A method made ready for one matrix."""

    @property
    def notes(self) -> tuple[str, ...]:
        """What the preparation had to say: entries dropped, vertices grounded."""

    def solve(self, b: ArrayLike, rtol: float = 1e-8, max_iterations: int | None = None) -> Answer:
        """Solve for one right-hand side or several.

        Parameters
        ----------
        b : array_like, shape (n,) or (n, m)
            What each singular component cannot take, the mean of b over it, stays in the residual.
        rtol : float
            For the true relative residual of every column.
        max_iterations : int or None
            None lets the method choose.

        Returns
        -------
        Answer

        Raises
        ------
        AccuracyError
            If a column misses `rtol` although float64 allows it; its ``partial`` is the Answer.
        InputError
            If b does not fit the problem.
        """


class Method(Protocol):
    """A way of solving: a small frozen object that holds its options."""

    @property
    def name(self) -> str:
        """One word for tables and JSON."""

    def prepare(self, problem: LinearProblem) -> Prepared:
        """Do once what all right-hand sides share."""


@dataclass(frozen=True, slots=True, eq=False)
class Check:
    """How well each column of x solves A x = b, recomputed.

    Attributes
    ----------
    left : float64 array, of the shape of b
        b - A x.
    residual, backward_error : float64 arrays, shape (m,)
        As in `Answer`, column by column.
    floor : float64 array, shape (m,), or None
        None where every column has a residual within rtol, or x is zero.
    met_each : bool array, shape (m,)
        Whether the residual is within rtol, or is rounding.
    """

    left: FloatArray
    residual: FloatArray
    backward_error: FloatArray
    floor: FloatArray | None
    met_each: BoolArray

    @property
    def met(self) -> bool:
        """Whether every column is good enough."""
        return bool(self.met_each.all())

    @classmethod
    def of(cls, problem: LinearProblem, x: FloatArray, b: FloatArray, rtol: float) -> "Check":
        """The check of x."""
        left = b - problem.matrix @ x if x.any() else b
        size = _norms(b)
        residual = _ratio(_norms(left), size)
        backward = _ratio(_largest(left), problem.norm * _largest(x) + _largest(b))
        if left is b or (residual <= rtol).all():
            return cls(left, residual, backward, None, residual <= rtol)
        floor = _EPS * _ratio(_norms(abs(problem.matrix) @ np.abs(x) + np.abs(b)), size)
        at_floor = (backward <= LARGEST_BACKWARD_ERROR) & (residual <= _FLOORS * floor)
        return cls(left, residual, backward, floor, (residual <= rtol) | at_floor)


def answer_of(x: FloatArray, check: Check, iterations: int, history: FloatArray, rtol: float, name: str) -> Answer:
    """The answer x, if its check is good enough.

    Parameters
    ----------
    x : float64 array, shape (n,) or (n, m)
    check : Check
    iterations : int
    history : float64 array
    rtol : float
    name : str
        The method's, for the message.

    Returns
    -------
    Answer

    Raises
    ------
    AccuracyError
        If a column misses `rtol` although float64 allows it.

    Notes
    -----
    Source of the backward error: Rigal and Gaches, On the compatibility of a given solution with the data of a linear
    system, J. ACM 14 (1967).
    """
    floor = None if check.floor is None else _worst(check.floor)
    answer = Answer(x, _worst(check.residual), _worst(check.backward_error), floor, iterations, history)
    if not check.met:
        allows = "" if floor is None else f", rounding allows about {floor:.1g}"
        message = (
            f"{name} must reach a relative residual of {rtol:g}, got {answer.residual:.3g} after {iterations} steps "
            f"(backward error {answer.backward_error:.3g}{allows}); allow more steps, a larger rtol, or take another "
            "method"
        )
        raise AccuracyError(message, answer)
    return answer


def power_above(values: FloatArray) -> float:
    """The power of two just above the largest size, 1 where all are zero: dividing by it rounds nothing.

    Libraries that take what is very small for zero, or square what is very large, are given numbers over this.

    Examples
    --------
    >>> power_above(np.array([-5.0, 3.0])), power_above(np.zeros(2))
    (8.0, 1.0)
    """
    largest = float(np.abs(values).max(initial=0.0))
    return float(np.ldexp(1.0, min(int(np.frexp(largest)[1]), 1023))) if largest else 1.0


def _worst(values: FloatArray) -> float:
    """Return the largest value, nan if there is one; 0 for no column at all."""
    return float(values.max()) if values.size else 0.0


def _norms(values: FloatArray) -> FloatArray:
    """Return the 2-norm of each column, shape (m,); einsum calls no threaded BLAS."""
    columns = values[:, None] if values.ndim == 1 else values
    return np.asarray(np.sqrt(np.einsum("ij,ij->j", columns, columns)))


def _largest(values: FloatArray) -> FloatArray:
    columns = values[:, None] if values.ndim == 1 else values
    return np.asarray(np.abs(columns).max(axis=0, initial=0.0))


def _ratio(part: FloatArray, whole: FloatArray) -> FloatArray:
    """Return part / whole, with 0 for 0 / 0."""
    result = np.full(len(part), np.inf)
    np.divide(part, whole, out=result, where=whole > 0)
    result[part == 0] = 0.0
    return result
