"""A result in plain sentences: the verdict, the first suspect, what was not checked."""

from collections.abc import Mapping, Sequence
from typing import Any

__all__ = ["checked_sentence", "number", "suspect_sentences", "verdict_sentence", "visible"]

_NAMED = 5


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
        return f"{subject.capitalize()} {says}: {amount}{_unit(result)}, {checks}."
    exactly = (
        "the decimals as written add up to exactly zero" if holds else "the decimals as written do not add up to zero"
    )
    return f"{subject.capitalize()} {says}: {exactly}, {checks}."


def suspect_sentences(result: Mapping[str, Any]) -> list[str]:
    """The first suspect, what cannot be told from it, and what would explain it."""
    if not result["suspects"]:
        return []
    first = result["suspects"][0]
    edge = next((e for e in result.get("edges", ()) if e["id"] == first["id"]), None)
    where = f" ({visible(edge['from'])} to {visible(edge['to'])}) reads {number(edge['value'])}" if edge else ""
    says = f", all else says {number(first['estimate'])}" if first["estimate"] is not None else ""
    lines = [f"{first['kind']} {visible(first['id'])}{where}{says}{_unit(result)}: {number(first['statistic'], 3)} sd"]
    if first["inseparable_from"]:
        names = ", ".join(visible(other["id"]) for other in first["inseparable_from"][:_NAMED])
        lines.append(f"no reading can tell it from {names}")
    if first["hint"]:
        lines.append(first["hint"])
    return lines


def checked_sentence(result: Mapping[str, Any]) -> str:
    """How many readings are checked, and which are not."""
    edges: Sequence[Mapping[str, Any]] = result.get("edges", ())
    if not edges:
        return ""
    by_standing: dict[str, list[str]] = {}
    for edge in edges:
        by_standing.setdefault(edge["standing"], []).append(edge["id"])
    measured = result["counts"]["measured"]
    parts = [f"{len(by_standing.get('checked', ()))} of {measured} reading{'' if measured == 1 else 's'}"]
    for word in ("unchecked", "inferred", "unknown"):
        names = by_standing.get(word, [])
        if names:
            more = ", ..." if len(names) > _NAMED else ""
            parts.append(f"{len(names)} {word} ({', '.join(visible(n) for n in names[:_NAMED])}{more})")
    return "; ".join(parts)


def _unit(result: Mapping[str, Any]) -> str:
    unit = result["asked"].get("unit")
    return f" {visible(unit)}" if unit else ""


def _chance(p_value: float | None) -> str:
    if p_value is None:
        return ""
    return f", p = {p_value:.2g}" if p_value >= 1e-6 else ", p < 1e-6"
