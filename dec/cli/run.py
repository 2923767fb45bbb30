"""Run one verb; whatever goes wrong becomes one line and an exit code."""

import os
import sys
from collections.abc import Sequence

from dec.cli.codes import INTERRUPTED, NOT_WRITTEN, UNSOLVABLE, UNUSABLE, USAGE, UsageError
from dec.cli.speaking import complain, print_json
from dec.cli.words import parser
from dec.errors import AccuracyError, DecError, OutputError, UnsolvableError

__all__ = ["main"]


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one verb and return its exit code; no traceback reaches the user."""
    words = list(sys.argv[1:] if arguments is None else arguments)
    as_json = "--json" in words
    try:
        options = parser(as_json).parse_args(words)
        return int(options.run(options))
    except UsageError as error:
        return _fail(USAGE, "usage", str(error), as_json)
    except DecError as error:
        return _fail(_code(error), type(error).__name__, str(error), as_json)
    except KeyboardInterrupt:
        return _fail(INTERRUPTED, "interrupted", "interrupted", as_json)
    except MemoryError:
        return _fail(
            UNSOLVABLE, "memory", "this machine's memory is too small for that input; audit a part of it", as_json
        )
    except Exception as error:
        if os.environ.get("DEC_TRACEBACK"):
            raise
        message = f"a fault of dec itself ({type(error).__name__}: {error}); DEC_TRACEBACK=1 shows where"
        return _fail(UNUSABLE, "fault", message, as_json)


def _code(error: DecError) -> int:
    if isinstance(error, OutputError):
        return NOT_WRITTEN
    return UNSOLVABLE if isinstance(error, UnsolvableError | AccuracyError) else UNUSABLE


def _fail(code: int, kind: str, message: str, as_json: bool) -> int:
    line = " ".join(message.split())
    if as_json:
        try:
            print_json({"schema": "dec.error/1", "error": kind, "message": line, "exit": code})
        except OutputError:
            complain(f"dec: {ascii(line)[1:-1]}\n")
    else:
        safe = "".join(c if c.isprintable() else c.encode("unicode_escape").decode("ascii") for c in line)
        complain(f"dec: {safe}\n")
    return code
