"""The balance law cell by cell: faces of a plane mesh and cells of a solid."""

import json
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from dec.audit.questions import balance, loops
from dec.calculus.complex import Complex, grid
from dec.calculus.dataset import Dataset, Field
from dec.errors import InputError

from .mesh_shapes import dataset, noted, row, sample, with_field

# plane meshes: one balance a face


def test_a_source_of_strength_two_flows_out_of_every_face_in_proportion_to_its_area():
    # div (x, y) = 2, and the rule is exact for linear fields
    K = Complex.from_faces([[0, 1, 2, 3], [1, 4, 2]], points=[[0, 0], [2, 0], [2, 1], [0, 1], [5, 0]])
    audit = balance(dataset(K, K.points), field="U")
    faces = audit.table("faces").set_index("id")["value"]
    assert faces[0] == pytest.approx(4.0, rel=1e-14)
    assert faces[1] == pytest.approx(3.0, rel=1e-14)
    assert audit.holds is False
    assert row(audit, "boundaries", "whole boundary")["value"] == pytest.approx(7.0, rel=1e-14)
    assert audit.extra["verdict"].startswith("2 of 2 faces not balanced")


def test_outward_stays_outward_for_faces_turned_clockwise():
    K = Complex.from_faces([[3, 2, 1, 0], [1, 4, 2]], points=[[0, 0], [2, 0], [2, 1], [0, 1], [5, 0]])
    audit = balance(dataset(K, K.points), field="U")
    assert audit.table("faces").set_index("id")["value"].round(12).to_dict() == {0: 4.0, 1: 3.0}
    assert noted(audit, "1 of 2 faces turned clockwise")
    assert row(audit, "boundaries", "whole boundary")["value"] == pytest.approx(7.0, rel=1e-14)


def test_the_vortex_on_the_annulus_balances():
    audit = balance(sample("annulus.vtu"), field="vortex")
    assert audit.holds is True
    assert audit.dof == 1464
    # the borders are regular polygons round the vortex, so nothing crosses them
    assert np.abs(audit.table("boundaries")["value"]).max() < 1e-15
    assert balance(sample("annulus.vtu"), field="vortex_c").holds is True


def test_only_the_boundary_as_a_whole_is_judged():
    K = grid((3, 3))
    audit = balance(dataset(K, np.tile([3.0, 0.0], (9, 1)), regions={"inlet": (1, left_edges(K))}), field="U")
    assert audit.holds is True
    inlet = row(audit, "boundaries", "inlet")
    assert (inlet["value"], inlet["holds"]) == (-6.0, None)
    assert np.isnan(inlet["limit"])
    assert row(audit, "boundaries", "whole boundary")["holds"] is True
    assert row(audit, "boundaries", "boundary 1")["holds"] is None
    listed = {r["id"]: r for r in audit.to_dict()["boundaries"]}
    assert listed["inlet"]["limit"] is listed["inlet"]["holds"] is None


def test_a_region_inside_is_left_out_by_name():
    K = grid((3, 3))
    inside = [e for e in range(12) if {int(K.tail[e]), int(K.head[e])} == {4, 5}]
    audit = balance(dataset(K, np.ones((9, 2)), regions={"baffle": (1, inside)}), field="U")
    assert "baffle" not in set(audit.table("boundaries")["id"])
    assert noted(audit, "region baffle is left out: 1 of its 1 edges lie inside")


def test_the_faces_of_a_flat_torus_have_one_relation():
    K = grid((3, 4), periodic=True)
    audit = balance(dataset(K, np.ones((12, 2))), field="U")
    assert audit.dof == 11
    assert audit.holds is True
    whole = row(audit, "boundaries", "whole boundary")
    assert (whole["value"], whole["holds"], whole["edges"]) == (0.0, True, 0)


# solids: one balance a cell


def test_water_through_the_elbow_balances_in_every_cell():
    # meshes/README.md: rigid rotation, exact for the rule; 0.01154318 m3/s in at y = 0 and out at x = 0
    data = sample("elbow.vtu")
    K = data.complex
    skin = np.flatnonzero(K.incidences.uses == 1)
    corners = K.points[K.faces.flat.reshape(-1, 3)[skin]]
    ends = {
        "inlet": np.abs(corners[:, :, 1]).max(axis=1) < 1e-12,
        "outlet": np.abs(corners[:, :, 0]).max(axis=1) < 1e-12,
    }
    regions = {name: (2, skin[chosen].tolist()) for name, chosen in ends.items()}
    audit = balance(dataset(K, data.fields["flow"]["vertices"].values, regions=regions), field="U", unit="m3/s")
    assert audit.holds is True
    assert audit.dof == 2268
    assert audit.table("cells")["limit"].max() < 1e-15
    assert row(audit, "boundaries", "inlet")["value"] == pytest.approx(-0.01154318, abs=5e-9)
    assert row(audit, "boundaries", "outlet")["value"] == pytest.approx(0.01154318, abs=5e-9)
    assert row(audit, "boundaries", "whole boundary")["faces"] == 612
    (whole,) = audit.extra["whole"]
    assert whole["left"] == whole["right"]
    assert abs(float(Fraction(whole["left"]))) < 1e-16


def test_one_wrong_vector_is_found_in_the_cells_round_it():
    data = sample("elbow.vtu")
    field = data.fields["flow"]["vertices"].values.copy()
    field[173] += [0.4, -0.3, 0.2]
    audit = balance(with_field(data, "flow", "vertices", field), field="flow", limit=1e-9)
    cells = audit.table("cells")
    bad = cells["id"][~cells["holds"].to_numpy(dtype=bool)]
    around = np.flatnonzero((data.complex.solids["tetra"] == 173).any(axis=1))
    assert len(bad) > 5
    assert set(bad) <= set(around.tolist())
    assert cells["id"].iloc[0] == cells["id"][cells["value"].abs().idxmax()]
    assert f"worst {cells['value'].iloc[0]:.4g} out of cell {cells['id'].iloc[0]}" in audit.extra["verdict"]


def test_where_one_wrong_vector_widens_its_own_limit_a_note_points_there():
    data = sample("elbow.vtu")
    field = data.fields["flow"]["vertices"].values.copy()
    field[173] += [0.4, -0.3, 0.2]
    audit = balance(with_field(data, "flow", "vertices", field), field="flow")
    note = next(note for note in audit.notes if "the limit is widest at cell" in note)
    cell = int(note.split("cell ")[1].split(",")[0])
    assert set(data.complex.solids["tetra"][cell].tolist()) & near(data.complex, 173)


def test_one_wrong_cell_value_is_found_in_the_cells_beside_it():
    K = grid((6, 6, 6))
    field = np.tile([1.0, 2.0, 3.0], (125, 1))
    field[62] += [0.5, 0.0, 0.0]
    audit = balance(dataset(K, field, at="cells"), field="U", limit=0.1)
    cells = audit.table("cells")
    bad = cells["id"][~cells["holds"].to_numpy(dtype=bool)].tolist()
    # half the jump crosses the two faces of cell 62 along x: out of the cell before, into the one after
    assert sorted(bad) == [62 - 25, 62 + 25]
    assert cells["value"].iloc[:2].abs().tolist() == [0.25, 0.25]


def test_cells_of_negative_volume_keep_outward_outward():
    tetra = np.array([[0, 1, 2, 3], [4, 2, 1, 3]])
    points = np.array([[0, 0, 0], [1, 0, 0], [0, 1, 0], [0, 0, 1], [1, 1, 1]], dtype=float)
    right = balance(dataset(Complex.from_cells({"tetra": tetra}, points=points), points), field="U")
    assert not noted(right, "inside out")
    tetra[1] = tetra[1, [1, 0, 2, 3]]
    audit = balance(dataset(Complex.from_cells({"tetra": tetra}, points=points), points), field="U")
    assert noted(audit, "1 of 2 cells turned inside out")
    for name in ("cells", "boundaries"):
        assert audit.table(name)["value"].to_numpy() == pytest.approx(right.table(name)["value"].to_numpy(), rel=1e-14)


def test_cells_that_lie_over_each_other_are_told():
    tetra = np.array([[0, 1, 2, 3], [1, 2, 3, 4]])
    points = np.array([[0, 0, 0], [1, 0, 0], [0, 1, 0], [0, 0, 1], [0.1, 0.1, 0.1]])
    audit = balance(dataset(Complex.from_cells({"tetra": tetra}, points=points), points), field="U")
    assert noted(audit, "1 face with cells that overlap on one side")


# sums against plain Python, exactness, the record


@given(st.integers(0, 2**32 - 1))
@settings(max_examples=15, deadline=None)
def test_net_fluxes_of_cells_are_those_of_plain_python(seed: int):
    random = np.random.default_rng(seed)
    K = grid((3, 3, 4))
    points = K.points + random.uniform(-0.2, 0.2, K.points.shape)
    K = Complex.from_cells({"hexahedron": K.solids["hexahedron"]}, points=points)
    field = random.normal(size=points.shape)
    found = {cell["id"]: cell["value"] for cell in balance(dataset(K, field), field="U").to_dict()["cells"]}
    for cell, corners in enumerate(K.solids["hexahedron"].tolist()):
        total = 0.0
        for side in ((0, 3, 2, 1), (4, 5, 6, 7), (0, 1, 5, 4), (1, 2, 6, 5), (2, 3, 7, 6), (3, 0, 4, 7)):
            # the two triangles that fan out from the corner at which the stored face starts: its lowest
            loop = [corners[s] for s in side]
            start = loop.index(min(loop))
            a, b, c, d = loop[start:] + loop[:start]
            for p, q, r in ((a, b, c), (a, c, d)):
                area = np.cross(points[q] - points[p], points[r] - points[p]) / 2
                total += float((field[p] + field[q] + field[r]) / 3 @ area)
        assert found[cell] == pytest.approx(total, abs=1e-12)


@given(st.integers(0, 2**32 - 1))
@settings(max_examples=20, deadline=None)
def test_the_whole_and_its_parts_agree_exactly_over_twelve_orders_of_magnitude(seed: int):
    random = np.random.default_rng(seed)
    K = grid((4, 5, 3))
    field = random.normal(size=K.points.shape) * 10.0 ** random.uniform(-6, 6, K.points.shape)
    audit = balance(dataset(K, field), field="U")
    (whole,) = audit.extra["whole"]
    skin = row(audit, "boundaries", "whole boundary")["value"]
    assert whole["holds"] is True
    assert Fraction(whole["left"]) == Fraction(whole["right"])
    assert float(Fraction(whole["left"])) == pytest.approx(skin, rel=1e-9)
    assert sum(map(Fraction, audit.table("cells")["value"])) != Fraction(whole["left"])  # rounded parts do not


def test_the_record_has_the_keys_of_every_mesh_audit_and_the_same_bytes_each_time():
    data = sample("elbow.vtu")
    first, second = (balance(data, field="flow", limit="0.1%", unit="m3/s") for _ in range(2))
    assert first.to_json() == second.to_json()
    record = json.loads(first.to_json())
    assert record["law"] == "balance"
    assert record["chi_square"] is record["p_value"] is record["limit"] is record["shares"] is None
    assert {"cells", "boundaries", "notes", "not_shown", "whole", "verdict"} <= set(record)
    assert set(record["cells"][0]) == {"id", "value", "limit", "holds", "x", "y", "z"}
    assert record["asked"] == {"field": "flow", "at": "vertices", "limit": "0.1%", "unit": "m3/s"}
    assert noted(first, "of gross, as given; gross is the sum of the magnitudes of the fluxes")


def test_a_cell_is_placed_at_its_middle():
    points = np.array([[0, 0, 0], [4, 0, 0], [0, 4, 0], [0, 0, 8]], dtype=float)
    K = Complex.from_cells({"tetra": [[0, 1, 2, 3]]}, points=points)
    cell = balance(dataset(K, points), field="U").to_dict()["cells"][0]
    assert (cell["x"], cell["y"], cell["z"]) == (1.0, 1.0, 2.0)


def left_edges(K: Complex) -> list[int]:
    on = K.points[:, 0] == 0
    return np.flatnonzero(on[K.tail] & on[K.head]).tolist()


def near(K: Complex, vertex: int) -> set[int]:
    tetra = K.solids["tetra"]
    return set(tetra[(tetra == vertex).any(axis=1)].ravel().tolist())


@pytest.mark.parametrize("name", ["annulus", "wing", "elbow", "bracket"])
def test_noise_is_never_found_to_balance_or_close(name: str):
    part = sample(f"{name}.vtu")
    noise = np.random.default_rng(5).standard_normal(part.complex.points.shape)
    data = Dataset(part.complex, fields={"U": {"vertices": Field("U", "vertices", noise)}})
    assert balance(data, field="U").holds is not True
    assert loops(data, field="U").holds is not True


@pytest.mark.parametrize("size", [1.0, 30.0, 1e6])
def test_one_wrong_vector_in_a_linear_field_on_a_solid_is_not_found_to_balance(size: float):
    part = sample("elbow.vtu")
    field = part.field("flow").values.copy()
    field[277] += size * np.abs(field).max()
    data = Dataset(part.complex, fields={"U": {"vertices": Field("U", "vertices", field)}})
    audit = balance(data, field="U")
    assert audit.holds is not True
    assert "not decided" in audit.extra["verdict"] or "not balanced" in audit.extra["verdict"]
    assert balance(data, field="U", limit="1%").holds is False


@pytest.mark.parametrize(("grown", "stretched"), [(1e160, 1.0), (1.0, 1e110)])
def test_numbers_whose_sums_would_overflow_are_refused(grown: float, stretched: float):
    part = sample("elbow.vtu")
    K = Complex.from_cells(part.complex.solids, points=part.complex.points * stretched)
    data = Dataset(K, fields={"U": {"vertices": Field("U", "vertices", part.field("flow").values * grown)}})
    with pytest.raises(InputError, match="must stay within"):
        balance(data, field="U")
