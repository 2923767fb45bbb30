"""Polygons: rows of corners, edges, and the walk round each face."""

from collections import Counter

import numpy as np
import pytest

from dec.errors import InputError, TopologyError
from dec.topology.polygons import edges_of_faces, face_coboundary, ragged, standard_loops


def slow_face_coboundary(faces):
    """Walk round each face, side by side, with dictionaries; edges from low to high vertex in lexicographic order."""
    sides = [[(a, b) for a, b in zip(f, f[1:] + f[:1], strict=True) if a != b] for f in faces]
    edges = sorted({(min(side), max(side)) for face in sides for side in face})
    rows = []
    for face in sides:
        count = Counter()
        for a, b in face:
            count[edges.index((min(a, b), max(a, b)))] += 1 if a < b else -1
        rows.append([count[e] for e in range(len(edges))])
    return edges, rows


def fast_face_coboundary(faces, n_vertices):
    tail, head, walks = edges_of_faces(ragged(faces, "face"), n_vertices)
    matrix = face_coboundary(walks, len(tail))
    return list(zip(tail.tolist(), head.tolist(), strict=True)), matrix.toarray().tolist()


def test_a_face_walks_its_corners_in_order_and_counts_minus_one_against_an_edge():
    tail, head, walks = edges_of_faces(ragged([[2, 0, 1]], "face"), 3)
    # edges are numbered from the low to the high vertex, in lexicographic order: 01, 02, 12
    assert list(zip(tail.tolist(), head.tolist(), strict=True)) == [(0, 1), (0, 2), (1, 2)]
    # the walk is 2 -> 0 -> 1 -> 2: against 02, along 01, along 12
    assert walks.edges.tolist() == [1, 0, 2]
    assert walks.signs.tolist() == [-1, 1, 1]
    assert face_coboundary(walks, 3).toarray().tolist() == [[1, -1, 1]]


def test_a_face_turned_round_has_the_opposite_row():
    _, one = fast_face_coboundary([[0, 1, 2, 3]], 4)
    _, other = fast_face_coboundary([[3, 2, 1, 0]], 4)
    assert one == [[1, -1, 1, 1]]
    assert other == [[-1, 1, -1, -1]]


@pytest.mark.parametrize("width", [3, 4, 5])
def test_faces_of_one_length_agree_with_walking_them_one_by_one(width):
    random = np.random.default_rng(width)
    faces = [random.permutation(12)[:width].tolist() for _ in range(40)]
    assert fast_face_coboundary(faces, 12) == slow_face_coboundary(faces)
    assert fast_face_coboundary(np.array(faces), 12) == slow_face_coboundary(faces)


def test_faces_of_mixed_length_agree_with_walking_them_one_by_one():
    random = np.random.default_rng(1)
    faces = [random.permutation(12)[: random.integers(3, 7)].tolist() for _ in range(40)]
    assert fast_face_coboundary(faces, 12) == slow_face_coboundary(faces)


def test_degenerate_faces_agree_with_walking_them_one_by_one():
    random = np.random.default_rng(2)
    for width in (3, 4, None):
        faces = [random.integers(0, 4, width or random.integers(3, 8)).tolist() for _ in range(60)]
        assert fast_face_coboundary(faces, 4) == slow_face_coboundary(faces)


def test_an_edge_walked_both_ways_has_no_entry_and_one_walked_twice_alike_counts_twice():
    edges, rows = fast_face_coboundary([[0, 1, 2, 1], [0, 1, 2, 0, 1, 3]], 4)
    assert edges == [(0, 1), (0, 2), (0, 3), (1, 2), (1, 3)]
    assert rows == [[0, 0, 0, 0, 0], [2, -1, -1, 1, 1]]


def test_a_list_of_rows_and_an_array_of_them_are_the_same():
    array = np.array([[0, 1, 2], [2, 1, 3]])
    for rows in (
        array,
        array.tolist(),
        list(array),
        [tuple(r) for r in array],
        array.astype(np.uint16),
        array.astype(object),
    ):
        given = ragged(rows, "face")
        assert given.flat.tolist() == [0, 1, 2, 2, 1, 3]
        assert given.offsets.tolist() == [0, 3, 6]
        assert given.width == 3
        assert given.flat.dtype == np.int64


def test_rows_know_their_lengths_numbers_and_following_entries():
    rows = ragged([[5, 6, 7], [], [8, 9]], "face")
    assert len(rows) == 3
    assert rows.lengths.tolist() == [3, 0, 2]
    assert rows.rows.tolist() == [0, 0, 0, 2, 2]
    assert rows.following().tolist() == [6, 7, 5, 9, 8]
    assert rows.row(2).tolist() == [8, 9]
    assert rows.width is None


@pytest.mark.parametrize("rows", [[], np.empty((0, 3), np.int64), np.empty((0, 0), np.int64), np.empty((0, 3))])
def test_no_rows_are_no_faces(rows):
    tail, head, walks = edges_of_faces(ragged(rows, "face"), 4)
    assert len(tail) == len(head) == len(walks) == 0
    assert face_coboundary(walks, 0).shape == (0, 0)


def test_rows_of_unsigned_and_signed_numbers_mix_without_rounding():
    rows = [np.array([0, 1, 2**62], np.uint64), [3, 4, 2**62 + 1]]
    assert ragged(rows, "face").flat.tolist() == [0, 1, 2**62, 3, 4, 2**62 + 1]


@pytest.mark.parametrize(
    ("rows", "message"),
    [
        ([[0, 1, 2], [0, 1, 2.0]], r"face 1 must be a row of whole numbers, got \[0, 1, 2.0\]"),
        ([[0, 1, [2]]], r"face 0 must be a row of whole numbers"),
        ([[0, 1, 2], [0, 1, 2**64]], r"face 1 must be a row of whole numbers"),
        ([0, 1, 2], "face 0 must be a row of whole numbers, got 0"),
        ("abc", "face 0 must be a row of whole numbers, got 'a'"),
        (5, r"faces must be given as an \(n, k\) array or a list of rows, got 5"),
        (np.array([0, 1, 2]), r"faces must be given as an \(n, k\) array or a list of rows, got shape \(3,\)"),
        (np.zeros((1, 3)), "faces must hold whole numbers, got float64"),
        ([np.array([0, 1, 2**63], np.uint64)], "face 0 must be a row of whole numbers"),
    ],
)
def test_rows_that_are_no_rows_of_whole_numbers_are_named_in_one_line(rows, message):
    with pytest.raises(InputError, match=message) as caught:
        ragged(rows, "face")
    assert "\n" not in str(caught.value)


@pytest.mark.parametrize(
    ("faces", "message"),
    [
        ([[0, 1, 2], [0, 1]], r"face 1 must have at least three corners, got \[0, 1\]"),
        ([[0, 1, 2], [1, 2, 3, 4]], "face 1 names vertex 4; there are vertices 0 .. 3"),
        ([[0, -1, 2]], "face 0 names vertex -1"),
    ],
)
def test_faces_with_bad_corners_are_named(faces, message):
    with pytest.raises(TopologyError, match=message):
        edges_of_faces(ragged(faces, "face"), 4)


def slow_standard_loop(loop):
    ways = [(loop[i:] + loop[:i], 1) for i in range(len(loop))]
    ways += [(way[::-1], -1) for way, _ in ways]
    return min(ways, key=lambda way: (way[0], -way[1]))


@pytest.mark.parametrize("width", [3, 4, 5])
@pytest.mark.parametrize("n_values", [3, 20])
def test_a_loop_is_written_the_least_way_however_it_is_given(width, n_values):
    random = np.random.default_rng(width)
    loops = random.integers(0, n_values, (200, width))
    standard, sign = standard_loops(loops)
    for row, loop in enumerate(loops.tolist()):
        expected, direction = slow_standard_loop(loop)
        assert standard[row].tolist() == expected
        if expected not in [(expected[::-1][i:] + expected[::-1][:i]) for i in range(width)]:  # else both ways are one
            assert sign[row] == direction
