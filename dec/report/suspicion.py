"""What the tests of a measured network say, in sentences: suspects, errors together, chance, and what would be."""

from collections.abc import Mapping
from typing import Any

from dec.report.wording import estimated, number, unit_of, visible

__all__ = [
    "called",
    "chance_sentence",
    "leak_words",
    "part_sentences",
    "reading_of",
    "robust_sentences",
    "suspect_sentences",
    "together_sentences",
    "what_if_sentence",
]

_NAMED = 5


def called(entry: Mapping[str, Any], law: str) -> str:
    """A possible error by name: the id of an edge, "leak at J5", "supply at J5", "reading S3".

    Examples
    --------
    >>> called({"kind": "vertex", "id": "J5"}, "balance"), called({"kind": "edge", "id": "P3"}, "loop")
    ('leak at J5', 'P3')
    """
    name, kind = visible(entry["id"]), entry["kind"]
    if kind == "edge":
        return name
    if kind == "reading":
        return f"reading {name}"
    if kind == "vertex":
        return f"leak at {name}" if law == "balance" else f"held value at {name}"
    return f"{kind} at {name}"


def suspect_sentences(result: Mapping[str, Any]) -> list[str]:
    """The first suspect, what cannot be told from it, what would explain it, and what the verdict would be without."""
    if not result["suspects"]:
        return []
    first, law = result["suspects"][0], result["law"]
    lines = [f"{_described(first, result)}: {number(first['statistic'], 3)} times its sd"]
    others = first["inseparable_from"]
    if others:
        names = ", ".join(called(other, law) for other in others[:_NAMED])
        more = f" and {len(others) - _NAMED} more" if len(others) > _NAMED else ""
        lines.append(f"no reading can tell it from {names}{more}")
    if first["hint"]:
        lines.append(visible(first["hint"]))
    explained = "if that is so" if first["kind"] == "vertex" else "left out"
    for name, says in (("turned", "turned round"), ("scaled", "scaled so"), ("left_out", explained)):
        outcome = first.get("outcomes", {}).get(name)
        if outcome is not None and outcome["holds"] is not None:
            word = "would hold" if outcome["holds"] else "would still fail"
            lines.append(f"{says}, the law {word}: chi-square {number(outcome['chi_square'], 4)}, limit "
                         f"{number(outcome['limit'], 4)}")  # fmt: skip
            break
    return lines


def together_sentences(result: Mapping[str, Any]) -> list[str]:
    """Errors that explain the readings together, and what is left beside them; nothing where none was found."""
    errors = result.get("errors")
    if not errors or not errors["found"]:
        return []
    rest = {True: "the rest is within its limit", False: "the rest still exceeds its limit", None: "no check is left"}
    left = rest[errors["holds"]]
    if errors["why_stopped"] != left:
        left += f"; {visible(errors['why_stopped'])}"
    if len(errors["found"]) == 1:
        return [f"with {called(errors['found'][0], result['law'])} explained, {left}"]
    lines = []
    for entry in errors["found"][:_NAMED]:
        alike = [called(other, result["law"]) for other in entry["inseparable_from"][:_NAMED]]
        told = f" (or {', '.join(alike)})" if alike else ""
        lines.append(f"{_described(entry, result)}: {number(entry['statistic'], 3)} times its sd{told}")
    if len(errors["found"]) > _NAMED:
        lines.append(f"and {len(errors['found']) - _NAMED} more in --json")
    if errors["limit"] is None:
        return [*lines, left]
    return [*lines, f"{left}: chi-square {number(errors['chi_square'], 4)}, limit {number(errors['limit'], 4)}"]


def chance_sentence(result: Mapping[str, Any]) -> str:
    """How many single tests exceed their limit, and how many chance alone would give; empty where there are none."""
    chance = result.get("chance")
    if not chance or not chance["tests"]:
        return ""
    return (
        f"single tests beyond {number(chance['limit'], 4)} sd ({visible(result['asked']['critical_said'])}): "
        f"{chance['exceed']:,} of {chance['tests']:,}; chance alone would give {number(chance['expected'], 2)}"
    )


def robust_sentences(result: Mapping[str, Any]) -> list[str]:
    """What the least sum of absolute corrections changes, to compare; nothing where it was not asked for."""
    robust = result.get("robust")
    if not robust:
        return []
    much = f"{len(robust['large'])} of them by much" if robust["large"] else "none by much"
    knows = "; a leak shows as several meters" if result["law"] == "balance" and robust["large"] else ""
    lines = [f"least absolute corrections change {_counted(robust['changed'], 'reading')}, {much}{knows}"]
    lines += [
        f"{called(entry, result['law'])} from {number(entry['value'])} to {estimated(entry['estimate'])}, "
        f"{number(entry['times_sd'], 3)} sd"
        for entry in robust["large"][:_NAMED]
    ]
    return lines


def part_sentences(result: Mapping[str, Any]) -> list[str]:
    """The verdict of each part that hangs together, worst first; nothing where there is one part."""
    parts = result.get("parts") or []
    lines = []
    for part in parts[:_NAMED]:
        word = {True: "holds", False: "does NOT hold", None: "nothing to check"}[part["holds"]]
        checks, figure = _counted(part["dof"], "check"), ""
        if part["holds"] is None and part["dof"]:
            word = checks
        if part["limit"] is not None:
            figure = f": chi-square {number(part['chi_square'], 4)}, limit {number(part['limit'], 4)}, {checks}"
        more = f" and {part['vertices'] - 1:,} more" if part["vertices"] > 1 else ""
        lines.append(f"{visible(part['part'])}{more}: {word}{figure}")
    if len(parts) > _NAMED:
        listed = "" if len(parts) == result["counts"]["components"] else f", the worst {len(parts):,} of them"
        lines.append(f"and {_counted(result['counts']['components'] - _NAMED, 'more part')} in --json{listed}")
    return lines


def what_if_sentence(result: Mapping[str, Any]) -> str:
    """What the verdict would be with the readings asked for; empty where nothing was asked."""
    would = result.get("what_if")
    if not would:
        return ""
    parts = [f"{visible(name)} turned" for name in would["turned"]]
    parts += [f"{visible(name)} times {number(factor)}" for name, factor in would["scaled"].items()]
    parts += [f"{visible(name)} left out" for name in would["left_out"]]
    word = {True: "the law would hold", False: "the law would not hold", None: "nothing could be checked"}
    figure = ""
    if would["chi_square"] is not None and would["limit"] is not None:
        checks = _counted(would["dof"], "check")
        figure = f": chi-square {number(would['chi_square'])}, limit {number(would['limit'])}, {checks}"
    left = ""
    if would["suspects"]:
        first, law = would["suspects"][0], result["law"]
        alike = (first, *first["inseparable_from"][:_NAMED])
        left = f"; first suspect then {' or '.join(called(entry, law) for entry in alike)}"
    return f"with {', '.join(parts)} {word[would['holds']]}{figure}{left}"


def _counted(count: int, noun: str) -> str:
    return f"{count:,} {noun}{'' if count == 1 else 's'}"


def _described(entry: Mapping[str, Any], result: Mapping[str, Any]) -> str:
    """Return an error with its size: what the reading is and all else says, what leaves unseen, what is too high."""
    name = called(entry, result["law"])
    if entry["kind"] == "vertex":
        return f"{name}{':' if result['law'] == 'balance' else ' is'} {leak_words(entry, result)}"
    row = _row(entry, result)
    ends = f" ({visible(row['from'])} to {visible(row['to'])})" if row and "from" in row else ""
    value, estimate = reading_of(entry, result)
    reads = "" if value is None else f" reads {number(value)}"
    return f"{name}{ends}{reads}, all else says {estimate}{unit_of(result)}"


def leak_words(entry: Mapping[str, Any], result: Mapping[str, Any]) -> str:
    """How much leaves or comes in unseen at a vertex, or by how much a held value is wrong.

    Examples
    --------
    >>> leak_words({"kind": "vertex", "id": "J5", "estimate": -2.5}, {"law": "balance", "asked": {"unit": "L/s"}})
    '2.5 L/s comes in unseen'
    """
    size, out = f"{estimated(abs(entry['estimate']), entry.get('sd'))}{unit_of(result)}", entry["estimate"] > 0
    if result["law"] == "balance":
        return f"{size} {'leaves' if out else 'comes in'} unseen"
    return f"{size} too {'high' if out else 'low'}"


def reading_of(entry: Mapping[str, Any], result: Mapping[str, Any]) -> tuple[float | None, str]:
    """What the reading of a suspect is, None where it is not at hand, and what all else says, for reading."""
    row = _row(entry, result)
    value, sd = entry.get("value", row.get("value")), entry.get("sd")
    return value, estimated(entry["estimate"], row.get("sd") if sd is None else sd)


def _row(entry: Mapping[str, Any], result: Mapping[str, Any]) -> Mapping[str, Any]:
    table = {"edge": "edges", "reading": "readings"}.get(entry["kind"], "at_vertices")
    found: Mapping[str, Any] = next((row for row in result.get(table, ()) if row["id"] == entry["id"]), {})
    return found
