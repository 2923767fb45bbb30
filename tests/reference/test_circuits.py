"""Circuits with known resistances and currents, and a triangle of currencies; sources in the JSON files."""

import json
from fractions import Fraction
from itertools import permutations
from math import log, sqrt
from pathlib import Path

import networkx as nx
import numpy as np
import pytest

from dec.calculus.complex import Complex
from dec.errors import UnsolvableError
from dec.solvers.poisson import solve_poisson

HERE = Path(__file__).parent
PLATONIC = {
    "tetrahedron": nx.tetrahedral_graph, "cube": nx.cubical_graph, "octahedron": nx.octahedral_graph,
    "icosahedron": nx.icosahedral_graph, "dodecahedron": nx.dodecahedral_graph,
}  # fmt: skip
HARD = json.loads((HERE / "C_hard_cases.json").read_text(encoding="utf-8"))["cases"]


def entry(name):
    return json.loads((HERE / f"{name}.json").read_text(encoding="utf-8"))


def network(edges):
    """Vertices by name, and the resistances."""
    names = list(dict.fromkeys(name for edge in edges for name in edge[:2]))
    tail, head = ([names.index(edge[i]) for edge in edges] for i in (0, 1))
    return Complex.from_edges(tail, head, len(names), vertex_ids=names), np.array([float(e[2]) for e in edges])


def resistance(K, ohm, start, end, **options):
    """Potential difference that a unit current needs, and the energies that enclose it."""
    source = np.zeros(K.counts[0])
    source[start], source[end] = 1.0, -1.0
    solution = solve_poisson(K, source, conductance=1 / np.asarray(ohm, float), **options)
    u = solution.potential.values
    return u[start] - u[end], solution


@pytest.mark.parametrize("name", PLATONIC)
def test_c1_resistances_of_platonic_solids_by_distance(name):
    graph = PLATONIC[name]()
    K = Complex.from_edges(*np.array(graph.edges).T, graph.number_of_nodes())
    distance = nx.single_source_shortest_path_length(graph, 0)
    n = K.counts[0]
    source = np.zeros((n, n - 1))
    source[0], source[np.arange(1, n), np.arange(n - 1)] = 1.0, -1.0
    solution = solve_poisson(K, source)
    u = solution.potential.values
    for v in range(1, n):
        known = Fraction(entry("C1")["expected"][name][distance[v] - 1])
        assert u[0, v - 1] - u[v, v - 1] == pytest.approx(float(known), rel=1e-14)
        assert solution.energy[0][v - 1] <= known <= solution.energy[1][v - 1]


def test_c6_unbalanced_bridge():
    data = entry("C6")
    K, ohm = network(data["input"]["edges"])
    solution = solve_poisson(K, {}, conductance=1 / ohm, fixed={"A": 2.0, "C": 0.0})
    current = dict(zip([tuple(e[:2]) for e in data["input"]["edges"]], solution.flow.values, strict=True))
    total = current["A", "B"] - current["D", "A"]
    assert 2 / total == pytest.approx(float(Fraction("1570/87")), rel=1e-14)
    assert 2 / total == pytest.approx(data["input"]["R_AC_published"], abs=0.01)
    assert current["B", "D"] == pytest.approx(float(Fraction(9, 785)), rel=1e-14)
    assert 1000 * current["B", "D"] == pytest.approx(data["input"]["I_galvanometer_mA_published"], abs=0.15)
    assert total == pytest.approx(data["input"]["I_published"], abs=0.005)


def test_c7_ladders_are_quotients_of_fibonacci_numbers():
    fibonacci = [0, 1]
    while len(fibonacci) < 25:
        fibonacci.append(sum(fibonacci[-2:]))
    for k in range(1, 12):
        series = [(i, i + 1) for i in range(k)]
        shunts = [(i + 1, k + 1) for i in range(k)]
        K = Complex.from_edges(*np.array(series + shunts).T)
        known = Fraction(fibonacci[2 * k + 1], fibonacci[2 * k])
        found, solution = resistance(K, np.ones(2 * k), 0, k + 1)
        assert found == pytest.approx(float(known), rel=1e-14)
        assert solution.energy[0] <= known <= solution.energy[1]
    assert found == pytest.approx((1 + sqrt(5)) / 2, abs=1e-8)


def test_c8_galvanometer_current():
    data = entry("C8")
    K, ohm = network(data["input"]["edges"])
    solution = solve_poisson(K, {}, conductance=1 / ohm, fixed={"P": data["input"]["emf_PQ_volt"], "Q": 0.0})
    assert solution.flow.values[4] == pytest.approx(1e-6 * data["expected"]["I_galvanometer_uA"], abs=1e-12)


def test_c10_commute_time_of_the_petersen_graph():
    data, graph = entry("C10")["expected"], nx.petersen_graph()
    K = Complex.from_edges(*np.array(graph.edges).T)
    found, _ = resistance(K, np.ones(15), *next(iter(graph.edges)))
    assert found == pytest.approx(float(Fraction(data["R"])), abs=1e-9)
    assert 2 * 15 * found == pytest.approx(data["commute_time"], abs=1e-9)


def test_parallel_edges_and_a_self_loop():
    K = Complex.from_edges([0, 1, 0], [1, 0, 0])
    found, _ = resistance(K, [1.0, 0.5, 7.0], 0, 1)
    assert found == pytest.approx(float(Fraction(HARD["parallel edges of 1 and 1/2 ohm, and a self-loop"])), rel=1e-15)


def test_vertices_in_different_components_have_no_resistance_and_never_a_large_number():
    with pytest.raises(
        UnsolvableError, match=r"part 1 \(vertices 0, 1\) has no fixed potential, yet its sources add up to 1"
    ):
        resistance(Complex.from_edges([0, 2], [1, 3]), [1.0, 1.0], 0, 3)


@pytest.mark.parametrize("ohm", list(permutations([1e-12, 1.0, 1e12])))
def test_resistances_twenty_four_decades_apart_in_a_row(ohm):
    known = Fraction(HARD["1e-12, 1 and 1e12 ohm in a row, in any order"])
    found, solution = resistance(Complex.from_edges([0, 1, 2], [1, 2, 3]), ohm, 0, 3)
    assert found == float(known)
    assert solution.flow.values.tolist() == [1, 1, 1]
    assert solution.energy[0] <= known <= solution.energy[1]


@pytest.mark.parametrize("detector", [1e-9, 1e-3, 1.0, 50.0, 1e9])
def test_a_balanced_bridge_has_its_resistance_whatever_the_detector(detector):
    K = Complex.from_edges([0, 1, 0, 2, 1], [1, 3, 2, 3, 2])
    found, solution = resistance(K, [1.0, 3.0, 2.0, 6.0, detector], 0, 3)
    assert found == pytest.approx(
        float(Fraction(HARD["balanced bridge 1 : 3 = 2 : 6, whatever the detector"])), rel=1e-14
    )
    assert abs(solution.flow.values[4]) <= 1e-15


def test_d3_currency_triangle():
    """Log rates as differences: what no prices explain goes round, a third of it on every edge."""
    data = entry("D3")
    rates = [data["input"][key] for key in ("USD_per_GBP", "USD_per_MYR", "MYR_per_GBP")]
    K = Complex.from_edges([0, 2, 0], [1, 1, 2], vertex_ids=["GBP", "USD", "MYR"])
    given = np.array([log(Fraction(rate)) for rate in rates])
    source = K.boundary(1).astype(float) @ given
    solution = solve_poisson(K, source)
    left = given + solution.flow.values
    circulation = left[2] + left[1] - left[0]
    known = log(Fraction(data["expected"]["round_trip_factor"]))
    assert circulation == pytest.approx(known, abs=1e-15)
    assert known == pytest.approx(float(data["expected"]["log_circulation"].split("=")[1]), abs=1e-15)
    assert left == pytest.approx(np.array([-1, 1, 1]) * known / 3, abs=1e-15)
    factor = Fraction(rates[2]) * Fraction(rates[1]) / Fraction(rates[0])
    assert factor == Fraction(data["expected"]["round_trip_factor"])
    assert factor * int(data["input"]["start_USD"]) == int(data["expected"]["end"])
