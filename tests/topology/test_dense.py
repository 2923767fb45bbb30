"""Dense matrices by way of primes: ranks, factors, solutions and determinants, against slow exact arithmetic."""

from fractions import Fraction

import numpy as np
import pytest

from dec.topology import dense, modular
from dec.topology.dense import divisors
from dec.topology.modular import determinant_over, invertible_part, prime_below, solve
from dec.topology.smith import invariant_factors

from .slow_smith import smith as slow_smith


def matrices(seed):
    random = np.random.default_rng(seed)
    m, n = random.integers(1, 13, 2)
    yield random.integers(-6, 7, (m, n))
    yield random.integers(-6, 7, (m, n)) * (random.random((m, n)) < 0.4)
    few = int(random.integers(1, 7))
    orders = np.diag(random.choice([1, 1, 2, 3, 4, 6, 30], few))
    yield random.integers(-3, 4, (m, few)) @ orders @ random.integers(-3, 4, (few, n))


def slow_determinant(matrix):
    rows = [[Fraction(int(v)) for v in row] for row in matrix]
    result = Fraction(1)
    for k in range(len(rows)):
        pivot = next((i for i in range(k, len(rows)) if rows[i][k]), None)
        if pivot is None:
            return 0
        if pivot != k:
            rows[k], rows[pivot], result = rows[pivot], rows[k], -result
        result *= rows[k][k]
        for i in range(k + 1, len(rows)):
            factor = rows[i][k] / rows[k][k]
            rows[i] = [a - factor * b for a, b in zip(rows[i], rows[k], strict=True)]
    return int(result)


@pytest.mark.parametrize("by_minors", [False, True])
@pytest.mark.parametrize("seed", range(80))
def test_rank_and_factors_are_those_of_the_smith_form(seed, by_minors, monkeypatch):
    if by_minors:
        monkeypatch.setattr(dense, "has_whole_inverse", lambda *_: False)
    for matrix in matrices(seed):
        rank, orders = divisors(matrix)
        factors = slow_smith(matrix)
        assert rank == len(factors)
        assert invariant_factors(orders) == tuple(d for d in factors if d > 1)


def test_a_prime_that_hides_part_of_the_rank_or_all_of_it_is_found_out():
    prime = prime_below(modular.LARGEST_PRIME)
    assert divisors(np.array([[1, 0], [0, prime]])) == (2, [prime])
    assert divisors(np.array([[1, 1, 1], [1, 1 + prime, 1], [1, 1, 1]])) == (2, [prime])
    assert divisors(np.array([[prime]])) == (1, [prime])


def test_factors_beyond_64_bits_are_found():
    random = np.random.default_rng(3)
    matrix = random.integers(-(2**20), 2**20, (8, 8))
    rank, orders = divisors(matrix)
    assert rank == 8
    assert int(np.prod(np.array(orders, dtype=object))) == abs(slow_determinant(matrix)) > 2**100
    assert invariant_factors(orders) == tuple(d for d in slow_smith(matrix) if d > 1)


def test_a_common_factor_of_every_entry_is_found_where_no_neighbour_of_the_minor_has_less():
    matrix = 6 * np.random.default_rng(1).integers(-4, 5, (20, 9))
    assert invariant_factors(divisors(matrix)[1]) == tuple(d for d in slow_smith(matrix) if d > 1)
    assert len(divisors(matrix)[1]) == 9


@pytest.mark.parametrize("seed", range(20))
def test_solutions_are_exact_in_lowest_terms_and_divide_the_determinant(seed):
    random = np.random.default_rng(seed)
    n = int(random.integers(1, 15))
    matrix = random.integers(-9, 10, (n, n))
    if not slow_determinant(matrix):
        matrix += 20 * np.eye(n, dtype=int)
    right = random.integers(-99, 100, (n, 3))
    numerators, denominators = solve(matrix, right)
    assert (matrix.astype(object) @ numerators == right * np.array(denominators, dtype=object)).all()
    for column, denominator in zip(numerators.T, denominators, strict=True):
        assert np.gcd.reduce([*column, denominator]) == 1
        assert denominator > 0
        assert slow_determinant(matrix) % denominator == 0


@pytest.mark.parametrize("seed", range(20))
def test_determinants_are_exact_with_their_sign(seed):
    random = np.random.default_rng(seed)
    n = int(random.integers(1, 12))
    matrix = random.integers(-50, 51, (n, n))
    exact = slow_determinant(matrix)
    assert determinant_over(matrix, 1) == exact
    denominator = solve(matrix, random.integers(-9, 10, (n, 1)))[1][0]
    assert determinant_over(matrix, denominator) * denominator == exact
    assert determinant_over(np.concatenate([matrix, matrix[:1]])[1:] * 0 + 1, 1) == (1 if n == 1 else 0)


def test_the_invertible_part_is_as_large_as_the_rank_modulo_the_prime():
    matrix = np.array([[5, 0, 1], [0, 5, 2], [5, 5, 3]])
    assert len(invertible_part(matrix, 7)[0]) == 2
    assert len(invertible_part(matrix, 5)[0]) == 1


def test_without_any_matrix_beside_the_minor_the_determinant_itself_decides(monkeypatch):
    asked = []
    real = dense.determinant_over
    monkeypatch.setattr(dense, "has_whole_inverse", lambda *_: False)
    monkeypatch.setattr(dense, "determinant_over", lambda part, divisor: asked.append(divisor) or real(part, divisor))
    assert divisors(np.array([[2, 0], [0, 6]])) == (2, [2, 6])
    assert len(asked) == 1
    assert asked[0] in (2, 3, 6)
