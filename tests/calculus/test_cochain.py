"""Cochains: numbers on cells, exact where they can be."""

import copy
import pickle
from fractions import Fraction

import numpy as np
import pytest

from dec.calculus.complex import Complex
from dec.errors import InputError, TopologyError

K = Complex.from_faces([[0, 1, 2], [2, 1, 3]])
OTHER = Complex.from_faces([[0, 1, 2], [2, 1, 3]])
W = K.cochain(1, [1, 2, 3, 4, 5])
THIRDS = K.cochain(1, [Fraction(k, 3) for k in range(5)])
BIG = 2**63 - 1


@pytest.mark.parametrize(
    ("values", "dtype"),
    [
        ([1, 2, 3, 4], np.int64),
        (np.array([1, 2, 3, 4], np.uint8), np.int64),
        (np.array([1, 2, 3, 4], ">i4"), np.int64),
        (np.array([1, 2, 3, 4], np.float32), np.float64),
        (np.array([1, 2, 3, 4], ">f8"), np.float64),
        ([1, 2.5, 3, 4], np.float64),
        ([1, Fraction(1, 3), 3, 4], object),
        ([1, 2, 3, 2**70], object),
        ([-1, 2, 3, 2**63], object),
        (np.array([1, 2, 3, 2**63], np.uint64), object),
        (np.array([1, 2, 3, 4], object), object),
    ],
)
def test_values_become_float64_int64_or_stay_exact_and_keep_their_value(values, dtype):
    w = K.cochain(0, values)
    assert w.values.dtype == dtype
    assert w.is_exact == (dtype is not np.float64)
    assert [Fraction(v) for v in w.values.tolist()] == [Fraction(v) for v in np.asarray(values, object).tolist()]


def test_integers_just_outside_int64_in_a_list_are_not_rounded_to_floats():
    # NumPy makes float64 of [-1, 2**63]; the value must not become 2**63 rounded
    w = K.cochain(0, [-1, 2**63 + 1, 0, 0])
    assert w.values.tolist() == [-1, 2**63 + 1, 0, 0]
    assert w.d().values.tolist()[0] == 2**63 + 2


def test_values_are_a_read_only_copy_and_a_cochain_cannot_be_changed():
    given = np.array([1.0, 2.0, 3.0, 4.0])
    w = K.cochain(0, given)
    given[0] = 9.0
    assert w.values[0] == 1.0
    assert not w.values.flags.writeable
    for name in ("values", "degree", "complex", "anything"):
        with pytest.raises(AttributeError):
            setattr(w, name, None)


@pytest.mark.parametrize("w", [W, THIRDS, K.cochain(0, np.eye(4)), K.cochain(2, [2**80, -1])])
@pytest.mark.parametrize("way", [lambda w: pickle.loads(pickle.dumps(w)), copy.deepcopy])
def test_a_cochain_survives_pickling(w, way):
    again = way(w)
    assert again.values.tolist() == w.values.tolist()
    assert again.values.dtype == w.values.dtype
    assert (again.degree, again.complex.counts) == (w.degree, K.counts)
    assert not again.values.flags.writeable


def test_cochains_pickled_together_still_combine():
    one, two = pickle.loads(pickle.dumps((W, W)))
    assert (one + two).values.tolist() == [2, 4, 6, 8, 10]


@pytest.mark.parametrize(
    ("combine", "message"),
    [
        (lambda: W + K.cochain(0, [1] * 4), "degree 1 does not combine with degree 0"),
        (lambda: W - OTHER.cochain(1, [1] * 5), "these live on different complexes"),
        (lambda: W + K.chain(1, [1] * 5), "a cochain combines with cochains only, got Chain"),
        (lambda: W + np.ones(5), "a cochain combines with cochains only, got ndarray"),
        (lambda: W + 1, "a cochain combines with cochains only, got int"),
        (lambda: W + K.cochain(1, np.ones((5, 1))), r"cochains of shape \(5,\) and \(5, 1\) do not combine"),
        (lambda: W.over(W), "a cochain is summed over a chain, got Cochain"),
        (lambda: W.over(K.chain(0, [1] * 4)), "degree 1 does not combine with degree 0"),
        (lambda: W.over(OTHER.chain(1, [1] * 5)), "these live on different complexes"),
        (lambda: K.cochain(2, [1, 2]).d(), "there are no cells of degree 3"),
    ],
)
def test_cochains_combine_with_nothing_that_lives_elsewhere(combine, message):
    with pytest.raises(TopologyError, match=message):
        combine()


@pytest.mark.parametrize(
    "combine",
    [lambda: np.ones(5) + W, lambda: np.ones(5) * W, lambda: np.ones(5) - W, lambda: W * W, lambda: W * True,
     lambda: W @ W, lambda: W * np.ones(5), lambda: W * "2", lambda: W * 1j],
)  # fmt: skip
def test_an_array_never_broadcasts_over_a_cochain(combine):
    with pytest.raises(TypeError):
        combine()


@pytest.mark.parametrize(
    ("degree", "values", "message"),
    [
        (0, [1, 2, 3], r"values must have shape \(4,\) or \(4, m\) on degree 0, got \(3,\)"),
        (0, 5, r"values must have shape \(4,\) or \(4, m\) on degree 0, got \(\)"),
        (0, np.zeros((4, 2, 2)), r"on degree 0, got \(4, 2, 2\)"),
        (3, [1], "degree must be 0 .. 2 for a complex of dimension 2, got 3"),
        (True, [1] * 5, "degree must be 0 .. 2 for a complex of dimension 2, got True"),
        (0, ["1", "2", "3", "4"], "values must hold real numbers, got text"),
        (0, [1j, 2, 3, 4], "values must hold real numbers, got complex128"),
        (0, [True, False, True, True], "values must hold real numbers, got bool"),
        (0, [None, 1, 2, 3], "values must hold int or Fraction objects, got NoneType None at 0"),
        (0, [Fraction(1, 2), 0.5, 1, 2], "values must hold int or Fraction objects, got float 0.5 at 1"),
        (0, [Fraction(1, 2), True, 1, 2], "values must hold int or Fraction objects, got bool True at 1"),
        (0, [[1, 2], [3]], "values must be a rectangular array of numbers"),
        (0, np.ones(4, np.longdouble), "wider than float64; give them as Fraction objects"),
        (0, np.ma.array([1.0, 2.0, 3.0, 4.0], mask=[0, 1, 0, 0]), "values must be a plain array, got a masked one"),
    ],
)
def test_values_that_are_no_numbers_on_these_cells_are_refused(degree, values, message):
    with pytest.raises(InputError, match=message):
        K.cochain(degree, values)


def test_arithmetic_of_integers_and_fractions_is_exact():
    assert (W + THIRDS).values.tolist() == [1 + k * Fraction(4, 3) for k in range(5)]
    assert (W * Fraction(1, 7)).values.tolist() == [Fraction(k, 7) for k in range(1, 6)]
    assert (3 * THIRDS).values.tolist() == [0, 1, 2, 3, 4]
    assert (-THIRDS).values.tolist() == [Fraction(-k, 3) for k in range(5)]
    assert (W - W).values.tolist() == [0] * 5
    assert (W * 10**30).values.tolist() == [k * 10**30 for k in range(1, 6)]


def test_a_float_makes_floats_of_exact_values():
    assert (W * 0.5).values.tolist() == [0.5, 1.0, 1.5, 2.0, 2.5]
    assert (THIRDS + K.cochain(1, [0.0] * 5)).values.tolist() == [k / 3 for k in range(5)]
    assert (np.float64(2) * W).values.dtype == np.float64
    with pytest.raises(InputError, match="beyond the range of float64"):
        _ = K.cochain(2, [10**400, 1]) * 0.5


@pytest.mark.parametrize(
    ("combine", "expected"),
    [
        (lambda w: w + w, [2 * BIG, -2 * BIG - 2]),
        (lambda w: w - (-w), [2 * BIG, -2 * BIG - 2]),
        (lambda w: -w, [-BIG, BIG + 1]),
        (lambda w: w * 3, [3 * BIG, -3 * BIG - 3]),
        (lambda w: w * -1, [-BIG, BIG + 1]),
        (lambda w: w * 1, [BIG, -BIG - 1]),
    ],
)
def test_integers_near_the_end_of_int64_go_over_to_python_integers(combine, expected):
    w = K.cochain(2, [BIG, -BIG - 1])
    assert w.values.dtype == np.int64
    assert combine(w).values.tolist() == expected


def test_the_derivative_of_integers_near_the_end_of_int64_is_exact():
    assert K.cochain(0, [BIG, -BIG - 1, 0, 1]).d().values.tolist() == [-2 * BIG - 1, -BIG, BIG + 1, BIG + 2, 1]
    assert K.cochain(1, [BIG] * 5).d().values.tolist() == [BIG, -BIG]
    small = K.cochain(1, [2**60] * 5)
    assert small.d().values.dtype == np.int64


def test_the_derivative_of_fractions_stays_exact_in_every_column():
    third = Fraction(1, 3)
    w = K.cochain(0, [[0, 1], [third, 2], [1, 3], [2, 5 * third]])
    assert w.d().values.tolist() == [[third, 1], [1, 2], [2 * third, 1], [2 - third, -third], [1, 5 * third - 3]]
    assert not w.d().d().values.any()


def test_columns_are_so_many_plain_cochains():
    w = K.cochain(1, np.arange(15).reshape(5, 3))
    assert w.n_columns == 3
    assert K.cochain(1, [1] * 5).n_columns is None
    for j in range(3):
        assert w.column(j).values.tolist() == w.values[:, j].tolist()
        assert w.d().values[:, j].tolist() == w.column(j).d().values.tolist()
        assert (K.region([0]).boundary() @ w)[j] == K.region([0]).boundary() @ w.column(j)


@pytest.mark.parametrize(
    ("index", "message"), [(3, "column must be 0 .. 2, got 3"), (-1, "column must be 0 .. 2, got -1")]
)
def test_a_column_that_is_not_there_is_refused(index, message):
    with pytest.raises(InputError, match=message):
        K.cochain(1, np.zeros((5, 3))).column(index)
    with pytest.raises(InputError, match="no columns"):
        W.column(0)


def test_the_sum_over_a_chain_has_the_kind_of_the_values():
    c = K.chain(1, [1, -1, 0, 2, 0])
    assert c @ W == 1 - 2 + 8
    assert isinstance(c @ W, int)
    assert c @ THIRDS == Fraction(-1, 3) + 2
    assert isinstance(c @ THIRDS, Fraction)
    assert isinstance(c @ (W * 0.1), float)
    assert (c @ K.cochain(1, [[1, 2]] * 5)).tolist() == [2, 4]
    assert (K.chain(1, [2] * 5) @ K.cochain(1, [BIG] * 5)) == 10 * BIG


def test_the_sum_over_nothing_is_zero_of_every_kind():
    nothing = K.chain(1, [0] * 5)
    assert nothing @ W == nothing @ THIRDS == nothing @ (W * 0.5) == 0
    assert (nothing @ K.cochain(1, [[1, 2]] * 5)).tolist() == [0, 0]
    assert (nothing @ K.cochain(1, [[0.5, 2]] * 5)).tolist() == [0, 0]
    assert (nothing @ K.cochain(1, [[Fraction(1, 2), 2]] * 5)).tolist() == [0, 0]


def test_nan_counts_only_where_the_chain_and_the_derivative_reach_it():
    w = K.cochain(1, [1.0, 2.0, 3.0, 4.0, np.nan])
    assert K.chain(1, [1, 1, 0, 0, 0]) @ w == 3.0
    assert np.isnan(w.d().values).tolist() == [False, True]


def test_a_cochain_shows_its_degree_size_and_kind():
    assert repr(W) == "<Cochain of degree 1: 5 values, int64>"
    assert repr(THIRDS) == "<Cochain of degree 1: 5 values, exact>"
    assert repr(K.cochain(0, np.zeros((4, 2)))) == "<Cochain of degree 0: 4 values, 2 columns, float64>"
