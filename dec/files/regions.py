"""Named groups of a mesh file become regions: of the top cells, or of the faces, edges, vertices they coincide with."""

import numpy as np

from dec.arrays import IntArray
from dec.calculus.complex import Complex
from dec.calculus.dataset import Region
from dec.errors import InputError
from dec.files.parts import KINDS, Group, MeshParts

__all__ = ["regions_of"]

_NAMES = ("vertices", "edges", "faces", "solid cells")


def regions_of(complex_: Complex, parts: MeshParts, order: IntArray, source: str) -> dict[str, Region]:
    """Regions by name.

    A name that stands for groups of several dimensions in the file gets the dimension added: ``wall (edges)``; groups
    of one name and dimension are one region.

    Parameters
    ----------
    complex_ : Complex
    parts : MeshParts
    order : int64 array, shape (n_top,)
        Which cell of the file each top cell of the complex is.
    source : str
        Name of the file, for messages.

    Returns
    -------
    dict of name to Region

    Raises
    ------
    InputError
        If a group holds cells that are no cells of the complex: it cannot be carried, and is not dropped. If a name
        with its dimension added is the name of another group.
    """
    place = np.full(len(parts.kinds), -1, dtype=np.int64)
    place[order] = np.arange(len(order))
    dimensions: dict[str, set[int]] = {}
    for group in parts.groups:
        dimensions.setdefault(group.name, set()).add(group.dimension)
    members: dict[tuple[str, int], list[IntArray]] = {}
    for group in parts.groups:
        name = group.name if len(dimensions[group.name]) == 1 else f"{group.name} ({_NAMES[group.dimension]})"
        if group.dimension == complex_.dim:
            cells = place[group.cells]
        elif group.dimension == 0:
            cells = parts.nodes.flat[parts.nodes.offsets[group.cells]]
        else:
            cells = _coinciding(complex_, parts, group, source)
        members.setdefault((name, group.dimension), []).append(cells)
    regions: dict[str, Region] = {}
    for (name, dimension), parts_of_it in members.items():
        if name in regions:
            what = _NAMES[regions[name].degree]
            message = f"{source}: the name {name!r} stands for {what} and for {_NAMES[dimension]}; rename one group"
            raise InputError(message)
        regions[name] = Region(name, dimension, np.unique(np.concatenate(parts_of_it)))
    return regions


def _coinciding(complex_: Complex, parts: MeshParts, group: Group, source: str) -> IntArray:
    """Return the edges or faces of the complex with the same corners as the cells of a group."""
    found = np.full(len(group.cells), -1, dtype=np.int64)
    sizes = _corner_counts(parts, group.cells)
    for size in np.unique(sizes):
        rows = np.flatnonzero(sizes == size)
        wanted = parts.nodes.flat[parts.nodes.offsets[group.cells[rows], None] + np.arange(size)]
        numbers, corners = _cells_of_size(complex_, group.dimension, int(size))
        found[rows] = _matched(corners, numbers, wanted)
    if (found < 0).any():
        missing = int((found < 0).sum())
        what = _NAMES[group.dimension]
        message = (
            f"{source}: group {group.name!r} holds {len(group.cells)} {what}, {missing} of them are no {what} of the "
            f"{_NAMES[complex_.dim]}; take the group out, or save it with the cells it bounds"
        )
        raise InputError(message)
    return found


def _corner_counts(parts: MeshParts, cells: IntArray) -> IntArray:
    counts = parts.nodes.lengths[cells]  # right for polygons
    for number in np.unique(parts.kinds[cells]):
        if KINDS[int(number)].nodes:
            counts[parts.kinds[cells] == number] = len(KINDS[int(number)].corners)
    return counts


def _cells_of_size(complex_: Complex, degree: int, size: int) -> tuple[IntArray, IntArray]:
    if degree == 1:
        return np.arange(complex_.counts[1]), np.stack([complex_.tail, complex_.head], axis=1)
    faces = complex_.faces
    if faces is None:
        return np.empty(0, np.int64), np.empty((0, size), np.int64)
    numbers = np.flatnonzero(faces.lengths == size)
    return numbers, faces.flat[faces.offsets[numbers, None] + np.arange(size)]


def _matched(corners: IntArray, numbers: IntArray, wanted: IntArray) -> IntArray:
    """Return for each wanted set of corners the number of the cell that has it, or -1."""
    both = np.sort(np.concatenate([corners, wanted]), axis=1)
    _, label = np.unique(both, axis=0, return_inverse=True)
    label = label.ravel()
    cell_of = np.full(int(label.max()) + 1 if len(label) else 0, -1, dtype=np.int64)
    cell_of[label[: len(corners)][::-1]] = numbers[::-1]  # of equal cells the first
    return cell_of[label[len(corners) :]]
