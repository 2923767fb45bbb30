"""Both network audits against exact fractions and ranks, on hundreds of small random networks."""

import json
from fractions import Fraction
from math import sqrt

import numpy as np
import pytest

from dec.audit.questions import balance, loops
from dec.audit.record import Audit

from .exact_adjustment import Exact, adjusted, echelon, rank
from .small_networks import Case, difference_case, flow_case, parts

BLOCKS = [range(first, first + 50) for first in range(0, 500, 50)]
BLOCK_NAMES = [f"seeds {block.start} to {block.stop - 1}" for block in BLOCKS]


def is_close(found: float, exact: Fraction | float, tolerance: float, sd: float = 0.0) -> bool:
    """Within the tolerance of the size, of 1, or of the standard deviation."""
    return abs(found - float(exact)) <= tolerance * max(1.0, abs(float(exact)), sd)


def compare_edges(audit: Audit, exact: Exact, case: Case, tolerance: float) -> None:
    table = audit.tables["edges"]
    assert audit.dof == exact.dof
    assert list(table["standing"]) == exact.standing
    if exact.dof:
        assert is_close(audit.chi_square, exact.chi_square, tolerance)
    else:
        assert (audit.chi_square, audit.holds, audit.p_value) == (0.0, None, None)
    assert np.nansum(table["redundancy"]) == pytest.approx(exact.dof, abs=1e-12 if tolerance < 1e-8 else tolerance)
    for e, word in enumerate(exact.standing):
        spread = sqrt(exact.variance[e]) if e in exact.value else 0.0
        if word == "unknown":
            assert np.isnan(table["adjusted"][e])
            assert np.isnan(table["adjusted_sd"][e])
        else:
            assert is_close(table["adjusted"][e], exact.value[e], tolerance, spread)
            assert is_close(table["adjusted_sd"][e], spread, tolerance)
        assert np.isnan(table["redundancy"][e]) == (e not in case.reading)
        if e in case.reading:
            assert is_close(table["redundancy"][e], exact.redundancy[e], tolerance)
        if word == "unchecked":
            assert table["adjusted"][e] == table["value"][e]
            assert table["correction"][e] == 0.0
            assert table["adjusted_sd"][e] == float(case.sd[e])
        if word == "checked":
            unit = sqrt(case.sd[e] ** 2 * exact.redundancy[e])
            statistic = abs(float(exact.value[e] - case.reading[e])) / unit
            assert is_close(table["statistic"][e], statistic, tolerance)
            assert table["detectable"][e] == pytest.approx(4.13 * float(case.sd[e]) ** 2 / unit, rel=10 * tolerance)
        else:
            assert np.isnan(table["statistic"][e])
            assert np.isnan(table["detectable"][e])


def compare_inseparable(audit: Audit, exact: Exact) -> None:
    number = audit.tables["edges"]["class"].tolist()
    checked = [e for e, n in enumerate(number) if n]
    assert {e: [f for f in checked if f != e and number[f] == number[e]] for e in checked} == exact.inseparable


def exact_flows(case: Case) -> Exact:
    """Inflow minus outflow plus supply is zero at every closed vertex: one row each, solved by elimination."""
    m, numbers = len(case.ends), case.numbers or {}
    rows = []
    for v in sorted(set(range(case.n)) - set(case.chosen)):
        row = [Fraction((head == v) - (tail == v)) for tail, head in case.ends]
        rows.append([*row, -numbers.get(v, Fraction(0))])
    solved, pivots = echelon(rows, m)
    start = [Fraction(0)] * m
    for row, pivot in zip(solved, pivots, strict=True):
        start[pivot] = row[m]
    free = [c for c in range(m) if c not in pivots]
    basis = [[Fraction(int(e == c)) for c in free] for e in range(m)]
    for row, pivot in zip(solved, pivots, strict=True):
        basis[pivot] = [-row[c] for c in free]
    return adjusted(start, basis, case.reading, case.sd)


def exact_differences(case: Case) -> Exact:
    fixed = case.numbers or {}
    free = [v for v in range(case.n) if v not in fixed]
    start = [fixed.get(head, Fraction(0)) - fixed.get(tail, Fraction(0)) for tail, head in case.ends]
    basis = [[Fraction((head == v) - (tail == v)) for v in free] for tail, head in case.ends]
    return adjusted(start, basis, case.reading, case.sd)


def groups_of(case: Case) -> list[int]:
    idle = [ends for e, ends in enumerate(case.ends) if e not in case.reading]
    return parts(case.n, [*((case.chosen[0], v) for v in case.chosen), *idle])


def residual_of(case: Case, members: set[int]) -> Fraction:
    put_in = sum(((case.numbers or {}).get(v, Fraction(0)) for v in members), Fraction(0))
    return put_in + sum(
        y * ((case.ends[e][1] in members) - (case.ends[e][0] in members)) for e, y in case.reading.items()
    )


def compare_vertices(audit: Audit, case: Case) -> list[Fraction]:
    """Return the residual of every closed group."""
    table, group = audit.tables["vertices"], groups_of(case)
    closed = [g for g in sorted(set(group)) if all(group[v] != g for v in case.chosen)]
    joined = [g for g in closed if group.count(g) > 1]
    assert list(table["id"][: case.n]) == [f"v{v}" for v in range(case.n)]
    assert len(table["id"]) == case.n + len(joined)
    for v in range(case.n):
        touching = [e for e, ends in enumerate(case.ends) if v in ends and ends[0] != ends[1]]
        if v in case.chosen or any(e not in case.reading for e in touching):
            assert np.isnan(table["residual"][v])
            assert np.isnan(table["statistic"][v])
            continue
        assert table["residual"][v] == float(residual_of(case, {v}))
        spread = sqrt(sum(case.sd[e] ** 2 for e in touching))
        assert table["sd"][v] == pytest.approx(spread or np.nan, rel=1e-13, nan_ok=True)
    for row, g in enumerate(joined, start=case.n):
        members = [v for v in range(case.n) if group[v] == g]
        assert table["id"][row].startswith("+".join(f"v{v}" for v in members[:4]))
        assert table["residual"][row] == float(residual_of(case, set(members)))
    return [residual_of(case, {v for v in range(case.n) if group[v] == g}) for g in closed]


def check_flows(case: Case, tolerance: float) -> None:
    supply = None if case.numbers is None else "supply"
    audit = balance(case.net, "y", sd="sd", open=case.names, supply=supply)
    exact = exact_flows(case)
    compare_edges(audit, exact, case, tolerance)
    compare_inseparable(audit, exact)
    assert audit.extra["closes_to"] <= 1e-12
    residuals = compare_vertices(audit, case)
    plain = balance(case.net, "y", open=case.names, supply=supply)
    assert plain.holds == (not any(residuals) if exact.dof else None)
    json.loads(audit.to_json(), parse_constant=pytest.fail)


def compare_potentials(audit: Audit, exact: Exact, case: Case, tolerance: float) -> None:
    table, fixed = audit.tables["vertices"], case.numbers or {}
    free = [v for v in range(case.n) if v not in fixed]
    part = parts(case.n, [*((case.chosen[0], v) for v in case.chosen), *(case.ends[e] for e in case.reading)])
    for v in range(case.n):
        is_held = any(part[v] == part[w] for w in case.chosen)
        assert np.isnan(table["potential_sd"][v]) == (not is_held)
        if v in fixed:
            value, variance = fixed[v], Fraction(0)
        else:
            lowest = None if is_held else part.index(part[v])
            value, variance = exact.functional([Fraction((w == v) - (w == lowest)) for w in free])
        assert is_close(table["potential"][v], value, tolerance, sqrt(variance))
        if is_held:
            assert is_close(table["potential_sd"][v], sqrt(variance), tolerance)


def compare_loops(audit: Audit, exact: Exact, case: Case) -> None:
    """Every row is a closed walk of measured edges, and all of them together are a basis."""
    fixed, rows = case.numbers or {}, []
    place = [case.chosen[0] if v in case.chosen else v for v in range(case.n)]
    for loop in audit.loops:
        row, misclosure, stops = [Fraction(0)] * len(case.ends), Fraction(0), []
        for name, sign in loop["legs"]:
            e = int(name[1:])
            tail, head = case.ends[e]
            row[e] += sign
            misclosure += sign * (case.reading[e] - fixed.get(head, Fraction(0)) + fixed.get(tail, Fraction(0)))
            stops.append((place[tail], place[head])[::sign])
        assert all(stops[i - 1][1] == stops[i][0] for i in range(len(stops)))
        assert loop["misclosure"] == float(misclosure)
        assert loop["sd"] == pytest.approx(
            sqrt(sum(case.sd[int(name[1:])] ** 2 for name, _ in loop["legs"])), rel=1e-13
        )
        assert loop["holds"] == (abs(loop["misclosure"]) <= loop["limit"])
        rows.append(row)
    assert len(rows) == exact.dof == rank(rows)


def check_differences(case: Case, tolerance: float) -> None:
    audit = loops(case.net, "y", sd="sd", fixed="height")
    exact = exact_differences(case)
    compare_edges(audit, exact, case, tolerance)
    compare_inseparable(audit, exact)
    assert audit.extra["closes_to"] <= 1e-12
    compare_potentials(audit, exact, case, tolerance)
    compare_loops(audit, exact, case)
    plain = loops(case.net, "y", fixed="height")
    assert plain.holds == (not any(loop["misclosure"] for loop in audit.loops) if exact.dof else None)
    json.loads(audit.to_json(), parse_constant=pytest.fail)


@pytest.mark.parametrize("block", BLOCKS, ids=BLOCK_NAMES)
def test_balance_agrees_with_exact_least_squares(block: range):
    for seed in block:
        check_flows(flow_case(seed), 1e-9)


@pytest.mark.parametrize("block", BLOCKS, ids=BLOCK_NAMES)
def test_loops_agree_with_exact_least_squares(block: range):
    for seed in block:
        check_differences(difference_case(seed), 1e-9)


@pytest.mark.parametrize(("powers", "tolerance"), [(2, 1e-9), (3, 1e-9), (4, 1e-8), (5, 1e-7), (6, 1e-5)])
def test_standard_deviations_far_apart_cost_few_digits(powers: int, tolerance: float):
    """Sd from 0.01 ... 0.000001 to 1 in one network, as a percentage of readings of very different size gives them."""
    for seed in range(40):
        check_flows(flow_case(seed, powers), tolerance)
        check_differences(difference_case(seed, powers), tolerance)
