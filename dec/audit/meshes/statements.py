"""Sentences and rows that several audits of a mesh share."""

from collections.abc import Mapping
from typing import Any

import numpy as np

from dec.arrays import AnyArray
from dec.findings import Finding

__all__ = [
    "TOO_WIDE", "all_hold", "beyond_limit", "counted", "measured", "n_undecided", "renamed", "whole_rows", "worst",
]  # fmt: skip

_NAMED = 3
TOO_WIDE = (
    ": the estimated error of the integration rule is no small part of the field there (a wrong value, noise, or too "
    "coarse a mesh); give a limit to decide"
)


def counted(number: int, what: str) -> str:
    """A number with its noun, as in "1 face" or "2 faces"."""
    return f"{number} {what}{'' if number == 1 else 's'}"


def measured(value: float, unit: str | None) -> str:
    """A value to four digits with its unit, where there is one."""
    return f"{value:.4g}{f' {unit}' if unit else ''}"


def n_undecided(tables: Mapping[str, Mapping[str, AnyArray]]) -> int:
    """How many rows of tables have a limit and yet are neither within nor beyond it."""
    with_gaps = (table for table in tables.values() if table["holds"].dtype == object)
    rows = (row for table in with_gaps for row in zip(table["limit"], table["holds"], strict=True))
    return sum(int(np.isfinite(limit)) for limit, holds in rows if holds is None)


def all_hold(tables: Mapping[str, Mapping[str, AnyArray]]) -> bool | None:
    """Whether all rows of tables hold: False with one that does not, else None with one that is not decided."""
    if any(np.equal(table["holds"], False).any() for table in tables.values()):
        return False
    return None if n_undecided(tables) else True


def worst(table: Mapping[str, AnyArray], unit: str | None, joint: str) -> str:
    """The first row of a table, as in "0.03 m2/s round face 17 where 0.01 is allowed"."""
    value, allowed = float(table["value"][0]), float(table["limit"][0])
    return f"{measured(value, unit)} {joint} {table['id'][0]} where {allowed:.2g} is allowed"


def beyond_limit(table: Mapping[str, AnyArray], unit: str | None, joint: str) -> list[str]:
    """The worst rows that do not hold, as in "6.283 m2/s round hole 1".

    Parameters
    ----------
    table : mapping of str to array
        Worst first, as from `dec.audit.meshes.limits.table_of`, with names as ids.
    unit : str or None
    joint : str
        Between value and name: "round", "out of".

    Returns
    -------
    list of str
        At most three, and how many more there are.
    """
    bad = np.flatnonzero(np.equal(table["holds"], False))
    texts = [f"{measured(table['value'][k], unit)} {joint} {table['id'][k]}" for k in bad[:_NAMED]]
    return texts + ([f"and {len(bad) - _NAMED} more"] if len(bad) > _NAMED else [])


def renamed(found: Finding, name: str) -> Finding:
    """The same exact comparison under the name that fits the mesh."""
    return Finding(name, found.holds, found.measured, found.allowed, left=found.left, right=found.right)


def whole_rows(findings: tuple[Finding, ...]) -> list[dict[str, Any]]:
    """Exact comparisons as rows with name, left, right and holds; fractions as text."""
    return [{"name": f.name, "left": str(f.left), "right": str(f.right), "holds": f.holds} for f in findings]
