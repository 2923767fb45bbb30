"""What has passed a meter since its first reading: counters unrolled, gaps kept."""

from collections.abc import Mapping
from typing import Any

import numpy as np

from dec.arrays import AnyArray, BoolArray
from dec.errors import InputError
from dec.steps.differences import antidifference
from dec.steps.kinds import is_exact, series_with_gaps
from dec.steps.meters import metered

__all__ = ["meter_totals"]


def meter_totals(
    readings: Any, *, roll_over: Any = None, changes: Mapping[Any, Any] | None = None, most: Any = None
) -> AnyArray:
    """What has passed each meter since its first reading, at every reading; gaps stay gaps.

    Roll-overs and exchanged meters would spoil a polynomial through readings; through these totals `fill` and
    `extend` can lay one.

    Parameters
    ----------
    readings : array_like, shape (n,) or (n, m)
        One row a step, one column a meter; nan, None and empty text are gaps.
    roll_over, changes, most
        As for `meter_flows`; `most` is what can pass from one reading that is there to the next. An exchange keyed
        by a row that is a gap belongs to the next reading.

    Returns
    -------
    array of the shape of readings
        0 at the first reading. float64 with nan in the gaps from floats; exact objects with None in the gaps otherwise.

    Raises
    ------
    InputError
        As `meter_flows`, or if a meter has fewer than two readings.

    Examples
    --------
    >>> meter_totals(["9998.5", "", "0.5", "2.0"], roll_over=10000).tolist()
    [0, None, Fraction(2, 1), Fraction(7, 2)]
    """
    table, present = series_with_gaps(readings, "readings")
    one = table.ndim == 1
    table, has = table.reshape(len(table), -1), present.reshape(len(table), -1)
    gap = None if is_exact(table) else np.nan
    result = np.full(table.shape, gap, dtype=object if is_exact(table) else np.float64)
    by_column = _by_column(changes or {}, has, one=one)
    for column in range(table.shape[1]):
        known = np.flatnonzero(has[:, column])
        if len(known) < 2:
            message = f"a meter must have at least 2 readings, got {len(known)} in column {column}"
            raise InputError(message)
        rows = known.tolist()

        def place(row: int, _: int, rows: list[int] = rows, column: int = column) -> str:
            return f"row {rows[row]}" if one else f"row {rows[row]} of meter {column}"

        end, limit = _of(roll_over, column), _of(most, column)
        found = metered(table[known, column], 1, end, by_column[column], limit, place)
        result[known, column] = antidifference(found.amounts)
    return result[:, 0].copy() if one else result


def _of(value: Any, column: int) -> Any:
    """Return the value of one meter, where there is one for each."""
    if value is None or isinstance(value, str) or np.ndim(value) == 0:
        return value
    if column >= len(value):
        message = f"roll_over and most must be one number or one for each meter, got {len(value)}"
        raise InputError(message)
    return value[column]


def _by_column(changes: Mapping[Any, Any], has: BoolArray, *, one: bool) -> list[dict[int, Any]]:
    """Return the exchanges of each meter, by place among the readings that are there."""
    n, m = has.shape
    result: list[dict[int, Any]] = [{} for _ in range(m)]
    if not isinstance(changes, Mapping):
        message = f"changes must map rows to exchanges, {{row: (last, first)}}, got {type(changes).__name__}"
        raise InputError(message)
    for key, change in changes.items():
        pair = (key, 0) if one and not isinstance(key, tuple) else key
        sound = isinstance(pair, tuple) and len(pair) == 2 and all(isinstance(k, int | np.integer) for k in pair)
        if not (sound and 0 < pair[0] < n and 0 <= pair[1] < m):
            message = f"changes must be keyed by {'a row' if one else '(row, column)'} that is there, got {key!r:.60}"
            raise InputError(message)
        row, column = pair
        place = int(has[:row, column].sum())
        if not 0 < place < int(has[:, column].sum()) or place in result[column]:
            message = f"the exchange at {key!r} must have a reading before and one after it, and no other beside it"
            raise InputError(message)
        result[column][place] = change
    return result
