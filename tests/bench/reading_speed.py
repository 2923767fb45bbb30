"""How long an edge table of 1,000,000 rows and meshes of 1,000,000 faces take to read, against pandas alone.

Run as ``python tests/bench/reading_speed.py [rows]``. Measures and asserts nothing; runs are interleaved, best of five.
"""

import io
import sys
import time
from collections.abc import Callable

import numpy as np
import pandas as pd

from dec.files.formats import MESH_FORMATS
from dec.files.sources import Source
from dec.files.tables import read_csv


def table(rows: int, mark: str, *, seed: int = 1) -> bytes:
    """An edge table with five columns, its first two in quotation marks if any are given."""
    random = np.random.default_rng(seed)
    ends = random.integers(0, rows // 3 + 1, (rows, 2)).tolist()
    flows = np.round(random.normal(0, 50, rows), 3).tolist()
    lines = [
        f"{mark}P{k}{mark},{mark}J{a}{mark},J{b},{flow},0.5"
        for k, ((a, b), flow) in enumerate(zip(ends, flows, strict=True))
    ]
    return ("id,from,to,flow,sd\n" + "\n".join(lines) + "\n").encode()


def meshes(n_faces: int) -> dict[str, bytes]:
    """The same wavy sheet of triangles as OBJ, OFF, binary STL and binary PLY."""
    side = int((n_faces / 2) ** 0.5)
    x, y = (axis.ravel() for axis in np.meshgrid(np.arange(side + 1), np.arange(side + 1), indexing="ij"))
    points = np.stack([x, y, np.sin(x / 10)], axis=1)
    low = (np.arange(side)[:, None] * (side + 1) + np.arange(side)).ravel()
    faces = np.concatenate([low[:, None] + [0, side + 1, side + 2], low[:, None] + [0, side + 2, 1]])
    rows = [f"{px!r} {py!r} {pz!r}" for px, py, pz in points.tolist()]
    loops = [f"{a} {b} {c}" for a, b, c in faces.tolist()]
    ones = [f"{a}/{a} {b}/{b} {c}/{c}" for a, b, c in (faces + 1).tolist()]
    facets = np.zeros(len(faces), dtype=[("normal", "<f4", 3), ("corners", "<f4", (3, 3)), ("attribute", "<u2")])
    facets["corners"] = points[faces]
    records = np.zeros(len(faces), dtype=[("count", "u1"), ("corners", "<i4", 3)])
    records["count"], records["corners"] = 3, faces
    head = (
        f"ply\nformat binary_little_endian 1.0\nelement vertex {len(points)}\nproperty double x\nproperty double y\n"
        f"property double z\nelement face {len(faces)}\nproperty list uchar int vertex_indices\nend_header\n"
    )
    return {
        ".obj": ("v " + "\nv ".join(rows) + "\nf " + "\nf ".join(ones) + "\n").encode(),
        ".off": (f"OFF\n{len(points)} {len(faces)} 0\n" + "\n".join(rows) + "\n3 " + "\n3 ".join(loops)).encode(),
        ".stl": b" " * 80 + len(faces).to_bytes(4, "little") + facets.tobytes(),
        ".ply": head.encode() + points.tobytes() + records.tobytes(),
    }


def best(runs: dict[str, Callable[[], object]], *, times: int = 5) -> dict[str, float]:
    """Best time of each run in seconds, one after the other in turn."""
    seconds = dict.fromkeys(runs, float("inf"))
    for _ in range(times):
        for name, run in runs.items():
            start = time.perf_counter()
            run()
            seconds[name] = min(seconds[name], time.perf_counter() - start)
    return seconds


def main() -> None:
    """Print the times."""
    rows = int(sys.argv[1]) if len(sys.argv) > 1 else 1_000_000
    for mark in ("", '"'):
        data = table(rows, mark)
        result = best(
            {
                "pandas.read_csv(dtype=str)": lambda: pd.read_csv(io.BytesIO(data), dtype=str, keep_default_na=False),  # noqa: B023
                "read_csv, checked, with lines": lambda: read_csv(Source("edges.csv", data)),  # noqa: B023
            }
        )
        print(f"{rows} rows, {len(data) / 1e6:.0f} MB, {'with' if mark else 'without'} quotation marks")
        for name, seconds in result.items():
            print(f"  {name:30s} {seconds:6.2f} s")
    for suffix, data in meshes(rows).items():
        form = MESH_FORMATS[suffix]
        seconds = best({suffix: lambda: form.read(Source("part", data))}, times=3)[suffix]  # noqa: B023
        print(f"{form.name:4s} {rows} faces, {len(data) / 1e6:4.0f} MB  {seconds:6.2f} s")


if __name__ == "__main__":
    main()
