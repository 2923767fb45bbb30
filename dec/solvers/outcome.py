"""What solving a posed problem gives, before it is put on cells."""

from dataclasses import dataclass

import numpy as np

from dec.arrays import FloatArray
from dec.solvers.balanced import BalancedFlow
from dec.solvers.posed import Posed

__all__ = ["Outcome", "centred", "norm", "relative"]


@dataclass(frozen=True, slots=True)
class Outcome:
    """Numbers that solve a posed problem, and what is proved of them.

    Attributes
    ----------
    potential : float64 array, shape (n0, m)
    flow : BalancedFlow
        Of shape (k, m).
    residual : float64 array, shape (m,)
        Norm of what does not balance in the flow that the potentials drive, relative to the right side.
    backward_error : float64 array, shape (m,)
        The same relative to ||L|| ||u|| + ||right side||; nan where the law is not linear.
    bound : float64 array, shape (m,), or None
        As `Solution.error_bound`.
    energy : float64 array, shape (2, m), or None
        Between these lies the energy dissipated.
    iterations : int
    method, because : str
    notes : tuple of str
        What the solver of the linear problem had to say.
    achieved : float
        What is held against the tolerance: the largest relative residual, or root of gap over energy.
    reached : bool
        Whether that is within the tolerance, or float64 allows no better.
    """

    potential: FloatArray
    flow: BalancedFlow
    residual: FloatArray
    backward_error: FloatArray
    bound: FloatArray | None
    energy: FloatArray | None
    iterations: int
    method: str
    because: str
    notes: tuple[str, ...]
    achieved: float
    reached: bool


def centred(problem: Posed, potential: FloatArray) -> FloatArray:
    """The potentials with mean zero in every component that has no fixed one.

    Parameters
    ----------
    problem : Posed
    potential : float64 array, shape (n0, m)

    Returns
    -------
    float64 array, shape (n0, m)

    Examples
    --------
    >>> from dec.calculus.complex import Complex
    >>> from dec.solvers.posed import posed
    >>> problem = posed(Complex.from_edges([0], [1]), [1, -1], None, None, 1.0, "refuse")
    >>> centred(problem, np.array([[3.0], [2.0]])).tolist()
    [[0.5], [-0.5]]
    """
    if problem.has_outlet.all():
        return potential
    count, label = problem.n_components, problem.label
    size = np.bincount(label, minlength=count)
    result = potential.copy()
    for j in range(potential.shape[1]):
        mean = np.bincount(label, weights=potential[:, j], minlength=count) / size
        mean[problem.has_outlet] = 0.0
        result[:, j] -= mean[label]
    return result


def norm(values: FloatArray) -> FloatArray:
    """Euclidean norm of each column, without overflow or underflow on the way."""
    largest = np.abs(values).max(axis=0, initial=0.0)
    scale = np.where(largest > 0, largest, 1.0)
    return np.asarray(largest * np.sqrt(((values / scale) ** 2).sum(axis=0)))


def relative(left: FloatArray, size: FloatArray) -> FloatArray:
    """Norm of each column of `left` over `size`; zero where the size is."""
    return np.asarray(np.divide(norm(left), size, out=np.zeros_like(size), where=size > 0))
