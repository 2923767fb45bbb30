"""Direct-current power flow with published angles and line flows; sources in the JSON files."""

import json
from pathlib import Path

import numpy as np
import pytest

from dec.calculus.complex import Complex
from dec.errors import UnsolvableError
from dec.solvers.poisson import solve_poisson

HERE = Path(__file__).parent


def entry(name):
    return json.loads((HERE / f"{name}.json").read_text(encoding="utf-8"))


def grid_of(branches, buses):
    tail, head = (np.array([branch[i] - 1 for branch in branches]) for i in (0, 1))
    return Complex.from_edges(tail, head, buses, vertex_ids=[str(bus + 1) for bus in range(buses)])


def susceptances(branches):
    """1 / x, divided by the off-nominal tap where there is one."""
    return np.array([1 / (float(x) * (tap[0] if tap and tap[0] else 1.0)) for _, _, x, *tap in branches])


def test_e1_three_buses():
    data, known = entry("E1")["input"], entry("E1")["expected"]
    K = grid_of(data["x"], 3)
    solution = solve_poisson(
        K, {bus: float(p) for bus, p in data["P_pu"].items()}, conductance=susceptances(data["x"]), fixed={"3": 0.0}
    )
    assert solution.potential.values == pytest.approx(
        [float(known["theta"]["1"]), float(known["theta"]["2"]), 0], abs=1e-15
    )
    flow = 100 * solution.flow.values
    published = known["flow_MW"]
    assert flow == pytest.approx([published["1-2"], published["1-3"], -published["3-2"]], abs=1e-12)


def test_e2_six_buses_and_shift_factors():
    data, known = entry("E2")["input"], entry("E2")["expected"]
    K, b = grid_of(data["x"], 6), susceptances(data["x"])
    power = {bus: p / data["baseMVA"] for bus, p in data["P_MW"].items()}
    flow = 100 * solve_poisson(K, power, conductance=b, fixed={"1": 0.0}).flow.values
    assert flow == pytest.approx(known["flows_own_3_decimals"], abs=5.1e-4)
    assert flow == pytest.approx(data["flow_MW_published_1_decimal"], abs=0.06)
    factors = solve_poisson(K, np.eye(6)[:, 1:], conductance=b, fixed={"1": 0.0}).flow.values[0]
    assert factors == pytest.approx(data["shift_factor_row_line_1_2_buses_2..6"], abs=5e-5)
    assert factors == pytest.approx(known["shift_factors_line_1_2"], abs=5e-5)


def solved_fourteen(branches, data):
    power = {bus: p / data["baseMVA"] for bus, p in data["P_MW"].items()}
    return solve_poisson(grid_of(branches, 14), power, conductance=susceptances(branches), fixed={"1": 0.0})


def test_e4_fourteen_buses_with_off_nominal_taps():
    data, known = entry("E4")["input"], entry("E4")["expected"]
    branches = data["branches_from_to_x_tap"]
    solution = solved_fourteen(branches, data)
    degrees = np.degrees(solution.potential.values)
    assert degrees == pytest.approx(known["theta_deg"], abs=1e-5)
    assert degrees == pytest.approx(data["theta_deg_recalled"], abs=1.5e-3)
    out_of_slack = sum(q for q, branch in zip(solution.flow.values, branches, strict=True) if branch[0] == 1)
    assert 100 * out_of_slack == pytest.approx(known["slack_MW"], abs=1e-9)


def test_e4_ignoring_the_taps_moves_angles_by_three_tenths_of_a_degree():
    data = entry("E4")["input"]
    with_taps = solved_fourteen(data["branches_from_to_x_tap"], data).potential.values
    without = solved_fourteen([branch[:3] for branch in data["branches_from_to_x_tap"]], data).potential.values
    assert 0.2 < np.degrees(np.abs(with_taps - without).max()) < 0.35


def test_parallel_lines_add_their_susceptances():
    data = entry("E1")["input"]
    doubled = [[1, 2, "0.4"], [2, 1, "0.4"], *data["x"][1:]]
    power = {bus: float(p) for bus, p in data["P_pu"].items()}
    solution = solve_poisson(grid_of(doubled, 3), power, conductance=susceptances(doubled), fixed={"3": 0.0})
    assert 100 * solution.flow.values == pytest.approx([30, -30, 5, -40], abs=1e-12)


def test_an_island_without_generation_has_no_reference_and_is_refused():
    K = grid_of([*entry("E1")["input"]["x"], [4, 5, "0.1"]], 5)
    with pytest.raises(
        UnsolvableError, match=r"part 2 \(vertices 4, 5\) has no fixed potential, yet .* add up to -0.2"
    ):
        solve_poisson(K, {"1": 0.65, "5": -0.2}, fixed={"3": 0.0})
