"""Which possible errors no reading can tell apart, by counting alone."""

import numpy as np

from dec.arrays import BoolArray, IntArray
from dec.audit.given.model import Model
from dec.topology.cut_pairs import cut_classes
from dec.topology.graphs import components

__all__ = ["NOTHING", "difference_classes", "flow_classes", "members"]

NOTHING: IntArray = np.empty(0, np.int64)


def flow_classes(model: Model, group: IntArray, testable: BoolArray, taken: IntArray = NOTHING) -> IntArray:
    """Classes of errors of flows: those between the same two groups of vertices.

    Parameters
    ----------
    model : Model
    group : int64 array, shape (n_vertices,)
        Of vertices that balance only together; the outside is the last vertex.
    testable : bool array, shape (K,)
        Edges of the model, then one leak a group: a leak runs to the outside.
    taken : int64 array
        Errors that are there for certain, of any size: beside them others may look alike, or be seen no more.

    Returns
    -------
    int64 array, shape (K,)
        The lowest error of its class; -1 where nothing can contradict it.
    """
    n_groups = len(testable) - len(model.tail)
    one = np.append(group[model.tail], np.arange(n_groups))
    other = np.append(group[model.head], np.full(n_groups, group[-1]))
    _, label = components(one[taken], other[taken], n_groups)
    one, other = label[one], label[other]
    chosen = np.flatnonzero(testable & (one != other))
    key = np.minimum(one, other)[chosen] * n_groups + np.maximum(one, other)[chosen]
    _, first, which = np.unique(key, return_index=True, return_inverse=True)
    found = np.full(len(testable), -1)
    found[chosen] = chosen[first][which]
    return found


def difference_classes(model: Model, testable: BoolArray, taken: IntArray = NOTHING) -> IntArray:
    """Classes of errors of differences: every loop has both or neither.

    Parameters
    ----------
    model : Model
    testable : bool array, shape (K,)
        Edges of the model, then one held potential each: an edge from the outside that was never read.
    taken : int64 array
        As for `flow_classes`.

    Returns
    -------
    int64 array, shape (K,)
        As for `flow_classes`.
    """
    m = len(model.tail)
    used = np.setdiff1d(np.append(np.flatnonzero(model.measured), np.arange(m, len(testable))), taken)
    tail = np.append(model.tail, np.full(len(model.attached), model.n_vertices - 1))
    head = np.append(model.head, model.attached)
    label = cut_classes(tail[used], head[used], model.n_vertices)
    found = np.full(len(testable), -1)
    kept = (label >= 0) & testable[used]
    found[used[kept]] = used[label[kept]]
    return found


def members(classes: IntArray, error: int) -> IntArray:
    """The other errors of a class, ascending; int64 array."""
    same = np.flatnonzero(classes == classes[error]) if classes[error] >= 0 else np.empty(0, np.int64)
    return np.asarray(same[same != error])
