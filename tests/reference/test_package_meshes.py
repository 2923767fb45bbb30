"""Counts of meshes and of a height grid that other packages carry, where those packages are installed.

Source: the package files themselves, counted in H1.json (READ: the files were opened). Nothing of them is copied here.
"""

import importlib.resources
import json
from collections import Counter
from itertools import combinations
from pathlib import Path

import numpy as np
import pytest

from dec.calculus.complex import Complex, grid
from dec.calculus.exact import check_line_integral

EXPECTED = json.loads((Path(__file__).parent / "H1.json").read_text())["expected"]


def pyamg_mesh(name):
    """Points and cells of a mesh in the pyamg gallery."""
    from scipy.io import loadmat

    pytest.importorskip("pyamg")
    gallery = Path(str(importlib.resources.files("pyamg"))) / "gallery"
    if name == "square_mesh":
        data = np.load(gallery / "mesh_data" / "square_mesh.npz")
    else:
        data = loadmat(gallery / "example_data" / f"{name}.mat")
    return data["vertices"], data["elements"]


def pyvista_mesh(name):
    import meshio

    pyvista = pytest.importorskip("pyvista")
    mesh = meshio.read(Path(pyvista.__file__).parent / "examples" / name)
    return mesh.points, mesh.cells_dict["triangle"]


def assert_counts(K, expected):
    assert K.counts == (expected["V"], expected["E"], expected["F"])
    assert K.euler == expected["chi"]
    assert K.n_components == expected["components"]
    assert int((K.incidences.uses == 1).sum()) == expected["boundary_edges"]
    assert len(K.boundary_loops()) == expected["boundary_loops"]
    findings = {finding.name: finding for finding in K.check()}
    assert findings["edges have at most two faces"].measured == expected["edges_in_3_or_more"]
    assert findings["neighbouring faces are turned alike"].holds is expected["oriented_consistently"]
    assert findings["no face repeats a corner"].measured == expected["degenerate"]


@pytest.mark.parametrize("name", ["airfoil", "unit_square", "knot", "square_mesh"])
def test_a_pyamg_mesh_has_the_counts_of_the_catalogue(name):
    points, faces = pyamg_mesh(name)
    assert_counts(Complex.from_faces(faces, points=points), EXPECTED[f"pyamg {name}"])


@pytest.mark.parametrize("name", ["ant.ply", "nut.ply", "sphere.ply"])
def test_a_pyvista_mesh_has_the_counts_of_the_catalogue(name):
    points, faces = pyvista_mesh(name)
    assert_counts(Complex.from_faces(faces, points=points), EXPECTED[f"pyvista {name}"])


def test_tetrahedra_that_do_not_fit_together_are_counted_as_they_are():
    # 125 vertices and 384 cells of 1/384 each (READ in the file), but where two cubes meet their diagonals often cross
    points, cells = pyamg_mesh("unit_cube")
    K = Complex.from_cells({"tetra": cells}, points=points)
    uses = Counter(tuple(sorted(c)) for cell in cells.tolist() for c in combinations(cell, 3))
    edges = {tuple(sorted(c)) for cell in cells.tolist() for c in combinations(cell, 2)}
    assert K.counts == (125, len(edges), len(uses), 384)
    assert sorted(K.incidences.uses.tolist()) == sorted(uses.values())
    # a ball has Euler characteristic 1; the rest are voids between crossing diagonals
    assert K.betti() == (1, 0, K.euler - 1, 0)
    assert K.euler == 71
    assert not K.is_manifold


def test_heights_of_16_bits_are_widened_before_they_are_subtracted():
    pytest.importorskip("matplotlib")
    from matplotlib.cbook import get_sample_data

    expected = EXPECTED["matplotlib jacksboro_fault_dem"]
    with get_sample_data("jacksboro_fault_dem.npz") as data:
        height = data["elevation"]
    assert height.dtype == np.int16
    K = grid(height.shape)
    assert (K.counts[1], K.counts[2]) == (expected["edges"], expected["faces"])
    h = K.cochain(0, height.ravel())
    assert h.values.dtype == np.int64
    assert (int(h.values.min()), int(h.values.max())) == (expected["min"], expected["max"])
    assert K.chain(0, np.ones(K.counts[0], np.int64)) @ h == expected["sum"]
    assert not h.d().d().values.any()
    rows, columns = height.shape
    rim = [*range(columns), *(i * columns + columns - 1 for i in range(1, rows))]
    finding = check_line_integral(K.path(rim), h)
    assert finding.left == finding.right == int(height[-1, -1]) - int(height[0, 0])
