"""Does the law hold, and by which measure?"""

from dataclasses import dataclass
from decimal import Decimal
from fractions import Fraction

import numpy as np
from scipy.special import chdtrc, chdtri

from dec.arrays import AnyArray, FloatArray, float_array
from dec.audit.adjusted.adjustment import Adjustment
from dec.audit.exactly import as_floats, within
from dec.audit.given.preset_table import Preset
from dec.audit.given.readings import Readings
from dec.calculus.columns import reads_as_number
from dec.errors import InputError

__all__ = ["Limits", "Verdict", "judged", "read_limits"]

_MOST_PLACES = 400


@dataclass(frozen=True, slots=True)
class Limits:
    """What was asked of the law.

    Attributes
    ----------
    alpha : float
        Chance that the chi-square test refuses readings that are in order.
    largest : float or None
        The largest residual allowed, where no standard deviations are given.
    written : Fraction or None
        The same exactly as it was written in decimal.
    """

    alpha: float
    largest: float | None
    written: Fraction | None = None


@dataclass(frozen=True, slots=True)
class Verdict:
    """Whether the law holds, the figure it was judged by, and that figure's limit; None where nothing applies.

    `said` is the verdict in words where a rule judged every vertex or loop by a limit of its own.
    """

    holds: bool | None
    chi_square: float | None
    limit: float | None
    p_value: float | None
    said: str = ""


def read_limits(alpha: object, limit: object, sd: object) -> Limits:
    """The limits as given, checked.

    Raises
    ------
    InputError
        If alpha does not lie between 0 and 1, the limit is negative or no number, or a limit is given beside
        standard deviations.
    """
    chance = float(float_array(alpha, "alpha", ndim=0, finite=False))  # type: ignore[arg-type]
    if not 0 < chance < 1:
        message = f"alpha must lie between 0 and 1, got {alpha}"
        raise InputError(message)
    if limit is None:
        return Limits(chance, None)
    if sd is not None:
        message = "give either standard deviations or a limit, not both: with sd the chi-square test decides"
        raise InputError(message)
    if isinstance(limit, str) and not reads_as_number(limit):
        message = f"on a network the limit must be a number in the unit of the readings, got {limit!r}"
        raise InputError(message)
    largest = float(limit) if isinstance(limit, str) else float(float_array(limit, "limit", ndim=0, finite=False))  # type: ignore[arg-type]
    if not (np.isfinite(largest) and largest >= 0):
        message = f"limit must be finite and not negative, got {limit}"
        raise InputError(message)
    written = Decimal(limit if isinstance(limit, str) else repr(largest))
    if written < 0 or not (written == 0 or abs(written.adjusted()) <= _MOST_PLACES) or len(str(limit)) > _MOST_PLACES:
        message = f"limit must be 0 or positive, with at most {_MOST_PLACES} digits, got {str(limit)[:40]}"
        raise InputError(message)
    return Limits(chance, largest, Fraction(written) if written else Fraction(0))


def judged(
    adjustment: Adjustment, readings: Readings, limits: Limits, residuals: AnyArray, places: int,
    allowed: FloatArray | None, rule: Preset | None, what: str,
) -> Verdict:  # fmt: skip
    """Whether the law holds: by chi-square with standard deviations, else by the residuals as written.

    Parameters
    ----------
    adjustment : Adjustment
    readings : Readings
        Several readings of one edge are checked among each other too.
    limits : Limits
    residuals : int64 or object array
        Of every vertex group or loop, in units of 10**-places.
    places : int
    allowed : float64 array or None
        How far each may miss, by a rule.
    rule : Preset or None
        That rule.
    what : "vertices" or "loops"
        What the residuals are of.

    Returns
    -------
    Verdict
        Without standard deviations there is no chi-square, and the limit is the one given, or 0.
    """
    repeats = readings.repeats
    dof = adjustment.dof + (0 if repeats is None else repeats.dof)
    chi_square = adjustment.chi_square + (0.0 if repeats is None else repeats.chi_square)
    if dof == 0:
        return Verdict(None, 0.0, limits.largest, None)
    if readings.sd is not None:
        quantile = float(chdtri(dof, limits.alpha))
        return Verdict(chi_square <= quantile, chi_square, quantile, float(chdtrc(dof, chi_square)))
    if allowed is not None and rule is not None:
        beyond = np.abs(as_floats(residuals, places)) > allowed
        where, count = "outside" if beyond.any() else "within", int(beyond.sum())
        exceed = "exceeds its own" if count == 1 else "exceed theirs"
        words = f"{where} the limits of preset {rule.name}: {count} of {len(beyond)} {what} {exceed}"
        return Verdict(not beyond.any(), None, None, None, words)
    allowed_all = limits.written or Fraction(0)
    return Verdict(bool(within(residuals, places, allowed_all).all()), None, limits.largest or 0.0, None)
