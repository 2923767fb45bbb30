"""One table of complexes and degrees: derivative and boundary are adjoint, exactly, in whole numbers.

Adjointness and a vanishing square cannot see a sign that is flipped everywhere; tests/calculus/test_conventions.py pins
each sign by hand.
"""

from fractions import Fraction

import networkx as nx
import numpy as np
import pytest

from dec.calculus.complex import Complex, grid
from dec.calculus.exact import check_stokes
from dec.calculus.networks import from_networkx

RANDOM = np.random.default_rng(7)

COMPLEXES = {
    "network with parallel edges and self-loops": Complex.from_edges([0, 0, 1, 2, 2], [1, 1, 0, 2, 0], 4),
    "karate club with its triangles": from_networkx(nx.karate_club_graph(), faces="triangles"),
    "triangles": Complex.from_faces([[0, 1, 2], [2, 1, 3], [0, 2, 4]]),
    "polygons": Complex.from_faces([[0, 1, 2, 3], [3, 2, 4], [4, 2, 1, 5, 6]]),
    "moebius strip": Complex.from_faces([[0, 1, 2], [1, 2, 3], [2, 3, 4], [3, 4, 0], [4, 0, 1]]),
    "three faces on an edge": Complex.from_faces([[0, 1, 2], [0, 1, 3], [0, 1, 4]]),
    "faces with repeated corners": Complex.from_faces([[0, 0, 1], [0, 1, 0, 1], [1, 1, 1], [0, 1, 2, 0, 1, 2]]),
    "tetrahedra": Complex.from_cells({"tetra": [[0, 1, 2, 3], [1, 2, 3, 4], [5, 1, 2, 4]]}),
    "tetrahedra and hexahedra": Complex.from_cells({"tetra": [[0, 1, 2, 8]], "hexahedron": [[0, 1, 2, 3, 4, 5, 6, 7]]}),
    "collapsed hexahedra": Complex.from_cells({"hexahedron": [[0, 1, 2, 2, 3, 4, 5, 5], [1, 2, 2, 0, 7, 8, 8, 6]]}),
    "grid of one axis": grid(5),
    "torus grid": grid((3, 4), periodic=True),
    "shortest torus": grid((1, 2), periodic=True),
    "solid grid closed along one axis": grid((3, 3, 2), periodic=(True, False, False)),
    "vertex of degree 200": Complex.from_faces([[0, i, i % 200 + 1] for i in range(1, 201)]),
}
CASES = [(name, k) for name, K in COMPLEXES.items() for k in range(K.dim)]


@pytest.mark.parametrize(("name", "k"), CASES)
def test_boundary_and_derivative_are_adjoint_on_every_pair_of_cells(name, k):
    K = COMPLEXES[name]
    for j in range(min(K.counts[k], 12)):
        unit = np.zeros(K.counts[k], np.int64)
        unit[j] = 1
        column = K.cochain(k, unit).d().values
        assert column.tolist() == K.coboundary(k).toarray()[:, j].tolist()
        assert column.tolist() == K.boundary(k + 1).toarray()[j].tolist()


@pytest.mark.parametrize(("name", "k"), CASES)
@pytest.mark.parametrize("kind", ["int64", "long integers", "fractions"])
def test_the_pairing_of_a_boundary_is_the_pairing_with_the_derivative(name, k, kind):
    K = COMPLEXES[name]
    whole = RANDOM.integers(-(2**62), 2**62, K.counts[k])
    values = {
        "int64": whole,
        "long integers": [int(v) ** 3 for v in whole],
        "fractions": [Fraction(int(v), 2**40 + i) for i, v in enumerate(whole)],
    }[kind]
    c, w = K.chain(k + 1, RANDOM.integers(-1000, 1000, K.counts[k + 1])), K.cochain(k, values)
    assert c.boundary() @ w == c @ w.d()


@pytest.mark.parametrize(("name", "k"), CASES)
def test_the_pairing_of_floats_agrees_exactly_where_nothing_is_rounded(name, k):
    K = COMPLEXES[name]
    spread = RANDOM.normal(size=K.counts[k]) * 10.0 ** RANDOM.integers(-300, 300, K.counts[k])
    finding = check_stokes(K.chain(k + 1, RANDOM.integers(-9, 9, K.counts[k + 1])), K.cochain(k, spread))
    assert finding.holds
    assert finding.left == finding.right


@pytest.mark.parametrize("name", COMPLEXES)
def test_the_square_of_the_derivative_is_the_integer_zero_matrix(name):
    K = COMPLEXES[name]
    for k in range(1, K.dim):
        product = K.coboundary(k).astype(np.int64) @ K.coboundary(k - 1).astype(np.int64)
        assert not product.count_nonzero()
