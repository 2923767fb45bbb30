"""The record of an audit: what was asked, what was found, and what was not shown."""

import json
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from html import escape
from typing import TYPE_CHECKING, Any

import numpy as np

from dec.arrays import AnyArray
from dec.calculus.cochain import Cochain
from dec.calculus.dataset import Dataset, Input
from dec.errors import InputError

if TYPE_CHECKING:
    import pandas as pd

__all__ = ["Audit", "Suspect"]

SCHEMA = "dec.audit/1"
_TABLES = ("edges", "vertices", "faces", "cells", "boundaries", "holes")


@dataclass(frozen=True, slots=True)
class Suspect:
    """An edge or vertex whose own test stands out.

    Attributes
    ----------
    kind : str
        "edge" or "vertex".
    id : str
    statistic : float
        Size of its correction in its own standard deviations.
    estimate : float
        What everything else says the value is.
    inseparable_from : tuple of (kind, id)
        What no reading can tell apart from it.
    hint : str or None
        What would explain it.
    """

    kind: str
    id: str
    statistic: float
    estimate: float
    inseparable_from: tuple[tuple[str, str], ...] = ()
    hint: str | None = None


@dataclass(frozen=True, eq=False)
class Audit:
    """The result of `balance` or `loops`.

    Attributes
    ----------
    law : str
        "balance" or "loop".
    holds : bool or None
        Whether the law holds within the limit; None where nothing can be checked.
    data : Dataset
        What was audited.
    counts : mapping of str to int
    dof : int
        Independent checks.
    chi_square, limit, p_value : float or None
    tables : mapping of str to mapping of str to array
        Columns of "edges" and "vertices", or of "faces", "cells", "boundaries" and "holes" on a mesh.
    loops : sequence of mapping
        Loops of a network, worst first.
    suspects : tuple of Suspect
        Worst first.
    notes, not_shown : tuple of str
    asked : mapping
        The question: columns, standard deviations, limits, unit.
    method : str
    adjusted : Cochain or None
        Best consistent values; nan where a value does not follow.
    extra : mapping
        Figures beside the common ones; ``closes_to`` on a network: the largest amount by which adjusted values miss the
        law, over the largest value.
    """

    law: str
    holds: bool | None
    data: Dataset
    counts: Mapping[str, int]
    dof: int
    chi_square: float | None
    limit: float | None
    p_value: float | None
    tables: Mapping[str, Mapping[str, AnyArray]]
    loops: Sequence[Mapping[str, Any]] = ()
    suspects: tuple[Suspect, ...] = ()
    notes: tuple[str, ...] = ()
    not_shown: tuple[str, ...] = ()
    asked: Mapping[str, Any] = field(default_factory=dict)
    method: str = ""
    adjusted: Cochain | None = None
    extra: Mapping[str, Any] = field(default_factory=dict)

    @property
    def inputs(self) -> tuple[Input, ...]:
        """The files read, with their hashes."""
        return self.data.inputs

    @property
    def edges(self) -> "pd.DataFrame":
        """One row an edge, columns as in the JSON; values in the unit of the readings."""
        return self._frame("edges")

    @property
    def vertices(self) -> "pd.DataFrame":
        """One row a vertex or group, columns as in the JSON."""
        return self._frame("vertices")

    def table(self, name: str) -> "pd.DataFrame":
        """Any table of the audit as a frame: "edges", "vertices", "faces", "cells", "boundaries", "holes".

        Raises
        ------
        InputError
            If no audit has a table of that name; one that this audit does not have is empty.
        """
        if name not in _TABLES and name not in self.tables:
            message = f"table must be one of {', '.join(_TABLES)}, got {name!r}"
            raise InputError(message)
        return self._frame(name)

    def to_dict(self) -> dict[str, Any]:
        """The audit as plain Python objects, keys as in the JSON; nan becomes None."""
        network = {"edges", "vertices"} <= set(self.tables)
        result: dict[str, Any] = {
            "schema": SCHEMA,
            "law": self.law,
            "holds": self.holds,
            "inputs": [{"name": i.name, "sha256": i.sha256, "bytes": i.bytes} for i in self.inputs],
            "counts": dict(self.counts),
            "dof": self.dof,
            "chi_square": _plain(self.chi_square),
            "limit": _plain(self.limit),
            "p_value": _plain(self.p_value),
        }
        for name, columns in self.tables.items():
            result[name] = _rows(columns)
        if not network:
            for name in ("cells" if self.data.complex.dim == 3 else "faces", "boundaries", "holes"):
                result.setdefault(name, None)
        if network:
            result["loops"] = [{key: _plain(value) for key, value in loop.items()} for loop in self.loops]
        result["suspects"] = [
            {
                "kind": s.kind, "id": s.id, "statistic": _plain(s.statistic), "estimate": _plain(s.estimate),
                "inseparable_from": [{"kind": kind, "id": name} for kind, name in s.inseparable_from], "hint": s.hint,
            }
            for s in self.suspects
        ]  # fmt: skip
        result.update({key: _plain(value) for key, value in self.extra.items()})
        result["asked"] = {key: _plain(value) for key, value in self.asked.items()}
        result["method"] = self.method
        result["notes"] = list(self.notes)
        result["not_shown"] = list(self.not_shown)
        return result

    def to_json(self, *, indent: int | None = None) -> str:
        """The audit as JSON text: the same input gives the same bytes.

        Parameters
        ----------
        indent : int or None
            Spaces a level; None for one line.
        """
        return json.dumps(self.to_dict(), indent=indent, ensure_ascii=False, allow_nan=False)

    def __repr__(self) -> str:
        open_end = "not decided" if self.dof else "nothing can be checked"
        verdict = {True: "holds", False: "does not hold", None: open_end}[self.holds]
        figure = "" if self.chi_square is None or not self.dof else f", chi-square {self.chi_square:.4g}"
        limit = "" if self.limit is None or not self.dof else f", limit {self.limit:.4g}"
        return (
            f"<Audit {self.law}: {verdict}; {self.dof} independent check{'' if self.dof == 1 else 's'}{figure}{limit}>"
        )

    def _repr_html_(self) -> str:
        rows = [("law", self.law), ("verdict", repr(self)[1:-1].split(": ", 1)[1])]
        for rank, s in enumerate(self.suspects[:3], start=1):
            rows.append((f"suspect {rank}", f"{s.kind} {s.id}: {s.statistic:.3g} sd"))
        cells = "".join(f"<tr><th>{escape(a)}</th><td>{escape(b[:200])}</td></tr>" for a, b in rows)
        return f"<table><caption>dec audit</caption>{cells}</table>"

    def _frame(self, name: str) -> "pd.DataFrame":
        import pandas as pd

        return pd.DataFrame(dict(self.tables.get(name, {})))


def _rows(columns: Mapping[str, AnyArray]) -> list[dict[str, Any]]:
    names = list(columns)
    lists = [_listed(columns[name]) for name in names]
    return [dict(zip(names, row, strict=True)) for row in zip(*lists, strict=True)]


def _listed(column: AnyArray) -> list[Any]:
    """Return a column as JSON has it."""
    array = np.asarray(column)
    plain = array.astype(object)
    if array.dtype.kind == "f":
        plain[~np.isfinite(array)] = None
    listed: list[Any] = plain.tolist()
    return [_plain(value) for value in listed] if array.dtype == object else listed


def _plain(value: Any) -> Any:
    """Return the value as JSON has it: nan and infinity as None, NumPy scalars as Python's."""
    if isinstance(value, str):
        return value
    if isinstance(value, np.generic):
        value = value.item()
    if isinstance(value, float):
        return value if np.isfinite(value) else None
    if isinstance(value, tuple | list):
        return [_plain(item) for item in value]
    if isinstance(value, Mapping):
        return {str(key): _plain(item) for key, item in value.items()}
    if isinstance(value, np.ndarray):
        return [_plain(item) for item in value.tolist()]
    return value
