"""The operator M on all possible errors, against dense matrices made from its definition."""

from unittest.mock import patch

import numpy as np
import pytest

from dec.audit import network
from dec.audit.adjusted.evidence import Evidence

from .dense_reference import Row
from .measured_networks import Measured, measured


def evidence_of(net: Measured) -> tuple[Evidence, list[Row | None]]:
    """What the audit works with, and what one unit of each of its errors adds to the readings; None where unseen."""
    seen: list[tuple] = []
    plain = network.tested

    def kept(*args: object, **more: object) -> object:
        seen.append(args)
        return plain(*args, **more)  # type: ignore[arg-type]

    with patch.object(network, "tested", kept):
        net.audit()
    model, adjustment = seen[0][:2]
    exact = net.exact
    errors: list[Row | None] = [
        exact.alone(exact.at.index(i)) if i in exact.at else None for i in range(len(exact.basis))
    ]
    if net.law == "loop":
        errors += [net.error[v] for v in model.attached.tolist()]
        return adjustment.evidence, errors
    for number in range(int(adjustment.group.max()) + 1):
        here = [v for v in range(net.case.n) if adjustment.group[v] == number and v in net.error]
        errors.append(net.error[here[0]] if here else None)
    return adjustment.evidence, errors


@pytest.mark.parametrize("law", ["balance", "loop"])
@pytest.mark.parametrize("size", ["", "0.5", "2%"])
def test_every_entry_is_that_of_the_definition(law: str, size: str):
    for seed in range(6000, 6030):
        net = measured(law, seed, size)
        exact = net.exact
        found, errors = evidence_of(net)
        count, m = len(errors), len(exact.basis)
        assert (found.n_edges, len(found.score)) == (m, count)
        seen = np.zeros((count, exact.dof))
        for k, error in enumerate(errors):
            if error is not None:
                seen[k] = [float(x) for x in exact.seen(error)]
        spread = np.array([[float(x) for x in row] for row in exact.spread]).reshape(exact.dof, exact.dof)
        dense = seen @ spread @ seen.T
        score = seen @ np.array([float(x) for x in exact.weighed])
        scale = {"rtol": 1e-9, "atol": 1e-9}
        np.testing.assert_allclose(found.score, score, rtol=1e-9, atol=1e-9 * (1 + np.abs(score).max(initial=0)))
        np.testing.assert_allclose(found.columns(np.arange(count)), dense, **scale)
        np.testing.assert_allclose(found.diagonal, np.diag(dense), **scale)
        assert found.testable.tolist() == [bool(row.any()) for row in seen]
        np.testing.assert_allclose(found.weights(np.arange(count)), np.diag(dense), **scale)
        assert not found.score[~found.testable].any()
        assert not found.columns(np.arange(count))[~found.testable].any()
        rng = np.random.default_rng(seed)
        drawn = np.zeros((m, 3))
        drawn[exact.at] = rng.normal(size=(len(exact.at), 3))
        np.testing.assert_allclose(found.of_readings(drawn), dense[:, :m] @ drawn, **scale)
        assert (found.rough[found.testable] > 0).all()
