"""Triangles of a plane region with one hole: seeded points, smoothed, joined by Delaunay's rule."""

import numpy as np
from scipy.spatial import Delaunay, cKDTree

__all__ = ["is_inside", "polygon_area", "triangulate"]


def triangulate(outer, hole, size, *, seed, n_smoothing=8):
    """Points and counter-clockwise triangles between two polygons.

    The corners of the polygons are kept exactly, first the outer ones, then the hole's; points between them are drawn
    at random, none nearer to another than 0.8 of the wanted length, then moved to the mean of their neighbours.

    Parameters
    ----------
    outer, hole : float64 arrays, shape (m, 2)
        Corners, counter-clockwise, a wanted edge length apart; the outer polygon is convex.
    size : callable
        Wanted edge length at points of shape (n, 2), an array of shape (n,).
    seed : int
        Seed of the random points.
    n_smoothing : int
        How often the points are moved.

    Returns
    -------
    points : float64 array, shape (n0, 2)
        Corners of both polygons, then the points between.
    triangles : int array, shape (n2, 3)
        Corners, counter-clockwise.

    Raises
    ------
    RuntimeError
        If an edge of a polygon is not an edge of the triangles.
    """
    fixed = np.concatenate([outer, hole])
    points = np.concatenate([fixed, _scattered(outer, hole, size, np.random.default_rng(seed))])
    for _ in range(n_smoothing):
        triangles = _triangles(points, hole)
        a, b = np.concatenate([triangles[:, [0, 1]], triangles[:, [1, 2]], triangles[:, [2, 0]]]).T
        total, n_neighbours = np.zeros_like(points), np.bincount(a, minlength=len(points))
        np.add.at(total, a, points[b])
        free = slice(len(fixed), None)  # inside the region every edge appears once each way
        points[free] = total[free] / n_neighbours[free, None]
    triangles = _triangles(points, hole)
    _require_polygon_edges(triangles, len(outer), len(hole))
    return points, triangles


def polygon_area(polygon):
    """Signed area of a polygon, positive where it runs counter-clockwise.

    Parameters
    ----------
    polygon : float64 array, shape (m, 2)
        Corners.

    Returns
    -------
    float
        Area in squared units of the corners (the shoelace formula).
    """
    x, y = polygon.T
    return float(np.sum(x * np.roll(y, -1) - np.roll(x, -1) * y) / 2)


def is_inside(points, polygon):
    """Whether each point lies within the polygon, by counting the sides right of it.

    Parameters
    ----------
    points : float64 array, shape (n, 2)
        Points to ask about; on a side itself the answer may be either.
    polygon : float64 array, shape (m, 2)
        Corners.

    Returns
    -------
    bool array, shape (n,)
        True inside.
    """
    x, y = points[:, :1], points[:, 1:]
    (x0, y0), (x1, y1) = polygon.T, np.roll(polygon, -1, axis=0).T
    crosses = (y0 > y) != (y1 > y)
    with np.errstate(divide="ignore", invalid="ignore"):
        is_right = x < x0 + (y - y0) / (y1 - y0) * (x1 - x0)
    return np.sum(crosses & is_right, axis=1) % 2 == 1


def _scattered(outer, hole, size, random):
    """Random points between the polygons, at least 0.8 of the wanted length from each other and from the corners."""
    trials = _trials(outer, size, random)
    reach = 0.8 * size(trials)
    is_free = cKDTree(np.concatenate([outer, hole])).query(trials)[0] >= reach
    is_free &= is_inside(trials, outer) & ~is_inside(trials, hole)
    trials, reach = trials[is_free], reach[is_free]
    is_open, kept = np.ones(len(trials), dtype=bool), []
    tree = cKDTree(trials)
    for index in range(len(trials)):
        if is_open[index]:
            kept.append(index)
            is_open[tree.query_ball_point(trials[index], reach[index])] = False
    return trials[kept]


def _trials(outer, size, random):
    """More random points than wanted, in a random order: a dozen in each square, squares halved down to the size."""
    low, width = outer.min(axis=0)[None], float(np.ptp(outer, axis=0).max())
    quarters = np.array([[0, 0], [0, 1], [1, 0], [1, 1]])
    points = []
    while len(low):
        is_coarse = size(low + width / 2) < width
        here = low[~is_coarse]
        points.append((here[:, None] + width * random.random((len(here), 12, 2))).reshape(-1, 2))
        width /= 2
        low = (low[is_coarse][:, None] + width * quarters).reshape(-1, 2)
    return random.permutation(np.concatenate(points))


def _triangles(points, hole):
    """Delaunay's triangles outside the hole, counter-clockwise, in an order of their own corners alone."""
    triangles = Delaunay(points).simplices.astype(np.int64)
    triangles = triangles[~is_inside(points[triangles].mean(axis=1), hole)]
    (ax, ay), (bx, by), (cx, cy) = (points[triangles[:, corner]].T for corner in range(3))
    is_clockwise = (bx - ax) * (cy - ay) - (by - ay) * (cx - ax) < 0
    triangles[is_clockwise] = triangles[is_clockwise][:, ::-1]
    first = np.argmin(triangles, axis=1)[:, None]
    triangles = np.take_along_axis(triangles, (first + np.arange(3)) % 3, axis=1)
    return triangles[np.lexsort(triangles.T[::-1])]


def _require_polygon_edges(triangles, n_outer, n_hole):
    """Refuse a triangulation whose border is not the two polygons, walked with the region on the left."""
    a, b = np.concatenate([triangles[:, [0, 1]], triangles[:, [1, 2]], triangles[:, [2, 0]]]).T
    directed = set(zip(a.tolist(), b.tolist(), strict=True))
    border = {(tail, head) for tail, head in directed if (head, tail) not in directed}
    wanted = {(i, (i + 1) % n_outer) for i in range(n_outer)}
    wanted |= {(n_outer + (i + 1) % n_hole, n_outer + i) for i in range(n_hole)}
    if border != wanted:
        message = f"the border of the triangles must be the two polygons; edges that differ: {sorted(border ^ wanted)}"
        raise RuntimeError(message)
