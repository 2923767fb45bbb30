"""Faces on graphs: triangles found, and vertex loops turned into walks along edges."""

from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np

from dec.arrays import IntArray, SignArray
from dec.errors import TopologyError
from dec.topology.polygons import Ragged, Walks, ragged, refuse_bad_corners

if TYPE_CHECKING:
    from dec.calculus.complex import Complex

__all__ = ["edges_between", "triangles", "walks_along"]

_WEDGES_AT_ONCE = 2_000_000


def edges_between(complex: "Complex", start: IntArray, end: IntArray) -> tuple[IntArray, SignArray]:
    """The edge that joins each pair of vertices, and +1 where it runs from start to end.

    Parameters
    ----------
    start, end : int64 arrays, shape (m,)

    Returns
    -------
    edges : int64 array, shape (m,)
    signs : int8 array, shape (m,)

    Raises
    ------
    TopologyError
        If two vertices share no edge, or several: then only edges can say which is meant.
    """
    n = complex.counts[0]
    keys = _keys(complex.tail, complex.head, n)
    order = np.argsort(keys, kind="stable")
    keys = keys[order]
    wanted = _keys(start, end, n)
    first = np.searchsorted(keys, wanted)
    last = np.searchsorted(keys, wanted, side="right")
    wrong = last - first != 1
    if wrong.any():
        at = int(np.argmax(wrong))
        a, b = (_name(complex, int(v[at])) for v in (start, end))
        found = int(last[at] - first[at])
        if not found:
            message = f"vertices {a} and {b} must share an edge, there is none; put the vertices between them in"
        else:
            message = f"vertices {a} and {b} share {found} edges; say which by a chain of edges, K.chain(1, ...)"
        raise TopologyError(message)
    edges = order[first]
    return edges, np.where(complex.tail[edges] == start, 1, -1).astype(np.int8)


def walks_along(complex: "Complex", loops: Ragged) -> Walks:
    """The walk along edges round each vertex loop.

    Raises
    ------
    TopologyError
        As `edges_between`, or if a loop has fewer than three corners or names a vertex that is not there.
    """
    refuse_bad_corners(loops, complex.counts[0])
    edges, signs = edges_between(complex, loops.flat, loops.following())
    return Walks(edges, signs, loops.offsets, loops.width)


def triangles(complex: "Complex") -> Ragged:
    """Every set of three vertices that three edges join, corners ascending, in lexicographic order.

    Self-loops take no part; parallel edges give one triangle, which `walks_along` then refuses.

    Notes
    -----
    Edges are directed towards the end of larger degree, so that a vertex of degree 100,000 costs no more than its
    share. Source: Chiba and Nishizeki, Arboricity and subgraph listing algorithms, SIAM J. Comput. 14 (1985).
    """
    n = complex.counts[0]
    proper = complex.tail != complex.head
    keys = np.unique(_keys(complex.tail[proper], complex.head[proper], n))
    low, high = keys // max(n, 1), keys % max(n, 1)
    rank = np.empty(n, np.int64)
    rank[np.argsort(np.bincount(np.concatenate([low, high]), minlength=n), kind="stable")] = np.arange(n)
    upward = rank[low] < rank[high]
    start, end = np.where(upward, low, high), np.where(upward, high, low)
    order = np.argsort(start, kind="stable")
    start, end = start[order], end[order]
    first = np.concatenate([[0], np.cumsum(np.bincount(start, minlength=n))])
    wedges = first[start + 1] - np.arange(1, len(start) + 1)  # an edge and each later one from the same vertex
    found = [np.empty((0, 3), np.int64)]
    steps = np.arange(0, wedges.sum() + _WEDGES_AT_ONCE, _WEDGES_AT_ONCE)
    for begin, stop in pairwise(np.searchsorted(np.cumsum(wedges), steps, side="right")):
        sizes = wedges[begin:stop]
        edge = np.repeat(np.arange(begin, stop), sizes)
        place = np.arange(len(edge)) - np.repeat(np.cumsum(sizes) - sizes, sizes)
        other = end[edge + 1 + place]
        closing = _keys(end[edge], other, n)
        at = np.minimum(np.searchsorted(keys, closing), len(keys) - 1)
        closed = keys[at] == closing if len(keys) else np.zeros(0, bool)
        found.append(np.stack([start[edge], end[edge], other], axis=1)[closed])
    rows = np.sort(np.concatenate(found), axis=1)
    return ragged(rows[np.lexsort(rows.T[::-1])], "face")


def _keys(start: IntArray, end: IntArray, n: int) -> IntArray:
    return np.minimum(start, end) * n + np.maximum(start, end)


def _name(complex: "Complex", vertex: int) -> str:
    return repr(complex.vertex_ids[vertex]) if complex.vertex_ids is not None else str(vertex)
