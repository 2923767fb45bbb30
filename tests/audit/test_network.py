"""The two network audits: conventions, verdicts, notes, and the JSON that is promised."""

import json

import numpy as np
import pandas as pd
import pytest
from scipy.stats import chi2

import dec.audit.loop_rows
from dec.audit.questions import balance, loops
from dec.calculus.complex import Complex
from dec.calculus.dataset import Dataset
from dec.errors import AccuracyError, InputError, UnsolvableError

EDGE_KEYS = ["id", "from", "to", "value", "sd", "adjusted", "adjusted_sd", "correction", "redundancy", "statistic"]
EDGE_KEYS += ["detectable", "standing"]
VERTEX_KEYS = ["id", "residual", "sd", "statistic", "potential", "potential_sd"]
LOOP_KEYS = ["id", "legs", "misclosure", "sd", "statistic", "limit", "holds", "held"]
SUSPECT_KEYS = ["kind", "id", "statistic", "estimate", "inseparable_from", "hint"]
TOP_KEYS = ["schema", "law", "holds", "inputs", "counts", "dof", "chi_square", "limit", "p_value", "edges", "vertices"]
TOP_KEYS += ["loops", "suspects", "notes", "not_shown"]


def network(rows: list[tuple], nodes: dict | None = None) -> Dataset:
    """Edges as (from, to, y), and optionally more columns."""
    frame = pd.DataFrame(rows, columns=["from", "to", "y", "sd"][: len(rows[0])])
    return Dataset.from_frames(frame, None if nodes is None else pd.DataFrame(nodes))


def chain(*texts: str) -> Dataset:
    """One pipe after another from S to T; the vertices between are closed."""
    stops = ["S", *(f"J{i}" for i in range(1, len(texts))), "T"]
    return network(list(zip(stops[:-1], stops[1:], texts, strict=True)))


def triangle(*texts: str) -> Dataset:
    return network(list(zip("ABC", "BCA", texts, strict=True)))


def test_a_residual_is_inflow_minus_outflow_plus_supply():
    net = network([("S", "J", "5.0"), ("J", "T", "3.5")], {"id": ["S", "J", "T"], "supply": ["", "0.25", ""]})
    audit = balance(net, "y", sd=0.1, supply="supply")
    assert audit.vertices["residual"].tolist()[1] == 1.75
    assert np.isnan(audit.vertices["residual"][0])
    assert audit.vertices["sd"][1] == pytest.approx(0.1 * 2**0.5)
    assert audit.edges["adjusted"].tolist() == pytest.approx([4.125, 4.375])
    assert audit.adjusted.values.tolist() == pytest.approx([4.125, 4.375])


def test_a_difference_is_head_minus_tail():
    audit = loops(
        network([("A", "B", "2.5"), ("B", "C", "1.5")], {"id": ["A", "B", "C"], "h": ["10", "", ""]}), "y", fixed="h"
    )
    assert audit.vertices["potential"].tolist() == [10.0, 12.5, 14.0]
    assert audit.edges["standing"].tolist() == ["unchecked", "unchecked"]


def test_a_misclosure_is_what_the_legs_add_up_to():
    audit = loops(triangle("1.10", "2.20", "-3.27"), "y", sd=0.01)
    loop = audit.loops[0]
    reading = dict(zip(["1", "2", "3"], [1.10, 2.20, -3.27], strict=True))
    assert loop["misclosure"] == pytest.approx(sum(sign * reading[name] for name, sign in loop["legs"]))
    assert abs(loop["misclosure"]) == 0.03
    assert audit.edges["correction"].tolist() == pytest.approx([-0.01, -0.01, -0.01])


@pytest.mark.parametrize(
    ("texts", "holds"),
    [
        (("0.1", "0.1"), True),
        (("0.3", "0.30"), True),
        (("0.3", "0.31"), False),
        (("1e-3", "0.001"), True),
        (("123456789012345678901234567890.1", "123456789012345678901234567890.1"), True),
        (("123456789012345678901234567890.1", "123456789012345678901234567890.2"), False),
        (("9223372036854775807", "9223372036854775807"), True),
        (("9223372036854775807", "9223372036854775808"), False),
        (("0.00000000000000000001", "0"), False),
    ],
)
def test_without_sd_and_limit_the_decimals_as_written_decide(texts: tuple[str, ...], holds: bool):
    audit = balance(chain(*texts), "y", open=["S", "T"])
    assert (audit.holds, audit.limit, audit.chi_square, audit.p_value) == (holds, 0.0, None, None)
    back = loops(network([("A", "B", texts[0]), ("A", "B", texts[1])]), "y")
    assert back.holds is holds
    assert back.loops[0]["holds"] is holds


def test_a_tenth_and_two_tenths_are_three_tenths():
    rows = [("S", "J", "0.1"), ("S", "J", "0.2"), ("J", "T", "0.3")]
    assert balance(network(rows), "y", open=["S", "T"]).holds is True
    rows[2] = ("J", "T", "0.30000000000000001")
    assert balance(network(rows), "y", open=["S", "T"]).holds is False
    assert loops(triangle("0.1", "0.2", "-0.3"), "y").holds is True
    floats = network([("S", "J", 0.1), ("S", "J", 0.2), ("J", "T", 0.3)])
    assert balance(floats, "y", open=["S", "T"]).holds is True


def test_held_potentials_and_supplies_are_exact_too():
    nodes = {"id": ["A", "B"], "h": ["0.1", "0.3"]}
    assert loops(network([("A", "B", "0.2")], nodes), "y", fixed="h").holds is True
    assert loops(network([("A", "B", "0.2")]), "y", fixed={"A": 10**20, "B": 10**20 + 1}).holds is False
    assert loops(network([("A", "B", "1")]), "y", fixed={"A": 10**20, "B": 10**20 + 1}).holds is True
    assert balance(network([("A", "B", "0.2")]), "y", supply={"A": "0.2", "B": "-0.2"}).holds is True


@pytest.mark.parametrize(("limit", "holds"), [(0.3, True), ("0.3", True), (0.29, False), (0, False), (1e300, True)])
def test_a_limit_decides_where_no_sd_is_given(limit, holds: bool):
    audit = balance(chain("1.5", "1.2"), "y", open=["S", "T"], limit=limit)
    assert (audit.holds, audit.limit, audit.chi_square) == (holds, float(limit), None)
    turned = loops(triangle("0.1", "0.1", "0.1"), "y", limit=limit)
    assert (turned.holds, turned.loops[0]["limit"], turned.loops[0]["holds"]) == (holds, float(limit), holds)


@pytest.mark.parametrize("alpha", [0.05, 0.01, 0.3])
def test_with_sd_the_chi_square_test_decides(alpha: float):
    # mean 1.2, so the corrections are -0.3, 0, 0.3
    just = (2 * 0.3**2 / chi2.ppf(1 - alpha, 2)) ** 0.5
    for sd in (0.05, 0.2, just * (1 - 1e-6), just * (1 + 1e-6)):
        audit = balance(chain("1.5", "1.2", "0.9"), "y", sd=sd, open=["S", "T"], alpha=alpha)
        assert audit.dof == 2
        assert audit.chi_square == pytest.approx(2 * 0.3**2 / sd**2)
        assert audit.limit == pytest.approx(chi2.ppf(1 - alpha, 2), rel=1e-12)
        assert audit.p_value == pytest.approx(chi2.sf(audit.chi_square, 2), rel=1e-9)
        assert audit.holds == (sd > just)


def test_nothing_redundant_is_no_verdict_and_no_exception():
    for audit in (
        balance(chain("1", "2"), "y", sd=0.1, open=["S", "J1", "T"]),
        balance(chain("1", ""), "y", open=["S", "T"], limit=3),
        balance(chain("", ""), "y", sd="2%", open=["S", "T"]),
        loops(chain("1", "2"), "y", sd=0.1),
        loops(triangle("", "", ""), "y", sd=0.1),
        loops(chain("1"), "y"),
    ):
        assert (audit.dof, audit.holds, audit.p_value, audit.chi_square) == (0, None, None, 0.0)
        assert "nothing can be checked" in repr(audit)
        assert json.loads(audit.to_json())["holds"] is None


@pytest.mark.parametrize(
    ("options", "says"),
    [
        ({"sd": 0.1, "limit": 1}, "give either standard deviations or a limit, not both"),
        ({"alpha": 0}, "alpha must lie between 0 and 1, got 0"),
        ({"alpha": 1}, "alpha must lie between 0 and 1, got 1"),
        ({"alpha": np.nan}, "alpha must lie between 0 and 1, got nan"),
        ({"alpha": "x"}, "alpha must hold real numbers"),
        ({"limit": -1}, "limit must be finite and not negative, got -1"),
        ({"limit": np.nan}, "limit must be finite and not negative, got nan"),
        ({"limit": "5%"}, "on a network the limit must be a number in the unit of the readings, got '5%'"),
        ({"limit": "1_0"}, "on a network the limit must be a number"),
        ({"limit": [1]}, "limit must have 0 axes"),
        ({"field": "U"}, "give either the column of a network (value) or the field of a mesh (field)"),
    ],
)
def test_questions_that_cannot_be_answered_are_refused(options: dict, says: str):
    for ask in (balance, loops):
        with pytest.raises(InputError) as caught:
            ask(chain("1", "2"), "y", **options)
        assert says in str(caught.value)
    with pytest.raises(InputError, match="data must be a Dataset, got list"):
        balance([], "y")
    with pytest.raises(InputError, match="give either the column"):
        loops(chain("1"))


def test_supplies_that_do_not_add_up_name_their_part_and_their_surplus_exactly():
    rows = [("A", "B", "1"), ("C", "D", "2"), ("D", "E", "2")]
    supply = {"A": 1, "B": -1, "C": "12345678901234567890.5", "D": 0, "E": 0}
    with pytest.raises(UnsolvableError) as caught:
        balance(network(rows), "y", sd=1, supply=supply)
    assert str(caught.value) == (
        "part 2 (C, D, E; 3 vertices) has no open vertex, yet its supplies add up to 12345678901234567890.5, not 0; "
        "name an open vertex or correct a supply"
    )
    assert balance(network(rows), "y", sd=1, supply=supply, open=["E"]).dof == 3


def test_a_vertex_without_supply_is_taken_as_open_and_a_note_says_so():
    audit = balance(chain("1", "2"), "y", sd=1, supply={"J1": 0})
    assert audit.notes[0] == "2 vertices without a supply value taken as open (S, T); write 0 where nothing is put in"
    assert audit.asked["open"] == ["S", "T"]
    told = balance(chain("1", "2"), "y", sd=1, supply={"J1": 0}, open=["S", "T"])
    assert not any("taken as open" in note for note in told.notes)


def test_parts_without_a_held_potential_are_named():
    rows = [("A", "B", "1"), ("C", "D", "2"), ("E", "F", "")]
    notes = loops(network(rows), "y", sd=1, fixed={"A": 5}).notes
    assert (
        "3 parts without a fixed potential: only differences inside count there, measured from C, E, F, taken as 0"
        in notes
    )
    assert any(note.startswith("no potential is fixed: in each part") for note in loops(network(rows), "y").notes)
    held = loops(network(rows[:1]), "y", sd=1, fixed={"A": 5}).notes
    assert not any("fixed" in note for note in held)


def test_self_loops_unchecked_and_unknown_edges_are_told():
    rows = [("A", "A", "1"), ("A", "B", "2"), ("B", "C", ""), ("C", "B", "")]
    notes = balance(network(rows), "y", sd=1, open=["A", "C"]).notes
    assert "1 edge with both ends at one vertex (1); no balance sees such an edge" in notes
    assert "2 edges unchecked: measured, but nothing can contradict them (1, 2)" in notes
    assert "2 edges unknown: not measured, and their values do not follow from the others (3, 4)" in notes
    turned = loops(network(rows), "y", sd=1).notes
    assert "1 edge with both ends at one vertex (1); such an edge must read zero" in turned


def test_groups_that_balance_only_together_are_listed_by_their_first_names():
    rows = [("S", "A", "7"), *((f"{a}", f"{b}", "") for a, b in zip("ABCDE", "BCDEF", strict=True)), ("F", "T", "5")]
    table = balance(network(rows), "y", sd=1, open=["S", "T"]).vertices
    assert table["id"].tolist()[-1] == "A+B+C+D+... (6 in all)"
    assert table["residual"].tolist()[-1] == 2.0
    assert table["residual"][:-1].isna().all()


def test_standard_deviations_too_far_apart_are_refused_and_not_answered_wrongly():
    rows = [("S", "J", "1", "1e-9"), ("J", "T", "1", "1e3")]
    with pytest.raises(AccuracyError, match=r"the largest is 1\.0e\+12 times the smallest"):
        balance(network(rows), "y", sd="sd", open=["S", "T"])


def test_the_json_has_every_promised_key_and_plain_values():
    rows = [("S", "J", "5.0"), ("J", "T", "9.0"), ("J", "T", ""), ("J", "J", "1"), ("T", "S", "-2")]
    for audit in (
        balance(network(rows), "y", sd=0.1, open=["S", "T"], unit="L/s"),
        balance(network(rows), "y"),
        loops(network(rows), "y", sd=0.1, fixed={"S": 1}),
        loops(network(rows), "y", limit=2),
        loops(chain("1"), "y"),
    ):
        found = json.loads(audit.to_json(), parse_constant=pytest.fail)
        assert [key for key in found if key in TOP_KEYS] == TOP_KEYS
        assert found["schema"] == "dec.audit/1"
        assert set(found["counts"]) == {"vertices", "edges", "components", "loops", "measured"}
        for name, keys in (
            ("edges", EDGE_KEYS),
            ("vertices", VERTEX_KEYS),
            ("loops", LOOP_KEYS),
            ("suspects", SUSPECT_KEYS),
        ):
            assert all(list(row)[: len(keys)] == keys for row in found[name])
        assert list(audit.edges) == [*EDGE_KEYS, "class"]
        more = ["fault", "fault_sd", "fault_statistic", "class", "detectable", "limit", "holds", "group"]
        assert list(audit.vertices) == [*VERTEX_KEYS, *more]
        assert [row["id"] for row in found["edges"]] == audit.edges["id"].tolist()
        assert all(isinstance(row[key], str) for row in found["edges"] for key in ("id", "from", "to", "standing"))
        assert all(leg[1] in (1, -1) and isinstance(leg[0], str) for loop in found["loops"] for leg in loop["legs"])
    assert found["inputs"] == []


def test_figures_that_need_sd_are_null_without_it():
    found = json.loads(balance(chain("1", "2"), "y", open=["S", "T"]).to_json())
    for key in ("sd", "adjusted_sd", "statistic", "detectable"):
        assert [row[key] for row in found["edges"]] == [None, None]
    assert [row["adjusted"] for row in found["edges"]] == pytest.approx([1.5, 1.5])
    assert any("the same weight" in note for note in found["notes"])


def test_the_same_question_gives_the_same_bytes():
    net = network([("A", "B", "1.5"), ("B", "C", "1.25"), ("A", "C", "2.5"), ("A", "C", "")])
    assert loops(net, "y", sd="3%").to_json() == loops(net, "y", sd="3%").to_json()
    assert balance(net, "y", sd=1, open={"A", "C"}).to_json() == balance(net, "y", sd=1, open=["C", "A"]).to_json()


def test_ids_are_text_everywhere_and_hostile_ones_do_no_harm_in_html():
    ids = ["<script>alert(1)</script>", "\"&'", "=cmd"]
    frame = pd.DataFrame({"id": ids[::-1], "from": ids, "to": [*ids[1:], ids[0]], "y": ["1", "1", "50"]})
    audit = loops(Dataset.from_frames(frame), "y", sd=1)
    assert audit.suspects[0].id in ids
    html = audit._repr_html_()
    assert "<script" not in html
    assert html.count("<tr>") == 2 + len(audit.suspects[:3])
    assert json.loads(audit.to_json())["edges"][0]["from"] == ids[0]
    whole = Dataset(
        Complex.from_edges([0, 1], [1, 0], vertex_ids=[7, ("a", 1)]), {1: network([("A", "B", 1)] * 2).columns[1]}
    )
    assert loops(whole, "y", sd=1).edges["from"].tolist() == ["7", "('a', 1)"]


def test_repr_tells_law_verdict_checks_and_figures():
    assert repr(loops(triangle("1", "1", "-2"), "y", sd=1)) == (
        "<Audit loop: holds; 1 independent check, chi-square 0, limit 3.841>"
    )
    assert repr(balance(chain("1", "2"), "y", open=["S", "T"])) == (
        "<Audit balance: does not hold; 1 independent check, limit 0>"
    )


def test_a_table_that_no_audit_has_is_refused():
    audit = loops(triangle("1", "1", "-2"), "y")
    assert audit.table("edges").equals(audit.edges)
    assert audit.table("holes").empty
    with pytest.raises(InputError, match=r"table must be one of edges, vertices, .* got 'edge'"):
        audit.table("edge")


def test_loops_come_worst_first_and_a_long_list_is_cut_but_checked_whole(monkeypatch):
    rows = [("A", "B", str(value)) for value in (0, 1, -9, 4, 0, 2)]
    audit = loops(network(rows), "y", sd=1)
    assert [abs(loop["misclosure"]) for loop in audit.loops] == [9, 4, 2, 1, 0]
    monkeypatch.setattr(dec.audit.loop_rows, "_MOST_LEGS", 5)
    cut = loops(network(rows), "y", sd=1)
    assert [abs(loop["misclosure"]) for loop in cut.loops] == [9, 4]
    assert "of 5 loops the 2 with the largest misclosures are listed; all were checked" in cut.notes
    assert cut.chi_square == audit.chi_square
    monkeypatch.setattr(dec.audit.loop_rows, "_MOST_LOOPS", 3)
    monkeypatch.setattr(dec.audit.loop_rows, "_MOST_LEGS", 1)
    assert len(loops(network(rows), "y", sd=1).loops) == 1


def test_a_network_without_edges_or_without_vertices_is_an_answer_too():
    columns = network([("A", "B", "1")]).columns[1]
    empty = {name: type(column)(name, column.cells[:0]) for name, column in columns.items()}
    for n in (0, 2):
        data = Dataset(Complex.from_edges([], [], n), {1: empty})
        for audit in (balance(data, "y", sd=1), loops(data, "y")):
            assert (audit.dof, audit.holds, len(audit.edges)) == (0, None, 0)
            assert json.loads(audit.to_json())["edges"] == []
