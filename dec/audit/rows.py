"""The tables of an audit row by row: as plain objects, as JSON text, or only the rows that a view shows."""

import json
from collections.abc import Callable, Collection, Iterable, Mapping
from dataclasses import dataclass
from itertools import repeat
from typing import Any

import numpy as np

from dec.arrays import AnyArray, FloatArray, IntArray

__all__ = [
    "Rows", "largest_coordinate", "largest_first", "plain", "shown_rows", "standing_counts",
]  # fmt: skip

_STANDINGS = ("checked", "unchecked", "inferred", "unknown")
_READINGS = ("edges", "readings", "at_vertices")
_AXES = ("x", "y", "z")
_WORDS: Mapping[bool | None, str] = {True: "true", False: "false", None: "null"}
# The C function that json itself uses for text.
_quoted: Callable[[str], str] = json.encoder.encode_basestring


@dataclass(frozen=True, slots=True)
class Rows:
    """A table by columns, which becomes rows only when it is written.

    Attributes
    ----------
    columns : mapping of str to array
        Of equal length.
    """

    columns: Mapping[str, AnyArray]

    def chosen(self, rows: IntArray) -> "Rows":
        """Only the rows given, in that order."""
        return Rows({name: np.asarray(column)[rows] for name, column in self.columns.items()})

    def objects(self) -> list[dict[str, Any]]:
        """One mapping a row; nan and infinity are None.

        Examples
        --------
        >>> Rows({"id": np.array(["A"], dtype=object), "sd": np.array([np.nan])}).objects()
        [{'id': 'A', 'sd': None}]
        """
        names = list(self.columns)
        return [dict(zip(names, row, strict=True)) for row in zip(*map(_listed, self.columns.values()), strict=True)]

    def json(self) -> str:
        """The text that `json.dumps` makes of `objects`, made column by column.

        Examples
        --------
        >>> Rows({"id": np.array(["A", "B"], dtype=object), "sd": np.array([np.nan, 0.5])}).json()
        '[{"id": "A", "sd": null}, {"id": "B", "sd": 0.5}]'
        """
        texts = {name: _texts(column) for name, column in self.columns.items()}
        count = len(next(iter(texts.values()), ()))
        pieces: list[Iterable[str]] = []
        for name, column in texts.items():
            pieces += [repeat(f"{', ' if pieces else '{'}{_quoted(name)}: ", count), column]
        return f"[{', '.join(map(''.join, zip(*pieces, repeat('}', count), strict=True)))}]"


def plain(value: Any) -> Any:
    """The value as JSON has it: nan and infinity as None, NumPy scalars as Python's.

    Examples
    --------
    >>> plain({1: (np.float64(0.5), float("inf"))})
    {'1': [0.5, None]}
    """
    if isinstance(value, str):
        return value
    if isinstance(value, np.generic):
        value = value.item()
    if isinstance(value, float):
        return value if np.isfinite(value) else None
    if isinstance(value, tuple | list):
        return [plain(item) for item in value]
    if isinstance(value, Mapping):
        return {str(key): plain(item) for key, item in value.items()}
    if isinstance(value, np.ndarray):
        return [plain(item) for item in value.tolist()]
    return value


def largest_first(key: FloatArray, count: int) -> IntArray:
    """The places of the largest numbers, at most so many, largest first; of equal ones the earlier first.

    Parameters
    ----------
    key : float64 array, shape (n,)
        Without nan.
    count : int

    Examples
    --------
    >>> largest_first(np.array([1.0, 3.0, 2.0, 3.0]), 3)
    array([1, 3, 2])
    """
    candidates = np.arange(len(key))
    if 0 < count < len(key):
        candidates = np.flatnonzero(key >= np.partition(key, -count)[-count])
    return candidates[np.argsort(-key[candidates], kind="stable")][:count]


def shown_rows(name: str, columns: Mapping[str, AnyArray], named: Collection[str], count: int) -> tuple[Rows, int]:
    """The rows of a table that a view shows, and how many it shows them of.

    Parameters
    ----------
    name : str
        Of the table. Of edges and of other readings come those named, then those with the largest statistic. Vertices
        with a residual come worst first, in the order of the view. In any other table the first rows are shown.
    columns : mapping of str to array
    named : collection of str
        Ids that are shown however many they are.
    count : int
        Rows to show.

    Returns
    -------
    rows : Rows
    total : int
    """
    table, total = Rows(columns), len(next(iter(columns.values()), ()))
    if name in _READINGS:
        return table.chosen(_loudest(columns, frozenset(named), count)), total
    residual = np.asarray(columns["residual"], dtype=np.float64) if name == "vertices" else np.empty(0)
    balances = np.flatnonzero(np.isfinite(residual))
    if not len(balances):
        return table.chosen(np.arange(min(count, total))), total
    statistic = np.asarray(columns["statistic"], dtype=np.float64)[balances]
    limit = np.asarray(columns.get("limit", np.full(total, np.nan)), dtype=np.float64)[balances]
    missed = np.abs(residual[balances]) / np.where(limit > 0, limit, 1.0)  # over a limit of its own, where it has one
    size = np.where(np.isfinite(statistic), statistic, missed)
    return table.chosen(balances[largest_first(size, count)]), len(balances)


def _loudest(columns: Mapping[str, AnyArray], named: frozenset[str], count: int) -> IntArray:
    ids = columns["id"].tolist()
    is_named = np.fromiter(map(named.__contains__, ids), bool, len(ids))
    statistic = np.asarray(columns.get("statistic", np.zeros(len(ids))), dtype=np.float64)
    size = np.where(is_named, np.inf, np.where(np.isfinite(statistic), statistic, -1.0))
    return largest_first(size, max(count, int(is_named.sum())))


def standing_counts(standing: AnyArray, ids: AnyArray, count: int) -> dict[str, dict[str, Any]]:
    """How many edges have each standing, and the first of their ids."""
    found = {word: np.flatnonzero(standing == word) for word in _STANDINGS}
    return {word: {"count": len(rows), "first": ids[rows[:count]].tolist()} for word, rows in found.items()}


def largest_coordinate(tables: Mapping[str, Mapping[str, AnyArray]]) -> float:
    """The largest coordinate in any table, by size; 0 where there is none."""
    places = [np.asarray(columns[axis], float) for columns in tables.values() for axis in _AXES if axis in columns]
    return max((float(np.nanmax(np.abs(p), initial=0.0)) for p in places), default=0.0)


def _listed(column: AnyArray) -> list[Any]:
    array = np.asarray(column)
    objects = array.astype(object)
    if array.dtype.kind == "f":
        objects[~np.isfinite(array)] = None
    listed: list[Any] = objects.tolist()
    return listed if array.dtype != object or _are_text(listed) else [plain(value) for value in listed]


def _texts(column: AnyArray) -> list[str]:
    """Return the JSON text of every value of a column."""
    array = np.asarray(column)
    if array.dtype.kind == "f":
        texts = np.full(array.shape, "null", dtype=object)
        finite = np.isfinite(array)
        texts[finite] = list(map(repr, array[finite].tolist()))
        listed: list[str] = texts.tolist()
        return listed
    values = array.tolist()
    if _are_text(values):
        return list(map(_quoted, values))
    if array.dtype.kind in "iu":
        return list(map(str, values))
    if set(map(type, values)) <= {bool, type(None)}:
        return [_WORDS[value] for value in values]
    return [json.dumps(plain(value), ensure_ascii=False, allow_nan=False) for value in values]


def _are_text(values: list[Any]) -> bool:
    return set(map(type, values)) <= {str}
