"""wing.vtu: a stream with circulation round a wing-like hole in a rectangle. Lengths in metres, chord 1 m.

The section is a formula of our own: half the thickness is THICKNESS sqrt(s) (1 - s), the centre line is raised by
4 CAMBER s (1 - s), with s from 0 at the nose to 1 at the tail. The stream is a uniform one plus a vortex within the
hole; it passes through the outline, as it is no solution of the flow past the section.

Run: python meshes/make/wing.py OUTDIR
"""

import numpy as np
from plane import triangulate
from scipy.spatial import cKDTree
from writing import output_folder, write_vtu

THICKNESS, CAMBER = 0.24, 0.05
N_SIDE = 44  # edges on the upper side, and as many on the lower
LOW, HIGH = (-1.2, -1.0), (2.2, 1.0)  # m, corners of the rectangle
N_LONG, N_SHORT = 26, 15  # edges on its sides
STREAM = 20.0  # m/s along x
CIRCULATION = -10.0  # m2/s counter-clockwise, so 10 clockwise
VORTEX = (0.35, 0.05)  # m, within the hole
SEED = 1411


def section(n_side):
    """Corners of the wing section, counter-clockwise from the tail over the upper side to the nose and back below.

    Parameters
    ----------
    n_side : int
        Edges on either side.

    Returns
    -------
    float64 array, shape (2 n_side, 2)
        Corners; the tail comes first.
    """
    t = 1 - np.arange(2 * n_side) / n_side  # 1 at the tail, 0 at the nose, negative on the way back
    s = t**2 * (3 - np.abs(t)) / 2  # closer towards the nose, which is round
    return np.column_stack([s, 4 * CAMBER * s * (1 - s) + np.sign(t) * THICKNESS * np.sqrt(s) * (1 - s)])


def rectangle():
    """Corners and points on the sides of the rectangle, counter-clockwise from the lower left.

    Returns
    -------
    float64 array, shape (2 (N_LONG + N_SHORT), 2)
        Points.
    """
    x = LOW[0] + (HIGH[0] - LOW[0]) * np.arange(N_LONG + 1) / N_LONG
    y = LOW[1] + (HIGH[1] - LOW[1]) * np.arange(N_SHORT + 1) / N_SHORT
    sides = [
        np.column_stack([x[:-1], np.full(N_LONG, LOW[1])]),
        np.column_stack([np.full(N_SHORT, HIGH[0]), y[:-1]]),
        np.column_stack([x[:0:-1], np.full(N_LONG, HIGH[1])]),
        np.column_stack([np.full(N_SHORT, LOW[0]), y[:0:-1]]),
    ]
    return np.concatenate(sides)


def air(points):
    """Velocity of the uniform stream plus the vortex.

    Parameters
    ----------
    points : float64 array, shape (n, 3)
        Positions, metres.

    Returns
    -------
    float64 array, shape (n, 3)
        Metres per second.
    """
    x, y = points[:, 0] - VORTEX[0], points[:, 1] - VORTEX[1]
    turned = np.column_stack([-y, x, np.zeros_like(x)])
    swirl = CIRCULATION / (2 * np.pi) * turned / (x**2 + y**2)[:, None]
    return [STREAM, 0.0, 0.0] + swirl + 0.0  # no negative zeros


def main():
    """Write wing.vtu."""
    folder = output_folder("make wing.vtu")
    outer, hole = rectangle(), section(N_SIDE)
    coarse = (HIGH[0] - LOW[0]) / N_LONG
    on_hole = cKDTree(hole)
    fine = np.linalg.norm(hole - np.roll(hole, -1, axis=0), axis=1)
    fine = np.maximum(fine, np.roll(fine, 1))

    def size(points):
        distance, nearest = on_hole.query(points)
        return np.minimum(fine[nearest] + 0.135 * distance, coarse)

    flat, triangles = triangulate(outer, hole, size, seed=SEED)
    points = np.column_stack([np.round(flat, 12), np.zeros(len(flat))]) + 0.0
    write_vtu(folder / "wing.vtu", points, ("triangle", triangles), point_data={"air": air(points)})


if __name__ == "__main__":
    main()
