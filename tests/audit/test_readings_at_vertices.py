"""Numbers at vertices that are measurements themselves: their standard deviations in every form, and storage."""

from fractions import Fraction

import numpy as np
import pandas as pd
import pytest

from dec.audit.given.readings import Known, known_at_vertices, with_storage
from dec.calculus.complex import Complex
from dec.calculus.dataset import Dataset
from dec.errors import InputError


@pytest.fixture
def net() -> Dataset:
    edges = {"from": ["S", "J", "J"], "to": ["J", "T", "U"]}
    nodes = {
        "id": ["S", "J", "T", "U"], "put in": ["", "0.30", "-1", "0"], "sd": ["5", "", "0.2", "0"],
        "low": ["", "-1", "", ""], "5%": ["1", "2", "3", "4"], "stock": ["7", "1.25", "", "-2.001"],
    }  # fmt: skip
    return Dataset.from_frames(pd.DataFrame(edges), pd.DataFrame(nodes))


def values_of(known: Known) -> list[Fraction]:
    return [Fraction(int(i), 10**known.decimals.places) for i in known.decimals.integers]


@pytest.mark.parametrize(
    ("sd", "expected", "said"),
    [
        (0.5, [0, 0.5, 0.5, 0.5], "0.5 for every number"),
        ("0.5", [0, 0.5, 0.5, 0.5], "0.5 for every number"),
        (0, [0, 0, 0, 0], "0 for every number"),
        ("10%", [0, 0.03, 0.1, 0], "10 % of the number, exact where that is 0"),
        ("10%+0.1", [0, 0.13, 0.2, 0.1], "10 % of the number plus 0.1"),
        ("sd", [0, 0, 0.2, 0], "column sd"),
        ("col:5%", [0, 2, 3, 4], "column 5%"),
        ({"T": 0.2}, [0, 0, 0.2, 0], "by id"),
        ({"T": "0.2", "J": 0, "U": np.float32(0.5)}, [0, 0, 0.2, 0.5], "by id"),
        ({}, [0, 0, 0, 0], "by id"),
        ([9, np.nan, 0.2, 0], [0, 0, 0.2, 0], "one a vertex"),
    ],
)
def test_sd_is_0_where_a_number_is_exact_and_positive_where_it_was_measured(net: Dataset, sd, expected, said: str):
    known = known_at_vertices(net, "put in", "supply", sd)
    assert known.sd.tolist() == pytest.approx(expected, rel=1e-15)
    assert known.sd_said == said
    assert known.value.tolist() == [0, 0.3, -1, 0]
    assert known.decimals.present.tolist() == [False, True, True, True]


def test_without_sd_all_numbers_are_exact(net: Dataset):
    known = known_at_vertices(net, "put in", "supply")
    assert known.sd is None
    assert known.sd_said is None


@pytest.mark.parametrize(
    ("sd", "says"),
    [
        (-1, "supply_sd (--supply-sd) must be 0 or positive, got -1; leave it out where 'put in' is exact"),
        (np.nan, "supply_sd (--supply-sd) must be 0 or positive, got nan"),
        (1e-200, "supply_sd (--supply-sd) must be 0 or positive and lie within 1e-100 and 1e+100, got 1e-200"),
        ("low", "nodes row 1: supply_sd (--supply-sd) must be 0 or positive where supply is known, got -1; leave the "),
        ("nope", "supply_sd (--supply-sd) must be a number, a percentage (2%, or 2%+0.1) or a node column (id, put "),
        ("col:nope", "no column 'nope' among the vertices"),
        ("id", "nodes row 0: id 'S' is not a number"),
        ([1.0, 2.0], "supply_sd (--supply-sd) must give 4 numbers, one a vertex, got 2"),
        ([0, -2.0, 0, 0], "nodes row 1: supply_sd (--supply-sd) must be 0 or positive where supply is known, got -2"),
        ({"Q": 1}, "supply_sd (--supply-sd) names 'Q', which is no vertex"),
        ({"T": -1}, "nodes row 2: supply_sd (--supply-sd) must be 0 or positive where supply is known, got -1"),
        ({"T": None}, "supply_sd (--supply-sd) of 'T' must be a finite number, got None"),
        ({"S": 0.1}, "supply_sd (--supply-sd) names 'S', where no supply is known; give the number too, or leave"),
    ],
)
def test_sd_at_vertices_that_cannot_be_used_is_refused(net: Dataset, sd, says: str):
    with pytest.raises(InputError) as caught:
        known_at_vertices(net, "put in", "supply", sd)
    assert says in str(caught.value)


def test_sd_goes_with_numbers_given_by_id_or_as_an_array():
    net = Dataset(Complex.from_edges([0, 1], [1, 2]))
    known = known_at_vertices(net, {0: 100, 2: "99.5"}, "fixed", {2: 0.01})
    assert known.sd.tolist() == [0, 0, 0.01]
    assert known_at_vertices(net, [100, np.nan, 99.5], "fixed", "1%").sd.tolist() == pytest.approx([1, 0, 0.995])


def test_storage_is_taken_out_exactly_and_variances_are_added(net: Dataset):
    supply = known_at_vertices(net, "put in", "supply", {"J": 0.3, "T": 0.2})
    left = with_storage(supply, known_at_vertices(net, "stock", "storage", {"J": 0.4, "U": 1}))
    # S: nothing known of what is put in, so nothing of what is left; T: no stock.
    assert left.decimals.present.tolist() == [False, True, True, True]
    assert values_of(left) == [0, Fraction("-0.95"), -1, Fraction("2.001")]
    assert left.value.tolist() == [0, -0.95, -1, 2.001]
    assert left.sd.tolist() == pytest.approx([0, 0.5, 0.2, 1], rel=1e-15)
    assert left.sd_said == "supply: by id; storage: by id"


def test_without_supply_nothing_is_put_in_and_all_of_it_is_known(net: Dataset):
    left = with_storage(None, known_at_vertices(net, "stock", "storage"))
    assert values_of(left) == [-7, Fraction("-1.25"), 0, Fraction("2.001")]
    assert left.decimals.present.all()
    assert left.sd is None
    assert left.sd_said is None


def test_one_measured_side_is_enough_for_a_standard_deviation(net: Dataset):
    supply, stock = known_at_vertices(net, "put in", "supply"), known_at_vertices(net, "stock", "storage", 0.1)
    assert with_storage(supply, stock).sd.tolist() == [0, 0.1, 0, 0.1]
    measured = known_at_vertices(net, "put in", "supply", 0.2)
    assert with_storage(measured, known_at_vertices(net, "stock", "storage")).sd.tolist() == [0, 0.2, 0.2, 0.2]


def test_storage_stays_exact_beyond_64_bits(net: Dataset):
    supply = known_at_vertices(net, {"J": "1e30"}, "supply")
    left = with_storage(supply, known_at_vertices(net, {"J": "0.00000000000000000001"}, "storage"))
    assert values_of(left)[1] == 10**30 - Fraction(1, 10**20)
