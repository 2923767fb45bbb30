"""Ratings, prices and potentials as differences: published answers, and known potentials that must close."""

import json
from fractions import Fraction
from math import log, radians
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from dec.audit.questions import balance, loops
from dec.audit.record import Audit
from dec.calculus.dataset import Dataset

HERE = Path(__file__).parent


def entry(name: str) -> dict:
    return json.loads((HERE / f"{name}.json").read_text(encoding="utf-8"))


def network(ends: list, values: list) -> Dataset:
    columns = {"from": [str(a) for a, _ in ends], "to": [str(b) for _, b in ends], "y": values}
    return Dataset.from_frames(pd.DataFrame(columns))


def potentials(audit: Audit) -> pd.Series:
    return audit.vertices.set_index("id")["potential"]


def closes(ends: list, known: dict, sd: float) -> Audit:
    """Differences of known potentials as readings: every loop closes, and no statistic reaches 1e-9.

    Nor does one where the first and the last potential are held, or where all are, known to the same sd.
    """
    net = network(ends, [float(known[str(b)] - known[str(a)]) for a, b in ends])
    every = {name: float(value) for name, value in known.items()}
    first, last = next(iter(known)), list(known)[-1]
    for fixed, fixed_sd in (({first: every[first], last: every[last]}, None), (every, sd)):
        held = loops(net, "y", sd=sd, fixed=fixed, fixed_sd=fixed_sd)
        assert held.dof > len(ends) - len(known)
        assert held.holds is True
        for table, column in (("edges", "statistic"), ("vertices", "fault_statistic"), ("at_vertices", "statistic")):
            found = held.table(table)
            assert len(found) == 0 or (found[column].dropna() < 1e-9).all()
        assert held.suspects == ()
    audit = loops(net, "y", sd=sd)
    assert audit.dof > 0
    assert audit.holds is True
    assert audit.chi_square < 1e-18
    assert np.nanmax(audit.edges["statistic"]) < 1e-9
    assert all(loop["statistic"] < 1e-9 and loop["holds"] for loop in audit.loops)
    found = potentials(audit)
    for name, value in known.items():
        assert found[name] - found[first] == pytest.approx(float(value - known[first]), abs=1e-12)
    return audit


def test_d1_ratings_of_five_teams_from_ten_games():
    """A margin is the winner's rating less the loser's; ratings are known up to a constant, and theirs add up to 0."""
    games, known = entry("D1")["input"]["scores"], entry("D1")["expected"]
    net = network([(second, first) for first, _, second, _ in games], [a - b for _, a, _, b in games])
    audit = loops(net, "y", sd=1)
    ratings = potentials(audit) - potentials(audit).mean()
    for team, rating in known["ratings"].items():
        assert ratings[team] == pytest.approx(float(rating), abs=1e-12)
    assert audit.chi_square == pytest.approx(float(Fraction(known["cyclic_norm2"])), rel=1e-13)
    assert (audit.edges["adjusted"] ** 2).sum() == pytest.approx(float(Fraction(known["gradient_norm2"])), rel=1e-13)
    assert (audit.edges["value"] ** 2).sum() == known["flow_norm2"]
    share = audit.chi_square / known["flow_norm2"]
    assert share == pytest.approx(float(Fraction(known["cyclic_share"].split()[0])), rel=1e-13)


def test_d3_currency_triangle_with_arbitrage():
    data = entry("D3")["input"]
    rates = {("GBP", "USD"): "USD_per_GBP", ("MYR", "USD"): "USD_per_MYR", ("GBP", "MYR"): "MYR_per_GBP"}
    net = network(list(rates), [log(float(data[name])) for name in rates.values()])
    audit = loops(net, "y", sd=0.001)
    known = float(entry("D3")["expected"]["log_circulation"].split("=")[1])
    assert abs(audit.loops[0]["misclosure"]) == pytest.approx(known, abs=1e-15)
    assert known == pytest.approx(log(81 / 80), abs=1e-15)
    assert audit.edges["correction"].abs().tolist() == pytest.approx([known / 3] * 3, abs=1e-15)
    assert audit.holds is False


def test_unit_flow_round_a_bare_hexagon_has_no_potential_at_all():
    """Gradient 0, what is left has the square 6 (own)."""
    audit = loops(network([(i, (i + 1) % 6) for i in range(6)], [1] * 6), "y", sd=1)
    assert audit.edges["adjusted"].tolist() == pytest.approx([0] * 6, abs=1e-15)
    assert audit.chi_square == pytest.approx(6)
    assert audit.dof == 1


def test_ratings_across_two_pieces_are_undefined():
    audit = loops(network([("a", "b"), ("c", "d"), ("b", "c")], ["3", "4", ""]), "y", sd=1, fixed={"a": 0})
    assert audit.edges["standing"].tolist() == ["unchecked", "unchecked", "unknown"]
    assert np.isnan(audit.edges["adjusted"][2])
    assert any("1 part without a fixed potential" in note for note in audit.notes)


@pytest.mark.parametrize("k", range(1, 12))
def test_c7_a_ladder_of_unit_resistors(k: int):
    """Unit current at the far end: the rungs carry F(1), F(3), ..., the rails F(2), F(4), ..., volts likewise."""
    fibonacci = [0, 1]
    while len(fibonacci) < 2 * k + 2:
        fibonacci.append(fibonacci[-2] + fibonacci[-1])
    known = {"0": 0, **{str(j): fibonacci[2 * j - 1] for j in range(1, k + 2)}}
    rails, rungs = [(j, j + 1) for j in range(1, k + 1)], [(0, j) for j in range(1, k + 1)]
    audit = closes([*rails, *rungs, ("0", "1")], known, sd=1e-3)
    drop = audit.edges["adjusted"]
    put_in = drop[k - 1]  # unit resistors: volts are amperes
    volts = potentials(audit)[str(k + 1)] - potentials(audit)["0"]
    assert entry("C7")["expected"]["R_k"] == "F(2k+1)/F(2k)"
    assert volts / put_in == pytest.approx(fibonacci[2 * k + 1] / fibonacci[2 * k], rel=1e-14)


def test_c8_the_bridge_that_is_nearly_balanced():
    """Potentials by hand: two nodal equations in exact fractions."""
    data = entry("C8")
    ohm = {(a, b): Fraction(r) for a, b, r in data["input"]["edges"]}
    volt = Fraction(str(data["input"]["emf_PQ_volt"]))
    g = {ends: 1 / r for ends, r in ohm.items()}
    aa, bb = g["P", "A"] + g["A", "Q"] + g["A", "B"], g["P", "B"] + g["B", "Q"] + g["A", "B"]
    ra, rb, ab = g["P", "A"] * volt, g["P", "B"] * volt, g["A", "B"]
    size = aa * bb - ab**2
    known = {"P": volt, "Q": Fraction(0), "A": (ra * bb + rb * ab) / size, "B": (rb * aa + ra * ab) / size}
    audit = closes(list(ohm), known, sd=1e-4)
    row = audit.edges.set_index(["from", "to"]).loc[("A", "B")]
    assert -row["adjusted"] / 50 * 1e6 == pytest.approx(data["expected"]["I_galvanometer_uA"], abs=1e-6)


def test_e1_three_buses():
    data, known = entry("E1")["input"], entry("E1")["expected"]
    angle = {bus: Fraction(text) for bus, text in {**known["theta"], "3": "0"}.items()}
    ends = [(a, b) for a, b, _ in data["x"]]
    audit = closes(ends, angle, sd=1e-4)
    flow = [-100 * drop / float(x) for drop, (_, _, x) in zip(audit.edges["adjusted"], data["x"], strict=True)]
    published = known["flow_MW"]
    assert flow == pytest.approx([published["1-2"], published["1-3"], -published["3-2"]], abs=1e-9)
    supply = {bus: 100 * Fraction(p) for bus, p in data["P_pu"].items()}
    given = {bus: str(float(p)) for bus, p in supply.items()}
    told = balance(network(ends, [str(round(f)) for f in flow]), "y", supply=given, open=["3"])
    assert (told.holds, told.dof) == (True, 2)


def fourteen_buses(*, with_taps: bool) -> tuple[list, Audit]:
    """The flows that the published angles drive, and whether they balance with what the buses put in."""
    data, known = entry("E4")["input"], entry("E4")["expected"]
    angle = {str(bus + 1): Fraction(str(value)) for bus, value in enumerate(known["theta_deg"])}
    ends = [(a, b) for a, b, _, _ in data["branches_from_to_x_tap"]]
    drop = closes(ends, angle, sd=1e-3).edges["adjusted"]
    reactance = [x * (tap or 1.0 if with_taps else 1.0) for _, _, x, tap in data["branches_from_to_x_tap"]]
    flow = [-data["baseMVA"] * radians(d) / x for d, x in zip(drop, reactance, strict=True)]
    net = network(ends, flow)
    return flow, balance(
        net, "y", supply=data["P_MW"], open=["1"], limit=0.02
    )  # 1e-5 degrees are 0.003 MW on the stiffest line


def test_e4_fourteen_buses_whose_taps_count():
    flow, audit = fourteen_buses(with_taps=True)
    assert (audit.holds, audit.dof) == (True, 13)
    assert flow[0] + flow[1] == pytest.approx(entry("E4")["expected"]["slack_MW"], abs=0.02)
    assert fourteen_buses(with_taps=False)[1].holds is False
