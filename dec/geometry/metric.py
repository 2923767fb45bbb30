"""The metric: what weight the value on a cell has in an inner product."""

import numpy as np
from numpy.typing import ArrayLike
from scipy.sparse import csr_array

from dec.arrays import AnyArray, FloatArray, frozen
from dec.calculus.cochain import Cochain
from dec.calculus.complex import Complex
from dec.errors import InputError, TopologyError
from dec.findings import Finding
from dec.geometry.corners import cell_name
from dec.geometry.duals import Ratios, barycentric, circumcentric, lattice
from dec.geometry.weights import PLURALS, SINGULARS, diagonal, given_weights, scaled

__all__ = ["Metric"]

_KINDS = {"circumcentric": circumcentric, "barycentric": barycentric}


class Metric:
    """Diagonal inner products for cochains: each cell weighs the measure of its dual by its own.

    Parameters
    ----------
    complex : Complex
        With points. Lengths and areas are those of the points, so weights carry their unit to the power
        dim - 2 k on degree k.
    kind : "circumcentric" or "barycentric"
        Circumcentric duals meet their cells at right angles, so that the vertex Laplacian takes linear functions on
        plane meshes to zero at inner vertices and Poisson solutions converge; they need triangles, tetrahedra, or
        cells whose corners lie on one circle or sphere, and they keep their sign: a weight is zero or negative
        where circumcentres lie on the wrong side. Barycentric duals exist for all cells and give positive weights,
        but their Poisson solutions do not converge to the right function on general meshes. On a regular grid both
        agree.

    Attributes
    ----------
    complex : Complex
    kind : str
        "circumcentric", "barycentric" or "weighted".

    Raises
    ------
    InputError
        If the kind is another word, there are no points, a cell is degenerate, or it has no circumcentre where one
        is needed; the message names the cell.

    Notes
    -----
    A graph: 1 / length on edges, half the lengths round it on a vertex. A surface of triangles, circumcentric: half
    the sum of the opposite cotangents on edges. Faces and cells are never told apart by how they are turned.
    Source: Desbrun, Hirani, Leok and Marsden, Discrete exterior calculus, 2005, sections 2 and 6 (from memory).

    Examples
    --------
    >>> kite = Complex.from_faces([[0, 1, 2], [1, 0, 3]], points=[[0, 0], [2, 0], [1, 0.25], [1, -0.25]])
    >>> metric = Metric(kite)
    >>> metric.weights(1).tolist()
    [-1.875, 2.0, 2.0, 2.0, 2.0]
    >>> metric.positive
    False
    """

    __slots__ = ("_slack", "_weights", "complex", "kind")

    def __init__(self, complex: Complex, kind: str = "circumcentric") -> None:
        if kind not in _KINDS:
            message = f"kind must be {' or '.join(map(repr, _KINDS))}, got {kind!r}"
            raise InputError(message)
        is_grid = complex.lattice is not None and complex.dim == len(complex.lattice.shape)
        self._keep(complex, kind, lattice(complex) if is_grid else _KINDS[kind](complex))

    @classmethod
    def weighted(
        cls, complex: Complex, vertices: ArrayLike | None = None, edges: ArrayLike | None = None,
        faces: ArrayLike | None = None,
    ) -> "Metric":  # fmt: skip
        """A metric of given weights; no points are needed.

        Parameters
        ----------
        complex : Complex
        vertices, edges, faces : float array_like of shape (n0,), (n1,), (n2,), or None
            Positive; None gives every cell the weight 1, and solid cells always have it.

        Returns
        -------
        Metric

        Raises
        ------
        InputError
            If an array has the wrong length, there are no faces, or a weight is not positive and finite; the
            message names the cell.

        Examples
        --------
        >>> K = Complex.from_edges([0, 1], [1, 2])
        >>> Metric.weighted(K, edges=[2.0, 0.5]).laplacian(0).toarray().tolist()
        [[2.0, -2.0, 0.0], [-2.0, 2.5, -0.5], [0.0, -0.5, 0.5]]
        """
        given = (vertices, edges, faces, None)
        values = [given_weights(complex, k, given[k]) for k in range(complex.dim + 1)]
        for k in range(complex.dim + 1, 3):
            if given[k] is not None:
                message = f"there are no {PLURALS[k]} to weigh in a complex of dimension {complex.dim}; leave them out"
                raise InputError(message)
        metric = cls.__new__(cls)
        metric._keep(complex, "weighted", Ratios.exact(tuple(values)))
        return metric

    def _keep(self, complex: Complex, kind: str, ratios: Ratios) -> None:
        self.complex, self.kind = complex, kind
        self._weights = tuple(frozen(v) for v in ratios.values)
        self._slack = ratios.slack

    def weights(self, k: int) -> FloatArray:
        """The weight of every k-cell: float64 array of shape (n_k,), read-only.

        Raises
        ------
        InputError
            If there are no cells of degree k.

        Examples
        --------
        >>> Metric(Complex.from_edges([0], [1], points=[[0.0], [4.0]])).weights(1)
        array([0.25])
        """
        self._refuse_degree(k)
        return self._weights[k]

    def star(self, k: int) -> csr_array:
        """The weights of degree k as a diagonal matrix: csr_array of float64, shape (n_k, n_k).

        Raises
        ------
        InputError
            If there are no cells of degree k.

        Examples
        --------
        >>> Metric(Complex.from_edges([0], [1], points=[[0.0], [4.0]])).star(0).toarray().tolist()
        [[2.0, 0.0], [0.0, 2.0]]
        """
        return diagonal(self.weights(k))

    def inner(self, a: Cochain, b: Cochain) -> float | FloatArray:
        """The inner product of two cochains: the sum over cells of weight times a times b.

        Parameters
        ----------
        a, b : Cochain
            Of one degree, on the complex of the metric.

        Returns
        -------
        float, or float64 array of shape (m,) for cochains of m columns

        Raises
        ------
        TopologyError
            If degree, complex or number of columns differ.

        Examples
        --------
        >>> K = Complex.from_edges([0, 1], [1, 2], points=[[0.0], [1.0], [3.0]])
        >>> Metric(K).inner(K.cochain(1, [1, 2]), K.cochain(1, [1, 2]))
        3.0
        """
        left, right = self._values(a), self._values(b)
        if a.degree != b.degree or left.shape != right.shape:
            message = (
                f"an inner product takes two cochains of one degree and shape, got degree {a.degree} with shape "
                f"{left.shape} and degree {b.degree} with shape {right.shape}"
            )
            raise TopologyError(message)
        result = self._weights[a.degree] @ (left * right)
        return float(result) if left.ndim == 1 else np.asarray(result)

    def norm(self, a: Cochain) -> float | FloatArray:
        """The length of a cochain: the root of its inner product with itself; float, or one for each column.

        Raises
        ------
        InputError
            If a weight of this degree is not positive, beyond rounding; the message names the cell.
        TopologyError
            If the cochain lives on another complex.

        Examples
        --------
        >>> K = Complex.from_edges([0, 1], [1, 2], points=[[0.0], [1.0], [2.0]])
        >>> Metric(K).norm(K.cochain(1, [3, 4]))
        5.0
        """
        square = self.inner(a, a)
        self._refuse(a.degree, self._not_positive(a.degree), "a norm needs positive weights")
        root = np.sqrt(square)
        return float(root) if a.values.ndim == 1 else np.asarray(root)

    def codifferential(self, w: Cochain) -> Cochain:
        """The cochain of one degree less whose inner products are those with derivatives.

        Parameters
        ----------
        w : Cochain
            Of degree 1 or more.

        Returns
        -------
        Cochain
            ``inner(a.d(), w) == inner(a, codifferential(w))`` for every a, up to rounding; no sign is added. Of a
            flow it is, vertex by vertex, what comes in less what goes out, by the weight of the vertex.

        Raises
        ------
        InputError
            If w has degree 0, or a cell of one degree less has zero weight, within rounding.
        TopologyError
            If the cochain lives on another complex.

        Notes
        -----
        Inverse of S_{k-1} times transpose of d times S_k. Source: Hirani, thesis, Caltech 2003, section 5 (from
        memory, without its sign).

        Examples
        --------
        >>> K = Complex.from_edges([0, 1], [1, 2])
        >>> Metric.weighted(K).codifferential(K.cochain(1, [5, 2])).values
        array([-5.,  3.,  2.])
        """
        values = self._values(w)
        k = w.degree
        if k == 0:
            message = "a codifferential needs a cochain of degree 1 or more, got degree 0"
            raise InputError(message)
        self._refuse(k - 1, self._zero(k - 1), "the codifferential divides by the weights")
        summed = self.complex.boundary(k).astype(np.float64) @ scaled(values, self._weights[k])
        return Cochain(self.complex, k - 1, scaled(summed, 1 / self._weights[k - 1]))

    def laplacian(self, k: int) -> csr_array:
        """The Laplacian of degree k in symmetric weak form: csr_array of float64, shape (n_k, n_k).

        Parameters
        ----------
        k : int
            0 .. dim.

        Returns
        -------
        csr_array
            d_k^T S_{k+1} d_k + S_k d_{k-1} S_{k-1}^{-1} d_{k-1}^T S_k, each part where it exists, with S_k the star
            of degree k and d_k the coboundary. ``a @ L @ a`` is the squared length of the derivative plus that of
            the codifferential; S_k^{-1} L is the operator itself.

        Raises
        ------
        InputError
            If there are no cells of degree k, or k > 0 and a cell of one degree less has zero weight, within
            rounding.

        Notes
        -----
        Source: Arnold, Falk and Winther, Finite element exterior calculus, Bull. AMS 47 (2010), section 2 (weak form
        of the Hodge Laplacian; from memory).

        Examples
        --------
        >>> square = Complex.from_faces([[0, 1, 2, 3]], points=[[0, 0], [1, 0], [1, 1], [0, 1]])
        >>> Metric(square).laplacian(0).diagonal().tolist()
        [1.0, 1.0, 1.0, 1.0]
        """
        self._refuse_degree(k)
        parts = []
        if k < self.complex.dim:
            d = self.complex.coboundary(k).astype(np.float64)
            parts.append(d.T @ (self.star(k + 1) @ d))
        if k > 0:
            self._refuse(k - 1, self._zero(k - 1), f"the Laplacian of degree {k} divides by the weights")
            up = self.star(k) @ self.complex.coboundary(k - 1).astype(np.float64)
            parts.append(up @ diagonal(1 / self._weights[k - 1]) @ up.T)
        result = csr_array(parts[0] if len(parts) == 1 else parts[0] + parts[1])
        result.sort_indices()
        return result

    @property
    def positive(self) -> bool:
        """Whether every weight of every degree is positive, beyond rounding."""
        return not any(self._not_positive(k).any() for k in range(len(self._weights)))

    def check(self) -> list[Finding]:
        """Whether the weights are positive, one finding a degree; ``where`` holds cell numbers, lowest first.

        Examples
        --------
        >>> square = Complex.from_faces([[0, 1, 2], [0, 2, 3]], points=[[0, 0], [1, 0], [1, 1], [0, 1]])
        >>> [(f.name, f.where) for f in Metric(square).check() if not f.holds]
        [('every edge has a positive weight', (1,))]
        """
        findings = []
        for k in range(len(self._weights)):
            bad = np.flatnonzero(self._not_positive(k))
            name = f"every {SINGULARS[k]} has a positive weight"
            findings.append(Finding(name, not len(bad), len(bad), 0, tuple(bad.tolist())))
        return findings

    def __repr__(self) -> str:
        counts = [int(np.count_nonzero(self._not_positive(k))) for k in range(len(self._weights))]
        bad = ", ".join(f"{c:,} {(SINGULARS if c == 1 else PLURALS)[k]}" for k, c in enumerate(counts) if c)
        return f"<Metric: {self.kind}, {f'not positive on {bad}' if bad else 'positive'}>"

    def _not_positive(self, k: int) -> AnyArray:
        return np.asarray(self._weights[k] <= self._slack[k])

    def _zero(self, k: int) -> AnyArray:
        return np.asarray(np.abs(self._weights[k]) <= self._slack[k])

    def _values(self, w: Cochain) -> FloatArray:
        if w.complex is not self.complex:
            message = "the cochain lives on another complex than the metric; build both from the same Complex object"
            raise TopologyError(message)
        return w.values.astype(np.float64)

    def _refuse_degree(self, k: int) -> None:
        top = self.complex.dim
        if not 0 <= k <= top:
            message = f"degree must be 0 .. {top} for a complex of dimension {top}, got {k}"
            raise InputError(message)

    def _refuse(self, k: int, bad: AnyArray, why: str) -> None:
        if bad.any():
            at = int(np.argmax(bad))
            way_out = 'use kind="barycentric"' if self.kind == "circumcentric" else "leave out the cells of no extent"
            message = (
                f"{why}, and {cell_name(self.complex, k, at)} has the {self.kind} weight {self._weights[k][at]:.6g}"
                f"{_others(int(bad.sum()))}; {way_out}, or give weights with Metric.weighted"
            )
            raise InputError(message)


def _others(count: int) -> str:
    return f" ({count - 1:,} more like it)" if count > 1 else ""
