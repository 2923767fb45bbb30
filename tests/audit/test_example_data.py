"""The made-up town, levelling net, ledger and clocks give the figures that their README states."""

from pathlib import Path

import pytest

from dec.audit.questions import balance, loops
from dec.files import read

DATA = Path(__file__).parents[2] / "examples" / "data"


@pytest.fixture(scope="module")
def town():
    net = read(DATA / "town" / "pipes.csv", DATA / "town" / "nodes.csv")
    return balance(net, "flow", sd="sd", open="open", supply="demand", unit="L/s")


def names(suspect) -> set[str]:
    return {name for _, name in suspect.inseparable_from}


def test_the_reversed_meter_of_the_town_is_first_and_hinted_at(town):
    assert town.counts == {"vertices": 40, "edges": 61, "components": 1, "loops": 22, "measured": 54}
    assert (town.holds, town.dof) == (False, 31)
    assert town.chi_square == pytest.approx(33758, abs=0.5)
    assert town.limit == pytest.approx(44.99, abs=0.005)
    first, second = town.suspects[0], next(s for s in town.suspects[1:] if s.kind == "edge")
    assert first.id == "P21"
    assert first.statistic == pytest.approx(183.7, abs=0.05)
    assert second.statistic == pytest.approx(72.2, abs=0.05)
    assert first.estimate == pytest.approx(14.34, abs=0.5)
    assert "opposite sign" in first.hint
    assert first.outcomes["turned"]["holds"]
    assert [entry["id"] for entry in town.extra["errors"]["found"]] == ["P21"]


def test_what_the_town_can_and_cannot_check(town):
    standing = town.edges.set_index("id")["standing"]
    for word, expected in (
        ("inferred", {"P03", "P15", "P19", "P53"}),
        ("unknown", {"P43", "P45", "P47"}),
        ("unchecked", {"P17"}),
    ):
        assert set(standing[standing == word].index) == expected
    twins = {s.id: names(s) for s in town.suspects}
    for one, other in (("P22", "P23"), ("P23", "P22")):
        if one in twins:
            assert other in twins[one]
    assert {"P22", "P23"} & set(twins)
    table = town.edges
    assert table["redundancy"].sum() == pytest.approx(31, abs=1e-10)


def test_the_town_with_the_meter_turned_holds():
    pipes = (DATA / "town" / "pipes.csv").read_text()
    assert "-14.34" in pipes
    net = read(DATA / "town" / "pipes.csv", DATA / "town" / "nodes.csv")
    column = net.column("flow", 1)
    cells = column.cells.copy()
    cells[cells == "-14.34"] = "14.34"
    turned = type(net)(net.complex, {0: net.columns[0], 1: {**net.columns[1], "flow": type(column)("flow", cells)}})
    audit = balance(turned, "flow", sd="sd", open="open", supply="demand")
    assert audit.holds is True
    assert audit.chi_square == pytest.approx(29.48, abs=0.005)
    assert audit.edges["statistic"].max() == pytest.approx(2.45, abs=0.005)
    assert audit.suspects == ()


def test_the_blunder_in_the_levelling_net_is_first():
    net = read(DATA / "levelling" / "lines.csv", DATA / "levelling" / "marks.csv")
    audit = loops(net, "dh", sd="sd", fixed="height")
    assert (audit.holds, audit.dof) == (False, 8)
    assert audit.chi_square == pytest.approx(461.9, abs=0.05)
    assert audit.limit == pytest.approx(15.51, abs=0.005)
    assert audit.suspects[0].id == "L07"
    assert audit.suspects[0].statistic == pytest.approx(21.4, abs=0.05)
    assert audit.suspects[1].statistic == pytest.approx(8.9, abs=0.05)
    assert audit.suspects[0].estimate == pytest.approx(-2.1262, abs=0.005)
    standing = audit.edges.set_index("id")["standing"]
    assert standing[standing == "unchecked"].index.tolist() == ["L16"]
    potential = audit.vertices.set_index("id")["potential"]
    assert (potential["BM1"], potential["BM2"]) == (214.837, 231.492)


def test_the_levelling_net_without_the_blunder_holds_and_names_its_inseparable_lines():
    net = read(DATA / "levelling" / "lines_clean.csv", DATA / "levelling" / "marks.csv")
    audit = loops(net, "dh", sd="sd", fixed="height")
    assert audit.holds is True
    assert audit.chi_square == pytest.approx(3.53, abs=0.005)
    column = net.column("dh", 1)
    for spoilt, partner in (("L10", {"L11"}), ("L11", {"L10"}), ("L12", {"L13"}), ("L13", {"L12"}), ("L03", set())):
        cells = column.cells.copy()
        at = net.complex.edge_ids.tolist().index(spoilt)
        cells[at] = str(float(cells[at]) + 1)
        wrong = type(net)(net.complex, {0: net.columns[0], 1: {**net.columns[1], "dh": type(column)("dh", cells)}})
        alike = [{s.id} | names(s) for s in loops(wrong, "dh", sd="sd", fixed="height").suspects]
        assert [group for group in alike if spoilt in group] == [{spoilt} | partner]


def test_the_ledger_balances_to_the_cent_though_floats_do_not():
    net = read(DATA / "ledger" / "intercompany.csv", DATA / "ledger" / "companies.csv")
    audit = balance(net, "amount", supply="net")
    assert (audit.holds, audit.dof) == (True, 5)
    assert audit.vertices["residual"].tolist() == [0.0] * 6
    left = dict.fromkeys(net.complex.vertex_ids, 0.0)
    for tail, head, amount in zip(net.complex.tail, net.complex.head, net.column("amount", 1).numbers(), strict=True):
        left[net.complex.vertex_ids[head]] += amount
        left[net.complex.vertex_ids[tail]] -= amount
    for name, put_in in zip(net.complex.vertex_ids, net.column("net", 0).numbers(), strict=True):
        left[name] += put_in
    assert 1e-11 < abs(left["Birch Freight"]) < 1e-10


def test_the_clocks_close():
    audit = loops(read(DATA / "clocks.csv"), "offset_ns", sd="sd_ns", unit="ns")
    assert (audit.holds, audit.dof) == (True, 4)
    assert audit.chi_square == pytest.approx(0.80, abs=0.005)
    assert audit.limit == pytest.approx(9.49, abs=0.005)
    assert audit.asked["unit"] == "ns"
