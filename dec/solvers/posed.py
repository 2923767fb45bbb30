"""A Poisson problem in plain arrays: everything checked, sources balanced, nothing solved yet."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from dec.arrays import BoolArray, FloatArray, IntArray
from dec.calculus.complex import Complex
from dec.errors import InputError
from dec.solvers.given import (
    Conductance,
    Fixed,
    Source,
    first_not_positive,
    given_conductances,
    given_exponents,
    given_fixed,
    given_sources,
)
from dec.solvers.solvability import balanced_sources
from dec.topology.graphs import components

__all__ = ["Posed", "posed"]


@dataclass(frozen=True, slots=True)
class Posed:
    """A Poisson problem in plain arrays.

    Attributes
    ----------
    network : Complex
    edges : int64 array, shape (k,)
        Edges that conduct: all of them, save those to which a metric gives the weight zero.
    tail, head : int64 arrays, shape (k,)
    conductance, exponent : float64 arrays, shape (k,)
    label : int64 array, shape (n0,)
        Component of each vertex, along edges that conduct.
    n_components : int
    source, source_rest, source_doubt : float64 arrays, shape (n0, m)
        As `Sources`: the sum of the first two is what is solved for, up to the third.
    is_fixed : bool array, shape (n0,)
    start : float64 array, shape (n0, m)
        The fixed potentials; elsewhere the middle of those fixed in the component, or zero.
    has_outlet : bool array, shape (n_components,)
    is_plain : bool
        Whether the source was one column of shape (n0,).
    notes : tuple of str
    """

    network: Complex
    edges: IntArray
    tail: IntArray
    head: IntArray
    conductance: FloatArray
    exponent: FloatArray
    label: IntArray
    n_components: int
    source: FloatArray
    source_rest: FloatArray
    source_doubt: FloatArray
    is_fixed: BoolArray
    start: FloatArray
    has_outlet: BoolArray
    is_plain: bool
    notes: tuple[str, ...]

    @property
    def is_linear(self) -> bool:
        """Whether flow is proportional to drop on every edge."""
        return bool((self.exponent == 1.0).all())

    @property
    def is_positive(self) -> bool:
        """Whether every conductance is positive, which the proof needs."""
        return bool((self.conductance > 0).all())

    @property
    def is_level(self) -> bool:
        """Whether all fixed potentials of a component are equal, so that they drive nothing by themselves."""
        return not self.is_fixed.any() or not self.differences(self.start).any()

    def residual(self, flow: FloatArray) -> FloatArray:
        """Inflow minus outflow plus source of every vertex, zero where the potential is fixed; shape (n0, m)."""
        n = len(self.label)
        result = np.empty_like(self.source)
        for j in range(flow.shape[1]):
            column = np.ascontiguousarray(flow[:, j])
            inflow = np.bincount(self.head, weights=column, minlength=n)
            inflow -= np.bincount(self.tail, weights=column, minlength=n)
            result[:, j] = inflow + self.source[:, j]
        result[self.is_fixed] = 0.0
        return result

    def differences(self, potential: FloatArray) -> FloatArray:
        """Head minus tail on every conducting edge; shape (k, m)."""
        return np.asarray(potential[self.head] - potential[self.tail])


def posed(
    network: Complex, source: Source, conductance: Conductance, fixed: Fixed, exponent: ArrayLike, unbalanced: str
) -> Posed:
    """The problem in plain arrays.

    Parameters
    ----------
    network, source, conductance, fixed, exponent, unbalanced
        As `solve_poisson`.

    Returns
    -------
    Posed

    Raises
    ------
    InputError, UnsolvableError
        As `solve_poisson`.

    Examples
    --------
    >>> problem = posed(Complex.from_edges([0], [1]), [1, -1], None, None, 1.0, "refuse")
    >>> problem.residual(np.array([[1.0]])).tolist()
    [[0.0], [0.0]]
    """
    if unbalanced not in {"refuse", "spread"}:
        message = f'unbalanced must be "refuse" or "spread", got {unbalanced!r}'
        raise InputError(message)
    weights, is_metric = given_conductances(network, conductance)
    powers = given_exponents(network, exponent)
    given, is_plain = given_sources(network, source)
    if is_metric and (weights < 0).any() and (powers != 1.0).any():
        found = first_not_positive(network, weights)
        message = f"exponents other than 1 need positive conductances, but the metric gives {found}"
        raise InputError(message)
    edges, tail, head = np.arange(len(weights)), network.tail, network.head
    label, count, notes = network.component_labels, network.n_components, []
    if not weights.all():
        edges = np.flatnonzero(weights)
        notes.append(f"{len(weights) - len(edges):,} edges have the weight zero in the metric and carry nothing")
        weights, powers, tail, head = weights[edges], powers[edges], tail[edges], head[edges]
        count, label = components(tail, head, network.counts[0])
    is_fixed, start = given_fixed(network, fixed, given.shape[1], label, count)
    has_outlet = np.zeros(count, dtype=bool)
    has_outlet[label[is_fixed]] = True
    sources = balanced_sources(network, given, label, has_outlet, spread=unbalanced == "spread")
    return Posed(
        network, edges, tail, head, weights, powers, label, count,
        sources.value, sources.rest, sources.doubt, is_fixed, start, has_outlet, is_plain, (*notes, *sources.notes),
    )  # fmt: skip
