"""Integrals decided exactly, whatever the numbers are, against sums of Fractions."""

from fractions import Fraction

import numpy as np
import pytest

from dec.calculus.complex import Complex
from dec.calculus.exact import check_line_integral, check_stokes, exact_integral
from dec.calculus.sums import Terms, exact_sum
from dec.errors import InputError, TopologyError

LARGEST, LEAST = np.finfo(float).max, 5e-324


def bundle(coefficients, values):
    """Edges from 0 to 1, a chain and a cochain on them."""
    K = Complex.from_edges(np.zeros(len(values), np.int64), np.ones(len(values), np.int64), 2)
    return K.chain(1, coefficients), K.cochain(1, values)


def slowly(coefficients, values):
    return sum(
        (int(c) * Fraction(v) for c, v in zip(coefficients, np.asarray(values).tolist(), strict=True)), Fraction(0)
    )


@pytest.mark.parametrize(
    "values",
    [
        [LEAST, -LEAST, LEAST],
        [LEAST, 1.0, -1.0],
        [2.2250738585072014e-308, -2.225073858507201e-308],  # the least normal less the largest subnormal
        [LARGEST, LARGEST, -LARGEST, LEAST],
        [-0.0, 0.0, -0.0],
        [0.1] * 10,
        [1e16, 1.0, -1e16] * 3,
        [2.0**k for k in range(-1074, 1024)],
        [-(2.0**k) * 1.7 for k in range(-1000, 1000, 7)],
        np.nextafter(np.ones(5), 2),
    ],
)
@pytest.mark.parametrize("factor", [1, -1, 7, 2**31, 2**40 + 1, 2**53 - 1, 1 - 2**53])
def test_sums_of_floats_are_exact_for_coefficients_of_any_size(values, factor):
    coefficients = [factor] * len(values)
    assert exact_integral(*bundle(coefficients, values)) == slowly(coefficients, values)
    coefficients[::2] = [-c // 3 for c in coefficients[::2]]
    assert exact_integral(*bundle(coefficients, values)) == slowly(coefficients, values)


@pytest.mark.parametrize("seed", range(20))
def test_sums_of_any_bit_patterns_are_exact(seed):
    random = np.random.default_rng(seed)
    values = random.integers(-(2**63), 2**63 - 1, 300).view(np.float64)
    values = values[np.isfinite(values)]
    size = int(random.choice([2, 2**20, 2**36, 2**53 - 1]))
    coefficients = random.integers(-size, size, len(values))
    assert exact_integral(*bundle(coefficients, values)) == slowly(coefficients, values)


@pytest.mark.parametrize("weight", [2**35 - 2, 2**35 - 1, 2**35, 2**35 + 1])
def test_the_fast_and_the_careful_way_meet_where_64_bits_could_be_left(weight):
    # all 53 bits set: the largest halves there are
    value = float(2**53 - 1)
    n = 64
    coefficients = [weight // n] * n
    coefficients[0] += weight % n
    assert exact_integral(*bundle(coefficients, [value] * n)) == weight * (2**53 - 1)
    assert exact_integral(*bundle([-c for c in coefficients], [value] * n)) == -weight * (2**53 - 1)


@pytest.mark.parametrize("size", [1, 2**9, 2**31 - 2, 2**31, 2**50])
@pytest.mark.parametrize("largest", [1, 2**31, 2**32 + 1, 2**63 - 1])
def test_sums_of_integers_are_exact_up_to_the_ends_of_int64(size, largest):
    random = np.random.default_rng(size % 1000)
    values = random.integers(-largest, largest, 50)
    values[:2] = largest, -largest - (largest == 2**63 - 1)
    coefficients = random.integers(-size, size, 50)
    coefficients[:2] = size
    c, w = bundle(coefficients, values)
    assert exact_integral(c, w) == c @ w == slowly(coefficients, values)
    coefficients = np.abs(coefficients)
    c, w = bundle(coefficients, np.full(50, -(2**63)))
    assert exact_integral(c, w) == c @ w == -(2**63) * int(coefficients.sum())


def test_sums_of_fractions_and_long_integers_are_exact():
    values = [Fraction(1, 3), 2**100, Fraction(-2, 7), 5]
    assert exact_integral(*bundle([3, 1, 7, -1], values)) == 1 + 2**100 - 2 - 5


def test_the_answer_is_a_fraction_for_values_of_every_kind_and_for_nothing():
    for values in ([1.5, 2.5], [1, 2], [Fraction(1, 2), 1]):
        for coefficients in ([1, 1], [0, 0]):
            total = exact_integral(*bundle(coefficients, values))
            assert type(total) is Fraction
            assert total == slowly(coefficients, values)


def test_columns_are_integrated_one_by_one():
    K = Complex.from_edges([0, 0], [1, 1])
    for values in (np.array([[0.1, 1e300], [0.2, -1e300]]), [[1, 2], [3, 4]], [[Fraction(1, 3), 1], [1, 2]]):
        w = K.cochain(1, values)
        totals = exact_integral(K.chain(1, [2, -1]), w)
        assert totals.tolist() == [exact_integral(K.chain(1, [2, -1]), w.column(j)) for j in range(2)]
    assert exact_integral(K.chain(1, [1, 1]), K.cochain(1, np.zeros((2, 0)))).tolist() == []


@pytest.mark.parametrize("bad", [np.nan, np.inf, -np.inf])
def test_nan_and_infinity_are_refused_by_name_where_they_count(bad):
    values = [1.0, 2.0, bad, bad]
    with pytest.raises(InputError, match=f"values must be finite to be added, got {bad} on cell 2"):
        exact_integral(*bundle([1, 1, 1, 1], values))
    assert exact_integral(*bundle([1, 1, 0, 0], values)) == 3
    K = Complex.from_faces([[0, 1, 2], [2, 1, 3]])
    w = K.cochain(1, [1.0, 2.0, 3.0, 4.0, bad])
    with pytest.raises(InputError, match=f"got {bad} on cell 4"):
        check_stokes(K.region([0, 1]), w)
    assert check_stokes(K.region([0]), w).holds
    inside = K.cochain(1, [1.0, 2.0, bad, 4.0, 5.0])  # cancels in the boundary, and still cannot be added
    with pytest.raises(InputError, match=f"got {bad} on cell 2"):
        check_stokes(K.region([0, 1]), inside)


def test_stokes_holds_exactly_where_the_rounded_derivative_would_not():
    K = Complex.from_faces([[0, 1, 2]])
    w = K.cochain(1, [1e16, -1e16, 1.0])
    finding = check_stokes(K.region([0]), w)
    assert finding.holds
    assert finding.left == finding.right == 2 * 10**16 + 1
    assert K.region([0]) @ w.d() != 2 * 10**16 + 1


def test_a_derivative_that_was_tampered_with_would_be_found():
    # the two sides are added up along different ways: change one of them, and they part
    K = Complex.from_faces([[0, 1, 2], [2, 1, 3]])
    w = K.cochain(1, [0.1, 0.2, 0.3, 0.4, 0.5])
    matrix = K.coboundary(1).copy()
    matrix.data = matrix.data.copy()
    matrix.data[0] = -matrix.data[0]
    right = exact_sum(Terms.of_rows(K.region([0, 1]).coefficients, matrix), w.values)
    assert right != check_stokes(K.region([0, 1]), w).left


@pytest.mark.parametrize("kind", [float, int, Fraction])
def test_a_closed_path_of_a_gradient_is_exactly_zero(kind):
    K = Complex.from_edges([0, 2, 2, 3], [1, 1, 3, 0])
    f = K.cochain(0, [kind(10**k) / 7 if kind is not int else 10**k for k in (16, 0, 8, 1)])
    finding = check_line_integral(K.path([0, 1, 2, 3], closed=True), f)
    assert (finding.left, finding.right, finding.holds) == (0, 0, True)
    finding = check_line_integral(K.path([0, 1, 2, 1, 2, 3]), f)
    assert finding.left == finding.right == Fraction(f.values[3]) - Fraction(f.values[0])


def test_stokes_takes_parts_of_a_complex_with_any_coefficients_and_solids():
    K = Complex.from_cells({"tetra": [[0, 1, 2, 3], [1, 2, 3, 4]]})
    flux = K.cochain(2, [0.1 * 3.0**k for k in range(7)])
    for coefficients in ([1, 1], [1, 0], [-5, 2**52], [0, 0]):
        finding = check_stokes(K.chain(3, coefficients), flux)
        assert finding.holds
        rows = [slowly(row, flux.values) for row in K.coboundary(2).toarray()]
        assert finding.right == sum(c * r for c, r in zip(coefficients, rows, strict=True))


def test_a_self_loop_contributes_nothing_to_a_line_integral():
    K = Complex.from_edges([0, 0], [0, 1])
    finding = check_line_integral(K.chain(1, [5, 1]), K.cochain(0, [0.1, 0.7]))
    assert finding.left == Fraction(0.7) - Fraction(0.1)


@pytest.mark.parametrize(
    ("ask", "error", "message"),
    [
        (
            lambda K, w: exact_integral(K.chain(0, [1] * 3), w),
            TopologyError,
            "of degree 1 needs a chain of degree 1, got 0",
        ),
        (
            lambda K, w: check_stokes(K.chain(1, [1] * 3), w),
            TopologyError,
            "of degree 1 needs a chain of degree 2, got 1",
        ),
        (
            lambda K, w: check_line_integral(K.region([0]), w),
            TopologyError,
            "a path has degree 1, got a chain of degree 2",
        ),
        (
            lambda K, w: exact_integral(w, K.chain(1, [1] * 3)),
            TopologyError,
            "a chain and a cochain are needed, got Cochain",
        ),
        (lambda K, w: exact_integral(K.chain(1, [1] * 3), [1, 2, 3]), TopologyError, "got Chain and list"),
        (lambda K, w: check_line_integral(3, w), TopologyError, "a chain and a cochain are needed, got int"),
        (
            lambda K, w: check_stokes(Complex.from_faces([[0, 1, 2]]).region([0]), w),
            TopologyError,
            "these live on different complexes",
        ),
        (
            lambda K, w: check_stokes(K.region([0]), K.cochain(1, np.zeros((3, 2)))),
            InputError,
            r"one column at a time: the cochain has 2, give cochain.column\(j\)",
        ),
    ],
)
def test_what_does_not_fit_together_is_refused(ask, error, message):
    K = Complex.from_faces([[0, 1, 2]])
    with pytest.raises(error, match=message):
        ask(K, K.cochain(1, [1.0, 2.0, 3.0]))
