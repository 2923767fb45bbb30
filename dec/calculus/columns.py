"""Columns of a table: numbers as they were written, read as floats or as exact decimals."""

import re
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, NoReturn

import numpy as np

from dec.arrays import AnyArray, BoolArray, FloatArray, IntArray, ObjectArray, frozen
from dec.calculus.numerals import plain_decimals
from dec.errors import InputError

if TYPE_CHECKING:
    import pandas as pd

__all__ = ["Column", "Decimals", "cells_of", "reads_as_number"]

_NUMBER = {
    sign: re.compile(rf"\s*[+-]?([0-9]+({re.escape(sign)}[0-9]*)?|{re.escape(sign)}[0-9]+)([eE][+-]?[0-9]+)?\s*")
    for sign in (".", ",")
}
_EITHER_SIGN = re.compile(r"\s*[+-]?[.,]?[0-9][0-9.,]*([eE][+-]?[0-9]+)?\s*")
_YES = frozenset({"1", "yes", "true", "y", "x"})
_NO = frozenset({"0", "no", "false", "n", ""})
_LARGEST_PLACES = 400  # 5e-324 needs 324
_LARGEST_INTEGER, _LARGEST_POWER = 2**62, 18
_SHOWN = 40
_WAY_OUT = "leave the cell empty if nothing was measured"


@dataclass(frozen=True, slots=True)
class Decimals:
    """Readings as whole numbers of one decimal unit: value = integers * 10**-places.

    Attributes
    ----------
    integers : int64 or object array, shape (n,)
        Python integers where int64 would not hold them; 0 where the cell is empty.
    places : int
        Decimal places of the finest reading.
    present : bool array, shape (n,)
        False where the cell is empty.
    """

    integers: IntArray | ObjectArray
    places: int
    present: BoolArray


@dataclass(frozen=True, slots=True)
class Column:
    """One named column of a table.

    Attributes
    ----------
    name : str
        Its heading.
    cells : object array of str, or float64 or int64 array, shape (n,)
        As written. An empty text, or nan, is a cell that holds no reading.
    source : str
        Base name of the file or frame, for messages.
    lines : int64 array, shape (n,), or None
        Line of the file that each row came from.
    decimal : str
        The decimal sign of the text, "." or ",".

    Examples
    --------
    >>> column = Column("flow", np.array(["1.50", "", "-2"], dtype=object), "edges.csv")
    >>> column.numbers()
    array([ 1.5,  nan, -2. ])
    >>> column.decimals().integers, column.decimals().places
    (array([ 150,    0, -200]), 2)
    """

    name: str
    cells: AnyArray
    source: str = "table"
    lines: IntArray | None = None
    decimal: str = "."

    def place(self, row: int) -> str:
        """Where a row stands, in words a user can follow: ``edges.csv line 12``."""
        if self.lines is None:
            return f"{self.source} row {row}"
        return f"{self.source} line {int(self.lines[row])}"

    def present(self) -> BoolArray:
        """True where the cell holds something; bool array of shape (n,)."""
        if self.cells.dtype == object:
            return np.asarray(self.cells.astype(bool), dtype=bool)
        return ~np.isnan(self.cells.astype(np.float64))

    def numbers(self) -> FloatArray:
        """The readings as float64, nan where the cell is empty.

        Returns
        -------
        float64 array, shape (n,), read-only

        Raises
        ------
        InputError
            If a cell is not a finite number in ASCII digits, or has more than 400 characters; the message gives its
            line and its text.
        """
        if self.cells.dtype != object:
            values = self.cells.astype(np.float64)
        else:
            plain = plain_decimals(self.cells, self.decimal)
            quick = plain.is_exact
            values = np.where(quick, plain.floats, np.nan)
            slow = self.present() & ~quick
            if slow.any():
                values[slow] = np.fromiter(map(float, self._texts(slow)), np.float64)
        if np.isinf(values).any():
            row = int(np.flatnonzero(np.isinf(values))[0])
            message = f"{self.place(row)}: {self.name} must be finite, got {_shown(self.cells[row])}; {_WAY_OUT}"
            raise InputError(message)
        frozen(values)
        return values

    def decimals(self) -> Decimals:
        """The readings exactly, as whole numbers of the finest decimal unit written.

        Floats that came without text count as their shortest decimal form, the one Python prints.

        Returns
        -------
        Decimals

        Raises
        ------
        InputError
            As for `numbers`, or if a cell has more than 400 decimal places or an exponent beyond 400.
        """
        present = self.present()
        integers, shifts = self._parts(present)
        finest, coarsest = (int(shifts.max()), int(shifts.min())) if len(shifts) else (0, 0)
        if max(finest, -coarsest) > _LARGEST_PLACES:
            row = int(np.flatnonzero(present)[np.argmax(np.abs(shifts))])
            limits = f"at most {_LARGEST_PLACES} decimal places or final zeros are read"
            message = f"{self.place(row)}: {self.name} {_shown(self.cells[row])} is out of range: {limits}"
            raise InputError(message)
        places = max(finest, 0)
        scaled = _scaled(integers, places - shifts)
        whole = np.zeros(len(self.cells), dtype=scaled.dtype)
        whole[present] = scaled
        return Decimals(frozen(whole), places, frozen(present))

    def _parts(self, present: BoolArray) -> tuple[AnyArray, IntArray]:
        """Return the readings that are there as whole numbers and the decimal places of each."""
        if self.cells.dtype == np.int64:
            return self.cells, np.zeros(len(self.cells), dtype=np.int64)
        texts, sign = self.cells[present], self.decimal
        if texts.dtype != object:
            self.numbers()  # refuses what is not finite
            texts, sign = np.array([repr(value) for value in texts.tolist()], dtype=object), "."
        plain = plain_decimals(texts, sign)
        slow = np.flatnonzero(~plain.is_plain)
        if not len(slow):
            return plain.integers, plain.places
        self.numbers()  # refuses what is no number
        split = [_mantissa_and_places(text.replace(sign, ".")) for text in texts[slow].tolist()]
        small = all(abs(number) < _LARGEST_INTEGER for number, _ in split)
        integers: AnyArray = plain.integers if small else plain.integers.astype(object)
        integers[slow] = [number for number, _ in split]
        plain.places[slow] = [min(max(places, -_LARGEST_INTEGER), _LARGEST_INTEGER) for _, places in split]
        return integers, plain.places

    def flags(self) -> BoolArray:
        """The cells as yes or no; bool array of shape (n,).

        Raises
        ------
        InputError
            If a cell is none of yes, true, x, 1, no, false, 0 or empty.
        """
        texts = self.cells.tolist()
        if self.cells.dtype != object:
            texts = [str(int(v)) if v in (0.0, 1.0) else str(v) for v in np.nan_to_num(self.cells).tolist()]
        meaning = {text: text.strip().lower() for text in set(texts)}
        unclear = {text for text, word in meaning.items() if word not in _YES and word not in _NO}
        if unclear:
            row = next(row for row, text in enumerate(texts) if text in unclear)
            allowed = "yes or no (or 1, 0, true, false, x, empty)"
            message = f"{self.place(row)}: {self.name} must be {allowed}, got {_shown(meaning[texts[row]])}"
            raise InputError(message)
        yes = {text for text, word in meaning.items() if word in _YES}
        return np.fromiter(map(yes.__contains__, texts), bool, len(texts))

    def _texts(self, present: BoolArray) -> list[str]:
        """Return the cells that hold something, each a number with "." as its decimal sign."""
        cells = self.cells[present].tolist()
        number = _NUMBER[self.decimal]
        if max(map(len, cells), default=0) > _LARGEST_PLACES or not all(map(number.fullmatch, cells)):
            row = next(r for r in np.flatnonzero(present) if self._is_odd(self.cells[r]))
            self._refuse(int(row))
        return cells if self.decimal == "." else [cell.replace(self.decimal, ".") for cell in cells]

    def _is_odd(self, cell: str) -> bool:
        return len(cell) > _LARGEST_PLACES or _NUMBER[self.decimal].fullmatch(cell) is None

    def _refuse(self, row: int) -> NoReturn:
        cell, start = self.cells[row], f"{self.place(row)}: {self.name} {_shown(self.cells[row])}"
        other = "," if self.decimal == "." else "."
        if len(cell) > _LARGEST_PLACES:
            message = f"{start} has {len(cell)} characters; numbers of at most {_LARGEST_PLACES} are read"
        elif other in cell and _EITHER_SIGN.fullmatch(cell):
            message = (
                f"{start} can be read two ways; the decimal sign is {self.decimal} (--decimal), and signs between "
                "thousands are not read"
            )
        else:
            message = f"{start} is not a number; {_WAY_OUT}"
        raise InputError(message)


def reads_as_number(text: str) -> bool:
    """Whether a text is a decimal number with a point, as `Column` reads them.

    Examples
    --------
    >>> reads_as_number("-1.5e3"), reads_as_number("1_000"), reads_as_number("nan")
    (True, False, False)
    """
    return len(text) <= _LARGEST_PLACES and _NUMBER["."].fullmatch(text) is not None


def _shown(cell: object) -> str:
    text = repr(cell) if isinstance(cell, str) else str(cell)
    return text if len(text) <= _SHOWN else f"{text[:_SHOWN]}..."


def _mantissa_and_places(text: str) -> tuple[int, int]:
    """Return the decimal text as integer and decimal places: "1.50" is (150, 2), "2e3" is (2, -3)."""
    head, _, exponent = text.lower().partition("e")
    whole, _, fraction = head.strip().partition(".")
    return int(whole + fraction), len(fraction) - (int(exponent) if exponent else 0)


def _scaled(integers: AnyArray, zeros: IntArray) -> AnyArray:
    """Return integers * 10**zeros, as int64 where all of them stay below 2**62 in size, or else as Python integers."""
    if integers.dtype == np.int64:
        used = np.where(integers == 0, 0, np.minimum(zeros, _LARGEST_POWER + 1))
        size = np.abs(integers.astype(np.float64)) * 10.0**used
        # floats are right to a relative 1e-15 here, and the room is a factor 2
        if (used <= _LARGEST_POWER).all() and size.max(initial=0.0) < _LARGEST_INTEGER / 2:
            whole: AnyArray = integers * 10**used
            return whole
    exact = [number * 10**power for number, power in zip(integers.tolist(), zeros.tolist(), strict=True)]
    fits = all(abs(number) < _LARGEST_INTEGER for number in exact)
    return np.array(exact, dtype=np.int64 if fits else object)


def cells_of(series: "pd.Series[Any]", *, is_id: bool) -> AnyArray:
    """The cells of a pandas series, for a Column.

    Parameters
    ----------
    series : pandas Series
    is_id : bool
        Whether it holds names, which are text always.

    Returns
    -------
    float64, int64 or object array of str, shape (n,)
        Floats and integers as they are, and everything else, or what int64 does not hold, as text. A 32-bit float
        counts as the shortest decimal that prints it, 0.1 and not 0.10000000149.

    Examples
    --------
    >>> import pandas as pd
    >>> cells_of(pd.Series([0.1, None], dtype="float32"), is_id=False)
    array([0.1, nan])
    """
    kind = getattr(series.dtype, "kind", "O")
    blank = series.isna().to_numpy()
    if not is_id and kind == "f":
        if getattr(series.dtype, "itemsize", 8) < 8:
            return series.to_numpy(dtype=np.float32, na_value=np.nan).astype(str).astype(np.float64)
        return series.to_numpy(dtype=np.float64, na_value=np.nan, copy=True)
    if not is_id and kind in "iu" and not blank.any() and (kind == "i" or not len(series) or series.max() < 2**63):
        return series.to_numpy(dtype=np.int64, copy=True)
    cells = series.to_numpy(dtype=object, copy=True)
    cells[blank] = ""
    if set(map(type, cells.tolist())) <= {str}:
        return cells
    return np.array(list(map(str, cells.tolist())), dtype=object)
