"""The README and the examples say what the program does."""

import doctest
import re
import runpy
import shlex
from pathlib import Path

import pytest

from dec.cli import main

TOP = Path(__file__).parents[2]
README = (TOP / "README.md").read_text(encoding="utf-8")
CONSOLE = re.findall(r"^```console\n\$ (.*)\n((?:.*\n)*?)```", README, flags=re.MULTILINE)
MORE = re.findall(r"^dec .*", (TOP / "examples/README.md").read_text(encoding="utf-8"), flags=re.MULTILINE)


@pytest.fixture(autouse=True)
def at_top(monkeypatch):
    monkeypatch.chdir(TOP)


def run(line: str, capsys: pytest.CaptureFixture[str]) -> tuple[int, str]:
    program, *words = shlex.split(line)
    assert program == "dec"
    code = main(words)
    return code, capsys.readouterr().out


def test_the_python_of_the_readme_prints_what_it_says():
    result = doctest.testfile(str(TOP / "README.md"), module_relative=False)
    assert result.attempted > 10
    assert result.failed == 0


@pytest.mark.parametrize(("line", "shown"), CONSOLE)
def test_the_command_lines_of_the_readme_print_what_it_says(line, shown, capsys):
    _, out = run(line, capsys)
    pattern = re.escape(shown).replace(re.escape("...\n"), "(?:.*\n)*")
    assert re.fullmatch(pattern, out), out


@pytest.mark.parametrize("line", MORE)
def test_the_command_lines_of_the_examples_run(line, capsys):
    code, out = run(line, capsys)
    assert code in (0, 1)
    assert out


@pytest.mark.parametrize("script", sorted(p.name for p in (TOP / "examples").glob("*.py")))
def test_every_example_runs_from_any_folder(script, tmp_path, monkeypatch, capsys):
    monkeypatch.chdir(tmp_path)
    runpy.run_path(str(TOP / "examples" / script), run_name="__main__")
    assert capsys.readouterr().out
    assert not list(tmp_path.iterdir())


def test_every_public_name_exists():
    import dec

    assert {"Complex", "Dataset", "balance", "check", "grid", "loops", "read"} <= set(dec.__all__)
    for name in dec.__all__:
        assert getattr(dec, name).__doc__, name


def test_links_in_the_guides_lead_somewhere():
    for guide in ("README.md", "DEVELOPERS.md", "examples/README.md", "examples/data/README.md", "meshes/README.md"):
        text = (TOP / guide).read_text(encoding="utf-8")
        for target in re.findall(r"\]\(([^)#:]+)\)", text):
            assert (TOP / guide).parent.joinpath(target).exists(), (guide, target)
