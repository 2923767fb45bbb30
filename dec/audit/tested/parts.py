"""The verdict of each part of a network that hangs together: parts say nothing of each other."""

from typing import Any

import numpy as np
from scipy.special import chdtrc, chdtri

from dec.arrays import IntArray
from dec.audit.adjusted.adjustment import Adjustment
from dec.audit.given.model import Model
from dec.audit.names import vertex_names
from dec.calculus.complex import Complex

__all__ = ["MOST_PARTS", "part_rows"]

MOST_PARTS = 1_000


def part_rows(
    network: Complex, model: Model, adjustment: Adjustment, alpha: float, *, balance: bool
) -> list[dict[str, Any]] | None:
    """One row a part, worst first, at most 1,000; None where there is one part, or errors are common to several.

    Parameters
    ----------
    network : Complex
    model : Model
    adjustment : Adjustment
    alpha : float
        Of the global test of each part.
    balance : bool
        Which law.

    Returns
    -------
    list of dict or None
        Part by its lowest vertex, counts, independent checks, and the global test of the part alone where standard
        deviations are given. Checks and chi-squares add up to those of the whole. Under the loop law "gauge" is the
        vertex that has 0, None where a potential is held.

    Notes
    -----
    The outside joins parts in one vertex only, so that no cut and no loop runs through two of them.
    """
    count = network.n_components
    if count < 2 or adjustment.shared:
        return None
    label = np.append(network.component_labels, -1)
    of_edge = label[model.head]
    checks = _checks(model, adjustment, label, count, balance=balance)
    chi_square = np.zeros(count)
    used = np.flatnonzero(model.measured & (adjustment.standing == "checked"))  # elsewhere sd may be nan
    np.add.at(chi_square, of_edge[used], (adjustment.correction[used] / model.sd[used]) ** 2)
    repeats = model.readings.repeats
    if repeats is not None and repeats.sd is not None:
        _add_repeats(model, of_edge, checks, chi_square)
    first = np.unique(network.component_labels, return_index=True)[1]
    held = np.zeros(count, dtype=bool)
    held[label[np.append(model.attached, model.vertex)]] = True
    sizes = np.bincount(network.component_labels, minlength=count), np.bincount(of_edge, minlength=count)
    with_sd = model.readings.sd is not None
    beyond = np.where(checks > 0, chdtrc(np.maximum(checks, 1), chi_square), 1.0) if with_sd else -checks
    order = np.argsort(beyond, kind="stable")[:MOST_PARTS]
    names = vertex_names(network, first[order])
    rows = []
    for k, name in zip(order.tolist(), names.tolist(), strict=True):
        dof = int(checks[k])
        limit = float(chdtri(dof, alpha)) if with_sd and dof else None
        rows.append({
            "part": name, "vertices": int(sizes[0][k]), "edges": int(sizes[1][k]), "dof": dof,
            "chi_square": float(chi_square[k]) if with_sd else None, "limit": limit,
            "p_value": float(beyond[k]) if limit is not None else None,
            "holds": None if limit is None else bool(chi_square[k] <= limit),
            "gauge": None if balance or held[k] else name,
        })  # fmt: skip
    return rows


def _checks(model: Model, adjustment: Adjustment, label: IntArray, count: int, *, balance: bool) -> IntArray:
    """Return the independent checks of each part: groups that are not grounded, or edges beyond them."""
    group, outside = adjustment.group, int(adjustment.group[-1])
    n_groups = int(group.max()) + 1
    of_group = np.full(n_groups, -1)
    of_group[group[:-1]] = label[:-1]  # a group lies in one part, but for the outside
    component = np.full(n_groups, -1)
    component[group] = adjustment.part
    ground = np.unique(component, return_index=True)[1]
    ground[component[outside]] = outside
    free = np.ones(n_groups, dtype=bool)
    free[ground] = False
    unknowns = np.bincount(of_group[free], minlength=count)
    if balance:
        return np.asarray(unknowns)
    return np.asarray(np.bincount(label[model.head[model.measured]], minlength=count) - unknowns)


def _add_repeats(model: Model, of_edge: IntArray, checks: IntArray, chi_square: Any) -> None:
    """Add what several readings of one edge say of each other."""
    repeats = model.readings.repeats
    assert repeats is not None
    assert repeats.sd is not None
    part = of_edge[repeats.edge]
    np.add.at(checks, part, 1)
    np.subtract.at(checks, of_edge[np.unique(repeats.edge)], 1)
    apart = repeats.value - model.readings.value[repeats.edge]
    np.add.at(chi_square, part, (apart / repeats.sd) ** 2)
