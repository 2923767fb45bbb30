"""Small linear problems of every kind that a method must get right, and their exact solutions."""

from fractions import Fraction

import numpy as np

from dec.solvers.problem import LinearProblem


def path(n):
    return np.arange(n - 1), np.arange(1, n)


def square(k):
    number = np.arange(k * k).reshape(k, k)
    tail = np.concatenate([number[:-1].ravel(), number[:, :-1].ravel()])
    head = np.concatenate([number[1:].ravel(), number[:, 1:].ravel()])
    return tail, head


def graph(tail, head, n, weight=None, fixed=None):
    tail, head = np.asarray(tail), np.asarray(head)
    weight = np.ones(len(tail)) if weight is None else np.asarray(weight, float)
    mask = None
    if fixed is not None:
        mask = np.zeros(n, bool)
        mask[fixed] = True
    return LinearProblem.of_graph(tail, head, n, weight, mask)


def random_graph(n, m, seed, low=0.0, high=1.0, fixed=None):
    random = np.random.default_rng(seed)
    tail, head = random.integers(0, n, (2, m))
    return graph(tail, head, n, 10 ** random.uniform(low, high, m), fixed)


def several():
    """A triangle, an isolated vertex, a path with a fixed end, a pair; numbers mixed up."""
    ends = np.array([[0, 7], [7, 3], [3, 0], [1, 5], [5, 9], [9, 2], [8, 6]])
    order = np.array([4, 0, 9, 2, 7, 5, 3, 1, 8, 6])
    return graph(order[ends[:, 0]], order[ends[:, 1]], 10, np.arange(1, 8) / 4, [order[2]])


def obtuse():
    """A square cut into triangles with one negative conductance, still definite."""
    return graph([0, 1, 2, 3, 0], [1, 2, 3, 0, 2], 4, [2, 2, 2, 2, -0.75], [1])


CASES = {
    "no unknown": lambda: graph([0], [1], 2, None, [0, 1]),
    "one isolated vertex": lambda: graph([], [], 1),
    "isolated vertices only": lambda: graph([], [], 4),
    "one edge": lambda: graph([0], [1], 2, [3.0]),
    "path": lambda: graph(*path(9), 9),
    "path with a fixed end": lambda: graph(*path(9), 9, np.arange(1, 9), [8]),
    "ring": lambda: graph(np.arange(7), (np.arange(7) + 1) % 7, 7),
    "star": lambda: graph(np.zeros(30, int), np.arange(1, 31), 31, np.arange(1, 31)),
    "complete graph": lambda: graph(*np.triu_indices(12, 1), 12),
    "grid": lambda: graph(*square(8), 64),
    "grid with fixed vertices": lambda: graph(*square(8), 64, None, [0, 7, 20, 63]),
    "fixed vertices that part the rest": lambda: graph(*path(9), 9, None, [3, 5]),
    "parallel edges and self-loops": lambda: graph([0, 0, 1, 2, 1], [1, 1, 2, 2, 2], 3, [1, 2, 3, 9, 0.5]),
    "several components": several,
    "random graph with several components": lambda: random_graph(60, 55, 1),
    "random graph, fixed": lambda: random_graph(60, 150, 2, 0, 1, [5, 6]),
    "an edge of conductance zero": lambda: graph([0, 1, 2], [1, 2, 3], 4, [1, 0, 1]),
    "positive off-diagonal entry": obtuse,
    "matrix with a heavy diagonal": lambda: LinearProblem.of_matrix(
        np.diag(np.full(6, 3.0)) - np.eye(6, k=1) - np.eye(6, k=-1)
    ),
    "weights over eight decades": lambda: random_graph(40, 120, 3, -4, 4),
}  # fmt: skip


def right_side(problem, columns=None, seed=0):
    shape = problem.n if columns is None else (problem.n, columns)
    return problem.balanced(np.random.default_rng(seed).standard_normal(shape))


def exact_solution(problem, b):
    """The solution by Fractions: Gaussian elimination without a thought of speed; mean zero on singular components."""
    n = problem.n
    dense = problem.matrix.toarray()
    rows = [[*map(Fraction, row.tolist()), Fraction(float(v))] for row, v in zip(dense, b, strict=True)]
    for k in np.flatnonzero(problem.singular):
        vertices = np.flatnonzero(problem.component == k)
        rows[vertices[0]] = [Fraction(int(problem.component[j] == k)) for j in range(n)] + [Fraction(0)]
    for i in range(n):
        pivot = next(r for r in range(i, n) if rows[r][i])
        rows[i], rows[pivot] = rows[pivot], rows[i]
        rows[i] = [a / rows[i][i] for a in rows[i]]
        for r in range(n):
            if r != i and rows[r][i]:
                factor = rows[r][i]
                rows[r] = [a - factor * c for a, c in zip(rows[r], rows[i], strict=True)]
    return np.array([float(row[n]) for row in rows])
