"""How long rounding with exact sums takes, in units of one maximum flow of the same size by SciPy; and certificates.

Run: ``python tests/bench/digits.py``, or with ``--edges 200000 --runs 3``. Three networks: streets (a lattice), a
random graph, and a ladder, which has the longest detours. The yardstick is one `scipy.sparse.csgraph.maximum_flow` on
the same edges with unit capacities both ways, from a source at half of the vertices to a sink at the other half, one
unit each: as many terminals as rounding has. Then the whole of it for an audit: rounded, as exact decimals, and its
certificate made and rechecked by `dec.verify` in plain Python.
"""

import argparse
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

import numpy as np
from scipy.sparse import csr_array
from scipy.sparse.csgraph import maximum_flow

import dec
from dec.audit.certificate import audit_certificate
from dec.audit.digits.grid import balanced_grid
from dec.audit.digits.rounding import rounded
from dec.audit.digits.tables import rounded_columns
from dec.audit.digits.whole import whole_flows
from dec.audit.exactly import net_inflow
from dec.topology.graphs import spanning_forest, tree_flows
from dec.verify import verify


def streets(m: int, _: np.random.Generator) -> tuple[np.ndarray, np.ndarray, int]:
    """A square lattice of about m edges."""
    side = int(np.ceil((1 + np.sqrt(1 + 2 * m)) / 2))
    number = np.arange(side * side).reshape(side, side)
    tail = np.concatenate([number[:, :-1].ravel(), number[:-1].ravel()])
    head = np.concatenate([number[:, 1:].ravel(), number[1:].ravel()])
    return tail, head, side * side


def random_graph(m: int, rng: np.random.Generator) -> tuple[np.ndarray, np.ndarray, int]:
    """A path with as many edges again between random vertices."""
    n = m // 2
    ends = rng.integers(0, n, (2, m - n + 1))
    return np.concatenate([np.arange(n - 1), ends[0]]), np.concatenate([np.arange(1, n), ends[1]]), n


def ladder(m: int, _: np.random.Generator) -> tuple[np.ndarray, np.ndarray, int]:
    """Two rails with rungs between them."""
    n = m // 3 + 1
    rung = np.arange(n)
    tail = np.concatenate([rung[:-1], rung[:-1] + n, rung])
    return tail, np.concatenate([rung[1:], rung[1:] + n, rung + n]), 2 * n


def balanced(tail: np.ndarray, head: np.ndarray, n: int, rng: np.random.Generator) -> np.ndarray:
    """Random flows that balance up to rounding."""
    flow = rng.normal(size=len(tail)) * 50
    forest = spanning_forest(tail, head, n)
    return flow + tree_flows(tail, head, forest, net_inflow(tail, head, flow, n))[0]


def yardstick(tail: np.ndarray, head: np.ndarray, n: int, rng: np.random.Generator) -> Callable[[], object]:
    """One maximum flow of the same size."""
    order = rng.permutation(n)
    giving, taking = order[: n // 2], order[n // 2 :]
    start = np.concatenate([tail, head, np.full(len(giving), n), taking])
    end = np.concatenate([head, tail, giving, np.full(len(taking), n + 1)])
    room = csr_array((np.ones(len(start), np.int32), (start, end)), shape=(n + 2, n + 2))
    room.sum_duplicates()
    return lambda: maximum_flow(room, n, n + 1)


def best(work: Callable[[], object], runs: int) -> float:
    """Shortest time of several runs, in seconds."""
    times = []
    for _ in range(runs):
        start = time.perf_counter()
        work()
        times.append(time.perf_counter() - start)
    return min(times)


def rounding(m: int, runs: int) -> None:
    """Time both, and check what rounding promises."""
    for make in (streets, random_graph, ladder):
        rng = np.random.default_rng(1)
        tail, head, n = make(m, rng)
        flow, put_in = balanced(tail, head, n, rng), np.zeros(n, np.int64)

        def work(tail=tail, head=head, n=n, flow=flow, put_in=put_in) -> np.ndarray:
            return whole_flows(tail, head, n, *balanced_grid(tail, head, n, flow, put_in, 0))

        whole = work()
        exact = not net_inflow(tail, head, whole, n).any()
        within = bool(((whole >= np.floor(flow)) & (whole <= np.ceil(flow))).all())
        nearest = float((whole == np.floor(flow + 0.5)).mean())
        mine, theirs = best(work, runs), best(yardstick(tail, head, n, rng), runs)
        print(
            f"{make.__name__}: {len(tail):,} edges, rounding {mine:.2f} s, one maximum flow {theirs:.2f} s, "
            f"{mine / theirs:.1f} times; balance exact {exact}, floor or ceiling {within}, nearest {nearest:.0%}"
        )


def certificates(m: int) -> None:
    """Time an audit's certificate and its recheck."""
    rng = np.random.default_rng(2)
    tail, head, _ = random_graph(m, rng)
    rows = zip(tail.tolist(), head.tolist(), rng.integers(-9999, 9999, m).tolist(), strict=True)
    text = "from,to,flow\n" + "".join(f"{a},{b},{c / 100}\n" for a, b, c in rows)
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder, "edges.csv")
        path.write_text(text)
        net = dec.read(path)
        for law, audit in (("balance", dec.balance(net, "flow", limit=1)), ("loop", dec.loops(net, "flow", limit=1))):
            start = time.perf_counter()
            found = rounded(audit, "0.5")
            middle = time.perf_counter()
            rounded_columns(found)
            print(f"{law}: rounded {middle - start:.2f} s, as decimals {time.perf_counter() - middle:.2f} s")
            start = time.perf_counter()
            made = audit_certificate(audit, contents=[text.encode()])
            middle = time.perf_counter()
            holds = verify(made, {"edges.csv": text.encode()}).holds
            end = time.perf_counter()
            print(
                f"{law}: {m:,} edges, certificate {middle - start:.2f} s and {len(made) / 1e6:.1f} MB, "
                f"recheck {end - middle:.2f} s, verifies {holds}"
            )


if __name__ == "__main__":
    words = argparse.ArgumentParser()
    words.add_argument("--edges", type=int, default=200_000)
    words.add_argument("--runs", type=int, default=3)
    options = words.parse_args()
    rounding(options.edges, options.runs)
    certificates(options.edges)
