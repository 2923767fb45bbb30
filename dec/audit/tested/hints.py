"""What would explain an error: a turned meter, a unit, an offset."""

from dataclasses import dataclass

from dec.report.wording import number

__all__ = ["UNIT_FACTORS", "Hint", "hint_for"]


@dataclass(frozen=True, slots=True)
class Hint:
    """What would explain a reading.

    Attributes
    ----------
    factor : float or None
        What the reading would have to be multiplied by; None for an offset.
    text : str
    """

    factor: float | None
    text: str


# What a reading in the wrong unit is too large by (or too small: the inverse is tried too). Definitions: SI Brochure,
# 9th ed. 2019 (hours, minutes, litres); NIST Special Publication 811, 2008, appendix B (gallons, feet, miles).
UNIT_FACTORS = {
    60.0: "minutes and seconds or hours and minutes",
    3600.0: "hours and seconds",
    24.0: "days and hours",
    3.6: "m3/h and L/s, or km/h and m/s",
    16.0 + 2.0 / 3.0: "L/min and m3/h",
    10.0: "a decimal place",
    100.0: "per cent or centi",
    1000.0: "milli or kilo",
    3.785411784: "US gallons and litres",
    4.54609: "imperial gallons and litres",
    0.3048: "feet and metres",
    1.609344: "miles and kilometres",
    2.0: "one direction of two, or a double line",
}


# Part of a value within which a unit may fit: wider, and most differences would be some unit.
_WIDEST = 0.1
_MOST_OTHERS = 2


def hint_for(value: float, estimate: float, spread: float, critical: float, unit: str | None = None) -> Hint:
    """What would explain a reading that all else contradicts.

    Parameters
    ----------
    value : float
        The reading.
    estimate : float
        What all else says.
    spread : float
        Standard deviation of their difference.
    critical : float
        Within so many of these the explanation fits; the reading as it stands does not.
    unit : str or None
        Of the reading, for an offset.

    Returns
    -------
    Hint
        A turned sign before a unit before an offset; of several units the one that fits best,
        and up to two more that fit.

    Examples
    --------
    >>> hint_for(-5.02, 5.0, 0.1, 3.29).text
    'same size, opposite sign: is the meter or the direction of the edge the wrong way round?'
    >>> hint_for(18.01, 5.0, 0.01, 3.29).text
    'reads 3.6 times what all else says: is it m3/h and L/s, or km/h and m/s?'
    >>> hint_for(5.7, 5.0, 0.1, 3.29).text
    'an offset of 0.7 would explain it'
    """
    allowed = critical * spread
    if value == 0:
        return Hint(None, "reads zero: is the meter connected, the line in service?")
    if abs(value) > allowed and abs(value + estimate) <= allowed:
        return Hint(-1.0, "same size, opposite sign: is the meter or the direction of the edge the wrong way round?")
    fits = []
    for size, says in UNIT_FACTORS.items():
        for factor in (size, 1.0 / size):
            miss = abs(value / factor - estimate)
            room = allowed * max(1.0, 1.0 / factor)  # what was read in the other unit is as unsure in that unit
            if miss <= min(room, _WIDEST * abs(estimate)) and abs(estimate) > allowed:
                fits.append((miss, factor, size, says))
    if fits:
        (_, factor, size, says), *others = sorted(fits)
        also = ", ".join(_times(*fit[1:3]) for fit in others[:_MOST_OTHERS])
        more = f" ({also} would fit as well)" if also else ""
        return Hint(1.0 / factor, f"reads {_times(factor, size)} what all else says: is it {says}?{more}")
    return Hint(None, f"an offset of {number(value - estimate, 3)}{f' {unit}' if unit else ''} would explain it")


def _times(factor: float, size: float) -> str:
    return f"{number(size)} times" if factor == size else f"1/{number(size)} of"
