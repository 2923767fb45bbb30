"""Files that appear whole or not at all."""

import contextlib
import errno
import os
import secrets
import stat
from pathlib import Path

from dec.errors import OutputError
from dec.files.sources import printable

__all__ = ["refuse_target", "write_atomically"]

_REASONS = {
    errno.ENOSPC: "the disk is full",
    errno.EDQUOT: "the disk quota is used up",
    errno.EROFS: "the file system is read-only",
    errno.EACCES: "no permission to write in this folder",
    errno.EPERM: "no permission to write in this folder",
    errno.ENAMETOOLONG: "the name is too long",
    errno.ELOOP: "the links lead in a circle",
}


def write_atomically(path: str | os.PathLike[str], data: bytes, *, force: bool = False) -> None:
    """Nothing; afterwards the file holds exactly these bytes, or is what it was before.

    The bytes go to a temporary file in the same folder, reach the disk, and take the name in one step. Where the
    path is a link, the file it leads to is written and the link stays. A new file gets the usual permissions, a
    replaced one keeps its own.

    Parameters
    ----------
    path : str or path
        Where to write.
    data : bytes
        The whole content.
    force : bool
        Whether an existing file may be replaced.

    Raises
    ------
    OutputError
        If the file exists and force is False, the folder is missing or cannot be written, or the path is not an
        ordinary file. No temporary file is left, whatever stopped the writing.

    Examples
    --------
    >>> import tempfile, pathlib
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     write_atomically(pathlib.Path(folder, "a.txt"), b"one")
    ...     pathlib.Path(folder, "a.txt").read_bytes()
    b'one'
    """
    name = Path(path).name or str(path)
    try:
        # no resolve(strict=True): the file itself need not exist yet
        target = Path(os.path.realpath(path))
        old_mode = _mode_of_old(target, name, force=force)
        _write(target, data, old_mode, force=force)
    except FileExistsError:
        raise OutputError(_exists(name)) from None
    except FileNotFoundError:
        message = f"{name}: the folder {Path(path).parent} does not exist; make it first"
        raise OutputError(message) from None
    except NotADirectoryError:
        message = f"{name}: {Path(path).parent} is not a folder"
        raise OutputError(message) from None
    except OutputError:
        raise
    except (OSError, ValueError) as error:
        reason = str(error)
        if isinstance(error, OSError):
            reason = _REASONS.get(error.errno or 0, error.strerror or str(error))
        message = f"{name} could not be written: {reason}; nothing was changed"
        raise OutputError(message) from None


def refuse_target(path: str | os.PathLike[str], *, force: bool = False) -> None:
    """Nothing, or the OutputError that `write_atomically` would end in, as far as it can be told before writing."""
    name = Path(path).name or str(path)
    try:
        target = Path(os.path.realpath(path))
        _mode_of_old(target, name, force=force)
        if not target.parent.is_dir():
            message = f"{name}: the folder {Path(path).parent} does not exist; make it first"
            raise OutputError(message)
    except OutputError:
        raise
    except (OSError, ValueError) as error:
        message = f"{printable(name[:80])} cannot be written: {error.strerror if isinstance(error, OSError) else error}"
        raise OutputError(message) from None


def _exists(name: str) -> str:
    return f"{name} exists; use --force to replace it."


def _mode_of_old(target: Path, name: str, *, force: bool) -> int | None:
    """Return the permission bits of the file to be replaced; None where there is none."""
    try:
        mode = target.lstat().st_mode  # a link here is one that leads in a circle
    except FileNotFoundError:
        return None
    if stat.S_ISLNK(mode):
        raise OSError(errno.ELOOP, "links")
    if stat.S_ISDIR(mode):
        message = f"{name} is a folder; give the name of a file"
        raise OutputError(message)
    if not stat.S_ISREG(mode):
        message = f"{name} is a device or a pipe; give the name of a file"
        raise OutputError(message)
    if not force:
        raise OutputError(_exists(name))
    return stat.S_IMODE(mode)


def _write(target: Path, data: bytes, old_mode: int | None, *, force: bool) -> None:
    temporary = target.with_name(f".dec-{secrets.token_hex(8)}.tmp")
    try:
        _fill(temporary, data, old_mode)
        if force:
            temporary.replace(target)
        else:
            _take_free_name(temporary, target)
    except BaseException:  # an interrupt must not leave half a file either
        with contextlib.suppress(OSError):
            temporary.unlink()
        raise
    _sync_folder(target.parent)


def _fill(temporary: Path, data: bytes, old_mode: int | None) -> None:
    # 0o666 here, so that the system itself applies the user's umask
    number = os.open(temporary, os.O_WRONLY | os.O_CREAT | os.O_EXCL | getattr(os, "O_BINARY", 0), 0o666)
    with open(number, "wb") as file:  # noqa: PTH123
        if old_mode is not None and hasattr(os, "fchmod"):
            os.fchmod(number, old_mode)
        file.write(data)
        file.flush()
        os.fsync(number)


def _take_free_name(temporary: Path, target: Path) -> None:
    """Give the finished file its name, failing if another process has taken the name meanwhile."""
    try:
        target.hardlink_to(temporary)
    except FileExistsError:
        raise
    except OSError:  # a file system without hard links
        if target.exists():
            raise FileExistsError from None
        temporary.replace(target)
    else:
        temporary.unlink()


def _sync_folder(folder: Path) -> None:
    # without this a power cut could lose the new name; not every system lets a folder be opened
    with contextlib.suppress(OSError):
        number = os.open(folder, os.O_RDONLY)
        try:
            os.fsync(number)
        finally:
            os.close(number)
