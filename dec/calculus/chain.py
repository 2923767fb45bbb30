"""Chains: whole-number combinations of cells, the places over which cochains are summed."""

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import ArrayLike

from dec.arrays import AnyArray, IntArray, SignArray, frozen, index_array
from dec.calculus.arguments import checked_degree
from dec.errors import InputError, TopologyError

if TYPE_CHECKING:
    from dec.calculus.cochain import Cochain
    from dec.calculus.complex import Complex

__all__ = ["Chain"]

# Sums and differences of two such coefficients, and their products with -128 .. 127, stay inside int64.
LARGEST = 2**53


@dataclass(frozen=True, eq=False, init=False, repr=False)
class Chain:
    """A combination of the k-cells of a complex with whole-number coefficients.

    Parameters
    ----------
    complex : Complex
    degree : int
        0 for vertices, 1 for edges, 2 for faces, 3 for solid cells.
    coefficients : int array_like, shape (n_k,)
        +1 takes a cell as it is turned, -1 turned round; below 2**53 in size. Kept as a read-only int64 copy.

    Raises
    ------
    InputError
        If the degree does not exist, or the coefficients are not whole numbers of that size, one for each cell.

    Notes
    -----
    Chains of different degree or complex do not combine: `TopologyError`.

    Examples
    --------
    >>> from dec.calculus.complex import Complex
    >>> K = Complex.from_faces([[0, 1, 2]])
    >>> K.region([0]).boundary().coefficients
    array([ 1, -1,  1])
    """

    complex: "Complex"
    degree: int
    coefficients: IntArray

    __array_ufunc__ = None  # so that NumPy leaves ``array * chain`` to the chain, which refuses it

    def __init__(self, complex: "Complex", degree: int, coefficients: ArrayLike) -> None:
        degree = checked_degree(degree, range(complex.dim + 1), complex.dim)
        array = index_array(coefficients, "coefficients")
        expected = complex.counts[degree]
        if len(array) != expected:
            message = f"coefficients must have shape ({expected},) on degree {degree}, got {array.shape}"
            raise InputError(message)
        if array.size and (largest := max(-int(array.min()), int(array.max()))) >= LARGEST:
            message = f"coefficients must stay below 2**53, got {largest}"
            raise InputError(message)
        object.__setattr__(self, "complex", complex)
        object.__setattr__(self, "degree", degree)
        object.__setattr__(self, "coefficients", frozen(array))

    def __reduce__(self) -> tuple[Any, ...]:
        return Chain, (self.complex, self.degree, self.coefficients)

    @classmethod
    def along(cls, complex: "Complex", edges: AnyArray, signs: SignArray) -> "Chain":
        """The 1-chain of a walk given by signed edges; an edge walked twice counts twice.

        Parameters
        ----------
        edges : int array, shape (m,)
        signs : int8 array, shape (m,)
            +1 where the walk runs along its edge, -1 where against it.
        """
        coefficients = np.zeros(complex.counts[1], dtype=np.int64)
        np.add.at(coefficients, edges, signs)
        return cls(complex, 1, coefficients)

    def boundary(self) -> "Chain":
        """The boundary: heads minus tails of a path, the outline of a region, the skin of a body.

        Returns
        -------
        Chain of one degree less

        Raises
        ------
        TopologyError
            If the chain has degree 0.
        InputError
            If coefficients are so large that a coefficient of the boundary could reach 2**53.

        Notes
        -----
        Source: Munkres, Elements of Algebraic Topology, 1984, section 5 (boundary operator).
        """
        if self.degree == 0:
            message = "a chain of vertices has no boundary"
            raise TopologyError(message)
        size = float(np.abs(self.coefficients).astype(np.float64).sum())
        if size >= 2**55:
            message = f"coefficients add up to {size:.3g} in size, too large for exact 64-bit sums (2**55)"
            raise InputError(message)
        matrix = self.complex.coboundary(self.degree - 1)
        return Chain(self.complex, self.degree - 1, matrix.T @ self.coefficients)  # int8 @ int64 adds up in int64

    @property
    def is_closed(self) -> bool:
        """Whether the boundary is zero; a chain of vertices counts as closed."""
        return self.degree == 0 or not self.boundary().coefficients.any()

    def __matmul__(self, cochain: "Cochain") -> Any:
        """Sum of the cochain over the chain; see `Cochain.over`."""
        over = getattr(cochain, "over", None)
        if over is None:
            message = f"a chain pairs with a cochain, got {type(cochain).__name__}; make one with K.cochain"
            raise TopologyError(message)
        return over(self)

    def __add__(self, other: "Chain") -> "Chain":
        self._refuse_other_place(other)
        return Chain(self.complex, self.degree, self.coefficients + other.coefficients)

    def __sub__(self, other: "Chain") -> "Chain":
        self._refuse_other_place(other)
        return Chain(self.complex, self.degree, self.coefficients - other.coefficients)

    def __neg__(self) -> "Chain":
        return Chain(self.complex, self.degree, -self.coefficients)

    def __mul__(self, factor: int) -> "Chain":
        if isinstance(factor, bool) or not isinstance(factor, int | np.integer):
            return NotImplemented
        largest = int(np.abs(self.coefficients).max(initial=0)) * abs(int(factor))
        if largest >= LARGEST:
            message = f"coefficients must stay below 2**53, got {largest}"
            raise InputError(message)
        return Chain(self.complex, self.degree, self.coefficients * (int(factor) if largest else 0))

    __rmul__ = __mul__

    def __repr__(self) -> str:
        used = int(np.count_nonzero(self.coefficients))
        return f"<Chain of degree {self.degree}: {used:,} of {len(self.coefficients):,} cells>"

    def _refuse_other_place(self, other: object) -> None:
        if not isinstance(other, Chain):
            message = f"a chain combines with chains only, got {type(other).__name__}"
            raise TopologyError(message)
        if other.degree != self.degree or other.complex is not self.complex:
            what = "degrees" if other.degree != self.degree else "complexes"
            message = f"chains of different {what} do not add up; build both from the same Complex object"
            raise TopologyError(message)
