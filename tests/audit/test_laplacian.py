"""The weighted Laplacian against dense pseudo-inverses and closed forms."""

from fractions import Fraction
from itertools import combinations

import numpy as np
import pytest

import dec.audit.adjusted.laplacian
from dec.audit.adjusted.laplacian import BLOCK, Laplacian
from dec.errors import AccuracyError
from dec.solvers.choice import Choice
from dec.solvers.elimination import Elimination


def dense(tail: np.ndarray, head: np.ndarray, n: int, conductance: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    D = np.zeros((len(tail), n))
    np.add.at(D, (np.arange(len(tail)), head), 1.0)
    np.add.at(D, (np.arange(len(tail)), tail), -1.0)
    return D, np.linalg.pinv(D.T @ np.diag(conductance) @ D, hermitian=True)


def random_graph(seed: int, n: int, m: int, spread: float) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    rng = np.random.default_rng(seed)
    return rng.integers(0, n, m), rng.integers(0, n, m), 10.0 ** rng.uniform(-spread, spread, m)


@pytest.mark.parametrize("spread", [0.3, 1.2, 2.5])  # below and above where energies take over from columns
@pytest.mark.parametrize("seed", range(6))
def test_shares_and_resistances_are_those_of_the_pseudo_inverse(seed: int, spread: float):
    n = 9 * BLOCK + 1
    tail, head, conductance = random_graph(seed, n, 3 * n // 2, spread)
    laplacian = Laplacian(tail, head, n, conductance)
    D, inverse = dense(tail, head, n, conductance)
    same = np.array([(a, b) for a, b in combinations(range(n), 2) if laplacian.component[a] == laplacian.component[b]])
    share, slack = laplacian.shares()
    resistance = laplacian.resistances(same[:, 0], same[:, 1])
    expected = conductance * np.einsum("ij,jk,ik->i", D, inverse, D)
    assert share == pytest.approx(expected, abs=1e-9)
    assert share + slack == pytest.approx(np.ones(len(tail)), abs=1e-15)
    e = np.eye(n)
    u = e[same[:, 0]] - e[same[:, 1]]
    assert resistance == pytest.approx(np.einsum("ij,jk,ik->i", u, inverse, u), rel=1e-7)
    assert share.sum() == pytest.approx(n - laplacian.n_components, rel=1e-12)  # Foster 1949


def test_a_change_makes_up_for_what_is_missed_and_is_the_smallest():
    tail, head, conductance = random_graph(3, 12, 30, 1.0)
    laplacian = Laplacian(tail, head, 12, conductance)
    D, inverse = dense(tail, head, 12, conductance)
    missed = D.T @ np.random.default_rng(0).normal(size=(30, 2))
    change, potential = laplacian.change(missed)
    assert D.T @ change + missed == pytest.approx(np.zeros((12, 2)), abs=1e-13)
    assert change == pytest.approx(-conductance[:, None] * (D @ (inverse @ missed)), abs=1e-12)
    assert change == pytest.approx(-conductance[:, None] * (D @ potential), abs=1e-12)
    assert np.all(potential[laplacian.grounded] == 0)


def test_the_ground_may_be_chosen_and_takes_up_what_is_left_over():
    path = np.arange(4)
    laplacian = Laplacian(path, path + 1, 5, np.array([1.0, 2.0, 4.0, 8.0]), ground=3)
    change, potential = laplacian.change(np.array([1.0, 0.0, 0.0, 0.0, 1.0]))
    assert change == pytest.approx([1.0, 1.0, 1.0, -1.0])
    assert potential[3] == 0.0
    assert potential == pytest.approx([1.75, 0.75, 0.25, 0.0, 0.125])


@pytest.mark.parametrize(
    ("n", "degree", "edges"),
    [
        (4, 3, list(combinations(range(4), 2))),
        (8, 3, [(a, b) for a, b in combinations(range(8), 2) if (a ^ b).bit_count() == 1]),
        (6, 4, [(a, b) for a, b in combinations(range(6), 2) if a // 2 != b // 2]),
    ],
    ids=["tetrahedron", "cube", "octahedron"],
)
def test_neighbours_on_platonic_solids_have_resistance_2_n_minus_1_over_n_degree(n: int, degree: int, edges: list):
    """Ponder This, October 2007 (READ): 1/2, 7/12, 5/12."""
    tail, head = np.array(edges).T
    resistance = Laplacian(tail, head, n, np.ones(len(edges))).resistances(tail, head)
    assert resistance == pytest.approx(np.full(len(edges), float(Fraction(2 * (n - 1), n * degree))), rel=1e-13)


def test_parallel_edges_add_and_self_loops_carry_nothing():
    laplacian = Laplacian(np.array([0, 1, 1]), np.array([1, 0, 1]), 2, np.array([1.0, 2.0, 5.0]))
    (share, slack), resistance = laplacian.shares(), laplacian.resistances(np.array([0]), np.array([1]))
    assert resistance == pytest.approx([1 / 3])
    assert share == pytest.approx([1 / 3, 2 / 3, 0])
    assert slack == pytest.approx([2 / 3, 1 / 3, 1])


def test_no_vertices_and_no_edges_are_an_answer_too():
    none = np.empty(0, np.int64)
    for n in (0, 3):
        laplacian = Laplacian(none, none, n, np.empty(0))
        assert laplacian.n_components == n
        assert [len(part) for part in (*laplacian.shares(), laplacian.resistances(none, none))] == [0, 0, 0]
        assert laplacian.to_ground().tolist() == [0.0] * n
        assert laplacian.change(np.zeros(n))[0].shape == (0,)


def test_conductances_too_far_apart_are_refused_with_their_ratio():
    with pytest.raises(AccuracyError, match=r"the largest is 1\.0e\+09 times the smallest, 1e\+07 times is the most"):
        Laplacian(np.array([0, 1]), np.array([1, 2]), 3, np.array([1e-9, 1e9]))


def test_what_does_not_come_out_right_is_refused_and_not_given(monkeypatch):
    tail, head = np.array([0, 1, 0, 2]), np.array([1, 2, 2, 3])
    laplacian = Laplacian(tail, head, 4, np.array([1e10, 1e10, 1.0, 1e-3]), ground=3)
    missed = np.array([1.0, 0.0, 0.0, 0.0])
    assert laplacian.change(missed)[0] == pytest.approx([1, 1, 2e-10, 1], rel=1e-9)
    monkeypatch.setattr(dec.audit.adjusted.laplacian, "_TURNS", 1)
    with pytest.raises(AccuracyError, match=r"the law is met to .* only; raise the smallest"):
        laplacian.change(missed)


def test_a_small_slack_keeps_its_digits():
    """Two strong edges in series, and a weak one beside them: hardly anything goes past a strong edge."""
    weak, strong = Fraction(1), Fraction(10) ** 10
    tail, head = np.array([0, 1, 0]), np.array([1, 2, 2])
    conductance = np.array([float(strong), float(strong), float(weak)])
    _, slack = Laplacian(tail, head, 3, conductance).shares()
    past = 1 / (1 / strong + 1 / weak)
    assert slack[0] == pytest.approx(float(past / (strong + past)), rel=1e-12)


def on_both_engines(monkeypatch, tail, head, n, conductance) -> tuple[Laplacian, Laplacian]:
    """The same Laplacian with an exact factor, and as one that is too large for it."""
    exact = Laplacian(tail, head, n, conductance, ground=0)
    engine = choice_of(Elimination())
    monkeypatch.setattr(dec.audit.adjusted.laplacian, "choose", lambda _: engine)
    monkeypatch.setattr(dec.audit.adjusted.laplacian, "sparse_order", lambda *_: None)
    monkeypatch.setattr(dec.audit.adjusted.laplacian, "_SMALL", 0)
    return exact, Laplacian(tail, head, n, conductance, ground=0)


def choice_of(method):
    return Choice(method, "for a test")


@pytest.mark.parametrize("seed", range(5))
def test_an_iterative_engine_gives_the_same_to_rounding(monkeypatch, seed: int):
    rng = np.random.default_rng(seed)
    tail, head, conductance = random_graph(seed, 30, 70, 1.5)
    exact, large = on_both_engines(monkeypatch, tail, head, 30, conductance)
    assert (exact.gives_all, large.gives_all) == (True, False)
    missed = exact.gather @ rng.normal(size=(70, 3))
    change, potential = exact.change(missed)
    again, level = large.change(missed)
    assert again == pytest.approx(change, rel=1e-11, abs=1e-12)
    assert level == pytest.approx(potential, rel=1e-9, abs=1e-12)
    assert large.gather @ again + missed == pytest.approx(np.zeros((30, 3)), abs=1e-13)
    share, slack, error = large.figures("all")
    assert error == 0
    assert share == pytest.approx(exact.shares()[0], abs=1e-12)
    assert slack == pytest.approx(exact.shares()[1], abs=1e-12)
    assert large.figures("auto") == (None, None, 0.0)


def test_random_projection_errs_as_stated_and_small_slacks_are_exact(monkeypatch):
    tail, head, conductance = random_graph(8, 60, 200, 1.0)
    exact, large = on_both_engines(monkeypatch, tail, head, 60, conductance)
    share, slack, error = large.figures("estimate")
    true, rest = exact.shares()
    assert error == 0.1
    moves = tail != head
    off = np.abs(share - true)[moves] / true[moves]
    assert np.sqrt(np.mean(off**2)) < 1.5 * error
    assert off.max() > 1e-6
    small = (rest < 0.2) & (tail != head)
    assert small.sum() > 3
    assert slack[small] == pytest.approx(rest[small], rel=1e-9)
    bridge = exact.settled
    assert (slack[bridge] == 0).all()
