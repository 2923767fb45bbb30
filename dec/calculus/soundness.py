"""Is a complex sound? Each question becomes one finding; nothing is repaired."""

from typing import TYPE_CHECKING

import numpy as np

from dec.arrays import AnyArray, BoolArray, IntArray
from dec.findings import Finding
from dec.topology.graphs import components

if TYPE_CHECKING:
    from dec.calculus.complex import Complex

__all__ = ["check", "is_manifold", "repeating_cells"]


def check(complex: "Complex") -> list[Finding]:
    """Every question that makes sense for the dimension of the complex, as findings.

    ``where`` holds vertices, faces or cells by number, and edges as (tail, head) pairs of vertices; vertices by id
    where they have ids.
    """
    findings = [_identity(complex), _unused(complex)]
    if complex.dim < 2:
        return findings
    top, facets = ("face", "edges") if complex.dim == 2 else ("cell", "faces")
    again = [numbers[_given_before(rows)] for numbers, rows in _top_facets(complex)]
    repeats = [repeating_cells(complex)]
    findings += [_finding(f"no {top} repeats a corner", repeats), _finding(f"no {top} is given twice", again)]
    uses = complex.incidences.uses
    crowded = np.flatnonzero(uses > 2)
    opposite = complex.incidences.pairs()[2]
    pair_facets = np.flatnonzero(uses == 2)
    findings += [
        Finding(f"{facets} have at most two {top}s", not len(crowded), len(crowded), 0, _facet_names(complex, crowded)),
        Finding(
            f"neighbouring {top}s are turned alike", bool(opposite.all()), int((~opposite).sum()), 0,
            _facet_names(complex, pair_facets[~opposite]),
        ),
        Finding(
            f"the {top}s can all be turned alike", bool((complex.sheets.sign != 0).all()),
            int((~complex.sheets.is_orientable).sum()), 0, tuple(complex.reversing_loop().tolist()),
        ),
    ][: 2 if len(crowded) else 3]  # fmt: skip
    pinched = _pinched_vertices(complex)
    name = f"the {top}s at a vertex form one fan"
    findings.append(Finding(name, not len(pinched), len(pinched), 0, _vertex_names(complex, pinched)))
    return findings


def repeating_cells(complex: "Complex") -> IntArray:
    """The faces of a surface, or the cells of a solid, that name a corner more than once; int64 array, ascending.

    None in a grid, whose closed axes may be so short that corners coincide by right, and none in a graph.
    """
    if complex.dim < 2:
        return np.empty(0, np.int64)
    parts = [numbers[_repeats(rows)] for numbers, rows in _top_corners(complex)]
    return np.sort(np.concatenate([np.empty(0, np.int64), *parts]))


def is_manifold(complex: "Complex") -> bool:
    """Whether every used vertex has a neighbourhood like a line, disc or ball, or half of one at the boundary.

    Notes
    -----
    A graph: at most two edge ends at a vertex. A surface: one or two faces at an edge, one fan at a vertex. A solid:
    one or two cells at a face, one fan at an edge, and at a vertex a link of Euler characteristic 2, or 1 at the
    boundary. A cell that repeats a corner is no disc or ball, and its mesh no manifold. Source: Munkres, Elements of
    Algebraic Topology, 1984, section 63 (links in manifolds). A grid is a product of lines and circles, where no axis
    has shrunk to a point.
    """
    if _is_grid(complex):
        assert complex.lattice is not None
        return all(n > 1 or closes for n, closes in zip(complex.lattice.shape, complex.lattice.periodic, strict=True))
    if complex.dim < 2:
        ends = np.concatenate([complex.tail, complex.head])
        return bool((np.bincount(ends, minlength=1) <= 2).all())
    if len(repeating_cells(complex)):
        return False
    uses = complex.incidences.uses
    if not ((uses >= 1) & (uses <= 2)).all() or len(_pinched_vertices(complex)):
        return False
    if complex.dim == 2:
        return True
    return _edges_have_one_fan(complex) and _links_are_spheres_or_discs(complex)


def _identity(complex: "Complex") -> Finding:
    wrong = 0
    for k in range(1, complex.dim):
        product = complex.coboundary(k).astype(np.int32) @ complex.coboundary(k - 1).astype(np.int32)
        wrong += int(np.count_nonzero(product.data))
    return Finding("the boundary of a boundary is zero", wrong == 0, wrong, 0)


def _unused(complex: "Complex") -> Finding:
    used = np.zeros(complex.counts[0], dtype=bool)
    used[complex.tail] = used[complex.head] = True
    if complex.faces is not None:
        used[complex.faces.flat] = True  # a face on one vertex only has no edges
    for corners in complex.solids.values():
        used[corners] = True
    idle = np.flatnonzero(~used)
    return Finding("every vertex is used", not len(idle), len(idle), 0, _vertex_names(complex, idle))


def _is_grid(complex: "Complex") -> bool:
    """Whether the top cells are those of a grid; its closed axes may be so short that corners coincide by right."""
    return complex.lattice is not None and len(complex.lattice.shape) == complex.dim


def _top_corners(complex: "Complex") -> list[tuple[IntArray, IntArray]]:
    """Return the top cells by number of corners: their numbers, and their corners as a rectangular array."""
    if _is_grid(complex):
        return []
    if complex.dim == 2:
        assert complex.faces is not None
        return _by_length(complex.faces.offsets, complex.faces.flat)
    blocks, first = [], 0
    for corners in complex.solids.values():
        blocks.append((np.arange(first, first + len(corners)), corners))
        first += len(corners)
    return blocks


def _top_facets(complex: "Complex") -> list[tuple[IntArray, IntArray]]:
    """Return the same with the edges of each face, or the faces of each solid cell, in the place of corners."""
    if _is_grid(complex):
        return []
    if complex.dim == 2:
        assert complex.walks is not None
        return _by_length(complex.walks.offsets, complex.walks.edges)
    matrix = complex.coboundary(2)
    return _by_length(matrix.indptr, matrix.indices)


def _by_length(offsets: AnyArray, flat: AnyArray) -> list[tuple[IntArray, IntArray]]:
    lengths = np.diff(offsets)
    blocks = []
    for length in np.unique(lengths[lengths > 0]):
        rows = np.flatnonzero(lengths == length)
        blocks.append((rows, flat[offsets[rows][:, None] + np.arange(length)]))
    return blocks


def _repeats(rows: IntArray) -> BoolArray:
    ascending = np.sort(rows, axis=1)
    return np.asarray((ascending[:, 1:] == ascending[:, :-1]).any(axis=1))


def _given_before(rows: IntArray) -> IntArray:
    """Return the rows that hold the same numbers as an earlier row, in any order."""
    ascending = np.sort(rows, axis=1)
    order = np.lexsort(ascending.T[::-1])
    ordered = ascending[order]
    same = (ordered[1:] == ordered[:-1]).all(axis=1)
    return np.sort(order[1:][same])


def _finding(name: str, parts: list[IntArray]) -> Finding:
    cells = np.sort(np.concatenate([np.empty(0, np.int64), *parts]))
    return Finding(name, not len(cells), len(cells), 0, tuple(cells.tolist()))


def _pinched_vertices(complex: "Complex") -> IntArray:
    """Return the vertices whose faces fall into several fans that no edge joins."""
    assert complex.walks is not None
    has_face = np.zeros(complex.counts[1], dtype=bool)
    has_face[complex.walks.edges] = True
    vertex = np.stack([complex.tail, complex.head], axis=1)[has_face].ravel()
    fan = complex.fans.reshape(-1, 2)[has_face].ravel()
    of_fan = np.full(2 * complex.counts[1], -1, np.int64)
    of_fan[fan] = vertex
    return np.flatnonzero(np.bincount(of_fan[of_fan >= 0], minlength=complex.counts[0]) > 1)


def _edges_have_one_fan(complex: "Complex") -> bool:
    # A side (face, edge) is a vertex of the link of its edge; a cell joins its two sides that share the edge.
    assert complex.walks is not None
    walks, matrix = complex.walks, complex.coboundary(2).tocoo()
    lengths = np.diff(walks.offsets)[matrix.col]
    cell = np.repeat(matrix.row.astype(np.int64), lengths)
    within = np.arange(len(cell)) - np.repeat(np.cumsum(lengths) - lengths, lengths)
    side = np.repeat(walks.offsets[matrix.col], lengths) + within
    key = cell * complex.counts[1] + walks.edges[side]
    order = np.argsort(key, kind="stable")
    key, side = key[order], side[order]
    if len(key) % 2 or (key[::2] != key[1::2]).any():
        return False
    count, _ = components(side[::2], side[1::2], len(walks.edges))
    return count == complex.counts[1]


def _links_are_spheres_or_discs(complex: "Complex") -> bool:
    assert complex.faces is not None
    n = complex.counts[0]
    edges = np.bincount(np.concatenate([complex.tail, complex.head]), minlength=n)
    faces = np.bincount(complex.faces.flat, minlength=n)
    cells = sum(np.bincount(c.ravel(), minlength=n) for c in complex.solids.values())
    euler = edges - faces + cells
    rim = np.zeros(n, dtype=bool)
    lone = np.flatnonzero(complex.incidences.uses == 1)
    starts, lengths = complex.faces.offsets[lone], complex.faces.lengths[lone]
    within = np.arange(lengths.sum()) - np.repeat(np.cumsum(lengths) - lengths, lengths)
    rim[complex.faces.flat[np.repeat(starts, lengths) + within]] = True
    return bool((euler == np.where(rim, 1, 2))[edges > 0].all())


def _vertex_names(complex: "Complex", vertices: AnyArray) -> tuple[object, ...]:
    names = vertices if complex.vertex_ids is None else complex.vertex_ids[vertices]
    return tuple(names.tolist())


def _facet_names(complex: "Complex", facets: AnyArray) -> tuple[object, ...]:
    if complex.dim == 3:
        return tuple(facets.tolist())
    tails, heads = _vertex_names(complex, complex.tail[facets]), _vertex_names(complex, complex.head[facets])
    return tuple(zip(tails, heads, strict=True))
