"""The balance law on surfaces in space: one balance for every closed shell."""

import math

import numpy as np
import pytest

from dec.audit.questions import balance
from dec.calculus.complex import Complex, grid
from dec.calculus.dataset import Dataset
from dec.errors import InputError

from .mesh_shapes import CUBE, CUBE_POINTS, box, dataset, noted, row, sample

CONSTANT = np.array([1.0, -2.0, 0.5])


def surface(faces: np.ndarray | list[list[int]], points: np.ndarray, field: np.ndarray | None = None) -> Dataset:
    K = Complex.from_faces(faces, points=points)
    return dataset(K, np.tile(CONSTANT, (len(points), 1)) if field is None else field)


def test_a_stream_through_the_bracket_balances():
    # meshes/README.md: linear and divergence-free, so exactly 0 but for rounding; magnitudes 36454.303 in sum
    audit = balance(sample("bracket.vtu"), field="air")
    assert audit.holds is True
    assert audit.dof == 1
    shell = row(audit, "shells", "shell 1")
    assert abs(shell["value"]) < 1e-12 * 36454
    percent = row(balance(sample("bracket.vtu"), field="air", limit="100%"), "shells", "shell 1")
    assert percent["limit"] == pytest.approx(36454.303, abs=5e-4)
    assert "a closed mesh is not a tight part" in " ".join(audit.not_shown)
    assert not noted(audit, "turned inward")


def test_a_source_inside_shows_as_its_strength():
    # div r = 3, through a cube of volume 8: 24; the corner rule is exact for linear fields
    faces, points = box(low=-1)
    audit = balance(surface(faces, points, points), field="U", unit="m3/s")
    assert row(audit, "shells", "shell 1")["value"] == pytest.approx(24, rel=1e-13)
    assert audit.extra["verdict"] == "1 of 1 closed shell not balanced: 24 m3/s out of shell 1"
    assert audit.holds is False


def test_a_shell_turned_inside_out_is_told_and_not_flipped():
    faces, points = box(low=-1)
    audit = balance(surface(faces[:, ::-1], points, points), field="U")
    assert row(audit, "shells", "shell 1")["value"] == pytest.approx(-24, rel=1e-13)
    assert noted(audit, "turned inward (inside out, or the skin of a cavity): shell 1")


def test_each_shell_is_judged_alone():
    faces, points = box()
    other, more = box(low=2, high=4)
    both = np.concatenate([points, more])
    field = np.concatenate([np.tile(CONSTANT, (len(points), 1)), more])
    audit = balance(surface(np.concatenate([faces, other + len(points)]), both, field), field="U")
    assert audit.dof == 2
    assert row(audit, "shells", "shell 1")["holds"] is True
    assert row(audit, "shells", "shell 2")["holds"] is False
    assert audit.table("shells")["id"].iloc[0] == "shell 2"
    assert audit.holds is False


def test_without_a_closed_shell_nothing_has_to_balance():
    faces, points = box()
    audit = balance(surface(faces[1:], points), field="U")
    assert audit.holds is None
    assert audit.dof == 0
    assert audit.extra["verdict"] == "no closed shell, so nothing has to balance"
    sheet = row(audit, "shells", "open sheet 1")
    assert sheet["holds"] is None
    assert abs(sheet["value"]) == pytest.approx(0.5 / 18, rel=1e-9)  # the missing triangle: half of 1/9, at z = 0
    assert noted(audit, "1 open sheet: nothing has to balance")
    assert audit.counts["boundary_loops"] == 1


def test_a_patch_turned_inside_out_is_refused_with_its_edges():
    faces, points = box(side=4)
    top = np.flatnonzero(points[faces][:, :, 2].min(axis=1) == 1)
    faces[top] = faces[top, ::-1]
    with pytest.raises(InputError, match=r"in shell 1 they are not: 16 edges badly turned; turning 32 faces would do"):
        balance(surface(faces, points), field="U")


def test_an_open_sheet_not_turned_alike_has_no_net_flux():
    faces, points = box(side=2)
    faces = faces[1:]
    faces[5] = faces[5, ::-1]
    audit = balance(surface(faces, points), field="U")
    assert math.isnan(row(audit, "shells", "open sheet 1")["value"])
    assert noted(audit, "faces not turned alike at 3 edges, so without a net flux: open sheet 1")


def test_a_one_sided_closed_surface_has_no_outside():
    # hemi-icosahedron: the projective plane on six vertices
    faces = [
        [0, 1, 2],
        [0, 2, 3],
        [0, 3, 4],
        [0, 4, 5],
        [0, 5, 1],
        [1, 2, 4],
        [2, 3, 5],
        [3, 4, 1],
        [4, 5, 2],
        [5, 1, 3],
    ]
    with pytest.raises(InputError, match="one-sided, so they cannot be"):
        balance(surface(faces, np.random.default_rng(0).normal(size=(6, 3))), field="U")


def test_a_face_given_twice_is_refused_by_its_numbers():
    faces, points = box()
    again = np.concatenate([faces, faces[[7], ::-1]])
    with pytest.raises(InputError, match=f"faces 7 and {len(faces)} have the same corners"):
        balance(surface(again, points), field="U")


def test_a_cell_given_twice_is_refused_by_its_numbers():
    tetra = [[0, 1, 2, 3], [1, 4, 2, 3], [0, 1, 2, 3]]
    points = np.array([[0, 0, 0], [1, 0, 0], [0, 1, 0], [0, 0, 1], [1, 1, 1]], dtype=float)
    with pytest.raises(InputError, match="cells 0 and 2 have the same corners"):
        balance(dataset(Complex.from_cells({"tetra": tetra}, points=points), points), field="U")


def test_a_baffle_ends_the_sheets_it_touches_and_is_told():
    squares = [*CUBE.tolist(), [0, 1, 7, 6]]  # a slanting wall that meets the box along two of its edges
    audit = balance(surface(squares, CUBE_POINTS), field="U")
    assert audit.holds is None
    assert noted(audit, "2 edges with three or more faces (a baffle")
    assert set(audit.table("shells")["id"]) == {"open sheet 1", "open sheet 2"}


def test_named_face_groups_are_listed_and_judged_where_they_close():
    faces, points = box(low=-1)
    other, more = box(low=4, high=5)
    K = Complex.from_faces(np.concatenate([faces, other + len(points)]), points=np.concatenate([points, more]))
    top = np.flatnonzero(K.points[K.faces.flat.reshape(-1, 3)][:, :, 2].min(axis=1) == 1)
    whole = list(range(len(faces)))
    data = dataset(K, K.points, regions={"lid": (2, top[top < len(faces)].tolist()), "near": (2, whole)})
    audit = balance(data, field="U")
    lid = row(audit, "regions", "lid")
    assert (round(lid["value"], 12), lid["holds"], lid["faces"]) == (4.0, None, 18)
    near_box = row(audit, "regions", "near")
    assert near_box["holds"] is False
    assert near_box["value"] == pytest.approx(24)


def test_a_mesh_in_a_tilted_plane_is_told_where_its_faces_would_balance():
    flat = grid((4, 4))
    points = np.stack([flat.points[:, 0], flat.points[:, 1], flat.points[:, 0]], axis=1)
    K = Complex.from_faces(flat.faces.flat.reshape(-1, 4), points=points)
    audit = balance(dataset(K, np.ones_like(points)), field="U")
    assert audit.holds is None
    assert any("turn the mesh into the plane" in note for note in audit.notes)
