"""Polygons: rows of corners of any length, their edges, and the walk round each face."""

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from itertools import chain
from typing import Any

import numpy as np
from scipy.sparse import csr_array

from dec.arrays import AnyArray, IntArray, SignArray, frozen, index_array
from dec.errors import InputError, TopologyError
from dec.topology.edges import blocks, pair_limit, sealed, sparse_signs, unique_numbers

__all__ = ["Ragged", "Walks", "edges_of_faces", "face_coboundary", "ragged", "refuse_bad_corners", "standard_loops"]


@dataclass(frozen=True, slots=True)
class Ragged:
    """Rows of different length in one flat array.

    Attributes
    ----------
    flat : int array, shape (total,)
    offsets : int64 array, shape (n + 1,)
        Row i is ``flat[offsets[i]:offsets[i + 1]]``.
    width : int or None
        The common length where all rows have one.
    """

    flat: IntArray
    offsets: IntArray
    width: int | None

    def __len__(self) -> int:
        return len(self.offsets) - 1

    @property
    def lengths(self) -> IntArray:
        """Length of each row; int64 array of shape (n,)."""
        return np.diff(self.offsets)

    @property
    def rows(self) -> IntArray:
        """Row number of each flat entry; int64 array of shape (total,)."""
        return np.repeat(np.arange(len(self)), self.lengths)

    def row(self, index: int) -> IntArray:
        """One row, a view."""
        return self.flat[self.offsets[index] : self.offsets[index + 1]]

    def following(self) -> IntArray:
        """The entry after each one in its row, round the end; int64 array of shape (total,)."""
        if self.width is not None:
            after = np.empty_like(self.flat)
            after[:-1] = self.flat[1:]
            after[self.width - 1 :: self.width] = self.flat[:: self.width]
            return after
        after = np.arange(1, len(self.flat) + 1)
        last = self.offsets[1:][self.lengths > 0] - 1
        after[last] = self.offsets[:-1][self.lengths > 0]
        return self.flat[after]


@dataclass(frozen=True, slots=True)
class Walks:
    """The closed walk round each face: edges in order, +1 where walked along, -1 where walked against.

    Attributes
    ----------
    edges : int array, shape (total,)
    signs : int8 array, shape (total,)
    offsets : int64 array, shape (n2 + 1,)
    width : int or None
        The common number of sides where all faces have one.
    """

    edges: AnyArray
    signs: SignArray
    offsets: IntArray
    width: int | None

    def __len__(self) -> int:
        return len(self.offsets) - 1


def ragged(rows: AnyArray | Sequence[Any], name: str) -> Ragged:
    """Rows given as a rectangular array or as a list of sequences.

    Parameters
    ----------
    rows : int array, shape (n, k), or sequence of sequences of int
    name : str
        What one row is called in messages ("face").

    Returns
    -------
    Ragged

    Raises
    ------
    InputError
        If an entry is not a whole number, or the rows are given as a flat array.

    Examples
    --------
    >>> ragged([[0, 1, 2], [2, 1, 3, 4]], "face").offsets
    array([0, 3, 7])
    """
    if isinstance(rows, np.ndarray) and rows.dtype != object:
        if rows.ndim != 2:
            message = f"{name}s must be given as an (n, k) array or a list of rows, got shape {rows.shape}"
            raise InputError(message)
        flat = index_array(rows, f"{name}s", ndim=2).ravel()
        width = rows.shape[1] or None
        return Ragged(frozen(flat), frozen(np.arange(len(rows) + 1) * rows.shape[1]), width)
    try:
        lengths = np.array([len(row) for row in rows], dtype=np.int64)
        flat = index_array(list(chain.from_iterable(rows)), f"{name}s")
    except (TypeError, InputError):  # numbers of mixed kinds, or something that is no number
        parts = _row_by_row(rows, name)
        lengths = np.array([len(part) for part in parts], dtype=np.int64)
        flat = np.concatenate(parts)
    width = int(lengths[0]) if len(lengths) and lengths[0] and (lengths == lengths[0]).all() else None
    return Ragged(frozen(flat), frozen(np.concatenate([[0], np.cumsum(lengths)])), width)


def _row_by_row(rows: object, name: str) -> list[IntArray]:
    if not isinstance(rows, Iterable):
        message = f"{name}s must be given as an (n, k) array or a list of rows, got {rows!r:.60}"
        raise InputError(message)
    parts = []
    for index, row in enumerate(rows):
        try:
            parts.append(index_array(row, name))
        except InputError:
            message = f"{name} {index} must be a row of whole numbers, got {' '.join(repr(row).split()):.200}"
            raise InputError(message) from None
    return parts


def edges_of_faces(faces: Ragged, n_vertices: int) -> tuple[IntArray, IntArray, Walks]:
    """The distinct edges of polygons, and the walk round each polygon.

    Parameters
    ----------
    faces : Ragged
        Corners of each face, in order.
    n_vertices : int
        Number of vertices, n0.

    Returns
    -------
    tail, head : int64 arrays, shape (n1,)
        Edges from the lower to the higher vertex, in lexicographic order.
    walks : Walks
        +1 where a face walks its edge from the lower to the higher vertex.

    Raises
    ------
    TopologyError
        If a corner lies outside 0 .. n0 - 1, or a face has fewer than three corners; the message names the face.

    Notes
    -----
    A corner given twice running makes no side; `dec.calculus.soundness` reports it.

    Examples
    --------
    >>> tail, head, walks = edges_of_faces(ragged([[0, 1, 2]], "face"), 3)
    >>> tail, head, walks.edges, walks.signs
    (array([0, 0, 1]), array([1, 2, 2]), array([0, 2, 1], dtype=int32), array([ 1,  1, -1], dtype=int8))
    """
    refuse_bad_corners(faces, n_vertices)
    limit = pair_limit(n_vertices, n_vertices)
    start, end, offsets, width = _sides(faces)
    signs = np.empty(len(start), np.int8)
    pair = end  # in the same memory
    for part in blocks(len(start)):
        low, high = np.minimum(start[part], end[part]), np.maximum(start[part], end[part])
        signs[part] = start[part] < end[part]
        low *= n_vertices
        np.add(low, high, out=pair[part])
    signs *= 2
    signs -= 1
    tail_and_head, edges = unique_numbers(pair, limit)
    tail = tail_and_head // max(n_vertices, 1)
    tail_and_head -= tail * n_vertices
    return tail, tail_and_head, Walks(frozen(edges), frozen(signs), offsets, width)


def face_coboundary(walks: Walks, n_edges: int) -> csr_array:
    """Sums round faces: the matrix that takes edge values to face values.

    Parameters
    ----------
    walks : Walks
    n_edges : int
        Number of edges, n1.

    Returns
    -------
    csr_array of int8, shape (n2, n1)
        +1 where the face walks along the edge, -1 where against it; an edge walked both ways has no entry.

    Notes
    -----
    Source: Munkres, Elements of Algebraic Topology, 1984, section 5 (boundary operator, transposed).

    Examples
    --------
    >>> face_coboundary(edges_of_faces(ragged([[0, 1, 2]], "face"), 3)[2], 3).toarray()
    array([[ 1, -1,  1]], dtype=int8)
    """
    if walks.width == 3 and len(walks):
        return _triangle_coboundary(walks, n_edges)
    return sparse_signs(walks.offsets, walks.edges, walks.signs, n_edges)


def _triangle_coboundary(walks: Walks, n_edges: int) -> csr_array:
    # an edge and its sign share one word, and three words are put in order by three comparisons
    edges, signs = walks.edges.reshape(-1, 3), walks.signs.reshape(-1, 3)
    indices, data = np.empty_like(edges), np.empty_like(signs)
    for part in blocks(len(edges)):
        a, b, c = (edges[part].T.astype(np.int64) << 1) | (signs[part].T > 0)
        a, b = np.minimum(a, b), np.maximum(a, b)
        b, c = np.minimum(b, c), np.maximum(b, c)
        a, b = np.minimum(a, b), np.maximum(a, b)
        if ((a >> 1) == (b >> 1)).any() or ((b >> 1) == (c >> 1)).any():
            return sparse_signs(walks.offsets, walks.edges, walks.signs, n_edges)
        for k, word in enumerate((a, b, c)):
            indices[part, k] = word >> 1
            data[part, k] = (word & 1) * 2 - 1
    indptr = walks.offsets.astype(indices.dtype)
    return sealed(csr_array((data.ravel(), indices.ravel(), indptr), shape=(len(walks), n_edges)))


def standard_loops(loops: IntArray) -> tuple[IntArray, SignArray]:
    """Each loop of corners as it reads from its lowest corner on to the lower neighbour.

    Parameters
    ----------
    loops : int64 array, shape (n, k)

    Returns
    -------
    standard : int64 array, shape (n, k)
        The lexicographically least of the 2 k ways to write the loop down.
    sign : int8 array, shape (n,)
        -1 where that walks the loop backwards.

    Examples
    --------
    >>> standard_loops(np.array([[2, 0, 1, 3]]))
    (array([[0, 1, 3, 2]]), array([1], dtype=int8))
    """
    standard, sign = np.empty_like(loops), np.empty(len(loops), np.int8)
    for part in blocks(len(loops)):
        standard[part], sign[part] = _standard_block(loops[part])
    return standard, sign


def _standard_block(loops: IntArray) -> tuple[IntArray, SignArray]:
    width = loops.shape[1]
    ascending = np.sort(loops, axis=1)
    if width == 3:  # ascending corners; a triangle that is turned like them goes up twice and down once
        standard = ascending
        sign = np.where((loops < np.roll(loops, -1, axis=1)).sum(axis=1) == 2, 1, -1)
    else:
        start = np.argmin(loops, axis=1)
        turns = np.arange(width)
        forward = np.take_along_axis(loops, (start[:, None] + turns) % width, axis=1)
        backward = np.take_along_axis(loops, (start[:, None] - turns) % width, axis=1)
        keep = forward[:, 1] <= backward[:, 1]
        standard, sign = np.where(keep[:, None], forward, backward), np.where(keep, 1, -1)
    for row in np.flatnonzero((ascending[:, 1:] == ascending[:, :-1]).any(axis=1)):  # a corner stands there twice
        corners = loops[row].tolist()
        ways = [(corners[i:] + corners[:i], 1) for i in range(width)]
        ways += [(way[::-1], -1) for way, _ in ways]
        standard[row], sign[row] = min(ways, key=lambda way: way[0])
    return standard, sign.astype(np.int8)


def _sides(faces: Ragged) -> tuple[IntArray, IntArray, IntArray, int | None]:
    """Return start and end vertex of each side, where each face's sides begin, and their common number."""
    start, end = faces.flat, faces.following()
    moves = start != end
    if moves.all():
        return start, end, faces.offsets, faces.width
    kept = np.concatenate([[0], np.cumsum(moves)])[faces.offsets]
    return start[moves], end[moves], frozen(kept), None


def refuse_bad_corners(faces: Ragged, n_vertices: int) -> None:
    """Return quietly, or raise TopologyError naming the first face with too few corners or an unknown vertex."""
    if len(faces) and int(faces.lengths.min()) < 3:
        face = int(np.argmin(faces.lengths))
        message = f"face {face} must have at least three corners, got {faces.row(face).tolist()}"
        raise TopologyError(message)
    if faces.flat.size and (int(faces.flat.min()) < 0 or int(faces.flat.max()) >= n_vertices):
        at = int(np.argmax((faces.flat < 0) | (faces.flat >= n_vertices)))
        face = int(np.searchsorted(faces.offsets, at, side="right")) - 1
        message = f"face {face} names vertex {faces.flat[at]}; there are vertices 0 .. {n_vertices - 1}"
        raise TopologyError(message)
