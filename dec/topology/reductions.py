"""Cells taken away in pairs until few are left, without changing what is closed and what bounds."""

import heapq
from dataclasses import dataclass
from math import inf

import numpy as np
from scipy.sparse import csr_array

from dec.arrays import AnyArray, BoolArray, IntArray, SignArray
from dec.topology.compiled import compiled, plain
from dec.topology.graphs import spanning_forest

__all__ = ["LARGEST", "Layer", "Rows", "follow", "pair_off"]

# an int8 entry times a multiple of this size, added to a sum of that one, stays inside int64
LARGEST = 2**54
_LARGEST_SUM = 2**62


@dataclass(frozen=True, slots=True)
class Layer:
    """Pairs of a k-cell and one of its facets, and the k-cells that no layer has paired.

    Attributes
    ----------
    ends : int64 array, shape (n_k + 1,)
    facets : int array
    signs : int8 array
        The boundary of k-cell i is ``signs[ends[i]:ends[i + 1]]`` at those ``facets``.
    mate : int64 array, shape (n_{k-1},)
        The k-cell that each facet is paired with, which has it with +1 or -1; -1 for none.
    turn : int64 array, shape (n_{k-1},)
        Numbers the pairs; -1 for none. A paired k-cell has its own facet, unpaired ones, and ones of later turn.
    left : bool array, shape (n_k,)
        The k-cells in no pair of this layer and none of the layer above.
    """

    ends: AnyArray
    facets: AnyArray
    signs: SignArray
    mate: IntArray
    turn: IntArray
    left: BoolArray


@dataclass(frozen=True, slots=True)
class Rows:
    """Sparse rows of whole numbers of any size.

    Attributes
    ----------
    cells : int64 array
    values : int64 array, or object array of int where they do not fit
    offsets : int64 array, shape (n + 1,)
        Row i has ``values[offsets[i]:offsets[i + 1]]`` at those ``cells``.
    """

    cells: IntArray
    values: AnyArray
    offsets: IntArray

    def __len__(self) -> int:
        return len(self.offsets) - 1


def pair_off(coboundaries: tuple[csr_array, ...]) -> list[Layer]:
    """Layers of pairs from the edges up, and with them the few cells that carry the homology.

    Parameters
    ----------
    coboundaries : tuple of csr_array of int8, shape (n_{k+1}, n_k)
        Two in a row multiply to zero. A row of the first has at most two entries, +1 and -1 or only one of them.

    Returns
    -------
    list of Layer
        For k = 1, 2, ... The vertices left are those that `Layer.mate` of the first layer leaves out.

    Notes
    -----
    From the top down: a facet with one cell left takes that cell away with it; where there is none, the first cell
    left is put aside. The edges then left are paired along a breadth-first forest. Source: Forman, Morse theory for
    cell complexes, Adv. Math. 134 (1998); Skoeldberg, Morse theory from an algebraic viewpoint, Trans. AMS 358 (2006).

    Examples
    --------
    >>> from dec.calculus.complex import grid
    >>> K = grid((4, 4), periodic=True)
    >>> layers = pair_off((K.coboundary(0), K.coboundary(1)))
    >>> [int(layer.left.sum()) for layer in layers]
    [2, 1]
    """
    layers = []
    inside = np.ones(coboundaries[-1].shape[0], dtype=bool)
    for k in reversed(range(len(coboundaries))):
        matrix = coboundaries[k]
        if k:
            uses = np.zeros(matrix.shape[1], np.int64)
            mate, turn, left = _collapse(matrix.indptr, matrix.indices, matrix.data, inside, uses)
        else:
            mate, turn, left = _grow(matrix, inside)
        layers.append(Layer(matrix.indptr, matrix.indices, matrix.data, mate, turn, left))
        inside = mate < 0
    return layers[::-1]


def _grow(coboundary: csr_array, inside: BoolArray) -> tuple[IntArray, IntArray, BoolArray]:
    """Return pairs of a vertex and the edge towards the root, deepest first; edges of one end lead to the ground."""
    n_edges, n = coboundary.shape
    size = np.diff(coboundary.indptr)
    first = coboundary.indptr[:-1]
    one, two = np.full(n_edges, n, np.int64), np.full(n_edges, n, np.int64)
    one[size > 0] = coboundary.indices[first[size > 0]]
    two[size > 1] = coboundary.indices[first[size > 1] + 1]
    forest = spanning_forest(one, two, n + 1, roots=np.array([n]), usable=inside & (size > 0))
    mate = forest.via[:n].copy()
    turn = np.full(n, -1, np.int64)
    inward = forest.order[::-1]
    inward = inward[forest.via[inward] >= 0]
    turn[inward] = np.arange(len(inward))
    left = inside.copy()
    left[mate[mate >= 0]] = False
    return mate, turn, left


def follow(layer: Layer, start: Rows) -> tuple[Rows, Rows]:
    """Chains of k-cells completed by paired cells until no paired facet is left in their boundary.

    Parameters
    ----------
    layer : Layer
    start : Rows
        Chains of cells that no layer has paired.

    Returns
    -------
    chains : Rows
        The given chains and what had to be added.
    boundaries : Rows
        Their boundaries: unpaired facets, and ones that the layer below has paired.

    Notes
    -----
    Carried out in int64 for as long as no number can leave it, else again in Python's integers.
    """
    by_turn = np.empty(int(layer.turn.max(initial=-1)) + 1, np.int64)
    paired = np.flatnonzero(layer.turn >= 0)
    by_turn[layer.turn[paired]] = paired
    pairs = (layer.mate, layer.turn, by_turn, start.offsets, start.cells)
    if start.values.dtype != object:
        sums, limits = np.zeros(len(layer.mate), np.int64), np.array([LARGEST, _LARGEST_SUM])
        found = _follow(layer.ends, layer.facets, layer.signs, *pairs, start.values, sums, limits)
        if len(found[2]) > len(start):
            return Rows(*found[:3]), Rows(*found[3:])
    sums, limits = np.zeros(len(layer.mate), object), np.array([inf, inf])
    values, signs = start.values.astype(object), layer.signs.astype(object)
    found = plain(_follow)(layer.ends, layer.facets, signs, *pairs, values, sums, limits)
    return Rows(*found[:3]), Rows(*found[3:])


@compiled
def _collapse(
    ends: AnyArray, facets: AnyArray, signs: SignArray, inside: BoolArray, uses: IntArray
) -> tuple[IntArray, IntArray, BoolArray]:
    n, n_facets = len(inside), len(uses)
    users = np.zeros(n_facets, np.int64)  # exclusive or of the cells that still use the facet
    for b in range(n):
        if inside[b]:
            for i in range(ends[b], ends[b + 1]):
                uses[facets[i]] += 1
                users[facets[i]] ^= b
    queue = np.empty(n_facets, np.int64)
    filled = 0
    for a in range(n_facets):
        if uses[a] == 1:
            queue[filled] = a
            filled += 1
    mate = np.full(n_facets, -1, np.int64)
    turn = np.full(n_facets, -1, np.int64)
    left = np.zeros(n, np.bool_)
    waiting = inside.copy()
    done = pairs = 0
    for first in range(-1, n):  # before any cell is put aside, all that can be paired is
        if first >= 0 and waiting[first]:
            left[first] = True
            waiting[first] = False
            filled = _take_away(first, ends, facets, uses, users, queue, filled)
        while done < filled:
            a = queue[done]
            done += 1
            b = users[a]
            if uses[a] == 1 and abs(_sign(a, b, ends, facets, signs)) == 1:
                mate[a] = b
                turn[a] = pairs
                pairs += 1
                waiting[b] = False
                filled = _take_away(b, ends, facets, uses, users, queue, filled)
    return mate, turn, left


@compiled
def _take_away(
    cell: int, ends: AnyArray, facets: AnyArray, uses: IntArray, users: IntArray, queue: IntArray, filled: int
) -> int:
    for i in range(ends[cell], ends[cell + 1]):
        a = facets[i]
        uses[a] -= 1
        users[a] ^= cell
        if uses[a] == 1:
            queue[filled] = a
            filled += 1
    return filled


@compiled
def _sign(facet: int, cell: int, ends: AnyArray, facets: AnyArray, signs: SignArray) -> int:
    sign = 0
    for i in range(ends[cell], ends[cell + 1]):
        if facets[i] == facet:
            sign = signs[i]
    return sign


@compiled
def _follow(
    ends: AnyArray, facets: AnyArray, signs: SignArray, mate: IntArray, turn: IntArray, by_turn: IntArray,
    offsets: IntArray, cells: IntArray, values: AnyArray, sums: AnyArray, limits: AnyArray,
) -> tuple[IntArray, AnyArray, IntArray, IntArray, AnyArray, IntArray]:  # fmt: skip
    n = len(offsets) - 1
    chain, times, chain_ends = cells.copy(), values.copy(), np.zeros(n + 1, np.int64)
    rim, rim_values, rim_ends = cells[:0].copy(), values[:0].copy(), np.zeros(n + 1, np.int64)
    touched = np.empty(len(mate), np.int64)
    known = np.zeros(len(mate), np.bool_)
    filled = kept = 0
    for r in range(n):
        first = filled
        room = len(ends) + offsets[r + 1] - offsets[r]
        if filled + room > len(chain):
            chain, times = _longer(chain, room), _longer(times, room)
        filled = _copy(chain, times, filled, cells, values, offsets[r], offsets[r + 1])
        filled, met, fits = _complete(
            ends, facets, signs, mate, turn, by_turn, chain, times, first, filled, sums, touched, known, limits
        )
        if not fits:
            return chain, times, chain_ends[:0], rim, rim_values, rim_ends[:0]
        if kept + met > len(rim):
            rim, rim_values = _longer(rim, met), _longer(rim_values, met)
        kept = _collect(rim, rim_values, kept, touched[:met], sums, known)
        chain_ends[r + 1] = filled
        rim_ends[r + 1] = kept
    chain, times, rim, rim_values = chain[:filled], times[:filled], rim[:kept], rim_values[:kept]
    return chain.copy(), times.copy(), chain_ends, rim.copy(), rim_values.copy(), rim_ends


@compiled
def _complete(
    ends: AnyArray, facets: AnyArray, signs: SignArray, mate: IntArray, turn: IntArray, by_turn: IntArray,
    chain: IntArray, times: AnyArray, place: int, filled: int, sums: AnyArray, touched: IntArray, known: BoolArray,
    limits: AnyArray,
) -> tuple[int, int, bool]:  # fmt: skip
    waiting = [0]
    waiting.pop()
    met = 0
    while place < filled or len(waiting) > 0:
        if place == filled:
            a = by_turn[heapq.heappop(waiting)]
            if sums[a] == 0:
                continue
            b = mate[a]
            chain[filled] = b
            times[filled] = -sums[a] * _sign(a, b, ends, facets, signs)
            filled += 1
        b, q = chain[place], times[place]
        place += 1
        if abs(q) > limits[0]:
            return filled, met, False
        for i in range(ends[b], ends[b + 1]):
            a = facets[i]
            sums[a] += q * signs[i]
            if abs(sums[a]) > limits[1]:
                return filled, met, False
            if not known[a]:
                known[a] = True
                touched[met] = a
                met += 1
                if mate[a] >= 0:
                    heapq.heappush(waiting, turn[a])
    return filled, met, True


@compiled
def _copy(
    chain: IntArray, times: AnyArray, filled: int, cells: IntArray, values: AnyArray, first: int, last: int
) -> int:
    for i in range(first, last):
        chain[filled] = cells[i]
        times[filled] = values[i]
        filled += 1
    return filled


@compiled
def _collect(
    rim: IntArray, rim_values: AnyArray, kept: int, touched: IntArray, sums: AnyArray, known: BoolArray
) -> int:
    for a in np.sort(touched):
        if sums[a] != 0:
            rim[kept] = a
            rim_values[kept] = sums[a]
            kept += 1
        sums[a] = 0
        known[a] = False
    return kept


@compiled
def _longer(array: AnyArray, room: int) -> AnyArray:
    longer = np.zeros(2 * len(array) + room, array.dtype)
    longer[: len(array)] = array
    return longer
