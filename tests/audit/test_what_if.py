"""What the audit would say of other readings: exactly that of an audit of them, foretold for each suspect."""

from dataclasses import replace
from fractions import Fraction

import numpy as np
import pandas as pd
import pytest

from dec.audit.questions import balance, loops
from dec.audit.record import Audit
from dec.calculus.columns import Column
from dec.calculus.dataset import Dataset
from dec.errors import InputError

from .measured_networks import Measured, measured, nearly_right, with_readings, with_repeats
from .small_networks import decimal


def compare_outcomes(audit: Audit, tolerance: float = 1e-9) -> dict[str, int]:
    """Return how many outcomes of each kind were compared."""
    seen = {"left_out": 0, "turned": 0, "scaled": 0}
    for suspect in audit.suspects:
        if suspect.kind != "edge":
            continue
        for way, said in suspect.outcomes.items():
            asked = {"scaled": {suspect.id: Fraction(said["factor"])}} if way == "scaled" else {way: [suspect.id]}
            other = audit.what_if(**asked)
            assert said["dof"] == other.dof
            assert said["holds"] == other.holds
            if other.dof:
                assert said["limit"] == other.limit
                room = tolerance * (1.0 + audit.chi_square)
                assert said["chi_square"] == pytest.approx(other.chi_square, rel=tolerance, abs=room)
            seen[way] += 1
    return seen


def with_cells(net: Measured, **cells: np.ndarray) -> Measured:
    """The network with other cells in its edge table."""
    columns = {name: Column(name, values) for name, values in cells.items()}
    return replace(net, net=replace(net.net, columns={**net.net.columns, 1: {**net.net.columns[1], **columns}}))


def with_one_wrong(net: Measured, seed: int, **more: object) -> Audit:
    """The audit with one reading turned or in another unit, all others near values that the law admits."""
    rng = np.random.default_rng(seed)
    reading = nearly_right(net, rng)
    if reading:
        reading[rng.choice(list(reading))] *= rng.choice([-1, -1, -1, 3.6, 1 / 3.6, 1000, 0.001])
    return with_readings(net, reading).audit(**more)


@pytest.mark.parametrize("law", ["balance", "loop"])
@pytest.mark.parametrize("size", ["", "0.5", "5%"])
def test_outcomes_are_those_of_the_audit_run_in_full(law: str, size: str):
    """5 % of a reading that is 1000 times too large are 20,000 of its own sd: some digits go there."""
    seen = {"left_out": 0, "turned": 0, "scaled": 0}
    for seed in range(3000, 3060):
        audit = with_one_wrong(measured(law, seed, size), seed)
        for way, count in compare_outcomes(audit, 1e-6 if size == "5%" else 1e-9).items():
            seen[way] += count
    assert seen["left_out"] > 10
    assert min(seen.values()) >= 2


@pytest.mark.parametrize("law", ["balance", "loop"])
def test_a_share_of_the_reading_as_its_accuracy_is_foretold_too(law: str):
    seen = 0
    for seed in range(3000, 3040):
        audit = with_one_wrong(measured(law, seed), seed, sd="1%+0.1")
        seen += sum(compare_outcomes(audit).values())
    assert seen > 20


@pytest.mark.parametrize("law", ["balance", "loop"])
@pytest.mark.parametrize("size", ["", "0.5", "5%"])
def test_outcomes_reckon_with_several_readings_of_one_edge(law: str, size: str):
    seen = 0
    for seed in range(2000, 2030):
        net = measured(law, seed, size)
        if net.case.reading:
            audit = net.audit(readings=with_repeats(net, seed)[0], sd="own")
            seen += sum(compare_outcomes(audit).values())
    assert seen > 20


@pytest.mark.parametrize("law", ["balance", "loop"])
def test_readings_of_a_changed_edge_are_those_of_a_table_written_anew(law: str):
    for seed in range(2000, 2030):
        net = measured(law, seed)
        if not net.case.reading:
            continue
        rows, _ = with_repeats(net, seed)
        edges = sorted(set(rows["edge"]))
        scaled, out = edges[0], edges[1:2]
        anew = rows[~rows["edge"].isin(out)].copy()
        here = anew["edge"] == scaled
        anew.loc[here, "factor"] = [decimal(Fraction(f or 1) / 4) for f in anew.loc[here, "factor"]]
        found = net.audit(readings=rows, sd="own").what_if(scaled={scaled: "0.25"}, left_out=out)
        wanted = net.audit(readings=anew, sd="own")
        assert (found.dof, found.holds) == (wanted.dof, wanted.holds)
        assert found.chi_square == pytest.approx(wanted.chi_square, rel=1e-9, abs=1e-9)
        for name in ("edges", "readings"):
            for column, cells in wanted.tables[name].items():
                if cells.dtype == object:
                    assert list(found.tables[name][column]) == list(cells)
                else:
                    np.testing.assert_allclose(found.tables[name][column], cells, rtol=1e-9, atol=1e-9)


@pytest.mark.parametrize("law", ["balance", "loop"])
def test_a_what_if_is_an_audit_of_a_table_written_anew(law: str):
    for seed in range(3000, 3040):
        net = measured(law, seed)
        seen = [f"e{e}" for e in net.case.reading]
        if not seen:
            continue
        turned, scaled, out = seen[:1], seen[1:2], seen[2:3]
        before = net.audit()
        as_it_was = before.to_json()
        found = before.what_if(turned=turned, scaled=dict.fromkeys(scaled, "2.5"), left_out=out)
        values, sd = [], []
        for e, spread in enumerate(net.case.sd):
            factor = {**dict.fromkeys(turned, -1), **dict.fromkeys(scaled, Fraction(5, 2))}.get(f"e{e}", 1)
            there = e in net.case.reading and f"e{e}" not in out
            values.append(decimal(net.case.reading[e] * factor if there else None))
            sd.append(float(spread * abs(factor)))
        wanted = with_cells(net, y=np.array(values, dtype=object), sd=np.array(sd)).audit()
        assert (found.dof, found.holds, found.limit) == (wanted.dof, wanted.holds, wanted.limit)
        assert found.chi_square == pytest.approx(wanted.chi_square, rel=1e-12, abs=1e-12)
        for name in ("value", "adjusted", "adjusted_sd", "redundancy", "statistic"):
            np.testing.assert_allclose(found.tables["edges"][name], wanted.tables["edges"][name], rtol=1e-9, atol=1e-9)
        assert [(s.kind, s.id) for s in found.suspects] == [(s.kind, s.id) for s in wanted.suspects]
        assert before.to_json() == as_it_was


def pipe(reading: str, beyond: str) -> Dataset:
    rows = {"id": ["in", "out"], "from": ["S", "J"], "to": ["J", "T"], "y": [reading, beyond]}
    return Dataset.from_frames(pd.DataFrame(rows))


def test_without_sd_a_factor_counts_exactly():
    """18 m3/h are 5 L/s, digit for digit; a factor beside it is not."""
    audit = balance(pipe("18.0", "5"), "y", open=["S", "T"])
    assert audit.holds is False
    assert audit.what_if(scaled={"in": "1/3.6"}).holds is True
    assert audit.what_if(scaled={"out": "3.6"}).holds is True
    assert audit.what_if(scaled={"out": 3.6}).holds is True
    assert audit.what_if(scaled={"in": Fraction(10, 36)}).holds is True
    assert audit.what_if(scaled={"in": "0.2777777777777777777777"}).holds is False


def test_without_sd_factors_far_from_one_keep_every_digit():
    tiny = "0." + "0" * 30 + "5"
    assert balance(pipe("5", tiny), "y", open=["S", "T"]).what_if(scaled={"in": "1e-31"}).holds is True
    assert balance(pipe("5", tiny), "y", open=["S", "T"]).what_if(scaled={"in": "1.0001e-31"}).holds is False
    long = "1.0000000000000000000000000000001"
    assert balance(pipe("1", long), "y", open=["S", "T"]).what_if(scaled={"in": long}).holds is True
    assert balance(pipe("1", "1"), "y", open=["S", "T"]).what_if(scaled={"in": long}).holds is False
    both = balance(pipe("1e-25", "1e-25"), "y", open=["S", "T"]).what_if(scaled={"in": "1/3", "out": "1/3"})
    assert both.holds is True
    other = balance(pipe("1e-25", "1.0000000001e-25"), "y", open=["S", "T"])
    assert other.what_if(scaled={"in": "1/3", "out": "1/3"}).holds is False


def test_without_sd_a_turned_and_a_left_out_reading_count_exactly():
    audit = balance(pipe("0.3", "-0.30"), "y", open=["S", "T"])
    assert audit.holds is False
    assert audit.what_if(turned="out").holds is True
    assert audit.what_if(left_out=["out"]).holds is None
    assert audit.edges["value"].tolist() == [0.3, -0.3]


@pytest.mark.parametrize(
    ("asked", "says"),
    [
        ({"turned": ["nope"]}, "what-if names 'nope', which is no edge"),
        ({"left_out": "2"}, "what-if names '2', which is not measured"),
        ({"turned": ["0"], "left_out": ["0"]}, "what-if names '0' twice"),
        ({"turned": ["0"], "left_out": [0]}, "what-if names '0' twice"),
        ({"scaled": {"0": 2, 0: 3}}, "what-if names '0' twice"),
        ({"scaled": {"0": 0}}, "the factor of '0' must be a number other than 0, got 0"),
        ({"scaled": {"0": "1/0"}}, "must be a number other than 0, got '1/0'"),
        ({"scaled": {"0": "0/3"}}, "must be a number other than 0, got '0/3'"),
        ({"scaled": {"0": "three"}}, "must be a number other than 0, as 0.001 or 1/3.6, got 'three'"),
        ({"scaled": {"0": "1/3/2"}}, "must be a number other than 0, as 0.001 or 1/3.6, got '1/3/2'"),
        ({"scaled": {"0": ""}}, "must be a number other than 0, as 0.001 or 1/3.6, got ''"),
        ({"scaled": {"0": "1/"}}, "must be a number other than 0, as 0.001 or 1/3.6, got '1/'"),
        ({"scaled": {"0": None}}, "must be a number other than 0, as 0.001 or 1/3.6, got None"),
        ({"scaled": {"0": True}}, "must be a number other than 0, as 0.001 or 1/3.6, got True"),
        ({"scaled": {"0": np.nan}}, "must be a number other than 0, as 0.001 or 1/3.6, got nan"),
        ({"scaled": {"0": np.inf}}, "must be a number other than 0, as 0.001 or 1/3.6, got inf"),
        ({"scaled": {"0": "1e400"}}, "the factor of '0' must lie within 1e-100 and 1e100, got '1e400'"),
        ({"scaled": {"0": "1e-400"}}, "the factor of '0' must lie within 1e-100 and 1e100, got '1e-400'"),
        ({"scaled": {"0": "1e999999999"}}, "the factor of '0' must lie within 1e-100 and 1e100, got '1e999999999'"),
        ({"scaled": {"0": "1e100"}}, "what-if makes the reading of '0' 5e+100 with an sd of 1e+99, out of the range"),
    ],
)
def test_what_cannot_be_asked_is_refused(asked: dict, says: str):
    rows = {"id": ["0", "1", "2"], "from": ["S", "J", "J"], "to": ["J", "T", "U"], "y": ["5", "5", ""]}
    net = Dataset.from_frames(pd.DataFrame(rows))
    for audit in (balance(net, "y", sd=0.1, open=["S", "T"]), loops(net, "y", sd=0.1)):
        with pytest.raises(InputError) as caught:
            audit.what_if(**asked)
        assert says in str(caught.value)


def test_a_plain_text_is_one_id_and_not_a_row_of_letters():
    audit = balance(pipe("5", "5"), "y", sd=0.1, open=["S", "T"])
    assert (audit.dof, audit.what_if(left_out="out").dof) == (1, 0)


def test_ids_and_readings_that_can_be_read_once_only_serve_a_what_if_too(tmp_path):
    """Ids from an iterator; a table of readings that is gone by the time of the question, as a pipe is."""
    lines = pd.DataFrame({"id": ["a", "b"], "from": ["S", "J"], "to": ["J", "T"]})
    table = tmp_path / "readings.csv"
    table.write_text("edge,y\na,5\nb,4.9\n")
    audit = balance(Dataset.from_frames(lines), "y", 0.1, open=iter(["S", "T"]), readings=table)
    table.unlink()
    would = audit.what_if(turned=["a"])
    assert (would.dof, would.chi_square) == (audit.dof, pytest.approx(9.9**2 / 0.02))
    assert would.asked["open"] == ["S", "T"]
    assert would.what_if().chi_square == audit.chi_square
