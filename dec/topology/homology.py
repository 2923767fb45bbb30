"""Homology over the whole numbers: ranks, torsion, and closed chains that nothing bounds."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy.sparse import csr_array

from dec.arrays import BoolArray
from dec.topology.reductions import LARGEST, Layer, Rows, follow, pair_off
from dec.topology.smith import Columns, Splitting, Vector, invariant_factors, split

__all__ = ["Homology", "closed_chains", "cycles", "homology"]


@dataclass(frozen=True, slots=True)
class Homology:
    """Homology of every degree.

    Attributes
    ----------
    ranks : tuple of int
        Of the free part; the Betti numbers.
    torsion : tuple of tuple of int
        Orders above 1 of the finite cyclic parts, each a divisor of the next.
    """

    ranks: tuple[int, ...]
    torsion: tuple[tuple[int, ...], ...]


def homology(coboundaries: tuple[csr_array, ...]) -> Homology:
    """Ranks and torsion of every degree.

    Parameters
    ----------
    coboundaries : tuple of csr_array of int8, shape (n_{k+1}, n_k)
        Two in a row multiply to zero. A row of the first has at most two entries, +1 and -1 or only one of them.

    Returns
    -------
    Homology

    Raises
    ------
    TopologyError
        As `dec.topology.smith.split`.

    Examples
    --------
    >>> from dec.calculus.complex import grid
    >>> K = grid((4, 4), periodic=True)
    >>> homology((K.coboundary(0), K.coboundary(1)))
    Homology(ranks=(1, 2, 1), torsion=((), (), ()))
    """
    found = _split(pair_off(coboundaries), with_chains=False)
    return Homology(tuple(found.ranks), tuple(map(invariant_factors, found.divisors)))


def cycles(coboundaries: tuple[csr_array, ...], degree: int) -> Rows:
    """Closed chains that, with the torsion, generate the homology of a degree, independent of each other.

    Parameters
    ----------
    coboundaries : tuple of csr_array of int8
        As for `homology`.
    degree : int

    Returns
    -------
    Rows
        As many as the rank. A closed chain, taken often enough, is a combination of them and of boundaries in one way
        only; where there is no torsion, once is enough.

    Raises
    ------
    TopologyError
        As `dec.topology.smith.split`.

    Examples
    --------
    >>> from dec.calculus.complex import Complex
    >>> K = Complex.from_edges([0, 1, 2], [1, 2, 0])
    >>> cycles((K.coboundary(0),), 1).values
    array([1, 1, 1])
    """
    return closed_chains(coboundaries)(degree)


def closed_chains(coboundaries: tuple[csr_array, ...]) -> Callable[[int], Rows]:
    """`cycles` of any degree, the cells paired and eliminated once for all of them.

    Parameters
    ----------
    coboundaries : tuple of csr_array of int8
        As for `homology`.

    Returns
    -------
    function of a degree

    Raises
    ------
    TopologyError
        As `dec.topology.smith.split`.
    """
    layers = pair_off(coboundaries)
    left = _split(layers, with_chains=True).left

    def of(degree: int) -> Rows:
        rows = _rows(list(left[degree].values()))
        return _sorted(follow(layers[degree - 1], rows)[0] if degree else rows)

    return of


def _split(layers: list[Layer], *, with_chains: bool) -> Splitting:
    """Return the homology of the cells that are in no pair, by elimination."""
    left = [layers[0].mate < 0, *(layer.left for layer in layers)]
    cells = [np.flatnonzero(of_degree).tolist() for of_degree in left]
    boundaries: list[Columns] = [{}]  # the forest leaves one vertex a component, and none where there is ground
    for layer, facets, numbers in zip(layers[1:], left[1:], cells[2:], strict=False):
        boundaries.append(_columns(layer, facets, numbers) if facets.any() else {})
    return split(cells, boundaries, with_chains=with_chains)


def _columns(layer: Layer, facets: BoolArray, numbers: list[int]) -> Columns:
    """Return the boundary that each cell left over has among the facets left over."""
    rims = follow(layer, _rows([{number: 1} for number in numbers]))[1]
    among = facets[rims.cells]
    rows = np.repeat(np.arange(len(rims)), np.diff(rims.offsets))[among]
    columns: Columns = {number: {} for number in numbers}
    for row, facet, value in zip(rows.tolist(), rims.cells[among].tolist(), rims.values[among].tolist(), strict=True):
        columns[numbers[row]][facet] = value
    return columns


def _rows(vectors: list[Vector]) -> Rows:
    offsets = np.cumsum([0, *map(len, vectors)], dtype=np.int64)
    cells = np.array([cell for vector in vectors for cell in vector], dtype=np.int64)
    values = [value for vector in vectors for value in vector.values()]
    fits = max(map(abs, values), default=0) < LARGEST
    return Rows(cells, np.array(values, dtype=np.int64 if fits else object), offsets)


def _sorted(rows: Rows) -> Rows:
    """Return the rows with ascending cells."""
    order = np.lexsort((rows.cells, np.repeat(np.arange(len(rows)), np.diff(rows.offsets))))
    return Rows(rows.cells[order], rows.values[order], rows.offsets)
