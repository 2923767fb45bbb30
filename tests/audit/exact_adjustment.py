"""Least squares on a small network in exact fractions: slow, obvious, and knowing nothing of graphs.

Every admissible set of values is x = start + basis z with z free. What the audits find by combinatorics is decided here
by ranks, and every figure is a rational number.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from fractions import Fraction

Row = list[Fraction]


def echelon(rows: Sequence[Row], n_columns: int) -> tuple[list[Row], list[int]]:
    """Reduced row echelon form without its zero rows, and the pivot columns among the first n_columns."""
    left, pivots = [list(row) for row in rows], []
    for column in range(n_columns):
        at = next((i for i in range(len(pivots), len(left)) if left[i][column]), None)
        if at is None:
            continue
        top = len(pivots)
        left[top], left[at] = left[at], left[top]
        left[top] = [value / left[top][column] for value in left[top]]
        for i in range(len(left)):
            if i != top and left[i][column]:
                factor = left[i][column]
                left[i] = [a - factor * b for a, b in zip(left[i], left[top], strict=True)]
        pivots.append(column)
    return left[: len(pivots)], pivots


def rank(rows: Sequence[Row]) -> int:
    return len(echelon(rows, len(rows[0]) if rows else 0)[1])


def inverse(matrix: list[Row]) -> list[Row]:
    n = len(matrix)
    doubled = [[*row, *(Fraction(int(i == j)) for j in range(n))] for i, row in enumerate(matrix)]
    return [row[n:] for row in echelon(doubled, n)[0]]


def dot(one: Sequence[Fraction], other: Sequence[Fraction]) -> Fraction:
    return sum((a * b for a, b in zip(one, other, strict=True)), Fraction(0))


@dataclass
class Exact:
    """What least squares says, edge by edge; `value` and `variance` hold only the edges whose value follows."""

    dof: int
    chi_square: Fraction
    standing: list[str]
    value: dict[int, Fraction]
    variance: dict[int, Fraction]
    redundancy: dict[int, Fraction]
    inseparable: dict[int, list[int]]
    functional: Callable[[Row], tuple[Fraction, Fraction]]  # value and variance of a linear function of z that follows


def adjusted(start: Row, basis: list[Row], reading: dict[int, Fraction], sd: Sequence[Fraction]) -> Exact:
    """The adjustment of readings, one every measured edge, with their standard deviations."""
    seen = sorted(reading)
    measured = [basis[e] for e in seen]
    pivots = echelon(measured, len(basis[0]) if basis else 0)[1]
    design = [[row[c] for c in pivots] for row in basis]
    weight = {e: 1 / sd[e] ** 2 for e in seen}
    size = range(len(pivots))
    normal = [[sum((weight[e] * design[e][i] * design[e][j] for e in seen), Fraction(0)) for j in size] for i in size]
    spread = inverse(normal)
    right = [sum((weight[e] * design[e][i] * (reading[e] - start[e]) for e in seen), Fraction(0)) for i in size]
    z = [dot(row, right) for row in spread]

    def covariance(one: Row, other: Row) -> Fraction:
        return dot(one, [dot(row, other) for row in spread])

    found = rank(measured)
    standing = []
    for e, row in enumerate(basis):
        if e in reading:
            others = [basis[f] for f in seen if f != e]
            standing.append("checked" if rank(others) == found else "unchecked")
        else:
            standing.append("inferred" if rank([*measured, row]) == found else "unknown")
    follows = [e for e, word in enumerate(standing) if word != "unknown"]
    value = {e: start[e] + dot(design[e], z) for e in follows}
    variance = {e: covariance(design[e], design[e]) for e in follows}

    def left(one: int, other: int) -> Fraction:  # covariance of two corrections
        return (sd[one] ** 2 if one == other else 0) - covariance(design[one], design[other])

    checked = [e for e in seen if standing[e] == "checked"]
    return Exact(
        dof=len(seen) - found,
        chi_square=sum(((value[e] - reading[e]) ** 2 * weight[e] for e in seen), Fraction(0)),
        standing=standing,
        value=value,
        variance=variance,
        redundancy={e: 1 - variance[e] * weight[e] for e in seen},
        inseparable={e: [f for f in checked if f != e and left(e, f) ** 2 == left(e, e) * left(f, f)] for e in checked},
        functional=lambda row: (
            dot([row[c] for c in pivots], z),
            covariance([row[c] for c in pivots], [row[c] for c in pivots]),
        ),
    )
