"""The weighted graph Laplacian of a network, prepared once: both laws adjust with it."""

from collections.abc import Iterator
from functools import cached_property
from typing import NoReturn

import numpy as np
from scipy.sparse import csc_array, csr_array
from scipy.sparse.linalg import splu

from dec.arrays import BoolArray, FloatArray, IntArray
from dec.errors import AccuracyError, InputError
from dec.solvers.choice import Choice, choose
from dec.solvers.diagonal import DiagonalGradients
from dec.solvers.direct import Direct
from dec.solvers.elimination import Elimination
from dec.solvers.fill import sparse_order
from dec.solvers.method import Prepared
from dec.solvers.problem import LinearProblem
from dec.solvers.selected_inverse import resistances
from dec.topology.edges import edge_coboundary
from dec.topology.graphs import bridges, components

__all__ = ["BLOCK", "Laplacian"]

# Right-hand sides at once: so few that the matrix library starts no threads, ten times as dear on busy cores.
BLOCK = 4
# Entries of a factor for each unknown up to which it is worth making, once a graph is too large to try: it is what
# gives the figures of all single edges.
_MOST_FILL = 40
_SMALL, _FILL_AT_HAND = 5_000, 2_000_000
# Conductances further apart than this: differences of potentials lose too many digits, energies do not.
_NARROW = 1e3
# Conductances further apart than this: a sum of two keeps hardly a digit of the smaller one.
_WIDEST = 1e14
_TURNS = 20
_ROUNDING = 8 * float(np.finfo(np.float64).eps)
_ENOUGH = 1e-10
# Shares whose rounding may reach this part of them are worked out in another way.
_DOUBTFUL = 1e-10
# and where that is not done, since there are too many, they are left out from this part on.
_HOPELESS = 1e-5
_MOST_AGAIN = 2_000
_INNER = 1e-8  # for iterative methods: `change` takes as many turns as it needs


class Laplacian:
    """L = D^T C D for the differences D along edges and positive conductances C.

    One vertex of each component is grounded, so what is solved is positive definite.

    Parameters
    ----------
    tail, head : int64 arrays, shape (m,)
    n_vertices : int
    conductance : float64 array, shape (m,)
        Positive.
    ground : int or None
        The vertex to ground in its component; the lowest one elsewhere.

    Attributes
    ----------
    n_components : int
    component : int64 array, shape (n_vertices,)
    grounded : int64 array, shape (n_vertices,)
        The grounded vertex of each vertex's component.
    difference, gather : csr_array, shape (m, n_vertices) and (n_vertices, m)
        Head minus tail, and its transpose: inflow minus outflow.
    because : str
        How it is solved, and why.

    Raises
    ------
    AccuracyError
        If the conductances lie too far apart for double precision; `change` and what builds on it raise it too.
    """

    def __init__(
        self, tail: IntArray, head: IntArray, n_vertices: int, conductance: FloatArray, ground: int | None = None
    ) -> None:
        self.tail, self.head, self.conductance = tail, head, conductance
        self._ratio = float(conductance.max() / conductance.min()) if len(tail) else 1.0
        if not self._ratio <= _WIDEST:
            self._refuse(f"{np.sqrt(_WIDEST):.0e} times is the most")
        self.n_components, self.component = components(tail, head, n_vertices)
        grounded = np.unique(self.component, return_index=True)[1]
        if ground is not None:
            grounded[self.component[ground]] = ground
        is_grounded = np.zeros(n_vertices, dtype=bool)
        is_grounded[grounded] = True
        self._free = np.flatnonzero(~is_grounded)
        self.grounded = grounded[self.component]
        self.difference: csr_array = edge_coboundary(tail, head, n_vertices).astype(np.float64)
        self.gather: csr_array = self.difference.T.tocsr()
        problem = LinearProblem.of_graph(tail, head, n_vertices, conductance, is_grounded)
        self._factor, self._prepared, self.because = self._made_ready(problem)
        self._figures: dict[str, tuple[FloatArray | None, FloatArray | None, float]] = {}

    @property
    def n_vertices(self) -> int:
        """Number of vertices."""
        return len(self.component)

    @property
    def gives_all(self) -> bool:
        """Whether figures of all single edges can be had: there is an exact factor."""
        return self._prepared is None

    @cached_property
    def settled(self) -> BoolArray:
        """True for the bridges: what they carry hangs on nothing else; bool array of shape (m,)."""
        return bridges(self.tail, self.head, self.n_vertices)

    def change(self, missed: FloatArray) -> tuple[FloatArray, FloatArray]:
        """The smallest change of flows, in sum change^2 / C, that makes up for what vertices miss, and its potentials.

        Parameters
        ----------
        missed : float64 array, shape (n_vertices,) or (n_vertices, k)
            Inflow minus outflow plus supply of each vertex; the grounded ones take up what is left over.

        Returns
        -------
        change : float64 array, shape (m,) or (m, k)
            -C D u, with D^T change + missed = 0.
        potential : float64 array, shape (n_vertices,) or (n_vertices, k)
            u, zero at the grounded vertices.

        Notes
        -----
        Each turn solves for what the flows themselves still miss, so that edges of very different conductance all
        come out right though the factors do not. Source for why they do not: Hough and Vavasis, Complete orthogonal
        decomposition for weighted least squares, SIAM J. Matrix Anal. Appl. 18 (1997).
        """
        weight = self.conductance if missed.ndim == 1 else self.conductance[:, None]
        change = np.zeros((len(self.tail), *missed.shape[1:]))
        potential = np.zeros_like(missed, dtype=np.float64)
        rest, worst = missed, np.inf
        for _ in range(_TURNS):
            step = self._solve(rest)
            change -= weight * (self.difference @ step)
            potential += step
            rest = missed + self.gather @ change
            before, worst = worst, self._worst(rest, missed, change)
            if worst <= _ROUNDING or not worst < before / 2:
                break
        if not worst <= _ENOUGH:  # nan must not pass
            self._refuse(f"the law is met to {worst:.1g} only")
        return change, potential

    def figures(self, wanted: str) -> tuple[FloatArray | None, FloatArray | None, float]:
        """`shares` as wanted, and the relative standard error of the shares; None twice where they are too dear.

        Parameters
        ----------
        wanted : "auto", "all" or "estimate"
            From the exact factor where there is one; else not at all, by one solve an edge, or by random projection.
            Worked out once.
        """
        if wanted not in self._figures:
            self._figures[wanted] = self._worked_out(wanted)
        return self._figures[wanted]

    def estimated_shares(self, draws: int = 200, seed: int = 0) -> tuple[FloatArray, FloatArray, float]:
        """`shares` by random projection, and their relative standard error.

        A slack that may be zero within three errors is worked out exactly, up to 2,000 of them; nan beyond.

        Notes
        -----
        Source: Spielman and Srivastava, Graph sparsification by effective resistances, SIAM J. Comput. 40 (2011).
        """
        rng = np.random.default_rng(seed)
        total, root = np.zeros(len(self.tail)), np.sqrt(self.conductance)[:, None]
        for first in range(0, draws, BLOCK):
            signs = rng.integers(0, 2, (len(self.tail), min(BLOCK, draws - first))) * 2.0 - 1.0
            total += ((self.difference @ self._solve(self.gather @ (root * signs))) ** 2).sum(axis=1)
        error = float(np.sqrt(2.0 / draws))
        share = np.clip(self.conductance * total / draws, 0.0, 1.0)
        share[self.settled] = 1.0
        slack = 1.0 - share
        doubtful = np.flatnonzero((slack < 3 * error * share) & ~self.settled & (self.tail != self.head))
        slack[doubtful[_MOST_AGAIN:]] = np.nan
        again = doubtful[:_MOST_AGAIN]
        share[again], slack[again] = self.shares_by_energy(again)
        return share, slack, error

    def shares(self) -> tuple[FloatArray, FloatArray]:
        """Of a unit flow from tail to head of every edge, what the edge itself carries, and what goes another way.

        Returns
        -------
        share, slack : float64 arrays, shape (m,)
            Conductance times the resistance between the ends, exactly 1 on a bridge; they add up to 1. nan where
            conductances lie so far apart that rounding hides them on more than 2,000 edges.

        Notes
        -----
        From entries of the inverse; an edge whose share or slack that leaves in doubt, since conductances lie far
        apart, from the energy of its own unit flow. Source: Klein and Randic, Resistance distance, J. Math. Chem. 12
        (1993).
        """
        share, slack = np.zeros(len(self.tail)), np.ones(len(self.tail))
        share[self.settled], slack[self.settled] = 1.0, 0.0
        asked = np.flatnonzero((self.tail != self.head) & ~self.settled)
        if len(asked):
            between, doubt = (part[asked] for part in self._from_inverse[:2])
            part = np.clip(self.conductance[asked] * between, 0.0, 1.0)
            share[asked], slack[asked] = part, 1.0 - part
            least = np.minimum(part, 1.0 - part)
            ratio = np.nan_to_num(
                self.conductance[asked] * doubt / np.maximum(least, np.finfo(np.float64).tiny), nan=np.inf
            )
            worst = np.argsort(-ratio, kind="stable")[: min(_MOST_AGAIN, int((ratio > _DOUBTFUL).sum()))]
            hopeless = asked[ratio > _HOPELESS]
            share[hopeless] = slack[hopeless] = np.nan
            share[asked[worst]], slack[asked[worst]] = self.shares_by_energy(asked[worst])
        return share, slack

    def shares_by_energy(self, edges: IntArray) -> tuple[FloatArray, FloatArray]:
        """`shares` of a few edges, from the energies of their unit flows: one solve each."""
        share, slack = np.zeros(len(edges)), np.ones(len(edges))
        for part, power in self._powers(self.tail[edges], self.head[edges]):
            edge, column = edges[part], np.arange(part.stop - part.start)
            own = power[edge, column]
            power[edge, column] = 0.0
            others = power.sum(axis=0)
            moved = own > 0.0  # a self-loop carries nothing
            share[part][moved] = own[moved] / (own + others)[moved]
            slack[part][moved] = others[moved] / (own + others)[moved]
        return share, slack

    def resistances(self, start: IntArray, end: IntArray) -> FloatArray:
        """Effective resistances between pairs of vertices of one component each, by one solve a pair.

        Parameters
        ----------
        start, end : int64 arrays, shape (k,)

        Returns
        -------
        float64 array, shape (k,)
        """
        total = np.zeros(len(start))
        if self.gives_all and self._ratio <= _NARROW:
            for part, put_in in self._unit_flows(start, end):
                potential, column = self._solve(put_in), np.arange(part.stop - part.start)
                total[part] = potential[start[part], column] - potential[end[part], column]
            return np.maximum(total, 0.0)
        for part, power in self._powers(start, end):
            total[part] = power.sum(axis=0)
        return total

    def to_ground(self) -> FloatArray:
        """Effective resistance of each vertex to the grounded one of its component; float64 array (n_vertices,)."""
        return self._from_inverse[2]

    def _worked_out(self, wanted: str) -> tuple[FloatArray | None, FloatArray | None, float]:
        if self.gives_all:
            return *self.shares(), 0.0
        if wanted == "all":
            return *self.shares_by_energy(np.arange(len(self.tail))), 0.0
        return self.estimated_shares() if wanted == "estimate" else (None, None, 0.0)

    @cached_property
    def _from_inverse(self) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Return resistances of edges with their doubt, and of vertices to the ground, from entries of the inverse."""
        m, n_free = len(self.tail), len(self._free)
        to_ground = np.zeros(self.n_vertices)
        if not n_free:
            return np.zeros(m), np.zeros(m), to_ground
        number = np.full(self.n_vertices, -1)
        number[self._free] = np.arange(n_free)
        start = np.concatenate([number[self.tail], np.arange(n_free)])
        end = np.concatenate([number[self.head], np.full(n_free, -1)])
        try:
            between, doubt = resistances(self._factor, start, end)
        except InputError:  # an entry of the factor was lost to underflow: nothing can be had from the inverse
            return np.full(m, np.nan), np.full(m, np.inf), np.full(self.n_vertices, np.nan)
        to_ground[self._free] = between[m:]
        return between[:m], doubt[:m], to_ground

    def _made_ready(self, problem: LinearProblem) -> tuple[object, Prepared | None, str]:
        """Return a factor, or a method made ready, and why; puts the free vertices into the order of elimination."""
        n = len(self._free)
        if not n:
            return None, None, "nothing to solve"
        matrix, ordering = problem.matrix, "MMD_AT_PLUS_A"
        if n > _SMALL:
            choice = choose(problem)
            fast = isinstance(choice.method, DiagonalGradients)
            order = None if fast else sparse_order(problem, max(_MOST_FILL * n, _FILL_AT_HAND))
            if order is None:
                if isinstance(choice.method, Direct):
                    choice = Choice(Elimination(), f"an exact factor of {n} unknowns would fill")
                return None, choice.method.prepare(problem), f"{choice.method.name}: {choice.because}"
            self._free, ordering = self._free[order], "NATURAL"
            matrix = csr_array(matrix[order][:, order])
        options = {"SymmetricMode": True}
        try:
            factor = splu(csc_array(matrix), permc_spec=ordering, diag_pivot_thresh=0.0, options=options)  # type: ignore[call-overload]
        except RuntimeError:
            self._refuse("the equations are singular")
        return factor, None, "one sparse symmetric factorisation"

    def _powers(self, start: IntArray, end: IntArray) -> Iterator[tuple[slice, FloatArray]]:
        """Yield pairs as slices, with the energy in every edge of the unit flow between each; shape (m, pairs)."""
        for part, put_in in self._unit_flows(start, end):
            flow, _ = self.change(put_in)
            yield part, flow**2 / self.conductance[:, None]

    def _unit_flows(self, start: IntArray, end: IntArray) -> Iterator[tuple[slice, FloatArray]]:
        """Yield pairs as slices, with what goes in at the one and out at the other; shape (n_vertices, pairs)."""
        for first in range(0, len(start), BLOCK):
            part = slice(first, min(first + BLOCK, len(start)))
            column = np.arange(part.stop - part.start)
            put_in = np.zeros((self.n_vertices, len(column)))
            put_in[start[part], column] += 1.0
            put_in[end[part], column] -= 1.0
            yield part, put_in

    def _solve(self, source: FloatArray) -> FloatArray:
        """Return the potentials that one solve gives, zero at the grounded vertices."""
        potential = np.zeros_like(source, dtype=np.float64)
        if self._prepared is not None:
            try:
                potential[self._free] = self._prepared.solve(source[self._free], _INNER).x
            except AccuracyError as error:  # the turns of `change` decide whether it is good enough
                potential[self._free] = error.partial.x  # type: ignore[attr-defined]
        elif self._factor is not None:
            potential[self._free] = self._factor.solve(source[self._free])  # type: ignore[attr-defined]
        return potential

    def _worst(self, rest: FloatArray, missed: FloatArray, change: FloatArray) -> float:
        """Return the largest rest at a vertex over the largest amount that was moved, in the worst column."""
        if missed.ndim == 1:
            rest, missed, change = rest[:, None], missed[:, None], change[:, None]
        size = np.maximum(np.abs(missed[self._free]).max(axis=0, initial=0.0), np.abs(change).max(axis=0, initial=0.0))
        left = np.abs(rest[self._free]).max(axis=0, initial=0.0)
        return float((left / np.where(size > 0, size, 1.0)).max(initial=0.0))

    def _refuse(self, what: str) -> NoReturn:
        message = (
            f"the standard deviations must lie closer together for double precision: the largest is "
            f"{np.sqrt(self._ratio):.1e} times the smallest, {what}; raise the smallest, or leave the cells of the "
            "largest empty"
        )
        raise AccuracyError(message) from None
