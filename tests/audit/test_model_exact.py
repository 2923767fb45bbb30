"""Adjusted values, their accuracy and what is checked, with readings at vertices and common errors, in fractions."""

from fractions import Fraction
from math import sqrt

import numpy as np
import pytest

from dec.audit.record import Audit

from .dense_reference import Reference, is_parallel
from .measured_networks import Measured, columns_of, measured, with_repeats

SEEDS = [range(first, first + 50) for first in range(0, 200, 50)]
NAMES = [f"seeds {block.start} to {block.stop - 1}" for block in SEEDS]


def near(exact: Fraction | float) -> object:
    return pytest.approx(float(exact), rel=1e-9, abs=1e-9)


def compare(net: Measured, audit: Audit) -> None:
    exact, m = net.exact, len(net.case.ends)
    assert audit.dof == exact.dof
    assert audit.chi_square == near(exact.chi_square)
    assert ("at_vertices" in audit.tables) == bool(net.read_at)
    if net.read_at:
        assert list(audit.tables["at_vertices"]["id"]) == [f"v{v}" for v in net.read_at]
    column = {
        name: columns_of(audit, name, m)
        for name in ("value", "sd", "adjusted", "adjusted_sd", "correction", "redundancy", "standing")
    }
    assert list(column["standing"]) == [exact.standing(i) for i in range(len(exact.basis))]
    assert np.nansum(column["redundancy"]) == pytest.approx(exact.dof, abs=1e-9)
    for i in range(len(exact.basis)):
        found = exact.coordinate(i)
        if found is None:
            assert np.isnan(column["adjusted"][i])
            assert np.isnan(column["adjusted_sd"][i])
        else:
            assert column["adjusted"][i] == near(found[0])
            assert column["adjusted_sd"][i] == near(sqrt(found[1]))
        if i not in exact.at:
            assert np.isnan([column[name][i] for name in ("value", "correction", "redundancy")]).all()
            continue
        k = net.reading_of(i)
        assert column["value"][i] == float(exact.reading[k])
        assert column["sd"][i] == near(sqrt(exact.variance[k]))
        assert column["correction"][i] == near(exact.adjusted[k] - exact.reading[k])
        assert column["redundancy"][i] == near(exact.redundancy(k))


def compare_potentials(net: Measured, audit: Audit) -> None:
    """Where a part hangs on no held or measured potential, its lowest vertex has 0."""
    table, exact, n, fixed = audit.tables["vertices"], net.exact, net.case.n, net.case.numbers or {}
    free = [v for v in range(n) if v not in fixed]

    def found(v: int, less: int | None = None) -> tuple[Fraction, Fraction] | None:
        return exact.functional([Fraction((w == v) - (w == less)) for w in free])

    for v in range(n):
        said = (Fraction(0), Fraction(0)) if v in fixed else found(v)
        if said is None:
            assert np.isnan(table["potential_sd"][v])
            lowest = next(w for w in range(n) if w not in fixed and found(v, w) is not None)
            said = found(v, lowest)
            assert said is not None
        else:
            assert table["potential_sd"][v] == near(sqrt(said[1]))
        assert table["potential"][v] == near(said[0] + fixed.get(v, 0))


@pytest.mark.parametrize("block", SEEDS, ids=NAMES)
@pytest.mark.parametrize("law", ["balance", "loop"])
def test_readings_at_vertices_are_adjusted_with_those_on_edges(law: str, block: range):
    for seed in block:
        net = measured(law, seed)
        audit = net.audit()
        compare(net, audit)
        if law == "loop":
            compare_potentials(net, audit)


@pytest.mark.parametrize("law", ["balance", "loop"])
@pytest.mark.parametrize("size", ["0.5", "3", "2%", "40%"])
def test_common_errors_are_weighed_with_their_full_covariance(law: str, size: str):
    for seed in range(1000, 1040):
        net = measured(law, seed, size)
        audit = net.audit()
        compare(net, audit)
        if law == "loop":
            compare_potentials(net, audit)


def compare_repeats(net: Measured, audit: Audit, exact: Reference) -> None:
    """Least squares with one row a reading gives the same as means and a degree of freedom for each further reading."""
    m = len(net.case.ends)
    assert audit.dof == exact.dof
    assert audit.chi_square == near(exact.chi_square)
    adjusted, spread, standing = (columns_of(audit, name, m) for name in ("adjusted", "adjusted_sd", "standing"))
    for i in range(len(exact.basis)):
        found = exact.coordinate(i)
        seen = any(any(exact.seen(exact.alone(k))) for k, at in enumerate(exact.at) if at == i)
        assert standing[i] == ("checked" if seen else net.exact.standing(i))
        assert adjusted[i] == (pytest.approx(np.nan, nan_ok=True) if found is None else near(found[0]))
        assert spread[i] == (pytest.approx(np.nan, nan_ok=True) if found is None else near(sqrt(found[1])))
    if "readings" not in audit.tables:
        assert not [i for i in exact.at if i < m]
        return
    table = audit.tables["readings"]
    for k, edge in enumerate(table["edge"]):
        assert edge == f"e{exact.at[k]}"
        assert table["value"][k] == near(exact.reading[k])
        assert table["sd"][k] == near(sqrt(exact.variance[k]))
        assert table["adjusted"][k] == near(exact.adjusted[k])
        assert table["correction"][k] == near(exact.adjusted[k] - exact.reading[k])
        error = exact.alone(k)
        weight = exact.weight(error)
        if weight:
            assert table["statistic"][k] == near(abs(exact.score(error)) / sqrt(weight))
        else:
            assert np.isnan(table["statistic"][k])


def compare_reading_suspects(audit: Audit, exact: Reference) -> int:
    if len(audit.suspects) == 20:
        return 0
    table = audit.tables["readings"]
    names, edges = table["id"].tolist(), table["edge"].tolist()
    several = [k for k, edge in enumerate(edges) if edges.count(edge) > 1]
    loud = [k for k in several if table["statistic"][k] > audit.asked["critical"]]
    found = {s.id: s for s in audit.suspects if s.kind == "reading"}
    assert set(found) == {names[k] for k in loud}
    for k in loud:
        error = exact.alone(k)
        assert found[names[k]].estimate == near(exact.reading[k] - exact.score(error) / exact.weight(error))
        alike = [j for j in several if j != k and is_parallel(exact.seen(error), exact.seen(exact.alone(j)))]
        assert set(found[names[k]].inseparable_from) == {("reading", names[j]) for j in alike}
    return len(loud)


@pytest.mark.parametrize("law", ["balance", "loop"])
@pytest.mark.parametrize("size", ["", "0.5", "3"])
def test_several_readings_of_one_edge_count_one_by_one(law: str, size: str):
    n_loud = 0
    for seed in range(2000, 2035):
        net = measured(law, seed, size)
        if not net.case.reading:
            continue
        rows, exact = with_repeats(net, seed)
        audit = net.audit(readings=rows, sd="own")
        compare_repeats(net, audit, exact)
        n_loud += compare_reading_suspects(audit, exact)
    assert n_loud > 10
