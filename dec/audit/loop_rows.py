"""The loops of a network: a short basis, with what each misses to close."""

from typing import Any

import numpy as np
from scipy.special import ndtri

from dec.arrays import IntArray, SignArray
from dec.audit.closures import Closures
from dec.audit.exactly import as_floats, within
from dec.audit.names import edge_names, vertex_names
from dec.audit.readings import Readings
from dec.audit.verdict import Limits
from dec.calculus.complex import Complex
from dec.topology.graphs import Forest, fundamental_loops
from dec.topology.polygons import Walks

__all__ = ["loop_rows"]

_MOST_LOOPS = 10_000
_MOST_LEGS = 200_000


def loop_rows(network: Complex, readings: Readings, found: Closures, limits: Limits) -> list[dict[str, Any]]:
    """A basis of the loops, worst first, as rows for the record.

    Parameters
    ----------
    network : Complex
    readings : Readings
    found : Closures
    limits : Limits

    Returns
    -------
    list of dict
        The loops that close worst, at most 10,000 of them with 200,000 legs, but always one. A walk from one held
        vertex to another is a loop too, closed by their known difference: "held" then names the two.
    """
    size = np.abs(as_floats(found.misclosure, found.places))
    worst = np.argsort(-size, kind="stable")[:_MOST_LOOPS]
    tail, head = found.group[network.tail], found.group[network.head]
    walks = _walks(tail, head, found.forest, found.chords[worst])
    return _rows(network, readings, limits, walks, worst, found)


def _held_ends(
    network: Complex, edges: IntArray, signs: SignArray, loop: IntArray, n_loops: int
) -> list[list[str] | None]:
    """Return for each loop None, or where it sets out and ends when held vertices close it."""
    n = network.counts[0]
    forward = signs > 0
    start = np.where(forward, network.tail[edges], network.head[edges])
    end = np.where(forward, network.head[edges], network.tail[edges])
    places, where = np.unique(np.concatenate([loop * n + start, loop * n + end]), return_inverse=True)
    surplus = np.bincount(where, weights=np.repeat([-1.0, 1.0], len(edges)), minlength=len(places))
    held: list[list[str] | None] = [None] * n_loops
    first, last = places[surplus < 0], places[surplus > 0]
    names = vertex_names(network, np.concatenate([first, last]) % n).tolist()
    for k, number in enumerate((first // n).tolist()):
        held[number] = [names[k], names[k + len(first)]]
    return held


def _walks(tail: IntArray, head: IntArray, forest: Forest, chords: IntArray) -> list[Walks]:
    """Return the walks of the first chords, a few at a time until there are too many legs."""
    found: list[Walks] = []
    done, legs, size = 0, 0, 16
    while done < len(chords) and (legs <= _MOST_LEGS or not found):
        found.append(fundamental_loops(tail, head, forest, chords[done : done + size]))
        legs += len(found[-1].edges)
        done, size = done + size, 2 * size
    return found


def _rows(
    network: Complex, readings: Readings, limits: Limits, walks: list[Walks], worst: IntArray, found: Closures
) -> list[dict[str, Any]]:
    ends = np.cumsum(np.concatenate([np.zeros(1, np.int64), *(np.diff(w.offsets) for w in walks)]))
    kept = max(int(np.searchsorted(ends, _MOST_LEGS, side="right")) - 1, min(1, len(ends) - 1))
    edges = np.concatenate([np.empty(0, np.int64), *(w.edges for w in walks)])[: ends[kept]]
    signs = np.concatenate([np.empty(0, np.int8), *(w.signs for w in walks)])[: ends[kept]]
    legs = [list(leg) for leg in zip(edge_names(network, edges).tolist(), signs.tolist(), strict=True)]
    held = _held_ends(network, edges, signs, np.repeat(np.arange(kept), np.diff(ends[: kept + 1])), kept)
    missed = found.misclosure[worst[:kept]]
    size = as_floats(missed, found.places)
    if readings.sd is None:
        sd = statistic = np.full(kept, np.nan)
        allowed = np.full(kept, limits.largest or 0.0)
        holds, order = within(missed, found.places, limits.largest or 0.0), np.argsort(-np.abs(size), kind="stable")
    else:
        sd = np.sqrt(np.add.reduceat(readings.sd[edges] ** 2, ends[:kept])) if kept else np.zeros(0)
        allowed, statistic = float(ndtri(1 - limits.alpha / 2)) * sd, np.abs(size) / sd
        holds, order = np.abs(size) <= allowed, np.argsort(-statistic, kind="stable")
    return [
        {
            "id": str(int(worst[k]) + 1), "legs": legs[ends[k] : ends[k + 1]], "misclosure": float(size[k]),
            "sd": float(sd[k]), "statistic": float(statistic[k]), "limit": float(allowed[k]), "holds": bool(holds[k]),
            "held": held[k],
        }
        for k in order.tolist()
    ]  # fmt: skip
