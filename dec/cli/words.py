"""The words of the command line: verbs, options, help."""

import argparse
from collections.abc import Callable
from typing import Any, NoReturn

from dec.cli.codes import UsageError
from dec.cli.verbs import balance_verb, check_verb, demo_verb, loops_verb, solve_verb

__all__ = ["parser"]

_DESCRIPTION = """Numbers on the edges of a network or a mesh obey one of two laws: flows add up at every vertex,
differences close round every loop. dec checks them exactly, says which reading or face is to blame and which
cannot be checked, and gives the best consistent values."""

_EPILOG = """exit codes: 0 within limits; 1 a finding outside its limit; 2 wrong use; 3 input not usable;
4 not solvable as posed, or nothing to check; 5 could not write; 130 interrupted"""


class _Parser(argparse.ArgumentParser):
    as_json = False

    def error(self, message: str) -> NoReturn:
        if self.as_json:
            raise UsageError(message)
        super().error(message)


def parser(as_json: bool) -> argparse.ArgumentParser:
    """The parser of all verbs; with `as_json` wrong use raises UsageError instead of printing and leaving."""
    _Parser.as_json = as_json
    top = _Parser(prog="dec", description=_DESCRIPTION, epilog=_EPILOG, formatter_class=_Layout)
    top.add_argument("--version", action="version", version=f"dec {_version()}")
    verbs = top.add_subparsers(dest="verb", metavar="VERB", required=True)

    check = _verb(verbs, "check", check_verb, "is it sound, and what can be checked with it?",
                  "dec check meshes/bracket.stl\n  dec check pipes.csv --nodes nodes.csv")  # fmt: skip
    check.add_argument("file", metavar="FILE", help="edge table or mesh; - reads a table from standard input")
    _common(check, writes=False)

    balance = _verb(verbs, "balance", balance_verb, "do the flows add up?",
                    "dec balance pipes.csv --nodes nodes.csv --value flow --sd 2%+0.05 --open R1\n"
                    "  dec balance part.vtu --field velocity --limit 0.1%")  # fmt: skip
    _audited(balance)
    balance.add_argument("--open", metavar="ID", action="append", help="vertex open to the outside; may be repeated")
    balance.add_argument("--open-column", metavar="COL", help="yes-or-no node column that says which vertices are open")
    balance.add_argument("--supply", metavar="COL", help="node column of what is put in (taken out: negative)")

    loops = _verb(verbs, "loops", loops_verb, "do the differences close?",
                  "dec loops lines.csv --nodes marks.csv --value dh --sd 0.003 --fixed height\n"
                  "  dec loops part.vtu --field velocity")  # fmt: skip
    _audited(loops)
    loops.add_argument("--fixed", metavar="COL", help="node column of values that are held; empty cells are not")

    solve = _verb(
        verbs,
        "solve",
        solve_verb,
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

    demo = _verb(verbs, "demo", demo_verb, "the main job on the built-in example", "dec demo\n  dec demo harrowmere")
    demo.add_argument("dir", metavar="DIR", nargs="?", help="also write the example's files and results there")
    _shared(demo)
    return top


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
    verb.add_argument("--alpha", type=_probability, metavar="P", help="network: false-alarm rate of the test (0.05)")
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


def _common(verb: argparse.ArgumentParser, *, writes: bool = True) -> None:
    verb.add_argument("--nodes", metavar="FILE", help="node table")
    verb.add_argument("--decimal", choices=(".", ","), default=".", help="decimal sign of the tables (.)")
    _shared(verb, writes=writes)


def _shared(verb: argparse.ArgumentParser, *, writes: bool = True) -> None:
    verb.add_argument("--json", action="store_true", help="print one JSON object instead of text")
    if writes:
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
