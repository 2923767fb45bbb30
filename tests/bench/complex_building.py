"""How long a complex takes to build, against the usual way to tell edges apart, and how much memory it needs.

Run: ``python tests/bench/complex_building.py [triangles]``. Building means edges, both incidence matrices and all
signs; the usual way is ``numpy.unique`` over sorted vertex pairs with ``axis=0`` and inverse, which gives edges only.
Pairs of runs are interleaved and their ratios' median is printed. Memory is the rise of the peak in a fresh process
over the int64 input. Growth of the time per triangle is told twice: against 20 different meshes of a twentieth of the
size, all results kept, so that as much memory is touched; and against one such mesh again and again, which stays in
the processor's cache.
"""

import subprocess
import sys
import tempfile
from pathlib import Path

import numpy as np
from shuffled import seconds, shuffled_torus

from dec.calculus.complex import Complex


def usual_way(triangles: np.ndarray) -> object:
    """Edges and which of them each side is, as they are usually found."""
    pairs = np.concatenate([triangles[:, [0, 1]], triangles[:, [1, 2]], triangles[:, [2, 0]]])
    return np.unique(np.sort(pairs, axis=1), axis=0, return_inverse=True)


def resident(field: str) -> int:
    """Bytes of this process in memory: VmRSS now, VmHWM at most so far (ru_maxrss would count the parent's too)."""
    lines = Path("/proc/self/status").read_text().splitlines()
    return int(next(line for line in lines if line.startswith(field)).split()[1]) * 1024


def memory_rise(path: str) -> None:
    """Print, from a fresh process, by how many times the input the peak of memory rises while building."""
    triangles = np.load(path)
    before = resident("VmRSS")
    K = Complex.from_faces(triangles)
    peak, kept = (round((resident(field) - before) / triangles.nbytes, 2) for field in ("VmHWM", "VmRSS"))
    print(f"memory: rises by {peak} times the int64 input, {kept} times stay with {K.counts[2]:,} faces")


def main() -> None:
    """Print the table."""
    if sys.argv[1:2] == ["--memory"]:
        memory_rise(sys.argv[2])
        return
    n = int(sys.argv[1]) if len(sys.argv) > 1 else 2_000_000
    triangles = shuffled_torus(n)
    print(Complex.from_faces(triangles))
    ours, usual = [], []
    for _ in range(5):
        ours.append(seconds(lambda: Complex.from_faces(triangles)))
        usual.append(seconds(lambda: usual_way(triangles)))
    ratio = np.median(np.array(usual) / np.array(ours))
    print(f"build: {np.median(ours):.3f} s, usual way {np.median(usual):.3f} s, median ratio of pairs {ratio:.1f}")
    few = [shuffled_torus(n // 20, seed=seed) for seed in range(20)]
    fresh, cached = [], []
    for _ in range(7):
        one = seconds(lambda: Complex.from_faces(triangles)) / len(triangles)
        fresh.append(one / (seconds(lambda: [Complex.from_faces(part) for part in few]) / sum(map(len, few))))
        cached.append(one / (min(seconds(lambda: Complex.from_faces(few[0])) for _ in range(5)) / len(few[0])))
    print(f"time per triangle from {n // 20:,} to {n:,}: grows {np.median(fresh):.2f} times against different meshes, "
          f"{np.median(cached):.2f} times against one in the cache")  # fmt: skip
    with tempfile.TemporaryDirectory() as folder:
        path = str(Path(folder) / "triangles.npy")
        np.save(path, triangles)
        subprocess.run([sys.executable, __file__, "--memory", path], check=True)


if __name__ == "__main__":
    main()
