"""Certificates forged with care, the seal made anew: each must be refused, and none may take the recheck down."""

import json
from pathlib import Path

import pytest

import dec
from dec.calculus.certificates import sealed
from dec.calculus.certified_homology import certified_homology
from dec.solvers.certificate import solve_certificate
from dec.solvers.network import solve_network
from dec.verify import gathered, main, verify

EDGES = "id,from,to,flow,h,c\na,A,B,5,1.5,2\nb,B,C,4,2,1\nc,C,D,4.5,-1,4\nd,D,T,3,0.5,2\n"
NODES = "id,supply,store,height,source\nA,6,0,100,1\nB,0,0,,0\nC,-0.5,0,,0\nD,-4.75,0,101,-1\nT,,,,0\n"


@pytest.fixture
def files(tmp_path, monkeypatch) -> dict[str, bytes]:
    (tmp_path / "e.csv").write_text(EDGES, encoding="utf-8")
    (tmp_path / "n.csv").write_text(NODES, encoding="utf-8")
    monkeypatch.chdir(tmp_path)
    return {"e.csv": EDGES.encode(), "n.csv": NODES.encode()}


def entries(law: str, files: dict[str, bytes]) -> dict:
    net = dec.read("e.csv", nodes="n.csv")
    if law == "balance":
        made = dec.balance(net, "flow", supply="supply", open=["T"], limit=0).certify(contents=list(files.values()))
    elif law == "loop":
        made = dec.loops(net, "h", fixed="height", limit=0).certify(contents=list(files.values()))
    else:
        solution = solve_network(net, "source", "c", None)
        made = solve_certificate(solution, net, "source", "c", None, contents=list(files.values()))
    found = json.loads(made)
    assert verify(made, files).holds
    del found["seal"], found["schema"]
    return found


def without_nodes(given: dict) -> None:
    given["inputs"] = given["inputs"][:1]


def supplies_by_another_name(given: dict) -> None:
    given["columns"]["fixed"] = "supply"
    given["fixed"], given["supply"] = given["supply"], [["A", 10]]


def heights_taken_away(given: dict) -> None:
    given["columns"]["storage"] = "height"


def negative_residual(given: dict) -> None:
    given["residual"] = -1e9


def another_decimal_sign(given: dict) -> None:
    given["decimal"] = "45"


def endless_unit(given: dict) -> None:
    given["unit"] = "0." + "0" * 900 + "1"


@pytest.mark.parametrize(
    ("law", "forge", "says"),
    [
        ("balance", without_nodes, "no node table is among the inputs"),
        ("solve", without_nodes, "no node table is among the inputs"),
        ("loop", without_nodes, "no node table is among the inputs"),
        ("balance", supplies_by_another_name, "the law balance has no fixed"),
        ("loop", heights_taken_away, "the law loop has no supply or storage"),
        ("solve", negative_residual, "must not be negative"),
        ("balance", another_decimal_sign, "decimal sign"),
        ("loop", another_decimal_sign, "decimal sign"),
        ("solve", another_decimal_sign, "decimal sign"),
        ("balance", endless_unit, "decimal places"),
    ],
)
def test_a_careful_forgery_is_refused(files, law, forge, says):
    found = entries(law, files)
    forge(found)
    report = verify(sealed(found), files)
    assert not report.holds
    assert any(says in problem for problem in report.problems), report.problems


def test_what_only_poses_the_question_is_said(files):
    report = verify(sealed(entries("balance", files)), files)
    assert any("1 vertex is open to the outside (T)" in text for text in report.not_shown)
    assert any("column flow" in text for text in report.checked)
    assert any("not every sum within 0" in text for text in report.checked)


def test_a_homology_says_that_its_file_was_not_read(tmp_path):
    path = tmp_path / "m.obj"
    path.write_text("v 0 0 0\nv 1 0 0\nv 0 1 0\nf 1 2 3\n", encoding="utf-8")
    data = dec.read(path)
    made = certified_homology(data.complex, inputs=data.inputs)
    report = verify(made, {"m.obj": path.read_bytes()})
    assert report.holds
    assert any("boundaries are those of m.obj" in text for text in report.not_shown)


@pytest.mark.parametrize(
    "change",
    [{"counts": [400_000_000_000, 5, 2]}, {"counts": [-1, 3, 1]}, {"counts": [10**9, 3, 1]}],
)
def test_counts_that_would_take_all_memory_are_refused_at_once(change):
    found = json.loads(certified_homology(dec.Complex.from_faces([[0, 1, 2]])))
    del found["seal"], found["schema"]
    report = verify(sealed({**found, **change}), {})
    assert any("cells, found" in problem for problem in report.problems)


def test_a_long_list_of_torsion_is_compared_and_not_worked_out():
    found = json.loads(certified_homology(dec.Complex.from_faces([[0, 1, 2]])))
    del found["seal"], found["schema"]
    found["homology"][0]["torsion"] = [6] * 200_000
    report = verify(sealed(found), {})
    assert not report.holds
    assert max(map(len, report.problems)) < 400


def test_an_input_name_that_no_file_can_have_is_no_traceback(tmp_path, capsys):
    path = tmp_path / "c.json"
    path.write_text(json.dumps({"inputs": [{"name": "a" * 5000}]}), encoding="utf-8")
    assert gathered(path, []) == (path.read_bytes(), {})
    assert main([str(path)]) == 1
    assert Path(path).exists()
    capsys.readouterr()
