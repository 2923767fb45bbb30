"""Conjugate gradients until the true residual is small: restarts, several columns, and the answer checked."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from dec.arrays import AnyArray, FloatArray
from dec.solvers import block_gradients
from dec.solvers.gradients import FactoredSystem, ScaledSystem, Vectors, descend
from dec.solvers.method import Answer, Check, answer_of
from dec.solvers.problem import LinearProblem

__all__ = ["Descent"]

_AT_ONCE = 32  # steps between looks at how it goes
_SLOW = 0.5  # when that many steps gain less, the true residual is looked at now and then
_BLOCK = 8  # columns at once
_RESTARTS = 3  # without gain


@dataclass(frozen=True, slots=True, eq=False)
class Descent:
    """A matrix and its preconditioner, ready for conjugate gradients.

    Attributes
    ----------
    problem : LinearProblem
    system : ScaledSystem or FactoredSystem
        In the numbering of `order`.
    order : int array, shape (n,), or None
        Which unknown stands at each place; None where nothing was renumbered.
    name : str
    most_steps : int
        Where the caller sets no limit.
    notes : tuple of str
    """

    problem: LinearProblem
    system: ScaledSystem | FactoredSystem
    order: AnyArray | None
    name: str
    most_steps: int
    notes: tuple[str, ...]

    def solve(self, b: ArrayLike, rtol: float = 1e-8, max_iterations: int | None = None) -> Answer:
        """Solve for one right-hand side or several; see `dec.solvers.method.Prepared`."""
        right = self.problem.right_side(b)
        limit = self.most_steps if max_iterations is None else max_iterations
        if right.ndim == 1:
            return answer_of(*self._column(right, np.zeros_like(right), rtol, limit), rtol, self.name)
        x = np.zeros_like(right)
        steps = 0
        histories = []
        for first in range(0, right.shape[1], _BLOCK):
            block = slice(first, first + _BLOCK)
            x[:, block], norms = self._block(right[:, block], rtol, limit)
            taken = len(norms) - 1
            steps = max(steps, taken)
            histories.append(norms)
            check = Check.of(self.problem, x[:, block], right[:, block], rtol)
            for k in np.flatnonzero(~check.met_each) + first:
                x[:, k], _, more, _ = self._column(right[:, k], x[:, k], rtol, limit - taken)
                steps = max(steps, taken + more)
        longest = max(histories, key=len, default=np.empty(0))
        return answer_of(x, Check.of(self.problem, x, right, rtol), steps, longest, rtol, self.name)

    def _column(
        self, b: FloatArray, start: FloatArray, rtol: float, limit: int
    ) -> tuple[FloatArray, Check, int, FloatArray]:
        """Return x, its check, the steps taken, and the relative residuals on the way."""
        size = float(np.sqrt(np.einsum("i,i", b, b)))
        x, check = start, Check.of(self.problem, start, b, rtol)
        best, idle = float(check.residual[0]), 0
        norms = [best]
        while not check.met and idle < _RESTARTS and len(norms) <= limit:
            trial, check_then = self._run(x, check.left, b, rtol, size, limit, norms)
            residual = float(check_then.residual[0])
            idle = 0 if residual <= 0.5 * best else idle + 1
            if residual < best:
                x, check, best = trial, check_then, residual
        return x, check, len(norms) - 1, np.array(norms)

    def _run(
        self, start: FloatArray, left: FloatArray, b: FloatArray, rtol: float, size: float, limit: int,
        norms: list[float],
    ) -> tuple[FloatArray, Check]:  # fmt: skip
        """Return x and its check when the recurrence has converged, broken down or drifted from the true residual."""
        vectors = Vectors.at_start(np.array(self._there(self.problem.balanced(left))), len(self.system.singular))
        stop = _aim(rtol) * size
        look = len(norms) + _AT_ONCE
        while True:
            most = min(_AT_ONCE, limit + 1 - len(norms))
            before = vectors.numbers[1]
            some = descend(self.system, vectors, stop, most)
            norms.extend(norm / size for norm in some)
            norm = vectors.numbers[1]
            done = len(some) < most or not norm > stop or len(norms) > limit
            is_slow = norm > _SLOW * before and len(norms) >= look
            if done or is_slow:
                look = len(norms) + len(norms) // 4
                x = self.problem.balanced(start + self._back(vectors.x))
                check = Check.of(self.problem, x, b, rtol)
                if done or check.met or check.residual[0] * size > 2 * norm:
                    return x, check

    def _block(self, b: FloatArray, rtol: float, limit: int) -> tuple[FloatArray, FloatArray]:
        """Return x of several columns, and the largest relative residual on the way."""
        size = np.sqrt(np.einsum("ij,ij->j", b, b))
        r = np.array(self._there(self.problem.balanced(b)), order="C")  # used up, so never the caller's own
        x, norms = block_gradients.descend_columns(self.system, r, _aim(rtol) * size, limit, _AT_ONCE)
        relative = np.divide(norms, size, out=np.zeros_like(norms), where=size > 0)
        return self.problem.balanced(self._back(x)), np.asarray(relative.max(axis=1))

    def _there(self, values: FloatArray) -> FloatArray:
        return values if self.order is None else np.ascontiguousarray(values[self.order])

    def _back(self, values: FloatArray) -> FloatArray:
        if self.order is None:
            return values
        result = np.empty_like(values)
        result[self.order] = values
        return result


def _aim(rtol: float) -> float:
    """Return the relative residual at which the recurrence stops: below, or where it says nothing more of the truth."""
    return max(0.9 * rtol, 2.0**-56)
