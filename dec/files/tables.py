"""CSV and Parquet tables: every cell as the text that was written, with the line it came from."""

import io
import unicodedata
from collections.abc import Iterable
from typing import TYPE_CHECKING, Any

import numpy as np

from dec.arrays import IntArray, ObjectArray, frozen
from dec.calculus.columns import Column, cells_of
from dec.errors import InputError
from dec.files.dialect import Dialect, dialect_of
from dec.files.sources import Source

if TYPE_CHECKING:
    import pandas as pd

__all__ = ["read_csv", "read_parquet"]

_ID_COLUMNS = ("id", "from", "to")


def read_csv(source: Source, *, decimal: str = ".") -> tuple[dict[str, Column], tuple[str, ...]]:
    r"""The columns of a CSV file by heading, and what the reader wants known.

    Separators are commas, semicolons or tabs, whichever the heading uses most; quotation marks as RFC 4180 has them;
    UTF-8 with or without a byte order mark. Every cell stays text: ``007`` stays ``007``, ``NA`` is a name. Blanks
    round a cell do not belong to it; where an id loses some, the notes say so, and say if two names became one.
    Blank lines and rows of separators alone are skipped, the latter with a note, and so is a last column without
    heading and cells.

    Parameters
    ----------
    source : Source
    decimal : str
        The decimal sign of numbers, "." or ",".

    Returns
    -------
    columns : dict of heading to Column
    notes : tuple of str

    Raises
    ------
    InputError
        If the text cannot be read as a table, or headings are missing or repeated; the message gives the line.

    Notes
    -----
    Source: RFC 4180, Shafranovich 2005, section 2.

    Examples
    --------
    >>> columns, _ = read_csv(Source("edges.csv", b"from;to;flow\nA;B;1,5\n"), decimal=",")
    >>> columns["flow"].numbers().tolist(), columns["flow"].place(0)
    ([1.5], 'edges.csv line 2')
    """
    if decimal not in (".", ","):
        message = f"decimal must be . or , got {decimal!r}"
        raise InputError(message)
    dialect = dialect_of(source)
    cells, notes = _parsed(dialect), []
    if dialect.n_hollow:
        where = f"{dialect.n_hollow} (first: line {dialect.first_hollow})"
        notes.append(f"{source.name}: rows without any entry skipped: {where}")
    headings = [str(column[0]).strip() for column in cells]
    if not headings[-1] and len(headings) > 1 and not any(str(cell).strip() for cell in cells[-1][1:]):
        notes.append(f"{source.name}: the last column has no heading and no entries and was left out")
        headings, cells = headings[:-1], cells[:-1]
    _refuse_headings(source.name, headings)
    columns = {}
    for heading, column in zip(headings, cells, strict=True):
        values = column[1:]
        if dialect.has_outer_blanks:
            values = _trimmed(source.name, heading, values, dialect.lines, notes)
        if not dialect.is_ascii and heading in _ID_COLUMNS:
            notes += _look_alikes(source.name, heading, values)
        columns[heading] = Column(heading, frozen(values), source.name, dialect.lines, decimal)
    return columns, tuple(notes)


def _parsed(dialect: Dialect) -> list[ObjectArray]:
    """Return each column as text, heading first."""
    import pandas as pd

    try:
        frame = pd.read_csv(
            io.BytesIO(dialect.text), sep=dialect.separator, header=None, dtype=object, na_filter=False,
            encoding="utf-8", engine="c", skip_blank_lines=False,
        )  # fmt: skip
    except (ValueError, pd.errors.ParserError) as error:
        message = (
            f"{dialect.name} cannot be read as a table ({' '.join(str(error).split())}); check its quotation marks"
        )
        raise InputError(message) from None
    if len(frame) != len(dialect.lines) + 1:
        message = (
            f"{dialect.name}: {len(dialect.lines)} rows were counted and {len(frame) - 1} read; "
            "check its quotation marks"
        )
        raise InputError(message)
    return [frame[number].to_numpy(dtype=object) for number in frame.columns]


def _refuse_headings(name: str, headings: list[str]) -> None:
    seen: dict[str, int] = {}
    for number, heading in enumerate(headings, start=1):
        if not heading:
            message = f"{name}: column {number} must have a heading, it has none; name it or take it out"
            raise InputError(message)
        if not heading.isprintable():
            message = f"{name}: heading {heading!r} must be one line of printable text"
            raise InputError(message)
        if heading in seen:
            message = (
                f"{name}: heading {heading!r} stands over columns {seen[heading]} and {number}; headings must differ"
            )
            raise InputError(message)
        seen[heading] = number


def _trimmed(name: str, heading: str, values: ObjectArray, lines: IntArray, notes: list[str]) -> ObjectArray:
    """Return the cells without blanks at their ends; ids that lose some are noted."""
    trimmed = np.array([cell.strip() for cell in values], dtype=object)
    changed = np.flatnonzero(trimmed != values)
    if heading in _ID_COLUMNS and len(changed):
        first = int(changed[0])
        text = (
            f"{name}: blanks round cells of {heading} left out: {len(changed)} "
            f"(first: line {lines[first]} {values[first]!r})"
        )
        before, after = len(set(values)), len(set(trimmed))
        if after < before:
            text += f"; names that became equal to others by that: {before - after}"
        notes.append(text)
    return trimmed


def _look_alikes(name: str, heading: str, values: Iterable[str]) -> list[str]:
    """Return a note on ids that look the same and are written with different characters."""
    spellings: dict[str, set[str]] = {}
    for text in {text for text in values if not text.isascii()}:
        spellings.setdefault(unicodedata.normalize("NFC", text), set()).add(text)
    double = sorted(text for text, written in spellings.items() if len(written) > 1)
    if not double:
        return []
    shown = ", ".join(double[:5])
    return [f"{name}: names of {heading} in two Unicode spellings, which count as different: {len(double)} ({shown})"]


def read_parquet(source: Source) -> tuple[dict[str, Column], tuple[str, ...]]:
    """The columns of a Parquet file by name; numbers stay numbers, ids become text.

    Parameters
    ----------
    source : Source

    Returns
    -------
    columns : dict of name to Column
    notes : tuple of str

    Raises
    ------
    InputError
        If pyarrow is not installed, the file cannot be read, or an id column holds floating-point numbers.
    """
    import pandas as pd

    try:
        frame = pd.read_parquet(io.BytesIO(source.data), engine="pyarrow", dtype_backend="numpy_nullable")
    except ImportError:
        message = f"{source.name}: Parquet needs pyarrow; install pyarrow, or save the table as CSV"
        raise InputError(message) from None
    except Exception as error:
        reason = " ".join(str(error).split())[:200]
        message = f"{source.name} cannot be read as Parquet ({reason}); the copy may be incomplete"
        raise InputError(message) from None
    if not len(frame):
        message = f"{source.name} has columns but no rows; nothing to check"
        raise InputError(message)
    names = [str(name) for name in frame.columns]
    _refuse_headings(source.name, names)
    return {name: _column(frame.iloc[:, i], name, source.name) for i, name in enumerate(names)}, ()


def _column(series: "pd.Series[Any]", name: str, source: str) -> Column:
    kind = getattr(series.dtype, "kind", "O")
    if name in _ID_COLUMNS and kind == "f":
        message = f"{source}: {name} must hold names, found floating-point numbers; save ids as text"
        raise InputError(message)
    cells = cells_of(series, is_id=name in _ID_COLUMNS)
    return Column(name, frozen(cells), source)
