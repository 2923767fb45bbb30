"""Components, spanning forests, bridges and loops of a graph, in linear time.

Every function takes the two ends of each edge; parallel edges and self-loops are ordinary edges.
"""

from dataclasses import dataclass

import numpy as np

from dec.arrays import BoolArray, IntArray
from dec.errors import TopologyError
from dec.topology import searches
from dec.topology.polygons import Walks

__all__ = [
    "Forest", "adjacency", "bridges", "components", "fundamental_loops", "joined", "spanning_forest", "tree_flows",
    "tree_potentials",
]  # fmt: skip


@dataclass(frozen=True, slots=True)
class Forest:
    """A breadth-first spanning forest.

    Attributes
    ----------
    order : int64 array, shape (n0,)
        Vertices, each after its parent, component by component.
    parent : int64 array, shape (n0,)
        Parent vertex; -1 at a root.
    via : int64 array, shape (n0,)
        Edge to the parent; -1 at a root.
    depth : int64 array, shape (n0,)
        Edges to the root.
    """

    order: IntArray
    parent: IntArray
    via: IntArray
    depth: IntArray

    def contains(self, n_edges: int) -> BoolArray:
        """True for the edges of the forest; bool array of shape (n1,)."""
        inside = np.zeros(n_edges, dtype=bool)
        inside[self.via[self.via >= 0]] = True
        return inside


def components(tail: IntArray, head: IntArray, n_vertices: int) -> tuple[int, IntArray]:
    """Connected components by union-find.

    Parameters
    ----------
    tail, head : int64 arrays, shape (n1,)
    n_vertices : int

    Returns
    -------
    count : int
    label : int64 array, shape (n0,)
        Numbered 0, 1, ... in the order of their lowest vertex.

    Notes
    -----
    Source: Tarjan, Efficiency of a good but not linear set union algorithm, J. ACM 22 (1975); path halving.

    Examples
    --------
    >>> components(np.array([3]), np.array([1]), 4)
    (3, array([0, 1, 2, 1]))
    """
    label = searches.union(*_ends(tail, head), np.arange(n_vertices))
    is_root = label == np.arange(n_vertices)
    number = np.cumsum(is_root) - 1
    return int(is_root.sum()), number[label]


def joined(vertices: IntArray, n_vertices: int) -> tuple[IntArray, int]:
    """Renumbering that makes one vertex of several.

    Returns
    -------
    number : int64 array, shape (n0,)
        New number of each vertex; the joined ones share the number of the lowest of them.
    count : int
        Vertices afterwards.

    Examples
    --------
    >>> joined(np.array([3, 1]), 5)
    (array([0, 1, 2, 1, 3]), 4)
    """
    keep = np.ones(n_vertices, dtype=bool)
    if len(vertices):
        keep[vertices] = False
        keep[vertices.min()] = True
    number = np.cumsum(keep) - 1
    if len(vertices):
        number[vertices] = number[vertices.min()]
    return number, int(keep.sum())


def spanning_forest(
    tail: IntArray, head: IntArray, n_vertices: int, *, roots: IntArray | None = None, usable: BoolArray | None = None
) -> Forest:
    """A breadth-first forest, the same at every run.

    Parameters
    ----------
    tail, head : int64 arrays, shape (n1,)
    n_vertices : int
    roots : int64 array or None
        Vertices to start from, in this order, before any others; then the lowest vertex not yet reached.
    usable : bool array, shape (n1,), or None
        Edges that may be used.

    Returns
    -------
    Forest

    Examples
    --------
    >>> spanning_forest(np.array([0, 1, 0]), np.array([1, 2, 2]), 3).via
    array([-1,  0,  2])
    """
    start, edge_at = adjacency(tail, head, n_vertices)
    first = np.empty(0, np.int64) if roots is None else np.asarray(roots, np.int64)
    allowed = np.ones(len(tail), dtype=bool) if usable is None else usable
    return Forest(*searches.breadth_first(*_ends(tail, head), start, edge_at, first, allowed))


def bridges(tail: IntArray, head: IntArray, n_vertices: int) -> BoolArray:
    """True for the edges whose loss parts their component.

    Parameters
    ----------
    tail, head : int64 arrays, shape (n1,)
    n_vertices : int

    Returns
    -------
    bool array, shape (n1,)

    Notes
    -----
    Source: Tarjan, A note on finding the bridges of a graph, Information Processing Letters 2 (1974). The depth-first
    search keeps the edge it came by, not the vertex, so one of two parallel edges is never a bridge.

    Examples
    --------
    >>> bridges(np.array([0, 0, 1]), np.array([1, 1, 2]), 3)
    array([False, False,  True])
    """
    start, edge_at = adjacency(tail, head, n_vertices)
    return searches.low_links(*_ends(tail, head), start, edge_at)


def fundamental_loops(tail: IntArray, head: IntArray, forest: Forest, edges: IntArray) -> Walks:
    """The loop that each given edge closes through the forest.

    Parameters
    ----------
    tail, head : int64 arrays, shape (n1,)
    forest : Forest
    edges : int64 array, shape (k,)
        Edges outside the forest, with both ends in one tree.

    Returns
    -------
    Walks
        Each loop starts with its edge, walked along, and comes back through the tree.

    Raises
    ------
    TopologyError
        If an edge joins two trees; the message names the first.

    Examples
    --------
    >>> tail, head = np.array([0, 1, 0]), np.array([1, 2, 2])
    >>> loop = fundamental_loops(tail, head, spanning_forest(tail, head, 3), np.array([1]))
    >>> loop.edges, loop.signs
    (array([1, 2, 0]), array([ 1, -1,  1], dtype=int8))
    """
    sizes = searches.loop_lengths(tail, head, forest.parent, forest.depth, edges)
    if (sizes < 0).any():
        message = f"edge {edges[np.argmin(sizes)]} joins two trees of the forest, so it closes no loop"
        raise TopologyError(message)
    offsets = np.concatenate([[0], np.cumsum(sizes)]).astype(np.int64)
    legs = np.empty(int(offsets[-1]), np.int64)
    signs = np.empty(int(offsets[-1]), np.int8)
    searches.fill_loops(tail, head, forest.parent, forest.via, forest.depth, edges, offsets, legs, signs)
    return Walks(legs, signs, offsets, None)


def tree_potentials(tail: IntArray, head: IntArray, forest: Forest, difference: IntArray) -> IntArray:
    """Potential of each vertex, from 0 at the root, by adding differences along the forest.

    Parameters
    ----------
    difference : int64, float64 or object array, shape (n1,)
        Head minus tail; the caller makes sure that int64 sums cannot wrap.

    Returns
    -------
    array, shape (n0,), of the dtype of `difference`

    Examples
    --------
    >>> tail, head = np.array([0, 2]), np.array([1, 1])
    >>> tree_potentials(tail, head, spanning_forest(tail, head, 3), np.array([5, 7]))
    array([ 0,  5, -2])
    """
    potential = np.zeros(len(forest.order), dtype=difference.dtype)
    kernel = searches.climb if difference.dtype != object else searches.climb.interpreted  # type: ignore[attr-defined]
    kernel(tail, head, forest.order, forest.parent, forest.via, difference, potential)
    return potential


def tree_flows(tail: IntArray, head: IntArray, forest: Forest, surplus: IntArray) -> tuple[IntArray, IntArray]:
    """The one flow along the forest that carries every vertex's surplus to its root.

    Parameters
    ----------
    surplus : float64, int64 or object array, shape (n0,)
        What each vertex has to send away: its inflow minus outflow plus supply without the forest's edges.

    Returns
    -------
    flow : array, shape (n1,)
        Positive from tail to head; zero outside the forest.
    left : array, shape (n0,)
        What arrives at each root; zero elsewhere.

    Examples
    --------
    >>> tail, head = np.array([0, 2]), np.array([1, 1])
    >>> tree_flows(tail, head, spanning_forest(tail, head, 3), np.array([0, 0, 4]))
    (array([-4,  4]), array([4, 0, 0]))
    """
    flow = np.zeros(len(tail), dtype=surplus.dtype)
    left = surplus.copy()
    kernel = searches.drain if surplus.dtype != object else searches.drain.interpreted  # type: ignore[attr-defined]
    kernel(tail, forest.order, forest.parent, forest.via, flow, left)
    return flow, left


def _ends(tail: IntArray, head: IntArray) -> tuple[IntArray, IntArray]:
    """Return both ends as int64, whatever width they came with: one type, one compilation."""
    return np.asarray(tail, np.int64), np.asarray(head, np.int64)


def adjacency(tail: IntArray, head: IntArray, n_vertices: int) -> tuple[IntArray, IntArray]:
    """The edges at each vertex, ascending, as offsets (n0 + 1,) and a flat array (2 n1,); a self-loop stands twice.

    Examples
    --------
    >>> adjacency(np.array([0, 1]), np.array([1, 2]), 3)
    (array([0, 1, 3, 4]), array([0, 0, 1, 1]))
    """
    ends = np.stack([tail, head], axis=1).ravel()
    edge_at = np.argsort(ends, kind="stable")
    edge_at >>= 1
    start = np.concatenate([[0], np.cumsum(np.bincount(ends, minlength=n_vertices))]).astype(np.int64)
    return start, edge_at
