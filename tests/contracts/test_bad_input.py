"""Every input that cannot be used is one error line that names the file, and nothing on disk has changed."""

from pathlib import Path

import pytest

from dec.cli import main
from dec.errors import InputError
from dec.files import read

from .bad_inputs import BAD_INPUTS, Maker


def _state(folder: Path) -> dict[str, object]:
    return {
        path.name: (path.lstat().st_mode, path.lstat().st_mtime_ns, path.is_file() and path.read_bytes())
        for path in folder.iterdir()
    }


@pytest.mark.parametrize("maker", [maker for _, maker in BAD_INPUTS], ids=[name for name, _ in BAD_INPUTS])
def test_a_bad_input_is_one_line_that_names_the_file_and_changes_nothing(maker: Maker, tmp_path: Path, capfd):
    bad = maker(tmp_path)
    before = _state(tmp_path)
    with pytest.raises(InputError) as caught:
        read(bad.path, bad.nodes).column(bad.value or "", 1).numbers()
    message = str(caught.value)
    assert bad.says in message
    assert bad.names in message
    assert message.isprintable()
    assert str(tmp_path) not in message or "no such file" in message
    assert _state(tmp_path) == before
    assert capfd.readouterr() == ("", "")


def test_there_are_more_than_twenty_and_no_two_alike():
    names = [name for name, _ in BAD_INPUTS]
    assert len(set(names)) == len(names) > 20


def test_each_bad_text_file_is_bad_for_its_one_fault_only(tmp_path: Path):
    """The same files without their fault are read, so that no case fails for another reason."""
    (tmp_path / "edges.csv").write_bytes(b"id,from,to,flow\nP1,A,B,1.5\n")
    (tmp_path / "nodes.csv").write_bytes(b"id,x,y\nA,0,1\nB,2,2\n")
    net = read(tmp_path / "edges.csv", tmp_path / "nodes.csv")
    assert net.column("flow", 1).numbers().tolist() == [1.5]
    assert net.complex.points.tolist() == [[0, 1], [2, 2]]


@pytest.mark.parametrize("maker", [maker for _, maker in BAD_INPUTS], ids=[name for name, _ in BAD_INPUTS])
def test_on_the_command_line_it_exits_3_with_one_line_and_leaves_the_folder(maker: Maker, tmp_path: Path, capfd):
    bad = maker(tmp_path)
    before = _state(tmp_path)
    nodes = () if bad.nodes is None else ("--nodes", str(bad.nodes))
    column = () if bad.value is None else ("--value", bad.value)
    verb = "balance" if column else "check"
    output = ("-o", str(tmp_path / "out.csv"), "--sd", "0.1") if column else ()
    assert main([verb, str(bad.path), *nodes, *column, *output]) == 3
    out, err = capfd.readouterr()
    assert out == ""
    assert err.startswith("dec: ")
    assert err.count("\n") == 1
    assert bad.says in err
    assert _state(tmp_path) == before
