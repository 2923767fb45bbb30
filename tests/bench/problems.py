"""Six linear problems that tell solvers apart, each at any size.

P1 a cotangent Laplacian of Delaunay triangles of jittered points, boundary held at zero; P2 a random geometric graph
of mean degree 6 with conductances from 1 to 1000, its largest component; P3 preferential attachment with 4 links a
vertex; P4 a cube grid; P5 a square grid with conductances from 1e-6 to 1e6, evenly spread in the logarithm; P6 as P1,
but stretched 8 to 1 after the triangles were made, so that about 29 % of the off-diagonal entries are positive.
"""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import coo_array, csr_array, diags_array

__all__ = ["PROBLEMS", "Problem"]


@dataclass(frozen=True)
class Problem:
    """A matrix, a right-hand side, and whether constants are its kernel."""

    matrix: csr_array
    right_side: NDArray[np.float64]
    singular: bool


def laplacian(n: int, tail: NDArray[np.int64], head: NDArray[np.int64], weight: NDArray[np.float64]) -> csr_array:
    """The weighted graph Laplacian; parallel edges add up."""
    ends = np.concatenate([tail, head]), np.concatenate([head, tail])
    joined = csr_array(coo_array((np.concatenate([weight, weight]), ends), shape=(n, n)).tocsr())
    joined.sum_duplicates()
    return sorted_csr(diags_array(np.asarray(joined.sum(axis=1))) - joined)


def sorted_csr(matrix: object) -> csr_array:
    """The matrix as a csr_array with sorted 32-bit indices."""
    result = csr_array(matrix)
    result.sort_indices()
    return csr_array((result.data, result.indices.astype(np.int32), result.indptr.astype(np.int32)), shape=result.shape)


def noise(n: int, random: np.random.Generator) -> NDArray[np.float64]:
    """Normal numbers that add up to zero."""
    values = random.standard_normal(n)
    return values - values.mean()


def triangles(n: int, stretch: float) -> Problem:
    """P1 and P6: -div grad u = f on the unit square, stretched along x; the cotangent formula, Dirichlet."""
    from scipy.spatial import Delaunay

    k = round(np.sqrt(n)) + 1
    random = np.random.default_rng(1)
    x, y = np.meshgrid(np.arange(k + 1) / k, np.arange(k + 1) / k, indexing="ij")
    inside = np.zeros((k + 1, k + 1), dtype=bool)
    inside[1:-1, 1:-1] = True
    inside = inside.ravel()
    points = np.stack([x.ravel(), y.ravel()], axis=1)
    points[inside] += random.uniform(-0.35, 0.35, (inside.sum(), 2)) / k
    corners = Delaunay(points).simplices.astype(np.int64)
    points *= [stretch, 1.0]
    opposite = [points[corners[:, (a + 2) % 3]] - points[corners[:, (a + 1) % 3]] for a in range(3)]
    double_area = np.abs(opposite[0][:, 0] * opposite[1][:, 1] - opposite[0][:, 1] * opposite[1][:, 0])
    sound = double_area > 1e-14 / k**2  # the hull's straight sides yield slivers
    tail, head, weight = [], [], []
    for a in range(3):
        b, c = (a + 1) % 3, (a + 2) % 3
        tail.append(corners[sound, b])
        head.append(corners[sound, c])
        weight.append(-0.5 * (opposite[b] * opposite[c]).sum(axis=1)[sound] / double_area[sound])
    whole = laplacian(len(points), np.concatenate(tail), np.concatenate(head), np.concatenate(weight))
    mass = np.bincount(corners[sound].ravel(), np.repeat(double_area[sound] / 6, 3), len(points))
    load = mass * 2 * np.pi**2 * np.sin(np.pi * points[:, 0]) * np.sin(np.pi * points[:, 1])
    free = np.flatnonzero(inside)
    return Problem(sorted_csr(whole[free][:, free]), load[free], singular=False)


def geometric(n: int) -> Problem:
    """P2."""
    from scipy.sparse.csgraph import connected_components
    from scipy.spatial import cKDTree

    random = np.random.default_rng(2)
    points = random.random((n, 2))
    pairs = cKDTree(points).query_pairs(np.sqrt(6 / (np.pi * n)), output_type="ndarray")
    weight = 10 ** random.uniform(0, 3, len(pairs))
    graph = coo_array((np.ones(len(pairs)), (pairs[:, 0], pairs[:, 1])), shape=(n, n)).tocsr()
    label = connected_components(graph, directed=False)[1]
    keep = label == np.bincount(label).argmax()
    number = np.cumsum(keep) - 1
    kept = keep[pairs[:, 0]]
    size = int(keep.sum())
    matrix = laplacian(size, number[pairs[kept, 0]], number[pairs[kept, 1]], weight[kept])
    return Problem(matrix, noise(size, random), singular=True)


def attachment(n: int, links: int = 4) -> Problem:
    """P3: each vertex links to that many earlier ones, drawn from the list of all ends so far."""
    random = np.random.default_rng(3)
    tail, head = np.tril_indices(links + 1, -1)
    first = len(tail)
    total = first + links * (n - links - 1)
    tail, head = np.resize(tail, total), np.resize(head, total)
    ends = np.empty(2 * total, np.int64)
    ends[0 : 2 * first : 2], ends[1 : 2 * first : 2] = tail[:first], head[:first]
    filled = first
    draws = random.random((n, links))
    for v in range(links + 1, n):
        chosen = set(ends[(draws[v] * 2 * filled).astype(np.int64)].tolist())
        while len(chosen) < links:
            chosen.add(int(ends[int(random.random() * 2 * filled)]))
        new = slice(filled, filled + links)
        tail[new], head[new] = v, sorted(chosen)
        ends[2 * filled : 2 * (filled + links) : 2] = v
        ends[2 * filled + 1 : 2 * (filled + links) : 2] = head[new]
        filled += links
    return Problem(laplacian(n, tail, head, np.ones(total)), noise(n, random), singular=True)


def lattice(shape: tuple[int, ...], exponents: tuple[float, float]) -> Problem:
    """P4 and P5: a grid with conductances 10^u, u even between two exponents."""
    random = np.random.default_rng(4)
    n = int(np.prod(shape))
    number = np.arange(n).reshape(shape)
    tail = np.concatenate([np.moveaxis(number, a, 0)[:-1].ravel() for a in range(len(shape))])
    head = np.concatenate([np.moveaxis(number, a, 0)[1:].ravel() for a in range(len(shape))])
    weight = 10 ** random.uniform(*exponents, len(tail))
    return Problem(laplacian(n, tail, head, weight), noise(n, random), singular=True)


def cube(n: int) -> Problem:
    """P4."""
    return lattice((round(n ** (1 / 3)),) * 3, (0.0, 0.0))


def rough(n: int) -> Problem:
    """P5."""
    return lattice((round(np.sqrt(n)),) * 2, (-6.0, 6.0))


PROBLEMS: dict[str, Callable[[int], Problem]] = {
    "P1": lambda n: triangles(n, 1.0),
    "P2": geometric,
    "P3": lambda n: attachment(n // 2),
    "P4": cube,
    "P5": rough,
    "P6": lambda n: triangles(n, 8.0),
}
