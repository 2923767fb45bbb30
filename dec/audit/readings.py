"""What was measured, where, how well, and what is known beside it: the model that both laws read."""

import difflib
import re
from collections.abc import Hashable, Iterable, Mapping
from dataclasses import dataclass
from decimal import Decimal

import numpy as np

from dec.arrays import BoolArray, FloatArray, IntArray, float_array
from dec.calculus.columns import Column, Decimals, reads_as_number
from dec.calculus.dataset import Dataset
from dec.errors import InputError

__all__ = ["Known", "Readings", "known_at_vertices", "named_vertices", "read_readings"]

_PERCENT = re.compile(r"\s*([^%+]*?)\s*%\s*(?:\+\s*([^%]*?)\s*)?")
# Squares of what lies between, and sums of many of them, stay inside float64.
_SMALLEST, _LARGEST = 1e-100, 1e100


@dataclass(frozen=True, slots=True)
class Readings:
    """One number an edge, and how well it is known.

    Attributes
    ----------
    value : float64 array, shape (n1,)
        nan where nothing was measured.
    sd : float64 array, shape (n1,), or None
        Standard deviations in the unit of the values; None where none were given.
    decimals : Decimals
        The readings exactly as written.
    sd_said : str or None
        How the standard deviations were given, for the record.
    """

    value: FloatArray
    sd: FloatArray | None
    decimals: Decimals
    sd_said: str | None

    @property
    def measured(self) -> BoolArray:
        """True where there is a reading; bool array of shape (n1,)."""
        return self.decimals.present


@dataclass(frozen=True, slots=True)
class Known:
    """Numbers known exactly at some vertices: supplies, or fixed potentials.

    Attributes
    ----------
    value : float64 array, shape (n0,)
        0 where nothing is known.
    decimals : Decimals
        The same exactly; ``present`` says where something is known.
    """

    value: FloatArray
    decimals: Decimals


def read_readings(net: Dataset, value: str, sd: object) -> Readings:
    """The readings of a column with their standard deviations.

    Parameters
    ----------
    net : Dataset
    value : str
        Name of an edge column.
    sd : None, float, str or array_like
        A number for all; a text that reads as a number, as a percentage of the reading ("2%", or "2%+0.1" for 2 %
        of the reading plus 0.1), or else as the name of an edge column ("col:5" forces a column); or one number an
        edge.

    Raises
    ------
    InputError
        If a column is missing, a reading is no number or beyond 1e100, or a standard deviation is not positive where
        its edge is measured; the message gives file, line and what was found.
    """
    column = net.column(value, 1)
    numbers, decimals = column.numbers(), column.decimals()
    _refuse_huge(column, numbers)
    deviations, said = _deviations(net, column, numbers, decimals.present, sd)
    return Readings(numbers, deviations, decimals, said)


def named_vertices(net: Dataset, names: str | Iterable[object] | None, what: str) -> IntArray:
    """Vertices given by the name of a yes-or-no node column, or by their ids; ascending.

    Raises
    ------
    InputError
        If the column is missing or holds something else, or an id is not known.
    """
    if names is None:
        return np.empty(0, np.int64)
    if isinstance(names, str):
        ids = net.complex.vertex_ids
        if names not in net.columns.get(0, {}) and ids is not None and names in set(ids):
            message = f"{what} must name a node column or list ids, got {names!r}, which is an id; write [{names!r}]"
            raise InputError(message)
        return np.flatnonzero(net.column(names, 0).flags())
    if not isinstance(names, Iterable):
        message = f"{what} must name a node column or list ids, got {names!r}"
        raise InputError(message)
    return np.unique(_numbers_of(net, list(names), what))


def known_at_vertices(net: Dataset, given: object, what: str) -> Known:
    """Numbers known at vertices, from a node column, a mapping of ids, or one number a vertex.

    An empty cell is not known, which is not the same as zero.

    Raises
    ------
    InputError
        If the column is missing, an id is not known or given twice, or a number is not finite or beyond 1e100.
    """
    n = net.complex.counts[0]
    if isinstance(given, str):
        column = net.column(given, 0)
    elif isinstance(given, Mapping):
        numbers = _numbers_of(net, list(given), what)
        cells = np.full(n, "", dtype=object)
        for number, (name, amount) in zip(numbers.tolist(), given.items(), strict=True):
            if cells[number]:
                message = f"{what} names {name!r} twice; give every vertex one number"
                raise InputError(message)
            cells[number] = _as_written(amount, f"{what} of {name!r}")
        column = Column(what, cells, what)
    else:
        values = float_array(given, what, finite=False)  # type: ignore[arg-type]
        if values.shape != (n,):
            message = f"{what} must give {n} numbers, one a vertex, got shape {values.shape}"
            raise InputError(message)
        column = Column(what, values, what)
    amounts = column.numbers()
    _refuse_huge(column, amounts)
    return Known(np.nan_to_num(amounts), column.decimals())


def _as_written(amount: object, what: str) -> str:
    """Return a number as its decimal text: whole numbers and decimals digit for digit, floats as Python prints them."""
    if isinstance(amount, np.generic):
        amount = amount.item()
    text = repr(amount) if isinstance(amount, float) else str(amount)
    if isinstance(amount, bool) or not isinstance(amount, int | float | str | Decimal) or not reads_as_number(text):
        message = f"{what} must be a finite number, got {amount!r}; leave the vertex out where nothing is known"
        raise InputError(message)
    return text


def _numbers_of(net: Dataset, names: list[object], what: str) -> IntArray:
    ids = net.complex.vertex_ids
    if ids is None:
        return net.complex.vertex_numbers(names)
    number = {name: index for index, name in enumerate(ids)}
    found = []
    for name in names:
        key: Hashable = name if isinstance(name, Hashable) and name in number else str(name)
        if key not in number:
            close = difflib.get_close_matches(str(name), [str(i) for i in ids], n=2)
            hint = f"; close names: {', '.join(repr(c) for c in close)}" if close else "; ids are text, as written"
            message = f"{what} names {name!r}, which is no vertex{hint}"
            raise InputError(message)
        found.append(number[key])
    return np.array(found, dtype=np.int64)


def _refuse_huge(column: Column, numbers: FloatArray) -> None:
    huge = np.abs(numbers) > _LARGEST
    if huge.any():
        row = int(np.argmax(huge))
        message = (
            f"{column.place(row)}: {column.name} must lie within {_LARGEST:g}, got {numbers[row]:g}; "
            "choose a unit that fits"
        )
        raise InputError(message)


def _deviations(
    net: Dataset, column: Column, value: FloatArray, measured: BoolArray, sd: object
) -> tuple[FloatArray | None, str | None]:
    if sd is None:
        return None, None
    if isinstance(sd, str):
        return _deviations_from_text(net, column, value, measured, sd)
    if not isinstance(sd, Mapping) and np.ndim(sd) == 1:  # type: ignore[arg-type]
        array = float_array(sd, "sd", finite=False)  # type: ignore[arg-type]
        if len(array) != len(value):
            message = f"sd must give {len(value)} numbers, one an edge, got {len(array)}"
            raise InputError(message)
        _refuse_not_positive(array, measured, column, "give every measured edge one")
        return array, "one an edge"
    number = float(float_array(sd, "sd", ndim=0, finite=False))  # type: ignore[arg-type]
    return _constant(number, column, value)


def _deviations_from_text(
    net: Dataset, column: Column, value: FloatArray, measured: BoolArray, sd: str
) -> tuple[FloatArray, str]:
    name = sd.removeprefix("col:")
    if name == sd and reads_as_number(sd):
        return _constant(float(sd), column, value)
    percent = _percentage(sd) if name == sd else None
    if percent:
        share, floor = percent
        array = np.abs(value) * (share / 100.0) + floor
        _refuse_not_positive(array, measured, column, f"add a floor to the percentage, as in {share:g}%+0.1")
        return array, f"{share:g} % of the reading" + (f" plus {floor:g}" if floor else "")
    if name == sd and name not in net.columns.get(1, {}):
        columns = ", ".join(net.columns.get(1, {})) or "none"
        message = f"sd must be a number, a percentage (2%, or 2%+0.1) or an edge column ({columns}), got {sd!r}"
        raise InputError(message)
    source = net.column(name, 1)
    array = source.numbers()
    _refuse_not_positive(array, measured, source, "leave the reading empty if the edge is not measured")
    return np.asarray(array), f"column {name}"


def _percentage(text: str) -> tuple[float, float] | None:
    """Return share and floor of a text such as 2%+0.1, or None where it is something else."""
    parts = _PERCENT.fullmatch(text)
    if parts is None or not all(reads_as_number(part) for part in parts.groups("0")):
        return None
    share, floor = (float(part) for part in parts.groups("0"))
    return (share, floor) if 0 <= share <= _LARGEST and 0 <= floor <= _LARGEST else None


def _constant(number: float, column: Column, value: FloatArray) -> tuple[FloatArray, str]:
    if not _SMALLEST <= number <= _LARGEST:
        message = (
            f"sd must be positive{_within(number)}, got {number:g}; leave it out to check the decimals of "
            f"{column.name!r} exactly"
        )
        raise InputError(message)
    return np.full(len(value), number), f"{number:g} for every reading"


def _refuse_not_positive(array: FloatArray, measured: BoolArray, column: Column, way_out: str) -> None:
    bad = measured & ~((array >= _SMALLEST) & (array <= _LARGEST))
    if bad.any():
        row = int(np.argmax(bad))
        found = "nothing" if np.isnan(array[row]) else f"{array[row]:g}"
        must = f"sd must be positive{_within(float(array[row]))} where the edge is measured"
        message = f"{column.place(row)}: {must}, got {found}; {way_out}"
        raise InputError(message)


def _within(number: float) -> str:
    return f" and lie within {_SMALLEST:g} and {_LARGEST:g}" if number > 0 else ""
