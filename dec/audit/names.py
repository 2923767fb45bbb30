"""Ids as text, for tables, notes and messages."""

import difflib
from collections.abc import Iterable, Mapping, Sequence

import numpy as np

from dec.arrays import IntArray, ObjectArray
from dec.calculus.complex import Complex
from dec.errors import InputError

__all__ = [
    "NAMED", "close_names", "counted", "edge_names", "few", "model_edge_names", "refuse_no_edges", "vertex_names",
]  # fmt: skip

NAMED = 4
_MOST_COMPARED = 20_000  # names among which a close one is looked for


def vertex_names(network: Complex, vertices: IntArray | None = None) -> ObjectArray:
    """The ids of the given vertices, or of all, as text; their numbers where they have none."""
    return _names(network.vertex_ids, network.counts[0], vertices)


def edge_names(network: Complex, edges: IntArray | None = None) -> ObjectArray:
    """The ids of the given edges, or of all, as text; their numbers where they have none."""
    return _names(network.edge_ids, network.counts[1], edges)


def model_edge_names(network: Complex, vertex: IntArray, edges: IntArray) -> ObjectArray:
    """The ids of edges, those numbered after the network's as the reading at a vertex that they stand for.

    Parameters
    ----------
    network : Complex
    vertex : int64 array
        Vertex of each such reading.
    edges : int64 array

    Returns
    -------
    object array of str
    """
    own, n1 = edges < network.counts[1], network.counts[1]
    found = np.empty(len(edges), dtype=object)
    found[own] = edge_names(network, edges[own])
    found[~own] = [f"at {name}" for name in vertex_names(network, vertex[edges[~own] - n1])]
    return found


def refuse_no_edges(network: Complex, asked: Sequence[str], sensors: Mapping[str, int]) -> None:
    """Nothing, or InputError where a name that was asked of is no edge: a sensor on one, or a slip of the pen.

    Parameters
    ----------
    network : Complex
    asked : sequence of str
    sensors : mapping of str to int
        Names of sensors, and the number of the edge that each reads.
    """
    known = edge_names(network).tolist()
    there = set(known)
    wrong = next((name for name in asked if name not in there), None)
    if wrong is None:
        return
    if wrong in sensors:
        edge = known[sensors[wrong]]
        message = (
            f"what-if names {wrong!r}, which is a sensor on edge {edge!r}; what-if goes by edge: name {edge!r}, and "
            "all its readings change together"
        )
        raise InputError(message)
    hint = close_names(wrong, known) or "edges are named by their ids as text"
    message = f"what-if names {wrong!r}, which is no edge; {hint}"
    raise InputError(message)


def close_names(wrong: str, known: Sequence[str]) -> str:
    """Words on the two closest of the known names, for messages; empty where none is close, or above 20,000 of them.

    Examples
    --------
    >>> close_names("P71", ["P17", "P2"])
    "close names: 'P17'"
    """
    close = difflib.get_close_matches(wrong, known, n=2) if len(known) <= _MOST_COMPARED else []
    return f"close names: {', '.join(map(repr, close))}" if close else ""


def few(names: Iterable[str]) -> str:
    """The first four names, and dots where there are more.

    Examples
    --------
    >>> few("ABCDEF")
    'A, B, C, D, ...'
    """
    listed = list(names)
    return ", ".join(listed[:NAMED]) + (", ..." if len(listed) > NAMED else "")


def counted(number: int, one: str, many: str) -> str:
    """A number with its noun: "1 edge", "3 edges"."""
    return f"{number} {one if number == 1 else many}"


def _names(ids: ObjectArray | None, count: int, chosen: IntArray | None) -> ObjectArray:
    numbers = np.arange(count) if chosen is None else chosen
    names: ObjectArray = (numbers if ids is None else ids[numbers]).astype(object)
    listed = names.tolist()
    if set(map(type, listed)) <= {str}:
        return names
    return np.array(list(map(str, listed)), dtype=object)
