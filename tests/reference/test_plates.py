"""Plates and membranes with closed forms and printed answers; sources in the JSON files."""

import itertools
import json
from pathlib import Path

import numpy as np
import pytest

from dec.calculus.complex import grid
from dec.geometry.metric import Metric
from dec.solvers.poisson import solve_poisson

HERE = Path(__file__).parent
LIEBMANN = [7.9, 13.7, 17.9, 6.6, 11.9, 16.3, 6.6, 11.2, 14.3]


def entry(name):
    return json.loads((HERE / f"{name}.json").read_text(encoding="utf-8"))


def membrane(n):
    """Centre value and integral of -lap u = 1 on the unit square, n steps a side, zero at the rim."""
    K = grid((n + 1, n + 1), spacing=1 / n)
    metric, points = Metric(K), K.points
    rim = np.flatnonzero(((points == 0) | (points == 1)).any(axis=1))
    solution = solve_poisson(K, metric.weights(0), conductance=metric, fixed=(rim, 0.0), rtol=1e-12)
    u = solution.potential.values
    return u[len(u) // 2], metric.weights(0) @ u, solution


def extrapolated(values, powers=(2, 4, 6)):
    """Richardson: each step halves, each power of it is taken away in turn."""
    for p in powers:
        values = [(2**p * fine - coarse) / (2**p - 1) for coarse, fine in itertools.pairwise(values)]
    return values[-1]


def test_g13_the_membrane_has_its_centre_value():
    centres = [membrane(n)[0] for n in (8, 16, 32, 64, 128)]
    assert extrapolated(centres) == pytest.approx(float("0.07367135328151"), abs=1e-12)
    assert extrapolated(centres) == pytest.approx(float(entry("G13")["expected"]["max"].split()[0]), abs=1e-12)
    assert centres[-1] == pytest.approx(0.0736713532814, abs=5e-6)


def test_g13_the_membrane_has_its_integral_and_the_energy_is_the_integral():
    """Corners leave h^4 log h in the integral, so two powers are taken away and eight digits asked for."""
    integrals = [membrane(n)[1] for n in (16, 32, 64, 128)]
    known = float(entry("G13")["expected"]["integral"].split("/")[0]) / 4
    assert extrapolated(integrals, (2, 4)) == pytest.approx(known, abs=1e-8)
    _, integral, solution = membrane(32)
    assert solution.energy[0] <= integral * (1 + 1e-12)
    assert solution.energy[1] >= integral * (1 - 1e-12)


def plate(top, right, bottom, left):
    """Inner values, row by row from the top, of the five-point equations; sides from top to bottom, left to right."""
    m = len(top)
    edge = np.full((m + 2, m + 2), np.nan)
    edge[0, 1:-1], edge[-1, 1:-1], edge[1:-1, 0], edge[1:-1, -1] = top, bottom, left, right
    edge[:: m + 1, :: m + 1] = 0.0  # corners touch no inner point
    held = np.flatnonzero(~np.isnan(edge.ravel()))
    K = grid((m + 2, m + 2))
    u = solve_poisson(
        K, np.zeros(K.counts[0]), conductance=Metric(K), fixed=(held, edge.ravel()[held])
    ).potential.values
    return u.reshape(m + 2, m + 2)[1:-1, 1:-1]


def test_g19_plates_with_two_and_three_hot_sides():
    known = entry("G19")["expected"]
    hot, cold = [100.0, 100.0], [0.0, 0.0]
    assert plate(hot, cold, cold, hot).ravel() == pytest.approx(known["plate1"], rel=1e-14)
    assert plate(hot, hot, cold, hot).ravel() == pytest.approx(known["plate2"], rel=1e-14)


def test_g19_mesh_with_twelve_given_values():
    data = entry("G19")
    mesh = data["input"]["mesh"]
    u = plate(mesh["top"], mesh["right"], mesh["bottom"], mesh["left"])
    assert u == pytest.approx(np.array(data["expected"]["mesh_exact"]), abs=5.1e-9)
    assert u.ravel() == pytest.approx(LIEBMANN, abs=0.065)
