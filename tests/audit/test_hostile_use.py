"""What an attacker found: numbers far apart, the same thing asked twice, arguments of another kind."""

from fractions import Fraction

import numpy as np
import pandas as pd
import pytest

from dec.audit.adjusted.laplacian import Laplacian
from dec.audit.given.presets import preset
from dec.audit.questions import balance, loops
from dec.calculus.dataset import Dataset
from dec.cli import main
from dec.demo.town import town
from dec.errors import AccuracyError, DecError, InputError
from dec.solvers import selected_inverse


def triangle() -> Dataset:
    rows = {"id": list("abcd"), "from": list("ABCA"), "to": list("BCAC"), "y": ["1.10", "2.20", "-3.27", "3.30"],
            "g": ["r", "r", "", ""]}  # fmt: skip
    return Dataset.from_frames(pd.DataFrame(rows))


@pytest.mark.parametrize("ratio", [1, 100, 10**4, 10**5])
def test_a_common_error_far_larger_than_the_readings_own_gives_the_exact_chi_square(ratio: int):
    """Two loops: misclosures 0.03 and 0 with covariance of a + b + c, and of a + b - d, by hand in fractions."""
    s2, c2 = Fraction(1, 100) ** 2, (Fraction(ratio) / 100) ** 2
    first, second, both = 3 * s2 + 4 * c2, 3 * s2 + 4 * c2, 2 * s2 + 4 * c2
    misclosure = Fraction(3, 100)
    exact = misclosure**2 * second / (first * second - both**2)
    found = loops(triangle(), "y", sd=0.01, common="g", common_sd=ratio * 0.01)
    assert found.chi_square == pytest.approx(float(exact), rel=1e-5)


def test_a_common_error_that_hides_the_others_is_refused_and_not_judged():
    with pytest.raises(AccuracyError, match="common error of group 'r'"):
        loops(triangle(), "y", sd=0.01, common="g", common_sd=1e7)


@pytest.mark.parametrize("law", [balance, loops])
def test_contradictions_whose_squares_overflow_are_refused_in_words(law):
    rows = {"from": ["S", "A", "A"], "to": ["A", "B", "B"], "y": ["1e99", "2", "-3"]}
    net = Dataset.from_frames(pd.DataFrame(rows))
    with pytest.raises(AccuracyError, match="contradict each other by up to"):
        law(net, "y", sd=1e-60, **({"open": ["S", "B"]} if law is balance else {"fixed": {"S": 0, "A": 0}}))


def test_an_entry_lost_to_underflow_leaves_figures_out_and_not_the_audit(monkeypatch):
    def lost(*_):
        message = "an entry that cancelled"
        raise InputError(message)

    rng = np.random.default_rng(0)
    tail, head, c = rng.integers(0, 20, 50), rng.integers(0, 20, 50), 10.0 ** rng.uniform(-2, 2, 50)
    true = Laplacian(tail, head, 20, c).shares()
    monkeypatch.setattr("dec.audit.adjusted.laplacian.resistances", lost)
    monkeypatch.setattr("dec.audit.adjusted.laplacian._MOST_AGAIN", 30)
    share, slack = Laplacian(tail, head, 20, c).shares()
    known = np.isfinite(share)
    assert 0 < known.sum() < 50
    assert share[known] == pytest.approx(true[0][known], rel=1e-9)
    assert slack[known] == pytest.approx(true[1][known], rel=1e-9, abs=1e-12)
    frame = pd.DataFrame({"from": tail, "to": head, "y": np.round(rng.normal(size=50), 3)})
    audit = loops(Dataset.from_frames(frame), "y", sd=0.1)
    assert np.isfinite(audit.edges["adjusted"]).all()
    assert selected_inverse.resistances is not lost


def test_a_graph_whose_factor_fills_is_solved_by_iteration_though_it_is_small():
    """Between 5,000 and 20,000 unknowns; wide weights, so that plain conjugate gradients do not do."""
    rng = np.random.default_rng(1)
    n, m = 9000, 27_000
    laplacian = Laplacian(rng.integers(0, n, m), rng.integers(0, n, m), n, 10.0 ** rng.uniform(-4, 4, m))
    assert not laplacian.gives_all
    missed = laplacian.gather @ rng.normal(size=m)
    change, _ = laplacian.change(missed)
    assert np.abs(laplacian.gather @ change + missed).max() < 1e-12 * np.abs(missed).max()


@pytest.mark.parametrize(
    ("words", "says"),
    [
        (["--sd", "0.01", "--if-scaled", "a=2", "--if-scaled", "a=3"], "names 'a' twice"),
        (["--preset", "levelling-12mm,mm_per_sqrt_km=1,mm_per_sqrt_km=9", "--length", "len", "--length-unit", "km",
          "--unit", "m"], "mm_per_sqrt_km twice"),
    ],
)  # fmt: skip
def test_the_same_thing_said_twice_is_refused(tmp_path, capsys, words, says):
    path = tmp_path / "t.csv"
    path.write_text("id,from,to,y,len\na,A,B,1.1,1\nb,B,A,-1.1,1\n", encoding="utf-8")
    assert main(["loops", str(path), "--value", "y", *words]) in (2, 3)
    assert says in capsys.readouterr().err


@pytest.mark.parametrize(
    "given",
    [
        {"sd": lambda _: 1}, {"sd": 0.1, "sidak": "no"}, {"sd": 0.1, "robust": float("nan")}, {"sd": 0.1, "unit": b"m"},
        {"sd": 0.1, "figures": ["auto"]}, {"sd": 0.1, "common": ["g"], "common_sd": 1}, {"sd": 0.1, "decimal": ";"},
        {"sd": 0.1, "unit": True}, {"value": ["y"]},
    ],
)  # fmt: skip
def test_arguments_of_another_kind_are_refused_by_name(given):
    with pytest.raises(InputError):
        loops(triangle(), **{"value": "y", **given})


@pytest.mark.parametrize(
    "asked",
    [
        {"scaled": ["a"]}, {"scaled": 0}, {"scaled": "a"}, {"turned": None}, {"turned": 0}, {"turned": {"a": 2}},
        {"left_out": True}, {"left_out": {"a": "1/3.6"}}, {"scaled": {"a": 10**5000}},
        {"scaled": {"a": Fraction(1, 10**5000)}},
    ],
)  # fmt: skip
def test_what_if_of_another_kind_is_refused(asked):
    audit = loops(triangle(), "y", sd=0.1)
    with pytest.raises(InputError):
        audit.what_if(**asked)


@pytest.mark.parametrize("given", [{"seed": -1}, {"factor": float("nan")}, {"factor": 0.0}, {"leak": float("inf")}])
def test_a_town_that_cannot_be_made_is_refused(given):
    with pytest.raises(DecError):
        town(200, factor_meters=1, leaks=1, **given)


def test_a_preset_of_another_kind_is_refused():
    for name in (3, None):
        with pytest.raises(InputError):
            preset(name)
