"""Pairs of cells taken away: what is left, and that chains completed by them have no paired facet in their boundary."""

import numpy as np
import pytest

from dec.calculus.complex import Complex, grid
from dec.topology.reductions import Rows, follow, pair_off

from .known_spaces import heap, house_with_two_rooms, pseudo_projective_plane, surface_of_genus, telescope


def coboundaries(K):
    return tuple(K.coboundary(k) for k in range(K.dim))


def left(K):
    layers = pair_off(coboundaries(K))
    return [int((layers[0].mate < 0).sum()), *(int(layer.left.sum()) for layer in layers)]


def test_as_few_cells_are_left_as_can_be_on_grids_and_closed_surfaces():
    assert left(grid((5, 4, 3))) == [1, 0, 0, 0]
    assert left(grid((5, 4, 3), periodic=True)) == [1, 3, 3, 1]
    assert left(surface_of_genus(5)) == [1, 10, 1]
    assert left(Complex.from_edges([0, 1, 2, 4], [1, 2, 0, 5])) == [3, 1]


def test_a_house_that_nothing_can_be_taken_from_still_loses_most_of_its_cells():
    points, edges, faces = left(house_with_two_rooms())
    assert points == 1
    assert edges == faces > 0


EXAMPLES = [
    grid((3, 3, 3), periodic=True), house_with_two_rooms(), pseudo_projective_plane(4), heap(60, 12), telescope(9),
    Complex.from_cells({"tetra": np.random.default_rng(0).integers(0, 6, (9, 4))}),
]  # fmt: skip


@pytest.mark.parametrize("K", EXAMPLES, ids=repr)
def test_every_pair_meets_once_no_cell_is_in_two_and_later_pairs_alone_can_follow(K):
    layers = pair_off(coboundaries(K))
    for k, layer in enumerate(layers):
        sides = K.coboundary(k).toarray().astype(int)
        facets = np.flatnonzero(layer.mate >= 0)
        order = facets[np.argsort(layer.turn[facets])]
        square = sides[np.ix_(layer.mate[order], order)]
        assert (np.abs(np.diag(square)) == 1).all()
        assert not np.tril(square, -1).any()
        assert len(set(layer.mate[facets].tolist())) == len(facets)
        taken = layers[k + 1].mate >= 0 if k + 1 < len(layers) else np.zeros(len(sides), dtype=bool)
        mates = np.isin(np.arange(len(sides)), layer.mate[facets])
        assert (taken.astype(int) + mates + layer.left == 1).all()


@pytest.mark.parametrize("K", EXAMPLES, ids=repr)
@pytest.mark.parametrize("kind", [np.int64, object])
def test_a_completed_chain_has_the_boundary_that_is_returned_and_no_paired_facet_in_it(K, kind):
    for k, layer in enumerate(pair_off(coboundaries(K))):
        cells = np.flatnonzero(layer.left)
        start = Rows(cells, np.ones(len(cells), kind), np.arange(len(cells) + 1))
        chains, rims = follow(layer, start)
        assert len(chains) == len(rims) == len(cells)
        matrix = K.coboundary(k).toarray().astype(int)
        for row, cell in enumerate(cells.tolist()):
            chain, rim = np.zeros(len(matrix), int), np.zeros(matrix.shape[1], int)
            for rows, full in ((chains, chain), (rims, rim)):
                span = slice(rows.offsets[row], rows.offsets[row + 1])
                np.add.at(full, rows.cells[span], rows.values[span].astype(int))
            assert chain[cell] == 1
            assert (chain @ matrix == rim).all()
            assert not rim[layer.mate >= 0].any()


def test_numbers_that_leave_int64_are_carried_on_in_integers_of_any_size():
    K = telescope(70, last=True)
    layer = pair_off(coboundaries(K))[1]
    cells = np.flatnonzero(layer.left)
    _, rims = follow(layer, Rows(cells, np.ones(len(cells), np.int64), np.arange(len(cells) + 1)))
    assert max(map(abs, rims.values.tolist())) == 2**70
