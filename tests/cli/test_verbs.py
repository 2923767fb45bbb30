"""The verbs: what they print where, and how they exit."""

import io
import json
import os
import subprocess
import sys
from pathlib import Path

import pytest

ENDS = ("--open", "S", "--open", "T", "--open", "U")


def test_a_balance_within_limits_exits_0_and_says_so(run, junction):
    code, out, err = run("balance", junction / "pipes.csv", "--value", "flow", "--sd", "sd", *ENDS)
    assert (code, err) == (0, "")
    assert "HOLDS" in out
    assert "chi-square 0.333333" in out  # (5.2 - 3.0 - 2.1)^2 / (3 * 0.1^2), by hand


def test_a_balance_outside_its_limit_exits_1(run, junction):
    code, out, _ = run("balance", junction / "pipes.csv", "--value", "flow", "--sd", "0.01", *ENDS)
    assert code == 1
    assert "DOES NOT HOLD" in out


def test_the_exact_decimals_decide_without_sd_or_limit(run, junction):
    code, out, _ = run("balance", junction / "pipes.csv", "--value", "flow", *ENDS)
    assert code == 1
    (junction / "pipes.csv").write_text("id,from,to,flow\nin,S,J,0.3\na,J,T,0.1\nb,J,U,0.2\n")
    code, out, _ = run("balance", junction / "pipes.csv", "--value", "flow", *ENDS)
    assert code == 0
    assert "exactly zero" in out


def test_a_limit_is_met_when_every_residual_is_within_it(run, junction):
    words = ("balance", junction / "pipes.csv", "--value", "flow", *ENDS)
    assert run(*words, "--limit", "0.1")[0] == 0
    assert run(*words, "--limit", "0.09")[0] == 1


def test_nothing_to_check_exits_4(run, junction):
    code, out, _ = run("balance", junction / "pipes.csv", "--value", "flow", "--sd", "0.1", "--open", "J", *ENDS)
    assert code == 4
    assert "Nothing can be checked" in out


def test_a_closed_part_with_a_surplus_exits_4_and_names_it(run, junction):
    (junction / "nodes.csv").write_text("id,supply\nS,5\nJ,0\nT,-3\nU,-1.75\n")
    code, out, err = run(
        "balance", junction / "pipes.csv", "--nodes", junction / "nodes.csv", "--value", "flow", "--supply", "supply"
    )
    assert (code, out) == (4, "")
    assert "0.25" in err
    assert "S, J, T" in err


def test_open_vertices_come_from_ids_and_from_a_column_together(run, junction):
    base = (
        "balance",
        junction / "pipes.csv",
        "--nodes",
        junction / "nodes.csv",
        "--value",
        "flow",
        "--sd",
        "sd",
        "--json",
    )
    by_column = json.loads(run(*base, "--open-column", "open")[1])
    both = json.loads(run(*base, "--open-column", "open", "--open", "S")[1])
    assert by_column["asked"]["open"] == both["asked"]["open"] == ["S", "T", "U"]


def test_json_alone_stands_on_standard_output(run, junction):
    code, out, err = run("balance", junction / "pipes.csv", "--value", "flow", "--sd", "sd", *ENDS, "--json")
    assert (code, err) == (0, "")
    assert out.endswith("}\n")
    assert out.count("\n") == 1
    result = json.loads(out)
    assert result["schema"] == "dec.audit/1"
    assert result["inputs"][0]["name"] == "pipes.csv"
    assert result["edges"][0]["id"] == "in"


def test_loops_reads_a_fixed_column(run, tmp_path):
    (tmp_path / "lines.csv").write_text("from,to,dh\nA,B,1.5\nB,C,2.5\n")
    (tmp_path / "marks.csv").write_text("id,height\nA,10\nB,\nC,14.0\n")
    words = ("loops", tmp_path / "lines.csv", "--nodes", tmp_path / "marks.csv", "--value", "dh")
    code, out, _ = run(*words, "--fixed", "height", "--json")
    assert code == 0
    assert json.loads(out)["dof"] == 1
    assert run(*words)[0] == 4  # without the heights there is no loop


def test_check_describes_a_network(run, junction):
    code, out, _ = run("check", junction / "pipes.csv", "--nodes", junction / "nodes.csv")
    assert code == 0
    assert "SOUND" in out
    assert "4 vertices, 3 edges" in out
    assert "3 edges on no loop" in out


def test_check_finds_a_node_without_an_edge(run, junction):
    (junction / "nodes.csv").write_text("id\nS\nJ\nT\nU\nlost\n")
    code, out, _ = run("check", junction / "pipes.csv", "--nodes", junction / "nodes.csv", "--json")
    failed = [f for f in json.loads(out)["findings"] if not f["holds"]]
    assert code == 1
    assert [(f["name"], f["where"]) for f in failed] == [("every vertex is used", ["lost"])]


def test_quiet_prints_nothing_and_keeps_the_exit_code(run, junction):
    assert run("balance", junction / "pipes.csv", "--value", "flow", "--sd", "0.01", *ENDS, "--quiet") == (1, "", "")


def test_the_adjusted_table_keeps_the_raw_column(run, junction):
    target = junction / "adjusted.csv"
    assert run("balance", junction / "pipes.csv", "--value", "flow", "--sd", "sd", *ENDS, "-o", target)[0] == 0
    lines = target.read_text().splitlines()
    assert lines[0] == "id,from,to,flow,sd,adjusted,adjusted_sd,correction,redundancy,statistic,detectable,standing"
    assert lines[1].startswith("in,S,J,5.2,0.1,5.16666666666666")


def test_a_value_column_called_adjusted_keeps_its_name(run, junction):
    (junction / "pipes.csv").write_text("from,to,adjusted\nS,J,1\nJ,T,1\n")
    code, out, _ = run(
        "balance", junction / "pipes.csv", "--value", "adjusted", "--open", "S", "--open", "T", "-o", "-"
    )
    assert code == 0
    assert out.splitlines()[0].split(",")[3:6] == ["adjusted", "sd", "audit_adjusted"]


def test_an_existing_output_is_replaced_only_with_force(run, junction):
    target = junction / "adjusted.csv"
    target.write_text("precious")
    words = ("balance", junction / "pipes.csv", "--value", "flow", "--sd", "sd", *ENDS, "-o", target)
    code, out, err = run(*words)
    assert (code, out) == (5, "")
    assert "--force" in err
    assert target.read_text() == "precious"
    assert run(*words, "--force")[0] == 0
    assert target.read_text().startswith("id,")


def test_an_output_that_does_not_fit_is_refused_before_anything_is_printed(run, junction):
    code, out, err = run(
        "balance", junction / "pipes.csv", "--value", "flow", "--sd", "sd", *ENDS, "-o", junction / "a.vtu"
    )
    assert (code, out) == (3, "")
    assert ".csv" in err
    assert not (junction / "a.vtu").exists()


@pytest.mark.parametrize(
    "words",
    [
        (), ("weigh",), ("balance",), ("balance", "f.csv"), ("balance", "f.csv", "--value", "a", "--field", "b"),
        ("balance", "f.csv", "--value", "a", "--at", "cells"), ("loops", "f.vtu", "--field", "u", "--sd", "1"),
        ("balance", "f.csv", "--value", "a", "--alpha", "much"), ("check", "f.csv", "--decimal", ";"),
    ],
)  # fmt: skip
def test_wrong_use_exits_2_and_prints_nothing_on_standard_output(run, words):
    code, out, err = run(*words)
    assert (code, out) == (2, "")
    assert err


def test_an_error_is_json_too(run, tmp_path):
    code, out, err = run("balance", tmp_path / "none.csv", "--value", "flow", "--json")
    assert (code, err) == (3, "")
    assert json.loads(out) == {
        "schema": "dec.error/1",
        "error": "InputError",
        "message": json.loads(out)["message"],
        "exit": 3,
    }
    code, out, _ = run("balance", "--json")
    assert code == 2
    assert json.loads(out)["error"] == "usage"


def test_a_table_is_read_from_standard_input(run, monkeypatch):
    class Standard:
        buffer = io.BytesIO(b"from,to,dh\nA,B,1\nB,A,-1\n")

    monkeypatch.setattr(sys, "stdin", Standard())
    code, out, _ = run("loops", "-", "--value", "dh", "--json")
    assert code == 0
    assert json.loads(out)["inputs"][0]["bytes"] == 24


def test_hostile_ids_cannot_steer_the_terminal(run, tmp_path):
    (tmp_path / "e.csv").write_text("id,from,to,flow\n\x1b[31mred,[bold]S[/bold],J,1\n\u202eb,J,T,2\n")
    code, out, _ = run("balance", tmp_path / "e.csv", "--value", "flow", "--sd", "0.1", "--open", "T")
    assert code == 1
    assert "\x1b" not in out
    assert "\u202e" not in out
    assert "[bold]S[/bold]" in out


def test_output_fits_80_columns_when_piped(run, junction):
    out = run("balance", junction / "pipes.csv", "--value", "flow", "--sd", "0.01", *ENDS)[1]
    assert max(len(line) for line in out.splitlines()) <= 80
    assert "\x1b" not in out


def test_a_reader_that_leaves_early_is_no_error(junction):
    words = [sys.executable, "-m", "dec", "balance", str(junction / "pipes.csv"), "--value", "flow", "--json"]
    read, write = os.pipe()
    os.close(read)
    process = subprocess.run(words, stdout=write, stderr=subprocess.PIPE, check=False, timeout=120)
    os.close(write)
    assert process.stderr == b""


def test_help_shows_an_example_for_every_verb(run):
    for verb in ("check", "balance", "loops", "solve", "demo"):
        code, out, _ = run(verb, "--help")
        assert code == 0
        assert f"dec {verb}" in out.split("example:")[1]
        assert max(len(line) for line in out.splitlines()) <= 80


def test_help_needs_no_numerical_library():
    program = """if True:
        import sys
        from dec.cli import main
        try:
            main(["--help"])
        except SystemExit:
            print(sorted({"numpy", "scipy", "pandas", "rich", "numba", "meshio"} & set(sys.modules)))
    """
    done = subprocess.run([sys.executable, "-c", program], capture_output=True, text=True, check=True)
    assert done.stdout.splitlines()[-1] == "[]"


def test_the_demo_finds_exactly_what_was_planted(run):
    code, out, err = run("demo")
    assert (code, err) == (0, "")
    assert "P21" in out
    assert "NO " not in out


def test_the_demo_writes_its_files_once(run, tmp_path):
    folder = tmp_path / "town"
    assert run("demo", folder, "--quiet")[0] == 0
    names = sorted(p.name for p in folder.iterdir())
    assert names == ["adjusted.csv", "bracket.json", "bracket.vtu", "nodes.csv", "pipes.csv", "town.json"]
    code, out, err = run("demo", folder)
    assert (code, out) == (5, "")
    assert "--force" in err


def test_the_demo_data_are_those_of_the_examples():
    import dec.demo

    here = Path(dec.demo.__file__).parent / "data"
    top = Path(__file__).parents[2]
    assert (here / "pipes.csv").read_bytes() == (top / "examples/data/town/pipes.csv").read_bytes()
    assert (here / "nodes.csv").read_bytes() == (top / "examples/data/town/nodes.csv").read_bytes()
    assert (here / "bracket.vtu").read_bytes() == (top / "meshes/bracket.vtu").read_bytes()


@pytest.fixture
def divider(tmp_path: Path) -> Path:
    """Two conductors in series from a source of 2 to a fixed potential of 5: drops of 2 and 1."""
    (tmp_path / "e.csv").write_text("from,to,c\nA,B,1\nB,C,2\n")
    (tmp_path / "n.csv").write_text("id,put_in,level\nA,2,\nB,0,\nC,,5\n")
    return tmp_path


def test_solve_gives_potentials_and_flows(run, divider):
    words = ("solve", divider / "e.csv", "--nodes", divider / "n.csv", "--source", "put_in", "--conductance", "c")
    code, out, err = run(*words, "--fixed", "level", "--json")
    found = json.loads(out)
    assert (code, err) == (0, "")
    assert found["schema"] == "dec.solve/1"
    assert [v["potential"] for v in found["vertices"]] == [8.0, 6.0, 5.0]
    assert [e["flow"] for e in found["edges"]] == [2.0, 2.0]
    code, out, _ = run(*words, "--fixed", "level", "--why", "-o", divider / "flows.csv")
    assert code == 0
    assert "because" in out
    assert (divider / "flows.csv").read_text().splitlines()[1] == "1,A,B,2.0,8.0,6.0"


def test_solve_refuses_a_surplus_and_a_missing_source(run, divider):
    words = ("solve", divider / "e.csv", "--nodes", divider / "n.csv", "--source", "put_in")
    code, out, err = run(*words)
    assert (code, out) == (3, "")
    assert "n.csv line 4" in err
    (divider / "n.csv").write_text("id,put_in\nA,2\nB,0\nC,-1.5\n")
    code, out, err = run(*words)
    assert (code, out) == (4, "")
    assert "0.5" in err


def test_output_that_the_encoding_cannot_show_is_escaped(junction):
    (junction / "e.csv").write_text("from,to,flow\nÄ,J,1\nJ,T,1\n", encoding="utf-8")
    words = [sys.executable, "-m", "dec", "balance", str(junction / "e.csv"), "--value", "flow", "--open", "T"]
    for encoding in ("ascii", "cp1252"):
        done = subprocess.run(
            words, capture_output=True, check=False, env={**os.environ, "PYTHONIOENCODING": encoding}, timeout=120
        )
        assert done.returncode == 1
        assert done.stderr == b""
        assert b"----" in done.stdout
        assert (b"\\xc4" if encoding == "ascii" else "Ä".encode("cp1252")) in done.stdout


def test_json_is_the_same_object_in_any_encoding(junction):
    (junction / "e.csv").write_text("from,to,flow\nÄ,J,1\nJ,T,1\n", encoding="utf-8")
    words = [sys.executable, "-m", "dec", "balance", str(junction / "e.csv"), "--value", "flow", "--json"]
    said = [
        subprocess.run(
            words, capture_output=True, check=False, env={**os.environ, "PYTHONIOENCODING": encoding}, timeout=120
        ).stdout
        for encoding in ("ascii", "utf-8")
    ]
    assert said[0].isascii()
    assert "Ä".encode() in said[1]
    assert json.loads(said[0]) == json.loads(said[1])


@pytest.mark.skipif(not Path("/dev/full").exists(), reason="a device of Linux")
def test_a_full_or_closed_standard_output_exits_5_with_one_line(junction):
    line = f"{sys.executable} -m dec balance {junction / 'pipes.csv'} --value flow"
    for target in (">/dev/full", ">&-"):
        done = subprocess.run(["sh", "-c", f"{line} {target}"], capture_output=True, check=False, timeout=120)
        assert done.returncode == 5
        assert done.stderr.startswith(b"dec: standard output")
        assert done.stderr.count(b"\n") == 1


def test_wrong_use_is_told_before_anything_is_read(run):
    for words in (
        ("balance", "none.csv", "--value", "f", "--sd", "1", "--limit", "1"),
        ("balance", "none.csv", "--value", "f", "--alpha", "2"),
        ("balance", "none.csv", "--value", "f", "-o", "-", "--json"),
    ):
        assert run(*words)[0] == 2


def test_a_table_with_decimal_commas_is_not_sound(run, tmp_path):
    (tmp_path / "e.csv").write_text("from;to;flow;name\nA;B;1,5;north\nB;A;2,5;south\n")
    code, out, _ = run("check", tmp_path / "e.csv", "--json")
    (failed,) = [f for f in json.loads(out)["findings"] if not f["holds"]]
    assert code == 1
    assert failed["name"] == "column flow can be read as numbers"
    assert "e.csv line 2" in failed["where"][0]
    assert run("check", tmp_path / "e.csv", "--decimal", ",")[0] == 0


def test_an_open_surface_whose_rim_does_not_close_is_not_called_closed(run, tmp_path):
    (tmp_path / "three.off").write_text("OFF\n5 3 0\n0 0 0\n1 0 0\n0 1 0\n0 0 1\n0 -1 0\n3 0 1 2\n3 0 1 3\n3 0 1 4\n")
    code, out, _ = run("check", tmp_path / "three.off")
    assert code == 1
    assert "closed" not in out


def test_adjusted_potentials_are_shown_and_written(run, tmp_path):
    (tmp_path / "lines.csv").write_text("id,from,to,dh\nl1,A,B,1.5\nl2,B,C,2.6\n")
    (tmp_path / "marks.csv").write_text("id,height\nA,10\nB,\nC,14.0\n")
    words = ("loops", tmp_path / "lines.csv", "--nodes", tmp_path / "marks.csv", "--value", "dh", "--fixed", "height")
    code, out, _ = run(*words, "--sd", "0.1", "--vertices", tmp_path / "heights.csv")
    assert code == 0
    assert "A to C held" in out or "C to A held" in out
    assert "11.45" in out
    rows = (tmp_path / "heights.csv").read_text().splitlines()
    assert rows[0] == "id,potential,potential_sd,fault,fault_sd,fault_statistic,class,detectable"
    assert rows[2].startswith("B,11.45,0.0707")
    (loop,) = json.loads(run(*words, "--json")[1])["loops"]
    assert sorted(loop["held"]) == ["A", "C"]


def test_a_loop_without_held_vertices_says_so(run, tmp_path):
    (tmp_path / "e.csv").write_text("from,to,y\nA,B,1\nB,A,-1\n")
    (loop,) = json.loads(run("loops", tmp_path / "e.csv", "--value", "y", "--json")[1])["loops"]
    assert loop["held"] is None


def test_what_a_mesh_file_cannot_hold_is_told_on_standard_error(run, tmp_path):
    annulus = Path(__file__).parents[2] / "meshes" / "annulus.vtu"
    code, _, err = run("loops", annulus, "--field", "vortex", "-o", tmp_path / "out.vtu")
    assert code == 1
    assert "third of vortex, vortex_c was written as 0" in err
    assert "circulation" in (tmp_path / "out.vtu").read_text()
    assert run("loops", annulus, "--field", "vortex", "-o", tmp_path / "out.vtu", "--force", "--quiet")[1:] == ("", "")


def test_results_never_replace_their_own_input_not_even_with_force(run, junction):
    before = (junction / "pipes.csv").read_bytes()
    (junction / "link.csv").symlink_to(junction / "pipes.csv")
    for target in ("pipes.csv", "link.csv"):
        code, out, err = run("balance", junction / "pipes.csv", "--value", "flow", "-o", junction / target, "--force")
        assert (code, out) == (5, "")
        assert "is an input" in err
    assert (junction / "pipes.csv").read_bytes() == before


@pytest.mark.parametrize(
    "words",
    [
        ("balance", "none.csv", "--value", "f", "--limit", "much"),
        ("balance", "none.csv", "--value", "f", "--limit", "1%"),
        ("loops", "none.vtu", "--field", "u", "--alpha", "0.05"),
    ],
)
def test_words_that_would_be_ignored_or_misread_are_wrong_use(run, words):
    code, out, err = run(*words)
    assert (code, out) == (2, "")
    assert words[-2].strip("-") in err or words[-1] in err


def test_a_percentage_stays_a_limit_on_a_mesh(run):
    annulus = Path(__file__).parents[2] / "meshes" / "annulus.vtu"
    assert run("loops", annulus, "--field", "vortex", "--limit", "1%", "--quiet")[0] == 1


def test_heights_that_hang_on_one_mark_are_shown_though_nothing_checks_them(run, tmp_path):
    (tmp_path / "lines.csv").write_text("from,to,dh\nA,B,1.5\nB,C,2.25\n")
    (tmp_path / "marks.csv").write_text("id,height\nA,10\nB,\nC,\n")
    words = ("loops", tmp_path / "lines.csv", "--nodes", tmp_path / "marks.csv", "--value", "dh")
    code, out, _ = run(*words, "--fixed", "height")
    assert code == 4
    assert "13.75" in out  # 10 + 1.5 + 2.25
    assert "as numbered" not in run(*words)[1]


def test_columns_of_standard_deviations_are_left_out_where_there_are_none(run, junction):
    words = ("balance", junction / "pipes.csv", "--value", "flow", *ENDS)
    assert "times sd" in run(*words, "--sd", "sd")[1]
    out = run(*words)[1]
    assert "in - out + supply" in out
    assert "times sd" not in out


def test_one_cell_is_counted_in_the_singular_and_faces_to_turn_are_listed(run, tmp_path):
    (tmp_path / "one.off").write_text("OFF\n3 1 0\n0 0 0\n1 0 0\n0 1 1\n3 0 1 2\n")
    out = run("check", tmp_path / "one.off")[1]
    assert "3 edges, 1 face\n" in out
    assert "3 edges with one face only" in out
    (tmp_path / "one.csv").write_text("from,to\nA,B\n")
    assert "2 vertices, 1 edge\n" in run("check", tmp_path / "one.csv")[1]
    corners = "0 0 0\n1 0 0\n0 1 0\n0 0 1\n"
    # a tetrahedron's surface with its last face turned about, by hand
    faces = "3 0 2 1\n3 0 1 3\n3 1 2 3\n3 0 2 3\n"
    (tmp_path / "four.off").write_text(f"OFF\n4 4 0\n{corners}{faces}")
    assert json.loads(run("check", tmp_path / "four.off", "--json")[1])["to_turn"] == [3]
    assert json.loads(run("check", tmp_path / "one.csv", "--json")[1])["to_turn"] == []


def test_rounding_noise_in_the_place_of_a_hole_is_shown_as_0(run):
    annulus = Path(__file__).parents[2] / "meshes" / "annulus.vtu"
    out = run("loops", annulus, "--field", "vortex")[1]
    row = next(line for line in out.splitlines() if line.startswith(" hole 1 "))
    assert row.split()[-3:] == ["0,", "0,", "0"]
    assert "e-17" not in out


def test_what_is_not_defined_for_a_surface_is_not_among_its_findings(run, tmp_path):
    corners = "0 0 0\n1 0 0\n0 1 0\n0 0 1\n0 -1 0\n"
    faces = {
        "three at an edge": "3 0 1 2\n3 0 1 3\n3 0 1 4\n", "one face": "3 0 1 2\n",
        "closed": "3 0 2 1\n3 0 1 3\n3 1 2 3\n3 0 3 2\n",
    }  # fmt: skip
    names = {}
    for what, lines in faces.items():
        (tmp_path / "s.off").write_text(f"OFF\n5 {lines.count(chr(10))} 0\n{corners}{lines}")
        names[what] = [f["name"] for f in json.loads(run("check", tmp_path / "s.off", "--json")[1])["findings"]]
    alike, outward = "the faces can all be turned alike", "closed surfaces are turned outward"
    assert [alike in names[what] for what in faces] == [False, True, True]
    assert [outward in names[what] for what in faces] == [False, False, True]


def test_an_error_of_a_spreadsheet_among_numbers_is_a_finding_and_a_text_column_is_not(run, tmp_path):
    (tmp_path / "e.csv").write_text("from,to,flow,name\nA,B,1.5,north\nB,C,#VALUE!,south\nC,A,2,east\n")
    code, out, _ = run("check", tmp_path / "e.csv", "--json")
    found = json.loads(out)
    (failed,) = [f for f in found["findings"] if not f["holds"]]
    assert (code, failed["name"]) == (1, "column flow can be read as numbers")
    assert "e.csv line 3" in failed["where"][0]
    assert "name (text)" in found["facts"]["columns"]


def test_where_the_other_rows_stand_is_true_of_every_table(run, tmp_path):
    ring = "".join(f"{k},{(k + 1) % 12},1\n" for k in range(12))
    chords = "".join(f"{k},{k + 6},{k}\n" for k in range(3))
    spokes = "".join(f"{k},{(k + 4) % 12},{k}\n" for k in range(7))
    (tmp_path / "e.csv").write_text(f"from,to,y\n{ring}{chords}{spokes}")
    table = tmp_path / "v.csv"
    for verb, rows in (("balance", "residual"), ("loops", "potential")):
        out = run(verb, tmp_path / "e.csv", "--value", "y", "--sd", "1", "--vertices", table, "--force")[1]
        assert "  4 more in --json or --vertices FILE\n" in out  # 12 vertices, 8 of them shown
        lines = table.read_text().splitlines()
        assert rows in lines[0].split(",")
        assert len(lines) == 13
    loops = json.loads(run("loops", tmp_path / "e.csv", "--value", "y", "--json")[1])["loops"]
    assert len(loops) == 11  # 22 edges, 12 vertices, one part
    assert "  3 more in --json\n" in out


def test_a_column_of_dates_is_text_and_no_finding(run, tmp_path):
    (tmp_path / "e.csv").write_text("from,to,flow,day\nA,B,1,2026-01-05\nB,A,1,2026-01-06\n")
    assert run("check", tmp_path / "e.csv")[0] == 0


def test_a_broken_pipe_keeps_the_exit_code_of_the_finding_and_of_the_error(junction):
    for words, code in (((junction / "pipes.csv",), 1), ((junction / "none.csv", "--json"), 3)):
        read, write = os.pipe()
        os.close(read)
        line = [sys.executable, "-m", "dec", "balance", *map(str, words), "--value", "flow"]
        done = subprocess.run(line, stdout=write, stderr=subprocess.PIPE, check=False, timeout=120)
        os.close(write)
        assert (done.returncode, done.stderr) == (code, b"")


@pytest.mark.skipif(not Path("/dev/full").exists(), reason="a device of Linux")
@pytest.mark.parametrize("target", ["--json >/dev/full", "--json >&-", "2>/dev/full", "2>&-"])
def test_an_error_keeps_its_exit_code_where_it_cannot_be_printed(junction, target):
    line = f"{sys.executable} -m dec balance {junction / 'none.csv'} --value flow {target}"
    done = subprocess.run(["sh", "-c", line], capture_output=True, check=False, timeout=120)
    assert done.returncode == 3
    assert b"Traceback" not in done.stderr


def test_two_outputs_are_both_possible_or_neither_is_written(run, junction):
    words = ("balance", junction / "pipes.csv", "--value", "flow", "--vertices", junction / "v.csv", "-o")
    assert run(*words, junction / "none" / "o.csv")[0] == 5
    assert run(*words, junction / ("n" * 300))[0] == 5
    assert run(*words, junction / "v.csv")[0] == 2
    assert not (junction / "v.csv").exists()


def test_check_shows_hostile_ids_as_text(run, tmp_path):
    (tmp_path / "e.csv").write_text("id,from,to\n\x1b]0;x\x07,A,B\n")
    assert "\x1b" not in run("check", tmp_path / "e.csv")[1]
