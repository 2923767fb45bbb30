"""NetworkX graphs in and out, with directions and keys kept."""

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import numpy as np

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
        If `graph` is no NetworkX graph, or a loop names an unknown node.
    TopologyError
        If the side of a face is no edge, or one of several parallel edges.

    Examples
    --------
    >>> import networkx as nx
    >>> from_networkx(nx.cycle_graph(3), faces="triangles").counts
    (3, 3, 1)
    """
    if not hasattr(graph, "is_multigraph"):
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
    return network.with_faces([network.vertex_numbers(loop) for loop in faces])


def to_networkx(complex: Complex) -> "nx.MultiDiGraph[Any]":
    """A NetworkX MultiDiGraph with every edge in its stored direction.

    Parameters
    ----------
    complex : Complex
        Its vertices and edges go over; faces have no place in a graph.

    Returns
    -------
    networkx.MultiDiGraph
        Nodes are the vertex ids, keys the edge ids; an id ``(u, v, key)`` gives its own key back.

    Examples
    --------
    >>> list(to_networkx(Complex.from_edges([0, 0], [1, 1], edge_ids=["a", "b"])).edges(keys=True))
    [(0, 1, 'a'), (0, 1, 'b')]
    """
    import networkx as nx

    graph: nx.MultiDiGraph[Any] = nx.MultiDiGraph()
    names: list[Any] = list(range(complex.counts[0])) if complex.vertex_ids is None else list(complex.vertex_ids)
    graph.add_nodes_from(names)
    ids = range(complex.counts[1]) if complex.edge_ids is None else complex.edge_ids
    for tail, head, name in zip(complex.tail.tolist(), complex.head.tolist(), ids, strict=True):
        ends = (names[tail], names[head])
        key = name[2] if isinstance(name, tuple) and len(name) == 3 and name[:2] == ends else name
        graph.add_edge(*ends, key=key)
    return graph
