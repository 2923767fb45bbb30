"""The records of a PLY file: rows of scalars and lists, told apart without a pass over single values."""

from dataclasses import dataclass
from typing import Literal

import numpy as np

from dec.arrays import AnyArray, FloatArray, IntArray
from dec.errors import InputError
from dec.files.lines import TextLines, whole_numbers
from dec.files.sources import Source
from dec.topology.polygons import Ragged

__all__ = ["Column", "Element", "Property", "binary_records", "text_records"]

Column = AnyArray | Ragged


@dataclass(frozen=True, slots=True)
class Property:
    """A scalar of the NumPy type ``kind``; a list of them where ``count`` names the type of its length."""

    name: str
    kind: str
    count: str | None


@dataclass(frozen=True, slots=True)
class Element:
    """So many records with these properties, in order."""

    name: str
    count: int
    properties: list[Property]


def text_records(
    source: Source, body: int, first_line: int, elements: list[Element]
) -> tuple[dict[str, dict[str, Column]], str]:  # fmt: skip
    """The columns of each element of a text file, one record a line.

    Returns
    -------
    tables : dict of element name to dict of property name to Column
    left_over : str
        How many lines follow the last record, in words; empty for none.

    Raises
    ------
    InputError
        If the file ends early, a line has too few or too many numbers, or a word is no number.
    """
    lines = TextLines.of(source.name, source.data[body:], first_line=first_line)
    filled = np.flatnonzero(lines.words > 0)
    tables, start = {}, 0
    for element in elements:
        rows = filled[start : start + element.count]
        if len(rows) < element.count:
            _refuse_early_end(source, element, len(rows))
        numbers, offsets = lines.only(rows).numbers()
        tables[element.name] = _text_columns(lines, rows, element, numbers, offsets)
        start += element.count
    more = len(filled) - start
    return tables, f"{more} line{'' if more == 1 else 's'}" if more > 0 else ""


def _text_columns(
    lines: TextLines, rows: IntArray, element: Element, numbers: FloatArray, offsets: IntArray
) -> dict[str, Column]:  # fmt: skip
    columns: dict[str, Column] = {}
    at, end = offsets[:-1].copy(), offsets[1:]

    def take(what: str) -> FloatArray:
        _refuse_row(lines, rows, at >= end, what)
        return numbers[at] if len(at) else numbers[:0]

    for prop in element.properties:
        values = take(prop.name)
        at += 1
        if prop.count is None:
            columns[prop.name] = _typed(values, prop, lines, rows)
            continue
        length = whole_numbers(values, f"the length of {prop.name}", lambda i: lines.place(rows[i]))
        _refuse_row(lines, rows, (length < 0) | (at + length > end), prop.name)
        inner, slot = _ragged_slots(length)
        flat = numbers[np.repeat(at, length) + slot]
        owner = np.repeat(rows, length)
        columns[prop.name] = _as_ragged(_typed(flat, prop, lines, owner), inner)
        at += length
    _refuse_row(lines, rows, at < end, "nothing more")
    return columns


def _typed(values: FloatArray, prop: Property, lines: TextLines, rows: IntArray) -> AnyArray:
    if prop.kind[0] == "f":
        return values
    return whole_numbers(values, prop.name, lambda i: lines.place(rows[i]))


def _refuse_row(lines: TextLines, rows: IntArray, bad: AnyArray, what: str) -> None:
    if bad.any():
        line = int(rows[np.argmax(bad)])
        message = f"{lines.place(line)}: {what} must stand next on the line, found {lines.text(line)!r}"
        raise InputError(message)


def _ragged_slots(length: IntArray) -> tuple[IntArray, IntArray]:
    offsets = np.concatenate([[0], np.cumsum(length)]).astype(np.int64)
    return offsets, np.arange(offsets[-1]) - np.repeat(offsets[:-1], length)


def _as_ragged(flat: AnyArray, offsets: IntArray) -> Ragged:
    length = np.diff(offsets)
    width = int(length[0]) if len(length) and (length == length[0]).all() else None
    return Ragged(flat.astype(np.int64) if flat.dtype.kind in "iu" else flat, offsets, width)


def _refuse_early_end(source: Source, element: Element, found: int) -> None:
    message = (
        f"{source.name}: {element.count} records of {element.name} are promised, "
        f"the file ends after {found}; the copy may be incomplete"
    )
    raise InputError(message)


def binary_records(
    source: Source, body: int, elements: list[Element], order: str
) -> tuple[dict[str, dict[str, Column]], str]:  # fmt: skip
    """The columns of each element of a binary file.

    Parameters
    ----------
    source : Source
    body : int
        Where the data begin.
    elements : list of Element
    order : "<" or ">"
        Byte order.

    Returns
    -------
    tables : dict of element name to dict of property name to Column
    left_over : str
        How many bytes follow the last record, in words; empty for none but blanks and line ends.

    Raises
    ------
    InputError
        If the file ends early.
    """
    data = np.frombuffer(source.data, dtype=np.uint8)
    tables = {}
    for element in elements:
        starts, body = _record_starts(source, element, body, order)
        tables[element.name] = _binary_columns(data, element, starts, order)
    more = len(source.data) - body
    return tables, f"{more} byte{'' if more == 1 else 's'}" if source.data[body:].strip() else ""


def _record_starts(source: Source, element: Element, body: int, order: str) -> tuple[IntArray, int]:
    """Return where each record begins, and where the element ends."""
    sizes = [
        (np.dtype(prop.kind).itemsize, None if prop.count is None else np.dtype(prop.count).itemsize)
        for prop in element.properties
    ]
    if element.count > len(source.data):
        _refuse_early_end(source, element, 0)
    if all(count is None for _, count in sizes):
        size = sum(item for item, _ in sizes)
        end = body + size * element.count
        if end > len(source.data):
            _refuse_early_end(source, element, (len(source.data) - body) // size)
        return body + size * np.arange(element.count), end
    starts = np.empty(element.count, dtype=np.int64)
    byte_order: Literal["little", "big"] = "little" if order == "<" else "big"
    data, at = source.data, body
    # where a record begins depends on the lengths of all lists before it: the one walk that cannot be an array step
    for record in range(element.count):
        starts[record] = at
        for item, count in sizes:
            if count is None:
                at += item
            else:
                at += count + item * int.from_bytes(data[at : at + count], byte_order)
        if at > len(data):
            _refuse_early_end(source, element, record)
    return starts, at


def _binary_columns(data: AnyArray, element: Element, starts: IntArray, order: str) -> dict[str, Column]:
    columns: dict[str, Column] = {}
    at = starts.copy()
    for prop in element.properties:
        if prop.count is None:
            columns[prop.name] = _gathered(data, at, order + prop.kind)
            at += np.dtype(prop.kind).itemsize
            continue
        length = _gathered(data, at, order + prop.count.replace("i", "u")).astype(np.int64)
        at += np.dtype(prop.count).itemsize
        size = np.dtype(prop.kind).itemsize
        offsets, slot = _ragged_slots(length)
        flat = _gathered(data, np.repeat(at, length) + slot * size, order + prop.kind)
        columns[prop.name] = _as_ragged(flat, offsets)
        at += length * size
    return columns


def _gathered(data: AnyArray, at: IntArray, kind: str) -> AnyArray:
    """Return the values of a type that begin at the given bytes."""
    size = np.dtype(kind).itemsize
    raw = data[at[:, None] + np.arange(size)]
    return np.ascontiguousarray(raw).view(kind).ravel().astype(np.dtype(kind).newbyteorder("="))
