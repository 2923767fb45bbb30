"""What a first user of the command line ran into: outputs somewhere else, options that clash or do nothing."""

import json
import subprocess
import sys
from pathlib import Path

import pytest

ENDS = ("--open", "S", "--open", "T", "--open", "U")
LEVEL = ("--preset", "levelling-12mm")


@pytest.fixture
def sensors(junction: Path) -> Path:
    """The junction with a table of readings, two of one pipe."""
    (junction / "edges.csv").write_text("id,from,to\nin,S,J\na,J,T\nb,J,U\n")
    (junction / "meters.csv").write_text(
        "edge,sensor,flow,factor\nin,M1,18.72,1/3.6\nin,M2,5.3,\na,M3,3.0,\nb,M4,2.1,\n"
    )
    return junction


def test_adjusted_values_of_a_table_of_readings_are_written(run, sensors):
    words = ("balance", sensors / "edges.csv", "--readings", sensors / "meters.csv", "--value", "flow", "--sd", "0.1")
    code, out, err = run(*words, *ENDS, "-o", "-")
    assert (code, err) == (0, "")
    assert out.splitlines()[0].startswith("id,from,to,flow,sd,adjusted,")
    assert out.splitlines()[1].startswith("in,S,J,5.25,")  # the mean of 18.72 / 3.6 and 5.3
    (sensors / "raw.csv").write_text("id,from,to,flow\nin,S,J,9\na,J,T,9\nb,J,U,9\n")
    assert run(words[0], sensors / "raw.csv", *words[2:], *ENDS, "-o", "-")[1] == out


def test_the_table_of_vertices_is_printed_and_leaves_no_file(run, junction, monkeypatch):
    monkeypatch.chdir(junction)
    before = sorted(path.name for path in junction.iterdir())
    code, out, err = run("balance", "pipes.csv", "--value", "flow", "--sd", "sd", *ENDS, "--vertices", "-")
    assert (code, err) == (0, "")
    assert out.startswith("id,residual,")
    assert sorted(path.name for path in junction.iterdir()) == before
    code, out, _ = run("balance", "pipes.csv", "--value", "flow", "--sd", "sd", *ENDS, "--vertices", "-", "-o", "a.csv")
    assert out.startswith("id,residual,")
    assert (junction / "a.csv").read_text().startswith("id,from,to,")


@pytest.mark.parametrize("name", ["a.csv", "a.tsv", "a.TXT", "a"])
def test_every_table_may_have_the_endings_of_tables(run, junction, name):
    words = ("balance", junction / "pipes.csv", "--value", "flow", "--sd", "sd", *ENDS)
    assert run(*words, "--vertices", junction / name)[0] == 0
    assert run(*words, "-o", junction / name, "--force")[0] == 0
    assert (junction / name).read_text().startswith("id,from,to,")


def test_no_table_is_written_under_the_ending_of_a_mesh(run, junction):
    pipes, nodes = junction / "pipes.csv", junction / "nodes.csv"
    for words in (
        ("balance", pipes, "--value", "flow", *ENDS, "--vertices", junction / "v.vtu"),
        ("balance", pipes, "--value", "flow", *ENDS, "-o", junction / "v.vtu"),
        ("solve", pipes, "--nodes", nodes, "--source", "supply", "-o", junction / "v.vtu"),
    ):
        code, out, err = run(*words)
        assert (code, out) == (3, "")
        assert "a table, as .csv, .tsv, .txt or without an ending" in err
    assert not (junction / "v.vtu").exists()


SD = ("--sd", "0.1")


@pytest.mark.parametrize(
    ("words", "says"),
    [
        (("--vertices", "-", "-o", "-"), "give each its own"),
        (("--vertices", "-", "--json"), "give --vertices - or --json"),
        (("-o", ""), "-o must name a file"),
        (("--vertices", ""), "--vertices must name a file"),
        (
            ("--limit", "1", "--robust"),
            "--robust belongs to tests with standard deviations (--sd), and --limit decides",
        ),
        (("--limit", "1", "--sidak"), "--sidak belongs to"),
        (("--limit", "1", "--figures", "all"), "--figures belongs to"),
        (("--limit", "1", "--alpha", "0.01"), "--alpha belongs to"),
        (("--sidak",), "--sidak belongs to"),
        (("--preset", "counts-geh5", "--unit", "veh/h", "--alpha", "0.01"), "and --preset decides here"),
        (("--preset", "counts-geh5", *SD), "leave --sd and --limit away"),
        ((*SD, "--common", "bench"), "--common-sd, how large it is, is missing"),
        ((*SD, "--common-sd", "1"), "--common, the column of groups, is missing"),
        ((*SD, "--storage-sd", "1"), "there is no --storage"),
        ((*SD, "--supply-sd", "1"), "there is no --supply"),
        ((*SD, "--transition", "1"), "--transition belongs to a preset"),
        (("--preset", "water-meter-class2"), "give --transition"),
        ((*LEVEL,), "use dec loops"),
        (("--limit", "-1"), "--limit must be 0 or positive"),
        ((*SD, "--alpha", "-1"), "--alpha"),
        (("--sd", "-0.1"), "--sd must be positive"),
        (("--sd", "0"), "--sd must be positive"),
        (("--sd=-2%",), "--sd must be positive"),
        ((*SD, "--supply", "x", "--supply-sd=-1"), "--supply-sd must be 0 or positive"),
        (("--unit", "L/s\udcff"), "--unit must be Unicode text"),
        (("--readings", "-"), "- stands for standard input, which holds one table"),
        (("--nodes", "-"), "- stands for standard input, which holds one table"),
    ],
)
def test_a_clash_of_options_is_wrong_use_before_anything_is_read(run, words, says):
    code, out, err = run("balance", "-", "--value", "flow", *words)
    if "--json" in words:
        out, err = "", out
    assert (code, out) == (2, "")
    assert says in err


@pytest.mark.parametrize(
    ("words", "says"),
    [
        ((*LEVEL,), "give --length, the lengths of the lines and --length-unit, their unit and --unit, the unit of"),
        ((*LEVEL, "--length", "km", "--unit", "m"), "give --length-unit, their unit; none is guessed"),
        ((*LEVEL, "--length", "km", "--length-unit", "km"), "give --unit, the unit of the differences"),
        (("--length", "km"), "--length belongs to a preset (--preset), and none is named"),
        (("--preset", "water-meter-class2", "--transition", "1"), "meter classes are for flows; use dec balance"),
        (("--fixed-sd", "1", "--sd", "1"), "--fixed-sd says how well --fixed is known"),
        (("--fixed", "h", "--sd", "1", "--fixed-sd=-1"), "--fixed-sd must be 0 or positive"),
    ],
)
def test_a_clash_of_options_of_loops_is_wrong_use(run, words, says):
    code, out, err = run("loops", "none.csv", "--value", "dh", *words)
    assert (code, out) == (2, "")
    assert says in err


@pytest.mark.parametrize("words", [("--figures", "all"), ("--robust",), ("--sidak",)])
def test_tests_of_a_network_are_wrong_use_beside_a_field(run, words):
    code, out, err = run("loops", "none.vtu", "--field", "u", *words)
    assert (code, out) == (2, "")
    assert f"{words[0]} belongs to a network column" in err


@pytest.mark.parametrize(
    ("option", "value"),
    [("--rtol", "0"), ("--rtol", "-1"), ("--rtol", "1"), ("--exponent", "0"), ("--exponent", "nan")],
)
def test_a_solve_is_asked_for_what_can_be(run, option, value):
    code, out, err = run("solve", "none.csv", "--source", "s", option, value)
    assert (code, out) == (2, "")
    assert option in err


def test_a_unit_that_is_no_text_is_wrong_use_in_every_form(junction):
    for more in ([], ["--json"]):
        words = [sys.executable, "-m", "dec", "balance", str(junction / "pipes.csv"), "--value", "flow", "--unit"]
        done = subprocess.run(
            [*map(str.encode, words), b"\xff", *map(str.encode, more)], capture_output=True, check=False
        )
        assert done.returncode == 2
        assert b"fault" not in done.stderr + done.stdout


def test_a_mesh_asked_by_value_is_pointed_to_its_fields(run):
    annulus = Path(__file__).parents[2] / "meshes" / "annulus.vtu"
    code, out, err = run("loops", annulus, "--value", "vortex")
    assert (code, out) == (3, "")
    assert "give field (--field) instead (vortex" in err


def test_a_limit_is_taken_as_it_is_written(run, junction):
    words = ("balance", junction / "pipes.csv", "--value", "flow", *ENDS, "--quiet", "--limit")
    assert run(*words, "0.1000000000000000000001")[0] == 0  # 5.2 - 3.0 - 2.1 is 0.1
    assert run(*words, "0.0999999999999999999999")[0] == 1
    assert run(*words, "1e-999999999")[0] == 3


def test_adjusted_values_of_a_failing_audit_come_with_a_warning(run, junction):
    words = ("balance", junction / "pipes.csv", "--value", "flow", *ENDS)
    code, out, err = run(*words, "--sd", "0.01", "-o", "-")
    assert code == 1
    assert out.startswith("id,")
    assert "adjusted values carry a share of the errors found" in err
    assert run(*words, "--sd", "0.1", "-o", "-")[2] == ""
    assert run(*words, "--sd", "0.01", "-o", "-", "--quiet")[2] == ""


def test_the_record_says_all_that_was_asked(run, sensors):
    (sensors / "edges.csv").write_text("id,from,to,bench\nin,S,J,x\na,J,T,x\nb,J,U,\n")
    code, out, _ = run(
        "balance", sensors / "edges.csv", "--readings", sensors / "meters.csv", "--value", "flow", "--sd", "0.1", *ENDS,
        "--common", "bench", "--common-sd", "0.5%", "--robust", "--json",
    )  # fmt: skip
    assert code == 0
    asked = json.loads(out)["asked"]
    assert {"common": "bench", "common_sd": "0.5%", "readings": "meters.csv", "robust": True, "sidak": False,
            "preset": None, "storage": None, "supply_sd": None,
            "storage_sd": None}.items() <= asked.items()  # fmt: skip


def test_a_preset_is_named_in_the_record_and_its_figures_in_the_list(run, junction):
    words = ("balance", junction / "pipes.csv", "--value", "flow", *ENDS, "--unit", "veh/h", "--json")
    found = json.loads(run(*words, "--preset", "counts-geh5,geh=0.01")[1])
    assert found["asked"]["preset"] == "counts-geh5,geh=0.01"
    assert [row["holds"] for row in found["vertices"]] == [None, False, None, None]
    assert "mm_per_sqrt_km=12" in run("presets")[1]


def test_what_if_by_the_name_of_a_sensor_says_the_edge(run, sensors):
    words = ("balance", sensors / "edges.csv", "--readings", sensors / "meters.csv", "--value", "flow", "--sd", "0.1")
    code, out, err = run(*words, *ENDS, "--if-turned", "M3")
    assert (code, out) == (3, "")
    assert "'M3', which is a sensor on edge 'a'; what-if goes by edge: name 'a'" in err
