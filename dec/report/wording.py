"""A result in plain sentences: the verdict, the first suspect, what was not checked."""

from collections.abc import Mapping, Sequence
from math import floor, log10
from typing import Any

__all__ = ["checked_sentence", "estimated", "number", "unit_of", "verdict_sentence", "visible"]

_NAMED = 5
_DIGITS, _MOST_WHOLE, _MOST_DIGITS = 4, 9, 15


def visible(text: object) -> str:
    r"""Text that cannot steer a terminal: control and direction characters are shown as escapes.

    Examples
    --------
    >>> print(visible("a\x1b[31mb"))
    a\x1b[31mb
    """
    return "".join(c if c.isprintable() else c.encode("unicode_escape").decode("ascii") for c in str(text))


def number(value: Any, digits: int = 6) -> str:
    """A number for reading: so many significant digits, a dash where there is none.

    Examples
    --------
    >>> number(33757.634), number(None), number(0.05)
    ('33757.6', '-', '0.05')
    """
    if value is None:
        return "-"
    if isinstance(value, float):
        return f"{value:.{digits}g}" if value else "0"
    return visible(value)


def estimated(value: float | None, sd: float | None = None) -> str:
    """An estimate for reading: four significant digits, or as many as its standard deviation bears out.

    Whole digits are always shown, so that 33757.6 with a standard deviation of 50 is no power of ten.

    Examples
    --------
    >>> estimated(5.0123456, 0.1), estimated(101.23456, 0.003), estimated(33757.634, 50.0), estimated(None)
    ('5.012', '101.235', '33758', '-')
    """
    if not value:
        return number(value)
    whole = floor(log10(abs(value))) + 1
    borne_out = whole - floor(log10(sd)) if sd else 0
    return number(float(value), min(max(_DIGITS, borne_out, whole if whole <= _MOST_WHOLE else 0), _MOST_DIGITS))


def verdict_sentence(result: Mapping[str, Any]) -> str:
    """What the law says of these numbers, with the figures that decide it."""
    if result.get("verdict"):
        text = str(result["verdict"])
        return f"{text[:1].upper()}{text[1:].rstrip('.')}."
    law, holds, dof = result["law"], result["holds"], result["dof"]
    subject = "the flows" if law == "balance" else "the differences"
    if holds is None:
        return f"Nothing can be checked: no reading of {subject} can be contradicted by the others."
    says = (
        ("balance" if law == "balance" else "close")
        if holds
        else ("do not balance" if law == "balance" else "do not close")
    )
    checks = f"{dof} independent check{'s' if dof != 1 else ''}"
    if result["chi_square"] is not None:
        relation = "is within" if holds else "exceeds"
        percent = 100 * result["asked"].get("alpha", 0.05)
        return (
            f"{subject.capitalize()} {says}: chi-square {number(result['chi_square'])} {relation} its "
            f"{percent:g} % limit {number(result['limit'])} on {checks}{_chance(result['p_value'])}."
        )
    limit = result["limit"]
    if limit:
        amount = f"every residual is within {number(limit)}" if holds else f"residuals exceed {number(limit)}"
        return f"{subject.capitalize()} {says}: {amount}{unit_of(result)}, {checks}."
    exactly = (
        "the decimals as written add up to exactly zero" if holds else "the decimals as written do not add up to zero"
    )
    return f"{subject.capitalize()} {says}: {exactly}, {checks}."


def checked_sentence(result: Mapping[str, Any]) -> str:
    """How many readings are checked, and which are not."""
    standing = _standing(result)
    if not standing:
        return ""
    measured = result["counts"]["measured"]
    parts = [f"{standing['checked']['count']} of {measured} {_what_is_checked(result, measured)}"]
    for word in ("unchecked", "inferred", "unknown"):
        count, names = standing[word]["count"], standing[word]["first"]
        if count:
            more = ", ..." if count > _NAMED else ""
            parts.append(f"{count} {word} ({', '.join(visible(n) for n in names[:_NAMED])}{more})")
    return "; ".join(parts)


def _what_is_checked(result: Mapping[str, Any], measured: int) -> str:
    """Return "readings", or "measured edges" where a table of readings gives some edges several."""
    if "readings" not in result:
        return f"reading{'' if measured == 1 else 's'}"
    count = result.get("shown", {}).get("of", {}).get("readings", len(result["readings"]))
    edges = f"measured edge{'' if measured == 1 else 's'}"
    return edges if count == measured else f"{edges}, which {'has' if measured == 1 else 'have'} {count} readings"


def _standing(result: Mapping[str, Any]) -> Mapping[str, Any]:
    """Return how many edges have each standing and the first of them; nothing where there are no edges."""
    edges: Sequence[Mapping[str, Any]] = result.get("edges", ())
    if not edges:
        return {}
    counted = result.get("shown", {}).get("standing")
    if counted is not None:
        return dict(counted)
    by_standing: dict[str, list[str]] = {word: [] for word in ("checked", "unchecked", "inferred", "unknown")}
    for edge in edges:
        by_standing[edge["standing"]].append(edge["id"])
    return {word: {"count": len(names), "first": names} for word, names in by_standing.items()}


def unit_of(result: Mapping[str, Any]) -> str:
    """The unit of an audit after a space; empty where none was given."""
    unit = result["asked"].get("unit")
    return f" {visible(unit)}" if unit else ""


def _chance(p_value: float | None) -> str:
    if p_value is None:
        return ""
    return f", p = {p_value:.2g}" if p_value >= 1e-6 else ", p < 1e-6"
