"""The vertex table of a balance: what goes in and does not come out."""

import numpy as np

from dec.arrays import AnyArray, BoolArray, FloatArray, IntArray, ObjectArray
from dec.audit.exactly import as_floats
from dec.audit.names import NAMED, vertex_names
from dec.audit.readings import Readings
from dec.calculus.complex import Complex

__all__ = ["vertex_rows"]


def vertex_rows(
    network: Complex, readings: Readings, group: IntArray, opened: IntArray, residual: AnyArray, places: int
) -> dict[str, AnyArray]:
    """Columns of the vertex table.

    Parameters
    ----------
    network : Complex
    readings : Readings
    group : int64 array, shape (n0,)
        Vertices that balance only together.
    opened : int64 array
        Vertices open to the outside.
    residual : int64 or object array, shape (n_groups,)
        In units of 10**-places.
    places : int

    Returns
    -------
    dict of heading to array
        Every vertex, with nan where it does not balance alone; then every closed group of several vertices. The
        statistic of one that no measured edge meets is nan.
    """
    n_groups = len(residual)
    size = np.bincount(group, minlength=n_groups)
    closed = np.ones(n_groups, dtype=bool)
    closed[group[opened]] = False
    together = np.flatnonzero((size > 1) & closed)
    at = np.concatenate([group, together])
    shown = np.concatenate([((size == 1) & closed)[group], np.ones(len(together), dtype=bool)])
    value = np.where(shown, as_floats(residual, places)[at], np.nan)
    spread = _spread(network, readings, group, n_groups)[at]
    sd = np.where(shown & (spread > 0), spread, np.nan)
    nothing = np.full(len(at), np.nan)
    return {
        "id": np.concatenate([vertex_names(network), _joined_names(network, group, size, together)]),
        "residual": value, "sd": sd, "statistic": np.abs(value) / sd, "potential": nothing, "potential_sd": nothing,
    }  # fmt: skip


def _spread(network: Complex, readings: Readings, group: IntArray, n_groups: int) -> FloatArray:
    """Return the standard deviation of each group's residual, 0 where no measured edge crosses or none was given."""
    if readings.sd is None:
        return np.zeros(n_groups)
    start, end = group[network.tail], group[network.head]
    crossing: BoolArray = readings.measured & (start != end)
    variance = np.where(crossing, readings.sd, 0.0) ** 2
    both = np.concatenate([start, end])
    return np.sqrt(np.bincount(both, weights=np.concatenate([variance, variance]), minlength=n_groups))


def _joined_names(network: Complex, group: IntArray, size: IntArray, together: IntArray) -> ObjectArray:
    """Return a name for each group of several vertices: its first four ids, and how many there are."""
    members = np.argsort(group, kind="stable")
    first = np.concatenate([[0], np.cumsum(size)])
    names = []
    for g in together.tolist():
        listed = vertex_names(network, members[first[g] : min(first[g] + NAMED, first[g + 1])])
        more = f"+... ({size[g]} in all)" if size[g] > NAMED else ""
        names.append("+".join(listed) + more)
    return np.array(names, dtype=object)
