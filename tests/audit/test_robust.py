"""The least sum of absolute changes: its optimum against the dual program, and that it changes few readings."""

from unittest.mock import patch

import numpy as np
import pandas as pd
import pytest
from scipy.optimize import linprog

from dec.audit.questions import balance, loops
from dec.audit.record import Audit
from dec.audit.tested import testing
from dec.calculus.dataset import Dataset

from .measured_networks import Measured, measured


def changes_of(net: Measured) -> tuple[Audit, np.ndarray]:
    """The audit, and what it adds to each reading, in the order of the reference."""
    seen: list[np.ndarray] = []
    plain = testing.least_absolute

    def kept(*args: object, **more: object) -> np.ndarray:
        seen.append(plain(*args, **more))  # type: ignore[arg-type]
        return seen[-1]

    with patch.object(testing, "least_absolute", kept):
        audit = net.audit(robust=True)
    return audit, seen[0][net.exact.at]


@pytest.mark.parametrize("law", ["balance", "loop"])
def test_the_optimum_is_that_of_the_dual_program(law: str):
    """By duality the least sum |v| / sd with C v = -misses is the largest -misses' u with |C' u| <= 1 / sd."""
    compared = 0
    for seed in range(5000, 5060):
        net = measured(law, seed)
        exact = net.exact
        if not exact.dof:
            continue
        audit, change = changes_of(net)
        checks = np.array([[float(x) for x in row] for row in exact.checks])
        misses = np.array([float(x) for x in exact.misses])
        price = np.array([float(x) ** -0.5 for x in exact.variance])
        scale = 1 + np.abs(misses).max()
        np.testing.assert_allclose(checks @ change, -misses, atol=1e-7 * scale)
        dual = linprog(
            misses, A_ub=np.vstack([checks.T, -checks.T]), b_ub=np.tile(price, 2), bounds=(None, None), method="highs"
        )
        assert np.abs(change) @ price == pytest.approx(-dual.fun, rel=1e-7, abs=1e-7)
        said = audit.extra["robust"]
        size = np.abs(change) * price
        assert said["changed"] == (size > 1e-9).sum()
        assert said["changed"] <= exact.dof  # a vertex of the polytope
        told = [row["times_sd"] for row in said["large"]]
        assert told == pytest.approx(sorted(size[size > 3.2905], reverse=True)[:20], rel=1e-9)
        for row in said["large"]:
            assert abs(row["estimate"] - row["value"]) > 0
        compared += 1
    assert compared > 20


def test_one_gross_error_changes_one_reading_only():
    """All pairs of six vertices; the flows are twice as many with the ends of each."""
    height = [0.0, 3, 7, -2, 5, 11]
    pairs = [(a, b) for a in range(6) for b in range(a)]
    for wrong in range(len(pairs)):
        rise = np.array([height[b] - height[a] for a, b in pairs])
        rise[wrong] += 4.0
        frame = pd.DataFrame(pairs, columns=["from", "to"]).assign(y=rise)
        said = loops(Dataset.from_frames(frame), "y", sd=0.01, robust=True).extra["robust"]
        assert said["changed"] == 1
        (row,) = said["large"]
        assert (row["kind"], row["id"]) == ("edge", str(wrong + 1))
        assert row["estimate"] == pytest.approx(rise[wrong] - 4.0)
        assert row["times_sd"] == pytest.approx(400.0)


def test_one_gross_flow_changes_one_reading_only():
    """A wrong meter is seen at both its ends; all others balance, so nothing cheaper explains it."""
    ends = [("S", "A"), ("S", "B"), ("A", "B"), ("A", "C"), ("B", "D"), ("C", "D"), ("C", "T"), ("D", "T")]
    flow = np.array([6.0, 4.0, 1.0, 5.0, 5.0, 2.0, 3.0, 7.0])
    for wrong in (2, 3, 4, 5):
        reading = flow.copy()
        reading[wrong] += 3.0
        frame = pd.DataFrame(ends, columns=["from", "to"]).assign(y=reading)
        said = balance(Dataset.from_frames(frame), "y", sd=0.01, open=["S", "T"], robust=True).extra["robust"]
        assert [(row["id"], row["estimate"]) for row in said["large"]] == [(str(wrong + 1), pytest.approx(flow[wrong]))]
        assert said["changed"] == 1


def test_nothing_is_said_unless_asked():
    frame = pd.DataFrame({"from": ["A", "A"], "to": ["B", "B"], "y": [1.0, 2.0]})
    assert loops(Dataset.from_frames(frame), "y", sd=0.1).extra["robust"] is None
