"""Chains: whole-number combinations of cells."""

import copy
import pickle

import numpy as np
import pytest

from dec.calculus.chain import Chain
from dec.calculus.complex import Complex
from dec.errors import InputError, TopologyError

K = Complex.from_faces([[0, 1, 2], [2, 1, 3]])
OTHER = Complex.from_faces([[0, 1, 2], [2, 1, 3]])
FACES = K.region([0, 1])
EDGES = K.chain(1, [1, -2, 3, 0, 5])


def test_chains_add_subtract_and_multiply_cell_by_cell():
    two = K.chain(1, [1, 1, 1, 1, 1])
    assert (EDGES + two).coefficients.tolist() == [2, -1, 4, 1, 6]
    assert (EDGES - two).coefficients.tolist() == [0, -3, 2, -1, 4]
    assert (-EDGES).coefficients.tolist() == [-1, 2, -3, 0, -5]
    assert (3 * EDGES).coefficients.tolist() == (EDGES * np.int64(3)).coefficients.tolist() == [3, -6, 9, 0, 15]
    assert (np.int64(3) * EDGES).coefficients.tolist() == [3, -6, 9, 0, 15]


def test_the_boundary_of_two_coherent_triangles_leaves_their_common_edge_out():
    # edges 01, 02, 12, 13, 23; the second face walks 2 -> 1 -> 3 -> 2
    assert FACES.boundary().coefficients.tolist() == [1, -1, 0, 1, -1]
    assert FACES.boundary().is_closed
    assert not FACES.is_closed
    assert FACES.boundary().boundary().coefficients.tolist() == [0, 0, 0, 0]


def test_a_chain_of_vertices_is_closed_and_has_no_boundary():
    points = K.chain(0, [1, 0, 0, -1])
    assert points.is_closed
    with pytest.raises(TopologyError, match="a chain of vertices has no boundary"):
        points.boundary()


def test_a_chain_keeps_a_read_only_copy_and_cannot_be_changed():
    given = np.array([1, 0])
    c = Chain(K, 2, given)
    given[0] = 7
    assert c.coefficients.tolist() == [1, 0]
    assert not c.coefficients.flags.writeable
    with pytest.raises(AttributeError):
        c.coefficients = given


@pytest.mark.parametrize("again", [pickle.loads(pickle.dumps(EDGES)), copy.deepcopy(EDGES)])
def test_a_chain_survives_pickling(again):
    assert again.coefficients.tolist() == EDGES.coefficients.tolist()
    assert again.degree == 1
    assert again.complex.counts == K.counts
    assert not again.coefficients.flags.writeable


def test_chains_pickled_together_still_share_their_complex():
    one, two = pickle.loads(pickle.dumps((EDGES, FACES)))
    assert (one + two.boundary()).degree == 1


@pytest.mark.parametrize(
    ("combine", "message"),
    [
        (lambda: EDGES + FACES, "chains of different degrees do not add up"),
        (lambda: EDGES - OTHER.chain(1, [1] * 5), "chains of different complexes do not add up"),
        (lambda: EDGES + K.cochain(1, [1] * 5), "a chain combines with chains only, got Cochain"),
        (lambda: EDGES + np.ones(5, int), "a chain combines with chains only, got ndarray"),
        (lambda: EDGES + 0, "a chain combines with chains only, got int"),
        (lambda: EDGES @ EDGES, "a chain pairs with a cochain, got Chain"),
        (lambda: EDGES @ np.ones(5), "a chain pairs with a cochain, got ndarray"),
        (lambda: EDGES @ K.cochain(0, [1] * 4), "degree 0 does not combine with degree 1"),
        (lambda: EDGES @ OTHER.cochain(1, [1] * 5), "these live on different complexes"),
    ],
)
def test_chains_combine_with_nothing_that_lives_elsewhere(combine, message):
    with pytest.raises(TopologyError, match=message):
        combine()


@pytest.mark.parametrize(
    "combine",
    [lambda: np.ones(5, int) + EDGES, lambda: np.ones(5, int) * EDGES, lambda: np.ones(5) @ EDGES, lambda: EDGES * 0.5,
     lambda: EDGES * True, lambda: EDGES * EDGES],
)  # fmt: skip
def test_an_array_or_a_fraction_is_no_factor_of_a_chain(combine):
    with pytest.raises(TypeError):
        combine()


@pytest.mark.parametrize(
    ("make", "message"),
    [
        (lambda: K.chain(1, [1, 2]), r"coefficients must have shape \(5,\) on degree 1, got \(2,\)"),
        (lambda: K.chain(1, np.ones((5, 2), int)), "coefficients must have 1 axis"),
        (lambda: K.chain(1, [0.5] * 5), "coefficients must hold whole numbers, got float64"),
        (lambda: K.chain(3, [1]), "degree must be 0 .. 2 for a complex of dimension 2, got 3"),
        (lambda: K.chain(True, [1] * 5), "degree must be 0 .. 2 for a complex of dimension 2, got True"),
        (lambda: K.chain(2, [2**53, 0]), "coefficients must stay below 2\\*\\*53, got 9007199254740992"),
        (lambda: K.chain(2, [-(2**63), 0]), "coefficients must stay below 2\\*\\*53, got 9223372036854775808"),
        (lambda: K.chain(2, [2**52, 0]) * 2, "coefficients must stay below 2\\*\\*53, got 9007199254740992"),
        (lambda: K.chain(2, [2**53 - 1, 0]) + K.region([0]), "coefficients must stay below 2\\*\\*53"),
    ],
)
def test_coefficients_that_are_not_small_whole_numbers_are_refused(make, message):
    with pytest.raises(InputError, match=message):
        make()


def test_the_zero_chain_takes_any_factor():
    assert not (K.chain(2, [0, 0]) * 10**40).coefficients.any()


def test_a_boundary_that_could_leave_64_bits_is_refused():
    big = Complex.from_edges(np.zeros(9, np.int64), np.ones(9, np.int64)).chain(1, [2**52] * 9)
    with pytest.raises(InputError, match=r"coefficients add up to 4.05e\+16 in size, too large"):
        big.boundary()


def test_the_boundary_of_large_coefficients_is_exact():
    c = K.chain(2, [2**53 - 1, 2**53 - 2])
    assert c.boundary().coefficients.tolist() == [2**53 - 1, 1 - 2**53, 1, 2**53 - 2, 2 - 2**53]


def test_a_chain_shows_its_degree_and_size():
    assert repr(EDGES) == "<Chain of degree 1: 4 of 5 cells>"
