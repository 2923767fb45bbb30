"""A file, or an edge table with its node table, becomes a Dataset."""

import os
from dataclasses import replace
from pathlib import Path

from dec.calculus.columns import Column
from dec.calculus.dataset import Dataset
from dec.errors import InputError
from dec.files.assembly import assemble
from dec.files.formats import MESH_FORMATS, TABLE_SUFFIXES, WAYS_OUT
from dec.files.sources import Source, printable, read_source
from dec.files.tables import read_csv, read_parquet

__all__ = ["read"]


def read(path: str | os.PathLike[str], nodes: str | os.PathLike[str] | None = None, *, decimal: str = ".") -> Dataset:
    """The network or the mesh in a file.

    The suffix tells the format: ``.csv``, ``.tsv``, ``.txt`` and ``.parquet`` are edge tables; ``.stl``, ``.obj``,
    ``.off``, ``.ply``, ``.vtu``, ``.vtk`` and ``.msh`` are meshes. "-" reads a CSV edge table from standard input.

    Parameters
    ----------
    path : str or path
        An edge table with columns ``from``, ``to``, optionally ``id``, and values; or a mesh.
    nodes : str, path or None
        A node table with columns ``id``, optionally ``x y z``, and values; only with an edge table.
    decimal : str
        The decimal sign in CSV numbers, "." or ",".

    Returns
    -------
    Dataset
        Its ``inputs`` hold name, SHA-256 and size of the very bytes that were parsed; its ``notes`` tell what the
        reader did that the file does not say: points welded, blanks left out, a flat mesh read with two coordinates.

    Raises
    ------
    InputError
        If a file is missing, is no ordinary file, is empty, or cannot be used; the message gives the place.
    """
    suffix = _suffix(path)
    if suffix in MESH_FORMATS:
        return _mesh(path, suffix, nodes, decimal)
    paths = [(path, suffix)] if nodes is None else [(path, suffix), (nodes, _node_suffix(path, nodes))]
    sources = [read_source(each) for each, _ in paths]
    tables = [_table(source, kind, decimal) for source, (_, kind) in zip(sources, paths, strict=True)]
    edge_table, node_table = tables[0][0], tables[1][0] if nodes is not None else None
    notes = tuple(note for _, said in tables for note in said)
    dataset = Dataset.from_tables(edge_table, node_table)
    return replace(dataset, inputs=tuple(s.as_input() for s in sources), notes=dataset.notes + notes)


def _mesh(path: str | os.PathLike[str], suffix: str, nodes: str | os.PathLike[str] | None, decimal: str) -> Dataset:
    name = printable(Path(path).name)
    if nodes is not None:
        message = f"{name} is a mesh, which holds its own points; a node table goes with an edge table"
        raise InputError(message)
    if decimal != ".":
        message = f"{name} is a mesh, where the decimal sign is always a point; leave out --decimal"
        raise InputError(message)
    source = read_source(path)
    try:
        return assemble(MESH_FORMATS[suffix].read(source), source.as_input())
    except InputError as error:  # a message may quote the file, and stays one line all the same
        raise InputError(printable(str(error))) from None


def _suffix(path: str | os.PathLike[str]) -> str:
    """Return the suffix in lower case, if it is one we read."""
    if path == "-":
        return ".csv"
    suffix = Path(path).suffix.lower()
    if suffix in MESH_FORMATS or suffix in TABLE_SUFFIXES:
        return suffix
    name = printable(Path(path).name or str(path))
    if Path(path).is_dir():
        message = f"{name} must be a file, it is a folder; give a file inside it"
        raise InputError(message)
    known = " ".join((*TABLE_SUFFIXES, *MESH_FORMATS))
    hint = WAYS_OUT.get(suffix, "rename or convert it")
    message = f"{name}: the suffix must be one of {known}, found {suffix or 'none'}; {hint}"
    raise InputError(message)


def _node_suffix(path: str | os.PathLike[str], nodes: str | os.PathLike[str]) -> str:
    if path == "-" and nodes == "-":
        message = "stdin can be the edge table or the node table, not both; give a file for one of them"
        raise InputError(message)
    suffix = _suffix(nodes)
    if suffix in MESH_FORMATS:
        message = f"{printable(Path(nodes).name)} is a mesh; a node table must be one of {' '.join(TABLE_SUFFIXES)}"
        raise InputError(message)
    return suffix


def _table(source: Source, suffix: str, decimal: str) -> tuple[dict[str, Column], tuple[str, ...]]:
    return read_parquet(source) if suffix == ".parquet" else read_csv(source, decimal=decimal)
