"""A file appears whole or not at all, and nothing else is left behind."""

import errno
import os
import stat
import subprocess
import sys
import threading
from pathlib import Path

import pytest

from dec.errors import OutputError
from dec.files import write_atomically


def left(folder: Path) -> list[str]:
    return sorted(path.name for path in folder.iterdir())


def test_a_new_file_holds_exactly_the_bytes_and_stands_alone(tmp_path: Path):
    write_atomically(tmp_path / "out.json", b"a\r\n\0")
    assert (tmp_path / "out.json").read_bytes() == b"a\r\n\0"
    assert left(tmp_path) == ["out.json"]


@pytest.mark.parametrize("mask", [0o022, 0o077, 0o002])
def test_a_new_file_has_the_permissions_of_any_new_file(mask: int, tmp_path: Path):
    before = os.umask(mask)
    try:
        write_atomically(tmp_path / "ours", b"")
        (tmp_path / "plain").write_bytes(b"")
    finally:
        os.umask(before)
    modes = {stat.S_IMODE((tmp_path / name).stat().st_mode) for name in ("ours", "plain")}
    assert modes == {0o666 & ~mask}


def test_an_existing_file_is_refused_and_untouched(tmp_path: Path):
    (tmp_path / "out.json").write_bytes(b"old")
    with pytest.raises(OutputError, match=r"^out\.json exists; use --force to replace it\.$"):
        write_atomically(tmp_path / "out.json", b"new")
    assert (tmp_path / "out.json").read_bytes() == b"old"
    assert left(tmp_path) == ["out.json"]


def test_force_replaces_in_one_step_and_keeps_the_permissions(tmp_path: Path):
    path = tmp_path / "out.json"
    path.write_bytes(b"old")
    path.chmod(0o640)
    with path.open("rb") as reader:  # who has it open keeps the old bytes
        write_atomically(path, b"new", force=True)
        assert reader.read() == b"old"
    assert (path.read_bytes(), stat.S_IMODE(path.stat().st_mode)) == (b"new", 0o640)
    assert left(tmp_path) == ["out.json"]


def test_a_name_taken_while_writing_is_not_overwritten(tmp_path: Path, monkeypatch: pytest.MonkeyPatch):
    sync = os.fsync

    def meanwhile(number: int) -> None:
        (tmp_path / "out.json").write_bytes(b"theirs")
        sync(number)

    monkeypatch.setattr(os, "fsync", meanwhile)
    with pytest.raises(OutputError, match="exists"):
        write_atomically(tmp_path / "out.json", b"ours")
    assert (tmp_path / "out.json").read_bytes() == b"theirs"
    assert left(tmp_path) == ["out.json"]


@pytest.mark.parametrize("error", [OSError(errno.ENOSPC, "x"), KeyboardInterrupt(), MemoryError()])
@pytest.mark.parametrize("step", ["fsync", "link", "replace"])
def test_nothing_is_left_whatever_stops_the_writing(error: BaseException, step: str, tmp_path: Path, monkeypatch):
    (tmp_path / "old.json").write_bytes(b"old")
    name, force = ("old.json", True) if step == "replace" else ("new.json", False)

    def fail(*_: object, **__: object) -> None:
        raise error

    monkeypatch.setattr(os, step, fail)
    if step == "link" and isinstance(error, OSError):
        pytest.skip("a file system without links is another test")
    expected = OutputError if isinstance(error, OSError) else type(error)
    with pytest.raises(expected) as caught:
        write_atomically(tmp_path / name, b"new", force=force)
    assert (
        expected is not OutputError
        or str(caught.value) == f"{name} could not be written: the disk is full; nothing was changed"
    )
    assert left(tmp_path) == ["old.json"]
    assert (tmp_path / "old.json").read_bytes() == b"old"


def test_a_file_system_without_links_will_do(tmp_path: Path, monkeypatch: pytest.MonkeyPatch):
    def no_links(*_: object, **__: object) -> None:
        raise OSError(errno.EPERM, "no links")

    monkeypatch.setattr(os, "link", no_links)
    write_atomically(tmp_path / "a", b"1")
    assert (tmp_path / "a").read_bytes() == b"1"
    assert left(tmp_path) == ["a"]


def test_a_folder_a_device_or_a_missing_folder_is_refused(tmp_path: Path):
    cases = {
        tmp_path: "is a folder; give the name of a file",
        tmp_path / "no" / "out": "the folder .* does not exist; make it first",
        Path("/dev/null"): "null is a device or a pipe",
        tmp_path / ("x" * 300): "the name is too long",
        tmp_path / "file" / "out": "is not a folder",
        tmp_path / "a\0b": "could not be written",
    }
    (tmp_path / "file").write_bytes(b"")
    for path, words in cases.items():
        with pytest.raises(OutputError, match=words):
            write_atomically(path, b"", force=True)
    assert left(tmp_path) == ["file"]
    assert stat.S_ISCHR(Path("/dev/null").stat().st_mode)


@pytest.mark.skipif(not Path("/proc/self").is_dir(), reason="needs a folder that nobody can write to")
def test_a_folder_that_cannot_be_written_is_an_output_error():
    with pytest.raises(OutputError, match=r"out could not be written|out: the folder"):
        write_atomically("/proc/self/out", b"")


def test_through_a_link_its_target_is_written_and_the_link_stays(tmp_path: Path):
    (tmp_path / "there").mkdir()
    (tmp_path / "link").symlink_to(tmp_path / "there" / "out")
    write_atomically(tmp_path / "link", b"1")  # the target is new
    assert (tmp_path / "there" / "out").read_bytes() == b"1"
    with pytest.raises(OutputError, match="link exists"):
        write_atomically(tmp_path / "link", b"2")
    write_atomically(tmp_path / "link", b"2", force=True)
    assert (tmp_path / "link").is_symlink()
    assert (tmp_path / "there" / "out").read_bytes() == b"2"
    (tmp_path / "circle").symlink_to(tmp_path / "circle")
    with pytest.raises(OutputError, match="circle"):
        write_atomically(tmp_path / "circle", b"", force=True)
    assert left(tmp_path) == ["circle", "link", "there"]
    assert left(tmp_path / "there") == ["out"]


def test_a_process_killed_at_any_moment_leaves_the_old_or_the_new_file(tmp_path: Path):
    (tmp_path / "out").write_bytes(b"0" * 100_000)
    code = (
        "import sys; from dec.files.writing import write_atomically\n"
        "print('go', flush=True)\n"
        "for k in range(10**6): write_atomically(sys.argv[1], b'%d' % (k % 10) * 100_000, force=True)\n"
    )
    root = Path(write_atomically.__code__.co_filename).parents[2]
    with subprocess.Popen(
        [sys.executable, "-c", code, str(tmp_path / "out")], cwd=root, stdout=subprocess.PIPE
    ) as child:
        child.stdout.readline()
        timer = threading.Timer(0.2, child.kill)
        timer.start()
        child.wait()
        timer.cancel()
    content = (tmp_path / "out").read_bytes()
    assert (len(content), len(set(content))) == (100_000, 1)
