"""Slow, obvious sums on small meshes, corner by corner, to hold the fast ones against."""

import numpy as np

from dec.calculus.complex import Complex
from dec.geometry.fields import integrate_field


def edge_circulation(K: Complex, field: np.ndarray) -> list[float]:
    """Mean of both ends dot edge, rounded as the package rounds it: the exact statements take these floats as given."""
    return integrate_field(K, field).values.tolist()


def as_stored(K: Complex) -> list[int]:
    """The boundary of all faces as they are turned, edge by edge, walked by hand."""
    count = dict.fromkeys(zip(K.tail.tolist(), K.head.tolist(), strict=True), 0)
    for face in range(len(K.faces)):
        corners = K.faces.row(face).tolist()
        for a, b in zip(corners, corners[1:] + corners[:1], strict=True):
            count[(a, b) if (a, b) in count else (b, a)] += 1 if (a, b) in count else -1
    return list(count.values())


def edges_of(K: Complex, face: int) -> list[int]:
    corners = K.faces.row(face).tolist()
    ends = {pair: e for e, pair in enumerate(zip(K.tail.tolist(), K.head.tolist(), strict=True))}
    pairs = zip(corners, corners[1:] + corners[:1], strict=True)
    return [ends[a, b] if (a, b) in ends else ends[b, a] for a, b in pairs]


def circulation_by_hand(K: Complex, field: np.ndarray) -> dict[int, tuple[float, float]]:
    """Circulation round every face by the trapezoid rule from corner to corner, and the sum of its magnitudes."""
    result = {}
    for face in range(len(K.faces)):
        corners = K.faces.row(face).tolist()
        value = gross = 0.0
        for a, b in zip(corners, corners[1:] + corners[:1], strict=True):
            step = sum((field[a, k] + field[b, k]) / 2 * (K.points[b, k] - K.points[a, k]) for k in range(2))
            value, gross = value + step, gross + abs(step)
        result[face] = value, gross
    return result
