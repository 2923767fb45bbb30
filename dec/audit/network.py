"""The two audits of a network: readings in, record out."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from functools import partial
from typing import Any

import numpy as np
from scipy.sparse import csr_array, vstack

from dec.arrays import AnyArray, IntArray
from dec.audit.adjusted.adjustment import Adjustment
from dec.audit.adjusted.closures import closures
from dec.audit.adjusted.differences import adjust_differences
from dec.audit.adjusted.flows import adjust_flows, group_residuals
from dec.audit.given.asked import Asked
from dec.audit.given.common_errors import CommonErrors, common_errors
from dec.audit.given.model import Model, model_of
from dec.audit.given.presets import Preset
from dec.audit.given.readings import Known, Readings, known_at_vertices, named_vertices, read_readings, with_storage
from dec.audit.given.repeat_tables import table_name
from dec.audit.given.repeats import applied_notes, combined_readings
from dec.audit.given.what_if import WhatIf
from dec.audit.loop_rows import loop_rows
from dec.audit.names import counted, refuse_no_edges, vertex_names
from dec.audit.network_tables import (
    at_vertex_columns,
    contradictable,
    edge_columns,
    joint_names,
    limit_columns,
    reading_columns,
)
from dec.audit.record import Audit
from dec.audit.remarks import (
    common_note,
    datum_notes,
    difference_notes,
    general_notes,
    limit_note,
    not_shown,
    self_loop_notes,
    supply_notes,
)
from dec.audit.rules import chosen_rule, line_lengths, loop_allowances, meter_accuracy, vertex_allowances
from dec.audit.tested.inseparable import difference_classes, flow_classes
from dec.audit.tested.parts import part_rows
from dec.audit.tested.suspects import Naming
from dec.audit.tested.testing import Tested, tested
from dec.audit.verdict import Limits, Verdict, judged, read_limits
from dec.audit.vertex_rows import group_names, vertex_rows
from dec.calculus.complex import Complex
from dec.calculus.dataset import Dataset
from dec.errors import AccuracyError

__all__ = ["audit_differences", "audit_flows"]

_METHODS = {
    "balance": "weighted least squares: flows that balance and lie nearest to the readings in their standard "
    "deviations; edges not measured are contracted",
    "loop": "weighted least squares: differences of potentials that lie nearest to the readings in their standard "
    "deviations; edges not measured are left out",
}

_MOST_SHARED = 1e6  # beyond, squares of the common error keep fewer than four digits of a reading's own


@dataclass(frozen=True, slots=True)
class _Found:
    """What both laws have found when the record is written; `as_read` are the readings before any what-if."""

    network: Complex
    as_read: Readings
    model: Model
    adjustment: Adjustment
    rule: Preset | None
    limits: Limits
    verdict: Verdict
    tests: Tested


def audit_flows(net: Dataset, asked: Asked, as_read: Readings | None = None) -> Audit:
    """Whether flows balance at every closed vertex; see `dec.balance`. Readings once read need no reading again."""
    network = net.complex
    limits, rule = read_limits(asked.alpha, asked.limit, asked.sd), chosen_rule(asked)
    as_read = as_read or _as_read(net, asked, rule)
    readings = _supposed(net, asked.what_if, as_read)
    opened = named_vertices(net, asked.open, "open")
    known, opened, notes, said = _supplies(net, asked, opened)
    model = model_of(network, readings, known, opened, "supply")
    common, shared = _common(net, asked, readings, model)
    adjustment = adjust_flows(network, model, common, asked.figures)
    group = adjustment.group
    n_groups = int(group.max(initial=-1)) + 1
    residual, places = group_residuals(model, group, n_groups)
    closed = np.ones(len(residual), dtype=bool)
    closed[group[-1]] = False
    allowed = vertex_allowances(net, asked, rule, model, group, n_groups)
    verdict = judged(
        adjustment, model.readings, limits, residual[closed], places, None if allowed is None else allowed[closed],
        rule, "vertices",
    )  # fmt: skip
    naming = Naming(network, model, partial(_group_name, network, group), "supply", asked.unit)
    classes = partial(flow_classes, model, group, adjustment.evidence.testable)
    tests = tested(model, adjustment, classes, naming, asked, limits, balance=True)
    rows, shown = vertex_rows(network, model, group, residual, places, common)
    rows |= _fault_columns(tests, np.where(shown >= 0, len(model.tail) + shown, -1))
    judging = model.readings.sd is None and adjustment.dof > 0
    rows |= limit_columns(residual, places, shown, limits if judging else None, allowed if judging else None)
    rows["group"] = joint_names(network, group)
    notes = [*shared, *notes, *self_loop_notes(network, balance=True)]
    said = {"open": vertex_names(network, opened).tolist(), "supply": _said(asked.supply), **said}
    found = _Found(network, as_read, model, contradictable(adjustment, readings), rule, limits, verdict, tests)
    return _record("balance", net, found, rows, (), notes, asked, said)


def audit_differences(net: Dataset, asked: Asked, as_read: Readings | None = None) -> Audit:
    """Whether differences close round every loop; see `dec.loops`. Readings once read need no reading again."""
    network, n = net.complex, net.complex.counts[0]
    limits, rule = read_limits(asked.alpha, asked.limit, asked.sd), chosen_rule(asked)
    as_read = as_read or _as_read(net, asked, rule)
    readings = _supposed(net, asked.what_if, as_read)
    known = None if asked.fixed is None else known_at_vertices(net, asked.fixed, "fixed", asked.fixed_sd)
    lengths = line_lengths(net, asked, rule, readings)
    model = model_of(network, readings, known, None, "fixed")
    if lengths is not None:  # random errors of equal size per km
        model = replace(model, relative=np.sqrt(np.where(readings.measured, lengths, 1.0)))
    found = closures(model)
    common, notes = _common(net, asked, readings, model)
    adjustment = adjust_differences(model, found, common, asked.figures)
    allowed = loop_allowances(asked, rule, lengths, model, found)
    loops = loop_rows(network, model, found, limits, allowed, common)
    verdict = judged(adjustment, model.readings, limits, found.misclosure, found.places, allowed, rule, "loops")
    naming = Naming(network, model, partial(_vertex_name, network, model.attached), "potential", asked.unit)
    classes = partial(difference_classes, model, adjustment.evidence.testable)
    tests = tested(model, adjustment, classes, naming, asked, limits, balance=False)
    notes += difference_notes(asked, lengths is not None)
    if len(loops) < len(found.chords):
        notes.append(
            f"of {len(found.chords)} loops the {len(loops)} with the largest misclosures are listed; all were checked"
        )
    if asked.limit is not None and len(found.chords) > 1:
        notes.append("the limit is held against the loops of one basis; every other loop is a sum of these")
    held = np.zeros(n, dtype=bool)
    held[np.append(model.attached, model.vertex)] = True
    notes += self_loop_notes(network, balance=False) + datum_notes(network, held, adjustment.part[:n])
    place = np.full(n, -1)
    place[model.attached] = len(model.tail) + np.arange(len(model.attached))
    nothing = np.full(n, np.nan)
    rows = {
        "id": vertex_names(network), "residual": nothing, "sd": nothing, "statistic": nothing,
        "potential": nothing if adjustment.potential is None else adjustment.potential[:n],
        "potential_sd": nothing if readings.sd is None or adjustment.potential_sd is None
        else adjustment.potential_sd[:n],
    } | _fault_columns(tests, place)  # fmt: skip
    rows |= {"limit": nothing, "holds": nothing, "group": np.full(n, "", dtype=object)}
    said: dict[str, object] = {
        "fixed": vertex_names(network, np.flatnonzero(held)).tolist(),
        "fixed_sd": None if known is None else known.sd_said,
    }
    found_all = _Found(network, as_read, model, contradictable(adjustment, readings), rule, limits, verdict, tests)
    return _record("loop", net, found_all, rows, loops, notes, asked, said)


def _as_read(net: Dataset, asked: Asked, rule: Preset | None) -> Readings:
    accuracy = meter_accuracy(asked, rule)
    if asked.readings is None:
        return read_readings(net, asked.value, accuracy)
    return combined_readings(net, asked.readings, asked.value, accuracy, decimal=asked.decimal)


def _supposed(net: Dataset, what_if: WhatIf, as_read: Readings) -> Readings:
    """Return the readings as they would be."""
    names = [*what_if.turned, *(what_if.scaled or {}), *what_if.left_out]
    if names:
        rows = as_read.repeats
        sensors = {} if rows is None else dict(zip(rows.sensor.tolist(), rows.edge.tolist(), strict=True))
        sensors.pop("", None)  # a row without a sensor's name
        refuse_no_edges(net.complex, list(map(str, names)), sensors)
    return what_if.applied(net.complex, as_read)


def _supplies(
    net: Dataset, asked: Asked, opened: IntArray
) -> tuple[Known | None, IntArray, list[str], dict[str, object]]:
    """Return what goes in at vertices, those that are open after all, notes, and how it was given."""
    known, notes = None, []
    said: dict[str, object] = {"supply_sd": None, "storage": _said(asked.storage), "storage_sd": None}
    if asked.supply is not None:
        known = known_at_vertices(net, asked.supply, "supply", asked.supply_sd)
        guessed = np.setdiff1d(np.flatnonzero(~known.decimals.present), opened)
        opened = np.union1d(opened, guessed)
        notes, said["supply_sd"] = supply_notes(net.complex, guessed), known.sd_said
    if asked.storage is not None:
        stored = known_at_vertices(net, asked.storage, "storage", asked.storage_sd)
        known, said["storage_sd"] = with_storage(known, stored), stored.sd_said
    return known, opened, notes, said


def _common(net: Dataset, asked: Asked, readings: Readings, model: Model) -> tuple[csr_array | None, list[str]]:
    """Return what common errors add to the readings of the model, those at vertices sharing none, and a note."""
    if asked.common is None:
        return None, []
    found = common_errors(net, readings, asked.common, asked.common_sd)
    moves = found.moves
    if not moves.shape[1]:
        return None, [f"column {asked.common} names no group with a reading: no error is shared"]
    _refuse_dominant(found, readings)
    more = csr_array((len(model.tail) - moves.shape[0], moves.shape[1]))
    return csr_array(vstack([moves, more])), [common_note(found, readings)]


def _refuse_dominant(found: CommonErrors, readings: Readings) -> None:
    """Refuse common errors so large beside the readings' own that their squares hide these in double precision."""
    assert readings.sd is not None
    moved = found.moves.tocoo()
    part = (moved.data / readings.sd[moved.coords[0]]) ** 2
    size = np.sqrt(np.bincount(moved.coords[1], weights=part, minlength=len(found.names)))
    if not size.max() <= _MOST_SHARED:
        worst = int(np.argmax(size))
        message = (
            f"the common error of group {found.names[worst]!r} is {size[worst]:.1e} times the readings' own standard "
            f"deviations, and double precision allows {_MOST_SHARED:.0e}; make common_sd smaller, or sd larger"
        )
        raise AccuracyError(message)


def _group_name(network: Complex, group: IntArray, number: int) -> str:
    return str(group_names(network, group, np.array([number]))[0])


def _vertex_name(network: Complex, vertices: IntArray, number: int) -> str:
    return str(vertex_names(network, vertices[[number]])[0])


def _fault_columns(tests: Tested, at: IntArray) -> dict[str, AnyArray]:
    """Return the columns of a vertex table that say what an error there would be; -1 where there is no such error."""
    columns = {
        "fault": tests.estimate, "fault_sd": tests.estimate_sd, "fault_statistic": tests.statistic,
    }  # fmt: skip
    there, found = at >= 0, dict[str, AnyArray]()
    for name, values in columns.items():
        found[name] = np.full(len(at), np.nan)
        found[name][there] = values[at[there]]
    found["class"] = np.zeros(len(at), np.int64)
    found["class"][there] = tests.class_number[at[there]]
    found["detectable"] = np.full(len(at), np.nan)
    found["detectable"][there] = tests.detectable[at[there]]
    return found


def _record(
    law: str, net: Dataset, found: _Found, vertices: Mapping[str, AnyArray], loops: Sequence[Mapping[str, Any]],
    notes: list[str], asked: Asked, said: dict[str, object],
) -> Audit:  # fmt: skip
    network, model, adjustment, tests = found.network, found.model, found.adjustment, found.tests
    readings, n1, balance = model.readings, network.counts[1], law == "balance"
    tables = {"edges": edge_columns(network, model, adjustment, tests), "vertices": vertices}
    if len(model.vertex):
        tables["at_vertices"] = at_vertex_columns(network, model, adjustment, tests)
    repeats = readings.repeats
    if repeats is not None:
        tables["readings"] = reading_columns(network, repeats, adjustment)
        notes = [*repeats.notes, *applied_notes(network, repeats), *notes]
    counts = {
        "vertices": network.counts[0], "edges": n1, "components": network.n_components,
        "loops": n1 - network.counts[0] + network.n_components, "measured": int(model.measured[:n1].sum()),
    }  # fmt: skip
    question = {
        "value": asked.value, "sd": readings.sd_said, **said, "alpha": found.limits.alpha,
        "limit": found.limits.largest, "unit": asked.unit, "critical": tests.critical,
        "critical_said": tests.critical_said, "common": asked.common, "common_sd": _said(asked.common_sd),
        "readings": None if asked.readings is None else table_name(asked.readings), "preset": _said(asked.preset),
        "sidak": bool(asked.sidak), "robust": bool(asked.robust), "figures": asked.figures,
        "what_if": asked.what_if.to_dict(),
    }  # fmt: skip
    rule = found.rule
    extra: dict[str, Any] = {
        "closes_to": adjustment.closes_to, "errors": tests.several, "chance": tests.chance, "robust": tests.robust,
        "parts": part_rows(network, model, adjustment, found.limits.alpha, balance=balance),
    }  # fmt: skip
    if rule is not None:
        extra["rule"] = rule.sentence
        notes = [f"preset {rule.sentence}", *notes]
    verdict = found.verdict
    if verdict.said:
        extra["verdict"] = verdict.said
    if verdict.holds is False and readings.sd is None and (asked.limit is not None or rule is not None):
        notes.append(limit_note("vertex" if balance else "loop"))
    notes = general_notes(network, model, adjustment, tests) + notes
    dof = adjustment.dof + (0 if repeats is None else repeats.dof)
    shown = net if repeats is None or repeats.input is None else net.with_inputs(*net.inputs, repeats.input)
    again = partial(audit_flows if balance else audit_differences, net)
    return Audit(
        law, verdict.holds, shown, counts, dof, verdict.chi_square, verdict.limit, verdict.p_value,
        tables, loops, tests.suspects, (*net.notes, *notes),
        not_shown(model, adjustment, tests, balance=balance, unit=asked.unit),
        question, f"{_METHODS[law]}; {adjustment.because}", network.cochain(1, adjustment.adjusted[:n1]), extra,
        lambda what_if: again(replace(asked, what_if=what_if), found.as_read), partial(_certificate, asked),
    )  # fmt: skip


def _certificate(asked: Asked, audit: Audit, *, contents: Sequence[bytes] = ()) -> bytes:
    from dec.audit.certificate import audit_certificate

    return audit_certificate(
        audit, supply=asked.supply, storage=asked.storage, fixed=asked.fixed, contents=contents
    )  # fmt: skip


def _said(given: object) -> str | float | None:
    if given is None or isinstance(given, str):
        return given
    if isinstance(given, Preset):
        return given.name
    if isinstance(given, Mapping):
        return counted(len(given), "vertex by id", "vertices by id")
    return float(given) if isinstance(given, int | float | np.number) else "one number a vertex"
