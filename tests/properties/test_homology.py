"""What holds of the homology of every complex."""

from hypothesis import given, settings

from dec.calculus.homology_groups import boundary_cells

from .complexes import complexes, dense, slow_rank


@given(complexes())
@settings(deadline=None, max_examples=200)
def test_cycles_are_closed_as_many_as_the_rank_and_no_combination_of_them_bounds(K):
    for k in range(K.dim + 1):
        cycles = K.homology(k).cycles.toarray()
        assert len(cycles) == K.betti()[k]
        if k:
            assert not (cycles @ K.boundary(k).toarray().T.astype(int)).any()
        bounding = dense(K, k) if k < K.dim else []
        assert slow_rank([*bounding, *cycles.tolist()]) == slow_rank(bounding) + len(cycles)


@given(complexes())
@settings(deadline=None, max_examples=200)
def test_homology_relative_to_the_boundary_adds_up_to_the_cells_inside(K):
    ranks = [K.homology(k, relative=True).rank for k in range(K.dim + 1)]
    inside = [int((~mark).sum()) for mark in boundary_cells(K)]
    assert sum((-1) ** k * rank for k, rank in enumerate(ranks)) == sum((-1) ** k * n for k, n in enumerate(inside))
