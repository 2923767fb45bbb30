"""Ids as text, for tables, notes and messages."""

from collections.abc import Iterable

import numpy as np

from dec.arrays import IntArray, ObjectArray
from dec.calculus.complex import Complex

__all__ = ["NAMED", "counted", "edge_names", "few", "vertex_names"]

NAMED = 4


def vertex_names(network: Complex, vertices: IntArray | None = None) -> ObjectArray:
    """The ids of the given vertices, or of all, as text; their numbers where they have none."""
    return _names(network.vertex_ids, network.counts[0], vertices)


def edge_names(network: Complex, edges: IntArray | None = None) -> ObjectArray:
    """The ids of the given edges, or of all, as text; their numbers where they have none."""
    return _names(network.edge_ids, network.counts[1], edges)


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
    return np.array([str(name) for name in (numbers if ids is None else ids[numbers])], dtype=object)
