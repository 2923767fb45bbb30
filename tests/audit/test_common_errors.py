"""Errors that readings share: how far each reading moves, and in which direction."""

import numpy as np
import pandas as pd
import pytest
from scipy.sparse import csr_array

from dec.audit.given.common_errors import common_errors
from dec.audit.given.readings import read_readings
from dec.audit.given.repeats import combined_readings
from dec.audit.questions import balance, loops
from dec.calculus.dataset import Dataset
from dec.errors import InputError


@pytest.fixture
def net() -> Dataset:
    edges = {
        "id": list("abcdef"), "from": list("ABCDAB"), "to": list("BCDACD"), "y": ["10", "-20", "", "5", "0", "8"],
        "crew": ["", "north", "north", "south ", "north", "north"], "team": [1, 2, 2, 1, 1, 2],
        "pull": ["", "0.1", "", "", "0", "-0.3"], "gap": ["", "0.1", "", "1", "", "0.2"], "2%": [1] * 6,
        "odd": [1.5] + [np.nan] * 5, "none": [np.nan] * 6,
    }  # fmt: skip
    return Dataset.from_frames(pd.DataFrame(edges))


@pytest.mark.parametrize(
    ("sd", "north", "south", "said"),
    [
        (0.5, [0, 0.5, 0, 0, 0.5, 0.5], [0, 0, 0, 0.5, 0, 0], "groups of column crew, each moved by 0.5"),
        ("0.5", [0, 0.5, 0, 0, 0.5, 0.5], [0, 0, 0, 0.5, 0, 0], "groups of column crew, each moved by 0.5"),
        ("10%", [0, -2, 0, 0, 0, 0.8], [0, 0, 0, 0.5, 0, 0], "groups of column crew, each moved by 10 % of it"),
        ("col:2%", [0, 1, 0, 0, 1, 1], [0, 0, 0, 1, 0, 0], "groups of column crew, each moved as column 2% says"),
    ],
)
def test_one_common_error_moves_every_measured_reading_of_its_group(net: Dataset, sd, north, south, said: str):
    shared = common_errors(net, read_readings(net, "y", 1), "crew", sd)
    assert shared.names == ("north", "south")
    assert isinstance(shared.moves, csr_array)
    np.testing.assert_allclose(shared.moves.toarray(), np.transpose([north, south]), rtol=1e-15)
    assert shared.moves.nnz == np.count_nonzero(north) + np.count_nonzero(south)
    assert shared.said == said


def test_whole_numbers_are_names_of_groups(net: Dataset):
    shared = common_errors(net, read_readings(net, "y", 1), "team", 2)
    assert shared.names == ("1", "2")
    assert shared.moves.toarray()[:, 0].tolist() == [2, 0, 0, 2, 2, 0]


def test_a_group_that_moves_no_reading_is_left_out(net: Dataset):
    small = Dataset.from_frames(
        pd.DataFrame({"from": ["A"] * 3, "to": ["B"] * 3, "y": ["", "0", "2"], "g": ["x", "y", "z"]})
    )
    readings = read_readings(small, "y", 1)
    assert common_errors(small, readings, "g", "1%").names == ("z",)
    assert common_errors(small, readings, "g", 1).names == ("y", "z")
    nothing = common_errors(net, read_readings(net, "y", 1), "none", 1)
    assert nothing.names == ()
    assert nothing.moves.shape == (6, 0)


def test_a_column_says_how_far_each_reading_moves_and_which_way(net: Dataset):
    edges = {"from": list("ABC"), "to": list("BCA"), "y": [1, 2, 3], "clock": ["k", "k", ""], "pull": ["1", "-1", ""]}
    small = Dataset.from_frames(pd.DataFrame(edges))
    shared = common_errors(small, read_readings(small, "y", 1), "clock", "pull")
    assert shared.moves.toarray().ravel().tolist() == [1, -1, 0]


def test_the_covariance_is_what_simulated_common_errors_have(net: Dataset):
    """Fixed seed; 40,000 draws: each entry of the covariance within five of its own standard errors."""
    rng, draws = np.random.default_rng(7), 40_000
    readings = read_readings(net, "y", 1)
    moves = common_errors(net, readings, "crew", "10%").moves.toarray()
    errors = rng.normal(size=(draws, 6)) + rng.normal(size=(draws, 2)) @ moves.T
    claimed = np.eye(6) + moves @ moves.T
    found = errors.T @ errors / draws
    spread = np.sqrt((np.outer(np.diag(claimed), np.diag(claimed)) + claimed**2) / draws)
    assert (np.abs(found - claimed) <= 5 * spread).all()


def test_a_share_of_a_turned_sensor_moves_against_its_edge(net: Dataset):
    rows = pd.DataFrame({"edge": ["b", "d"], "mounted": ["-1", ""], "y": ["20", "5"]})
    shared = common_errors(net, combined_readings(net, rows, "y", 1), "crew", "10%")
    assert shared.moves.toarray()[[1, 3]].tolist() == [[-2, 0], [0, 0.5]]


@pytest.mark.parametrize(
    ("column", "sd", "says"),
    [
        ("crews", 1, "no column 'crews' among the edges; there are"),
        ("odd", 1, "edges row 0: odd must hold names of groups, found floating-point numbers (1.5); give them as text"),
        ("crew", 0, "sd of a common error must be positive, from 1e-100 to 1e+100, got 0; leave the groups out"),
        ("crew", "-1", "sd of a common error must be positive"),
        ("crew", np.nan, "sd of a common error must be positive, from 1e-100 to 1e+100, got nan"),
        ("crew", "0%", "sd of a common error must be a plain positive percentage (0.5%), which has a sign, got '0%'"),
        (
            "crew",
            "1%+2",
            "sd of a common error must be a plain positive percentage (0.5%), which has a sign, got '1%+2'",
        ),
        ("crew", "nope", "sd of a common error must be a number, a percentage (0.5%) or an edge column (id, from,"),
        ("crew", "gap", "edges row 4: gap must say how far the common error moves the reading, got nothing; write 0"),
        ("crew", "pull", "edges row 3: pull must say how far the common error moves the reading, got nothing"),
        ("crew", "from", "edges row 0: from 'A' is not a number"),
        ("crew", None, "sd of a common error must hold real numbers"),
        ("crew", [1.0], "sd of a common error must have 0 axes"),
    ],
)
def test_common_errors_that_cannot_be_meant_are_refused(net: Dataset, column: str, sd, says: str):
    with pytest.raises(InputError) as caught:
        common_errors(net, read_readings(net, "y", 1), column, sd)
    assert says in str(caught.value)


def test_what_a_vertex_or_a_loop_misses_is_as_unsure_as_its_common_errors_make_it():
    """By hand, variances 0.01 each and a common error of 1: two along it add 2^2, one against the other nothing."""
    rows = [
        ("S", "J", "5", "x"),
        ("R", "J", "5", "x"),
        ("J", "T", "8.4", ""),
        ("S", "K", "5", "x"),
        ("K", "T", "5", "x"),
    ]
    net = Dataset.from_frames(pd.DataFrame(rows, columns=["from", "to", "y", "crew"]))
    table = balance(net, "y", 0.1, open=["S", "R", "T"], common="crew", common_sd=1.0).vertices.set_index("id")
    assert table["sd"][["J", "K"]].tolist() == pytest.approx([np.sqrt(0.03 + 4), np.sqrt(0.02)])
    assert table["statistic"]["J"] == pytest.approx(1.6 / np.sqrt(0.03 + 4))
    around = [("A", "B", "5", "x"), ("B", "C", "5", "x"), ("A", "C", "8.4", "")]
    net = Dataset.from_frames(pd.DataFrame(around, columns=["from", "to", "y", "crew"]))
    audit = loops(net, "y", 0.1, common="crew", common_sd=1.0)
    assert audit.loops[0]["sd"] == pytest.approx(np.sqrt(0.03 + 4))
    assert audit.loops[0]["statistic"] ** 2 == pytest.approx(audit.chi_square)  # one loop, so it is the whole test
    assert (audit.loops[0]["holds"], audit.holds) == (True, True)
