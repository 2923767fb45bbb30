"""Balance by least squares: edges not measured are contracted, what is left to check are cuts."""

import numpy as np

from dec.arrays import AnyArray, BoolArray, FloatArray, IntArray
from dec.audit.adjustment import Adjustment, relative_gap, standings
from dec.audit.exactly import as_floats, as_text, common_unit, net_inflow
from dec.audit.laplacian import BLOCK, Laplacian
from dec.audit.names import counted, few, vertex_names
from dec.audit.readings import Known, Readings
from dec.calculus.complex import Complex
from dec.errors import UnsolvableError
from dec.topology.graphs import bridges, components, joined, spanning_forest, tree_flows, tree_potentials

__all__ = ["MOST_SPREAD_WORK", "adjust_flows", "contracted", "group_residuals"]

# Edges times vertices: above this the standard deviations of inferred flows are left out, and the audit says so.
MOST_SPREAD_WORK = 50_000_000


def contracted(network: Complex, measured: BoolArray, opened: IntArray) -> tuple[IntArray, int]:
    """The groups of vertices that balance only together.

    Parameters
    ----------
    network : Complex
    measured : bool array, shape (n1,)
    opened : int64 array
        Vertices open to the outside, which make one group.

    Returns
    -------
    group : int64 array, shape (n0,)
    count : int
    """
    number, n_joined = joined(opened, network.counts[0])
    idle = ~measured
    count, label = components(number[network.tail[idle]], number[network.head[idle]], n_joined)
    return label[number], count


def group_residuals(
    network: Complex, readings: Readings, supply: Known | None, group: IntArray, n_groups: int
) -> tuple[AnyArray, int]:
    """What every group of vertices takes in more than it gives out, exactly as written.

    Parameters
    ----------
    network : Complex
    readings : Readings
    supply : Known or None
    group : int64 array, shape (n0,)
    n_groups : int

    Returns
    -------
    residual : int64 or object array, shape (n_groups,)
        Inflow minus outflow plus supply, in units of 10**-places.
    places : int
    """
    (flow, *known), places = common_unit(readings.decimals, *([] if supply is None else [supply.decimals]))
    residual = net_inflow(group[network.tail], group[network.head], flow, n_groups)
    for put_in in known:
        np.add.at(residual, group, put_in)
    return residual, places


def adjust_flows(network: Complex, readings: Readings, supply: Known | None, opened: IntArray) -> Adjustment:
    """Flows that balance at every closed vertex and lie nearest to the readings.

    Parameters
    ----------
    network : Complex
    readings : Readings
        Without standard deviations all readings weigh the same.
    supply : Known or None
        What is put in at vertices, exactly.
    opened : int64 array
        Vertices open to the outside.

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
    edges, the open vertices taken as one.
    """
    n, tail, head = network.counts[0], network.tail, network.head
    measured = readings.measured
    sd = np.ones(len(tail)) if readings.sd is None else readings.sd
    _refuse_surplus(network, supply, opened)
    group, n_groups = contracted(network, measured, opened)
    checked = measured & (group[tail] != group[head])
    used = np.flatnonzero(checked)
    ground = int(group[opened[0]]) if len(opened) else None
    laplacian = Laplacian(group[tail[used]], group[head[used]], n_groups, sd[used] ** 2, ground)
    put_in = np.zeros(n) if supply is None else supply.value
    correction = np.where(measured, 0.0, np.nan)
    correction[used], _ = laplacian.change(as_floats(*group_residuals(network, readings, supply, group, n_groups)))
    deviation = correction[used] / sd[used]
    flow = np.where(measured, readings.value + correction, 0.0)
    redundancy, spread = _figures(laplacian, used, measured, sd)
    inferred, flow = _inferred(network, measured, opened, flow, put_in)
    if spread is not None:
        _add_inferred_spread(laplacian, network, opened, measured, checked, inferred, sd, spread)
    closed = np.ones(n, dtype=bool)
    closed[opened] = False
    gap = (net_inflow(tail, head, flow, n) + put_in)[closed]
    flow[~measured & ~inferred] = np.nan
    return Adjustment(
        flow, correction, redundancy, spread, standings(measured, checked, inferred),
        n_groups - laplacian.n_components, float(deviation @ deviation), group,
        relative_gap(gap, flow, readings.value, put_in), laplacian.component[group],
    )  # fmt: skip


def _refuse_surplus(network: Complex, supply: Known | None, opened: IntArray) -> None:
    if supply is None:
        return
    (amount,), places = common_unit(supply.decimals)
    label, count = network.component_labels, network.n_components
    total = np.zeros(count, dtype=amount.dtype)
    np.add.at(total, label, amount)
    total[label[opened]] = 0
    wrong = np.flatnonzero(total != 0)
    if len(wrong):
        part = int(wrong[0])
        names = vertex_names(network, np.flatnonzero(label == part))
        message = (
            f"part {part + 1} ({few(names)}; {counted(len(names), 'vertex', 'vertices')}) has no open vertex, yet its "
            f"supplies add up to {as_text(int(total[part]), places)}, not 0; name an open vertex or correct a supply"
        )
        raise UnsolvableError(message)


def _summed(values: FloatArray, group: IntArray, count: int) -> FloatArray:
    return np.asarray(np.bincount(group, weights=values, minlength=count), dtype=np.float64)


def _figures(
    laplacian: Laplacian, used: IntArray, measured: BoolArray, sd: FloatArray
) -> tuple[FloatArray | None, FloatArray | None]:
    """Return redundancy and adjusted sd of the measured edges; None twice above the size for all."""
    if not laplacian.gives_all:
        return None, None
    nowhere = np.empty(0, np.int64)
    share, slack, _ = laplacian.figures(nowhere, nowhere)
    settled = bridges(laplacian.tail, laplacian.head, laplacian.n_vertices)  # known from the supplies alone
    redundancy, kept = np.where(measured, 0.0, np.nan), np.where(measured, 1.0, np.nan)
    redundancy[used], kept[used] = np.where(settled, 1.0, share), np.where(settled, 0.0, slack)
    return redundancy, sd * np.sqrt(kept)


def _inferred(
    network: Complex, measured: BoolArray, opened: IntArray, flow: FloatArray, put_in: FloatArray
) -> tuple[BoolArray, FloatArray]:
    """Return which edges not measured follow from the others, and the flows with theirs filled in."""
    number, n_joined = joined(opened, network.counts[0])
    idle = np.flatnonzero(~measured)
    tail, head = number[network.tail[idle]], number[network.head[idle]]
    forest = spanning_forest(tail, head, n_joined, roots=number[opened[:1]])
    surplus = net_inflow(network.tail, network.head, flow, network.counts[0]) + put_in
    sent: AnyArray = _summed(surplus, number, n_joined)
    carried, _ = tree_flows(tail, head, forest, sent)
    inferred = np.zeros(len(measured), dtype=bool)
    inferred[idle[bridges(tail, head, n_joined)]] = True
    filled = flow.copy()
    filled[idle] = carried
    return inferred, filled


def _add_inferred_spread(
    laplacian: Laplacian, network: Complex, opened: IntArray, measured: BoolArray, checked: BoolArray,
    inferred: BoolArray, sd: FloatArray, spread: FloatArray,
) -> None:  # fmt: skip
    """Write the standard deviation of each inferred flow: that of the measured flows across the cut it closes."""
    number, n_joined = joined(opened, network.counts[0])
    tail, head = number[network.tail], number[network.head]
    lone = bridges(tail, head, n_joined)  # nothing else crosses the cut, so the supplies alone give the flow
    spread[inferred & lone] = 0.0
    edges = np.flatnonzero(inferred & ~lone)
    if not 0 < len(edges) * n_joined <= MOST_SPREAD_WORK:
        return
    forest = spanning_forest(tail, head, n_joined, usable=~measured)
    used, unchecked = np.flatnonzero(checked), np.flatnonzero(measured & ~checked)
    for block in np.split(edges, range(BLOCK, len(edges), BLOCK)):
        across = np.zeros((len(tail), len(block)))
        for column, edge in enumerate(block.tolist()):
            unit: AnyArray = np.zeros(len(tail))
            unit[edge] = 1.0
            side = tree_potentials(tail, head, forest, unit)
            across[:, column] = side[head] - side[tail]
        weight = laplacian.conductance[:, None]
        drawn = weight * across[used]
        left = drawn + laplacian.change(laplacian.gather @ drawn)[0]
        variance = (left**2 / weight).sum(axis=0) + (sd[unchecked] ** 2) @ across[unchecked] ** 2
        spread[block] = np.sqrt(variance)
