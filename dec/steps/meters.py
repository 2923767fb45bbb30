"""Counter readings of meters become flows: differences, with roll-overs and exchanged meters where they are stated."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from math import ceil
from typing import Any, NamedTuple

import numpy as np

from dec.arrays import AnyArray, BoolArray, frozen
from dec.errors import InputError
from dec.steps.kinds import LARGEST_INT, fitted, is_exact, largest, plain, refuse_few, series_with_gaps, shown

__all__ = ["MeterChange", "MeterFlows", "meter_flows", "metered"]


class MeterChange(NamedTuple):
    """An exchanged meter: what the old one showed when it was taken out, the new one when it was put in."""

    last: Any
    first: Any


@dataclass(frozen=True, eq=False)
class MeterFlows:
    """What passed the meters between their readings.

    Attributes
    ----------
    amounts : array, shape (n - 1,) or (n - 1, m)
        In the unit of the counter.
    flows : array of the same shape
        The amounts over the period; Fractions where exact.
    has_rolled : bool array of the same shape
        True where the counter went round its end.
    is_changed : bool array of the same shape
        True where a stated exchange of the meter falls.
    """

    amounts: AnyArray
    flows: AnyArray
    has_rolled: BoolArray
    is_changed: BoolArray


def meter_flows(
    readings: Any, period: Any = 1, *, roll_over: Any = None, changes: Mapping[Any, Any] | None = None,
    most: Any = None,
) -> MeterFlows:  # fmt: skip
    """Flows from the readings of counters that only count up.

    Parameters
    ----------
    readings : array_like, shape (n,) or (n, m)
        One row a reading, one column a meter, without gaps. Decimal text stays exact.
    period : number or array_like, shape (n - 1,)
        Time from each reading to the next.
    roll_over : number, or array_like of shape (m,), or None
        What the counter cannot show any more: 100000 for five digits, after which it begins at 0 again. None: it is
        not expected to end, and a reading below the one before is refused.
    changes : mapping, or None
        Exchanged meters: row of the first reading of the new meter, or (row, column), to `MeterChange` or a pair
        (last reading of the old meter, first of the new). Without a statement no exchange is assumed.
    most : number, or array_like of shape (m,), or None
        Largest amount that can pass between two readings; None allows half a turn where there is a roll-over, and
        any amount otherwise.

    Returns
    -------
    MeterFlows
        Exact from exact readings; they add up to last minus first reading, plus a turn for every roll-over, plus what
        the old meters had more than the new ones.

    Raises
    ------
    InputError
        If a counter falls and no roll-over or exchange is stated, or more than `most` would have passed (the message
        names reading and meter), a reading is missing or does not fit its counter, or exact and floats are mixed.

    Notes
    -----
    A counter that goes round more than once between two readings, one that runs backwards and is overtaken, and an
    exchange that lets the reading rise all look like plain counting: no difference of readings shows them. Amounts
    that bill or protect someone follow the rules for the meter in its country.

    Examples
    --------
    >>> found = meter_flows(["99990.5", "99998.0", "4.5"], period=2, roll_over=100000)
    >>> [str(flow) for flow in found.flows], found.has_rolled
    (['15/4', '13/4'], array([False,  True]))
    """

    def place(row: int, column: int) -> str:
        return f"row {row}" if np.ndim(readings) < 2 else f"row {row} of meter {column}"

    return metered(readings, period, roll_over, changes or {}, most, place)


def metered(
    readings: Any, period: Any, roll_over: Any, changes: Mapping[Any, Any], most: Any, place: Callable[[int, int], str]
) -> MeterFlows:
    """As `meter_flows`, with `place` to say where a row and a column stand."""
    table, exact = _table(readings)
    if not isinstance(changes, Mapping):
        message = f"changes must map rows to exchanges, {{row: (last, first)}}, got {type(changes).__name__}"
        raise InputError(message)
    one, table = table.ndim == 1, table.reshape(len(table), -1)
    m = table.shape[1]
    turn, limit = _per_meter(roll_over, "roll_over", m, exact=exact), _per_meter(most, "most", m, exact=exact)
    if turn is not None:
        _refuse_outside(table, turn, place)
    if table.dtype == np.int64 and 2 * max(largest(table), 0 if turn is None else _ceiling(turn)) > LARGEST_INT:
        table = table.astype(object)
    amounts, rolled = _advance(table[:-1], table[1:], turn)
    changed = np.zeros(amounts.shape, dtype=bool)
    for key, change in changes.items():
        row, column = _key(key, table.shape, one=one)
        last, first = _exchange(change, key, turn, column, exact=exact)
        shows = table[row - 1 : row + 1, column].tolist()  # as Python numbers
        before = np.array([shows[0], first], dtype=object if exact else np.float64)
        after = np.array([last, shows[1]], dtype=before.dtype)
        both, gone_round = _advance(before, after, None if turn is None else turn[[column, column]])
        if (both < 0).any():
            at = int(np.argmax(both < 0))
            message = (
                f"the exchange stated at {key!r} does not fit: the {('old', 'new')[at]} meter would have fallen from "
                f"{shown(before[at])} to {shown(after[at])}"
            )
            raise InputError(message)
        amounts = amounts.astype(before.dtype)
        amounts[row - 1, column] = both[0] + both[1]
        rolled[row - 1, column], changed[row - 1, column] = gone_round.any(), True
    _refuse_falls(table, amounts, place)
    _refuse_much(table, amounts, turn if limit is None else limit, place, halved=limit is None)
    flows = _over(amounts, period, exact=exact)
    return MeterFlows(*(frozen(t[:, 0].copy() if one else t) for t in (amounts, flows, rolled, changed)))


def _table(readings: Any) -> tuple[AnyArray, bool]:
    table, present = series_with_gaps(readings, "readings")
    if not present.all():
        at = np.argwhere(~present)[0].tolist()
        message = (
            f"readings must have no gap, got one at {at[0] if len(at) == 1 else tuple(at)}; leave the row out and give "
        )
        message += "the periods, or make totals with steps.meter_totals and fill those with steps.fill"
        raise InputError(message)
    refuse_few(table, "readings", 2)
    return table, is_exact(table)


def _per_meter(value: Any, name: str, m: int, *, exact: bool) -> AnyArray | None:
    if value is None:
        return None
    given = np.asarray(fitted(value, name, exact=exact))
    if given.shape not in ((), (m,)) or (given <= 0).any():
        message = f"{name} must be a positive number, or one for each of {m} meters, got {value!r:.60}"
        raise InputError(message)
    return np.broadcast_to(given, m).copy()


def _ceiling(turn: AnyArray) -> int:
    """Return a whole number that no roll-over exceeds."""
    return max(map(ceil, turn.tolist()), default=0)


def _advance(before: AnyArray, after: AnyArray, turn: AnyArray | None) -> tuple[AnyArray, BoolArray]:
    """Return how far counters went, round their end where they fell and may, and where they did."""
    amounts = np.asarray(after - before)
    if turn is None:
        return amounts, np.zeros(amounts.shape, dtype=bool)
    rolled = np.asarray(amounts < 0, dtype=bool)
    return np.asarray(np.where(rolled, amounts + turn, amounts)), rolled


def _key(key: Any, shape: tuple[int, ...], *, one: bool) -> tuple[int, int]:
    """Return row and column of an exchange."""
    n, m = shape
    pair = (key, 0) if one and not isinstance(key, tuple) else key
    sound = isinstance(pair, tuple) and len(pair) == 2 and not any(isinstance(k, bool) for k in pair)
    sound = sound and all(isinstance(k, int | np.integer) for k in pair)
    if not (sound and 1 <= pair[0] < n and 0 <= pair[1] < m):
        what = f"a row from 1 to {n - 1}" if one else f"(row, column), rows 1 to {n - 1}, columns 0 to {m - 1}"
        message = f"changes must be keyed by {what}, got {key!r:.60}"
        raise InputError(message)
    return int(pair[0]), int(pair[1])


def _exchange(change: Any, key: Any, turn: AnyArray | None, column: int, *, exact: bool) -> tuple[Any, Any]:
    if not isinstance(change, tuple | list) or len(change) != 2:
        message = (
            f"the exchange at {key!r} must be (last reading of the old meter, first of the new), got {change!r:.60}"
        )
        raise InputError(message)
    last, first = (fitted(plain(v, "an exchange"), "an exchange", exact=exact) for v in change)
    if turn is not None and not (0 <= last < turn[column] and 0 <= first < turn[column]):
        message = f"the exchange at {key!r} must have readings from 0 to below {shown(turn[column])}, got "
        message += f"{shown(last)} and {shown(first)}"
        raise InputError(message)
    return last, first


def _refuse_outside(table: AnyArray, turn: AnyArray, place: Callable[[int, int], str]) -> None:
    bad = np.asarray((table < 0) | (table >= turn), dtype=bool)
    if bad.any():
        row, column = np.argwhere(bad)[0].tolist()
        found, limit = shown(table[row, column]), shown(turn[column])
        message = f"readings must be from 0 to below the roll-over {limit}, got {found} at {place(row, column)}"
        raise InputError(message)


def _refuse_falls(table: AnyArray, amounts: AnyArray, place: Callable[[int, int], str]) -> None:
    bad = np.asarray(amounts < 0, dtype=bool)
    if bad.any():
        row, column = np.argwhere(bad)[0].tolist()
        message = (
            f"a counter must not fall, got {_both(table, row, column)} at {place(row + 1, column)}; state roll_over if "
            "it began again at 0, changes if the meter was exchanged"
        )
        raise InputError(message)


def _refuse_much(
    table: AnyArray, amounts: AnyArray, limit: AnyArray | None, place: Callable[[int, int], str], *, halved: bool
) -> None:
    if limit is None:
        return
    bad = np.asarray((2 if halved else 1) * amounts > limit, dtype=bool)
    if bad.any():
        row, column = np.argwhere(bad)[0].tolist()
        what = f"half the roll-over {shown(limit[column])}" if halved else f"the {shown(limit[column])} stated as most"
        message = (
            f"{shown(amounts[row, column])} would have passed up to {place(row + 1, column)}, from "
            f"{_both(table, row, column)}, more than {what}; it looks like an exchanged meter or one that ran "
            "backwards: state changes, or most if so much can pass"
        )
        raise InputError(message)


def _both(table: AnyArray, row: int, column: int) -> str:
    return f"{shown(table[row, column])} and then {shown(table[row + 1, column])}"


def _over(amounts: AnyArray, period: Any, *, exact: bool) -> AnyArray:
    time = np.asarray(fitted(period, "period", exact=exact))
    if time.shape not in ((), (len(amounts),)) or not (time > 0).all():
        message = f"period must be a positive number, or one for each of {len(amounts)} intervals, got {period!r:.60}"
        raise InputError(message)
    times = time if not time.ndim else time[:, None]
    if not exact:
        return np.asarray(amounts / times)
    inverse = np.asarray(np.frompyfunc(lambda t: 1 / Fraction(t), 1, 1)(times))
    return np.asarray(amounts.astype(object) * inverse)
