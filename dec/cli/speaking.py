"""What the command line says: results on standard output, a moving bar on standard error."""

import argparse
import io
import json
import os
import sys
from collections.abc import Callable, Iterable, Iterator
from contextlib import contextmanager, suppress
from typing import Any

from dec.errors import OutputError

__all__ = ["complain", "patience", "print_json", "remark", "show", "to_nowhere", "write"]

_SECONDS = 2.0


def show(
    options: argparse.Namespace, found: dict[str, Any] | str, view: Callable[[dict[str, Any]], Iterable[Any]]
) -> None:
    """Print a result, an object or already its JSON text, as JSON or for reading; nothing with --quiet."""
    if options.json:
        print_json(found)
    elif not options.quiet and not isinstance(found, str):
        _print(view(found))


def print_json(found: dict[str, Any] | str) -> None:
    """Print one JSON object, or its text, on one line; in ASCII where the output's encoding is not Unicode."""
    plain = not _is_unicode()
    if plain and isinstance(found, str):
        found = json.loads(found)
    text = found if isinstance(found, str) else json.dumps(found, ensure_ascii=plain, allow_nan=False)
    write((text + "\n").encode(_encoding(), "backslashreplace"))


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
    write(lines.encode(_encoding(), "backslashreplace"))


def _encoding() -> str:
    return getattr(sys.stdout, "encoding", None) or "utf-8"


def _is_unicode() -> bool:
    return _encoding().lower().replace("-", "").startswith("utf")


def write(data: bytes) -> None:
    """Write to standard output, all or an error; when whoever reads it has left, the rest goes nowhere in silence."""
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
        to_nowhere()
    except OSError as error:
        message = f"standard output cannot be written ({error.strerror})"
        to_nowhere()
        raise OutputError(message) from None


def remark(options: argparse.Namespace, notes: Iterable[str]) -> None:
    """Print notes on standard error, or nothing with --quiet."""
    if not options.quiet:
        complain("".join(f"dec: {ascii(note)[1:-1]}\n" for note in notes))


def complain(text: str) -> None:
    """Print on standard error; where that cannot be written the exit code has to do."""
    with suppress(OSError, AttributeError):
        sys.stderr.write(text)
        sys.stderr.flush()


def to_nowhere() -> None:
    """Point standard output elsewhere: what is left in its buffer would fail again when the interpreter closes it."""
    os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())


@contextmanager
def patience(what: str, options: argparse.Namespace) -> Iterator[None]:
    """Show a moving bar on stderr once the work takes over two seconds, on a terminal only."""
    if options.quiet or sys.stderr is None or not sys.stderr.isatty():
        yield
        return
    from threading import Timer

    from rich.console import Console
    from rich.progress import BarColumn, Progress, TextColumn, TimeElapsedColumn

    columns = (TextColumn("{task.description}"), BarColumn(), TimeElapsedColumn())
    progress = Progress(*columns, console=Console(stderr=True), transient=True)
    progress.add_task(what, total=None)
    timer = Timer(_SECONDS, progress.start)
    timer.daemon = True
    timer.start()
    try:
        yield
    finally:
        timer.cancel()
        progress.stop()
