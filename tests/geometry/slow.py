"""Slow and obvious versions of geometry, one cell at a time, to hold the fast ones against."""

from itertools import pairwise

import numpy as np

from dec.topology.solids import FACES


def spaced(vector):
    """Three components."""
    return np.concatenate([vector, np.zeros(3 - len(vector))])


def place(K, vertex):
    return spaced(K.points[vertex])


def area_vector(K, face):
    """A triangle fan from the second corner, which any choice of corner must match."""
    p = [place(K, v) for v in K.faces.row(face)]
    p = p[1:] + p[:1]
    return sum((np.cross(a - p[0], b - p[0]) / 2 for a, b in pairwise(p[1:])), np.zeros(3))


def solid_corners(K):
    return [(kind, row) for kind, rows in K.solids.items() for row in rows]


def volume(K, cell):
    kind, row = solid_corners(K)[cell]
    total = 0.0
    for face in FACES[kind]:
        p = [place(K, v) for v in row[face]]
        middle = sum(p) / len(p)
        for a, b in zip(p, p[1:] + p[:1], strict=True):
            total += np.dot(middle, np.cross(a, b)) / 6
    return total


def angle(a, b):
    return np.arccos(np.clip(np.dot(a, b) / np.linalg.norm(a) / np.linalg.norm(b), -1, 1))


def angles(K):
    result = []
    for face in range(len(K.faces)):
        p = [place(K, v) for v in K.faces.row(face)]
        up = area_vector(K, face)
        for i, at in enumerate(p):
            before, after = p[i - 1] - at, p[(i + 1) % len(p)] - at
            turn = angle(before, after)
            inward = len(p) > 3 and np.dot(np.cross(after, before), up) < 0
            result.append(2 * np.pi - turn if inward else turn)
    return np.array(result)


def circumcentre(points):
    """By least squares in the span of the points."""
    p = np.array(points)
    arms = p[1:] - p[0]
    return p[0] + np.linalg.lstsq(arms, (arms**2).sum(axis=1) / 2, rcond=None)[0]


def mean(points):
    return sum(points) / len(points)


def edge_of(K, a, b):
    found = [e for e in range(K.counts[1]) if {int(K.tail[e]), int(K.head[e])} == {int(a), int(b)}]
    assert len(found) == 1
    return found[0]


def duals(K, kind):
    """Dual measures of all cells, by adding up every flag of vertex, edge, face and solid cell."""
    signed = kind == "circumcentric"
    centre = circumcentre if signed else mean
    measures = [np.zeros(n) for n in K.counts]
    measures[K.dim][:] = 1
    for face in range(len(K.faces)):
        row = [int(v) for v in K.faces.row(face)]
        in_face = [place(K, v) for v in row]
        face_centre = centre(in_face)
        for cell, outside in _cells_of(K, face):
            height = 1.0
            if cell is not None:
                corners = [place(K, v) for v in solid_corners(K)[cell][1]]
                cell_centre = centre(corners)
                height = np.linalg.norm(cell_centre - face_centre)
                if signed:
                    height *= np.sign(np.dot(face_centre - cell_centre, outside) or 1.0)
                measures[2][face] += height
            for a, b in zip(row, row[1:] + row[:1], strict=True):
                edge = edge_of(K, a, b)
                middle = (place(K, a) + place(K, b)) / 2
                along = place(K, b) - place(K, a)
                reach = np.linalg.norm(face_centre - middle)
                if signed:
                    inward = np.cross(area_vector(K, face), along)
                    reach *= np.sign(np.dot(face_centre - middle, inward) or 1.0)
                    piece = reach * height / (1 if cell is None else 2)
                    share = piece * np.linalg.norm(along) / 2 / K.dim
                else:
                    piece, share = _flat_pieces(place(K, a), middle, face_centre, None if cell is None else cell_centre)
                measures[1][edge] += piece
                measures[0][a] += share
                measures[0][b] += share
    return measures


def _flat_pieces(at, middle, face_centre, cell_centre):
    if cell_centre is None:
        return np.linalg.norm(face_centre - middle), np.linalg.norm(np.cross(middle - at, face_centre - at)) / 2
    span = np.cross(face_centre - middle, cell_centre - middle)
    return np.linalg.norm(span) / 2, abs(np.dot(at - middle, span)) / 6


def _cells_of(K, face):
    if K.dim == 2:
        return [(None, None)]
    matrix = K.coboundary(2).toarray()
    found = []
    for cell in np.flatnonzero(matrix[:, face]):
        hand = np.sign(volume(K, cell))
        found.append((cell, matrix[cell, face] * hand * area_vector(K, face)))
    return found


def measures(K):
    """Lengths, areas and volumes by degree."""
    by_degree = [np.ones(K.counts[0])]
    by_degree.append(np.array([np.linalg.norm(place(K, b) - place(K, a)) for a, b in zip(K.tail, K.head, strict=True)]))
    by_degree.append(np.array([np.linalg.norm(area_vector(K, f)) for f in range(len(K.faces))]))
    if K.dim == 3:
        by_degree.append(np.array([abs(volume(K, c)) for c in range(K.counts[3])]))
    return by_degree


def fan_flux(K, face, field):
    """Through the triangles from the first corner, corner mean times area vector."""
    row = K.faces.row(face)
    total = 0.0
    for i, j in pairwise(row[1:]):
        triangle = [place(K, v) for v in (row[0], i, j)]
        area = np.cross(triangle[1] - triangle[0], triangle[2] - triangle[0]) / 2
        total += np.dot((field[row[0]] + field[i] + field[j]) / 3, area)
    return total


def cells_at_edge(K, edge):
    ends = {int(K.tail[edge]), int(K.head[edge])}
    if K.dim == 1:
        return [edge]
    if K.dim == 2:
        return [f for f, _ in _sides(K) if _ == edge]
    faces = [f for f, e in _sides(K) if e == edge]
    matrix = K.coboundary(2).toarray()
    assert all(len(ends & set(K.faces.row(f).tolist())) == 2 for f in faces)
    return sorted({int(c) for f in faces for c in np.flatnonzero(matrix[:, f])})


def _sides(K):
    offsets = K.walks.offsets
    return [(f, int(e)) for f in range(len(offsets) - 1) for e in K.walks.edges[offsets[f] : offsets[f + 1]]]


def cell_vertices(K):
    if K.dim == 1:
        return [{int(a), int(b)} for a, b in zip(K.tail, K.head, strict=True)]
    if K.dim == 2:
        return [set(K.faces.row(f).tolist()) for f in range(len(K.faces))]
    return [set(row.tolist()) for _, row in solid_corners(K)]


def gradient(K, cell, field):
    """By least squares on the differences from the mean of the corners: the linear interpolant of a simplex."""
    corners = sorted(cell_vertices(K)[cell])
    if len(corners) == 8:
        return box_gradient(K, cell, field)
    p = np.array([place(K, v) for v in corners])
    f = np.array([spaced(field[v]) for v in corners])
    return (np.linalg.pinv(p - p.mean(axis=0), rcond=1e-9) @ (f - f.mean(axis=0))).T


def box_gradient(K, cell, field):
    """Corner means through the fans of all faces, outward, by the volume."""
    total = np.zeros((3, 3))
    for face, sign in enumerate(K.coboundary(2).toarray()[cell]):
        row = K.faces.row(face)
        for i, j in pairwise(row[1:]):
            area = np.cross(place(K, i) - place(K, row[0]), place(K, j) - place(K, row[0])) / 2
            total += sign * np.outer((field[row[0]] + field[i] + field[j]) / 3, area)
    return total / volume(K, cell)


def range_near(K, left, along, ends, field):
    """Greatest difference of left . G u among the cells at the ends, u the direction laid into each cell."""
    found = []
    for cell, corners in enumerate(cell_vertices(K)):
        if not corners & {int(v) for v in ends}:
            continue
        p = np.array([place(K, v) for v in sorted(corners)])
        span = np.linalg.pinv(p - p[0], rcond=1e-9) @ (p - p[0])
        laid = span @ along
        if np.linalg.norm(laid) ** 2 < 0.75:
            continue
        found.append(left @ gradient(K, cell, field) @ laid / np.linalg.norm(laid))
    return max(found) - min(found) if found else 0.0


def edge_error(K, edge, field, turn):
    """The estimate for a value along or across an edge, without its rounding allowance."""
    step = place(K, K.head[edge]) - place(K, K.tail[edge])
    h = np.linalg.norm(step)
    along = step / h
    left = np.array([along[1], -along[0], 0]) if turn else along
    return h**2 / 12 * range_near(K, left, along, (K.tail[edge], K.head[edge]), field)


def face_error(K, face, field):
    """The estimate for a flux through a face, without its rounding allowance."""
    area = area_vector(K, face)
    size = np.linalg.norm(area)
    row, total = K.faces.row(face), 0.0
    for a, b in zip(row, np.roll(row, -1), strict=True):
        side = place(K, b) - place(K, a)
        h = np.linalg.norm(side)
        total += h * range_near(K, area / size, side / h, (a, b), field)
    return total * size / 24
