"""The two audits of a network: readings in, record out."""

from collections.abc import Iterable, Mapping, Sequence
from typing import Any

import numpy as np

from dec.arrays import AnyArray, FloatArray
from dec.audit.adjustment import Adjustment
from dec.audit.closures import closures
from dec.audit.differences import adjust_differences
from dec.audit.flows import adjust_flows, group_residuals
from dec.audit.loop_rows import loop_rows
from dec.audit.names import counted, edge_names, vertex_names
from dec.audit.readings import Readings, known_at_vertices, named_vertices, read_readings
from dec.audit.record import Audit
from dec.audit.remarks import datum_notes, general_notes, not_shown, self_loop_notes, supply_notes
from dec.audit.suspects import edge_suspects, edge_tests
from dec.audit.verdict import Verdict, judged, read_limits
from dec.audit.vertex_rows import vertex_rows
from dec.calculus.complex import Complex
from dec.calculus.dataset import Dataset

__all__ = ["audit_differences", "audit_flows"]

_METHODS = {
    "balance": "weighted least squares: flows that balance and lie nearest to the readings in their standard "
    "deviations; edges not measured are contracted; one sparse symmetric factorisation",
    "loop": "weighted least squares: differences of potentials that lie nearest to the readings in their standard "
    "deviations; edges not measured are left out; one sparse symmetric factorisation",
}


def audit_flows(
    net: Dataset, value: str, sd: object, opened: str | Iterable[object] | None, supply: object, alpha: float,
    limit: object, unit: str | None,
) -> Audit:  # fmt: skip
    """Whether flows balance at every closed vertex; see `dec.balance`."""
    network = net.complex
    limits = read_limits(alpha, limit, sd)
    readings = read_readings(net, value, sd)
    open_vertices = named_vertices(net, opened, "open")
    known, notes = None, []
    if supply is not None:
        known = known_at_vertices(net, supply, "supply")
        guessed = np.setdiff1d(np.flatnonzero(~known.decimals.present), open_vertices)
        open_vertices = np.union1d(open_vertices, guessed)
        notes = supply_notes(network, guessed)
    adjustment = adjust_flows(network, readings, known, open_vertices)
    group = adjustment.group
    residual, places = group_residuals(network, readings, known, group, int(group.max(initial=-1)) + 1)
    closed = np.ones(len(residual), dtype=bool)
    closed[group[open_vertices]] = False
    verdict = judged(adjustment, limits, residual[closed], places, with_sd=readings.sd is not None)
    rows = vertex_rows(network, readings, group, open_vertices, residual, places)
    notes += general_notes(network, readings, adjustment) + self_loop_notes(network, balance=True)
    asked = {
        "value": value, "sd": readings.sd_said, "open": vertex_names(network, open_vertices).tolist(),
        "supply": _said(supply), "alpha": limits.alpha, "limit": limits.largest, "unit": unit,
    }  # fmt: skip
    return _record("balance", net, readings, adjustment, verdict, rows, (), notes, asked)


def audit_differences(
    net: Dataset, value: str, sd: object, fixed: object, alpha: float, limit: object, unit: str | None
) -> Audit:
    """Whether differences close round every loop; see `dec.loops`."""
    network = net.complex
    limits = read_limits(alpha, limit, sd)
    readings = read_readings(net, value, sd)
    known = None if fixed is None else known_at_vertices(net, fixed, "fixed")
    held = np.zeros(network.counts[0], dtype=bool) if known is None else known.decimals.present
    found = closures(network, readings, known)
    adjustment = adjust_differences(network, readings, known, found)
    loops = loop_rows(network, readings, found, limits)
    verdict = judged(adjustment, limits, found.misclosure, found.places, with_sd=readings.sd is not None)
    notes = general_notes(network, readings, adjustment)
    if len(loops) < len(found.chords):
        notes.append(
            f"of {len(found.chords)} loops the {len(loops)} with the largest misclosures are listed; all were checked"
        )
    if limit is not None and len(found.chords) > 1:
        notes.append("the limit is held against the loops of one basis; every other loop is a sum of these")
    notes += self_loop_notes(network, balance=False) + datum_notes(network, held, adjustment.part)
    n, nothing = network.counts[0], np.full(network.counts[0], np.nan)
    rows = {
        "id": vertex_names(network), "residual": nothing, "sd": nothing, "statistic": nothing,
        "potential": _or_nan(adjustment.potential, n),
        "potential_sd": _or_nan(None if readings.sd is None else adjustment.potential_sd, n),
    }  # fmt: skip
    asked = {
        "value": value, "sd": readings.sd_said, "fixed": vertex_names(network, np.flatnonzero(held)).tolist(),
        "alpha": limits.alpha, "limit": limits.largest, "unit": unit,
    }  # fmt: skip
    return _record("loop", net, readings, adjustment, verdict, rows, loops, notes, asked)


def _record(
    law: str, net: Dataset, readings: Readings, adjustment: Adjustment, verdict: Verdict,
    vertices: Mapping[str, AnyArray], loops: Sequence[Mapping[str, Any]], notes: list[str], asked: Mapping[str, object],
) -> Audit:  # fmt: skip
    network = net.complex
    statistic, detectable = edge_tests(readings, adjustment)
    tables = {"edges": _edge_rows(network, readings, adjustment, statistic, detectable), "vertices": vertices}
    counts = {
        "vertices": network.counts[0], "edges": network.counts[1], "components": network.n_components,
        "loops": network.counts[1] - network.counts[0] + network.n_components, "measured": int(readings.measured.sum()),
    }  # fmt: skip
    suspects = edge_suspects(network, readings, adjustment, statistic, balance=law == "balance")
    return Audit(
        law, verdict.holds, net, counts, adjustment.dof, verdict.chi_square, verdict.limit, verdict.p_value,
        tables, loops, suspects, (*net.notes, *notes), not_shown(readings, adjustment, balance=law == "balance"),
        asked, _METHODS[law], network.cochain(1, adjustment.adjusted), {"closes_to": adjustment.closes_to},
    )  # fmt: skip


def _edge_rows(
    network: Complex, readings: Readings, adjustment: Adjustment, statistic: FloatArray, detectable: FloatArray
) -> dict[str, AnyArray]:
    n, names, unsure = network.counts[1], vertex_names(network), readings.sd is None
    return {
        "id": edge_names(network), "from": names[network.tail], "to": names[network.head], "value": readings.value,
        "sd": np.where(readings.measured, _or_nan(readings.sd, n), np.nan),
        "adjusted": adjustment.adjusted, "adjusted_sd": _or_nan(None if unsure else adjustment.adjusted_sd, n),
        "correction": adjustment.correction, "redundancy": _or_nan(adjustment.redundancy, n),
        "statistic": statistic, "detectable": detectable, "standing": adjustment.standing,
    }  # fmt: skip


def _or_nan(values: FloatArray | None, n: int) -> FloatArray:
    return np.full(n, np.nan) if values is None else values


def _said(given: object) -> str | None:
    if given is None or isinstance(given, str):
        return given
    if isinstance(given, Mapping):
        return counted(len(given), "vertex by id", "vertices by id")
    return "one number a vertex"
