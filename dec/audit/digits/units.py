"""The unit that published values are whole multiples of: one for each component of a network."""

from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from dec.arrays import FloatArray, IntArray, ObjectArray
from dec.calculus.columns import Column, Decimals, reads_as_number
from dec.calculus.dataset import Dataset
from dec.errors import InputError

__all__ = ["Units", "read_units"]

_MOST_PLACES = 30


@dataclass(frozen=True, slots=True)
class Units:
    """One unit for each component: integer * 10**-places.

    Attributes
    ----------
    label : int64 array, shape (n0,)
        Component of each vertex.
    integers : tuple of int
        Of each component; positive.
    places : tuple of int
        Decimal places of each component's published values.
    """

    label: IntArray
    integers: tuple[int, ...]
    places: tuple[int, ...]

    def size(self, component: int) -> Fraction:
        """The unit of a component, exactly."""
        return Fraction(self.integers[component], 10 ** self.places[component])

    def at(self, vertices: IntArray) -> FloatArray:
        """The unit at each of the vertices, as the nearest float; float64 array of their shape."""
        sizes = np.array([float(self.size(c)) for c in range(len(self.integers))], dtype=np.float64)
        return np.asarray(sizes[self.label[vertices]], dtype=np.float64)

    def counted(self, amounts: Decimals) -> tuple[ObjectArray, ObjectArray]:
        """How many units each of the numbers at vertices is, as exact quotients of two Python integers.

        Parameters
        ----------
        amounts : Decimals, shape (n0,)

        Returns
        -------
        above, below : object arrays of int, shape (n0,)
        """
        powers = np.array([10**places for places in self.places], dtype=object)[self.label]
        sizes = np.array(self.integers, dtype=object)[self.label]
        return amounts.integers.astype(object) * powers, sizes * 10**amounts.places

    def texts(self, whole: IntArray, vertices: IntArray) -> list[str]:
        """Whole numbers of units as exact decimals, with as many places as the unit has.

        Parameters
        ----------
        whole : int64 array, shape (k,)
        vertices : int64 array, shape (k,)
            A vertex of the component of each.

        Examples
        --------
        >>> Units(np.array([0, 1]), (5, 10), (2, 0)).texts(np.array([-3, 4]), np.array([0, 1]))
        ['-0.15', '40']
        """
        found = []
        for number, component in zip(whole.tolist(), self.label[vertices].tolist(), strict=True):
            places = self.places[component]
            size = abs(number) * self.integers[component]
            digits = f"{size:0{places + 1}d}"
            text = f"{digits[:-places]}.{digits[-places:]}" if places else digits
            found.append(f"-{text}" if number < 0 else text)
        return found


def read_units(data: Dataset, unit: object) -> Units:
    """The unit of each component; where edges state several, the coarsest.

    Parameters
    ----------
    data : Dataset
        A network.
    unit : int, float or str
        A positive number for all; or the name of an edge column of positive numbers, empty where an edge states none
        ("col:5" forces a column).

    Raises
    ------
    InputError
        If a unit is not positive, has more than 30 decimal places, or no edge of a component states one.

    Examples
    --------
    >>> import pandas as pd
    >>> rows = {"from": ["A", "B", "X"], "to": ["B", "C", "Y"], "step": ["0.01", "0.5", "10"]}
    >>> units = read_units(Dataset.from_frames(pd.DataFrame(rows)), "step")
    >>> [units.size(component) for component in range(2)]
    [Fraction(1, 2), Fraction(10, 1)]
    """
    label, count = data.complex.component_labels, data.complex.n_components
    if isinstance(unit, bool) or not isinstance(unit, str | int | float | np.number):
        message = f"digits must be a positive number or the name of an edge column, got {unit!r}"
        raise InputError(message)
    text = unit if isinstance(unit, str) else repr(float(unit) if isinstance(unit, np.floating) else unit)
    if reads_as_number(text):
        integers, places = _integers(Column("digits", np.array([text], dtype=object), "--digits"))
        return Units(label, (integers[0],) * count, (places[0],) * count)
    heading = text.removeprefix("col:")
    if heading == text and heading not in data.columns.get(1, {}):
        columns = ", ".join(data.columns.get(1, {})) or "none"
        message = f"digits must be a positive decimal, as 0.1, or an edge column ({columns}), got {text!r:.60}"
        raise InputError(message)
    column = data.column(heading, 1)
    integers, places = _integers(column)
    chosen: list[Fraction | None] = [None] * count
    finest = [0] * count
    stated = np.flatnonzero(column.present())
    for component, integer, place in zip(label[data.complex.tail[stated]].tolist(), integers, places, strict=True):
        size, before = Fraction(integer, 10**place), chosen[component]
        if before is None or size > before:
            chosen[component], finest[component] = size, place
    if None in chosen:
        vertex = int(np.argmax(label == chosen.index(None)))
        ids = data.complex.vertex_ids
        name = vertex if ids is None else ids[vertex]
        message = (
            f"column {column.name} must state a unit on an edge of every component, that of vertex {name!r} has none; "
            "fill in one of its cells"
        )
        raise InputError(message)
    return Units(label, tuple(int(s * 10**p) for s, p in zip(chosen, finest, strict=True) if s), tuple(finest))


def _integers(column: Column) -> tuple[list[int], list[int]]:
    """Return each unit that is stated as a whole number and its decimal places."""
    read = column.decimals()
    rows = np.flatnonzero(read.present)
    integers, places = [], []
    for row in rows.tolist():
        number, place = int(read.integers[row]), read.places
        while place and number % 10 == 0 and number:
            number, place = number // 10, place - 1
        if number <= 0 or place > _MOST_PLACES:
            what = "positive" if number <= 0 else f"a decimal of at most {_MOST_PLACES} places"
            where = "" if column.source == "--digits" else f"{column.place(row)}: "
            message = f"{where}the unit of published digits must be {what}, got {column.cells[row]}"
            raise InputError(message)
        integers.append(number)
        places.append(place)
    return integers, places
