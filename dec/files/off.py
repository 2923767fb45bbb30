"""OFF: points and polygons as text."""

from typing import NoReturn

import numpy as np

from dec.arrays import IntArray
from dec.errors import InputError
from dec.files.lines import TextLines, whole_numbers
from dec.files.parts import POLYGON, MeshParts
from dec.files.sources import Source
from dec.topology.polygons import Ragged

__all__ = ["ragged_faces", "read_off"]


def read_off(source: Source) -> MeshParts:
    """The points and faces of an OFF text file; colours after a face are not read.

    Parameters
    ----------
    source : Source

    Returns
    -------
    MeshParts

    Raises
    ------
    InputError
        If the file does not begin with OFF, a line is missing or too short, or a face names a point that is not
        there; the message gives the line.

    Notes
    -----
    Source: Geomview manual, section OFF files (from memory, held against meshio's writer in a test). Other
    headings (COFF, NOFF, 4OFF, BINARY) are refused by name.
    """
    lines = TextLines.of(source.name, source.data, comment=b"#")
    filled = np.flatnonzero(lines.words > 0)
    heading = lines.text(int(filled[0])) if len(filled) else ""
    if heading.split()[:1] != ["OFF"] or "BINARY" in heading:
        message = f"{source.name} must begin with the word OFF and hold text, found {heading!r}"
        raise InputError(message)
    counts, rows = _counts(lines, filled)
    n_points, n_faces = int(counts[0]), int(counts[1])
    if len(rows) < n_points + n_faces:
        message = (
            f"{source.name}: {n_points} points and {n_faces} faces are promised, "
            f"found {len(rows)} lines; the copy may be incomplete"
        )
        raise InputError(message)
    points = lines.only(rows[:n_points]).table(3, "a point")
    nodes = ragged_faces(lines, rows[n_points : n_points + n_faces], n_points)
    notes: tuple[str, ...] = ()
    if len(rows) > n_points + n_faces:
        notes = (f"{len(rows) - n_points - n_faces} lines after the last face were not read",)
    return MeshParts(points, np.full(n_faces, POLYGON), nodes, notes=notes)


def ragged_faces(lines: TextLines, rows: IntArray, n_points: int) -> Ragged:
    """The corners of faces written as a count and that many point numbers from 0, one face a line.

    Raises
    ------
    InputError
        If a line is too short, or names a point that is not there; the message gives the line.
    """
    numbers, offsets = lines.only(rows).numbers()
    if (np.diff(offsets) < 1).any():
        _refuse_line(lines, int(rows[np.argmax(np.diff(offsets) < 1)]))
    length = whole_numbers(numbers[offsets[:-1]], "the number of corners", lambda i: lines.place(rows[i]))
    short = np.flatnonzero((length < 1) | (length > np.diff(offsets) - 1))
    if len(short):
        _refuse_line(lines, int(rows[short[0]]))
    ends = np.concatenate([[0], np.cumsum(length)]).astype(np.int64)
    slot = np.arange(ends[-1]) - np.repeat(ends[:-1], length)

    def place(index: int) -> str:
        return lines.place(int(rows[np.searchsorted(ends, index, side="right") - 1]))

    flat = whole_numbers(numbers[np.repeat(offsets[:-1] + 1, length) + slot], "the number of a point", place)
    bad = np.flatnonzero((flat < 0) | (flat >= n_points))
    if len(bad):
        message = (
            f"{place(int(bad[0]))}: face uses point {flat[bad[0]]}, the file has {n_points} (numbering starts at 0)"
        )
        raise InputError(message)
    width = int(length[0]) if len(length) and (length == length[0]).all() else None
    return Ragged(flat, ends, width)


def _refuse_line(lines: TextLines, line: int) -> NoReturn:
    message = f"{lines.place(line)}: a face must be a count and that many points, found {lines.text(line)!r}"
    raise InputError(message)


def _counts(lines: TextLines, filled: IntArray) -> tuple[IntArray, IntArray]:
    """Return the promised numbers of points and faces, and the lines that follow."""
    on_heading = len(lines.text(int(filled[0])).split()) > 1  # OFF 8 6 12 on one line is common
    if not on_heading and len(filled) < 2:
        message = f"{lines.name} ends after the heading; the copy may be incomplete"
        raise InputError(message)
    line = int(filled[0 if on_heading else 1])
    words = lines.text(line).split()[1 if on_heading else 0 :]
    if len(words) < 2 or not all(word.isdecimal() for word in words[:2]):
        message = f"{lines.place(line)}: the numbers of points and faces must stand here, found {lines.text(line)!r}"
        raise InputError(message)
    return np.array([int(words[0]), int(words[1])]), filled[1 if on_heading else 2 :]
