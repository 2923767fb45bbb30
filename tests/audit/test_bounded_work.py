"""Where a network is too large for every figure: what is left out, what stays exact, and that it is said."""

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest

from dec.audit.adjusted.laplacian import Laplacian
from dec.audit.questions import balance, loops
from dec.audit.tested.single_errors import single_errors
from dec.calculus.dataset import Dataset


def held_grid(side: int, seed: int) -> tuple[Dataset, dict[int, float]]:
    """Heights on a street grid, every corner of which is held, one of them 2 too high."""
    rng = np.random.default_rng(seed)
    at = np.arange(side * side).reshape(side, side)
    tail = np.concatenate([at[:, :-1].ravel(), at[:-1].ravel()])
    head = np.concatenate([at[:, 1:].ravel(), at[1:].ravel()])
    height = np.round(rng.normal(size=side * side), 3)
    y = np.round(height[head] - height[tail] + 0.01 * rng.normal(size=len(tail)), 4)
    fixed = {int(v): float(height[v]) for v in range(0, side * side, 2)}
    fixed[8] += 2.0
    frame = pd.DataFrame({"from": tail, "to": head, "y": y})
    return Dataset.from_frames(frame, pd.DataFrame({"id": np.arange(side * side)})), fixed


def test_of_very_many_held_values_the_loudest_are_tested_and_the_others_left_out(monkeypatch):
    net, fixed = held_grid(9, 1)
    whole = loops(net, "y", sd=0.01, fixed=fixed)
    monkeypatch.setattr("dec.audit.adjusted.evidence._MOST_PLACE_WORK", 0)
    monkeypatch.setattr("dec.audit.adjusted.evidence.LOUDEST_PLACES", 5)
    cut = loops(net, "y", sd=0.01, fixed=fixed)
    every, some = whole.vertices["fault_statistic"].to_numpy(), cut.vertices["fault_statistic"].to_numpy()
    assert np.isfinite(every).sum() > 30
    assert np.isfinite(some).sum() == 5
    assert some[np.isfinite(some)] == pytest.approx(every[np.isfinite(some)])
    assert cut.suspects[0].kind == whole.suspects[0].kind == "vertex"
    assert cut.suspects[0].id == whole.suspects[0].id == "8"
    assert cut.edges["statistic"].to_numpy() == pytest.approx(whole.edges["statistic"].to_numpy(), nan_ok=True)
    assert any("held values" in note and "left out" in note for note in cut.notes)
    assert not any("left out" in note for note in whole.notes)


def test_shares_that_rounding_hides_are_left_out_where_there_are_too_many_to_work_out_again(monkeypatch):
    rng = np.random.default_rng(2)
    tail, head = rng.integers(0, 30, 90), rng.integers(0, 30, 90)
    conductance = 10.0 ** rng.uniform(-6, 6, 90)
    true = Laplacian(tail, head, 30, conductance).shares()
    monkeypatch.setattr("dec.audit.adjusted.laplacian._MOST_AGAIN", 3)
    monkeypatch.setattr("dec.audit.adjusted.laplacian._HOPELESS", 1e-9)
    share, slack = Laplacian(tail, head, 30, conductance).shares()
    hidden = np.isnan(slack)
    assert 0 < hidden.sum() < 90
    assert (hidden == np.isnan(share)).all()
    assert share[~hidden] == pytest.approx(true[0][~hidden], rel=1e-8)
    assert slack[~hidden] == pytest.approx(true[1][~hidden], rel=1e-8)


@pytest.mark.parametrize("law", [balance, loops])
def test_an_audit_with_hidden_shares_says_so_and_goes_on(monkeypatch, law):
    monkeypatch.setattr("dec.audit.adjusted.laplacian._MOST_AGAIN", 0)
    monkeypatch.setattr("dec.audit.adjusted.laplacian._HOPELESS", 1e-12)
    rng = np.random.default_rng(3)
    frame = pd.DataFrame({
        "from": rng.integers(0, 12, 40), "to": rng.integers(0, 12, 40), "y": np.round(rng.normal(size=40), 3),
        "sd": 10.0 ** rng.uniform(-3, 1, 40),
    })  # fmt: skip
    audit = law(Dataset.from_frames(frame), "y", sd="sd")
    assert np.isnan(audit.edges["redundancy"]).any()
    assert np.isfinite(audit.edges["adjusted"]).all()
    assert any("lie too far apart" in note for note in audit.notes)


def test_the_search_for_several_errors_chooses_among_the_loudest(monkeypatch):
    net, fixed = held_grid(9, 4)
    whole = loops(net, "y", sd=0.01, fixed=fixed).extra["errors"]
    monkeypatch.setattr("dec.audit.tested.several_errors._POOL", 12)
    assert loops(net, "y", sd=0.01, fixed=fixed).extra["errors"] == whole


def test_estimated_figures_come_with_their_error_and_exact_suspects(monkeypatch):
    """The same network with an exact factor and as one too large for it."""
    net, fixed = held_grid(12, 5)
    held = {v: h for v, h in fixed.items() if v in (0, 8, 143 - 1)}
    exact = loops(net, "y", sd=0.01, fixed=held)
    monkeypatch.setattr("dec.solvers.choice.SMALL", 10)
    monkeypatch.setattr("dec.solvers.choice.MIDDLING", 10)
    monkeypatch.setattr("dec.audit.adjusted.laplacian.sparse_order", lambda *_: None)
    monkeypatch.setattr("dec.audit.adjusted.laplacian._SMALL", 0)
    monkeypatch.setattr("dec.audit.tested.single_errors.LEADING", 30)
    rough = loops(net, "y", sd=0.01, fixed=held, figures="estimate")
    assert any("standard error of 10%" in note for note in rough.notes)
    one, other = exact.edges["redundancy"].to_numpy(), rough.edges["redundancy"].to_numpy()
    assert np.abs(other - one).max() < 0.4
    assert np.abs(other - one).max() > 1e-6
    for suspect in rough.suspects[:5]:
        row = exact.edges.set_index("id")["statistic"].get(suspect.id) if suspect.kind == "edge" else None
        if row is not None:
            assert suspect.statistic == pytest.approx(row, rel=1e-6)
    every = loops(net, "y", sd=0.01, fixed=held, figures="all")
    assert every.edges["redundancy"].to_numpy() == pytest.approx(one, abs=1e-9)
    assert every.edges["statistic"].to_numpy() == pytest.approx(exact.edges["statistic"].to_numpy(), abs=1e-6)


def test_as_many_errors_as_are_looked_at_one_by_one_are_all_of_them(monkeypatch):
    net, fixed = held_grid(6, 4)
    evidence = []
    monkeypatch.setattr(
        "dec.audit.tested.testing.single_errors", lambda found: evidence.append(found) or single_errors(found)
    )
    loops(net, "y", sd=0.01, fixed=fixed)
    without = replace(evidence[0], diagonal=None)
    count = int(without.testable.sum())
    for most, is_all in ((count + 1, True), (count, True), (count - 1, False)):
        monkeypatch.setattr("dec.audit.tested.single_errors.LEADING", most)
        found = single_errors(without)
        assert (found.is_all, len(found.error)) == (is_all, min(most, count))


def test_of_the_loudest_alone_nothing_is_said_of_chance_and_the_sizes_say_of_how_many_they_are(monkeypatch):
    net, fixed = held_grid(12, 5)
    held = {v: h for v, h in fixed.items() if v in (0, 8, 143 - 1)}
    monkeypatch.setattr("dec.solvers.choice.SMALL", 10)
    monkeypatch.setattr("dec.solvers.choice.MIDDLING", 10)
    monkeypatch.setattr("dec.audit.adjusted.laplacian.sparse_order", lambda *_: None)
    monkeypatch.setattr("dec.audit.adjusted.laplacian._SMALL", 0)
    monkeypatch.setattr("dec.audit.tested.single_errors.LEADING", 30)
    cut = loops(net, "y", sd=0.01, fixed=held)
    checked = int((cut.edges["standing"] == "checked").sum())
    seen = int(np.isfinite(cut.edges["detectable"]).sum())
    assert 0 < seen <= 30 < checked
    assert cut.extra["chance"] is None
    assert f"worked out for {seen} of {checked})" in cut.not_shown[0]
    whole = loops(net, "y", sd=0.01, fixed=held, figures="estimate")
    assert "worked out for" not in whole.not_shown[0]
    chance = whole.extra["chance"]
    assert chance["tests"] == len(set(whole.edges["class"]) | set(whole.vertices["class"])) - 1
    loud = {*whole.edges["class"][whole.edges["statistic"] > chance["limit"]]}
    loud |= {*whole.vertices["class"][whole.vertices["fault_statistic"] > chance["limit"]]}
    assert chance["exceed"] == len(loud)
    assert any("10% of what a redundancy lacks to 1" in note for note in whole.notes)


def test_of_a_large_class_the_first_are_named_and_the_others_counted(monkeypatch):
    """Lines in a row to a held mark: every loop has all of them."""
    monkeypatch.setattr("dec.audit.tested.suspects._MOST_NAMED", 4)
    ends = [(str(k), str(k + 1)) for k in range(10)]
    frame = pd.DataFrame({"from": [a for a, _ in ends], "to": [b for _, b in ends], "y": ["1.0"] * 9 + ["2.5"]})
    (suspect,) = loops(Dataset.from_frames(frame), "y", sd=0.05, fixed={"0": 0, "10": 10}).suspects
    assert len(suspect.inseparable_from) == 4
    assert suspect.hint.endswith("7 more are of its class in the tables")


def test_exact_single_tests_without_redundancies_say_so(monkeypatch):
    net, fixed = held_grid(4, 6)
    monkeypatch.setattr("dec.solvers.choice.SMALL", 1)
    monkeypatch.setattr("dec.audit.adjusted.laplacian.sparse_order", lambda *_: None)
    monkeypatch.setattr("dec.audit.adjusted.laplacian._SMALL", 0)
    audit = loops(net, "y", sd=0.01, fixed={v: h for v, h in fixed.items() if v in (0, 8)})
    assert np.isnan(audit.edges["redundancy"]).all()
    assert np.isfinite(audit.edges["statistic"]).all()
    assert any(note.startswith("redundancies are left out") for note in audit.notes)
