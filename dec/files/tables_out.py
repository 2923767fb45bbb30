"""CSV out: UTF-8, RFC 4180, numbers that read back as the same numbers."""

import re
from collections.abc import Iterable, Mapping, Sequence
from typing import Any

import numpy as np

from dec.arrays import AnyArray
from dec.errors import OutputError

__all__ = ["csv_bytes"]

_SPECIAL = re.compile(r'[,"\r\n]|^\s|\s$')
# A blank at an end, in many texts with zero bytes round each; a zero byte inside one only sends it the slow way.
_OUTER_BLANK = re.compile(r"\0\s|\s\0")
_FORMULA = re.compile(r"[=+\-@\t\r]")
_NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?")


def csv_bytes(columns: Mapping[str, Sequence[Any] | AnyArray], *, guard: bool = False) -> bytes:
    r"""A CSV table as bytes.

    Parameters
    ----------
    columns : mapping of heading to sequence
        Columns of equal length. Floats are written in the shortest form that reads back the same; None and nan are
        empty cells; int, bool (``true``, ``false``), Fraction (``p/q``) and text are written as they are.
    guard : bool
        Whether text that a spreadsheet would run as a formula (it begins with ``= + - @``, tab or carriage return
        and is no number) gets an apostrophe in front. Ids change by that, so it is off by default.

    Returns
    -------
    bytes
        UTF-8 without a byte order mark, commas, lines ended by LF.

    Raises
    ------
    OutputError
        If the columns differ in length, a number is infinite, or a text holds half a surrogate pair.

    Notes
    -----
    Source: RFC 4180, Shafranovich 2005, section 2.

    Examples
    --------
    >>> csv_bytes({"id": ["A", "B, C"], "flow": [0.1, None]})
    b'id,flow\nA,0.1\n"B, C",\n'
    """
    texts = [[_quoted(str(name)), *_texts(name, values, guard=guard)] for name, values in columns.items()]
    lengths = {name: len(text) - 1 for name, text in zip(columns, texts, strict=True)}
    if len(set(lengths.values())) > 1:
        message = f"the columns of a table must have equal length, got {lengths}"
        raise OutputError(message)
    rows: Iterable[Iterable[str]] = zip(*texts, strict=True)
    if len(texts) == 1:  # an empty line would be no row
        rows = ((text or '""',) for (text,) in rows)
    try:
        return "\n".join([*map(",".join, rows), ""]).encode("utf-8")
    except UnicodeEncodeError as error:
        message = f"a table must be Unicode text, found {error.object[error.start : error.start + 20]!r}"
        raise OutputError(message) from None


def _texts(name: str, values: Sequence[Any] | AnyArray, *, guard: bool) -> list[str]:
    if isinstance(values, np.ndarray) and values.dtype == np.float64:
        if np.isinf(values).any():
            _refuse_infinite(name, int(np.argmax(np.isinf(values))))
        texts, given = np.full(len(values), "", dtype=object), ~np.isnan(values)
        texts[given] = list(map(repr, values[given].tolist()))
        listed: list[str] = texts.tolist()
        return listed
    items = values.tolist() if isinstance(values, np.ndarray) else list(values)
    if not guard and _is_plain(items):
        return items
    return [_text(name, row, value, guard=guard) for row, value in enumerate(items)]


def _is_plain(items: list[Any]) -> bool:
    """Return whether all items are text that stands in a table as it is."""
    if not set(map(type, items)) <= {str}:
        return False
    text = "\0".join(["", *items, ""])
    if any(mark in text for mark in ',"\r\n'):
        return False
    return len(text.split(None, 1)) == 1 or _OUTER_BLANK.search(text) is None


def _text(name: str, row: int, value: object, *, guard: bool) -> str:
    if isinstance(value, np.generic):
        value = value.item()
    if value is None:
        return ""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, float):
        if value in (float("inf"), float("-inf")):
            _refuse_infinite(name, row)
        return "" if value != value else repr(value)  # noqa: PLR0124
    text = str(value)
    if guard and isinstance(value, str) and _FORMULA.match(text) and not _NUMBER.fullmatch(text):
        text = "'" + text
    return _quoted(text)


def _quoted(text: str) -> str:
    return '"' + text.replace('"', '""') + '"' if _SPECIAL.search(text) else text


def _refuse_infinite(name: str, row: int) -> None:
    message = f"column {name} row {row}: a table holds finite numbers, got infinity; leave the cell empty"
    raise OutputError(message)
