"""Counts of mesh files by plain NumPy: vertices, edges, faces, cells, borders, turning.

Run: python meshes/make/counting.py FILE...
"""

import sys
from pathlib import Path

import meshio
import numpy as np
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components

TETRA_FACES = np.array([[1, 2, 3], [0, 3, 2], [0, 1, 3], [0, 2, 1]])  # outward where the volume is positive


def count(path):
    """Vertices, edges, faces, cells, borders and turning of one mesh file, counted.

    Equal points of an STL are one vertex; chi is the Euler characteristic.

    Parameters
    ----------
    path : pathlib.Path
        A file of one kind of cell: triangles, quads or tetrahedra.

    Returns
    -------
    dict of str to int or float
        Numbers by name.
    """
    mesh = meshio.read(path)
    points, cells = mesh.points.astype(np.float64), mesh.cells[0].data.astype(np.int64)
    if path.suffix == ".stl":
        points, number = np.unique(points, axis=0, return_inverse=True)
        cells = number.reshape(-1)[cells]
    result = {"V": len(points), "unused V": len(points) - len(np.unique(cells))}
    if mesh.cells[0].type != "tetra":
        return result | _surface(points, cells)
    return result | _solid(points, cells)


def _solid(points, cells):
    """Edges, faces, volumes and skin of tetrahedra."""
    corners = points[cells]
    volumes = np.linalg.det(corners[:, 1:] - corners[:, :1]) / 6
    faces = cells[:, TETRA_FACES].reshape(-1, 3)
    _, first, n_uses = np.unique(np.sort(faces, axis=1), axis=0, return_index=True, return_counts=True)
    pairs = np.concatenate([cells[:, [i, j]] for i in range(4) for j in range(i)])
    n_edges = len(np.unique(np.sort(pairs, axis=1), axis=0))
    result = {
        "E": n_edges,
        "F": len(n_uses),
        "C": len(cells),
        "chi": len(np.unique(cells)) - n_edges + len(n_uses) - len(cells),
        "faces of more than two": int(np.sum(n_uses > 2)),
        "least volume": volumes.min(),
        "volume": volumes.sum(),
    }
    skin = _surface(points, faces[first[n_uses == 1]])
    return result | {f"skin {name}": value for name, value in skin.items()}


def _surface(points, faces):
    """Edges, borders and turning of triangles or quads."""
    tail, head = faces.reshape(-1), np.roll(faces, -1, axis=1).reshape(-1)
    edges, number = np.unique(np.sort(np.column_stack([tail, head]), axis=1), axis=0, return_inverse=True)
    number = number.reshape(-1)
    n_uses = np.bincount(number)
    turned = np.bincount(number, weights=np.where(tail < head, 1, -1))
    used = np.unique(faces)
    border = edges[n_uses == 1]
    corners = points[faces]
    fan = [(corners[:, 0], corners[:, i], corners[:, i + 1]) for i in range(1, faces.shape[1] - 1)]
    areas = [np.linalg.norm(np.cross(b - a, c - a), axis=1) / 2 for a, b, c in fan]
    return {
        "E": len(edges),
        "F": len(faces),
        "chi": len(used) - len(edges) + len(faces),
        "parts": _n_parts(edges, used),
        "border edges": len(border),
        "borders": _n_parts(border, np.unique(border)),
        "edges of more than two": int(np.sum(n_uses > 2)),
        "badly turned": int(np.sum((n_uses == 2) & (turned != 0))),
        "least area": min(area.min() for area in areas),
        "area": sum(area.sum() for area in areas),
        "signed volume": sum(np.sum(a * np.cross(b, c)) for a, b, c in fan) / 6,
    }


def _n_parts(edges, vertices):
    """How many pieces the edges join the vertices into."""
    if len(vertices) == 0:
        return 0
    ends = np.searchsorted(vertices, edges)
    joined = coo_array((np.ones(len(ends)), ends.T), shape=(len(vertices), len(vertices)))
    return int(connected_components(joined, directed=False)[0])


def main():
    """Print the counts of the files named on the command line."""
    for name in sys.argv[1:]:
        counts = count(Path(name))
        print(f"{Path(name).name}: " + ", ".join(f"{key} {value:.6g}" for key, value in counts.items()))


if __name__ == "__main__":
    main()
