"""Levelling nets with published heights, residuals and misclosures; sources in the JSON files."""

import json
from fractions import Fraction
from math import sqrt
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from dec.audit.questions import loops
from dec.audit.record import Audit
from dec.calculus.dataset import Dataset

HERE = Path(__file__).parent


def entry(name: str) -> dict:
    return json.loads((HERE / f"{name}.json").read_text(encoding="utf-8"))


def lines(rows: list) -> Dataset:
    columns = {"from": [r[0] for r in rows], "to": [r[1] for r in rows], "dh": [r[2] for r in rows]}
    return Dataset.from_frames(pd.DataFrame(columns))


def heights(audit: Audit) -> pd.Series:
    return audit.vertices.set_index("id")["potential"]


def exact(text: str) -> float:
    """The rational in "105.141 (exact 55199/525)" and the like."""
    return float(Fraction(next(word.strip("()") for word in text.split() if "/" in word)))


def test_b1_seven_lines_between_two_bench_marks():
    data, known = entry("B1")["input"], entry("B1")["expected"]
    audit = loops(lines(data["lines_from_to_dh"]), "dh", sd=1, fixed=data["fixed"], unit=data["unit"])
    for mark in "ABC":
        assert heights(audit)[mark] == pytest.approx(exact(known[mark]), abs=1e-12)
        assert heights(audit)[mark] == pytest.approx(float(known[mark].split()[0]), abs=5e-4)
    assert (heights(audit)["X"], heights(audit)["Y"]) == (100.0, 107.5)
    assert audit.chi_square == pytest.approx(float(Fraction(known["sum_v2"])), rel=1e-12)
    assert audit.dof == 4
    assert sqrt(audit.chi_square / audit.dof) == pytest.approx(float(known["s0"]), abs=5e-4)
    assert audit.edges["redundancy"].sum() == pytest.approx(4, abs=1e-12)


def test_b4_three_bench_marks_with_weights_by_length():
    data, known = entry("B4")["input"], entry("B4")["expected"]
    sd = [sqrt(row[3] / 1000) for row in data["lines"]]
    audit = loops(lines(data["lines"]), "dh", sd=sd, fixed=data["fixed"], unit=data["unit"])
    for mark in "EF":
        assert heights(audit)[mark] == pytest.approx(exact(known[mark]), abs=1e-12)
    assert 1000 * sqrt(audit.chi_square / audit.dof) == pytest.approx(known["s0_mm_per_sqrt_km"], abs=5e-5)


def cycle(audit: Audit, *stops: str) -> float:
    """The misclosure round some vertices, from the readings of the audit."""
    total = Fraction(0)
    for a, b in zip(stops, (*stops[1:], stops[0]), strict=True):
        for _, row in audit.edges.iterrows():
            if {row["from"], row["to"]} == {a, b}:
                total += Fraction(str(row["value"])) * (1 if row["from"] == a else -1)
    return float(total)


def test_b5_the_wrong_line_of_eight_is_named_first():
    data, known = entry("B5")["input"], entry("B5")["expected"]
    sd = [0.01 * sqrt(row[3]) for row in data["lines"]]  # 10 mm on a kilometre
    audit = loops(lines(data["lines"]), "dh", sd=sd, fixed=data["fixed"], unit=data["unit"])
    for stops, name in (("ABC", "misclosure_ABC_m"), ("BCD", "misclosure_BCD_m"), ("DEC", "misclosure_DEC_m")):
        assert cycle(audit, *stops) == float(known[name])
    reading = {str(number): Fraction(row[2]) for number, row in enumerate(data["lines"], start=1)}
    listed = {frozenset(leg for leg, _ in loop["legs"]): loop["misclosure"] for loop in audit.loops}
    assert abs(listed[frozenset({"1", "2", "3"})]) == float(known["misclosure_ABC_m"])
    for loop in audit.loops:
        assert loop["misclosure"] == float(sum(sign * reading[leg] for leg, sign in loop["legs"]))
    assert known["largest_normalised_residual"].startswith("line 3")
    assert audit.holds is False
    assert audit.suspects[0].id == "3"
    assert audit.edges["statistic"].argmax() == 2
    found = [heights(audit)[mark] for mark in "BCDE"]
    assert found == pytest.approx(known["heights_B_C_D_E"], abs=1e-8)


def test_b7_printed_residuals_of_seven_lines():
    data, known = entry("B7")["input"], entry("B7")["expected"]
    fixed = data["fixed_relative_to_bench_mark_A"]
    audit = loops(lines(data["lines"]), "dh", sd=1, fixed=fixed, unit=data["unit"])
    assert audit.edges["correction"].tolist() == pytest.approx(known["residuals"], abs=5e-4)
    assert audit.chi_square == pytest.approx(known["sum_v2"], abs=5e-6)
    assert heights(audit)["Q"] == pytest.approx(float(known["Q_minus_A"]), abs=1e-12)
    assert heights(audit)["R"] == pytest.approx(float(known["R_minus_A"]), abs=5e-6)
    more = loops(lines([*data["lines"], data["extra_line_case"]]), "dh", sd=1, fixed=fixed)
    extra = known["with_extra_line_Q_to_R_-12.47"]
    for mark in "QR":
        assert heights(more)[mark] == pytest.approx(float(Fraction(extra[mark])), abs=1e-12)
    assert more.dof == audit.dof + 1


def test_two_runs_of_one_line_are_averaged_by_weight():
    """Weights 2 and 6 (own)."""
    rows = [("A", "B", "1.234"), ("A", "B", "1.238")]
    audit = loops(lines(rows), "dh", sd=[2**-0.5, 6**-0.5], fixed={"A": 0})
    assert heights(audit)["B"] == pytest.approx(1.237, abs=1e-15)
    assert audit.dof == 1
    back = loops(lines([rows[0], ("B", "A", "-1.238")]), "dh", sd=[2**-0.5, 6**-0.5], fixed={"A": 0})
    assert heights(back)["B"] == pytest.approx(1.237, abs=1e-15)


def test_two_parts_with_one_bench_mark_are_reported_and_not_solved_by_a_tiny_pivot():
    rows = [("A", "B", "1"), ("B", "C", "1"), ("C", "A", "-2.3"), ("P", "Q", "5"), ("Q", "R", "1"), ("R", "P", "-6")]
    audit = loops(lines(rows), "dh", sd=0.1, fixed={"B": 50})
    assert any("1 part without a fixed potential" in note and "measured from P" in note for note in audit.notes)
    found = audit.vertices.set_index("id")
    assert found.loc[["P", "Q", "R"], "potential"].tolist() == pytest.approx([0, 5, 6])
    assert found.loc[["P", "Q", "R"], "potential_sd"].isna().all()
    assert found.loc[["A", "B", "C"], "potential"].tolist() == pytest.approx([48.9, 50, 51.1])
    assert found.loc["B", "potential_sd"] == 0
    assert audit.dof == 2


def test_without_a_bench_mark_only_differences_are_determined():
    data = entry("B1")["input"]
    free = loops(lines(data["lines_from_to_dh"]), "dh", sd=1)
    assert any("no potential is fixed" in note for note in free.notes)
    assert free.vertices["potential_sd"].isna().all()
    assert free.dof == 3
    shifted = loops(lines(data["lines_from_to_dh"]), "dh", sd=1, fixed={"X": 1000})
    np.testing.assert_allclose(heights(shifted) - heights(free), 1000 + heights(shifted)["X"] - 1000, rtol=1e-12)
    np.testing.assert_allclose(shifted.edges["adjusted"], free.edges["adjusted"], rtol=1e-12)
    assert shifted.chi_square == pytest.approx(free.chi_square, rel=1e-12)
