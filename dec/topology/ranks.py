"""Betti numbers, counted exactly: union-find and duality first, integer elimination for what is left."""

import heapq
from collections import defaultdict
from math import gcd
from typing import NoReturn

import numpy as np
from scipy.sparse import csr_array

from dec.arrays import AnyArray, BoolArray
from dec.errors import TopologyError
from dec.topology.compiled import compiled
from dec.topology.graphs import Forest
from dec.topology.surfaces import Incidences, Sheets

__all__ = ["exact_rank", "first_betti", "top_betti"]

# entries that may be touched, and so many more for each entry given: sponges of 50,000 cells need 4 for each entry
_STEPS = 20_000_000
_STEPS_EACH = 20


def top_betti(incidences: Incidences, found: Sheets) -> int:
    """The number of independent closed chains of top cells, over the rationals.

    Parameters
    ----------
    incidences : Incidences
    found : Sheets

    Returns
    -------
    int
        The last Betti number of the complex.

    Raises
    ------
    TopologyError
        As `exact_rank`.

    Notes
    -----
    A closed chain takes one value on a sheet, up to the signs of a coherent orientation, and zero on a sheet that
    has none or that has a facet used once. Facets used three times or more then give one equation each between the
    few sheets that meet there.
    """
    free = found.is_orientable
    lone = incidences.uses[incidences.facet] == 1
    free[found.label[incidences.cell[lone]]] = False
    branching = (incidences.uses[incidences.facet] > 2) & free[found.label[incidences.cell]]
    number = np.cumsum(free) - 1
    rows: dict[int, dict[int, int]] = defaultdict(lambda: defaultdict(int))
    cells, signs = incidences.cell[branching], incidences.sign[branching]
    of_sheet = number[found.label[cells]].tolist()
    turned = (signs * found.sign[cells]).tolist()
    for facet, sheet, sign in zip(incidences.facet[branching].tolist(), of_sheet, turned, strict=True):
        rows[facet][sheet] += sign
    distinct = {tuple(sorted(row.items())) for row in rows.values()}
    return int(free.sum()) - exact_rank([dict(row) for row in sorted(distinct)])


def first_betti(coboundary: csr_array, forest: Forest) -> int:
    """The number of independent loops that no faces fill, over the rationals.

    Parameters
    ----------
    coboundary : csr_array of int8, shape (n2, n1)
        Sums round faces.
    forest : Forest
        A spanning forest of the edges.

    Returns
    -------
    int
        The first Betti number.

    Raises
    ------
    TopologyError
        As `exact_rank`.

    Notes
    -----
    Edge values whose sum round every face is zero, taken zero on the forest: a face with one edge not yet known to
    be zero makes that edge zero; the equations left when this stops are eliminated exactly.
    """
    known = forest.contains(coboundary.shape[1])
    by_edge = coboundary.T.tocsr()
    known = _spread_zeros(coboundary.indptr, coboundary.indices, by_edge.indptr, by_edge.indices, known)
    open_sides = np.concatenate([[0], np.cumsum(~known[coboundary.indices])])[coboundary.indptr]
    rows = []
    for face in np.flatnonzero(np.diff(open_sides)).tolist():
        span = slice(coboundary.indptr[face], coboundary.indptr[face + 1])
        entries = zip(coboundary.indices[span].tolist(), coboundary.data[span].tolist(), strict=True)
        rows.append({edge: sign for edge, sign in entries if not known[edge]})
    return int((~known).sum()) - exact_rank(rows)


def exact_rank(rows: list[dict[int, int]]) -> int:
    """The rank of a sparse integer matrix, by elimination in Python integers.

    Parameters
    ----------
    rows : list of dict of column to non-zero int

    Returns
    -------
    int

    Raises
    ------
    TopologyError
        If the elimination takes more than 20 million steps and 20 for each entry, a step being one entry of a row
        that is combined with another: the rows fill up instead of staying sparse, and would take hours.

    Notes
    -----
    Always eliminates with a shortest row, by an entry of least size in it, so that meshes stay sparse. No division
    is made: a row is multiplied up and its common factor taken out (Bareiss, Math. Comp. 22, 1968, the idea).

    Examples
    --------
    >>> exact_rank([{0: 1, 1: -1}, {1: 1, 2: -1}, {0: 1, 2: -1}])
    2
    """
    live = {i: {c: v for c, v in row.items() if v} for i, row in enumerate(rows)}
    users: dict[int, set[int]] = defaultdict(set)
    for i, row in live.items():
        for c in row:
            users[c].add(i)
    heap = [(len(row), i) for i, row in live.items()]
    heapq.heapify(heap)
    rank, steps = 0, _STEPS + _STEPS_EACH * sum(size for size, _ in heap)
    while heap:
        size, i = heapq.heappop(heap)
        if i not in live or not size or len(live[i]) != size:  # an entry that has been overtaken
            continue
        rank += 1
        row = live.pop(i)
        for c in row:
            users[c].discard(i)
        pivot = min(row, key=lambda c: (abs(row[c]), len(users[c]), c))
        steps -= sum(len(row) + len(live[j]) for j in users[pivot])
        if steps < 0:
            _refuse_entangled(live)
        for j in sorted(users[pivot]):
            reduced = _without(pivot, live[j], row)
            for c in row:
                (users[c].add if c in reduced else users[c].discard)(j)
            live[j] = reduced
            heapq.heappush(heap, (len(reduced), j))
    return rank


def _refuse_entangled(live: dict[int, dict[int, int]]) -> NoReturn:
    equations = sum(map(bool, live.values()))
    unknowns = len({column for row in live.values() for column in row})
    message = (
        f"the holes cannot be counted exactly in reasonable time: {equations:,} equations between {unknowns:,} cells "
        "are left that all hang together, as in a heap of cells that share edges and corners at random; check the "
        "corner numbers of the cells, or take a part of the mesh"
    )
    raise TopologyError(message)


def _without(pivot: int, row: dict[int, int], by: dict[int, int]) -> dict[int, int]:
    """Return the multiple of a row, less a multiple of another, that has no entry at the pivot; common factor out."""
    common = gcd(by[pivot], row[pivot])
    scale, factor = by[pivot] // common, row[pivot] // common
    result = {c: scale * v for c, v in row.items()}
    for c, v in by.items():
        result[c] = result.get(c, 0) - factor * v
    content = gcd(*result.values()) or 1
    return {c: v // content for c, v in result.items() if v}


@compiled
def _spread_zeros(
    face_ptr: AnyArray, face_edges: AnyArray, edge_ptr: AnyArray, edge_faces: AnyArray, known: BoolArray
) -> BoolArray:
    n_faces = len(face_ptr) - 1
    open_sides = np.zeros(n_faces, np.int64)
    queue = np.empty(n_faces, np.int64)
    done = filled = 0
    for f in range(n_faces):
        for k in range(face_ptr[f], face_ptr[f + 1]):
            if not known[face_edges[k]]:
                open_sides[f] += 1
        if open_sides[f] == 1:
            queue[filled] = f
            filled += 1
    while done < filled:
        f = queue[done]
        done += 1
        for k in range(face_ptr[f], face_ptr[f + 1]):
            e = face_edges[k]
            if not known[e]:
                known[e] = True
                for i in range(edge_ptr[e], edge_ptr[e + 1]):
                    g = edge_faces[i]
                    open_sides[g] -= 1
                    if open_sides[g] == 1:
                        queue[filled] = g
                        filled += 1
    return known
