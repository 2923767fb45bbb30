"""Everything the audits say of readings, from the definitions, in exact fractions: slow, and knowing nothing of graphs.

Coordinates are what could be read: a flow or a difference of each edge, then a supply or a potential. The values that
the law admits are start + basis z with z free. C spans what contradicts readings, C A = 0 for the design A of the
readings, and M = C' (C Q C')^-1 C for their covariance Q. Source: Teunissen, Testing Theory, 2000, chapters 3 and 4
(from memory).
"""

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property

from .exact_adjustment import Row, dot, echelon, inverse

ZERO = Fraction(0)


def null_space(rows: Sequence[Row], n_columns: int) -> list[Row]:
    """A basis of the solutions of rows x = 0."""
    solved, pivots = echelon(rows, n_columns)
    free = [c for c in range(n_columns) if c not in pivots]
    basis = [[Fraction(int(c == f)) for c in range(n_columns)] for f in free]
    for row, pivot in zip(solved, pivots, strict=True):
        for vector, f in zip(basis, free, strict=True):
            vector[pivot] = -row[f]
    return basis


def solution(rows: Sequence[Row], right: Row, n_columns: int) -> Row | None:
    """Some solution of rows x = right; None where there is none."""
    doubled = [[*row, value] for row, value in zip(rows, right, strict=True)]
    solved, pivots = echelon(doubled, n_columns + 1)
    if n_columns in pivots:
        return None
    found = [ZERO] * n_columns
    for row, pivot in zip(solved, pivots, strict=True):
        found[pivot] = row[n_columns]
    return found


def turned(rows: Sequence[Row], n_columns: int) -> list[Row]:
    return [[row[c] for row in rows] for c in range(n_columns)]


def times(matrix: Sequence[Row], vector: Row) -> Row:
    return [dot(row, vector) for row in matrix]


@dataclass
class Reference:
    """Readings of coordinates, each of one, with variances and common errors; and what readings say of any error.

    `at` names the coordinate of each reading; `common` says how far each common error moves each reading.
    """

    start: Row
    basis: list[Row]
    at: list[int]
    reading: Row
    variance: Row
    common: list[Row]

    @cached_property
    def n_free(self) -> int:
        return len(self.basis[0]) if self.basis else 0

    @cached_property
    def design(self) -> list[Row]:
        return [self.basis[i] for i in self.at]

    @cached_property
    def checks(self) -> list[Row]:
        """C: every way in which readings can contradict each other."""
        return null_space(turned(self.design, self.n_free), len(self.at))

    @cached_property
    def covariance(self) -> list[Row]:
        size = range(len(self.at))
        return [
            [
                (self.variance[i] if i == j else ZERO) + sum((g[i] * g[j] for g in self.common if g[i]), ZERO)
                for j in size
            ]
            for i in size
        ]

    @cached_property
    def spread(self) -> list[Row]:
        """The covariance of what the checks miss, inverted."""
        drawn = [times(self.covariance, check) for check in self.checks]
        return inverse([times(self.checks, row) for row in drawn])

    @cached_property
    def misses(self) -> Row:
        return times(self.checks, [y - self.start[i] for y, i in zip(self.reading, self.at, strict=True)])

    @cached_property
    def weighed(self) -> Row:
        return times(self.spread, self.misses)

    @property
    def dof(self) -> int:
        return len(self.checks)

    @cached_property
    def chi_square(self) -> Fraction:
        return dot(self.misses, self.weighed)

    def seen(self, error: Row) -> Row:
        """What an error of the readings adds to what the checks miss."""
        return times(self.checks, error)

    def score(self, error: Row) -> Fraction:
        return dot(self.seen(error), self.weighed)

    def weight(self, error: Row) -> Fraction:
        seen = self.seen(error)
        return dot(seen, times(self.spread, seen))

    def alone(self, k: int) -> Row:
        return [Fraction(int(i == k)) for i in range(len(self.at))]

    @cached_property
    def adjusted(self) -> Row:
        """The readings with Q C' (C Q C')^-1 of what they miss taken away."""
        pulled = times(turned(self.checks, len(self.at)), self.weighed)
        return [y - q for y, q in zip(self.reading, times(self.covariance, pulled), strict=True)]

    @cached_property
    def drawn(self) -> list[Row]:
        """C Q, one row a check."""
        return [times(self.covariance, check) for check in self.checks]

    def redundancy(self, k: int) -> Fraction:
        """Entry of Q M on the diagonal."""
        column = [row[k] for row in self.drawn]
        return dot(column, times(self.spread, [check[k] for check in self.checks]))

    def functional(self, row: Row) -> tuple[Fraction, Fraction] | None:
        """Value and variance of row z, less the start; None where the readings do not say."""
        share = solution(turned(self.design, self.n_free), row, len(self.at))
        if share is None:
            return None
        away = [x - self.start[i] for x, i in zip(self.adjusted, self.at, strict=True)]
        seen = times(self.drawn, share)
        variance = dot(share, times(self.covariance, share)) - dot(seen, times(self.spread, seen))
        return dot(share, away), variance

    def coordinate(self, i: int) -> tuple[Fraction, Fraction] | None:
        """Adjusted value and variance of a coordinate, read or not."""
        found = self.functional(self.basis[i])
        return None if found is None else (self.start[i] + found[0], found[1])

    def standing(self, i: int) -> str:
        """Where several readings are of one coordinate, whether the others say something of it."""
        own = [k for k, at in enumerate(self.at) if at == i]
        if not own:
            return "unknown" if self.coordinate(i) is None else "inferred"
        together = [Fraction(int(k in own)) for k in range(len(self.at))]
        return "checked" if any(self.seen(together)) else "unchecked"


def is_parallel(one: Row, other: Row) -> bool:
    first = next((i for i, x in enumerate(one) if x), None)
    if first is None or not other[first]:
        return False
    return all(a * other[first] == b * one[first] for a, b in zip(one, other, strict=True))


def flows(
    ends: list[tuple[int, int]], closed: list[int], put_in: dict[int, Fraction], read_at: list[int]
) -> tuple[Row, list[Row], dict[int, Row | None]]:
    """Start and basis of the flows of edges and the measured supplies, and what a leak of 1 at a vertex moves them.

    Inflow minus outflow plus supply is zero at every closed vertex, or what leaks there. None where no flows at all
    have a leak there and nowhere else.
    """
    size = len(ends) + len(read_at)
    rows = [[Fraction((b == v) - (a == v)) for a, b in ends] + [Fraction(int(w == v)) for w in read_at] for v in closed]
    start = solution(rows, [-put_in.get(v, ZERO) for v in closed], size)
    assert start is not None
    leak = {v: solution(rows, [Fraction(int(w == v)) for w in closed], size) for v in closed}
    basis = null_space(rows, size)
    return start, [list(row) for row in turned(basis, size)], leak


def differences(
    ends: list[tuple[int, int]], n: int, fixed: dict[int, Fraction], read_at: list[int]
) -> tuple[Row, list[Row], dict[int, Row]]:
    """Start and basis of the differences of edges and the measured potentials, and what they are if a held one is out.

    If a held potential is stated 1 too high, the differences to it are smaller than it says.
    """
    free = [v for v in range(n) if v not in fixed]
    start = [fixed.get(b, ZERO) - fixed.get(a, ZERO) for a, b in ends] + [ZERO for _ in read_at]
    basis = [[Fraction((b == v) - (a == v)) for v in free] for a, b in ends]
    basis += [[Fraction(int(v == w)) for v in free] for w in read_at]
    moved = {v: [Fraction((a == v) - (b == v)) for a, b in ends] + [ZERO for _ in read_at] for v in fixed}
    return start, basis, moved
