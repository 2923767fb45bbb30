"""The verbs but the two audits: each reads, calls one public function, prints, and gives an exit code."""

import argparse
from pathlib import Path

from dec.cli.codes import FINDING, OK
from dec.cli.paths import contents_of, read_data
from dec.cli.speaking import patience, show, write
from dec.errors import InputError

__all__ = ["check_verb", "demo_verb", "presets_verb", "solve_verb", "verify_verb"]


def check_verb(options: argparse.Namespace) -> int:
    """Is it sound? Exit code 0, or 1 with a finding."""
    from dec.audit.condition import check
    from dec.calculus.certified_homology import certified_homology
    from dec.files.writing import write_atomically
    from dec.report.terminal import check_view

    with patience("checking", options):
        data = read_data(options)
        result = check(data)
        found = result.to_dict()
        if options.certificate:
            made = certified_homology(data.complex, inputs=data.inputs)
            write_atomically(options.certificate, made, force=options.force)
    show(options, found, check_view)
    return OK if result.holds else FINDING


def presets_verb(options: argparse.Namespace) -> int:
    """Every preset with its source; exit code 0."""
    from dec.audit.given.presets import PRESETS
    from dec.report.terminal import presets_view

    found = [{"name": p.name, "sets": p.sets, "figures": dict(p.figures), "says": p.sentence} for p in PRESETS.values()]
    show(options, {"schema": "dec.presets/1", "presets": found}, presets_view)
    return OK


def solve_verb(options: argparse.Namespace) -> int:
    """Potentials and flows from sources; exit code 0."""
    from functools import partial

    from dec.audit.output import flow_bytes
    from dec.files.writing import write_atomically
    from dec.report.terminal import solve_view
    from dec.solvers.certificate import solve_certificate
    from dec.solvers.network import solve_network

    with patience("solving", options):
        data = read_data(options)
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
    if options.certificate:
        made = solve_certificate(
            solution, data, options.source, options.conductance, options.fixed, contents=contents_of(options)
        )
        write_atomically(options.certificate, made, force=options.force)
    show(options, found, partial(solve_view, why=options.why))
    return OK


def demo_verb(options: argparse.Namespace) -> int:
    """The built-in example; exit code 0 when exactly the planted faults are found."""
    from dec.demo import run

    with patience("running the example", options):
        outcome = run(options.dir, force=options.force)
    show(options, outcome.to_dict(), lambda _: outcome.view())
    return OK if outcome.as_planted else FINDING


def verify_verb(options: argparse.Namespace) -> int:
    """Does a certificate hold against the files it names? Exit code 0, or 1 where it does not."""
    from dec.report.terminal import verify_view
    from dec.verify import Unusable, gathered, verify

    try:
        report = verify(*gathered(Path(options.certificate), [Path(name) for name in options.files]))
    except Unusable as error:
        raise InputError(str(error)) from None
    show(options, report.to_dict(), verify_view)
    return OK if report.holds else FINDING
