"""Holes of a surface: closed walks that no set of faces fills, one for each independent hole."""

import numpy as np

from dec.arrays import AnyArray, BoolArray, IntArray
from dec.topology.compiled import compiled
from dec.topology.graphs import Forest, fundamental_loops
from dec.topology.polygons import Walks
from dec.topology.surfaces import Incidences, Sheets, sheets

__all__ = ["hole_walks"]


def hole_walks(
    tail: IntArray, head: IntArray, incidences: Incidences, found: Sheets, forest: Forest, rims: Walks
) -> Walks | None:
    """Closed walks along edges, as many as the first Betti number, independent of each other and of the faces.

    Parameters
    ----------
    tail, head : int64 arrays, shape (n1,)
    incidences : Incidences
        Every use of an edge by a face.
    found : Sheets
        Of those incidences.
    forest : Forest
        Breadth first, over all vertices.
    rims : Walks
        The boundary loops, as from `dec.topology.surfaces.boundary_walks`.

    Returns
    -------
    Walks or None
        One row a hole: first the boundary loops, but the longest of each sheet, as they are walked; then loops round
        handles and the like, each from an edge of its own, walked along. A closed walk of the surface is, over the
        rationals, a combination of these rows and of walks round faces, in one way only. None where an edge is used
        more than twice, which this method does not cover.

    Notes
    -----
    A boundary loop that is listed is closed by a cap, which makes it one face more; the others lead to one outer
    vertex of the dual graph. The edges of a spanning tree and the edges that a spanning tree of the dual graph crosses
    are taken away; each edge left closes one loop. Source: Eppstein, Dynamic generators of topologically embedded
    graphs, SODA 2003, section 2. The dual tree is a heaviest one, an edge weighing as much as the loop through the
    root that it closes, so that the loops left are short: Erickson and Whittlesey, Greedy optimal homotopy and
    homology generators, SODA 2005, section 3. A closed sheet that has no coherent orientation has one loop too many:
    the sum of its faces, turned alike across the dual tree, is a relation with entries 0 and 2 between the loops, and
    the longest loop of the relation is left out.

    Examples
    --------
    >>> from dec.calculus.complex import grid
    >>> K = grid((3, 3), periodic=True)
    >>> walks = hole_walks(K.tail, K.head, K.incidences, K.sheets, K.forest, K.boundary_walks())
    >>> [walks.edges[a:b].tolist() for a, b in zip(walks.offsets, walks.offsets[1:])]
    [[3, 6, 0], [10, 11, 9]]
    """
    if int(incidences.uses.max(initial=0)) > 2:
        return None
    one, two = _dual_ends(incidences)
    capped = _all_but_longest(rims, found.label[one[rims.edges[rims.offsets[:-1]]]])
    two[capped.edges] = incidences.n_cells + 1 + np.repeat(np.arange(len(capped)), np.diff(capped.offsets))
    in_tree = forest.contains(len(tail))
    weight = forest.depth[tail] + forest.depth[head]
    candidates = np.flatnonzero(~in_tree)
    heaviest_first = candidates[np.argsort(-weight[candidates], kind="stable")]
    in_cotree = _heaviest_forest(one, two, heaviest_first, np.arange(incidences.n_cells + 1 + len(capped)))
    left = ~in_tree & ~in_cotree
    left[_too_many(incidences, found, in_cotree, left, weight)] = False
    loops = fundamental_loops(tail, head, forest, np.flatnonzero(left))
    return Walks(
        np.concatenate([capped.edges, loops.edges]), np.concatenate([capped.signs, loops.signs]),
        np.concatenate([capped.offsets, capped.offsets[-1] + loops.offsets[1:]]), None,
    )  # fmt: skip


def _dual_ends(incidences: Incidences) -> tuple[IntArray, IntArray]:
    """Return the two faces at each edge; the number of faces stands for the outside."""
    uses = incidences.uses
    first = np.cumsum(uses) - uses
    one = np.full(len(uses), incidences.n_cells, np.int64)
    two = one.copy()
    one[uses > 0] = incidences.cell[first[uses > 0]]
    two[uses == 2] = incidences.cell[first[uses == 2] + 1]
    return one, two


def _all_but_longest(walks: Walks, sheet: IntArray) -> Walks:
    """Return the walks without the longest one of each sheet, the first of equals."""
    size = np.diff(walks.offsets)
    order = np.lexsort((-size, sheet))
    kept = np.ones(len(size), dtype=bool)
    kept[order[np.unique(sheet[order], return_index=True)[1]]] = False
    entries = np.repeat(kept, size)
    offsets = np.concatenate([[0], np.cumsum(size[kept])]).astype(np.int64)
    return Walks(walks.edges[entries], walks.signs[entries], offsets, None)


def _too_many(
    incidences: Incidences, found: Sheets, in_cotree: BoolArray, left: BoolArray, weight: IntArray
) -> IntArray:
    """Return the edge of one dependent loop for each closed sheet without a coherent orientation."""
    one_sided = ~found.is_orientable
    one_sided[found.label[incidences.cell[incidences.uses[incidences.facet] == 1]]] = False
    if not one_sided.any():
        return np.empty(0, np.int64)
    crossed = in_cotree[incidences.facet]
    tree = Incidences(
        incidences.facet[crossed], incidences.cell[crossed], incidences.sign[crossed],
        np.where(in_cotree, incidences.uses, 0), incidences.n_cells,
    )  # fmt: skip
    turned = incidences.sign * sheets(tree).sign[incidences.cell]
    relation = np.bincount(incidences.facet, weights=turned, minlength=len(left))
    edges = np.flatnonzero(left & (relation != 0))
    one, _ = _dual_ends(incidences)
    sheet = found.label[one[edges]]
    edges, sheet = edges[one_sided[sheet]], sheet[one_sided[sheet]]
    order = np.lexsort((-weight[edges], sheet))
    _, first = np.unique(sheet[order], return_index=True)
    return edges[order[first]]


@compiled
def _heaviest_forest(one: AnyArray, two: AnyArray, order: IntArray, parent: IntArray) -> BoolArray:
    # Kruskal, Proc. AMS 7 (1956), with path halving
    taken = np.zeros(len(one), np.bool_)
    for k in range(len(order)):
        e = order[k]
        a, b = one[e], two[e]
        while parent[a] != a:
            parent[a] = parent[parent[a]]
            a = parent[a]
        while parent[b] != b:
            parent[b] = parent[parent[b]]
            b = parent[b]
        if a != b:
            taken[e] = True
            parent[max(a, b)] = min(a, b)
    return taken
