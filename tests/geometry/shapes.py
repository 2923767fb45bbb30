"""Small meshes for the tests of geometry: the samples of the project, and some made here."""

from pathlib import Path

import meshio
import numpy as np
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from scipy.spatial import Delaunay

from dec.calculus.complex import Complex

MESHES = Path(__file__).parents[2] / "meshes"

ICOSAHEDRON = [
    [0, 1, 2], [0, 2, 3], [0, 3, 4], [0, 4, 5], [0, 5, 1], [1, 6, 2], [2, 7, 3], [3, 8, 4], [4, 9, 5], [5, 10, 1],
    [6, 7, 2], [7, 8, 3], [8, 9, 4], [9, 10, 5], [10, 6, 1], [11, 7, 6], [11, 8, 7], [11, 9, 8], [11, 10, 9],
    [11, 6, 10],
]  # fmt: skip


def sample(name):
    """A mesh of the project with its point fields and cell fields."""
    mesh = meshio.read(MESHES / name)
    block = mesh.cells[0]
    if block.type == "tetra":
        K = Complex.from_cells({"tetra": block.data}, points=mesh.points)
    else:
        K = Complex.from_faces(np.asarray(block.data, np.int64), points=mesh.points)
    return K, mesh.point_data, {k: v[0] for k, v in mesh.cell_data.items()}


def joined(name):
    """A mesh whose triangles each have corners of their own, with exactly equal points joined."""
    mesh = meshio.read(MESHES / name)
    corners = mesh.points[mesh.cells[0].data].reshape(-1, 3).astype(np.float64)
    points, which = np.unique(corners, axis=0, return_inverse=True)
    return Complex.from_faces(which.reshape(-1, 3), points=points)


def icosahedron():
    """The regular one, edge length not 1, turned outward."""
    up, ring = 1 / 5**0.5, np.arange(5) * 2 * np.pi / 5
    upper = np.stack([2 * up * np.cos(ring), 2 * up * np.sin(ring), np.full(5, up)], axis=1)
    lower = np.stack([2 * up * np.cos(ring + np.pi / 5), 2 * up * np.sin(ring + np.pi / 5), np.full(5, -up)], axis=1)
    points = np.concatenate([[[0, 0, 1]], upper, lower, [[0, 0, -1]]])
    return Complex.from_faces(ICOSAHEDRON, points=points)


def kite():
    """Two flat triangles, of the catalogue entry kept in tests/reference/G7.json."""
    return Complex.from_faces([[0, 1, 2], [1, 0, 3]], points=[[0, 0], [2, 0], [1, 0.2], [1, -0.2]])


def delaunay(seed, n=30, dim=2):
    """Triangles or tetrahedra on random points."""
    random = np.random.default_rng(seed)
    points = random.uniform(-1, 1, (n, dim))
    cells = Delaunay(points).simplices.astype(np.int64)
    if dim == 2:
        return Complex.from_faces(cells, points=points)
    p = points[cells]
    left = np.linalg.det(p[:, 1:] - p[:, :1]) < 0
    cells[left] = cells[left][:, [1, 0, 2, 3]]
    return Complex.from_cells({"tetra": cells}, points=points)


def octagons_and_squares(n=2):
    """The tiling of the plane by regular octagons and squares, n by n octagons; all polygons have a circumcircle."""
    unit, step, where, loops = 1.0, 1 + 2**0.5, {}, []

    def vertex(x, y):
        return where.setdefault((round(x, 6), round(y, 6)), (len(where), x, y))[0]

    half, far = unit / 2, step / 2
    octagon = [
        (half, -far),
        (far, -half),
        (far, half),
        (half, far),
        (-half, far),
        (-far, half),
        (-far, -half),
        (-half, -far),
    ]
    for i in range(n):
        loops.extend([vertex(i * step + x, j * step + y) for x, y in octagon] for j in range(n))
    for i in range(n - 1):
        for j in range(n - 1):
            x, y, r = (i + 0.5) * step, (j + 0.5) * step, far - half
            loops.append([vertex(x + a, y + b) for a, b in ((r, 0), (0, r), (-r, 0), (0, -r))])
    points = np.array([(x, y) for _, x, y in where.values()])
    return Complex.from_faces(loops, points=points)


def hexahedra(shape=(3, 2, 2), jitter=0.0, seed=0, spacing=(1.0, 0.5, 2.0)):
    """Hexahedra in rows, their inner and outer points moved at random."""
    random = np.random.default_rng(seed)
    numbers = np.arange(np.prod(np.array(shape) + 1)).reshape(np.array(shape) + 1)
    points = np.stack(
        np.meshgrid(*(np.arange(n + 1) * h for n, h in zip(shape, spacing, strict=True)), indexing="ij"), -1
    )
    points = points.reshape(-1, 3) + random.uniform(-jitter, jitter, (numbers.size, 3))
    corner = [(0, 0, 0), (1, 0, 0), (1, 1, 0), (0, 1, 0), (0, 0, 1), (1, 0, 1), (1, 1, 1), (0, 1, 1)]
    cells = [
        [numbers[i + a, j + b, k + c] for a, b, c in corner]
        for i in range(shape[0]) for j in range(shape[1]) for k in range(shape[2])
    ]  # fmt: skip
    return Complex.from_cells({"hexahedron": np.array(cells)}, points=points)


def mixed_solid():
    """A unit cube with a tetrahedron beside one of its faces' triangles kept apart: two kinds in one complex."""
    cube = [[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0], [0, 0, 1], [1, 0, 1], [1, 1, 1], [0, 1, 1]]
    points = [*cube, [3, 0, 0], [4, 0, 0], [3, 1, 0], [3, 0, 1]]
    return Complex.from_cells({"tetra": [[8, 9, 10, 11]], "hexahedron": [list(range(8))]}, points=points)


FINITE = st.floats(-8, 8, allow_nan=False).map(lambda x: round(x, 3))


@st.composite
def polygon_soups(draw, dim=3):
    """Any polygons on any points, of 3 to 7 corners each: a complex that need be no surface."""
    n = draw(st.integers(7, 12))
    points = draw(arrays(np.float64, (n, dim), elements=FINITE))
    loops = draw(st.lists(st.lists(st.integers(0, n - 1), min_size=3, max_size=7, unique=True), min_size=1, max_size=6))
    return Complex.from_faces(loops, n, points=points)


@st.composite
def triangle_soups(draw, dim=3):
    """Any triangles on any points."""
    n = draw(st.integers(3, 9))
    points = draw(arrays(np.float64, (n, dim), elements=FINITE))
    loops = draw(st.lists(st.lists(st.integers(0, n - 1), min_size=3, max_size=3, unique=True), min_size=1, max_size=8))
    return Complex.from_faces(np.array(loops), n, points=points)


@st.composite
def tetrahedron_soups(draw):
    """Tetrahedra of either hand on random points, any two sharing what they share."""
    n = draw(st.integers(4, 8))
    points = draw(arrays(np.float64, (n, 3), elements=FINITE))
    cells = draw(st.lists(st.lists(st.integers(0, n - 1), min_size=4, max_size=4, unique=True), min_size=1, max_size=6))
    return Complex.from_cells({"tetra": np.array(cells)}, points=points)
