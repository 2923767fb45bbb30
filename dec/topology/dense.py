"""Invariant factors of dense whole-number matrices: found by way of primes, with a proof for every step."""

from math import gcd, isqrt, lcm

import numpy as np

from dec.arrays import AnyArray, IntArray
from dec.topology.modular import LARGEST_PRIME, determinant_over, has_whole_inverse, invertible_part, prime_below, solve

__all__ = ["LARGEST_ROW", "divisors"]

LARGEST_ROW = 2**40

_EXTRA = 4  # combinations of rows and columns outside a minor that are taken to find other minors
_SMALL = 2**31  # products of two remainders fit int64
_SMALL_PRIMES = 1000
_PRODUCTS = 400_000_000_000  # that are spent on the digits of an inverse


def divisors(matrix: IntArray) -> tuple[int, list[int]]:
    """The rank, and numbers above 1 whose cyclic groups add up to the torsion of the columns' quotient.

    Parameters
    ----------
    matrix : int64 array, shape (m, n)
        The largest entry, times the larger of m and n, stays below `LARGEST_ROW`.

    Returns
    -------
    rank : int
    orders : list of int

    Notes
    -----
    A part of the matrix that has an inverse modulo a prime has one over the fractions; the rank is no larger if the
    other columns are combinations of the part's own, which is solved and tested exactly. A number that all invariant
    factors divide decides them: one that makes the inverse of the part whole, or else the greatest common divisor of
    the part's determinant and those of neighbours that differ by one row or column. It mostly is 1, after primes that
    do not lower the rank are taken out. Source: Domich, Kannan and Trotter, Hermite normal form computation using
    modulo determinant arithmetic, Math. Oper. Res. 12 (1987), the idea.

    Examples
    --------
    >>> divisors(np.array([[2, 0, 2], [0, 6, 6]]))
    (2, [2, 6])
    """
    if not matrix.any():
        return 0, []
    prime = LARGEST_PRIME
    while True:
        prime = prime_below(prime)
        rows, columns = invertible_part(matrix, prime)
        if len(rows) and _is_whole_rank(matrix, rows, columns):
            modulus = _modulus(matrix, rows, columns)
            return len(rows), _modulo(matrix, modulus, len(rows)) if modulus > 1 else []


def _is_whole_rank(matrix: IntArray, rows: IntArray, columns: IntArray) -> bool:
    other_rows, other_columns = _others(matrix, rows, columns)
    if not len(other_rows) or not len(other_columns):
        return True
    if len(other_rows) < len(other_columns):
        matrix, rows, columns, other_rows, other_columns = matrix.T, columns, rows, other_columns, other_rows
    numerators, denominators = solve(matrix[np.ix_(rows, columns)], matrix[np.ix_(rows, other_columns)])
    made = matrix[np.ix_(other_rows, columns)].astype(object) @ numerators
    return bool((made == matrix[np.ix_(other_rows, other_columns)].astype(object) * denominators).all())


def _modulus(matrix: IntArray, rows: IntArray, columns: IntArray) -> int:
    """Return a number that every invariant factor divides."""
    part = matrix[np.ix_(rows, columns)]
    n = len(part)
    right = np.random.default_rng(0).integers(-9, 10, (n, _EXTRA))
    found = lcm(*solve(part, right)[1])
    if found < LARGEST_ROW and has_whole_inverse(part, found, _PRODUCTS // n**3 + _EXTRA):
        found = _without_harmless_primes(matrix, found, n)
        if found < _SMALL:
            return found
    else:
        found = 0
    return _without_harmless_primes(matrix, gcd(found, _common_minor(matrix, rows, columns)), n)


def _without_harmless_primes(matrix: IntArray, number: int, rank: int) -> int:
    for prime in (n for n in range(2, _SMALL_PRIMES) if all(n % d for d in range(2, isqrt(n) + 1))):
        if number % prime == 0 and len(invertible_part(matrix, prime)[0]) == rank:
            while number % prime == 0:
                number //= prime
    return number


def _common_minor(matrix: IntArray, rows: IntArray, columns: IntArray) -> int:
    """Return the greatest common divisor of some largest minors that are not all zero."""
    part = matrix[np.ix_(rows, columns)]
    other_rows, other_columns = _others(matrix, rows, columns)
    random = np.random.default_rng(0)
    divisor = 1
    for square, beside in (
        (part.T, matrix[np.ix_(other_rows, columns)].T),
        (part, matrix[np.ix_(rows, other_columns)]),
    ):
        if beside.shape[1]:
            mixed = beside if beside.shape[1] <= _EXTRA else beside @ random.integers(-1, 2, (beside.shape[1], _EXTRA))
            divisor = lcm(divisor, *solve(square, mixed)[1])
    if divisor > 1 or len(other_rows) or len(other_columns):
        return abs(determinant_over(part, divisor))
    divisor = solve(part, random.integers(-9, 10, (len(part), 1)))[1][0]
    return abs(determinant_over(part, divisor)) * divisor


def _others(matrix: IntArray, rows: IntArray, columns: IntArray) -> tuple[IntArray, IntArray]:
    m, n = matrix.shape
    return np.setdiff1d(np.arange(m), rows), np.setdiff1d(np.arange(n), columns)


def _modulo(matrix: IntArray, modulus: int, rank: int) -> list[int]:
    """Return the orders above 1, from elimination modulo a number that all of them divide."""
    work: AnyArray = matrix % modulus if modulus < _SMALL else matrix.astype(object) % modulus
    orders: list[int] = []
    while work.any() and len(orders) < rank:
        sizes = np.gcd(work, modulus)
        i, j = np.unravel_index(int(np.argmin(sizes)), work.shape)
        order = int(sizes[i, j])
        work[i] = work[i] * _unit(int(work[i, j]), order, modulus) % modulus
        times = work[:, j] // order
        times[i] = 0
        work = (work - np.multiply.outer(times, work[i])) % modulus
        if work[:, j].astype(bool).sum() > 1:  # remainders smaller than the pivot
            continue
        work = work.T.copy()
        times = work[:, i] // order
        times[j] = 0
        work = ((work - np.multiply.outer(times, work[j])) % modulus).T.copy()
        if work[i].astype(bool).sum() > 1:
            continue
        work = np.delete(np.delete(work, i, axis=0), j, axis=1)
        orders.append(order)
    return [order for order in orders + [modulus] * (rank - len(orders)) if order > 1]


def _unit(number: int, order: int, modulus: int) -> int:
    """Return a number without a common divisor with the modulus that makes another one its divisor `order`."""
    part = modulus // order
    unit = pow(number // order, -1, part) if part > 1 else 1
    while gcd(unit, modulus) > 1:
        unit += part
    return unit
