"""Bytes are read once, from ordinary files only, and what is hashed is what is parsed."""

import hashlib
import io
import os
import subprocess
import sys
from pathlib import Path

import pytest

from dec.errors import InputError
from dec.files import read
from dec.files.sources import printable, read_source, whole_count


def test_the_hash_and_size_are_those_of_the_bytes(tmp_path: Path):
    path = tmp_path / "edges.csv"
    path.write_bytes(b"abc")
    # SHA-256 of "abc": FIPS 180-2, appendix B.1 (from memory), and Python's own library
    known = "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"
    source = read_source(path).as_input()
    assert (source.name, source.sha256, source.bytes) == ("edges.csv", known, 3)
    assert hashlib.sha256(b"abc").hexdigest() == known


def test_the_inputs_of_a_dataset_are_the_files_in_the_order_given(tmp_path: Path):
    (tmp_path / "e.csv").write_bytes(b"from,to\nA,B\n")
    (tmp_path / "n.csv").write_bytes(b"id\nA\nB\n")
    net = read(tmp_path / "e.csv", tmp_path / "n.csv")
    assert [(i.name, i.bytes) for i in net.inputs] == [("e.csv", 12), ("n.csv", 7)]
    assert net.inputs[1].sha256 == hashlib.sha256(b"id\nA\nB\n").hexdigest()


def test_a_link_to_a_file_is_read_under_its_own_name(tmp_path: Path):
    (tmp_path / "data.csv").write_bytes(b"from,to\nA,B\n")
    (tmp_path / "link.csv").symlink_to(tmp_path / "data.csv")
    assert read(tmp_path / "link.csv").inputs[0].name == "link.csv"


def test_a_dash_reads_standard_input(monkeypatch: pytest.MonkeyPatch):
    monkeypatch.setattr(sys, "stdin", io.TextIOWrapper(io.BytesIO(b"from,to\nA,B\nB,C\n")))
    net = read("-")
    assert net.complex.counts == (3, 2)
    assert net.inputs[0].name == "stdin"
    assert net.columns[1]["from"].place(1) == "stdin line 3"


def test_standard_input_cannot_be_both_tables():
    with pytest.raises(InputError, match="not both"):
        read("-", "-")


def test_a_closed_standard_input_is_an_input_error(monkeypatch: pytest.MonkeyPatch):
    monkeypatch.setattr(sys, "stdin", None)
    with pytest.raises(InputError, match="stdin is closed"):
        read("-")


def test_a_pipe_is_refused_without_waking_its_writer(tmp_path: Path):
    os.mkfifo(tmp_path / "edges.csv")
    with pytest.raises(InputError, match="a pipe"):
        read_source(tmp_path / "edges.csv")
    # a writer that does not wait still finds no reader
    with pytest.raises(OSError, match="No such device"):
        os.open(tmp_path / "edges.csv", os.O_WRONLY | os.O_NONBLOCK)


def test_a_path_with_a_zero_byte_is_an_input_error():
    with pytest.raises(InputError, match="null"):
        read("a\0b.csv")


@pytest.mark.skipif(os.geteuid() == 0, reason="root may read everything")
def test_a_file_without_permission_is_an_input_error(tmp_path: Path):
    (tmp_path / "edges.csv").write_bytes(b"from,to\nA,B\n")
    (tmp_path / "edges.csv").chmod(0)
    with pytest.raises(InputError, match=r"edges\.csv: cannot be read"):
        read(tmp_path / "edges.csv")


def test_too_little_memory_is_an_input_error(tmp_path: Path, monkeypatch: pytest.MonkeyPatch):
    (tmp_path / "edges.csv").write_bytes(b"from,to\nA,B\n")

    def no_room(*_: object) -> bytes:
        raise MemoryError

    monkeypatch.setattr("dec.files.sources._read_bytes", no_room)
    with pytest.raises(InputError, match="does not fit into memory"):
        read(tmp_path / "edges.csv")


@pytest.mark.parametrize(
    ("text", "shown"),
    [("a b", "a b"), ("a\nb", "a\\nb"), ("\x1b[31m", "\\x1b[31m"), ("\udcff", "\\udcff"), ("é", "é")],
)
def test_control_characters_are_shown_as_escapes(text: str, shown: str):
    assert printable(text) == shown


def test_importing_the_floor_imports_neither_pandas_nor_meshio():
    code = "import sys, dec.files; sys.exit(any(name in sys.modules for name in ('pandas', 'meshio', 'numba')))"
    folder = Path(read.__code__.co_filename).parents[2]
    done = subprocess.run([sys.executable, "-c", code], cwd=folder, capture_output=True, check=False)
    assert (done.returncode, done.stderr) == (0, b"")


def test_a_folder_is_named_as_one_whatever_its_suffix(tmp_path: Path):
    for name in ("plain", "part.vtu"):
        (tmp_path / name).mkdir()
        with pytest.raises(InputError, match=f"{name} must be a file, it is a folder"):
            read(tmp_path / name)


def test_options_for_tables_are_refused_for_meshes(tmp_path: Path):
    (tmp_path / "part.obj").write_bytes(b"v 0 0 0\nv 1 0 0\nv 0 1 0\nf 1 2 3\n")
    with pytest.raises(InputError, match="leave out --decimal"):
        read(tmp_path / "part.obj", decimal=",")
    (tmp_path / "edges.csv").write_bytes(b"from,to\nA,B\n")
    with pytest.raises(InputError, match=r"part\.obj is a mesh; a node table must be one of"):
        read(tmp_path / "edges.csv", tmp_path / "part.obj")


@pytest.mark.parametrize(
    ("how", "words"),
    [
        ("exec 0>/dev/null", "stdin cannot be read (Bad file descriptor)"),
        ("exec 0<&-", "stdin is closed"),
    ],
)
def test_a_standard_input_that_cannot_be_read_is_one_line_of_error(how: str, words: str):
    folder = Path(read.__code__.co_filename).parents[2]
    command = f'{how}; exec "{sys.executable}" -m dec check -'
    done = subprocess.run(["/bin/sh", "-c", command], cwd=folder, capture_output=True, text=True, check=False)
    assert (done.returncode, done.stdout) == (3, "")
    assert words in done.stderr
    assert done.stderr.count("\n") == 1


def test_a_standard_input_without_bytes_or_room_is_an_input_error(monkeypatch: pytest.MonkeyPatch):
    class Full(io.BytesIO):
        def read(self, *_: object) -> bytes:
            raise MemoryError

    monkeypatch.setattr(sys, "stdin", io.StringIO("from,to\n"))
    with pytest.raises(InputError, match="stdin cannot be read"):
        read("-")
    monkeypatch.setattr(sys, "stdin", io.TextIOWrapper(Full()))
    with pytest.raises(InputError, match="stdin does not fit into memory"):
        read("-")


def test_a_count_has_at_most_18_digits():
    assert whole_count("9" * 18, "t") == 10**18 - 1
    with pytest.raises(InputError, match=r"^t line 1: a number of 19 digits"):
        whole_count("1" + "0" * 18, "t line 1")
