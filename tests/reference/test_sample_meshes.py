"""The sample meshes of this project, against the counts in meshes/README.md (made by its own plain counting script)."""

from pathlib import Path

import meshio
import numpy as np
import pytest

from dec.calculus.complex import Complex

MESHES = Path(__file__).parents[2] / "meshes"
# name: (counts, Euler characteristic, boundary loops by number of edges, Betti numbers)
KNOWN = {
    "bracket.stl": ((1055, 3171, 2114), -2, [], (1, 4, 1)),
    "bracket.vtu": ((1055, 3171, 2114), -2, [], (1, 4, 1)),
    "torus.off": ((288, 864, 576), 0, [], (1, 2, 1)),
    "moebius.obj": ((150, 270, 120), 0, [60], (1, 1, 0)),
    "annulus.vtu": ((816, 2280, 1464), 0, [56, 112], (1, 1, 0)),
    "wing.vtu": ((1095, 3115, 2020), 0, [82, 88], (1, 1, 0)),
    "elbow.vtu": ((555, 3128, 4842, 2268), 1, None, (1, 0, 0, 0)),
}


def mesh(name):
    data = meshio.read(MESHES / name)
    cells = data.cells[0]
    if cells.type == "tetra":
        return Complex.from_cells({"tetra": cells.data})
    faces = np.asarray(cells.data)
    if name.endswith(".stl"):  # every triangle has corners of its own: join equal points
        _, same = np.unique(data.points, axis=0, return_inverse=True)
        faces = same.ravel()[faces]
    return Complex.from_faces(faces)


def test_every_sample_mesh_is_tried():
    files = {p.name for p in MESHES.iterdir() if p.suffix in {".stl", ".vtu", ".obj", ".off", ".ply", ".vtk", ".msh"}}
    assert files == set(KNOWN)


@pytest.mark.parametrize("name", KNOWN)
def test_the_boundary_of_a_boundary_is_the_integer_zero_matrix_on_a_sample_mesh(name):
    K = mesh(name)
    for k in range(1, K.dim):
        assert not (K.coboundary(k).astype(int) @ K.coboundary(k - 1).astype(int)).count_nonzero()


@pytest.mark.parametrize("name", KNOWN)
def test_a_sample_mesh_is_what_its_description_says(name):
    K = mesh(name)
    counts, euler, loops, betti = KNOWN[name]
    assert (K.counts, K.euler, K.betti(), K.n_components) == (counts, euler, betti, 1)
    assert K.is_manifold
    failed = [finding.name for finding in K.check() if not finding.holds]
    if name == "moebius.obj":
        assert failed == ["neighbouring faces are turned alike", "the faces can all be turned alike"]
        assert next(f for f in K.check() if f.name == failed[0]).measured == 4
    else:
        assert failed == []
    assert K.is_orientable is (name != "moebius.obj")
    if loops is not None:
        assert sorted(np.count_nonzero(loop.coefficients) for loop in K.boundary_loops()) == loops


def test_the_skin_of_the_elbow_is_a_sphere():
    K = mesh("elbow.vtu")
    rim = np.flatnonzero(K.incidences.uses == 1)
    skin = Complex.from_faces(K.faces.flat.reshape(-1, 3)[rim])
    used = np.unique(K.faces.flat.reshape(-1, 3)[rim])
    assert (len(used), skin.counts[1], skin.counts[2]) == (308, 918, 612)
    assert skin.euler - (skin.counts[0] - len(used)) == 2
