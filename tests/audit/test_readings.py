"""What was measured and how well: every form of sd, of open vertices and of known numbers, and what is refused."""

from decimal import Decimal
from fractions import Fraction

import numpy as np
import pandas as pd
import pytest

from dec.audit.given.readings import known_at_vertices, named_vertices, read_readings
from dec.calculus.complex import Complex
from dec.calculus.dataset import Dataset
from dec.errors import InputError


@pytest.fixture
def net() -> Dataset:
    edges = {
        "id": ["a", "b", "c"], "from": ["S", "J", "J"], "to": ["J", "T", "U"], "flow": ["5.0", "-2", ""],
        "sd": ["0.1", "0.2", "-7"], "2%": ["3", "3", "3"], "zero": ["0", "1", "1"],
    }  # fmt: skip
    nodes = {"id": ["S", "J", "T", "U"], "open": ["yes", "", "x", "no"], "put in": ["", "0.30", "-1", ""]}
    return Dataset.from_frames(pd.DataFrame(edges), pd.DataFrame(nodes))


@pytest.mark.parametrize(
    ("sd", "expected", "said"),
    [
        (0.5, [0.5, 0.5], "0.5 for every reading"),
        (np.float32(0.5), [0.5, 0.5], "0.5 for every reading"),
        ("0.25", [0.25, 0.25], "0.25 for every reading"),
        ("5e-1", [0.5, 0.5], "0.5 for every reading"),
        ("2%", [0.1, 0.04], "2 % of the reading"),
        (" 2 % + 0.1 ", [0.2, 0.14], "2 % of the reading plus 0.1"),
        ("1e1%+1e-1", [0.6, 0.3], "10 % of the reading plus 0.1"),
        ("sd", [0.1, 0.2], "column sd"),
        ("col:sd", [0.1, 0.2], "column sd"),
        ("col:2%", [3, 3], "column 2%"),
        ([0.1, 0.2, np.nan], [0.1, 0.2], "one an edge"),
        (pd.Series([0.1, 0.2, 0.3]), [0.1, 0.2], "one an edge"),
    ],
)
def test_sd_reads_as_a_number_then_a_percentage_then_a_column(net: Dataset, sd, expected: list[float], said: str):
    readings = read_readings(net, "flow", sd)
    assert readings.sd[:2] == pytest.approx(expected)
    assert readings.sd_said == said
    assert readings.measured.tolist() == [True, True, False]


def test_without_sd_there_is_none(net: Dataset):
    readings = read_readings(net, "flow", None)
    assert readings.sd is None
    assert readings.sd_said is None
    np.testing.assert_array_equal(readings.value, [5, -2, np.nan])


@pytest.mark.parametrize(
    ("sd", "says"),
    [
        (0, "sd must be positive, got 0; leave it out to check the decimals of 'flow' exactly"),
        ("-1", "sd must be positive, got -1"),
        (np.nan, "sd must be positive, got nan"),
        (1e-200, "sd must be positive and lie within 1e-100 and 1e+100, got 1e-200"),
        (np.inf, "sd must be positive and lie within 1e-100 and 1e+100, got inf"),
        ("zero", "edges row 0: sd must be positive where the edge is measured, got 0; leave the reading empty"),
        ("0%", "edges row 0: sd must be positive where the edge is measured, got 0; add a floor to the percentage"),
        ([1.0, np.nan, 1.0], "edges row 1: sd must be positive where the edge is measured, got nothing"),
        ([1.0, -2.0, 1.0], "edges row 1: sd must be positive where the edge is measured, got -2"),
        ([1.0, 2.0], "sd must give 3 numbers, one an edge, got 2"),
        ([[1.0]], "sd must have 0 axes, got shape (1, 1)"),
        (["x", "y", "z"], "sd must hold real numbers"),
        ({"a": 1}, "sd must hold real numbers"),
        ("col:nope", "no column 'nope' among the edges"),
        ("col:from", "edges row 0: from 'S' is not a number"),
    ],
)
def test_sd_that_cannot_be_used_is_refused(net: Dataset, sd, says: str):
    with pytest.raises(InputError) as caught:
        read_readings(net, "flow", sd)
    assert says in str(caught.value)


@pytest.mark.parametrize(
    "sd",
    ["nope", "", "nan", "inf", "1_000", "0,1", "-2%", "1.2.3%", "..%", "%", "2%+", "2%+x", "2%%", "1e400%", "5%+1%"],
)
def test_a_text_that_is_no_number_no_percentage_and_no_column_says_what_could_stand_there(net: Dataset, sd: str):
    with pytest.raises(InputError, match=r"a percentage \(2%, or 2%\+0.1\) or an edge column \(id, from, .*\), got"):
        read_readings(net, "flow", sd)


def test_a_percentage_of_a_reading_of_zero_asks_for_a_floor(net: Dataset):
    with pytest.raises(InputError, match=r"edges row 0: sd must be positive .* as in 2%\+0.1"):
        read_readings(net, "zero", "2%")
    assert read_readings(net, "zero", "2%+0.1").sd == pytest.approx([0.1, 0.12, 0.12])


def test_a_reading_beyond_1e100_is_refused():
    edges = pd.DataFrame({"from": ["A", "A"], "to": ["B", "B"], "y": ["1", "-1e101"]})
    with pytest.raises(InputError, match=r"edges row 1: y must lie within 1e\+100, got -1e\+101"):
        read_readings(Dataset.from_frames(edges), "y", None)


@pytest.mark.parametrize(
    ("names", "expected"),
    [
        (None, []),
        ((), []),
        ("open", [0, 2]),
        (["T", "S", "T"], [0, 2]),
        ({"J"}, [1]),
        (pd.Series(["U"]), [3]),
        (np.array(["S"]), [0]),
    ],
)
def test_vertices_are_named_by_a_column_or_by_ids(net: Dataset, names, expected: list[int]):
    assert named_vertices(net, names, "open").tolist() == expected


@pytest.mark.parametrize(
    ("names", "says"),
    [
        ("opem", "no column 'opem' among the vertices; there are id, open, put in; did you mean 'open'?"),
        ("S", "open must name a node column or list ids, got 'S', which is an id; write ['S']"),
        (["S1"], "open names 'S1', which is no vertex; close names: 'S'"),
        ([0], "open names 0, which is no vertex; ids are text, as written"),
        ([["S"]], "open names ['S'], which is no vertex"),
        (7, "open must name a node column or list ids, got 7"),
        ("put in", "nodes row 1: put in must be yes or no"),
    ],
)
def test_vertices_that_cannot_be_found_are_refused(net: Dataset, names, says: str):
    with pytest.raises(InputError) as caught:
        named_vertices(net, names, "open")
    assert says in str(caught.value)


def test_whole_numbers_name_vertices_whose_ids_are_digits_and_vertices_without_ids():
    net = Dataset.from_frames(pd.DataFrame({"from": [10, 20], "to": [20, 30]}))
    assert named_vertices(net, [30, "10"], "open").tolist() == [0, 2]
    plain = Dataset(Complex.from_edges([0, 1], [1, 2]))
    assert named_vertices(plain, [2, 0], "open").tolist() == [0, 2]
    with pytest.raises(InputError, match=r"vertices must be 0 \.\. 2"):
        named_vertices(plain, [3], "open")


def values_of(known) -> list[Fraction]:
    return [Fraction(int(i), 10**known.decimals.places) for i in known.decimals.integers]


@pytest.mark.parametrize(
    ("given", "expected", "present"),
    [
        ("put in", [0, "3/10", -1, 0], [0, 1, 1, 0]),
        ({"J": 0.3, "T": -1}, [0, "3/10", -1, 0], [0, 1, 1, 0]),
        ({"J": "0.30", "T": Decimal("-1.0")}, [0, "3/10", -1, 0], [0, 1, 1, 0]),
        ({"J": 10**17 + 1, "S": np.float32(0.5)}, ["1/2", 10**17 + 1, 0, 0], [1, 1, 0, 0]),
        ({}, [0, 0, 0, 0], [0, 0, 0, 0]),
        ([np.nan, 0.3, -1, np.nan], [0, "3/10", -1, 0], [0, 1, 1, 0]),
    ],
)
def test_known_numbers_come_from_a_column_a_mapping_or_an_array_and_stay_exact(net, given, expected, present):
    known = known_at_vertices(net, given, "supply")
    assert values_of(known) == [Fraction(value) for value in expected]
    assert known.decimals.present.tolist() == [bool(p) for p in present]
    assert known.value.tolist() == [float(Fraction(value)) for value in expected]


@pytest.mark.parametrize(
    ("given", "says"),
    [
        ({"Q": 1}, "supply names 'Q', which is no vertex"),
        ({"J": np.nan}, "supply of 'J' must be a finite number, got nan; leave the vertex out"),
        ({"J": None}, "supply of 'J' must be a finite number, got None"),
        ({"J": "1_0"}, "supply of 'J' must be a finite number, got '1_0'"),
        ({"J": True}, "supply of 'J' must be a finite number, got True"),
        ({"J": Fraction(1, 3)}, "supply of 'J' must be a finite number, got Fraction(1, 3)"),
        ({"J": 1e101}, "supply must lie within 1e+100, got 1e+101"),
        ([1.0, 2.0], "supply must give 4 numbers, one a vertex, got shape (2,)"),
        (5, "supply must give 4 numbers, one a vertex, got shape ()"),
        ([0.0, np.inf, 0.0, 0.0], "supply row 1: supply must be finite, got inf"),
        ("nope", "no column 'nope' among the vertices"),
        ("open", "nodes row 0: open 'yes' is not a number"),
    ],
)
def test_known_numbers_that_cannot_be_used_are_refused(net: Dataset, given, says: str):
    with pytest.raises(InputError) as caught:
        known_at_vertices(net, given, "supply")
    assert says in str(caught.value)


def test_one_vertex_named_in_two_ways_is_refused():
    net = Dataset.from_frames(pd.DataFrame({"from": [1], "to": [2]}))
    with pytest.raises(InputError, match="fixed names '1' twice"):
        known_at_vertices(net, {1: 0.0, "1": 5.0}, "fixed")
