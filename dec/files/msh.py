"""MSH, versions 2.2 and 4.1: points, elements, named groups and fields.

Read here and not through meshio, which refuses files of version 4.1 where only some elements are in a group, takes
fields by position although they are written by number, and takes node 0 for the last one (measured with meshio 5.3.5).
"""

import re
from dataclasses import dataclass

import numpy as np

from dec.arrays import FloatArray, IntArray
from dec.errors import InputError
from dec.files.lines import TextLines, whole_numbers
from dec.files.msh_fields import fields_of
from dec.files.msh_sections import MshFile
from dec.files.parts import KINDS, Group, MeshParts, kind_named, ragged_of
from dec.files.sources import Source, printable, whole_count
from dec.topology.polygons import Ragged

__all__ = ["read_msh"]

# Source: Gmsh reference manual, section MSH file format (from memory, held against meshio's table in a test); mid-side
# nodes are ordered differently from the VTK formats, corners alike.
_ELEMENTS = {
    1: "line", 2: "triangle", 3: "quad", 4: "tetra", 5: "hexahedron", 6: "wedge", 7: "pyramid", 8: "line3",
    9: "triangle6", 10: "quad9", 11: "tetra10", 12: "hexahedron27", 15: "vertex", 16: "quad8", 17: "hexahedron20",
    18: "wedge15", 19: "pyramid13",
}  # fmt: skip
_NAME = re.compile(r'^\s*(\d)\s+(-?\d{1,18})\s+"(.*)"\s*$')


@dataclass(frozen=True, slots=True)
class _Elements:
    """Elements in file order: their numbers, kinds, node numbers as written, and (dimension, physical tag) sets."""

    tags: IntArray
    kinds: IntArray
    nodes: Ragged
    physical: dict[tuple[int, int], IntArray]


def read_msh(source: Source) -> MeshParts:
    """The points, elements, named groups and fields of an MSH file, text or binary.

    Points and elements keep the order of the file; elements of one type in several blocks are one. Fields are
    matched by node and element number; where they leave some out, nan stands there and the notes say so.

    Parameters
    ----------
    source : Source

    Returns
    -------
    MeshParts

    Raises
    ------
    InputError
        If the version is another, a section is cut short, or an element names a node that is not there.
    """
    file = MshFile.of(source)
    is_new = file.version == "4.1"
    tags, points = _nodes_new(file) if is_new else _nodes_old(file)
    elements = _elements_new(file) if is_new else _elements_old(file)
    order = _order_of(file.name, tags, "node")
    nodes = _numbered(file.name, elements, tags, order)
    notes: list[str] = []
    groups = _groups(file, elements, notes)
    dimension = np.zeros(max(KINDS) + 1, dtype=np.int64)
    for number, kind in KINDS.items():
        dimension[number] = kind.dimension
    rank = dimension[elements.kinds]
    is_top = rank == (int(rank.max()) if len(rank) else 0)
    _order_of(file.name, elements.tags, "element")
    point_data, cell_data = fields_of(file, tags, elements.tags, is_top, notes)
    return MeshParts(points, elements.kinds, nodes, point_data, cell_data, groups, tuple(notes))


def _nodes_new(file: MshFile) -> tuple[IntArray, FloatArray]:
    numbers = file.numbers(file.needed("Nodes"))
    n_blocks, n_nodes = numbers.sizes(4)[:2]
    tags, points = [np.empty(0, np.int64)], [np.empty((0, 3))]
    for _ in range(n_blocks):
        dimension, _, parametric = numbers.ints(3)
        count = int(numbers.sizes(1)[0])
        tags.append(numbers.sizes(count))
        width = 3 + int(dimension) * int(parametric != 0)
        points.append(numbers.floats(count * width).reshape(count, width)[:, :3])
    _refuse_count(file.name, "nodes", int(n_nodes), sum(map(len, tags)))
    return np.concatenate(tags), np.concatenate(points)


def _nodes_old(file: MshFile) -> tuple[IntArray, FloatArray]:
    section = file.needed("Nodes")
    count, body = _count_line(file.name, section.body, section.first_line)
    numbers = file.numbers(section, body)
    if file.is_text:
        rows = numbers.floats(4 * count).reshape(count, 4)
        return whole_numbers(rows[:, 0], "a node number", f"{file.name}: $Nodes row {{}}".format), rows[:, 1:].copy()
    record = np.dtype([("tag", file.order + "i4"), ("point", file.order + "f8", 3)])
    if len(body) < count * record.itemsize:
        _refuse_count(file.name, "nodes", count, len(body) // record.itemsize)
    records = np.frombuffer(body, dtype=record, count=count)
    return records["tag"].astype(np.int64), records["point"].astype(np.float64)


def _count_line(name: str, body: bytes, line: int) -> tuple[int, bytes]:
    head, _, rest = body.partition(b"\n")
    if not head.strip().isdigit():
        message = f"{name} line {line}: a count must stand here, found {head[:40].decode('latin-1')!r}"
        raise InputError(message)
    return whole_count(head.strip().decode("ascii"), f"{name} line {line}"), rest


def _refuse_count(name: str, what: str, promised: int, found: int) -> None:
    if promised != found:
        message = f"{name}: {promised} {what} are promised, found {found}; the copy may be incomplete"
        raise InputError(message)


def _vtk_kind(name: str, number: int) -> int:
    kind = kind_named(_ELEMENTS.get(number, ""))
    if kind is None:
        message = f"{name}: elements of type {number} are not read; save the mesh in first or second order"
        raise InputError(message)
    return kind


def _elements_new(file: MshFile) -> _Elements:
    physical_of = _entities(file)
    numbers = file.numbers(file.needed("Elements"))
    n_blocks, n_elements = numbers.sizes(4)[:2]
    tags, kinds, rows = [np.empty(0, np.int64)], [np.empty(0, np.int64)], []
    physical: dict[tuple[int, int], list[IntArray]] = {}
    first = 0
    for _ in range(n_blocks):
        dimension, entity, number = (int(value) for value in numbers.ints(3))
        count = int(numbers.sizes(1)[0])
        kind = _vtk_kind(file.name, number)
        width = KINDS[kind].nodes + 1
        block = numbers.sizes(count * width).reshape(count, width)
        tags.append(block[:, 0])
        kinds.append(np.full(count, kind))
        rows.append(block[:, 1:])
        for tag in physical_of.get((dimension, entity), ()):
            physical.setdefault((dimension, tag), []).append(np.arange(first, first + count))
        first += count
    _refuse_count(file.name, "elements", int(n_elements), first)
    sets = {key: np.concatenate(cells) for key, cells in physical.items()}
    return _Elements(np.concatenate(tags), np.concatenate(kinds), ragged_of(rows), sets)


def _entities(file: MshFile) -> dict[tuple[int, int], list[int]]:
    """Return the physical tags of each (dimension, entity); a minus sign only turns the entity round."""
    section = file.section("Entities")
    if section is None:
        return {}
    numbers = file.numbers(section)
    physical = {}
    for dimension, count in enumerate(numbers.sizes(4)):
        for _ in range(count):
            tag = int(numbers.ints(1)[0])
            numbers.floats(3 if dimension == 0 else 6)
            tags = numbers.ints(int(numbers.sizes(1)[0]))
            physical[dimension, tag] = [abs(int(value)) for value in tags]
            if dimension:
                numbers.ints(int(numbers.sizes(1)[0]))
    return physical


def _elements_old(file: MshFile) -> _Elements:
    section = file.needed("Elements")
    count, body = _count_line(file.name, section.body, section.first_line)
    flat, starts, lengths = (_rows_text if file.is_text else _rows_binary)(file, body, section.first_line + 1)
    _refuse_count(file.name, "elements", count, len(starts))
    numbers, n_tags = flat[starts + 1], flat[starts + 2]
    kinds, nodes_of = np.zeros(len(starts), np.int64), np.zeros(len(starts), np.int64)
    for number in np.unique(numbers):
        kind = _vtk_kind(file.name, int(number))
        kinds[numbers == number], nodes_of[numbers == number] = kind, KINDS[kind].nodes
    wrong = np.flatnonzero((n_tags < 0) | (lengths != 3 + n_tags + nodes_of))
    if len(wrong):
        row = int(wrong[0])
        message = (
            f"{file.name}: element {flat[starts[row]]} of kind {KINDS[int(kinds[row])].name} must have "
            f"{3 + n_tags[row] + nodes_of[row]} numbers, it has {lengths[row]}"
        )
        raise InputError(message)
    offsets = np.concatenate([[0], np.cumsum(nodes_of)]).astype(np.int64)
    slot = np.arange(offsets[-1]) - np.repeat(offsets[:-1], nodes_of)
    nodes = Ragged(flat[np.repeat(starts + 3 + n_tags, nodes_of) + slot], offsets, None)
    tag = np.where(n_tags > 0, np.abs(flat[np.minimum(starts + 3, len(flat) - 1)]), 0)
    dimension = np.array([KINDS[int(kind)].dimension for kind in np.unique(kinds)])
    rank = dimension[np.searchsorted(np.unique(kinds), kinds)] if len(kinds) else kinds
    pairs = np.unique(np.stack([rank, tag], axis=1), axis=0)
    sets = {(int(d), int(t)): np.flatnonzero((rank == d) & (tag == t)) for d, t in pairs if t}
    return _Elements(flat[starts], kinds, nodes, sets)


def _rows_text(file: MshFile, body: bytes, first_line: int) -> tuple[IntArray, IntArray, IntArray]:
    """Return all numbers of the elements, where each begins, and how many it has."""
    lines = TextLines.of(file.name, body, first_line=first_line)
    filled = np.flatnonzero(lines.words > 0)
    values, offsets = lines.only(filled).numbers()
    short = np.flatnonzero(np.diff(offsets) < 3)
    if len(short):
        message = (
            f"{lines.place(filled[short[0]])}: an element needs number, type and tags, found "
            f"{lines.text(filled[short[0]])!r}"
        )
        raise InputError(message)
    row = np.repeat(filled, np.diff(offsets))
    whole = whole_numbers(values, "an entry of an element", lambda k: lines.place(row[k]))
    return whole, offsets[:-1], np.diff(offsets)


def _rows_binary(file: MshFile, body: bytes, _: int) -> tuple[IntArray, IntArray, IntArray]:
    """Return the same from binary blocks: type, count, number of tags, then so many rows."""
    data = np.frombuffer(body[: len(body) // 4 * 4], dtype=file.order + "i4").astype(np.int64)
    parts, at = [], 0
    while at + 3 <= len(data):
        number, count, n_tags = (int(value) for value in data[at : at + 3])
        width = 1 + n_tags + KINDS[_vtk_kind(file.name, number)].nodes
        block = data[at + 3 : at + 3 + count * width]
        if count < 1 or n_tags < 0 or len(block) < count * width:
            _refuse_count(file.name, f"elements of type {number}", count, len(block) // max(width, 1))
            break
        block = block.reshape(count, width)
        head = np.tile([number, n_tags], (count, 1))
        parts.append(np.concatenate([block[:, :1], head, block[:, 1:]], axis=1))
        at += 3 + count * width
    rows = ragged_of(parts)
    return rows.flat, rows.offsets[:-1], rows.lengths


def _order_of(name: str, tags: IntArray, what: str) -> IntArray:
    """Return the order that sorts the numbers; they must differ."""
    order = np.argsort(tags, kind="stable")
    same = np.flatnonzero(np.diff(tags[order]) == 0)
    if len(same):
        message = f"{name}: {what} numbers must differ, {tags[order[same[0]]]} is given twice"
        raise InputError(message)
    return order


def _numbered(name: str, elements: _Elements, tags: IntArray, order: IntArray) -> Ragged:
    """Return the nodes of each element counted from 0 in file order."""
    wanted, known = elements.nodes.flat, tags[order]
    at = np.minimum(np.searchsorted(known, wanted), max(len(known) - 1, 0))
    missing = np.flatnonzero(known[at] != wanted) if len(known) else np.arange(min(len(wanted), 1))
    if len(missing):
        row = int(np.searchsorted(elements.nodes.offsets, missing[0], side="right")) - 1
        message = f"{name}: element {elements.tags[row]} uses node {wanted[missing[0]]}, which the file does not list"
        raise InputError(message)
    return Ragged(order[at] if len(known) else wanted, elements.nodes.offsets, elements.nodes.width)


def _groups(file: MshFile, elements: _Elements, notes: list[str]) -> tuple[Group, ...]:
    names = {}
    section = file.section("PhysicalNames")
    for line in section.body.decode("utf-8", "replace").splitlines() if section else ():
        found = _NAME.match(line)
        if found:
            names[int(found[1]), abs(int(found[2]))] = printable(found[3])
    nameless = [tag for dimension, tag in sorted(elements.physical) if (dimension, tag) not in names]
    if nameless:
        notes.append(f"physical groups without a name were not kept: {', '.join(map(str, nameless[:20]))}")
    return tuple(
        Group(name, dimension, elements.physical[dimension, tag])
        for (dimension, tag), name in sorted(names.items())
        if (dimension, tag) in elements.physical
    )
