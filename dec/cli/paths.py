"""Files that the command line reads and writes, checked before anything is read."""

import argparse
import os
from pathlib import Path
from typing import TYPE_CHECKING

from dec.cli.codes import UsageError
from dec.errors import OutputError

if TYPE_CHECKING:
    from dec.calculus.dataset import Dataset

__all__ = ["contents_of", "outputs_of", "read_data"]

_OUTPUTS = (("-o", "output"), ("--vertices", "vertices"), ("--certificate", "certificate"))


def read_data(options: argparse.Namespace) -> "Dataset":
    """The tables or the mesh, once it is certain that results can go where they are wanted.

    Raises
    ------
    UsageError
        If two of the files named are one.
    OutputError
        If a result would replace an input, or cannot be written.
    InputError
        If a file cannot be used.
    """
    from dec.audit.output import refuse_ending
    from dec.files.read import read
    from dec.files.writing import refuse_target

    sources = _sources(options)
    if sources.count("-") > 1:
        message = "- stands for standard input, which holds one table; give the others as files"
        raise UsageError(message)
    outputs = outputs_of(options)
    for option, path in outputs.items():
        if path != "-":
            if option != "--certificate":
                refuse_ending(option, path, is_table=getattr(options, "field", None) is None)
            refuse_target(path, force=options.force)
    real = [os.path.realpath(path) for path in outputs.values()]
    if len(set(real)) < len(real):
        message = f"{' and '.join(outputs)} name one file, {outputs[next(iter(outputs))]}; give each its own"
        raise UsageError(message)
    for source in sources:
        if source != "-" and os.path.realpath(source) in {os.path.realpath(p) for p in outputs.values() if p != "-"}:
            message = f"{source} is an input; results never replace what they were made from, name another file"
            raise OutputError(message)
    return read(options.file, options.nodes, decimal=options.decimal)


def outputs_of(options: argparse.Namespace) -> dict[str, str]:
    """The files that results go to, by their options.

    Raises
    ------
    UsageError
        If a name is empty, or standard output is asked for twice.
    """
    given = {option: getattr(options, name, None) for option, name in _OUTPUTS}
    outputs = {option: path for option, path in given.items() if path is not None}
    for option, path in outputs.items():
        if not path:
            message = f"{option} must name a file, or - for standard output, got an empty name"
            raise UsageError(message)
        if path == "-" and option == "--certificate":
            message = "--certificate must name a file; standard output is for the result"
            raise UsageError(message)
        if path == "-" and options.json:
            message = f"give {option} - or --json, not both: each is the whole of standard output"
            raise UsageError(message)
    return outputs


def contents_of(options: argparse.Namespace) -> list[bytes]:
    """The bytes of the files read, for what is said of single lines; none where one was standard input."""
    sources = _sources(options)
    return [] if "-" in sources else [Path(source).read_bytes() for source in sources]


def _sources(options: argparse.Namespace) -> list[str]:
    given = (getattr(options, name, None) for name in ("file", "nodes", "readings"))
    return [path for path in given if path]
