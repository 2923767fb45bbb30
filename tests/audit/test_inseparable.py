"""Suspects: one of each class that stands out, and with it everything that no reading can tell apart from it."""

from itertools import pairwise
from math import sqrt

import numpy as np
import pandas as pd
import pytest

from dec.audit.questions import balance, loops
from dec.calculus.dataset import Dataset

from .dense_reference import is_parallel
from .measured_networks import Measured, measured, possible_errors


def compare_suspects(net: Measured, **more: object) -> int:
    """Return how many were compared."""
    audit, exact = net.audit(**more), net.exact
    errors = possible_errors(net, audit)
    statistic = {name: abs(exact.score(h)) / sqrt(exact.weight(h)) for name, h in errors.items()}
    alike = {
        name: {other for other in errors if other != name and is_parallel(exact.seen(h), exact.seen(errors[other]))}
        for name, h in errors.items()
    }
    limit = audit.asked["critical"]
    assert len(audit.suspects) < 20
    named = [(s.kind, s.id) for s in audit.suspects]
    for suspect, name in zip(audit.suspects, named, strict=True):
        assert suspect.statistic == pytest.approx(statistic[name], rel=1e-9)
        assert set(suspect.inseparable_from) == alike[name]
        assert len(suspect.inseparable_from) == len(alike[name])
        size = float(exact.score(errors[name]) / exact.weight(errors[name]))
        told = np.nan if name[0] == "vertex" else value_of(net, name)
        wanted = size if name[0] == "vertex" else told - size
        assert suspect.estimate == pytest.approx(wanted, rel=1e-9, abs=1e-9)
        assert suspect.sd == pytest.approx(1 / sqrt(exact.weight(errors[name])), rel=1e-9)
    assert not any(other in alike[name] for name in named for other in named)
    loud = {name for name, found in statistic.items() if found > limit}
    assert loud == set().union(named, *(alike[name] for name in named))
    order = [s.statistic for s in audit.suspects]
    assert all(a >= b * (1 - 1e-12) for a, b in pairwise(order))
    assert audit.extra["chance"]["exceed"] == len(named)
    return len(named)


def value_of(net: Measured, name: tuple[str, str]) -> float:
    m, number = len(net.case.ends), int(name[1][1:])
    return float(net.exact.reading[net.reading_of(number if name[0] == "edge" else m + net.read_at.index(number))])


@pytest.mark.parametrize("law", ["balance", "loop"])
@pytest.mark.parametrize("size", ["", "3", "2%"])
def test_suspects_are_named_with_all_that_cannot_be_told_apart(law: str, size: str):
    assert sum(compare_suspects(measured(law, seed, size)) for seed in range(1000, 1040)) > 40


@pytest.mark.parametrize("law", ["balance", "loop"])
def test_a_limit_for_all_tests_together_names_no_others(law: str):
    assert sum(compare_suspects(measured(law, seed), sidak=True) for seed in range(40)) > 40


def test_a_leak_a_supply_and_a_meter_to_the_outside_are_one_suspect():
    rows = {"id": ["in", "out"], "from": ["S", "J"], "to": ["J", "T"], "y": [10.0, 4.0]}
    nodes = {"id": ["S", "J", "T"], "put in": ["", "0", "0"]}
    net = Dataset.from_frames(pd.DataFrame(rows), pd.DataFrame(nodes))
    audit = balance(net, "y", sd=0.1, open=["S"], supply="put in", supply_sd={"J": 0.1, "T": 0.1})
    found = {(s.kind, s.id): set(s.inseparable_from) for s in audit.suspects}
    assert found == {
        ("edge", "in"): {("vertex", "J"), ("supply", "J")}, ("edge", "out"): set(),
        ("supply", "T"): {("vertex", "T")},
    }  # fmt: skip


def test_a_bench_mark_at_the_end_of_one_line_and_that_line_are_one_suspect():
    rows = {"id": ["a", "b", "c"], "from": ["P", "Q", "R"], "to": ["Q", "R", "Q"], "y": [1.0, 1.0, -1.0]}
    net = Dataset.from_frames(pd.DataFrame(rows))
    audit = loops(net, "y", sd=0.01, fixed={"P": 100, "Q": 102, "R": 103})
    suspect = audit.suspects[0]
    assert (suspect.kind, suspect.id, suspect.inseparable_from) == ("edge", "a", (("vertex", "P"),))
    table = audit.vertices.set_index("id")
    assert table["fault"]["P"] == pytest.approx(-1.0)
    assert table["fault_sd"]["P"] == pytest.approx(0.01)
