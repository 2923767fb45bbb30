"""The weighted graph Laplacian of a network, factored once: both laws adjust with it."""

from collections.abc import Iterator
from typing import NoReturn

import numpy as np
from scipy.sparse import csc_array, csr_array, diags_array
from scipy.sparse.linalg import splu

from dec.arrays import FloatArray, IntArray
from dec.errors import AccuracyError
from dec.topology.edges import edge_coboundary
from dec.topology.graphs import components

__all__ = ["BLOCK", "LARGEST_FOR_ALL", "Laplacian"]

# Figures of single edges take one solve a vertex: above this many vertices they are left out, and the audit says so.
LARGEST_FOR_ALL = 5_000
# Right-hand sides at once: so few that the matrix library starts no threads, ten times as dear on busy cores.
BLOCK = 4
# Conductances further apart than this lose too many digits in a difference of two entries of the inverse.
_NARROW = 1e3
# Further apart than this a sum of two conductances keeps hardly a digit of the smaller one.
_WIDEST = 1e14
_TURNS = 20
_ROUNDING = 8 * float(np.finfo(np.float64).eps)
_ENOUGH = 1e-10


class Laplacian:
    """L = D^T C D for the differences D along edges and positive conductances C.

    One vertex of each component is grounded, so what is factored is positive definite.

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
        free = np.ones(n_vertices, dtype=bool)
        free[grounded] = False
        self._free = np.flatnonzero(free)
        self.grounded = grounded[self.component]
        self.difference: csr_array = edge_coboundary(tail, head, n_vertices).astype(np.float64)
        self.gather: csr_array = self.difference.T.tocsr()
        matrix = (self.gather @ diags_array(conductance) @ self.difference).tocsr()
        inner = csc_array(matrix[self._free][:, self._free])
        self._factor = None
        if len(self._free):
            options = {"SymmetricMode": True}
            try:
                self._factor = splu(inner, permc_spec="MMD_AT_PLUS_A", diag_pivot_thresh=0.0, options=options)
            except RuntimeError:
                self._refuse("the equations are singular")

    @property
    def n_vertices(self) -> int:
        """Number of vertices."""
        return len(self.component)

    @property
    def gives_all(self) -> bool:
        """Whether figures of single edges are worked out at this size."""
        return self.n_vertices <= LARGEST_FOR_ALL

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

    def figures(self, start: IntArray, end: IntArray) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Shares of every edge, and effective resistances between pairs of vertices of one component each.

        Parameters
        ----------
        start, end : int64 arrays, shape (k,)

        Returns
        -------
        share, slack : float64 arrays, shape (m,)
            Of a unit flow from tail to head, what the edge itself carries (its conductance times the resistance
            between its ends), and what goes another way; they add up to 1.
        resistance : float64 array, shape (k,)

        Notes
        -----
        From the columns of the inverse, a block at a time; where conductances lie far apart from the energies of unit
        flows, so that small shares, slacks and resistances keep their digits. Source: Klein and Randic, Resistance
        distance, J. Math. Chem. 12 (1993).
        """
        if self._ratio > _NARROW:
            return *self._shares_by_energy(), self._resistances_by_energy(start, end)
        every = self._resistances(np.concatenate([self.tail, start]), np.concatenate([self.head, end]))
        share = np.clip(self.conductance * every[: len(self.tail)], 0.0, 1.0)
        return share, 1.0 - share, every[len(self.tail) :]

    def _resistances(self, start: IntArray, end: IntArray) -> FloatArray:
        total = np.zeros(len(start))
        for first in range(0, self.n_vertices, BLOCK):
            last = min(first + BLOCK, self.n_vertices)
            unit = np.zeros((self.n_vertices, last - first))
            unit[np.arange(first, last), np.arange(last - first)] = 1.0
            columns = self._solve(unit)
            for one, other in ((start, end), (end, start)):
                here = np.flatnonzero((one >= first) & (one < last))
                a, b = one[here], other[here]
                total[here] += columns[a, a - first] - columns[b, a - first]
        return np.maximum(total, 0.0)

    def _resistances_by_energy(self, start: IntArray, end: IntArray) -> FloatArray:
        total = np.zeros(len(start))
        for part, power in self._powers(start, end):
            total[part] = power.sum(axis=0)
        return total

    def _shares_by_energy(self) -> tuple[FloatArray, FloatArray]:
        share, slack = np.zeros(len(self.tail)), np.ones(len(self.tail))
        for part, power in self._powers(self.tail, self.head):
            edge, column = np.arange(part.start, part.stop), np.arange(part.stop - part.start)
            own = power[edge, column]
            power[edge, column] = 0.0
            others = power.sum(axis=0)
            moved = own > 0.0  # a self-loop carries nothing
            share[edge[moved]] = own[moved] / (own + others)[moved]
            slack[edge[moved]] = others[moved] / (own + others)[moved]
        return share, slack

    def _powers(self, start: IntArray, end: IntArray) -> Iterator[tuple[slice, FloatArray]]:
        """Yield pairs as slices, with the energy in every edge of the unit flow between each; shape (m, pairs)."""
        for first in range(0, len(start), BLOCK):
            part = slice(first, min(first + BLOCK, len(start)))
            column = np.arange(part.stop - part.start)
            put_in = np.zeros((self.n_vertices, len(column)))
            put_in[start[part], column] += 1.0
            put_in[end[part], column] -= 1.0
            flow, _ = self.change(put_in)
            yield part, flow**2 / self.conductance[:, None]

    def _solve(self, source: FloatArray) -> FloatArray:
        """Return the potentials that the factors give, zero at the grounded vertices."""
        potential = np.zeros_like(source, dtype=np.float64)
        if self._factor is not None:
            potential[self._free] = self._factor.solve(source[self._free])
        return potential

    def _worst(self, rest: FloatArray, missed: FloatArray, change: FloatArray) -> float:
        """Return the largest rest at a vertex over the largest amount that was moved."""
        size = max(float(np.abs(missed[self._free]).max(initial=0.0)), float(np.abs(change).max(initial=0.0)))
        return float(np.abs(rest[self._free]).max(initial=0.0)) / (size or 1.0)

    def _refuse(self, what: str) -> NoReturn:
        message = (
            f"the standard deviations must lie closer together for double precision: the largest is "
            f"{np.sqrt(self._ratio):.1e} times the smallest, {what}; raise the smallest, or leave the cells of the "
            "largest empty"
        )
        raise AccuracyError(message) from None
