"""Regular grids: the axes checked, the cells numbered, the points placed."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from dec.arrays import IntArray, index_array
from dec.calculus.arguments import per_axis
from dec.errors import InputError
from dec.topology.grids import grid_cells
from dec.topology.polygons import ragged

__all__ = ["Lattice", "grid_parts"]


@dataclass(frozen=True, slots=True)
class Lattice:
    """What a grid was made from: vertices per axis, spacing, first vertex, and which axes close."""

    shape: tuple[int, ...]
    spacing: tuple[float, ...]
    origin: tuple[float, ...]
    periodic: tuple[bool, ...]


def grid_parts(
    shape: int | Sequence[int], spacing: float | Sequence[float], origin: float | Sequence[float],
    periodic: bool | Sequence[bool],
) -> dict[str, Any]:  # fmt: skip
    """What `Complex` takes to make a grid, by argument name.

    Raises
    ------
    InputError
        As `dec.calculus.complex.grid`.

    Examples
    --------
    >>> grid_parts(3, 1.0, 0.0, True)["head"]
    array([1, 2, 0])
    """
    sizes = tuple(index_array(np.atleast_1d(shape), "shape").tolist())
    if not 1 <= len(sizes) <= 3 or min(sizes) < 1:
        message = f"shape must give at least 1 vertex on each of 1 to 3 axes, got {shape}"
        raise InputError(message)
    lattice = Lattice(
        sizes, per_axis(spacing, sizes, "spacing"), per_axis(origin, sizes, "origin"),
        tuple(bool(closes) for closes in per_axis(_yes_or_no(periodic), sizes, "periodic")),
    )  # fmt: skip
    if min(lattice.spacing) <= 0:
        message = f"spacing must be positive, got {spacing}"
        raise InputError(message)
    cells = grid_cells(sizes, lattice.periodic)
    axes = [o + h * np.arange(n) for o, h, n in zip(lattice.origin, lattice.spacing, sizes, strict=True)]
    points = np.stack([axis.ravel() for axis in np.meshgrid(*axes, indexing="ij")], axis=1)
    return {
        "n_vertices": len(points), "tail": cells.tail, "head": cells.head, "walks": cells.walks,
        "faces": None if cells.corners is None else ragged(cells.corners, "face"),
        "cell_coboundary": cells.solids,
        "solids": None if cells.solid_corners is None else {"hexahedron": cells.solid_corners},
        "points": points, "lattice": lattice,
    }  # fmt: skip


def _yes_or_no(periodic: object) -> IntArray:
    array = np.asarray(periodic, dtype=object)
    for value in array.ravel():
        if not isinstance(value, bool | np.bool_) and not (isinstance(value, int | np.integer) and value in (0, 1)):
            message = f"periodic must be True or False, or one of them for each axis, got {periodic!r:.60}"
            raise InputError(message)
    return array.astype(np.int64)
