"""The test, estimate and class of every possible error: of an edge, a reading at a vertex, a leak, a held value."""

from fractions import Fraction
from math import sqrt

import numpy as np
import pytest

from dec.audit.record import Audit

from .dense_reference import Row, is_parallel
from .measured_networks import Measured, columns_of, measured, rows_of_vertices

SEEDS = [range(first, first + 50) for first in range(0, 500, 50)]
NAMES = [f"seeds {block.start} to {block.stop - 1}" for block in SEEDS]


def near(exact: Fraction | float) -> object:
    return pytest.approx(float(exact), rel=1e-9, abs=1e-9)


def compare_readings(net: Measured, audit: Audit) -> None:
    exact, m = net.exact, len(net.case.ends)
    statistic, detectable = (columns_of(audit, name, m) for name in ("statistic", "detectable"))
    for i in range(len(exact.basis)):
        weight = exact.weight(exact.alone(net.reading_of(i))) if i in exact.at else Fraction(0)
        if weight:
            error = exact.alone(net.reading_of(i))
            assert statistic[i] == near(abs(exact.score(error)) / sqrt(weight))
            assert detectable[i] == near(4.13 / sqrt(weight))
        else:
            assert np.isnan([statistic[i], detectable[i]]).all()


def compare_vertices(net: Measured, audit: Audit) -> None:
    """What leaks at vertices that balance only together is told once for all of them."""
    exact, table, at = net.exact, audit.tables["vertices"], rows_of_vertices(net)
    fault, sd, statistic = (table[name] for name in ("fault", "fault_sd", "fault_statistic"))
    assert len(fault) == max(net.case.n, *(row + 1 for row in at.values()))
    for row in range(len(fault)):
        here = [v for v in range(net.case.n) if at[v] == row and v in net.error and any(exact.seen(net.error[v]))]
        if not here:
            assert np.isnan([fault[row], sd[row], statistic[row]]).all()
            assert table["class"][row] == 0
        for v in here:
            weight, score = exact.weight(net.error[v]), exact.score(net.error[v])
            assert fault[row] == near(score / weight)
            assert sd[row] == near(1 / sqrt(weight))
            assert statistic[row] == near(abs(score) / sqrt(weight))


def compare_classes(net: Measured, audit: Audit) -> None:
    """Two errors have the same number exactly when what they add to the checks is the same but for its size."""
    exact, m, at = net.exact, len(net.case.ends), rows_of_vertices(net)
    number, table = columns_of(audit, "class", m).tolist(), audit.tables["vertices"]["class"].tolist()
    assert all(n == 0 for i, n in enumerate(number) if i not in exact.at)
    errors: list[tuple[int, Row]] = [(number[i], exact.seen(exact.alone(k))) for k, i in enumerate(exact.at)]
    errors += [(table[at[v]], exact.seen(error)) for v, error in net.error.items()]
    first: dict[int, Row] = {}
    for n, seen in errors:
        assert (n > 0) == any(seen)
        if n:
            assert is_parallel(seen, first.setdefault(n, seen))
    assert sorted(first) == list(range(1, len(first) + 1))
    kinds = list(first.values())
    assert not any(is_parallel(a, b) for k, a in enumerate(kinds) for b in kinds[:k])


def compare(net: Measured) -> None:
    audit = net.audit()
    compare_readings(net, audit)
    compare_vertices(net, audit)
    compare_classes(net, audit)


@pytest.mark.parametrize("block", SEEDS, ids=NAMES)
@pytest.mark.parametrize("law", ["balance", "loop"])
def test_every_possible_error_is_tested_as_defined(law: str, block: range):
    for seed in block:
        compare(measured(law, seed))


@pytest.mark.parametrize("law", ["balance", "loop"])
@pytest.mark.parametrize("size", ["0.5", "3", "2%"])
def test_common_errors_change_every_test(law: str, size: str):
    for seed in range(1000, 1040):
        compare(measured(law, seed, size))
