"""Limits of sums on meshes, the order of their tables, and the walks round holes that the sums run along."""

import numpy as np
import pytest

from dec.audit.meshes.holes import find_holes
from dec.audit.meshes.limits import Limit, Sums, read_limit, table_of, worst_first
from dec.audit.meshes.repeats import repeated_cells
from dec.calculus.complex import Complex

from .mesh_shapes import sample


def sums(value: list[float], gross: list[float], error: list[float], terms: int = 3) -> Sums:
    return Sums(np.array(value), np.array(gross), np.array(error), np.full(len(value), terms))


@pytest.mark.parametrize(
    ("asked", "limit"),
    [
        (None, Limit("rule")),
        (0, Limit("absolute", 0.0)),
        ("2e-3", Limit("absolute", 0.002)),
        (" 5 %", Limit("percent", 5.0)),
        ("1e-2%", Limit("percent", 0.01)),
    ],
)
def test_a_limit_is_a_number_a_percentage_or_the_rule_s_own(asked: float | str | None, limit: Limit):
    assert read_limit(asked) == limit


def test_the_rule_s_limit_allows_a_unit_of_rounding_a_term():
    # an error bound for adding n numbers in any order is (n - 1) u times the sum of magnitudes, u = 2**-53:
    # Higham, Accuracy and Stability of Numerical Algorithms, 2nd ed. 2002, section 4.2 (from memory)
    found = Limit("rule").of(sums([0.0, 0.0], [1.0, 1024.0], [0.0, 0.5]))
    assert found[0] == 3 * 2.0**-52
    assert found[1] > 0.5


def test_rows_come_by_share_of_their_limit_and_unknown_values_last():
    value = np.array([1.0, -8.0, np.nan, 0.0, 3.0])
    assert worst_first(value, np.array([1.0, 2.0, 1.0, 1.0, 1.0])).tolist() == [1, 4, 0, 3, 2]
    without = np.array([np.nan, np.nan, np.nan, 1.0, 4.0])
    assert worst_first(value, without).tolist() == [4, 3, 1, 0, 2]


def test_beyond_a_limit_of_zero_comes_first_and_an_exact_zero_does_not():
    value, limit = np.array([0.0, 5.0, 2.0, -7.0]), np.array([0.0, 1.0, 0.0, 0.0])
    assert worst_first(value, limit).tolist() == [3, 2, 1, 0]


def test_a_value_on_its_limit_holds_and_an_unknown_one_does_not():
    table = table_of(
        np.arange(3), sums([2.0, -2.5, np.nan], [1.0] * 3, [0.0] * 3), np.full(3, 2.0), np.zeros((3, 3))
    )  # fmt: skip
    assert dict(zip(table["id"].tolist(), table["holds"].tolist(), strict=True)) == {0: True, 1: False, 2: False}


def test_a_row_that_is_not_judged_has_neither_limit_nor_verdict():
    table = table_of(
        np.arange(2), sums([9.0, 1.0], [1.0] * 2, [0.0] * 2), np.full(2, 2.0), np.zeros((2, 3)),
        judged=np.array([False, True]),
    )  # fmt: skip
    assert table["id"].tolist() == [1, 0]
    assert table["holds"].tolist() == [True, None]
    assert np.isnan(table["limit"]).tolist() == [False, True]


def test_a_limit_far_wider_than_usual_is_told_with_its_place():
    share = [1e-6] * 9 + [0.3]
    (note,) = Limit("rule").doubts(sums([0.0] * 10, [1.0] * 10, share), "cell")
    assert note.startswith(
        "the limit is widest at cell 9, 30 % of what the field there could give, the median being 0.0001 %"
    )
    assert Limit("rule").doubts(sums([0.0] * 10, [1.0] * 10, [0.3] * 10), "cell") == []
    assert Limit("rule").doubts(sums([0.0] * 10, [0.0] * 10, [0.0] * 10), "cell") == []


def test_values_a_little_beyond_an_estimated_limit_are_told_apart_from_faults():
    (note,) = Limit("rule").doubts(sums([0.15, 0.05], [1.0] * 2, [0.1] * 2), "face")
    assert note.startswith("1 face beyond the limit, none by a factor of 2")
    assert Limit("rule").doubts(sums([0.15, 0.25], [1.0] * 2, [0.1] * 2), "face") == []
    assert Limit("rule").doubts(sums([0.05, 0.05], [1.0] * 2, [0.1] * 2), "face") == []


def test_a_limit_below_the_rule_s_own_error_is_told():
    (note,) = Limit("percent", 1.0).doubts(sums([0.0] * 3, [1.0] * 3, [0.02, 0.001, 0.02]), "face")
    assert note.startswith("at 2 of 3 faces the integration rule's own estimated error is larger than the limit")
    assert Limit("absolute", 0.1).doubts(sums([0.0] * 3, [1.0] * 3, [0.02, 0.001, 0.02]), "face") == []


@pytest.mark.parametrize("mirrored", [False, True])
def test_walks_round_the_holes_of_a_plane_mesh_run_counter_clockwise_from_edge_to_edge(mirrored: bool):
    K = sample("annulus.vtu").complex
    if mirrored:
        K = Complex.from_faces(K.faces.flat.reshape(-1, 3), points=K.points * [-1.0, 1.0])
    walks = find_holes(K, 1).walks
    corners = []
    for edge, sign in zip(walks.edges.tolist(), walks.signs.tolist(), strict=True):
        corners.append((int(K.tail[edge]), int(K.head[edge]))[::sign])
    assert [a for a, _ in corners[1:]] + [corners[0][0]] == [b for _, b in corners]
    turns = sum(
        np.arctan2(np.linalg.det([K.points[a], K.points[b]]), K.points[a] @ K.points[b]) for a, b in corners
    )  # fmt: skip
    assert turns == pytest.approx(2 * np.pi)


def test_repeats_are_found_whatever_their_corners_start_with_or_turn_to():
    faces = [[0, 1, 2], [1, 3, 2], [2, 1, 0], [3, 4, 5, 2], [1, 2, 3]]
    assert repeated_cells(Complex.from_faces(faces)).tolist() == [[0, 2], [1, 4]]
    assert repeated_cells(Complex.from_faces(faces[:2])).tolist() == []
