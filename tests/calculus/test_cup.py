"""Cup products against the definition, written out cell by cell in Fractions, and against known products."""

import json
from fractions import Fraction
from itertools import combinations, permutations
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from dec.calculus.complex import Complex, grid
from dec.calculus.networks import from_networkx
from dec.errors import TopologyError

SURFACES = json.loads((Path(__file__).parents[1] / "reference" / "G1a.json").read_text(encoding="utf-8"))["input"]


def parity(corners):
    return (-1) ** sum(a > b for a, b in combinations(corners, 2))


def cells_of(K, degree):
    """Corners of every cell in its stored order."""
    if degree == 0:
        return [(v,) for v in range(K.counts[0])]
    if degree == 1:
        return list(zip(K.tail.tolist(), K.head.tolist(), strict=True))
    if degree == 2:
        return [tuple(K.faces.row(f).tolist()) for f in range(K.counts[2])]
    return [tuple(row) for row in K.solids["tetra"].tolist()]


def slow_cup(a, b):
    """The definition, on simplices that are told apart by their corners."""
    K, p, q = a.complex, a.degree, b.degree
    known = [{tuple(sorted(c)): (i, parity(c)) for i, c in enumerate(cells_of(K, k))} for k in range(K.dim + 1)]
    result = []
    for cell in cells_of(K, p + q):
        v = sorted(cell)
        (front, front_sign), (back, back_sign) = known[p][tuple(v[: p + 1])], known[q][tuple(v[p:])]
        result.append(
            parity(cell)
            * front_sign
            * back_sign
            * Fraction(a.values.tolist()[front])
            * Fraction(b.values.tolist()[back])
        )
    return result


def grid_cells(K):
    """Every cell of a grid as its axes and its low vertex, by degree, in the order of their numbers."""
    sizes = list(zip(K.lattice.shape, K.lattice.periodic, strict=True))
    cells = []
    for degree in range(K.dim + 1):
        row = []
        for along in combinations(range(K.dim), degree):
            counts = [n - (a in along and not closes) for a, (n, closes) in enumerate(sizes)]
            row += [(along, at) for at in np.ndindex(*counts)]
        cells.append(row)
    return cells


def slow_grid_cup(a, b):
    K, p, q = a.complex, a.degree, b.degree
    cells, left, right = grid_cells(K), a.values.tolist(), b.values.tolist()
    number = [{cell: i for i, cell in enumerate(row)} for row in cells]
    result = []
    for along, at in cells[p + q]:
        total = Fraction(0)
        for front in combinations(along, p):
            back = tuple(x for x in along if x not in front)
            far = tuple((x + (i in front)) % K.lattice.shape[i] for i, x in enumerate(at))
            value = Fraction(left[number[p][front, at]]) * Fraction(right[number[q][back, far]])
            total += parity(front + back) * value
        result.append(total)
    return result


@st.composite
def simplicial(draw):
    """Triangles or tetrahedra whose corners come in any order, or a graph with filled triangles and any directions."""
    n, width = 6, draw(st.sampled_from([2, 3, 4]))
    chosen = draw(st.lists(st.sampled_from(list(combinations(range(n), width))), min_size=1, max_size=9, unique=True))
    turned = [draw(st.permutations(cell)) for cell in chosen]
    if width == 4:
        return Complex.from_cells({"tetra": turned})
    if width == 3:
        return Complex.from_faces(turned, n)
    return Complex.from_edges([a for a, _ in turned], [b for _, b in turned], n).with_faces("triangles")


@st.composite
def grids(draw):
    axes = draw(st.lists(st.tuples(st.integers(1, 3), st.booleans()), min_size=1, max_size=3))
    return grid([n for n, _ in axes], periodic=[closes for _, closes in axes])


NUMBERS = [
    st.integers(-9, 9), st.integers(-(2**63), 2**63 - 1), st.integers(-(2**80), 2**80), st.fractions(max_denominator=9),
]  # fmt: skip


@st.composite
def cochains(draw, K, degree, columns=None):
    kind = draw(st.sampled_from(NUMBERS))
    shape = (K.counts[degree],) if columns is None else (K.counts[degree], columns)
    size = int(np.prod(shape))
    values = np.empty(size, dtype=object)
    values[:] = draw(st.lists(kind, min_size=size, max_size=size))
    fits = all(isinstance(v, int) and -(2**63) <= v < 2**63 for v in values.tolist())
    return K.cochain(degree, values.astype(np.int64 if fits else object).reshape(shape))


def complexes():
    return st.one_of(simplicial(), grids())


@given(complexes(), st.data())
@settings(max_examples=300)
def test_the_product_is_the_definition_cell_by_cell(K, data):
    p = data.draw(st.integers(0, K.dim))
    q = data.draw(st.integers(0, K.dim - p))
    a, b = data.draw(cochains(K, p)), data.draw(cochains(K, q))
    product = a.cup(b)
    assert product.degree == p + q
    assert product.is_exact
    assert product.values.tolist() == (slow_cup if K.lattice is None else slow_grid_cup)(a, b)


@given(complexes(), st.data())
@settings(max_examples=300)
def test_the_leibniz_rule_holds_exactly(K, data):
    p = data.draw(st.integers(0, K.dim - 1))
    q = data.draw(st.integers(0, K.dim - 1 - p))
    columns = data.draw(st.sampled_from([None, 2]))
    a, b = data.draw(cochains(K, p, columns)), data.draw(cochains(K, q, columns))
    assert a.cup(b).d().values.tolist() == (a.d().cup(b) + (-1) ** p * a.cup(b.d())).values.tolist()


@given(complexes(), st.data())
@settings(max_examples=200)
def test_the_product_is_associative_with_ones_at_the_vertices_as_its_unit(K, data):
    p = data.draw(st.integers(0, K.dim))
    q = data.draw(st.integers(0, K.dim - p))
    r = data.draw(st.integers(0, K.dim - p - q))
    a, b, c = (data.draw(cochains(K, k)) for k in (p, q, r))
    assert a.cup(b).cup(c).values.tolist() == a.cup(b.cup(c)).values.tolist()
    one = K.cochain(0, np.ones(K.counts[0], np.int64))
    assert one.cup(a).values.tolist() == a.cup(one).values.tolist() == a.values.tolist()


@given(simplicial(), st.data())
@settings(max_examples=150)
def test_the_product_is_natural_cut_down_to_a_part_whose_vertices_keep_their_order(K, data):
    """Pull back along the inclusion of some top cells, renumbered: the product of the parts is the part of it."""
    top = cells_of(K, K.dim)
    if not top:
        return
    kept = data.draw(st.lists(st.sampled_from(top), min_size=1, unique=True))
    used = sorted({v for cell in kept for v in cell})
    new = {v: i for i, v in enumerate(used)}
    renumbered = [[new[v] for v in cell] for cell in kept]
    L = Complex.from_cells({"tetra": renumbered}) if K.dim == 3 else Complex.from_faces(renumbered)

    def pulled(w):
        known = {tuple(sorted(c)): (i, parity(c)) for i, c in enumerate(cells_of(K, w.degree))}
        values = np.empty(L.counts[w.degree], dtype=object)
        for j, cell in enumerate(cells_of(L, w.degree)):
            i, sign = known[tuple(used[v] for v in sorted(cell))]
            values[j] = parity(cell) * sign * w.values.tolist()[i]
        return L.cochain(w.degree, values)

    p = data.draw(st.integers(0, K.dim))
    q = data.draw(st.integers(0, K.dim - p))
    a, b = data.draw(cochains(K, p)), data.draw(cochains(K, q))
    assert pulled(a.cup(b)).values.tolist() == pulled(a).cup(pulled(b)).values.tolist()
    if p < K.dim:
        assert pulled(a.d()).values.tolist() == pulled(a).d().values.tolist()


@given(complexes(), st.data())
@settings(max_examples=100)
def test_columns_are_multiplied_one_by_one_and_floats_as_floats(K, data):
    p = data.draw(st.integers(0, K.dim))
    q = data.draw(st.integers(0, K.dim - p))
    a, b = data.draw(cochains(K, p, 3)), data.draw(cochains(K, q, 3))
    product = a.cup(b)
    for j in range(3):
        assert product.column(j).values.tolist() == a.column(j).cup(b.column(j)).values.tolist()
    rough = (a * 1.0).cup(b)
    assert rough.values.dtype == np.float64
    expected = [float(v) for v in product.values.ravel().tolist()]
    scale = 4.0 * max(map(abs, map(float, a.values.ravel().tolist())), default=0)
    scale *= max(map(abs, map(float, b.values.ravel().tolist())), default=0)
    assert rough.values.ravel().tolist() == pytest.approx(expected, abs=1e-15 * scale)


def test_signs_by_hand():
    K = Complex.from_faces([[0, 1, 2], [2, 1, 3]])  # edges 01 02 12 13 23; the second face is turned 1 3 2
    a, b = K.cochain(1, [2, 3, 5, 7, 11]), K.cochain(1, [1, 10, 100, 1000, 10000])
    assert a.cup(b).values.tolist() == [2 * 100, -5 * 10000]
    f = K.cochain(0, [1, 2, 4, 8])
    assert f.cup(a).values.tolist() == [2, 3, 10, 14, 44]
    assert a.cup(f).values.tolist() == [4, 12, 20, 56, 88]
    L = grid((2, 2))  # edges: along the first axis at low and high second, then along the second axis
    assert L.tail.tolist() == [0, 1, 0, 2]
    a, b = L.cochain(1, [2, 3, 5, 7]), L.cochain(1, [1, 10, 100, 1000])
    assert a.cup(b).values.tolist() == [2 * 1000 - 5 * 10]


def test_parallel_edges_and_self_loops_carry_products_with_vertex_values():
    K = Complex.from_edges([0, 1, 1, 2], [1, 0, 1, 2])
    f, a = K.cochain(0, [2, 3, 5]), K.cochain(1, [1, 10, 100, 1000])
    assert f.cup(a).values.tolist() == [2, 20, 300, 5000]
    assert a.cup(f).values.tolist() == [3, 30, 300, 5000]
    assert f.cup(f).d().values.tolist() == (f.d().cup(f) + f.cup(f.d())).values.tolist()


def closed_cochains(K):
    """A basis of the closed 1-cochains modulo 2, by elimination."""
    rows = [int("".join(str(abs(int(v)) % 2) for v in row), 2) for row in K.coboundary(1).toarray()]
    n, pivots = K.counts[1], {}
    for given_row in rows:
        row = given_row
        for bit, other in pivots.items():
            row ^= other if row >> bit & 1 else 0
        if row:
            bit = row.bit_length() - 1
            pivots = {b: o ^ row if o >> bit & 1 else o for b, o in pivots.items()}
            pivots[bit] = row
    basis = []
    for free in (b for b in range(n) if b not in pivots):
        vector = {free} | {bit for bit, row in pivots.items() if row >> free & 1}
        basis.append([int(n - 1 - i in vector) for i in range(n)])
    return basis


@pytest.mark.parametrize(
    ("name", "has_square", "rank"),
    [("torus, 7 vertices", False, 2), ("projective plane, 6 vertices", True, 1), ("Klein bottle, 8 vertices", True, 2)],
)
def test_closed_surfaces_have_their_known_products_modulo_2(name, has_square, rank):
    """Hatcher, Algebraic Topology, 2002, Examples 3.7 and 3.8 (from memory): the pairing H1 x H1 -> Z/2 is perfect,
    and it has a class with a square that is not zero exactly where the surface is not orientable.
    """
    K = Complex.from_faces(SURFACES[name]["facets"])
    basis = closed_cochains(K)
    table = [
        [int(K.cochain(1, a).cup(K.cochain(1, b)).values.sum()) % 2 for b in basis] for a in basis
    ]  # fmt: skip
    assert any(table[i][i] for i in range(len(basis))) is has_square
    assert rank_modulo_2(table) == rank


def rank_modulo_2(table):
    rows, rank = [int("".join(map(str, row)), 2) for row in table], 0
    while any(rows):
        pivot = max(rows)
        rows.remove(pivot)
        rank += 1
        rows = [min(row, row ^ pivot) for row in rows]
    return rank


@pytest.mark.parametrize("triangles", [False, True])
def test_the_two_classes_of_a_torus_multiply_to_one_and_minus_one(triangles):
    """Steps of one in x and in y round a periodic grid, also cut into triangles: dx dy = 1 and dy dx = -1 in all."""
    n = 4
    K = grid((n, n), periodic=True)
    if triangles:
        at = lambda i, j: i % n * n + j % n  # noqa: E731
        cells = [(at(i, j), at(i + 1, j), at(i + 1, j + 1)) for i in range(n) for j in range(n)]
        cells += [(at(i, j), at(i + 1, j + 1), at(i, j + 1)) for i in range(n) for j in range(n)]
        K = Complex.from_faces(cells)
    row, column = np.divmod(np.arange(n * n), n)
    step = lambda place: (place[K.head] - place[K.tail] + 1) % n - 1  # noqa: E731
    a, b = K.cochain(1, step(row)), K.cochain(1, step(column))
    assert not a.d().values.any()
    assert not b.d().values.any()
    whole = K.region(range(K.counts[2]))
    assert whole.is_closed
    table = [[whole @ left.cup(right) for right in (a, b)] for left in (a, b)]
    assert table == [[0, n * n], [-n * n, 0]] or table == [[0, 1], [-1, 0]]


def test_three_classes_of_a_solid_torus_of_axes_multiply_by_the_sign_of_their_order():
    K = grid((3, 3, 3), periodic=True)
    block = K.counts[1] // 3
    once = np.zeros((3, K.counts[1]), np.int64)
    for axis in range(3):  # 1 on the edges that close the axis: dual to one layer
        edges = np.arange(block).reshape(3, 3, 3)
        once[axis, axis * block + edges.take([2], axis=axis).ravel()] = 1
    d = [K.cochain(1, row) for row in once]
    assert not any(w.d().values.any() for w in d)
    for order in permutations(range(3)):
        i, j, k = order
        assert int(d[i].cup(d[j]).cup(d[k]).values.sum()) == parity(order)


def test_int64_never_wraps():
    K = grid((2, 2))
    a = K.cochain(1, np.array([2**62, 0, 0, 0]))
    b = K.cochain(1, np.array([0, 0, 0, 2**62]))
    assert a.cup(b).values.tolist() == [2**124]
    a, b = K.cochain(1, np.full(4, -(2**63))), K.cochain(1, np.full(4, -(2**63)))
    assert a.cup(b).values.tolist() == [0]
    L = grid((2, 2, 2))
    a = np.full(12, 2**31)
    a[4:8] = -(2**31)  # along the second axis, so that all three terms add up
    product = L.cochain(1, a).cup(L.cochain(2, np.full(6, 2**31)))
    assert product.values.tolist() == slow_grid_cup(L.cochain(1, a), L.cochain(2, np.full(6, 2**31))) == [3 * 2**62]
    assert K.cochain(1, [3, 0, 0, 0]).cup(K.cochain(1, [0, 0, 0, 5])).values.dtype == np.int64


@pytest.mark.parametrize(
    ("complex", "p", "q", "message"),
    [
        (Complex.from_faces([[0, 1, 2], [0, 2, 3, 4]]), 1, 1, "face 1 has 4 corners"),
        (Complex.from_faces([[0, 1, 2, 3]]), 0, 2, "face 0 has 4 corners"),
        (Complex.from_faces([[0, 1, 1]]), 1, 1, r"face 0 repeats a corner: \[0, 1, 1\]"),
        (Complex.from_cells({"tetra": [[0, 1, 2, 3]], "hexahedron": [range(8)]}), 1, 2, "cell 1 is a hexahedron"),
        (Complex.from_cells({"hexahedron": [range(8)]}), 1, 1, "face 0 has 4 corners"),
        (Complex.from_faces([[0, 1, 2]]), 2, 1, r"degree 2 \+ 1 has no cells in a complex of dimension 2"),
    ],
)
def test_cells_that_are_neither_simplices_nor_of_a_grid_are_refused(complex, p, q, message):
    a, b = (complex.cochain(k, np.ones(complex.counts[k], np.int64)) for k in (p, q))
    with pytest.raises(TopologyError, match=message):
        a.cup(b)


def test_what_does_not_fit_together_is_refused():
    K, L = Complex.from_faces([[0, 1, 2]]), Complex.from_faces([[0, 1, 2]])
    a = K.cochain(1, [1, 2, 3])
    for other, message in (
        (L.cochain(1, [1, 2, 3]), "different complexes"),
        (K.cochain(1, np.ones((3, 2))), "columns differ"),
        ([1, 2, 3], "takes two cochains, got list"),
        (K.chain(1, [1, 2, 3]), "takes two cochains, got Chain"),
    ):
        with pytest.raises(TopologyError, match=message):
            a.cup(other)


def test_products_of_edges_of_a_polygon_mesh_are_made_since_edges_are_simplices():
    K = Complex.from_faces([[0, 1, 2, 3]])
    f = K.cochain(0, [1, 2, 3, 4])
    assert f.cup(f.d()).values.tolist() == [1, 3, 2, 3]


def test_a_ring_of_a_grid_filled_by_a_triangle_is_multiplied_as_a_triangle():
    K = grid(3, periodic=True).with_faces("triangles")
    a = K.cochain(1, [2, 3, 5])
    assert a.cup(a).values.tolist() == slow_cup(a, a)


def test_a_network_of_triangles_keeps_its_own_directions():
    import networkx as nx

    K = from_networkx(nx.DiGraph([(1, 0), (1, 2), (2, 0)]), faces="triangles")
    a, b = K.cochain(1, [2, 3, 5]), K.cochain(1, [7, 11, 13])
    assert a.cup(b).values.tolist() == slow_cup(a, b)
