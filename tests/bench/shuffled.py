"""Triangles in shuffled order on shuffled vertices: the input of the benchmarks beside this file."""

import time
from collections.abc import Callable

import numpy as np


def shuffled_torus(n_triangles: int, *, seed: int = 0) -> np.ndarray:
    """An int64 array of about so many triangles, half as many vertices, nothing in any order."""
    random = np.random.default_rng(seed)
    side = round(np.sqrt(n_triangles / 2))
    number = np.arange(side * side).reshape(side, side)
    right, up = np.roll(number, -1, axis=0), np.roll(number, -1, axis=1)
    across = np.roll(right, -1, axis=1)
    triangles = np.concatenate([np.stack([number, right, across], -1), np.stack([number, across, up], -1)]).reshape(
        -1, 3
    )
    triangles = random.permutation(side * side)[random.permutation(triangles)]
    turn = (random.integers(0, 3, (len(triangles), 1)) + np.arange(3)) % 3
    return np.ascontiguousarray(np.take_along_axis(triangles, turn, axis=1))


def seconds(run: Callable[[], object]) -> float:
    """Time of one run."""
    start = time.perf_counter()
    run()
    return time.perf_counter() - start
