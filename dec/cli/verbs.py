"""The verbs: each reads, calls one public function, prints, and gives an exit code."""

import argparse
import os
import sys
from collections.abc import Iterable
from dataclasses import replace
from typing import TYPE_CHECKING, Any

from dec.cli.codes import FINDING, OK, UNSOLVABLE, UsageError
from dec.cli.speaking import patience, remark, show, write
from dec.errors import OutputError

if TYPE_CHECKING:
    from dec.audit.record import Audit
    from dec.calculus.dataset import Dataset

__all__ = ["balance_verb", "check_verb", "demo_verb", "loops_verb", "presets_verb", "solve_verb"]


def check_verb(options: argparse.Namespace) -> int:
    """Is it sound? Exit code 0, or 1 with a finding."""
    from dec.audit.condition import check
    from dec.report.terminal import check_view

    with patience("checking", options):
        result = check(_read(options))
        found = result.to_dict()
    show(options, found, check_view)
    return OK if result.holds else FINDING


_NETWORK = ("sd", "alpha", "readings", "common", "common_sd", "preset", "transition", "sidak", "robust", "figures",
            "if_turned", "if_scaled", "if_left_out")  # fmt: skip
_QUESTION = ("sd", "alpha", "limit", "unit", "readings", "supply", "supply_sd", "storage", "storage_sd", "fixed",
             "fixed_sd", "common", "common_sd", "preset", "length", "length_unit", "transition", "sidak", "robust",
             "figures")  # fmt: skip
_MAY_BE_0 = ("supply_sd", "storage_sd", "fixed_sd")


def balance_verb(options: argparse.Namespace) -> int:
    """Do the flows add up? Exit code 0, 1, or 4 where nothing is decided."""
    from dec.audit.questions import balance

    only = ("supply", "supply_sd", "storage", "storage_sd", "open", "open_column")
    _refuse_unfit(options, "balance", network=(*_NETWORK, *only))
    with patience("balancing", options):
        data = _read(options)
        opened: str | list[str] = options.open_column or options.open or []
        if options.open_column and options.open:
            opened = _both(data, options.open_column, options.open)
        audit = balance(
            data, options.value, options.sd, opened, options.supply, supply_sd=options.supply_sd,
            storage=options.storage, storage_sd=options.storage_sd, **_asked(options),
        )  # fmt: skip
    return _conclude(options, audit)


def loops_verb(options: argparse.Namespace) -> int:
    """Do the differences close? Exit codes as for `balance_verb`."""
    from dec.audit.questions import loops

    _refuse_unfit(options, "loop", network=(*_NETWORK, "fixed", "fixed_sd", "length", "length_unit"))
    with patience("closing loops", options):
        audit = loops(
            _read(options), options.value, options.sd, options.fixed, fixed_sd=options.fixed_sd, length=options.length,
            length_unit=options.length_unit, **_asked(options),
        )  # fmt: skip
    return _conclude(options, audit)


def _asked(options: argparse.Namespace) -> dict[str, Any]:
    """Return what both audits are asked alike."""
    from dec.audit.asked import ALPHA

    names = ("field", "at", "limit", "unit", "readings", "common", "common_sd", "preset", "transition", "sidak",
             "robust", "decimal")  # fmt: skip
    usual = {"alpha": options.alpha or ALPHA, "figures": options.figures or "auto"}
    return usual | {name: getattr(options, name) for name in names}


def presets_verb(options: argparse.Namespace) -> int:
    """Every preset with its source; exit code 0."""
    from dec.audit.presets import PRESETS
    from dec.report.terminal import presets_view

    found = [{"name": p.name, "sets": p.sets, "figures": dict(p.figures), "says": p.sentence} for p in PRESETS.values()]
    show(options, {"schema": "dec.presets/1", "presets": found}, presets_view)
    return OK


def _what_if(options: argparse.Namespace, audit: "Audit") -> dict[str, Any] | None:
    """Return the audit as it would be with the readings that were asked for; None where none were."""
    turned, left_out = options.if_turned or [], options.if_left_out or []
    scaled = {}
    for text in options.if_scaled or []:
        name, _, factor = text.rpartition("=")
        if not name:
            message = f"--if-scaled takes an id and a factor, as P12=0.001 or P12=1/3.6, got {text!r}"
            raise UsageError(message)
        scaled[name] = factor
    if not (turned or left_out or scaled):
        return None
    would = audit.what_if(turned, scaled, left_out)
    first = would.to_dict(rows=0)["suspects"][:3]
    question = would.asked["what_if"]
    return {**question, "holds": would.holds, "dof": would.dof, "chi_square": would.chi_square, "limit": would.limit,
            "p_value": would.p_value, "suspects": first}  # fmt: skip


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
    from dec.report.terminal import SHOWN, audit_view

    would = _what_if(options, audit)
    if would is not None:
        audit = replace(audit, extra={**audit.extra, "what_if": would})
    with patience("writing", options):
        found = audit.to_json() if options.json else audit.to_dict(rows=SHOWN)
        made = {}
        if options.output:
            made[options.output] = result_bytes(audit, "result.csv" if options.output == "-" else options.output)
        if options.vertices:
            made[options.vertices] = vertex_bytes(audit)
        for path in (options.vertices, options.output):
            if path and path != "-":
                write_atomically(path, made[path], force=options.force)
    if options.output:
        remark(options, result_notes(audit))
    if "-" in made:
        write(made["-"])
    else:
        show(options, found, audit_view)
    if audit.holds is None:
        return UNSOLVABLE
    return OK if audit.holds else FINDING


def _read(options: argparse.Namespace) -> "Dataset":
    from dec.audit.output import refuse_ending
    from dec.files.read import read
    from dec.files.writing import refuse_target

    sources = [path for path in (options.file, options.nodes, getattr(options, "readings", None)) if path]
    if sources.count("-") > 1:
        message = "- stands for standard input, which holds one table; give the others as files"
        raise UsageError(message)
    outputs = _outputs(options)
    for option, path in outputs.items():
        if path != "-":
            refuse_ending(option, path, is_table=getattr(options, "field", None) is None)
            refuse_target(path, force=options.force)
    if len(outputs) == 2 and len(set(map(os.path.realpath, outputs.values()))) == 1:
        message = f"-o and --vertices name one file, {options.output}; give each its own"
        raise UsageError(message)
    for source in sources:
        if source != "-" and os.path.realpath(source) in {os.path.realpath(p) for p in outputs.values() if p != "-"}:
            message = f"{source} is an input; results never replace what they were made from, name another file"
            raise OutputError(message)
    return read(options.file, options.nodes, decimal=options.decimal)


def _outputs(options: argparse.Namespace) -> dict[str, str]:
    """Return the files that results go to, by their options."""
    given = {"-o": getattr(options, "output", None), "--vertices": getattr(options, "vertices", None)}
    outputs = {option: path for option, path in given.items() if path is not None}
    for option, path in outputs.items():
        if not path:
            message = f"{option} must name a file, or - for standard output, got an empty name"
            raise UsageError(message)
        if path == "-" and options.json:
            message = f"give {option} - or --json, not both: each is the whole of standard output"
            raise UsageError(message)
    return outputs


def _both(data: "Dataset", column: str, names: list[str]) -> list[Any]:
    from dec.audit.readings import named_vertices

    ids = data.complex.vertex_ids
    flagged = named_vertices(data, column, "--open-column").tolist()
    return [*names, *(flagged if ids is None else [ids[v] for v in flagged])]


def _refuse_unfit(options: argparse.Namespace, law: str, network: Iterable[str]) -> None:
    """Refuse what contradicts itself or would be passed over in silence, before anything is read."""
    _outputs(options)
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
            message = f"{_option(name)} belongs to a network column, not to --field"
            raise UsageError(message)
    _refuse_negative(options)
    if options.unit is not None and any("\ud800" <= sign <= "\udfff" for sign in options.unit):
        message = f"--unit must be Unicode text, got {options.unit!a}; see the encoding of the terminal"
        raise UsageError(message)
    if options.value is not None:
        _refuse_clash(options, law)


def _refuse_clash(options: argparse.Namespace, law: str) -> None:
    from dec.audit.asked import clash

    found = clash({"law": law, **{name: getattr(options, name, None) for name in _QUESTION}}, _option)
    if found is not None:
        raise UsageError(found)


def _refuse_negative(options: argparse.Namespace) -> None:
    if options.limit is not None and _size(options.limit) < 0:
        message = f"--limit must be 0 or positive, got {options.limit}"
        raise UsageError(message)
    for name in ("sd", "common_sd", *_MAY_BE_0):
        text = getattr(options, name, None)
        least = 0.0 if name in _MAY_BE_0 else sys.float_info.min
        if text is not None and _size(text) < least:
            message = f"{_option(name)} must be {'0 or ' if name in _MAY_BE_0 else ''}positive, got {text}"
            raise UsageError(message)


def _size(text: str) -> float:
    """Return the number that a text is, or whose percentage; infinity where it is something else."""
    number = text.partition("%")[0] if "%" in text.partition("+")[0] else text
    return float(number) if _is_number(number) else float("inf")


def _option(name: str) -> str:
    return f"--{name.replace('_', '-')}"


def _is_number(text: str) -> bool:
    from dec.calculus.columns import reads_as_number

    return reads_as_number(text)
