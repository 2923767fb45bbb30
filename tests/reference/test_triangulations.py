"""Euler characteristic, integer homology and orientability of small triangulations.

Source: the lists and homology groups in G1a.json (READ there): Moebius 1886 and Csaszar 1949 (torus), hemi-icosahedron
(projective plane), a public triangulation file (Klein bottle), Benedetti and Lutz, Library of Triangulations, 2014, and
Zeeman 1963 (dunce hat).
"""

import json
from pathlib import Path

import numpy as np
import pytest

from dec.calculus.complex import Complex

DATA = json.loads((Path(__file__).parent / "G1a.json").read_text())


def surface(name):
    _, faces = np.unique(np.array(DATA["input"][name]["facets"]), return_inverse=True)
    return Complex.from_faces(faces.reshape(-1, 3))


@pytest.mark.parametrize("name", DATA["input"])
def test_counts_homology_and_orientability_are_those_published(name):
    K, expected = surface(name), DATA["expected"][name]
    assert list(K.counts) == expected["f"]
    assert K.euler == expected["f"][0] - expected["f"][1] + expected["f"][2]
    assert [str(K.homology(k)).replace(" ", "") for k in range(3)] == expected["H"]
    assert all(K.homology(k).chain(i).boundary().coefficients.any() == 0 for k in (1, 2) for i in range(K.betti()[k]))
    assert K.is_orientable is expected["orientable"]
    assert K.is_manifold is (name != "dunce hat, 8 vertices")
    assert K.boundary_loops() == []


@pytest.mark.parametrize("name", [n for n, e in DATA["expected"].items() if e["orientable"] is not None])
def test_an_orientable_one_can_be_turned_alike_and_another_has_a_walk_that_reverses(name):
    K = surface(name)
    walk = K.reversing_loop()
    assert (len(walk) == 0) == DATA["expected"][name]["orientable"]
    if DATA["expected"][name]["orientable"]:
        faces = K.faces.flat.reshape(-1, 3).copy()
        faces[K.turning_proposal()] = faces[K.turning_proposal(), ::-1]
        assert all(finding.holds for finding in Complex.from_faces(faces).check())
