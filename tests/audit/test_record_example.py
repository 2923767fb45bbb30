"""The example of figures for the record: what it prints, and its commands."""

import re
import runpy
import shlex
import shutil
from pathlib import Path

import pandas as pd
import pytest

from dec.cli import main

TOP = Path(__file__).parents[2]
SCRIPT = TOP / "examples" / "07_figures_for_the_record.py"


def test_the_script_says_what_the_readme_says(capsys):
    runpy.run_path(str(SCRIPT), run_name="__main__")
    out = capsys.readouterr().out
    assert "rounded one by one, 5 junctions no longer balance\nrounded together, 0 do not\n" in out
    assert "recheck: holds; " in out
    assert "pipes.csv line 22: is not the line that was certified" in out
    assert (TOP / "examples" / "data" / "town" / "pipes.csv").read_text().splitlines()[21].startswith("P21,")
    assert "moebius.obj: H0 = Z, H1 = Z, H2 = 0" in out


def test_the_commands_of_the_script_run_and_recheck(tmp_path, monkeypatch, capsys):
    text = SCRIPT.read_text(encoding="utf-8").replace("\\\n", "")
    commands = [shlex.split(line) for line in re.findall(r"^    dec (.*)", text, re.MULTILINE)]
    assert [words[0] for words in commands] == ["balance", "verify", "check", "verify"]
    shutil.copytree(TOP / "examples" / "data", tmp_path / "examples" / "data")
    shutil.copytree(TOP / "meshes", tmp_path / "meshes")
    monkeypatch.chdir(tmp_path / "examples")
    codes = [main(words) for words in commands]
    assert codes == [1, 0, main(["check", "../meshes/moebius.obj", "--quiet"]), 0]
    published = pd.read_csv("published.csv", dtype=str, keep_default_na=False)
    assert set(published["rounded_to"]) == {"0.1"}
    capsys.readouterr()


@pytest.mark.parametrize("word", ["local codes", "licensed practice", "not say that"])
def test_the_script_says_what_a_certificate_does_not_show(word):
    assert word in " ".join(SCRIPT.read_text(encoding="utf-8").split())
