"""What callers give to make a complex, checked: counts, points, names, one value for each axis."""

from collections.abc import Collection, Mapping, Sequence
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from dec.arrays import FloatArray, IntArray, ObjectArray, float_array, frozen, index_array
from dec.errors import InputError
from dec.topology.solids import CORNERS

__all__ = [
    "checked_cells", "checked_degree", "checked_ids", "checked_points", "per_axis", "taken_once", "vertex_count",
]  # fmt: skip

# a vertex costs some bytes in every array over vertices, used or not
_MANY = 10_000_000
_MANY_EACH = 500  # for each end of an edge or corner of a cell


def checked_degree(degree: object, allowed: range, dim: int) -> int:
    """The degree as an int.

    Raises
    ------
    InputError
        If it is not one of the whole numbers allowed.

    Examples
    --------
    >>> checked_degree(np.int64(1), range(3), 2)
    1
    """
    if isinstance(degree, bool) or not isinstance(degree, int | np.integer) or degree not in allowed:
        few = f"{allowed[0]} .. {allowed[-1]}"
        message = f"degree must be {few} for a complex of dimension {dim}, got {degree!r}"
        raise InputError(message)
    return int(degree)


def checked_cells(cells: object) -> dict[str, IntArray]:
    """Corners of solid cells by kind, each kind in its shape, as copies.

    Raises
    ------
    InputError
        If a kind is not known, or an array has not the shape of its kind.

    Examples
    --------
    >>> checked_cells({"tetra": [[0, 1, 2, 3]]})
    {'tetra': array([[0, 1, 2, 3]])}
    """
    if not isinstance(cells, Mapping):
        message = f"cells must map {' or '.join(CORNERS)} to corners, got {type(cells).__name__}"
        raise InputError(message)
    arrays = {}
    for kind, corners in cells.items():
        if kind not in CORNERS:
            message = f"cells must be of kind {' or '.join(CORNERS)}, got {kind!r}; split the others first"
            raise InputError(message)
        arrays[kind] = index_array(corners, kind, ndim=2)
        if arrays[kind].shape[1] != CORNERS[kind]:
            message = f"{kind} must have shape (n, {CORNERS[kind]}), got {arrays[kind].shape}"
            raise InputError(message)
    return arrays


def taken_once(numbers: ArrayLike, count: int, what: str) -> IntArray:
    """1 for the cells whose numbers are given, 0 for the others; int64 array of shape (count,).

    Raises
    ------
    InputError
        If a number is not 0 .. count - 1 or given twice; the message names it.

    Examples
    --------
    >>> taken_once([2], 3, "face")
    array([0, 0, 1])
    """
    chosen = index_array(numbers, f"{what}s")
    outside = (chosen < 0) | (chosen >= count)
    if outside.any():
        there = f"0 .. {count - 1}" if count else "none at all"
        message = f"{what} {chosen[np.argmax(outside)]} is not there; there are {there}"
        raise InputError(message)
    times = np.bincount(chosen, minlength=count)
    if (times > 1).any():
        message = f"{what} {np.argmax(times > 1)} is given twice; name it once, or use chain to count it twice"
        raise InputError(message)
    return times


def checked_points(points: ArrayLike | None) -> FloatArray | None:
    """Coordinates as a float64 array of shape (n0, 1 to 3), a copy.

    Raises
    ------
    InputError
        If they are not finite real numbers in that shape.

    Examples
    --------
    >>> checked_points([[0, 0], [1, 0.5]])
    array([[0. , 0. ],
           [1. , 0.5]])
    """
    if points is None:
        return None
    array = float_array(points, "points", ndim=2)
    if not 1 <= array.shape[1] <= 3:
        message = f"points must have 1 to 3 coordinates, got shape {array.shape}"
        raise InputError(message)
    return array


def vertex_count(
    given: int | None, points: FloatArray | None, ids: Sequence[Any] | ObjectArray | None, *used: IntArray
) -> int:
    """Number of vertices: as given, or as many as there are points, or ids, or as the cells need.

    Raises
    ------
    InputError
        If the number given is no whole number or negative, there is another number of points, or a vertex number is
        so far beyond the number of cells that it can only be a mistake or an id.

    Examples
    --------
    >>> vertex_count(None, None, None, np.array([0, 4]))
    5
    """
    if given is not None:
        count = int(index_array(given, "n_vertices", ndim=0))
        if count < 0:
            message = f"n_vertices must not be negative, got {count}"
            raise InputError(message)
    elif points is not None:
        count = len(points)
    elif ids is not None:
        count = len(_listed(ids, "vertex"))
    else:
        count = max((int(u.max()) + 1 for u in used if u.size), default=0)
        _refuse_sparse(count, *used)
    if points is not None and len(points) != count:
        message = f"points must have one row for each of {count} vertices, got {len(points)}"
        raise InputError(message)
    return count


def _refuse_sparse(count: int, *used: IntArray) -> None:
    corners = sum(u.size for u in used)
    if count > _MANY and count > _MANY_EACH * corners:
        message = (
            f"vertex numbers must run from 0 without wide gaps, got {count - 1} among {corners} corners; number the "
            "vertices anew, numpy.unique(..., return_inverse=True) does it, or give n_vertices or points"
        )
        raise InputError(message)


def checked_ids(ids: Sequence[Any] | ObjectArray | None, count: int, what: str) -> ObjectArray | None:
    """Names of all vertices or edges as a read-only object array, a copy.

    Raises
    ------
    InputError
        If there are more or fewer than count, or one occurs twice or cannot be told apart from others.

    Examples
    --------
    >>> checked_ids(["A", "B"], 2, "vertex").tolist()
    ['A', 'B']
    """
    if ids is None:
        return None
    names = _listed(ids, what)
    if len(names) != count:
        message = f"{what}_ids must hold {count} names, got {len(names)}"
        raise InputError(message)
    if not _all_differ(names):
        _refuse_repeated(names, what)
    array = np.empty(len(names), dtype=object)
    array[:] = names
    frozen(array)
    return array


def _all_differ(names: list[Any]) -> bool:
    try:
        return len(set(names)) == len(names)
    except TypeError:
        return False


def _refuse_repeated(names: list[Any], what: str) -> None:
    seen: dict[Any, int] = {}
    for index, name in enumerate(names):
        try:
            before = seen.setdefault(name, index)
        except TypeError:
            message = f"{what} id {name!r} at {index} must be hashable, text for example; got {type(name).__name__}"
            raise InputError(message) from None
        if before != index:
            message = f"{what} id {name!r} is used twice, at {before} and {index}; ids must differ"
            raise InputError(message)


def per_axis(value: ArrayLike, sizes: Sequence[int], name: str) -> tuple[float, ...]:
    """One number for each axis of a grid; a single one counts for all.

    Raises
    ------
    InputError
        If the value is neither one number nor one for each axis.

    Examples
    --------
    >>> per_axis(0.5, (3, 2), "spacing")
    (0.5, 0.5)
    """
    array = float_array(value, name)
    if array.shape not in ((), (len(sizes),)):
        message = f"{name} must be one number or one for each of {len(sizes)} axes, got shape {array.shape}"
        raise InputError(message)
    return tuple(np.broadcast_to(array, len(sizes)).tolist())


def _listed(ids: object, what: str) -> list[Any]:
    if isinstance(ids, Collection) and not isinstance(ids, str):
        return list(ids)
    message = f"{what}_ids must be a list of names, got {ids!r:.60}"
    raise InputError(message)
