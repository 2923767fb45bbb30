"""OBJ: points, polygons and polylines as text, numbered from 1 or backwards from the last."""

import numpy as np

from dec.arrays import BoolArray, IntArray
from dec.errors import InputError
from dec.files.lines import TextLines, whole_numbers
from dec.files.parts import POLYGON, Group, MeshParts, ragged_of
from dec.files.sources import Source, printable
from dec.topology.polygons import Ragged

__all__ = ["read_obj"]

_FREE_FORM = (b"curv", b"curv2", b"surf")
_LINE = 3
_READ = (b"v", b"f", b"l", b"g", b"o")
# what only says how a mesh looks, or carries what the docstring says is not read
_SILENT = (
    b"vt", b"vn", b"s", b"mg", b"usemtl", b"mtllib", b"usemap", b"maplib", b"bevel", b"c_interp", b"d_interp", b"lod",
    b"shadow_obj", b"trace_obj", b"ctech", b"stech",
)  # fmt: skip
_POINT_WORDS = 5  # v x y z w
_SAID = 8


def read_obj(source: Source) -> MeshParts:
    """The points, faces, lines and groups of an OBJ file.

    Texture and normal indices and materials are not read; vertex colours and statements that are not known are not
    read either, and noted. Faces keep their size and order; a polyline of k points is k - 1 edges. Each ``g`` and
    ``o`` name is a group of the faces that follow it.

    Parameters
    ----------
    source : Source

    Returns
    -------
    MeshParts

    Raises
    ------
    InputError
        If a line cannot be read, a face has fewer than three corners or names a point that is not there, a statement
        is written in capitals, or the file holds free-form surfaces; the message gives the line.

    Notes
    -----
    Source: Wavefront Advanced Visualizer manual, appendix B (from memory).
    """
    lines = TextLines.of(source.name, source.data, comment=b"#").joined(b"\\")
    _refuse_free_form(lines)
    notes = _unread(lines)
    is_point = lines.starting_with(b"v")
    points = _without_keyword(lines, is_point).only(is_point).table(3, "a point")
    faces, face_lines = _corners(lines, b"f", is_point, 3)
    polylines, _ = _corners(lines, b"l", is_point, 2)
    segments = _segments(polylines)
    nodes = faces if not len(segments) else _joined(faces, segments)
    kinds = np.concatenate([np.full(len(faces), POLYGON), np.full(len(segments), _LINE)])
    groups = _groups(lines, face_lines) if len(faces) else ()
    return MeshParts(points, kinds, nodes, groups=groups, notes=notes)


def _refuse_free_form(lines: TextLines) -> None:
    for keyword in _FREE_FORM:
        found = lines.starting_with(keyword)
        if found.any():
            line = int(np.argmax(found))
            message = f"{lines.place(line)}: free-form geometry ({keyword.decode()}) is no mesh; export polygons"
            raise InputError(message)


def _unread(lines: TextLines) -> tuple[str, ...]:
    """Return what is said about lines that are not read; refuse those whose keyword is known but for its capitals."""
    left = lines.words > 0
    for keyword in (*_READ, *_SILENT):
        left &= ~lines.starting_with(keyword)
        if not left.any():
            break
    said: list[str] = []
    while left.any() and len(said) < _SAID:
        line = int(np.argmax(left))
        word = lines.data[lines.word_starts[lines.word_offsets[line]] : lines.ends[line]].tobytes().split(None, 1)[0]
        if word.lower() in _READ:
            message = (
                f"{lines.place(line)}: a statement must be written in small letters, found "
                f"{printable(lines.text(line))!r}; write {word.lower().decode()}"
            )
            raise InputError(message)
        alike = left & lines.starting_with(word)
        shown = printable(word.decode("utf-8", "replace"))[:40]
        said.append(f"{_lines(alike)} with {shown} not read (first: line {lines.number(line)})")
        left &= ~alike
    if left.any():
        said.append(f"{_lines(left)} with other words not read (first: line {lines.number(int(np.argmax(left)))})")
    coloured = lines.starting_with(b"v") & (lines.words > _POINT_WORDS)
    if coloured.any():
        first = lines.number(int(np.argmax(coloured)))
        said.append(f"{_lines(coloured)} with the colour of a point, colour not read (first: line {first})")
    return tuple(said)


def _lines(chosen: BoolArray) -> str:
    count = int(chosen.sum())
    return f"{count} line{'' if count == 1 else 's'}"


def _without_keyword(lines: TextLines, chosen: BoolArray) -> TextLines:
    first = lines.word_starts[lines.word_offsets[:-1][chosen]]
    return lines.blanked(first, first + 1)


def _corners(lines: TextLines, keyword: bytes, is_point: BoolArray, least: int) -> tuple[Ragged, IntArray]:
    """Return point numbers from 0 of each face or polyline, and its line."""
    chosen = lines.starting_with(keyword)
    rows = np.flatnonzero(chosen)
    if not len(rows):
        return Ragged(np.empty(0, np.int64), np.zeros(1, np.int64), None), rows
    numbers, offsets = _without_slashes(_without_keyword(lines, chosen)).only(chosen).numbers()
    length = np.diff(offsets)
    if int(length.min()) < least:
        line = int(rows[np.argmin(length)])
        message = f"{lines.place(line)}: at least {least} points must be named, found {lines.text(line)!r}"
        raise InputError(message)

    def place(index: int) -> str:
        return lines.place(int(rows[np.searchsorted(offsets, index, side="right") - 1]))

    given = whole_numbers(numbers, "the number of a point", place)
    before = np.cumsum(is_point)[rows]  # points defined above the line: what a negative number counts back from
    flat = np.where(given > 0, given - 1, given + np.repeat(before, length))
    n_points = int(is_point.sum())
    bad = np.flatnonzero((given == 0) | (flat < 0) | (flat >= n_points))
    if len(bad):
        what = "face" if keyword == b"f" else "line"
        message = (
            f"{place(int(bad[0]))}: {what} uses point {given[bad[0]]}, the file has {n_points} (numbering starts at 1)"
        )
        raise InputError(message)
    width = int(length[0]) if (length == length[0]).all() else None
    return Ragged(flat, offsets, width), rows


def _without_slashes(lines: TextLines) -> TextLines:
    """Return the text with each word like 12/34/56 cut to 12; a word that begins with a slash stays, and is refused."""
    slashes = np.flatnonzero(lines.data == ord("/"))
    word, first = np.unique(np.searchsorted(lines.word_starts, slashes, side="right") - 1, return_index=True)
    inner = slashes[first] > lines.word_starts[word]
    solid = lines.data > ord(" ")
    ends = np.flatnonzero(solid[:-1] & ~solid[1:]) + 1
    return lines.blanked(slashes[first][inner], ends[word[inner]])


def _segments(polylines: Ragged) -> IntArray:
    """Return the edges of polylines: point numbers, shape (n, 2)."""
    inner = np.ones(len(polylines.flat), dtype=bool)
    inner[polylines.offsets[1:] - 1] = False
    start = np.flatnonzero(inner)
    return np.stack([polylines.flat[start], polylines.flat[start + 1]], axis=1)


def _joined(faces: Ragged, segments: IntArray) -> Ragged:
    lines = ragged_of([segments])
    offsets = np.concatenate([faces.offsets, faces.offsets[-1] + lines.offsets[1:]])
    return Ragged(np.concatenate([faces.flat, lines.flat]), offsets, None)


def _groups(lines: TextLines, face_lines: IntArray) -> tuple[Group, ...]:
    """Return the faces under each ``o`` and ``g`` name; nothing where one name holds them all."""
    members: dict[str, list[IntArray]] = {}
    for keyword in (b"o", b"g"):
        rows = np.flatnonzero(lines.starting_with(keyword))
        first_face = np.append(np.searchsorted(face_lines, rows), len(face_lines))
        for number, line in enumerate(rows):
            faces = np.arange(first_face[number], first_face[number + 1])
            for name in _names(lines, int(line), keyword) if len(faces) else ():
                members.setdefault(name, []).append(faces)
    groups = [Group(name, 2, np.unique(np.concatenate(cells))) for name, cells in members.items()]
    return tuple(groups) if len(groups) > 1 else ()


def _names(lines: TextLines, line: int, keyword: bytes) -> list[str]:
    words = lines.data[lines.starts[line] : lines.ends[line]].tobytes().decode("utf-8", "replace").split()[1:]
    # an object has one name, blanks and all; a group line may list several
    names = [" ".join(words)] if keyword == b"o" and words else words
    return [printable(name) for name in names]
