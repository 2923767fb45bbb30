"""What readings miss to close, exactly: potentials along a spanning forest, and the rest on the edges outside it."""

from dataclasses import dataclass

import numpy as np

from dec.arrays import AnyArray, IntArray
from dec.audit.exactly import common_unit
from dec.audit.given.model import Model
from dec.topology.graphs import Forest, joined, spanning_forest, tree_potentials

__all__ = ["Closures", "closures"]


@dataclass(frozen=True, slots=True)
class Closures:
    """A spanning forest of the measured edges, and how far the readings close over it.

    Attributes
    ----------
    group : int64 array, shape (n_vertices,)
        The vertices, those with a held potential and the outside taken as one.
    anchor : int or None
        The group of the outside, where anything is held or measured at a vertex.
    forest : Forest
        Of the groups, by measured edges: from the held vertices, or else from where most edges meet.
    height : int64 or object array, shape (n_groups,)
        Readings added up along the forest, from 0 at its roots, in units of 10**-places.
    chords : int64 array
        Measured edges outside the forest: each closes one loop.
    misclosure : int64 or object array
        Of each of these loops, walked along its chord, in units of 10**-places.
    places : int
    """

    group: IntArray
    anchor: int | None
    forest: Forest
    height: AnyArray
    chords: IntArray
    misclosure: AnyArray
    places: int


def closures(model: Model) -> Closures:
    """How far the readings close, less the differences of the potentials held at the ends of a walk.

    Parameters
    ----------
    model : Model
        A walk from one held potential to another is a loop too.

    Returns
    -------
    Closures
    """
    group, n_groups = joined(model.joint, model.n_vertices)
    tail, head = group[model.tail], group[model.head]
    known = [] if model.known is None else [model.known.decimals]
    (reading, *held), places = common_unit(model.readings.decimals, *known)
    for height in held:
        reading = reading - (height[model.head] - height[model.tail])
    degree = np.bincount(np.concatenate([tail, head]), minlength=n_groups)
    roots = np.concatenate([group[-1:], np.argsort(-degree, kind="stable")])
    forest = spanning_forest(tail, head, n_groups, roots=roots, usable=model.measured)
    chords = np.flatnonzero(model.measured & ~forest.contains(len(tail)))
    height = tree_potentials(tail, head, forest, reading)
    misclosure = reading[chords] - (height[head[chords]] - height[tail[chords]])
    anchor = int(group[-1]) if len(model.attached) or len(model.vertex) else None
    return Closures(group, anchor, forest, height, chords, misclosure, places)
