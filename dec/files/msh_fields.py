"""The fields of an MSH file, matched to nodes and elements by their numbers."""

import numpy as np

from dec.arrays import BoolArray, FloatArray, IntArray
from dec.errors import InputError
from dec.files.lines import whole_numbers
from dec.files.msh_sections import MshFile, Section
from dec.files.sources import printable

__all__ = ["fields_of"]


def fields_of(
    file: MshFile, node_tags: IntArray, element_tags: IntArray, is_top: BoolArray, notes: list[str]
) -> tuple[dict[str, FloatArray], dict[str, FloatArray]]:
    """Fields at nodes and at elements, by name.

    Several steps of one field get names of their own: ``U (step 2)``.

    Parameters
    ----------
    file : MshFile
    node_tags, element_tags : int64 arrays
        Numbers of all nodes and elements, in file order.
    is_top : bool array, one entry an element
        Elements that a field should cover; for the others nan goes without a note.
    notes : list of str
        Gets what was left out.

    Returns
    -------
    point_data, cell_data : dict of name to float64 array, shape (n, components)

    Raises
    ------
    InputError
        If a field is cut short, or names a node or element that is not there, or one twice.
    """
    unread = sorted({s.name for s in file.sections if s.name in ("ElementNodeData", "InterpolationScheme")})
    if unread:
        notes.append(f"sections {', '.join(unread)} were not read")
    points = _fields(file, "NodeData", node_tags, np.ones(len(node_tags), dtype=bool), notes)
    return points, _fields(file, "ElementData", element_tags, is_top, notes)


def _fields(file: MshFile, kind: str, tags: IntArray, wanted: BoolArray, notes: list[str]) -> dict[str, FloatArray]:
    read = [_field(file, section) for section in file.sections if section.name == kind]
    names = [name for name, *_ in read]
    fields: dict[str, FloatArray] = {}
    order = np.argsort(tags)
    for name, step, given, values in read:
        label = name if names.count(name) == 1 else f"{name} (step {step})"
        place = np.minimum(np.searchsorted(tags[order], given), max(len(tags) - 1, 0))
        rows = order[place] if len(tags) else place
        unknown = np.flatnonzero(tags[rows] != given) if len(tags) else np.arange(len(given))
        if len(unknown) or len(np.unique(given)) != len(given) or label in fields:
            what = f"names number {given[unknown[0]]}, which is not there" if len(unknown) else "gives a number twice"
            message = f"{file.name}: ${kind} {label!r} {what}; export it again"
            raise InputError(message)
        full = np.full((len(tags), values.shape[1]), np.nan)
        full[rows] = values
        covered = np.zeros(len(tags), dtype=bool)
        covered[rows] = True
        left_out = int((wanted & ~covered).sum())
        if left_out:
            notes.append(f"field {label} leaves out {left_out} of {int(wanted.sum())}; nan stands there")
        fields[label] = full
    return fields


def _field(file: MshFile, section: Section) -> tuple[str, int, IntArray, FloatArray]:
    """Return name, step, numbers and values of one section."""
    lines = section.body.split(b"\n", 64)
    try:
        at, parts = 0, []
        for _ in range(3):  # texts, real numbers, whole numbers, each after its count
            count = int(lines[at])
            parts.append(lines[at + 1 : at + 1 + count])
            at += 1 + count
        name = printable(parts[0][0].strip().strip(b'"').decode("utf-8", "replace"))
        step, components, rows = (int(word) for word in parts[2][:3])
    except (ValueError, IndexError):
        message = f"{file.name} line {section.first_line}: ${section.name} must begin with names, times and counts"
        raise InputError(message) from None
    body = section.body[sum(len(line) + 1 for line in lines[:at]) :]
    numbers = file.numbers(section, body)
    if components < 1 or rows < 0:
        message = f"{file.name}: ${section.name} {name!r} has {rows} rows of {components} components"
        raise InputError(message)
    if file.is_text:
        table = numbers.floats(rows * (components + 1)).reshape(rows, components + 1)
        place = f"{file.name}: ${section.name} {name!r} row {{}}".format
        return name, step, whole_numbers(table[:, 0], "a number of a node or element", place), table[:, 1:].copy()
    record = np.dtype([("tag", file.order + "i4"), ("values", file.order + "f8", (components,))])
    if len(body) < rows * record.itemsize:
        message = f"{file.name}: ${section.name} {name!r} promises {rows} rows, found {len(body) // record.itemsize}"
        raise InputError(message)
    data = np.frombuffer(body, dtype=record, count=rows)
    return name, step, data["tag"].astype(np.int64), data["values"].astype(np.float64)
