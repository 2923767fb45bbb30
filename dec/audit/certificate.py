"""The certificate of an audit: every reading as a whole number, and every sum, for a recheck by other means."""

from collections.abc import Sequence

import numpy as np

from dec.arrays import AnyArray, IntArray
from dec.audit.adjusted.closures import closures
from dec.audit.adjusted.flows import contracted, group_residuals
from dec.audit.digits.rounding import known_supplies
from dec.audit.given.model import Model, model_of
from dec.audit.given.readings import Known, Readings, known_at_vertices, named_vertices, read_readings
from dec.audit.names import edge_names, vertex_names
from dec.audit.record import Audit
from dec.calculus.certificates import certified_inputs, sealed
from dec.calculus.columns import Column
from dec.errors import InputError

__all__ = ["audit_certificate"]


def audit_certificate(
    audit: Audit, *, supply: object = None, storage: object = None, fixed: object = None, contents: Sequence[bytes] = ()
) -> bytes:
    """The certificate of a network audit as the bytes of a JSON file; `dec.verify` rechecks it.

    Parameters
    ----------
    audit : Audit
        Of a network, of the data as they stand.
    supply, storage : as given to `dec.balance`
        Needed only where they were not the names of columns.
    fixed : as given to `dec.loops`
        Needed wherever the audit had any.
    contents : sequence of bytes
        The input files' bytes in the order of ``audit.inputs``, so that a recheck can name any line that was changed.

    Returns
    -------
    bytes
        Keys: "law"; "unit", of which everything is a whole multiple, and "unit_name"; "inputs" with their SHA-256;
        "edges", rows of id, from, to and whole number or null; "vertices", the ids of the node table or null;
        "supply", "fixed" and "open"; "sums". Balance: sums are what every closed group of vertices takes in and does
        not give out, under the id of the vertex of the group that the table names first. Loop law: what every loop of
        a basis misses, under the id of the edge that closes it; the other measured edges form a forest, held vertices
        taken as one. "holds" and "limit" are null where standard deviations or a preset decide, which sums alone
        cannot tell.

    Raises
    ------
    InputError
        If the audit is one of a mesh or of what-if readings, supplies or fixed potentials have to be given again, or
        an input has changed.

    Examples
    --------
    >>> import json
    >>> import pandas as pd
    >>> from dec.audit.questions import balance
    >>> from dec.calculus.dataset import Dataset
    >>> edges = pd.DataFrame({"id": ["in", "out"], "from": ["S", "J"], "to": ["J", "T"], "flow": ["5.2", "5.0"]})
    >>> audit = balance(Dataset.from_frames(edges), value="flow", sd=0.1, open=("S", "T"))
    >>> found = json.loads(audit_certificate(audit))
    >>> found["unit"], found["edges"][0], found["sums"]
    ('0.1', ['in', 'S', 'J', 52], [['J', 2]])
    """
    _refuse_other(audit)
    columns: dict[str, str | None] = {"supply": None, "storage": None, "fixed": None}
    readings, columns["value"] = _readings(audit)
    if audit.law == "balance":
        known = known_supplies(audit, supply, storage)
        for what, given in (("supply", supply), ("storage", storage)):
            columns[what] = _column_name(audit, audit.asked.get(what) if given is None else given)
        opened = named_vertices(audit.data, audit.asked.get("open") or (), "open")
        model = model_of(audit.data.complex, readings, known, opened, "supply")
    else:
        known, columns["fixed"] = _held(audit, fixed), _column_name(audit, fixed)
        opened = np.empty(0, np.int64)
        model = model_of(audit.data.complex, readings, known, None, "fixed")
    numbers, amounts, sums, places = _in_units(audit, model)
    at_vertices = _at_vertices(audit, known, amounts)
    limit, holds = _verdict(audit)
    names = vertex_names(audit.data.complex)
    network = audit.data.complex
    ends = (edge_names(network).tolist(), names[network.tail].tolist(), names[network.head].tolist(), numbers)
    holding = _what_inputs_hold(audit)
    return sealed({
        "law": audit.law, "unit": f"0.{'0' * (places - 1)}1" if places else "1", "unit_name": audit.asked.get("unit"),
        "inputs": certified_inputs(audit.inputs, holding, contents), "decimal": _decimal(audit), "columns": columns,
        "edges": [list(row) for row in zip(*ends, strict=True)],
        "vertices": names.tolist() if audit.data.columns.get(0) else None,
        "supply": at_vertices if audit.law == "balance" else [], "fixed": at_vertices if audit.law == "loop" else [],
        "open": names[opened].tolist(), "sums": sums, "limit": limit, "holds": holds,
    })  # fmt: skip


def _refuse_other(audit: Audit) -> None:
    if "edges" not in audit.tables:
        message = "certificates are made for networks, whose readings are decimals; this audit is one of a mesh field"
        raise InputError(message)
    if any((audit.asked.get("what_if") or {}).values()):
        message = "a certificate speaks of the data as they stand, not of what-if readings; take the audit itself"
        raise InputError(message)


def _readings(audit: Audit) -> tuple[Readings, str | None]:
    """Return the readings, and the column of the edge table that they stand in; None where it is another table."""
    if audit.asked.get("readings") is None:
        return read_readings(audit.data, audit.asked["value"], None), audit.asked["value"]
    value = np.asarray(audit.tables["edges"]["value"], dtype=np.float64)
    return Readings(value, None, Column("value", value).decimals(), None), None


def _held(audit: Audit, fixed: object) -> Known | None:
    names = list(audit.asked.get("fixed") or ())
    if fixed is None and not names:
        return None
    known = None if fixed is None else known_at_vertices(audit.data, fixed, "fixed")
    held = np.empty(0, np.int64) if known is None else np.flatnonzero(known.decimals.present)
    if sorted(vertex_names(audit.data.complex, held).tolist()) != sorted(map(str, names)):
        message = f"fixed must be given here as it was given to the audit, which held {len(names)} vertices"
        raise InputError(message)
    return known


def _column_name(audit: Audit, given: object) -> str | None:
    return given if isinstance(given, str) and given in audit.data.columns.get(0, {}) else None


def _in_units(audit: Audit, model: Model) -> tuple[list[int | None], list[int], list[list[object]], int]:
    """Return readings, numbers at vertices and sums in units of 10**-places, all as Python integers."""
    network, n = audit.data.complex, audit.data.complex.counts[0]
    if audit.law == "balance":
        group, n_groups = contracted(model)
        residual, places = group_residuals(model, group, n_groups)
        listed = _first_named(network.tail, network.head, group, model, n)
        names = vertex_names(network, listed)
        sums = [[name, int(residual[group[v]])] for name, v in zip(names.tolist(), listed.tolist(), strict=True)]
    else:
        found = closures(model)
        places = found.places
        names = edge_names(network, found.chords)
        sums = [[name, int(m)] for name, m in zip(names.tolist(), found.misclosure.tolist(), strict=True)]
    own = model.readings.decimals
    values = _scaled(own.integers, places - own.places)
    numbers = [v if there else None for v, there in zip(values, own.present.tolist(), strict=True)]
    held = model.known
    amounts = [0] * n if held is None else _scaled(held.decimals.integers[:n], places - held.decimals.places)
    return numbers, amounts, sums, places


def _scaled(integers: AnyArray, places: int) -> list[int]:
    factor = 10**places
    return [int(i) * factor for i in integers.tolist()]


def _first_named(tail: IntArray, head: IntArray, group: IntArray, model: Model, n: int) -> IntArray:
    """Return for each closed group the vertex that the edges name first, or else that with the first supply."""
    named = np.stack([tail, head], axis=1).ravel()
    if model.known is not None:
        named = np.concatenate([named, np.flatnonzero(model.known.decimals.integers[:n] != 0)])
    closed = named[group[named] != group[-1]]
    first = np.unique(group[closed], return_index=True)[1]
    return np.asarray(closed[np.sort(first)], dtype=np.int64)


def _at_vertices(audit: Audit, known: Known | None, amounts: list[int]) -> list[list[object]]:
    """Return supplies that are not zero, or all held potentials, as rows of a name and a whole number."""
    if known is None:
        return []
    wanted = known.decimals.present if audit.law == "loop" else known.decimals.integers != 0
    vertices = np.flatnonzero(wanted)
    return [
        [name, amounts[vertex]]
        for name, vertex in zip(vertex_names(audit.data.complex, vertices).tolist(), vertices.tolist(), strict=True)
    ]


def _verdict(audit: Audit) -> tuple[str | None, bool | None]:
    if audit.asked.get("sd") is not None or audit.asked.get("preset") is not None:
        return None, None
    limit = audit.asked.get("limit")
    return repr(float(limit or 0.0)), audit.holds


def _what_inputs_hold(audit: Audit) -> list[str]:
    if not audit.inputs:
        return []
    nodes = ["nodes"] if audit.data.columns.get(0) else []
    return ["edges", *nodes, *["readings"] * (len(audit.inputs) - 1 - len(nodes))]


def _decimal(audit: Audit) -> str:
    return next((column.decimal for column in audit.data.columns.get(1, {}).values()), ".")
