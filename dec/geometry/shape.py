"""Is a mesh sound as a shape? Each question that coordinates decide becomes one finding; nothing is repaired."""

import numpy as np

from dec.arrays import AnyArray, BoolArray, FloatArray, IntArray
from dec.calculus.complex import Complex
from dec.findings import Finding
from dec.geometry.corners import cross, embedded, face_blocks, positions, solid_blocks, summed
from dec.geometry.measures import cell_volumes, edge_vectors, face_area_vectors, face_centres, is_flat

__all__ = ["check_shape", "shell_volumes"]

_ROUNDING = 8 * float(np.finfo(np.float64).eps)


def check_shape(K: Complex) -> list[Finding]:
    """Whether the points make sound cells, as a list of findings.

    Parameters
    ----------
    K : Complex
        With points.

    Returns
    -------
    list of Finding
        ``measured`` counts the cells that speak against the statement; ``where`` holds them by number, vertices by
        id where they have ids, edges as (tail, head) pairs of vertices, closed surfaces by their lowest face. An
        area or volume counts as zero when it is no larger than the rounding of its own formula.

    Raises
    ------
    InputError
        If the complex has no points.

    Notes
    -----
    A closed surface may be turned inward where it lies inside another one that is turned outward: that is a cavity.

    Examples
    --------
    >>> K = Complex.from_faces([[0, 1, 2], [0, 2, 3]], points=[[0, 0], [1, 0], [2, 0], [0, 1]])
    >>> [(f.name, f.where) for f in check_shape(K) if not f.holds]
    [('no face has zero area', (0,))]
    """
    findings = [_places(K), _edges(K)]
    if K.dim >= 2:
        findings.append(_faces(K))
    if K.dim == 3:
        findings.append(_cells(K))
    if K.dim == 2 and not is_flat(K):
        findings += _shells(K)
    return findings


def _places(K: Complex) -> Finding:
    points = positions(K)
    order = np.lexsort(points.T[::-1])
    same = (points[order[1:]] == points[order[:-1]]).all(axis=1)
    again = np.sort(order[1:][same])  # lexsort is stable: the lowest vertex at a place is not counted
    return _finding("no two vertices lie at one place", again, _vertex_names(K, again))


def _edges(K: Complex) -> Finding:
    short = np.flatnonzero(~edge_vectors(K).any(axis=1))
    ends = zip(_vertex_names(K, K.tail[short]), _vertex_names(K, K.head[short]), strict=True)
    return _finding("no edge has zero length", short, tuple(ends))


def _faces(K: Complex) -> Finding:
    vectors = face_area_vectors(K)
    scale = np.empty(len(vectors))
    for block in face_blocks(K):
        reach = np.linalg.norm(block.offsets, axis=2)
        scale[block.faces] = (reach[:, 1:-1] * reach[:, 2:]).sum(axis=1)
    none = np.flatnonzero(np.linalg.norm(vectors, axis=1) <= _ROUNDING * scale)
    return _finding("no face has zero area", none)


def _cells(K: Complex) -> Finding:
    scale = np.empty(K.counts[3])
    for block in solid_blocks(K):
        reach = np.sort(np.linalg.norm(block.offsets, axis=2), axis=1)
        scale[block.cells] = reach[:, -1] * reach[:, -2] * reach[:, -3]
    wrong = np.flatnonzero(cell_volumes(K) <= _ROUNDING * scale)
    return _finding("every cell has positive volume", wrong)


def _shells(K: Complex) -> list[Finding]:
    label = K.sheets.label
    volumes, doubt = shell_volumes(K)
    if np.isnan(volumes).all():  # no closed surface that is turned alike throughout
        return []
    inward = np.flatnonzero(volumes < -doubt)
    lowest = np.full(K.sheets.count, len(label))
    np.minimum.at(lowest, label, np.arange(len(label)))
    low, high = _boxes(K, label)
    centres = face_centres(K)
    wrong = []
    for shell in inward.tolist():
        place = centres[lowest[shell]]
        around = (low <= place).all(axis=1) & (place <= high).all(axis=1) & ~np.isnan(volumes)
        around[shell] = False
        if not around.any() or _turns_about(K, place, around[label]) < 0.5:
            wrong.append(int(lowest[shell]))
    return [_finding("closed surfaces are turned outward", np.array(sorted(wrong), dtype=np.int64))]


def shell_volumes(K: Complex) -> tuple[FloatArray, FloatArray]:
    """Volume enclosed by every sheet of faces, negative where it is turned inside out.

    Parameters
    ----------
    K : Complex
        Of dimension 2, with points in space.

    Returns
    -------
    volumes : float64 array, shape (number of sheets,)
        By ``K.sheets.label``; nan for a sheet that is open, or whose faces are not turned alike.
    doubt : float64 array, same shape
        What rounding can do to it.

    Raises
    ------
    InputError
        If the complex has no points.

    Examples
    --------
    >>> corner = [[0, 0, 0], [1, 0, 0], [0, 1, 0], [0, 0, 6]]
    >>> shell_volumes(Complex.from_faces([[0, 2, 1], [0, 1, 3], [1, 2, 3], [0, 3, 2]], points=corner))[0].tolist()
    [1.0]
    """
    label, count = K.sheets.label, K.sheets.count
    uses = K.incidences
    closed = np.ones(count, dtype=bool)
    closed[label[uses.cell[uses.uses[uses.facet] != 2]]] = False
    closed[label[K.sheets.sign != 1]] = False
    vectors, centres = face_area_vectors(K), face_centres(K)
    # about a point of the sheet itself, so that a far origin costs no digits
    origin = np.empty((count, 3))
    origin[label] = centres
    arms = centres - origin[label]
    parts = np.einsum("ij,ij->i", arms, vectors) / 3
    volumes = summed(label, parts, count)
    size = np.linalg.norm(arms, axis=1) * np.linalg.norm(vectors, axis=1)
    volumes[~closed] = np.nan
    return volumes, _ROUNDING * summed(label, size, count)


def _boxes(K: Complex, label: IntArray) -> tuple[FloatArray, FloatArray]:
    assert K.faces is not None
    count = K.sheets.count
    low, high = np.full((count, 3), np.inf), np.full((count, 3), -np.inf)
    sheet, places = np.repeat(label, K.faces.lengths), embedded(positions(K))[K.faces.flat]
    np.minimum.at(low, sheet, places)
    np.maximum.at(high, sheet, places)
    return low, high


def _turns_about(K: Complex, place: FloatArray, chosen: BoolArray) -> float:
    """Return how often the chosen faces wind round a place.

    Source: van Oosterom and Strackee, The solid angle of a plane triangle, IEEE Trans. Biomed. Eng. 30 (1983), from
    memory.
    """
    total = 0.0
    for block in face_blocks(K):
        r = (block.positions(positions(K)) - place)[chosen[block.faces]]
        size = np.linalg.norm(r, axis=2)
        for i in range(1, r.shape[1] - 1):
            a, b, c = r[:, 0], r[:, i], r[:, i + 1]
            x, y, z = size[:, 0], size[:, i], size[:, i + 1]
            volume = np.einsum("ij,ij->i", a, cross(b, c))
            ab, bc, ca = (np.einsum("ij,ij->i", *pair) for pair in ((a, b), (b, c), (c, a)))
            total += float(np.arctan2(volume, x * y * z + ab * z + bc * x + ca * y).sum())
    return total / (2 * np.pi)


def _finding(name: str, cells: IntArray, where: tuple[object, ...] | None = None) -> Finding:
    return Finding(name, not len(cells), len(cells), 0, tuple(cells.tolist()) if where is None else where)


def _vertex_names(K: Complex, vertices: AnyArray) -> tuple[object, ...]:
    return tuple((vertices if K.vertex_ids is None else K.vertex_ids[vertices]).tolist())
