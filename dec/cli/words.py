"""The words of the command line: verbs, options, help."""

import argparse
from collections.abc import Callable
from typing import Any, NoReturn

from dec.cli.audits import balance_verb, loops_verb
from dec.cli.codes import UsageError
from dec.cli.verbs import check_verb, demo_verb, presets_verb, solve_verb, verify_verb

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
    _certified(check)
    _common(check)

    balance = _verb(verbs, "balance", balance_verb, "do the flows add up?",
                    "dec balance pipes.csv --nodes nodes.csv --value flow --sd 2%+0.05 --open R1\n"
                    "  dec balance part.vtu --field velocity --limit 0.1%")  # fmt: skip
    network = _audited(balance)
    network.add_argument("--open", metavar="ID", action="append", help="vertex open to the outside; may be repeated")
    network.add_argument("--open-column", metavar="COL", help="yes-or-no node column that says which vertices are open")
    network.add_argument("--supply", metavar="COL", help="node column of what is put in (taken out: negative)")
    network.add_argument("--round-supplies", action="store_true", help="with --digits: supplies may be rounded too")
    network.add_argument("--supply-sd", metavar="SD", help="how well it is known, as --sd; 0 or empty is exactly")
    network.add_argument("--storage", metavar="COL", help="node column of what is kept back there meanwhile")
    network.add_argument("--storage-sd", metavar="SD", help="how well that is known, as --sd; 0 or empty is exactly")

    loops = _verb(verbs, "loops", loops_verb, "do the differences close?",
                  "dec loops lines.csv --nodes marks.csv --value dh --sd 0.003 --fixed height\n"
                  "  dec loops part.vtu --field velocity")  # fmt: skip
    network = _audited(loops)
    network.add_argument("--fixed", metavar="COL", help="node column of values that are held; empty cells are not")
    network.add_argument("--fixed-sd", metavar="SD", help="how well they are known, as --sd; 0 or empty is exactly")
    network.add_argument("--length", metavar="COL", help="edge column of lengths, for presets of levelling")
    network.add_argument("--length-unit", metavar="UNIT", choices=("m", "km", "mi", "ft"), help="m, km, mi or ft")

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
        "--exponent", type=_exponent, default=1.0, metavar="N", help="n in drop = q |q|^(n-1) / c, 1 to 2 (1)"
    )
    solve.add_argument("--rtol", type=_probability, default=1e-8, metavar="R", help="largest relative residual (1e-8)")
    solve.add_argument(
        "--method", default="auto", metavar="NAME", help="auto, direct, multigrid, elimination, gradients"
    )
    solve.add_argument(
        "--unbalanced", choices=("refuse", "spread"), default="refuse", help="what to do with a surplus (refuse)"
    )
    solve.add_argument("--why", action="store_true", help="say why the method was chosen")
    _certified(solve)
    solve.add_argument("-o", dest="output", metavar="FILE", help="write flows and end potentials (csv); - prints them")
    _common(solve)

    verify = _verb(verbs, "verify", verify_verb, "recheck a result without trusting the program that made it",
                   "dec verify audit.json pipes.csv nodes.csv")  # fmt: skip
    verify.add_argument("certificate", metavar="CERTIFICATE", help="file that --certificate wrote")
    verify.add_argument("files", metavar="FILE", nargs="*", help="the inputs; else they are looked for beside it")
    _shared(verify, writes=False)
    presets = _verb(verbs, "presets", presets_verb, "what --preset knows by name, with sources", "dec presets")
    _shared(presets, writes=False)
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


def _audited(verb: argparse.ArgumentParser) -> argparse._ArgumentGroup:
    """Add what both audits have; return the group of network options for what only one has."""
    verb.add_argument(
        "file", metavar="FILE", help="edge table (csv, parquet) or mesh (vtu, vtk, stl, obj, ply, off, msh)"
    )
    network = verb.add_argument_group("a network: readings on edges, and what is known beside them")
    network.add_argument("--value", metavar="COL", help="edge column of readings; an empty cell is not measured")
    network.add_argument(
        "--sd", metavar="SD", help="standard deviation as a number, percentage (2%%, 2%%+0.1) or column (col:NAME)"
    )
    network.add_argument(
        "--readings",
        metavar="FILE",
        help="table of readings: edge, COL; optionally sensor, mounted (+1, -1), factor (0.001, 1/3.6)",
    )
    network.add_argument("--common", metavar="COL", help="edge column of groups whose readings share one error")
    network.add_argument("--common-sd", metavar="SD", help="size of that error: a number, percentage or column")
    network.add_argument(
        "--preset",
        metavar="NAME",
        help="a trade's limit or accuracy by name; dec presets lists them; NAME,FIGURE=N sets a figure",
    )
    network.add_argument(
        "--transition",
        metavar="FLOW",
        help="for meter presets: transitional flow, a number or column; 1.6+0.02 or COL+0.02 with a floor (reading 0)",
    )
    tests = verb.add_argument_group("how it is tested")
    tests.add_argument("--alpha", type=_probability, metavar="P", help="false-alarm rate of the global test (0.05)")
    tests.add_argument(
        "--sidak", action="store_true", help="with sd: one limit for all single tests together, at --alpha"
    )
    tests.add_argument(
        "--robust", action="store_true", help="with sd: compare with the least sum of absolute corrections"
    )
    tests.add_argument(
        "--figures", choices=("auto", "all", "estimate"),
        help="very large networks: figures of the leading readings (auto), of all, or estimates of all",
    )  # fmt: skip
    tests.add_argument(
        "--limit", metavar="LIMIT",
        help="largest residual allowed instead of --sd: a number; on a mesh also a percentage of gross (0.1%%)",
    )  # fmt: skip
    asked = verb.add_argument_group("what the verdict would be; the data stay as they are; each may be repeated")
    asked.add_argument("--if-turned", metavar="ID", action="append", help="if that edge's reading counted backwards")
    asked.add_argument("--if-scaled", metavar="ID=F", action="append", help="if it were multiplied by F (0.001, 1/3.6)")
    asked.add_argument("--if-left-out", metavar="ID", action="append", help="if it had not been measured")
    mesh = verb.add_argument_group("a mesh")
    mesh.add_argument("--field", metavar="NAME", help="vector field to audit")
    mesh.add_argument("--at", choices=("vertices", "cells"), help="which field, where both have the name")
    verb.add_argument("--unit", metavar="TEXT", help="unit of the values, echoed with them; limits of presets need it")
    verb.add_argument(
        "-o", dest="output", metavar="FILE", help="write the adjusted table (csv) or mesh (vtu); - prints the table"
    )
    verb.add_argument("--vertices", metavar="FILE", help="network: write the table of vertices (csv); - prints it")
    network.add_argument("--digits", metavar="UNIT", help="round adjusted values to whole units so that they add up")
    _certified(verb)
    _common(verb)
    return network


def _certified(verb: argparse.ArgumentParser) -> None:
    verb.add_argument("--certificate", metavar="FILE", help="write what dec verify needs to recheck the result")


def _probability(text: str) -> float:
    from dec.calculus.columns import reads_as_number

    number = float(text) if reads_as_number(text) else 0.0
    if not 0 < number < 1:
        message = f"must lie between 0 and 1, got {text}"
        raise argparse.ArgumentTypeError(message)
    return number


def _exponent(text: str) -> float:
    from dec.calculus.columns import reads_as_number

    number = float(text) if reads_as_number(text) else 0.0
    if not 1 <= number <= 2:
        message = f"must be from 1 to 2, got {text}"
        raise argparse.ArgumentTypeError(message)
    return number


def _common(verb: argparse.ArgumentParser, *, writes: bool = True) -> None:
    verb.add_argument("--nodes", metavar="FILE", help="node table")
    verb.add_argument(
        "--decimal", choices=(".", ","), default=".", metavar="SIGN", help="decimal sign of the tables, . or , (.)"
    )
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
