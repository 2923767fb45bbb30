"""How the top cells of a complex hang together: sheets and their orientation, links of vertices, boundary loops."""

from dataclasses import dataclass

import numpy as np

from dec.arrays import AnyArray, BoolArray, IntArray, SignArray
from dec.topology.compiled import compiled
from dec.topology.graphs import components, spanning_forest
from dec.topology.polygons import Walks

__all__ = ["Incidences", "Sheets", "boundary_walks", "link_labels", "reversing_walk", "sheets"]


@dataclass(frozen=True, slots=True)
class Incidences:
    """Every use of a facet (an edge of a face, a face of a solid cell) by a cell, in the order of the facets.

    Attributes
    ----------
    facet, cell : int64 arrays, shape (m,)
    sign : int8 array, shape (m,)
        +1 where the cell uses the facet as it is turned.
    uses : int64 array, shape (n_facets,)
        How often each facet is used.
    n_cells : int
    """

    facet: IntArray
    cell: IntArray
    sign: SignArray
    uses: IntArray
    n_cells: int

    @classmethod
    def of(cls, facet: AnyArray, cell: AnyArray, sign: SignArray, n_facets: int, n_cells: int) -> "Incidences":
        """Sorted by facet; equal facets keep the order of their cells."""
        order = np.argsort(facet, kind="stable")
        uses = np.bincount(facet, minlength=n_facets)
        return cls(facet[order].astype(np.int64), cell[order].astype(np.int64), sign[order], uses, n_cells)

    def pairs(self) -> tuple[IntArray, IntArray, BoolArray]:
        """The two cells at every facet used exactly twice, and whether they use it opposite ways."""
        first = np.flatnonzero(self.uses[self.facet] == 2)[::2]
        opposite = self.sign[first] != self.sign[first + 1]
        return self.cell[first], self.cell[first + 1], opposite


@dataclass(frozen=True, slots=True)
class Sheets:
    """Sets of cells joined across facets that exactly two cells use.

    Attributes
    ----------
    count : int
    label : int64 array, shape (n_cells,)
    sign : int8 array, shape (n_cells,)
        A coherent orientation: +1 keeps the cell as stored, -1 turns it; the lowest cell of a sheet is kept. 0
        throughout a sheet that has no coherent orientation.
    """

    count: int
    label: IntArray
    sign: SignArray

    @property
    def is_orientable(self) -> BoolArray:
        """Whether each sheet has a coherent orientation; bool array of shape (count,)."""
        answer = np.ones(self.count, dtype=bool)
        answer[self.label[self.sign == 0]] = False
        return answer

    def fewest_turns(self) -> IntArray:
        """Cells to turn so that every orientable sheet is coherent, as few as possible in each; ascending."""
        turned = np.bincount(self.label[self.sign < 0], minlength=self.count)
        size = np.bincount(self.label, minlength=self.count)
        other_way = 2 * turned > size
        return np.flatnonzero((self.sign != 0) & ((self.sign < 0) != other_way[self.label]))


def sheets(incidences: Incidences) -> Sheets:
    """The sheets of a complex and a coherent orientation of each.

    Parameters
    ----------
    incidences : Incidences

    Returns
    -------
    Sheets

    Notes
    -----
    A cell and its turned copy are two vertices of the orientation double cover; a sheet is orientable when its two
    copies lie in different components. Source: Hatcher, Algebraic Topology, 2002, section 3.3.

    Examples
    --------
    >>> two = Incidences.of(np.array([0, 0]), np.array([0, 1]), np.array([1, 1], np.int8), 1, 2)
    >>> sheets(two).sign
    array([ 1, -1], dtype=int8)
    """
    start, end = _cover_edges(incidences)
    n = incidences.n_cells
    _, label = components(start, end, 2 * n)
    kept, turned = label[:n], label[n:]
    lowest = np.minimum(kept, turned)
    _, sheet = np.unique(lowest, return_inverse=True)
    sign = np.sign(turned - kept).astype(np.int8)
    return Sheets(int(sheet.max()) + 1 if n else 0, sheet.astype(np.int64), sign)


def reversing_walk(incidences: Incidences, cell: int) -> IntArray:
    """The shortest closed walk of cells from a cell back to itself that comes back turned over.

    Parameters
    ----------
    incidences : Incidences
    cell : int
        A cell of a sheet that has no coherent orientation.

    Returns
    -------
    int64 array
        Cells in order, each sharing a facet with the next; first and last are `cell`. Empty if there is none.
    """
    start, end = _cover_edges(incidences)
    n = incidences.n_cells
    forest = spanning_forest(start, end, 2 * n, roots=np.array([cell]))
    walk = [cell + n]
    while forest.parent[walk[-1]] >= 0:
        walk.append(int(forest.parent[walk[-1]]))
    if walk[-1] != cell:
        return np.empty(0, np.int64)
    return np.array(walk[::-1], dtype=np.int64) % n


def _cover_edges(incidences: Incidences) -> tuple[IntArray, IntArray]:
    one, two, opposite = incidences.pairs()
    n = incidences.n_cells
    shift = np.where(opposite, 0, n)
    return np.concatenate([one, one + n]), np.concatenate([two + shift, two + n - shift])


def link_labels(walks: Walks, n_edges: int) -> IntArray:
    """Which fan of faces each end of each edge belongs to.

    Parameters
    ----------
    walks : Walks
    n_edges : int

    Returns
    -------
    int64 array, shape (2 n1,)
        Entry 2 e is the tail end of edge e, 2 e + 1 its head end. Two ends at one vertex have the same label when
        faces lead from one to the other round that vertex.

    Notes
    -----
    The labels are the components of all vertex links at once. Source: Munkres, Elements of Algebraic Topology,
    1984, section 2 (link of a vertex).
    """
    forward = walks.signs > 0
    edges = walks.edges.astype(np.int64)
    leaving = 2 * edges + ~forward
    arriving = 2 * edges + forward
    if walks.width is not None:
        after = np.roll(leaving.reshape(-1, walks.width), -1, axis=1).ravel()
    else:
        place = np.arange(1, len(leaving) + 1)
        filled = np.diff(walks.offsets) > 0
        place[walks.offsets[1:][filled] - 1] = walks.offsets[:-1][filled]
        after = leaving[place]
    return components(arriving, after, 2 * n_edges)[1]


def boundary_walks(walks: Walks, uses: IntArray, fans: IntArray) -> Walks:
    """The closed walks along edges that exactly one face uses.

    Parameters
    ----------
    walks : Walks
        Round each face.
    uses : int64 array, shape (n1,)
        How often faces use each edge.
    fans : int64 array, shape (2 n1,)
        From `link_labels`.

    Returns
    -------
    Walks
        One row a loop, by lowest edge; it sets out along that edge the way its face walks it. At a vertex where
        the boundary touches itself it goes on round the same fan of faces. Where three faces meet at an edge the
        boundary can have loose ends: stretches that do not close are left out.
    """
    rim = np.flatnonzero(uses == 1)
    ends = np.stack([2 * rim, 2 * rim + 1], axis=1).ravel()
    order = np.argsort(fans[ends], kind="stable")
    fan = fans[ends[order]]
    _, first, size = np.unique(fan, return_index=True, return_counts=True)
    first = first[size == 2]
    partner = np.full(len(ends), -1, np.int64)
    partner[order[first]] = order[first + 1]
    partner[order[first + 1]] = order[first]
    along = np.zeros(len(uses), np.int8)
    along[walks.edges] = walks.signs
    place, sign, size = _trace(partner, along[rim])
    offsets = np.concatenate([[0], np.cumsum(size)]).astype(np.int64)
    return Walks(rim[place], sign, offsets, None)


@compiled
def _trace(partner: IntArray, along: SignArray) -> tuple[IntArray, SignArray, IntArray]:
    n = len(along)
    place = np.empty(n, np.int64)
    sign = np.empty(n, np.int8)
    size = np.empty(n, np.int64)
    seen = np.zeros(n, np.bool_)
    filled = 0
    loops = 0
    for k in range(n):
        if seen[k]:
            continue
        first = filled
        at = 2 * k + (1 if along[k] > 0 else 0)  # the end we arrive at
        closed = False
        while True:
            e = at // 2
            if seen[e]:
                closed = e == k
                break
            seen[e] = True
            place[filled] = e
            sign[filled] = 1 if at % 2 else -1
            filled += 1
            following = partner[at]
            if following < 0:
                break
            at = following ^ 1
        if closed:
            size[loops] = filled - first
            loops += 1
        else:
            filled = first
    return place[:filled], sign[:filled], size[:loops]
