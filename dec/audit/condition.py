"""Is the network or mesh sound, and what can be checked with it?"""

import json
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from functools import cached_property
from typing import Any

import numpy as np

from dec.arrays import IntArray
from dec.audit.names import counted
from dec.calculus.columns import Column
from dec.calculus.complex import Complex
from dec.calculus.dataset import Dataset
from dec.calculus.homology_groups import HomologyGroup
from dec.errors import InputError, TopologyError
from dec.findings import Finding
from dec.geometry.shape import check_shape
from dec.topology.edges import unique_pairs
from dec.topology.graphs import bridges

__all__ = ["Condition", "check"]

SCHEMA = "dec.check/1"
_NAMED = 5
_LIKE_NUMBER = re.compile(r"\s*[+-]?[.,]?[0-9][0-9.,' ]*([eE][+-]?[0-9]+)?\s*")  # a date is not
_CELLS = ("vertices", "edges", "faces", "cells")
_ONE = ("vertex", "edge", "face", "cell")


@dataclass(frozen=True, eq=False)
class Condition:
    """The result of `check`.

    Attributes
    ----------
    data : Dataset
    findings : tuple of Finding
        Statements that hold for a sound complex.
    facts : mapping of str to str
        What can be checked with it, in words; facts are no faults.
    """

    data: Dataset
    findings: tuple[Finding, ...]
    facts: Mapping[str, str] = field(default_factory=dict)

    @property
    def holds(self) -> bool:
        """Whether every finding holds."""
        return all(f.holds for f in self.findings)

    @property
    def betti(self) -> tuple[int, ...] | None:
        """The Betti numbers; None where the cells are so entangled that they cannot be counted in reasonable time."""
        groups = self._homology[0]
        return None if groups is None else tuple(group.rank for group in groups)

    @property
    def torsion(self) -> tuple[tuple[int, ...], ...] | None:
        """Orders of the finite parts of the homology of each degree; None as with `betti`."""
        groups = self._homology[0]
        return None if groups is None else tuple(group.torsion for group in groups)

    @cached_property
    def _homology(self) -> tuple[tuple[HomologyGroup, ...] | None, str]:
        K = self.data.complex
        try:
            return tuple(K.homology(k) for k in range(K.dim + 1)), ""
        except TopologyError as error:
            return None, str(error)

    def to_dict(self) -> dict[str, Any]:
        """The condition as plain Python objects, keys as in the JSON."""
        K = self.data.complex
        groups, uncounted = self._homology
        facts = dict(self.facts)
        if K.dim > 1 and groups is not None:
            facts["homology"] = ", ".join(f"H{group.degree} = {group}" for group in groups)
        return {
            "schema": SCHEMA,
            "holds": self.holds,
            "inputs": [{"name": i.name, "sha256": i.sha256, "bytes": i.bytes} for i in self.data.inputs],
            "counts": dict(zip(_CELLS, K.counts, strict=False)),
            "dim": K.dim,
            "euler": K.euler,
            "betti": None if self.betti is None else list(self.betti),
            "torsion": None if self.torsion is None else [list(orders) for orders in self.torsion],
            "components": K.n_components,
            "manifold": K.is_manifold,
            "orientable": K.is_orientable,
            "closed": K.dim > 1 and not bool((K.incidences.uses == 1).any()),
            "boundary_loops": len(K.boundary_loops()) if K.dim == 2 else None,
            "to_turn": K.turning_proposal().tolist() if K.dim > 1 else [],
            "findings": [
                {
                    "name": f.name, "holds": f.holds, "measured": _plain(f.measured), "allowed": _plain(f.allowed),
                    "where": _plain(f.where),
                }
                for f in self.findings
            ],
            "facts": facts,
            "notes": [*self.data.notes, *([uncounted] if uncounted else [])],
        }  # fmt: skip

    def to_json(self, *, indent: int | None = None) -> str:
        """The condition as JSON text: the same input gives the same bytes."""
        return json.dumps(self.to_dict(), indent=indent, ensure_ascii=False, allow_nan=False)

    def __repr__(self) -> str:
        failed = [f.name for f in self.findings if not f.holds]
        return f"<Condition: {'sound' if not failed else 'not: ' + '; '.join(failed)}>"


def check(data: Dataset | Complex) -> Condition:
    """Whether a network or mesh is sound, and what can be checked with it.

    Parameters
    ----------
    data : Dataset or Complex

    Returns
    -------
    Condition
        Its findings are those of `Complex.check`, and where there are coordinates of the shapes of the cells. Nothing
        is repaired.

    Raises
    ------
    InputError
        If `data` is neither.

    Examples
    --------
    >>> check(Complex.from_edges([0, 1, 2], [1, 2, 0])).facts["loops"]
    '1 independent loop; every edge lies on a loop'
    """
    if isinstance(data, Complex):
        data = Dataset(data)
    if not isinstance(data, Dataset):
        message = f"data must be a Dataset or a Complex, got {type(data).__name__}"
        raise InputError(message)
    K = data.complex
    findings = list(K.check())
    if K.points is not None and K.dim > 1:
        findings += check_shape(K)
    findings += [found for columns in data.columns.values() for found in _number_findings(columns)]
    facts = _network_facts(data) if K.dim < 2 else _mesh_facts(data)
    return Condition(data, tuple(findings), facts)


def _number_findings(columns: Mapping[str, Column]) -> list[Finding]:
    """Return one finding for every column that is written like numbers and yet cannot be read as such."""
    findings = []
    for name, column in columns.items():
        if name in _STRUCTURE - {"x", "y", "z"} or column.cells.dtype != object:
            continue
        numeric = sum(bool(_LIKE_NUMBER.fullmatch(cell)) for cell in column.cells)
        if 2 * numeric <= int(column.present().sum()):
            continue
        try:
            column.numbers()
        except InputError as error:
            findings.append(Finding(f"column {name} can be read as numbers", False, numeric, None, (str(error),)))
    return findings


def _network_facts(data: Dataset) -> dict[str, str]:
    K = data.complex
    alone = np.flatnonzero(bridges(K.tail, K.head, K.counts[0]))
    loops = K.counts[1] - K.counts[0] + K.n_components
    checked = f"{_cells(len(alone), 1)} on no loop ({_some(K, alone)})" if len(alone) else "every edge lies on a loop"
    facts = {"loops": f"{counted(loops, 'independent loop', 'independent loops')}; {checked}"}
    low, high = np.minimum(K.tail, K.head), np.maximum(K.tail, K.head)
    proper = low != high
    distinct, _, _ = unique_pairs(low[proper], high[proper], K.counts[0])
    parallel = int(proper.sum()) - len(distinct)
    if parallel:
        facts["parallel"] = f"{_cells(parallel, 1)} beside another edge of the same two vertices"
    same = np.flatnonzero(K.tail == K.head)
    if len(same):
        facts["self"] = f"{_cells(len(same), 1)} with both ends at one vertex ({_some(K, same)})"
    for degree, what in ((1, "edges"), (0, "vertices")):
        described = [
            _column_fact(column) for name, column in data.columns.get(degree, {}).items() if name not in _STRUCTURE
        ]
        if described:
            facts["columns" if degree else "at nodes"] = f"on {what}: " + ", ".join(described)
    return facts


_STRUCTURE = frozenset({"id", "from", "to", "x", "y", "z"})


def _column_fact(column: Any) -> str:
    present = int(column.present().sum())
    try:
        column.numbers()
    except InputError:
        return f"{column.name} (text)"
    return f"{column.name} ({present} of {len(column.cells)})"


def _mesh_facts(data: Dataset) -> dict[str, str]:
    K = data.complex
    facts = {}
    if K.points is not None and len(K.points):
        size = " x ".join(f"{extent:.6g}" for extent in np.ptp(K.points, axis=0))
        facts["box"] = f"{size} (unit of the file)"
    uses = K.incidences.uses
    facts["open"] = f"{_cells(int((uses == 1).sum()), K.dim - 1)} with one {_ONE[K.dim]} only"
    turn = K.turning_proposal()
    if len(turn):
        first = ", ".join(map(str, turn[:_NAMED])) + (", ..." if len(turn) > _NAMED else "")
        facts["to turn"] = f"{len(turn):,} would have to be turned to agree ({first})"
    if data.fields:
        facts["fields"] = ", ".join(f"{name} ({' and '.join(places)})" for name, places in data.fields.items())
    if data.regions:
        facts["regions"] = ", ".join(f"{r.name} ({_cells(len(r.cells), r.degree)})" for r in data.regions.values())
    return facts


def _cells(count: int, degree: int) -> str:
    return f"{count:,} {_ONE[degree] if count == 1 else _CELLS[degree]}"


def _some(K: Complex, edges: IntArray) -> str:
    names = [str(e if K.edge_ids is None else K.edge_ids[e]) for e in edges[:_NAMED].tolist()]
    return ", ".join(names) + (", ..." if len(edges) > _NAMED else "")


def _plain(value: Any) -> Any:
    if isinstance(value, np.generic):
        value = value.item()
    if isinstance(value, Fraction):
        return str(value)
    if isinstance(value, Sequence) and not isinstance(value, str):
        return [_plain(item) for item in value]
    return value if isinstance(value, bool | int | float | str) or value is None else str(value)
