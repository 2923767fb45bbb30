"""Complexes, values and coefficients for hypothesis, and slow ways to say what is true of them."""

from fractions import Fraction

import numpy as np
from hypothesis import strategies as st

from dec.calculus.complex import Complex, grid
from dec.errors import TopologyError

N = 7  # few vertices, so that cells meet in every way there is


@st.composite
def networks(draw):
    n = draw(st.integers(1, N))
    ends = draw(st.lists(st.tuples(st.integers(0, n - 1), st.integers(0, n - 1)), max_size=14))
    return Complex.from_edges([a for a, _ in ends], [b for _, b in ends], n)


def loops(n=N, *, repeats=False):
    """Corners of a polygon, all different unless repeats are allowed."""
    return st.lists(st.integers(0, n - 1), min_size=3, max_size=5, unique=not repeats)


@st.composite
def surfaces(draw, *, repeats=False):
    """Any polygons at all: edges of many faces, pinched vertices, faces given twice, or with repeated corners."""
    return Complex.from_faces(draw(st.lists(loops(repeats=repeats), max_size=9)), N)


@st.composite
def filled_networks(draw):
    """A simple graph with some of its triangles filled."""
    pairs = draw(
        st.sets(st.tuples(st.integers(0, N - 1), st.integers(0, N - 1)).filter(lambda e: e[0] < e[1]), max_size=15)
    )
    flips = draw(st.lists(st.booleans(), min_size=len(pairs), max_size=len(pairs)))
    ends = [e[::-1] if flip else e for e, flip in zip(sorted(pairs), flips, strict=True)]
    return Complex.from_edges([a for a, _ in ends], [b for _, b in ends], N).with_faces("triangles")


@st.composite
def solids(draw, *, repeats=False):
    corner = st.integers(0, 8)
    tetrahedra = draw(st.lists(st.lists(corner, min_size=4, max_size=4, unique=not repeats), max_size=6))
    hexahedra = draw(st.lists(st.lists(corner, min_size=8, max_size=8, unique=not repeats), max_size=2))
    cells = {"tetra": np.array(tetrahedra, int).reshape(-1, 4), "hexahedron": np.array(hexahedra, int).reshape(-1, 8)}
    try:
        return Complex.from_cells(cells)
    except TopologyError:  # two hexahedra that share four corners in different orders
        return Complex.from_cells({"tetra": cells["tetra"]})


@st.composite
def grids(draw):
    axes = draw(st.lists(st.tuples(st.integers(1, 3), st.booleans()), min_size=1, max_size=3))
    return grid([n for n, _ in axes], periodic=[closes for _, closes in axes])


def complexes():
    return st.one_of(
        networks(), surfaces(), surfaces(repeats=True), filled_networks(), solids(), solids(repeats=True), grids()
    )


def exact_values(count):
    """int64, longer integers, or fractions."""
    if not count:
        return st.just(np.zeros(0, np.int64))  # an empty list would be one of floats
    whole = st.integers(-(2**63), 2**63 - 1)
    number = st.one_of(
        st.just(whole), st.just(st.integers(-(2**90), 2**90)), st.just(st.fractions(max_denominator=50)),
        st.just(st.one_of(st.integers(-9, 9), st.fractions(max_denominator=9))),
    )  # fmt: skip
    return number.flatmap(lambda kind: st.lists(kind, min_size=count, max_size=count))


def float_values(count):
    number = st.floats(allow_nan=False, allow_infinity=False)
    return st.lists(number, min_size=count, max_size=count).map(lambda v: np.array(v, dtype=float))


def coefficients(count, size=2**20):
    return st.lists(st.integers(-size, size), min_size=count, max_size=count).map(lambda v: np.array(v, dtype=np.int64))


def dense(K, k):
    """Coboundary from k-cells to (k+1)-cells as lists of Python integers."""
    return [[int(v) for v in row] for row in K.coboundary(k).toarray()]


def slow_integral(coefficients, values):
    return sum((int(c) * Fraction(v) for c, v in zip(coefficients, values, strict=True)), Fraction(0))


def slow_rank(rows):
    rows = [[Fraction(v) for v in row] for row in rows]
    rank = 0
    for column in range(len(rows[0]) if rows else 0):
        pivot = next((i for i in range(rank, len(rows)) if rows[i][column]), None)
        if pivot is None:
            continue
        rows[rank], rows[pivot] = rows[pivot], rows[rank]
        for i in range(rank + 1, len(rows)):
            if rows[i][column]:
                factor = rows[i][column] / rows[rank][column]
                rows[i] = [a - factor * b for a, b in zip(rows[i], rows[rank], strict=True)]
        rank += 1
    return rank
