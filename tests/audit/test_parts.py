"""The verdict of each part against the same part audited alone."""

import numpy as np
import pandas as pd
import pytest

from dec.audit.questions import balance, loops
from dec.calculus.dataset import Dataset
from dec.report.suspicion import part_sentences

from .small_networks import Case, difference_case, flow_case


def alone(case: Case, members: list[int], law: str):
    """The audit of one part, made of nothing but its rows."""
    inside = [e for e, (tail, _) in enumerate(case.ends) if tail in members]
    nodes = {name: [column.cells[v] for v in members] for name, column in case.net.columns[0].items()}
    columns = case.net.columns[1]
    edges = pd.DataFrame({
        "id": [f"e{e}" for e in inside], "from": [f"v{case.ends[e][0]}" for e in inside],
        "to": [f"v{case.ends[e][1]}" for e in inside], "y": [columns["y"].cells[e] for e in inside],
        "sd": [columns["sd"].cells[e] for e in inside],
    }, dtype=object)  # fmt: skip
    net = Dataset.from_frames(edges, pd.DataFrame({"id": [f"v{v}" for v in members], **nodes}))
    if law == "balance":
        opened = [f"v{v}" for v in case.chosen if v in members]
        return balance(net, "y", sd="sd", open=opened, supply=None if case.numbers is None else "supply")
    return loops(net, "y", sd="sd", fixed="height")


@pytest.mark.parametrize("law", ["balance", "loop"])
def test_every_part_is_as_if_it_were_alone_and_all_add_up(law: str):
    several = 0
    for seed in range(150):
        case = (flow_case if law == "balance" else difference_case)(seed)
        if law == "balance":
            supply = None if case.numbers is None else "supply"
            audit = balance(case.net, "y", sd="sd", open=case.names, supply=supply)
        else:
            audit = loops(case.net, "y", sd="sd", fixed="height")
        rows, K = audit.extra["parts"], case.net.complex
        assert (rows is None) == (K.n_components < 2)
        if rows is None:
            continue
        several += 1
        assert sum(row["dof"] for row in rows) == audit.dof
        assert sum(row["chi_square"] for row in rows) == pytest.approx(audit.chi_square, rel=1e-9, abs=1e-9)
        for row in rows:
            members = np.flatnonzero(K.component_labels == K.component_labels[int(row["part"][1:])]).tolist()
            assert row["part"] == f"v{members[0]}"
            assert row["vertices"] == len(members)
            if row["edges"] == 0:
                assert (row["dof"], row["holds"]) == (0, None)
                continue
            one = alone(case, members, law)
            assert (row["dof"], row["holds"]) == (one.dof, one.holds)
            if one.dof:
                assert row["chi_square"] == pytest.approx(one.chi_square, rel=1e-9, abs=1e-9)
                assert row["limit"] == pytest.approx(one.limit)
                assert row["p_value"] == pytest.approx(one.p_value, abs=1e-12)
    assert several > 40


def test_the_worst_part_comes_first_and_each_says_what_it_is_measured_from():
    rows = [("A", "B", 1.0), ("B", "A", -1.0), ("C", "D", 1.0), ("D", "C", -9.0), ("E", "F", 1.0)]
    net = Dataset.from_frames(pd.DataFrame(rows, columns=["from", "to", "y"]))
    parts = loops(net, "y", sd=0.1, fixed={"A": 5.0}).extra["parts"]
    assert [(p["part"], p["holds"], p["gauge"]) for p in parts] == [
        ("C", False, "C"), ("A", True, None), ("E", None, "E"),
    ]  # fmt: skip
    plain = loops(net, "y", fixed={"A": 5.0}).extra["parts"]
    assert {p["part"]: (p["dof"], p["holds"]) for p in plain} == {"A": (1, None), "C": (1, None), "E": (0, None)}


def test_parts_that_share_an_error_are_not_judged_apart():
    rows = [("A", "B", 1.0, "crew"), ("B", "A", -1.1, "crew"), ("C", "D", 1.0, "crew"), ("D", "C", -1.2, "")]
    net = Dataset.from_frames(pd.DataFrame(rows, columns=["from", "to", "y", "who"]))
    assert loops(net, "y", sd=0.1, common="who", common_sd=0.1).extra["parts"] is None


@pytest.mark.parametrize("sd", ["sd", "10%"])
def test_an_edge_without_reading_and_sd_leaves_the_verdict_of_its_part(sd: str):
    """By hand: a misses b by 0.2 with variances of 0.01 each, so chi-square 2; an empty cell has no sd at all."""
    rows = [("A", "B", "1.0", "0.1"), ("B", "A", "-1.2", "0.1"), ("A", "B", "", ""), ("C", "D", "1", "0.1")]
    net = Dataset.from_frames(pd.DataFrame(rows, columns=["from", "to", "y", "sd"]))
    part = loops(net, "y", sd=sd).extra["parts"][0]
    variance = 0.02 if sd == "sd" else 0.1**2 + 0.12**2
    assert (part["part"], part["dof"], part["holds"]) == ("A", 1, True)
    assert part["chi_square"] == pytest.approx(0.2**2 / variance)
    flows = balance(net, "y", sd=sd, open=["C", "D"]).extra["parts"]
    assert all(np.isfinite(row["chi_square"]) for row in flows)


def test_a_part_is_said_in_numbers_that_fit():
    rows = [("A", "B", 1.0), ("B", "A", -1.0), ("C", "C", 0.0)]
    net = Dataset.from_frames(pd.DataFrame(rows, columns=["from", "to", "y"]))
    said = part_sentences(loops(net, "y", sd=0.1).to_dict())
    assert [line.partition(":")[0] for line in said] == ["A and 1 more", "C"]
    assert all(line.endswith(", 1 check") for line in said)


def test_readings_of_one_edge_check_each_other_in_the_part_where_they_lie():
    """By hand: 1.0 and 1.4 on a line, sd 0.1, are 0.2 from their mean: 2 * 0.04 / 0.01 = 8; the mean fits its loop."""
    lines = pd.DataFrame({"id": list("abcd"), "from": list("PQXY"), "to": list("QPYX")})
    table = pd.DataFrame({"edge": list("aabcd"), "y": [1.0, 1.4, -1.2, 3.0, -3.1]})
    audit = loops(Dataset.from_frames(lines), "y", sd=0.1, readings=table)
    found = {row["part"]: (row["dof"], round(row["chi_square"], 9)) for row in audit.extra["parts"]}
    assert found == {"P": (2, 8.0), "X": (1, 0.5)}
    assert (audit.dof, audit.chi_square) == (3, pytest.approx(8.5))
