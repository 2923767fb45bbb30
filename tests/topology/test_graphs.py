"""Components, forests, bridges and loops, on small graphs by hand and on random ones against networkx."""

from fractions import Fraction

import networkx as nx
import numpy as np
import pytest

from dec.errors import TopologyError
from dec.topology.graphs import (
    bridges,
    components,
    fundamental_loops,
    joined,
    spanning_forest,
    tree_flows,
    tree_potentials,
)


def random_graph(seed, n=30, m=40):
    """Parallel edges, self-loops and several components are likely."""
    random = np.random.default_rng(seed)
    tail, head = random.integers(0, n, (2, m))
    tail[: m // 10] = head[: m // 10]
    tail[-3:], head[-3:] = head[-6:-3].copy(), tail[-6:-3].copy()
    return tail, head, n


def as_networkx(tail, head, n):
    graph = nx.MultiGraph()
    graph.add_nodes_from(range(n))
    graph.add_edges_from((a, b, e) for e, (a, b) in enumerate(zip(tail.tolist(), head.tolist(), strict=True)))
    return graph


SEEDS = range(30)


@pytest.mark.parametrize("seed", SEEDS)
def test_components_are_those_of_networkx_numbered_by_lowest_vertex(seed):
    tail, head, n = random_graph(seed)
    count, label = components(tail, head, n)
    expected = sorted(nx.connected_components(as_networkx(tail, head, n)), key=min)
    assert count == len(expected)
    assert [{v for v in range(n) if label[v] == i} for i in range(count)] == expected


def test_no_vertices_have_no_components():
    count, label = components(np.array([], np.int64), np.array([], np.int64), 0)
    assert (count, label.tolist()) == (0, [])


@pytest.mark.parametrize("seed", SEEDS)
def test_bridges_are_the_edges_whose_loss_adds_a_component(seed):
    tail, head, n = random_graph(seed)
    before = components(tail, head, n)[0]
    lost = [components(np.delete(tail, e), np.delete(head, e), n)[0] > before for e in range(len(tail))]
    assert bridges(tail, head, n).tolist() == lost
    known = sorted(sorted(edge) for edge in nx.bridges(as_networkx(tail, head, n)))
    assert sorted(sorted((int(tail[e]), int(head[e]))) for e in np.flatnonzero(lost)) == known


def test_neither_of_two_parallel_edges_nor_a_self_loop_is_a_bridge():
    assert bridges(np.array([0, 1, 1, 2]), np.array([1, 0, 2, 2]), 3).tolist() == [False, False, True, False]


@pytest.mark.parametrize("seed", SEEDS)
def test_a_forest_is_breadth_first_and_reaches_every_vertex_by_a_shortest_way(seed):
    tail, head, n = random_graph(seed)
    forest = spanning_forest(tail, head, n)
    graph = as_networkx(tail, head, n)
    assert sorted(forest.order.tolist()) == list(range(n))
    place = np.argsort(forest.order)
    for v in range(n):
        if forest.parent[v] < 0:
            assert forest.via[v] == -1
            assert v == min(nx.node_connected_component(graph, v))
        else:
            e = forest.via[v]
            assert {int(tail[e]), int(head[e])} == {v, int(forest.parent[v])}
            assert place[forest.parent[v]] < place[v]
            assert forest.depth[v] == forest.depth[forest.parent[v]] + 1
    roots = [v for v in range(n) if forest.parent[v] < 0]
    for root in roots:
        for v, distance in nx.single_source_shortest_path_length(graph, root).items():
            assert forest.depth[v] == distance
    assert forest.contains(len(tail)).sum() == n - len(roots)


def test_a_forest_starts_from_the_roots_asked_for_and_uses_only_the_edges_allowed():
    tail, head = np.array([0, 1, 2, 0]), np.array([1, 2, 3, 3])
    forest = spanning_forest(tail, head, 4, roots=np.array([2, 0]))
    assert forest.order.tolist()[0] == 2
    assert forest.parent.tolist() == [1, 2, -1, 2]
    forest = spanning_forest(tail, head, 4, usable=np.array([True, False, True, False]))
    assert forest.parent.tolist() == [-1, 0, -1, 2]


def boundary(tail, head, n, edges, signs):
    total = np.zeros(n, int)
    for e, s in zip(edges.tolist(), signs.tolist(), strict=True):
        total[head[e]] += s
        total[tail[e]] -= s
    return total


@pytest.mark.parametrize("seed", SEEDS)
def test_the_loop_of_an_edge_is_a_closed_walk_through_the_forest(seed):
    tail, head, n = random_graph(seed)
    forest = spanning_forest(tail, head, n)
    inside = forest.contains(len(tail))
    outside = np.flatnonzero(~inside)
    loops = fundamental_loops(tail, head, forest, outside)
    assert len(loops) == len(outside) == len(tail) - n + components(tail, head, n)[0]
    for i, edge in enumerate(outside):
        edges, signs = (part[loops.offsets[i] : loops.offsets[i + 1]] for part in (loops.edges, loops.signs))
        assert (edges[0], signs[0]) == (edge, 1)
        assert inside[edges[1:]].all()
        assert len(set(edges.tolist())) == len(edges)
        at = int(tail[edge])
        for e, s in zip(edges.tolist(), signs.tolist(), strict=True):
            start, end = (tail[e], head[e]) if s > 0 else (head[e], tail[e])
            assert start == at
            at = int(end)
        assert at == tail[edge]
        assert not boundary(tail, head, n, edges, signs).any()


def test_an_edge_between_two_trees_closes_no_loop_and_is_named():
    tail, head = np.array([0, 2, 1]), np.array([1, 3, 2])
    forest = spanning_forest(tail, head, 4, usable=np.array([True, True, False]))
    with pytest.raises(TopologyError, match="edge 2 joins two trees of the forest"):
        fundamental_loops(tail, head, forest, np.array([2]))


def exactly(values):
    return np.array([Fraction(int(v), 3) for v in values], dtype=object)


@pytest.mark.parametrize("as_values", [np.asarray, lambda v: v.astype(float), exactly])
@pytest.mark.parametrize("seed", SEEDS[:8])
def test_tree_potentials_have_the_given_difference_along_every_edge_of_the_forest(seed, as_values):
    tail, head, n = random_graph(seed)
    forest = spanning_forest(tail, head, n)
    difference = as_values(np.random.default_rng(seed).integers(-50, 50, len(tail)))
    potential = tree_potentials(tail, head, forest, difference)
    assert potential.dtype == difference.dtype
    inside = forest.contains(len(tail))
    assert (potential[head[inside]] - potential[tail[inside]] == difference[inside]).all()
    assert (potential[forest.parent < 0] == 0).all()


@pytest.mark.parametrize("as_values", [np.asarray, lambda v: v.astype(float), exactly])
@pytest.mark.parametrize("seed", SEEDS[:8])
def test_tree_flows_carry_every_surplus_to_the_root_of_its_tree(seed, as_values):
    tail, head, n = random_graph(seed)
    forest = spanning_forest(tail, head, n)
    surplus = as_values(np.random.default_rng(seed).integers(-50, 50, n))
    given = surplus.copy()
    flow, left = tree_flows(tail, head, forest, surplus)
    assert (surplus == given).all()
    assert (flow[~forest.contains(len(tail))] == 0).all()
    # residual = inflow - outflow + surplus, vertex by vertex
    residual = surplus.copy()
    for e in range(len(tail)):
        residual[head[e]] += flow[e]
        residual[tail[e]] -= flow[e]
    assert (residual == left).all()
    assert (left[forest.parent >= 0] == 0).all()
    _, label = components(tail, head, n)
    for root in np.flatnonzero(forest.parent < 0):
        assert left[root] == sum(surplus[label == label[root]])


def test_joined_vertices_share_the_number_of_the_lowest_and_the_others_close_up():
    number, count = joined(np.array([5, 2, 4]), 7)
    assert (number.tolist(), count) == ([0, 1, 2, 3, 2, 2, 4], 5)
    number, count = joined(np.array([], np.int64), 3)
    assert (number.tolist(), count) == ([0, 1, 2], 3)


def test_a_path_of_a_hundred_thousand_vertices_does_not_overflow_a_stack():
    n = 100_000
    tail, head = np.arange(n - 1), np.arange(1, n)
    assert bridges(tail, head, n).all()
    assert spanning_forest(tail, head, n).depth[-1] == n - 1
    assert components(tail, head, n)[0] == 1


def test_a_vertex_of_degree_200_is_a_vertex_like_any_other():
    tail, head = np.zeros(200, np.int64), np.arange(1, 201)
    assert bridges(tail, head, 201).all()
    forest = spanning_forest(tail, head, 201)
    assert (forest.depth[1:] == 1).all()
    _, left = tree_flows(tail, head, forest, np.ones(201, np.int64))
    assert left[0] == 201
