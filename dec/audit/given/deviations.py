"""How well numbers are known: every form in which standard deviations are given."""

import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Literal

import numpy as np

from dec.arrays import BoolArray, FloatArray, float_array
from dec.calculus.columns import Column, reads_as_number
from dec.errors import InputError

__all__ = ["Deviations", "Rows", "deviations", "percentage", "refuse_huge", "refuse_not_positive"]

_PERCENT = re.compile(r"\s*([^%+]*?)\s*%\s*(?:\+\s*([^%]*?)\s*)?")
# Squares of what lies between, and sums of many of them, stay inside float64.
_SMALLEST, _LARGEST = 1e-100, 1e100
_LEAVE = "leave the reading empty if nothing was measured"
_EMPTY = {"an edge": "leave the reading empty if the edge is not measured"}


@dataclass(frozen=True, slots=True)
class Rows:
    """Numbers whose standard deviations are wanted, one a row of some table.

    Attributes
    ----------
    column : Column
        The numbers themselves; says where a row stands.
    value : float64 array, shape (n,)
    present : bool array, shape (n,)
        Where there is a number.
    table : mapping of name to Column
        The columns that a text may name.
    find : callable of name to Column
        Looks one up; raises InputError where there is none.
    one : str
        What a row is, for messages: "an edge", "a vertex", "a row".
    where : str
        Where a standard deviation must be: "where the edge is measured".
    kind : str
        What a column of the table is called: "an edge column".
    name : str
        What the caller calls the standard deviations.
    zero_is_exact : bool
        Whether 0, or an empty cell, says that a number is exact; refused otherwise.
    """

    column: Column
    value: FloatArray
    present: BoolArray
    table: Mapping[str, Column]
    find: Callable[[str], Column]
    one: str = "an edge"
    where: str = "where the edge is measured"
    kind: str = "an edge column"
    name: str = "sd"
    zero_is_exact: bool = False


@dataclass(frozen=True, slots=True)
class Deviations:
    """Standard deviations, how they were given in words, and in which form.

    Attributes
    ----------
    sd : float64 array, shape (n,)
        In the unit of the numbers.
    said : str
    form : "number", "percentage" or "each"
        One number for all; a share of each number; one for each, as a column or an array.
    """

    sd: FloatArray
    said: str
    form: Literal["number", "percentage", "each"]


def deviations(rows: Rows, sd: object) -> Deviations:
    """The standard deviations of numbers, from any of the forms in which they may be given.

    Parameters
    ----------
    rows : Rows
    sd : float, str, array_like of shape (n,) or callable of Rows to Deviations
        A number for all; a text that reads as a number, as a percentage ("2%", or "2%+0.1" for 2 % of the number plus
        0.1), or else as the name of a column ("col:5" forces a column); one number a row; or a rule that says them.

    Returns
    -------
    Deviations

    Raises
    ------
    InputError
        If the form is none of these, or a standard deviation is not positive where there is a number (nor 0, where
        that says exact).

    Examples
    --------
    >>> flow = Column("flow", np.array([5.0, -2.0]))
    >>> found = deviations(Rows(flow, flow.numbers(), flow.present(), {}, lambda name: flow), "10%+0.5")
    >>> found.sd, found.said
    (array([1. , 0.7]), '10 % of the reading plus 0.5')
    """
    if isinstance(sd, str):
        return _from_text(rows, sd)
    if callable(sd):
        found: Deviations = sd(rows)
        refuse_not_positive(rows, found.sd, rows.column, "leave the reading out, or choose another rule")
        return found
    array = float_array(sd, rows.name, finite=False)  # type: ignore[arg-type]
    if array.ndim != 1:
        return _constant(rows, float(float_array(sd, rows.name, ndim=0, finite=False)))  # type: ignore[arg-type]
    if len(array) != len(rows.value):
        message = f"{rows.name} must give {len(rows.value)} numbers, one {rows.one}, got {len(array)}"
        raise InputError(message)
    measured = "measured edge" if rows.one == "an edge" else rows.one.split()[-1]
    return Deviations(_settled(rows, array, rows.column, f"give every {measured} one"), f"one {rows.one}", "each")


def percentage(text: str) -> tuple[float, float] | None:
    """Share and floor of a text such as 2%+0.1; None where it is something else.

    Examples
    --------
    >>> percentage("2%+0.1"), percentage("2%"), percentage("2")
    ((2.0, 0.1), (2.0, 0.0), None)
    """
    parts = _PERCENT.fullmatch(text)
    if parts is None or not all(reads_as_number(part) for part in parts.groups("0")):
        return None
    share, floor = (float(part) for part in parts.groups("0"))
    return (share, floor) if 0 <= share <= _LARGEST and 0 <= floor <= _LARGEST else None


def refuse_huge(column: Column, numbers: FloatArray) -> None:
    """Return quietly, or raise InputError with the place of the first number beyond 1e100."""
    huge = np.abs(numbers) > _LARGEST
    if huge.any():
        row = int(np.argmax(huge))
        message = (
            f"{column.place(row)}: {column.name} must lie within {_LARGEST:g}, got {numbers[row]:g}; "
            "choose a unit that fits"
        )
        raise InputError(message)


def refuse_not_positive(rows: Rows, array: FloatArray, source: Column, way_out: str) -> None:
    """Return quietly, or raise InputError with the place of the first standard deviation that cannot be used."""
    fits = (array >= _SMALLEST) & (array <= _LARGEST)
    bad = rows.present & ~(fits | (array == 0) if rows.zero_is_exact else fits)
    if bad.any():
        row = int(np.argmax(bad))
        found = "nothing" if np.isnan(array[row]) else f"{array[row]:g}"
        must = f"{rows.name} must be {_positive(rows, float(array[row]))} {rows.where}"
        message = f"{source.place(row)}: {must}, got {found}; {way_out}"
        raise InputError(message)


def _from_text(rows: Rows, sd: str) -> Deviations:
    name = sd.removeprefix("col:")
    if name == sd and reads_as_number(sd):
        return _constant(rows, float(sd))
    parts = percentage(sd) if name == sd else None
    if parts:
        share, floor = parts
        array = np.abs(rows.value) * (share / 100.0) + floor
        way_out = f"add a floor to the percentage, as in {share:g}%+0.1"
        said = f"{share:g} % of the {_number(rows)}" + (f" plus {floor:g}" if floor else "")
        if rows.zero_is_exact and not floor:
            said += ", exact where that is 0"
        return Deviations(_settled(rows, array, rows.column, way_out), said, "percentage")
    if name == sd and name not in rows.table:
        columns = ", ".join(rows.table) or "none"
        message = f"{rows.name} must be a number, a percentage (2%, or 2%+0.1) or {rows.kind} ({columns}), got {sd!r}"
        raise InputError(message)
    source = rows.find(name)
    way_out = "leave the cell empty where the number is exact" if rows.zero_is_exact else _EMPTY.get(rows.one, _LEAVE)
    return Deviations(_settled(rows, source.numbers(), source, way_out), f"column {name}", "each")


def _constant(rows: Rows, number: float) -> Deviations:
    if not (_SMALLEST <= number <= _LARGEST or (rows.zero_is_exact and number == 0)):
        way_out = f"leave it out to check the decimals of {rows.column.name!r} exactly"
        if rows.zero_is_exact:
            way_out = f"leave it out where {rows.column.name!r} is exact"
        message = f"{rows.name} must be {_positive(rows, number)}, got {number:g}; {way_out}"
        raise InputError(message)
    return Deviations(np.full(len(rows.value), number), f"{number:g} for every {_number(rows)}", "number")


def _settled(rows: Rows, array: FloatArray, source: Column, way_out: str) -> FloatArray:
    """Return the array, refused where it cannot be used; an empty cell is 0 where that says exact."""
    if rows.zero_is_exact:
        array = np.where(np.isnan(array), 0.0, array)
    refuse_not_positive(rows, array, source, way_out)
    return np.asarray(array)


def _number(rows: Rows) -> str:
    return "number" if rows.zero_is_exact else "reading"


def _positive(rows: Rows, number: float) -> str:
    within = f" and lie within {_SMALLEST:g} and {_LARGEST:g}" if number > 0 else ""
    return ("0 or positive" if rows.zero_is_exact else "positive") + within
