"""The example of the water mains: its commands run, its figures hold, and another solver finds the same heads."""

import csv
import re
import shlex
from pathlib import Path

import numpy as np
import pytest
from scipy.optimize import root

from dec.cli import main
from dec.files import read
from dec.solvers.network import solve_network

EXAMPLES = Path(__file__).parents[2] / "examples"
MAINS = EXAMPLES / "data" / "mains"
SCRIPT = (EXAMPLES / "04_heads_in_the_mains.py").read_text(encoding="utf-8")
COMMANDS = re.findall(r"^    dec (.*)", SCRIPT.replace("\\\n", ""), flags=re.MULTILINE)


def rows(name):
    with (MAINS / name).open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))


@pytest.fixture(scope="module")
def net():
    return read(MAINS / "mains.csv", MAINS / "junctions.csv")


def test_the_commands_of_the_example_run_and_the_last_is_refused(monkeypatch, capsys):
    monkeypatch.chdir(EXAMPLES)
    assert [main(shlex.split(line)) for line in COMMANDS] == [0, 0, 4]
    said = capsys.readouterr()
    assert said.out.count("because 10 unknowns are at most 5000") == 2
    assert "add up to -72.7 instead of 0; fix a potential there" in said.err


def test_heads_are_those_that_a_general_root_finder_finds_from_lengths_and_diameters():
    """Hazen and Williams in SI: loss = 10.67 L Q^1.852 / (C^1.852 d^4.87), Q in m3/s (constants from memory)."""
    nodes, mains = rows("junctions.csv"), rows("mains.csv")
    number = {node["id"]: k for k, node in enumerate(nodes)}
    tail, head = (np.array([number[main[end]] for main in mains]) for end in ("from", "to"))
    length, diameter, C = (np.array([float(m[k]) for m in mains]) for k in ("length_m", "diameter_mm", "C"))
    resistance = 10.67 * length / (C**1.852 * (diameter / 1000) ** 4.87)
    held = np.array([float(node["head_m"] or "nan") for node in nodes])
    free = np.isnan(held)
    put_in = np.array([float(node["put_in"]) for node in nodes])

    def surplus(unknown):
        heads = held.copy()
        heads[free] = unknown
        loss = heads[tail] - heads[head]
        flow = 1000 * np.sign(loss) * (np.abs(loss) / resistance) ** (1 / 1.852)
        return (np.bincount(head, flow, len(nodes)) - np.bincount(tail, flow, len(nodes)) + put_in)[free]

    # started 1 m apart from each other, since a loss of zero has an infinite slope
    found = root(surplus, 90.0 - np.arange(free.sum()), method="lm", options={"xtol": 1e-14, "ftol": 1e-14})
    assert np.abs(found.fun).max() < 1e-6
    solution = solve_network(
        read(MAINS / "mains.csv", MAINS / "junctions.csv"), "put_in", "hw", "head_m", exponent=1.852
    )
    assert solution.potential.values[free] == pytest.approx(found.x, abs=2e-4)  # conductances have five digits


def test_the_figures_that_the_data_are_described_by(net):
    solution = solve_network(net, "put_in", "hw", "head_m", exponent=1.852)
    above = solution.potential.values - net.column("ground_m", 0).numbers()
    ids = list(net.complex.vertex_ids)
    assert ids[2 + int(np.argmin(above[2:]))] == "J1"
    assert above[2:].min() == pytest.approx(28.5, abs=0.05)
    leaving = {name: solution.flow.values[net.complex.tail == ids.index(name)].sum() for name in ("R1", "R2")}
    assert leaving["R1"] == pytest.approx(57.58, abs=0.005 + 1e-9)
    assert leaving["R2"] == pytest.approx(15.12, abs=0.005 + 1e-9)
