"""What was measured, where, how well, and what is known beside it: the model that both laws read."""

from collections.abc import Hashable, Iterable, Mapping
from dataclasses import dataclass
from decimal import Decimal

import numpy as np

from dec.arrays import BoolArray, FloatArray, IntArray, ObjectArray, float_array
from dec.audit.exactly import as_floats, common_unit
from dec.audit.given.deviations import Rows, deviations, refuse_huge
from dec.audit.names import close_names
from dec.calculus.columns import Column, Decimals, reads_as_number
from dec.calculus.dataset import Dataset, Input
from dec.errors import InputError

__all__ = ["Known", "Readings", "Repeats", "known_at_vertices", "named_vertices", "read_readings", "with_storage"]


@dataclass(frozen=True, slots=True)
class Repeats:
    """The rows of a table of readings, as they were applied; m rows hold a reading.

    Attributes
    ----------
    edge : int64 array, shape (m,)
        Number of the edge that each row reads.
    sensor : object array of str, shape (m,)
        Empty where the table names none.
    raw : float64 array, shape (m,)
        As the sensor shows it, in its own unit.
    mounted : int64 array, shape (m,)
        +1 along the edge, -1 against it.
    factor : float64 array, shape (m,)
        Takes the sensor's unit to that of the edge.
    value : float64 array, shape (m,)
        raw * mounted * factor, in the unit and the direction of the edge.
    sd : float64 array, shape (m,), or None
        In the unit of the edge.
    dof : int
        Independent checks among readings of one edge: one for each reading beyond the first.
    chi_square : float
        Sum over rows of (value - mean of its edge)^2 / sd^2.
    input : Input or None
        The file, with its hash; None for a frame from memory.
    notes : tuple of str
        What the reader of the file wants known.
    """

    edge: IntArray
    sensor: ObjectArray
    raw: FloatArray
    mounted: IntArray
    factor: FloatArray
    value: FloatArray
    sd: FloatArray | None
    dof: int
    chi_square: float
    input: Input | None
    notes: tuple[str, ...]


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
        The readings exactly as written; the mean of several readings of one edge is rounded to the nearest float.
    sd_said : str or None
        How the standard deviations were given, for the record.
    repeats : Repeats or None
        The rows behind the readings, where they came from a table of their own.
    """

    value: FloatArray
    sd: FloatArray | None
    decimals: Decimals
    sd_said: str | None
    repeats: Repeats | None = None

    @property
    def measured(self) -> BoolArray:
        """True where there is a reading; bool array of shape (n1,)."""
        return self.decimals.present


@dataclass(frozen=True, slots=True)
class Known:
    """Numbers known at some vertices, exactly or as measured: supplies, or fixed potentials.

    Attributes
    ----------
    value : float64 array, shape (n0,)
        0 where nothing is known.
    decimals : Decimals
        The same exactly; ``present`` says where something is known.
    sd : float64 array, shape (n0,), or None
        Standard deviations in the unit of the numbers: positive where a number was measured, 0 where it is exact and
        where nothing is known; None where all are exact.
    sd_said : str or None
        How the standard deviations were given, for the record.
    """

    value: FloatArray
    decimals: Decimals
    sd: FloatArray | None = None
    sd_said: str | None = None


def read_readings(net: Dataset, value: str, sd: object) -> Readings:
    """The readings of a column with their standard deviations.

    Parameters
    ----------
    net : Dataset
    value : str
        Name of an edge column.
    sd : None, float, str or array_like
        A number for all; a text that reads as a number, as a percentage of the reading ("2%", or "2%+0.1" for 2 %
        of the reading plus 0.1), or else as the name of an edge column ("col:5" forces a column); one number an
        edge; or a `meter_class` of a preset.

    Returns
    -------
    Readings

    Raises
    ------
    InputError
        If a column is missing, a reading is no number or beyond 1e100, or a standard deviation is not positive where
        its edge is measured; the message gives file, line and what was found.
    """
    column = net.column(value, 1)
    numbers, decimals = column.numbers(), column.decimals()
    refuse_huge(column, numbers)
    if sd is None:
        return Readings(numbers, None, decimals, None)
    edges = net.columns.get(1, {})
    found = deviations(Rows(column, numbers, decimals.present, edges, lambda name: net.column(name, 1)), sd)
    return Readings(numbers, found.sd, decimals, found.said)


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


def known_at_vertices(net: Dataset, given: object, what: str, sd: object = None) -> Known:
    """Numbers known at vertices, from a node column, a mapping of ids, or one number a vertex.

    An empty cell is not known, which is not the same as zero.

    Parameters
    ----------
    net : Dataset
    given : str, mapping of id to number, or array_like of shape (n0,)
    what : str
        What the caller calls the numbers: "supply", "fixed".
    sd : None, float, str, mapping of id to number, or array_like of shape (n0,)
        Standard deviations: one number for all that are known; a text that reads as a number, as a percentage of the
        number ("2%", "2%+0.1"), or else as the name of a node column ("col:5" forces a column); or some vertices by
        id. 0, an empty cell and a vertex that a mapping leaves out are exact, and so is a share of 0.

    Returns
    -------
    Known

    Raises
    ------
    InputError
        If the column is missing, an id is not known or given twice, a number is not finite or beyond 1e100, a standard
        deviation is negative, or one is given by id where no number is known.
    """
    column = _vertex_column(net, given, what)
    amounts, decimals = column.numbers(), column.decimals()
    refuse_huge(column, amounts)
    value = np.nan_to_num(amounts)
    if sd is None:
        return Known(value, decimals)
    name, said = f"{what}_sd (--{what}-sd)", None
    if isinstance(sd, Mapping):
        sd, said = _sd_by_id(net, sd, name, what, decimals), "by id"
    rows = Rows(
        column, value, decimals.present, net.columns.get(0, {}), lambda name: net.column(name, 0), one="a vertex",
        where=f"where {what} is known", kind="a node column", name=name, zero_is_exact=True,
    )  # fmt: skip
    found = deviations(rows, sd)
    return Known(value, decimals, np.where(decimals.present, found.sd, 0.0), said or found.said)


def with_storage(supply: Known | None, storage: Known) -> Known:
    """What is put in at vertices once the rise of their stock is taken out: supply minus storage, exactly.

    Parameters
    ----------
    supply : Known or None
        What is put in; None where nothing is put in anywhere, which is then known of every vertex.
    storage : Known
        Rise of the stock of each vertex over the interval, as a flow in the unit of the supply; a fall is negative.
        Where nothing is known there is no stock.

    Returns
    -------
    Known
        Known where the supply is: what is not known stays so, whatever is stored. Variances are added.

    Examples
    --------
    >>> import pandas as pd
    >>> net = Dataset.from_frames(pd.DataFrame({"from": ["T"], "to": ["J"]}))
    >>> supply = known_at_vertices(net, {"T": "5.2", "J": "-4.1"}, "supply", sd={"T": 0.3})
    >>> left = with_storage(supply, known_at_vertices(net, {"T": "1.15"}, "storage", sd=0.4))
    >>> left.value, left.sd
    (array([ 4.05, -4.1 ]), array([0.5, 0. ]))
    """
    n = len(storage.value)
    if supply is None:
        supply = Known(np.zeros(n), Decimals(np.zeros(n, dtype=np.int64), 0, np.ones(n, dtype=bool)))
    present = supply.decimals.present
    (put_in, risen), places = common_unit(supply.decimals, storage.decimals)
    left = np.where(present, put_in - risen, 0)
    decimals = Decimals(left, places, present)
    said = "; ".join(
        f"{word}: {known.sd_said}" for word, known in (("supply", supply), ("storage", storage)) if known.sd_said
    )
    if supply.sd is None and storage.sd is None:
        return Known(as_floats(left, places), decimals)
    nothing = np.zeros(n)
    sd = np.hypot(nothing if supply.sd is None else supply.sd, nothing if storage.sd is None else storage.sd)
    return Known(as_floats(left, places), decimals, np.where(present, sd, 0.0), said or None)


def _vertex_column(net: Dataset, given: object, what: str) -> Column:
    n = net.complex.counts[0]
    if isinstance(given, str):
        return net.column(given, 0)
    if isinstance(given, Mapping):
        return Column(what, _cells_by_id(net, given, what), what)
    values = float_array(given, what, finite=False)  # type: ignore[arg-type]
    if values.shape != (n,):
        message = f"{what} must give {n} numbers, one a vertex, got shape {values.shape}"
        raise InputError(message)
    return Column(what, values, what)


def _cells_by_id(net: Dataset, given: Mapping[object, object], what: str) -> ObjectArray:
    """Return one text a vertex, empty where the mapping says nothing."""
    numbers = _numbers_of(net, list(given), what)
    cells = np.full(net.complex.counts[0], "", dtype=object)
    for number, (name, amount) in zip(numbers.tolist(), given.items(), strict=True):
        if cells[number]:
            message = f"{what} names {name!r} twice; give every vertex one number"
            raise InputError(message)
        cells[number] = _as_written(amount, f"{what} of {name!r}")
    return cells


def _sd_by_id(net: Dataset, sd: Mapping[object, object], name: str, what: str, decimals: Decimals) -> FloatArray:
    cells = _cells_by_id(net, sd, name)
    given = cells != ""
    idle = np.flatnonzero(given & ~decimals.present)
    if len(idle):
        ids = net.complex.vertex_ids
        vertex = int(idle[0]) if ids is None else ids[idle[0]]
        message = f"{name} names {vertex!r}, where no {what} is known; give the number too, or leave its sd out"
        raise InputError(message)
    return np.where(given, Column(name, cells, name).numbers(), 0.0)


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
            hint = close_names(str(name), [str(i) for i in ids]) or "ids are text, as written"
            message = f"{what} names {name!r}, which is no vertex; {hint}"
            raise InputError(message)
        found.append(number[key])
    return np.array(found, dtype=np.int64)
