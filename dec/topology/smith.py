"""Whole-number matrices brought to diagonal form, exactly: what is left of a complex after cheap reductions."""

import heapq
from collections import defaultdict
from dataclasses import dataclass
from itertools import count
from math import gcd, lcm
from typing import NoReturn

import numpy as np

from dec.errors import TopologyError
from dec.topology.dense import LARGEST_ROW, divisors

__all__ = ["Columns", "Splitting", "Vector", "invariant_factors", "split"]

Vector = dict[int, int]
Columns = dict[int, Vector]

# entries that may be touched, and so many more for each entry given
_STEPS = 20_000_000
_STEPS_EACH = 20
# a boundary is full when one entry in so many is not zero, with so many rows and columns; how often that is looked at
_FULL = 5
_FEW = 40
_TURNS = 32
# multiplications that one elimination of a full matrix may take; there are hundreds of eliminations
_PRODUCTS = 1_000_000_000


@dataclass(frozen=True, slots=True)
class Splitting:
    """A complex taken apart into pairs, whose cell has a multiple of one facet as boundary, and cells left over.

    Attributes
    ----------
    ranks : list of int
        How many cells of each degree are left over.
    divisors : list of list of int
        By degree k, the multiple of each pair of a (k+1)-cell and a k-cell, where it is more than 1; not sorted.
    left : list of dict of cell to its chain, a dict of cell to int
        By degree, closed chains that the cells left over stand for; empty where no account was kept of them.
    """

    ranks: list[int]
    divisors: list[list[int]]
    left: list[Columns]


def split(cells: list[list[int]], boundaries: list[Columns], *, with_chains: bool = True) -> Splitting:
    """Homology of a small complex by elimination in Python integers.

    Parameters
    ----------
    cells : list of list of int
        Numbers of the cells of each degree.
    boundaries : list of dict of k-cell to dict of (k-1)-cell to non-zero int
        For k = 1, 2, ...; two in a row multiply to zero. They are used up.
    with_chains : bool
        Whether to keep account of the chains; without, a boundary that has filled up is left to
        `dec.topology.dense.divisors`.

    Returns
    -------
    Splitting

    Raises
    ------
    TopologyError
        If the elimination takes more than 20 million steps and 20 for each entry, a step being one entry of a column
        that is combined with another, or leaves a full matrix that would take hours.

    Notes
    -----
    From the top degree down. A pivot of size 1 takes its row and column away in one step, a shortest column first; then
    a smallest pivot is divided into its row and column until nothing but itself is left there. Each step is a change
    of basis of the whole complex, so the boundary of a boundary stays zero, and a pivot alone in its row and column
    splits off. Source: Munkres, Elements of Algebraic Topology, 1984, section 11.

    Examples
    --------
    A disc whose rim goes twice round a circle, with a second circle beside it:

    >>> split([[0], [0, 1], [0]], [{}, {0: {0: 2}}])
    Splitting(ranks=[1, 1, 0], divisors=[[], [2], []], left=[{0: {0: 1}}, {1: {1: 1}}, {}])
    """
    chains = [{cell: {cell: 1} if with_chains else {} for cell in of_degree} for of_degree in cells]
    divisors: list[list[int]] = [[] for _ in cells]
    paired = [0] * len(cells)
    entries = sum(len(column) for columns in boundaries for column in columns.values())
    steps = _STEPS + _STEPS_EACH * entries
    for k in reversed(range(len(boundaries))):
        matrix = _Matrix(boundaries[k], chains[k + 1], chains[k], boundaries[k - 1] if k else {}, steps)
        if matrix.take_units(until_full=not with_chains):
            divisors[k] = matrix.take_multiples()
        else:
            rank, divisors[k] = matrix.divisors()
            paired[k], paired[k + 1] = paired[k] + rank, paired[k + 1] + rank
        steps = matrix.steps
    ranks = [len(of_degree) - pairs for of_degree, pairs in zip(chains, paired, strict=True)]
    return Splitting(ranks, divisors, chains if with_chains else [{} for _ in chains])


def invariant_factors(divisors: list[int]) -> tuple[int, ...]:
    """The orders above 1 of the cyclic groups, each a divisor of the next, that add up to the same group.

    Examples
    --------
    >>> invariant_factors([2, 3, 4])
    (2, 12)
    """
    factors = sorted(divisors)
    for i in range(len(factors)):
        for j in range(i + 1, len(factors)):
            factors[i], factors[j] = gcd(factors[i], factors[j]), lcm(factors[i], factors[j])
    return tuple(d for d in factors if d > 1)


class _Matrix:
    """One boundary under elimination; changes of basis are carried to the chains and to the boundary below."""

    def __init__(self, columns: Columns, upper: Columns, lower: Columns, below: Columns, steps: int) -> None:
        self.columns = {b: column for b, column in columns.items() if column}
        self.upper, self.lower, self.below, self.steps = upper, lower, below, steps
        self.users: dict[int, set[int]] = defaultdict(set)
        for b, column in self.columns.items():
            for a in column:
                self.users[a].add(b)

    def take_units(self, *, until_full: bool) -> bool:
        """Split off every pair of multiple 1 that needs no division, and return True; or False when rows are full."""
        heap = [(len(column), b) for b, column in self.columns.items()]
        heapq.heapify(heap)
        for turn in count():
            if until_full and turn % _TURNS == 0 and self.is_full():
                return False
            if not heap:
                break
            size, b = heapq.heappop(heap)
            column = self.columns.get(b)
            if column is None or len(column) != size:  # an entry that has been overtaken
                continue
            units = [a for a, value in column.items() if abs(value) == 1]
            if not units:
                continue
            pivot = min(units, key=lambda a: (len(self.users[a]), a))
            for z in sorted(self.users[pivot] - {b}):
                self.subtract(z, b, self.columns[z][pivot] * column[pivot])
                if self.columns[z]:
                    heapq.heappush(heap, (len(self.columns[z]), z))
            self.drop(pivot, b)
        return True

    def is_full(self) -> bool:
        """Whether so many entries are not zero that they are better kept as an array."""
        entries = sum(map(len, self.columns.values()))
        m, n = self.shape()
        if min(m, n) < _FEW or _FULL * entries < m * n:
            return False
        largest = max(max(map(abs, column.values())) for column in self.columns.values() if column)
        return largest * max(m, n) < LARGEST_ROW

    def shape(self) -> tuple[int, int]:
        """The numbers of rows and columns that are not zero."""
        return sum(map(bool, self.users.values())), sum(map(bool, self.columns.values()))

    def divisors(self) -> tuple[int, list[int]]:
        """The rank of what is left, and the multiples above 1."""
        m, n = self.shape()
        if m * n * min(m, n) > _PRODUCTS:
            self.refuse()
        row = {a: i for i, a in enumerate(sorted(a for a, users in self.users.items() if users))}
        matrix = np.zeros((m, n), np.int64)
        for j, column in enumerate(filter(None, self.columns.values())):
            for a, value in column.items():
                matrix[row[a], j] = value
        return divisors(matrix)

    def take_multiples(self) -> list[int]:
        """Split off what is left, pair by pair, and return the multiples above 1."""
        found = []
        heap = [(*_smallest(column), b) for b, column in self.columns.items() if column]
        heapq.heapify(heap)
        while heap:
            size, a, b = heapq.heappop(heap)
            if not self.columns.get(b) or _smallest(self.columns[b]) != (size, a):  # an entry that has been overtaken
                continue
            changed = sorted(self.users[a])
            if self.divide_row(a, b) and self.divide_column(a, b):
                self.drop(a, b)
                if size > 1:
                    found.append(size)
            for z in changed:
                if self.columns.get(z):
                    heapq.heappush(heap, (*_smallest(self.columns[z]), z))
        return found

    def divide_row(self, a: int, b: int) -> bool:
        """Subtract the pivot's column from the others of its row; whether that leaves them zero there."""
        pivot = self.columns[b][a]
        for z in sorted(self.users[a] - {b}):
            self.subtract(z, b, self.columns[z][a] // pivot)
        return self.users[a] == {b}

    def divide_column(self, a: int, b: int) -> bool:
        """Subtract the pivot's row, which has no other entry, from the others of its column; whether all are zero."""
        column = self.columns[b]
        for c in [c for c in column if c != a]:
            times = column[c] // column[a]
            _add(self.lower[a], self.lower[c], times)
            if self.below:
                _add(self.below.setdefault(a, {}), self.below.get(c, {}), times)
            column[c] -= times * column[a]
            if not column[c]:
                del column[c]
                self.users[c].discard(b)
        return len(column) == 1

    def subtract(self, z: int, b: int, times: int) -> None:
        """Take a multiple of column b from column z."""
        column, by = self.columns[z], self.columns[b]
        self.steps -= len(column) + len(by)
        if self.steps < 0:
            self.refuse()
        _add(column, by, -times)
        for a in by:
            (self.users[a].add if a in column else self.users[a].discard)(z)
        _add(self.upper[z], self.upper[b], -times)

    def drop(self, a: int, b: int) -> None:
        """Take a pair away; the boundary below is zero on its facet then, or is so in the new basis."""
        for c in self.columns.pop(b):
            self.users[c].discard(b)
        del self.upper[b], self.lower[a]
        self.below.pop(a, None)

    def refuse(self) -> NoReturn:
        facets, cells = self.shape()
        message = (
            f"the holes cannot be counted exactly in reasonable time: {facets:,} equations between {cells:,} cells "
            "are left that all hang together, as in a heap of cells that share edges and corners at random; check the "
            "corner numbers of the cells, or take a part of the mesh"
        )
        raise TopologyError(message)


def _smallest(column: Vector) -> tuple[int, int]:
    return min((abs(value), a) for a, value in column.items())


def _add(vector: Vector, other: Vector, times: int) -> None:
    for cell, value in other.items():
        total = vector.get(cell, 0) + times * value
        if total:
            vector[cell] = total
        else:
            vector.pop(cell, None)
