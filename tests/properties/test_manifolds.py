"""Manifolds recognised, against looking at the link of every vertex one by one."""

from collections import Counter
from itertools import combinations

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from dec.calculus.complex import Complex, grid

from .complexes import N, loops


def connected(pieces):
    """Whether sets of vertices hang together."""
    pieces = [set(p) for p in pieces]
    seen = pieces.pop() if pieces else set()
    while touching := [p for p in pieces if p & seen]:
        pieces = [p for p in pieces if not p & seen]
        seen = seen.union(*touching)
    return not pieces


def is_line_or_circle(edges):
    """Whether the link of a vertex in a surface, given as pairs, is one path or one cycle."""
    degree = Counter(v for e in edges for v in e)
    return connected(edges) and max(degree.values()) <= 2


def is_sphere_or_disc(triangles):
    """Whether the link of a vertex in a solid is a surface of Euler characteristic 2, or 1 with a boundary."""
    edges = Counter(e for t in triangles for e in combinations(sorted(t), 2))
    vertices = {v for t in triangles for v in t}
    if max(edges.values()) > 2 or not connected(triangles):
        return False
    if not all(is_line_or_circle([set(t) - {v} for t in triangles if v in t]) for v in vertices):
        return False
    return len(vertices) - len(edges) + len(triangles) == (1 if 1 in edges.values() else 2)


@given(st.lists(loops(), max_size=9))
@settings(deadline=None, max_examples=300)
def test_a_surface_is_a_manifold_where_every_vertex_link_is_a_line_or_a_circle(faces):
    sides = [frozenset(s) for f in faces for s in zip(f, f[1:] + f[:1], strict=True)]
    links = {}
    for f in faces:
        for before, at, after in zip(f[-1:] + f[:-1], f, f[1:] + f[:1], strict=True):
            links.setdefault(at, []).append((before, after))
    expected = all(n <= 2 for n in Counter(sides).values()) and all(map(is_line_or_circle, links.values()))
    assert Complex.from_faces(faces, N).is_manifold == expected


def manifold_by_links(cells):
    links = {}
    for cell in cells:
        for v in cell:
            links.setdefault(v, []).append(frozenset(cell) - {v})
    faces = Counter(frozenset(f) for c in cells for f in combinations(c, 3))
    return all(n <= 2 for n in faces.values()) and all(map(is_sphere_or_disc, links.values()))


@given(st.sets(st.frozensets(st.integers(0, 6), min_size=4, max_size=4), min_size=1, max_size=8))
@settings(deadline=None, max_examples=300)
def test_a_solid_is_a_manifold_where_every_vertex_link_is_a_sphere_or_a_disc(cells):
    cells = [sorted(c) for c in cells]
    assert Complex.from_cells({"tetra": cells}).is_manifold == manifold_by_links(cells)


# six tetrahedra round the diagonal of each cube, all cubes alike, so that neighbours fit
PARTS = [[0, 1, 2, 6], [0, 2, 3, 6], [0, 3, 7, 6], [0, 7, 4, 6], [0, 4, 5, 6], [0, 5, 1, 6]]


@given(st.sets(st.integers(0, 47), min_size=1, max_size=40))
@settings(deadline=None, max_examples=200)
def test_parts_of_a_cut_up_block_are_told_apart_as_manifolds_or_not(chosen):
    block = grid((3, 3, 3)).solids["hexahedron"]
    cells = np.concatenate([block[:, part] for part in PARTS])[sorted(chosen)]
    K = Complex.from_cells({"tetra": cells})
    assert K.is_manifold == manifold_by_links(cells.tolist())
    failed = {f.name for f in K.check() if not f.holds} - {"every vertex is used"}
    assert failed <= {"the cells at a vertex form one fan"}
