"""Poisson problems with power-law edges: a convex problem, solved by damped Newton steps and proved by duality."""

from dataclasses import dataclass, replace

import numpy as np

from dec.arrays import FloatArray, IntArray
from dec.solvers.balanced import BalancedFlow, Carrier
from dec.solvers.edge_law import drop_of, flow_of, power_bound, power_energy
from dec.solvers.forest import BECAUSE, forest_solution
from dec.solvers.method import Method
from dec.solvers.outcome import Outcome, centred, norm, relative
from dec.solvers.posed import Posed
from dec.solvers.system import System

__all__ = ["solve_power_law"]

_MOST_STEPS = 100
_STEP_ACCURACY = 1e-8  # of each linear solve; a second one takes away what the first left
_WIDEST_FLOOR, _NARROWEST_FLOOR = 1e-2, 1e-16
_FINISHED = 1e-10  # of the gap that is asked for: one more step costs little and squares the gap
_MOST_IDLE = 10  # steps that do not halve the gap, before it is reached


@dataclass(slots=True)
class _State:
    """Potentials u, flows q that balance, and their distance: twice the Fenchel gaps over the energy."""

    u: FloatArray
    q: FloatArray
    gap: float = np.inf


def solve_power_law(problem: Posed, rtol: float, method: str | Method) -> Outcome:
    """Potentials and balanced flows of a problem with exponents 1 to 2.

    Parameters
    ----------
    problem : Posed
        With positive conductances.
    rtol : float
        The root of gap over energy that must be reached; for exponents of 1 this is the relative error in the energy
        norm.
    method : str or method object
        For the linear problem of each step.

    Returns
    -------
    Outcome

    Notes
    -----
    Among flows that balance, the content, the sum of |q|^(n+1) / ((n+1) c), is least for the solution. A Newton step
    weighs every edge with c / (n |q|^(n-1)), which has no limit where the flow is zero; there the step, and not the
    problem, is changed: an edge whose drop is below a small share of the largest in its component counts as having
    that drop. The share shrinks tenfold a step. The slope of the content along a step decides how far it goes.
    Source: Todini and Pilati, A gradient algorithm for the analysis of pipe networks, 1988 (the step); Boyd and
    Vandenberghe, Convex Optimization, 2004, section 9.5 (damping; both from memory).
    """
    columns = []
    for j in range(problem.source.shape[1]):
        one = slice(j, j + 1)
        column = replace(
            problem, source=problem.source[:, one], source_rest=problem.source_rest[:, one],
            source_doubt=problem.source_doubt[:, one], start=problem.start[:, one],
        )  # fmt: skip
        columns.append(_solve_column(column, rtol, method))
    return columns[0] if len(columns) == 1 else _joined(columns)


def _solve_column(problem: Posed, rtol: float, method: str | Method) -> Outcome:
    c, n = problem.conductance[:, None], problem.exponent[:, None]
    carrier = Carrier(problem, problem.conductance)
    if carrier.is_whole and method == "auto":
        u, flow = forest_solution(carrier)
        how: tuple[int, str, str, tuple[str, ...]] = (0, "forest", BECAUSE, ())
    else:
        search = _Search(problem, method)
        best, steps = search.run(rtol)
        u, flow = best.u, Carrier(problem, search.weight[:, 0]).balance(best.q, np.zeros_like(best.q))
        how = (steps, f"damped Newton with {search.method}", search.because, search.notes)
    left = problem.residual(flow_of(-problem.differences(u), c, n))
    right_side = problem.residual(flow_of(-problem.differences(problem.start), c, n))
    bound = power_bound(problem, u, flow)
    energy = power_energy(problem, flow, bound)
    achieved = float(np.sqrt(_ratio(float(bound[0]) ** 2, flow.value, c, n)))
    if not flow.value.any() and not problem.differences(u).any():
        achieved = 0.0  # nothing flows, and the bound is what rounding may hide of the sources
    residual = relative(left, norm(right_side))
    return Outcome(u, flow, residual, np.full(1, np.nan), bound, energy, *how, achieved, achieved <= rtol)


class _Search:
    """The Newton iteration of one column."""

    def __init__(self, problem: Posed, method: str | Method) -> None:
        self.problem = problem
        self.c, self.n = problem.conductance[:, None], problem.exponent[:, None]
        self.part: IntArray = problem.label[problem.tail]
        self._asked = method
        self.weight = np.ones_like(self.c)
        self.method, self.because = "no step", "nothing flows"
        self.notes: tuple[str, ...] = ()

    def run(self, rtol: float) -> tuple[_State, int]:
        """Return the best state and the number of steps."""
        state = self._start()
        best, share, idle, steps = state, _WIDEST_FLOOR, 0, 0
        while (
            best.gap > _FINISHED * rtol**2 and steps < _MOST_STEPS and idle < (1 if best.gap <= rtol**2 else _MOST_IDLE)
        ):
            state = self._step(state, share)
            steps += 1
            idle = 0 if state.gap < 0.5 * best.gap else idle + 1
            best = state if state.gap < best.gap else best
            share = max(share / 10, _NARROWEST_FLOOR)
        return best, steps

    def _start(self) -> _State:
        """Return what the secant of each edge's law gives, taken at the span of the fixed potentials."""
        fixed = self.problem.start[self.problem.is_fixed]
        span = float(np.ptp(fixed)) if len(fixed) else 0.0
        drop = span if span > 0 else 1.0
        u = self.problem.start
        self.weight = flow_of(np.full_like(self.c, drop), self.c, self.n) / drop
        return self._measured(*self._solved(u, -self.weight * self.problem.differences(u)))

    def _step(self, state: _State, share: float) -> _State:
        c, n, problem = self.c, self.n, self.problem
        loss = drop_of(state.q, c, n)
        largest = np.zeros(problem.n_components)
        np.maximum.at(largest, self.part, np.abs(loss[:, 0]))
        size = np.maximum(np.abs(state.q), flow_of(share * largest[self.part][:, None], c, n))
        size[size == 0] = 1.0  # nothing flows in this component
        self.weight = c / (n * size ** (n - 1.0))
        u, q = self._solved(state.u, state.q - self.weight * (loss + problem.differences(state.u)))
        way = q - state.q
        return self._measured(u, state.q + self._length(state.q, way, problem.differences(u)) * way)

    def _solved(self, u: FloatArray, q: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Return potentials and flows moved together, with the present weights, until the flows balance."""
        system = System(self.problem, self.weight[:, 0], self._asked)
        for _ in range(2):
            change = system.solve(self.problem.residual(q), _STEP_ACCURACY)
            u, q = u + change, q - self.weight * self.problem.differences(change)
        self.method, self.because, self.notes = system.method, system.because, system.notes
        return centred(self.problem, u), q

    def _length(self, q: FloatArray, way: FloatArray, du: FloatArray) -> float:
        """Return how far to go: 1, or a place where the slope of the content is at most half of what it was at 0."""

        def slope(t: float) -> float:
            return float((way * (drop_of(q + t * way, self.c, self.n) + du)).sum())

        allowed = 0.5 * abs(slope(0.0))
        low, high, t = 0.0, 1.0, 1.0
        for _ in range(50):
            here = slope(t)
            if abs(here) <= allowed or (t == 1.0 and here < 0):
                return t
            low, high = (low, t) if here > 0 else (t, high)
            t = (low + high) / 2
        return low

    def _measured(self, u: FloatArray, q: FloatArray) -> _State:
        """Return the state with an estimate of its gap; the proof at the end is separate."""
        driven = flow_of(-self.problem.differences(u), self.c, self.n)
        stiffness = self.n * np.maximum(np.abs(q), np.abs(driven)) ** (self.n - 1.0) / self.c
        return _State(u, q, _ratio(float((stiffness * (q - driven) ** 2).sum()), q, self.c, self.n))


def _ratio(gap: float, q: FloatArray, c: FloatArray, n: FloatArray) -> float:
    """Return gap over energy; infinite where numbers are too small for float64 to hold an energy."""
    energy = float((np.abs(q) ** (n + 1.0) / c).sum())
    if energy > 0:
        return gap / energy
    return np.inf if gap > 0 or q.any() else 0.0


def _joined(columns: list[Outcome]) -> Outcome:
    """Return the outcomes of single columns as one; iterations are those of the longest."""
    parts = [column.flow for column in columns]
    flow = BalancedFlow(*(np.hstack([getattr(f, name) for f in parts]) for name in BalancedFlow.__slots__))
    energies = [column.energy for column in columns if column.energy is not None]
    first, reached = columns[0], all(column.reached for column in columns)
    return Outcome(
        np.hstack([column.potential for column in columns]), flow,
        np.concatenate([column.residual for column in columns]), np.full(len(columns), np.nan),
        np.concatenate([column.bound for column in columns if column.bound is not None]),
        np.hstack(energies) if energies else None, max(column.iterations for column in columns), first.method,
        first.because, first.notes, max(column.achieved for column in columns), reached,
    )  # fmt: skip
