"""Errors that several readings share: how far each moves with one."""

from dataclasses import dataclass

import numpy as np
from scipy.sparse import csr_array

from dec.arrays import BoolArray, FloatArray, IntArray, ObjectArray, float_array, frozen
from dec.audit.given.deviations import percentage
from dec.audit.given.readings import Readings
from dec.calculus.columns import Column, reads_as_number
from dec.calculus.dataset import Dataset
from dec.errors import InputError

__all__ = ["CommonErrors", "common_errors"]

# Squares of what lies between, and sums of many of them, stay inside float64.
_SMALLEST, _LARGEST = 1e-100, 1e100


@dataclass(frozen=True, slots=True)
class CommonErrors:
    """Groups of readings that share one error each, beside the errors of their own.

    Attributes
    ----------
    names : tuple of str
        The k groups that move a reading, in the order in which the table first names them.
    moves : csr_array of float64, shape (n1, k)
        How far a common error of one standard deviation moves each reading, in the unit and the direction of its edge;
        no entry where an edge is in no group or not measured. The covariance of the readings is
        diag(sd^2) + moves @ moves.T.
    said : str
        How the groups and the size were given, for the record.
    """

    names: tuple[str, ...]
    moves: csr_array
    said: str


def common_errors(net: Dataset, readings: Readings, column: str, sd: object) -> CommonErrors:
    """The groups of readings that share a common error, and how far it moves each.

    Parameters
    ----------
    net : Dataset
    readings : Readings
    column : str
        An edge column of group names; an edge whose cell is empty is in no group.
    sd : float or str
        Standard deviation of the common error: a number, which moves every reading of a group by the same amount in
        the direction of its edge; a percentage ("0.5%"), which moves each by that share of itself, with its sign; or
        the name of an edge column ("col:5" forces a column) that says how far each moves, with its sign.

    Returns
    -------
    CommonErrors

    Raises
    ------
    InputError
        If a column is missing, group names are floating-point numbers, the size is none of these or not positive, or a
        reading of a group has no entry in a column of sizes.

    Notes
    -----
    Readings taken with one instrument are correlated by that instrument's error: JCGM 100:2008 (GUM), section 5.2.4.

    Examples
    --------
    >>> import pandas as pd
    >>> from dec.audit.given.readings import read_readings
    >>> edges = {"from": ["A", "B", "C"], "to": ["B", "C", "A"], "y": ["10", "-20", ""], "rod": ["r", "r", "r"]}
    >>> net = Dataset.from_frames(pd.DataFrame(edges))
    >>> shared = common_errors(net, read_readings(net, "y", 0.1), "rod", "1%")
    >>> shared.names, shared.moves.toarray().ravel()
    (('r',), array([ 0.1, -0.2,  0. ]))
    """
    groups = _group_names(net.column(column, 1))
    size, said = _sizes(net, readings, sd, groups != "")
    edges = np.flatnonzero(readings.measured & (groups != "") & (size != 0))
    names = tuple(dict.fromkeys(groups[edges].tolist()))
    number = {name: index for index, name in enumerate(names)}
    group: IntArray = np.fromiter((number[name] for name in groups[edges].tolist()), np.int64, len(edges))
    moves = csr_array((size[edges], (edges, group)), shape=(len(size), len(names)))
    return CommonErrors(names, moves, f"groups of column {column}, {said}")


def _group_names(column: Column) -> ObjectArray:
    """Return the names as text without outer blanks, empty where an edge is in no group."""
    cells = column.cells
    if cells.dtype.kind == "f" and column.present().any():
        row = int(np.argmax(column.present()))
        message = (
            f"{column.place(row)}: {column.name} must hold names of groups, found floating-point numbers "
            f"({cells[row]}); give them as text"
        )
        raise InputError(message)
    if cells.dtype.kind == "f":
        return np.full(len(cells), "", dtype=object)
    return np.array([str(cell).strip() for cell in cells.tolist()], dtype=object)


def _sizes(net: Dataset, readings: Readings, sd: object, grouped: BoolArray) -> tuple[FloatArray, str]:
    """Return how far each reading would move, whether it is in a group or not, and how that was said."""
    wanted = readings.measured & grouped
    if not isinstance(sd, str):
        return _same(len(wanted), float(float_array(sd, "sd of a common error", ndim=0, finite=False)))  # type: ignore[arg-type]
    name = sd.removeprefix("col:")
    if name == sd and reads_as_number(sd):
        return _same(len(wanted), float(sd))
    parts = percentage(sd) if name == sd else None
    if parts is not None:
        share, floor = parts
        if floor or not share:
            message = f"sd of a common error must be a plain positive percentage (0.5%), which has a sign, got {sd!r}"
            raise InputError(message)
        return np.where(wanted, np.nan_to_num(readings.value), 0.0) * (
            share / 100.0
        ), f"each moved by {share:g} % of it"
    if name == sd and name not in net.columns.get(1, {}):
        columns = ", ".join(net.columns.get(1, {})) or "none"
        message = (
            f"sd of a common error must be a number, a percentage (0.5%) or an edge column ({columns}), got {sd!r}"
        )
        raise InputError(message)
    source = net.column(name, 1)
    size = source.numbers()
    bad = wanted & ~((np.abs(size) >= _SMALLEST) & (np.abs(size) <= _LARGEST) | (size == 0))
    if bad.any():
        row = int(np.argmax(bad))
        found = "nothing" if np.isnan(size[row]) else f"{size[row]:g}"
        message = (
            f"{source.place(row)}: {name} must say how far the common error moves the reading, got {found}; "
            "write 0 where it does not, or leave its group empty"
        )
        raise InputError(message)
    return np.where(wanted, size, 0.0), f"each moved as column {name} says"


def _same(count: int, number: float) -> tuple[FloatArray, str]:
    if not _SMALLEST <= number <= _LARGEST:
        message = (
            f"sd of a common error must be positive, from {_SMALLEST:g} to {_LARGEST:g}, got {number:g}; "
            "leave the groups out where there is none"
        )
        raise InputError(message)
    return frozen(np.full(count, number)), f"each moved by {number:g}"
