"""Entries of the inverse and resistances: against exact inverses, dense ones and known resistances."""

from fractions import Fraction
from types import SimpleNamespace

import numpy as np
import pytest
from scipy.sparse import coo_array, csc_array, random_array
from scipy.sparse.linalg import splu
from scipy.spatial import Delaunay

from dec.errors import InputError
from dec.solvers import selected_inverse as module
from dec.solvers.selected_inverse import resistances, selected_inverse

EPS = np.finfo(np.float64).eps


def factored(matrix, order="MMD_AT_PLUS_A"):
    return splu(csc_array(matrix), permc_spec=order, diag_pivot_thresh=0.0, options={"SymmetricMode": True})


def laplacian(tail, head, n, weight, dtype=np.float64):
    """Without the row and column of vertex 0, which is grounded."""
    i, j = np.concatenate([tail, head, tail, head]), np.concatenate([tail, head, head, tail])
    values = np.concatenate([weight, weight, -weight, -weight])
    if dtype is object:
        dense = np.zeros((n, n), dtype=object)
        np.add.at(dense, (i, j), values)
        return dense[1:, 1:]
    return coo_array((values, (i, j)), shape=(n, n)).tocsc()[1:, 1:]


def grid(k):
    i = np.arange(k * k).reshape(k, k)
    tail = np.concatenate([i[:, :-1].ravel(), i[:-1].ravel()])
    return tail, np.concatenate([i[:, 1:].ravel(), i[1:].ravel()]), k * k


def planar(n):
    triangles = Delaunay(np.random.default_rng(n).random((n, 2))).simplices
    pairs = np.sort(np.concatenate([triangles[:, :2], triangles[:, 1:], triangles[:, ::2]]), axis=1)
    tail, head = np.unique(pairs, axis=0).T.astype(np.int64)
    return tail, head, n


def tree(n):
    random = np.random.default_rng(n)
    return (random.random(n - 1) * np.arange(1, n)).astype(np.int64), np.arange(1, n), n


def star(n):
    return np.full(n - 1, n - 1), np.arange(n - 1), n


def complete(n):
    tail, head = np.triu_indices(n, 1)
    return tail, head, n


def hub(n):
    """A complete part, and many vertices joined to two of it: short columns whose rows lie in long ones."""
    tail, head, _ = complete(n)
    leaf = n + np.arange(2 * n)
    return np.concatenate([tail, leaf % n, (leaf + 1) % n]), np.concatenate([head, leaf, leaf]), 3 * n


def doubled(n):
    """Parallel edges, and a part of its own that hangs on the ground too."""
    tail, head, k = grid(n)
    return np.concatenate([tail, tail[:5], [0, k]]), np.concatenate([head, head[:5], [k, k + 1]]), k + 2


GRAPHS = {"grid": grid(6), "planar": planar(30), "tree": tree(30), "star": star(30), "complete": complete(20),
          "hub": hub(9), "doubled": doubled(4)}  # fmt: skip


def weights(m, decades, seed=0):
    """Dyadic, log-uniform over 10^-decades .. 10^decades."""
    values = 10.0 ** np.random.default_rng(seed).uniform(-decades, decades, m)
    return np.round(values * 2.0**30) / 2.0**30


def exact_inverse(tail, head, n, weight):
    """Fraction-free Gauss-Jordan elimination in integers (Bareiss, Math. Comp. 22, 1968); the entries are Fractions."""
    whole = np.array([int(w * 2**30) for w in weight.tolist()], dtype=object)
    table = np.hstack([laplacian(tail, head, n, whole, object), np.eye(n - 1, dtype=int).astype(object)])
    before = 1
    for k in range(n - 1):
        pivot, row, column = table[k, k], table[k].copy(), table[:, k].copy()
        table = (pivot * table - np.outer(column, row)) // before
        table[k] = row
        before = pivot
    determinant = table[0, 0]
    return np.array([[Fraction(int(x) * 2**30, int(determinant)) for x in line] for line in table[:, n - 1 :]])


def of_pairs(inverse, start, end):
    """Resistances from an exact inverse; row -1 is the ground."""
    padded = np.pad(inverse, (0, 1), constant_values=Fraction(0))
    return padded[start, start] + padded[end, end] - 2 * padded[start, end]


def errors(values, exact):
    return np.array([abs(float(Fraction(v) - x)) for v, x in zip(values.tolist(), exact.tolist(), strict=True)])


@pytest.mark.parametrize("decades", [0, 1, 6])
@pytest.mark.parametrize("name", GRAPHS)
def test_entries_and_resistances_meet_the_exact_inverse(name, decades):
    tail, head, n = GRAPHS[name]
    weight = weights(len(tail), decades)
    matrix = laplacian(tail, head, n, weight)
    factor = factored(matrix)
    exact = exact_inverse(tail, head, n, weight)
    X = selected_inverse(factor)
    i, j = X.nonzero()
    size = np.abs(exact.astype(np.float64))
    # first-order effect of a rounded diagonal (Higham, Accuracy and Stability of Numerical Algorithms, section 7.1)
    bound = 4 * EPS * (size * matrix.diagonal()) @ size + 8 * EPS * size
    assert (errors(X[i, j], exact[i, j]) <= bound[i, j]).all()
    for start, end in ((tail - 1, head - 1), (head - 1, tail - 1), (np.arange(n - 1), np.full(n - 1, -1))):
        resistance, doubt = resistances(factor, start, end)
        assert (errors(resistance, of_pairs(exact, start, end)) <= doubt).all()


@pytest.mark.parametrize("graph", [grid(30), planar(400), tree(500), star(400), complete(100), hub(60)])
def test_entries_agree_with_a_dense_inverse_on_the_pattern_of_the_factor(graph):
    tail, head, n = graph
    matrix = laplacian(tail, head, n, weights(len(tail), 1))
    factor = factored(matrix)
    X = selected_inverse(factor)
    dense = np.linalg.inv(matrix.toarray())
    i, j = X.nonzero()
    np.testing.assert_allclose(X[i, j], dense[i, j], rtol=1e-10)
    place = factor.perm_c
    lower = factor.L.toarray()[np.ix_(place, place)] != 0
    assert np.array_equal(X.toarray() != 0, lower | lower.T)
    assert not ((matrix.toarray() != 0) & (X.toarray() == 0)).any()


def test_any_positive_definite_matrix_will_do():
    for seed in range(20):
        S = random_array((60, 60), density=0.05, rng=np.random.default_rng(seed)) - 0.3 * random_array(
            (60, 60), density=0.05, rng=np.random.default_rng(seed + 100)
        )
        matrix = (S @ S.T).toarray() + np.eye(60)
        X = selected_inverse(factored(matrix))
        i, j = X.nonzero()
        np.testing.assert_allclose(X[i, j], np.linalg.inv(matrix)[i, j], rtol=1e-9, atol=1e-12)


@pytest.mark.parametrize("n", [5, 40, 150])
def test_every_resistance_of_a_complete_graph_is_two_over_n(n):  # Klein and Randic 1993, from memory
    tail, head, _ = complete(n)
    resistance, doubt = resistances(factored(laplacian(tail, head, n, np.ones(len(tail)))), tail - 1, head - 1)
    assert (errors(resistance, np.full(len(tail), Fraction(2, n))) <= doubt).all()
    assert doubt.max() < 1e-12


@pytest.mark.parametrize("decades", [0, 3, 6])
@pytest.mark.parametrize("graph", [tree(3000), star(3000), (np.arange(2999), np.arange(1, 3000), 3000)])
def test_an_edge_of_a_tree_resists_as_if_alone_and_edges_in_line_add_up(graph, decades):
    tail, head, n = graph
    if tail[0] > head[0]:  # the star's middle is the ground
        tail, head = np.zeros(n - 1, np.int64), np.arange(1, n)
    weight = weights(n - 1, decades, 1)
    factor = factored(laplacian(tail, head, n, weight))
    own = np.array([1 / Fraction(w) for w in weight.tolist()])
    resistance, doubt = resistances(factor, tail - 1, head - 1)
    assert (errors(resistance, own) <= doubt).all()
    to_ground = np.zeros(n)  # a sum of up to 3,000 floats: exact to 3,000 eps
    for a, b, r in zip(tail.tolist(), head.tolist(), own.astype(float).tolist(), strict=True):
        to_ground[b] = to_ground[a] + r
    resistance, doubt = resistances(factor, np.arange(n - 1), np.full(n - 1, -1))
    assert (np.abs(resistance - to_ground[1:]) <= doubt + n * EPS * to_ground[1:]).all()


def test_conductance_times_resistance_adds_up_to_the_edges_of_a_tree():
    tail, head, n = grid(50)
    weight = weights(len(tail), 2)
    resistance, doubt = resistances(factored(laplacian(tail, head, n, weight)), tail - 1, head - 1)
    total = weight @ resistance  # Foster, The average impedance of an electrical network, 1949; from memory
    assert abs(total - (n - 1)) <= weight @ doubt + n * EPS * n
    assert np.median(doubt / resistance) < 1e-12
    assert (weight * resistance <= 1 + weight * doubt).all()


def test_a_ground_that_hardly_conducts_is_told_by_the_doubt():
    tail, head, n = grid(6)
    weight = np.where((tail == 0) | (head == 0), 2.0**-30, weights(len(tail), 1))
    exact = of_pairs(exact_inverse(tail, head, n, weight), tail - 1, head - 1)
    resistance, doubt = resistances(factored(laplacian(tail, head, n, weight)), tail - 1, head - 1)
    lost = errors(resistance, exact)
    assert lost.max() > 1e-9
    assert (lost <= doubt).all()


def test_no_doubt_falls_short_where_two_vertices_decide_it_in_many_places():
    k = 3000  # light edges from the ground, a heavy one at the end of each
    light, heavy = weights(k, 0.3), 1e6 * weights(k, 0.3, 1)
    tail = np.concatenate([np.zeros(k, np.int64), np.arange(1, k + 1)])
    weight = np.concatenate([light, heavy])
    factor = factored(laplacian(tail, np.arange(1, 2 * k + 1), 2 * k + 1, weight))
    resistance, doubt = resistances(factor, np.full(k, -1), np.arange(k))
    lost = errors(resistance, np.array([1 / Fraction(w) for w in light.tolist()]))
    assert lost.max() > 1e-12
    assert (lost <= doubt).all()


def test_pairs_may_hold_the_ground_and_may_be_one_vertex_twice():
    factor = factored(laplacian(np.array([0, 1, 1]), np.array([1, 2, 2]), 3, np.array([2.0, 1.0, 1.0])))
    start, end = np.array([-1, 0, 0, 1, -1, 1]), np.array([0, -1, 1, 1, -1, -1])
    resistance, doubt = resistances(factor, start, end)
    np.testing.assert_allclose(resistance, [0.5, 0.5, 0.5, 0, 0, 1])
    assert ((doubt > 0) == (start != end)).all()
    nothing, of_nothing = resistances(factor, np.empty(0, np.int64), np.empty(0, np.int64))
    assert nothing.shape == of_nothing.shape == (0,)


def test_the_same_comes_out_every_time():
    tail, head, n = planar(300)
    factor = factored(laplacian(tail, head, n, weights(len(tail), 3)))
    for one, other in zip(
        resistances(factor, tail - 1, head - 1), resistances(factor, tail - 1, head - 1), strict=True
    ):
        assert np.array_equal(one, other)


def test_zeros_that_pad_the_factor_are_passed_over():
    tail, head, n = planar(40)
    factor = factored(laplacian(tail, head, n, weights(len(tail), 1)))
    held = factor.U.toarray() != 0
    free = np.argwhere(np.triu(~held, 1))
    i, j = free[np.random.default_rng(0).random(len(free)) < 0.3].T
    rows, columns = (np.concatenate([a, b]) for a, b in zip(factor.U.nonzero(), (i, j), strict=True))
    values = np.concatenate([factor.U[factor.U.nonzero()], np.zeros(len(i))])
    upper = coo_array((values, (rows, columns)), shape=held.shape).tocsc()
    assert upper.nnz > factor.U.nnz
    padded = SimpleNamespace(
        U=upper, L=factor.L, perm_r=factor.perm_r, perm_c=factor.perm_c, shape=factor.shape, solve=factor.solve
    )
    one, other = selected_inverse(padded), selected_inverse(factor)
    assert one.nnz == other.nnz
    assert np.array_equal(one.toarray(), other.toarray())


CANCELLING = [[1.0, 1.0, 1.0], [1.0, 2.0, 1.0], [1.0, 1.0, 2.0]]
CANCELLING_BETWEEN = np.array([[1.0, 0, 0, 0], [1, 1, 0, 0], [1, 0, 1, 0], [0, 1, 1, 1]])


@pytest.mark.parametrize(
    ("factor", "message"),
    [
        (splu(csc_array([[1.0, 4.0], [3.0, 1.0]])), "must keep every pivot on the diagonal, got another for row"),
        (factored([[1.0, 2.0], [2.0, 1.0]]), r"must have positive pivots, got -3\.0 in step 1"),
        (factored([[2.0, 1.0], [0.0, 2.0]]), "must be that of a symmetric matrix, got different triangles in step 0"),
        (factored(CANCELLING, "NATURAL"), "must hold every entry that elimination fills, got one that cancelled"),
        (factored(CANCELLING_BETWEEN @ CANCELLING_BETWEEN.T, "NATURAL"), "got one that cancelled, missed by step 0"),
    ],
)
def test_a_factor_that_will_not_do_is_refused(factor, message):
    with pytest.raises(InputError, match=message):
        selected_inverse(factor)
    with pytest.raises(InputError, match=message):
        resistances(factor, np.array([0]), np.array([1]))


def test_a_pair_that_is_no_entry_and_a_row_that_does_not_exist_are_refused():
    tail, head = np.arange(5), np.arange(1, 6)
    factor = factored(laplacian(tail, head, 6, np.ones(5)))
    with pytest.raises(InputError, match="must be an entry of the matrix, got rows 0 and 4 at pair 1"):
        resistances(factor, np.array([0, 0]), np.array([1, 4]))
    for wrong in (5, -2):
        with pytest.raises(InputError, match=rf"must lie in 0 \.\. 4, or be -1 .* got 1 and {wrong} at pair 1"):
            resistances(factor, np.array([0, 1]), np.array([1, wrong]))


def kernels():
    return {k: f for k, f in vars(module).items() if hasattr(f, "interpreted")}


@pytest.mark.parametrize("name", ["strictly_above", "first_open", "backward"])
def test_interpreted_and_compiled_agree(name, monkeypatch):
    kernel, calls = kernels()[name], []

    def record(*args):
        calls.append(args)
        return kernel(*args)

    record.interpreted = kernel.interpreted
    monkeypatch.setattr(module, name, record)
    tail, head, n = hub(40)
    selected_inverse(factored(laplacian(tail, head, n, weights(len(tail), 1))))
    results = []
    for small in (10**9, 0):
        monkeypatch.setattr("dec.topology.compiled.SMALL", small)
        results.append(kernel(*calls[0]))
    plain, machine = (r if isinstance(r, tuple) else (r,) for r in results)
    for a, b in zip(plain, machine, strict=True):
        assert np.asarray(a).dtype == np.asarray(b).dtype
        np.testing.assert_allclose(a, b, rtol=1e-13)  # compiled sums may use fused multiply-add


def test_every_kernel_is_one_of_those_or_called_by_one():
    assert set(kernels()) == {"strictly_above", "first_open", "position", "backward", "same_rows", "some_rows"}
