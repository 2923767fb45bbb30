"""The one record for every check: what was measured, what is allowed, where, and whether it holds."""

from dataclasses import dataclass
from fractions import Fraction

__all__ = ["Finding"]


@dataclass(frozen=True, slots=True)
class Finding:
    """One checked statement.

    Attributes
    ----------
    name : str
        The statement, in words that are true when it holds ("edges have at most two faces").
    holds : bool
        Whether it does.
    measured, allowed : object
        What was found and what may be found: a number, a Fraction, a count, or None where nothing applies.
    where : tuple
        The cells, ids or places that speak against it, worst or lowest first; empty when it holds.
    left, right : Fraction or None
        The two sides of an exact comparison, where the check is one.

    Notes
    -----
    A failed check is a result and not an exception, so nothing raises on ``holds`` being False.

    Examples
    --------
    >>> from fractions import Fraction
    >>> Finding("both sides agree", False, Fraction(1, 3), 0, left=Fraction(1, 3), right=Fraction(0)).difference
    Fraction(1, 3)
    """

    name: str
    holds: bool
    measured: object = None
    allowed: object = None
    where: tuple[object, ...] = ()
    left: Fraction | None = None
    right: Fraction | None = None

    @property
    def difference(self) -> Fraction | None:
        """Left minus right, exactly; None where the check compares nothing."""
        if self.left is None or self.right is None:
            return None
        return self.left - self.right

    def __bool__(self) -> bool:
        return self.holds
