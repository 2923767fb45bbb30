"""Digits that add up, certificates, and their recheck, from the command line."""

import json
import shutil
import subprocess
import sys
from decimal import Decimal
from pathlib import Path

import pandas as pd
import pytest

import dec.verify
from dec.cli import main

TOWN = Path(__file__).parents[2] / "examples" / "data" / "town"
AUDIT = ["--value", "flow", "--sd", "sd", "--supply", "demand", "--open-column", "open"]


@pytest.fixture
def town(tmp_path, monkeypatch) -> Path:
    for name in ("pipes.csv", "nodes.csv"):
        shutil.copy(TOWN / name, tmp_path / name)
    monkeypatch.chdir(tmp_path)
    return tmp_path


def run(capsys, *words: str) -> tuple[int, str, str]:
    code = main([str(word) for word in words])
    out, err = capsys.readouterr()
    return code, out, err


def balance(capsys, *more: str) -> tuple[int, str, str]:
    return run(capsys, "balance", "pipes.csv", "--nodes", "nodes.csv", *AUDIT, *more)


def test_rounded_flows_add_up_in_the_written_tables(town, capsys):
    code, out, _ = balance(
        capsys, "--digits", "0.1", "--round-supplies", "-o", "a.csv", "--vertices", "v.csv", "--json"
    )
    assert code == 1
    found = json.loads(out)
    assert found["digits"]["units"] == ["0.1"]
    edges = pd.read_csv("a.csv", dtype=str, keep_default_na=False)
    nodes = pd.read_csv("v.csv", dtype=str, keep_default_na=False).set_index("id")
    assert edges["rounded"].tolist() == [text or "" for text in (t or "" for t in found["digits"]["edges"])]
    assert set(edges["rounded_to"]) == {"0.1"}
    left = dict.fromkeys(nodes.index, Decimal(0))
    known = edges["rounded"] != ""
    for row in edges[known].itertuples():
        left[row.to] += Decimal(row.rounded)
        left[row._2] -= Decimal(row.rounded)  # the column "from"
    unknown = set(edges["from"][~known]) | set(edges["to"][~known])
    checked = 0
    for name, amount in left.items():
        supply = nodes["rounded_supply"].get(name, "")
        if supply and name not in unknown:
            assert amount + Decimal(supply) == 0
            checked += 1
    assert checked > 25
    for row in edges[known].itertuples():
        assert abs(Decimal(row.rounded) - Decimal(row.adjusted)) < Decimal("0.1")


def test_a_supply_that_is_no_multiple_is_refused_unless_it_may_be_rounded(town, capsys):
    code, _, err = balance(capsys, "--digits", "0.1", "-o", "a.csv")
    assert code == 3
    assert "whole multiple" in err
    assert not Path("a.csv").exists()
    assert balance(capsys, "--digits", "0.01", "-o", "a.csv")[0] == 1


def test_a_certificate_holds_until_a_line_of_its_table_changes(town, capsys):
    assert balance(capsys, "--certificate", "c.json")[0] == 1
    code, out, _ = run(capsys, "verify", "c.json", "pipes.csv", "nodes.csv")
    assert (code, "VERIFIES" in out, "DOES NOT" in out) == (0, True, False)
    assert json.loads(run(capsys, "verify", "c.json", "--json")[1])["holds"] is True
    lines = Path("pipes.csv").read_text(encoding="utf-8").splitlines(keepends=True)
    headings = lines[0].strip().split(",")
    cells = lines[5].split(",")
    cells[headings.index("flow")] += "1"
    lines[5] = ",".join(cells)
    Path("pipes.csv").write_text("".join(lines), encoding="utf-8")
    code, out, _ = run(capsys, "verify", "c.json")
    assert code == 1
    assert "pipes.csv line 6" in out


def test_a_bare_python_rechecks_a_certificate_without_the_package(town, capsys):
    assert balance(capsys, "--certificate", "c.json")[0] == 1
    shutil.copy(dec.verify.__file__, town / "recheck.py")
    words = [sys.executable, "-I", "-S", "recheck.py", "c.json", "pipes.csv", "nodes.csv"]
    done = subprocess.run(words, capture_output=True, text=True, check=False, cwd=town)
    assert done.returncode == 0, done.stderr


def test_a_solve_and_a_homology_are_certified_too(town, capsys):
    Path("e.csv").write_text("id,from,to,c\na,S,J,2\nb,J,T,4\n", encoding="utf-8")
    Path("n.csv").write_text("id,put_in\nS,3\nJ,0\nT,-3\n", encoding="utf-8")
    words = (
        "solve",
        "e.csv",
        "--nodes",
        "n.csv",
        "--source",
        "put_in",
        "--conductance",
        "c",
        "--certificate",
        "s.json",
    )
    assert run(capsys, *words)[0] == 0
    assert run(capsys, "verify", "s.json", "e.csv", "n.csv")[0] == 0
    Path("m.obj").write_text("v 0 0 0\nv 1 0 0\nv 0 1 0\nf 1 2 3\n", encoding="utf-8")
    assert run(capsys, "check", "m.obj", "--certificate", "h.json")[0] == 0
    assert run(capsys, "verify", "h.json", "m.obj")[0] == 0
    forged = Path("h.json").read_text(encoding="utf-8").replace('"rank": 1', '"rank": 2')
    Path("h.json").write_text(forged, encoding="utf-8")
    assert run(capsys, "verify", "h.json", "m.obj")[0] == 1


@pytest.mark.parametrize(
    ("words", "code", "says"),
    [
        (("verify", "no.json"), 3, "no.json"),
        (("balance", "pipes.csv", "--value", "flow", "--round-supplies"), 2, "--digits"),
        (("balance", "pipes.csv", "--value", "flow", "--certificate", "-"), 2, "--certificate must name a file"),
        (("balance", "pipes.csv", "--value", "flow", "--certificate", "pipes.csv", "--force"), 5, "is an input"),
        (("balance", "pipes.csv", "--value", "flow", "-o", "x.csv", "--certificate", "x.csv"), 2, "name one file"),
        (("balance", "pipes.csv", "--value", "flow", "--digits", "0"), 2, "positive"),
        (("balance", "m.vtu", "--field", "u", "--digits", "1"), 2, "--digits belongs to a network column"),
    ],
)
def test_wrong_use_is_said_and_nothing_written(town, capsys, words, code, says):
    before = sorted(p.name for p in town.iterdir())
    found, _, err = run(capsys, *words)
    assert (found, says in err) == (code, True), err
    assert sorted(p.name for p in town.iterdir()) == before


def test_the_certificate_is_there_in_python_too(town):
    net = dec.read("pipes.csv", nodes="nodes.csv")
    audit = dec.balance(net, value="flow", sd="sd", supply="demand", open="open")
    assert audit.certificate["schema"] == "dec.certificate/1"
    files = {name: Path(name).read_bytes() for name in ("pipes.csv", "nodes.csv")}
    assert dec.verify.verify(audit.certify(contents=list(files.values())), files).holds
    with pytest.raises(dec.InputError, match="what-if"):
        audit.what_if(turned=["P21"]).certify()
