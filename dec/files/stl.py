"""STL: triangles with their own corners each, welded where coordinates are exactly equal."""

import numpy as np

from dec.arrays import AnyArray, FloatArray, IntArray
from dec.errors import InputError
from dec.files.lines import TextLines
from dec.files.parts import Group, MeshParts
from dec.files.sources import Source, printable
from dec.topology.polygons import Ragged

__all__ = ["read_stl", "weld"]

_HEADER = 84
_FACET = np.dtype([("normal", "<f4", 3), ("corners", "<f4", (3, 3)), ("attribute", "<u2")])
_KEYWORDS = (b"facet", b"outer", b"vertex", b"endloop", b"endfacet", b"solid", b"endsolid")
_VERTEX, _SOLID, _ENDSOLID = 2, 5, 6
_FACET_LINES = (0, 1, 2, 2, 2, 3, 4)
_WORDS = (5, 2, 4, 1, 1)  # facet normal x y z, outer loop, vertex x y z, endloop, endfacet


def read_stl(source: Source) -> MeshParts:
    """The triangles of an STL file, binary or text.

    Stored normals are not read: a facet is turned as its corners run. Corners are welded where their coordinates
    are exactly equal (-0.0 counts as 0.0), and the notes say how many.

    Parameters
    ----------
    source : Source

    Returns
    -------
    MeshParts
        Each named solid of a text file that holds several is a group.

    Raises
    ------
    InputError
        If a binary file has not the length that its facet count promises, or a text file leaves the grammar of
        facets; the message gives what was promised and found, or the line.

    Notes
    -----
    Source: StereoLithography Interface Specification, 3D Systems 1988 (layout from memory, held against meshio's
    writer in a test).
    """
    if _is_text(source.data):
        corners, groups = _text_corners(source)
    else:
        corners, groups = _binary_corners(source), ()
    if not len(corners):
        message = f"{source.name} must hold triangles, it has none"
        raise InputError(message)
    points, triangles = weld(corners.reshape(-1, 3))
    note = f"welded {len(triangles)} corners to {len(points)} points, exactly equal coordinates only"
    n_faces = len(corners)
    nodes = Ragged(triangles, np.arange(n_faces + 1) * 3, 3)
    return MeshParts(points, np.full(n_faces, 5), nodes, groups=groups, notes=(note,))


def weld(corners: AnyArray) -> tuple[FloatArray, IntArray]:
    """Distinct points in order of first appearance, and which of them each corner is.

    Parameters
    ----------
    corners : float32 or float64 array, shape (n, 3)
        Two of them are one point where all three coordinates are equal bit for bit, after -0.0 became 0.0.

    Returns
    -------
    points : float64 array, shape (m, 3)
    number : int64 array, shape (n,)

    Examples
    --------
    >>> weld(np.array([[1.0, 0, 0], [0, 0, 0], [1, -0.0, 0]]))
    (array([[1., 0., 0.],
           [0., 0., 0.]]), array([0, 1, 0]))
    """
    plain = np.ascontiguousarray(corners + corners.dtype.type(0))
    order = np.lexsort(plain.view(f"i{plain.dtype.itemsize}").T)
    sorted_bits = plain[order].view(f"i{plain.dtype.itemsize}")
    is_new = np.concatenate([[True], (sorted_bits[1:] != sorted_bits[:-1]).any(axis=1)])[: len(plain)]
    label = np.cumsum(is_new) - 1
    first = order[is_new]  # the sort is stable: the earliest of equal corners comes first
    rank = np.empty(len(first), dtype=np.int64)
    rank[np.argsort(first, kind="stable")] = np.arange(len(first))
    number = np.empty(len(plain), dtype=np.int64)
    number[order] = rank[label]
    return plain[np.sort(first)].astype(np.float64), number


def _is_text(data: bytes) -> bool:
    # some binary files begin with "solid" too, so the length that the facet count asks for decides first
    if len(data) >= _HEADER and len(data) == _promised_length(data):
        return False
    head = data[:2048].lstrip()
    return head[:5].lower() == b"solid" and b"\0" not in head


def _promised_length(data: bytes) -> int:
    return _HEADER + _FACET.itemsize * int.from_bytes(data[80:84], "little")


def _binary_corners(source: Source) -> AnyArray:
    data = source.data
    if len(data) < _HEADER:
        message = f"{source.name} must begin with an 84-byte header or the word solid, it has {len(data)} bytes"
        raise InputError(message)
    promised = _promised_length(data)
    if len(data) != promised:
        count = (promised - _HEADER) // _FACET.itemsize
        message = (
            f"{source.name}: {count} facets promise {promised} bytes, found {len(data)}; "
            "the copy may be incomplete, or this is no STL file"
        )
        raise InputError(message)
    return np.frombuffer(data, dtype=_FACET, offset=_HEADER)["corners"]


def _text_corners(source: Source) -> tuple[FloatArray, tuple[Group, ...]]:
    lower = source.data.lower()
    lines = TextLines.of(source.name, lower)
    code = np.full(len(lines.ends), -1, dtype=np.int64)
    for number, keyword in enumerate(_KEYWORDS):
        code[lines.starting_with(keyword)] = number
    facets = np.flatnonzero((lines.words > 0) & (code != _SOLID) & (code != _ENDSOLID))
    _refuse_other_grammar(lines, code[facets], facets)
    n_open = int((code == _SOLID).sum() - (code == _ENDSOLID).sum())
    if n_open:
        message = (
            f"{source.name}: {abs(n_open)} endsolid is {'missing' if n_open > 0 else 'too many'}; "
            "the copy may be incomplete"
        )
        raise InputError(message)
    vertices = TextLines.of(source.name, lower.replace(b"vertex", b" " * 6)).only(code == _VERTEX)
    return vertices.table(3, "a vertex").reshape(-1, 3, 3), _solids(source, lines, code)


def _refuse_other_grammar(lines: TextLines, code: IntArray, rows: IntArray) -> None:
    expected = np.resize(np.array(_FACET_LINES), len(code))
    words = np.array(_WORDS)[expected]
    wrong = np.flatnonzero((code != expected) | (lines.words[rows] != words))
    if len(wrong):
        line = int(rows[wrong[0]])
        keyword = _KEYWORDS[int(expected[wrong[0]])].decode()
        message = (
            f"{lines.place(line)}: a line of {words[wrong[0]]} words that begins with {keyword} must stand here, "
            f"found {lines.text(line)!r}"
        )
        raise InputError(message)
    if len(code) % len(_FACET_LINES):
        message = f"{lines.name} ends inside facet {len(code) // len(_FACET_LINES) + 1}; the copy may be incomplete"
        raise InputError(message)


def _solids(source: Source, lines: TextLines, code: IntArray) -> tuple[Group, ...]:
    """Return each solid with a name of its own; nothing where the file has one solid."""
    starts = np.flatnonzero(code == _SOLID)
    if len(starts) < 2:
        return ()
    first_facet = np.append(np.searchsorted(np.flatnonzero(code == 0), starts), int((code == 0).sum()))
    groups: list[Group] = []
    taken: set[str] = set()
    for number, line in enumerate(starts):
        text = source.data[lines.starts[line] : lines.ends[line]].decode("utf-8", "replace")
        name = printable(text.split(maxsplit=1)[1].strip()) if len(text.split()) > 1 else ""
        if not name or name in taken:
            name = f"{name or 'solid'} ({number + 1})"
        taken.add(name)
        groups.append(Group(name, 2, np.arange(first_facet[number], first_facet[number + 1])))
    return tuple(groups)
