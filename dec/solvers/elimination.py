"""Conjugate gradients with a factor of our own: a graph's vertices eliminated approximately, at random but seeded."""

from dataclasses import dataclass, replace
from typing import ClassVar

import numpy as np
from scipy.sparse import csr_array

from dec.arrays import AnyArray, BoolArray, FloatArray, IntArray
from dec.errors import InputError
from dec.solvers.descent import Descent
from dec.solvers.diagonal import inverted, matrix_arrays
from dec.solvers.factor import Edges, Factor, Queue, Star, eliminate, half_edges
from dec.solvers.gradients import FactoredSystem
from dec.solvers.numbering import depth_first, reordered, unsigned
from dec.solvers.problem import LinearProblem
from dec.topology.edges import index_type

__all__ = ["Elimination", "approximate_factor"]

_MOST_STEPS = 1_000
_LISTS = 4_096  # degrees told apart in the queue
_SCATTERED = 0.05  # mean distance from the diagonal over n from which numbering for nearness pays
_MANY = 100_000


@dataclass(frozen=True, slots=True)
class Elimination:
    """Conjugate gradients, preconditioned by approximate elimination.

    Vertices leave in order of degree, those of degree one and two exactly; the star of any other is replaced by a
    sampled tree that equals its exact fill on average. Needs a matrix that is a graph Laplacian, or one with something
    added on its diagonal; positive off-diagonal entries are left out of the factor, not of the problem.

    Parameters
    ----------
    samples : int
        Draws a neighbour: two make a better factor at twice the cost, worth it for many right-hand sides.
    seed : int
        The same seed, the same factor.

    Notes
    -----
    Source: Kyng and Sachdeva 2016 and Gao, Kyng and Spielman 2023; see `dec.solvers.factor`.

    Examples
    --------
    >>> problem = LinearProblem.of_graph(np.array([0, 1]), np.array([1, 2]), 3, np.array([1.0, 2.0]))
    >>> answer = Elimination().prepare(problem).solve([1.0, 0.0, -1.0])
    >>> answer.x.round(12), answer.iterations
    (array([ 0.83333333, -0.16666667, -0.66666667]), 1)
    """

    samples: int = 1
    seed: int = 0
    name: ClassVar[str] = "elimination"

    def __post_init__(self) -> None:
        if self.samples < 1 or self.seed < 0:
            message = f"samples must be 1 or more and seed 0 or more, got {self.samples} and {self.seed}"
            raise InputError(message)

    def prepare(self, problem: LinearProblem) -> Descent:
        """Factor the matrix approximately, and renumber both in depth-first order of elimination."""
        near, first = _numbered_near(problem)
        factor = approximate_factor(near, self.samples, self.seed)
        step = np.empty(problem.n + 1, factor.row.dtype)
        step[factor.vertex], step[-1] = np.arange(problem.n), problem.n
        factor.row[:] = step[factor.row]
        order, part = depth_first(factor.column, factor.row)
        system = _in_order(near, factor, order, part)
        places = factor.vertex[order] if first is None else first[factor.vertex[order]]
        return Descent(problem, system, places, self.name, _MOST_STEPS, _notes(problem))


def approximate_factor(problem: LinearProblem, samples: int, seed: int) -> Factor:
    """The factor of one elimination; rows are vertices, n the ground.

    Parameters
    ----------
    problem : LinearProblem
    samples, seed : int
        As in `Elimination`.

    Returns
    -------
    Factor

    Examples
    --------
    >>> path = LinearProblem.of_graph(np.array([0, 1]), np.array([1, 2]), 3, np.array([1.0, 2.0]))
    >>> factor = approximate_factor(path, 1, 7)
    >>> factor.vertex, factor.row, factor.pivot
    (array([0, 1, 2], dtype=int32), array([1, 2], dtype=int32), array([1., 2., 0.]))
    """
    n = problem.n
    indptr, indices, data = matrix_arrays(problem, None)
    negative = csr_array((data < 0, problem.matrix.indices, problem.matrix.indptr), shape=(n, n))
    degree = samples * np.asarray(negative.sum(axis=1)).astype(np.int64)
    n_slots = int(degree.sum())
    itype = index_type(n_slots, n + 1)
    start = np.concatenate([[0], np.cumsum(degree)]).astype(itype)
    edges = Edges(
        start, np.empty(n_slots, itype), np.empty(n_slots, itype), np.empty(n_slots), np.empty(n_slots, itype),
        np.full(n, -1, itype), degree.astype(itype), np.maximum(problem.grounding, 0.0),
    )  # fmt: skip
    half_edges(indptr, indices, data, samples, start, edges.target, edges.twin, edges.weight)
    star = Star(
        np.full(n, -1, itype), np.empty(n + 1, itype), np.empty(n + 1), np.empty(n + 1, itype), np.empty(n + 1, itype),
        np.empty(n_slots, itype), np.empty(n_slots, itype), np.empty(n + 1, itype), np.empty(n + 1),
    )  # fmt: skip
    random = np.random.SeedSequence(seed).generate_state(1, np.uint64) | np.uint64(1)
    return Factor(*eliminate(edges, _queue(edges.degree), star, samples, random, n_slots // samples + n))


def _queue(degree: AnyArray) -> Queue:
    """Return the lists of vertices by degree, ascending in each."""
    n, itype = len(degree), degree.dtype
    key = np.minimum(degree, _LISTS - 1)
    order = np.argsort(key, kind="stable").astype(itype)
    first, after, before = np.full(_LISTS, -1, itype), np.full(n, -1, itype), np.full(n, -1, itype)
    lists = key[order]
    is_first = np.diff(lists, prepend=-1) != 0
    first[lists[is_first]] = order[is_first]
    same = ~is_first[1:]
    after[order[:-1][same]] = order[1:][same]
    before[order[1:][same]] = order[:-1][same]
    return Queue(first, after, before, key)


def _numbered_near(problem: LinearProblem) -> tuple[LinearProblem, AnyArray | None]:
    """Return the problem with neighbours numbered near each other, and the order, where that is worth its time."""
    if problem.n < _MANY or problem.facts.spread < _SCATTERED:
        return problem, None
    from scipy.sparse.csgraph import reverse_cuthill_mckee

    order = reverse_cuthill_mckee(problem.matrix, symmetric_mode=True)
    indptr, indices, data = matrix_arrays(problem, order)
    signed = np.int32 if indices.dtype == np.uint32 and problem.matrix.nnz < 2**31 else np.int64
    matrix = csr_array((data, indices.astype(signed), indptr.astype(signed)), shape=problem.matrix.shape)
    near = replace(problem, matrix=matrix, component=problem.component[order], coupling=None)
    near.__dict__["grounding"] = problem.grounding[order]
    return near, order


def _in_order(problem: LinearProblem, factor: Factor, order: AnyArray, part: IntArray) -> FactoredSystem:
    """Return the factor with its columns in another order, its positions unsigned, and the matrix beside it."""
    n, most = problem.n, len(factor.row) + problem.matrix.nnz // 2
    itype = unsigned(n, most)
    column, row, share, entry = np.empty(n + 1, itype), np.empty(most, itype), np.empty(most), np.empty(most)
    arrays = matrix_arrays(problem, None)
    filled = reordered(
        order, factor.vertex, factor.column, factor.row, factor.share, *arrays, column, row, share, entry
    )
    vertex = factor.vertex[order]
    diagonal, pivot = problem.facts.diagonal[vertex], factor.pivot[order]
    singular = _settle_roots(problem, vertex, pivot, part)
    return FactoredSystem(
        column, row[:filled], share[:filled], entry[:filled], diagonal, inverted(pivot), part, singular
    )


def _settle_roots(problem: LinearProblem, vertex: AnyArray, pivot: FloatArray, part: IntArray) -> BoolArray:
    """Return which parts have constants in the kernel; give the others that have no ground a pivot at their root.

    A component may fall into several parts when positive entries are left out; then none of them is singular.
    """
    root = part[1:] - 1
    component = problem.component[vertex[root]]
    whole = np.bincount(component, minlength=problem.n_components) == 1
    singular: BoolArray = problem.singular[component] & whole[component]
    loose = root[(pivot[root] == 0.0) & ~singular]
    pivot[loose] = problem.facts.diagonal[vertex[loose]]
    return singular


def _notes(problem: LinearProblem) -> tuple[str, ...]:
    facts = problem.facts
    if not facts.n_positive:
        return ()
    share = f"{facts.n_positive} positive off-diagonal pairs ({facts.share_positive:.0%})"
    return (f"{share} are left out of the preconditioner, not of the problem",)
