"""Certificates of audits and solutions verify as they are, on a bare Python too, and are refused once changed."""

import hashlib
import json
import random
import re
import shutil
import subprocess
import sys
from functools import cache
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import Any

import numpy as np
import pandas as pd
import pytest

import dec
from dec.audit.certificate import audit_certificate
from dec.calculus.certificates import sealed
from dec.errors import InputError
from dec.verify import main, verify

from .certified import LAWS, Certified, certified

VERIFY = Path(dec.__file__).with_name("verify.py")
N_NETWORKS = 30
EMPTY = {"edges": [], "vertices": None, "open": [], "supply": [], "decimal": ".", "columns": {}}


@cache
def example(law: str, seed: int, with_lines: bool = True) -> Certified:
    with TemporaryDirectory() as folder:
        return certified(Path(folder), law, seed, with_lines=with_lines)


def examples(*, with_lines: bool = True) -> list[Certified]:
    return [example(law, seed, with_lines) for law in LAWS for seed in range(N_NETWORKS)]


def resealed(found: Certified, change: Any) -> bytes:
    entries = json.loads(found.certificate)
    del entries["seal"], entries["schema"]
    change(entries)
    return sealed(entries)


@pytest.mark.parametrize("law", LAWS)
def test_certificates_verify_in_every_dialect(law: str) -> None:
    for seed in range(100):
        found = example(law, seed)
        report = verify(found.certificate, found.files)
        assert report.problems == [], (law, seed)
        assert any("SHA-256 fits" in text for text in report.checked)


def test_a_thousand_tamperings_are_refused_and_the_changed_line_is_named() -> None:
    rng, made, named = random.Random(11), 0, 0
    pool = examples()
    while made < 1000:
        found = rng.choice(pool)
        name = rng.choice(["edges.csv", "nodes.csv", "certificate"])
        data = found.certificate if name == "certificate" else found.files[name]
        at = rng.randrange(len(data))
        changed = (
            data[:at] + rng.choice([b"", bytes([rng.randrange(256)]), b"7", data[at : at + 1] * 2]) + data[at + 1 :]
        )
        if changed == data or (name == "certificate" and says_the_same(changed, data)):
            continue
        made += 1
        if name == "certificate":
            assert not verify(changed, found.files).holds, changed
            continue
        report = verify(found.certificate, {**found.files, name: changed})
        assert not report.holds
        end = b"\n" if b"\n" in data else b"\r"
        line = data.count(end, 0, at) + 1
        lines = {line, line + 1} if data[at : at + 1] == end else {line}  # a line end lies between two lines
        assert any(f"{name} line {k}:" in text for text in report.problems for k in lines), (report.problems, line)
        named += 1
    assert named > 500


def says_the_same(changed: bytes, data: bytes) -> bool:
    try:
        return json.loads(changed) == json.loads(data)  # 1e-05 for 1E-05, a blank for a line end
    except ValueError:
        return False


def test_a_changed_number_or_name_is_named_with_its_line_even_without_digests_of_lines() -> None:
    rng, made = random.Random(12), 0
    pool = examples(with_lines=False)
    while made < 300:
        found = rng.choice(pool)
        name = rng.choice(["edges.csv", "nodes.csv"])
        data = found.files[name]
        row = rng.randrange(len(found.rows[name]))
        line = found.rows[name][row]
        lines = data.split(b"\r" if b"\n" not in data else b"\n")
        digits = [m for m in re.finditer(rb"[0-9]", lines[line - 1]) if in_used_cell(lines[line - 1], m.start(), data)]
        if not digits:
            continue
        place = rng.choice(digits).start()
        old = lines[line - 1][place]
        new = rng.choice([digit for digit in b"0123456789" if digit != old])
        lines[line - 1] = lines[line - 1][:place] + bytes([new]) + lines[line - 1][place + 1 :]
        changed = (b"\r" if b"\n" not in data else b"\n").join(lines)
        if same_numbers(data, changed):
            continue
        made += 1
        report = verify(found.certificate, {**found.files, name: changed})
        assert not report.holds
        assert any(f"{name} line {line}:" in text for text in report.problems), (report.problems, line, changed)


def in_used_cell(line: bytes, place: int, data: bytes) -> bool:
    """Whether a byte stands before the last cell, which holds remarks; lines with quotation marks are left out."""
    separator = max((b"\t", b";", b","), key=data.split(b"\r")[0].split(b"\n")[0].count)
    return b'"' not in line and place < line.rfind(separator)


def same_numbers(data: bytes, changed: bytes) -> bool:
    """Whether the change is one of spelling alone, as from 0.5E+0 to 0.5E-0 or in the exponent of a zero."""
    spelling = re.compile(rb"[0-9.,]+E[+-][0-9]+")
    return bool(spelling.findall(data) != spelling.findall(changed))


@pytest.mark.parametrize("law", LAWS)
def test_a_forger_who_seals_again_is_found_out_by_what_is_computed_anew(law: str) -> None:
    rng, refused = random.Random(13), 0
    for seed in range(N_NETWORKS):
        found = example(law, seed)
        for change in forgeries(json.loads(found.certificate), rng):
            report = verify(resealed(found, change), found.files)
            assert not report.holds, (law, seed)
            refused += 1
    assert refused > 4 * N_NETWORKS


def forgeries(entries: dict[str, Any], rng: random.Random) -> list[Any]:
    """Changes to what a certificate says, each of which makes it wrong."""
    row = rng.randrange(len(entries["edges"]))

    def renamed(place: int) -> Any:
        return lambda e: e["edges"][row].__setitem__(place, e["edges"][row][place] + "x")

    changes: list[Any] = [
        renamed(0), renamed(1), renamed(2),
        lambda e: e["edges"].pop(row),
        lambda e: e["edges"].append(e["edges"][row]),
        lambda e: e["inputs"][0].__setitem__("sha256", hashlib.sha256(b"other").hexdigest()),
        lambda e: e.__setitem__("law", "other"),
        lambda e: e.pop("edges"),
        lambda e: e["inputs"][0].__setitem__("holds", "readings"),
        lambda e: e["columns"].__setitem__("value" if entries["law"] != "solve" else "conductance", None),
        lambda e: e["edges"][row].__setitem__(0, e["edges"][row - 1][0]) if row else e["edges"][0].__setitem__(0, 5),
        lambda e: e.__setitem__("inputs", 3),
        lambda e: e["open"].append("nowhere") if entries["law"] == "solve" else e["sums"].append(["nowhere", 0]),
    ]  # fmt: skip
    if entries["law"] == "solve":
        changes += [
            lambda e: e["edges"][row].__setitem__(4, e["edges"][row][4] * 1.5),
            lambda e: e["vertices"][0].__setitem__(1, e["vertices"][0][1] + 1.0),
            lambda e: e["edges"][row].__setitem__(4, -e["edges"][row][4]),
        ]
        if entries["bound"]:
            changes.append(lambda e: e.__setitem__("bound", e["bound"] * 0.999))
        if entries["residual"]:
            changes.append(lambda e: e.__setitem__("residual", e["residual"] * 0.999))
        return changes
    number = entries["edges"][row][3]
    changes.append(lambda e: e["edges"][row].__setitem__(3, 1 if number is None else number + 1))
    changes.append(lambda e: e["edges"][row].__setitem__(3, 0 if number is None else float(number)))
    if entries["sums"]:
        changes += [
            lambda e: e["sums"][0].__setitem__(1, e["sums"][0][1] + 1),
            lambda e: e["sums"].pop(),
        ]
    if entries["unit"] != "1":
        changes.append(lambda e: e.__setitem__("unit", "1"))
    if entries["limit"] is not None:
        changes.append(lambda e: e.__setitem__("holds", not e["holds"]))
    else:
        changes.append(lambda e: e.__setitem__("holds", True))
    at = "supply" if entries["law"] == "balance" else "fixed"
    if entries[at]:
        changes.append(lambda e: e[at][0].__setitem__(1, e[at][0][1] + 1))
        changes.append(lambda e: e[at].pop())
    return changes


def test_what_is_wrong_with_a_line_is_said_in_numbers(tmp_path: Path) -> None:
    (tmp_path / "edges.csv").write_text("id,from,to,flow\nin,S,J,5.20\nout,J,T,5.0\n")
    audit = dec.balance(dec.read(tmp_path / "edges.csv"), value="flow", open=["S", "T"], limit=0.25)
    certificate = audit_certificate(audit)
    changed = (tmp_path / "edges.csv").read_bytes().replace(b"5.0", b"5.1")
    assert verify(certificate, {"edges.csv": changed}).problems == [
        "edges.csv: its bytes are not those that were certified",
        "edges.csv line 3: flow is '5.1', the certificate has 500 x 0.01",
    ]


def test_sums_and_verdict_are_those_of_the_audit(tmp_path: Path) -> None:
    (tmp_path / "lines.csv").write_text("id,from,to,dh\na,A,B,1.10\nb,B,C,2.20\nc,C,A,-3.27\nd,C,D,\n")
    audit = dec.loops(dec.read(tmp_path / "lines.csv"), value="dh", limit=0.02)
    entries = json.loads(audit_certificate(audit))
    assert entries["unit"] == "0.01"
    assert [abs(number) for _, number in entries["sums"]] == [3]
    assert (entries["limit"], entries["holds"]) == ("0.02", False)
    assert entries["edges"][3] == ["d", "C", "D", None]


def test_a_copy_of_the_file_alone_verifies_with_a_bare_python_elsewhere(tmp_path: Path) -> None:
    shutil.copy(VERIFY, tmp_path / "recheck.py")
    for law in LAWS:
        found = example(law, 1)
        folder = tmp_path / law
        folder.mkdir()
        (folder / "result.json").write_bytes(found.certificate)
        for name, data in found.files.items():
            (folder / name).write_bytes(data)
        run = bare(tmp_path, f"{law}/result.json")
        assert (run.returncode, run.stderr) == (0, "")
        assert run.stdout.startswith(f"verifies ({law})\n  edges.csv: SHA-256 fits\n")
        row = found.rows["edges.csv"][0]
        end = b"\n" if b"\n" in found.files["edges.csv"] else b"\r"
        lines = found.files["edges.csv"].split(end)
        lines[row - 1] = lines[row - 1] + b" "
        (folder / "edges.csv").write_bytes(end.join(lines))
        run = bare(tmp_path, f"{law}/result.json", "--json")
        assert (run.returncode, run.stderr) == (1, "")
        assert any(f"edges.csv line {row}:" in text for text in json.loads(run.stdout)["problems"])


def bare(folder: Path, *words: str) -> subprocess.CompletedProcess[str]:
    """Run the copy isolated and without site-packages."""
    command = [sys.executable, "-I", "-S", "recheck.py", *words]
    return subprocess.run(command, cwd=folder, capture_output=True, text=True, check=False, timeout=60)


def test_files_go_by_name_or_by_place_and_exit_codes_tell_what_happened(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    found = example("balance", 2)
    certificate = tmp_path / "c.json"
    certificate.write_bytes(found.certificate)
    moved = [tmp_path / f"{number}.csv" for number in range(2)]
    for path, data in zip(moved, found.files.values(), strict=True):
        path.write_bytes(data)
    assert main([str(certificate), *map(str, moved)]) == 0
    assert main([str(certificate), *map(str, reversed(moved))]) == 1
    assert main([str(certificate)]) == 1
    assert "edges.csv is needed for the recheck and was not given" in capsys.readouterr().out
    assert main([str(certificate), str(moved[0])]) == 3
    assert "0.csv is none of the files that the certificate names" in capsys.readouterr().err
    assert main([str(tmp_path / "no.json")]) == 3
    loose = tmp_path / "loose.json"
    loose.write_bytes(resealed(found, lambda e: e.__setitem__("inputs", [])))
    assert main([str(loose), str(moved[0])]) == 3
    assert "names: none at all" in capsys.readouterr().err
    renamed = resealed(found, lambda e: e["inputs"][0].__setitem__("name", "edges.parquet"))
    loose.write_bytes(renamed)
    assert main([str(loose), *map(str, moved)]) == 3
    assert "0.csv stands in the place of edges.parquet" in capsys.readouterr().err
    with pytest.raises(SystemExit) as stopped:
        main([])
    assert stopped.value.code == 2


@pytest.mark.parametrize(
    ("certificate", "says"),
    [
        (b"\xff", "must be JSON"),
        (b"[" * 100_000, "must be JSON"),
        (b"[]", "found 'list'"),
        (b'{"schema": "dec.certificate/1", "seal": "a", "seal": "b"}', "gives a key twice"),
        (b'{"schema": "dec.certificate/1", "x": NaN}', "holds NaN, which is no number"),
        (b'{"schema": "dec.certificate/1"}', "its seal does not fit"),
        (sealed({"law": "balance"}), "malformed (KeyError"),
        (sealed({"law": []}), "the law must be one of"),
        (sealed({"law": "balance", "inputs": [], **EMPTY, "unit": "0.02"}), "the unit must be a power of ten"),
    ],
)
def test_what_is_no_certificate_is_refused_without_a_traceback(certificate: bytes, says: str) -> None:
    (problem,) = verify(certificate, {}).problems
    assert says in problem


def test_control_characters_of_a_file_do_not_reach_the_terminal() -> None:
    report = verify(sealed({"law": "balance", "inputs": [{"name": "\x1b[2J"}]}), {})
    assert "\x1b" in report.problems[0]
    assert "\x1b" not in report.text()


def test_a_certificate_is_refused_where_it_would_say_something_else(tmp_path: Path) -> None:
    path = tmp_path / "edges.csv"
    path.write_text("id,from,to,flow\nin,S,J,5.20\nout,J,T,5.0\n")
    net = dec.read(path)
    audit = dec.balance(net, value="flow", open=["S", "T"], sd=0.1)
    with pytest.raises(InputError, match="not of what-if readings"):
        audit_certificate(audit.what_if(turned=["out"]))
    with pytest.raises(InputError, match=r"edges\.csv must be as it was read"):
        audit_certificate(audit, contents=[b"other"])
    held = dec.loops(net, value="flow", fixed={"S": 1})
    with pytest.raises(InputError, match="fixed must be given here as it was given to the audit"):
        audit_certificate(held)
    assert json.loads(audit_certificate(held, fixed={"S": 1}))["fixed"] == [["S", 100]]


def test_numbers_beyond_64_bits_are_certified_exactly(tmp_path: Path) -> None:
    path = tmp_path / "edges.csv"
    path.write_text("id,from,to,flow\nin,S,J,9e25\nout,J,T,90000000000000000000000000.001\n")
    certificate = audit_certificate(dec.balance(dec.read(path), value="flow", open=["S", "T"]))
    assert json.loads(certificate)["sums"] == [["J", -1]]
    assert verify(certificate, {"edges.csv": path.read_bytes()}).holds


def test_frames_and_tables_of_readings_are_certified_as_far_as_they_can_be(tmp_path: Path) -> None:
    frame = pd.DataFrame({"id": ["in", "out"], "from": ["S", "J"], "to": ["J", "T"], "flow": [5.2, 5.0]})
    report = verify(audit_certificate(dec.balance(dec.Dataset.from_frames(frame), value="flow", open=["S", "T"])), {})
    assert report.holds
    assert report.not_shown == [
        "that the numbers are those of any file: they came from memory",
        "that 2 vertices are open to the outside (S, T)",
    ]
    edges, readings = tmp_path / "edges.csv", tmp_path / "readings.csv"
    edges.write_text("id,from,to\nin,S,J\nout,J,T\n")
    readings.write_text("edge,flow,mounted\nin,-5.2,-1\nout,5.0,\n")
    audit = dec.balance(dec.read(edges), value="flow", open=["S", "T"], readings=readings, sd=0.1)
    files = {"edges.csv": edges.read_bytes(), "readings.csv": readings.read_bytes()}
    certificate = audit_certificate(audit, contents=list(files.values()))
    assert json.loads(certificate)["sums"] == [["J", 2]]
    assert verify(certificate, files).holds
    report = verify(certificate, {**files, "readings.csv": files["readings.csv"].replace(b"5.0", b"5.1")})
    assert report.problems == ["readings.csv line 3: is not the line that was certified"]


def test_twenty_thousand_edges_are_rechecked(tmp_path: Path) -> None:
    rng = np.random.default_rng(3)
    tail, head = rng.integers(0, 8_000, (2, 20_000))
    rows = zip(tail.tolist(), head.tolist(), rng.integers(-999, 999, 20_000).tolist(), strict=True)
    text = "from,to,flow\n" + "".join(f"{a},{b},{c / 10}\n" for a, b, c in rows)
    path = tmp_path / "edges.csv"
    path.write_text(text)
    net = dec.read(path)
    for audit in (dec.balance(net, value="flow", open=["0"], limit=1e9), dec.loops(net, value="flow", limit=1e9)):
        certificate = audit_certificate(audit, contents=[text.encode()])
        assert verify(certificate, {"edges.csv": text.encode()}).problems == []
