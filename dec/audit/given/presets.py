"""Limits and accuracies from presets: how far a loop or a vertex may miss, how well a meter reads."""

from collections.abc import Callable, Mapping
from types import MappingProxyType

import numpy as np

from dec.arrays import BoolArray, FloatArray, IntArray, float_array, index_array
from dec.audit.given.deviations import Deviations, Rows
from dec.audit.given.preset_table import PRESETS, Preset, preset
from dec.calculus.columns import reads_as_number
from dec.calculus.dataset import Dataset
from dec.errors import InputError

__all__ = ["PRESETS", "Preset", "kilometres", "loop_limits", "meter_class", "meter_sd", "preset", "vertex_limits"]

_METRES: Mapping[str, float] = MappingProxyType({"mm": 1e-3, "cm": 1e-2, "m": 1.0, "ft": 0.3048})
_KILOMETRES: Mapping[str, float] = MappingProxyType({"m": 1e-3, "km": 1.0, "mi": 1.609344, "ft": 0.3048e-3})
_HOURLY = ("veh/h", "vehicles/h", "vehicles per hour")
_SHORTEST, _LONGEST = 0.001, 500.0  # a levelled line in km; beyond, the unit is not what was said
_LARGEST = 1e100


def kilometres(net: Dataset, column: str, unit: str | None, measured: BoolArray) -> FloatArray:
    """The lengths of levelled lines in kilometres, from an edge column whose unit is said.

    Parameters
    ----------
    net : Dataset
    column : str
        An edge column of lengths.
    unit : "m", "km", "mi" or "ft"
        Its unit; nothing is guessed, and a heading that names another one (``length_km``) is refused.
    measured : bool array, shape (n1,)
        Where a length is needed.

    Returns
    -------
    float64 array, shape (n1,)
        nan where the cell is empty.

    Raises
    ------
    InputError
        If the unit is missing, not known or not that of the heading, or a length that is needed is missing, not
        positive, or not that of a levelled line (1 m to 500 km), which is what a wrong unit looks like.

    Examples
    --------
    >>> import pandas as pd
    >>> net = Dataset.from_frames(pd.DataFrame({"from": ["A"], "to": ["E"], "length": ["970"]}))
    >>> kilometres(net, "length", "m", np.array([True]))
    array([0.97])
    """
    scale = _scale(unit, _KILOMETRES, "the unit of lengths")
    _refuse_other_heading(column, unit, _KILOMETRES, "the unit of lengths")
    source = net.column(column, 1)
    written = source.numbers()
    bad = measured & ~(written > 0)
    if bad.any():
        row = int(np.argmax(bad))
        found = "nothing" if np.isnan(written[row]) else f"{written[row]:g}"
        message = f"{source.place(row)}: {column} must be positive where the edge is measured, got {found}"
        raise InputError(message)
    length = written * scale
    odd = measured & ~((length >= _SHORTEST) & (length <= _LONGEST))
    if odd.any():
        row = int(np.argmax(odd))
        message = (
            f"{source.place(row)}: {column} is {written[row]:g} {unit}, and a levelled line is between 1 m and "
            f"{_LONGEST:g} km; correct the unit of lengths or the entry"
        )
        raise InputError(message)
    return np.asarray(length)


def loop_limits(
    rule: Preset, kilometres: FloatArray, offsets: IntArray, *, unit: str | None, heading: str = ""
) -> FloatArray:
    """How far each loop may miss, k * sqrt(length), in the unit of the differences.

    Parameters
    ----------
    rule : Preset
        One that sets a loop limit.
    kilometres : float64 array
        Length of each leg in km, loop after loop.
    offsets : int64 array, shape (n_loops + 1,)
        Loop i has the legs offsets[i] to offsets[i + 1].
    unit : "mm", "cm", "m" or "ft"
        Unit of the differences, and so of the limits; nothing is guessed.
    heading : str
        Name of the column of differences; one that names another unit (``dh_m`` with "mm") is refused.

    Returns
    -------
    float64 array, shape (n_loops,)

    Raises
    ------
    InputError
        If the preset sets something else, the unit is missing, not known or not that of the heading, or a length is not
        positive.

    Notes
    -----
    Random errors of equal size per km add up as the square root of the length.

    Examples
    --------
    >>> loop_limits(preset("levelling-12mm"), np.array([4.0, 5.0]), np.array([0, 2]), unit="mm")
    array([36.])
    """
    _refuse_other_kind(rule, "loop limit")
    what = "the unit of differences (unit=, --unit)"
    per_metre = 1e-3 / _scale(unit, _METRES, what)
    _refuse_other_heading(heading, unit, _METRES, what)
    legs, ends = float_array(kilometres, "kilometres", ndim=1, finite=False), index_array(offsets, "offsets")
    if not len(ends) or ends[0] != 0 or ends[-1] != len(legs) or (np.diff(ends) < 0).any():
        message = f"offsets must run from 0 to {len(legs)}, the number of legs, got {ends.tolist()[:8]}"
        raise InputError(message)
    bad = ~((legs > 0) & (legs <= _LARGEST))
    if bad.any():
        message = f"kilometres must be positive, got {legs[np.argmax(bad)]:g} at {int(np.argmax(bad))}"
        raise InputError(message)
    loop = np.repeat(np.arange(len(ends) - 1), np.diff(ends))
    total = np.bincount(loop, weights=legs, minlength=len(ends) - 1)
    return np.asarray(rule.figures["mm_per_sqrt_km"] * np.sqrt(total) * per_metre)


def vertex_limits(rule: Preset, inflow: FloatArray, outflow: FloatArray, *, unit: str | None) -> FloatArray:
    """How far what enters and what leaves each vertex in an hour may differ.

    Parameters
    ----------
    rule : Preset
        One that sets a vertex limit.
    inflow, outflow : float64 array, shape (n,)
        What enters and what leaves each vertex in an hour, M and C; not negative.
    unit : str
        Unit of the counts, "veh/h": the statistic has meaning for hourly counts only, so any other is refused.

    Returns
    -------
    float64 array, shape (n,)
        The largest abs(inflow - outflow) allowed, in vehicles per hour.

    Raises
    ------
    InputError
        If the preset sets something else, the unit is not that of hourly counts, or a total is negative.

    Notes
    -----
    GEH = sqrt(2 (M - C)^2 / (M + C)) is at most g exactly when abs(M - C) is at most g sqrt((M + C) / 2).

    Examples
    --------
    >>> vertex_limits(preset("counts-geh5"), np.array([450.0]), np.array([350.0]), unit="veh/h")
    array([100.])
    """
    _refuse_other_kind(rule, "vertex limit")
    if unit not in _HOURLY:
        message = (
            f"preset {rule.name} is for hourly counts only: the unit (unit=, --unit) must be {_HOURLY[0]}, got "
            f"{'none' if unit is None else repr(unit)}; bring the counts to whole hours first"
        )
        raise InputError(message)
    entering = float_array(inflow, "inflow", ndim=1)
    leaving = float_array(outflow, "outflow", ndim=1)
    if entering.shape != leaving.shape:
        message = f"outflow must give {len(entering)} numbers like inflow, got {len(leaving)}"
        raise InputError(message)
    for name, total in (("inflow", entering), ("outflow", leaving)):
        if (total < 0).any():
            at = int(np.argmax(total < 0))
            message = f"{name} must not be negative, got {total[at]:g} at {at}; count what enters and leaves apart"
            raise InputError(message)
    return np.asarray(rule.figures["geh"] * np.sqrt(entering / 2 + leaving / 2))


def meter_sd(
    rule: Preset,
    value: FloatArray,
    transition: object,
    *,
    floor: float = 0.0,
    place: Callable[[int], str] | None = None,
) -> FloatArray:
    """Standard deviations of meters from their maximum permissible error, taken as the half-width of a rectangle.

    Parameters
    ----------
    rule : Preset
        One that sets the sd of readings.
    value : float64 array, shape (n,)
        Readings; nan where there is none.
    transition : float or array_like of shape (n,)
        Transitional flow of the meters in the unit of the readings, between the lower and the upper zone.
    floor : float
        Added, in the unit of the readings: below its smallest flow a meter shows nothing, and a share of 0 is 0. Of an
        audit it is asked behind the transitional flow: "1.6+0.02".
    place : callable of int to str, optional
        Says where a reading stands, for messages.

    Returns
    -------
    float64 array, shape (n,)
        nan where there is no reading.

    Raises
    ------
    InputError
        If the preset sets something else, a transitional flow is not positive, or a standard deviation would be 0.

    Notes
    -----
    Source: JCGM 100:2008 (GUM), section 4.3.7: equal chance within +-a has the variance a^2 / 3.

    Examples
    --------
    >>> meter_sd(preset("water-meter-class2"), np.array([10.0, -1.0]), 2.0) * np.sqrt(3)
    array([0.2 , 0.05])
    """
    _refuse_other_kind(rule, "reading sd")
    readings = float_array(value, "value", ndim=1, finite=False)
    present, size = ~np.isnan(readings), np.abs(readings)
    at = place or (lambda row: f"reading {row}")
    given = float_array(transition, "transition", finite=False)  # type: ignore[arg-type]
    if given.shape not in ((), readings.shape):
        message = f"transition must be one number or {len(readings)}, got shape {given.shape}"
        raise InputError(message)
    border = np.broadcast_to(given, readings.shape)
    bad = present & ~((border > 0) & (border <= _LARGEST))
    if bad.any():
        row = int(np.argmax(bad))
        message = f"{at(row)}: the transitional flow must be positive where there is a reading, got {border[row]:g}"
        raise InputError(message)
    least = float(float_array(floor, "floor", ndim=0))
    if not 0 <= least <= _LARGEST:
        message = f"floor must be 0 or positive, got {least:g}"
        raise InputError(message)
    percent = np.where(size >= border, rule.figures["upper_percent"], rule.figures["lower_percent"])
    sd = size * percent / 100 / np.sqrt(3) + least
    idle = present & (sd == 0)
    if idle.any():
        row = int(np.argmax(idle))
        message = (
            f"{at(row)}: the reading is 0, and a share of 0 is no standard deviation; give a floor beside the "
            "transitional flow, as in 1.6+0.02 or COL+0.02 (transition=, --transition)"
        )
        raise InputError(message)
    return np.asarray(sd)


def meter_class(rule: Preset, transition: object, *, floor: float = 0.0) -> Callable[[Rows], Deviations]:
    """The standard deviations of a meter class as something that stands wherever ``sd`` does, for each row its own.

    Parameters
    ----------
    rule : Preset
        One that sets the sd of readings.
    transition : float, str or array_like of shape (n,)
        Transitional flow, in the unit of the readings as they are written: a text that reads as a number, or else names
        a column of the table that holds the readings ("col:5" forces a column).
    floor : float
        As in `meter_sd`.

    Returns
    -------
    callable of Rows to Deviations

    Raises
    ------
    InputError
        As `meter_sd`, the message with file and line; from here where the preset sets something else, otherwise when
        the readings are read.

    Examples
    --------
    >>> import pandas as pd
    >>> from dec.audit.given.readings import read_readings
    >>> net = Dataset.from_frames(pd.DataFrame({"from": ["A"], "to": ["B"], "flow": ["-10.0"], "Q2": ["2"]}))
    >>> read_readings(net, "flow", meter_class(preset("gas-meter-class1"), "Q2")).sd * np.sqrt(3)
    array([0.1])
    """
    _refuse_other_kind(rule, "reading sd")

    def of(rows: Rows) -> Deviations:
        border = transition
        if isinstance(transition, str):
            name = transition.removeprefix("col:")
            is_number = name == transition and reads_as_number(name)
            border = float(name) if is_number else rows.find(name).numbers()
        value = np.where(rows.present, rows.value, np.nan)
        sd = meter_sd(rule, value, border, floor=floor, place=rows.column.place)
        return Deviations(sd, rule.sentence, "percentage")

    return of


def _refuse_other_kind(rule: Preset, wanted: str) -> None:
    if rule.sets != wanted:
        names = ", ".join(name for name, each in PRESETS.items() if each.sets == wanted)
        message = f"preset {rule.name} sets a {rule.sets}, not a {wanted}; take one of {names}"
        raise InputError(message)


def _scale(unit: str | None, known: Mapping[str, float], what: str) -> float:
    if unit is None or unit not in known:
        message = f"{what} must be one of {', '.join(known)}, got {unit!r}; say it, a preset guesses none"
        raise InputError(message)
    return known[unit]


def _refuse_other_heading(column: str, unit: str | None, known: Mapping[str, float], what: str) -> None:
    words = "".join(c if c.isalpha() else " " for c in column).lower().split()
    named = [word for word in words if word in known]
    if named and unit not in named:
        message = f"{what} was said to be {unit}, and the heading {column!r} says {named[0]}; correct one of them"
        raise InputError(message)
