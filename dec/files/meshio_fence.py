"""meshio behind a fence: it may print, warn, raise anything or end the process; out comes a mesh or one InputError."""

import contextlib
import io
import tempfile
import warnings
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from dec.arrays import AnyArray, FloatArray
from dec.errors import InputError
from dec.files.parts import POLYGON, MeshParts, field_array, kind_named, ragged_of
from dec.files.sources import Source, printable

if TYPE_CHECKING:
    import meshio

__all__ = ["fenced", "parts_of"]


def fenced(source: Source, module: str, way_out: str) -> tuple["meshio.Mesh", list[str]]:
    """A meshio mesh, and what its reader had to say.

    Parameters
    ----------
    source : Source
        The bytes are handed over through a private temporary folder, so that what is hashed is what is parsed.
    module : str
        The meshio module that reads the format, "vtk".
    way_out : str
        What the user can do, for the message.

    Returns
    -------
    mesh : meshio.Mesh
    notes : list of str

    Raises
    ------
    InputError
        If the reader fails in any way, or stops at text it cannot read.
    """
    said = io.StringIO()
    with tempfile.TemporaryDirectory(prefix="dec-") as folder, warnings.catch_warnings(record=True) as caught:
        warnings.simplefilter("always")
        with contextlib.redirect_stdout(said), contextlib.redirect_stderr(said):
            import meshio as reader  # inside, so that its first words are caught too

            path = Path(folder, f"mesh.{module}")
            path.write_bytes(source.data)
            try:
                mesh = getattr(reader, module).read(path)
            except (Exception, SystemExit) as error:
                reason = " ".join(printable(str(error)).split()) or type(error).__name__
                message = f"{source.name} cannot be read as {module.upper()} ({reason[:200]}); {way_out}"
                raise InputError(message) from None
    notes = [" ".join(said.getvalue().split())] if said.getvalue().strip() else []
    for warning in caught:
        text = " ".join(str(warning.message).split())
        if "unmatched data" in text:  # the reader went on with whatever it had
            message = f"{source.name}: the numbers break off at a word that is none; {way_out}"
            raise InputError(message)
        if not issubclass(warning.category, DeprecationWarning | PendingDeprecationWarning | FutureWarning):
            notes.append(text)
    return mesh, [f"the reader says: {note}" for note in notes]


def parts_of(source: Source, mesh: "meshio.Mesh", notes: list[str], way_out: str) -> MeshParts:
    """A meshio mesh as parts, every array native and 64 bits wide.

    Raises
    ------
    InputError
        If a kind of cell is not known, or an array holds no real numbers.
    """
    kinds, rows = [np.empty(0, np.int64)], []
    for block in mesh.cells:
        number = POLYGON if block.type.startswith("polygon") else kind_named(block.type)
        if number is None:
            message = f"{source.name}: {len(block.data)} cells are of kind {block.type}, which is not read; {way_out}"
            raise InputError(message)
        kinds.append(np.full(len(block.data), number))
        rows.append(np.asarray(block.data, dtype=np.int64))
    cell_data = {name: np.concatenate([_plain(part) for part in parts]) for name, parts in mesh.cell_data.items()}
    return MeshParts(
        np.asarray(mesh.points, dtype=np.float64),
        np.concatenate(kinds),
        ragged_of(rows),
        _native(mesh.point_data, notes),
        _native(cell_data, notes),
        notes=tuple(notes),
    )


def _plain(values: AnyArray) -> AnyArray:
    return values.astype(values.dtype.newbyteorder("="))


def _native(table: dict[str, AnyArray], notes: list[str]) -> dict[str, FloatArray]:
    return {name: field_array(_plain(values), name, notes) for name, values in table.items()}
