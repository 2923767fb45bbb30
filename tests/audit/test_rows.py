"""Rows of an audit: JSON made by columns is that of the objects, and a view needs only the rows it shows."""

import io
import json

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from rich.console import Console

from dec.audit.questions import balance, loops
from dec.audit.record import Audit
from dec.audit.rows import Rows, largest_first, shown_rows
from dec.calculus.complex import Complex, grid
from dec.calculus.dataset import Dataset, Field
from dec.demo.town import town
from dec.report.terminal import SHOWN, audit_view


def shown(audit: dict) -> str:
    console = Console(file=io.StringIO(), width=80, highlight=False, markup=False, emoji=False)
    for part in audit_view(audit):
        console.print(part)
    return console.file.getvalue()


def town_audits() -> list[Audit]:
    made = town(700, seed=2, zones=2, reversed_meters=1, factor_meters=1, leaks=1)
    data = Dataset.from_frames(made.edges, made.nodes)
    return [
        balance(data, "flow", "1%+0.05", "open", "demand", unit="L/s"), balance(data, "flow", None, "open", "demand"),
        loops(data, "dh", "dh_sd", "height"), loops(data, "dh", "dh_sd"), loops(data, "dh", 0.001),
    ]  # fmt: skip


def mesh_audits() -> list[Audit]:
    flat, solid = grid((12, 9)), grid((4, 4, 4), origin=-1e6)
    for K in (flat, solid):
        assert K.points is not None
    found = []
    for K, dim in ((flat, 2), (solid, 3)):
        field = Field("U", "vertices", np.random.default_rng(3).normal(size=(K.counts[0], dim)))
        data = Dataset(K, fields={"U": {"vertices": field}})
        found += [balance(data, field="U"), loops(data, field="U")]
    return found


@pytest.fixture(scope="module")
def audits() -> list[Audit]:
    return town_audits() + mesh_audits()


def test_the_text_view_of_the_shown_rows_is_that_of_all_rows(audits: list[Audit]):
    for audit in audits:
        assert shown(audit.to_dict(rows=SHOWN)) == shown(audit.to_dict())


def test_no_table_hands_over_more_rows_than_asked_and_the_true_counts_go_with_it(audits: list[Audit]):
    for audit in audits:
        cut, full = audit.to_dict(rows=SHOWN), audit.to_dict()
        assert set(cut) - {"shown"} == set(full)
        named = {entry["id"] for entry in full["suspects"] + ((full.get("errors") or {}).get("found") or [])}
        for name in audit.tables:
            always = sum(row["id"] in named for row in full[name]) if name in ("edges", "at_vertices") else 0
            assert len(cut[name]) == max(min(SHOWN, len(full[name])), always)
            assert all(row in full[name] for row in cut[name])
            rows = [row for row in full[name] if row.get("residual") is not None] if name == "vertices" else []
            assert cut["shown"]["of"][name] == len(rows or full[name])
        assert {key: value for key, value in cut.items() if key not in {*audit.tables, "loops", "shown"}} == {
            key: value for key, value in full.items() if key not in {*audit.tables, "loops"}
        }


def test_json_made_by_columns_is_the_json_of_the_objects(audits: list[Audit]):
    for audit in audits:
        assert audit.to_json() == json.dumps(audit.to_dict(), ensure_ascii=False, allow_nan=False)
        assert json.loads(audit.to_json(indent=1)) == json.loads(audit.to_json())


CELLS = {
    "text": st.text(max_size=5), "float": st.floats(), "whole": st.integers(-(2**63), 2**63 - 1), "flag": st.booleans(),
    "mixed": st.one_of(st.none(), st.text(max_size=3), st.floats(), st.integers(), st.booleans()),
    "nested": st.one_of(st.lists(st.floats(), max_size=2), st.dictionaries(st.integers(), st.text(max_size=2))),
}  # fmt: skip
TYPES = {"float": np.float64, "whole": np.int64, "flag": np.bool_}


@given(rows=st.lists(st.fixed_dictionaries(CELLS), max_size=4), name=st.text(max_size=4))
def test_rows_of_any_kind_have_the_same_json_both_ways(rows: list[dict], name: str):
    columns = {}
    for kind in CELLS:
        column = np.empty(len(rows), dtype=TYPES.get(kind, object))
        for k, row in enumerate(rows):
            column[k] = row[kind]
        columns[name + "{}%s" + kind] = column
    table = Rows(columns)
    assert table.json() == json.dumps(table.objects(), ensure_ascii=False, allow_nan=False)


@given(st.lists(st.sampled_from([0.0, 1.0, 2.0, 3.5, np.inf]), max_size=12), st.integers(0, 14))
def test_the_largest_come_first_and_of_equals_the_earlier(values: list[float], count: int):
    expected = sorted(range(len(values)), key=lambda k: -values[k])[:count]
    assert largest_first(np.array(values), count).tolist() == expected


def test_vertices_are_those_that_balance_worst_first():
    table = {
        "id": np.array(list("ABCD"), dtype=object), "residual": np.array([1.0, np.nan, -3.0, 2.0]),
        "statistic": np.array([np.nan, np.nan, 2.5, 4.0]),
    }  # fmt: skip
    rows, total = shown_rows("vertices", table, (), 2)
    assert (rows.columns["id"].tolist(), total) == (["D", "C"], 3)


def test_edges_that_are_named_come_first_and_then_the_loudest():
    table = {"id": np.array(list("ABCDE"), dtype=object), "statistic": np.array([np.nan, 3.0, 1.0, 4.0, np.nan])}
    for named, count, expected in (("CE", 3, "CED"), ("", 2, "DB"), ("ABC", 1, "ABC"), ("X", 9, "DBCAE")):
        rows, total = shown_rows("edges", table, named, count)
        assert ("".join(rows.columns["id"]), total) == (expected, 5)


def test_an_audit_of_nothing_has_rows_of_nothing():
    data = Dataset(Complex.from_edges([], [], 2))
    table = Rows({"id": np.empty(0, dtype=object)})
    assert (table.json(), table.objects(), data.complex.counts) == ("[]", [], (2, 0))
