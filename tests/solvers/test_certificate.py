"""Certificates of solutions: exact residual and bound, against dense rational solves, and what cannot be certified."""

import json
import random
from fractions import Fraction

import numpy as np
import pandas as pd
import pytest

from dec.calculus.dataset import Dataset
from dec.errors import InputError
from dec.solvers.certificate import MOST_EDGES, solve_certificate
from dec.solvers.network import solve_network
from dec.solvers.poisson import solve_poisson
from dec.solvers.proof import exact_proof, root_above
from dec.verify import verify


def random_problem(seed: int) -> tuple[Dataset, str | None]:
    """A small network in one or two parts, with parallel edges and self-loops, held potentials or none."""
    rng = random.Random(seed)
    n = rng.randint(2, 7)
    ends = [(v, rng.randrange(v)) for v in range(1, n) if v != 4 or rng.random() < 0.5]
    ends += [(rng.randrange(n), rng.randrange(n)) for _ in range(rng.randint(0, 5))]
    source = [rng.randint(-50, 50) / 10 for _ in range(n)]
    held = [rng.choice(["", str(rng.randint(-9, 9) / 4)]) if rng.random() < 0.3 else "" for _ in range(n)]
    edges = pd.DataFrame({
        "from": [f"v{a}" for a, _ in ends], "to": [f"v{b}" for _, b in ends],
        "c": [repr(rng.choice([0.1, 1.0, 7.3, 1e4])) for _ in ends],
    })  # fmt: skip
    nodes = pd.DataFrame({"id": [f"v{v}" for v in range(n)], "s": list(map(repr, source)), "u": held})
    return Dataset.from_frames(edges, nodes), "u" if any(held) else None


def exact_error(net: Dataset, held: str | None, potential: np.ndarray) -> Fraction:
    """The square of |u - u*| in the energy norm, by Gaussian elimination with fractions on each part."""
    network, n = net.complex, net.complex.counts[0]
    c = [Fraction(x) for x in net.column("c", 1).numbers().tolist()]
    source = [Fraction(x) for x in net.column("s", 0).numbers().tolist()]
    fixed = np.full(n, np.nan) if held is None else net.column(held, 0).numbers()
    known = {v: Fraction(x) for v, x in enumerate(fixed.tolist()) if not np.isnan(x)}
    label = network.component_labels.tolist()
    for part in set(label):
        members = [v for v in range(n) if label[v] == part]
        if not set(members) & set(known):
            surplus = sum((source[v] for v in members), Fraction(0)) / len(members)
            for v in members:
                source[v] -= surplus
            known[members[0]] = Fraction(0)
    rows = [[Fraction(int(v == w)) for w in range(n)] if v in known else [Fraction(0)] * n for v in range(n)]
    right = [known.get(v, source[v]) for v in range(n)]
    for weight, a, b in zip(c, network.tail.tolist(), network.head.tolist(), strict=True):
        for v, w in ((a, b), (b, a)):
            if v not in known:
                rows[v][v] += weight
                rows[v][w] -= weight
    for v in range(n):
        pivot = next(w for w in range(v, n) if rows[w][v])
        rows[v], rows[pivot], right[v], right[pivot] = rows[pivot], rows[v], right[pivot], right[v]
        for w in range(n):
            if w != v and rows[w][v]:
                times = rows[w][v] / rows[v][v]
                rows[w] = [x - times * y for x, y in zip(rows[w], rows[v], strict=True)]
                right[w] -= times * right[v]
    exact = [right[v] / rows[v][v] for v in range(n)]
    gap = [Fraction(u) - e for u, e in zip(potential.tolist(), exact, strict=True)]
    ends = zip(c, network.tail.tolist(), network.head.tolist(), strict=True)
    return sum((weight * (gap[b] - gap[a]) ** 2 for weight, a, b in ends), Fraction(0))


@pytest.mark.parametrize("method", ["direct", "gradients"])
def test_the_certified_bound_is_no_smaller_than_the_exact_error_and_verifies(method: str) -> None:
    for seed in range(60):
        net, held = random_problem(seed)
        solution = solve_network(net, "s", "c", held, unbalanced="spread", rtol=1e-3, method=method)
        certificate = solve_certificate(solution, net, "s", "c", held)
        entries = json.loads(certificate)
        assert exact_error(net, held, solution.potential.values) <= Fraction(entries["bound"]) ** 2, seed
        rounding = 2.0**-48 * np.sqrt(solution.energy[1])  # of the flow, whose rests are not in the certificate
        assert entries["bound"] <= 2 * solution.error_bound + rounding, seed
        assert verify(certificate, {}).problems == [], seed


def test_a_rough_potential_gets_a_bound_that_holds_and_is_within_twice_the_error() -> None:
    # two edges in parallel and one to a third vertex; the flow is exact, so the bound is the error itself
    tail, head = np.array([0, 0, 1]), np.array([1, 1, 2])
    c, source = np.array([1.0, 3.0, 2.0]), np.array([4.0, 0.0, -4.0])
    residual, bound = exact_proof(
        tail, head, c, source, np.array([False, False, True]), np.array([4.0, 2.0, 0.0]), np.array([1.0, 3.0, 4.0])
    )
    # u* = (3, 2, 0): only the first two edges miss, by 1, so |u - u*|^2 = 4; 8 instead of 4 leave vertex 0
    assert bound == 2.0
    assert residual == root_above(Fraction(4**2 + 4**2))


def test_roots_are_rounded_upwards() -> None:
    rng = random.Random(1)
    for _ in range(500):
        square = Fraction(rng.randint(1, 10**30), rng.randint(1, 10**30)) * Fraction(10) ** rng.randint(-200, 200)
        root = Fraction(root_above(square))
        assert square <= root**2 <= square * (1 + Fraction(1, 2**50))
    assert root_above(Fraction(0)) == 0.0


def chain(n: int) -> Dataset:
    edges = pd.DataFrame({"from": [str(v) for v in range(n - 1)], "to": [str(v + 1) for v in range(n - 1)]})
    nodes = pd.DataFrame({"id": [str(v) for v in range(n)], "s": [1.0] + [0.0] * (n - 2) + [-1.0]})
    return Dataset.from_frames(edges, nodes)


def test_what_cannot_be_certified_is_refused() -> None:
    net = chain(MOST_EDGES + 2)
    with pytest.raises(InputError, match="up to 10,000 edges"):
        solve_certificate(solve_network(net, "s"), net, "s")
    net = chain(4)
    with pytest.raises(InputError, match="exponent 1"):
        solve_certificate(solve_network(net, "s", exponent=1.852), net, "s")
    with pytest.raises(InputError, match="that of these data, in one column"):
        solve_certificate(solve_network(chain(4), "s"), net, "s")
    two = solve_poisson(net.complex, np.array([[1.0, 2.0], [0, 0], [0, 0], [-1.0, -2.0]]))
    with pytest.raises(InputError, match="in one column"):
        solve_certificate(two, net, "s")
    other = Dataset.from_frames(
        pd.DataFrame({"from": ["A"], "to": ["B"]}), pd.DataFrame({"id": ["A", "B"], "s": [1, 0], "u": [None, 3.0]})
    )
    free = solve_network(other, "s", unbalanced="spread")
    with pytest.raises(InputError, match="does not have their fixed potentials"):
        solve_certificate(free, other, "s", fixed="u")


def test_ten_thousand_edges_are_certified_and_rechecked() -> None:
    rng = np.random.default_rng(2)
    n = 5000
    tail = np.concatenate([np.arange(n - 1), rng.integers(0, n, 5001)])
    head = np.concatenate([np.arange(1, n), rng.integers(0, n, 5001)])
    edges = pd.DataFrame({"from": tail.astype(str), "to": head.astype(str), "c": rng.lognormal(size=10_000)})
    nodes = pd.DataFrame({"id": np.arange(n).astype(str), "s": rng.normal(size=n), "u": [None] * (n - 1) + [1.0]})
    net = Dataset.from_frames(edges, nodes)
    solution = solve_network(net, "s", "c", "u")
    certificate = solve_certificate(solution, net, "s", "c", "u")
    assert verify(certificate, {}).problems == []
    assert json.loads(certificate)["bound"] <= 2 * solution.error_bound + 2.0**-48 * np.sqrt(solution.energy[1])
