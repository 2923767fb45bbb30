"""A linear problem: a symmetric matrix, its components, and the kernel that topology says it has."""

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import ArrayLike
from scipy.sparse import coo_array, csr_array

from dec.arrays import BoolArray, FloatArray, IntArray, float_array, refuse_not_finite
from dec.errors import InputError, TopologyError
from dec.solvers.facts import Facts
from dec.topology.edges import index_type
from dec.topology.graphs import components

__all__ = ["LinearProblem"]

_EPS = float(np.finfo(np.float64).eps)
_SYMMETRY = 1e-13  # of the larger diagonal entry: sums of the same numbers in another order differ by less


@dataclass(frozen=True, eq=False)
class LinearProblem:
    """A symmetric positive semidefinite matrix whose kernel is known.

    On a singular component the kernel is the constant vectors, on any other it is zero. Which component is which comes
    from whoever made the matrix, never from its numbers.

    Attributes
    ----------
    matrix : csr_array of float64, shape (n, n)
        Canonical: sorted, nothing twice.
    component : int64 array, shape (n,)
        Component of each unknown, 0 .. n_components - 1.
    singular : bool array, shape (n_components,)
        Whether constants on the component belong to the kernel.
    vertices : int64 array, shape (n,)
        Which vertex of the graph each unknown is; 0 .. n - 1 where nothing was fixed.
    coupling : csr_array of float64, shape (n, n_fixed), or None
        Conductances to the fixed vertices, in ascending order of these: a fixed potential g adds ``coupling @ g`` to
        the right-hand side.
    """

    matrix: csr_array
    component: IntArray
    singular: BoolArray
    vertices: IntArray
    coupling: csr_array | None = None

    @classmethod
    def of_graph(
        cls, tail: IntArray, head: IntArray, n: int, conductance: FloatArray, fixed: BoolArray | None = None
    ) -> "LinearProblem":
        """The weighted Laplacian of a graph, without its fixed vertices.

        Parameters
        ----------
        tail, head : int64 arrays, shape (n1,)
            Parallel edges add up; self-loops carry nothing; an edge of conductance 0 joins nothing.
        n : int
            Number of vertices.
        conductance : float64 array, shape (n1,)
            Finite; a negative one becomes a positive off-diagonal entry.
        fixed : bool array, shape (n,), or None
            Vertices whose potential is given.

        Returns
        -------
        LinearProblem
            For the free vertices; a component is singular when no edge joins it to a fixed vertex.

        Raises
        ------
        InputError
            If a conductance is nan or infinite.
        TopologyError
            If the arrays do not fit together.

        Examples
        --------
        >>> p = LinearProblem.of_graph(np.array([0, 1]), np.array([1, 2]), 3, np.array([2.0, 5.0]), np.arange(3) == 2)
        >>> p.matrix.toarray(), p.coupling.toarray().ravel(), p.singular
        (array([[ 2., -2.],
               [-2.,  7.]]), array([0., 5.]), array([False]))
        """
        tail, head, c = np.asarray(tail, np.int64), np.asarray(head, np.int64), np.asarray(conductance, np.float64)
        _refuse_misfit(tail, head, n, c, fixed)
        is_fixed = np.zeros(n, dtype=bool) if fixed is None else np.asarray(fixed, dtype=bool)
        joins = (tail != head) & (c != 0)
        tail, head, c = tail[joins], head[joins], c[joins]
        diagonal = np.asarray(np.bincount(tail, c, n) + np.bincount(head, c, n), dtype=np.float64)
        vertices = np.flatnonzero(~is_fixed)
        number = np.cumsum(~is_fixed) - 1
        inner = ~is_fixed[tail] & ~is_fixed[head]
        t, h, w = number[tail[inner]], number[head[inner]], c[inner]
        matrix = _laplacian(t, h, w, diagonal[vertices])
        count, label = components(t, h, len(vertices))
        across = is_fixed[tail] != is_fixed[head]
        free_end = np.where(is_fixed[tail], head, tail)[across]
        singular = np.ones(count, dtype=bool)
        singular[label[number[free_end]]] = False
        coupling = None
        if is_fixed.any():
            place = (number[free_end], (np.cumsum(is_fixed) - 1)[(tail + head)[across] - free_end])
            coupling = coo_array((c[across], place), shape=(len(vertices), int(is_fixed.sum()))).tocsr()
        return cls(matrix, label, singular, vertices, coupling)

    @classmethod
    def of_matrix(
        cls, matrix: object, component: ArrayLike | None = None, singular: ArrayLike | None = None
    ) -> "LinearProblem":
        """A problem with a given symmetric matrix.

        Parameters
        ----------
        matrix : sparse array or matrix, or array_like, shape (n, n)
            Symmetric, with a diagonal that is positive wherever a row is not empty.
        component : int array_like, shape (n,), or None
            Component of each unknown; found from the entries that are not zero when None.
        singular : bool or bool array_like, shape (n_components,), or None
            Which components have the constants for their kernel; None says that the matrix is positive definite.

        Returns
        -------
        LinearProblem

        Raises
        ------
        InputError
            If the matrix is not square, finite and symmetric, its diagonal not positive, or the labels do not fit.

        Examples
        --------
        >>> LinearProblem.of_matrix([[2.0, -1.0], [-1.0, 2.0]]).singular
        array([False])
        """
        square = _checked(matrix)
        n = square.shape[0]
        if component is None:
            rows = np.repeat(np.arange(n), np.diff(square.indptr))
            upper = (square.indices > rows) & (square.data != 0)
            count, label = components(rows[upper], square.indices[upper].astype(np.int64), n)
        else:
            label = np.array(component, dtype=np.int64)
            if label.shape != (n,) or label.min(initial=0) < 0:
                message = f"component must hold a number from 0 for each of {n} unknowns, got shape {label.shape}"
                raise InputError(message)
            count = int(label.max(initial=-1)) + 1
        flags = np.asarray(False if singular is None else singular, dtype=bool)
        if flags.shape not in {(), (count,)}:
            message = f"singular must say yes or no for each of {count} components, got shape {flags.shape}"
            raise InputError(message)
        flags = np.array(np.broadcast_to(flags, (count,)))
        return cls(square, label, flags, np.arange(n))

    @property
    def n(self) -> int:
        """Number of unknowns."""
        return int(self.matrix.shape[0])

    @property
    def n_components(self) -> int:
        """Number of components."""
        return len(self.singular)

    @cached_property
    def facts(self) -> Facts:
        """What choosing a method goes by."""
        return Facts(self.matrix, self.singular)

    @cached_property
    def norm(self) -> float:
        """The largest sum of absolute values in a row, ||A|| in the infinity norm."""
        if not self.facts.n_positive:  # then the rest of a row is its diagonal entry less what grounds it
            return float((2 * self.facts.diagonal - self.grounding).max(initial=0.0))
        return float(abs(self.matrix).sum(axis=1).max())

    @cached_property
    def grounding(self) -> FloatArray:
        """What each row adds up to: its conductance to whatever is fixed; float64, shape (n,).

        Exactly zero on singular components, and where the sum is no more than the rounding of its terms.
        """
        if self.coupling is not None:
            return np.asarray(self.coupling.sum(axis=1), dtype=np.float64)
        if self.singular.all():
            return np.zeros(self.n)
        rows: FloatArray = np.asarray(self.matrix.sum(axis=1), dtype=np.float64)
        rows[np.abs(rows) <= 4 * _EPS * np.diff(self.matrix.indptr) * self.facts.diagonal] = 0.0
        rows[self.singular[self.component]] = 0.0
        return rows

    @cached_property
    def share_deficient(self) -> float:
        """Share of the rows that add up to less than zero."""
        return float((self.grounding < 0).mean()) if self.n else 0.0

    @cached_property
    def grounded(self) -> IntArray:
        """The unknowns that stay when the first of each singular component is set to zero; int64, ascending."""
        first = np.unique(self.component, return_index=True)[1]
        keep = np.ones(self.n, dtype=bool)
        keep[first[self.singular]] = False
        return np.flatnonzero(keep)

    def balanced(self, values: FloatArray) -> FloatArray:
        """The values, each minus the mean of its singular component; float64, shape (n,) or (n, m)."""
        if not self.singular.any():
            return values
        if self.n_components == 1:
            return np.asarray(values - values.mean(axis=0))
        size = np.bincount(self.component, minlength=self.n_components).astype(np.float64)
        result = np.array(values, dtype=np.float64)
        for column in result.T if result.ndim == 2 else [result]:
            mean = np.bincount(self.component, column, self.n_components) / size
            column[:] -= np.where(self.singular, mean, 0.0)[self.component]
        return result

    def right_side(self, b: ArrayLike) -> FloatArray:
        """The right-hand side as float64 of shape (n,) or (n, m), checked."""
        values = float_array(b, "right-hand side")
        if values.ndim not in {1, 2} or len(values) != self.n:
            message = f"the right-hand side must have shape ({self.n},) or ({self.n}, m), got {values.shape}"
            raise InputError(message)
        return values


def _laplacian(tail: IntArray, head: IntArray, weight: FloatArray, diagonal: FloatArray) -> csr_array:
    """Return the canonical matrix with -weight at (tail, head) and (head, tail), and the diagonal."""
    n = len(diagonal)
    itype = index_type(n, 2 * len(tail) + n)
    every = np.arange(n, dtype=itype)
    rows = np.concatenate([tail.astype(itype), head.astype(itype), every])
    columns = np.concatenate([head.astype(itype), tail.astype(itype), every])
    matrix = coo_array((np.concatenate([-weight, -weight, diagonal]), (rows, columns)), shape=(n, n)).tocsr()
    matrix.sum_duplicates()
    return csr_array(matrix)


def _refuse_misfit(tail: IntArray, head: IntArray, n: int, conductance: FloatArray, fixed: BoolArray | None) -> None:
    if not tail.shape == head.shape == conductance.shape or tail.ndim != 1:
        message = f"tail, head and conductance must be as long, got {tail.shape}, {head.shape}, {conductance.shape}"
        raise TopologyError(message)
    ends = np.concatenate([tail, head])
    if ends.size and not 0 <= ends.min() <= ends.max() < n:
        message = f"edges must end at a vertex 0 .. {n - 1}, got {ends.min() if ends.min() < 0 else ends.max()}"
        raise TopologyError(message)
    if fixed is not None and np.shape(fixed) != (n,):
        message = f"fixed must say yes or no for each of {n} vertices, got shape {np.shape(fixed)}"
        raise TopologyError(message)
    refuse_not_finite(conductance, "conductance")


def _checked(matrix: object) -> csr_array:
    """Return a canonical float64 csr_array, a copy only where the given one is not canonical."""
    try:
        square: csr_array = csr_array(matrix, dtype=np.float64)  # type: ignore[call-overload]
    except (TypeError, ValueError) as error:
        message = f"the matrix must be a sparse or dense array of real numbers: {error}"
        raise InputError(message) from None
    if square.ndim != 2 or square.shape[0] != square.shape[1]:
        message = f"the matrix must be square, got shape {square.shape}"
        raise InputError(message)
    if not square.has_canonical_format:
        square = square.copy()
        square.sum_duplicates()
    if not np.isfinite(square.data).all():
        row = int(np.searchsorted(square.indptr, np.argmin(np.isfinite(square.data)), side="right")) - 1
        message = f"the matrix must hold finite numbers, got {square.data[~np.isfinite(square.data)][0]} in row {row}"
        raise InputError(message)
    diagonal = square.diagonal()
    bad = (diagonal <= 0) & (np.diff(square.indptr) > 0)
    if bad.any():
        bad &= np.asarray(abs(square).sum(axis=1)) > 0  # stored zeros make no row
    if bad.any():
        row = int(np.argmax(bad))
        message = f"the diagonal must be positive where a row is not empty, got {diagonal[row]} in row {row}"
        raise InputError(message)
    _refuse_asymmetry(square, diagonal)
    return square


def _refuse_asymmetry(square: csr_array, diagonal: FloatArray) -> None:
    turned = csr_array(square.T)
    if np.array_equal(turned.indices, square.indices) and np.array_equal(turned.data, square.data):
        return
    difference = coo_array(square - turned)
    row, column = difference.coords
    allowed = _SYMMETRY * np.maximum(diagonal[row], diagonal[column])
    bad = np.abs(difference.data) > allowed
    if bad.any():
        k = int(np.argmax(bad))
        message = (
            f"the matrix must be symmetric, but entries ({row[k]}, {column[k]}) and ({column[k]}, {row[k]}) differ by "
            f"{difference.data[k]:.3g}; give (A + A.T) / 2 if that is meant"
        )
        raise InputError(message)
