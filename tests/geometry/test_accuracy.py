"""The estimate of the integration rules' own error: covers the true one, shrinks as it must, is what its text says."""

from fractions import Fraction
from itertools import pairwise

import numpy as np
import pytest

from dec.audit.questions import balance, loops
from dec.calculus.complex import Complex, grid
from dec.calculus.dataset import Dataset, Field
from dec.errors import InputError
from dec.geometry import ranges
from dec.geometry.accuracy import rule_error
from dec.geometry.fields import integrate_field
from dec.geometry.gradients import cell_gradients
from dec.geometry.neighbours import cells_at

from . import slow
from .shapes import delaunay, hexahedra, icosahedron, octagons_and_squares, sample

EPS = 2**-52


def harmonic(p):
    """The gradient of x^3 - 3 x y^2 + x y z at seven times the place: no curl, no divergence."""
    x, y, z = 7 * p.T
    return np.stack([3 * x * x - 3 * y * y + y * z, -6 * x * y + x * z, x * y], axis=1)


def stream(p):
    """Air past the wing, as meshes/README.md states it."""
    d = p - np.array([0.35, 0.05, 0])
    turn = -10 / (2 * np.pi) / (d**2).sum(axis=1)
    return np.stack([20 - turn * d[:, 1], turn * d[:, 0], 0 * turn], axis=1)


def at_centres(K, function):
    corners = K.faces.flat.reshape(-1, 3) if K.dim == 2 else K.solids["tetra"]
    return function(K.points[corners].mean(axis=1))


def cases():
    annulus, points, cells = sample("annulus.vtu")
    wing, air, _ = sample("wing.vtu")
    elbow, _, _ = sample("elbow.vtu")
    for quantity in ("circulation", "flux"):
        yield "annulus", annulus, points["vortex"], "vertices", quantity
        yield "annulus", annulus, cells["vortex_c"], "cells", quantity
        yield "wing", wing, air["air"], "vertices", quantity
        yield "wing", wing, at_centres(wing, stream), "cells", quantity
        yield "elbow", elbow, harmonic(elbow.points), "vertices", quantity
        yield "elbow", elbow, at_centres(elbow, harmonic), "cells", quantity


def coverage(K, field, at, quantity):
    """Estimate by true defect, round every face or out of every cell."""
    w = integrate_field(K, field, at=at, quantity=quantity)
    estimate = abs(K.coboundary(w.degree)).astype(float) @ rule_error(K, field, at=at, quantity=quantity)
    return estimate / np.maximum(np.abs(w.d().values), 1e-200)


@pytest.mark.parametrize("case", list(cases()), ids=lambda c: "-".join(map(str, (c[0], *c[3:]))))
def test_summed_round_a_face_or_cell_the_estimate_exceeds_the_true_defect(case):
    _, K, field, at, quantity = case
    ratio = coverage(K, field, at, quantity)
    assert (ratio >= 1).mean() >= 0.99
    assert 2 <= np.median(ratio) <= 20


def test_round_holes_and_borders_the_estimate_exceeds_the_true_error():
    K, points, cells = sample("annulus.vtu")
    for at, field in (("vertices", points["vortex"]), ("cells", cells["vortex_c"])):
        w, error = integrate_field(K, field, at=at), rule_error(K, field, at=at)
        for loop in K.boundary_loops():
            true = abs(abs(loop @ w) - 2 * np.pi)
            estimate = np.abs(loop.coefficients) @ error
            assert true <= estimate <= 20 * true


def on_short_numbers(K):
    """The same mesh with coordinates in 1/1024, so that a whole-number matrix makes a field without rounding."""
    points = np.round(K.points * 1024) / 1024
    if K.dim == 3:
        return Complex.from_cells(K.solids, points=points)
    return Complex.from_faces([K.faces.row(f) for f in range(K.counts[2])], points=points)


@pytest.mark.parametrize("offset", [0, 2**20])
def test_for_a_linear_field_the_estimate_is_the_rounding_and_covers_it(offset):
    for K in map(
        on_short_numbers, (delaunay(0, 40), delaunay(0, 20, 3), octagons_and_squares(), hexahedra(jitter=0.2))
    ):
        m = K.points.shape[1]
        field = K.points @ np.random.default_rng(1).integers(-9, 9, (m, m)).astype(float) + offset
        exact_field, exact_points = (np.vectorize(Fraction, otypes=[object])(a) for a in (field, K.points))
        for quantity in ("circulation", "flux"):
            error = rule_error(K, field, quantity=quantity)
            w = integrate_field(K, field, quantity=quantity)
            assert (error > 0).all()
            assert error.max() < 1e-13 * (1 + offset) * 30
            if w.degree == 1:
                step = exact_points[K.head] - exact_points[K.tail]
                left = step if quantity == "circulation" else np.stack([step[:, 1], -step[:, 0]], axis=1)
                exact = ((exact_field[K.head] + exact_field[K.tail]) * left).sum(axis=1) / 2
            else:
                exact = [exact_fan_flux(K.faces.row(f), exact_points, exact_field) for f in range(K.counts[2])]
            assert all(abs(Fraction(a) - b) <= e for a, b, e in zip(w.values, exact, error, strict=True))


def exact_fan_flux(row, points, field):
    total = Fraction(0)
    for i, j in pairwise(row[1:]):
        u, v = points[i] - points[row[0]], points[j] - points[row[0]]
        area = np.array([u[1] * v[2] - u[2] * v[1], u[2] * v[0] - u[0] * v[2], u[0] * v[1] - u[1] * v[0]])
        total += ((field[row[0]] + field[i] + field[j]) * area).sum() / 6
    return total


def test_a_rotation_seen_on_the_flow_sample_stays_within_the_rounding_allowance():
    K, points, _ = sample("elbow.vtu")
    w = integrate_field(K, points["flow"], quantity="flux")
    allowed = abs(K.coboundary(2)).astype(float) @ rule_error(K, points["flow"], quantity="flux")
    assert (np.abs(w.d().values) <= allowed).all()
    assert allowed.max() < 1e-16


def test_a_crease_in_a_cad_part_is_not_taken_for_a_change_of_the_field():
    # the stream is linear in space, so the rule is exact; what is left comes from the curved parts of the skin
    K, points, _ = sample("bracket.vtu")
    w, error = integrate_field(K, points["air"], quantity="flux"), rule_error(K, points["air"], quantity="flux")
    assert error.sum() < 1e-4 * np.abs(w.values).sum()
    plane = np.isin(sample("bracket.vtu")[2]["part"], [1, 2, 4, 5, 6, 10, 12, 13])
    among_planes = np.ones(K.counts[0], dtype=bool)
    among_planes[K.faces.flat.reshape(-1, 3)[~plane]] = False
    away = among_planes[K.faces.flat.reshape(-1, 3)].all(axis=1)
    creased = np.zeros(K.counts[2], dtype=bool)
    part = sample("bracket.vtu")[2]["part"]
    one, two, _ = K.incidences.pairs()
    creased[one[part[one] != part[two]]] = True
    assert (away & creased).sum() > 20
    assert error[away].max() < 1e-12 * np.abs(w.values).max()


def curved(n):
    """A piece of a ring, n by n squares on a bent grid, each cut into two triangles of different shapes."""
    s, t = np.meshgrid(np.linspace(0, 1, n + 1), np.linspace(0, 1, n + 1), indexing="ij")
    radius = 1 + s + 0.1 * np.sin(3 * s + 2 * t)
    points = np.stack([radius * np.cos(t), radius * np.sin(t)], axis=-1).reshape(-1, 2)
    a, b, c, d = grid((n + 1, n + 1)).faces.flat.reshape(-1, 4).T
    return Complex.from_faces(np.concatenate([np.stack([a, b, c], 1), np.stack([a, c, d], 1)]), points=points)


def bent_cubes(n):
    base = grid((n + 1,) * 3, spacing=1 / n)
    x, y, z = base.points.T
    points = np.stack([x + 0.1 * y * z, y + 0.1 * np.sin(2 * x), z + 0.1 * x * y], axis=1)
    return Complex.from_cells(base.solids, points=points)


def vortex(p):
    return np.stack([-p[:, 1], p[:, 0]], axis=1) / (p**2).sum(axis=1)[:, None]


@pytest.mark.parametrize(("at", "order"), [("vertices", 3), ("cells", 2)])
def test_on_half_the_spacing_the_estimate_along_an_edge_falls_by_two_to_its_order(at, order):
    # relative to the value itself, which falls by two, one order less: 4 for data at vertices
    medians = np.empty((3, 2))
    for i, n in enumerate((16, 32, 64)):
        K = curved(n)
        field = vortex(K.points) if at == "vertices" else at_centres(K, vortex)
        for j, quantity in enumerate(("circulation", "flux")):
            medians[i, j] = np.median(rule_error(K, field, at=at, quantity=quantity))
    ratios = medians[:-1] / medians[1:]
    assert (np.abs(np.log2(ratios) - order) < 0.15).all()


@pytest.mark.parametrize(("at", "order"), [("vertices", 4), ("cells", 3)])
def test_on_half_the_spacing_the_estimate_through_a_face_falls_by_two_to_its_order(at, order):
    medians = []
    for n in (4, 8, 16):
        K = bent_cubes(n)
        places = K.points if at == "vertices" else K.points[K.solids["hexahedron"]].mean(axis=1)
        medians.append(np.median(rule_error(K, harmonic(places), at=at, quantity="flux")))
    ratios = np.array(medians[:-1]) / np.array(medians[1:])
    assert (np.abs(np.log2(ratios) - order) < 0.4).all()


def test_hexahedra_and_polygons_are_covered_too():
    K = bent_cubes(8)
    centres = K.points[K.solids["hexahedron"]].mean(axis=1)
    for at, field in (("vertices", harmonic(K.points)), ("cells", harmonic(centres))):
        for quantity in ("circulation", "flux"):
            assert (coverage(K, field, at, quantity) >= 1).mean() >= 0.99
    K = octagons_and_squares(8)
    field = vortex(K.points + 3)
    for quantity in ("circulation", "flux"):
        assert (coverage(K, field, "vertices", quantity) >= 1).mean() >= 0.99


@pytest.mark.parametrize("seed", range(3))
def test_the_estimate_is_what_its_text_says_cell_by_cell(seed):
    random = np.random.default_rng(seed)
    graph = Complex.from_edges([0, 1, 2, 2, 5], [1, 2, 3, 4, 2], points=random.normal(size=(6, 3)))
    for K in (graph, delaunay(seed, 14), icosahedron(), delaunay(seed, 9, 3), hexahedra((2, 1, 1))):
        field = random.normal(size=K.points.shape)
        scale = 10 * np.abs(field).max()
        along = rule_error(K, field)
        expected = [slow.edge_error(K, e, field, turn=False) for e in range(K.counts[1])]
        np.testing.assert_allclose(along, expected, rtol=1e-7, atol=1e-13 * scale)
        if K.dim < 2:
            continue
        flux = rule_error(K, field, quantity="flux")
        if K.points.shape[1] == 2:
            expected = [slow.edge_error(K, e, field, turn=True) for e in range(K.counts[1])]
        else:
            expected = [slow.face_error(K, f, field) for f in range(K.counts[2])]
        np.testing.assert_allclose(flux, expected, rtol=1e-7, atol=1e-13 * scale)


def test_for_cell_data_the_estimate_is_a_quarter_of_the_range_near_by_or_more_at_the_boundary():
    random = np.random.default_rng(5)
    for K, degrees in ((delaunay(1, 14), (1,)), (icosahedron(), (1, 2)), (delaunay(1, 9, 3), (1, 2))):
        cells = random.normal(size=(K.counts[-1], K.points.shape[1]))
        matrix = np.abs(K.coboundary(K.dim - 1).toarray())
        beside = matrix @ matrix.T > 0
        for degree in degrees:
            quantity = "circulation" if degree == 1 else "flux"
            fast = rule_error(K, cells, at="cells", quantity=quantity)
            left = [slow.place(K, b) - slow.place(K, a) for a, b in zip(K.tail, K.head, strict=True)]
            if degree == 2:
                left = [slow.area_vector(K, f) for f in range(K.counts[2])]
            for i, vector in enumerate(left):
                own = meeting(K, degree, i)
                near = np.flatnonzero(beside[own].any(axis=0))
                values = cells[near] @ vector[: cells.shape[1]]
                part = (2 if degree == K.dim - 1 else 1) if at_boundary(K, degree, i) else 0.25
                assert fast[i] == pytest.approx(part * np.ptp(values), rel=1e-9, abs=1e-13)


def at_boundary(K, degree, i):
    lone = np.flatnonzero(K.incidences.uses == 1)
    if degree == K.dim:
        return False
    if degree == K.dim - 1:
        return i in lone
    return any({int(K.tail[i]), int(K.head[i])} <= set(K.faces.row(f).tolist()) for f in lone)


def meeting(K, degree, i):
    if degree == 1:
        return slow.cells_at_edge(K, i)
    return [i] if K.dim == 2 else np.flatnonzero(K.coboundary(2).toarray()[:, i]).tolist()


def test_the_compiled_loops_give_what_the_interpreted_ones_give(monkeypatch):
    K = delaunay(3, 60)
    field = np.random.default_rng(0).normal(size=K.points.shape)
    cells = np.random.default_rng(0).normal(size=(K.counts[2], 2))
    plain = rule_error(K, field), rule_error(K, cells, at="cells")
    monkeypatch.setattr("dec.topology.compiled.SMALL", 0)
    for one, other in zip(plain, (rule_error(K, field), rule_error(K, cells, at="cells")), strict=True):
        np.testing.assert_allclose(one, other, rtol=1e-13, atol=1e-16)
    assert ranges._derivative_ranges.interpreted is not ranges._derivative_ranges


def test_gradients_of_linear_fields_are_their_matrix_on_every_kind_of_cell():
    slope_ = np.random.default_rng(2).normal(size=(3, 3))
    for K in (delaunay(0, 12, 3), hexahedra(jitter=0.2), grid((3, 3, 3), spacing=0.3)):
        found = cell_gradients(K, K.points @ slope_.T + 1e3)
        np.testing.assert_allclose(found.matrices, np.broadcast_to(slope_, found.matrices.shape), atol=1e-9)
    for K in (delaunay(0, 12), octagons_and_squares()):
        found = cell_gradients(K, K.points @ slope_[:2, :2].T)
        np.testing.assert_allclose(
            found.matrices[:, :2, :2], np.broadcast_to(slope_[:2, :2], (K.counts[2], 2, 2)), atol=1e-12
        )
    K = icosahedron()
    found = cell_gradients(K, K.points @ slope_.T)
    along = K.points[K.faces.flat[1::3]] - K.points[K.faces.flat[::3]]
    np.testing.assert_allclose(np.einsum("cij,cj->ci", found.matrices, along), along @ slope_.T, atol=1e-13)
    np.testing.assert_allclose(np.einsum("cij,cj->ci", found.matrices, found.axes), 0, atol=1e-13)


def test_gradients_cross_the_seam_of_a_periodic_grid_and_survive_a_large_constant():
    K = grid((4, 3, 5), spacing=(0.5, 0.25, 2), periodic=True)
    wave = np.array([0.0, 3, 1, -2])
    field = np.zeros((4, 3, 5, 3))
    field[..., 1] = wave[:, None, None]
    found = cell_gradients(K, field.reshape(-1, 3)).matrices.reshape(4, 3, 5, 3, 3)
    expected = np.zeros_like(found)
    expected[..., 1, 0] = ((np.roll(wave, -1) - wave) / 0.5)[:, None, None]
    np.testing.assert_allclose(found, expected, atol=1e-13)
    for K in map(on_short_numbers, (delaunay(0, 12), delaunay(0, 12, 3), hexahedra(jitter=0.2))):
        m = K.points.shape[1]
        found = cell_gradients(K, 3 * K.points + 2.0**40)
        assert np.abs(found.matrices[:, :m, :m] - 3 * np.eye(m)).max() < 1e-9


def test_a_cell_without_extent_does_not_spoil_the_estimate_of_its_neighbours():
    K = delaunay(0, 30)
    field = vortex(K.points + 5)
    faces = np.concatenate([K.faces.flat.reshape(-1, 3), [[0, 1, 30]]])
    points = np.concatenate([K.points, [(K.points[0] + K.points[1]) / 2]])
    more = Complex.from_faces(faces, points=points)
    error = rule_error(more, vortex(points + 5))
    assert np.isfinite(error).all()
    same = {(a, b): e for a, b, e in zip(K.tail.tolist(), K.head.tolist(), rule_error(K, field), strict=True)}
    for a, b, e in zip(more.tail.tolist(), more.head.tolist(), error, strict=True):
        if (a, b) in same:
            assert e == pytest.approx(same[a, b], rel=1e-12)


def test_the_estimate_does_not_change_when_mesh_and_field_are_turned_together():
    K = sample("elbow.vtu")[0]
    field = harmonic(K.points)
    turn = np.linalg.qr(np.random.default_rng(0).normal(size=(3, 3)))[0]
    turned = Complex.from_cells(K.solids, points=K.points @ turn.T)
    for quantity in ("circulation", "flux"):
        one = rule_error(K, field, quantity=quantity)
        np.testing.assert_allclose(rule_error(turned, field @ turn.T, quantity=quantity), one, rtol=1e-6, atol=1e-12)


def test_a_periodic_grid_is_estimated_across_its_seam():
    K = grid((8, 6), periodic=True, spacing=(1 / 8, 1 / 6))
    wave = np.stack([np.cos(2 * np.pi * K.points[:, 0]), 0 * K.points[:, 0]], axis=1)
    error = rule_error(K, wave)[:48].reshape(8, 6)
    assert (np.abs(error - error[:, :1]) < 1e-12).all()
    shifted = rule_error(K, np.roll(wave.reshape(8, 6, 2), 3, axis=0).reshape(-1, 2))[:48].reshape(8, 6)
    np.testing.assert_allclose(shifted, np.roll(error, 3, axis=0), rtol=1e-9, atol=1e-13)
    assert np.isfinite(rule_error(grid((2, 1, 3), periodic=True), np.ones((6, 3)), quantity="flux")).all()


def test_cells_are_listed_where_they_meet():
    K = delaunay(7, 12, 3)
    for degree in range(4):
        offsets, cells = cells_at(K, degree)
        for i in range(K.counts[degree]):
            found = set(cells[offsets[i] : offsets[i + 1]].tolist())
            if degree == 0:
                expected = {c for c, row in enumerate(K.solids["tetra"]) if i in row}
            else:
                expected = {i} if degree == 3 else set(meeting(K, degree, i))
            assert found == expected


def test_a_bad_field_is_refused_as_by_the_rule_itself():
    K = icosahedron()
    with pytest.raises(InputError, match="field has 12 rows of 2"):
        rule_error(K, np.ones((12, 2)))
    with pytest.raises(InputError, match="quantity must be"):
        rule_error(K, np.ones((12, 3)), quantity="work")


def test_a_linear_field_stored_with_32_bits_stays_within_its_allowance():
    K = grid((9, 7), spacing=(0.1, 0.3))
    turning = np.stack([-K.points[:, 1], K.points[:, 0]], axis=1) / 3
    stored = turning.astype(np.float32).astype(np.float64)
    work = np.abs(integrate_field(K, stored).d().values - integrate_field(K, turning).d().values)
    allowed = np.abs(K.coboundary(1)).astype(float) @ rule_error(K, stored)
    exactly = np.abs(K.coboundary(1)).astype(float) @ rule_error(K, turning)
    assert (work <= allowed).all()
    assert (work > exactly).any()


def crowd(kind, n=7):
    """Cells that all meet at one edge, one vertex or one face, more than CROWD once that is lowered."""
    random = np.random.default_rng(n)
    if kind == "fan":
        rim = np.arange(n)
        turn = 2 * np.pi * rim / n
        points = np.concatenate([[[0.3, 0.2]], np.stack([np.cos(turn), np.sin(turn)], axis=1)])
        return Complex.from_faces(np.stack([0 * rim, 1 + rim, 1 + (rim + 1) % n], axis=1), points=points)
    points = random.normal(size=(n + 3, 3))
    if kind == "book":
        return Complex.from_faces([[0, 1, 3 + i] for i in range(n)] + [[0, 1, 2]], points=points)
    if kind == "star":
        return Complex.from_edges([0] * n, [3 + i for i in range(n)], n + 3, points=points)
    return Complex.from_cells({"tetra": [[0, 1, 2, 3 + i] for i in range(n)]}, points=points)


@pytest.mark.parametrize("kind", ["fan", "book", "star", "tetrahedra"])
def test_where_a_crowd_of_cells_meets_the_estimate_is_never_below_the_one_that_looks_at_each(kind, monkeypatch):
    K = crowd(kind)
    random = np.random.default_rng(1)
    places = [("vertices", 0), ("cells", K.dim)] if kind != "star" else [("vertices", 0)]
    for at, degree in places:
        field = random.normal(size=(K.counts[degree], K.points.shape[1]))
        for quantity in ("circulation", "flux") if K.dim > 1 else ("circulation",):
            exact = rule_error(K, field, at=at, quantity=quantity)
            monkeypatch.setattr(ranges, "CROWD", 3)
            bound = rule_error(K, field, at=at, quantity=quantity)
            monkeypatch.undo()
            assert (bound >= exact * (1 - 1e-12)).all()
            assert (bound <= 40 * exact.max()).all()
            if at == "vertices" and kind != "star":
                assert (bound > exact * 1.001).any()  # the other way was taken


def test_in_a_crowd_in_a_plane_the_estimate_of_a_linear_field_stays_rounding(monkeypatch):
    monkeypatch.setattr(ranges, "CROWD", 3)
    K = crowd("fan", 50)
    field = K.points @ np.array([[1.0, 2.0], [-3.0, 0.5]])
    assert rule_error(K, field).max() < 1e-13
    assert rule_error(K, np.ones((50, 2)), at="cells").max() < 1e-13


def test_a_crowd_without_extent_or_out_of_the_direction_has_no_range(monkeypatch):
    monkeypatch.setattr(ranges, "CROWD", 3)
    flat = Complex.from_faces([[0, 1, i] for i in range(2, 9)], points=np.arange(9.0)[:, None] * [1, 0, 0])
    assert rule_error(flat, np.random.default_rng(0).normal(size=(9, 3))).max() < 1e-13
    axes = np.array([[0, 0, 1.0]] * 4)
    at = np.array([0, 4, 8]), np.array([0, 1, 2, 3] * 2)
    up = np.array([[0, 0, 1.0]])
    steps = np.arange(1, 5)[:, None, None] * np.eye(3)
    for is_line, expected in ((False, 0), (True, 3)):
        found = ranges.derivative_ranges(up, up, np.array([[0, 1]]), *at, steps, axes, np.ones(4, bool), is_line)
        assert found.tolist() == [expected]


@pytest.mark.parametrize("at", ["vertices", "cells"])
@pytest.mark.parametrize("kind", ["fan", "book"])
def test_twenty_thousand_cells_at_one_place_are_no_square_of_work(kind, at, monkeypatch):
    """Counted, not timed: the cells that are looked at one by one are as many as the crowd is small."""
    K = crowd(kind, 20_000)
    monkeypatch.setattr(ranges, "_derivative_ranges", seen := Seen(ranges._derivative_ranges))
    monkeypatch.setattr(ranges, "_value_ranges", values := Seen(ranges._value_ranges))
    field = np.random.default_rng(0).normal(size=(K.counts[0 if at == "vertices" else 2], K.points.shape[1]))
    assert np.isfinite(rule_error(K, field, at=at)).all()
    if at == "vertices":
        _, _, ends, offsets = seen.arguments[:4]
        crowded = seen.arguments[9]
        looked_at = np.diff(offsets)[ends][crowded < 0].sum()
    else:
        _, offsets, cells, facet_offsets, facets, around = values.arguments[:6]
        uses = np.where(values.arguments[8] < 0, np.diff(around), 1)
        per_cell = np.add.reduceat(uses[facets], facet_offsets[:-1])
        looked_at = per_cell[cells].sum()
    assert looked_at <= 20 * K.counts[1]


class Seen:
    """Passes a call on and keeps its arguments."""

    def __init__(self, function):
        self.function = function

    def __call__(self, *arguments):
        self.arguments = arguments
        return self.function(*arguments)


@pytest.mark.parametrize("face", [[0, 1, 1, 2], [0, 1, 2, 1], [0, 1, 2, 0, 3, 4]])
def test_a_face_that_repeats_a_corner_has_no_estimate_and_no_audit_holds(face):
    points = np.random.default_rng(0).random((8, 2))
    K = Complex.from_faces([[5, 6, 7], face], points=points)
    with pytest.raises(InputError, match=r"a face must name each corner once, face 1 \(from 0\) has the corners"):
        rule_error(K, points)
    data = Dataset(K, fields={"u": {"vertices": Field("u", "vertices", np.ones((8, 2)))}})
    with pytest.raises(InputError, match="face 1"):
        loops(data, field="u")
    with pytest.raises(InputError, match="face 1"):
        balance(data, field="u")


def test_a_short_closed_grid_repeats_corners_by_right():
    K = grid((1, 3), periodic=True)
    assert np.isfinite(rule_error(K, np.ones((3, 2)))).all()
