"""The loops of a network: a short basis, with what each misses to close."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, overload

import numpy as np
from scipy.sparse import csr_array
from scipy.special import ndtri

from dec.arrays import BoolArray, FloatArray, IntArray, SignArray
from dec.audit.adjusted.closures import Closures
from dec.audit.exactly import as_floats, within
from dec.audit.given.model import Model
from dec.audit.names import model_edge_names, vertex_names
from dec.audit.verdict import Limits
from dec.calculus.complex import Complex
from dec.topology.graphs import Forest, fundamental_loops
from dec.topology.polygons import Walks

__all__ = ["LoopRows", "loop_rows"]

_MOST_LOOPS = 10_000
_MOST_LEGS = 200_000


@dataclass(frozen=True, slots=True, eq=False)
class LoopRows(Sequence[dict[str, Any]]):
    """Loops, worst first; a row is made when it is looked at.

    Attributes
    ----------
    network : Complex
    model : Model
    number : int64 array, shape (k,)
        Of each loop in its basis, from 1.
    ends : int64 array, shape (k,)
        Where its legs begin and end among all legs, as rows of two numbers.
    edges, signs : int64 and int8 arrays
        The legs of all loops.
    misclosure, sd, statistic, limit : float64 arrays, shape (k,)
    holds : bool array, shape (k,)
    """

    network: Complex
    model: Model
    number: IntArray
    ends: IntArray
    edges: IntArray
    signs: SignArray
    misclosure: FloatArray
    sd: FloatArray
    statistic: FloatArray
    limit: FloatArray
    holds: BoolArray

    def __len__(self) -> int:
        return len(self.number)

    @overload
    def __getitem__(self, place: int) -> dict[str, Any]: ...
    @overload
    def __getitem__(self, place: slice) -> list[dict[str, Any]]: ...
    def __getitem__(self, place: int | slice) -> dict[str, Any] | list[dict[str, Any]]:
        if isinstance(place, slice):
            return [self._row(k) for k in range(len(self))[place]]
        return self._row(range(len(self))[place])

    def _row(self, k: int) -> dict[str, Any]:
        legs = slice(*self.ends[k].tolist())
        edges, signs = self.edges[legs], self.signs[legs]
        names = model_edge_names(self.network, self.model.vertex, edges)
        return {
            "id": str(int(self.number[k])),
            "legs": [[name, sign] for name, sign in zip(names.tolist(), signs.tolist(), strict=True)],
            "misclosure": float(self.misclosure[k]), "sd": float(self.sd[k]), "statistic": float(self.statistic[k]),
            "limit": float(self.limit[k]), "holds": bool(self.holds[k]),
            "held": _held_ends(self.network, self.model, edges, signs),
        }  # fmt: skip


def loop_rows(
    network: Complex, model: Model, found: Closures, limits: Limits, rule: FloatArray | None = None,
    common: csr_array | None = None,
) -> LoopRows:  # fmt: skip
    """A basis of the loops, worst first, as rows for the record.

    Parameters
    ----------
    network : Complex
    model : Model
    found : Closures
    limits : Limits
    rule : float64 array or None
        How far each loop of the basis may miss, where a preset says so.
    common : csr_array, shape (m, k), or None
        What one standard deviation of each common error adds to the readings.

    Returns
    -------
    LoopRows
        The loops that close worst, at most 10,000 of them with 200,000 legs, but always one. A walk from one held
        vertex to another is a loop too, closed by their known difference: "held" then names the two.
    """
    amount = np.abs(as_floats(found.misclosure, found.places))
    worst = np.argsort(-amount, kind="stable")[:_MOST_LOOPS]
    tail, head = found.group[model.tail], found.group[model.head]
    walks = _walks(tail, head, found.forest, found.chords[worst])
    ends = np.cumsum(np.concatenate([np.zeros(1, np.int64), *(np.diff(w.offsets) for w in walks)]))
    kept = max(int(np.searchsorted(ends, _MOST_LEGS, side="right")) - 1, min(1, len(ends) - 1))
    edges = np.concatenate([np.empty(0, np.int64), *(w.edges for w in walks)])[: ends[kept]]
    signs = np.concatenate([np.empty(0, np.int8), *(w.signs for w in walks)])[: ends[kept]]
    missed, readings = found.misclosure[worst[:kept]], model.readings
    size, nothing = as_floats(missed, found.places), np.full(kept, np.nan)
    if readings.sd is None:
        most = limits.largest or 0.0
        sd, statistic = nothing, nothing
        allowed = np.full(kept, most) if rule is None else rule[worst[:kept]]
        holds = within(missed, found.places, limits.written or 0.0) if rule is None else np.abs(size) <= allowed
        order = np.argsort(-np.abs(size) / (1.0 if rule is None else allowed), kind="stable")
    else:
        sd = _spread(readings.sd, edges, signs, ends[: kept + 1], common)
        allowed, statistic = float(-ndtri(limits.alpha / 2)) * sd, np.abs(size) / sd
        holds, order = np.abs(size) <= allowed, np.argsort(-statistic, kind="stable")
    return LoopRows(
        network, model, worst[order] + 1, np.stack([ends[:-1], ends[1:]], axis=1)[order], edges, signs, size[order],
        sd[order], statistic[order], allowed[order], holds[order],
    )  # fmt: skip


def _spread(sd: FloatArray, edges: IntArray, signs: SignArray, ends: IntArray, common: csr_array | None) -> FloatArray:
    """Return the standard deviation of what each loop misses; a common error of two legs adds up or cancels."""
    loop = np.repeat(np.arange(len(ends) - 1), np.diff(ends))
    variance = np.bincount(loop, weights=sd[edges] ** 2, minlength=len(ends) - 1)
    if common is not None:
        legs = csr_array((signs.astype(np.float64), (loop, edges)), shape=(len(ends) - 1, len(sd)))
        variance = variance + (legs @ common).power(2).sum(axis=1)
    return np.asarray(np.sqrt(variance))


def _held_ends(network: Complex, model: Model, edges: IntArray, signs: SignArray) -> list[str] | None:
    """Return None, or where a loop sets out and ends when held vertices close it."""
    forward = signs > 0
    start = np.where(forward, model.tail[edges], model.head[edges])
    end = np.where(forward, model.head[edges], model.tail[edges])
    places, where = np.unique(np.concatenate([start, end]), return_inverse=True)
    surplus = np.bincount(where, weights=np.repeat([-1.0, 1.0], len(edges)), minlength=len(places))
    loose = [places[surplus < 0], places[surplus > 0]]
    if not len(loose[0]):
        return None
    outside = model.n_vertices - 1
    return ["outside" if v[0] == outside else str(vertex_names(network, v[:1])[0]) for v in loose]


def _walks(tail: IntArray, head: IntArray, forest: Forest, chords: IntArray) -> list[Walks]:
    """Return the walks of the first chords, a few at a time until there are too many legs."""
    found: list[Walks] = []
    done, legs, size = 0, 0, 16
    while done < len(chords) and (legs <= _MOST_LEGS or not found):
        found.append(fundamental_loops(tail, head, forest, chords[done : done + size]))
        legs += len(found[-1].edges)
        done, size = done + size, 2 * size
    return found
