"""Meshes with fields for the tests of mesh audits: the samples of the project, and small ones made here."""

from dataclasses import replace
from pathlib import Path

import numpy as np

from dec.arrays import FloatArray, IntArray
from dec.audit.record import Audit
from dec.calculus.complex import Complex
from dec.calculus.dataset import Dataset, Field, Region
from dec.files.read import read

MESHES = Path(__file__).parents[2] / "meshes"

# Corners of a unit cube by x + 2 y + 4 z, and its sides as squares turned outward.
CUBE = np.array([[0, 2, 3, 1], [4, 5, 7, 6], [0, 1, 5, 4], [2, 6, 7, 3], [0, 4, 6, 2], [1, 3, 7, 5]])
CUBE_POINTS = np.array([[k & 1, k >> 1 & 1, k >> 2] for k in range(8)], dtype=float)


def sample(name: str) -> Dataset:
    """A sample mesh of the project."""
    return read(MESHES / name)


def with_field(data: Dataset, name: str, at: str, values: FloatArray) -> Dataset:
    """The dataset with one field put in or replaced."""
    places = {key: dict(value) for key, value in data.fields.items()}
    places.setdefault(name, {})[at] = Field(name, at, np.asarray(values, dtype=float))
    return replace(data, fields=places)


def dataset(
    K: Complex, field: FloatArray, at: str = "vertices", regions: dict[str, tuple[int, list[int]]] | None = None
) -> Dataset:
    """A complex with one field, U, and named regions given as degree and cells."""
    named = {name: Region(name, degree, np.array(cells)) for name, (degree, cells) in (regions or {}).items()}
    return Dataset(K, {}, {"U": {at: Field("U", at, np.asarray(field, dtype=float))}}, named)


def triangles_of(squares: IntArray) -> IntArray:
    """Every square cut in two along its first diagonal."""
    return np.concatenate([squares[:, [0, 1, 2]], squares[:, [0, 2, 3]]])


def triangulated_square(side: int, seed: int) -> Complex:
    """A square of counter-clockwise triangles whose inner points are moved about a little."""
    i = np.arange((side + 1) ** 2).reshape(side + 1, side + 1)
    squares = np.stack([i[:-1, :-1], i[1:, :-1], i[1:, 1:], i[:-1, 1:]], axis=-1).reshape(-1, 4)
    points = np.stack(np.meshgrid(np.arange(side + 1.0), np.arange(side + 1.0), indexing="ij"), axis=-1)
    points[1:-1, 1:-1] += np.random.default_rng(seed).uniform(-0.3, 0.3, points[1:-1, 1:-1].shape)
    return Complex.from_faces(triangles_of(squares), points=points.reshape(-1, 2) / side)


def box(side: int = 3, low: float = 0.0, high: float = 1.0) -> tuple[IntArray, FloatArray]:
    """Triangles and points of the surface of a cube, each side cut into side by side squares, turned outward."""
    steps = np.linspace(0, 1, side + 1)
    corners, squares, first = [], [], 0
    for sides in CUBE:
        a, b, _, d = CUBE_POINTS[sides]
        u, v = np.meshgrid(steps, steps, indexing="ij")
        corners.append((a + u[..., None] * (b - a) + v[..., None] * (d - a)).reshape(-1, 3))
        i = first + np.arange((side + 1) ** 2).reshape(side + 1, side + 1)
        squares.append(np.stack([i[:-1, :-1], i[1:, :-1], i[1:, 1:], i[:-1, 1:]], axis=-1).reshape(-1, 4))
        first += (side + 1) ** 2
    points, which = np.unique(np.concatenate(corners).round(12), axis=0, return_inverse=True)
    return triangles_of(which.ravel()[np.concatenate(squares)]), low + (high - low) * points


def row(audit: Audit, table: str, name: object) -> dict[str, object]:
    """One row of a table of an audit, by id."""
    found = audit.table(table)
    return found[found["id"] == name].iloc[0].to_dict()


def noted(audit: Audit, words: str) -> bool:
    """Whether one of the notes holds these words."""
    return any(words in note for note in audit.notes)
