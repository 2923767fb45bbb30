"""Counts of well-known graphs that networkx carries.

Source: H2.json (READ): Zachary 1977 (34 members, 78 ties, 45 triangles); Padgett and Ansell 1993; Davis et al. 1941;
Knuth 1993; the others are classical small graphs.
"""

import json
from pathlib import Path

import networkx as nx
import pytest

from dec.calculus.networks import from_networkx
from dec.topology.graphs import bridges

EXPECTED = json.loads((Path(__file__).parent / "H2.json").read_text())["expected"]
GRAPHS = {
    "karate": nx.karate_club_graph, "florentine": nx.florentine_families_graph, "davis": nx.davis_southern_women_graph,
    "les miserables": nx.les_miserables_graph, "petersen": nx.petersen_graph, "tutte": nx.tutte_graph,
    "frucht": nx.frucht_graph, "desargues": nx.desargues_graph, "pappus": nx.pappus_graph, "heawood": nx.heawood_graph,
    "icosahedral": nx.icosahedral_graph,
}  # fmt: skip


def test_every_graph_of_the_catalogue_is_tried():
    assert {f"networkx {name}" for name in GRAPHS} == set(EXPECTED)


@pytest.mark.parametrize("name", GRAPHS)
def test_nodes_edges_triangles_and_cycles_are_those_published(name):
    graph, expected = GRAPHS[name](), EXPECTED[f"networkx {name}"]
    K = from_networkx(graph)
    assert K.counts == (expected["nodes"], expected["edges"])
    assert K.betti() == (1, expected["cycle_rank"])
    filled = from_networkx(graph, faces="triangles")
    assert filled.counts == (expected["nodes"], expected["edges"], expected["triangles"])
    assert bridges(K.tail, K.head, K.counts[0]).sum() == len(list(nx.bridges(graph)))


def test_the_triangles_of_the_icosahedron_make_a_sphere():
    K = from_networkx(nx.icosahedral_graph(), faces="triangles")
    assert (K.euler, K.betti(), K.is_manifold, K.is_orientable) == (2, (1, 0, 1), True, True)
