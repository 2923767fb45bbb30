"""The complex: cells of every dimension, made from edges, faces or solid cells, and what lives on them."""

from collections.abc import Mapping, Sequence
from itertools import pairwise
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from dec.arrays import AnyArray, ObjectArray, index_array
from dec.calculus import graphs, soundness
from dec.calculus.arguments import checked_cells, checked_ids, checked_points, taken_once, vertex_count
from dec.calculus.cells import Cells
from dec.calculus.chain import Chain
from dec.calculus.cochain import Cochain
from dec.calculus.lattice import Lattice, grid_parts
from dec.errors import InputError, TopologyError
from dec.findings import Finding
from dec.topology.polygons import edges_of_faces, ragged
from dec.topology.solids import faces_of_cells

__all__ = ["Complex", "Lattice", "grid"]


class Complex(Cells):
    """A cell complex of dimension 1 to 3: vertices, edges, faces, solid cells.

    Make one with `from_edges`, `from_faces`, `from_cells`, `grid` or `from_networkx`; it never changes afterwards.
    An edge runs from its tail to its head, a face is turned as its corners were given, a solid cell is positive
    when its corners are in right-handed order. Nothing ever flips a stored direction.

    Attributes
    ----------
    tail, head : int64 arrays, shape (n1,), read-only
    points : float64 array, shape (n0, m), or None
        Coordinates in the caller's unit; incidence does not know them.
    vertex_ids, edge_ids : object array of shape (n0,) or (n1,), or None
        The caller's names.
    faces : Ragged or None
        Corners of each face.
    walks : Walks or None
        Edges round each face.
    solids : mapping of kind to int64 array, shape (n, 4) or (n, 8)
        Corners of the solid cells, in numbering order.
    lattice : Lattice or None
        For grids.
    """

    @classmethod
    def from_edges(
        cls, tail: ArrayLike, head: ArrayLike, n_vertices: int | None = None, *,
        vertex_ids: Sequence[Any] | ObjectArray | None = None, edge_ids: Sequence[Any] | ObjectArray | None = None,
        points: ArrayLike | None = None,
    ) -> "Complex":  # fmt: skip
        """A graph; parallel edges and self-loops are kept, and so is every direction.

        Parameters
        ----------
        tail, head : int array_like, shape (n1,)
            Where each edge starts and ends.
        n_vertices : int or None
            Number of vertices; by default as many as the ids, the points or the edges need.
        vertex_ids, edge_ids : sequence or None
            Names, all different.
        points : array_like, shape (n0, m), or None
            Coordinates.

        Returns
        -------
        Complex of dimension 1

        Raises
        ------
        InputError
            If arrays have the wrong kind or length, or an id occurs twice.
        TopologyError
            If an edge ends at a vertex that is not there.

        Examples
        --------
        >>> K = Complex.from_edges([0, 1, 1], [1, 2, 2])
        >>> K
        <Complex: 3 vertices, 3 edges; 1 component>
        >>> K.coboundary(0).toarray()
        array([[-1,  1,  0],
               [ 0, -1,  1],
               [ 0, -1,  1]], dtype=int8)
        """
        start, end = index_array(tail, "tail"), index_array(head, "head")
        if len(start) != len(end):
            message = f"tail and head must have equal length, got {len(start)} and {len(end)}"
            raise InputError(message)
        places = checked_points(points)
        count = vertex_count(n_vertices, places, vertex_ids, start, end)
        return cls(
            count, start, end, points=places, vertex_ids=checked_ids(vertex_ids, count, "vertex"),
            edge_ids=checked_ids(edge_ids, len(start), "edge"),
        )  # fmt: skip

    @classmethod
    def from_faces(
        cls, faces: AnyArray | Sequence[Any], n_vertices: int | None = None, *, points: ArrayLike | None = None
    ) -> "Complex":
        """A surface of polygons, turned as given.

        Parameters
        ----------
        faces : int array, shape (n2, k), or sequence of vertex loops
            Corners of each face in order; three or more.
        n_vertices : int or None
            Number of vertices; by default as many as the points or the corners need.
        points : array_like, shape (n0, m), or None

        Returns
        -------
        Complex of dimension 2
            Its edges run from the lower to the higher vertex and are numbered in lexicographic order.

        Raises
        ------
        InputError
            If corners are not whole numbers.
        TopologyError
            If a face has fewer than three corners or names a vertex that is not there. Repeated corners are
            described by `check`, not refused.

        Examples
        --------
        >>> Complex.from_faces([[0, 1, 2], [2, 1, 3]]).counts
        (4, 5, 2)
        """
        loops, places = ragged(faces, "face"), checked_points(points)
        count = vertex_count(n_vertices, places, None, loops.flat)
        tail, head, walks = edges_of_faces(loops, count)
        return cls(count, tail, head, walks=walks, faces=loops, points=places)

    @classmethod
    def from_cells(cls, cells: Mapping[str, ArrayLike], *, points: ArrayLike | None = None) -> "Complex":
        """A solid of tetrahedra and hexahedra.

        Parameters
        ----------
        cells : mapping of "tetra" or "hexahedron" to int array_like, shape (n, 4) or (n, 8)
            Corners in the order of the VTK file format. Cells are numbered through the kinds in the order given.
        points : array_like, shape (n0, m), or None

        Returns
        -------
        Complex of dimension 3
            A face starts at its lowest corner and goes on to that corner's lower neighbour.

        Raises
        ------
        InputError
            If a kind is not one of the two, or an array has the wrong shape.
        TopologyError
            If a corner is not there, or two cells join four corners in different order. Repeated corners are
            described by `check`, not refused.

        Examples
        --------
        >>> Complex.from_cells({"tetra": [[0, 1, 2, 3], [1, 2, 3, 4]]}).counts
        (5, 9, 7, 2)
        """
        arrays = checked_cells(cells)
        places = checked_points(points)
        count = vertex_count(None, places, None, *arrays.values())
        loops, coboundary = faces_of_cells(arrays, count)
        tail, head, walks = edges_of_faces(loops, count)
        return cls(
            count, tail, head, walks=walks, faces=loops, cell_coboundary=coboundary, solids=arrays, points=places
        )

    def with_faces(self, faces: str | Sequence[Any] | AnyArray) -> "Complex":
        """The same graph with 2-cells on it.

        Parameters
        ----------
        faces : "none", "triangles" or sequence of loops of vertex numbers
            "triangles" fills every three edges that join three vertices; a loop must run along edges.

        Returns
        -------
        Complex

        Raises
        ------
        InputError
            If `faces` is another word.
        TopologyError
            If this is no graph, a side of a face is no edge, or one of several parallel edges.

        Examples
        --------
        >>> Complex.from_edges([0, 1, 2], [1, 2, 0]).with_faces("triangles").counts
        (3, 3, 1)
        """
        if self.dim != 1:
            message = f"faces can be put on a graph only; this complex has dimension {self.dim}"
            raise TopologyError(message)
        if isinstance(faces, str) and faces == "none":
            return self
        if isinstance(faces, str) and faces != "triangles":
            message = f'faces must be "none", "triangles" or a list of vertex loops, got {faces!r}'
            raise InputError(message)
        loops = graphs.triangles(self) if isinstance(faces, str) else ragged(faces, "face")
        return Complex(
            self.counts[0], self.tail, self.head, walks=graphs.walks_along(self, loops), faces=loops,
            points=self.points, vertex_ids=self.vertex_ids, edge_ids=self.edge_ids, lattice=self.lattice,
        )  # fmt: skip

    @property
    def is_manifold(self) -> bool:
        """Whether every point has a neighbourhood like a line, a disc or a ball, or half of one at the boundary."""
        return soundness.is_manifold(self)

    def boundary_loops(self) -> list[Chain]:
        """The closed loops of edges that have one face only.

        Returns
        -------
        list of Chain of degree 1
            By lowest edge; each sets out as the face there walks. Stretches that end at an edge of three or more
            faces do not close and are left out; `check` reports such edges.

        Raises
        ------
        TopologyError
            If the complex is no surface.
        """
        walks = self.boundary_walks()
        return [Chain.along(self, walks.edges[a:b], walks.signs[a:b]) for a, b in pairwise(walks.offsets)]

    def check(self) -> list[Finding]:
        """Whether the complex is sound, as a list of findings.

        Returns
        -------
        list of Finding
            Open edges and several components are facts, not faults, and are not listed. Nothing is repaired.

        Examples
        --------
        >>> [f.name for f in Complex.from_faces([[0, 1, 2], [0, 1, 3]]).check() if not f.holds]
        ['neighbouring faces are turned alike']
        """
        return soundness.check(self)

    def chain(self, degree: int, coefficients: ArrayLike) -> Chain:
        """A chain of whole-number coefficients on the cells of a degree; see `Chain`."""
        return Chain(self, degree, coefficients)

    def path(self, vertices: Sequence[Any], closed: bool = False) -> Chain:
        """The chain of a walk through vertices, along edges or against them, any vertex as often as it comes.

        Parameters
        ----------
        vertices : sequence
            Vertex ids where the complex has them, vertex numbers otherwise.
        closed : bool
            Whether the walk goes back to its first vertex.

        Returns
        -------
        Chain of degree 1

        Raises
        ------
        InputError
            If a vertex is not known.
        TopologyError
            If two successive vertices share no edge, or several: then give the edges with `chain`.

        Examples
        --------
        >>> Complex.from_edges([0, 2], [1, 1]).path([0, 1, 2]).coefficients
        array([ 1, -1])
        """
        numbers = self.vertex_numbers(vertices)
        if closed:
            numbers = np.append(numbers, numbers[:1])
        edges, signs = graphs.edges_between(self, numbers[:-1], numbers[1:])
        return Chain.along(self, edges, signs)

    def region(self, faces: ArrayLike) -> Chain:
        """The chain of the given faces as they are turned, each once.

        Parameters
        ----------
        faces : int array_like, shape (m,)
            Face numbers, in any order.

        Returns
        -------
        Chain of degree 2

        Raises
        ------
        InputError
            If there are no faces, one is not there, or one is given twice.

        Examples
        --------
        >>> Complex.from_faces([[0, 1, 2], [2, 1, 3]]).region([1]).coefficients
        array([0, 1])
        """
        if self.dim < 2:
            message = "a graph without faces has no region; give its edges with chain(1, coefficients)"
            raise InputError(message)
        return self.chain(2, taken_once(faces, self.counts[2], "face"))

    def cochain(self, degree: int, values: ArrayLike) -> Cochain:
        """A cochain: one number, or one row of numbers, on every cell of a degree; see `Cochain`."""
        return Cochain(self, degree, values)


def grid(
    shape: int | Sequence[int], *, spacing: float | Sequence[float] = 1.0, origin: float | Sequence[float] = 0.0,
    periodic: bool | Sequence[bool] = False,
) -> Complex:  # fmt: skip
    """A regular grid of one to three axes.

    Parameters
    ----------
    shape : int or sequence of int
        Vertices along each axis.
    spacing, origin : float or sequence of float
        In the caller's length unit.
    periodic : bool or sequence of bool
        Which axes close round their end.

    Returns
    -------
    Complex
        Of as many dimensions as axes. Vertex (i, j, k) has number (i n_1 + j) n_2 + k; edges along the first axis
        come first; a face is turned from its lower to its higher axis.

    Raises
    ------
    InputError
        If there are not one to three axes, an axis has no vertex, a spacing is not positive, or there is not one
        value for each axis.

    Examples
    --------
    >>> grid((3, 2)).counts
    (6, 7, 2)
    """
    return Complex(**grid_parts(shape, spacing, origin, periodic))
