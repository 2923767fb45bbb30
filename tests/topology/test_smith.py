"""Elimination of small complexes over the integers, against dense Smith normal forms."""

import numpy as np
import pytest

from dec.errors import TopologyError
from dec.topology import smith
from dec.topology.smith import invariant_factors, split

from .slow_smith import smith as slow_smith


def columns_of(matrix):
    return {j: {i: int(v) for i, v in enumerate(column) if v} for j, column in enumerate(np.array(matrix).T)}


def matrices(seed):
    random = np.random.default_rng(seed)
    m, n = random.integers(1, 12, 2)
    yield random.integers(-3, 4, (m, 3)) @ random.integers(-2, 3, (3, n))
    yield random.integers(-2, 3, (m, n)) * (random.random((m, n)) < 0.4)
    few = int(random.integers(1, 6))
    orders = np.diag(random.choice([1, 2, 3, 4, 6, 30], few))
    yield random.integers(-3, 4, (m, few)) @ orders @ random.integers(-3, 4, (few, n))


@pytest.mark.parametrize("with_chains", [True, False])
@pytest.mark.parametrize("seed", range(60))
def test_one_matrix_has_the_rank_and_the_factors_of_its_smith_form(seed, with_chains):
    for matrix in matrices(seed):
        m, n = matrix.shape
        found = split([list(range(m)), list(range(n))], [columns_of(matrix)], with_chains=with_chains)
        factors = slow_smith(matrix)
        assert found.ranks == [m - len(factors), n - len(factors)]
        assert invariant_factors(found.divisors[0]) == tuple(d for d in factors if d > 1)


@pytest.mark.parametrize("seed", range(40))
def test_the_chains_left_over_are_closed_and_generate_the_quotient_up_to_its_torsion(seed):
    """Two matrices in a row that multiply to zero: the second one's columns are taken from the kernel of the first."""
    random = np.random.default_rng(seed)
    few = int(random.integers(1, 4))
    first = np.concatenate([np.eye(few, dtype=int), random.integers(-3, 4, (few, 4))], axis=1)
    kernel = np.concatenate([-first[:, few:], np.eye(4, dtype=int)])
    second = kernel @ random.integers(-4, 5, (4, 5)) * int(random.integers(1, 4))
    mixed, back = mixing(random, few + 4)
    first, second = first @ back, mixed @ second
    cells = [list(range(size)) for size in (few, few + 4, 5)]
    found = split(cells, [columns_of(first), columns_of(second)])
    chains = np.array([[chain.get(c, 0) for c in cells[1]] for chain in found.left[1].values()]).reshape(-1, few + 4)
    assert not (first @ chains.T).any()
    before, after = slow_smith(second.T.tolist()), slow_smith([*second.T.tolist(), *chains.tolist()])
    assert len(after) == len(before) + len(chains) == 4
    torsion = invariant_factors(found.divisors[1])
    assert torsion == tuple(d for d in before if d > 1) == tuple(d for d in after if d > 1)


def mixing(random, n):
    """A matrix of determinant 1 and its inverse."""
    one, other = np.eye(n, dtype=int), np.eye(n, dtype=int)
    for _ in range(8):
        i, j = random.permutation(n)[:2]
        step = np.eye(n, dtype=int)
        step[i, j] = random.integers(-2, 3)
        back = 2 * np.eye(n, dtype=int) - step
        one, other = step @ one, other @ back
    return one, other


def test_entries_that_grow_beyond_64_bits_do_not_disturb_the_rank():
    # a Hilbert-like integer matrix: determinant not zero, yet far below rounding
    n = 12
    multiple = int(np.lcm.reduce(np.arange(1, 2 * n, dtype=object)))
    hilbert = [[multiple // (i + j + 1) for j in range(n)] for i in range(n)]
    twice = [*hilbert, [3 * a - 7 * b for a, b in zip(hilbert[2], hilbert[5], strict=True)]]
    columns = {j: dict(enumerate(row)) for j, row in enumerate(twice)}
    found = split([list(range(n)), list(range(n + 1))], [columns])
    assert found.ranks == [0, 1]
    product = int(np.prod(np.array(slow_smith(hilbert), dtype=object)))
    assert int(np.prod(np.array(invariant_factors(found.divisors[0]), dtype=object))) == product


@pytest.mark.parametrize(
    ("orders", "factors"),
    [([], ()), ([1, 1], ()), ([2, 3], (6,)), ([4, 6, 9], (6, 36)), ([2, 2], (2, 2)), ([3, 2**70], (3 * 2**70,))],
)
def test_cyclic_groups_are_put_together_so_that_each_order_divides_the_next(orders, factors):
    assert invariant_factors(orders) == factors


def test_an_elimination_that_takes_too_long_is_refused(monkeypatch):
    monkeypatch.setattr(smith, "_STEPS", 0)
    monkeypatch.setattr(smith, "_STEPS_EACH", 1)
    matrix = np.random.default_rng(0).integers(1, 5, (9, 9))
    with pytest.raises(TopologyError, match=r"cannot be counted .*: 9 equations between 9 cells .*take a part"):
        split([list(range(9))] * 2, [columns_of(matrix)])
