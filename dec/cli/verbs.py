"""The verbs: each reads, calls one public function, prints, and gives an exit code."""

import argparse
import os
from collections.abc import Iterable
from typing import TYPE_CHECKING, Any

from dec.cli.codes import FINDING, OK, UNSOLVABLE, UsageError
from dec.cli.speaking import patience, remark, show, write
from dec.errors import OutputError

if TYPE_CHECKING:
    from dec.audit.record import Audit
    from dec.calculus.dataset import Dataset

__all__ = ["balance_verb", "check_verb", "demo_verb", "loops_verb", "solve_verb"]

_ALPHA = 0.05


def check_verb(options: argparse.Namespace) -> int:
    """Is it sound? Exit code 0, or 1 with a finding."""
    from dec.audit.condition import check
    from dec.report.terminal import check_view

    with patience("checking", options):
        result = check(_read(options))
        found = result.to_dict()
    show(options, found, check_view)
    return OK if result.holds else FINDING


def balance_verb(options: argparse.Namespace) -> int:
    """Do the flows add up? Exit code 0, 1, or 4 where nothing is decided."""
    from dec.audit.questions import balance

    _refuse_unfit(options, network=("sd", "alpha", "supply", "open", "open_column"))
    with patience("balancing", options):
        data = _read(options)
        opened: str | list[str] = options.open_column or options.open or []
        if options.open_column and options.open:
            opened = _both(data, options.open_column, options.open)
        audit = balance(
            data, options.value, options.sd, opened, options.supply, field=options.field, at=options.at,
            alpha=options.alpha or _ALPHA, limit=options.limit, unit=options.unit,
        )  # fmt: skip
    return _conclude(options, audit)


def loops_verb(options: argparse.Namespace) -> int:
    """Do the differences close? Exit codes as for `balance_verb`."""
    from dec.audit.questions import loops

    _refuse_unfit(options, network=("sd", "alpha", "fixed"))
    with patience("closing loops", options):
        audit = loops(
            _read(options), options.value, options.sd, options.fixed, field=options.field, at=options.at,
            alpha=options.alpha or _ALPHA, limit=options.limit, unit=options.unit,
        )  # fmt: skip
    return _conclude(options, audit)


def solve_verb(options: argparse.Namespace) -> int:
    """Potentials and flows from sources; exit code 0."""
    from functools import partial

    from dec.audit.output import flow_bytes
    from dec.files.writing import write_atomically
    from dec.report.terminal import solve_view
    from dec.solvers.network import solve_network

    with patience("solving", options):
        data = _read(options)
        solution = solve_network(
            data, options.source, options.conductance, options.fixed, exponent=options.exponent, rtol=options.rtol,
            method=options.method, unbalanced=options.unbalanced,
        )  # fmt: skip
        found = solution.to_dict()
        found["inputs"] = [{"name": i.name, "sha256": i.sha256, "bytes": i.bytes} for i in data.inputs]
        found["asked"]["source"] = options.source
    if options.output == "-":
        write(flow_bytes(solution))
        return OK
    if options.output:
        write_atomically(options.output, flow_bytes(solution), force=options.force)
    show(options, found, partial(solve_view, why=options.why))
    return OK


def demo_verb(options: argparse.Namespace) -> int:
    """The built-in example; exit code 0 when exactly the planted faults are found."""
    from dec.demo import run

    with patience("running the example", options):
        outcome = run(options.dir, force=options.force)
    show(options, outcome.to_dict(), lambda _: outcome.view())
    return OK if outcome.as_planted else FINDING


def _conclude(options: argparse.Namespace, audit: "Audit") -> int:
    from dec.audit.output import result_bytes, result_notes, vertex_bytes
    from dec.files.writing import write_atomically
    from dec.report.terminal import audit_view

    with patience("writing", options):
        found = audit.to_dict()
        made = result_bytes(audit, "result.csv" if options.output == "-" else options.output) if options.output else b""
        if options.vertices:
            write_atomically(options.vertices, vertex_bytes(audit), force=options.force)
        if options.output and options.output != "-":
            write_atomically(options.output, made, force=options.force)
    if options.output == "-":
        write(made)
    else:
        if options.output:
            remark(options, result_notes(audit))
        show(options, found, audit_view)
    if audit.holds is None:
        return UNSOLVABLE
    return OK if audit.holds else FINDING


def _read(options: argparse.Namespace) -> "Dataset":
    from dec.files.read import read
    from dec.files.writing import refuse_target

    outputs = [path for path in (getattr(options, name, None) for name in ("output", "vertices")) if path is not None]
    for path in outputs:
        if path != "-" or path == getattr(options, "vertices", None):
            refuse_target(path, force=options.force)
    if len(outputs) == 2 and os.path.realpath(outputs[0]) == os.path.realpath(outputs[1]):
        message = f"-o and --vertices name one file, {outputs[0]}; give each its own"
        raise UsageError(message)
    for source in filter(None, (options.file, options.nodes)):
        if os.path.realpath(source) in {os.path.realpath(path) for path in outputs if path != "-"}:
            message = f"{source} is an input; results never replace what they were made from, name another file"
            raise OutputError(message)
    return read(options.file, options.nodes, decimal=options.decimal)


def _both(data: "Dataset", column: str, names: list[str]) -> list[Any]:
    from dec.audit.readings import named_vertices

    ids = data.complex.vertex_ids
    flagged = named_vertices(data, column, "--open-column").tolist()
    return [*names, *(flagged if ids is None else [ids[v] for v in flagged])]


def _refuse_unfit(options: argparse.Namespace, network: Iterable[str]) -> None:
    if options.output == "-" and options.json:
        message = "give -o - or --json, not both: each is the whole of standard output"
        raise UsageError(message)
    if options.sd is not None and options.limit is not None:
        message = "give --sd or --limit, not both: with standard deviations the chi-square test decides"
        raise UsageError(message)
    if (options.value is None) == (options.field is None):
        message = "give --value COLUMN for a network, or --field NAME for a mesh"
        raise UsageError(message)
    if options.value is not None and options.limit is not None and not _is_number(options.limit):
        message = f"--limit must be a number on a network, in the unit of the readings, got {options.limit!r}"
        raise UsageError(message)
    if options.value is not None and options.at is not None:
        message = "--at belongs to a mesh field, not to --value"
        raise UsageError(message)
    if options.field is not None and options.vertices is not None:
        message = "--vertices belongs to a network column, not to --field; -o FILE.vtu writes the mesh"
        raise UsageError(message)
    for name in network:
        if options.field is not None and getattr(options, name):
            message = f"--{name.replace('_', '-')} belongs to a network column, not to --field"
            raise UsageError(message)


def _is_number(text: str) -> bool:
    from dec.calculus.columns import reads_as_number

    return reads_as_number(text)
