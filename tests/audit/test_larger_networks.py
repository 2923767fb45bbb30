"""Networks large enough for blocks and compiled loops, against dense and plain sparse least squares."""

import numpy as np
import pandas as pd
import pytest
from scipy.sparse import csr_array
from scipy.sparse.linalg import spsolve
from scipy.stats import binom

from dec.audit.questions import balance, loops
from dec.calculus.dataset import Dataset


def grid(side: int, seed: int) -> tuple[np.ndarray, np.ndarray]:
    """A street grid with three in a hundred streets missing, and every street in either direction."""
    rng = np.random.default_rng(seed)
    corner = np.arange(side * side).reshape(side, side)
    one = np.concatenate([corner[:, :-1].ravel(), corner[:-1].ravel()])
    other = np.concatenate([corner[:, 1:].ravel(), corner[1:].ravel()])
    kept, turned = rng.random(len(one)) < 0.97, rng.random(len(one)) < 0.5
    return np.where(turned, other, one)[kept], np.where(turned, one, other)[kept]


def network(tail: np.ndarray, head: np.ndarray, y: np.ndarray, n: int) -> Dataset:
    frame = pd.DataFrame({"from": tail, "to": head, "y": y})
    return Dataset.from_frames(frame, pd.DataFrame({"id": np.arange(n)}))


def differences(tail: np.ndarray, head: np.ndarray, n: int) -> csr_array:
    edge = np.arange(len(tail))
    signs = np.repeat([-1.0, 1.0], len(tail))
    return csr_array((signs, (np.tile(edge, 2), np.concatenate([tail, head]))), shape=(len(tail), n))


@pytest.mark.parametrize("spread", [0.2, 1.5])
def test_a_grid_of_some_hundred_loops_equals_the_dense_solution(spread: float):
    rng = np.random.default_rng(1)
    tail, head = grid(16, 1)
    n, m = 256, len(tail)
    sd = 10.0 ** rng.uniform(-spread, spread, m)
    y = np.round(rng.normal(size=n)[head] + 0.1 * rng.normal(size=m), 3)
    y[rng.random(m) < 0.1] = np.nan
    seen = np.flatnonzero(~np.isnan(y))
    audit = loops(network(tail, head, y, n), "y", sd=sd, fixed={0: 0.0, 255: 1.0})
    D = differences(tail, head, n).toarray()
    free = np.arange(1, 255)
    A, b = D[seen][:, free] / sd[seen, None], (y[seen] - D[seen, 255]) / sd[seen]
    z, _, rank, _ = np.linalg.lstsq(A, b, rcond=None)
    inverse = np.linalg.pinv(A.T @ A, hermitian=True)
    assert rank == len(seen) - audit.dof
    assert audit.chi_square == pytest.approx(((A @ z - b) ** 2).sum(), rel=1e-9)
    reached = ~np.isnan(audit.tables["vertices"]["potential_sd"][1:255])
    assert audit.tables["vertices"]["potential"][1:255][reached] == pytest.approx(z[reached], abs=1e-9)
    spreads = np.sqrt(np.diag(inverse))
    assert audit.tables["vertices"]["potential_sd"][1:255][reached] == pytest.approx(spreads[reached], rel=1e-6)
    redundancy = 1 - np.einsum("ij,jk,ik->i", A, inverse, A)
    assert audit.tables["edges"]["redundancy"][seen] == pytest.approx(redundancy, abs=1e-8)
    assert np.nansum(audit.tables["edges"]["redundancy"]) == pytest.approx(audit.dof, rel=1e-12)


@pytest.mark.parametrize("spread", [0.2, 1.5])
def test_a_grid_of_some_hundred_balances_equals_the_dense_solution(spread: float):
    rng = np.random.default_rng(2)
    tail, head = grid(16, 2)
    n, m = 256, len(tail)
    sd = 10.0 ** rng.uniform(-spread, spread, m)
    y = np.round(rng.normal(size=m) * 5, 3)
    y[rng.random(m) < 0.2] = np.nan
    seen, idle = np.flatnonzero(~np.isnan(y)), np.flatnonzero(np.isnan(y))
    audit = balance(network(tail, head, y, n), "y", sd=sd, open=[0, 255])
    M = differences(tail, head, n).toarray().T[1:255]  # one row a closed vertex
    lost = np.linalg.svd(M[:, idle])
    left = lost.U[:, (lost.S > 1e-9).sum() :].T  # sums of balances that hold whatever flows in the others
    B = left @ M[:, seen]
    r, S = B @ y[seen], B * sd[seen] ** 2 @ B.T
    assert audit.dof == len(B)
    assert audit.chi_square == pytest.approx(r @ np.linalg.solve(S, r), rel=1e-9)
    gain = (B * sd[seen] ** 2).T @ np.linalg.inv(S)
    assert audit.tables["edges"]["correction"][seen] == pytest.approx(-gain @ r, abs=1e-8)
    redundancy = np.einsum("ij,ji->i", gain, B)
    assert audit.tables["edges"]["redundancy"][seen] == pytest.approx(redundancy, abs=1e-7)
    assert np.nansum(audit.tables["edges"]["redundancy"]) == pytest.approx(audit.dof, rel=1e-12)
    # an inferred flow and its variance: x with M x = 0, so that flow = -pinv(M_idle) M_seen x
    follow = -np.linalg.pinv(M[:, idle]) @ M[:, seen]
    cover = np.diag(sd[seen] ** 2) - gain @ (B * sd[seen] ** 2)
    standing = audit.tables["edges"]["standing"][idle] == "inferred"
    assert standing.sum() > 10
    spreads = np.sqrt(np.einsum("ij,jk,ik->i", follow, cover, follow))
    assert audit.tables["edges"]["adjusted_sd"][idle][standing] == pytest.approx(spreads[standing], rel=1e-6)
    flows = follow @ audit.tables["edges"]["adjusted"][seen]
    assert audit.tables["edges"]["adjusted"][idle][standing] == pytest.approx(flows[standing], abs=1e-9)


def test_above_the_size_of_a_dense_reference_every_figure_is_there_and_adds_up():
    side = 75
    n = side * side
    rng = np.random.default_rng(3)
    tail, head = grid(side, 3)
    height = rng.normal(size=n)
    y = np.round(height[head] - height[tail] + 0.01 * rng.normal(size=len(tail)), 4)
    net = network(tail, head, y, n)
    audit = loops(net, "y", sd=0.01, fixed={0: 0.0})
    D = differences(tail, head, n)[:, 1:]
    lost = np.unique(audit.data.complex.component_labels, return_index=True)[1][1:] - 1
    D = D[:, np.setdiff1d(np.arange(n - 1), lost)]
    p = spsolve((D.T @ D).tocsc(), D.T @ y)
    assert audit.tables["edges"]["adjusted"] == pytest.approx(D @ p, abs=1e-9)
    assert audit.chi_square == pytest.approx((((D @ p) - y) ** 2).sum() / 0.01**2, rel=1e-9)
    assert audit.holds is True
    chance = audit.extra["chance"]
    assert chance["expected"] == pytest.approx(0.001 * chance["tests"])
    assert binom.ppf(0.0005, chance["tests"], 0.001) <= chance["exceed"] <= binom.ppf(0.9995, chance["tests"], 0.001)
    assert len(audit.suspects) == chance["exceed"]
    assert audit.tables["edges"]["redundancy"].sum() == pytest.approx(audit.dof, rel=1e-10)
    flows = balance(net, "y", sd=0.01, open=[0])
    assert flows.dof == n - (len(lost) + 1)
    assert flows.extra["closes_to"] < 1e-12
    assert np.nansum(flows.tables["edges"]["redundancy"]) == pytest.approx(flows.dof, rel=1e-10)


@pytest.mark.parametrize("law", [balance, loops])
def test_a_graph_that_mixes_too_fast_to_factor_has_its_verdict_and_exact_figures_of_the_loudest(law):
    """20,000 random edges on 6,000 vertices; the loudest reading is worked out as in a solve of its own."""
    rng = np.random.default_rng(4)
    n, m = 6000, 20_000
    tail, head = rng.integers(0, n, m), rng.integers(0, n, m)
    true = rng.normal(size=n)
    y = np.round((true[head] - true[tail] if law is loops else np.zeros(m)) + 0.01 * rng.normal(size=m), 5)
    y[7] += 0.5
    audit = law(network(tail, head, y, n), "y", sd=0.01)
    assert audit.holds is False
    assert audit.suspects[0].id == "8"
    assert audit.extra["closes_to"] < 1e-12
    assert np.isnan(audit.tables["edges"]["redundancy"]).all()
    assert 0 < np.isfinite(audit.tables["edges"]["statistic"]).sum() <= 200
    assert any("too large for an exact factor" in note for note in audit.notes)
    without = audit.what_if(left_out=["8"])
    assert audit.suspects[0].outcomes["left_out"]["chi_square"] == pytest.approx(without.chi_square, rel=1e-9)
