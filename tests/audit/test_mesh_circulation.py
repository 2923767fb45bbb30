"""The loop law on meshes: every face, every boundary loop and every hole, with known values and plain-Python sums."""

import json
import math
from collections.abc import Callable
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from dec.audit.questions import loops
from dec.calculus.complex import Complex, grid
from dec.errors import InputError
from dec.geometry.accuracy import rule_error
from dec.geometry.measures import face_area_vectors

from .mesh_by_hand import as_stored, circulation_by_hand, edge_circulation, edges_of
from .mesh_shapes import CUBE_POINTS, dataset, noted, row, sample, triangulated_square, with_field


def test_a_vortex_closes_on_every_face_but_not_round_the_hole():
    # meshes/README.md: N sin(2 pi / N) on borders of N = 112 and 56 edges; exactly 2 pi round the hole
    audit = loops(sample("annulus.vtu"), field="vortex")
    assert audit.holds is False
    assert audit.table("faces")["holds"].all()
    outer, inner = row(audit, "boundaries", "boundary 1"), row(audit, "boundaries", "boundary 2")
    assert outer["value"] == pytest.approx(112 * np.sin(2 * np.pi / 112), abs=1e-12)
    assert inner["value"] == pytest.approx(-56 * np.sin(2 * np.pi / 56), abs=1e-12)
    hole = row(audit, "holes", "hole 1")
    assert hole["value"] == pytest.approx(6.270011, abs=5e-7)  # along the rim, counter-clockwise
    assert abs(hole["value"] - 2 * np.pi) < hole["limit"] < 0.1
    assert [outer["holds"], inner["holds"], hole["holds"]] == [False, False, False]
    verdict = audit.extra["verdict"]
    assert verdict.startswith("closed on every face; 6.27")
    assert "round hole 1" in verdict
    assert verdict.endswith("no potential exists")


def test_the_same_vortex_at_the_cells_gives_the_same_verdict():
    audit = loops(sample("annulus.vtu"), field="vortex_c")
    assert audit.asked["at"] == "cells"
    assert audit.table("faces")["holds"].all()
    hole = row(audit, "holes", "hole 1")
    assert abs(hole["value"] - 2 * np.pi) < hole["limit"] < 1
    assert audit.holds is False


def test_every_independent_loop_of_the_annulus_is_checked():
    audit = loops(sample("annulus.vtu"), field="vortex")
    assert audit.dof == 2280 - 816 + 1 == 1464 + 1
    assert audit.counts == {
        "vertices": 816, "edges": 2280, "faces": 1464, "cells": 0, "components": 1, "boundary_loops": 2, "holes": 1,
    }  # fmt: skip


def test_circulation_round_the_wing_is_minus_ten_counter_clockwise():
    # meshes/README.md: -10 round any loop; trapezoid -9.9965 at the hole, -9.9958 at the rectangle
    audit = loops(sample("wing.vtu"), field="air")
    hole = row(audit, "holes", "hole 1")
    assert abs(hole["value"] + 10) < hole["limit"] < 0.2
    assert row(audit, "boundaries", "boundary 1")["value"] == pytest.approx(-9.9958, abs=5e-5)
    assert row(audit, "boundaries", "boundary 2")["value"] == pytest.approx(9.9965, abs=5e-5)
    assert audit.table("faces")["holds"].all()


def test_circulation_round_each_face_of_the_bracket_is_its_curl_through_the_face():
    # meshes/README.md: 0.08 (m/s)/mm times the y part of the area vector
    data = sample("bracket.vtu")
    audit = loops(data, field="air", unit="(m/s) mm")
    faces = audit.table("faces").sort_values("id")
    area = face_area_vectors(data.complex)[:, 1]
    assert np.abs(faces["value"].to_numpy() - 0.08 * area).max() < 1e-12 * np.abs(area).max()
    # faces along y have no part of it; the points are 32-bit numbers, so "along" is not exact
    assert (faces["holds"].to_numpy() == (np.abs(0.08 * area) <= faces["limit"].to_numpy() + 1e-13)).all()
    assert audit.holds is False
    assert "(m/s) mm round face" in audit.extra["verdict"]
    assert len(audit.table("holes")) == 4


def test_a_rigid_rotation_has_twice_its_area_round_every_face():
    K = triangulated_square(7, seed=3)
    audit = loops(dataset(K, K.points @ np.array([[0.0, 1.5], [-1.5, 0.0]])), field="U")
    faces = audit.table("faces").sort_values("id")
    assert faces["value"].to_numpy() == pytest.approx(3 * face_area_vectors(K)[:, 2], rel=1e-12)
    assert faces["limit"].max() < 1e-12  # the rule is exact for linear fields, so only rounding is allowed


def test_a_constant_field_has_a_potential_even_on_a_torus():
    data = sample("torus.off")
    audit = loops(with_field(data, "U", "vertices", np.tile([1.0, -2.0, 0.5], (288, 1))), field="U")
    assert audit.holds is True
    assert len(audit.table("holes")) == 2
    assert audit.extra["verdict"] == "closed on every face and hole within the limit: a potential exists"


def test_a_line_vortex_through_a_torus_shows_round_one_way_only():
    # outside its axis the field of a line vortex has no curl; 2 pi round the axis and 0 round the tube (Stokes)
    data = sample("torus.off")
    x, y, _ = data.complex.points.T
    field = np.stack([-y, x, 0 * x], axis=1) / (x**2 + y**2)[:, None]
    audit = loops(with_field(data, "U", "vertices", field), field="U")
    found = sorted(audit.table("holes")["value"].abs())
    assert found[0] == pytest.approx(0, abs=0.1)
    assert found[1] == pytest.approx(2 * np.pi, abs=0.1)
    assert audit.table("holes")["holds"].tolist() == [False, True]


def test_a_moebius_strip_is_added_up_as_stored_and_said_so():
    data = sample("moebius.obj")
    K = data.complex
    field = np.random.default_rng(0).normal(size=(150, 3))
    audit = loops(with_field(data, "U", "vertices", field), field="U")
    assert noted(audit, "1 of 1 sheet one-sided")
    assert len(audit.table("holes")) == 1
    (whole,) = audit.extra["whole"]
    stored = sum((Fraction(v) * c for v, c in zip(edge_circulation(K, field), as_stored(K), strict=True)), Fraction(0))
    assert Fraction(whole["left"]) == Fraction(whole["right"]) == stored
    assert whole["holds"] is True


def test_faces_turned_over_are_turned_alike_in_the_sum_over_all():
    K = triangulated_square(4, seed=1)
    faces = K.faces.flat.reshape(-1, 3).copy()
    faces[::3] = faces[::3, ::-1]
    K = Complex.from_faces(faces, points=K.points)
    field = np.random.default_rng(1).normal(size=K.points.shape)
    audit = loops(dataset(K, field), field="U")
    (whole,) = audit.extra["whole"]
    boundary = row(audit, "boundaries", "boundary 1")["value"]
    assert abs(float(Fraction(whole["left"]))) == pytest.approx(abs(boundary), rel=1e-12)
    assert noted(audit, "turned against the first of the sheet")


def test_the_whole_and_its_parts_agree_exactly_over_twelve_orders_of_magnitude():
    K = triangulated_square(30, seed=5)
    random = np.random.default_rng(7)
    field = random.normal(size=K.points.shape) * 10.0 ** random.uniform(-6, 6, K.points.shape)
    audit = loops(dataset(K, field), field="U")
    (whole,) = audit.extra["whole"]
    # the outline of the square, edge by edge, in Fractions; the audit's faces are counter-clockwise
    values = edge_circulation(K, field)
    outline = sum((Fraction(v) * c for v, c in zip(values, as_stored(K), strict=True)), Fraction(0))
    assert Fraction(whole["left"]) == Fraction(whole["right"]) == outline
    assert float(np.sum(audit.table("faces")["value"])) != float(outline)  # floats alone do not get there


def test_a_curl_free_field_on_a_solid_has_a_potential():
    K = grid((4, 3, 3), spacing=0.5)
    x, y, z = K.points.T
    audit = loops(dataset(K, np.stack([y, x, 2 * z], axis=1)), field="U")
    assert audit.holds is True
    assert len(audit.table("faces")) == K.counts[2]
    assert len(audit.table("boundaries")) == len(audit.table("holes")) == 0
    assert audit.extra["whole"][0]["left"] == audit.extra["whole"][0]["right"] == "0"


def test_holes_of_a_solid_that_cannot_be_listed_leave_the_question_open():
    K = grid((4, 3, 3), periodic=(True, False, False))
    audit = loops(dataset(K, np.tile([1.0, 0.0, 0.0], (36, 1))), field="U")
    assert audit.table("faces")["holds"].all()
    assert audit.holds is None
    assert audit.extra["verdict"] == "closed on every face; 1 hole not examined"
    assert audit.dof == K.counts[1] - K.counts[0]
    assert noted(audit, "the mesh is a solid")
    assert "circulation round holes" in audit.not_shown


def test_where_edges_have_three_faces_holes_are_counted_and_not_listed():
    fins = [[0, 1, 3, 2], [1, 3, 7, 5], [1, 3, 9, 8]]  # three squares on one edge: no hole, so nothing is left out
    points = [*CUBE_POINTS, [2, 0, 0], [2, 1, 0]]
    audit = loops(dataset(Complex.from_faces(fins, points=points), np.tile([1.0, 2.0, 3.0], (10, 1))), field="U")
    assert audit.holds is True
    assert audit.counts["holes"] == 0
    ring = [[0, 2, 6, 4], [2, 3, 7, 6], [3, 1, 5, 7], [1, 0, 4, 5], [1, 5, 9, 8]]  # the four walls of a tube, and a fin
    audit = loops(dataset(Complex.from_faces(ring, points=points), np.tile([1.0, 2.0, 3.0], (10, 1))), field="U")
    assert audit.holds is None
    assert audit.extra["verdict"] == "closed on every face; 1 hole not examined"
    assert noted(audit, "edges have three or more faces")
    assert noted(audit, "boundary edges belong to no closed loop")


def test_one_wrong_vector_is_found_at_the_faces_round_it():
    data = sample("annulus.vtu")
    field = data.fields["vortex"]["vertices"].values.copy()
    field[386] += [0.4, -0.3]
    audit = loops(with_field(data, "vortex", "vertices", field), field="vortex", limit="1%")
    faces = audit.table("faces")
    bad = faces[~faces["holds"].to_numpy(dtype=bool)]
    assert 3 <= len(bad) <= 6
    assert all(386 in data.complex.faces.row(face) for face in bad["id"])
    assert faces["id"].iloc[0] == bad["id"].iloc[0]


def test_one_wrong_vector_in_a_linear_field_stands_out_even_where_it_widens_the_limit():
    K = triangulated_square(12, seed=2)
    field = np.stack([K.points[:, 1], K.points[:, 0]], axis=1)
    middle = 6 * 13 + 6
    field[middle] += [0.5, -0.2]
    audit = loops(dataset(K, field), field="U")
    note = next(note for note in audit.notes if "the limit is widest at face" in note)
    widest = int(note.split("face ")[1].split(",")[0])
    near = {v for face in K.faces.flat.reshape(-1, 3) if middle in face for v in face}
    assert near & set(K.faces.row(widest).tolist())


def test_faces_come_worst_first_by_share_of_their_limit():
    K = triangulated_square(8, seed=4)
    audit = loops(dataset(K, np.random.default_rng(3).normal(size=K.points.shape)), field="U")
    faces = audit.table("faces")
    share = (faces["value"].abs() / faces["limit"]).to_numpy()
    assert (np.diff(share) <= 0).all()


def test_with_a_limit_of_zero_the_largest_come_first_and_exact_zeros_hold():
    K = grid((4, 4))
    field = np.zeros((16, 2))
    field[5] = [3.0, 1.0]
    faces = loops(dataset(K, field), field="U", limit=0).table("faces")
    size = faces["value"].abs().to_numpy()
    assert (np.diff(size) <= 0).all()
    assert (faces["holds"].to_numpy() == (size == 0)).all()
    assert 0 < (size > 0).sum() < 9


@st.composite
def polygon_fields(draw: Callable) -> tuple[Complex, np.ndarray]:
    """A plane grid with some squares cut into triangles, some joined to hexagons, some missing, and a random field."""
    rows, columns = draw(st.integers(2, 4)), draw(st.integers(2, 5))
    number = np.arange((rows + 1) * (columns + 1)).reshape(rows + 1, columns + 1)
    faces: list[list[int]] = []
    for i in range(rows):
        j = 0
        while j < columns:
            a, b, c, d = number[i, j], number[i + 1, j], number[i + 1, j + 1], number[i, j + 1]
            kind = draw(st.sampled_from(["square", "cut", "hexagon", "missing"]))
            if kind == "hexagon" and j + 1 < columns:
                faces.append([a, b, c, number[i + 1, j + 2], number[i, j + 2], d])
                j += 1
            elif kind == "cut":
                faces += [[a, b, c], [a, c, d]]
            elif kind != "missing":
                faces.append([d, c, b, a] if draw(st.booleans()) else [a, b, c, d])
            j += 1
    if not faces:
        faces.append([number[0, 0], number[1, 0], number[1, 1]])
    random = np.random.default_rng(draw(st.integers(0, 2**32 - 1)))
    places = np.stack(np.meshgrid(np.arange(rows + 1.0), np.arange(columns + 1.0), indexing="ij"), axis=-1).reshape(
        -1, 2
    )
    places += random.uniform(-0.3, 0.3, places.shape)
    K = Complex.from_faces([[int(v) for v in face] for face in faces], len(places), points=places)
    return K, random.normal(size=places.shape)


def straight(K: Complex, field: np.ndarray, e: int) -> float:
    """Length of an edge times the field's mean magnitude at its ends, or a tenth of its median if that is more."""
    size = np.hypot(*field.T)
    length = math.dist(K.points[K.tail[e]], K.points[K.head[e]])
    return length * max((size[K.tail[e]] + size[K.head[e]]) / 2, 0.1 * float(np.median(size)))


@given(polygon_fields())
@settings(max_examples=50, deadline=None)
def test_sums_round_faces_are_those_of_plain_python(case: tuple[Complex, np.ndarray]):
    K, field = case
    audit = loops(dataset(K, field), field="U")
    expected = circulation_by_hand(K, field)
    error = rule_error(K, field)
    for face in audit.to_dict()["faces"]:
        value, gross = expected[face["id"]]
        assert face["value"] == pytest.approx(value, abs=1e-13 * (gross + 1))
        edges = edges_of(K, face["id"])
        allowed = sum(float(error[e]) for e in edges) + len(edges) * 2.0**-52 * gross
        assert face["limit"] == pytest.approx(allowed, rel=1e-12)
        within = abs(face["value"]) <= face["limit"]
        unclear = any(error[e] > 0.125 * straight(K, field, e) for e in edges)
        assert face["holds"] is (None if within and unclear else within)
    assert len(audit.table("holes")) == K.betti()[1]
    assert all(w["left"] == w["right"] for w in audit.extra["whole"])


@given(polygon_fields(), st.floats(0.01, 50))
@settings(max_examples=20, deadline=None)
def test_a_percentage_is_of_the_gross_round_the_face(case: tuple[Complex, np.ndarray], percent: float):
    K, field = case
    audit = loops(dataset(K, field), field="U", limit=f"{percent}%")
    expected = circulation_by_hand(K, field)
    for face in audit.to_dict()["faces"]:
        assert face["limit"] == pytest.approx(percent / 100 * expected[face["id"]][1], rel=1e-12)
    assert audit.limit is None
    assert noted(audit, "of gross")


def test_an_absolute_limit_is_every_row_s_and_the_audit_s_limit():
    audit = loops(sample("annulus.vtu"), field="vortex", limit="1e-3", unit="m2/s")
    assert audit.limit == 1e-3
    assert all((audit.table(name)["limit"] == 1e-3).all() for name in ("faces", "boundaries", "holes"))
    assert noted(audit, "limit: 0.001 m2/s, as given")
    assert noted(audit, "own estimated error is larger than the limit")


def test_the_record_has_the_keys_of_every_mesh_audit_and_the_same_bytes_each_time():
    data = sample("wing.vtu")
    first, second = (loops(data, field="air") for _ in range(2))
    assert first.to_json() == second.to_json()
    record = json.loads(first.to_json())
    assert record["schema"] == "dec.audit/1"
    assert record["law"] == "loop"
    assert record["chi_square"] is record["p_value"] is record["limit"] is record["shares"] is None
    assert {"faces", "boundaries", "holes", "notes", "not_shown", "whole", "verdict", "suspects"} <= set(record)
    assert "edges" not in record
    assert set(record["faces"][0]) == {"id", "value", "limit", "holds", "x", "y", "z"}
    assert set(record["holes"][0]) == {"id", "value", "limit", "holds", "x", "y", "z", "edges"}
    assert record["inputs"][0]["name"] == "wing.vtu"
    assert noted(first, "trapezoid rule")
    assert noted(first, "the integration rule's own estimated error")


def test_a_face_is_placed_at_its_middle():
    K = Complex.from_faces([[0, 1, 2]], points=[[0, 0], [3, 0], [0, 6]])
    face = loops(dataset(K, np.ones((3, 2))), field="U").to_dict()["faces"][0]
    assert (face["x"], face["y"], face["z"]) == (1.0, 2.0, 0.0)


SQUARE = Complex.from_faces([[0, 1, 2, 3]], points=[[0, 0], [1, 0], [1, 1], [0, 1]])


@pytest.mark.parametrize(
    ("K", "field", "words"),
    [
        (Complex.from_edges([0], [1], points=[[0.0], [1.0]]), np.ones((2, 1)), "has dimension 1"),
        (Complex.from_faces([[0, 1, 2]]), np.ones((3, 2)), "has no points"),
        (SQUARE, np.ones((4, 1)), "'U' must have 2 components, like the points, got 1; a scalar"),
        (SQUARE, np.ones(4), "'U' must have 2 components, like the points, got 1; a scalar"),
        (SQUARE, np.ones((4, 3)), "'U' must have 2 components, like the points, got 3"),
        (SQUARE, np.ones((3, 2)), "3 rows"),
        (SQUARE, np.array([[0, 0], [np.nan, 0], [0, 0], [0, 0]]), "vertex 1"),
    ],
    ids=["graph", "no points", "scalar", "flat scalar", "too wide", "too short", "nan"],
)
def test_a_field_that_cannot_be_used_is_one_clear_error(K: Complex, field: np.ndarray, words: str):
    with pytest.raises(InputError, match=words):
        loops(dataset(K, field), field="U")


def test_a_missing_field_names_those_there_are():
    with pytest.raises(InputError, match=r"no field 'vortx'.*did you mean 'vortex'"):
        loops(sample("annulus.vtu"), field="vortx")


@pytest.mark.parametrize("limit", ["-1", -1e-9, "nan", float("inf"), "1 percent", "%", "-1%"])
def test_a_limit_that_is_none_is_refused(limit: float | str):
    with pytest.raises(InputError, match=r"limit must be"):
        loops(dataset(SQUARE, np.ones((4, 2))), field="U", limit=limit)
