"""What a first user of measured networks ran into: options passed over, edges that check themselves, limits, words."""

from fractions import Fraction
from io import StringIO
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from rich.console import Console

from dec.audit.condition import check
from dec.audit.given.presets import PRESETS
from dec.audit.output import result_bytes, vertex_bytes
from dec.audit.questions import balance, loops
from dec.calculus.complex import Complex
from dec.calculus.dataset import Dataset, Field
from dec.errors import InputError
from dec.files import read
from dec.report.terminal import audit_view, check_view, presets_view
from dec.report.wording import checked_sentence, verdict_sentence
from dec.topology import smith

PIPES = pd.DataFrame({"id": ["in", "a", "b"], "from": ["S", "J", "J"], "to": ["J", "T", "U"],
                      "flow": ["5.2", "3.0", "2.1"], "bench": ["x", "x", ""]})  # fmt: skip
LINES = pd.DataFrame({"id": ["l1", "l2", "l3"], "from": ["A", "B", "C"], "to": ["B", "C", "A"],
                      "dh": ["1.10", "2.20", "-3.27"], "km": ["1", "1", "2"]})  # fmt: skip
ENDS = ("S", "T", "U")
LEVELLING = {"preset": "levelling-12mm", "length": "km", "length_unit": "km", "unit": "m"}
COUNTS = {"preset": "counts-geh5", "unit": "veh/h"}


def on_pipes(**options):
    return balance(Dataset.from_frames(PIPES), "flow", **{"open": ENDS, **options})


def on_lines(**options):
    return loops(Dataset.from_frames(LINES), "dh", **options)


def shown(view) -> str:
    """What a view prints, blanks and line ends as one blank."""
    page = StringIO()
    for part in view:
        Console(file=page, width=200, markup=False).print(part)
    return " ".join(page.getvalue().split())


@pytest.mark.parametrize(
    ("options", "says"),
    [
        ({"limit": 1, "sidak": True}, "sidak belongs to tests with standard deviations (sd), and limit decides here"),
        ({"limit": 1, "robust": True}, "robust belongs to tests with standard deviations (sd), and limit decides here"),
        ({"robust": True}, "robust belongs to tests with standard deviations (sd), and none are given"),
        ({"limit": 1, "figures": "all"}, "figures belongs to tests with standard deviations"),
        ({"limit": 1, "alpha": 0.01}, "alpha belongs to tests with standard deviations (sd), and limit decides here"),
        ({**COUNTS, "alpha": 0.01}, "alpha belongs to tests with standard deviations (sd), and preset decides here"),
        ({**COUNTS, "sidak": True}, "sidak belongs to tests with standard deviations (sd), and preset decides here"),
        ({"common": "bench", "sd": 1}, "common names groups that share an error, and common_sd, how large it is, is "),
        ({"common_sd": 1, "sd": 1}, "common_sd is the size of an error that groups share, and common, the column of "),
        ({**COUNTS, "common": "bench", "common_sd": 1}, "common errors (common) need standard deviations"),
        ({"storage_sd": 1, "sd": 1}, "storage_sd says how well storage is known, but there is no storage; give both"),
        ({**COUNTS, "sd": 1}, "leave sd and limit away beside 'counts-geh5'"),
        ({**COUNTS, "transition": 2}, "transition belongs to presets of meter classes; leave it out"),
        ({"transition": 2}, "transition belongs to a preset (preset), and none is named"),
        ({"preset": "water-meter-class2"}, "needs the transitional flow of the meters; give transition"),
        ({"preset": "levelling-4mm"}, "preset levelling-4mm sets a loop limit; use dec loops (dec.loops) for it"),
    ],
)
def test_what_a_balance_would_pass_over_in_silence_is_refused(options, says):
    with pytest.raises(InputError) as caught:
        on_pipes(**options)
    assert says in str(caught.value)


@pytest.mark.parametrize(
    ("options", "says"),
    [
        ({**LEVELLING, "robust": True}, "robust belongs to tests with standard deviations (sd), and preset decides"),
        ({"preset": "gas-meter-class1", "transition": 1}, "meter classes are for flows; use dec balance"),
        ({"preset": "counts-geh3"}, "preset counts-geh3 sets a vertex limit; use dec balance (dec.balance) for it"),
        ({**LEVELLING, "unit": None}, "preset levelling-12mm needs the lengths of the lines and both units; give unit"),
        ({**LEVELLING, "length_unit": None}, "give length_unit, their unit; none is guessed"),
        ({"length": "km"}, "length belongs to a preset (preset), and none is named"),
    ],
)
def test_what_an_audit_of_loops_would_pass_over_in_silence_is_refused(options, says):
    with pytest.raises(InputError) as caught:
        on_lines(**options)
    assert says in str(caught.value)


@pytest.mark.parametrize("option", [{"figures": "all"}, {"alpha": 0.01}])
def test_words_of_a_network_are_refused_beside_a_field(option):
    square = Complex.from_faces([[0, 1, 2, 3]], points=[[0, 0], [1, 0], [1, 1], [0, 1]])
    field = Field("u", "vertices", np.ones((4, 2)))
    part = Dataset(square, fields={"u": {"vertices": field}})
    with pytest.raises(InputError, match=f"{next(iter(option))} belongs to a network column"):
        balance(part, field="u", **option)
    with pytest.raises(InputError, match=r"this is a mesh; give field \(--field\) instead \(u\)"):
        balance(part, "u")


def test_the_table_of_an_audit_of_readings_needs_no_column_of_the_edges():
    table = pd.DataFrame({"edge": ["in", "a", "b"], "flux": ["5.2", "-3.0", "2100"], "mounted": ["", "-1", ""],
                          "factor": ["", "", "0.001"]})  # fmt: skip
    audit = balance(Dataset.from_frames(PIPES), "flux", 0.1, ENDS, readings=table)
    rows = result_bytes(audit, "a.csv").decode().splitlines()
    assert rows[0].startswith("id,from,to,flux,sd,adjusted,")
    assert [row.split(",")[3] for row in rows[1:]] == ["5.2", "3.0", "2.1"]
    raw = balance(Dataset.from_frames(PIPES), "flow", 0.1, ENDS, readings=table.rename(columns={"flux": "flow"}))
    assert result_bytes(raw, "a.csv").decode().replace("flow", "flux").splitlines() == rows


def test_an_edge_with_several_readings_checks_itself():
    net = Dataset.from_frames(pd.DataFrame({"id": ["p", "q"], "from": ["S", "J"], "to": ["J", "T"]}))
    table = pd.DataFrame({"edge": ["p", "p"], "sensor": ["S1", "S2"], "flow": ["5", "7"]})
    audit = balance(net, "flow", 0.1, ("S", "T"), readings=table)
    assert (audit.dof, audit.holds) == (1, False)  # (7 - 5)^2 / (2 * 0.1^2) = 200, by hand
    assert audit.chi_square == pytest.approx(200)
    assert audit.edges["standing"].tolist() == ["checked", "inferred"]
    assert audit.edges["class"].tolist() == [0, 0]
    said = checked_sentence(audit.to_dict())
    assert said.startswith("1 of 1 measured edge, which has 2 readings")
    assert "unchecked" not in " ".join((said, *audit.notes, *audit.not_shown))
    assert "detectable" not in " ".join(audit.not_shown)  # no single edge has such a size
    assert [s.inseparable_from for s in audit.suspects] == [(("reading", "S2"),), (("reading", "S1"),)]
    one = balance(net, "flow", 0.1, ("S", "T"), readings=table[:1])
    assert one.edges["standing"].tolist() == ["unchecked", "inferred"]
    assert "1 edge unchecked: measured, but nothing can contradict it (p)" in one.notes


def test_what_if_names_the_edge_of_a_sensor_and_the_close_names_of_a_slip():
    table = pd.DataFrame({"edge": ["in", "a", "b"], "sensor": ["M1", "M2", "M3"], "flow": ["5.2", "3.0", "2.1"]})
    audit = on_pipes(sd=0.1, readings=table)
    with pytest.raises(InputError, match=r"'M2', which is a sensor on edge 'a'; what-if goes by edge: name 'a'"):
        audit.what_if(turned=["M2"])
    with pytest.raises(InputError, match=r"'inn', which is no edge; close names: 'in'"):
        audit.what_if(left_out=["inn"])
    assert audit.what_if(left_out=["a"]).dof == 0


@pytest.mark.parametrize("transition", ["1.6+0.02", "Q2+0.02"])
def test_a_floor_behind_the_transitional_flow_makes_a_reading_of_0_usable(transition):
    frame = pd.DataFrame({"from": ["S", "J"], "to": ["J", "T"], "flow": ["0", "2.0"], "Q2": ["1.6", "1.6"]})
    net, asked = Dataset.from_frames(frame), {"preset": "water-meter-class2", "open": ("S", "T")}
    audit = balance(net, "flow", transition=transition, **asked)
    # OIML R 49-1, class 2 (from memory): 2 % from Q2 on, over the root of 3
    assert audit.edges["sd"].tolist() == pytest.approx([0.02, 0.02 + 2.0 * 0.02 / np.sqrt(3)])
    with pytest.raises(InputError, match=r"give a floor beside the transitional flow, as in 1.6\+0.02 or COL\+0.02"):
        balance(net, "flow", transition=transition.partition("+")[0], **asked)


def test_a_factor_may_be_a_fraction_and_is_taken_exactly():
    net = Dataset.from_frames(PIPES)
    table = pd.DataFrame({"edge": ["in", "a", "b"], "flow": ["18.36", "3.0", "-2.1"], "factor": ["1/3.6", "", "1/-1"]})
    exact = balance(net, "flow", open=ENDS, readings=table)
    assert exact.holds  # 18.36 / 3.6 is 5.1 to the last digit, 5.1 - 3.0 - 2.1 is 0
    assert exact.edges["value"].tolist() == [5.1, 3.0, 2.1]
    rounded = table.assign(factor=["0.2777777777777778", "", "-1"])
    assert not balance(net, "flow", open=ENDS, readings=rounded).holds
    third = balance(net, "flow", open=ENDS, readings=table.assign(factor=["1/3", "", "-1"]))
    assert third.edges["value"][0] == float(Fraction("18.36") / 3)
    endless = balance(net, "flow", open=ENDS, readings=table.assign(factor=["1/7", "", "-1"]))
    assert endless.edges["value"][0] == float(Fraction("18.36") / 7)
    for odd in ("1/0", "1/2/3", "/3", "1/", "1/x", "0/3"):
        with pytest.raises(InputError, match="readings row 0: factor must be a number other than 0"):
            balance(net, "flow", open=ENDS, readings=table.assign(factor=[odd, "", ""]))


def test_a_common_error_is_named_with_its_groups_its_size_and_its_readings():
    audit = on_pipes(sd=0.1, common="bench", common_sd=0.05, sidak=True, supply={"J": 0}, supply_sd={"J": 0.2})
    (note,) = (note for note in audit.notes if "share one error" in note)
    assert note.startswith("2 readings in 1 group (x) share one error a group beside their own")
    assert "0.05" in note
    asked = audit.to_dict()["asked"]
    names = ("common", "common_sd", "readings", "preset", "sidak", "robust", "storage", "storage_sd")
    assert [asked[name] for name in names] == ["bench", 0.05, None, None, True, False, None, None]
    assert asked["supply_sd"] == "by id"


def test_vertices_are_held_against_a_limit_one_by_one():
    audit = on_pipes(limit="0.1")
    row = audit.vertices.set_index("id").loc["J"]
    assert (row["limit"], row["holds"]) == (0.1, True)  # 5.2 - 3.0 - 2.1 is 0.1
    assert audit.vertices["holds"].tolist() == [None, True, None, None]
    assert on_pipes(limit="0.0999999999999999999999").vertices["holds"].tolist() == [None, False, None, None]
    keys = list(audit.to_dict()["vertices"][0])
    assert keys[:6] == ["id", "residual", "sd", "statistic", "potential", "potential_sd"]
    assert {"limit", "holds", "detectable", "group"} <= set(keys)
    assert vertex_bytes(audit).decode().splitlines()[2] == "J,0.1,1,0.1,true"
    assert "0.1 holds" in shown(audit_view(audit.to_dict()))
    with_sd = on_pipes(sd=0.1).to_dict()["vertices"][1]
    assert (with_sd["limit"], with_sd["holds"]) == (None, None)
    assert with_sd["detectable"] == pytest.approx(4.13 * with_sd["fault_sd"], rel=1e-3)


def test_a_limit_preset_says_its_name_what_it_judges_and_that_it_names_no_suspect():
    flows = PIPES.assign(flow=["500", "200", "150"])
    audit = balance(Dataset.from_frames(flows), "flow", open=ENDS, **COUNTS)
    # GEH 5 allows 5 sqrt((500 + 350) / 2) = 103.08 of the 150 that are missed: by hand
    row = audit.to_dict()["vertices"][1]
    assert (row["limit"], row["holds"]) == (pytest.approx(5 * np.sqrt(425)), False)
    said = verdict_sentence(audit.to_dict())
    assert said == "Outside the limits of preset counts-geh5: 1 of 1 vertices exceeds its own."
    assert "103.1 FAILS" in shown(audit_view(audit.to_dict(rows=20)))
    assert any("a limit names no suspect: it says which vertex is out" in note for note in audit.notes)
    level = on_lines(**LEVELLING)  # 0.03 m against 12 mm sqrt(4) = 0.024 m
    assert "preset levelling-12mm: 1 of 1 loops" in verdict_sentence(level.to_dict())
    assert "differences taken as m, lengths as km" in level.notes
    assert any("a limit names no suspect: it says which loop is out" in note for note in level.notes)
    assert not any("names no suspect" in note for note in on_lines(limit=1).notes)


def test_negative_counts_are_named_by_edge_and_line():
    with pytest.raises(InputError, match=r"edges row 1: counts must not be negative .* got -3 on edge a;"):
        balance(Dataset.from_frames(PIPES.assign(flow=["5", "-3", "2"])), "flow", open=ENDS, **COUNTS)


def test_a_group_of_vertices_is_named_at_its_members():
    frame = pd.DataFrame({"id": ["in", "mid", "out"], "from": ["S", "J", "K"], "to": ["J", "K", "T"],
                          "flow": ["5", "", "5.1"]})  # fmt: skip
    table = balance(Dataset.from_frames(frame), "flow", 0.1, ("S", "T")).vertices
    assert table[["id", "group"]].to_numpy().tolist() == [
        ["S", ""], ["J", "J+K"], ["K", "J+K"], ["T", ""], ["J+K", "J+K"],
    ]  # fmt: skip


def test_a_share_of_a_difference_is_said_to_be_no_accuracy():
    says = "a share of a height difference is seldom its accuracy"
    assert any(says in note for note in on_lines(sd="2%").notes)
    assert not any(says in note for note in (*on_lines(sd=0.01).notes, *on_pipes(sd="2%").notes))


def test_suspects_are_told_as_what_they_are():
    nodes = pd.DataFrame({"id": ["A", "B", "C"], "h": ["10", "11.4", ""], "h sd": ["0.01", "0.01", ""]})
    audit = loops(Dataset.from_frames(LINES, nodes), "dh", 0.005, "h", fixed_sd="h sd", unit="m")
    page = shown(audit_view(audit.to_dict()))
    said = audit.suspects[0]
    assert f"potential at A 10 {said.estimate:.2f} " in page  # its reading; what all else says, to four digits
    assert "-(reading at A) +(reading at B)" in page
    assert f"an offset of {10 - said.estimate:.3g} m would explain it" in page
    leak = balance(Dataset.from_frames(PIPES.assign(flow=["6.0", "3.1", "2.2"])), "flow", 0.1, ENDS, unit="L/s")
    (sizes,) = (text for text in leak.not_shown if "leaks" in text)
    assert sizes == "leaks below the detectable size at their vertex, 0.715 L/s"  # 4.13 * 0.1 * sqrt(3), once
    assert "an offset of 0.7 L/s would explain it" in [suspect.hint for suspect in leak.suspects]
    town = Path(__file__).parents[2] / "examples" / "data" / "town"
    net = read(town / "pipes.csv", town / "nodes.csv")
    whole = balance(net, "flow", "sd", "open", "demand", unit="L/s")
    rank, entry = next((k, s) for k, s in enumerate(whole.suspects) if s.kind == "vertex")
    assert rank < 8  # shown
    words = f"{abs(entry.estimate):.4g} L/s {'leaves' if entry.estimate > 0 else 'comes in'} unseen"
    assert f"leak at {entry.id} {entry.statistic:.3g} {words}" in shown(audit_view(whole.to_dict()))


def test_holes_that_cannot_be_counted_are_said_not_to_be(monkeypatch):
    for name in ("_STEPS", "_STEPS_EACH"):
        monkeypatch.setattr(smith, name, 0)
    rng = np.random.default_rng(5)
    cells = np.array([rng.permutation(45)[:4] for _ in range(250)])
    found = check(Complex.from_cells({"tetra": cells}, points=rng.random((45, 3)))).to_dict()
    assert found["betti"] is None
    assert any("cannot be counted" in note for note in found["notes"])
    assert "holes not counted" in shown(check_view(found))


def test_the_list_of_presets_shows_the_figures_that_can_be_set():
    found = [{"name": p.name, "sets": p.sets, "figures": dict(p.figures), "says": p.sentence} for p in PRESETS.values()]
    page = shown(presets_view({"presets": found}))
    assert "levelling-8.4mm [loop limit] mm_per_sqrt_km=8.4" in page
    assert "gas-meter-class1.5 [reading sd] upper_percent=1.5, lower_percent=3" in page
