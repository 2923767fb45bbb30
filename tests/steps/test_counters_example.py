"""The example of the counters: it runs, its figures hold, and what it puts in is near what truly passed."""

import csv
import runpy
import sys
from fractions import Fraction
from pathlib import Path

import numpy as np
import pytest

from dec import steps

EXAMPLES = Path(__file__).parents[2] / "examples"
FILE = EXAMPLES / "data" / "counters" / "readings.csv"


@pytest.fixture
def maker(monkeypatch):
    monkeypatch.syspath_prepend(str(EXAMPLES / "data"))
    monkeypatch.setattr(sys, "dont_write_bytecode", True)
    return runpy.run_path(str(EXAMPLES / "data" / "make_counters.py"))


def test_the_maker_writes_the_same_bytes(maker, monkeypatch, tmp_path):
    monkeypatch.setattr(sys, "argv", ["make_counters.py", str(tmp_path)])
    maker["main"]()
    assert (tmp_path / "counters" / "readings.csv").read_bytes() == FILE.read_bytes()


def test_what_truly_passed_comes_back_and_what_is_put_in_lies_within_its_remainder(maker):
    with FILE.open(encoding="utf-8", newline="") as file:
        header, *rows = csv.reader(file)
    amounts = maker["true_amounts"](np.random.default_rng(maker["SEED"]))
    _, last = maker["readings"](amounts)
    name, row, first = maker["EXCHANGED"]
    stated = {(row, header.index(name) - 1): (Fraction(last, 100), Fraction(first, 100))}
    totals = steps.meter_totals(np.array([r[1:] for r in rows], dtype=object), roll_over=100_000, changes=stated)
    filled = steps.fill(totals, order=3)
    true = np.array([np.concatenate([[0], np.cumsum(amounts[meter])]) for meter in header[1:]], dtype=object).T
    lost = {(r, header.index(meter) - 1) for meter, missing in maker["LOST"].items() for r in missing}
    for place in np.ndindex(true.shape):
        assert bool(filled.is_read[place]) is (place not in lost)
        assert abs(filled.values[place] - Fraction(int(true[place]), 100)) <= filled.remainder[place]
    assert filled.remainder.astype(bool).sum() == len(lost) == 5


def test_the_example_prints_its_figures(capsys):
    runpy.run_path(str(EXAMPLES / "06_counters_of_a_day.py"), run_name="__main__")
    said = capsys.readouterr().out
    for words in (
        "as they stand: a counter must not fall, got 99998.96 and then 24.52 at row 20 of meter 0",
        "M3 at 07:30: 41.834 m3 since midnight put in, off by up to 0.705",
        "M1: 957.50 m3 in the day",
        "Mill Lane uses least from 02:00: 2.43 L/s; 1264.70 m3 all day",
    ):
        assert words in said
