"""Presets: the published figures come out, in the unit that was said, and no other unit passes for it."""

import json
import re
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from dec.audit.given.presets import PRESETS, kilometres, loop_limits, meter_class, meter_sd, preset, vertex_limits
from dec.audit.given.readings import read_readings
from dec.audit.given.repeats import combined_readings
from dec.calculus.dataset import Dataset
from dec.errors import InputError

REFERENCE = Path(__file__).parent.parent / "reference"


def entry(name: str) -> tuple[list, dict]:
    data = json.loads((REFERENCE / f"{name}.json").read_text(encoding="utf-8"))
    return data["input"]["lines"], data["expected"]


def lengths(values: list, name: str = "length") -> Dataset:
    return Dataset.from_frames(pd.DataFrame({"from": ["A"] * len(values), "to": ["B"] * len(values), name: values}))


@pytest.mark.parametrize(("length", "limit"), [(10, 37.9), (10.1, 38.1), (9.8, 37.6)])
def test_third_order_limits_come_out_to_the_printed_digit(length: float, limit: float):
    # 10 km, third order: 37.9 mm; arithmetic of the figure recalled from FGCC 1984 (from memory, "only the arithmetic
    # can be checked"); the other two likewise.
    found = loop_limits(preset("levelling-12mm"), np.array([length]), np.array([0, 1]), unit="mm")
    assert round(float(found[0]), 1) == limit


def test_b5_two_of_three_published_misclosures_are_beyond_any_order():
    # Data and misclosures: Mikhail, Observations and Least Squares, 1976, Table 7-1 p. 147 (READ), metres and km.
    # Limits by hand: 12 mm * sqrt(41.7), sqrt(41.0), sqrt(37.4).
    lines, known = entry("B5")
    net = lengths([row[3] for row in lines], "length_km")
    km = kilometres(net, "length_km", "km", np.ones(8, dtype=bool))
    legs = np.concatenate([km[[0, 1, 2]], km[[1, 7, 3]], km[[4, 5, 7]]])
    limits = loop_limits(preset("levelling-12mm"), legs, np.array([0, 3, 6, 9]), unit="m", heading="dh_m")
    assert limits.tolist() == pytest.approx([0.0774907, 0.0768375, 0.0733867], abs=1e-7)
    missed = [abs(float(known[name])) for name in ("misclosure_ABC_m", "misclosure_BCD_m", "misclosure_DEC_m")]
    assert (np.array(missed) <= limits).tolist() == [False, False, True]


def test_b4_lengths_in_metres_are_kilometres_only_when_said_to_be_metres():
    # Data: Strang and Borre, Linear Algebra, Geodesy, and GPS, 1997 (READ, quoted); 12 mm sqrt(2.862 km) by hand.
    lines, _ = entry("B4")
    net, all_of_them = lengths([row[3] for row in lines], "length_m"), np.ones(5, dtype=bool)
    km = kilometres(net, "length_m", "m", all_of_them)
    assert km.tolist() == pytest.approx([0.97, 1.002, 1.07, 1.11, 0.89])
    limit = loop_limits(preset("levelling-12mm"), km[[0, 4, 1]], np.array([0, 3]), unit="mm")
    assert limit[0] == pytest.approx(20.3009, abs=1e-4)
    with pytest.raises(InputError, match=r"said to be km, and the heading 'length_m' says m"):
        kilometres(net, "length_m", "km", all_of_them)
    with pytest.raises(
        InputError, match=r"edges row 0: length is 970 km, and a levelled line is between 1 m and 500 km"
    ):
        kilometres(lengths([row[3] for row in lines]), "length", "km", all_of_them)


@pytest.mark.parametrize(("unit", "limit"), [("mm", 12.0), ("cm", 1.2), ("m", 0.012), ("ft", 0.012 / 0.3048)])
def test_limits_come_in_the_unit_of_the_differences(unit: str, limit: float):
    # The international foot is 0.3048 m exactly (1959 agreement, from memory).
    found = loop_limits(preset("levelling-12mm"), np.array([0.25, 0.75]), np.array([0, 2]), unit=unit)
    assert found.tolist() == pytest.approx([limit], rel=1e-15)


@pytest.mark.parametrize(("unit", "written"), [("m", 1609.344), ("km", 1.609344), ("mi", 1), ("ft", 5280)])
def test_a_mile_is_a_mile_in_every_unit(unit: str, written: float):
    # 1 mile = 5280 ft = 1609.344 m exactly (1959 agreement, from memory).
    assert kilometres(lengths([written]), "length", unit, np.array([True]))[0] == pytest.approx(1.609344, rel=1e-15)


@pytest.mark.parametrize("unit", [None, "", "L/s", "yd", "M", "in"])
def test_a_loop_preset_without_a_unit_of_length_for_its_differences_is_refused(unit):
    says = re.escape(f"(unit=, --unit) must be one of mm, cm, m, ft, got {unit!r}; say it, a preset guesses none")
    with pytest.raises(InputError, match=says):
        loop_limits(preset("levelling-12mm"), np.array([1.0]), np.array([0, 1]), unit=unit)


def test_a_heading_that_names_another_unit_is_refused():
    with pytest.raises(InputError, match=r"said to be mm, and the heading 'dh_m' says m; correct one of them"):
        loop_limits(preset("levelling-12mm"), np.array([1.0]), np.array([0, 1]), unit="mm", heading="dh_m")
    assert (
        loop_limits(preset("levelling-12mm"), np.array([1.0]), np.array([0, 1]), unit="m", heading="DH [m]")[0] == 0.012
    )


@pytest.mark.parametrize(
    ("values", "unit", "says"),
    [
        (["1"], None, "the unit of lengths must be one of m, km, mi, ft, got None; say it, a preset guesses none"),
        (["1"], "miles", "the unit of lengths must be one of m, km, mi, ft, got 'miles'"),
        (["1", ""], "km", "edges row 1: length must be positive where the edge is measured, got nothing"),
        (["1", "0"], "km", "edges row 1: length must be positive where the edge is measured, got 0"),
        (["-2", "1"], "km", "edges row 0: length must be positive where the edge is measured, got -2"),
        (["1", "0.0005"], "km", "edges row 1: length is 0.0005 km, and a levelled line is between 1 m and 500 km"),
        (["1", "500.1"], "km", "edges row 1: length is 500.1 km"),
        (["1", "x"], "km", "edges row 1: length 'x' is not a number"),
    ],
)
def test_lengths_that_cannot_be_meant_are_refused(values: list, unit, says: str):
    with pytest.raises(InputError) as caught:
        kilometres(lengths(values), "length", unit, np.ones(len(values), dtype=bool))
    assert says in str(caught.value)


def test_a_line_that_was_not_measured_needs_no_length():
    found = kilometres(lengths(["2", "", "9999999"]), "length", "km", np.array([True, False, False]))
    assert found[0] == 2
    assert np.isnan(found[1])


def test_a_loop_of_no_legs_may_miss_by_nothing():
    assert loop_limits(preset("levelling-4mm"), np.array([4.0]), np.array([0, 0, 1, 1]), unit="mm").tolist() == [
        0,
        8,
        0,
    ]


@pytest.mark.parametrize(
    ("legs", "offsets", "says"),
    [
        ([1.0, 2.0], [0, 1], "offsets must run from 0 to 2"),
        ([1.0, 2.0], [0, 2, 1, 2], "offsets must run from 0 to 2"),
        ([], [], "offsets must run from 0 to 0"),
        ([1.0, -1.0], [0, 2], "kilometres must be positive, got -1 at 1"),
        ([1.0, np.nan], [0, 2], "kilometres must be positive, got nan at 1"),
    ],
)
def test_legs_that_cannot_be_meant_are_refused(legs: list, offsets: list, says: str):
    with pytest.raises(InputError) as caught:
        loop_limits(preset("levelling-12mm"), np.array(legs), np.array(offsets, dtype=np.int64), unit="mm")
    assert says in str(caught.value)


def geh(model: float, count: float) -> float:
    """The statistic as the manuals print it: sqrt(2 (M - C)^2 / (M + C))."""
    return float(np.sqrt(2 * (model - count) ** 2 / (model + count)))


@pytest.mark.parametrize(("name", "most"), [("counts-geh5", 5), ("counts-geh3", 3)])
def test_a_vertex_is_within_its_limit_exactly_when_its_statistic_is(name: str, most: float):
    # Formula: DMRB by way of a secondary text (READ); under 3 on state facilities: Texas manual (READ).
    rng = np.random.default_rng(3)
    inflow = rng.integers(0, 3000, 2000).astype(float)
    outflow = np.maximum(inflow + rng.integers(-250, 250, 2000), 0) + 1
    limit = vertex_limits(preset(name), inflow, outflow, unit="veh/h")
    within = np.abs(inflow - outflow) <= limit
    assert within.tolist() == [geh(m, c) <= most for m, c in zip(inflow, outflow, strict=True)]
    assert 0 < within.sum() < len(within)


def test_the_border_case_by_hand():
    assert geh(450, 350) == 5
    assert vertex_limits(preset("counts-geh5"), np.array([450.0, 0]), np.array([350.0, 0]), unit="veh/h").tolist() == [
        100,
        0,
    ]


@pytest.mark.parametrize("unit", [None, "veh/15 min", "veh/15min", "AADT", "L/s", "veh/d"])
def test_counts_of_anything_but_an_hour_are_refused(unit):
    with pytest.raises(InputError, match=r"preset counts-geh5 is for hourly counts only: .* must be veh/h, got"):
        vertex_limits(preset("counts-geh5"), np.array([1.0]), np.array([1.0]), unit=unit)


@pytest.mark.parametrize(
    ("inflow", "outflow", "says"),
    [
        ([1.0, -2.0], [1.0, 1.0], "inflow must not be negative, got -2 at 1"),
        ([1.0], [-1.0], "outflow must not be negative, got -1 at 0"),
        ([1.0], [1.0, 2.0], "outflow must give 1 numbers like inflow, got 2"),
        ([np.nan], [1.0], "inflow must be finite, got nan at 0"),
    ],
)
def test_totals_that_cannot_be_meant_are_refused(inflow: list, outflow: list, says: str):
    with pytest.raises(InputError) as caught:
        vertex_limits(preset("counts-geh5"), np.array(inflow), np.array(outflow), unit="veh/h")
    assert says in str(caught.value)


def test_a_class_2_water_meter_reads_to_2_percent_and_to_5_below_its_transitional_flow():
    # 2 % and 5 %: OIML R 49 class 2 (from memory). A rectangle of half-width a has sd a / sqrt(3): GUM 4.3.7 (from
    # memory), checked against the standard deviation of a uniform distribution below.
    sd = meter_sd(preset("water-meter-class2"), np.array([10.0, -10.0, 2.0, 1.99, np.nan]), 2.0)
    expected = np.array([0.2, 0.2, 0.04, 0.0995, np.nan]) / np.sqrt(3)
    np.testing.assert_allclose(sd, expected, rtol=1e-15)
    even = (np.arange(100_000) + 0.5) / 100_000 * 0.4 - 0.2
    assert sd[0] == pytest.approx(even.std(), rel=1e-9)


def test_the_transitional_flow_may_differ_from_meter_to_meter_and_a_floor_is_added():
    sd = meter_sd(preset("gas-meter-class1"), np.array([10.0, 10.0, 0.0]), [5, 20, 5], floor=0.1)
    np.testing.assert_allclose(sd, np.array([0.1, 0.2, 0]) / np.sqrt(3) + 0.1, rtol=1e-15)


@pytest.mark.parametrize(
    ("value", "transition", "floor", "says"),
    [
        ([1.0, 0.0], 2.0, 0.0, "line 3: the reading is 0, and a share of 0 is no standard deviation; give a floor"),
        (
            [1.0, 1.0],
            [2.0, np.nan],
            0.0,
            "line 3: the transitional flow must be positive where there is a reading, got nan",
        ),
        ([1.0, 1.0], 0.0, 0.0, "line 2: the transitional flow must be positive where there is a reading, got 0"),
        ([1.0, 1.0], [1.0], 0.0, "transition must be one number or 2, got shape (1,)"),
        ([1.0, 1.0], "x", 0.0, "transition must hold real numbers, got text"),
        ([1.0, 1.0], 1.0, -0.1, "floor must be 0 or positive, got -0.1"),
    ],
)
def test_meters_that_cannot_be_meant_are_refused(value: list, transition, floor: float, says: str):
    with pytest.raises(InputError) as caught:
        meter_sd(
            preset("water-meter-class1"), np.array(value), transition, floor=floor, place=lambda row: f"line {row + 2}"
        )
    assert says in str(caught.value)


@pytest.fixture
def metered() -> Dataset:
    edges = {"id": ["p", "q"], "from": ["A", "B"], "to": ["B", "C"], "y": ["10", ""], "Q2": ["2", ""], "0": ["0", "1"]}
    return Dataset.from_frames(pd.DataFrame(edges))


@pytest.mark.parametrize("transition", [2, "2", "Q2", [2.0, np.nan]])
def test_a_meter_class_stands_where_sd_does(metered: Dataset, transition):
    readings = read_readings(metered, "y", meter_class(preset("water-meter-class2"), transition))
    assert readings.sd[0] == pytest.approx(0.2 / np.sqrt(3), rel=1e-15)
    assert np.isnan(readings.sd[1])
    assert readings.sd_said == preset("water-meter-class2").sentence


def test_a_meter_class_applies_to_each_row_of_a_table_in_the_unit_of_its_sensor(metered: Dataset):
    rows = pd.DataFrame({"edge": ["p", "p", "q"], "factor": ["", "3.6", "0.5"], "y": [10, 3, 1], "Q2": [2, 2, 2]})
    rule = meter_class(preset("water-meter-class2"), "Q2", floor=0.1)
    readings = combined_readings(metered, rows, "y", rule)
    expected = [0.2 / np.sqrt(3) + 0.1, 3.6 * (0.06 / np.sqrt(3) + 0.1), 0.5 * (0.05 / np.sqrt(3) + 0.1)]
    assert readings.repeats.sd.tolist() == pytest.approx(expected, rel=1e-14)
    assert readings.sd[0] == pytest.approx((expected[0] ** -2 + expected[1] ** -2) ** -0.5, rel=1e-14)
    assert readings.sd_said.endswith("licensed practice decide what applies, in the unit of each sensor")


@pytest.mark.parametrize(
    ("transition", "says"),
    [
        ("Q3", "no column 'Q3' among the edges"),
        ("0", "edges row 0: the transitional flow must be positive where there is a reading, got 0"),
        ("col:0", "edges row 0: the transitional flow must be positive where there is a reading, got 0"),
        ("from", "edges row 0: from 'A' is not a number"),
    ],
)
def test_a_transitional_flow_that_cannot_be_used_is_refused_with_its_place(metered: Dataset, transition, says: str):
    with pytest.raises(InputError) as caught:
        read_readings(metered, "y", meter_class(preset("water-meter-class2"), transition))
    assert says in str(caught.value)
    with pytest.raises(InputError, match="sets a loop limit, not a reading sd"):
        meter_class(preset("levelling-4mm"), transition)


def test_a_preset_is_chosen_by_its_name_and_by_no_other():
    with pytest.raises(InputError, match=r"preset must be one of levelling-4mm, .*, got 'leveling-12mm'; did you mean"):
        preset("leveling-12mm")
    with pytest.raises(InputError, match=r"preset must be one of .*, got None"):
        preset(None)  # type: ignore[arg-type]


def test_a_preset_of_another_kind_is_refused():
    one = np.array([1.0])
    with pytest.raises(
        InputError, match=r"preset counts-geh5 sets a vertex limit, not a loop limit; take one of level"
    ):
        loop_limits(preset("counts-geh5"), one, np.array([0, 1]), unit="m")
    with pytest.raises(
        InputError, match=r"preset levelling-4mm sets a loop limit, not a vertex limit; take one of counts"
    ):
        vertex_limits(preset("levelling-4mm"), one, one, unit="veh/h")
    with pytest.raises(
        InputError, match=r"preset levelling-4mm sets a loop limit, not a reading sd; take one of water"
    ):
        meter_sd(preset("levelling-4mm"), one, 1.0)


def test_figures_can_be_set_and_the_preset_says_so():
    stricter = preset("levelling-12mm", mm_per_sqrt_km=9)
    assert loop_limits(stricter, np.array([4.0]), np.array([0, 1]), unit="mm").tolist() == [18]
    assert "may miss by 9 mm times" in stricter.sentence
    assert "set by the user: mm_per_sqrt_km 9 in place of 12 as in third order" in stricter.sentence
    assert preset("levelling-12mm").figures["mm_per_sqrt_km"] == 12
    with pytest.raises(InputError, match=r"preset levelling-12mm has the figures mm_per_sqrt_km, got 'mm'"):
        preset("levelling-12mm", mm=9)
    for wrong in (0, -1, np.nan, np.inf):
        with pytest.raises(InputError, match=r"mm_per_sqrt_km of preset levelling-12mm must be positive, got"):
            preset("levelling-12mm", mm_per_sqrt_km=wrong)
    with pytest.raises(TypeError):
        PRESETS["levelling-12mm"].figures["mm_per_sqrt_km"] = 1  # type: ignore[index]


@pytest.mark.parametrize("name", list(PRESETS))
def test_every_preset_says_its_figures_its_source_how_we_know_and_who_decides(name: str):
    rule = preset(name)
    assert rule.name == name
    assert rule.sentence.startswith(f"{name}: ")
    for figure in rule.figures.values():
        assert f"{figure:g}" in rule.sentence
    assert len(rule.source) > 20
    assert rule.basis in ("read", "read in a secondary text", "from memory")
    assert f"; {rule.basis}); " in rule.sentence
    assert rule.sentence.endswith("local codes, the contract and licensed practice decide what applies")
