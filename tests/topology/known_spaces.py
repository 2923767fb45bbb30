"""Complexes of known homology, made on the spot."""

from itertools import combinations, pairwise, permutations, product

import numpy as np

from dec.calculus.complex import Complex, grid

TORUS = np.array([[i, (i + 1) % 7, (i + 3) % 7] for i in range(7)] + [[i, (i + 3) % 7, (i + 2) % 7] for i in range(7)])


def pseudo_projective_plane(n):
    """Triangles: a disc whose rim goes n times round a circle of three edges."""
    rim = np.arange(3 * n)
    after = (rim + 1) % (3 * n)
    middle, centre = 3 + rim, 3 + 3 * n
    parts = [(rim % 3, after % 3, middle), (after % 3, 3 + after, middle), (middle, 3 + after, 0 * rim + centre)]
    return Complex.from_faces(np.concatenate([np.stack(part, axis=1) for part in parts]))


def wrapped_polygons(orders):
    """Polygons, each with three corners of its own that it goes round so many times; any of 127 or less."""
    return Complex.from_faces([[3 * k, 3 * k + 1, 3 * k + 2] * n for k, n in enumerate(orders)])


def faces_along_words(seed):
    """Polygons that go round three triangles with a common corner in any order, either way, again and again."""
    random = np.random.default_rng(seed)
    rounds = [[0, 1, 2], [0, 2, 1], [0, 3, 4], [0, 4, 3], [0, 5, 6], [0, 6, 5]]
    n_faces = int(random.integers(1, 6))
    words = [random.integers(0, 6, random.integers(1, 13)) for _ in range(n_faces)]
    return Complex.from_faces([[corner for i in word for corner in rounds[i]] for word in words], 7)


def telescope(n, *, first=False, last=False):
    """Circles, each joined to the next by a face that goes twice round the one and back round the other.

    The last circle is the first, 2**n times, up to boundaries. The first and the last can each be filled by a face.
    """
    circles = np.arange(3 * (n + 1)).reshape(-1, 3).tolist()
    faces = [[*a, *a, a[0], b[0], b[2], b[1], b[0]] for a, b in pairwise(circles)]
    return Complex.from_faces([circles[-1]] * last + faces + [circles[0]] * first)


def house_with_two_rooms():
    """Bing's house: 5 x 3 x 2, with a shaft from above into the lower room and one from below into the upper.

    Source: Bing, Some aspects of the topology of 3-manifolds related to the Poincare conjecture, 1964 (from memory).
    """
    shafts = {(1, 1): (1, 2), (3, 1): (0, 1)}  # column: the heights that it passes
    squares = {
        (2, x, y, z) for x, y, z in product(range(5), range(3), range(3))
        if (x, y, z) not in {(1, 1, 1), (1, 1, 2), (3, 1, 0), (3, 1, 1)}
    }  # fmt: skip
    squares |= {(0, x, y, z) for x, y, z in product((0, 5), range(3), range(2))}
    squares |= {(1, x, y, z) for x, y, z in product(range(5), (0, 3), range(2))}
    for (x, y), (z, _) in shafts.items():
        squares |= {(0, x, y, z), (0, x + 1, y, z), (1, x, y, z), (1, x, y + 1, z), (0, x, y - 1, z)}
    unit = np.eye(3, dtype=int)
    loops = []
    for axis, *corner in sorted(squares):
        a, b = (unit[k] for k in range(3) if k != axis)
        c = np.array(corner)
        loops.append([tuple((c + step).tolist()) for step in (0 * a, a, a + b, b)])
    number = {corner: i for i, corner in enumerate(sorted({corner for loop in loops for corner in loop}))}
    return Complex.from_faces([[number[corner] for corner in loop] for loop in loops])


def subdivided(cells):
    """Barycentric subdivision; a new corner is the set of old corners that it is the middle of."""
    return [[frozenset(order[: k + 1]) for k in range(len(order))] for cell in cells for order in permutations(cell)]


def lens_space(p, q):
    """Tetrahedra: a double pyramid over a p-gon, each upper side glued to the lower one q steps further on.

    Source: Munkres, Elements of Algebraic Topology, 1984, section 40.
    """
    cells = [["N", "S", i, (i + 1) % p] for i in range(p)]
    turned = {"N": "S", **{i: (i + q) % p for i in range(p)}}
    upper = {frozenset(["N", *side]) for side in ([i, (i + 1) % p] for i in range(p))}
    once = subdivided(cells)
    twice = subdivided(once)
    parent = {corner: corner for cell in twice for corner in cell}

    def root(corner):
        while parent[corner] != corner:
            corner = parent[corner]
        return corner

    for corner in list(parent):
        below = frozenset().union(*corner)
        if any(below <= side for side in upper):
            image = frozenset(frozenset(turned[v] for v in old) for old in corner)
            one, other = root(corner), root(image)
            if one != other:
                parent[one] = other
    names = {corner: root(corner) for corner in parent}
    number = {name: i for i, name in enumerate(dict.fromkeys(names.values()))}
    tetrahedra = np.array([[number[names[corner]] for corner in cell] for cell in twice])
    return Complex.from_cells({"tetra": tetrahedra})


def surface_of_genus(genus):
    """Tori in a row, a triangle of each cut out where the next is sewn on."""
    faces = TORUS
    for _ in range(genus - 1):
        other = TORUS + int(faces.max()) + 1
        for mine, theirs in zip(faces[-1].tolist(), other[0, [0, 2, 1]].tolist(), strict=True):
            other = np.where(other == theirs, mine, other)
        faces = np.concatenate([faces[:-1], other[1:]])
    return Complex.from_faces(np.unique(faces, return_inverse=True)[1].reshape(-1, 3))


def heap(n_cells, n_vertices, seed=0):
    """Tetrahedra on corners taken at random."""
    random = np.random.default_rng(seed)
    return Complex.from_cells({"tetra": np.array([random.permutation(n_vertices)[:4] for _ in range(n_cells)])})


def triangles_of_random_corners(n_faces, n_vertices, seed):
    random = np.random.default_rng(seed)
    few = list(combinations(range(n_vertices), 3))
    chosen = random.permutation(len(few))[:n_faces]
    return Complex.from_faces(np.array(few)[chosen], n_vertices)


def solid_with_voids_and_tunnels():
    """A box with two closed voids and a tunnel from face to face."""
    whole = grid((8, 4, 4)).solids["hexahedron"].reshape(7, 3, 3, 8)
    keep = np.ones((7, 3, 3), dtype=bool)
    keep[1, 1, 1] = keep[5, 1, 1] = False
    keep[3, 1, :] = False
    return Complex.from_cells({"hexahedron": whole[keep]})
