"""What would explain a reading: each unit both ways, a turned meter, a dead one, an offset; noise gets no unit."""

import numpy as np
import pandas as pd
import pytest

from dec.audit.questions import balance, loops
from dec.audit.tested.hints import UNIT_FACTORS, hint_for
from dec.audit.tested.single_errors import CRITICAL
from dec.calculus.dataset import Dataset

UNITS = [(unit, way) for unit in UNIT_FACTORS for way in (1, -1)]


def streets(way: str, factor: float = 1.0, offset: float = 0.0) -> Dataset:
    """Flows of 5 to 12 round two squares, in and out at the ends; the one on `way` is wrong."""
    ends = ["S-A", "A-B", "A-C", "B-D", "C-D", "B-C", "D-T"]
    flow = dict(zip(ends, [12.0, 6.5, 5.5, 5.0, 7.0, 1.5, 12.0], strict=True))
    flow[way] = flow[way] * factor + offset
    rows = [(name, *name.split("-"), y) for name, y in flow.items()]
    return Dataset.from_frames(pd.DataFrame(rows, columns=["id", "from", "to", "y"]))


@pytest.mark.parametrize(("unit", "way"), UNITS)
@pytest.mark.parametrize("estimate", [5.0, -5.0, 0.02, 7e5])
def test_every_unit_is_told_both_ways(unit: float, way: int, estimate: float):
    factor = unit**way
    hint = hint_for(estimate * factor * 1.001, estimate, 0.002 * abs(estimate), CRITICAL)
    assert hint.factor == pytest.approx(1 / factor, rel=1e-12)
    assert UNIT_FACTORS[unit] in hint.text
    assert ("times what all else says" if way == 1 else "of what all else says") in hint.text


@pytest.mark.parametrize(("unit", "way"), UNITS)
def test_a_meter_in_another_unit_leads_and_what_if_in_its_unit_holds(unit: float, way: int):
    audit = balance(streets("A-B", unit**way), "y", sd=0.005, open=["S", "T"])
    assert audit.holds is False
    first = audit.suspects[0]
    assert (first.kind, first.id) == ("edge", "A-B")
    assert first.estimate == pytest.approx(6.5)
    assert UNIT_FACTORS[unit] in first.hint
    scaled = first.outcomes["scaled"]
    assert scaled["factor"] == pytest.approx(unit**-way, rel=1e-12)
    assert scaled["holds"] is True
    assert audit.what_if(scaled={"A-B": scaled["factor"]}).holds is True


def test_the_unit_factors_are_those_of_their_definitions():
    """Hour 3600 s, day 24 h; litre 0.001 m3; US gallon 231 in3, inch 0.0254 m; imperial gallon 4.54609 L;
    foot 0.3048 m; mile 5280 ft. SI Brochure, 9th ed. 2019; NIST Special Publication 811, 2008, appendix B (both from
    memory).
    """
    definitions = {
        60.0, 3600.0, 24.0, 3.6, 1000 / 60, 10.0, 100.0, 1000.0, round(231 * 0.254**3, 12), 4.54609, 0.3048,
        round(5280 * 0.3048 / 1000, 12), 2.0,
    }  # fmt: skip
    assert sorted(UNIT_FACTORS) == pytest.approx(sorted(definitions), rel=1e-12)


def test_a_turned_meter_comes_before_any_unit_or_offset():
    hint = hint_for(-5.0, 5.0, 0.1, CRITICAL)
    assert hint.factor == -1.0
    assert "opposite sign" in hint.text
    first = balance(streets("B-D", -1.0), "y", sd=0.05, open=["S", "T"]).suspects[0]
    assert first.id == "B-D"
    assert "opposite sign" in first.hint
    assert first.outcomes["turned"] == {"factor": -1.0, **{k: first.outcomes["turned"][k] for k in ("chi_square", "dof",
                                        "limit", "holds")}}  # fmt: skip
    assert first.outcomes["turned"]["holds"] is True


def test_a_reading_of_zero_is_a_dead_meter():
    assert "reads zero" in hint_for(0.0, 5.0, 0.1, CRITICAL).text
    first = balance(streets("B-D", 0.0), "y", sd=0.05, open=["S", "T"]).suspects[0]
    assert (first.id, first.estimate) == ("B-D", pytest.approx(5.0))
    assert "reads zero" in first.hint
    assert set(first.outcomes) == {"left_out"}


@pytest.mark.parametrize("offset", [0.7, -3.2, 123.0])
def test_any_other_difference_is_an_offset(offset: float):
    hint = hint_for(5.0 + offset, 5.0, 0.01, CRITICAL)
    assert hint.factor is None
    assert hint.text == f"an offset of {offset:g} would explain it"
    first = balance(streets("A-B", 1.0, offset), "y", sd=0.01, open=["S", "T"]).suspects[0]
    assert first.id == "A-B"
    assert f"offset of {offset:g} " in first.hint


def test_a_value_that_may_be_zero_is_no_multiple_of_anything():
    """With 0 +- 1 as what all else says, every factor would fit."""
    assert hint_for(12.0, 0.2, 1.0, CRITICAL).factor is None
    assert hint_for(-3.0, 3.0, 1.0, CRITICAL).factor is None


def test_a_unit_has_to_fit_within_ten_per_cent_and_within_the_limit():
    assert hint_for(60 * 5.6, 5.0, 0.5, CRITICAL).factor is None
    assert hint_for(60 * 5.1, 5.0, 0.01, CRITICAL).factor is None
    assert hint_for(60 * 5.1, 5.0, 0.5, CRITICAL).factor == pytest.approx(1 / 60)


def test_of_neighbouring_units_the_nearest_is_told():
    assert hint_for(5 * 3.60, 5.0, 0.3, CRITICAL).factor == pytest.approx(1 / 3.6)
    assert hint_for(5 * 3.78, 5.0, 0.3, CRITICAL).factor == pytest.approx(1 / 3.785411784)
    assert hint_for(5 * 3.60, 5.0, 0.001, CRITICAL).text.endswith("km/h and m/s?")
    assert hint_for(5 * 3.60, 5.0, 0.3, CRITICAL).text.endswith("(3.78541 times, 1/0.3048 of would fit as well)")


@pytest.mark.parametrize("law", ["balance", "loop"])
def test_clean_readings_get_no_hint_at_all(law: str):
    """Fixed seed; the few errors that chance lets stand out are small beside the readings, so none is a unit."""
    rng, n_hints = np.random.default_rng(3), 0
    for _ in range(40):
        frame = streets("A-B").columns[1]
        noisy = np.array([float(y) for y in frame["y"].cells]) + rng.normal(0, 0.05, 7)
        if law == "loop":
            noisy = np.array([1.0, 2, 3, 4, 3, 1, 2]) * 10 + rng.normal(0, 0.05, 7)
        rows = {"id": frame["id"].cells, "from": frame["from"].cells, "to": frame["to"].cells, "y": noisy}
        net = Dataset.from_frames(pd.DataFrame(rows))
        audit = balance(net, "y", sd=0.05, open=["S", "T"]) if law == "balance" else loops(net, "y", sd=0.05)
        n_hints += sum(s.hint is not None and "offset" not in s.hint for s in audit.suspects if s.kind == "edge")
    assert n_hints == 0
