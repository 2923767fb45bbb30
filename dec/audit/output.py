"""The adjusted values of an audit as a file: a table for a network, a mesh with results for a mesh."""

from collections.abc import Mapping
from pathlib import PurePath

import numpy as np

from dec.arrays import AnyArray, FloatArray
from dec.audit.digits.rounding import Rounded
from dec.audit.digits.tables import rounded_columns, rounded_vertex_columns
from dec.audit.record import Audit
from dec.calculus.dataset import Field
from dec.errors import InputError
from dec.files.tables_out import csv_bytes
from dec.files.vtu import vtu_bytes, vtu_notes
from dec.solvers.solution import Solution

__all__ = ["flow_bytes", "refuse_ending", "result_bytes", "result_notes", "vertex_bytes"]

_TABLE_ENDINGS = (".csv", ".tsv", ".txt", "")  # of files that hold a table with commas, all alike


def refuse_ending(option: str, name: str, *, is_table: bool) -> None:
    """Nothing, or InputError where a file's ending promises something else than what is written to it.

    Parameters
    ----------
    option, name : str
        What asks for the file, for the message, and its name.
    is_table : bool
        Whether a table is written to it, which may end in .csv, .tsv, .txt or nothing; else a mesh, in .vtu.
    """
    if PurePath(name).suffix.lower() in (_TABLE_ENDINGS if is_table else (".vtu",)):
        return
    fitting = "a table, as .csv, .tsv, .txt or without an ending" if is_table else "a mesh, as .vtu"
    message = f"{option} {PurePath(name).name}: the result must be written as {fitting}"
    raise InputError(message)


def result_bytes(audit: Audit, name: str, digits: Rounded | None = None) -> bytes:
    """The results of an audit as the bytes of a file.

    Parameters
    ----------
    audit : Audit
    name : str
        The file's name; its suffix says what is made: ``.csv``, ``.tsv``, ``.txt`` or none a table of the edges of a
        network with commas, where the adjusted values stand in a column of their own and the raw ones stay as read (of
        a table of readings: what they come to on the edge); ``.vtu`` the mesh with its fields and one value and limit a
        cell.
    digits : Rounded or None
        Adjusted values in whole units, which get columns of their own.

    Returns
    -------
    bytes

    Raises
    ------
    InputError
        If the suffix does not fit the audit.
    """
    on_network = "edges" in audit.tables
    refuse_ending("-o", name, is_table=on_network)
    if on_network:
        return csv_bytes(_edge_columns(audit, {} if digits is None else rounded_columns(digits)))
    return vtu_bytes(audit.data, [*_given_fields(audit), *_cell_fields(audit)])


def result_notes(audit: Audit) -> tuple[str, ...]:
    """What to know of the file of `result_bytes`: what it does not hold as the input had it, what its values carry."""
    if "edges" in audit.tables:
        if audit.holds is not False:
            return ()
        return ("the law does not hold: adjusted values carry a share of the errors found until these are mended",)
    notes = list(vtu_notes(audit.data, _given_fields(audit)))
    if audit.data.regions:
        notes.append(f"named groups have no place in VTU and were not written: {', '.join(audit.data.regions)}")
    if not _cell_fields(audit):
        notes.append("the audit has no value for each cell: the file holds the mesh and its fields only")
    return tuple(notes)


def flow_bytes(solution: Solution) -> bytes:
    """The flow of every edge of a solution with the potentials at its ends, as the bytes of a CSV table."""
    K, potential = solution.potential.complex, solution.potential.values
    edges = np.arange(K.counts[1]) if K.edge_ids is None else K.edge_ids
    names = np.arange(K.counts[0]) if K.vertex_ids is None else K.vertex_ids
    columns = {
        "id": edges, "from": names[K.tail], "to": names[K.head], "flow": solution.flow.values,
        "potential_from": potential[K.tail], "potential_to": potential[K.head],
    }  # fmt: skip
    return csv_bytes(columns)


def vertex_bytes(audit: Audit, digits: Rounded | None = None) -> bytes:
    """The vertices of a network audit as the bytes of a CSV table; columns without an entry are left out.

    Raises
    ------
    InputError
        If the audit is one of a mesh.
    """
    if "vertices" not in audit.tables:
        message = "--vertices: an audit of a mesh has no table of vertices; use -o FILE.vtu"
        raise InputError(message)
    columns = dict(audit.tables["vertices"])
    if digits is not None:
        ((heading, rounded),) = (item for item in rounded_vertex_columns(digits).items() if item[0] != "id")
        columns[heading] = np.array([*rounded, *[""] * (len(columns["id"]) - len(rounded))], dtype=object)
    return csv_bytes({name: column for name, column in columns.items() if _has_entry(column)})


def _has_entry(column: AnyArray) -> bool:
    if column.dtype == object:
        return any(value not in (None, "") for value in column.tolist())
    return not np.isnan(column).all()


def _edge_columns(audit: Audit, more: Mapping[str, AnyArray]) -> dict[str, AnyArray]:
    table = audit.tables["edges"]
    value = str(audit.asked["value"])
    columns: dict[str, AnyArray] = {key: table[key] for key in ("id", "from", "to")}
    columns[value] = table["value"]
    if audit.asked.get("readings") is None:  # else the edge table has no such column, or one that was not audited
        raw = audit.data.column(value, 1)
        columns[value] = raw.cells if raw.cells.dtype == object and raw.decimal == "." else table["value"]
    for key in ("sd", "adjusted", "adjusted_sd", "correction", "redundancy", "statistic", "detectable", "standing"):
        columns[key if key not in columns else f"audit_{key}"] = table[key]
    for key, column in more.items():
        columns[key if key not in columns else f"audit_{key}"] = column
    return columns


def _given_fields(audit: Audit) -> list[Field]:
    return [field for places in audit.data.fields.values() for field in places.values()]


def _cell_fields(audit: Audit) -> list[Field]:
    name = "circulation" if audit.law == "loop" else "net_outflow"
    taken = {(f.name, f.at) for f in _given_fields(audit)}
    fields = []
    for key, part in (("value", name), ("limit", f"{name}_limit")):
        values = _by_cell(audit, key)
        if values is not None:
            label = part if (part, "cells") not in taken else f"audit_{part}"
            fields.append(Field(label, "cells", values))
    return fields


def _by_cell(audit: Audit, key: str) -> FloatArray | None:
    """Return the column of the top cells in their own order, or None where the audit has no row for each."""
    table = audit.tables.get("cells" if audit.data.complex.dim == 3 else "faces")
    count = audit.data.complex.counts[-1]
    if table is None or len(table["id"]) != count:
        return None
    values = np.empty(count)
    values[np.asarray(table["id"], dtype=np.int64)] = np.asarray(table[key], dtype=np.float64)
    return values.reshape(-1, 1)
