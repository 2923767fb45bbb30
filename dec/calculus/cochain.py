"""Cochains: numbers on the cells of one degree, and what may be done with them."""

from dataclasses import dataclass
from fractions import Fraction
from typing import TYPE_CHECKING, Any, TypeAlias

import numpy as np
from numpy.typing import ArrayLike

from dec.arrays import AnyArray, IntArray, float_array, frozen, number_array
from dec.calculus.arguments import checked_degree
from dec.calculus.chain import Chain
from dec.calculus.cup import cup_values
from dec.calculus.sums import Terms, exact_sum
from dec.errors import InputError, TopologyError

if TYPE_CHECKING:
    from dec.calculus.complex import Complex

__all__ = ["Cochain", "Number"]

Number: TypeAlias = int | float | Fraction

_LARGEST_INT = 2**63 - 1


@dataclass(frozen=True, eq=False, init=False, repr=False)
class Cochain:
    """One number, or one row of m numbers, on every k-cell of a complex.

    Parameters
    ----------
    complex : Complex
    degree : int
        0 for values at vertices, 1 along edges, 2 on faces, 3 in solid cells.
    values : array_like, shape (n_k,) or (n_k, m)
        float64, int64, or exact int and Fraction objects, kept as a read-only copy. In the caller's unit. nan means
        not known.

    Raises
    ------
    InputError
        If the degree does not exist or the shape does not fit.

    Notes
    -----
    Cochains of different degree or complex do not combine: `TopologyError`, never a broadcast.

    Examples
    --------
    >>> from dec.calculus.complex import Complex
    >>> K = Complex.from_edges([0, 1], [1, 2])
    >>> Cochain(K, 0, [5, 7, 4]).d().values
    array([ 2, -3])
    """

    complex: "Complex"
    degree: int
    values: AnyArray

    __array_ufunc__ = None  # arrays have no place to live, so NumPy must not take the cochain apart

    def __init__(self, complex: "Complex", degree: int, values: ArrayLike) -> None:
        degree = checked_degree(degree, range(complex.dim + 1), complex.dim)
        array = number_array(values, "values")
        expected = complex.counts[degree]
        if array.ndim not in (1, 2) or len(array) != expected:
            message = f"values must have shape ({expected},) or ({expected}, m) on degree {degree}, got {array.shape}"
            raise InputError(message)
        object.__setattr__(self, "complex", complex)
        object.__setattr__(self, "degree", degree)
        object.__setattr__(self, "values", frozen(array))

    @property
    def is_exact(self) -> bool:
        """Whether the values are integers or Fractions."""
        return self.values.dtype != np.float64

    @property
    def n_columns(self) -> int | None:
        """Number of snapshots m; None for plain values of shape (n_k,)."""
        return int(self.values.shape[1]) if self.values.ndim == 2 else None

    def column(self, index: int) -> "Cochain":
        """One snapshot as a plain cochain.

        Raises
        ------
        InputError
            If there are no columns, or not that one.
        """
        if self.n_columns is None:
            message = "this cochain has no columns; its values are plain"
            raise InputError(message)
        if not 0 <= index < self.n_columns:
            message = f"column must be 0 .. {self.n_columns - 1}, got {index}"
            raise InputError(message)
        return Cochain(self.complex, self.degree, self.values[:, index])

    def d(self) -> "Cochain":
        """The derivative: gradient of vertex values, curl of edge values, divergence of face values.

        Returns
        -------
        Cochain of one degree more
            float64 from float64, rounded at every addition; int64 from int64, or Python integers where int64 could
            not hold a sum; exact from exact. The unit stays.

        Raises
        ------
        TopologyError
            If there are no cells of the next degree.

        Notes
        -----
        Source: Munkres, Elements of Algebraic Topology, 1984, section 42 (coboundary operator).
        """
        if self.degree >= self.complex.dim:
            message = f"there are no cells of degree {self.degree + 1} in a complex of dimension {self.complex.dim}"
            raise TopologyError(message)
        matrix = self.complex.coboundary(self.degree)
        values = self.values
        if values.dtype == np.int64:
            most = int(np.diff(matrix.indptr).max(initial=0)) * _largest(matrix.data)
            if most * _largest(values) > _LARGEST_INT:
                values = values.astype(object)
        if values.dtype != object:
            return self._on(self.degree + 1, matrix.astype(values.dtype) @ values)
        result = np.zeros((matrix.shape[0], *values.shape[1:]), dtype=object)
        rows = np.repeat(np.arange(matrix.shape[0]), np.diff(matrix.indptr))
        signs = matrix.data.astype(object).reshape(-1, *([1] * (values.ndim - 1)))
        np.add.at(result, rows, signs * values[matrix.indices])
        return self._on(self.degree + 1, result)

    def cup(self, other: "Cochain") -> "Cochain":
        """The cup product: this cochain on the front of every cell times the other on its back.

        Parameters
        ----------
        other : Cochain of degree q
            On the same complex, with as many columns.

        Returns
        -------
        Cochain of degree p + q
            float64 if a factor is, otherwise exact: int64, or Python integers where int64 could not hold a product.
            Its unit is the product of the two.

        Raises
        ------
        TopologyError
            If the complexes or the columns differ, there are no cells of degree p + q, or one of them is neither a
            simplex nor a cell of a grid.

        Notes
        -----
        Front and back, and the signs, are set out in `dec.calculus.cup`. The product is associative, the cochain of
        ones at the vertices is its unit, and ``a.cup(b).d() == a.d().cup(b) + (-1)**p * a.cup(b.d())``, all of it
        exactly for exact values. Source: Munkres, Elements of Algebraic Topology, 1984, sections 48 and 49; on grids:
        Serre, Homologie singuliere des espaces fibres, Ann. of Math. 54 (1951), chapter II.

        Examples
        --------
        >>> from dec.calculus.complex import Complex
        >>> K = Complex.from_faces([[0, 1, 2]])
        >>> K.cochain(1, [5, 7, 3]).cup(K.cochain(1, [1, 10, 100])).values
        array([500])
        """
        if not isinstance(other, Cochain):
            message = f"a cup product takes two cochains, got {type(other).__name__}; make one with K.cochain"
            raise TopologyError(message)
        self._refuse_other_complex(other)
        degree, dim = self.degree + other.degree, self.complex.dim
        if degree > dim:
            message = f"a product of degree {self.degree} + {other.degree} has no cells in a complex of dimension {dim}"
            raise TopologyError(message)
        if self.values.shape[1:] != other.values.shape[1:]:
            message = f"cochains of shape {self.values.shape} and {other.values.shape} do not combine: columns differ"
            raise TopologyError(message)
        return self._on(degree, cup_values(self.complex, self.degree, self.values, other.degree, other.values))

    def over(self, chain: Chain) -> Any:
        """The sum of the values over a chain, ``chain @ cochain``.

        Parameters
        ----------
        chain : Chain
            Of the same degree and complex.

        Returns
        -------
        float from float64 values (rounded; see `exact_integral`), int or Fraction from exact ones
            One value a column where the cochain has columns, as an array.

        Raises
        ------
        TopologyError
            If chain and cochain live on different cells.

        Examples
        --------
        >>> from dec.calculus.complex import Complex
        >>> K = Complex.from_edges([0, 1], [1, 2])
        >>> K.path([2, 1, 0]) @ K.cochain(1, [5, 7])
        -12
        """
        coefficients = self._coefficients_of(chain)
        if self.values.dtype == np.float64:
            used = np.flatnonzero(coefficients)  # nan elsewhere does not count
            result = coefficients[used].astype(np.float64) @ self.values[used]
            return float(result) if self.n_columns is None else result
        terms = Terms.of_chain(coefficients)
        if self.n_columns is None:
            return exact_sum(terms, self.values)
        total = np.empty(self.n_columns, dtype=object)
        total[:] = [exact_sum(terms, column) for column in self.values.T]
        return total

    def __add__(self, other: "Cochain") -> "Cochain":
        self._refuse_other_place(other)
        return self._on(self.degree, _safely(np.add, self.values, other.values))

    def __sub__(self, other: "Cochain") -> "Cochain":
        self._refuse_other_place(other)
        return self._on(self.degree, _safely(np.subtract, self.values, other.values))

    def __neg__(self) -> "Cochain":
        return self._on(self.degree, _safely(np.subtract, np.zeros_like(self.values), self.values))

    def __mul__(self, factor: Number) -> "Cochain":
        if isinstance(factor, bool) or not isinstance(factor, int | float | Fraction | np.integer | np.floating):
            return NotImplemented
        if not self.is_exact or isinstance(factor, float | np.floating):
            return self._on(self.degree, float_array(self.values, "values", finite=False) * float(factor))
        plain = factor if isinstance(factor, Fraction) else int(factor)
        if self.values.dtype == np.int64 and isinstance(plain, int) and _largest(self.values) * abs(plain) < 2**63:
            return self._on(self.degree, self.values * (plain if self.values.any() else 0))
        return self._on(self.degree, self.values.astype(object) * plain)

    __rmul__ = __mul__

    def __repr__(self) -> str:
        columns = "" if self.values.ndim == 1 else f", {self.values.shape[1]} columns"
        kind = "exact" if self.values.dtype == object else str(self.values.dtype)
        return f"<Cochain of degree {self.degree}: {len(self.values):,} values{columns}, {kind}>"

    def __reduce__(self) -> tuple[Any, ...]:
        return Cochain, (self.complex, self.degree, self.values)

    def _on(self, degree: int, values: AnyArray) -> "Cochain":
        return Cochain(self.complex, degree, values)

    def _coefficients_of(self, chain: object) -> IntArray:
        if not isinstance(chain, Chain):
            message = f"a cochain is summed over a chain, got {type(chain).__name__}; make one with K.chain"
            raise TopologyError(message)
        self._refuse_other_cells(chain)
        return chain.coefficients

    def _refuse_other_place(self, other: object) -> None:
        if not isinstance(other, Cochain):
            message = f"a cochain combines with cochains only, got {type(other).__name__}; make one with K.cochain"
            raise TopologyError(message)
        self._refuse_other_cells(other)
        if other.values.shape != self.values.shape:
            message = f"cochains of shape {self.values.shape} and {other.values.shape} do not combine"
            raise TopologyError(message)

    def _refuse_other_cells(self, other: "Cochain | Chain") -> None:
        if other.degree != self.degree:
            message = f"degree {self.degree} does not combine with degree {other.degree}"
            raise TopologyError(message)
        self._refuse_other_complex(other)

    def _refuse_other_complex(self, other: "Cochain | Chain") -> None:
        if other.complex is not self.complex:
            message = "these live on different complexes; build both from the same Complex object"
            raise TopologyError(message)


def _largest(values: AnyArray) -> int:
    """Return the largest size of an integer array's entries."""
    return max(-int(values.min()), int(values.max())) if values.size else 0


def _safely(operation: np.ufunc, left: AnyArray, right: AnyArray) -> AnyArray:
    """Return the sum or difference of two arrays; where int64 could wrap, in Python integers."""
    if left.dtype == right.dtype == np.int64 and _largest(left) + _largest(right) > _LARGEST_INT:
        left, right = left.astype(object), right.astype(object)
    if np.float64 in (left.dtype, right.dtype):
        left = float_array(left, "values", finite=False)
        right = float_array(right, "values", finite=False)
    return operation(left, right)  # type: ignore[no-any-return]
