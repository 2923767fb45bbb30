"""torus.off: a ring of 24 by 12 quads, each cut into two triangles, outside seen counter-clockwise.

Run: python meshes/make/torus.py OUTDIR
"""

import numpy as np
from writing import output_folder, write_off

N_AROUND, N_TUBE = 24, 12  # steps along the ring and round its tube
RING_RADIUS, TUBE_RADIUS = 2.0, 0.75


def torus():
    """Points and coherent outward triangles of the torus round the z axis.

    Returns
    -------
    points : float64 array, shape (288, 3)
        Vertex ``12 i + j`` lies at step i of the ring, step j of the tube.
    triangles : int64 array, shape (576, 3)
        Corners, counter-clockwise seen from outside.
    """
    i, j = np.divmod(np.arange(N_AROUND * N_TUBE), N_TUBE)
    around, tube = 2 * np.pi * i / N_AROUND, 2 * np.pi * j / N_TUBE
    radius = RING_RADIUS + TUBE_RADIUS * np.cos(tube)
    points = np.column_stack([radius * np.cos(around), radius * np.sin(around), TUBE_RADIUS * np.sin(tube)])
    next_i, next_j = (i + 1) % N_AROUND, (j + 1) % N_TUBE
    a, b = N_TUBE * i + j, N_TUBE * next_i + j
    c, d = N_TUBE * next_i + next_j, N_TUBE * i + next_j
    return points, np.concatenate([np.column_stack([a, b, c]), np.column_stack([a, c, d])])


def main():
    """Write torus.off."""
    points, triangles = torus()
    write_off(
        output_folder("make torus.off") / "torus.off",
        points,
        triangles,
        n_edges=3 * N_AROUND * N_TUBE,
        comment="torus, ring radius 2, tube radius 0.75. BSD-3-Clause, the dec authors",
    )


if __name__ == "__main__":
    main()
