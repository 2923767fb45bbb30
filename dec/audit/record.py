"""The record of an audit: what was asked, what was found, and what was not shown."""

import json
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from html import escape
from typing import TYPE_CHECKING, Any

from dec.arrays import AnyArray
from dec.audit.given.what_if import WhatIf
from dec.audit.rows import Rows, largest_coordinate, plain, shown_rows, standing_counts
from dec.calculus.cochain import Cochain
from dec.calculus.dataset import Dataset, Input
from dec.errors import InputError

if TYPE_CHECKING:
    import pandas as pd

__all__ = ["Audit", "Suspect"]

SCHEMA = "dec.audit/1"
_TABLES = ("edges", "vertices", "at_vertices", "readings", "faces", "cells", "boundaries", "holes")


@dataclass(frozen=True, slots=True)
class Suspect:
    """An error at an edge, at a vertex or in one reading whose own test stands out.

    Attributes
    ----------
    kind : str
        "edge", "vertex", "reading" (one of several of an edge), or "supply" or "potential" (a reading at a vertex).
    id : str
    statistic : float
        Size of the error that it would be, in the standard deviations of that.
    estimate : float
        What everything else says the value is. Of kind "vertex" the error itself: what leaves there unseen, or by how
        much a held potential is too high.
    inseparable_from : tuple of (kind, id)
        What no reading can tell apart from it.
    hint : str or None
        What would explain it.
    sd : float or None
        Standard deviation of the difference between a reading and the estimate, or of an estimated error.
    outcomes : mapping
        The global test as it would be: "left_out", and "turned" or "scaled" where the hint says so.
    """

    kind: str
    id: str
    statistic: float
    estimate: float
    inseparable_from: tuple[tuple[str, str], ...] = ()
    hint: str | None = None
    sd: float | None = None
    outcomes: Mapping[str, Mapping[str, object]] = field(default_factory=dict)


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
        Columns of "edges" and "vertices", where there are any also of "at_vertices" (readings at vertices) and
        "readings" (rows of a table of them); or of "faces", "cells", "boundaries" and "holes" on a mesh.
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
    again : function of a WhatIf, or None
        Audits a network anew with other readings.
    certifier : function of an Audit, or None
        Makes its certificate.
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
    again: "Callable[[WhatIf], Audit] | None" = field(default=None, repr=False)
    certifier: "Callable[..., bytes] | None" = field(default=None, repr=False)

    def what_if(
        self, turned: Iterable[str] = (), scaled: Mapping[str, Any] | None = None, left_out: Iterable[str] = ()
    ) -> "Audit":
        """The audit as it would be with other readings; the data stay as they are.

        Parameters
        ----------
        turned : iterable of str
            Ids of edges whose readings count the other way.
        scaled : mapping of id to number or text
            What readings are multiplied by, exactly, "1/3.6" too; a product without end is rounded at its 20th digit.
        left_out : iterable of str
            Ids of edges taken as not measured.

        Returns
        -------
        Audit

        Raises
        ------
        InputError
            If an id is no measured edge, a factor no number, or the audit is one of a mesh.

        Examples
        --------
        >>> import pandas as pd
        >>> from dec import Dataset, balance
        >>> rows = {"id": ["in", "out"], "from": ["S", "J"], "to": ["J", "T"], "flow": ["5.0", "-5.0"]}
        >>> audit = balance(Dataset.from_frames(pd.DataFrame(rows)), value="flow", sd=0.1, open=("S", "T"))
        >>> audit.holds, audit.what_if(turned=["out"]).holds
        (False, True)
        """
        if self.again is None:
            message = "what-if questions are asked of an audit of a network column, not of a mesh field"
            raise InputError(message)
        return self.again(WhatIf.of(turned, scaled, left_out))

    def summary(self) -> dict[str, Any]:
        """The verdict with its figures, and the first three suspects, as plain Python objects."""
        return {
            "holds": self.holds, "dof": self.dof, "chi_square": plain(self.chi_square), "limit": plain(self.limit),
            "p_value": plain(self.p_value), "suspects": self.to_dict(rows=0)["suspects"][:3],
        }  # fmt: skip

    def certify(self, *, contents: Sequence[bytes] = ()) -> bytes:
        """The certificate of a network audit as the bytes of a file, for ``dec verify``.

        Parameters
        ----------
        contents : sequence of bytes
            The input files, in the order of `inputs`: with them a changed line is named.

        Raises
        ------
        InputError
            If the audit is one of a mesh, or of readings as they are not.
        """
        if self.certifier is None:
            message = "certificates are made of an audit of a network column, not of a mesh field"
            raise InputError(message)
        return self.certifier(self, contents=contents)

    @property
    def certificate(self) -> dict[str, Any]:
        """The certificate as plain Python objects; see `certify`."""
        found: dict[str, Any] = json.loads(self.certify())
        return found

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
        """Any table of the audit as a frame: "edges", "vertices", "at_vertices", "readings", or one of a mesh.

        Parameters
        ----------
        name : str
            Of a mesh: "faces", "cells", "boundaries" or "holes".

        Raises
        ------
        InputError
            If no audit has a table of that name; one that this audit does not have is empty.
        """
        if name not in _TABLES and name not in self.tables:
            message = f"table must be one of {', '.join(_TABLES)}, got {name!r}"
            raise InputError(message)
        return self._frame(name)

    def to_dict(self, *, rows: int | None = None) -> dict[str, Any]:
        """The audit as plain Python objects, keys as in the JSON; nan becomes None.

        Parameters
        ----------
        rows : int or None
            Rows of each table that are wanted; None for all. Vertices and loops then come worst first, edges with
            suspects first, and one more key, "shown", says of how many they are and counts the edges by standing.
        """
        entries = self._entries(self.tables if rows is None else {}, self.loops if rows is None else self.loops[:rows])
        found = {key: value.objects() if isinstance(value, Rows) else value for key, value in entries.items()}
        return found if rows is None else found | self._cut(rows)

    def _cut(self, count: int) -> dict[str, Any]:
        """Return the tables cut to what a view shows, with the true counts."""
        found: dict[str, Any] = {}
        of, standing = {"loops": len(self.loops)}, None
        named = {suspect.id for suspect in self.suspects}
        named |= {entry["id"] for entry in (self.extra.get("errors") or {}).get("found", ())}
        for name, columns in self.tables.items():
            cut, of[name] = shown_rows(name, columns, named, count)
            found[name] = cut.objects()
            if name == "edges":
                standing = standing_counts(columns["standing"], columns["id"], count)
        largest = largest_coordinate(self.tables)
        return {**found, "shown": {"of": of, "standing": standing, "largest_coordinate": largest}}

    def _entries(
        self, tables: Mapping[str, Mapping[str, AnyArray]], loops: Sequence[Mapping[str, Any]]
    ) -> dict[str, Any]:
        """Return what the JSON holds, by key and in order; tables are still columns."""
        network = {"edges", "vertices"} <= set(self.tables)
        result: dict[str, Any] = {
            "schema": SCHEMA,
            "law": self.law,
            "holds": self.holds,
            "inputs": [{"name": i.name, "sha256": i.sha256, "bytes": i.bytes} for i in self.inputs],
            "counts": dict(self.counts),
            "dof": self.dof,
            "chi_square": plain(self.chi_square),
            "limit": plain(self.limit),
            "p_value": plain(self.p_value),
        }
        result.update({name: Rows(columns) for name, columns in tables.items()})
        if not network:
            for name in ("cells" if self.data.complex.dim == 3 else "faces", "boundaries", "holes"):
                result.setdefault(name, None)
        if network:
            result["loops"] = [{key: plain(value) for key, value in loop.items()} for loop in loops]
        result["suspects"] = [
            {
                "kind": s.kind, "id": s.id, "statistic": plain(s.statistic), "estimate": plain(s.estimate),
                "inseparable_from": [{"kind": kind, "id": name} for kind, name in s.inseparable_from], "hint": s.hint,
                "sd": plain(s.sd), "outcomes": plain(s.outcomes),
            }
            for s in self.suspects
        ]  # fmt: skip
        result.update({key: plain(value) for key, value in self.extra.items()})
        result["asked"] = {key: plain(value) for key, value in self.asked.items()}
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
        if indent is not None:
            return json.dumps(self.to_dict(), indent=indent, ensure_ascii=False, allow_nan=False)
        texts = (
            f"{_dumped(key)}: {value.json() if isinstance(value, Rows) else _dumped(value)}"
            for key, value in self._entries(self.tables, self.loops).items()
        )
        return f"{{{', '.join(texts)}}}"

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


def _dumped(value: Any) -> str:
    return json.dumps(value, ensure_ascii=False, allow_nan=False)
