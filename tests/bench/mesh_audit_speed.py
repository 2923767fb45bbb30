"""How long the two audits of a mesh take on 2,000,000 triangles, against one gather of corners and one cross product.

Run as ``python tests/bench/mesh_audit_speed.py [triangles]``. Measures and asserts nothing; every audit starts from a
complex that has computed nothing yet, runs are interleaved and ratios are medians.
"""

import resource
import statistics
import sys
import time
from collections.abc import Callable

import numpy as np

from dec.audit.questions import balance, loops
from dec.calculus.complex import Complex
from dec.calculus.dataset import Dataset, Field

_ROUNDS = 5


def grid_of_triangles(n_triangles: int) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """A plane sheet with a hole in the middle: faces, points and a smooth field with a vortex round the hole."""
    side = round((n_triangles / 2) ** 0.5)
    number = np.arange((side + 1) ** 2).reshape(side + 1, side + 1)
    a, b, c, d = (part.ravel() for part in (number[:-1, :-1], number[1:, :-1], number[1:, 1:], number[:-1, 1:]))
    faces = np.concatenate([np.stack([a, b, c], axis=1), np.stack([a, c, d], axis=1)])
    line = np.linspace(-1, 1, side + 1)
    points = np.stack(np.meshgrid(line, line, indexing="ij"), axis=-1).reshape(-1, 2)
    points += np.random.default_rng(0).uniform(-0.3, 0.3, points.shape) * (line[1] - line[0])
    faces = faces[(np.abs(points[faces]).max(axis=(1, 2)) > 0.1)]
    x, y = points.T
    square = np.maximum(x**2 + y**2, 1e-4)
    field = np.stack([np.sin(2 * y) - y / square, 2 * x * np.cos(2 * y) + x / square], axis=1)
    return faces, points, field


def seconds(run: Callable[[], object]) -> float:
    """Time of one run."""
    start = time.perf_counter()
    run()
    return time.perf_counter() - start


def main() -> None:
    """Print the table."""
    faces, points, field = grid_of_triangles(int(sys.argv[1]) if len(sys.argv) > 1 else 2_000_000)
    space = np.concatenate([points, np.zeros((len(points), 1))], axis=1)

    def unit() -> object:
        a, b, c = (space[faces[:, i]] for i in range(3))
        return np.cross(b - a, c - a)

    def fresh() -> Dataset:
        values = {"U": {"vertices": Field("U", "vertices", field)}}
        return Dataset(Complex.from_faces(faces, points=points), {}, values)

    audits = {"loops": loops, "balance": balance}
    times: dict[str, list[float]] = {"unit": [], "building": [], **{name: [] for name in audits}}
    for name, audit in audits.items():  # compiles what is not compiled yet
        before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
        data = fresh()
        between = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
        found = audit(data, field="U")
        after = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
        print(f"{name}: peak {before / 1e3:.0f} MB, {between / 1e3:.0f} MB built, {after / 1e3:.0f} MB audited")
        print(f"    {found.extra['verdict']}")
        del found, data
    for _ in range(_ROUNDS):
        times["unit"].append(seconds(unit))
        for name, audit in audits.items():
            start = time.perf_counter()
            data = fresh()
            times["building"].append(time.perf_counter() - start)
            times[name].append(seconds(lambda audit=audit, data=data: audit(data, field="U")))
    base = statistics.median(times["unit"])
    print(f"{len(faces):,} triangles; one gather and cross product: {base:.3f} s")
    for name, found_times in times.items():
        middle = statistics.median(found_times)
        print(f"{name:10s} {middle:7.3f} s  {middle / base:6.1f} times")


if __name__ == "__main__":
    main()
