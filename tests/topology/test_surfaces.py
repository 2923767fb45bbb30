"""Sheets and their orientation, fans of faces, boundary walks: by hand and by trying every way."""

import itertools

import numpy as np
import pytest

from dec.calculus.complex import Complex
from dec.topology.surfaces import Incidences, reversing_walk, sheets

MOEBIUS = [[0, 1, 2], [1, 2, 3], [2, 3, 4], [3, 4, 0], [4, 0, 1]]


def neighbours(faces):
    """Pairs of faces at every edge used exactly twice, and whether they walk it the same way."""
    uses = {}
    for index, face in enumerate(faces):
        for a, b in zip(face, face[1:] + face[:1], strict=True):
            uses.setdefault(frozenset((a, b)), []).append((index, a < b))
    return [(u[0][0], u[1][0], u[0][1] == u[1][1]) for u in uses.values() if len(u) == 2]


def sheets_one_by_one(faces):
    group = [{i} for i in range(len(faces))]
    for one, two, _ in neighbours(faces):
        merged = group[one] | group[two]
        for i in merged:
            group[i] = merged
    return sorted({frozenset(g) for g in group}, key=min)


def ways_to_turn(faces, members):
    """Every set of faces of a sheet whose turning makes neighbours walk their edges opposite ways."""
    pairs = [(one, two, alike) for one, two, alike in neighbours(faces) if one in members]
    for turned in itertools.product((False, True), repeat=len(members)):
        turn = dict(zip(members, turned, strict=True))
        if all((turn[one] != turn[two]) == alike for one, two, alike in pairs):
            yield turned


@pytest.mark.parametrize("seed", range(40))
def test_sheets_and_their_orientation_agree_with_trying_every_way_to_turn_the_faces(seed):
    random = np.random.default_rng(seed)
    faces = [random.permutation(6)[: random.integers(3, 5)].tolist() for _ in range(8)]
    found = Complex.from_faces(faces).sheets
    expected = sheets_one_by_one(faces)
    assert [set(np.flatnonzero(found.label == i).tolist()) for i in range(found.count)] == [set(s) for s in expected]
    for number, sheet in enumerate(expected):
        members = sorted(sheet)
        ways = list(ways_to_turn(faces, members))
        assert found.is_orientable[number] == bool(ways)
        if ways:
            assert tuple((found.sign[members] < 0).tolist()) in ways
            assert found.sign[members[0]] == 1
            assert sum(int(i) in sheet for i in found.fewest_turns()) == min(sum(way) for way in ways)
        else:
            assert not found.sign[members].any()


def test_two_faces_that_use_their_edge_alike_are_turned_against_each_other():
    two = Incidences.of(np.array([0, 0]), np.array([0, 1]), np.array([1, 1], np.int8), 1, 2)
    assert sheets(two).sign.tolist() == [1, -1]
    opposite = Incidences.of(np.array([0, 0]), np.array([0, 1]), np.array([1, -1], np.int8), 1, 2)
    assert sheets(opposite).sign.tolist() == [1, 1]


def assert_reverses(faces, walk):
    """Carry a face round the walk, turning each next one to fit, and see it come back turned over."""
    assert walk[0] == walk[-1]
    loop = faces[walk[0]]
    for nxt in walk[1:]:
        sides = set(zip(loop, loop[1:] + loop[:1], strict=True))
        candidates = []
        for turned in (faces[nxt], faces[nxt][::-1]):
            others = set(zip(turned, turned[1:] + turned[:1], strict=True))
            if any((b, a) in others for a, b in sides):
                candidates.append(turned)
        assert len(candidates) == 1
        loop = candidates[0]
    first = faces[walk[0]]
    assert loop in [first[::-1][i:] + first[::-1][:i] for i in range(len(first))]


def test_the_witness_walk_of_a_moebius_strip_comes_back_turned_over():
    K = Complex.from_faces(MOEBIUS)
    walk = K.reversing_loop().tolist()
    assert len(walk) == 6
    assert_reverses(MOEBIUS, walk)


def test_a_projective_plane_glued_to_a_sphere_names_a_walk_in_the_projective_plane_only():
    sphere = [[10, 11, 12], [10, 13, 11], [11, 13, 12], [12, 13, 10]]
    plane = [
        [0, 1, 2],
        [0, 2, 3],
        [0, 1, 5],
        [0, 4, 5],
        [0, 3, 4],
        [1, 2, 4],
        [1, 3, 4],
        [1, 3, 5],
        [2, 3, 5],
        [2, 4, 5],
    ]
    K = Complex.from_faces(sphere + plane)
    walk = K.reversing_loop().tolist()
    assert min(walk) >= 4
    assert_reverses(sphere + plane, walk)
    assert K.is_orientable is False


def test_the_witness_walk_is_empty_where_everything_can_be_turned_alike():
    assert Complex.from_faces([[0, 1, 2], [1, 2, 3]]).reversing_loop().tolist() == []


def loops_of(faces):
    """Boundary loops as lists of (tail, head) in walking order."""
    K = Complex.from_faces(faces)
    walks = K.boundary_walks()
    loops = []
    for a, b in itertools.pairwise(walks.offsets.tolist()):
        steps = zip(walks.edges[a:b], walks.signs[a:b], strict=True)
        loops.append([(int(K.tail[e]), int(K.head[e]))[:: int(s)] for e, s in steps])
    return loops


def test_a_boundary_loop_sets_out_along_its_lowest_edge_the_way_the_face_walks():
    assert loops_of([[0, 1, 2]]) == [[(0, 1), (1, 2), (2, 0)]]
    assert loops_of([[0, 2, 1]]) == [[(1, 0), (0, 2), (2, 1)]]
    assert loops_of([[0, 1, 2], [0, 2, 3]]) == [[(0, 1), (1, 2), (2, 3), (3, 0)]]


def test_the_boundary_of_coherent_faces_is_the_sum_of_their_boundary_loops():
    K = Complex.from_faces([[0, 1, 4, 3], [1, 2, 5, 4], [3, 4, 7, 6]])
    total = sum(loop.coefficients for loop in K.boundary_loops())
    assert total.tolist() == K.region([0, 1, 2]).boundary().coefficients.tolist()


def test_a_ring_has_two_boundary_loops_and_the_moebius_strip_one_of_five_edges():
    ring = [[i, (i + 1) % 4, 4 + (i + 1) % 4, 4 + i] for i in range(4)]
    assert [len(loop) for loop in loops_of(ring)] == [4, 4]
    assert [len(loop) for loop in loops_of(MOEBIUS)] == [5]
    assert all(loop.is_closed for loop in Complex.from_faces(MOEBIUS).boundary_loops())


def test_two_triangles_that_touch_at_a_vertex_have_a_boundary_loop_each():
    assert loops_of([[0, 1, 2], [0, 3, 4]]) == [[(0, 1), (1, 2), (2, 0)], [(0, 3), (3, 4), (4, 0)]]


def test_a_boundary_that_touches_itself_goes_on_round_the_same_fan_of_faces():
    # a strip of triangles bent round until its ends touch at vertex 0: one loop that comes by vertex 0 twice
    strip = [[0, 1, 2], [1, 3, 2], [2, 3, 4], [3, 5, 4], [4, 5, 0]]
    assert loops_of(strip) == [[(0, 1), (1, 3), (3, 5), (5, 0), (0, 4), (4, 2), (2, 0)]]


def test_where_three_faces_share_an_edge_open_stretches_are_left_out():
    book = [[0, 1, 2], [0, 1, 3], [0, 1, 4]]
    assert loops_of(book) == []
    assert loops_of([*book, [7, 8, 9]]) == [[(7, 8), (8, 9), (9, 7)]]


def test_no_faces_have_no_sheets_and_no_boundary():
    K = Complex.from_faces([], 3)
    assert K.sheets.count == 0
    assert K.boundary_loops() == []


def test_faces_round_a_vertex_of_degree_200_form_one_fan():
    faces = [[0, i, i % 200 + 1] for i in range(1, 201)]
    K = Complex.from_faces(faces)
    assert K.is_manifold
    assert [len(loop) for loop in loops_of(faces)] == [200]


def test_of_two_ways_to_turn_as_few_faces_the_one_that_keeps_the_lowest_is_proposed():
    assert Complex.from_faces([[0, 1, 2], [0, 1, 3]]).turning_proposal().tolist() == [1]
    four = Complex.from_faces([[0, 1, 2], [1, 2, 3], [2, 3, 4], [3, 4, 5]])
    assert four.turning_proposal().tolist() == [1, 3]


def test_no_walk_reverses_a_face_of_an_orientable_sheet():
    K = Complex.from_faces([[0, 1, 2], [2, 1, 3]])
    assert reversing_walk(K.incidences, 0).tolist() == []
