"""Spanning trees counted by the boundary matrix: Kirchhoff's matrix-tree theorem as an exact determinant.

Source: C3a.json (from memory there, then reproduced in exact integers): Cayley 1889 (complete graphs), Kirchhoff 1847,
OEIS A007341 (square grids), Biggs, Algebraic Graph Theory, 2nd ed. 1993 (Petersen graph), the Platonic graphs.
"""

import json
from fractions import Fraction
from pathlib import Path

import networkx as nx
import numpy as np
import pytest

from dec.calculus.complex import Complex, grid
from dec.calculus.networks import from_networkx

KNOWN = json.loads((Path(__file__).parent / "C3a.json").read_text())["expected"]


def spanning_trees(K):
    """The determinant of boundary times coboundary with one vertex left out, by elimination in Fractions."""
    boundary = K.boundary(1).toarray().astype(np.int64)[1:]
    rows = [[Fraction(int(v)) for v in row] for row in boundary @ boundary.T]
    determinant = Fraction(1)
    for i in range(len(rows)):
        pivot = next((r for r in range(i, len(rows)) if rows[r][i]), None)
        if pivot is None:
            return 0
        if pivot != i:
            rows[i], rows[pivot] = rows[pivot], rows[i]
            determinant = -determinant
        determinant *= rows[i][i]
        for r in range(i + 1, len(rows)):
            if rows[r][i]:
                factor = rows[r][i] / rows[i][i]
                rows[r] = [a - factor * b for a, b in zip(rows[r], rows[i], strict=True)]
    return int(determinant)


@pytest.mark.parametrize("n", range(1, 10))
def test_a_complete_graph_has_n_to_the_n_minus_2_spanning_trees(n):
    assert KNOWN["K_n"] == "n^(n-2)"
    assert spanning_trees(from_networkx(nx.complete_graph(n))) == (n ** (n - 2) if n > 1 else 1)


@pytest.mark.parametrize(("m", "n"), [(1, 5), (2, 3), (3, 3), (4, 5), (2, 7)])
def test_a_complete_bipartite_graph_has_m_to_the_n_minus_1_times_n_to_the_m_minus_1_spanning_trees(m, n):
    assert KNOWN["K_mn"] == "m^(n-1) n^(m-1)"
    assert spanning_trees(from_networkx(nx.complete_bipartite_graph(m, n))) == m ** (n - 1) * n ** (m - 1)


def test_the_petersen_graph_has_2000_spanning_trees():
    assert spanning_trees(from_networkx(nx.petersen_graph())) == int(KNOWN["Petersen"]) == 2000


@pytest.mark.parametrize("n", range(1, 7))
def test_square_grids_have_the_published_numbers_of_spanning_trees(n):
    assert spanning_trees(grid((n, n))) == int(KNOWN["grid_1..6"][n - 1])


@pytest.mark.parametrize("solid", KNOWN["platonic"])
def test_the_platonic_graphs_have_the_published_numbers_of_spanning_trees(solid):
    name = {"tetrahedron": "tetrahedral", "cube": "cubical", "octahedron": "octahedral", "dodecahedron": "dodecahedral",
            "icosahedron": "icosahedral"}[solid]  # fmt: skip
    graph = getattr(nx, f"{name}_graph")()
    assert spanning_trees(from_networkx(graph)) == int(KNOWN["platonic"][solid])


def test_parallel_edges_multiply_and_self_loops_do_not_count():
    assert spanning_trees(Complex.from_edges([0, 0, 1, 1, 2], [1, 1, 2, 2, 2])) == 4
    assert spanning_trees(Complex.from_edges([0], [1], 3)) == 0
