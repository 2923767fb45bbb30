"""Recheck a certificate without the program that made it: standard library alone, one file, Python 3.11 or later.

Run it anywhere: ``python -I verify.py CERTIFICATE [TABLE]...``. It reads the tables itself, recomputes every whole
number and every sum, and names the line that does not fit. Exit code 0: verifies; 1: does not; 2: wrong use; 3: a file
cannot be used. What a certificate shows is arithmetic: that the numbers in the tables add up as stated. It is no
evidence that the readings are right, that there is no leak, or that anything is safe; local codes and licensed
practice decide.
"""

import argparse
import csv
import hashlib
import json
import math
import re
import sys
import zlib
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from pathlib import Path
from typing import Any, NoReturn

__all__ = ["Report", "Unusable", "gathered", "main", "verify"]

SCHEMA = "dec.certificate/1"
_NUMBER = re.compile(r"[+-]?([0-9]+(\.[0-9]*)?|\.[0-9]+)([eE][+-]?[0-9]+)?")
_UNIT = re.compile(r"1|0\.0*1")
_MOST_PLACES, _MOST_SHOWN, _ROUND_UP = 400, 20, 64
_MOST_CELLS = 1_000_000
_MALFORMED = (KeyError, TypeError, ValueError, IndexError, AttributeError, ArithmeticError, RecursionError)


class Unfit(Exception):  # noqa: N818 - it says what does not fit, not that something broke
    """Something does not fit; the message says what and where."""


class Unusable(Exception):  # noqa: N818
    """A file cannot be used at all."""


@dataclass(slots=True)
class Report:
    """What a recheck found.

    Attributes
    ----------
    law : str
        "balance", "loop", "solve" or "homology"; empty where the certificate does not say.
    problems : list of str
        What does not fit, with file and line; empty where the certificate verifies.
    checked : list of str
        What was recomputed.
    not_shown : list of str
        What could not be rechecked here.
    """

    law: str = ""
    problems: list[str] = field(default_factory=list)
    checked: list[str] = field(default_factory=list)
    not_shown: list[str] = field(default_factory=list)

    @property
    def holds(self) -> bool:
        """Whether the certificate verifies."""
        return not self.problems

    def to_dict(self) -> dict[str, Any]:
        """The report as plain Python objects, for JSON."""
        return {
            "schema": "dec.verify/1", "holds": self.holds, "law": self.law, "problems": self.problems,
            "checked": self.checked, "not_shown": self.not_shown,
        }  # fmt: skip

    def text(self) -> str:
        """The report as lines of text; control characters are escaped."""
        count = len(self.problems)
        first = f"verifies ({self.law})" if self.holds else f"does not verify: {count} fault{'s' * (count != 1)}"
        lines = [first, *(f"  fault: {text}" for text in self.problems[:_MOST_SHOWN])]
        if count > _MOST_SHOWN:
            lines.append(f"  and {count - _MOST_SHOWN} more")
        if self.holds:
            lines += [f"  {text}" for text in self.checked]
        lines += [f"  not shown: {text}" for text in self.not_shown]
        return "".join(f"{_printable(line)}\n" for line in lines)


@dataclass(slots=True)
class Table:
    """A table of text: cells by heading, and the line on which each row begins."""

    name: str
    columns: dict[str, list[str]]
    lines: list[int]

    def column(self, heading: str) -> list[str]:
        """The cells of a column; Unfit where there is none."""
        if heading not in self.columns:
            _unfit(f"{self.name}: a column {heading!r} is needed, there are {', '.join(self.columns)}")
        return self.columns[heading]

    def place(self, row: int) -> str:
        """Where a row stands."""
        return f"{self.name} line {self.lines[row]}"


def verify(certificate: bytes, files: Mapping[str, bytes]) -> Report:
    r"""What a recheck of a certificate finds.

    Parameters
    ----------
    certificate : bytes
        The file that ``--certificate`` wrote.
    files : mapping of name to bytes
        The input files by their base names; one that is missing is itself a fault.

    Returns
    -------
    Report

    Examples
    --------
    >>> verify(b"{}", {}).problems
    ['the certificate must say "schema": "dec.certificate/1", found None']
    """
    report = Report()
    try:
        entries = _parsed(certificate)
        report.law = str(entries.get("law", ""))
        tables = _tables(entries, files, report)
        _LAWS[report.law](entries, tables, report)
    except Unfit as fault:
        report.problems.append(str(fault))
    except _MALFORMED as error:
        report.problems.append(f"the certificate is malformed ({type(error).__name__}: {error})")
    return report


def _parsed(certificate: bytes) -> dict[str, Any]:
    try:
        entries = json.loads(certificate.decode("utf-8"), object_pairs_hook=_distinct, parse_constant=_no_constant)
    except (ValueError, RecursionError) as error:
        _unfit(f"the certificate must be JSON, it is not ({error}); the copy may be damaged")
    if not isinstance(entries, dict) or entries.get("schema") != SCHEMA:
        found = entries.get("schema") if isinstance(entries, dict) else type(entries).__name__
        _unfit(f'the certificate must say "schema": "{SCHEMA}", found {found!r}')
    seal = entries.pop("seal", None)
    if seal != hashlib.sha256(_canonical(entries)).hexdigest():
        _unfit("the certificate was changed after it was made: its seal does not fit what it says")
    if not isinstance(entries.get("law"), str) or entries["law"] not in _LAWS:
        _unfit(f"the law must be one of {', '.join(_LAWS)}, found {entries.get('law')!r}")
    return entries


def _canonical(entries: Mapping[str, Any]) -> bytes:
    return json.dumps(entries, sort_keys=True, separators=(",", ":"), allow_nan=False).encode("ascii")


def _distinct(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
    entries = dict(pairs)
    if len(entries) != len(pairs):
        _unfit("the certificate gives a key twice")
    return entries


def _no_constant(text: str) -> NoReturn:
    _unfit(f"the certificate holds {text}, which is no number")


def _unfit(message: str) -> NoReturn:
    raise Unfit(message)


def _printable(text: str) -> str:
    return "".join(c if c.isprintable() else c.encode("unicode_escape", "surrogatepass").decode("ascii") for c in text)


# ---- the tables


def _tables(entries: Mapping[str, Any], files: Mapping[str, bytes], report: Report) -> dict[str, Table]:
    """Return the tables by what they hold, once their bytes are compared with what was hashed."""
    tables = {}
    if not entries["inputs"]:
        report.not_shown.append("that the numbers are those of any file: they came from memory")
    for given in entries["inputs"]:
        name, data = given["name"], files.get(given["name"])
        if data is None:
            _unfit(f"{name} is needed for the recheck and was not given")
        if hashlib.sha256(data).hexdigest() != given["sha256"] or len(data) != given["bytes"]:
            end = b"\r" if given.get("line_end") == "\r" else b"\n"
            report.problems += _changed_lines(name, data.split(end), given.get("lines"))
        else:
            report.checked.append(f"{name}: SHA-256 fits")
        if given["holds"] not in {"edges", "nodes"} or name.lower().endswith(".parquet"):
            report.not_shown.append(f"{name} is compared by its SHA-256 alone")
            continue
        try:
            tables[given["holds"]] = _read_table(name, data)
        except Unfit as fault:
            report.problems.append(str(fault))
    return tables


def _changed_lines(name: str, lines: Sequence[bytes], digests: str | None) -> list[str]:
    """Return what differs from the file that was certified, line by line where it left digests of its lines."""
    found = [f"{name}: its bytes are not those that were certified"]
    if digests is None:
        return found
    before = [digests[i : i + 6] for i in range(0, len(digests), 6)]
    now = [f"{zlib.crc32(line) & 0xFFFFFF:06x}" for line in lines]
    pairs = zip(before, now, strict=False)
    differ = [number for number, (old, new) in enumerate(pairs, start=1) if old != new]
    if len(before) == len(now):
        found = [f"{name} line {number}: is not the line that was certified" for number in differ] or found
    else:
        first = differ[0] if differ else min(len(before), len(now))
        count = f"{len(now)} lines instead of {len(before)}"
        found.append(f"{name} line {first}: the first that is not the one that was certified; {count}")
    return found


def _read_table(name: str, data: bytes) -> Table:
    """Return a CSV table: RFC 4180, separators comma, semicolon or tab; cells without blanks at their ends."""
    try:
        text = data.decode("utf-8").removeprefix("\ufeff")
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        _unfit(f"{name} line {line}: not UTF-8 text")
    if "\0" in text:
        line = text.count("\n", 0, text.index("\0")) + 1
        _unfit(f"{name} line {line}: a zero byte stands in the text")
    rows = _rows(name, _line_ends(text))
    if not rows:
        _unfit(f"{name} holds no heading")
    headings = [cell.strip() for cell in rows[0][1]]
    for line, cells in rows:
        if len(cells) != len(headings):
            _unfit(f"{name} line {line}: {len(cells)} cells under {len(headings)} headings")
    columns = [[cells[k].strip() for _, cells in rows[1:]] for k in range(len(headings))]
    if not headings[-1] and len(headings) > 1 and not any(columns[-1]):
        headings.pop()
    if len(set(headings)) < len(headings) or not all(headings):
        _unfit(f"{name}: headings must differ and none may be empty")
    return Table(name, dict(zip(headings, columns, strict=False)), [line for line, _ in rows[1:]])


def _line_ends(text: str) -> str:
    """Return the text with LF at each line end; what stands in quotation marks stays as it is."""
    if "\r" not in text:
        return text
    end = "\n" if "\n" not in text else ""
    parts = text.split('"')
    parts[0::2] = [part.replace("\r", end) for part in parts[0::2]]
    return '"'.join(parts)


def _rows(name: str, text: str) -> list[tuple[int, list[str]]]:
    """Return each row that holds something, with the line on which it begins."""
    lines = text.split("\n")
    first = next((line for line in lines if line.strip(" ")), "")
    plain = re.sub(r'"[^"]*"', "", first)
    separator = max("\t;,", key=plain.count) if any(mark in plain for mark in "\t;,") else ","
    reader = csv.reader((line + "\n" for line in lines), delimiter=separator, strict=True)
    rows, begins = [], 1
    try:
        for cells in reader:
            is_blank = len(cells) <= 1 and not "".join(cells).strip(" ")
            if not is_blank and (any(cells) or len(cells) == 1):
                rows.append((begins, cells))
            begins = reader.line_num + 1
    except csv.Error as error:
        _unfit(f"{name} line {begins}: cannot be read ({error})")
    return rows


def _exactly(text: str, decimal: str, places: int, where: Callable[[], str]) -> int:
    """Return a number as a whole number of units of 10**-places."""
    plain = text.replace(decimal, ".") if decimal != "." else text
    found = _NUMBER.fullmatch(plain)
    if found is None or (decimal != "." and "." in text) or len(text) > _MOST_PLACES:
        _unfit(f"{where()}: {text[:40]!r} is no number")
    mantissa, _, exponent = plain.lower().partition("e")
    whole, _, rest = mantissa.partition(".")
    power = places - len(rest) + int(exponent or 0)
    if abs(power) > 3 * _MOST_PLACES:
        _unfit(f"{where()}: {text[:40]!r} is out of range")
    integer = int(whole + rest)
    if power >= 0:
        return integer * int(10**power)
    scaled, left = divmod(integer, int(10**-power))
    if left:
        _unfit(f"{where()}: {text[:40]!r} is no whole number of the certificate's unit")
    return scaled


def _places(unit: str) -> int:
    if _UNIT.fullmatch(unit) is None:
        _unfit(f"the unit must be a power of ten up to 1, found {unit!r}")
    places = len(unit) - 2 if "." in unit else 0
    if places > _MOST_PLACES:
        _unfit(f"the unit must have at most {_MOST_PLACES} decimal places, found {places}")
    return places


def _whole(value: object) -> int:
    if not isinstance(value, int) or isinstance(value, bool):
        _unfit(f"the certificate must hold whole numbers here, found {value!r}")
    return value


def _unique(pairs: Iterable[Sequence[Any]], what: str) -> dict[str, int]:
    """Return pairs of a name and a whole number as a mapping; a name given twice does not fit."""
    found: dict[str, int] = {}
    for name, number in pairs:
        if not isinstance(name, str) or name in found:
            _unfit(f"{what}: {name!r} must be a name that is given once")
        found[name] = _whole(number)
    return found


def _compare_ends(entries: Mapping[str, Any], table: Table, report: Report) -> Iterator[tuple[int, Sequence[Any]]]:
    """Yield the rows of the edge table that have a counterpart, once ids and ends are compared."""
    start, end = table.column("from"), table.column("to")
    ids = table.columns.get("id") or [str(row) for row in range(1, len(start) + 1)]
    if len(start) != len(entries["edges"]):
        report.problems.append(f"{table.name} has {len(start)} edges, the certificate {len(entries['edges'])}")
    for row, (found, edge) in enumerate(zip(zip(ids, start, end, strict=True), entries["edges"], strict=False)):
        if list(found) != edge[:3]:
            report.problems.append(f"{table.place(row)}: edge {found}, the certificate has {tuple(edge[:3])}")
        yield row, edge


def _check_names(entries: Mapping[str, Any]) -> None:
    """Return if names are text, ids are given once, and the inputs hold what they must for the law."""
    for row in ([*entries["open"]], *(edge[:3] for edge in entries["edges"])):
        if not all(isinstance(name, str) for name in row):
            _unfit(f"names must be text, found {row[:3]}")
    vertices = [pair[0] if isinstance(pair, list) else pair for pair in entries["vertices"] or ()]
    for what, names in (("edges", [edge[0] for edge in entries["edges"]]), ("vertices", vertices)):
        if len(set(names)) < len(names):
            _unfit(f"{what} must have ids that differ, the certificate gives one twice")
    held = [given["holds"] for given in entries["inputs"]]
    if held not in ([], ["edges"], ["edges", "nodes"], ["edges", "readings"], ["edges", "nodes", "readings"]):
        _unfit(f"the inputs must be an edge table, then node table and readings, found {held}")
    if (
        entries["inputs"]
        and entries["law"] != "solve"
        and ("readings" in held) == (entries["columns"]["value"] is not None)
    ):
        _unfit("values must come from a column of the edge table, or from a table of readings")


def _compare_vertices(stated: Sequence[str], nodes: Table, report: Report) -> None:
    names = nodes.column("id")
    if len(names) != len(stated):
        report.problems.append(f"{nodes.name} has {len(names)} nodes, the certificate {len(stated)}")
    for row, (found, said) in enumerate(zip(names, stated, strict=False)):
        if found != said:
            report.problems.append(f"{nodes.place(row)}: id {found!r}, the certificate has {said!r}")


# ---- audits: whole numbers and their sums


def _check_audit_tables(entries: Mapping[str, Any], tables: Mapping[str, Table], report: Report) -> None:
    _check_names(entries)
    places, decimal, columns = _places(entries["unit"]), _decimal_sign(entries), entries["columns"]
    _check_question(entries)
    edges = tables.get("edges")
    if edges is not None:
        column = None if columns["value"] is None else edges.column(columns["value"])
        rows = 0
        for row, edge in _compare_ends(entries, edges, report):
            rows += 1
            if column is None:
                continue
            text = column[row]
            found = _one(text, decimal, places, edges, row, report)
            if found != edge[3]:
                said = "nothing" if edge[3] is None else f"{edge[3]} x {entries['unit']}"
                what = f"{edges.place(row)}: {columns['value']} is {text!r}"
                report.problems.append(f"{what}, the certificate has {said}")
        which = "" if column is None else f", column {columns['value']}"
        report.checked.append(f"{edges.name}{which}: {rows} edges read again, number by number")
        if column is None:
            report.not_shown.append("that the values are those of a table of readings: they stand in the certificate")
    at_nodes = [name for name in ("supply", "storage", "fixed") if columns.get(name) is not None]
    if "nodes" in tables:
        _compare_vertices(entries["vertices"], tables["nodes"], report)
        if at_nodes:
            _check_nodes(entries, tables["nodes"], at_nodes, report)
    if edges is not None and not at_nodes and (entries["supply"] or entries["fixed"]):
        report.not_shown.append("that the numbers at vertices are those of a table: they were given by id")


def _decimal_sign(entries: Mapping[str, Any]) -> str:
    sign = entries["decimal"]
    if sign not in {".", ","}:
        _unfit(f'the decimal sign must be "." or ",", found {sign!r:.20}')
    return str(sign)


def _check_question(entries: Mapping[str, Any]) -> None:
    """Refuse numbers at vertices that the law does not know, and columns of a node table that is no input."""
    columns, of_balance = entries["columns"], ("supply", "storage")
    foreign = ("fixed",) if entries["law"] == "balance" else of_balance
    if any(columns.get(name) is not None for name in foreign) or entries["fixed" if "fixed" in foreign else "supply"]:
        _unfit(f"the law {entries['law']} has no {' or '.join(foreign)}, and the certificate has some")
    named = [name for name in (*of_balance, "fixed") if columns.get(name) is not None]
    _needs_nodes(entries, named)


def _needs_nodes(entries: Mapping[str, Any], named: Sequence[str]) -> None:
    if named and entries["inputs"] and all(given["holds"] != "nodes" for given in entries["inputs"]):
        _unfit(f"columns of a node table are named ({', '.join(named)}), and no node table is among the inputs")


def _one(text: str, decimal: str, places: int, table: Table, row: int, report: Report) -> int | None:
    try:
        return None if not text else _exactly(text, decimal, places, lambda: table.place(row))
    except Unfit as fault:
        report.problems.append(str(fault))
        return None


def _check_nodes(entries: Mapping[str, Any], nodes: Table, at_nodes: Sequence[str], report: Report) -> None:
    places, decimal, columns = _places(entries["unit"]), entries["decimal"], entries["columns"]
    stated = dict(_unique(entries["fixed" if "fixed" in at_nodes else "supply"], "nodes"))
    opened = set(entries["open"])
    for row, name in enumerate(nodes.column("id")):
        total, is_empty = 0, False
        for what in at_nodes:
            text = nodes.column(columns[what])[row]
            amount = _one(text, decimal, places, nodes, row, report)
            is_empty |= amount is None and what != "storage"
            total += (amount or 0) * (-1 if what == "storage" else 1)
        said = stated.pop(name, None)
        if is_empty and "fixed" not in at_nodes and name not in opened:
            report.problems.append(f"{nodes.place(row)}: no supply is given, and the vertex is not open")
        if not is_empty and (said or 0) != total:
            report.problems.append(f"{nodes.place(row)}: {name!r} has {total} x {entries['unit']}, not {said}")
        if "fixed" in at_nodes and is_empty == (said is not None):
            report.problems.append(f"{nodes.place(row)}: {name!r} is held in one of table and certificate only")
    report.problems += [f"{nodes.name} does not list {name!r}" for name in stated]
    report.checked.append(f"{nodes.name}: {len(nodes.lines)} nodes read again")


class _Joins:
    """What was joined with what, and at which difference: union-find with potentials."""

    def __init__(self) -> None:
        self.above: dict[object, tuple[object, int]] = {}

    def root(self, name: object) -> tuple[object, int]:
        """Return the representative of a name, and how far the name lies above it."""
        path = []
        while name in self.above:
            path.append(name)
            name = self.above[name][0]
        height = 0
        for each in reversed(path):
            height += self.above[each][1]
            self.above[each] = (name, height)
        return name, height

    def join(self, start: object, end: object, difference: int = 0) -> bool:
        """Make the end lie that far above the start; False where they were joined before."""
        (low, down), (high, up) = self.root(start), self.root(end)
        if low == high:
            return False
        self.above[high] = (low, down + difference - up)
        return True


_OUTSIDE: None = None  # no name is None


def _check_balance(entries: Mapping[str, Any], tables: Mapping[str, Table], report: Report) -> None:
    _check_audit_tables(entries, tables, report)
    joins, supply = _Joins(), _unique(entries["supply"], "supply")
    if entries["open"]:
        count, few = len(entries["open"]), ", ".join(str(name) for name in entries["open"][:4])
        vertices = "vertex is" if count == 1 else "vertices are"
        report.not_shown.append(f"that {count} {vertices} open to the outside ({few}{', ...' if count > 4 else ''})")
    for name in entries["open"]:
        joins.join(_OUTSIDE, name)
    for _, start, end, number in entries["edges"]:
        if number is None:
            joins.join(start, end)
    total: dict[object, int] = {}
    label: dict[object, str] = {}
    for name, amount in _moves(entries["edges"], supply):
        group = joins.root(name)[0]
        label.setdefault(group, name)
        total[group] = total.get(group, 0) + amount
    outside = joins.root(_OUTSIDE)[0]
    found = {label[group]: amount for group, amount in total.items() if group != outside}
    _compare_sums(found, entries, report, "what enters {} less what leaves it")
    groups = {joins.root(name)[0] for edge in entries["edges"] for name in edge[1:3]} | {outside}
    checks = sum(joins.join(start, end) for _, start, end, number in entries["edges"] if number is not None)
    report.checked.append(f"{len(found)} balances of {len(groups)} groups of vertices added up in whole numbers")
    _check_verdict(found.values(), checks, entries, report)


def _moves(edges: Iterable[Sequence[Any]], supply: Mapping[str, int]) -> Iterator[tuple[str, int]]:
    for _, start, end, number in edges:
        amount = 0 if number is None else _whole(number)
        yield start, -amount
        yield end, amount
    yield from supply.items()


def _check_loop(entries: Mapping[str, Any], tables: Mapping[str, Table], report: Report) -> None:
    _check_audit_tables(entries, tables, report)
    joins, closing = _Joins(), dict(_unique(entries["sums"], "sums"))
    for name, height in _unique(entries["fixed"], "fixed").items():
        joins.join(_OUTSIDE, name, height)
    measured = [edge for edge in entries["edges"] if edge[3] is not None]
    for name, start, end, number in measured:
        if name not in closing and not joins.join(start, end, _whole(number)):
            report.problems.append(f"edge {name!r} closes a loop, and the certificate has no sum for it")
    found = {}
    for name, start, end, number in measured:
        if name in closing:
            (low, down), (high, up) = joins.root(start), joins.root(end)
            if low != high:
                report.problems.append(f"edge {name!r} has a sum in the certificate, and closes no loop")
            found[name] = _whole(number) - (up - down)
    _compare_sums(found, entries, report, "what the loop that edge {} closes misses")
    report.checked.append(f"{len(found)} loops added up in whole numbers")
    _check_verdict(found.values(), len(found), entries, report)


def _compare_sums(found: Mapping[str, int], entries: Mapping[str, Any], report: Report, what: str) -> None:
    stated = _unique(entries["sums"], "sums")
    for name in found.keys() | stated.keys():
        if found.get(name) != stated.get(name):
            said = f"{what.format(repr(name))} is {found.get(name)} x {entries['unit']}"
            report.problems.append(f"{said}, the certificate has {stated.get(name)}")


def _check_verdict(sums: Iterable[int], checks: int, entries: Mapping[str, Any], report: Report) -> None:
    if entries["limit"] is None:
        if entries["holds"] is not None:
            _unfit("a verdict without a limit cannot be rechecked")
        report.not_shown.append("the verdict: it hangs on standard deviations or a preset, not on the sums alone")
        return
    limit = _exactly(entries["limit"], ".", _MOST_PLACES, lambda: "limit")
    scale = 10 ** (_MOST_PLACES - _places(entries["unit"]))
    holds = all(abs(amount) * scale <= limit for amount in sums) if checks else None
    if holds is not entries["holds"]:
        report.problems.append(f"the verdict must be {holds}, the certificate has {entries['holds']}")
    name = str(entries.get("unit_name") or "")
    within = f"every sum within {entries['limit']:.40} {name:.40}".rstrip()
    report.checked.append({
        True: f"the law holds, {within}", False: f"the law does not hold: not {within}", None: "nothing to check",
    }[holds])  # fmt: skip


# ---- solves: residual and bound in exact arithmetic


def _check_solve(entries: Mapping[str, Any], tables: Mapping[str, Table], report: Report) -> None:
    _check_solve_tables(entries, tables, report)
    potential = {name: _rational(u) for name, u in entries["vertices"]}
    source = {name: _rational(s) for name, s in entries["supply"]}
    held = {name: _rational(u) for name, u in entries["fixed"]}
    if len(source) < len(entries["supply"]) or len(held) < len(entries["fixed"]):
        _unfit("a vertex must have one source and one held potential at most")
    if not held.keys() | source.keys() <= potential.keys():
        _unfit("every vertex must be listed, with a potential")
    if set(entries["open"]) != held.keys():
        report.problems.append("the open vertices must be those whose potential is held")
    for name, height in held.items():
        if potential[name] != height:
            report.problems.append(f"vertex {name!r} is held at {float(height)}, its potential is another")
    if _rational(entries["residual"]) < 0 or _rational(entries["bound"]) < 0:
        _unfit("the residual and the bound must not be negative")
    edges = [(start, end, _rational(flow), _rational(c)) for _, start, end, flow, c in entries["edges"]]
    if any(c <= 0 for *_, c in edges):
        _unfit("every conductance must be positive")
    left = _spread(source, held, potential, edges)
    driven = {name: left[name] for name in potential}
    carried = dict(driven)
    for start, end, flow, c in edges:
        drop = c * (potential[start] - potential[end])
        for place, size in ((driven, drop), (carried, flow)):
            place[start] -= size
            place[end] += size
    misses = sum((r * r for name, r in driven.items() if name not in held), Fraction(0))
    _at_most(misses, _rational(entries["residual"]) ** 2, "the residual", entries["residual"], report)
    balanced = _repaired(edges, carried, held)
    terms = ((f - c * (potential[a] - potential[b])) ** 2 / c for (a, b, _, c), f in zip(edges, balanced, strict=True))
    _at_most(_raised(terms), _rational(entries["bound"]) ** 2, "the error bound", entries["bound"], report)
    report.checked.append(f"imbalance at most {entries['residual']:.3g} in the unit of the flow, in exact arithmetic")
    report.checked.append(f"error at most {entries['bound']:.3g} in the energy norm, in exact arithmetic")


def _rational(value: object) -> Fraction:
    if not isinstance(value, int | float) or isinstance(value, bool) or not math.isfinite(value):
        _unfit(f"the certificate must hold finite numbers here, found {value!r}")
    return Fraction(value)


def _at_most(square: Fraction, allowed: Fraction, what: str, stated: float, report: Report) -> None:
    if square > allowed:
        report.problems.append(f"{what} must be at least {math.sqrt(square):.6g}, the certificate has {stated:.6g}")


_Edge = tuple[str, str, Fraction, Fraction]


def _parts(edges: Iterable[_Edge], names: Iterable[str]) -> dict[str, object]:
    joins = _Joins()
    for start, end, *_ in edges:
        joins.join(start, end)
    return {name: joins.root(name)[0] for name in names}


def _spread(
    source: Mapping[str, Fraction], held: Mapping[str, Fraction], potential: Mapping[str, Fraction],
    edges: Sequence[_Edge],
) -> dict[str, Fraction]:  # fmt: skip
    """Return the sources; where no potential is held in a part, its surplus is spread evenly over its vertices."""
    part = _parts(edges, potential)
    anchored = {part[name] for name in held}
    total: dict[object, list[Fraction]] = {}
    for name in potential:
        entry = total.setdefault(part[name], [Fraction(0), Fraction(0)])
        entry[0] += source.get(name, Fraction(0))
        entry[1] += 1
    share = {key: Fraction(0) if key in anchored else surplus / count for key, (surplus, count) in total.items()}
    return {name: source.get(name, Fraction(0)) - share[part[name]] for name in potential}


def _repaired(edges: Sequence[_Edge], surplus: dict[str, Fraction], held: Mapping[str, Fraction]) -> list[Fraction]:
    """Return flows that balance exactly: what each vertex has too much of leaves along a breadth-first tree.

    The tree starts from the held vertices taken as one, then from the first vertex of each other part.
    """
    ends = [[_OUTSIDE if name in held else name for name in edge[:2]] for edge in edges]
    at: dict[str | None, list[int]] = {_OUTSIDE: [], **{name: [] for name in surplus}}
    for number, pair in enumerate(ends):
        for name in pair:
            at[name].append(number)
    seen: set[str | None] = set(held)
    order: list[tuple[str | None, str | None, int]] = []
    for root in at:
        waiting = [] if root in seen else [root]
        seen.add(root)
        for name in waiting:  # grows as it is walked: breadth first
            for number in at[name]:
                other = ends[number][1] if ends[number][0] == name else ends[number][0]
                if other not in seen:
                    seen.add(other)
                    order.append((other, name, number))
                    waiting.append(other)
    flow = [edge[2] for edge in edges]
    left: dict[str | None, Fraction] = dict([(_OUTSIDE, Fraction(0)), *surplus.items()])
    for name, towards, number in reversed(order):
        flow[number] += left[name] if ends[number][0] == name else -left[name]
        left[towards] += left[name]
        left[name] = Fraction(0)
    if any(amount for name, amount in left.items() if name is not _OUTSIDE and name not in held):
        _unfit("the sources of a part without a held potential do not add up to zero")
    return flow


def _raised(terms: Iterable[Fraction]) -> Fraction:
    """Return a sum of fractions, each rounded upwards to 64 bits below the largest: safe, and short."""
    listed = list(terms)
    largest = max(listed, default=Fraction(0))
    if not largest:
        return Fraction(0)
    scale = Fraction(2) ** (_ROUND_UP + largest.denominator.bit_length() - largest.numerator.bit_length())
    return sum(math.ceil(term * scale) for term in listed) / scale


def _check_solve_tables(entries: Mapping[str, Any], tables: Mapping[str, Table], report: Report) -> None:
    _check_names(entries)
    columns, sign = entries["columns"], _decimal_sign(entries)
    _needs_nodes(entries, [name for name in ("source", "fixed") if columns.get(name) is not None])
    edges, nodes = tables.get("edges"), tables.get("nodes")
    if edges is not None:
        cells = None if columns["conductance"] is None else edges.column(columns["conductance"])
        for row, edge in _compare_ends(entries, edges, report):
            found = 1.0 if cells is None else _nearest(cells[row], sign, edges, row, report)
            if found != edge[4]:
                report.problems.append(f"{edges.place(row)}: conductance {found}, the certificate has {edge[4]}")
        report.checked.append(f"{edges.name}: {len(edges.lines)} edges read again")
    if nodes is None:
        if entries["inputs"]:
            report.not_shown.append("that sources and held potentials are those of a table")
        return
    _compare_vertices([name for name, _ in entries["vertices"]], nodes, report)
    source, held = dict(entries["supply"]), dict(entries["fixed"])
    for row, name in enumerate(nodes.column("id")):
        for what, stated in (("source", source), ("fixed", held)):
            text = "" if columns[what] is None else nodes.column(columns[what])[row]
            found, said = _nearest(text, sign, nodes, row, report) if text else None, stated.pop(name, None)
            if found != said and (what == "fixed" or (found or 0.0) != (said or 0.0)):
                report.problems.append(f"{nodes.place(row)}: {what} is {text!r}, the certificate has {said}")
    report.problems += [f"{nodes.name} does not list {name!r}" for name in source.keys() | held.keys()]
    report.checked.append(f"{nodes.name}: {len(nodes.lines)} nodes read again")


def _nearest(text: str, sign: str, table: Table, row: int, report: Report) -> float | None:
    plain = text.replace(sign, ".")
    if _NUMBER.fullmatch(plain) is None or (sign != "." and "." in text):
        report.problems.append(f"{table.place(row)}: {text[:40]!r} is no number")
        return None
    return float(plain)


# ---- homology: boundary matrices, cycles, and elimination over the integers


def _check_homology(entries: Mapping[str, Any], _: Mapping[str, Table], report: Report) -> None:
    counts = [_whole(n) for n in entries["counts"]]
    if min(counts, default=0) < 0 or sum(counts) > _MOST_CELLS:
        _unfit(f"there must be 0 to {_MOST_CELLS:,} cells, found {counts!s:.60}")
    for given in entries["inputs"]:
        report.not_shown.append(f"that the boundaries are those of {given['name']}: its SHA-256 alone was compared")
    matrices = [[_chain(column, counts[k]) for column in columns] for k, columns in enumerate(entries["boundaries"])]
    if len(matrices) != len(counts) - 1 or any(len(m) != n for m, n in zip(matrices, counts[1:], strict=True)):
        _unfit("there must be one boundary matrix for each degree from 1, with one column a cell")
    for k in range(1, len(matrices)):
        for cell, column in enumerate(matrices[k]):
            if _boundary(column, matrices[k - 1]):
                report.problems.append(f"the boundary of the boundary of cell {cell} of degree {k + 1} is not zero")
    matrices = [[{}] * counts[0], *matrices, []]
    factors = [_smith(matrix) for matrix in matrices]
    for k, stated in zip(range(len(counts)), entries["homology"], strict=True):
        _check_degree(k, counts[k], stated, matrices[k : k + 2], factors[k : k + 2], report)


def _check_degree(
    k: int, n: int, stated: Mapping[str, Any], matrices: Sequence[Sequence[Mapping[int, int]]],
    factors: Sequence[Sequence[int]], report: Report,
) -> None:  # fmt: skip
    """Recheck one degree, from its boundary matrix and the next one, and from their invariant factors."""
    rank = n - len(factors[0]) - len(factors[1])
    torsion = _invariants(factor for factor in factors[1] if factor > 1)
    if _whole(stated["rank"]) != rank or [_whole(order) for order in stated["torsion"]] != torsion:
        found = f"rank {rank} and torsion {torsion}"
        said = f"{stated['rank']!s:.40} and {stated['torsion']!s:.80}"
        report.problems.append(f"degree {k} has {found}; the certificate has {said}")
    cycles = [_chain(cycle, n) for cycle in stated["cycles"]]
    for number, cycle in enumerate(cycles, start=1):
        if _boundary(cycle, matrices[0]):
            report.problems.append(f"cycle {number} of degree {k} has a boundary")
    joint = _smith([*matrices[1], *cycles])
    if len(cycles) != rank or len(joint) != len(factors[1]) + rank or math.prod(joint) != math.prod(factors[1]):
        report.problems.append(f"the cycles of degree {k} are no basis of the free part of its homology")
    report.checked.append(f"degree {k}: rank {rank}, torsion {torsion or 'none'}, {len(cycles)} cycles rechecked")


def _chain(flat: Sequence[Any], n: int) -> dict[int, int]:
    """Return a chain given as cell, coefficient, cell, coefficient, and so on."""
    cells, coefficients = [_whole(c) for c in flat[0::2]], [_whole(c) for c in flat[1::2]]
    chain = dict(zip(cells, coefficients, strict=True))
    if len(chain) < len(cells) or not all(0 <= cell < n for cell in cells) or not all(coefficients):
        _unfit(f"a chain must give each of its cells, below {n}, once and a coefficient that is not 0")
    return chain


def _boundary(chain: Mapping[int, int], matrix: Sequence[Mapping[int, int]]) -> dict[int, int]:
    total: dict[int, int] = {}
    for cell, coefficient in chain.items():
        for row, sign in matrix[cell].items():
            total[row] = total.get(row, 0) + coefficient * sign
    return {row: value for row, value in total.items() if value}


def _smith(columns: Iterable[Mapping[int, int]]) -> list[int]:
    """Return the invariant factors of an integer matrix, up to order and sign, by elimination with least pivots."""
    matrix = {number: dict(column) for number, column in enumerate(columns) if column}
    at: dict[int, set[int]] = {}
    for number, column in matrix.items():
        for row in column:
            at.setdefault(row, set()).add(number)
    waiting = sorted(matrix, key=lambda number: len(matrix[number]), reverse=True)
    factors: list[int] = []
    while waiting:  # pivots of size 1 first: they never leave a rest
        number = waiting.pop()
        units = [row for row, value in matrix.get(number, {}).items() if abs(value) == 1]
        if units:
            row = min(units, key=lambda row: len(at[row]))
            waiting += _eliminate(matrix, at, number, row)
            factors.append(1)
            _drop(matrix, at, number)
    while matrix:
        factors.append(_least_pivot(matrix, at))
    return factors


_Matrix = dict[int, dict[int, int]]


def _eliminate(matrix: _Matrix, at: dict[int, set[int]], number: int, row: int) -> list[int]:
    """Subtract multiples of a column from those that meet its pivot; return the columns that changed."""
    pivot = matrix[number]
    touched = [other for other in at[row] if other != number]
    for other in touched:
        column = matrix[other]
        factor = column[row] // pivot[row]
        for place, value in pivot.items():
            changed = column.get(place, 0) - factor * value
            if changed:
                column[place] = changed
                at[place].add(other)
            elif place in column:
                del column[place]
                at[place].discard(other)
        if not column:
            del matrix[other]
    return touched


def _drop(matrix: _Matrix, at: dict[int, set[int]], number: int) -> None:
    for row in matrix.pop(number):
        at[row].discard(number)


def _least_pivot(matrix: _Matrix, at: dict[int, set[int]]) -> int:
    """Return a pivot once it stands alone in its row and column; both are gone then."""
    while True:
        value, number, row = min((abs(v), n, r) for n, column in matrix.items() for r, v in column.items())
        _eliminate(matrix, at, number, row)
        if len(at[row]) > 1:
            continue
        pivot = matrix[number]
        rests = {r: v % value for r, v in pivot.items() if r != row and v % value}
        for other in [r for r in pivot if r != row]:  # the row operations that clear the column meet nothing else
            at[other].discard(number)
            del pivot[other]
        if not rests:
            _drop(matrix, at, number)
            return value
        for other, rest in rests.items():
            pivot[other] = rest
            at[other].add(number)


def _invariants(factors: Iterable[int]) -> list[int]:
    """Return the same group with each factor dividing the next; factors of size 1 are left out."""
    found = sorted(abs(f) for f in factors)
    for i in range(len(found)):
        for j in range(i + 1, len(found)):
            shared = math.gcd(found[i], found[j])
            found[i], found[j] = shared, found[i] // shared * found[j] if shared else 0
    return [f for f in found if f != 1]


_LAWS: dict[str, Callable[[Mapping[str, Any], Mapping[str, Table], Report], None]] = {
    "balance": _check_balance, "loop": _check_loop, "solve": _check_solve, "homology": _check_homology,
}  # fmt: skip


# ---- the command


def gathered(certificate: Path, files: Sequence[Path]) -> tuple[bytes, dict[str, bytes]]:
    """The bytes of a certificate and of its input files, by the names that it gives them.

    Parameters
    ----------
    certificate : Path
    files : sequence of Path
        As many as the certificate names, in its order, or some of them by their names; those not given are looked for
        beside the certificate.

    Raises
    ------
    Unusable
        If a file cannot be read, or is none of those that the certificate names.
    """
    data = _bytes(certificate)
    try:
        names = [str(given["name"]) for given in json.loads(data)["inputs"]]
    except _MALFORMED:
        return data, {}  # what is wrong with it is said by the recheck
    if len(files) == len(names) and {file.name for file in files} != set(names):
        for name, file in zip(names, files, strict=True):
            if name != "stdin" and Path(name).suffix.lower() != file.suffix.lower():
                message = f"{file.name} stands in the place of {name}, and its ending is another"
                raise Unusable(message)
        return data, {name: _bytes(file) for name, file in zip(names, files, strict=True)}
    found = {file.name: _bytes(file) for file in files}
    for name in names:
        beside = certificate.parent / name
        if name not in found and name == Path(name).name and _is_file(beside):
            found[name] = _bytes(beside)
    unknown = [name for name in found if name not in names]
    if unknown:
        message = f"{unknown[0]} is none of the files that the certificate names: {', '.join(names) or 'none at all'}"
        raise Unusable(message)
    return data, found


def _is_file(path: Path) -> bool:
    try:
        return path.is_file()
    except (OSError, ValueError):  # a name that no file can have
        return False


def _bytes(path: Path) -> bytes:
    try:
        return path.read_bytes()
    except (OSError, ValueError) as error:
        message = f"{path.name or path}: cannot be read ({getattr(error, 'strerror', None) or error})"
        raise Unusable(message) from None


def main(arguments: Sequence[str] | None = None) -> int:
    """Recheck one certificate from the command line; return the exit code."""
    words = argparse.ArgumentParser(prog="verify", description="Recheck a certificate with the standard library alone.")
    words.add_argument("certificate", type=Path)
    words.add_argument("files", nargs="*", type=Path, help="input tables; else those beside the certificate")
    words.add_argument("--json", action="store_true", help="one JSON object on standard output")
    options = words.parse_args(arguments)
    try:
        report = verify(*gathered(options.certificate, options.files))
    except Unusable as error:
        sys.stderr.write(_printable(f"verify: {error}") + "\n")
        return 3
    sys.stdout.write(json.dumps(report.to_dict()) + "\n" if options.json else report.text())
    return 0 if report.holds else 1


if __name__ == "__main__":
    sys.exit(main())
