"""What holds of every chain and cochain: Stokes, adjointness, exactness."""

from fractions import Fraction

import numpy as np
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from dec.calculus.exact import check_line_integral, check_stokes, exact_integral

from .complexes import coefficients, complexes, dense, exact_values, float_values, slow_integral


@st.composite
def degrees(draw, *, below_top=True):
    K = draw(complexes())
    return K, draw(st.integers(0, K.dim - 1 if below_top else K.dim))


@given(degrees(), st.data())
@settings(deadline=None, max_examples=300)
def test_stokes_holds_exactly_for_floats_of_any_size(case, data):
    K, k = case
    w = K.cochain(k, data.draw(float_values(K.counts[k])))
    c = K.chain(k + 1, data.draw(coefficients(K.counts[k + 1], data.draw(st.sampled_from([1, 2**20, 2**45])))))
    finding = check_stokes(c, w)
    rows = dense(K, k)
    combined = [sum(int(c.coefficients[r]) * rows[r][j] for r in range(len(rows))) for j in range(K.counts[k])]
    assert finding.left == finding.right == slow_integral(combined, w.values.tolist())
    assert finding.holds
    assert finding.difference == 0


@given(degrees(), st.data())
@settings(deadline=None, max_examples=300)
def test_boundary_and_derivative_are_adjoint_exactly(case, data):
    K, k = case
    w = K.cochain(k, data.draw(exact_values(K.counts[k])))
    c = K.chain(k + 1, data.draw(coefficients(K.counts[k + 1])))
    left, right = c.boundary() @ w, c @ w.d()
    assert left == right
    assert not isinstance(left, float)
    assert check_stokes(c, w).left == left


@given(degrees(), st.data())
@settings(deadline=None, max_examples=200)
def test_the_derivative_of_exact_values_is_the_dense_product_in_fractions(case, data):
    K, k = case
    values = data.draw(exact_values(K.counts[k]))
    expected = [sum(s * Fraction(v) for s, v in zip(row, values, strict=True)) for row in dense(K, k)]
    assert [Fraction(v) for v in K.cochain(k, values).d().values.tolist()] == expected


@given(degrees(), st.data())
@settings(deadline=None, max_examples=150)
def test_the_derivative_of_a_derivative_of_exact_values_is_zero(case, data):
    K, k = case
    assume(k + 2 <= K.dim)
    assert not K.cochain(k, data.draw(exact_values(K.counts[k]))).d().d().values.any()


@given(degrees(below_top=False), st.data())
@settings(deadline=None, max_examples=200)
def test_an_exact_integral_is_the_sum_of_fractions_whatever_the_kind_of_values(case, data):
    K, k = case
    values = data.draw(st.one_of(float_values(K.counts[k]), exact_values(K.counts[k])))
    size = data.draw(st.sampled_from([1, 2**31, 2**53 - 1]))
    c, w = K.chain(k, data.draw(coefficients(K.counts[k], size))), K.cochain(k, values)
    assert exact_integral(c, w) == slow_integral(c.coefficients, w.values.tolist())
    if w.is_exact:
        assert c @ w == exact_integral(c, w)


@given(degrees(below_top=False), st.data())
@settings(deadline=None, max_examples=200)
def test_exact_arithmetic_is_that_of_fractions(case, data):
    K, k = case
    one, two = (K.cochain(k, data.draw(exact_values(K.counts[k]))) for _ in range(2))
    factor = data.draw(st.one_of(st.integers(-(2**70), 2**70), st.fractions(max_denominator=20)))
    a, b = ([Fraction(v) for v in w.values.tolist()] for w in (one, two))
    assert [Fraction(v) for v in (one + two).values.tolist()] == [x + y for x, y in zip(a, b, strict=True)]
    assert [Fraction(v) for v in (one - two).values.tolist()] == [x - y for x, y in zip(a, b, strict=True)]
    assert [Fraction(v) for v in (one * factor).values.tolist()] == [x * factor for x in a]
    assert [Fraction(v) for v in (-one).values.tolist()] == [-x for x in a]
    assert (one + two).is_exact


@given(degrees(), st.data())
@settings(deadline=None, max_examples=100)
def test_the_derivative_takes_columns_one_by_one(case, data):
    K, k = case
    columns = [data.draw(exact_values(K.counts[k])) for _ in range(2)]
    table = np.empty((K.counts[k], 2), dtype=object)
    table[:, 0], table[:, 1] = columns
    w = K.cochain(k, table)
    for j, values in enumerate(columns):
        assert w.d().column(j).values.tolist() == K.cochain(k, np.array(values, dtype=object)).d().values.tolist()


@given(degrees(below_top=False), st.data())
@settings(deadline=None, max_examples=100)
def test_chains_form_a_group_and_boundary_is_additive(case, data):
    K, k = case
    one, two = (K.chain(k, data.draw(coefficients(K.counts[k]))) for _ in range(2))
    assert ((one + two) - two).coefficients.tolist() == one.coefficients.tolist()
    assert (one * -3).coefficients.tolist() == (-(one + one + one)).coefficients.tolist()
    if k:
        total = (one + two).boundary().coefficients
        assert total.tolist() == (one.boundary() + two.boundary()).coefficients.tolist()
        assert one.boundary().is_closed


@given(complexes(), st.data())
@settings(deadline=None, max_examples=150)
def test_differences_along_any_chain_of_edges_add_up_to_the_potential_over_its_ends(K, data):
    f = K.cochain(0, data.draw(float_values(K.counts[0])))
    c = K.chain(1, data.draw(coefficients(K.counts[1])))
    finding = check_line_integral(c, f)
    assert finding.holds
    assert finding.right == slow_integral(c.boundary().coefficients, f.values.tolist())
