"""The table of readings itself: where its columns come from, and how a sensor is mounted and scaled."""

import difflib
import os
from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from dec.arrays import IntArray, frozen
from dec.calculus.columns import Column, cells_of, reads_as_number
from dec.calculus.dataset import Input
from dec.errors import InputError
from dec.files.formats import TABLE_SUFFIXES
from dec.files.sources import printable, read_source
from dec.files.tables import read_csv, read_parquet

if TYPE_CHECKING:
    import pandas as pd

__all__ = ["reading_columns", "signs_and_factors", "table_column", "table_name"]

_OURS = ("edge", "sensor", "mounted", "factor")
_NAMES = ("edge", "sensor")
_SMALLEST, _LARGEST = 1e-100, 1e100
_SHOWN = 40
_MOST_PARTS = 2


def reading_columns(
    table: "str | os.PathLike[str] | pd.DataFrame", value: str, decimal: str
) -> tuple[dict[str, Column], Input | None, tuple[str, ...]]:
    """The columns of a table of readings, the file they came from, and what its reader wants known.

    Parameters
    ----------
    table : str, path or pandas DataFrame
        CSV or Parquet by its suffix; "-" is CSV from standard input.
    value : str
        The column of readings, which must be there as well as ``edge``.
    decimal : str
        The decimal sign in CSV.

    Returns
    -------
    columns : dict of name to Column
        ``edge`` and ``sensor`` hold text.
    file : Input or None
    notes : tuple of str

    Raises
    ------
    InputError
        If the table cannot be read, has no rows or lacks a column, or names are floating-point numbers.
    """
    if isinstance(table, str | os.PathLike):
        columns, file, notes = _from_file(table, decimal)
    else:
        columns, file, notes = _from_frame(table), None, ()
    if value in _OURS:
        message = f"value must name the column of readings, got {value!r}, which says something else of a sensor"
        raise InputError(message)
    for name in ("edge", value):
        table_column(columns, name)
    for name in _NAMES:
        if name in columns:
            columns[name] = _as_names(columns[name])
    return columns, file, notes


def table_name(table: object) -> str:
    """What a table of readings is called in the record: the name of its file without folders."""
    if isinstance(table, str | os.PathLike):
        return "standard input" if table == "-" else printable(Path(table).name)
    return "table in memory"


def table_column(columns: dict[str, Column], name: str) -> Column:
    """The named column, or an InputError that lists what there is."""
    if name in columns:
        return columns[name]
    close = difflib.get_close_matches(name, list(columns), n=1)
    hint = f"; did you mean {close[0]!r}?" if close else ""
    source = next(iter(columns.values())).source
    message = f"{source}: a column {name!r} is needed; there are {', '.join(list(columns)[:12])}{hint}"
    raise InputError(message)


def signs_and_factors(columns: dict[str, Column], n_rows: int) -> tuple[IntArray, Column, Column]:
    """How each sensor is mounted, +1 or -1, and what takes its unit to that of the edge: a number, or one over another.

    Parameters
    ----------
    columns : dict of name to Column
    n_rows : int

    Returns
    -------
    mounted : int64 array, shape (n_rows,)
    factor, divisor : Column
        A factor written "1/3.6" is 1 over 3.6; both are 1 where the table says nothing.

    Raises
    ------
    InputError
        If a cell of ``mounted`` is neither +1 nor -1, or a factor is 0 or no number; the message gives its line.
    """
    ones = Column("factor", np.ones(n_rows, dtype=np.int64))
    mounted = np.ones(n_rows, dtype=np.int64)
    if "mounted" in columns:
        column = columns["mounted"]
        way_out = "write -1 where the sensor counts against its edge, +1 or nothing where it counts along it"
        _refuse_odd(column, lambda number: abs(number) == 1, f"must be +1 or -1, got {{}}; {way_out}")
        mounted = np.where(np.nan_to_num(column.numbers()) < 0, -1, 1).astype(np.int64)
    if "factor" not in columns:
        return mounted, ones, ones
    column = columns["factor"]
    way_out = "leave the cell empty where the sensor has the unit of its edge"
    must = f"must be a number other than 0, from {_SMALLEST:g} to {_LARGEST:g} in size, got {{}}; {way_out}"
    _refuse_odd(column, lambda number: _SMALLEST <= abs(number) <= _LARGEST, must)
    cells = column.cells.copy()
    cells[~column.present()] = "1" if cells.dtype == object else 1
    if cells.dtype != object or not any("/" in cell for cell in set(cells.tolist())):
        return mounted, Column("factor", frozen(cells), column.source, column.lines, column.decimal), ones
    parts = [cell.partition("/") for cell in cells.tolist()]
    over, under = (
        Column("factor", frozen(np.array(texts, dtype=object)), column.source, column.lines, column.decimal)
        for texts in ([part[0] for part in parts], [part[2] or "1" for part in parts])
    )
    return mounted, over, under


def _refuse_odd(column: Column, fits: Callable[[float], bool], must: str) -> None:
    """Refuse the first cell that is neither empty nor a number that fits; few different ones are expected."""
    cells = column.cells.tolist()
    odd = {cell for cell in set(cells) if _is_odd(column, cell, fits)}
    if odd:
        row = next(i for i, cell in enumerate(cells) if cell in odd)
        shown = repr(cells[row]) if len(repr(cells[row])) <= _SHOWN else f"{cells[row][:_SHOWN]!r}..."
        message = f"{column.place(row)}: {column.name} {must.format(shown)}"
        raise InputError(message)


def _is_odd(column: Column, cell: str | float, fits: Callable[[float], bool]) -> bool:
    if not isinstance(cell, str):
        return not (np.isnan(cell) or fits(cell))
    if column.decimal != ".":
        cell = "not a number" if "." in cell else cell.replace(column.decimal, ".")
    parts = cell.split("/") if column.name == "factor" else [cell]
    if not cell:
        return False
    if len(parts) > _MOST_PARTS or not all(reads_as_number(part) and _is_usual(float(part)) for part in parts):
        return True
    return not fits(float(parts[0]) / float(parts[-1]) if len(parts) > 1 else float(cell))


def _is_usual(number: float) -> bool:
    return _SMALLEST <= abs(number) <= _LARGEST


def _from_file(path: "str | os.PathLike[str]", decimal: str) -> tuple[dict[str, Column], Input | None, tuple[str, ...]]:
    suffix = ".csv" if path == "-" else Path(path).suffix.lower()
    if suffix not in TABLE_SUFFIXES:
        name = printable(Path(path).name or str(path))
        message = f"{name}: a table of readings must be one of {' '.join(TABLE_SUFFIXES)}, found {suffix or 'none'}"
        raise InputError(message)
    source = read_source(path)
    columns, notes = read_parquet(source) if suffix == ".parquet" else read_csv(source, decimal=decimal)
    return columns, source.as_input(), notes


def _from_frame(frame: "pd.DataFrame") -> dict[str, Column]:
    import pandas as pd

    if not isinstance(frame, pd.DataFrame):
        message = f"readings must be the path of a table or a pandas DataFrame, got {type(frame).__name__}"
        raise InputError(message)
    if not len(frame) or not len(frame.columns):
        message = "readings must have columns and rows, got an empty frame"
        raise InputError(message)
    columns: dict[str, Column] = {}
    for name, series in frame.items():
        if str(name) in columns:
            message = f"readings: column {str(name)!r} stands there twice; headings must differ"
            raise InputError(message)
        columns[str(name)] = Column(str(name), cells_of(series, is_id=False), "readings")
    return columns


def _as_names(column: Column) -> Column:
    """Return the column as text; whole numbers are names too, floating-point numbers are not."""
    if column.cells.dtype == object:
        return column
    if column.cells.dtype.kind == "f" and column.present().any():
        message = f"{column.source}: {column.name} must hold names, found floating-point numbers; give them as text"
        raise InputError(message)
    texts = ["" if column.cells.dtype.kind == "f" else str(cell) for cell in column.cells.tolist()]
    return Column(column.name, np.array(texts, dtype=object), column.source, column.lines)
