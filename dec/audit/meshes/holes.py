"""The holes of a mesh as closed walks, run the same way round where the plane has a sense."""

from dataclasses import dataclass

import numpy as np

from dec.audit.meshes.statements import counted
from dec.calculus.complex import Complex
from dec.geometry.measures import is_flat
from dec.topology.holes import hole_walks
from dec.topology.polygons import Walks

__all__ = ["Holes", "find_holes", "no_walks"]


@dataclass(frozen=True, slots=True)
class Holes:
    """The independent holes of a mesh.

    Attributes
    ----------
    walks : Walks
        One closed walk a hole; none where they cannot be listed.
    unlisted : int
        Holes that are there and have no walk.
    notes : tuple of str
    """

    walks: Walks
    unlisted: int
    notes: tuple[str, ...]


def find_holes(K: Complex, count: int) -> Holes:
    """The holes of a surface; of a solid, or where edges have three or more faces, only their number.

    Parameters
    ----------
    K : Complex
        Of dimension 2 or 3, with points.
    count : int
        First Betti number.

    Returns
    -------
    Holes
        In a plane mesh each walk runs counter-clockwise.
    """
    if not count:
        return Holes(no_walks(), 0, ())
    walks = None
    if K.dim == 2:
        walks = hole_walks(K.tail, K.head, K.incidences, K.sheets, K.forest, K.boundary_walks())
    if walks is None:
        why = "the mesh is a solid" if K.dim == 3 else "edges have three or more faces"
        what = counted(count, "independent hole")
        return Holes(no_walks(), count, (f"holes are not listed: {why}; circulation round {what} was not examined",))
    has_sense = is_flat(K) and not (K.lattice and any(K.lattice.periodic))
    sense = ", counter-clockwise" if has_sense else ""
    note = (
        f"each hole is gone round once{sense}: along its rim, where that is a boundary other than the longest of its "
        "sheet, or along a closed walk of edges that no faces fill"
    )
    return Holes(_counter_clockwise(K, walks) if has_sense else walks, 0, (note,))


def no_walks() -> Walks:
    """No walks at all."""
    return Walks(np.empty(0, np.int64), np.empty(0, np.int8), np.zeros(1, np.int64), None)


def _counter_clockwise(K: Complex, walks: Walks) -> Walks:
    assert K.points is not None
    forward = walks.signs > 0
    start = K.points[np.where(forward, K.tail[walks.edges], K.head[walks.edges])]
    end = K.points[np.where(forward, K.head[walks.edges], K.tail[walks.edges])]
    size = np.diff(walks.offsets)
    row = np.repeat(np.arange(len(walks)), size)
    middle = np.stack([np.bincount(row, weights=start[:, k]) for k in (0, 1)], axis=1) / size[:, None]
    start, end = start[:, :2] - middle[row], end[:, :2] - middle[row]
    turned = np.bincount(row, weights=start[:, 0] * end[:, 1] - start[:, 1] * end[:, 0]) < 0
    place = np.arange(len(row))
    mirrored = (walks.offsets[:-1] + walks.offsets[1:])[row] - 1 - place
    place = np.where(turned[row], mirrored, place)
    signs = np.where(turned[row], -1, 1).astype(np.int8) * walks.signs[place]
    return Walks(walks.edges[place], signs, walks.offsets, None)
