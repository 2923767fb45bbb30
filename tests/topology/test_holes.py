"""The walks round the holes of a surface close, are as many as the first Betti number, and are independent."""

from collections.abc import Callable
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from dec.calculus.complex import Complex, grid
from dec.topology.holes import hole_walks
from dec.topology.polygons import Walks

# Moebius 1886 / Csaszar 1949: the torus on seven vertices, cyclic. Hemi-icosahedron: the projective plane on six.
SEVEN_VERTEX_TORUS = [((i, i + 1, i + 3), (i, i + 3, i + 2)) for i in range(7)]
TORUS = np.array(SEVEN_VERTEX_TORUS).reshape(-1, 3) % 7
PROJECTIVE = np.array(
    [
        [0, 1, 2], [0, 2, 3], [0, 3, 4], [0, 4, 5], [0, 5, 1],
        [1, 2, 4], [2, 3, 5], [3, 4, 1], [4, 5, 2], [5, 1, 3],
    ]
)  # fmt: skip
SPHERE = np.array([[1, 2, 3], [0, 3, 2], [0, 1, 3], [0, 2, 1]])
PIECES = {"torus": TORUS, "projective": PROJECTIVE, "sphere": SPHERE}


def pairs(walks: Walks) -> list[tuple[int, int]]:
    return list(zip(walks.offsets[:-1].tolist(), walks.offsets[1:].tolist(), strict=True))


def walks_of(K: Complex) -> Walks | None:
    return hole_walks(K.tail, K.head, K.incidences, K.sheets, K.forest, K.boundary_walks())


def rows_of(walks: Walks, n_edges: int) -> list[list[int]]:
    rows = np.zeros((len(walks), n_edges), dtype=np.int64)
    np.add.at(rows, (np.repeat(np.arange(len(walks)), np.diff(walks.offsets)), walks.edges), walks.signs)
    return rows.tolist()


def dense_rank(rows: list[list[int]]) -> int:
    """The rank over the rationals: Gaussian elimination in Fractions."""
    left = [{c: Fraction(v) for c, v in enumerate(row) if v} for row in rows]
    left = [row for row in left if row]
    rank = 0
    while left:
        pivot = left.pop()
        rank += 1
        column = next(iter(pivot))
        kept = []
        for row in left:
            factor = row.get(column, Fraction(0)) / pivot[column]
            reduced = {c: row.get(c, 0) - factor * pivot.get(c, 0) for c in row | pivot} if factor else row
            kept.append({c: v for c, v in reduced.items() if v})
        left = [row for row in kept if row]
    return rank


def assert_is_basis(K: Complex) -> Walks:
    """The walks run along from edge to edge, close, and span what the faces leave open, once each."""
    walks = walks_of(K)
    assert walks is not None
    for a, b in pairs(walks):
        at = first = None
        for edge, sign in zip(walks.edges[a:b].tolist(), walks.signs[a:b].tolist(), strict=True):
            start, end = (K.tail[edge], K.head[edge])[::sign]
            first = start if first is None else first
            assert at is None or start == at
            at = end
        assert at == first
    loops = rows_of(walks, K.counts[1])
    differences, faces = K.coboundary(0).toarray().tolist(), K.coboundary(1).toarray().tolist()
    rank = dense_rank(faces)
    assert len(walks) == K.counts[1] - dense_rank(differences) - rank == K.betti()[1]
    assert dense_rank(faces + loops) == rank + len(walks)
    return walks


def glued(one: np.ndarray, two: np.ndarray) -> np.ndarray:
    """The connected sum: the last face of one and the first of two go, and their corners become one."""
    shift = int(one.max()) + 1
    two = two + shift
    for mine, other in zip(one[-1].tolist(), two[0, [0, 2, 1]].tolist(), strict=True):
        two = np.where(two == other, mine, two)
    return np.concatenate([one[:-1], two[1:]])


def compact(faces: np.ndarray) -> np.ndarray:
    return np.unique(faces, return_inverse=True)[1].reshape(faces.shape)


@st.composite
def surfaces(draw: Callable) -> Complex:
    """Sums of tori, projective planes and spheres, one or two, with faces out, corners joined, faces turned over."""
    parts = []
    for _ in range(draw(st.integers(1, 2))):
        names = draw(st.lists(st.sampled_from(sorted(PIECES)), min_size=1, max_size=3))
        part = PIECES[names[0]]
        for name in names[1:]:
            part = glued(part, PIECES[name])
        part = compact(part)
        gone = draw(st.sets(st.integers(0, len(part) - 1), max_size=3))
        parts.append(np.delete(part, sorted(gone), axis=0))
    faces, shift = parts[0], int(parts[0].max()) + 1
    for part in parts[1:]:
        other = part + shift
        if draw(st.booleans()):  # the parts touch in one corner
            other = np.where(other == other.max(), 0, other)
        faces = np.concatenate([faces, other])
    faces = compact(faces)
    turned = np.array(draw(st.lists(st.booleans(), min_size=len(faces), max_size=len(faces))))
    faces = np.where(turned[:, None], faces[:, ::-1], faces)
    number = np.array(draw(st.permutations(range(int(faces.max()) + 1))))
    return Complex.from_faces(number[faces])


@given(surfaces())
@settings(max_examples=60, deadline=None)
def test_loops_are_a_basis_of_what_faces_do_not_fill(surface: Complex):
    assert_is_basis(surface)


@pytest.mark.parametrize("genus", [1, 2, 4])
def test_a_closed_surface_of_genus_g_has_2g_holes(genus: int):
    faces = TORUS
    for _ in range(genus - 1):
        faces = compact(glued(faces, TORUS))
    assert len(assert_is_basis(Complex.from_faces(faces))) == 2 * genus


@pytest.mark.parametrize("caps", [1, 2, 3, 5])
def test_a_closed_one_sided_surface_of_k_caps_has_k_minus_one_holes(caps: int):
    faces = PROJECTIVE
    for _ in range(caps - 1):
        faces = compact(glued(faces, PROJECTIVE))
    surface = Complex.from_faces(faces)
    assert not surface.is_orientable
    assert len(assert_is_basis(surface)) == caps - 1


@pytest.mark.parametrize(
    ("shape", "periodic"),
    [((1, 1), True), ((1, 2), True), ((2, 2), True), ((2, 3), (True, False)), ((1, 3), (True, False)), ((4, 4), False)],
)
def test_self_loops_and_parallel_edges_of_small_periodic_grids_are_covered(shape: tuple[int, int], periodic: bool):
    assert_is_basis(grid(shape, periodic=periodic))


def test_a_moebius_strip_has_one_hole():
    faces = [[i, i + 1, i + 6, i + 5] for i in range(4)] + [[4, 5, 0, 9]]
    assert len(assert_is_basis(Complex.from_faces(faces))) == 1


def test_loops_of_a_graph_without_faces_are_its_cycle_space():
    network = Complex.from_edges([0, 0, 1, 2, 3, 3], [1, 1, 2, 0, 4, 4]).with_faces([[0, 1, 2]][:0])
    assert len(assert_is_basis(network)) == 3


def test_a_filled_triangle_on_a_graph_fills_its_loop():
    network = Complex.from_edges([0, 1, 2, 2], [1, 2, 0, 3]).with_faces("triangles")
    assert len(assert_is_basis(network)) == 0


def test_holes_of_a_plate_are_the_rims_inside_its_outline():
    plate = grid((6, 8))
    faces = plate.faces.flat.reshape(-1, 4)
    gone = [8, 10, 12, 22, 26]  # of 5 by 7 squares, none at the outline, no two that touch
    walks = assert_is_basis(Complex.from_faces(np.delete(faces, gone, axis=0)))
    K = Complex.from_faces(np.delete(faces, gone, axis=0))
    rims = [set(K.tail[walks.edges[a:b]]) | set(K.head[walks.edges[a:b]]) for a, b in pairs(walks)]
    assert sorted(map(sorted, rims)) == sorted(sorted(face) for face in faces[gone].tolist())


def test_a_torus_with_two_faces_out_has_one_rim_and_two_loops():
    walks = assert_is_basis(Complex.from_faces(np.delete(TORUS, [0, 9], axis=0)))
    assert len(walks) == 3
    assert walks.offsets[1] == 3


def test_edges_of_three_faces_are_left_to_others():
    assert walks_of(Complex.from_faces([[0, 1, 2], [0, 1, 3], [0, 1, 4]])) is None


def test_loops_of_a_long_thin_torus_are_the_two_shortest():
    walks = walks_of(grid((40, 4), periodic=True))
    assert walks is not None
    assert sorted(np.diff(walks.offsets).tolist()) == [4, 40]


@pytest.mark.parametrize("side", [12, 60])
def test_loops_of_a_torus_wind_round_it_in_independent_ways(side: int):
    # steps across the two seams are closed and no gradients: their sums over the loops count turns, for both the
    # plain and the compiled kernels
    K = grid((side, side), periodic=True)
    walks = walks_of(K)
    assert walks is not None
    loops = np.array(rows_of(walks, K.counts[1]))
    half = side * side
    seam_0 = np.zeros(K.counts[1], np.int64)
    seam_0[half - side : half] = 1
    seam_1 = np.zeros(K.counts[1], np.int64)
    seam_1[half + side - 1 :: side] = 1
    faces = K.coboundary(1).astype(np.int64)
    assert not (faces @ seam_0).any()
    assert not (faces @ seam_1).any()
    turns = loops @ np.stack([seam_0, seam_1], axis=1)
    assert abs(turns[0, 0] * turns[1, 1] - turns[0, 1] * turns[1, 0]) == 1


def test_compiled_and_plain_kernels_find_the_same_loops(monkeypatch: pytest.MonkeyPatch):
    from dec.topology import compiled

    plain = walks_of(grid((20, 20), periodic=True))
    monkeypatch.setattr(compiled, "SMALL", 0)
    machine = walks_of(grid((20, 20), periodic=True))
    assert plain is not None
    assert machine is not None
    assert plain.edges.tolist() == machine.edges.tolist()
    assert plain.signs.tolist() == machine.signs.tolist()
