"""How long the exact Stokes statement takes over a large mesh, against floating point and against Fractions.

Run: ``python tests/bench/exact_stokes.py [triangles]``. The data on edges are float64 spread over 12 orders of
magnitude; all faces but the first hundred are taken, so that there is a boundary. The float evaluation has its matrix
in float64 and the boundary's coefficients at hand, and makes the derivative and both sums. Interleaved runs; medians.
"""

import os
import subprocess
import sys
import tempfile
from collections.abc import Callable
from fractions import Fraction

import numpy as np
from shuffled import seconds, shuffled_torus

from dec.calculus.chain import Chain
from dec.calculus.cochain import Cochain
from dec.calculus.complex import Complex
from dec.calculus.exact import check_stokes

COMPILING = """
import time
import numpy as np
from dec.calculus.complex import grid
from dec.calculus.exact import check_stokes
K = grid((100, 100))
region, w = K.region(np.arange(K.counts[2])), K.cochain(1, np.ones(K.counts[1]))
start = time.perf_counter()
check_stokes(region, w)
print(time.perf_counter() - start)
"""


def problem(n_triangles: int) -> tuple[Chain, Cochain]:
    """Faces of a torus without a patch, and edge data spread over 12 orders of magnitude."""
    random = np.random.default_rng(1)
    K = Complex.from_faces(shuffled_torus(n_triangles))
    size = 10 ** random.uniform(-6, 6, K.counts[1])
    return K.region(np.arange(100, K.counts[2])), K.cochain(1, size * random.choice([-1, 1], K.counts[1]))


def float_way(region: Chain, w: Cochain) -> Callable[[], object]:
    """The derivative and both sums in floating point, everything else prepared."""
    D, values = region.complex.coboundary(1).astype(np.float64), w.values
    over, boundary = region.coefficients.astype(np.float64), region.boundary().coefficients.astype(np.float64)
    return lambda: (over @ (D @ values), boundary @ values)


def fraction_way(region: Chain, w: Cochain, n_faces: int) -> Callable[[], object]:
    """The sum of the derivative over some faces in Python Fractions, edge by edge."""
    D = region.complex.coboundary(1)[100 : 100 + n_faces].astype(int)
    signs, values = D.data.tolist(), w.values[D.indices].tolist()
    return lambda: sum((s * Fraction(v) for s, v in zip(signs, values, strict=True)), Fraction(0))


def compile_times() -> list[float]:
    """Time of a first small check in a fresh process, without and with machine code from an earlier one."""
    with tempfile.TemporaryDirectory() as folder:
        environment = os.environ | {"NUMBA_CACHE_DIR": folder}
        command = [sys.executable, "-c", COMPILING]
        return [
            float(subprocess.run(command, env=environment, check=True, capture_output=True).stdout) for _ in range(2)
        ]


def main() -> None:
    """Print the table."""
    n, sample = int(sys.argv[1]) if len(sys.argv) > 1 else 2_000_000, 2_000
    region, w = problem(n)
    floats, fractions = float_way(region, w), fraction_way(region, w, sample)
    finding = check_stokes(region, w)
    print(f"{region}: holds {finding.holds}, both sides {float(finding.left)!r}, in floats {floats()}")
    exact, rounded, slow = [], [], []
    for _ in range(9):
        exact.append(seconds(lambda: check_stokes(region, w)))
        rounded.append(seconds(floats))
        slow.append(seconds(fractions) / sample * len(region.coefficients))
    ratio = np.median(np.array(exact) / np.array(rounded))
    print(f"exact {np.median(exact):.3f} s, float {np.median(rounded):.4f} s, median ratio of pairs {ratio:.1f}")
    print(f"Fractions, one side, scaled up from {sample:,} faces: {np.median(slow):.0f} s, "
          f"{np.median(np.array(slow) / np.array(exact)):.0f} times as long")  # fmt: skip
    first, later = compile_times()
    print(f"first check of a process: {first:.1f} s where it has to compile, {later:.2f} s with machine code kept")


if __name__ == "__main__":
    main()
