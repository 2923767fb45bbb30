"""The two audits on the command line: what is asked, what it makes, where it goes."""

import argparse
import sys
from collections.abc import Iterable
from dataclasses import replace
from typing import TYPE_CHECKING, Any

from dec.cli.codes import FINDING, OK, UNSOLVABLE, UsageError
from dec.cli.paths import contents_of, outputs_of, read_data
from dec.cli.speaking import patience, remark, show, write

if TYPE_CHECKING:
    from dec.audit.digits.rounding import Rounded
    from dec.audit.record import Audit
    from dec.calculus.dataset import Dataset

__all__ = ["balance_verb", "loops_verb"]

_NETWORK = ("sd", "alpha", "readings", "common", "common_sd", "preset", "transition", "sidak", "robust", "figures",
            "if_turned", "if_scaled", "if_left_out", "digits", "certificate")  # fmt: skip
_QUESTION = ("sd", "alpha", "limit", "unit", "readings", "supply", "supply_sd", "storage", "storage_sd", "fixed",
             "fixed_sd", "common", "common_sd", "preset", "length", "length_unit", "transition", "sidak", "robust",
             "figures")  # fmt: skip
_MAY_BE_0 = ("supply_sd", "storage_sd", "fixed_sd")


def balance_verb(options: argparse.Namespace) -> int:
    """Do the flows add up? Exit code 0, 1, or 4 where nothing is decided."""
    from dec.audit.questions import balance

    only = ("supply", "supply_sd", "storage", "storage_sd", "open", "open_column", "round_supplies")
    _refuse_unfit(options, "balance", network=(*_NETWORK, *only))
    with patience("balancing", options):
        data = read_data(options)
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
            read_data(options), options.value, options.sd, options.fixed, fixed_sd=options.fixed_sd,
            length=options.length, length_unit=options.length_unit, **_asked(options),
        )  # fmt: skip
    return _conclude(options, audit)


def _asked(options: argparse.Namespace) -> dict[str, Any]:
    """Return what both audits are asked alike."""
    from dec.audit.given.asked import ALPHA

    names = ("field", "at", "limit", "unit", "readings", "common", "common_sd", "preset", "transition", "sidak",
             "robust", "decimal")  # fmt: skip
    usual = {"alpha": options.alpha or ALPHA, "figures": options.figures or "auto"}
    return usual | {name: getattr(options, name) for name in names}


def _what_if(options: argparse.Namespace, audit: "Audit") -> dict[str, Any] | None:
    """Return the audit as it would be with the readings that were asked for; None where none were."""
    turned, left_out = options.if_turned or [], options.if_left_out or []
    scaled = {}
    for text in options.if_scaled or []:
        name, _, factor = text.rpartition("=")
        if not name:
            message = f"--if-scaled takes an id and a factor, as P12=0.001 or P12=1/3.6, got {text!r}"
            raise UsageError(message)
        if name in scaled:
            message = f"--if-scaled names {name!r} twice; ask for one change of an edge at a time"
            raise UsageError(message)
        scaled[name] = factor
    if not (turned or left_out or scaled):
        return None
    would = audit.what_if(turned, scaled, left_out)
    return {**would.asked["what_if"], **would.summary()}


def _conclude(options: argparse.Namespace, audit: "Audit") -> int:
    from dec.audit.output import result_notes
    from dec.files.writing import write_atomically
    from dec.report.terminal import SHOWN, audit_view

    would = _what_if(options, audit)
    if would is not None:
        audit = replace(audit, extra={**audit.extra, "what_if": would})
    with patience("writing", options):
        digits = _rounded(options, audit)
        if digits is not None:
            audit = _with_digits(audit, digits)
        found = audit.to_json() if options.json else audit.to_dict(rows=SHOWN)
        made = _files(options, audit, digits)
        for path, data in made.items():
            if path != "-":
                write_atomically(path, data, force=options.force)
    if options.output:
        remark(options, result_notes(audit))
    if "-" in made:
        write(made["-"])
    else:
        show(options, found, audit_view)
    if audit.holds is None:
        return UNSOLVABLE
    return OK if audit.holds else FINDING


def _files(options: argparse.Namespace, audit: "Audit", digits: "Rounded | None") -> dict[str, bytes]:
    """Return everything that is to be written, by path; all of it is made before any of it is written."""
    from dec.audit.output import result_bytes, vertex_bytes

    made = {}
    if options.certificate:
        made[options.certificate] = audit.certify(contents=contents_of(options))
    if options.vertices:
        made[options.vertices] = vertex_bytes(audit, digits)
    if options.output:
        name = "result.csv" if options.output == "-" else options.output
        made[options.output] = result_bytes(audit, name, digits)
    return made


def _rounded(options: argparse.Namespace, audit: "Audit") -> "Rounded | None":
    """Return the adjusted values in whole units, where that was asked for."""
    if options.digits is None:
        return None
    from dec.audit.digits.rounding import rounded

    return rounded(audit, options.digits, round_supplies=getattr(options, "round_supplies", False))


def _with_digits(audit: "Audit", digits: "Rounded") -> "Audit":
    """Return the audit with the rounded values beside it, and what is to be said of them among its notes."""
    from dec.audit.digits.tables import rounded_dict

    found = rounded_dict(digits)
    return replace(audit, extra={**audit.extra, "digits": found}, notes=(*audit.notes, *found["notes"]))


def _both(data: "Dataset", column: str, names: list[str]) -> list[Any]:
    from dec.audit.given.readings import named_vertices

    ids = data.complex.vertex_ids
    flagged = named_vertices(data, column, "--open-column").tolist()
    return [*names, *(flagged if ids is None else [ids[v] for v in flagged])]


def _refuse_unfit(options: argparse.Namespace, law: str, network: Iterable[str]) -> None:
    """Refuse what contradicts itself or would be passed over in silence, before anything is read."""
    outputs_of(options)
    if (options.value is None) == (options.field is None):
        message = "give --value COLUMN for a network, or --field NAME for a mesh"
        raise UsageError(message)
    if options.field is None:
        _refuse_on_network(options, law)
    else:
        _refuse_on_mesh(options, network)
    _refuse_negative(options)
    if options.unit is not None and any("\ud800" <= sign <= "\udfff" for sign in options.unit):
        message = f"--unit must be Unicode text, got {options.unit!a}; see the encoding of the terminal"
        raise UsageError(message)


def _refuse_on_network(options: argparse.Namespace, law: str) -> None:
    if options.sd is not None and options.limit is not None:
        message = "give --sd or --limit, not both: with standard deviations the chi-square test decides"
        raise UsageError(message)
    if options.limit is not None and not _is_number(options.limit):
        message = f"--limit must be a number on a network, in the unit of the readings, got {options.limit!r}"
        raise UsageError(message)
    if options.at is not None:
        message = "--at belongs to a mesh field, not to --value"
        raise UsageError(message)
    if getattr(options, "round_supplies", False) and options.digits is None:
        message = "--round-supplies belongs to --digits; give the unit to round to"
        raise UsageError(message)
    if options.digits is not None and _is_number(options.digits) and float(options.digits) <= 0:
        message = f"--digits must be a positive decimal, as 0.1, or an edge column, got {options.digits}"
        raise UsageError(message)
    _refuse_clash(options, law)


def _refuse_on_mesh(options: argparse.Namespace, network: Iterable[str]) -> None:
    if options.vertices is not None:
        message = "--vertices belongs to a network column, not to --field; -o FILE.vtu writes the mesh"
        raise UsageError(message)
    for name in network:
        if getattr(options, name):
            message = f"{_option(name)} belongs to a network column, not to --field"
            raise UsageError(message)


def _refuse_clash(options: argparse.Namespace, law: str) -> None:
    from dec.audit.given.asked import clash

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
