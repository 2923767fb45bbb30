"""The cells of a complex, numbered, and what follows from their incidence alone."""

from collections.abc import Iterable, Mapping
from copy import copy
from functools import cached_property
from types import MappingProxyType
from typing import Any

import numpy as np
from scipy.sparse import csr_array

from dec.arrays import AnyArray, FloatArray, IntArray, ObjectArray, frozen, index_array
from dec.calculus.arguments import checked_degree
from dec.calculus.homology_groups import HomologyGroup, all_groups
from dec.calculus.lattice import Lattice
from dec.errors import InputError, TopologyError
from dec.topology.edges import edge_coboundary, sealed
from dec.topology.graphs import Forest, components, spanning_forest
from dec.topology.polygons import Ragged, Walks, face_coboundary
from dec.topology.surfaces import Incidences, Sheets, boundary_walks, link_labels, reversing_walk, sheets

__all__ = ["Cells"]

_NAMES = (("vertex", "vertices"), ("edge", "edges"), ("face", "faces"), ("cell", "cells"))


class Cells:
    """Numbered cells with their incidence: the part of a `Complex` that needs no chains and no cochains.

    Users meet it as `Complex`, which documents the attributes. Arrays given to it become read-only.
    """

    def __init__(
        self, n_vertices: int, tail: IntArray, head: IntArray, *, walks: Walks | None = None,
        faces: Ragged | None = None, cell_coboundary: csr_array | None = None,
        solids: Mapping[str, IntArray] | None = None, points: FloatArray | None = None,
        vertex_ids: ObjectArray | None = None, edge_ids: ObjectArray | None = None, lattice: Lattice | None = None,
    ) -> None:  # fmt: skip
        self.tail, self.head = tail, head
        self.walks, self.faces, self.solids = walks, faces, MappingProxyType(dict(solids or {}))
        self.points, self.vertex_ids, self.edge_ids, self.lattice = points, vertex_ids, edge_ids, lattice
        arrays: list[AnyArray | None] = [tail, head, points, vertex_ids, edge_ids, *self.solids.values()]
        matrices = [edge_coboundary(tail, head, n_vertices)]
        if walks is not None and faces is not None:
            arrays += [walks.edges, walks.signs, walks.offsets, faces.flat, faces.offsets]
            matrices.append(face_coboundary(walks, len(tail)))
        for array in arrays:
            if array is not None:
                frozen(array)
        if cell_coboundary is not None:
            matrices.append(sealed(cell_coboundary))
        self._coboundaries = tuple(matrices)
        self.counts: tuple[int, ...] = (n_vertices, *(int(m.shape[0]) for m in matrices))

    def __setattr__(self, name: str, value: object) -> None:
        if "counts" in self.__dict__:
            message = f"a complex never changes, so {name} cannot be set; make another one"
            raise AttributeError(message)
        super().__setattr__(name, value)

    def __reduce__(self) -> tuple[Any, ...]:
        kept = {
            "walks": self.walks, "faces": self.faces, "solids": dict(self.solids), "points": self.points,
            "cell_coboundary": self._coboundaries[2] if self.dim == 3 else None, "vertex_ids": self.vertex_ids,
            "edge_ids": self.edge_ids, "lattice": self.lattice,
        }  # fmt: skip
        return _made_again, (type(self), self.counts[0], self.tail, self.head, kept)

    @property
    def dim(self) -> int:
        """Dimension of the complex: 1 for a graph, 2 for a surface, 3 for a solid."""
        return len(self.counts) - 1

    def coboundary(self, k: int) -> csr_array:
        """Signed incidence from k-cells to (k+1)-cells.

        Parameters
        ----------
        k : int
            0 for differences along edges, 1 for sums round faces, 2 for sums over the skin of solid cells.

        Returns
        -------
        csr_array of int8, shape (n_{k+1}, n_k), read-only
            Widen it before multiplying two of them, ``K.coboundary(1).astype(int) @ K.coboundary(0)``: int8 wraps in
            silence, and a vertex of degree 200 would count -56.

        Raises
        ------
        InputError
            If there are no k-cells or nothing above them.

        Examples
        --------
        >>> from dec.calculus.complex import Complex
        >>> Complex.from_faces([[0, 1, 2]]).coboundary(1).toarray()
        array([[ 1, -1,  1]], dtype=int8)
        """
        return copy(self._coboundaries[checked_degree(k, range(self.dim), self.dim)])

    def boundary(self, k: int) -> csr_array:
        """Signed incidence from k-cells to (k-1)-cells, the transpose of ``coboundary(k - 1)``.

        Parameters
        ----------
        k : int
            1 for the ends of edges, 2 for the sides of faces, 3 for the faces of solid cells.

        Returns
        -------
        csr_array of int8, shape (n_{k-1}, n_k), read-only
            Widen it before multiplying two of them, as with `coboundary`.

        Raises
        ------
        InputError
            If k is not 1 .. dim.

        Examples
        --------
        >>> from dec.calculus.complex import Complex
        >>> Complex.from_edges([0, 1], [1, 2]).boundary(1).toarray()
        array([[-1,  0],
               [ 1, -1],
               [ 0,  1]], dtype=int8)
        """
        return copy(self._boundaries[checked_degree(k, range(1, self.dim + 1), self.dim) - 1])

    @cached_property
    def _boundaries(self) -> tuple[csr_array, ...]:
        return tuple(sealed(matrix.T.tocsr()) for matrix in self._coboundaries)

    @cached_property
    def component_labels(self) -> IntArray:
        """Component of each vertex, numbered by lowest vertex; int64 array of shape (n0,), read-only."""
        label = components(self.tail, self.head, self.counts[0])[1]
        frozen(label)
        return label

    @property
    def n_components(self) -> int:
        """Number of connected components."""
        return int(self.component_labels.max(initial=-1)) + 1

    @property
    def euler(self) -> int:
        """Euler characteristic, the alternating sum of the counts."""
        return sum((-1) ** k * n for k, n in enumerate(self.counts))

    @cached_property
    def forest(self) -> Forest:
        """A breadth-first spanning forest, from the lowest vertex of each component."""
        return spanning_forest(self.tail, self.head, self.counts[0])

    @cached_property
    def incidences(self) -> Incidences:
        """Every use of a facet by a top cell; TopologyError for a graph, whose edges have their two ends only."""
        walks = self._walks_of_faces()
        if self.dim == 2:
            owner = np.repeat(np.arange(len(walks)), np.diff(walks.offsets))
            return Incidences.of(walks.edges, owner, walks.signs, self.counts[1], self.counts[2])
        matrix = self._coboundaries[2].tocoo()
        times = np.abs(matrix.data.astype(np.int64))  # more than once only where a cell meets itself
        facet, cell, sign = (np.repeat(part, times) for part in (matrix.col, matrix.row, np.sign(matrix.data)))
        return Incidences.of(facet, cell, sign, self.counts[2], self.counts[3])

    @cached_property
    def sheets(self) -> Sheets:
        """Top cells joined across facets that exactly two of them use, with a coherent orientation."""
        return sheets(self.incidences)

    @cached_property
    def fans(self) -> IntArray:
        """Fan of faces at the tail end (2 e) and head end (2 e + 1) of every edge; int64 array of shape (2 n1,)."""
        return link_labels(self._walks_of_faces(), self.counts[1])

    def boundary_walks(self) -> Walks:
        """The closed loops of edges that one face uses, as rows of signed edges; see `Complex.boundary_loops`.

        Raises
        ------
        TopologyError
            If the complex is no surface.
        """
        if self.dim != 2:
            message = f"boundary loops belong to a surface, this complex has dimension {self.dim}"
            raise TopologyError(message)
        return boundary_walks(self._walks_of_faces(), self.incidences.uses, self.fans)

    def betti(self) -> tuple[int, ...]:
        """Betti numbers, the ranks of `homology`: components, independent loops, enclosed voids, ...; exact.

        Returns
        -------
        tuple of int, length dim + 1

        Raises
        ------
        TopologyError
            As `homology`.

        Examples
        --------
        >>> from dec.calculus.complex import grid
        >>> grid((4, 4), periodic=True).betti()
        (1, 2, 1)
        """
        return tuple(group.rank for group in self._homology)

    def homology(self, k: int, *, relative: bool = False) -> HomologyGroup:
        """Closed chains of k-cells up to boundaries, over the whole numbers: rank, torsion and a basis of cycles.

        Parameters
        ----------
        k : int
        relative : bool
            Whether to count the boundary of the complex, with all its cells, as nothing.

        Returns
        -------
        HomologyGroup
            Its ``rank``, ``torsion`` and, found when asked for, ``cycles``; exact.

        Raises
        ------
        InputError
            If k is not 0 .. dim.
        TopologyError
            If the cells are so entangled that the elimination would not end in reasonable time.

        Notes
        -----
        Source: Munkres, Elements of Algebraic Topology, 1984, sections 5, 9 and 11.

        Examples
        --------
        >>> from dec.calculus.complex import Complex
        >>> K = Complex.from_faces([[0, 1, 2], [1, 2, 3], [2, 3, 4], [3, 4, 0], [4, 0, 1]])
        >>> K.homology(1), K.homology(1, relative=True)
        (<Homology of degree 1: Z>, <Homology of degree 1 relative to the boundary: Z/2>)
        """
        groups = self._relative_homology if relative else self._homology
        return groups[checked_degree(k, range(self.dim + 1), self.dim)]

    @cached_property
    def _homology(self) -> tuple[HomologyGroup, ...]:
        return all_groups(self, relative=False)

    @cached_property
    def _relative_homology(self) -> tuple[HomologyGroup, ...]:
        return all_groups(self, relative=True)

    @property
    def is_orientable(self) -> bool | None:
        """Whether the top cells have a coherent orientation; None where three or more of them meet at a facet."""
        if self.dim == 1:
            return True
        if (self.incidences.uses > 2).any():
            return None
        return bool((self.sheets.sign != 0).all())

    def turning_proposal(self) -> IntArray:
        """Top cells to turn so that all are coherent, as few as possible; nothing is turned.

        Returns
        -------
        int64 array
            Indices, ascending; sheets without a coherent orientation are left out.

        Examples
        --------
        >>> from dec.calculus.complex import Complex
        >>> Complex.from_faces([[0, 1, 2], [1, 2, 3], [2, 3, 4]]).turning_proposal()
        array([1])
        """
        return self.sheets.fewest_turns() if self.dim > 1 else np.empty(0, np.int64)

    def reversing_loop(self) -> IntArray:
        """A closed walk of top cells that comes back turned over: the witness that no orientation is coherent.

        Returns
        -------
        int64 array
            Cells in order, first and last the same; empty for an orientable complex.

        Examples
        --------
        >>> from dec.calculus.complex import Complex
        >>> Complex.from_faces([[0, 1, 2], [1, 2, 3], [2, 3, 4], [3, 4, 0], [4, 0, 1]]).reversing_loop()
        array([0, 4, 3, 2, 1, 0])
        """
        if self.dim == 1 or (self.sheets.sign != 0).all():
            return np.empty(0, np.int64)
        return reversing_walk(self.incidences, int(np.argmax(self.sheets.sign == 0)))

    def vertex_numbers(self, vertices: Iterable[Any]) -> IntArray:
        """Numbers of the vertices given by id, or by number where there are no ids.

        Parameters
        ----------
        vertices : iterable of ids or of int

        Returns
        -------
        int64 array

        Raises
        ------
        InputError
            If one is not known; the message names it.

        Examples
        --------
        >>> from dec.calculus.complex import Complex
        >>> Complex.from_edges([0], [1], vertex_ids=["A", "B"]).vertex_numbers(["B"])
        array([1])
        """
        names = list(vertices)
        if self.vertex_ids is None:
            numbers = index_array(names, "vertices")
            outside = (numbers < 0) | (numbers >= self.counts[0])
            if outside.any():
                message = f"vertices must be 0 .. {self.counts[0] - 1}, got {numbers[np.argmax(outside)]}"
                raise InputError(message)
            return numbers
        known = self._vertex_number
        for name in names:
            if name not in known:
                message = f"no vertex {name!r} among the {len(known):,} vertex ids; write an id as it was given"
                raise InputError(message)
        return np.array([known[name] for name in names], dtype=np.int64)

    @cached_property
    def _vertex_number(self) -> dict[Any, int]:
        return {} if self.vertex_ids is None else {name: number for number, name in enumerate(self.vertex_ids)}

    def _walks_of_faces(self) -> Walks:
        if self.walks is None:
            message = f"a complex of dimension {self.dim} has no faces"
            raise TopologyError(message)
        return self.walks

    def __repr__(self) -> str:
        parts = ", ".join(f"{n:,} {_NAMES[k][n != 1]}" for k, n in enumerate(self.counts))
        count = self.n_components
        return f"<Complex: {parts}; {count:,} component{'s' if count != 1 else ''}>"


def _made_again(kind: type[Cells], n_vertices: int, tail: IntArray, head: IntArray, kept: dict[str, Any]) -> Cells:
    return kind(n_vertices, tail, head, **kept)
