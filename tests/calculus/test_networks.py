"""NetworkX graphs in and out; faces on graphs."""

import networkx as nx
import numpy as np
import pytest

from dec.calculus import graphs
from dec.calculus.complex import Complex
from dec.calculus.networks import from_networkx, to_networkx
from dec.errors import InputError, TopologyError


def multigraph(kind):
    graph = kind()
    graph.add_node("lonely")
    graph.add_edges_from([("b", "a"), ("a", "b"), ("a", "c"), ("c", "c")])
    if graph.is_multigraph():
        graph.add_edge("a", "c", key="spare")
    return graph


@pytest.mark.parametrize("kind", [nx.Graph, nx.DiGraph, nx.MultiGraph, nx.MultiDiGraph])
def test_a_networkx_graph_of_any_kind_comes_in_with_its_nodes_edges_and_keys(kind):
    graph = multigraph(kind)
    K = from_networkx(graph)
    assert K.vertex_ids.tolist() == list(graph.nodes)
    listed = list(graph.edges(keys=True)) if graph.is_multigraph() else list(graph.edges)
    assert K.edge_ids.tolist() == listed
    assert [(K.vertex_ids[t], K.vertex_ids[h]) for t, h in zip(K.tail, K.head, strict=True)] == [e[:2] for e in listed]


def test_directed_multigraphs_survive_the_way_there_and_back():
    graph = multigraph(nx.MultiDiGraph)
    again = to_networkx(from_networkx(graph))
    assert sorted(again.edges(keys=True), key=str) == sorted(graph.edges(keys=True), key=str)
    assert list(again.nodes) == list(graph.nodes)


def test_complexes_survive_the_way_there_and_back():
    K = Complex.from_edges([1, 0, 0, 2], [0, 1, 1, 2], 4, edge_ids=["p", "q", "r", "s"])
    again = from_networkx(to_networkx(K))
    order = [
        again.edge_ids.tolist().index((int(t), int(h), name))
        for t, h, name in zip(K.tail, K.head, K.edge_ids, strict=True)
    ]
    assert again.counts == K.counts
    assert again.tail[order].tolist() == K.tail.tolist()
    assert again.head[order].tolist() == K.head.tolist()


def test_nodes_that_are_tuples_stay_tuples():
    K = from_networkx(nx.grid_2d_graph(2, 2))
    assert K.vertex_ids.tolist() == [(0, 0), (0, 1), (1, 0), (1, 1)]
    assert K.path([(0, 0), (0, 1)]).coefficients.sum() == 1


def test_loops_name_nodes_and_triangles_are_found():
    graph = nx.relabel_nodes(nx.complete_graph(4), dict(enumerate("abcd")))
    assert from_networkx(graph, faces="triangles").counts == (4, 6, 4)
    assert from_networkx(graph, faces="none").counts == (4, 6)
    K = from_networkx(graph, faces=[["a", "b", "c", "d"]])
    assert K.region([0]).boundary().coefficients.tolist() == K.path(list("abcd"), closed=True).coefficients.tolist()


@pytest.mark.parametrize(
    ("make", "error", "message"),
    [
        (lambda: from_networkx([(0, 1)]), InputError, "graph must be a NetworkX graph, got list"),
        (lambda: from_networkx(nx.path_graph(3), faces="squares"), InputError, "faces must be .* got 'squares'"),
        (lambda: from_networkx(nx.path_graph(3), faces=[[0, 1, 7]]), InputError, "no vertex 7 among the 3 vertex ids"),
        (
            lambda: from_networkx(nx.path_graph(3), faces=[[0, 1, 2]]),
            TopologyError,
            "vertices 2 and 0 must share an edge",
        ),
        (lambda: from_networkx(nx.path_graph(3), faces=[[0, 1]]), TopologyError, "at least three corners"),
        (
            lambda: from_networkx(nx.MultiGraph([(0, 1), (1, 2), (2, 0), (0, 1)]), faces="triangles"),
            TopologyError,
            "vertices 0 and 1 share 2 edges",
        ),
    ],
)
def test_what_is_no_graph_or_no_loop_of_it_is_refused(make, error, message):
    with pytest.raises(error, match=message):
        make()


@pytest.mark.parametrize("seed", range(20))
def test_triangles_are_those_of_trying_every_three_vertices(seed, monkeypatch):
    monkeypatch.setattr(graphs, "_WEDGES_AT_ONCE", 1 + seed)  # blocks must not lose any
    random = np.random.default_rng(seed)
    n = 12
    tail, head = random.integers(0, n, (2, 40))
    K = Complex.from_edges(tail, head, n)
    joined = {frozenset(e) for e in zip(tail.tolist(), head.tolist(), strict=True)}
    expected = [
        [a, b, c] for a in range(n) for b in range(a + 1, n) for c in range(b + 1, n)
        if {frozenset((a, b)), frozenset((b, c)), frozenset((a, c))} <= joined
    ]  # fmt: skip
    assert graphs.triangles(K).flat.reshape(-1, 3).tolist() == expected


@pytest.mark.parametrize(
    "graph", [nx.gnp_random_graph(60, 0.3, seed=1), nx.barabasi_albert_graph(200, 5, seed=2), nx.star_graph(300)]
)
def test_triangles_are_as_many_as_networkx_counts(graph):
    assert len(graphs.triangles(from_networkx(graph))) == sum(nx.triangles(graph).values()) // 3


def test_no_edges_have_no_triangles():
    assert len(graphs.triangles(Complex.from_edges([], [], 3))) == 0
    assert Complex.from_edges([], [], 0).with_faces("triangles").counts == (0, 0, 0)


def test_faces_on_a_graph_keep_the_direction_of_its_edges_and_its_names():
    K = Complex.from_edges([1, 1, 0], [0, 2, 2], vertex_ids=["a", "b", "c"], edge_ids=["x", "y", "z"], points=np.eye(3))
    filled = K.with_faces([[0, 1, 2]])
    # walking a -> b -> c -> a: against x (b -> a), along y (b -> c), against z (a -> c)
    assert filled.coboundary(1).toarray().tolist() == [[-1, 1, -1]]
    assert filled.vertex_ids.tolist() == ["a", "b", "c"]
    assert filled.edge_ids.tolist() == ["x", "y", "z"]
    assert filled.points.tolist() == np.eye(3).tolist()
    assert K.with_faces("none") is K


def test_edges_between_vertices_agree_with_looking_at_every_edge():
    random = np.random.default_rng(3)
    pairs = np.array([(a, b) for a in range(9) for b in range(a, 9)])
    pairs = pairs[random.permutation(len(pairs))[:30]]
    swap = random.random(30) < 0.5
    pairs[swap] = pairs[swap, ::-1]
    K = Complex.from_edges(pairs[:, 0], pairs[:, 1], 9)
    back = random.random(30) < 0.5
    start, end = np.where(back, K.head, K.tail), np.where(back, K.tail, K.head)
    edges, signs = graphs.edges_between(K, start, end)
    assert edges.tolist() == list(range(30))
    assert signs.tolist() == [1 if not b or t == h else -1 for b, t, h in zip(back, K.tail, K.head, strict=True)]


@pytest.mark.parametrize("loop_first", [True, False])
def test_a_triangle_that_walks_a_self_loop_and_an_edge_there_and_back_counts_the_self_loop_only(loop_first):
    heads = [0, 1] if loop_first else [1, 0]
    K = Complex.from_edges([0, 0], heads).with_faces([[0, 0, 1]])
    loop, edge = heads.index(0), heads.index(1)
    assert K.walks.edges.tolist() == [loop, edge, edge]
    assert K.walks.signs.tolist() == [1, 1, -1]
    assert K.coboundary(1).toarray()[0, [loop, edge]].tolist() == [1, 0]
    assert K.betti() == (1, 0, 0)


NONE_VERTEX = Complex.from_edges([0], [1], vertex_ids=[None, 0])
NONE_EDGE = Complex.from_edges([0, 0], [1, 1], edge_ids=[0, None])


@pytest.mark.parametrize(
    ("make", "message"),
    [
        (lambda: from_networkx(nx.Graph), "graph must be a NetworkX graph, got type"),
        (lambda: from_networkx(nx.path_graph(3), faces=5), 'faces must be "none", "triangles" or a list .* got 5'),
        (lambda: from_networkx(nx.path_graph(3), faces=None), "got None"),
        (lambda: from_networkx(nx.path_graph(3), faces=[5]), "face 0 must be a list of nodes, got 5"),
        (lambda: from_networkx(nx.path_graph(3), faces=[[0, 1, 2], [0, [1], 2]]), r"face 1 .* got \[0, \[1\], 2\]"),
        (lambda: from_networkx(nx.path_graph(3), faces=["012"]), "face 0 must be a list of nodes, got '012'"),
        (lambda: to_networkx(5), "complex must be a Complex, got int"),
        (lambda: to_networkx(NONE_VERTEX), "vertex 0 must have an id other than None"),
        (lambda: to_networkx(NONE_EDGE), "edge 1 must have an id other than None"),
    ],
)
def test_what_is_no_graph_no_faces_or_no_complex_is_one_input_error(make, message):
    with pytest.raises(InputError, match=message):
        make()


@pytest.mark.parametrize(
    "ids",
    [
        [("a", "b", 1), 1],  # shortened, the first would have the key of the second
        [1, ("a", "b", 1)],
        [("a", "b", 1), 1, ("a", "b", ("a", "b", 1))],
        [("a", "b", None), 0],
    ],
)
def test_edges_whose_keys_would_clash_all_survive(ids):
    n = len(ids)
    graph = to_networkx(Complex.from_edges([0] * n, [1] * n, vertex_ids=["a", "b"], edge_ids=ids))
    assert set(graph.edges(keys=True)) == {("a", "b", name) for name in ids}
