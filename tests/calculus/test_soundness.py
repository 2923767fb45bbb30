"""One planted fault for every finding, and nothing repaired."""

from itertools import pairwise

import numpy as np
import pytest

from dec.calculus.complex import Complex, grid
from dec.calculus.soundness import repeating_cells

MOEBIUS = [[0, 1, 2], [1, 2, 3], [2, 3, 4], [3, 4, 0], [4, 0, 1]]


def failed(K):
    return {f.name: f for f in K.check() if not f.holds}


def arrays_of(K):
    return [K.tail.copy(), K.head.copy(), K.faces.flat.copy(), K.walks.edges.copy(), K.walks.signs.copy()]


@pytest.mark.parametrize(
    "K",
    [
        Complex.from_edges([0, 1], [1, 2]),
        Complex.from_faces([[0, 1, 2], [2, 1, 3]]),
        Complex.from_faces([[0, 1, 2], [5, 3, 4]]),  # two parts are a fact, not a fault
        Complex.from_faces([[0, 2, 1], [0, 1, 3], [1, 2, 3], [0, 3, 2]]),
        Complex.from_cells({"tetra": [[0, 1, 2, 3], [1, 2, 3, 4]]}),
        grid((3, 3, 3)),
        grid((3, 3), periodic=True),
    ],
)
def test_a_sound_complex_has_findings_that_all_hold(K):
    findings = K.check()
    assert findings
    for f in findings:
        assert (f.holds, f.where, f.allowed, f.measured) == (True, (), 0, 0)


@pytest.mark.parametrize(
    ("faces", "expected"),
    [
        # an edge used twice the same way: the faces are turned against each other
        ([[0, 1, 2], [0, 1, 3]], {"neighbouring faces are turned alike": (1, ((0, 1),))}),
        ([[0, 1, 2], [0, 1, 3], [1, 0, 4]], {"edges have at most two faces": (1, ((0, 1),))}),
        ([[0, 1, 2], [0, 3, 4]], {"the faces at a vertex form one fan": (1, (0,))}),
        (
            [[0, 1, 2], [2, 1, 3], [1, 3, 1]],
            {"no face repeats a corner": (1, (2,)), "edges have at most two faces": (1, ((1, 3),))},
        ),
        # given again from another corner: every edge is used twice the same way
        (
            [[0, 1, 2], [3, 4, 5], [1, 2, 0]],
            {"no face is given twice": (1, (2,)), "neighbouring faces are turned alike": (3, ((0, 1), (0, 2), (1, 2)))},
        ),
        ([[0, 1, 2], [3, 4, 5], [2, 1, 0]], {"no face is given twice": (1, (2,))}),
        ([[0, 1, 3]], {"every vertex is used": (1, (2,))}),
    ],
)
def test_every_planted_fault_of_a_surface_is_found_and_placed(faces, expected):
    found = failed(Complex.from_faces(faces))
    assert {name: (f.measured, f.where) for name, f in found.items()} == expected


def test_quads_on_the_same_corners_in_another_order_are_different_faces():
    K = Complex.from_faces([[0, 1, 2, 3], [0, 2, 1, 3]])
    assert "no face is given twice" not in failed(K)
    assert failed(Complex.from_faces([[0, 1, 2, 3], [2, 1, 0, 3]]))["no face is given twice"].where == (1,)


def test_every_planted_fault_of_a_solid_is_found_and_placed():
    K = Complex.from_cells({"tetra": [[0, 1, 2, 3], [1, 2, 3, 4], [3, 2, 1, 5]]})
    assert failed(K)["faces have at most two cells"].measured == 1
    face = [K.faces.row(i).tolist() for i in range(K.counts[2])].index([1, 2, 3])
    assert failed(K)["faces have at most two cells"].where == (face,)
    K = Complex.from_cells({"tetra": [[0, 1, 2, 3], [1, 3, 2, 4]]})  # the second is inside out
    assert failed(K)["neighbouring cells are turned alike"].measured == 1
    K = Complex.from_cells({"tetra": [[0, 1, 2, 3], [3, 4, 5, 6]]})
    assert failed(K)["the cells at a vertex form one fan"].where == (3,)
    K = Complex.from_cells({"tetra": [[0, 1, 2, 3], [4, 5, 5, 6]]})
    assert failed(K)["no cell repeats a corner"].where == (1,)
    K = Complex.from_cells({"tetra": [[0, 1, 2, 3], [2, 3, 0, 1]]})
    assert failed(K)["no cell is given twice"].where == (1,)
    K = Complex.from_cells({"tetra": [[0, 1, 2, 4]]})
    assert failed(K)["every vertex is used"].where == (3,)


def test_a_moebius_strip_is_recognised_with_a_walk_that_reverses():
    K = Complex.from_faces(MOEBIUS)
    finding = failed(K)["the faces can all be turned alike"]
    assert finding.measured == 1
    walk = list(finding.where)
    assert walk[0] == walk[-1]
    # carry the orientation from face to face: it comes back turned over
    sign = 1
    rows = K.coboundary(1).toarray().astype(int)
    for one, two in pairwise(walk):
        shared = np.flatnonzero(rows[one] * rows[two])
        assert len(shared) == 1
        sign *= -int(rows[one, shared[0]] * rows[two, shared[0]])
    assert sign == -1
    assert K.is_orientable is False


def test_dangling_edges_do_not_make_the_faces_at_a_vertex_several_fans():
    K = Complex.from_edges([0, 1, 2, 0], [1, 2, 0, 3]).with_faces("triangles")
    assert failed(K) == {}
    assert not K.is_manifold


def test_vertices_are_named_by_their_ids():
    K = Complex.from_edges([0], [1], vertex_ids=["A", "B", "C"])
    assert failed(K)["every vertex is used"].where == ("C",)
    two = Complex.from_edges([0, 1, 2, 0, 3, 4], [1, 2, 0, 3, 4, 0], vertex_ids=list("PQRST")).with_faces("triangles")
    assert failed(two)["the faces at a vertex form one fan"].where == ("P",)
    alike = Complex.from_edges([0, 1, 2, 1, 3], [1, 2, 0, 3, 0], vertex_ids=list("PQRS"))
    K = alike.with_faces([[0, 1, 2], [0, 1, 3]])
    assert failed(K)["neighbouring faces are turned alike"].where == (("P", "Q"),)


@pytest.mark.parametrize("seed", range(10))
def test_turning_the_proposed_faces_makes_them_all_alike_and_check_changes_nothing(seed):
    random = np.random.default_rng(seed)
    faces = grid((6, 6), periodic=(True, False)).faces.flat.reshape(-1, 4).copy()
    turned = random.random(len(faces)) < random.uniform(0, 1)
    faces[turned] = faces[turned, ::-1]
    K = Complex.from_faces(faces)
    before = arrays_of(K)
    proposal = K.turning_proposal()
    assert ("neighbouring faces are turned alike" in failed(K)) == (0 < turned.sum() < len(faces))
    assert all(np.array_equal(a, b) for a, b in zip(before, arrays_of(K), strict=True))
    assert len(proposal) == min(turned.sum(), len(faces) - turned.sum())
    faces[proposal] = faces[proposal, ::-1]
    assert failed(Complex.from_faces(faces)) == {}


@pytest.mark.parametrize("seed", range(5))
def test_turning_the_proposed_tetrahedra_makes_them_all_alike(seed):
    random = np.random.default_rng(seed)
    cells = np.array([[0, 1, 2, 3], [1, 2, 3, 4], [2, 3, 4, 5], [3, 4, 5, 6], [4, 5, 6, 7]])
    # a strip of tetrahedra, each turned at will
    flip = random.random(5) < 0.5
    cells[flip] = cells[flip][:, [1, 0, 2, 3]]
    proposal = Complex.from_cells({"tetra": cells}).turning_proposal()
    cells[proposal] = cells[proposal][:, [1, 0, 2, 3]]
    assert "neighbouring cells are turned alike" not in failed(Complex.from_cells({"tetra": cells}))


@pytest.mark.parametrize(
    ("K", "is_manifold"),
    [
        (Complex.from_edges([0, 1, 2], [1, 2, 0]), True),
        (Complex.from_edges([0, 1], [1, 2], 9), True),  # unused vertices do not matter
        (Complex.from_edges([0, 0, 0], [1, 2, 3]), False),
        (Complex.from_edges([0, 0], [0, 1]), False),
        (Complex.from_faces([[0, 1, 2], [2, 1, 3]]), True),
        (Complex.from_faces(MOEBIUS), True),
        (Complex.from_faces([[0, 1, 2], [0, 3, 4]]), False),
        (Complex.from_faces([[0, 1, 2], [0, 1, 3], [1, 0, 4]]), False),
        (Complex.from_cells({"tetra": [[0, 1, 2, 3], [1, 2, 3, 4]]}), True),
        (Complex.from_cells({"tetra": [[0, 1, 2, 3], [2, 3, 4, 5]]}), False),  # an edge in common
        (Complex.from_cells({"tetra": [[0, 1, 2, 3], [3, 4, 5, 6]]}), False),  # a vertex in common
        (Complex.from_cells({"tetra": [[0, 1, 2, 3], [1, 2, 3, 4], [1, 2, 3, 5]]}), False),
        (Complex.from_cells({"hexahedron": grid((4, 4, 4)).solids["hexahedron"]}), True),
        (Complex.from_cells({"hexahedron": grid((4, 4, 4)).solids["hexahedron"][[0, 13]]}), False),
    ],
)
def test_a_manifold_is_told_from_what_is_none(K, is_manifold):
    assert K.is_manifold is is_manifold


def test_the_cone_over_a_torus_is_no_manifold_though_every_face_and_edge_is_in_order():
    torus = grid((4, 4), periodic=True).faces.flat.reshape(-1, 4)
    triangles = np.concatenate([torus[:, [0, 1, 2]], torus[:, [0, 2, 3]]])
    cone = Complex.from_cells({"tetra": np.column_stack([np.full(len(triangles), 16), triangles])})
    assert [name for name in failed(cone) if "alike" not in name] == []
    assert not cone.is_manifold  # the link of the apex is a torus, of Euler characteristic 0


def test_orientability_is_not_answered_where_three_faces_meet():
    assert Complex.from_faces([[0, 1, 2], [0, 1, 3], [1, 0, 4]]).is_orientable is None


@pytest.mark.parametrize("face", [[0, 1, 1, 2], [0, 1, 2, 1], [0, 1, 2, 0, 3, 4], [0, 1, 1]])
def test_a_face_that_repeats_a_corner_is_a_finding_and_makes_no_manifold(face):
    K = Complex.from_faces([face])
    assert failed(K)["no face repeats a corner"].where == (0,)
    assert not K.is_manifold
    assert repeating_cells(Complex.from_faces([[5, 6, 7], face])).tolist() == [1]


def test_a_solid_cell_that_repeats_a_corner_makes_no_manifold_and_a_short_closed_grid_is_one_all_the_same():
    K = Complex.from_cells({"tetra": [[4, 5, 5, 6], [0, 1, 2, 3]], "hexahedron": [[0, 1, 2, 3, 4, 5, 6, 6]]})
    assert repeating_cells(K).tolist() == [0, 2]
    assert not K.is_manifold
    short = grid((2, 2), periodic=True)
    assert repeating_cells(short).tolist() == []
    assert short.is_manifold
    assert repeating_cells(Complex.from_edges([0, 0], [0, 1])).tolist() == []
