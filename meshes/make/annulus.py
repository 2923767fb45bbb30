"""annulus.vtu: a vortex in a plane ring, 1 < r < 2. Lengths in metres.

Run: python meshes/make/annulus.py OUTDIR
"""

import numpy as np
from plane import triangulate
from writing import output_folder, write_vtu

INNER_RADIUS, OUTER_RADIUS = 1.0, 2.0  # m
N_INNER, N_OUTER = 56, 112
CIRCULATION = 2 * np.pi  # m2/s, counter-clockwise: one unit of vortex strength
SEED = 1202


def circle(radius, n_points):
    """Corners of a regular polygon on a circle round the origin, counter-clockwise.

    Parameters
    ----------
    radius : float
        Radius, metres.
    n_points : int
        Number of corners.

    Returns
    -------
    float64 array, shape (n_points, 2)
        Corners.
    """
    angle = 2 * np.pi * np.arange(n_points) / n_points
    return radius * np.column_stack([np.cos(angle), np.sin(angle)])


def vortex(points):
    """Velocity of a vortex at the origin.

    Parameters
    ----------
    points : float64 array, shape (n, 3)
        Positions, metres, none on the axis.

    Returns
    -------
    float64 array, shape (n, 3)
        Metres per second.
    """
    x, y, _ = points.T
    turned = np.column_stack([-y, x, np.zeros_like(x)])
    return CIRCULATION / (2 * np.pi) * turned / (x**2 + y**2)[:, None] + 0.0  # no negative zeros


def main():
    """Write annulus.vtu."""
    folder = output_folder("make annulus.vtu")
    length = 2 * np.pi * INNER_RADIUS / N_INNER
    flat, triangles = triangulate(
        circle(OUTER_RADIUS, N_OUTER),
        circle(INNER_RADIUS, N_INNER),
        lambda points: np.full(len(points), length),
        seed=SEED,
        n_smoothing=2,
    )
    points = np.column_stack([flat, np.zeros(len(flat))])
    write_vtu(
        folder / "annulus.vtu",
        points,
        ("triangle", triangles),
        point_data={"vortex": vortex(points)},
        cell_data={"vortex_c": vortex(points[triangles].mean(axis=1))},
    )


if __name__ == "__main__":
    main()
