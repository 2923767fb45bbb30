"""A table of readings, one row each: turned and scaled as mounted, several of one edge made one."""

import os
from typing import TYPE_CHECKING, Any

import numpy as np

from dec.arrays import AnyArray, BoolArray, FloatArray, IntArray, ObjectArray, frozen
from dec.audit.exactly import as_floats, common_unit
from dec.audit.given.deviations import Rows, deviations, refuse_huge, refuse_not_positive
from dec.audit.given.readings import Readings, Repeats
from dec.audit.given.repeat_tables import reading_columns, signs_and_factors, table_column
from dec.audit.names import close_names, counted, edge_names, few
from dec.calculus.columns import Column, Decimals
from dec.calculus.complex import Complex
from dec.calculus.dataset import Dataset
from dec.errors import InputError

if TYPE_CHECKING:
    import pandas as pd

__all__ = ["applied_notes", "combined_readings"]

_ROOM = 2**62
_KEPT = 20  # digits of a quotient without end


def combined_readings(
    net: Dataset, table: "str | os.PathLike[str] | pd.DataFrame", value: str, sd: object, *, decimal: str = "."
) -> Readings:
    """The readings of a table of sensors, several of one edge combined into one.

    Parameters
    ----------
    net : Dataset
        A network whose edge table has ids.
    table : str, path or pandas DataFrame
        CSV or Parquet, one row a reading: ``edge`` (id of an edge); optionally ``sensor`` (its name), ``mounted`` (-1
        where it counts against the edge, +1 or empty along it) and ``factor`` (takes the sensor's unit to that of the
        edge, as "0.001" or "1/3.6"; empty is 1); and the column of readings. An empty reading is not there.
    value : str
        Name of the column of readings.
    sd : None, float, str or array_like of shape (m,)
        A number for all, in the unit of the edges whatever the factor; or, in the sensor's own unit and scaled with
        its factor, a percentage of the reading ("2%", "2%+0.1"), a column of the table ("col:5" forces a column), or
        one number a row. A `meter_class` of a preset is in the sensor's own unit too.
    decimal : str
        The decimal sign in a CSV table, "." or ",".

    Returns
    -------
    Readings
        A single reading is raw * mounted * factor, exactly; a product without end is rounded at its 20th digit.
        Several of one edge are their mean, weighted by 1 / sd^2, with sd 1 / sqrt(sum 1 / sd^2), and ``repeats`` holds
        the rows and what they say about each other.

    Raises
    ------
    InputError
        If the table cannot be read, a column is missing, an edge is not known, a sensor is named twice, `mounted` is
        not +1 or -1, a factor is 0 or no number, or one edge has several readings without standard deviations; the
        message gives file and line.

    Notes
    -----
    A factor scales the standard deviation with its magnitude: law of propagation of uncertainty, JCGM 100:2008 (GUM),
    section 5.1.2. Weighted mean: Bevington and Robinson, Data Reduction and Error Analysis, 3rd ed. 2003, chapter 4.

    Examples
    --------
    >>> import pandas as pd
    >>> net = Dataset.from_frames(pd.DataFrame({"id": ["p", "q"], "from": ["A", "B"], "to": ["B", "C"]}))
    >>> table = pd.DataFrame({"edge": ["p", "p", "q"], "mounted": ["", "-1", ""], "factor": ["", "", "3.6"],
    ...                       "flow": ["5.0", "-5.4", "1.5"]})
    >>> readings = combined_readings(net, table, "flow", 0.2)
    >>> readings.value, readings.repeats.dof, round(readings.repeats.chi_square, 9)
    (array([5.2, 5.4]), 1, 2.0)
    """
    columns, file, notes = reading_columns(table, value, decimal)
    column = columns[value]
    raw, exactly = column.numbers(), column.decimals()
    refuse_huge(column, raw)
    edge = _edges(net, columns["edge"])
    sensor = columns["sensor"].cells if "sensor" in columns else np.full(len(raw), "", dtype=object)
    _refuse_double_sensor(columns, sensor)
    mounted, factor, divisor = signs_and_factors(columns, len(raw))
    amount = _divided(_scaled(exactly, mounted, factor.decimals()), divisor.decimals())
    scale = factor.numbers() / divisor.numbers()
    refuse_huge(Column(f"{value} times factor", column.cells, column.source, column.lines), raw * scale)
    deviation, said = _row_sd(columns, column, raw, exactly.present, scale, sd)
    if deviation is None:
        _refuse_unweighed(net.complex, column, edge, exactly.present)
    rows = np.flatnonzero(exactly.present)
    spread = None if deviation is None else deviation[rows]
    combined, dof, chi_square = _combined(net.complex, column, edge[rows], amount, rows, spread)
    repeats = Repeats(
        edge[rows], sensor[rows], raw[rows], mounted[rows], scale[rows],
        as_floats(amount.integers[rows], amount.places), spread, dof, chi_square, file, notes,
    )  # fmt: skip
    return Readings(*combined, said, repeats)


def applied_notes(network: Complex, repeats: Repeats) -> list[str]:
    """What was done to the readings of a table, in sentences: sensors turned, factors, means.

    Parameters
    ----------
    network : Complex
    repeats : Repeats

    Returns
    -------
    list of str
        Empty where every row was taken as it stands.

    Examples
    --------
    >>> import pandas as pd
    >>> net = Dataset.from_frames(pd.DataFrame({"id": ["p", "q"], "from": ["A", "B"], "to": ["B", "C"]}))
    >>> table = pd.DataFrame({"edge": ["p", "q"], "sensor": ["S3", "S4"], "mounted": ["-1", ""], "flow": [-5, 4]})
    >>> applied_notes(net.complex, combined_readings(net, table, "flow", 1).repeats)
    ['sensor S3 is mounted the other way: its readings count negative (1 row)']
    """
    notes = []
    turned = np.flatnonzero(repeats.mounted < 0)
    if len(turned):
        names = _sensor_names(network, repeats, turned)
        rows = counted(len(turned), "row", "rows")
        if len(names) == 1:
            notes.append(f"{names[0]} is mounted the other way: its readings count negative ({rows})")
        else:
            notes.append(
                f"{len(names)} sensors are mounted the other way: their readings count negative ({few(names)}; {rows})"
            )
    for factor in np.unique(repeats.factor[repeats.factor != 1]).tolist():
        names = _sensor_names(network, repeats, np.flatnonzero(repeats.factor == factor))
        which = names[0] if len(names) == 1 else f"{len(names)} sensors ({few(names)})"
        notes.append(f"factor {repr(factor).removesuffix('.0')} applied to {which}")
    several = np.flatnonzero(np.bincount(repeats.edge, minlength=network.counts[1]) > 1)
    if len(several):
        which = f"{counted(len(several), 'edge', 'edges')} with several readings ({few(edge_names(network, several))})"
        checks = counted(repeats.dof, "independent check", "independent checks")
        notes.append(f"{which}: weighted means; {checks} among them, chi-square {repeats.chi_square:.6g}")
    return notes


def _sensor_names(network: Complex, repeats: Repeats, rows: IntArray) -> list[str]:
    """Return the sensors of some rows by name; one without name by the edge that it reads."""
    edges = edge_names(network, repeats.edge[rows])
    texts = [
        f"sensor {name}" if name else f"the sensor on edge {edge}"
        for name, edge in zip(repeats.sensor[rows].tolist(), edges.tolist(), strict=True)
    ]
    unnamed = not all(repeats.sensor[rows])
    return texts if len(texts) == 1 or unnamed else [text.removeprefix("sensor ") for text in texts]


def _edges(net: Dataset, column: Column) -> IntArray:
    """Return the number of the edge that each row names."""
    import pandas as pd

    ids, own = net.complex.edge_ids, net.columns.get(1, {})
    if ids is None or (own and "id" not in own):
        source = next(iter(own.values())).source if own else "the network"
        message = f"{source}: edges must have ids for a table of readings to name them; add a column 'id'"
        raise InputError(message)
    known = [str(name) for name in ids]
    found = np.asarray(pd.Index(np.array(known, dtype=object), dtype=object).get_indexer(column.cells), dtype=np.int64)
    if (found < 0).any():
        row = int(np.argmax(found < 0))
        name = column.cells[row]
        if not name:
            message = f"{column.place(row)}: edge is empty; every row must name the edge that it reads"
            raise InputError(message)
        hint = close_names(name, known) or "ids are text, as written in the edge table"
        message = f"{column.place(row)}: edge {name!r} is not in the edge table; {hint}"
        raise InputError(message)
    return found


def _refuse_double_sensor(columns: dict[str, Column], sensor: ObjectArray) -> None:
    import pandas as pd

    named = np.flatnonzero(sensor != "")
    again = named[pd.Series(sensor[named], dtype=object).duplicated().to_numpy()]
    if len(again):
        column, row = columns["sensor"], int(again[0])
        first = int(np.argmax(sensor == sensor[row]))
        message = (
            f"{column.place(row)}: sensor {sensor[row]!r} is named before ({column.place(first)}); one row a sensor: "
            "take one out, or give each its own name"
        )
        raise InputError(message)


def _scaled(raw: Decimals, mounted: IntArray, factor: Decimals) -> Decimals:
    """Return raw * mounted * factor exactly."""
    most = [max(abs(int(d.integers.max(initial=0))), abs(int(d.integers.min(initial=0)))) for d in (raw, factor)]
    kind: Any = np.int64 if most[0] * most[1] < _ROOM else object
    integers = raw.integers.astype(kind) * mounted.astype(kind) * factor.integers.astype(kind)
    return Decimals(integers, raw.places + factor.places, raw.present)


def _divided(product: Decimals, divisor: Decimals) -> Decimals:
    """Return a product over its divisor; one without end is rounded at its 20th digit or later."""
    if divisor.places == 0 and bool((divisor.integers == 1).all()):
        return product
    over = product.integers.astype(object) * 10**divisor.places
    under = divisor.integers.astype(object)
    over, under = np.where(under < 0, -over, over), np.abs(under)
    largest = max(int(under.max(initial=1)), 1)
    more = _KEPT + len(str(largest))
    integers = (2 * over * 10**more + under) // (2 * under)
    return Decimals(integers, product.places + more, product.present)


def _row_sd(
    columns: dict[str, Column], column: Column, raw: FloatArray, present: BoolArray, scale: FloatArray, sd: object
) -> tuple[FloatArray | None, str | None]:
    """Return the standard deviation of each row in the unit of its edge, and how it was given."""
    if sd is None:
        return None, None
    rows = Rows(
        column, raw, present, columns, lambda name: table_column(columns, name), one="a row",
        where="where there is a reading", kind=f"a column of {column.source}",
    )  # fmt: skip
    found = deviations(rows, sd)
    said = f"{found.said} of {column.source}" if found.form == "each" else found.said
    if found.form == "number" or bool((scale == 1).all()):
        return found.sd, said
    scaled = found.sd * np.abs(scale)
    refuse_not_positive(rows, scaled, column, "its factor takes it there; choose a unit that fits")
    return scaled, f"{said}, in the unit of each sensor"


def _refuse_unweighed(network: Complex, column: Column, edge: IntArray, present: BoolArray) -> None:
    rows = np.flatnonzero(present)
    rows = rows[np.argsort(edge[rows], kind="stable")]
    again = np.flatnonzero(edge[rows][1:] == edge[rows][:-1])
    if len(again):
        first, second = (int(rows[i]) for i in (again[0], again[0] + 1))
        name = edge_names(network, edge[[first]])[0]
        message = (
            f"{column.place(second)}: edge {name!r} has another reading ({column.place(first)}); several readings of "
            "one edge need standard deviations to weigh them; give sd, or keep one"
        )
        raise InputError(message)


def _combined(
    network: Complex, column: Column, edge: IntArray, amount: Decimals, rows: IntArray, sd: FloatArray | None
) -> tuple[tuple[FloatArray, FloatArray | None, Decimals], int, float]:
    """Return value, sd and decimals of every edge; the checks among its readings and their chi-square."""
    n = network.counts[1]
    order = np.argsort(edge, kind="stable") if sd is None else np.lexsort((sd, edge))  # the best of each edge first
    read, first, group = np.unique(edge[order], return_index=True, return_inverse=True)
    rows, sd = rows[order], None if sd is None else sd[order]
    y = amount.integers[rows]
    integers: Any = np.zeros(n, dtype=y.dtype)
    present = np.zeros(n, dtype=bool)
    integers[read], present[read] = y[first], True
    decimals = Decimals(integers, amount.places, present)
    value = np.where(present, as_floats(integers, amount.places), np.nan)
    if sd is None:
        return (value, None, decimals), 0, 0.0
    # Distances from the best reading of each edge are exact, so nothing cancels however large the readings are.
    away, least = as_floats(y - y[first][group], amount.places), sd[first]
    weight = (least[group] / sd) ** 2
    total = np.bincount(group, weights=weight, minlength=len(read))
    shift = np.bincount(group, weights=weight * away, minlength=len(read)) / total
    spread = np.full(n, np.nan)
    spread[read] = least / np.sqrt(total)
    with np.errstate(over="ignore"):
        squares = ((away - shift[group]) / sd) ** 2
    if not np.isfinite(squares).all():
        row = int(rows[np.argmax(~np.isfinite(squares))])
        message = (
            f"{column.place(row)}: {column.name} is more than 1e150 sd from another reading of its edge; correct one"
        )
        raise InputError(message)
    several = np.bincount(group, minlength=len(read)) > 1
    if several.any():
        mean = value[read[several]] + shift[several]
        value, decimals = _with_means(value, decimals, read[several], mean)
    return (value, spread, decimals), len(edge) - len(read), float(squares.sum())


def _with_means(
    value: FloatArray, decimals: Decimals, edges: IntArray, mean: FloatArray
) -> tuple[FloatArray, Decimals]:
    """Return the readings with the means of some edges in their place, as floats and as the same floats' decimals."""
    filled = np.full(len(value), np.nan)
    filled[edges] = mean
    own: AnyArray = np.array(decimals.integers)
    own[edges] = 0
    (kept, means), places = common_unit(
        Decimals(own, decimals.places, decimals.present), Column("mean", filled).decimals()
    )
    total: AnyArray = kept + means
    value = value.copy()
    value[edges] = mean
    return value, Decimals(frozen(total), places, decimals.present)
