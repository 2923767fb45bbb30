"""CSV tables: every cell as written, every line number as an editor shows it."""

import csv
import importlib.util
import io
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st

from dec.errors import InputError
from dec.files.sources import Source
from dec.files.tables import read_csv, read_parquet


def cells(text: bytes, **options: str) -> dict[str, list[str]]:
    columns, _ = read_csv(Source("t.csv", text), **options)
    return {name: column.cells.tolist() for name, column in columns.items()}


def notes(text: bytes) -> tuple[str, ...]:
    return read_csv(Source("t.csv", text))[1]


@pytest.mark.parametrize("text", ["007", "NA", "NaN", "null", "1E5", "12.0", "True", "", "-", "#N/A", "=1+1", "1,5"])
def test_a_cell_stays_the_text_that_was_written(text: str):
    assert cells(f"id;x\n{text};1\n".encode())["id"] == [text]


@pytest.mark.parametrize("end", [b"\n", b"\r\n", b"\r"])
@pytest.mark.parametrize("mark", [b"", b"\xef\xbb\xbf"])
@pytest.mark.parametrize("separator", [b",", b";", b"\t"])
@pytest.mark.parametrize("last", [True, False])
def test_the_same_table_in_any_dialect_is_the_same(end: bytes, mark: bytes, separator: bytes, last: bool):
    lines = [b"from" + separator + "tö".encode(), b"A" + separator + b"B", b"", b'"C"' + separator + b'"D"']
    text = mark + end.join(lines) + (end if last else b"")
    columns, said = read_csv(Source("t.csv", text))
    assert {name: column.cells.tolist() for name, column in columns.items()} == {"from": ["A", "C"], "tö": ["B", "D"]}
    assert columns["from"].lines.tolist() == [2, 4]
    assert said == ()


def test_the_separator_is_the_one_the_heading_uses_outside_quotation_marks():
    assert cells(b'from;to;"flow, mean, (m3,h)"\nA;B;1\n') == {"from": ["A"], "to": ["B"], "flow, mean, (m3,h)": ["1"]}


def test_names_that_pandas_takes_for_missing_stay_names():
    """Every word on pandas' own list of missing values, an empty cell aside."""
    from pandas._libs.parsers import STR_NA_VALUES

    words = sorted(STR_NA_VALUES - {""})
    assert cells(("id\n" + "\n".join(words) + "\n").encode())["id"] == words


def test_a_table_of_one_column_needs_no_separator():
    assert cells(b"id\nA\n\nB\n") == {"id": ["A", "B"]}


def test_quoted_cells_keep_separators_marks_and_line_ends_and_lines_stay_true():
    columns, _ = read_csv(Source("t.csv", b'id,x\n"a,""b""\nc",1\n\n"d\r\n\r\ne",2\nf,3\n'))
    assert columns["id"].cells.tolist() == ['a,"b"\nc', "d\r\n\r\ne", "f"]
    assert columns["id"].lines.tolist() == [2, 5, 8]
    assert columns["x"].place(2) == "t.csv line 8"


def test_numbers_are_read_with_the_decimal_sign_that_was_said():
    columns, _ = read_csv(Source("t.csv", b"id;x\na;1,5\nb;\nc;-,25e1\n"), decimal=",")
    np.testing.assert_array_equal(columns["x"].numbers(), [1.5, np.nan, -2.5])
    assert columns["x"].decimals().integers.tolist() == [15, 0, -25]


@pytest.mark.parametrize(("text", "decimal"), [("1,234", "."), ("1.234", ","), ("1.234,5", ","), ("1,234.5", ".")])
def test_a_number_that_fits_both_decimal_signs_is_refused_with_its_line(text: str, decimal: str):
    columns, _ = read_csv(Source("t.csv", f"id;x\na;2\n\nb;{text}\n".encode()), decimal=decimal)
    with pytest.raises(InputError, match=rf"t.csv line 4: x '{text}' can be read two ways.*--decimal"):
        columns["x"].numbers()


def test_a_decimal_sign_other_than_two_is_refused():
    with pytest.raises(InputError, match="decimal must be"):
        read_csv(Source("t.csv", b"id\nA\n"), decimal="'")


def test_blanks_round_a_cell_are_left_out_and_told_for_ids():
    columns, said = read_csv(Source("t.csv", "from,to ,flow\nA , B, 1.5 \n\u00a0C,B,2\n".encode()))
    assert [columns[name].cells.tolist() for name in ("from", "to", "flow")] == [["A", "C"], ["B", "B"], ["1.5", "2"]]
    assert said == (
        "t.csv: blanks round cells of from left out: 2 (first: line 2 'A ')",
        (
            "t.csv: blanks round cells of to left out: 1 (first: line 2 ' B'); "
            "names that became equal to others by that: 1"
        ),
    )


def test_a_quoted_blank_is_a_blank_too():
    columns, said = read_csv(Source("t.csv", b'id,x\n" A",1\n'))
    assert columns["id"].cells.tolist() == ["A"]
    assert len(said) == 1


def test_names_in_two_unicode_spellings_stay_apart_and_are_told():
    text = "from,to\nZu\u0308rich,B\nZ\u00fcrich,B\n".encode()
    columns, said = read_csv(Source("t.csv", text))
    assert len(set(columns["from"].cells)) == 2
    assert said == ("t.csv: names of from in two Unicode spellings, which count as different: 1 (Zürich)",)


def test_a_last_column_without_heading_and_cells_is_left_out_and_told():
    text = b"from,to,\nA,B,\nB,C,\n"
    assert list(cells(text)) == ["from", "to"]
    assert notes(text) == ("t.csv: the last column has no heading and no entries and was left out",)


def test_rows_of_separators_alone_are_skipped_and_told_and_lines_stay_true():
    columns, said = read_csv(Source("t.csv", b"from;to\nA;B\n;\n;\n\nB;C\n"))
    assert columns["to"].lines.tolist() == [2, 6]
    assert said == ("t.csv: rows without any entry skipped: 2 (first: line 3)",)


@pytest.mark.parametrize(
    ("text", "words"),
    [
        (b'id,x\n5" pipe,1\n', "line 2: a quotation mark must enclose"),
        (b'id,x\na, "b"\n', "line 2: a quotation mark"),
        (b'id,x\na,"b" \n', "line 2: a quotation mark"),
        (b'id,x\n\na,"b""\n', "line 3: a quotation mark"),
        (b'id,x\n"a\nb",c"\n', "line 3: a quotation mark"),
        (b'id,x\n"a"b,c\n', "line 2: a quotation mark"),
        (b'id,"x\na,b\n', "line 1: a quotation mark"),
        (b'"', "line 1: a quotation mark"),
    ],
)
def test_a_quotation_mark_out_of_place_is_refused_with_its_line(text: bytes, words: str):
    with pytest.raises(InputError, match=words):
        read_csv(Source("t.csv", text))


@pytest.mark.parametrize("mark", [b"\xff\xfe", b"\xfe\xff"])
def test_utf16_is_named(mark: bytes):
    codec = "utf-16-le" if mark == b"\xff\xfe" else "utf-16-be"
    for text in (mark + "id,x\nA,1\n".encode(codec), "id,x\nA,1\n".encode(codec)):
        with pytest.raises(InputError, match="it is UTF-16; save it as CSV UTF-8"):
            read_csv(Source("t.csv", text))


def test_a_heading_of_two_lines_is_refused():
    with pytest.raises(InputError, match=r"heading 'a\\nb' must be one line"):
        read_csv(Source("t.csv", b'"a\nb",c\n1,2\n'))


def test_a_long_row_names_its_line_and_how_many_more_there_are():
    with pytest.raises(InputError, match=r"line 3: .* 2 cells like the heading, this one \(and 1 more\) has 3"):
        read_csv(Source("t.csv", b"a,b\n1,2\n1,2,3\n1,2\n1,2,3\n"))


WORDS = st.text(st.sampled_from("ab0.- \t\n\",;'é\u0301"), max_size=5)


def _as_csv(rows: list[list[str]], separator: str, quoting: int, end: str) -> bytes:
    out = io.StringIO()
    csv.writer(out, delimiter=separator, quoting=quoting, lineterminator=end).writerows(rows)
    return out.getvalue().encode()


@given(
    rows=st.integers(1, 4).flatmap(lambda n: st.lists(st.lists(WORDS, min_size=n, max_size=n), min_size=1, max_size=6)),
    separator=st.sampled_from(",;\t"),
    quoting=st.sampled_from([csv.QUOTE_MINIMAL, csv.QUOTE_ALL]),
    end=st.sampled_from(["\n", "\r\n"]),
)
def test_any_table_written_by_the_standard_library_reads_back(rows, separator: str, quoting: int, end: str):
    """Against Python's csv module, cell by cell and line by line: the slow, obvious reference."""
    heading = [f"column {k}" for k in range(len(rows[0]))]
    separator = separator if len(heading) > 1 else ","  # one heading shows no separator, and a comma is taken
    text = _as_csv([heading, *rows], separator, quoting, end)
    reader = csv.reader(io.StringIO(text.decode(), newline=""), delimiter=separator)
    expected, lines, before = [], [], 0
    for row in reader:
        if row and (any(row) or (len(row) == 1 and quoting == csv.QUOTE_ALL)):
            expected.append([cell.strip() for cell in row])
            lines.append(before + 1)
        before = reader.line_num
    _compare(text, expected, lines)


def _compare(text: bytes, expected: list[list[str]], lines: list[int]) -> None:
    rows = [(row, line) for row, line in zip(expected[1:], lines[1:], strict=True)]
    try:
        columns, _ = read_csv(Source("t.csv", text))
    except InputError as error:
        assert "no rows" in str(error)  # noqa: PT017 - the only refusal that a well-formed table can meet
        assert not [row for row, _ in rows if any(row)]
        return
    got = list(zip(*(column.cells.tolist() for column in columns.values()), strict=True))
    got_lines = next(iter(columns.values())).lines.tolist()
    kept = [(list(row), line) for row, line in zip(got, got_lines, strict=True) if any(row)]
    assert kept == [(row, line) for row, line in rows if any(row)]


@given(st.binary(max_size=60))
def test_any_bytes_are_a_table_or_one_line_of_error(data: bytes):
    try:
        read_csv(Source("t.csv", data))
    except InputError as error:
        assert str(error).isprintable()  # noqa: PT017


def test_parquet_without_pyarrow_says_what_to_install(monkeypatch: pytest.MonkeyPatch):
    monkeypatch.setattr("pandas.read_parquet", _raise(ImportError("pyarrow")))
    with pytest.raises(InputError, match="install pyarrow"):
        read_parquet(Source("t.parquet", b"PAR1"))


def _raise(error: Exception) -> Callable[..., None]:
    def raising(*_: object, **__: object) -> None:
        raise error

    return raising


def test_parquet_columns_keep_numbers_and_make_ids_text(monkeypatch: pytest.MonkeyPatch):
    """The frame is handed in, so that this runs without pyarrow; the next test reads a real file where it is there."""
    import pandas as pd

    frame = pd.DataFrame({"from": ["A", None], "to": [7, 8], "flow": [1.5, np.nan], "n": [1, 2], "kind": ["x", None]})
    monkeypatch.setattr("pandas.read_parquet", lambda *_, **__: frame)
    columns, _ = read_parquet(Source("t.parquet", b"PAR1"))
    assert columns["from"].cells.tolist() == ["A", ""]
    assert columns["to"].cells.tolist() == ["7", "8"]
    assert columns["n"].cells.dtype == np.int64
    assert columns["kind"].cells.tolist() == ["x", ""]
    np.testing.assert_array_equal(columns["flow"].numbers(), [1.5, np.nan])
    assert columns["flow"].place(1) == "t.parquet row 1"


def test_parquet_ids_in_floating_point_are_refused(monkeypatch: pytest.MonkeyPatch):
    import pandas as pd

    monkeypatch.setattr("pandas.read_parquet", lambda *_, **__: pd.DataFrame({"id": [1.0, 2.0]}))
    with pytest.raises(InputError, match="save ids as text"):
        read_parquet(Source("t.parquet", b"PAR1"))


@pytest.mark.skipif(importlib.util.find_spec("pyarrow") is None, reason="pyarrow is an extra")
def test_a_parquet_file_reads_back():
    import pandas as pd

    out = io.BytesIO()
    pd.DataFrame({"from": ["007"], "to": ["NA"], "flow": [1.5]}).to_parquet(out)
    columns, _ = read_parquet(Source("t.parquet", out.getvalue()))
    assert columns["from"].cells.tolist() == ["007"]
    assert columns["flow"].numbers().tolist() == [1.5]
    with pytest.raises(InputError, match="cannot be read as Parquet"):
        read_parquet(Source("t.parquet", out.getvalue()[:40]))


@pytest.mark.skipif(importlib.util.find_spec("pyarrow") is None, reason="pyarrow is an extra")
def test_parquet_integers_beside_empty_cells_stay_exact(tmp_path: Path):
    frame = pd.DataFrame({"from": ["A", "B"], "to": ["B", "A"], "flow": pd.array([2**60 + 1, None], dtype="Int64")})
    frame.to_parquet(tmp_path / "e.parquet")
    columns, _ = read_parquet(Source("e.parquet", (tmp_path / "e.parquet").read_bytes()))
    decimals = columns["flow"].decimals()
    assert (int(decimals.integers[0]), decimals.present.tolist()) == (2**60 + 1, [True, False])


@pytest.mark.parametrize("end", ["\n", "\r\n", "\r"])
def test_a_carriage_return_in_a_quoted_cell_stays_whatever_ends_the_lines(end: str):
    """Two names that differ by it only stay two names, as the csv module keeps them."""
    names = ["a\rb", "a b"] if end == "\r" else ["a\rb", "a\nb", "a\r\nb"]
    rows = ["id,x", *(f'"{name}",1' for name in names), "z,2"]
    text = end.join(rows) + end
    expected = [row[0] for row in csv.reader(io.StringIO(text, newline="")) if row]
    columns, _ = read_csv(Source("t.csv", text.encode()))
    assert columns["id"].cells.tolist() == expected[1:] == [*names, "z"]
    assert columns["x"].cells.tolist() == ["1"] * len(names) + ["2"]
