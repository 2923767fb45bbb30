"""The command line: each verb reads, calls one public function, prints, and gives an exit code."""

import argparse
import io
import json
import os
import sys
from collections.abc import Callable, Iterable, Iterator, Sequence
from contextlib import contextmanager
from typing import TYPE_CHECKING, Any, NoReturn

from dec.errors import AccuracyError, DecError, OutputError, UnsolvableError

if TYPE_CHECKING:
    from dec.audit.record import Audit
    from dec.calculus.dataset import Dataset

__all__ = ["main"]

OK, FINDING, USAGE, UNUSABLE, UNSOLVABLE, NOT_WRITTEN, INTERRUPTED = 0, 1, 2, 3, 4, 5, 130
_PATIENCE = 2.0

_DESCRIPTION = """Numbers on the edges of a network or a mesh obey one of two laws: flows add up at every vertex,
differences close round every loop. dec checks them exactly, says which reading or face is to blame and which
cannot be checked, and gives the best consistent values."""

_EPILOG = """exit codes: 0 within limits; 1 a finding outside its limit; 2 wrong use; 3 input not usable;
4 not solvable as posed, or nothing to check; 5 could not write; 130 interrupted"""


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one verb and return its exit code; no traceback reaches the user."""
    words = list(sys.argv[1:] if arguments is None else arguments)
    as_json = "--json" in words
    try:
        options = _parser(as_json).parse_args(words)
        return int(options.run(options))
    except _UsageError as error:
        return _fail(USAGE, "usage", str(error), as_json)
    except DecError as error:
        return _fail(_code(error), type(error).__name__, str(error), as_json)
    except KeyboardInterrupt:
        return _fail(INTERRUPTED, "interrupted", "interrupted; nothing was written", as_json)
    except BrokenPipeError:
        _to_nowhere()  # whoever read the output has left
        return OK
    except MemoryError:
        return _fail(
            UNSOLVABLE, "memory", "this machine's memory is too small for that input; audit a part of it", as_json
        )
    except Exception as error:
        if os.environ.get("DEC_TRACEBACK"):
            raise
        message = (
            f"a fault of dec itself, nothing was written ({type(error).__name__}: {error}); DEC_TRACEBACK=1 shows where"
        )
        return _fail(UNUSABLE, "fault", message, as_json)


def _check(options: argparse.Namespace) -> int:
    from dec.audit.condition import check
    from dec.report.terminal import check_view

    with _patience("checking", options):
        result = check(_read(options))
        found = result.to_dict()
    _show(options, found, check_view)
    return OK if result.holds else FINDING


def _balance(options: argparse.Namespace) -> int:
    from dec.audit.questions import balance

    _refuse_unfit(options, network=("sd", "supply", "open", "open_column"))
    with _patience("balancing", options):
        data = _read(options)
        opened: str | list[str] = options.open_column or options.open or []
        if options.open_column and options.open:
            opened = _both(data, options.open_column, options.open)
        audit = balance(
            data, options.value, options.sd, opened, options.supply, field=options.field, at=options.at,
            alpha=options.alpha, limit=options.limit, unit=options.unit,
        )  # fmt: skip
    return _conclude(options, audit)


def _loops(options: argparse.Namespace) -> int:
    from dec.audit.questions import loops

    _refuse_unfit(options, network=("sd", "fixed"))
    with _patience("closing loops", options):
        audit = loops(
            _read(options), options.value, options.sd, options.fixed, field=options.field, at=options.at,
            alpha=options.alpha, limit=options.limit, unit=options.unit,
        )  # fmt: skip
    return _conclude(options, audit)


def _solve(options: argparse.Namespace) -> int:
    from functools import partial

    from dec.audit.output import flow_bytes
    from dec.files.writing import write_atomically
    from dec.report.terminal import solve_view
    from dec.solvers.network import solve_network

    with _patience("solving", options):
        data = _read(options)
        solution = solve_network(
            data, options.source, options.conductance, options.fixed, exponent=options.exponent, rtol=options.rtol,
            method=options.method, unbalanced=options.unbalanced,
        )  # fmt: skip
        found = solution.to_dict()
        found["inputs"] = [{"name": i.name, "sha256": i.sha256, "bytes": i.bytes} for i in data.inputs]
        found["asked"]["source"] = options.source
    if options.output == "-":
        _write(flow_bytes(solution))
        return OK
    if options.output:
        write_atomically(options.output, flow_bytes(solution), force=options.force)
    _show(options, found, partial(solve_view, why=options.why))
    return OK


def _demo(options: argparse.Namespace) -> int:
    from dec.demo import run

    with _patience("running the example", options):
        outcome = run(options.dir, force=options.force)
    _show(options, outcome.to_dict(), lambda _: outcome.view())
    return OK if outcome.as_planted else FINDING


def _conclude(options: argparse.Namespace, audit: "Audit") -> int:
    from dec.audit.output import result_bytes, vertex_bytes
    from dec.files.writing import write_atomically
    from dec.report.terminal import audit_view

    with _patience("writing", options):
        found = audit.to_dict()
        made = result_bytes(audit, "result.csv" if options.output == "-" else options.output) if options.output else b""
        if options.vertices:
            write_atomically(options.vertices, vertex_bytes(audit), force=options.force)
        if options.output and options.output != "-":
            write_atomically(options.output, made, force=options.force)
    if options.output == "-":
        _write(made)
    else:
        _show(options, found, audit_view)
    if audit.holds is None:
        return UNSOLVABLE
    return OK if audit.holds else FINDING


def _read(options: argparse.Namespace) -> "Dataset":
    from dec.files.read import read

    return read(options.file, options.nodes, decimal=options.decimal)


def _both(data: "Dataset", column: str, names: list[str]) -> list[Any]:
    from dec.audit.readings import named_vertices

    ids = data.complex.vertex_ids
    flagged = named_vertices(data, column, "--open-column").tolist()
    return [*names, *(flagged if ids is None else [ids[v] for v in flagged])]


def _refuse_unfit(options: argparse.Namespace, network: Iterable[str]) -> None:
    if options.output == "-" and options.json:
        message = "give -o - or --json, not both: each is the whole of standard output"
        raise _UsageError(message)
    if options.sd is not None and options.limit is not None:
        message = "give --sd or --limit, not both: with standard deviations the chi-square test decides"
        raise _UsageError(message)
    if (options.value is None) == (options.field is None):
        message = "give --value COLUMN for a network, or --field NAME for a mesh"
        raise _UsageError(message)
    if options.value is not None and options.at is not None:
        message = "--at belongs to a mesh field, not to --value"
        raise _UsageError(message)
    if options.field is not None and options.vertices is not None:
        message = "--vertices belongs to a network column, not to --field; -o FILE.vtu writes the mesh"
        raise _UsageError(message)
    for name in network:
        if options.field is not None and getattr(options, name):
            message = f"--{name.replace('_', '-')} belongs to a network column, not to --field"
            raise _UsageError(message)


def _show(options: argparse.Namespace, found: dict[str, Any], view: Callable[[dict[str, Any]], Iterable[Any]]) -> None:
    if options.json:
        _print_json(found)
    elif not options.quiet:
        _print(view(found))


def _print_json(found: dict[str, Any]) -> None:
    plain = not _is_unicode()
    _write((json.dumps(found, ensure_ascii=plain, allow_nan=False) + "\n").encode(_encoding()))


def _print(parts: Iterable[Any]) -> None:
    from rich.console import Console

    if sys.stdout is not None and sys.stdout.isatty() and _is_unicode():
        console = Console(highlight=False, markup=False, emoji=False)
        for part in parts:
            console.print(part)
        return
    text = io.StringIO()
    console = Console(file=text, width=80, highlight=False, markup=False, emoji=False)
    for part in parts:
        console.print(part)
    lines = "".join(f"{line.rstrip()}\n" for line in text.getvalue().splitlines())
    if not _is_unicode():
        lines = lines.replace("\N{BOX DRAWINGS LIGHT HORIZONTAL}", "-")
    _write(lines.encode(_encoding(), "backslashreplace"))


def _encoding() -> str:
    return getattr(sys.stdout, "encoding", None) or "utf-8"


def _is_unicode() -> bool:
    return _encoding().lower().replace("-", "").startswith("utf")


def _write(data: bytes) -> None:
    """Write to standard output, all or an error; tests may stand a text stream in for it."""
    if sys.stdout is None:
        message = "standard output is closed; open it, or use --quiet for the exit code alone"
        raise OutputError(message)
    try:
        if hasattr(sys.stdout, "buffer"):
            sys.stdout.flush()
            sys.stdout.buffer.write(data)
        else:
            sys.stdout.write(data.decode(_encoding()))
        sys.stdout.flush()
    except BrokenPipeError:
        raise
    except OSError as error:
        message = f"standard output cannot be written ({error.strerror})"
        _to_nowhere()
        raise OutputError(message) from None


def _to_nowhere() -> None:
    # what is left in the buffer would fail again when the interpreter closes the stream
    os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())


@contextmanager
def _patience(what: str, options: argparse.Namespace) -> Iterator[None]:
    """Show a moving bar on stderr once the work takes over two seconds, on a terminal only."""
    if options.quiet or not sys.stderr.isatty():
        yield
        return
    from threading import Timer

    from rich.console import Console
    from rich.progress import BarColumn, Progress, TextColumn, TimeElapsedColumn

    columns = (TextColumn("{task.description}"), BarColumn(), TimeElapsedColumn())
    progress = Progress(*columns, console=Console(stderr=True), transient=True)
    progress.add_task(what, total=None)
    timer = Timer(_PATIENCE, progress.start)
    timer.daemon = True
    timer.start()
    try:
        yield
    finally:
        timer.cancel()
        progress.stop()


class _UsageError(Exception):
    """Words on the command line that do not make a question."""


class _Parser(argparse.ArgumentParser):
    as_json = False

    def error(self, message: str) -> NoReturn:
        if self.as_json:
            raise _UsageError(message)
        super().error(message)


def _code(error: DecError) -> int:
    if isinstance(error, OutputError):
        return NOT_WRITTEN
    return UNSOLVABLE if isinstance(error, UnsolvableError | AccuracyError) else UNUSABLE


def _fail(code: int, kind: str, message: str, as_json: bool) -> int:
    line = " ".join(message.split())
    if as_json:
        _print_json({"schema": "dec.error/1", "error": kind, "message": line, "exit": code})
    else:
        safe = "".join(c if c.isprintable() else c.encode("unicode_escape").decode("ascii") for c in line)
        sys.stderr.write(f"dec: {safe}\n")
    return code


def _parser(as_json: bool) -> _Parser:
    _Parser.as_json = as_json
    parser = _Parser(prog="dec", description=_DESCRIPTION, epilog=_EPILOG, formatter_class=_Layout)
    parser.add_argument("--version", action="version", version=f"dec {_version()}")
    verbs = parser.add_subparsers(dest="verb", metavar="VERB", required=True)

    check = _verb(verbs, "check", _check, "is it sound, and what can be checked with it?",
                  "dec check meshes/bracket.stl\n  dec check pipes.csv --nodes nodes.csv")  # fmt: skip
    check.add_argument("file", metavar="FILE", help="edge table or mesh; - reads a table from standard input")
    _common(check)

    balance = _verb(verbs, "balance", _balance, "do the flows add up?",
                    "dec balance pipes.csv --nodes nodes.csv --value flow --sd 2%+0.05 --open R1\n"
                    "  dec balance part.vtu --field velocity --limit 0.1%")  # fmt: skip
    _audited(balance)
    balance.add_argument("--open", metavar="ID", action="append", help="vertex open to the outside; may be repeated")
    balance.add_argument("--open-column", metavar="COL", help="yes-or-no node column that says which vertices are open")
    balance.add_argument("--supply", metavar="COL", help="node column of what is put in (taken out: negative)")

    loops = _verb(verbs, "loops", _loops, "do the differences close?",
                  "dec loops lines.csv --nodes marks.csv --value dh --sd 0.003 --fixed height\n"
                  "  dec loops part.vtu --field velocity")  # fmt: skip
    _audited(loops)
    loops.add_argument("--fixed", metavar="COL", help="node column of values that are held; empty cells are not")

    solve = _verb(
        verbs,
        "solve",
        _solve,
        "potentials and flows from sources",
        "dec solve pipes.csv --nodes nodes.csv --source demand --fixed head",
    )
    solve.add_argument("file", metavar="FILE", help="edge table; - reads it from standard input")
    solve.add_argument("--source", metavar="COL", required=True, help="node column of what is put in")
    solve.add_argument("--conductance", metavar="COL", help="edge column of flow per drop (1 everywhere)")
    solve.add_argument("--fixed", metavar="COL", help="node column of potentials that are held; empty cells are not")
    solve.add_argument(
        "--exponent", type=float, default=1.0, metavar="N", help="n in drop = q |q|^(n-1) / c, 1 to 2 (1)"
    )
    solve.add_argument("--rtol", type=float, default=1e-8, metavar="R", help="largest relative residual (1e-8)")
    solve.add_argument(
        "--method", default="auto", metavar="NAME", help="auto, direct, multigrid, elimination, gradients"
    )
    solve.add_argument(
        "--unbalanced", choices=("refuse", "spread"), default="refuse", help="what to do with a surplus (refuse)"
    )
    solve.add_argument("--why", action="store_true", help="say why the method was chosen")
    solve.add_argument("-o", dest="output", metavar="FILE", help="write flows and end potentials (csv); - prints them")
    _common(solve)

    demo = _verb(verbs, "demo", _demo, "the main job on the built-in example", "dec demo\n  dec demo harrowmere")
    demo.add_argument("dir", metavar="DIR", nargs="?", help="also write the example's files and results there")
    _shared(demo)
    return parser


def _verb(
    verbs: Any, name: str, run: Callable[[argparse.Namespace], int], what: str, example: str
) -> argparse.ArgumentParser:
    verb: argparse.ArgumentParser = verbs.add_parser(
        name, help=what, description=what, epilog=f"example:\n  {example}", formatter_class=_Layout, allow_abbrev=False
    )
    verb.set_defaults(run=run)
    return verb


def _audited(verb: argparse.ArgumentParser) -> None:
    verb.add_argument(
        "file", metavar="FILE", help="edge table (csv, parquet) or mesh (vtu, vtk, stl, obj, ply, off, msh)"
    )
    verb.add_argument("--value", metavar="COL", help="network: edge column of readings; an empty cell is not measured")
    verb.add_argument(
        "--sd",
        metavar="SD",
        help="network: standard deviation as a number, percentage (2%%, 2%%+0.1) or column (col:NAME)",
    )
    verb.add_argument("--field", metavar="NAME", help="mesh: vector field to audit")
    verb.add_argument("--at", choices=("vertices", "cells"), help="mesh: which field, where both have the name")
    verb.add_argument(
        "--alpha", type=_probability, default=0.05, metavar="P", help="false-alarm rate of the test (0.05)"
    )
    verb.add_argument(
        "--limit",
        metavar="LIMIT",
        help="largest residual allowed: a number; on a mesh also a percentage of gross (0.1%%)",
    )
    verb.add_argument("--unit", metavar="TEXT", help="unit of the values, echoed with them")
    verb.add_argument(
        "-o", dest="output", metavar="FILE", help="write the adjusted table (csv) or mesh (vtu); - prints the table"
    )
    verb.add_argument("--vertices", metavar="FILE", help="network: write the table of vertices (csv)")
    _common(verb)


def _probability(text: str) -> float:
    number = float(text)
    if not 0 < number < 1:
        message = f"must lie between 0 and 1, got {text}"
        raise argparse.ArgumentTypeError(message)
    return number


def _common(verb: argparse.ArgumentParser) -> None:
    verb.add_argument("--nodes", metavar="FILE", help="node table")
    verb.add_argument("--decimal", choices=(".", ","), default=".", help="decimal sign of the tables (.)")
    _shared(verb)


def _shared(verb: argparse.ArgumentParser) -> None:
    verb.add_argument("--json", action="store_true", help="print one JSON object instead of text")
    verb.add_argument("--force", action="store_true", help="replace existing output files")
    verb.add_argument("--quiet", action="store_true", help="print errors only; the exit code tells")


class _Layout(argparse.RawDescriptionHelpFormatter):
    def __init__(self, prog: str) -> None:
        super().__init__(prog, max_help_position=24, width=80)


def _version() -> str:
    from importlib.metadata import PackageNotFoundError, version

    try:
        return version("dec")
    except PackageNotFoundError:
        return "(not installed)"
