"""NetworkX graphs in and out, with directions and keys kept."""

from collections.abc import Hashable, Iterable, Sequence
from typing import TYPE_CHECKING, Any

import numpy as np

from dec.arrays import IntArray
from dec.calculus.complex import Complex
from dec.errors import InputError

if TYPE_CHECKING:
    import networkx as nx

__all__ = ["from_networkx", "to_networkx"]


def from_networkx(graph: "nx.Graph[Any]", *, faces: str | Sequence[Any] = "none") -> Complex:
    """A complex from a NetworkX graph of any of its four kinds.

    Parameters
    ----------
    graph : Graph, DiGraph, MultiGraph or MultiDiGraph
        Nodes become vertices in the graph's order, their names `vertex_ids`. An edge keeps the direction of a directed
        graph; in an undirected one it runs the way ``graph.edges`` lists it. Its id is ``(u, v)``, or
        ``(u, v, key)`` from a multigraph.
    faces : "none", "triangles" or list of vertex loops
        2-cells to put on it; loops name nodes.

    Returns
    -------
    Complex

    Raises
    ------
    InputError
        If `graph` is no NetworkX graph, `faces` is none of the three, or a loop names an unknown node.
    TopologyError
        If the side of a face is no edge, or one of several parallel edges.

    Examples
    --------
    >>> import networkx as nx
    >>> from_networkx(nx.cycle_graph(3), faces="triangles").counts
    (3, 3, 1)
    """
    if isinstance(graph, type) or not hasattr(graph, "is_multigraph"):
        message = f"graph must be a NetworkX graph, got {type(graph).__name__}"
        raise InputError(message)
    nodes = list(graph.nodes)
    number = {node: index for index, node in enumerate(nodes)}
    edges: list[Any] = list(graph.edges(keys=True)) if graph.is_multigraph() else list(graph.edges)
    tail = np.array([number[edge[0]] for edge in edges], dtype=np.int64)
    head = np.array([number[edge[1]] for edge in edges], dtype=np.int64)
    network = Complex.from_edges(tail, head, len(nodes), vertex_ids=nodes, edge_ids=edges)
    if isinstance(faces, str):
        return network.with_faces(faces)
    if not isinstance(faces, Iterable):
        message = f'faces must be "none", "triangles" or a list of loops of nodes, got {faces!r:.60}'
        raise InputError(message)
    return network.with_faces([_numbers(network, loop, index) for index, loop in enumerate(faces)])


def _numbers(network: Complex, loop: object, index: int) -> IntArray:
    if isinstance(loop, Iterable) and not isinstance(loop, str):
        nodes = list(loop)
        if all(isinstance(node, Hashable) for node in nodes):
            return network.vertex_numbers(nodes)
    message = f"face {index} must be a list of nodes, got {loop!r:.60}"
    raise InputError(message)


def to_networkx(complex: Complex) -> "nx.MultiDiGraph[Any]":
    """A NetworkX MultiDiGraph with every edge in its stored direction.

    Parameters
    ----------
    complex : Complex
        Its vertices and edges go over; faces have no place in a graph.

    Returns
    -------
    networkx.MultiDiGraph
        Nodes are the vertex ids, keys the edge ids. Where all ids are ``(u, v, key)`` or shorten without two edges
        becoming one, such an id gives its own key back.

    Raises
    ------
    InputError
        If `complex` is no Complex, or a vertex or an edge has the id None, which NetworkX has no place for.

    Examples
    --------
    >>> list(to_networkx(Complex.from_edges([0, 0], [1, 1], edge_ids=["a", "b"])).edges(keys=True))
    [(0, 1, 'a'), (0, 1, 'b')]
    """
    import networkx as nx

    if not isinstance(complex, Complex):
        message = f"complex must be a Complex, got {type(complex).__name__}"
        raise InputError(message)
    names: list[Any] = list(range(complex.counts[0])) if complex.vertex_ids is None else list(complex.vertex_ids)
    ids: list[Any] = list(range(complex.counts[1])) if complex.edge_ids is None else list(complex.edge_ids)
    for what, given in (("vertex", names), ("edge", ids)):
        if None in given:
            message = f"{what} {given.index(None)} must have an id other than None to become part of a NetworkX graph"
            raise InputError(message)
    ends = [(names[tail], names[head]) for tail, head in zip(complex.tail.tolist(), complex.head.tolist(), strict=True)]
    keys = [_short(name, pair) for name, pair in zip(ids, ends, strict=True)]
    if len({(*pair, key) for pair, key in zip(ends, keys, strict=True)}) < len(keys) or None in keys:
        keys = ids  # NetworkX would make one edge of two with the same ends and key
    graph: nx.MultiDiGraph[Any] = nx.MultiDiGraph()
    graph.add_nodes_from(names)
    for (tail, head), key in zip(ends, keys, strict=True):
        graph.add_edge(tail, head, key=key)
    return graph


def _short(name: Any, ends: tuple[Any, Any]) -> Any:
    return name[2] if isinstance(name, tuple) and len(name) == 3 and name[:2] == ends else name
