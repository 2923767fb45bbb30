"""Balances of metered flows with published answers; sources in the JSON files, from memory where they say MEMORY."""

import json
from fractions import Fraction
from itertools import pairwise
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from scipy.stats import norm

from dec.audit.questions import balance
from dec.audit.tested.single_errors import CRITICAL, DETECTABLE
from dec.calculus.dataset import Dataset
from dec.errors import InputError

HERE = Path(__file__).parent


def entry(name: str) -> dict:
    return json.loads((HERE / f"{name}.json").read_text(encoding="utf-8"))


def network(ends: list, values: list, ids: list | None = None) -> Dataset:
    frame = pd.DataFrame({"from": [a for a, _ in ends], "to": [b for _, b in ends], "flow": [str(v) for v in values]})
    if ids is not None:
        frame.insert(0, "id", ids)
    return Dataset.from_frames(frame)


def exchanger() -> Dataset:
    data = entry("A1")["input"]
    return network(data["edges_from_to"], data["measured"], data["streams"])


@pytest.mark.parametrize("opened", [["env"], []], ids=["environment open", "environment an ordinary vertex"])
def test_a1_heat_exchanger_with_bypass(opened: list[str]):
    """The environment is the fifth row of balances; it says nothing new, so the answer is the same either way."""
    known = entry("A1")["expected"]
    audit = balance(exchanger(), "flow", sd=1, open=opened)
    expected = [float(Fraction(value)) for value in known["reconciled"]]
    assert audit.edges["adjusted"].tolist() == pytest.approx(expected, abs=1e-12)
    assert audit.dof == known["dof"] == 4
    assert audit.chi_square == pytest.approx(float(Fraction("2563/400")), rel=1e-13)
    assert known["chi2_statistic"].startswith("2563/400")
    assert audit.extra["closes_to"] <= 1e-15
    assert audit.edges["standing"].unique().tolist() == ["checked"]


def test_a1_variances_of_all_the_same_size_change_only_the_statistic():
    audit = balance(exchanger(), "flow", sd=0.5, open=["env"])
    assert audit.chi_square == pytest.approx(4 * 2563 / 400)
    assert audit.holds is False
    assert balance(exchanger(), "flow", sd=1, open=["env"]).holds is True


def test_a1_a_variance_of_zero_is_refused_and_nearly_zero_gives_its_limit():
    """Variance 0 on meter 1 keeps 101.91 (own, exact rationals); an exact reading is not taken as one with sd 0."""
    with pytest.raises(InputError, match="sd must be positive"):
        balance(exchanger(), "flow", sd=[0, 1, 1, 1, 1, 1], open=["env"])
    audit = balance(exchanger(), "flow", sd=[1e-6, 1, 1, 1, 1, 1], open=["env"])
    held = ["10191/100", "13069/200", "7313/200", "13069/200", "7313/200", "10191/100"]
    assert audit.edges["adjusted"].tolist() == pytest.approx([float(Fraction(v)) for v in held], abs=1e-10)


def test_a3_thresholds_of_the_global_test():
    """A chain of k closed vertices has k independent balances."""
    table = entry("A3")["expected"]["chi2_95"]
    for dof, published in ((int(k), value) for k, value in table.items()):
        stops = [f"v{i}" for i in range(dof + 2)]
        audit = balance(network(list(pairwise(stops)), [1] * (dof + 1)), "flow", sd=1, open=[stops[0], stops[-1]])
        assert audit.dof == dof
        assert audit.limit == pytest.approx(published, abs=5e-4)
    for alpha, published in zip((0.975, 0.025), entry("A3")["expected"]["chi2_975_025_dof3"], strict=True):
        stops = ["a", "b", "c", "d", "e"]
        audit = balance(network(list(pairwise(stops)), [1] * 4), "flow", sd=1, open=["a", "e"], alpha=alpha)
        assert audit.limit == pytest.approx(published, abs=5e-4)


def test_a3_thresholds_of_single_meters():
    known = entry("A3")["expected"]["baarda"]
    assert pytest.approx(known["critical"], abs=6e-3) == CRITICAL
    assert pytest.approx(known["delta0"], abs=6e-3) == DETECTABLE
    shift = norm.ppf(1 - known["alpha0"] / 2) + norm.ppf(known["power"])
    assert shift**2 == pytest.approx(known["lambda0"], abs=6e-3)
    assert pytest.approx(shift, abs=3e-3) == DETECTABLE


def test_a4_recycle_network_of_true_flows():
    data, known = entry("A4")["input"], entry("A4")["expected"]
    net = network(data["edges_from_to"], data["true_flows"])
    for opened in (["env"], []):
        audit = balance(net, "flow", open=opened)
        assert audit.holds is True
        assert audit.dof == known["rank_of_balances"] == 4
        assert audit.counts["loops"] == known["independent_cycles_with_environment_closed"] == 3
        assert audit.edges["correction"].tolist() == [0.0] * 7
    spoilt = network(data["edges_from_to"], ["5", "15", "15", "5", "10", "5.01", "5"])
    assert balance(spoilt, "flow", open=["env"]).holds is False


@pytest.mark.parametrize("name", ["A1", "A4"])
@pytest.mark.parametrize("sd", [1, "3%", [0.5, 1, 2, 0.1, 3, 1, 0.7]])
def test_a5_redundancies_add_up_to_the_number_of_independent_balances(name: str, sd):
    data = entry(name)["input"]
    ends = data["edges_from_to"]
    net = network(ends, data.get("measured") or data["true_flows"])
    audit = balance(net, "flow", sd=sd[: len(ends)] if isinstance(sd, list) else sd, open=["env"])
    assert audit.edges["redundancy"].sum() == pytest.approx(4, abs=1e-12)
    assert np.all(audit.edges["redundancy"].between(0, 1))
