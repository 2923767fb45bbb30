"""The bytes of a file, read once: what is hashed is what is parsed."""

import hashlib
import os
import stat
import sys
from dataclasses import dataclass
from pathlib import Path

from dec.calculus.dataset import Input
from dec.errors import InputError

__all__ = ["Source", "printable", "read_source", "whole_count"]

_DIGITS = 18  # below 2**63
_KINDS = (
    (stat.S_ISDIR, "a folder"),
    (stat.S_ISFIFO, "a pipe"),
    (stat.S_ISCHR, "a device"),
    (stat.S_ISBLK, "a device"),
    (stat.S_ISSOCK, "a socket"),
)


@dataclass(frozen=True, slots=True)
class Source:
    """A file in memory.

    Attributes
    ----------
    name : str
        Base name, for messages; "stdin" for standard input.
    data : bytes
        All of it.
    """

    name: str
    data: bytes

    def as_input(self) -> Input:
        """Name, SHA-256 and size of these bytes."""
        return Input(self.name, hashlib.sha256(self.data).hexdigest(), len(self.data))

    def line_of(self, position: int) -> int:
        """Line, counted from 1, on which a byte stands."""
        return self.data.count(b"\n", 0, position) + 1


def read_source(path: str | os.PathLike[str]) -> Source:
    """The bytes of a file, or of standard input where the path is "-".

    Parameters
    ----------
    path : str or path
        An ordinary file. A pipe, a device or a folder is refused before anything is read, so that nothing waits.

    Returns
    -------
    Source

    Raises
    ------
    InputError
        If the file is missing, is not an ordinary file, cannot be read, or is empty; standard input, if it is closed
        or cannot be read.
    """
    if path == "-":
        return _not_empty(Source("stdin", _standard_input()))
    name = printable(Path(path).name or str(path))
    try:
        data = _read_bytes(path, name)
    except MemoryError:
        message = f"{name}: the file does not fit into memory"
        raise InputError(message) from None
    except FileNotFoundError:
        message = f"{name}: no such file in {printable(str(Path(path).parent))}; check the path"
        raise InputError(message) from None
    except (OSError, ValueError) as error:
        reason = (error.strerror or "") if isinstance(error, OSError) else str(error)
        message = f"{name}: cannot be read ({reason})"
        raise InputError(message) from None
    return _not_empty(Source(name, data))


def printable(text: str) -> str:
    """The text with control characters and undecodable bytes written as escapes, so that it stays on one line."""
    if text.isprintable():
        return text
    return "".join(c if c.isprintable() else c.encode("unicode_escape").decode("ascii") for c in text)


def whole_count(digits: str, place: str) -> int:
    """The number that decimal digits write.

    Parameters
    ----------
    digits : str
        As ``str.isdecimal`` accepts.
    place : str
        Where they stand, for the message.

    Raises
    ------
    InputError
        If it has more than 18 digits, as no count of anything in a file has.

    Examples
    --------
    >>> whole_count("12", "part.ply line 3")
    12
    """
    if len(digits) > _DIGITS:
        message = f"{place}: a number of {len(digits)} digits ({digits[:12]}...) is no count; the file may be damaged"
        raise InputError(message)
    return int(digits)


def _read_bytes(path: str | os.PathLike[str], name: str) -> bytes:
    _refuse_other_than_file(os.stat(path).st_mode, name)  # noqa: PTH116 - opening a pipe would already wake its writer
    # looked at again once open, and never waiting: the name may mean something else by now
    with open(os.open(path, os.O_RDONLY | getattr(os, "O_NONBLOCK", 0) | getattr(os, "O_BINARY", 0)), "rb") as file:  # noqa: PTH123
        _refuse_other_than_file(os.fstat(file.fileno()).st_mode, name)
        return file.read()


def _refuse_other_than_file(mode: int, name: str) -> None:
    if stat.S_ISREG(mode):
        return
    kind = next((word for is_kind, word in _KINDS if is_kind(mode)), "no ordinary file")
    hint = "give a file inside it" if kind == "a folder" else "save it to a file, or pipe a table to -"
    message = f"{name} must be a file, it is {kind}; {hint}"
    raise InputError(message)


def _standard_input() -> bytes:
    if sys.stdin is None or getattr(sys.stdin, "closed", False):
        message = "stdin is closed; give a file"
        raise InputError(message)
    try:
        return sys.stdin.buffer.read()
    except MemoryError:
        message = "stdin does not fit into memory; give less of it"
        raise InputError(message) from None
    except (OSError, ValueError, AttributeError) as error:  # opened for writing only, or replaced by something else
        reason = getattr(error, "strerror", None) or error
        message = f"stdin cannot be read ({reason}); give a file, or pipe a table to -"
        raise InputError(message) from None


def _not_empty(source: Source) -> Source:
    if not source.data:
        message = f"{source.name} is empty (0 bytes); check that the export finished"
        raise InputError(message)
    return source
