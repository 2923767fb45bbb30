"""Which readings are named, in what order, with whom, and with which hint."""

import numpy as np
import pandas as pd
import pytest
from scipy.stats import norm

from dec.audit.questions import balance, loops
from dec.audit.tested.single_errors import CRITICAL, DETECTABLE
from dec.calculus.dataset import Dataset


def network(rows: list[tuple[str, str, float]]) -> Dataset:
    return Dataset.from_frames(pd.DataFrame(rows, columns=["from", "to", "y"]))


def grid_of_differences(errors: dict[tuple[int, int, str], float], size: int = 4) -> tuple[Dataset, dict]:
    """Heights i + 3 j on a square grid, read exactly but for the errors; an edge is named by its tail and its way."""
    rows, number = [], {}
    for i in range(size):
        for j in range(size):
            for way, a, b in (("down", i + 1, j), ("right", i, j + 1)):
                if a < size and b < size:
                    number[i, j, way] = str(len(rows) + 1)
                    rise = (a - i) + 3 * (b - j)
                    rows.append((f"{i},{j}", f"{a},{b}", rise + errors.get((i, j, way), 0.0)))
    return network(rows), number


def test_the_constants_are_baardas():
    """0.1 % two-sided, found in 80 %: Baarda, A Testing Procedure for Use in Geodetic Networks, 1968 (from memory)."""
    assert pytest.approx(norm.ppf(1 - 0.001 / 2), abs=1e-4) == CRITICAL
    assert pytest.approx(norm.ppf(1 - 0.001 / 2) + norm.ppf(0.8), abs=3e-3) == DETECTABLE


def test_one_gross_error_is_named_first_with_its_size():
    net, number = grid_of_differences({(1, 1, "right"): 5.0})
    audit = loops(net, "y", sd=0.1)
    first = audit.suspects[0]
    assert (first.kind, first.id) == ("edge", number[1, 1, "right"])
    assert first.estimate == pytest.approx(3.0)
    statistics = [s.statistic for s in audit.suspects]
    assert statistics == sorted(statistics, reverse=True)
    assert all(s > CRITICAL for s in statistics)
    row = audit.edges.set_index("id").loc[first.id]
    assert first.statistic == row["statistic"] == pytest.approx(5.0 * row["redundancy"] ** 0.5 / 0.1)


def test_a_clean_network_has_no_suspects():
    net, _ = grid_of_differences({})
    assert loops(net, "y", sd=0.1).suspects == ()
    assert loops(net, "y").suspects == ()


def test_at_most_twenty_are_named():
    rng = np.random.default_rng(0)
    net, _ = grid_of_differences(
        {(i, j, way): rng.normal() for i in range(6) for j in range(6) for way in ("down", "right")}, 6
    )
    audit = loops(net, "y", sd=1e-3)
    assert len(audit.suspects) == 20
    assert audit.suspects[0].statistic == np.nanmax(audit.edges["statistic"])


def test_a_turned_meter_is_hinted_at_and_other_errors_are_not():
    net, number = grid_of_differences({(1, 1, "right"): -6.0})
    first = loops(net, "y", sd=0.1).suspects[0]
    assert first.id == number[1, 1, "right"]
    assert first.estimate == pytest.approx(3.0)
    assert "opposite sign" in first.hint
    net, number = grid_of_differences({(1, 1, "right"): -4.0})
    first = loops(net, "y", sd=0.1).suspects[0]
    assert first.id == number[1, 1, "right"]
    assert first.hint == "an offset of -4 would explain it"


def test_in_a_balance_parallel_meters_cannot_be_told_apart():
    rows = [("S", "A", 10.0), ("A", "B", 7.0), ("B", "A", 0.0), ("A", "C", 4.0), ("B", "T", 6.0), ("C", "T", 4.0)]
    audit = balance(network(rows), "y", sd=0.05, open=["S", "T"])
    named = {s.id: {name for _, name in s.inseparable_from} for s in audit.suspects}
    assert named["2"] == {"3"}
    assert "3" not in named
    table = audit.edges.set_index("id")
    assert table["class"]["2"] == table["class"]["3"]
    assert table["statistic"]["2"] == pytest.approx(table["statistic"]["3"])


def test_meters_made_parallel_by_an_unmetered_pipe_or_by_open_ends_cannot_be_told_apart():
    rows = [("S", "A", 10.0), ("A", "T", 4.0), ("A", "B", np.nan), ("B", "T", 5.0), ("A", "A", 1.0)]
    audit = balance(network(rows), "y", sd=0.05, open=["S", "T"])
    (suspect,) = audit.suspects
    assert (suspect.kind, suspect.id) == ("edge", "1")
    assert suspect.inseparable_from == (("edge", "2"), ("edge", "4"), ("vertex", "A+B"))


def test_round_loops_edges_in_series_cannot_be_told_apart():
    rows = [("A", "B", 1.0), ("B", "C", 1.0), ("C", "A", 3.0), ("C", "D", 1.0), ("D", "A", -3.0), ("D", "E", 9.0)]
    audit = loops(network(rows), "y", sd=0.05)
    named = {s.id: {name for _, name in s.inseparable_from} for s in audit.suspects}
    assert named["1"] == {"2"}
    assert named["3"] == set()
    assert named["4"] == {"5"}
    assert set(named) == {"1", "3", "4"}
    assert "6" not in named


def test_a_self_loop_that_does_not_read_zero_is_a_suspect_alone():
    audit = loops(network([("A", "A", 1.0), ("A", "B", 5.0)]), "y", sd=0.1)
    assert [(s.id, s.statistic, s.estimate, s.inseparable_from) for s in audit.suspects] == [
        ("1", pytest.approx(10.0), pytest.approx(0.0, abs=1e-15), ())
    ]
