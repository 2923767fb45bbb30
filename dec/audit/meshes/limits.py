"""What a sum on a mesh may miss by, and tables that put the worst first."""

import re
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from dec.arrays import AnyArray, BoolArray, FloatArray
from dec.audit.meshes.statements import counted
from dec.errors import InputError

__all__ = ["Limit", "Sums", "read_limit", "table_of", "worst_first"]

_PERCENT = re.compile(r"\s*([+-]?[0-9.]+(?:[eE][+-]?\d+)?)\s*%\s*")
_EPS = float(np.finfo(np.float64).eps)
_WIDE = 0.01  # of gross: below that a wide limit hides nothing worth a note
_FACTOR = 10.0  # times the median
_NEAR = 2.0


@dataclass(frozen=True, slots=True)
class Sums:
    """Signed sums of integrals, and what their accuracy depends on.

    Attributes
    ----------
    value : float64 array, shape (n,)
    gross : float64 array, shape (n,)
        The same sums of magnitudes.
    error : float64 array, shape (n,)
        Estimated errors of the integration rule, added up.
    terms : int array, shape (n,)
        How many integrals each sum has.
    size : float64 array, shape (n,), or None
        The same sums of what each integral would be if the field ran straight along or through.
    doubtful : int array, shape (n,), or None
        How many of the integrals have an estimated error that is no small part of their size.
    """

    value: FloatArray
    gross: FloatArray
    error: FloatArray
    terms: AnyArray
    size: FloatArray | None = None
    doubtful: AnyArray | None = None


@dataclass(frozen=True, slots=True)
class Limit:
    """What a sum may miss by.

    Attributes
    ----------
    kind : str
        "rule" (the rule's own estimated error), "absolute" or "percent" (of gross).
    number : float
        In the unit of the sums, or in percent; 0 for "rule".
    """

    kind: str
    number: float = 0.0

    @property
    def absolute(self) -> float | None:
        """The number where it is one for all sums, else None."""
        return self.number if self.kind == "absolute" else None

    def of(self, sums: Sums) -> FloatArray:
        """The limit of every sum; float64 array of shape (n,).

        With the rule's own error, what adding floating-point numbers can lose is allowed on top: one unit
        of rounding a term, times gross.
        """
        if self.kind == "absolute":
            return np.full(len(sums.value), self.number)
        if self.kind == "percent":
            return self.number / 100.0 * sums.gross
        return sums.error + _EPS * sums.terms * sums.gross

    def undecided(self, sums: Sums) -> BoolArray:
        """Where a sum is within the rule's own error only because that error is no small part of the field.

        A wrong value widens the estimate around it, and noise everywhere, so such a sum says nothing; bool array of
        shape (n,).
        """
        if self.kind != "rule" or sums.doubtful is None:
            return np.zeros(len(sums.value), dtype=bool)
        return np.asarray((sums.doubtful > 0) & (np.abs(sums.value) <= self.of(sums)))

    def said(self, gross: str, unit: str | None) -> str:
        """The limit and where it comes from, in a sentence; `gross` says what a percentage is of."""
        if self.kind == "absolute":
            return f"limit: {self.number:g}{f' {unit}' if unit else ''}, as given"
        if self.kind == "percent":
            return f"limit: {self.number:g} % of gross, as given; gross is {gross}"
        return (
            "limit: the integration rule's own estimated error, added up, plus rounding; an estimate from the field "
            "itself, no bound"
        )

    def unseen(self) -> str:
        """What no sum can show at this limit, for the list of what is not shown."""
        return "errors smaller than " + ("the integration rule's own error" if self.kind == "rule" else "the limit")

    def doubts(self, sums: Sums, what: str) -> list[str]:
        """What the limits themselves leave open, as notes; `what` is "face", "cell" or "shell"."""
        known = sums.gross > 0
        if not known.any():
            return []
        if self.kind != "rule":
            coarse = int(np.count_nonzero(sums.error > self.of(sums)))
            note = (
                f"at {coarse} of {len(known)} {what}s the integration rule's own estimated error is larger than the "
                "limit: what is found there may be the rule's and not the field's"
            )
            return [note] if coarse else []
        return [*self._near_misses(sums, what), *_widest(sums, known, what)]

    def _near_misses(self, sums: Sums, what: str) -> list[str]:
        size, limit = np.abs(sums.value), self.of(sums)
        beyond = int(np.count_nonzero(size > limit))
        if not beyond or (size > _NEAR * limit).any():
            return []
        note = (
            f"{counted(beyond, what)} beyond the limit, none by a factor of {_NEAR:g}: the limit is an estimate, so "
            "this may be the rule's error; give a limit to decide"
        )
        return [note]


def _widest(sums: Sums, known: BoolArray, what: str) -> list[str]:
    """Return a note on the sum whose limit stands out, where one does."""
    size = sums.gross if sums.size is None else sums.size
    share = np.divide(sums.error, size, out=np.zeros(len(known)), where=known & (size > 0))
    widest, usual = int(np.argmax(share)), float(np.median(share[known]))
    if share[widest] < max(_WIDE, _FACTOR * usual):
        return []
    note = (
        f"the limit is widest at {what} {widest}, {100 * share[widest]:.2g} % of what the field there could give, the "
        f"median being {100 * usual:.2g} %: one wrong value widens the limits around it, so look there, or give a limit"
    )
    return [note]


def read_limit(limit: float | str | None) -> Limit:
    """The limit that the caller asks for.

    Parameters
    ----------
    limit : None, float or str
        None takes the rule's own estimated error; a number is absolute; "0.1%" is a percentage of gross.

    Returns
    -------
    Limit

    Raises
    ------
    InputError
        If it is neither, negative or not finite.

    Examples
    --------
    >>> read_limit("0.1%")
    Limit(kind='percent', number=0.1)
    """
    if limit is None:
        return Limit("rule")
    text = str(limit)
    percent = _PERCENT.fullmatch(text)
    try:
        number = float(percent[1] if percent else text)
    except ValueError:
        message = f'limit must be a number or a percentage of gross such as "0.1%", got {limit!r}'
        raise InputError(message) from None
    if not (np.isfinite(number) and number >= 0):
        message = f"limit must be finite and not negative, got {limit}; leave it out for the rule's own estimated error"
        raise InputError(message)
    return Limit("percent" if percent else "absolute", number)


def worst_first(value: FloatArray, limit: FloatArray) -> AnyArray:
    """The order of rows by |value| / limit, largest first; int64 array of shape (n,).

    Values beyond a limit of zero come before all others, larger ones first; then, larger ones first too, those without
    a limit (nan); values not known come last.
    """
    size = np.abs(value)
    score = np.full(len(size), np.inf)
    np.divide(size, limit, out=score, where=limit > 0)
    score[size == 0] = 0.0
    score[np.isnan(limit)] = -1.0
    score[np.isnan(size)] = -2.0
    if np.isinf(score).any() or (score < 0).any():
        return np.lexsort((-size, -score))
    return np.argsort(-score, kind="stable")


def table_of(
    ids: AnyArray, sums: Sums, limit: FloatArray, places: FloatArray, *, judged: BoolArray | None = None,
    undecided: BoolArray | None = None, more: Mapping[str, AnyArray] | None = None,
) -> dict[str, AnyArray]:  # fmt: skip
    """A table of sums, worst first.

    Parameters
    ----------
    ids : array, shape (n,)
    sums : Sums
    limit : float64 array, shape (n,)
    places : float64 array, shape (n, 3)
        Shown as x, y, z.
    judged : bool array, shape (n,), or None
        False where nothing obliges the sum to be zero: its `limit` is nan and its `holds` None.
    undecided : bool array, shape (n,), or None
        True where the limit is too wide to say anything: `holds` is None.
    more : mapping of str to array, or None
        Further columns.

    Returns
    -------
    dict of column name to array
        id, value, limit, holds, x, y, z and the further columns.
    """
    holds: AnyArray = np.abs(sums.value) <= limit
    shown = limit
    if undecided is not None and undecided.any():
        holds = holds.astype(object)
        holds[undecided] = None
    if judged is not None and not judged.all():
        holds = holds.astype(object)
        holds[~judged] = None
        shown = np.where(judged, limit, np.nan)
    order = worst_first(sums.value, shown)
    columns = {"id": ids, "value": sums.value, "limit": shown, "holds": holds}
    columns |= {axis: places[:, k] for k, axis in enumerate("xyz")} | dict(more or {})
    return {name: column[order] for name, column in columns.items()}
