"""The record of a solution: its JSON, its words, its HTML."""

import json
from html.parser import HTMLParser

import numpy as np
import pytest

from dec.calculus.complex import Complex
from dec.solvers.poisson import solve_poisson

KEYS = ["schema", "method", "because", "residual", "error_bound", "gauge", "vertices", "edges"]


@pytest.fixture
def solution():
    K = Complex.from_edges([0, 1, 0], [1, 2, 2], vertex_ids=["A", "B", "C"], edge_ids=["ab", "bc", "ac"])
    return solve_poisson(K, {"A": 3.0}, fixed={"C": 1.0})


def test_json_has_the_promised_keys_in_order_and_one_row_a_cell(solution):
    result = json.loads(solution.to_json())
    assert list(result)[: len(KEYS)] == KEYS
    assert result["schema"] == "dec.solve/1"
    assert result["vertices"] == [
        {"id": "A", "potential": 3.0},
        {"id": "B", "potential": 2.0},
        {"id": "C", "potential": 1.0},
    ]
    assert result["edges"] == [{"id": "ab", "flow": 1.0}, {"id": "bc", "flow": 1.0}, {"id": "ac", "flow": 2.0}]
    assert result["asked"] == {"rtol": 1e-8, "method": "auto", "unbalanced": "refuse", "exponent": 1.0}
    assert result["energy"][0] <= 6 <= result["energy"][1]
    assert all(isinstance(result[key], str) and result[key] for key in ("method", "because", "gauge"))
    assert result["not_shown"]


def test_vertices_without_ids_are_named_by_number_and_columns_are_lists():
    result = solve_poisson(Complex.from_edges([0], [1]), [[1, 2], [-1, -2.0]]).to_dict()
    assert result["vertices"] == [{"id": "0", "potential": [0.5, 1.0]}, {"id": "1", "potential": [-0.5, -1.0]}]
    assert result["error_bound"] == [0.0, 0.0]
    json.dumps(result, allow_nan=False)


def test_a_number_that_is_not_finite_becomes_null(solution):
    from dataclasses import replace

    changed = replace(solution, residual=np.inf, error_bound=None, energy=(np.float64(0), np.nan))
    result = json.loads(changed.to_json())
    assert (result["residual"], result["error_bound"], result["energy"]) == (None, None, [0.0, None])


def test_repr_says_method_residual_and_bound(solution):
    text = repr(solution)
    assert text.startswith("<Solution of 3 potentials: ")
    assert "residual" in text
    assert "error at most" in text
    columns = solve_poisson(Complex.from_edges([0], [1]), [[1, 2], [-1, -2.0]])
    assert "2 potentials, 2 columns" in repr(columns)


def test_html_is_small_well_formed_and_escaped(solution):
    from dataclasses import replace

    class Tags(HTMLParser):
        def __init__(self):
            super().__init__()
            self.open, self.seen = [], set()

        def handle_starttag(self, tag, attrs):
            self.open.append(tag)
            self.seen.add(tag)

        def handle_endtag(self, tag):
            assert self.open.pop() == tag

    html = replace(solution, gauge="<script>alert(1)</script>", notes=("a & b",) * 9)._repr_html_()
    parser = Tags()
    parser.feed(html)
    assert parser.open == []
    assert parser.seen == {"table", "caption", "tr", "th", "td"}
    assert "&lt;script&gt;" in html
    assert html.count("a &amp; b") == 3
    assert len(html) < 2000
