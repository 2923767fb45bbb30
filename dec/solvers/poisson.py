"""Poisson problems on any complex: potentials from sources, fixed potentials and conductances, with a proof."""

from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from dec.arrays import FloatArray
from dec.calculus.cochain import Cochain
from dec.calculus.complex import Complex
from dec.errors import AccuracyError, InputError
from dec.solvers.given import (
    Conductance,
    Fixed,
    Source,
    given_conductances,
    given_exponents,
    given_fixed,
    given_sources,
)
from dec.solvers.linear import solve_linear
from dec.solvers.method import Method
from dec.solvers.outcome import Outcome
from dec.solvers.posed import Posed, posed
from dec.solvers.power_law import solve_power_law
from dec.solvers.solution import Solution

__all__ = ["solve_poisson"]

_LOOSE = 1e-3  # share of the energy norm from which an error is worth a note


def solve_poisson(
    K: Complex, source: Source, *, conductance: Conductance = None, fixed: Fixed = None, exponent: ArrayLike = 1.0,
    rtol: float = 1e-8, method: str | Method = "auto", unbalanced: str = "refuse",
) -> Solution:  # fmt: skip
    """Potentials and flows for given sources and fixed potentials, with a bound on their error.

    L u = source at every vertex that is not fixed, with L = d^T diag(conductance) d. The flow is
    -conductance * d(u), downhill, so that inflow - outflow + source = 0.

    Parameters
    ----------
    K : Complex
        Of any dimension; only its vertices and edges matter. Parallel edges add up, a self-loop carries nothing.
    source : array_like of shape (n0,) or (n0, m), Cochain of degree 0, or mapping of vertex id to number
        What is put in at each vertex, per vertex and not per area: a density on a mesh is multiplied by
        ``metric.weights(0)`` first. Flux through the boundary is part of it: add what enters at each boundary vertex,
        for example flux density times half the length of the two boundary edges there. m columns are solved at once.
        What is put in where the potential is fixed changes nothing but the reaction there.
    conductance : float array_like of shape (n1,), Metric, or None
        Flow per drop, in units of source per potential; positive. A metric gives the weights of its edges, so that L
        is its vertex Laplacian; weights may then be zero or negative. None counts every edge as 1.
    fixed : mapping of vertex id to potential, (indices, values), or None
        Met exactly. Values of shape (k, m) fix every column on its own.
    exponent : float or float array_like of shape (n1,)
        n from 1 to 2 in drop = flow |flow|^(n-1) / conductance: 1 for Ohm, Darcy and Fourier, 1.852 for Hazen and
        Williams, 2 for turbulent loss k q |q| with conductance 1 / k.
    rtol : float
        Largest true relative residual; under a power law the largest root of twice the Fenchel gaps over the energy,
        which is the relative error in the energy norm where n is 1.
    method : str or method object
        "auto" lets the measured problem decide; "direct", "cholmod", "multigrid", "elimination", "gradients", "petsc",
        or such an object with its own options, is used for the linear problems as asked.
    unbalanced : "refuse" or "spread"
        What to do where sources in a component without a fixed potential do not add up to zero. A surplus that
        rounding explains (n 2^-52 sum |source|) is spread evenly over the component's vertices in both cases.

    Returns
    -------
    Solution
        In a component without a fixed potential the potentials have mean zero.

    Raises
    ------
    InputError
        If an argument has the wrong shape or kind, a conductance is not positive and finite, an exponent is not in 1
        to 2, or a vertex is not known, and the message names the cell; or if the numbers are so large that their
        products leave the range of float64.
    UnsolvableError
        If sources do not add up to zero in a component without a fixed potential; the message names its first
        vertices and the surplus. Decided by exact sums before anything is solved.
    AccuracyError
        If `rtol` was not reached although float64 allows it, or float64 does not allow an error bound below a
        hundredth of the solution; ``partial`` holds the Solution with its true residual.

    Notes
    -----
    Where the potentials that float64 can hold have no residual within rtol, a normwise backward error of at most
    10 x 2^-52 counts as success, and a note states both numbers. Source of the bound: `dec.solvers.bounds` and, under
    a power law, `dec.solvers.edge_law`.

    Examples
    --------
    >>> K = Complex.from_edges([0, 1, 0], [1, 2, 2])
    >>> solution = solve_poisson(K, {0: 3.0}, fixed={2: 1.0})
    >>> solution.potential.values
    array([3., 2., 1.])
    >>> solution.flow.values
    array([1., 1., 2.])
    """
    if not (isinstance(rtol, float | int | np.floating) and 0 < rtol < 1):
        message = f"rtol must be a number between 0 and 1, got {rtol!r}"
        raise InputError(message)
    try:
        with np.errstate(over="raise", invalid="raise"):
            problem = posed(K, source, conductance, fixed, exponent, unbalanced)
            solve = solve_linear if problem.is_linear else solve_power_law
            outcome = solve(problem, float(rtol), method)
            asked = {
                "rtol": float(rtol), "method": method if isinstance(method, str) else method.name,
                "unbalanced": unbalanced,
                "exponent": np.asarray(exponent, dtype=np.float64).item() if np.ndim(exponent) == 0 else "one an edge",
            }  # fmt: skip
            solution = _solution(problem, outcome, asked)
            if not outcome.reached:
                raise AccuracyError(_shortfall(problem, solution, outcome, float(rtol)), solution)
    except (FloatingPointError, OverflowError):
        raise InputError(_beyond_range(K, source, conductance, fixed, exponent)) from None
    return solution


def _beyond_range(K: Complex, source: Source, conductance: Conductance, fixed: Fixed, exponent: ArrayLike) -> str:
    weights = given_conductances(K, conductance)[0]
    sources = given_sources(K, source)[0]
    with np.errstate(over="ignore", invalid="ignore"):
        is_fixed, start = given_fixed(K, fixed, sources.shape[1], K.component_labels, K.n_components)
    held = f", fixed potentials up to {np.abs(start[is_fixed]).max():.3g}" if is_fixed.any() else ""
    power = given_exponents(K, exponent).max(initial=1.0)
    return (
        "float64 (up to 1.8e308) must hold flows, drops, and the energy, which is their product; got sources up to "
        f"{np.abs(sources).max(initial=0.0):.3g}{held}, conductances from {weights.min(initial=np.inf):.3g} to "
        f"{weights.max(initial=0.0):.3g}, an exponent of {power:.4g}; correct what is too large, or give it in a "
        "larger unit"
    )


def _solution(problem: Posed, outcome: Outcome, asked: dict[str, Any]) -> Solution:
    network = problem.network
    flow = np.zeros((len(network.tail), outcome.potential.shape[1]))
    flow[problem.edges] = outcome.flow.value
    bound, energy = outcome.bound, outcome.energy
    residual = float(outcome.residual.max(initial=0.0))
    return Solution(
        potential=Cochain(network, 0, _shaped(problem, outcome.potential)),
        flow=Cochain(network, 1, _shaped(problem, flow)),
        residual=residual,
        error_bound=None if bound is None else _number(problem, bound),
        energy=None if energy is None else (_number(problem, energy[0]), _number(problem, energy[1])),
        method=outcome.method,
        because=outcome.because,
        iterations=outcome.iterations,
        gauge=_gauge(problem),
        n_components=problem.n_components,
        backward_error=float(outcome.backward_error.max(initial=0.0)) if problem.is_linear else None,
        asked=asked,
        notes=problem.notes + _notes(problem, outcome, residual, asked["rtol"]),
    )


def _shaped(problem: Posed, values: FloatArray) -> FloatArray:
    return values[:, 0] if problem.is_plain else values


def _number(problem: Posed, values: FloatArray) -> float | FloatArray:
    return float(values[0]) if problem.is_plain else values


def _gauge(problem: Posed) -> str:
    n_fixed, n_free = int(problem.is_fixed.sum()), int((~problem.has_outlet).sum())
    fixed = f"as fixed at {n_fixed:,} {'vertex' if n_fixed == 1 else 'vertices'}"
    if not n_free:
        return fixed if n_fixed else "nothing to fix: there are no vertices"
    count = problem.n_components
    if count == 1:
        return "mean potential zero"
    where = f"in each of the {n_free:,} components" if n_free > 1 else "in the component"
    return f"mean potential zero {where} without a fixed one" + (f"; elsewhere {fixed}" if n_fixed else "")


def _notes(problem: Posed, outcome: Outcome, residual: float, rtol: float) -> tuple[str, ...]:
    notes = list(outcome.notes)
    if outcome.bound is None:
        count = int((problem.conductance <= 0).sum())
        notes.append(
            f"no error bound: {count:,} edges have a negative weight in the metric, and the proof needs positive ones"
        )
    if outcome.reached and _error_share(outcome) > _LOOSE:
        notes.append(
            f"residuals are small, but the potentials may be off by {100 * _error_share(outcome):.2g} % in the energy "
            "norm: conductances far apart let small residuals hide large errors"
        )
    if problem.is_linear and outcome.reached and residual > rtol:
        notes.append(
            f"the residual asked for, {rtol:g}, lies below what float64 potentials can hold here: {residual:.3g} was "
            f"reached, with a normwise backward error of {outcome.backward_error.max():.3g}"
        )
    return tuple(notes)


def _shortfall(problem: Posed, solution: Solution, outcome: Outcome, rtol: float) -> str:
    what = "relative residual" if problem.is_linear else "root of twice the Fenchel gaps over the energy"
    ratio = float(problem.conductance.max() / problem.conductance.min()) if problem.is_positive else None
    spread = "" if ratio is None else f", which are up to {ratio:.1g} apart"
    share = _error_share(outcome)
    error = f", with an error of up to {100 * share:.2g} % in the energy norm" if share else ""
    return (
        f"{solution.method} must reach a {what} of {rtol:g}, got {outcome.achieved:.3g} after {solution.iterations} "
        f"iterations{error}; choose a larger rtol or another method, or look for stray powers of ten "
        f'among the conductances{spread}; "partial" holds the result so far'
    )


def _error_share(outcome: Outcome) -> float:
    """Return the largest bound over the root of the energy; 0 where there is neither."""
    if outcome.bound is None or outcome.energy is None:
        return 0.0
    root = np.sqrt(outcome.energy[1])
    return float(np.divide(outcome.bound, root, out=np.zeros_like(root), where=root > 0).max(initial=0.0))
