"""Homology as users meet it: known spaces, cycles that close and bound nothing, groups relative to the boundary."""

import numpy as np
import pytest

from dec.calculus.complex import Complex, grid
from dec.calculus.homology_groups import boundary_cells
from dec.errors import InputError, TopologyError

from .known_spaces import (
    faces_along_words,
    heap,
    house_with_two_rooms,
    lens_space,
    pseudo_projective_plane,
    solid_with_voids_and_tunnels,
    surface_of_genus,
    telescope,
    triangles_of_random_corners,
    wrapped_polygons,
)
from .slow_smith import homology, smith

MOEBIUS = Complex.from_faces([[0, 1, 2], [1, 2, 3], [2, 3, 4], [3, 4, 0], [4, 0, 1]])
# From memory; Munkres, Elements of Algebraic Topology, 1984, sections 6, 8, 9 and 40.
KNOWN = {
    "torus": (grid((4, 5), periodic=True), "Z, Z^2, Z"),
    "torus of three dimensions": (grid((3, 4, 3), periodic=True), "Z, Z^3, Z^3, Z"),
    "surface of genus 5": (surface_of_genus(5), "Z, Z^10, Z"),
    "Moebius strip": (MOEBIUS, "Z, Z, 0"),
    "projective plane": (pseudo_projective_plane(2), "Z, Z/2, 0"),
    "pseudo-projective plane of order 3": (pseudo_projective_plane(3), "Z, Z/3, 0"),
    "pseudo-projective plane of order 4": (pseudo_projective_plane(4), "Z, Z/4, 0"),
    "pseudo-projective plane of order 12": (pseudo_projective_plane(12), "Z, Z/12, 0"),
    "three of them as single polygons": (wrapped_polygons([4, 6, 9]), "Z^3, Z/6 + Z/36, 0"),
    "telescope with a closed end": (telescope(70, last=True), f"Z, Z/{2**70}, 0"),
    "telescope": (telescope(5), "Z, Z, 0"),
    "house with two rooms": (house_with_two_rooms(), "Z, 0, 0"),
    "lens space (3, 1)": (lens_space(3, 1), "Z, Z/3, 0, Z"),
    "lens space (5, 2)": (lens_space(5, 2), "Z, Z/5, 0, Z"),
    "solid with two voids and a tunnel": (solid_with_voids_and_tunnels(), "Z, Z, Z^2, 0"),
    "graph": (Complex.from_edges([0, 0, 1, 2, 3], [1, 1, 2, 0, 3], 5), "Z^3, Z^3"),
    "no cells but vertices": (Complex.from_edges([], [], 2), "Z^2, 0"),
    "nothing": (Complex.from_edges([], [], 0), "0, 0"),
}


@pytest.mark.parametrize("name", KNOWN)
def test_known_spaces_have_their_homology(name):
    K, groups = KNOWN[name]
    assert ", ".join(str(K.homology(k)) for k in range(K.dim + 1)) == groups
    assert K.betti() == tuple(K.homology(k).rank for k in range(K.dim + 1))


def test_the_house_with_two_rooms_has_no_edge_to_begin_a_collapse_from():
    assert house_with_two_rooms().incidences.uses.min() == 2


def test_lens_spaces_are_closed_and_orientable():
    K = lens_space(3, 1)
    assert (K.is_manifold, K.is_orientable, int(K.incidences.uses.min())) == (True, True, 2)


@pytest.mark.parametrize("name", KNOWN)
@pytest.mark.parametrize("relative", [False, True])
def test_cycles_of_known_spaces_are_closed_and_a_basis(name, relative):
    K = KNOWN[name][0]
    assert_cycles_close(K, relative)
    if sum(K.counts) < 500:
        assert_as_dense(K, relative)


@pytest.mark.parametrize("seed", range(25))
def test_random_complexes_have_the_homology_and_the_cycles_of_dense_elimination(seed):
    for K in (faces_along_words(seed), triangles_of_random_corners(18 + seed, 8, seed), heap(4 + seed, 8, seed)):
        for relative in (False, True):
            assert_cycles_close(K, relative)
            assert_as_dense(K, relative)


def inside(K, relative):
    marks = boundary_cells(K)
    return [~mark if relative else np.ones(len(mark), dtype=bool) for mark in marks]


def assert_cycles_close(K, relative):
    kept = inside(K, relative)
    for k in range(K.dim + 1):
        H = K.homology(k, relative=relative)
        assert H.cycles.dtype == np.int64
        assert H.cycles.shape == (H.rank, K.counts[k])
        assert not H.cycles[:, ~kept[k]].data.any()
        if k:
            boundary = (H.cycles @ K.boundary(k).T.astype(np.int64)).tocsc()
            assert not boundary[:, kept[k - 1]].data.any()
        for i in range(H.rank):
            assert (H.chain(i).coefficients == H.cycles[[i]].toarray()[0]).all()


def assert_as_dense(K, relative):
    """Ranks and torsion; and boundaries with the cycles leave no more torsion, so that the cycles generate the rest."""
    kept = inside(K, relative)
    matrices = [K.coboundary(k)[kept[k + 1]][:, kept[k]] for k in range(K.dim)]
    groups = [K.homology(k, relative=relative) for k in range(K.dim + 1)]
    assert [(H.rank, H.torsion) for H in groups] == homology(matrices, [int(mark.sum()) for mark in kept])
    for k, H in enumerate(groups):
        bounding = matrices[k].toarray().tolist() if k < K.dim else []
        factors = smith(bounding + H.cycles.toarray()[:, kept[k]].tolist())
        assert len(factors) == len(smith(bounding)) + H.rank
        assert tuple(d for d in factors if d > 1) == H.torsion


MANIFOLDS = [grid((4, 3, 3)), solid_with_voids_and_tunnels(), grid((6, 5)), lens_space(3, 1)]


@pytest.mark.parametrize("K", MANIFOLDS, ids=repr)
def test_what_closes_relative_to_the_boundary_is_dual_to_what_closes(K):
    """Lefschetz duality on orientable manifolds. Source: Munkres, 1984, section 70 (from memory)."""
    n = K.dim
    for k in range(n + 1):
        H = K.homology(k, relative=True)
        assert H.rank == K.homology(n - k).rank
        assert H.torsion == (K.homology(n - k - 1).torsion if k < n else ())


def test_a_cycle_relative_to_the_boundary_is_a_wall_from_rim_to_rim():
    rows, columns = 4, 9
    number = np.arange(rows * columns).reshape(rows, columns)
    ring = np.stack([number[:-1], np.roll(number, -1, 1)[:-1], np.roll(number, -1, 1)[1:], number[1:]], -1)
    K = Complex.from_faces(ring.reshape(-1, 4))
    H = K.homology(1, relative=True)
    assert repr(H) == "<Homology of degree 1 relative to the boundary: Z>"
    ends = H.chain(0).boundary().coefficients
    assert sorted(np.abs(ends).tolist())[-3:] == [0, 1, 1]
    assert ends[:columns].sum() == -ends[-columns:].sum() != 0


def test_the_boundary_of_a_graph_is_where_one_edge_ends():
    K = Complex.from_edges([0, 1, 1, 3], [1, 2, 2, 3], 5)
    assert boundary_cells(K)[0].tolist() == [True, False, False, False, False]
    assert [str(K.homology(k, relative=True)) for k in (0, 1)] == ["Z^2", "Z^2"]


def test_coefficients_that_a_chain_cannot_hold_are_refused_and_the_rank_is_known():
    K = telescope(60, first=True, last=True)
    assert K.homology(2).rank == 1
    with pytest.raises(TopologyError, match=r"degree 2 has a coefficient of 2\*\*53 or more; the rank is right"):
        _ = K.homology(2).cycles
    assert int(np.abs(telescope(40, first=True, last=True).homology(2).cycles.data).max()) == 2**40


def test_a_wrong_degree_is_refused_and_the_cycles_are_read_only():
    K = grid((3, 3), periodic=True)
    with pytest.raises(InputError, match=r"degree must be 0 \.\. 2 for a complex of dimension 2, got 3"):
        K.homology(3)
    with pytest.raises(ValueError, match="read-only"):
        K.homology(1).cycles.data[0] = 7
    with pytest.raises(IndexError):
        K.homology(1).chain(2)


def test_the_same_cycles_are_found_at_every_run():
    one, other = (surface_of_genus(3).homology(1).cycles for _ in range(2))
    assert (one != other).nnz == 0
