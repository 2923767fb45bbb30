"""meshio behind a fence: it may print, warn, raise anything or end the process; out comes a mesh or one InputError."""

import sys
import tempfile
import threading
import warnings
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, Any, TextIO

import numpy as np

from dec.arrays import AnyArray, FloatArray
from dec.errors import InputError
from dec.files.parts import POLYGON, MeshParts, field_array, kind_named, ragged_of
from dec.files.sources import Source, printable

if TYPE_CHECKING:
    import meshio

__all__ = ["fenced", "parts_of"]

_ONE_AT_A_TIME = threading.Lock()


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
    try:
        with tempfile.TemporaryDirectory(prefix="dec-") as folder:
            path = Path(folder, f"mesh.{module}")
            path.write_bytes(source.data)
            mesh, said, warned = _read(source, module, path, way_out)
    except OSError as error:
        message = (
            f"{source.name}: no room to hand it over in the temporary folder ({error.strerror or error}); free some "
            "space there, or name another folder in TMPDIR"
        )
        raise InputError(message) from None
    notes = [" ".join(said.split())] if said.strip() else []
    for warning in warned:
        text = " ".join(str(warning).split())
        if "unmatched data" in text:  # the reader went on with whatever it had
            message = f"{source.name}: the numbers break off at a word that is none; {way_out}"
            raise InputError(message)
        if not isinstance(warning, DeprecationWarning | PendingDeprecationWarning | FutureWarning):
            notes.append(text)
    return mesh, [f"the reader says: {note}" for note in notes]


def _read(source: Source, module: str, path: Path, way_out: str) -> tuple["meshio.Mesh", str, list[Warning | str]]:
    with _listening() as ear:
        import meshio as reader  # inside, so that its first words are caught too

        try:
            mesh = getattr(reader, module).read(path)
        except (Exception, SystemExit) as error:
            reason = " ".join(printable(str(error)).split()) or type(error).__name__
            message = f"{source.name} cannot be read as {module.upper()} ({reason[:200]}); {way_out}"
            raise InputError(message) from None
    return mesh, "".join(ear.said), ear.warned


class _Ear:
    """Keeps what one thread prints and warns; what the others do goes on to where it went before."""

    def __init__(self) -> None:
        self.thread: int | None = threading.get_ident()
        self.said: list[str] = []
        self.warned: list[Warning | str] = []
        self.shown_before = warnings.showwarning

    def hears(self) -> bool:
        return threading.get_ident() == self.thread

    def show(self, message: Warning | str, category: type[Warning], *place: Any, **more: Any) -> None:
        if self.hears():
            self.warned.append(message)
        else:
            self.shown_before(message, category, *place, **more)


class _Stream:
    """Stands for standard output or error while an ear listens."""

    def __init__(self, ear: _Ear, stream: TextIO) -> None:
        self._ear, self._stream = ear, stream

    def write(self, text: str) -> int:
        if not self._ear.hears():
            return self._stream.write(text)
        self._ear.said.append(text)
        return len(text)

    def __getattr__(self, name: str) -> Any:
        return getattr(self._stream, name)


@contextmanager
def _listening() -> Iterator[_Ear]:
    # the streams and the warning filters belong to the whole process: one fence at a time, and other threads keep
    # theirs; a stream that another thread took over meanwhile is left to it, and passes everything on
    with _ONE_AT_A_TIME, warnings.catch_warnings():
        ear = _Ear()
        warnings.filterwarnings("always", module=r"meshio\b")
        warnings.showwarning = ear.show
        streams = {name: _Stream(ear, getattr(sys, name)) for name in ("stdout", "stderr")}
        before = {name: getattr(sys, name) for name in streams}
        for name, stream in streams.items():
            setattr(sys, name, stream)
        try:
            yield ear
        finally:
            ear.thread = None
            for name, stream in streams.items():
                if getattr(sys, name) is stream:
                    setattr(sys, name, before[name])


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
