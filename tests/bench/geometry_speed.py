"""How long geometry takes on 2,000,000 triangles, against one gather of corners and one cross product over the faces.

Run as ``python tests/bench/geometry_speed.py [triangles]``. Measures and asserts nothing; runs are interleaved and
ratios are medians.
"""

import sys
import time
from collections.abc import Callable

import numpy as np

from dec.calculus.complex import Complex
from dec.geometry.accuracy import rule_error
from dec.geometry.fields import integrate_field
from dec.geometry.measures import face_area_vectors
from dec.geometry.metric import Metric


def sheet(n_triangles: int, *, seed: int = 0) -> Complex:
    """A bumpy sheet in space, cut into triangles in shuffled order."""
    random = np.random.default_rng(seed)
    side = int(np.sqrt(n_triangles / 2))
    x, y = np.meshgrid(np.arange(side + 1) / side, np.arange(side + 1) / side, indexing="ij")
    points = np.stack([x.ravel(), y.ravel(), 0.1 * np.sin(7 * x * y).ravel()], axis=1)
    points += random.uniform(-0.2, 0.2, points.shape) / side
    low = (np.arange(side)[:, None] * (side + 1) + np.arange(side)).ravel()
    lower, upper = [low, low + side + 1, low + side + 2], [low, low + side + 2, low + 1]
    faces = np.concatenate([np.stack(lower, axis=1), np.stack(upper, axis=1)])
    relabel = random.permutation(len(points))
    placed = np.empty_like(points)
    placed[relabel] = points
    return Complex.from_faces(relabel[random.permutation(faces)], points=placed)


def seconds(run: Callable[[], object]) -> float:
    """Time of one run."""
    start = time.perf_counter()
    run()
    return time.perf_counter() - start


def main() -> None:
    """Print the table."""
    K = sheet(int(sys.argv[1]) if len(sys.argv) > 1 else 2_000_000)
    assert K.points is not None
    assert K.faces is not None
    points, faces = K.points, K.faces.flat.reshape(-1, 3)
    field = np.stack([points[:, 1], -(points[:, 0] ** 2), points[:, 2]], axis=1)

    def unit() -> object:
        a, b, c = (points[faces[:, i]] for i in range(3))
        return np.cross(b - a, c - a)

    runs: dict[str, Callable[[], object]] = {
        "face_area_vectors": lambda: face_area_vectors(K),
        "integrate_field circulation": lambda: integrate_field(K, field),
        "integrate_field flux": lambda: integrate_field(K, field, quantity="flux"),
        "Metric circumcentric": lambda: Metric(K),
        "Metric barycentric": lambda: Metric(K, "barycentric"),
        "rule_error circulation": lambda: rule_error(K, field),
        "rule_error flux": lambda: rule_error(K, field, quantity="flux"),
    }
    small = sheet(20_000)
    compile_time = seconds(lambda: rule_error(small, np.ones((small.counts[0], 3))))
    ratios: dict[str, list[float]] = {name: [] for name in runs}
    base: list[float] = []
    for _ in range(3):
        for name, run in runs.items():
            one = seconds(unit)
            ratios[name].append(seconds(run) / one)
            base.append(one)
    print(f"{K}\nunit: {np.median(base):.3f} s; first call, compiled: {compile_time:.1f} s")
    for name, values in ratios.items():
        print(f"{name:30s} {np.median(values):6.2f} units")


if __name__ == "__main__":
    main()
