"""elbow.vtu: water in a quarter bend of a round pipe, as tetrahedra. Lengths in metres.

A structured disc is swept about the z axis; each prism is cut into three tetrahedra by the order of its vertex numbers,
so that neighbours cut their common face alike.

Run: python meshes/make/elbow.py OUTDIR
"""

import numpy as np
from writing import output_folder, write_vtu

PIPE_RADIUS, BEND_RADIUS = 0.05, 0.15  # m
N_RINGS, N_LAYERS = 3, 14
TURNING = 10.0  # rad/s: 1.5 m/s on the centre line


def disc(n_rings):
    """Points and triangles of the unit disc: a centre and rings of 6, 12, 18, ... points.

    Parameters
    ----------
    n_rings : int
        Number of rings.

    Returns
    -------
    points : float64 array, shape (1 + 3 n_rings (n_rings + 1), 2)
        The centre, then ring after ring.
    triangles : int64 array, shape (6 n_rings**2, 3)
        Corners, counter-clockwise.
    """
    points, triangles = [np.zeros((1, 2))], []
    inner, n_inner = np.zeros(1, dtype=np.int64), 1
    for ring in range(1, n_rings + 1):
        n_outer = 6 * ring
        angle = 2 * np.pi * np.arange(n_outer) / n_outer
        points.append(ring / n_rings * np.column_stack([np.cos(angle), np.sin(angle)]))
        outer = n_inner + np.arange(n_outer)
        sector, step = np.divmod(np.arange(n_outer), ring)
        near = inner[(sector * (ring - 1) + step) % len(inner)]
        triangles.append(np.column_stack([near, outer, np.roll(outer, -1)]))
        between = step > 0  # these steps also have a triangle with its base on the inner ring
        before = inner[(sector * (ring - 1) + step - 1) % len(inner)]
        triangles.append(np.column_stack([before, outer, near])[between])
        inner, n_inner = outer, n_inner + n_outer
    return np.concatenate(points), np.concatenate(triangles)


def sweep(section, triangles, n_layers):
    """Points and tetrahedra of the section swept through a quarter turn about the z axis.

    Parameters
    ----------
    section : float64 array, shape (m, 2)
        Distance from the axis and height, metres.
    triangles : int64 array, shape (t, 3)
        Triangles of the section.
    n_layers : int
        Steps of the sweep.

    Returns
    -------
    points : float64 array, shape (m (n_layers + 1), 3)
        Layer after layer.
    tetrahedra : int64 array, shape (3 t n_layers, 4)
        Corners, all of positive volume, layer after layer.
    """
    angle = np.repeat(np.pi / 2 * np.arange(n_layers + 1) / n_layers, len(section))
    distance, height = np.tile(section, (n_layers + 1, 1)).T
    points = np.round(np.column_stack([distance * np.cos(angle), distance * np.sin(angle), height]), 12) + 0.0

    low = np.sort(triangles, axis=1)
    high = low + len(section)
    a, b, c = low.T
    prism = np.stack(
        [
            np.column_stack([a, b, c, high[:, 2]]),
            np.column_stack([a, b, high[:, 1], high[:, 2]]),
            np.column_stack([a, high[:, 0], high[:, 1], high[:, 2]]),
        ],
        axis=1,
    ).reshape(-1, 4)
    tetrahedra = (prism + len(section) * np.arange(n_layers)[:, None, None]).reshape(-1, 4)
    edges = points[tetrahedra[:, 1:]] - points[tetrahedra[:, :1]]
    is_negative = np.linalg.det(edges) < 0
    tetrahedra[is_negative] = tetrahedra[is_negative][:, [0, 2, 1, 3]]
    return points, tetrahedra


def main():
    """Write elbow.vtu."""
    folder = output_folder("make elbow.vtu")
    unit, triangles = disc(N_RINGS)
    section = [BEND_RADIUS, 0.0] + PIPE_RADIUS * unit
    points, tetrahedra = sweep(section, triangles, N_LAYERS)
    x, y, _ = points.T
    flow = TURNING * np.column_stack([-y, x, np.zeros_like(x)])
    layer = np.arange(len(tetrahedra)) // (3 * len(triangles))
    part = np.where(layer < N_LAYERS // 2, 1, 2).astype(np.int32)
    write_vtu(
        folder / "elbow.vtu",
        points,
        ("tetra", tetrahedra),
        point_data={"flow": flow + 0.0},  # no negative zeros
        cell_data={"part": part},
    )


if __name__ == "__main__":
    main()
