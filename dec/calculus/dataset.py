"""A complex together with the named numbers that live on its cells."""

import difflib
from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING

import numpy as np

from dec.arrays import FloatArray, IntArray, ObjectArray
from dec.calculus.cochain import Cochain
from dec.calculus.columns import Column, cells_of
from dec.calculus.complex import Complex
from dec.errors import InputError

if TYPE_CHECKING:
    import pandas as pd

__all__ = ["Dataset", "Field", "Input", "Region"]

_DEGREE_NAMES = ("vertices", "edges", "faces", "cells")
_ONE = ("vertex", "edge", "face", "cell")
_STRUCTURE = frozenset({"id", "from", "to", "x", "y", "z"})
_SHOWN = 8


@dataclass(frozen=True, slots=True)
class Input:
    """One file that went in: base name, SHA-256 of its bytes in hexadecimal, and size in bytes."""

    name: str
    sha256: str
    bytes: int


@dataclass(frozen=True, slots=True)
class Field:
    """A scalar or vector field as a file stores it.

    Attributes
    ----------
    name : str
        Its name in the file.
    at : str
        "vertices" or "cells"; cells are those of the highest dimension.
    values : float64 array, shape (n0 or n_top, components)
    """

    name: str
    at: str
    values: FloatArray


@dataclass(frozen=True, slots=True)
class Region:
    """A named group of cells: its degree and their indices, ascending."""

    name: str
    degree: int
    cells: IntArray


@dataclass(frozen=True)
class Dataset:
    """A complex with its columns, fields and named regions.

    Attributes
    ----------
    complex : Complex
    columns : mapping of degree to mapping of name to Column
        0 holds the node table, 1 the edge table.
    fields : mapping of name to mapping of "vertices" or "cells" to Field
    regions : mapping of name to Region
    inputs : tuple of Input
        The files read, with their hashes; empty for data that came from memory.
    notes : tuple of str
        What the reader wants known: points welded, quadratic cells read by their corners.
    """

    complex: Complex
    columns: Mapping[int, Mapping[str, Column]] = field(default_factory=dict)
    fields: Mapping[str, Mapping[str, Field]] = field(default_factory=dict)
    regions: Mapping[str, Region] = field(default_factory=dict)
    inputs: tuple[Input, ...] = ()
    notes: tuple[str, ...] = ()

    @classmethod
    def from_frames(cls, edges: "pd.DataFrame", nodes: "pd.DataFrame | None" = None) -> "Dataset":
        """A network from pandas frames with the same columns as the files.

        Parameters
        ----------
        edges : DataFrame
            Columns ``from``, ``to``, optionally ``id``, and any value columns.
        nodes : DataFrame or None
            Columns ``id``, optionally ``x y z``, and any value columns.

        Returns
        -------
        Dataset

        Raises
        ------
        InputError
            As `from_tables`, or if something else than frames is given, one has no rows or two columns of one name,
            or ids are floating-point numbers.

        Examples
        --------
        >>> import pandas as pd
        >>> frame = pd.DataFrame({"from": ["A", "B"], "to": ["B", "C"], "flow": [1.5, 1.5]})
        >>> Dataset.from_frames(frame).complex
        <Complex: 3 vertices, 2 edges; 1 component>
        """
        node_table = None if nodes is None else _frame_columns(nodes, "nodes")
        return cls.from_tables(_frame_columns(edges, "edges"), node_table)

    @classmethod
    def from_tables(cls, edges: Mapping[str, Column], nodes: Mapping[str, Column] | None = None) -> "Dataset":
        """A network from an edge table and an optional node table.

        Without a node table the vertices are numbered in the order in which the edge table first names them. It has
        points where the node table gives x and y (and z) for every node.

        Raises
        ------
        InputError
            If a needed column is missing, an id is empty or used twice, an edge ends at a vertex that the
            node table does not list, or a coordinate is no number; the message gives file, line and id.
        """
        edges, nodes = dict(edges), None if nodes is None else dict(nodes)
        start, end = _required(edges, "from"), _required(edges, "to")
        for column in (start, end):
            _refuse_empty(column)
        edge_ids = _unique_ids(edges["id"], "edge") if "id" in edges else None
        vertex_ids = None if nodes is None else _unique_ids(_required(nodes, "id"), "node")
        tail, head, vertex_ids = _number_ends(start, end, vertex_ids)
        points = None if nodes is None else _points(nodes)
        if edge_ids is None:
            edge_ids = np.array(list(map(str, range(1, len(tail) + 1))), dtype=object)
        complex_ = Complex.from_edges(
            tail, head, len(vertex_ids), vertex_ids=vertex_ids, edge_ids=edge_ids, points=points
        )
        return cls(complex_, {0: nodes or {}, 1: edges})

    def __repr__(self) -> str:
        names = (_ONE[k] if count == 1 else _DEGREE_NAMES[k] for k, count in enumerate(self.complex.counts))
        parts = [", ".join(f"{n:,} {name}" for n, name in zip(self.complex.counts, names, strict=True))]
        for degree, where in ((1, "columns"), (0, "at nodes")):
            columns = [name for name in self.columns.get(degree, ()) if name not in _STRUCTURE]
            if columns:
                parts.append(f"{where} {_first(columns)}")
        if self.fields:
            placed = [f"{name} ({' and '.join(places)})" for name, places in self.fields.items()]
            parts.append(f"fields {_first(placed)}")
        return f"<Dataset: {'; '.join(parts)}>"

    def column(self, name: str, degree: int) -> Column:
        """The named column of a degree.

        Raises
        ------
        InputError
            If there is none; the message lists what there is and the nearest name.
        """
        known = self.columns.get(degree, {})
        if name in known:
            return known[name]
        if degree == 0 and not known:
            message = f"no column {name!r} among the vertices: there is no node table; give one (nodes=, --nodes FILE)"
            raise InputError(message)
        message = f"no column {name!r} among the {_DEGREE_NAMES[degree]}; {_offer(name, list(known))}"
        raise InputError(message)

    def cochain(self, name: str, degree: int | None = None) -> Cochain:
        """The named column as a cochain of float64; nan where nothing was measured.

        Parameters
        ----------
        name : str
        degree : int or None
            Needed only where vertices and edges share the name.

        Returns
        -------
        Cochain

        Raises
        ------
        InputError
            If no column has that name, or several degrees have it.
        """
        if degree is None:
            having = [k for k, columns in self.columns.items() if name in columns]
            if len(having) > 1:
                message = f"column {name!r} exists on {' and '.join(_DEGREE_NAMES[k] for k in having)}; give the degree"
                raise InputError(message)
            degree = having[0] if having else 1
        return self.complex.cochain(degree, self.column(name, degree).numbers())

    def field(self, name: str, at: str | None = None) -> Field:
        """The named field.

        Parameters
        ----------
        name : str
        at : "vertices", "cells" or None
            Needed only where the file has the name at both.

        Raises
        ------
        InputError
            If there is no such field, or two.
        """
        places = self.fields.get(name)
        if places is None:
            message = f"no field {name!r}; {_offer(name, list(self.fields))}"
            raise InputError(message)
        if at is None and len(places) > 1:
            message = f"field {name!r} is given at vertices and at cells; say which (--at vertices or --at cells)"
            raise InputError(message)
        if at is None:
            return next(iter(places.values()))
        if at not in places:
            message = f"field {name!r} is not given at {at} but at {next(iter(places))}"
            raise InputError(message)
        return places[at]

    def with_inputs(self, *inputs: Input) -> "Dataset":
        """The same data with the files they came from."""
        return replace(self, inputs=inputs)


def _frame_columns(frame: "pd.DataFrame", source: str) -> dict[str, Column]:
    import pandas as pd

    if not isinstance(frame, pd.DataFrame):
        message = f"{source} must be a pandas DataFrame, got {type(frame).__name__}"
        raise InputError(message)
    if len(frame.columns) and not len(frame):
        message = f"{source} has columns but no rows; nothing to check"
        raise InputError(message)
    columns: dict[str, Column] = {}
    for name, series in frame.items():
        if str(name) in columns:
            message = f"{source}: column {str(name)!r} stands there twice; headings must differ"
            raise InputError(message)
        is_id = name in ("id", "from", "to")
        if is_id and getattr(series.dtype, "kind", "O") == "f" and series.notna().all():
            message = f"{source}: {name} must hold names, found floating-point numbers; give ids as text or integers"
            raise InputError(message)
        columns[str(name)] = Column(str(name), cells_of(series, is_id=is_id), source)
    return columns


def _required(table: Mapping[str, Column], name: str) -> Column:
    if name not in table:
        source = next(iter(table.values())).source if table else "the table"
        message = f"{source}: a column {name!r} is needed; {_offer(name, list(table))}"
        raise InputError(message)
    return table[name]


def _first(names: list[str]) -> str:
    return ", ".join(names[:_SHOWN]) + (", ..." if len(names) > _SHOWN else "")


def _offer(name: str, known: list[str]) -> str:
    close = difflib.get_close_matches(str(name), known, n=1)
    hint = f"; did you mean {close[0]!r}?" if close else ""
    return f"there are {', '.join(known[:12]) or 'none'}{hint}"


def _refuse_empty(column: Column) -> None:
    texts = column.cells.tolist()
    if "" in texts or any(map(str.isspace, texts)):
        row = next(row for row, cell in enumerate(texts) if not cell.strip())
        message = f"{column.place(row)}: {column.name} is empty; every row needs one"
        raise InputError(message)


def _unique_ids(column: Column, what: str) -> ObjectArray:
    import pandas as pd

    _refuse_empty(column)
    if not pd.Index(column.cells, dtype=object).is_unique:
        _refuse_repeated(column, what)
    return column.cells


def _refuse_repeated(column: Column, what: str) -> None:
    seen: dict[str, int] = {}
    for row, name in enumerate(column.cells):
        if name in seen:
            first = column.place(seen[name])
            message = f"{column.place(row)}: {what} id {name!r} is used before ({first}); ids must differ"
            raise InputError(message)
        seen[name] = row


def _number_ends(start: Column, end: Column, vertex_ids: ObjectArray | None) -> tuple[IntArray, IntArray, ObjectArray]:
    """Return vertex numbers of both ends, and the ids; without ids the vertices count in order of first mention."""
    import pandas as pd

    given = np.empty(0, dtype=object) if vertex_ids is None else vertex_ids
    ends = np.stack([start.cells, end.cells], axis=1).ravel()
    found, names = pd.factorize(np.concatenate([given, ends]), use_na_sentinel=False)
    found = np.asarray(found[len(given) :], dtype=np.int64)
    if vertex_ids is None:
        vertex_ids = np.asarray(names, dtype=object)
    elif len(names) > len(vertex_ids):
        at = int(np.argmax(found >= len(vertex_ids)))
        column = (start, end)[at % 2]
        known = [str(name) for name in vertex_ids]
        close = difflib.get_close_matches(ends[at], known, n=2)
        hint = f"; close names: {', '.join(repr(name) for name in close)}" if close else ""
        message = f"{column.place(at // 2)}: {column.name} names {ends[at]!r}, which the node table does not list{hint}"
        raise InputError(message)
    return found[0::2].copy(), found[1::2].copy(), vertex_ids


def _points(nodes: Mapping[str, Column]) -> FloatArray | None:
    axes = [name for name in ("x", "y", "z") if name in nodes]
    if len(axes) < 2 or "x" not in axes or "y" not in axes:
        return None
    values = [nodes[name].numbers() for name in axes]
    points = np.stack(values, axis=1)
    # a network may have places for some of its nodes only; without all of them it has no geometry
    return None if np.isnan(points).any() else points
