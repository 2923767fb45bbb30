"""Pipe networks with published heads and flows; sources in the JSON files."""

import json
from pathlib import Path

import numpy as np
import pytest

from dec.calculus.complex import Complex
from dec.solvers.poisson import solve_poisson

HERE = Path(__file__).parent
INCH, HOUR = 0.0254, 3600.0


def entry(name):
    return json.loads((HERE / f"{name}.json").read_text(encoding="utf-8"))


def network(pipes):
    names = sorted({str(end) for pipe in pipes for end in pipe[1:3]})
    tail, head = ([names.index(str(pipe[i])) for pipe in pipes] for i in (1, 2))
    return Complex.from_edges(tail, head, vertex_ids=names, edge_ids=[str(pipe[0]) for pipe in pipes])


def by_id(solution):
    return dict(zip(solution.flow.complex.edge_ids, solution.flow.values, strict=True))


def losses(solution):
    K, u = solution.flow.complex, solution.potential.values
    return dict(zip(K.edge_ids, u[K.tail] - u[K.head], strict=True))


def test_f2_two_reservoirs_and_four_junctions_under_the_square_law():
    data = entry("F2")
    given, known = data["input"], data["expected"]
    pipes = given["pipes_no_from_to_K"]
    solution = solve_poisson(
        network(pipes), {node: -q for node, q in given["demand_cfs"].items()}, exponent=2.0,
        conductance=[1 / pipe[3] for pipe in pipes],
        fixed={"A": given["head_difference_A_minus_B_ft"], "B": 0.0},
    )  # fmt: skip
    flow, loss = by_id(solution), losses(solution)
    for pipe, magnitude in known["flow_cfs"].items():
        assert abs(flow[pipe]) == pytest.approx(magnitude, abs=1e-4)
    for pipe, magnitude in given["final_flow_magnitude_published"].items():
        assert abs(flow[pipe]) == pytest.approx(magnitude, abs=5e-3)
    for pipe, drop in given["final_head_loss_published"].items():
        assert abs(loss[pipe]) == pytest.approx(drop, abs=0.01)
    assert flow["1"] + flow["7"] == pytest.approx(sum(given["demand_cfs"].values()), abs=1e-13)


def test_f3_parallel_pipes_share_as_six_to_three_to_two():
    K = Complex.from_edges([0] * 3, [1] * 3)
    resistance = np.array(entry("F3")["input"]["K"], dtype=float)
    shares = [int(s) for s in entry("F3")["expected"]["split"].split(":")]
    flow = solve_poisson(K, [11, -11], conductance=1 / resistance, exponent=2.0).flow.values
    assert flow == pytest.approx(shares, rel=1e-14)
    turned = solve_poisson(
        Complex.from_edges([0, 1, 0], [1, 0, 1]), [1.1, -1.1], conductance=1 / resistance, exponent=2.0
    )
    assert turned.flow.values == pytest.approx(np.array([0.6, -0.3, 0.2]), rel=1e-14)


def test_f4_pipes_from_eighteen_inches_down_to_one():
    """Hazen and Williams; the one-inch pipe carries -0.56 beside 1120, and must come out with its sign."""
    data = entry("F4")
    given, known = data["input"], data["expected"]
    pipes = given["pipes_no_from_to_diam_in"]
    diameter = np.array([pipe[3] for pipe in pipes]) * INCH
    conductance = 130**1.852 * diameter**4.871 / (10.6668 * given["length_m"])
    solution = solve_poisson(
        network(pipes), {node: -q / HOUR for node, q in given["demand_m3_per_h"].items()}, conductance=conductance,
        fixed={node: float(head) for node, head in given["fixed_head_m"].items()}, exponent=1.852,
    )  # fmt: skip
    heads = dict(zip(solution.potential.complex.vertex_ids, solution.potential.values, strict=True))
    for node, pressure in known["pressure_head_m"].items():
        assert heads[node] - given["elevation_m"][node] == pytest.approx(pressure, abs=0.01)
    for pipe, flow in known["flows_m3_per_h"].items():
        assert by_id(solution)[pipe] * HOUR == pytest.approx(flow, abs=0.002)
    assert heads["1"] == 210.0
    assert solution.error_bound < 1e-6


def test_f4_solved_in_other_units_is_the_same_network():
    """Litres a second instead of cubic metres: conductance times 1000^1.852."""
    given = entry("F4")["input"]
    pipes = given["pipes_no_from_to_diam_in"]
    conductance = 130**1.852 * (np.array([p[3] for p in pipes]) * INCH) ** 4.871 / (10.6668 * given["length_m"])
    demand = {node: -q / HOUR for node, q in given["demand_m3_per_h"].items()}
    one = solve_poisson(network(pipes), demand, conductance=conductance, fixed={"1": 210.0}, exponent=1.852)
    other = solve_poisson(
        network(pipes), {node: 1000 * q for node, q in demand.items()}, conductance=conductance * 1000**1.852,
        fixed={"1": 210.0}, exponent=1.852,
    )  # fmt: skip
    assert other.potential.values == pytest.approx(one.potential.values, rel=1e-10)
    assert other.flow.values == pytest.approx(1000 * one.flow.values, rel=1e-7)
