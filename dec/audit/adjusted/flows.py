"""Balance by least squares: edges not measured are contracted, what is left to check are cuts."""

import numpy as np
from scipy.sparse import csr_array

from dec.arrays import AnyArray, BoolArray, FloatArray, IntArray
from dec.audit.adjusted.adjustment import (
    MOST_INFERRED_WORK,
    Adjustment,
    Shared,
    chi_square_of,
    relative_gap,
    standings,
)
from dec.audit.adjusted.evidence import Evidence, flow_evidence, with_common
from dec.audit.adjusted.laplacian import BLOCK, Laplacian
from dec.audit.exactly import as_floats, as_text, common_unit, net_inflow
from dec.audit.given.model import Model
from dec.audit.names import counted, few, vertex_names
from dec.calculus.complex import Complex
from dec.errors import UnsolvableError
from dec.topology.graphs import bridges, components, joined, spanning_forest, tree_flows, tree_potentials

__all__ = ["adjust_flows", "contracted", "group_residuals"]


def contracted(model: Model) -> tuple[IntArray, int]:
    """The groups of vertices that balance only together.

    Parameters
    ----------
    model : Model

    Returns
    -------
    group : int64 array, shape (n_vertices,)
        The open vertices and the outside are one; ends of an edge not measured are one.
    count : int
    """
    number, n_joined = joined(model.joint, model.n_vertices)
    idle = ~model.measured
    count, label = components(number[model.tail[idle]], number[model.head[idle]], n_joined)
    return label[number], count


def group_residuals(model: Model, group: IntArray, n_groups: int) -> tuple[AnyArray, int]:
    """What every group of vertices takes in more than it gives out, exactly as written.

    Parameters
    ----------
    model : Model
    group : int64 array, shape (n_vertices,)
    n_groups : int

    Returns
    -------
    residual : int64 or object array, shape (n_groups,)
        Inflow minus outflow plus supply, in units of 10**-places.
    places : int
    """
    supply = [] if model.known is None else [model.known.decimals]
    (flow, *known), places = common_unit(model.readings.decimals, *supply)
    residual = net_inflow(group[model.tail], group[model.head], flow, n_groups)
    for put_in in known:
        np.add.at(residual, group, put_in)
    return residual, places


def adjust_flows(network: Complex, model: Model, common: csr_array | None = None, figures: str = "auto") -> Adjustment:
    """Flows that balance at every closed vertex and lie nearest to the readings.

    Parameters
    ----------
    network : Complex
        For the names in messages.
    model : Model
        Without standard deviations all readings weigh the same.
    common : csr_array, shape (m, k), or None
        What one standard deviation of each common error adds to the readings.
    figures : "auto", "all" or "estimate"
        How the figures of single edges are come by in a network too large for an exact factor.

    Returns
    -------
    Adjustment

    Raises
    ------
    UnsolvableError
        If a part without an open vertex has supplies that do not add up to zero; the message names it.
    AccuracyError
        If the standard deviations lie too far apart.

    Notes
    -----
    Minimises sum (x - y)^2 / sd^2 under D^T x + s = 0. With u from (D^T Q D) u = D^T y + s on the contracted graph,
    Q = diag(sd^2) and D its differences, x = y - Q D u. Source: Narasimhan and Jordache, Data Reconciliation and
    Gross Error Detection, 2000, chapter 3. An edge not measured follows when it is a bridge of the graph of such
    edges, the open vertices taken as one. Common errors b = G' M y are taken from the readings first.
    """
    tail, head, n, sd, measured = model.tail, model.head, model.n_vertices, model.sd, model.measured
    _refuse_surplus(network, model)
    group, n_groups = contracted(model)
    checked = measured & (group[tail] != group[head])
    used = np.flatnonzero(checked)
    outside = int(group[-1])
    laplacian = Laplacian(group[tail[used]], group[head[used]], n_groups, sd[used] ** 2, outside)
    missed = as_floats(*group_residuals(model, group, n_groups))
    evidence, change = flow_evidence(laplacian, used, len(tail), missed, outside, figures)
    shift: FloatArray = np.zeros(len(tail))
    amounts: FloatArray = np.zeros(0)
    shared, plain = None, evidence
    if common is not None:
        evidence = with_common(plain, common)
        shared = None if plain.diagonal is None else Shared.of(plain, sd, common)
        amounts = common.T @ evidence.score[: len(tail)]
        shift = common @ amounts
        change, _ = laplacian.change(missed - laplacian.gather @ shift[used])
    correction = np.where(measured, -shift, np.nan)
    correction[used] += change
    deviation = change / sd[used]
    put_in = np.zeros(n) if model.known is None else model.known.value
    flow = np.where(measured, model.readings.value + correction, 0.0)
    redundancy, spread = _figures(laplacian, evidence, used, model, shared, common, figures)
    inferred, flow = _inferred(model, flow, put_in)
    if spread is not None:
        _add_inferred_spread(plain, model, inferred, shared, spread)
    closed = np.ones(n, dtype=bool)
    closed[model.joint] = False
    gap = (net_inflow(tail, head, flow, n) + put_in)[closed]
    flow[~measured & ~inferred] = np.nan
    return Adjustment(
        flow, correction, redundancy, spread, standings(measured, checked, inferred),
        n_groups - laplacian.n_components, chi_square_of(deviation, amounts), group,
        relative_gap(gap, flow, model.readings.value, put_in), laplacian.component[group], evidence,
        laplacian.because, common is not None,
    )  # fmt: skip


def _refuse_surplus(network: Complex, model: Model) -> None:
    if model.known is None:
        return
    (amount,), places = common_unit(model.known.decimals)
    number, n_joined = joined(model.joint, model.n_vertices)
    count, label = components(number[model.tail], number[model.head], n_joined)
    label = label[number]
    total = np.zeros(count, dtype=amount.dtype)
    np.add.at(total, label, amount)
    total[label[-1]] = 0
    wrong = np.flatnonzero(total != 0)
    if len(wrong):
        members = np.flatnonzero(label == wrong[0])
        part, names = network.component_labels[members[0]], vertex_names(network, members)
        message = (
            f"part {part + 1} ({few(names)}; {counted(len(names), 'vertex', 'vertices')}) has no open vertex, yet its "
            f"supplies add up to {as_text(int(total[wrong[0]]), places)}, not 0; name an open vertex or correct a "
            "supply"
        )
        raise UnsolvableError(message)


def _summed(values: FloatArray, group: IntArray, count: int) -> FloatArray:
    return np.asarray(np.bincount(group, weights=values, minlength=count), dtype=np.float64)


def _figures(
    laplacian: Laplacian, evidence: Evidence, used: IntArray, model: Model, shared: Shared | None,
    common: csr_array | None, figures: str,
) -> tuple[FloatArray | None, FloatArray | None]:  # fmt: skip
    """Return redundancy and adjusted sd of the measured edges; None twice where not all can be had."""
    if evidence.diagonal is None:
        return None, None
    measured, sd = model.measured, model.sd
    share, slack, _ = laplacian.figures(figures)
    redundancy, kept = np.where(measured, 0.0, np.nan), np.where(measured, 1.0, np.nan)
    redundancy[used], kept[used] = share, slack
    if shared is None or common is None:
        return redundancy, sd * np.sqrt(kept)
    redundancy = np.where(measured, shared.redundancies(evidence, sd, common), np.nan)
    return redundancy, np.sqrt(sd**2 * kept + shared.added(shared.left.T))


def _inferred(model: Model, flow: FloatArray, put_in: FloatArray) -> tuple[BoolArray, FloatArray]:
    """Return which edges not measured follow from the others, and the flows with theirs filled in."""
    number, n_joined = joined(model.joint, model.n_vertices)
    idle = np.flatnonzero(~model.measured)
    tail, head = number[model.tail[idle]], number[model.head[idle]]
    forest = spanning_forest(tail, head, n_joined, roots=number[-1:])
    surplus = net_inflow(model.tail, model.head, flow, model.n_vertices) + put_in
    sent: AnyArray = _summed(surplus, number, n_joined)
    carried, _ = tree_flows(tail, head, forest, sent)
    inferred = np.zeros(len(model.tail), dtype=bool)
    inferred[idle[bridges(tail, head, n_joined)]] = True
    filled = flow.copy()
    filled[idle] = carried
    return inferred, filled


def _add_inferred_spread(
    plain: Evidence, model: Model, inferred: BoolArray, shared: Shared | None, spread: FloatArray
) -> None:
    """Write the standard deviation of each inferred flow: that of the measured flows across the cut it closes."""
    number, n_joined = joined(model.joint, model.n_vertices)
    tail, head, m = number[model.tail], number[model.head], len(model.tail)
    lone = bridges(tail, head, n_joined)  # nothing else crosses the cut, so the supplies alone give the flow
    spread[inferred & lone] = 0.0
    edges = np.flatnonzero(inferred & ~lone)
    if not 0 < len(edges) * n_joined <= MOST_INFERRED_WORK:
        return
    forest = spanning_forest(tail, head, n_joined, usable=~model.measured)
    variance = np.where(model.measured, model.sd, 0.0)[:, None] ** 2
    for block in np.split(edges, range(BLOCK, len(edges), BLOCK)):
        across = np.zeros((m, len(block)))
        for column, edge in enumerate(block.tolist()):
            unit: AnyArray = np.zeros(m)
            unit[edge] = 1.0
            side = tree_potentials(tail, head, forest, unit)
            across[:, column] = side[head] - side[tail]
        across[~model.measured] = 0.0
        left = across - plain.of_readings(variance * across)[:m]
        total = (variance * left**2).sum(axis=0)
        if shared is not None:
            total += shared.added(shared.left.T @ across)
        spread[block] = np.sqrt(total)
