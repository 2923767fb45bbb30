"""What readings miss to close, exactly: potentials along a spanning forest, and the rest on the edges outside it."""

from dataclasses import dataclass

import numpy as np

from dec.arrays import AnyArray, IntArray
from dec.audit.exactly import common_unit
from dec.audit.readings import Known, Readings
from dec.calculus.complex import Complex
from dec.topology.graphs import Forest, joined, spanning_forest, tree_potentials

__all__ = ["Closures", "closures"]


@dataclass(frozen=True, slots=True)
class Closures:
    """A spanning forest of the measured edges, and how far the readings close over it.

    Attributes
    ----------
    group : int64 array, shape (n0,)
        The vertices, those with a held potential taken as one.
    anchor : int or None
        The group of the held ones.
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


def closures(network: Complex, readings: Readings, fixed: Known | None) -> Closures:
    """How far the readings close, less the differences of the potentials held at the ends of a walk.

    Parameters
    ----------
    network : Complex
    readings : Readings
    fixed : Known or None
        Potentials that are held; a walk from one to another is a loop too.
    """
    anchors = np.empty(0, np.int64) if fixed is None else np.flatnonzero(fixed.decimals.present)
    group, n_groups = joined(anchors, network.counts[0])
    tail, head = group[network.tail], group[network.head]
    (reading, *known), places = common_unit(readings.decimals, *([] if fixed is None else [fixed.decimals]))
    if known:
        reading = reading - (known[0][network.head] - known[0][network.tail])
    degree = np.bincount(np.concatenate([tail, head]), minlength=n_groups)
    roots = np.concatenate([group[anchors[:1]], np.argsort(-degree, kind="stable")])
    forest = spanning_forest(tail, head, n_groups, roots=roots, usable=readings.measured)
    chords = np.flatnonzero(readings.measured & ~forest.contains(len(tail)))
    height: AnyArray = tree_potentials(tail, head, forest, reading)
    misclosure = reading[chords] - (height[head[chords]] - height[tail[chords]])
    anchor = int(group[anchors[0]]) if len(anchors) else None
    return Closures(group, anchor, forest, height, chords, misclosure, places)
