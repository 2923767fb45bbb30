"""Our solvers and their peers on the same six problems, in interleaved runs; writes a table in Markdown.

Run as ``python tests/bench/solvers.py --n 1000000 --rounds 5 --out table.md``. Every run is a process of its own with a
limit on memory and on time, so that a peer that fails does not end the others; a peer that failed or was ten times
slower than ours in its first run is not run again. Measures and asserts nothing.
"""

import argparse
import json
import resource
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csc_array, csr_array

FloatArray = NDArray[np.float64]
Solver = Callable[[csr_array, FloatArray], FloatArray]
PEERS = ("spsolve", "splu", "cg", "ruge_stuben", "smoothed_aggregation", "rootnode", "cholmod", "gamg", "hypre")
RTOL = 1e-8


def peer(name: str, rtol: float) -> Solver:
    """A solver of a positive definite system, everything but its loading included."""
    if name == "spsolve":
        from scipy.sparse.linalg import spsolve

        return lambda A, b: spsolve(csc_array(A), b)
    if name == "splu":
        from scipy.sparse.linalg import splu

        options = {"SymmetricMode": True}
        return lambda A, b: splu(
            csc_array(A), permc_spec="MMD_AT_PLUS_A", diag_pivot_thresh=0.0, options=options
        ).solve(b)
    if name == "cg":
        return lambda A, b: jacobi(A, b, rtol)
    if name == "cholmod":
        from scipy.sparse import csc_matrix
        from sksparse.cholmod import cholesky

        return lambda A, b: cholesky(csc_matrix(A))(b)
    if name in {"gamg", "hypre"}:
        return petsc(name, rtol)
    import pyamg

    build = getattr(pyamg, f"{name}_solver")
    return lambda A, b: build(A).solve(b, tol=rtol, accel="cg", maxiter=500)


def jacobi(A: csr_array, b: FloatArray, rtol: float) -> FloatArray:
    """SciPy's conjugate gradients with the diagonal."""
    from scipy.sparse.linalg import LinearOperator, cg

    inverse = 1 / A.diagonal()
    return cg(A, b, rtol=rtol, M=LinearOperator(A.shape, lambda r: inverse * r), maxiter=5000)[0]  # type: ignore[no-any-return]


def petsc(kind: str, rtol: float) -> Solver:
    """PETSc's conjugate gradients with one of its multigrids."""
    from petsc4py import PETSc

    def solve(A: csr_array, b: FloatArray) -> FloatArray:
        matrix = PETSc.Mat().createAIJ(size=A.shape, csr=(A.indptr, A.indices, A.data))
        solver = PETSc.KSP().create()
        solver.setOperators(matrix)
        solver.setType("cg")
        solver.setNormType(PETSc.KSP.NormType.UNPRECONDITIONED)
        solver.getPC().setType(kind)
        solver.setTolerances(rtol=rtol, max_it=1000)
        x, right = matrix.createVecs()
        right.setArray(b)
        solver.solve(right, x)
        return np.array(x.getArray())

    return solve


def ours(method: str, A: csr_array, b: FloatArray, singular: bool) -> dict[str, object]:
    """One run of our engine: choosing, preparing, solving."""
    from dec.solvers.choice import method_named
    from dec.solvers.problem import LinearProblem

    warm = LinearProblem.of_graph(np.arange(3000), np.arange(1, 3001), 3001, np.ones(3000))
    for name in ("elimination", "gradients"):  # loads compiled code, as PyAMG's is loaded by its import
        method_named(name, warm).method.prepare(warm).solve(np.eye(1, 3001)[0] - 1 / 3001, 0.9)
    start = time.perf_counter()
    problem = LinearProblem.of_matrix(A, np.zeros(len(b), np.int64), singular)
    begin = time.perf_counter()
    choice = method_named(method, problem)
    answer = choice.method.prepare(problem).solve(b, RTOL)
    end = time.perf_counter()
    return {"seconds": end - begin, "checking": begin - start, "x": answer.x, "steps": answer.iterations,
            "because": choice.because}  # fmt: skip


def theirs(name: str, A: csr_array, b: FloatArray, singular: bool) -> dict[str, object]:
    """One run of a peer, on the matrix grounded at its first unknown where constants are its kernel.

    Conjugate gradients need no ground, and are faster without.
    """
    grounded = singular and name != "cg"
    inner, right = (sorted_part(A), b[1:]) if grounded else (A, b)
    solve = peer(name, RTOL)
    start = time.perf_counter()
    y = solve(inner, right)
    seconds = time.perf_counter() - start
    return {"seconds": seconds, "x": np.concatenate([[0.0], y]) if grounded else y}


def sorted_part(A: csr_array) -> csr_array:
    """The matrix without its first row and column, with 32-bit indices."""
    part = csr_array(A[1:, 1:])
    part.sort_indices()
    return csr_array((part.data, part.indices.astype(np.int32), part.indptr.astype(np.int32)), shape=part.shape)


def one_run(path: str, name: str, gigabytes: float) -> dict[str, object]:
    """Run one solver in this process; return what was measured."""
    import threadpoolctl

    resource.setrlimit(resource.RLIMIT_AS, (int(gigabytes * 2**30),) * 2)
    with np.load(path) as stored:
        n = len(stored["b"])
        A = csr_array((stored["data"], stored["indices"], stored["indptr"]), shape=(n, n))
        b, singular = stored["b"], bool(stored["singular"])
    A.has_canonical_format = True
    with threadpoolctl.threadpool_limits(1):
        before = peak_megabytes()
        kind, _, method = name.partition(":")
        run = ours(method, A, b, singular) if kind == "dec" else theirs(name, A, b, singular)
        after = peak_megabytes()
    x = np.asarray(run.pop("x"))
    left = b - A @ x
    size = float(np.abs(A).sum(axis=1).max() * np.abs(x).max() + np.abs(b).max())
    return run | {
        "residual": float(np.linalg.norm(left) / np.linalg.norm(b)), "backward": float(np.abs(left).max() / size),
        "megabytes": after, "added": after - before,
    }  # fmt: skip


def peak_megabytes() -> float:
    """The most memory this program has held; the kernel's figure for children would include what the parent held."""
    status = Path("/proc/self/status").read_text(encoding="utf-8")
    return int(status.split("VmHWM:")[1].split()[0]) / 1024


def measure(path: str, name: str, gigabytes: float, seconds: float) -> dict[str, object]:
    """Run one solver in a process of its own."""
    command = [sys.executable, __file__, "--one", path, name, "--gigabytes", str(gigabytes)]
    try:
        done = subprocess.run(command, capture_output=True, text=True, timeout=seconds, check=False)
    except subprocess.TimeoutExpired:
        return {"failed": f"over {seconds:.0f} s"}
    if done.returncode:
        lines = done.stderr.strip().splitlines() or [f"exit {done.returncode}"]
        if "No module named" in lines[-1]:
            return {"missing": lines[-1]}
        return {"failed": "memory" if "Memory" in done.stderr or done.returncode < 0 else lines[-1][:60]}
    return json.loads(done.stdout.splitlines()[-1])  # type: ignore[no-any-return]


def product_seconds(path: str) -> float:
    """Time of one product with the matrix: the median of nine."""
    with np.load(path) as stored:
        n = len(stored["b"])
        A = csr_array((stored["data"], stored["indices"], stored["indptr"]), shape=(n, n))
        b = stored["b"]
    times = []
    for _ in range(9):
        start = time.perf_counter()
        A @ b
        times.append(time.perf_counter() - start)
    return statistics.median(times)


def bench(label: str, path: str, solvers: list[str], options: argparse.Namespace) -> list[str]:
    """Rows of the table for one problem."""
    runs: dict[str, list[dict[str, object]]] = {name: [] for name in solvers}
    for _ in range(options.rounds):
        for name in solvers:
            if name.startswith("dec:") or worth_another(runs[name], runs[solvers[0]]):
                runs[name].append(measure(path, name, options.gigabytes, options.seconds))
                print(label, name, runs[name][-1], file=sys.stderr, flush=True)
    product = product_seconds(path)
    rows = []
    for name, list_of_runs in runs.items():
        if "missing" not in list_of_runs[0]:
            rows.append(row(label, name, list_of_runs, runs[solvers[0]], product))
    return rows


def worth_another(runs: list[dict[str, object]], reference: list[dict[str, object]]) -> bool:
    """Whether a peer ran well enough, or not at all yet."""
    if not runs:
        return True
    if "seconds" not in runs[-1] or "seconds" not in reference[0]:
        return False
    return float(str(runs[-1]["seconds"])) < 10 * float(str(reference[0]["seconds"]))


def row(
    label: str, name: str, runs: list[dict[str, object]], reference: list[dict[str, object]], product: float
) -> str:
    """One row: median time, ratio to ours as the median of paired runs, products, memory, residual."""
    good = [run for run in runs if "seconds" in run]
    if not good:
        return f"| {label} | {name} | {runs[0].get('failed', '?')} | | | | | |"
    seconds = statistics.median(float(str(run["seconds"])) for run in good)
    paired = [
        float(str(mine["seconds"])) / float(str(run["seconds"]))
        for mine, run in zip(reference, runs, strict=False) if "seconds" in run and "seconds" in mine
    ]  # fmt: skip
    worst = max(float(str(run["residual"])) for run in good)
    backward = max(float(str(run["backward"])) for run in good)
    ratio = f"{statistics.median(paired):.2f}" if paired else ""
    verdict = "" if worst <= 1.01 * RTOL or backward <= 1e-14 else " (missed)"
    return (
        f"| {label} | {name} | {seconds:.2f} | {ratio} | {seconds / product:.0f} | "
        f"{max(float(str(run['megabytes'])) for run in good):.0f} | {worst:.1e}{verdict} | {backward:.0e} |"
    )


HEAD = """| problem | solver | s | ours / it | products | MB | residual | backward error |
| --- | --- | --: | --: | --: | --: | --: | --: |"""


def main() -> None:
    """Read the command line and run."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--n", type=int, default=1_000_000, help="unknowns; P3 takes half")
    parser.add_argument("--rounds", type=int, default=5)
    parser.add_argument("--problems", default="P1,P2,P3,P4,P5,P6")
    parser.add_argument("--solvers", default="dec:auto," + ",".join(PEERS))
    parser.add_argument("--seconds", type=float, default=150.0, help="time limit of a run")
    parser.add_argument("--gigabytes", type=float, default=6.0, help="address space of a run")
    parser.add_argument("--out", type=Path)
    parser.add_argument("--one", nargs=2, metavar=("PROBLEM", "SOLVER"), help="run one solver in this process")
    options = parser.parse_args()
    if options.one:
        print(json.dumps(one_run(*options.one, options.gigabytes)))
        return
    from problems import PROBLEMS  # type: ignore[import-not-found]  # the file beside this one

    lines = [HEAD]
    with tempfile.TemporaryDirectory() as folder:
        for label in options.problems.split(","):
            problem = PROBLEMS[label](options.n)
            path = f"{folder}/{label}.npz"
            A = problem.matrix
            np.savez(path, data=A.data, indices=A.indices, indptr=A.indptr, b=problem.right_side,
                     singular=problem.singular)  # fmt: skip
            lines += bench(label, path, options.solvers.split(","), options)
            if options.out:
                options.out.write_text("\n".join(lines) + "\n", encoding="utf-8")
    print("\n".join(lines))


if __name__ == "__main__":
    main()
