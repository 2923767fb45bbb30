"""Poisson problems whose flow is proportional to drop: solved, corrected, and proved."""

import numpy as np

from dec.arrays import FloatArray
from dec.solvers.balanced import BalancedFlow, Carrier
from dec.solvers.bounds import energy_between, linear_bound
from dec.solvers.drive import downhill_flow
from dec.solvers.forest import BECAUSE, forest_solution
from dec.solvers.method import Method
from dec.solvers.outcome import Outcome, centred, norm, relative
from dec.solvers.pairs import UNIT
from dec.solvers.posed import Posed
from dec.solvers.system import System
from dec.topology.edges import blocks

__all__ = ["solve_linear"]

_REFINEMENT = 1e-2  # relative accuracy of a solve that takes away what an earlier one left
_CORRECTION = 3e-2  # and of one that only the bound needs: it is loose by about as much
_MOST_REFINEMENTS = 4
_MOST_CORRECTIONS = 3
_FLOORS = 10.0  # times the rounding of float64: no method does better
_LOOSEST = 1e-2  # of the solution's own norm: beyond it small residuals mean nothing, unless rounding is all there is
_CARRIED = 1.0  # share of a correction, in the energy norm, that may go along the forest instead of the best way


def solve_linear(problem: Posed, rtol: float, method: str | Method) -> Outcome:
    """Potentials and balanced flows of a problem with exponents of 1.

    Parameters
    ----------
    problem : Posed
    rtol : float
        For the true relative residual.
    method : str or method object

    Returns
    -------
    Outcome

    Notes
    -----
    Residuals are formed from flows, edge by edge, so that their rounding is relative to the flows and not to
    conductance times potential; one more solve with such a residual gives an accurate correction even where the
    potentials themselves cannot be represented better. Source: iterative refinement, Higham, Accuracy and Stability of
    Numerical Algorithms, 2nd ed. 2002, chapter 12 (from memory).
    """
    carrier = Carrier(problem, problem.conductance)
    right_side = _lacking(problem, problem.start)
    size = norm(right_side)
    if carrier.is_whole and method == "auto":
        potential, flow = forest_solution(carrier)
        left = _lacking(problem, potential)
        how: tuple[int, str, str, tuple[str, ...]] = (0, "forest", BECAUSE, ())
    else:
        system = System(problem, problem.conductance, method)
        potential = centred(problem, problem.start + system.solve(right_side, rtol))
        potential, left = _refined(problem, system, potential, size * rtol)
        flow = _balanced(carrier, system, potential)
        how = (system.iterations, system.method, system.because, system.notes)
    bound = linear_bound(problem, potential, flow) if problem.is_positive else None
    energy = None if bound is None else energy_between(problem, potential, flow, bound)
    residual, backward = relative(left, size), _backward_error(problem, left, potential, size)
    reached = bool((residual <= rtol).all())
    if not reached:
        at_floor = (backward <= _FLOORS * 2 * UNIT) & (residual <= _FLOORS * _floor(problem, potential, size))
        if bound is not None and energy is not None:
            at_floor &= (bound <= _LOOSEST * np.sqrt(energy[1])) | (bound <= _FLOORS * _rounding(problem, potential))
        reached = bool(((residual <= rtol) | at_floor).all())
    achieved = float(residual.max(initial=0.0))
    return Outcome(potential, flow, residual, backward, bound, energy, *how, achieved, reached)


def _lacking(problem: Posed, potential: FloatArray) -> FloatArray:
    return problem.residual(-problem.conductance[:, None] * problem.differences(potential))


def _refined(
    problem: Posed, system: System, potential: FloatArray, allowed: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Return potentials whose residual is within what is allowed, or as small as it gets, and that residual."""
    left = _lacking(problem, potential)
    for turn in range(_MOST_REFINEMENTS):
        is_direct = not system.iterations  # then one more solve costs next to nothing
        if (norm(left) <= allowed).all() and not (turn == 0 and is_direct):
            break
        refined = centred(problem, potential + system.solve(left, _REFINEMENT))
        left_then = _lacking(problem, refined)
        better = norm(left_then) < 0.5 * norm(left)
        if not better.any():
            break
        potential[:, better], left[:, better] = refined[:, better], left_then[:, better]
    return potential, left


def _balanced(carrier: Carrier, system: System, potential: FloatArray) -> BalancedFlow:
    """Return a flow near -c du that balances: most of what it lacks goes the best way, the rest along a forest."""
    problem = carrier.problem
    value, rest = downhill_flow(problem, potential)
    weight, moved = np.sqrt(np.abs(problem.conductance[carrier.edges, None])), np.zeros(value.shape[1])
    for _ in range(_MOST_CORRECTIONS):
        moved += _move(problem, rest, system.solve(carrier.lacking(value, rest), _CORRECTION))
        balanced = carrier.balance(value, rest)
        if (norm(balanced.carried / weight) <= _CARRIED * moved).all():
            break
    return balanced


def _move(problem: Posed, flow: FloatArray, change: FloatArray) -> FloatArray:
    """Take off the flow what a change of the potentials drives back; return the size of that in the energy norm."""
    sizes = []
    for part in blocks(len(flow)):
        c, step = problem.conductance[part, None], change[problem.head[part]] - change[problem.tail[part]]
        flow[part] -= c * step
        sizes.append(norm(np.sqrt(np.abs(c)) * step))
    return norm(np.array(sizes).reshape(-1, flow.shape[1]))


def _backward_error(problem: Posed, left: FloatArray, potential: FloatArray, size: FloatArray) -> FloatArray:
    """Return ||r|| / (||L|| ||u|| + ||b||), with twice the largest diagonal entry for ||L||."""
    n, c = len(problem.label), np.abs(problem.conductance)
    diagonal = np.bincount(problem.tail, c, n) + np.bincount(problem.head, c, n)
    allowed = 2 * diagonal.max(initial=0.0) * norm(potential) + size
    return np.asarray(np.divide(norm(left), allowed, out=np.zeros_like(size), where=allowed > 0))


def _floor(problem: Posed, potential: FloatArray, size: FloatArray) -> FloatArray:
    """Return the relative residual that rounding the potentials alone brings about: 2^-52 || |L| |u| || / ||b||."""
    n, c, u = len(problem.label), np.abs(problem.conductance)[:, None], np.abs(potential)
    terms = c * (u[problem.tail] + u[problem.head])
    at_vertices = np.empty_like(potential)
    for j in range(potential.shape[1]):
        at_vertices[:, j] = np.bincount(problem.tail, terms[:, j], n) + np.bincount(problem.head, terms[:, j], n)
    return 2 * UNIT * relative(at_vertices[~problem.is_fixed], size)


def _rounding(problem: Posed, potential: FloatArray) -> FloatArray:
    """Return the error in the energy norm that rounding the potentials alone may bring about."""
    u = np.abs(potential)
    return 2 * UNIT * norm(np.sqrt(problem.conductance)[:, None] * (u[problem.tail] + u[problem.head]))
