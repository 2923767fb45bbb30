"""Classes of edges that part a graph in pairs: by hand, and on random graphs against their definition."""

from itertools import pairwise

import networkx as nx
import numpy as np
import pytest

from dec.topology import cut_pairs
from dec.topology.compiled import SMALL
from dec.topology.cut_pairs import cut_classes
from dec.topology.graphs import bridges, fundamental_loops, spanning_forest


def parting_edges(edges, kept, n):
    """The edges whose loss parts a component, by networkx; two vertices inside each edge keep the graph simple."""
    graph = nx.Graph()
    graph.add_nodes_from(range(n))
    for e in kept:
        a, b = edges[e]
        graph.add_edges_from([(a, ("in", e)), (("in", e), ("out", e)), (("out", e), b)])
    parting = set(nx.bridges(graph))
    return {e for e in kept if (("in", e), ("out", e)) in parting or (("out", e), ("in", e)) in parting}


def slow_classes(tail, head, n):
    """The definition: leave out each edge in turn and see which others have become bridges."""
    edges = list(zip(tail.tolist(), head.tolist(), strict=True))
    every = range(len(edges))
    already = parting_edges(edges, every, n)
    classes = np.full(len(edges), -1)
    for e in every:
        if e not in already:
            with_it = parting_edges(edges, [f for f in every if f != e], n) - already
            classes[e] = min(with_it | {e})
    return classes


def classes_by_loops(tail, head, n):
    """Edges in the same loops of a basis of all loops; Python integers are the sets, so nothing is left to chance."""
    forest = spanning_forest(tail, head, n)
    outside = np.flatnonzero(~forest.contains(len(tail)))
    loops = fundamental_loops(tail, head, forest, outside)
    held = [0] * len(tail)
    for k in range(len(outside)):
        for e in loops.edges[loops.offsets[k] : loops.offsets[k + 1]].tolist():
            held[e] |= 1 << k
    lowest = {}
    for e, loops_of_e in enumerate(held):
        lowest.setdefault(loops_of_e, e)
    return np.array([lowest[x] if x else -1 for x in held], np.int64)


def graph_of(*edges, n=None):
    ends = np.array(edges, np.int64).reshape(-1, 2)
    return ends[:, 0], ends[:, 1], int(ends.max(initial=-1)) + 1 if n is None else n


def cycle(k):
    return graph_of(*((i, (i + 1) % k) for i in range(k)))


def ladder(k):
    rails = [(i + s, i + 1 + s) for s in (0, k) for i in range(k - 1)]
    return graph_of(*rails, *((i, i + k) for i in range(k)))


def cactus(random):
    """Loops of 1 to 5 edges hung one on another."""
    edges, n = [], 1
    for _ in range(random.integers(1, 6)):
        k, at = int(random.integers(1, 6)), int(random.integers(n))
        walk = [at, *range(n, n + k - 1), at]
        edges += list(pairwise(walk))
        n += k - 1
    return graph_of(*edges, n=n)


def tree(random):
    n = int(random.integers(1, 15))
    return graph_of(*((int(random.integers(v)), v) for v in range(1, n)), n=n)


def multigraph(random):
    """Any ends at all: self-loops, parallel edges and several components are likely."""
    n, m = int(random.integers(1, 9)), int(random.integers(0, 15))
    return random.integers(0, n, m), random.integers(0, n, m), n


def subdivided(random):
    """A small multigraph whose edges are chains of several, and a second part: large classes."""
    tail, head, n = multigraph(random)
    edges = []
    for a, b in zip(tail[:8].tolist(), head[:8].tolist(), strict=True):
        inner = int(random.integers(0, 3))
        walk = [a, *range(n, n + inner), b]
        edges += list(pairwise(walk))
        n += inner
    return graph_of(*edges, (n, n + 1), (n + 1, n), n=n + 2)


def shuffled(random, graph):
    """The same graph with vertices and edges in another order and some edges turned round."""
    tail, head, n = graph
    renumber, order, turned = random.permutation(n), random.permutation(len(tail)), random.random(len(tail)) < 0.5
    one, other = renumber[tail[order]], renumber[head[order]]
    return np.where(turned, other, one), np.where(turned, one, other), n


BY_HAND = {
    "no vertex": (graph_of(), []),
    "vertices only": (graph_of(n=3), []),
    "one bridge": (graph_of((0, 1)), [-1]),
    "one self-loop": (graph_of((0, 0)), [0]),
    "two self-loops at one vertex": (graph_of((0, 0), (0, 0)), [0, 1]),
    "two parallel edges part only together": (graph_of((0, 1), (1, 0)), [0, 0]),
    "three parallel edges": (graph_of((0, 1), (0, 1), (0, 1)), [0, 1, 2]),
    "a cycle is one class": (cycle(5), [0] * 5),
    "a ladder: ends of three edges, rails in pairs, rungs alone": (
        ladder(5), [0, 1, 2, 3, 0, 1, 2, 3, 0, 9, 10, 11, 3],
    ),
    "two cycles at one vertex": (graph_of((0, 1), (1, 2), (2, 0), (2, 3), (3, 4), (4, 2)), [0, 0, 0, 3, 3, 3]),
    "two cycles joined by a bridge": (
        graph_of((0, 1), (1, 2), (2, 0), (2, 3), (3, 4), (4, 5), (5, 3)), [0, 0, 0, -1, 4, 4, 4],
    ),
    "complete on four": (graph_of((0, 1), (0, 2), (0, 3), (1, 2), (1, 3), (2, 3)), [0, 1, 2, 3, 4, 5]),
    "complete on four, one edge halved": (
        graph_of((0, 1), (0, 2), (0, 3), (1, 2), (1, 3), (2, 4), (4, 3)), [0, 1, 2, 3, 4, 5, 5],
    ),
    "three chains between two ends": (
        graph_of((0, 1), (1, 2), (0, 3), (3, 2), (0, 4), (4, 2)), [0, 0, 2, 2, 4, 4],
    ),
    "cycles of equal size in two components, and a bridge first": (
        graph_of((6, 7), (0, 1), (1, 2), (2, 0), (3, 4), (4, 5), (5, 3)), [-1, 1, 1, 1, 4, 4, 4],
    ),
    "two branches below one vertex, covered by as many edges up to that vertex": (
        graph_of((0, 1), (1, 2), (2, 0), (1, 0), (0, 3), (3, 4), (4, 0), (3, 0)), [0, 1, 1, 3, 4, 5, 5, 7],
    ),
    "a pair of rails far apart along one path": (
        graph_of((0, 1), (0, 2), (1, 2), (1, 3), (2, 4), (3, 4), (3, 5), (4, 6), (5, 6)),
        [0, 0, 2, 3, 3, 5, 6, 6, 6],
    ),
}  # fmt: skip


@pytest.mark.parametrize("name", BY_HAND)
def test_hand_written_graphs_have_these_classes(name):
    graph, expected = BY_HAND[name]
    classes = cut_classes(*graph)
    assert classes.dtype == np.int64
    assert classes.tolist() == expected
    assert slow_classes(*graph).tolist() == expected


@pytest.mark.parametrize("make", [multigraph, subdivided, cactus, tree])
def test_random_graphs_meet_the_definition(make):
    for seed in range(120):
        random = np.random.default_rng(seed)
        graph = shuffled(random, make(random))
        assert cut_classes(*graph).tolist() == slow_classes(*graph).tolist(), (make.__name__, seed)


@pytest.mark.parametrize("graph", [cycle(30), ladder(12), cycle(1), cycle(2)])
def test_cycles_and_ladders_meet_the_definition_in_any_order(graph):
    for seed in range(5):
        other = shuffled(np.random.default_rng(seed), graph)
        assert cut_classes(*other).tolist() == slow_classes(*other).tolist()


def sparse_graph(seed, n=4000, m=4600):
    random = np.random.default_rng(seed)
    tail, head = random.integers(0, n, (2, m))
    tail[:30] = head[:30]
    tail[30:60], head[30:60] = head[60:90].copy(), tail[60:90].copy()
    return tail, head, n


@pytest.mark.parametrize("graph", [sparse_graph(0), sparse_graph(1, 6000, 6100), ladder(2000), cycle(3000)])
def test_large_graphs_agree_with_the_loops_that_hold_each_edge(graph):
    assert len(graph[0]) * 2 + graph[2] > SMALL  # compiled
    other = shuffled(np.random.default_rng(2), graph)
    classes = cut_classes(*other)
    assert np.array_equal(classes, classes_by_loops(*other))
    assert np.array_equal(classes < 0, bridges(*other))


def test_the_interpreted_and_the_compiled_loops_agree(monkeypatch):
    graph = sparse_graph(3)
    machine = cut_classes(*graph)
    for kernel in (cut_pairs.depth_first, cut_pairs.covering, cut_pairs.mark_path):
        monkeypatch.setattr(cut_pairs, kernel.__name__, kernel.interpreted)
    assert np.array_equal(cut_classes(*graph), machine)


def test_classes_do_not_depend_on_the_order_of_vertices_nor_on_directions():
    for seed in range(20):
        random = np.random.default_rng(seed)
        tail, head, n = subdivided(random)
        renumber = random.permutation(n)
        assert np.array_equal(cut_classes(renumber[head], renumber[tail], n), cut_classes(tail, head, n))
        narrow = cut_classes(tail.astype(np.int32), head.astype(np.int32), n)
        assert np.array_equal(narrow, cut_classes(tail, head, n))


@pytest.mark.parametrize("mark", ["number", "deepest"])
def test_either_mark_alone_would_join_what_is_apart(mark, monkeypatch):
    def half(covers, deepest):
        one = np.minimum(covers, 1)
        return whole(one, deepest) if mark == "deepest" else whole(covers, 0 * deepest)

    whole = cut_pairs._lowest_of_equals
    monkeypatch.setattr(cut_pairs, "_lowest_of_equals", half)
    wrong = [name for name, (graph, expected) in BY_HAND.items() if cut_classes(*graph).tolist() != expected]
    assert wrong
