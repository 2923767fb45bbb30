"""Counter readings to flows: a simulated counter, told what truly passed, must give it back."""

from fractions import Fraction
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from dec.errors import InputError
from dec.steps import MeterChange, difference, fill, meter_flows, meter_totals

from .given import is_plain


@st.composite
def counters(draw):
    """What passed, and what a counter that ends at `turn` shows, with some meters exchanged."""
    digits, places = draw(st.integers(2, 6)), draw(st.integers(0, 2))
    unit, turn = Fraction(1, 10**places), 10**digits
    whole = turn * 10**places
    n = draw(st.integers(2, 9))
    passed = draw(st.lists(st.integers(0, whole // 2), min_size=n - 1, max_size=n - 1))
    shown, changes = [draw(st.integers(0, whole - 1))], {}
    for row, amount in enumerate(passed, start=1):
        if draw(st.integers(0, 4)):
            shown.append((shown[-1] + amount) % whole)
            continue
        part = draw(st.integers(0, amount))  # the old meter sees this much of it
        first = draw(st.integers(0, whole - 1))
        changes[row] = MeterChange(unit * ((shown[-1] + part) % whole), unit * first)
        shown.append((first + amount - part) % whole)
    return [unit * v for v in passed], [unit * v for v in shown], changes, turn


@given(counters(), st.one_of(st.integers(1, 60), st.fractions(min_value=Fraction(1, 9), max_value=5)))
@settings(max_examples=300)
def test_what_truly_passed_comes_back_exactly(counter, period):
    passed, shown, changes, turn = counter
    found = meter_flows(np.array(shown, dtype=object), period, roll_over=turn, changes=changes)
    assert found.amounts.tolist() == passed
    assert found.flows.tolist() == [amount / period for amount in passed]
    assert np.flatnonzero(found.is_changed).tolist() == [row - 1 for row in sorted(changes)]
    assert is_plain(found.amounts)
    assert is_plain(found.flows)
    if not changes:
        assert sum(found.amounts.tolist()) == shown[-1] - shown[0] + turn * int(found.has_rolled.sum())


@given(st.lists(counters(), min_size=1, max_size=3))
@settings(max_examples=60)
def test_columns_are_metered_one_by_one(several):
    n = min(len(shown) for _, shown, _, _ in several)
    table = np.array([shown[:n] for _, shown, _, _ in several], dtype=object).T
    changes = {(r, j): c for j, (_, _, own, _) in enumerate(several) for r, c in own.items() if r < n}
    found = meter_flows(table, roll_over=[turn for *_, turn in several], changes=changes)
    for j, (passed, _, _, _) in enumerate(several):
        assert found.amounts[:, j].tolist() == passed[: n - 1]


def test_decimal_text_int64_and_floats_give_their_own_kind():
    found = meter_flows(["998.50", "999.75", "1.00"], period="0.5", roll_over=1000)
    assert found.amounts.tolist() == [Fraction(5, 4), Fraction(5, 4)]
    assert found.flows.tolist() == [Fraction(5, 2), Fraction(5, 2)]
    assert found.has_rolled.tolist() == [False, True]
    counted = meter_flows(np.array([5, 7, 7, 20]), [1, 2, 4])
    assert counted.amounts.dtype == np.int64
    assert counted.flows.tolist() == [2, 0, Fraction(13, 4)]
    rough = meter_flows([998.5, 999.75, 1.0], period=0.5, roll_over=1000)
    assert rough.flows.dtype == np.float64
    assert rough.flows.tolist() == [2.5, 2.5]
    with pytest.raises(ValueError, match="read-only"):
        rough.flows[0] = 0


def test_int64_never_wraps():
    assert meter_flows(np.array([-(2**63), 2**63 - 1])).amounts.tolist() == [2**64 - 1]
    assert meter_flows(np.array([-(2**62), 2**62])).amounts.tolist() == [2**63]
    turn = 2**63 - 1
    exchanged = meter_flows(np.array([5, 2, 4]), changes={1: (2**63, 1)})
    assert exchanged.amounts.tolist() == [2**63 - 4, 2]
    assert is_plain(exchanged.amounts)
    found = meter_flows(np.array([turn - 5, 10]), roll_over=turn)
    assert found.amounts.tolist() == [15]
    assert meter_flows(np.array([0, turn - 1]), roll_over=turn, most=turn).amounts.tolist() == [turn - 1]


@pytest.mark.parametrize(
    ("ask", "message"),
    [
        (
            lambda: meter_flows([5, 9, 4]),
            "a counter must not fall, got 9 and then 4 at row 2; state roll_over .*, changes",
        ),
        (lambda: meter_flows([[5, 5], [9, 3]]), "a counter must not fall, got 5 and then 3 at row 1 of meter 1"),
        (
            lambda: meter_flows([90, 60], roll_over=100),
            "70 would have passed up to row 1, from 90 and then 60, more than half",
        ),
        (lambda: meter_flows([10, 80], roll_over=100), "70 would have passed up to row 1, from 10 and then 80"),
        (
            lambda: meter_flows([90, 30], roll_over=100, most=30),
            "40 would have passed .* more than the 30 stated as most",
        ),
        (lambda: meter_flows([1, 30], most=20), "29 would have passed up to row 1, .* more than the 20 stated as most"),
        (lambda: meter_flows([5, 100], roll_over=100), "from 0 to below the roll-over 100, got 100 at row 1"),
        (lambda: meter_flows([-1, 5], roll_over=100), "from 0 to below the roll-over 100, got -1 at row 0"),
        (lambda: meter_flows([[1, 2], [3, 700]], roll_over=[1000, 100]), "got 700 at row 1 of meter 1"),
        (lambda: meter_flows(["1", "", "3"]), "no gap, got one at 1; leave the row out .*, or make totals"),
        (lambda: meter_flows([1]), "readings must have at least 2 rows"),
        (lambda: meter_flows([1, 2], period=0), "period must be a positive number, or one for each of 1 intervals"),
        (lambda: meter_flows([1, 2, 3], period=[1]), "period must be a positive number, or one for each of 2"),
        (lambda: meter_flows([1, 2], period=0.5), "period must be exact where the data are"),
        (lambda: meter_flows([1, 2], roll_over=-5), "roll_over must be a positive number"),
        (lambda: meter_flows([1, 2], roll_over=1e5), "roll_over must be exact where the data are"),
        (lambda: meter_flows([1, 2], changes={0: (1, 0)}), "changes must be keyed by a row from 1 to 1, got 0"),
        (lambda: meter_flows([[1], [2]], changes={1: (1, 0)}), r"changes must be keyed by \(row, column\)"),
        (lambda: meter_flows([1, 2], changes={True: (1, 1)}), "changes must be keyed by a row from 1 to 1, got True"),
        (lambda: meter_flows([1, 2], changes=[(1, 1)]), "changes must map rows to exchanges, .* got list"),
        (lambda: meter_flows([[1.0], [2.0]], roll_over=[np.nan]), "roll_over must be finite, got nan at 0"),
        (lambda: meter_flows([1, 2], changes={1: 5}), r"must be \(last reading of the old meter, first of the new\)"),
        (
            lambda: meter_flows([5, 2], changes={1: (4, 0)}),
            "stated at 1 does not fit: the old meter would have fallen from 5 to 4",
        ),
        (
            lambda: meter_flows([5, 2], changes={1: (6, 3)}),
            "stated at 1 does not fit: the new meter would have fallen from 3 to 2",
        ),
        (lambda: meter_flows([5, 2], roll_over=10, changes={1: (12, 0)}), "from 0 to below 10, got 12 and 0"),
    ],
)
def test_what_looks_wrong_is_refused_and_named(ask, message):
    with pytest.raises(InputError, match=message):
        ask()


@given(counters(), st.data())
@settings(max_examples=200)
def test_totals_over_gaps_are_what_truly_passed_since_the_first_reading(counter, data):
    passed, shown, changes, turn = counter
    gaps = data.draw(st.sets(st.integers(0, len(shown) - 1), max_size=len(shown) - 2))
    known = [row for row in range(len(shown)) if row not in gaps]
    inside = {row for row in changes if known[0] < row <= known[-1]}
    places = [sum(k < row for k in known) for row in inside]
    if len(set(places)) < len(places):
        return
    truth = [sum(passed[known[0] : row], Fraction(0)) for row in known]
    cells = [None if row in gaps else value for row, value in enumerate(shown)]
    # between two readings that are there more than half a turn, even several, may have passed: one at most is undone
    steps = [b - a for a, b in pairwise(truth)]
    if max(steps, default=0) >= turn:
        return
    fits = {}
    for row in inside:
        after = min(k for k in known if k >= row)
        before = max(k for k in known if k < row)
        if after - before > 1:
            return
        fits[row] = changes[row]
    totals = meter_totals(cells, roll_over=turn, changes=fits, most=2 * turn)
    assert [totals[row] for row in known] == truth
    assert all(totals[row] is None for row in gaps)


def test_totals_of_columns_have_gaps_of_their_own_and_can_be_filled():
    table = [["98", "5"], ["", "7"], ["2", "9"], ["4", ""], ["6", "13"], ["8", "15"], ["10", "17"]]
    totals = meter_totals(table, roll_over=[100, 1000])
    assert totals[:, 0].tolist() == [0, None, 4, 6, 8, 10, 12]
    assert totals[:, 1].tolist() == [0, 2, 4, None, 8, 10, 12]
    filled = fill(totals, order=1)
    assert difference(filled.values).tolist() == [[2, 2]] * 6
    rough = meter_totals([98.0, np.nan, 2.0], roll_over=100)
    assert rough[[0, 2]].tolist() == [0.0, 4.0]
    assert np.isnan(rough[1])
    late = meter_totals([5, 9, None, 3, 4], changes={2: (11, 1)})  # keyed by a row whose telegram is lost
    assert late.tolist() == [0, 4, None, 8, 9]


@pytest.mark.parametrize(
    ("ask", "message"),
    [
        (lambda: meter_totals([9, None, 4]), "a counter must not fall, got 9 and then 4 at row 2; state"),
        (lambda: meter_totals([["9.5", "1"], ["", "2"], ["4", "3"]]), "got 9.5 and then 4 at row 2 of meter 0"),
        (lambda: meter_totals([9, None]), "a meter must have at least 2 readings, got 1 in column 0"),
        (lambda: meter_totals([[1, 2], [3, 4]], roll_over=[10]), "one number or one for each meter, got 1"),
        (lambda: meter_totals([1, 2, 3], changes=[5]), "changes must map rows to exchanges, .* got list"),
        (lambda: meter_totals([1, 2, 3], changes={5: (1, 2)}), "changes must be keyed by a row that is there, got 5"),
        (lambda: meter_totals([None, 2, 3], changes={1: (1, 2)}), "must have a reading before and one after it"),
        (lambda: meter_totals([1, None, 3], changes={1: (2, 0), 2: (2, 0)}), "and no other beside it"),
    ],
)
def test_totals_that_cannot_be_told_are_refused(ask, message):
    with pytest.raises(InputError, match=message):
        ask()
