"""The verdict of each part against the same part audited alone."""

import numpy as np
import pandas as pd
import pytest

from dec.audit.questions import balance, loops
from dec.calculus.dataset import Dataset

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
