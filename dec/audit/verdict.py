"""Does the law hold, and by which measure?"""

from dataclasses import dataclass

import numpy as np
from scipy.special import chdtrc, chdtri

from dec.arrays import AnyArray, float_array
from dec.audit.adjustment import Adjustment
from dec.audit.exactly import within
from dec.calculus.columns import reads_as_number
from dec.errors import InputError

__all__ = ["Limits", "Verdict", "judged", "read_limits"]


@dataclass(frozen=True, slots=True)
class Limits:
    """What was asked of the law.

    Attributes
    ----------
    alpha : float
        Chance that the chi-square test refuses readings that are in order.
    largest : float or None
        The largest residual allowed, where no standard deviations are given.
    """

    alpha: float
    largest: float | None


@dataclass(frozen=True, slots=True)
class Verdict:
    """Whether the law holds, the figure it was judged by, and that figure's limit; None where nothing applies."""

    holds: bool | None
    chi_square: float | None
    limit: float | None
    p_value: float | None


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
    return Limits(chance, largest)


def judged(adjustment: Adjustment, limits: Limits, residuals: AnyArray, places: int, *, with_sd: bool) -> Verdict:
    """Whether the law holds: by chi-square with standard deviations, else by the residuals as written.

    Parameters
    ----------
    adjustment : Adjustment
    limits : Limits
    residuals : int64 or object array
        Of every vertex group or loop, in units of 10**-places.
    places : int
    with_sd : bool
        Whether standard deviations were given.

    Returns
    -------
    Verdict
        Without standard deviations there is no chi-square, and the limit is the one given, or 0.
    """
    if adjustment.dof == 0:
        return Verdict(None, 0.0, limits.largest, None)
    if with_sd:
        quantile = float(chdtri(adjustment.dof, limits.alpha))
        beyond = float(chdtrc(adjustment.dof, adjustment.chi_square))
        return Verdict(adjustment.chi_square <= quantile, adjustment.chi_square, quantile, beyond)
    largest = limits.largest or 0.0
    return Verdict(bool(within(residuals, places, largest).all()), None, largest, None)
