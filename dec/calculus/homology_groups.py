"""Homology of a complex, for reading and for further work: ranks, torsion and closed chains."""

from collections.abc import Callable
from dataclasses import dataclass, field
from functools import cache, cached_property
from typing import TYPE_CHECKING, Any

import numpy as np
from scipy.sparse import csr_array

from dec.arrays import BoolArray
from dec.calculus.chain import LARGEST, Chain
from dec.errors import TopologyError
from dec.topology.edges import sealed
from dec.topology.homology import closed_chains, homology
from dec.topology.reductions import Rows

if TYPE_CHECKING:
    from dec.calculus.cells import Cells

__all__ = ["HomologyGroup", "all_groups", "boundary_cells"]


@dataclass(frozen=True, eq=False)
class HomologyGroup:
    """Closed chains of a degree, where two count as the same when they differ by a boundary.

    Attributes
    ----------
    complex : Complex
    degree : int
    relative : bool
        Whether cells of the boundary count as nothing: a chain is then closed when its boundary lies there.
    rank : int
        How many closed chains are independent: the Betti number.
    torsion : tuple of int
        Orders above 1, each a divisor of the next, of closed chains that become a boundary when taken that often.
    closed : function
        Makes the closed chains of any degree, once for all degrees.

    Examples
    --------
    >>> from dec.calculus.complex import grid
    >>> H = grid((4, 4), periodic=True).homology(1)
    >>> H
    <Homology of degree 1: Z^2>
    >>> H.chain(0).boundary().coefficients.any()
    np.False_
    """

    complex: Any
    degree: int
    relative: bool
    rank: int
    torsion: tuple[int, ...]
    closed: Callable[[], Callable[[int], Rows]] = field(repr=False)

    @cached_property
    def cycles(self) -> csr_array:
        """Closed chains, one a row, that with the torsion generate the group.

        Returns
        -------
        csr_array of int64, shape (rank, n_k), read-only
            Independent of each other and of all boundaries. Without torsion every closed chain is a whole-number
            combination of them and a boundary; with torsion, some multiple of it is. The boundary of each is exactly
            zero, or lies in the boundary of the complex if the group is relative to that.

        Raises
        ------
        TopologyError
            If the cells are so entangled that the chains would not be found in reasonable time, or a coefficient
            reaches 2**53.

        Notes
        -----
        The chains are not the shortest of their class.
        """
        inside = _inside(self.complex) if self.relative else None
        rows = self.closed()(self.degree)
        if max(map(abs, rows.values.tolist()), default=0) >= LARGEST:
            message = f"a closed chain of degree {self.degree} has a coefficient of 2**53 or more; the rank is right"
            raise TopologyError(message)
        cells = rows.cells if inside is None else np.flatnonzero(inside[self.degree])[rows.cells]
        shape = (len(rows), self.complex.counts[self.degree])
        return sealed(csr_array((rows.values.astype(np.int64), cells, rows.offsets), shape=shape))

    def chain(self, index: int) -> Chain:
        """One of the `cycles`, as a chain.

        Parameters
        ----------
        index : int
            0 .. rank - 1.

        Returns
        -------
        Chain

        Raises
        ------
        IndexError
            If there is no such row.
        TopologyError
            As `cycles`.
        """
        return Chain(self.complex, self.degree, self.cycles[[index]].toarray()[0])

    def __str__(self) -> str:
        free = {0: [], 1: ["Z"]}.get(self.rank, [f"Z^{self.rank}"])
        return " + ".join([*free, *(f"Z/{order}" for order in self.torsion)]) or "0"

    def __repr__(self) -> str:
        relative = " relative to the boundary" if self.relative else ""
        return f"<Homology of degree {self.degree}{relative}: {self}>"


def all_groups(complex: "Cells", *, relative: bool) -> tuple[HomologyGroup, ...]:
    """The homology of every degree, of the complex or relative to its boundary.

    Parameters
    ----------
    complex : Complex
    relative : bool

    Returns
    -------
    tuple of HomologyGroup, length dim + 1

    Raises
    ------
    TopologyError
        If the cells are so entangled that the elimination would not end in reasonable time.
    """
    matrices = _matrices(complex, _inside(complex) if relative else None)
    found, closed = homology(matrices), cache(lambda: closed_chains(matrices))
    return tuple(
        HomologyGroup(complex, degree, relative, rank, torsion, closed)
        for degree, (rank, torsion) in enumerate(zip(found.ranks, found.torsion, strict=True))
    )


def boundary_cells(complex: "Cells") -> tuple[BoolArray, ...]:
    """Which cells of each degree make up the boundary of a complex.

    Parameters
    ----------
    complex : Complex

    Returns
    -------
    tuple of bool arrays, shape (n_k,)
        True for facets that one top cell uses once, and for every edge and vertex of them; no top cell. The boundary
        of a graph is its vertices where one edge ends.

    Examples
    --------
    >>> from dec.calculus.complex import Complex
    >>> [list(map(bool, of_degree)) for of_degree in boundary_cells(Complex.from_edges([0, 1], [1, 2]))]
    [[True, False, True], [False, False]]
    """
    marks = [np.zeros(n, dtype=bool) for n in complex.counts]
    if complex.dim == 1:
        ends = np.concatenate([complex.tail, complex.head])
        marks[0] = np.bincount(ends, minlength=complex.counts[0]) == 1
        return tuple(marks)
    marks[-2] = complex.incidences.uses == 1
    if complex.dim == 3 and complex.walks is not None:
        marks[1][complex.walks.edges[np.repeat(marks[2], np.diff(complex.walks.offsets))]] = True
    for ends in (complex.tail, complex.head):
        marks[0][ends[marks[1]]] = True
    return tuple(marks)


def _inside(complex: "Cells") -> list[BoolArray]:
    return [~of_degree for of_degree in boundary_cells(complex)]


def _matrices(complex: "Cells", inside: list[BoolArray] | None) -> tuple[csr_array, ...]:
    """Return the coboundaries, of the cells inside only where that is asked."""
    matrices = tuple(complex.coboundary(k) for k in range(complex.dim))
    if inside is None:
        return matrices
    return tuple(matrix[inside[k + 1]][:, inside[k]] for k, matrix in enumerate(matrices))
