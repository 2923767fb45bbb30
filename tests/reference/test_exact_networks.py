"""Every figure of the published networks against exact fractions; sources in the JSON files, or own where said.

An adjustment has one answer, so fractions are as good a reference as a printed figure, and go where none is printed:
standard deviations, redundancies, single tests, leaks, and errors of held values. The slow reference below solves dense
normal equations and knows nothing of graphs: Baarda, A Testing Procedure for Use in Geodetic Networks, 1968 (from
memory), for the tests.
"""

import json
from fractions import Fraction
from itertools import combinations
from math import comb, sqrt
from pathlib import Path

import networkx as nx
import numpy as np
import pandas as pd
import pytest

from dec.audit.questions import balance, loops
from dec.audit.record import Audit
from dec.calculus.dataset import Dataset

HERE = Path(__file__).parent
TOLERANCE = 1e-9
Matrix = list[list[Fraction]]


def entry(name: str) -> dict:
    return json.loads((HERE / f"{name}.json").read_text(encoding="utf-8"))


def network(ends: list, values: list, **columns: list) -> Dataset:
    frame = {"from": [str(a) for a, _ in ends], "to": [str(b) for _, b in ends], "y": [str(v) for v in values]}
    return Dataset.from_frames(pd.DataFrame(frame | columns))


def solved(matrix: Matrix, right: Matrix) -> Matrix:
    """Gauss and Jordan in fractions."""
    rows = [[*a, *b] for a, b in zip(matrix, right, strict=True)]
    for i in range(len(rows)):
        pivot = next(k for k in range(i, len(rows)) if rows[k][i])
        rows[i], rows[pivot] = rows[pivot], rows[i]
        rows[i] = [x / rows[i][i] for x in rows[i]]
        for k in range(len(rows)):
            if k != i and rows[k][i]:
                rows[k] = [x - rows[k][i] * y for x, y in zip(rows[k], rows[i], strict=True)]
    return [row[len(matrix) :] for row in rows]


def product(one: Matrix, other: Matrix) -> Matrix:
    columns = list(zip(*other, strict=True))
    return [[sum((a * b for a, b in zip(row, column, strict=True)), Fraction(0)) for column in columns] for row in one]


def turned(matrix: Matrix) -> Matrix:
    return [list(column) for column in zip(*matrix, strict=True)]


def incidence(ends: list, vertices: list) -> Matrix:
    """One row an edge: -1 at its tail, +1 at its head."""
    return [[Fraction(int(v == b) - int(v == a)) for v in vertices] for a, b in ends]


def compare(audit: Audit, covariance: Matrix, weighed: Matrix, reading: list[Fraction], dof: int) -> None:
    """Against M = P Qv P: the readings y say M y."""
    score = [row[0] for row in product(weighed, [[y] for y in reading])]
    correction = [-row[0] for row in product(covariance, [[s] for s in score])]
    share = product(covariance, weighed)
    spread = product(share, covariance)  # of the corrections
    table = audit.tables["edges"]
    assert audit.dof == dof
    total = sum(y * s for y, s in zip(reading, score, strict=True))
    assert audit.chi_square == pytest.approx(float(total), rel=TOLERANCE)
    for e, change in enumerate(correction):
        assert table["correction"][e] == pytest.approx(float(change), abs=TOLERANCE)
        assert table["redundancy"][e] == pytest.approx(float(share[e][e]), abs=TOLERANCE)
        assert table["adjusted_sd"][e] ** 2 == pytest.approx(float(covariance[e][e] - spread[e][e]), abs=TOLERANCE)
        if weighed[e][e]:
            squared = score[e] ** 2 / weighed[e][e]
            assert table["statistic"][e] ** 2 == pytest.approx(float(squared), rel=TOLERANCE, abs=TOLERANCE)
            assert table["detectable"][e] ** 2 == pytest.approx(4.13**2 / float(weighed[e][e]), rel=TOLERANCE)
        else:
            assert np.isnan(table["statistic"][e])


def diagonal(values: list[Fraction]) -> Matrix:
    return [[v if i == j else Fraction(0) for j in range(len(values))] for i, v in enumerate(values)]


def compare_flows(ends: list, reading: list[Fraction], covariance: Matrix, audit: Audit) -> None:
    """Conditions: inflow = outflow at every vertex but env; M = B' (B Q B')^-1 B."""
    closed = sorted({v for pair in ends for v in pair} - {"env"})
    B = turned(incidence(ends, closed))
    K = solved(product(product(B, covariance), turned(B)), diagonal([Fraction(1)] * len(closed)))
    weighed = product(product(turned(B), K), B)
    compare(audit, covariance, weighed, reading, len(closed))
    vertices = audit.vertices.set_index("id")
    missed = product(K, product(B, [[y] for y in reading]))
    for place, vertex in enumerate(closed):  # a leak adds to what is left over at its vertex alone
        row = vertices.loc[vertex]
        assert row["fault"] == pytest.approx(float(missed[place][0] / K[place][place]), abs=TOLERANCE)
        assert row["fault_sd"] ** 2 == pytest.approx(float(1 / K[place][place]), rel=TOLERANCE)
        assert row["fault_statistic"] ** 2 == pytest.approx(
            float(missed[place][0] ** 2 / K[place][place]), rel=TOLERANCE, abs=TOLERANCE
        )


@pytest.mark.parametrize("variance", [["1"] * 6, ["1/4", "4", "1", "1/100", "9", "2.25"]])
def test_a1_every_figure_of_the_heat_exchanger(variance: list[str]):
    data = entry("A1")["input"]
    covariance = diagonal([Fraction(v) for v in variance])
    sd = [sqrt(Fraction(v)) for v in variance]
    audit = balance(network(data["edges_from_to"], data["measured"]), "y", sd=sd, open=["env"])
    compare_flows(data["edges_from_to"], [Fraction(v) for v in data["measured"]], covariance, audit)


def test_a1_with_correlated_meters_one_and_six():
    """Correlation 1/2 of two meters of variance 1: half of it is shared (own, exact rationals)."""
    data = entry("A1")["input"]
    net = network(data["edges_from_to"], data["measured"], meter=["both", "", "", "", "", "both"])
    own = [sqrt(0.5), 1, 1, 1, 1, sqrt(0.5)]
    audit = balance(net, "y", sd=own, open=["env"], common="meter", common_sd=sqrt(0.5))
    known = ["10017/100", "2579/40", "7139/200", "2579/40", "7139/200", "10017/100"]
    assert audit.edges["adjusted"].tolist() == pytest.approx([float(Fraction(v)) for v in known], abs=TOLERANCE)
    covariance = diagonal([Fraction(1)] * 6)
    covariance[0][5] = covariance[5][0] = Fraction(1, 2)
    compare_flows(data["edges_from_to"], [Fraction(v) for v in data["measured"]], covariance, audit)


@pytest.mark.parametrize("stream", range(7))
def test_a4_every_figure_where_one_stream_reads_too_much(stream: int):
    """One gross error in true flows: it is estimated exactly, is loudest, and leaves nothing when it is taken out."""
    data = entry("A4")["input"]
    reading = [Fraction(v) for v in data["true_flows"]]
    reading[stream] += 2
    variance = [Fraction(v, 50) ** 2 for v in data["true_flows"]]
    audit = balance(
        network(data["edges_from_to"], [float(v) for v in reading]), "y", sd=[sqrt(v) for v in variance], open=["env"]
    )
    compare_flows(data["edges_from_to"], reading, diagonal(variance), audit)
    first = audit.suspects[0]
    assert str(stream + 1) in {first.id, *(name for _, name in first.inseparable_from)}
    assert first.outcomes["left_out"]["chi_square"] == pytest.approx(0, abs=TOLERANCE * audit.chi_square)
    assert audit.edges["statistic"][stream] == pytest.approx(audit.edges["statistic"].max(), rel=TOLERANCE)
    out = audit.what_if(left_out=[str(stream + 1)])
    assert out.edges["adjusted"][stream] == pytest.approx(data["true_flows"][stream], abs=TOLERANCE)


def test_a3_limits_of_single_tests_through_the_audit():
    """Six meters round a closed loop of places are six tests; a meter on each side of a junction is one."""
    data, known = entry("A1")["input"], entry("A3")["expected"]
    six = balance(network(data["edges_from_to"], data["measured"]), "y", sd=1, sidak=True)
    assert six.extra["chance"]["tests"] == 6
    assert six.asked["critical"] == pytest.approx(known["sidak_z_n6_alpha05"], abs=2e-3)
    for alpha, published in ((0.05, known["z_975"]), (0.01, known["z_99_two_sided"])):
        one = balance(network([("S", "J"), ("J", "T")], [5, 5]), "y", 1, ["S", "T"], alpha=alpha, sidak=True)
        assert one.extra["chance"]["tests"] == 1
        assert one.asked["critical"] == pytest.approx(published, abs=5e-7)
    plain = balance(network(data["edges_from_to"], data["measured"]), "y", sd=1)
    assert plain.asked["critical"] == pytest.approx(known["baarda"]["critical"], abs=6e-3)
    delta = plain.edges["detectable"] * np.sqrt(plain.edges["redundancy"])
    assert delta.tolist() == pytest.approx([known["baarda"]["delta0"]] * 6, abs=6e-3)


def compare_differences(ends: list, reading: list, variance: list, fixed: dict, audit: Audit) -> None:
    """Unknown potentials by normal equations; M = P - P A N^-1 A' P."""
    vertices = sorted({v for pair in ends for v in pair})
    free = [v for v in vertices if v not in fixed]
    A, held = incidence(ends, free), incidence(ends, list(fixed))
    given = product(held, [[Fraction(h)] for h in fixed.values()])
    left = [Fraction(y) - g[0] for y, g in zip(reading, given, strict=True)]
    P = diagonal([1 / v for v in variance])
    N = product(product(turned(A), P), A)
    spread = solved(N, diagonal([Fraction(1)] * len(free)))
    hat = product(product(product(P, A), spread), product(turned(A), P))
    weighed = [[p - h for p, h in zip(*rows, strict=True)] for rows in zip(P, hat, strict=True)]
    compare(audit, diagonal(variance), weighed, left, len(ends) - len(free))
    potential = product(spread, product(product(turned(A), P), [[y] for y in left]))
    table = audit.vertices.set_index("id")
    for place, vertex in enumerate(free):
        assert table.loc[vertex, "potential"] == pytest.approx(float(potential[place][0]), abs=TOLERANCE)
        assert table.loc[vertex, "potential_sd"] ** 2 == pytest.approx(float(spread[place][place]), abs=TOLERANCE)
    if len(fixed) < 2:
        return
    for place, vertex in enumerate(fixed):  # held too high by 1: every reading less what is known is lower by its row
        h = [[-row[place]] for row in held]
        seen = product(weighed, h)
        size = product(turned(h), seen)[0][0]
        score = product(turned(seen), [[y] for y in left])[0][0]
        assert table.loc[vertex, "fault"] == pytest.approx(float(score / size), abs=TOLERANCE)
        assert table.loc[vertex, "fault_sd"] ** 2 == pytest.approx(float(1 / size), rel=TOLERANCE)
        assert table.loc[vertex, "fault_statistic"] ** 2 == pytest.approx(float(score**2 / size), rel=TOLERANCE)


def levelled(name: str) -> tuple[list, list, dict, list]:
    """Lines, readings, bench marks and lengths (1 where none are given)."""
    data = entry(name)["input"]
    rows = data.get("lines") or data["lines_from_to_dh"]
    fixed = data.get("fixed") or data["fixed_relative_to_bench_mark_A"]
    return (
        [(r[0], r[1]) for r in rows], [r[2] for r in rows], fixed,
        [Fraction(str(r[3])) if len(r) > 3 else Fraction(1) for r in rows],
    )  # fmt: skip


@pytest.mark.parametrize(("name", "unit"), [("B1", "1"), ("B4", "1/1000"), ("B5", "1/10000"), ("B7", "1/2500")])
def test_b_every_figure_of_the_levelling_nets(name: str, unit: str):
    """Variances by length; for B4, weights of 1000 over the length in metres as published."""
    ends, reading, fixed, length = levelled(name)
    variance = [Fraction(unit) * long for long in length]
    audit = loops(network(ends, reading), "y", sd=[sqrt(v) for v in variance], fixed=fixed)
    compare_differences(ends, reading, variance, fixed, audit)


@pytest.mark.parametrize(("name", "line"), [("B1", 4), ("B5", 2), ("B7", 6)])
def test_b_a_line_levelled_twice_counts_as_its_mean_and_one_more_check(name: str, line: int):
    """Two runs in a table of readings are what two parallel lines are (own, exact rationals)."""
    ends, reading, fixed, length = levelled(name)
    rows = [
        *zip(range(len(ends)), reading, [1] * len(ends), strict=True),
        (line, str(-Fraction(reading[line]) + 1), -1),
    ]
    table = pd.DataFrame({
        "edge": [f"L{e}" for e, _, _ in rows], "y": [str(float(Fraction(y))) for _, y, _ in rows],
        "mounted": [str(m) for _, _, m in rows],
    })  # fmt: skip
    sd = [sqrt(v) for v in [*length, length[line] / 4]]
    ids = [f"L{e}" for e in range(len(ends))]
    frame = pd.DataFrame({"id": ids, "from": [a for a, _ in ends], "to": [b for _, b in ends]})
    audit = loops(Dataset.from_frames(frame), "y", sd=sd, fixed=fixed, readings=table)
    doubled = network([*ends, ends[line]], [*reading, float(Fraction(reading[line]) - 1)])
    parallel = loops(doubled, "y", sd=sd, fixed=fixed)
    compare_differences(
        [*ends, ends[line]], [*reading, Fraction(reading[line]) - 1], [*length, length[line] / 4], fixed, parallel
    )  # fmt: skip
    assert audit.dof == parallel.dof == len(ends) + 1 - (len({v for pair in ends for v in pair}) - len(fixed))
    assert audit.chi_square == pytest.approx(parallel.chi_square, rel=TOLERANCE)
    for column in ("potential", "potential_sd"):
        np.testing.assert_allclose(audit.vertices[column], parallel.vertices[column], rtol=TOLERANCE, atol=TOLERANCE)
    run = audit.table("readings")
    for e in (line, len(ends)):
        assert run["statistic"][e] == pytest.approx(parallel.edges["statistic"][e], rel=TOLERANCE)


def test_d1_every_figure_of_the_ratings():
    """On the complete graph of n teams and equal weights each game has the redundancy 1 - 2 / n (own)."""
    games = entry("D1")["input"]["scores"]
    ends, margin = [(b, a) for a, _, b, _ in games], [x - y for _, x, _, y in games]
    audit = loops(network(ends, margin), "y", sd=13, fixed={"Duke": "-24.8"})
    compare_differences(ends, margin, [Fraction(169)] * 10, {"Duke": "-24.8"}, audit)
    assert audit.edges["redundancy"].tolist() == pytest.approx([3 / 5] * 10, abs=1e-12)
    ratings = audit.vertices.set_index("id")["potential"]
    for team, rating in entry("D1")["expected"]["ratings"].items():
        assert ratings[team] == pytest.approx(float(rating), abs=TOLERANCE)


def circular_triads(n: int, beats: dict) -> int:
    return sum(beats[a, b] == beats[b, c] == -beats[a, c] for a, b, c in combinations(range(n), 3))


@pytest.mark.parametrize("n", range(3, 9))
def test_d4_circular_triads_of_tournaments(n: int):
    """Wins as differences of 1 over all pairs: a triangle goes round by 3 if it is circular and by 1 if not.

    The squares of all triangles add up to n times what no ratings explain (own), so that chi-square counts the triads.
    """
    known, pairs, rng = entry("D4")["expected"], list(combinations(range(n), 2)), np.random.default_rng(n)
    cyclic = {(a, b): 1 if (b - a) % n <= (n - 1) // 2 or (2 * (b - a) == n and a % 2 == 0) else -1 for a, b in pairs}
    tournaments = [cyclic] + [dict(zip(pairs, rng.choice([-1, 1], len(pairs)).tolist(), strict=True)) for _ in range(5)]
    for number, beats in enumerate(tournaments):
        audit = loops(network(pairs, [beats[pair] for pair in pairs]), "y", sd=1)
        wins = [sum(beats[p] * (1 if p[0] == i else -1) == 1 for p in pairs if i in p) for i in range(n)]
        triads = comb(n, 3) - sum(comb(w, 2) for w in wins)  # Kendall and Babington Smith
        assert triads == circular_triads(n, beats)
        assert (n * audit.chi_square - comb(n, 3)) / 8 == pytest.approx(triads, abs=TOLERANCE)
        if number == 0:
            assert triads == known["maximum_n3..8"][n - 3]


def test_unit_flow_round_a_hexagon_with_hub_is_all_misclosure():
    """Six triangles, each with a sixth of it: nothing is left of it in potentials (own)."""
    rim, spokes = [(i, (i + 1) % 6) for i in range(6)], [("hub", i) for i in range(6)]
    audit = loops(network([*rim, *spokes], [1] * 6 + [0] * 6), "y", sd=1)
    assert audit.edges["adjusted"].tolist() == pytest.approx([0] * 12, abs=1e-15)
    assert (audit.dof, audit.chi_square) == (6, pytest.approx(6))


GRAPHS = {
    "tetrahedron": "tetrahedral", "cube": "cubical", "octahedron": "octahedral", "icosahedron": "icosahedral",
    "dodecahedron": "dodecahedral",
}  # fmt: skip


@pytest.mark.parametrize("name", GRAPHS)
def test_c1_redundancy_is_one_minus_the_resistance_between_neighbours(name: str):
    """Conductance 1 / sd^2: the share that an edge has in its own adjusted value is its effective resistance."""
    graph = getattr(nx, f"{GRAPHS[name]}_graph")()
    known = Fraction(entry("C1")["expected"][name][0])
    audit = loops(network(list(graph.edges), [0] * graph.number_of_edges()), "y", sd=0.1)
    assert audit.edges["redundancy"].tolist() == pytest.approx([float(1 - known)] * graph.number_of_edges(), abs=1e-12)


def test_c4_fosters_theorem_in_redundancies():
    """What redundancies leave of one adds up to vertices less parts, whatever the weights."""
    assert entry("C4")["expected"]["sum"] == "n-1"
    graph = nx.gnm_random_graph(9, 17, seed=1)
    assert nx.is_connected(graph)
    sd = np.random.default_rng(0).uniform(0.01, 10, 17)
    audit = loops(network(list(graph.edges), [0] * 17), "y", sd=sd.tolist())
    assert (1 - audit.edges["redundancy"]).sum() == pytest.approx(8, abs=TOLERANCE)
