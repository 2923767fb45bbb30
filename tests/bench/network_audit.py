"""How long an audit of a large network takes, in units of work that anybody would have to do.

Run: ``python tests/bench/network_audit.py``, or with ``--edges 100000 1000000 --runs 3``. For each size both laws are
run as whole commands on the generated town, interleaved with a program that only reads the same files with pandas and
solves the normal equations once with PyAMG; best of the runs. Then the full audit of 5,000 edges already in memory,
in units of one direct solve of its normal equations by SciPy.
"""

import argparse
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pandas as pd
from scipy.sparse import csr_array, diags_array
from scipy.sparse.csgraph import connected_components
from scipy.sparse.linalg import spsolve

COMMANDS = {
    "balance": ["--value", "flow", "--sd", "1%+0.05", "--supply", "demand", "--open-column", "open"],
    "loops": ["--value", "dh", "--sd", "dh_sd", "--fixed", "height"],
}
PLANTED = ["--reversed", "2", "--factor", "1", "--leaks", "1"]
SMALL = 5000


def normal_equations(law: str, edges: pd.DataFrame, nodes: pd.DataFrame) -> tuple[csr_array, np.ndarray]:
    """The matrix and the right-hand side of the adjustment, made without the package, one vertex a part held."""
    number = pd.Index(nodes["id"])
    tail, head = number.get_indexer(edges["from"]), number.get_indexer(edges["to"])
    n, value = len(nodes), edges["flow" if law == "balance" else "dh"].to_numpy(float)
    given = ~np.isnan(value)
    if law == "balance":
        weight = (0.01 * np.abs(value) + 0.05) ** 2
        joined, outside = ~given, np.flatnonzero(nodes["open"] == "yes")
        source = np.bincount(head[given], value[given], n) - np.bincount(tail[given], value[given], n)
        source += nodes["demand"].fillna(0.0).to_numpy(float)
    else:
        weight = edges["dh_sd"].to_numpy(float) ** -2.0
        joined, outside = np.zeros(len(value), bool), np.flatnonzero(nodes["height"].notna())
        known = nodes["height"].fillna(0.0).to_numpy(float)
        pull = weight * (value - known[head] + known[tail])
        source = np.bincount(head[given], pull[given], n) - np.bincount(tail[given], pull[given], n)
    rows = np.concatenate([tail[joined], outside[1:]])
    columns = np.concatenate([head[joined], np.full(len(outside[1:]), outside[0])])
    count, group = connected_components(csr_array((np.ones(len(rows)), (rows, columns)), (n, n)), directed=False)
    start, end, weight = group[tail[given]], group[head[given]], weight[given]
    away = csr_array((np.where(start == end, 0.0, weight), (start, end)), (count, count))
    away = csr_array(away + away.T)
    _, part = connected_components(away, directed=False)
    held = np.zeros(count, bool)
    held[np.unique(part, return_index=True)[1]] = True
    held[np.flatnonzero(part == part[group[outside[0]]])] = False
    held[group[outside[0]]] = True
    matrix = csr_array(diags_array(away.sum(axis=1)) - away)[~held][:, ~held]
    return csr_array(matrix), np.bincount(group, source, count)[~held]


def reference(law: str, folder: Path) -> None:
    """Read with pandas, solve once with PyAMG, print the seconds that took without the imports."""
    import pyamg

    start = time.perf_counter()
    edges, nodes = pd.read_csv(folder / "pipes.csv"), pd.read_csv(folder / "nodes.csv")
    matrix, source = normal_equations(law, edges, nodes)
    matrix.indices, matrix.indptr = matrix.indices.astype(np.int32), matrix.indptr.astype(np.int32)
    history: list[float] = []
    pyamg.smoothed_aggregation_solver(matrix).solve(source, tol=1e-8, accel="cg", residuals=history)
    print(f"{time.perf_counter() - start:.3f} {history[-1] / history[0]:.1e}")


def seconds(words: list[str], ends: tuple[int, ...]) -> tuple[float, str]:
    """How long a whole process takes, and what it printed."""
    start = time.perf_counter()
    done = subprocess.run([sys.executable, *words], capture_output=True, text=True, check=False)
    if done.returncode not in ends:
        sys.exit(f"{' '.join(words)} ended with {done.returncode}: {done.stderr}")
    return time.perf_counter() - start, done.stdout


def whole_commands(n_edges: int, runs: int) -> None:
    """Print both laws on a town of so many pipes against the reference."""
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        seconds(["-m", "dec.demo.town", "--edges", str(n_edges), *PLANTED, name], (0,))
        for law, asked in COMMANDS.items():
            files = [str(folder / "pipes.csv"), "--nodes", str(folder / "nodes.csv")]
            words = ["-m", "dec", law, *files, *asked, "-o", str(folder / "adjusted.csv"), "--force"]
            ours, theirs, inside, said = [], [], [], ""
            for _ in range(runs):
                ours.append(seconds(words, (0, 1))[0])
                took, said = seconds([__file__, "--reference", law, name], (0,))
                theirs.append(took)
                inside.append(float(said.split()[0]))
            best, other, bare = min(ours), min(theirs), min(inside)
            print(
                f"{law:8s} {n_edges:9,d} edges  dec {best:7.2f} s, {1e6 * best / n_edges:6.2f} us an edge   "
                f"pandas and PyAMG {bare:6.2f} s (to {said.split()[1]}), as a process {other:6.2f} s   "
                f"ratio {best / bare:5.2f}, {best / other:5.2f}"
            )


def best_of(work: Callable[[], object], runs: int) -> float:
    """The least seconds that a call takes, after one that is not counted."""
    work()
    best = float("inf")
    for _ in range(runs):
        start = time.perf_counter()
        work()
        best = min(best, time.perf_counter() - start)
    return best


def in_memory(runs: int) -> None:
    """Print the full audit of a small town in direct solves of its normal equations."""
    import dec
    from dec.demo.town import town

    made = town(SMALL, reversed_meters=1)
    net = dec.Dataset.from_frames(made.edges, made.nodes)
    edges, nodes = made.edges.replace("", None), made.nodes.replace("", None)
    audits = {
        "balance": lambda: dec.balance(net, "flow", "1%+0.05", "open", "demand"),
        "loops": lambda: dec.loops(net, "dh", "dh_sd", "height"),
    }
    for law, audit in audits.items():
        matrix, source = normal_equations(law, edges, nodes)
        matrix = matrix.tocsc()
        unit, took = best_of(lambda: spsolve(matrix, source), runs), best_of(audit, runs)  # noqa: B023 - called at once
        print(f"{law:8s} {SMALL:9,d} edges  full audit {1e3 * took:7.1f} ms, spsolve {1e3 * unit:6.2f} ms   ratio {took / unit:6.1f}")  # fmt: skip # noqa: E501


def main() -> None:
    """Print the times of every size; or be the reference program."""
    parser = argparse.ArgumentParser(description="Times of network audits.")
    parser.add_argument("--edges", type=int, nargs="*", default=[100_000, 1_000_000], metavar="N")
    parser.add_argument("--runs", type=int, default=3, metavar="N")
    parser.add_argument("--reference", nargs=2, metavar=("LAW", "DIR"), help=argparse.SUPPRESS)
    options = parser.parse_args()
    if options.reference:
        reference(options.reference[0], Path(options.reference[1]))
        return
    in_memory(max(5, options.runs))
    for n_edges in options.edges:
        whole_commands(n_edges, options.runs)


if __name__ == "__main__":
    main()
