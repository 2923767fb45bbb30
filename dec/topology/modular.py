"""Elimination modulo primes, and with it exact solutions and determinants of dense whole-number matrices."""

from math import isqrt

import numpy as np

from dec.arrays import FloatArray, IntArray, ObjectArray
from dec.topology.compiled import compiled

__all__ = ["LARGEST_PRIME", "determinant_over", "has_whole_inverse", "invertible_part", "prime_below", "solve"]

# sums of so many products of two remainders, and their quotients by the prime, are exact in float64
LARGEST_PRIME = 2**22
_WIDTH = 64
_EXACT = 2**53


def prime_below(limit: int) -> int:
    """The largest prime below a limit above 2.

    Examples
    --------
    >>> prime_below(90)
    89
    """
    return next(n for n in range(limit - 1, 1, -1) if all(n % d for d in range(2, isqrt(n) + 1)))


def invertible_part(matrix: IntArray, prime: int) -> tuple[IntArray, IntArray]:
    """Rows and columns of a largest square part that has an inverse modulo a prime.

    Parameters
    ----------
    matrix : int64 array, shape (m, n)
    prime : int
        Below `LARGEST_PRIME`.

    Returns
    -------
    rows, columns : int64 arrays, shape (r,)
        Their number is the rank modulo the prime, and at most the rank.

    Examples
    --------
    >>> invertible_part(np.array([[0, 0, 2], [0, 3, 1]]), 7)
    (array([1, 0]), array([1, 2]))
    """
    return _reduced(_remainders(matrix, prime), prime, matrix.shape[1])[:2]


def determinant_over(matrix: IntArray, divisor: int) -> int:
    """The determinant of a square matrix, divided by a number that is known to divide it.

    Parameters
    ----------
    matrix : int64 array, shape (n, n)
    divisor : int
        Positive.

    Returns
    -------
    int

    Notes
    -----
    By remainders modulo so many primes that Hadamard's inequality leaves one number. Source: Abbott, Bronstein and
    Mulders, Fast deterministic computation of determinants of dense matrices, ISSAC 1999.

    Examples
    --------
    >>> determinant_over(np.array([[0, 3], [2, 1]]), 3)
    -2
    """
    bound = 2 * (min(_product_of_norms(matrix), _product_of_norms(matrix.T)) // divisor) + 1
    found, modulus, prime = 0, 1, LARGEST_PRIME
    while modulus <= bound:
        prime = prime_below(prime)
        if divisor % prime:
            rows, _, value = _reduced(_remainders(matrix, prime), prime, len(matrix))
            rest = value * _parity(rows) * pow(divisor, -1, prime) if len(rows) == len(matrix) else 0
            found += modulus * ((rest - found) * pow(modulus, -1, prime) % prime)
            modulus *= prime
    return found - modulus if 2 * found > modulus else found


def solve(matrix: IntArray, right: IntArray) -> tuple[ObjectArray, list[int]]:
    """Exact solution of linear equations.

    Parameters
    ----------
    matrix : int64 array, shape (n, n)
        With an inverse; entries so small that n times the largest stays below 2**40.
    right : int64 array, shape (n, m)

    Returns
    -------
    numerators : object array of int, shape (n, m)
    denominators : list of int, length m
        Positive and least for each column: ``matrix @ numerators == right * denominators``. Each divides the
        determinant.

    Notes
    -----
    Digits to the base of a prime until Hadamard's inequality leaves one fraction. Source: Dixon, Exact solution of
    linear equations using p-adic expansions, Numer. Math. 40 (1982).

    Examples
    --------
    >>> solve(np.array([[2, 1], [0, 3]]), np.array([[1], [1]]))
    (array([[1],
           [1]], dtype=object), [3])
    """
    prime, inverse = _inverse_modulo_a_prime(matrix)
    largest = min(_product_of_norms(matrix), _product_of_norms(matrix.T))
    above = _product_of_norms(matrix.T) * (isqrt(max(int(s) for s in _squares(right.T))) + 1)
    digits = (2 * largest * above).bit_length() // (prime.bit_length() - 1) + 1
    number = _joined(_digits(matrix, inverse, right, prime, digits), prime)
    columns, denominators = [], []
    for column in number.T:
        numerators, denominator = _fractions(column, prime**digits, above)
        columns.append(numerators)
        denominators.append(denominator)
    return np.array(columns, dtype=object).reshape(right.shape[::-1]).T, denominators


def has_whole_inverse(matrix: IntArray, times: int, n_digits: int) -> bool:
    """Whether so many times the inverse of a matrix is seen to have whole-number entries.

    Parameters
    ----------
    matrix : int64 array, shape (n, n)
        As for `solve`.
    times : int
        Below 2**40; every invariant factor divides it if the answer is yes.
    n_digits : int
        How long to look.

    Returns
    -------
    bool
        False also where it takes more digits.

    Notes
    -----
    The digits of whole numbers, taken from -prime / 2 to prime / 2, come to an end, and with them the residual.

    Examples
    --------
    >>> matrix = np.array([[2, 1], [0, 3]])
    >>> has_whole_inverse(matrix, 6, 9), has_whole_inverse(matrix, 3, 9)
    (True, False)
    """
    prime, inverse = _inverse_modulo_a_prime(matrix)
    by = _as_float(matrix, prime)
    rest = times * np.eye(len(matrix), dtype=np.int64)
    largest = times * min(_product_of_norms(matrix), _product_of_norms(matrix.T))
    for _ in range(min(n_digits, largest.bit_length() // (prime.bit_length() - 1) + 2)):
        digit = np.rint(inverse @ (rest % prime).astype(np.float64)) % prime
        digit[digit > prime // 2] -= prime
        rest = (rest - (by @ digit.astype(by.dtype)).astype(np.int64)) // prime
        if not rest.any():
            return True
    return False


def _inverse_modulo_a_prime(matrix: IntArray) -> tuple[int, FloatArray]:
    n = len(matrix)
    prime = min(2**21, isqrt(_EXACT // n))
    while True:
        prime = prime_below(prime)
        work = np.concatenate([_remainders(matrix, prime), np.eye(n)], axis=1)
        if len(_reduced(work, prime, n, everywhere=True)[0]) == n:
            return prime, np.ascontiguousarray(work[:, n:])


def _as_float(matrix: IntArray, prime: int) -> FloatArray | IntArray:
    """Return the matrix as float64 where its products with remainders are exact so."""
    small = len(matrix) * int(np.abs(matrix).max()) * prime < _EXACT
    return matrix.astype(np.float64) if small else matrix


def _digits(matrix: IntArray, inverse: FloatArray, right: IntArray, prime: int, count: int) -> list[IntArray]:
    by = _as_float(matrix, prime)
    rest = right.astype(np.int64)
    found = []
    for _ in range(count):
        digit = np.rint(inverse @ (rest % prime).astype(np.float64)) % prime
        found.append(digit.astype(np.int64))
        rest = (rest - (by @ digit.astype(by.dtype)).astype(np.int64)) // prime
    return found


def _joined(digits: list[IntArray], prime: int) -> ObjectArray:
    parts = [digit.astype(object) for digit in digits]
    base = prime
    while len(parts) > 1:
        pairs = [low + base * high for low, high in zip(parts[::2], parts[1::2], strict=False)]
        parts = pairs + parts[2 * len(pairs) :]
        base *= base
    return parts[0]


def _fractions(numbers: ObjectArray, modulus: int, largest: int) -> tuple[list[int], int]:
    """Return numerators and the common denominator of the fractions that these remainders stand for."""
    denominator = 1
    for number in numbers:
        rest = number * denominator % modulus
        if min(rest, modulus - rest) > largest:
            before, after, factor_before, factor = modulus, rest, 0, 1
            while after > largest:  # Wang, Guy and Davenport, SIGSAM Bulletin 16 (1982)
                times = before // after
                before, after = after, before - times * after
                factor_before, factor = factor, factor_before - times * factor
            denominator *= abs(factor)
    rests = [number * denominator % modulus for number in numbers]
    return [rest - modulus if 2 * rest > modulus else rest for rest in rests], denominator


def _reduced(
    work: FloatArray, prime: int, n_columns: int, *, everywhere: bool = False
) -> tuple[IntArray, IntArray, int]:
    """Eliminate in place, block by block; return rows and columns of the pivots and the determinant of that part.

    The columns that can have a pivot are the first ones. Rows of pivots come first afterwards, and with `everywhere`
    the other columns hold what the inverse of the pivots' part makes of them.
    """
    order = np.arange(len(work))
    columns = []
    determinant, r = 1, 0
    for first in range(0, n_columns, _WIDTH):
        last = min(first + _WIDTH, n_columns)
        chosen, found, _ = _eliminate(work[r:, first:last].copy(), np.array([prime, last - first, 0]))
        k = len(chosen)
        _bring_forward(work, order, r, r + chosen)
        pivots = np.concatenate([work[r : r + k, first + found], np.eye(k)], axis=1)
        value = _eliminate(pivots, np.array([prime, k, 1]))[2]
        determinant = determinant * int(value[0]) % prime
        work[r : r + k, first:] = _modulo(pivots[:, k:] @ work[r : r + k, first:], prime)
        for rows in (slice(0, r if everywhere else 0), slice(r + k, None)):
            made = work[rows, first + found] @ work[r : r + k, first:]
            work[rows, first:] = _modulo(np.subtract(work[rows, first:], made, out=made), prime)
        columns.append(first + found)
        r += k
    return order[:r], np.concatenate(columns), determinant


def _bring_forward(work: FloatArray, order: IntArray, place: int, chosen: IntArray) -> None:
    """Exchange rows so that the chosen ones stand at a place and after it."""
    moved = np.union1d(chosen, np.arange(place, place + len(chosen)))
    into = np.concatenate([chosen, np.setdiff1d(moved, chosen)])
    work[moved], order[moved] = work[into], order[into]


def _modulo(values: FloatArray, prime: int) -> FloatArray:
    values -= prime * np.floor(values / prime)
    return values


def _parity(order: IntArray) -> int:
    """Return +1 or -1 as an even or odd number of exchanges makes the order."""
    seen = np.zeros(len(order), dtype=bool)
    sign = 1
    for start in range(len(order)):
        at = start
        while not seen[at]:
            seen[at] = True
            at = int(order[at])
            sign = -sign if at != start else sign
    return sign


def _product_of_norms(matrix: IntArray) -> int:
    """Return a number at least the product of the lengths of the rows, each taken as 1 or more."""
    product = 1
    for square in _squares(matrix):
        product *= max(int(square), 1)
    return isqrt(product) + 1


def _squares(matrix: IntArray) -> list[int]:
    return [int(s) for s in (matrix.astype(np.float64) ** 2).sum(axis=1) * (1 + 1e-9) + 1]


def _remainders(matrix: IntArray, prime: int) -> FloatArray:
    return (matrix % prime).astype(np.float64)


@compiled
def _eliminate(work: FloatArray, sizes: IntArray) -> tuple[IntArray, IntArray, FloatArray]:
    # sizes: the prime, how many columns can have a pivot, whether rows above a pivot are cleared too; of one block
    prime, n_columns, everywhere = sizes[0], sizes[1], sizes[2] == 1
    p = np.float64(prime)
    m = len(work)
    order = np.arange(m)
    columns = np.empty(min(m, n_columns), np.int64)
    determinant = np.ones(1)
    r = 0
    for j in range(n_columns):
        i = r
        while i < m and work[i, j] == 0.0:
            i += 1
        if i == m:
            continue
        if i > r:
            row = work[i].copy()
            work[i] = work[r]
            work[r] = row
            order[i], order[r] = order[r], order[i]
            determinant[0] = p - determinant[0]
        pivot = work[r, j]
        determinant[0] = determinant[0] * pivot % p
        scaled = work[r, j:] * _inverse(int(pivot), prime)
        scaled -= p * np.floor(scaled / p)
        if everywhere:
            work[r, j:] = scaled
        for i in range(0 if everywhere else r + 1, m):
            factor = work[i, j]
            if factor != 0.0 and i != r:
                row = work[i, j:] - factor * scaled
                work[i, j:] = row - p * np.floor(row / p)
        columns[r] = j
        r += 1
        if r == m:
            break
    return order[:r].copy(), columns[:r].copy(), determinant


@compiled
def _inverse(number: int, prime: int) -> int:
    before, after = prime, number
    factor_before, factor = 0, 1
    while after > 1:
        times = before // after
        before, after = after, before - times * after
        factor_before, factor = factor, factor_before - times * factor
    return factor % prime
