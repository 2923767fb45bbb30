"""Whether sources add up is decided exactly, component by component."""

from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from dec.calculus.complex import Complex
from dec.errors import UnsolvableError
from dec.solvers.poisson import solve_poisson
from dec.solvers.solvability import balanced_sources, component_sums

numbers = st.floats(-1e300, 1e300)


def spread(K, source, fixed=(), **options):
    outlet = np.zeros(K.n_components, dtype=bool)
    outlet[K.component_labels[list(fixed)]] = True
    options.setdefault("spread", False)
    return balanced_sources(
        K, np.asarray(source, float).reshape(len(source), -1), K.component_labels, outlet, **options
    )


@given(st.lists(st.tuples(numbers, st.integers(0, 3)), min_size=1, max_size=30))
def test_sums_of_components_are_those_of_fractions_rounded_once(terms):
    labels = np.unique([part for _, part in terms], return_inverse=True)[1]
    values = np.array([value for value, _ in terms])
    exact = [sum((Fraction(v) for v in values[labels == p]), Fraction(0)) for p in range(labels.max() + 1)]
    total, left, gross = component_sums(values, labels, labels.max() + 1)
    assert total.tolist() == [float(t) for t in exact]
    for high, low, t in zip(total, left, exact, strict=True):
        assert abs(Fraction(high) + Fraction(low) - t) <= abs(t) * Fraction(2) ** -104
    assert gross == pytest.approx([np.abs(values[labels == p]).sum() for p in range(len(exact))])


def test_a_sum_that_plain_addition_loses_is_seen():
    """Demmel and Hida's classic: 1e16 + 1 - 1e16 is 1, not 0."""
    K = Complex.from_edges([0, 1], [1, 2])
    assert component_sums(np.array([1e16, 1.0, -1e16]), K.component_labels, 1)[0][0] == 1.0
    assert "within rounding" in spread(K, [1e16, 1.0, -1e16]).notes[0]
    with pytest.raises(UnsolvableError, match="add up to 64 instead of 0"):
        spread(K, [1e16, 64.0, -1e16])


def test_sums_whose_parts_overflow_are_still_exact():
    total, _, _ = component_sums(np.array([1e308, 1e308, -1e308, -1e308, 3.0]), np.zeros(5, np.int64), 1)
    assert total[0] == 3.0


def test_a_component_that_cannot_be_solved_is_named_with_its_surplus():
    K = Complex.from_edges([0, 2, 3], [1, 3, 4], 6, vertex_ids=["well", "tank", "A", "B", "C", "lone"])
    with pytest.raises(UnsolvableError) as caught:
        solve_poisson(K, {"well": 2, "tank": -2, "A": 1, "C": 0.5})
    message = str(caught.value)
    assert message.startswith(
        "part 2 (vertices A, B, C) has no fixed potential, yet its sources add up to 1.5 instead of 0"
    )
    assert 'unbalanced="spread"' in message


def test_a_message_names_three_vertices_the_column_and_how_many_other_parts_fail():
    K = Complex.from_edges(np.arange(9), np.arange(1, 10), 12)
    source = np.zeros((12, 2))
    source[3, 1] = source[11, 1] = 1.0
    with pytest.raises(UnsolvableError) as caught:
        solve_poisson(K, source)
    assert "part 1 (vertices 0, 1, 2, ... (10 in all))" in str(caught.value)
    assert "in column 1" in str(caught.value)
    assert "1 other part likewise" in str(caught.value)


def test_a_source_at_an_isolated_vertex_has_nowhere_to_go():
    with pytest.raises(UnsolvableError, match=r"part 2 \(vertex 2\)"):
        solve_poisson(Complex.from_edges([0], [1], 3), [1, -1, 1e-300])


def test_a_surplus_leaves_through_a_fixed_potential_of_its_own_component_only():
    K = Complex.from_edges([0, 2], [1, 3])
    assert solve_poisson(K, [5, 0, 1, -1], fixed={1: 0.0}).flow.values.tolist() == [5, 1]
    with pytest.raises(UnsolvableError, match="part 2"):
        solve_poisson(K, [5, 0, 1, 0], fixed={1: 0.0})


@given(st.lists(st.floats(-1e6, 1e6), min_size=1, max_size=40))
def test_sources_made_to_balance_in_floats_are_accepted_and_a_visible_surplus_is_not(values):
    K = Complex.from_edges(np.arange(len(values)), np.arange(1, len(values) + 1))
    source = np.array([*values, -sum(values)])
    spread(K, source)
    gross = np.abs(source).sum()
    if gross > 1e-3:
        source[0] += 1e-9 * gross
        with pytest.raises(UnsolvableError):
            spread(K, source)


@given(st.lists(st.floats(-1e6, 1e6), min_size=1, max_size=40))
def test_spread_sources_add_up_to_zero_to_twice_the_precision(values):
    K = Complex.from_edges(np.arange(len(values) - 1), np.arange(1, len(values)), len(values))
    sources = spread(K, values, spread=True)
    parts = [Fraction(x) for x in (*sources.value[:, 0], *sources.rest[:, 0])]
    assert abs(sum(parts, Fraction(0))) <= sum(map(Fraction, sources.doubt[:, 0].tolist()), Fraction(0))
    mean = sum(map(Fraction, values), Fraction(0)) / len(values)
    for v, value in enumerate(values):
        moved = Fraction(sources.value[v, 0]) + Fraction(sources.rest[v, 0])
        assert abs(moved - (Fraction(value) - mean)) <= Fraction(sources.doubt[v, 0])
        assert Fraction(sources.doubt[v, 0]) <= (abs(mean) + abs(moved)) * Fraction(2) ** -100


def test_what_was_spread_is_told_part_by_part():
    K = Complex.from_edges([0, 2, 4, 6, 8], [1, 3, 5, 7, 9])
    notes = spread(K, np.ones(10), spread=True).notes
    assert notes[0] == "the sources of part 1 (vertices 0, 1) add up to 2: spread evenly over its 2 vertices"
    assert notes[-1] == "the same in 2 other parts"
    assert len(notes) == 4
