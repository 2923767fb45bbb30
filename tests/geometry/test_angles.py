"""Corner angles and angle defects."""

import json
from pathlib import Path

import numpy as np
import pytest
from hypothesis import assume, given, settings

from dec.calculus.complex import Complex, grid
from dec.errors import InputError
from dec.geometry.angles import angle_defects, corner_angles
from dec.geometry.measures import edge_lengths

from . import slow
from .shapes import icosahedron, polygon_soups, sample, triangle_soups

G5 = json.loads((Path(__file__).parents[1] / "reference" / "G5.json").read_text(encoding="utf-8"))


def genus_six():
    """The skin of a slab of 13 by 3 cubes with six through holes, in triangles; made here."""
    solid = {(x, y) for x in range(13) for y in range(3)} - {(x, 1) for x in range(1, 13, 2)}
    quads = []
    for x, y in solid:
        quads += [[(x, y, 0), (x, y + 1, 0), (x + 1, y + 1, 0), (x + 1, y, 0)]]
        quads += [[(x, y, 1), (x + 1, y, 1), (x + 1, y + 1, 1), (x, y + 1, 1)]]
        walls = {
            (1, 0): ((1, 0), (1, 1)),
            (-1, 0): ((0, 1), (0, 0)),
            (0, 1): ((1, 1), (0, 1)),
            (0, -1): ((0, 0), (1, 0)),
        }
        for (dx, dy), ((ax, ay), (bx, by)) in walls.items():
            if (x + dx, y + dy) not in solid:
                a, b = (x + ax, y + ay), (x + bx, y + by)
                quads.append([(*a, 0), (*b, 0), (*b, 1), (*a, 1)])
    number = {}
    loops = [[number.setdefault(v, len(number)) for v in quad] for quad in quads]
    return [t for a, b, c, d in loops for t in ([a, b, c], [a, c, d])], len(number)


def test_the_icosahedron_lacks_a_third_of_pi_at_every_vertex():
    # G5: Descartes (from memory)
    defects = angle_defects(icosahedron())
    np.testing.assert_allclose(defects, np.pi / 3, rtol=1e-14)
    assert defects.sum() == pytest.approx(4 * np.pi, abs=G5["tolerance"])


@pytest.mark.parametrize("name", list(G5["euler"]))
def test_defects_add_up_to_two_pi_times_euler_for_any_points(name):
    # G5: Banchoff 1967 (from memory); face lists with their source in tests/reference/G5.json
    random = np.random.default_rng(5)
    for _ in range(20):
        points = random.normal(size=(9, 3))
        faces = np.array(G5["faces"][name])
        used = np.unique(faces, return_inverse=True)[1].reshape(faces.shape)
        K = Complex.from_faces(used, points=points[: used.max() + 1])
        assert K.euler == G5["euler"][name]
        assert angle_defects(K).sum() == pytest.approx(2 * np.pi * G5["euler"][name], abs=G5["tolerance"])


def test_a_closed_surface_of_genus_six_lacks_minus_twenty_pi():
    # G5 (from memory), on a surface of our own
    faces, n = genus_six()
    K = Complex.from_faces(faces, points=np.random.default_rng(1).normal(size=(n, 3)))
    assert (K.euler, K.is_orientable, K.is_manifold) == (-10, True, True)
    assert angle_defects(K).sum() == pytest.approx(-20 * np.pi, abs=G5["tolerance"])


@settings(deadline=None)
@given(triangle_soups())
def test_defects_add_up_on_any_triangles_even_three_at_an_edge(K):
    assume(edge_lengths(K).min() > 1e-3)
    assert angle_defects(K).sum() == pytest.approx(2 * np.pi * K.euler, abs=1e-10)


def test_defects_add_up_on_samples_with_boundary():
    for name in ("annulus.vtu", "wing.vtu", "torus.off"):
        K = sample(name)[0]
        assert angle_defects(K).sum() == pytest.approx(2 * np.pi * K.euler, abs=1e-10)


def test_a_straight_boundary_and_a_flat_inside_lack_nothing():
    K = grid((4, 4))
    corners = [0, 3, 12, 15]
    defects = angle_defects(K)
    assert defects[corners].tolist() == [np.pi / 2] * 4
    assert not np.delete(defects, corners).any()
    assert not angle_defects(grid((4, 5), spacing=(0.1, 3), periodic=True)).any()


@settings(deadline=None)
@given(polygon_soups())
def test_corner_angles_of_ragged_polygons_are_those_by_arc_cosine(K):
    gaps = np.linalg.norm(K.points[:, None] - K.points[None], axis=2) + np.eye(len(K.points))
    assume(gaps.min() > 1e-2)
    fast, expected = corner_angles(K), slow.angles(K)
    near = np.minimum(np.abs(fast - expected), np.abs(2 * np.pi - fast - expected))
    assert near.max() < 1e-6
    # which side is the inner one is beyond doubt where the corner is far from straight along the area vector
    areas = np.array([slow.area_vector(K, f) for f in K.faces.rows])
    before = np.concatenate([np.roll(K.faces.row(f), 1) for f in range(K.counts[2])])
    u = K.points[K.faces.following()] - K.points[K.faces.flat]
    v = K.points[before] - K.points[K.faces.flat]
    sure = np.abs(np.einsum("ij,ij->i", np.cross(u, v), areas)) > 1e-6
    assert np.abs(fast - expected)[sure].max(initial=0) < 1e-6


def test_a_reflex_corner_has_more_than_pi():
    K = Complex.from_faces([[0, 1, 2, 3]], points=[[0, 0], [2, 1], [0, 2], [0.5, 1]])
    angles = corner_angles(K)
    assert angles[3] > np.pi
    assert angles.sum() == pytest.approx(2 * np.pi, abs=1e-14)
    turned = Complex.from_faces([[3, 2, 1, 0]], points=K.points)
    np.testing.assert_allclose(corner_angles(turned)[::-1], angles, rtol=1e-15)


def test_a_needle_keeps_its_small_angle():
    # arc cosine would give 0 or 2.1e-8
    K = Complex.from_faces([[0, 1, 2]], points=[[0, 0], [1, 0], [1, 1e-9]])
    assert corner_angles(K)[0] == pytest.approx(1e-9, rel=1e-12)


def test_angle_defects_are_refused_on_a_graph():
    with pytest.raises(InputError, match="belong to a surface, this complex has dimension 1"):
        angle_defects(grid(3))
