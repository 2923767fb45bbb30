"""Lines, words and numbers found by whole-array steps are those that plain Python finds."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from dec.errors import InputError
from dec.files.lines import TextLines, parsed_numbers, whole_numbers

TEXTS = st.lists(
    st.sampled_from(["v", "vn", "1", "-2.5", "f", " ", "\t", "\n", "\r\n", "# x", "3e2", " "]), max_size=30
)


@given(TEXTS.map("".join))
def test_words_and_keywords_are_those_that_python_splits(text: str):
    lines = TextLines.of("t", text.encode())
    plain = text.removesuffix("\n").split("\n")
    assert lines.words.tolist() == [len(line.split()) for line in plain]
    for keyword in ("v", "vn", "#"):
        assert lines.starting_with(keyword.encode()).tolist() == [line.split()[:1] == [keyword] for line in plain]


@given(TEXTS.map("".join))
def test_what_follows_a_comment_sign_is_blank(text: str):
    lines = TextLines.of("t", text.encode(), comment=b"#")
    assert lines.words.tolist() == [len(line.split("#")[0].split()) for line in text.removesuffix("\n").split("\n")]


def test_joined_lines_keep_their_line_numbers():
    lines = TextLines.of("t", b"a \\\nb\nc\\\r\nd\ne").joined(b"\\")
    assert lines.words.tolist() == [2, 2, 1]
    assert [lines.place(k) for k in range(3)] == ["t line 1", "t line 3", "t line 5"]


@given(st.lists(st.lists(st.floats(allow_nan=False), max_size=4), min_size=1, max_size=6), st.data())
def test_chosen_lines_give_their_numbers_exactly(rows: list[list[float]], data: st.DataObject):
    chosen = np.array(data.draw(st.lists(st.booleans(), min_size=len(rows), max_size=len(rows))), dtype=bool)
    lines = TextLines.of("t", "\n".join(" ".join(map(repr, row)) for row in rows).encode())
    numbers, offsets = lines.only(chosen[: len(lines.ends)]).numbers()
    expected = [row for row, keep in zip(rows, chosen, strict=True) if keep]
    if len(lines.ends) == len(rows):
        assert numbers.tolist() == [value for row in expected for value in row]
        assert np.diff(offsets).tolist() == [len(row) for row in expected]


@pytest.mark.parametrize("word", ["x", "1,5", "1_0", "0x10", "--1", "1e", "½"])
def test_a_word_that_is_no_number_is_named_with_its_line(word: str):
    lines = TextLines.of("t.off", f"1 2\n3 {word}\n".encode(), first_line=10)
    with pytest.raises(InputError, match=f"t.off line 11: a number must stand here, found '{word}'"):
        lines.only(np.array([True, True])).numbers()


def test_an_empty_text_holds_no_number():
    # numpy.fromstring makes [-1.] of blanks, which must not get through
    assert parsed_numbers(b"  \n ", "f8").tolist() == []


@pytest.mark.parametrize("value", [1.5, np.nan, np.inf, 2.0**53])
def test_what_is_no_whole_number_is_refused(value: float):
    with pytest.raises(InputError, match=r"place 1: a corner must be a whole number, found"):
        whole_numbers(np.array([1.0, value]), "a corner", "place {}".format)
