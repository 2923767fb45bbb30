"""The tables of a measured network: one row an edge, a reading at a vertex, a row of a table of readings."""

from dataclasses import replace

import numpy as np

from dec.arrays import AnyArray, FloatArray, IntArray, ObjectArray
from dec.audit.adjusted.adjustment import Adjustment
from dec.audit.exactly import as_floats, within
from dec.audit.given.model import Model
from dec.audit.given.readings import Readings, Repeats
from dec.audit.names import edge_names, vertex_names
from dec.audit.tested.repeated_readings import reading_names, reading_statistics
from dec.audit.tested.testing import Tested
from dec.audit.verdict import Limits
from dec.audit.vertex_rows import group_names
from dec.calculus.complex import Complex

__all__ = [
    "at_vertex_columns", "contradictable", "edge_columns", "joint_names", "limit_columns", "reading_columns",
]  # fmt: skip


def contradictable(adjustment: Adjustment, readings: Readings) -> Adjustment:
    """The adjustment with every edge called checked that several readings of its own can contradict."""
    if readings.repeats is None or readings.sd is None:
        return adjustment
    several = np.bincount(readings.repeats.edge, minlength=len(adjustment.standing)) > 1
    standing = adjustment.standing.copy()
    standing[several] = "checked"
    return replace(adjustment, standing=standing)


def joint_names(network: Complex, group: IntArray) -> ObjectArray:
    """The name of what each row of the vertex table of a balance balances together with; empty where alone.

    Parameters
    ----------
    network : Complex
    group : int64 array, shape (n_vertices,)
        Vertices that balance only together; the last is the outside.

    Returns
    -------
    object array of str
        Every vertex, then every closed group of several.
    """
    own = group[: network.counts[0]]
    size = np.bincount(group)
    size[group[-1]] = 0
    together = np.flatnonzero(size > 1)
    names = np.full(len(size), "", dtype=object)
    names[together] = group_names(network, group, together)
    return np.concatenate([names[own], names[together]])


def limit_columns(
    residual: AnyArray, places: int, shown: IntArray, limits: Limits | None, allowed: FloatArray | None
) -> dict[str, AnyArray]:
    """Columns of the vertex table that say how far a vertex may miss, and whether it holds; nan, None where nothing is.

    Parameters
    ----------
    residual : int64 or object array, shape (n_groups,)
        In units of 10**-places.
    places : int
    shown : int64 array
        Group of each row; -1 where it does not balance alone.
    limits : Limits or None
        One for all.
    allowed : float64 array, shape (n_groups,), or None
        One for each, by a preset.

    Returns
    -------
    dict
        "limit": float64 array; "holds": object array of bool and None, or nan where there is no limit.
    """
    limit, seen = np.full(len(shown), np.nan), shown >= 0
    if allowed is None and (limits is None or limits.largest is None):
        return {"limit": limit, "holds": limit}
    if allowed is not None:
        most, fits = allowed, np.abs(as_floats(residual, places)) <= allowed
    else:
        assert limits is not None
        assert limits.written is not None
        most = np.full(len(residual), limits.largest)
        fits = within(residual, places, limits.written)
    limit[seen] = most[shown[seen]]
    holds = np.full(len(shown), None, dtype=object)
    holds[seen] = fits[shown[seen]].tolist()
    return {"limit": limit, "holds": holds}


def edge_columns(network: Complex, model: Model, adjustment: Adjustment, tests: Tested) -> dict[str, AnyArray]:
    """Columns of the edge table."""
    names, n1 = vertex_names(network), model.n_edges
    ends = {"id": edge_names(network), "from": names[network.tail], "to": names[network.head]}
    return ends | {name: column[:n1] for name, column in _figures(model, adjustment, tests).items()}


def at_vertex_columns(network: Complex, model: Model, adjustment: Adjustment, tests: Tested) -> dict[str, AnyArray]:
    """Columns of the table of readings at vertices: supplies, or potentials."""
    figures = {name: column[model.n_edges :] for name, column in _figures(model, adjustment, tests).items()}
    return {"id": vertex_names(network, model.vertex)} | figures


def reading_columns(network: Complex, repeats: Repeats, adjustment: Adjustment) -> dict[str, AnyArray]:
    """Columns of the table of readings, as they were applied."""
    correction, statistic, _ = reading_statistics(repeats, adjustment)
    return {
        "id": np.array(reading_names(network, repeats), dtype=object), "edge": edge_names(network, repeats.edge),
        "raw": repeats.raw, "mounted": repeats.mounted, "factor": repeats.factor, "value": repeats.value,
        "sd": np.full(len(repeats.value), np.nan) if repeats.sd is None else repeats.sd,
        "adjusted": adjustment.adjusted[repeats.edge], "correction": correction, "statistic": statistic,
    }  # fmt: skip


def _figures(model: Model, adjustment: Adjustment, tests: Tested) -> dict[str, AnyArray]:
    m, unsure = len(model.tail), model.readings.sd is None
    return {
        "value": model.readings.value, "sd": np.where(model.measured, _or_nan(model.readings.sd, m), np.nan),
        "adjusted": adjustment.adjusted, "adjusted_sd": _or_nan(None if unsure else adjustment.adjusted_sd, m),
        "correction": adjustment.correction, "redundancy": _or_nan(adjustment.redundancy, m),
        "statistic": tests.statistic[:m], "detectable": tests.detectable[:m], "standing": adjustment.standing,
        "class": tests.class_number[:m],
    }  # fmt: skip


def _or_nan(values: FloatArray | None, m: int) -> FloatArray:
    return np.full(m, np.nan) if values is None else values
