"""Simulated meters: false alarms come at the stated rate, and errors of the stated size are found at the stated rate.

Seeded; the bounds are those that a binomial count with the stated rate keeps in 99.9 % of all series.
"""

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from scipy.stats import binom

from dec.audit.questions import balance, loops
from dec.audit.suspects import CRITICAL
from dec.calculus.columns import Column
from dec.calculus.dataset import Dataset

N = 1000
ENDS = [("S", "A"), ("A", "B"), ("A", "C"), ("B", "C"), ("C", "D"), ("B", "D"), ("D", "T"), ("C", "C"), ("C", "E")]
ENDS += [("E", "D"), ("E", "E2")]
FLOW = np.array([8.0, 5.0, 3.0, 1.5, 2.5, 3.5, 8.0, 0.0, 2.0, 2.0, 0.0])
HEIGHT = dict(zip(["S", "A", "B", "C", "D", "E", "E2", "T"], [0.0, 2, 3, -1, 5, 4, 4, 7], strict=True))
SD = np.array([0.1, 0.2, 0.1, 0.3, 0.1, 0.15, 0.1, 0.1, 0.2, 0.1, 0.1])


def bounds(rate: float, n: int = N) -> tuple[int, int]:
    return int(binom.ppf(0.0005, n, rate)), int(binom.ppf(0.9995, n, rate))


def simulated(law: str, seed: int, *, error_on: int | None = None, error: float = 0.0):
    rng = np.random.default_rng(seed)
    frame = pd.DataFrame(ENDS, columns=["from", "to"])
    net = Dataset.from_frames(frame, pd.DataFrame({"id": list(HEIGHT)}))
    true = FLOW if law == "balance" else np.array([HEIGHT[b] - HEIGHT[a] for a, b in ENDS])
    for _ in range(N):
        reading = true + SD * rng.standard_normal(len(SD))
        if error_on is not None:
            reading[error_on] += error
        one = replace(net, columns={0: net.columns[0], 1: {"y": Column("y", reading)}})
        yield balance(one, "y", sd=SD, open=["S", "T"]) if law == "balance" else loops(one, "y", sd=SD, fixed={"S": 0})


@pytest.mark.parametrize(("law", "dof"), [("balance", 6), ("loop", 4)])
def test_clean_meters_fail_the_global_test_in_five_per_cent(law: str, dof: int):
    audits = list(simulated(law, 20))
    assert {audit.dof for audit in audits} == {dof}
    low, high = bounds(0.05)
    assert low <= sum(not audit.holds for audit in audits) <= high
    assert np.mean([audit.chi_square for audit in audits]) == pytest.approx(dof, abs=3.3 * np.sqrt(2 * dof / N))
    statistics = np.array([audit.tables["edges"]["statistic"] for audit in audits])[:, [1, 4, 8]]
    low, high = bounds(0.05)
    for column in statistics.T:
        assert low <= (column > 1.959964).sum() <= high
    assert (statistics > CRITICAL).sum() <= bounds(0.001, 3 * N)[1]


@pytest.mark.parametrize("law", ["balance", "loop"])
def test_an_error_of_the_detectable_size_is_found_in_eighty_per_cent(law: str):
    edge = 1
    detectable = next(iter(simulated(law, 0))).tables["edges"]["detectable"][edge]
    audits = simulated(law, 21, error_on=edge, error=detectable)
    found = sum(audit.tables["edges"]["statistic"][edge] > CRITICAL for audit in audits)
    low, high = bounds(0.8)
    assert low <= found <= high
