"""CSV out reads back as the same text and the same numbers, here and in Python's csv module."""

import csv
import io
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from dec.errors import OutputError
from dec.files import csv_bytes
from dec.files.sources import Source
from dec.files.tables import read_csv

TEXT = st.text(st.characters(exclude_categories=["Cs"], exclude_characters="\0"), max_size=8)


@given(st.lists(st.tuples(TEXT, st.floats(allow_infinity=False)), min_size=1, max_size=6))
def test_text_and_floats_read_back_in_the_csv_module(rows: list[tuple[str, float]]):
    data = csv_bytes({"id": [text for text, _ in rows], "x": np.array([value for _, value in rows])})
    got = list(csv.reader(io.StringIO(data.decode(), newline="")))
    assert got[0] == ["id", "x"]
    assert [row[0] for row in got[1:]] == [text for text, _ in rows]
    numbers = np.array([float(row[1]) if row[1] else np.nan for row in got[1:]])
    np.testing.assert_array_equal(numbers, [value for _, value in rows])


@given(
    st.lists(st.tuples(TEXT.map(str.strip), st.floats(allow_infinity=False, allow_nan=False)), min_size=1, max_size=6)
)
def test_text_and_floats_read_back_in_our_own_reader(rows: list[tuple[str, float]]):
    data = csv_bytes({"name": [text for text, _ in rows], "x": [value for _, value in rows]})
    columns, _ = read_csv(Source("t.csv", data))
    assert columns["name"].cells.tolist() == [text.replace("\r\n", "\n") for text, _ in rows]
    assert columns["x"].numbers().tolist() == [value for _, value in rows]


def test_each_kind_of_value_is_written_in_one_way():
    values = [
        None,
        np.nan,
        -0.0,
        1e22,
        0.1,
        np.float64(2.5),
        np.int64(7),
        10**30,
        True,
        np.False_,
        Fraction(1, 3),
        "NA",
        "",
    ]
    lines = csv_bytes({"x": values, "y": [0] * len(values)}).decode().splitlines()[1:]
    assert [line.rpartition(",")[0] for line in lines] == [
        "", "", "-0.0", "1e+22", "0.1", "2.5", "7", str(10**30), "true", "false", "1/3", "NA", "",
    ]  # fmt: skip


@given(st.lists(st.text(st.sampled_from('ab ,"\r\n\t\0\u00a0\u2003é'), max_size=4), min_size=1, max_size=6))
def test_a_column_of_text_is_quoted_as_each_text_alone_is(texts: list[str]):
    together = csv_bytes({"id": texts, "x": [0] * len(texts)}).decode()
    alone = [csv_bytes({"id": [text], "x": [0]}).decode().removeprefix("id,x\n") for text in texts]
    assert together == "id,x\n" + "".join(alone)
    mixed = csv_bytes({"id": [*texts, None], "x": [0] * len(texts) + [0]}).decode()
    assert mixed == together + ",0\n"


def test_a_single_column_keeps_its_empty_cells():
    data = csv_bytes({"id": ["A", "", "B"]})
    assert data == b'id\nA\n""\nB\n'
    assert read_csv(Source("t.csv", data))[0]["id"].cells.tolist() == ["A", "", "B"]


@pytest.mark.parametrize("text", ["=1+1", "+a", "-a", "@x", "\tx", "\rx", '=HYPERLINK("a")'])
def test_formulas_are_guarded_only_on_request(text: str):
    def first(*, guard: bool) -> str:
        data = csv_bytes({"note": [text], "x": [1]}, guard=guard)
        return list(csv.reader(io.StringIO(data.decode(), newline="")))[1][0]

    assert first(guard=False) == text
    assert first(guard=True) == "'" + text


@pytest.mark.parametrize("value", [-1.5, "-1.5", "+2", "-.5e-3", "a=b", -3])
def test_numbers_and_plain_text_are_never_guarded(value: object):
    assert csv_bytes({"x": [value]}, guard=True) == csv_bytes({"x": [value]})


def test_columns_of_different_length_infinity_and_broken_text_are_refused():
    with pytest.raises(OutputError, match=r"equal length, got \{'a': 1, 'b': 2\}"):
        csv_bytes({"a": [1], "b": [1, 2]})
    with pytest.raises(OutputError, match="must be Unicode text"):
        csv_bytes({"a": ["\udcff"]})
    for column in (np.array([0.0, np.inf]), [0.0, -np.inf], [None, np.float64("inf")]):
        with pytest.raises(OutputError, match="column x row 1: a table holds finite numbers"):
            csv_bytes({"x": column})
