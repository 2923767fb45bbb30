"""One hand-made case for each sign that an audit of a network makes: identities do not see one turned everywhere."""

import pandas as pd
import pytest

from dec.audit.digits.rounding import rounded
from dec.audit.questions import balance, loops
from dec.calculus.dataset import Dataset


def line(*values: float) -> Dataset:
    """S -> A -> T, and a row of vertices with what is asked of them."""
    rows = {"id": ["in", "out"], "from": ["S", "A"], "to": ["A", "T"], "y": list(values)}
    return Dataset.from_frames(pd.DataFrame(rows), pd.DataFrame({"id": ["S", "A", "T"]}))


def row(table: pd.DataFrame, name: str) -> pd.Series:
    return table.set_index("id").loc[name]


def test_a_fault_at_a_vertex_is_what_leaves_there_unseen():
    """10 arrive at A, 8 go on: 2 leave."""
    audit = balance(line(10, 8), "y", sd=0.1, open=["S", "T"])
    assert row(audit.vertices, "A")["fault"] == pytest.approx(2.0)
    assert row(audit.vertices, "A")["residual"] == 2.0


def test_a_fault_of_a_held_value_is_how_much_too_high_it_is():
    """S at 0, 1 up to A, 1 up to T: T lies at 2, and is held at 5."""
    audit = loops(line(1, 1), "y", sd=0.1, fixed={"S": 0, "T": 5})
    assert row(audit.vertices, "T")["fault"] == pytest.approx(3.0)
    assert row(audit.vertices, "S")["fault"] == pytest.approx(-3.0)


def test_what_is_kept_back_takes_away_and_what_is_supplied_adds():
    """10 arrive, 1 is supplied, 3 are kept in a tank: 8 go on."""
    audit = balance(line(10, 8), "y", sd=0.1, open=["S", "T"], supply={"S": 0, "A": 1, "T": 0}, storage={"A": 3})
    assert row(audit.vertices, "A")["residual"] == 0.0


def test_a_measured_supply_runs_into_its_vertex_and_a_measured_height_up_to_it():
    flows = balance(line(10, 12), "y", sd=0.1, open=["S", "T"], supply={"A": 2}, supply_sd={"A": 0.1})
    assert row(flows.table("at_vertices"), "A")["adjusted"] == pytest.approx(2.0)
    heights = loops(line(1, 1), "y", sd=0.1, fixed={"S": 0, "T": 2}, fixed_sd={"T": 0.1})
    assert row(heights.table("at_vertices"), "T")["adjusted"] == pytest.approx(2.0)


def test_a_sensor_mounted_the_other_way_counts_negative(tmp_path):
    path = tmp_path / "r.csv"
    path.write_text("edge,y,mounted\nin,-10,-1\nout,10,1\n", encoding="utf-8")
    audit = balance(line(0, 0), "y", sd=0.1, open=["S", "T"], readings=path)
    assert row(audit.edges, "in")["value"] == 10.0
    assert audit.chi_square == pytest.approx(0.0, abs=1e-12)


def test_an_offset_and_an_estimate_are_reading_minus_truth_and_truth():
    rows = {"from": ["A", "A", "A"], "to": ["B", "B", "B"], "y": [5.0, 5.0, 7.0]}
    first = loops(Dataset.from_frames(pd.DataFrame(rows)), "y", sd=0.01).suspects[0]
    assert first.id == "3"
    assert first.estimate == pytest.approx(5.0)
    assert first.hint.startswith("an offset of 2 ")


def test_a_rounded_supply_is_what_is_put_in():
    audit = balance(line(10, 12), "y", sd=0.1, open=["S", "T"], supply={"S": 0, "A": 2, "T": 0})
    found = rounded(audit, 1, supply={"S": 0, "A": 2, "T": 0})
    assert (found.edges.tolist(), found.vertices.tolist()[1]) == ([10, 12], 2)
