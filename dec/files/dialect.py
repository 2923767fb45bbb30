"""What a CSV file is made of: UTF-8 text, a separator, records, and the line each record begins on.

Everything that can be wrong with the text is found here, by whole-array steps over the bytes, so that the parser
afterwards only sees tables whose rows all have as many cells as the heading.
"""

import codecs
import re
from dataclasses import dataclass

import numpy as np

from dec.arrays import AnyArray, BoolArray, IntArray
from dec.errors import InputError
from dec.files.sources import Source, printable

__all__ = ["Dialect", "dialect_of"]

_LF, _CR, _QUOTE, _TAB, _BLANK = 10, 13, 34, 9, 32
_SEPARATORS = {b"\t": "tabs", b";": "semicolons", b",": "commas"}
_UTF16 = (codecs.BOM_UTF16_LE, codecs.BOM_UTF16_BE)


@dataclass(frozen=True, slots=True)
class Dialect:
    """A table of text, sound enough for any parser.

    Attributes
    ----------
    name : str
    text : bytes
        UTF-8 without a byte order mark, lines ended by LF, without rows that hold nothing.
    separator : str
        One of ``,``, ``;`` and tab.
    lines : int64 array, shape (n_rows,)
        Line of the file on which each row after the heading begins.
    has_outer_blanks : bool
        Whether some cell may begin or end with a blank.
    is_ascii : bool
    n_hollow : int
        Rows of separators alone, left out.
    first_hollow : int
        Line of the first of them.
    """

    name: str
    text: bytes
    separator: str
    lines: IntArray
    has_outer_blanks: bool
    is_ascii: bool
    n_hollow: int
    first_hollow: int


def dialect_of(source: Source) -> Dialect:
    """The dialect of a CSV file, from its bytes.

    Parameters
    ----------
    source : Source

    Returns
    -------
    Dialect

    Raises
    ------
    InputError
        If the text is not UTF-8, holds a zero byte, has a quotation mark out of place, a row with too many or too
        few cells, or no row after the heading; the message gives the line.
    """
    text = _line_ends(source.name, _utf8(source))
    data = np.frombuffer(text, dtype=np.uint8)
    quotes = np.flatnonzero(data == _QUOTE)
    newlines = np.flatnonzero(data == _LF)
    if len(quotes) % 2:  # nothing after the odd mark could be told apart
        _refuse_quotes(source.name, data, quotes, newlines, _separator(text.lstrip().split(b"\n", 1)[0])[0])
    ends = _outside(newlines, quotes)
    starts = np.concatenate([[0], ends[:-1] + 1]).astype(np.int64)
    has_text = _has_text(data, starts, ends)
    filled = np.flatnonzero(has_text)
    if not len(filled):
        message = f"{source.name} holds no heading and no rows, only blank lines"
        raise InputError(message)
    heading = text[starts[filled[0]] : ends[filled[0]]]
    separator = _separator(heading)
    _refuse_quotes(source.name, data, quotes, newlines, separator[0])
    marks = _outside(np.flatnonzero(data == separator[0]), quotes)
    cells = np.diff(np.searchsorted(marks, np.append(starts, len(data)))) + 1
    is_hollow = has_text & (cells > 1) & (cells - 1 == ends - starts)
    rows = np.flatnonzero(has_text & ~is_hollow)
    first_line = np.searchsorted(newlines, starts) + 1
    _refuse_ragged(source.name, cells[rows], first_line[rows], cells[filled[0]])
    if len(rows) < 2:
        message = f"{source.name} has a header but no rows; nothing to check"
        raise InputError(message)
    hollow = np.flatnonzero(is_hollow)
    return Dialect(
        source.name,
        text if not len(hollow) and has_text.all() else _kept(data, starts, ends, rows),
        separator.decode(),
        first_line[rows[1:]],
        _has_outer_blanks(text, data, np.concatenate([marks, ends]), quotes),
        text.isascii(),
        len(hollow),
        int(first_line[hollow[0]]) if len(hollow) else 0,
    )


def _utf8(source: Source) -> bytes:
    data = source.data
    if data.startswith(_UTF16) or (b"\0" in data[:4096] and data[:4096].count(b"\0") * 3 > len(data[:4096])):
        message = f"{source.name} must be UTF-8 text, it is UTF-16; save it as CSV UTF-8"
        raise InputError(message)
    zero = data.find(b"\0")
    if zero >= 0:
        message = (
            f"{source.name} line {source.line_of(zero)}: a zero byte stands in the text; "
            "this is no CSV file, or the copy is damaged"
        )
        raise InputError(message)
    try:
        data.decode("utf-8")
    except UnicodeDecodeError as error:
        raise InputError(_not_utf8(source, error.start)) from None
    return data.removeprefix(codecs.BOM_UTF8)


def _not_utf8(source: Source, position: int) -> str:
    data = source.data
    start = max(max(data.rfind(mark, 0, position) for mark in (b"\n", b",", b";", b"\t", b'"')) + 1, position - 30)
    end = min([at for mark in (b"\n", b"\r", b",", b";", b"\t", b'"') if (at := data.find(mark, position)) >= 0]
              + [position + 30, len(data)])  # fmt: skip
    reading = printable(data[start:end].decode("cp1252", "replace"))
    return (
        f"{source.name} line {source.line_of(position)}: byte {data[position]:02X} is not UTF-8; "
        f'it reads as "{reading}" in Windows-1252: save the file as CSV UTF-8 if that is right'
    )


def _line_ends(name: str, text: bytes) -> bytes:
    """Return the text with LF at each line end, the last one included; cells in quotation marks stay as they are."""
    if b"\r" in text:
        data = np.frombuffer(text, dtype=np.uint8)
        returns = _outside(np.flatnonzero(data == _CR), np.flatnonzero(data == _QUOTE))
        if b"\n" not in text:
            data = data.copy()
            data[returns] = _LF
        else:
            lone = returns[data[np.minimum(returns + 1, len(data) - 1)] != _LF]
            if len(lone):
                line = text.count(b"\n", 0, int(lone[0])) + 1
                message = (
                    f"{name} line {line}: a carriage return stands inside the line; save the file with one kind of "
                    "line end"
                )
                raise InputError(message)
            data = np.delete(data, returns)
        text = data.tobytes()
    return text if text.endswith(b"\n") else text + b"\n"


def _outside(positions: IntArray, quotes: IntArray) -> IntArray:
    """Return the positions that stand outside quotation marks."""
    if not len(quotes):
        return positions
    outside: IntArray = positions[np.searchsorted(quotes, positions) % 2 == 0]
    return outside


def _has_text(data: AnyArray, starts: IntArray, ends: IntArray) -> BoolArray:
    """Return whether each line holds more than blanks; tabs count as text, they may be separators."""
    has = ends > starts
    begins_blank = np.flatnonzero(has & (data[np.minimum(starts, len(data) - 1)] == _BLANK))
    if len(begins_blank):
        solid = np.append(np.flatnonzero((data != _BLANK) & (data != _LF)), len(data))
        has[begins_blank] = solid[np.searchsorted(solid, starts[begins_blank])] < ends[begins_blank]
    return has


def _separator(heading: bytes) -> bytes:
    """Return the separator that the heading uses most, outside quotation marks."""
    plain = re.sub(rb'"[^"]*"', b"", heading)
    return max(_SEPARATORS, key=plain.count) if any(mark in plain for mark in _SEPARATORS) else b","


def _refuse_quotes(name: str, data: AnyArray, quotes: IntArray, newlines: IntArray, separator: int) -> None:
    """Return if each quotation mark opens or closes a whole cell or is doubled inside one."""
    opening, closing = quotes[0::2], quotes[1::2]
    before = np.where(opening > 0, data[opening - 1], _LF)
    good = (before == separator) | (before == _LF)
    good[1:] |= opening[1:] == closing[: len(opening) - 1] + 1
    after = data[np.minimum(closing + 1, len(data) - 1)]
    well = (after == separator) | (after == _LF)
    well[: len(opening) - 1] |= closing[: len(opening) - 1] + 1 == opening[1:]
    wrong = np.concatenate([opening[~good], closing[~well]])
    if not len(wrong) and len(quotes) % 2:
        wrong = quotes[-1:]
    if len(wrong):
        line = int(np.searchsorted(newlines, wrong.min())) + 1
        message = (
            f"{name} line {line}: a quotation mark must enclose a whole cell, without blanks outside; "
            "write a mark inside a cell twice and enclose the cell"
        )
        raise InputError(message)


def _refuse_ragged(name: str, cells: IntArray, lines: IntArray, expected: int) -> None:
    wrong = np.flatnonzero(cells != expected)
    if len(wrong):
        row = int(wrong[0])
        others = f" (and {len(wrong) - 1} more)" if len(wrong) > 1 else ""
        message = (
            f"{name} line {lines[row]}: a row must have {expected} cells like the heading, "
            f"this one{others} has {cells[row]}; a cell that holds a separator needs quotation marks"
        )
        raise InputError(message)


def _kept(data: AnyArray, starts: IntArray, ends: IntArray, rows: IntArray) -> bytes:
    mark = np.zeros(len(data) + 1, dtype=np.int8)
    mark[starts[rows]] += 1
    mark[ends[rows] + 1] -= 1
    return data[np.cumsum(mark[:-1], dtype=np.int8) > 0].tobytes()


def _has_outer_blanks(text: bytes, data: AnyArray, borders: IntArray, quotes: IntArray) -> bool:
    """Return whether a blank touches the border of a cell; any blank that is not ASCII counts."""
    if not text.isascii():
        return True
    if not len(quotes) and b" " not in text and b"\t" not in text:
        return False
    around = np.concatenate([data[np.maximum(borders - 1, 0)], data[np.minimum(borders + 1, len(data) - 1)], data[:1]])
    inside = np.concatenate([data[quotes[0::2] + 1], data[quotes[1::2] - 1]])
    return bool(((around == _BLANK) | (around == _TAB)).any() or (inside <= _BLANK).any())
