"""The vertex table of a balance: what goes in and does not come out."""

import numpy as np
from scipy.sparse import csr_array

from dec.arrays import AnyArray, BoolArray, FloatArray, IntArray, ObjectArray
from dec.audit.exactly import as_floats
from dec.audit.given.model import Model
from dec.audit.names import NAMED, vertex_names
from dec.calculus.complex import Complex
from dec.topology.edges import edge_coboundary

__all__ = ["group_names", "vertex_rows"]


def vertex_rows(
    network: Complex, model: Model, group: IntArray, residual: AnyArray, places: int, common: csr_array | None = None
) -> tuple[dict[str, AnyArray], IntArray]:
    """Columns of the vertex table, and the group that each row shows.

    Parameters
    ----------
    network : Complex
    model : Model
    group : int64 array, shape (n_vertices,)
        Vertices that balance only together; the last is the outside.
    residual : int64 or object array, shape (n_groups,)
        In units of 10**-places.
    places : int
    common : csr_array, shape (m, k), or None
        What one standard deviation of each common error adds to the readings.

    Returns
    -------
    columns : dict of heading to array
        Every vertex, with nan where it does not balance alone; then every closed group of several vertices. The
        statistic of one that no measured edge meets is nan.
    shown : int64 array
        Group of each row; -1 where it does not balance alone.
    """
    n_groups, own = len(residual), group[: network.counts[0]]
    size = np.bincount(group, minlength=n_groups)
    closed = np.ones(n_groups, dtype=bool)
    closed[group[-1]] = False
    together = np.flatnonzero((size > 1) & closed)
    at = np.concatenate([own, together])
    shown = np.concatenate([((size == 1) & closed)[own], np.ones(len(together), dtype=bool)])
    value = np.where(shown, as_floats(residual, places)[at], np.nan)
    spread = _spread(model, group, n_groups, common)[at]
    sd = np.where(shown & (spread > 0), spread, np.nan)
    nothing = np.full(len(at), np.nan)
    columns = {
        "id": np.concatenate([vertex_names(network), group_names(network, group, together)]),
        "residual": value, "sd": sd, "statistic": np.abs(value) / sd, "potential": nothing, "potential_sd": nothing,
    }  # fmt: skip
    return columns, np.where(shown, at, -1)


def group_names(network: Complex, group: IntArray, chosen: IntArray) -> ObjectArray:
    """A name for each chosen group of vertices: its first four ids, and how many there are; object array of str.

    Parameters
    ----------
    network : Complex
    group : int64 array, shape (n_vertices,)
        The last is the outside, which has no name.
    chosen : int64 array

    Returns
    -------
    object array of str, shape of `chosen`
    """
    own = group[: network.counts[0]]
    members = np.argsort(own, kind="stable")
    size = np.bincount(own, minlength=int(group.max(initial=-1)) + 1)
    first = np.concatenate([[0], np.cumsum(size)])
    shown = np.minimum(size[chosen], NAMED)
    ends = np.cumsum(shown)
    places = np.repeat(first[chosen] - ends + shown, shown) + np.arange(shown.sum())
    listed = vertex_names(network, members[places]).tolist()
    names = ["+".join(listed[end - count : end]) for end, count in zip(ends.tolist(), shown.tolist(), strict=True)]
    for k in np.flatnonzero(size[chosen] > NAMED).tolist():
        names[k] += f"+... ({size[chosen[k]]} in all)"
    return np.array(names, dtype=object)


def _spread(model: Model, group: IntArray, n_groups: int, common: csr_array | None) -> FloatArray:
    """Return the standard deviation of each group's residual, 0 where no measured edge crosses or none was given."""
    if model.readings.sd is None:
        return np.zeros(n_groups)
    start, end = group[model.tail], group[model.head]
    crossing: BoolArray = model.measured & (start != end)
    variance = np.where(crossing, model.sd, 0.0) ** 2
    both = np.concatenate([start, end])
    total = np.bincount(both, weights=np.concatenate([variance, variance]), minlength=n_groups)
    if common is not None:  # what enters and leaves with one error cancels
        total = total + (edge_coboundary(start, end, n_groups).T.astype(np.float64) @ common).power(2).sum(axis=1)
    return np.sqrt(total)
