"""moebius.obj: a band of 30 by 4 quads, closed with a half twist.

Neighbouring quads are turned alike everywhere but across the seam, where no turning can make all of them agree.

Run: python meshes/make/moebius.py OUTDIR
"""

import numpy as np
from writing import output_folder, write_obj

N_AROUND, N_ACROSS = 30, 4
RADIUS, WIDTH = 1.0, 0.6


def moebius():
    """Points and quads of the strip, its centre line the unit circle of the plane z = 0.

    Returns
    -------
    points : float64 array, shape (150, 3)
        Vertex ``5 i + j`` lies at step i round the circle, step j across the band.
    quads : int64 array, shape (120, 4)
        Corners; the last four quads close the band through the twist.
    """
    rows = N_ACROSS + 1
    i, j = np.divmod(np.arange(N_AROUND * rows), rows)
    around = 2 * np.pi * i / N_AROUND
    across = WIDTH * (j / N_ACROSS - 0.5)
    radius = RADIUS + across * np.cos(around / 2)
    points = np.column_stack([radius * np.cos(around), radius * np.sin(around), across * np.sin(around / 2)])

    i, j = np.divmod(np.arange(N_AROUND * N_ACROSS), N_ACROSS)
    is_seam = i == N_AROUND - 1
    a, d = rows * i + j, rows * i + j + 1
    b = np.where(is_seam, N_ACROSS - j, a + rows)  # the far side of the seam is the first row upside down
    c = np.where(is_seam, N_ACROSS - j - 1, d + rows)
    return points, np.column_stack([a, b, c, d])


def main():
    """Write moebius.obj."""
    points, quads = moebius()
    write_obj(
        output_folder("make moebius.obj") / "moebius.obj",
        points,
        quads,
        comment="Moebius strip, radius 1, width 0.6. BSD-3-Clause, the dec authors",
    )


if __name__ == "__main__":
    main()
