"""Tables become a complex with named columns."""

import numpy as np
import pandas as pd
import pytest

from dec.calculus.complex import Complex
from dec.calculus.dataset import Dataset, Field
from dec.errors import InputError

EDGES = pd.DataFrame({"from": ["A", "B", "A"], "to": ["B", "C", "B"], "id": ["p", "q", "r"], "flow": ["1.50", "", "2"]})
NODES = pd.DataFrame({"id": ["C", "B", "A", "D"], "x": [0.0, 1.0, 2.0, 3.0], "y": [0, 0, 1, 1], "flow": [1, 2, 3, 4]})


def test_without_a_node_table_vertices_come_in_the_order_the_edges_name_them():
    net = Dataset.from_frames(EDGES)
    K = net.complex
    assert K.vertex_ids.tolist() == ["A", "B", "C"]
    assert K.edge_ids.tolist() == ["p", "q", "r"]
    assert (K.tail.tolist(), K.head.tolist()) == ([0, 1, 0], [1, 2, 1])
    assert K.points is None
    flow = net.cochain("flow").values
    assert flow[[0, 2]].tolist() == [1.5, 2.0]
    assert np.isnan(flow[1])


def test_a_node_table_gives_the_vertices_their_order_and_their_places():
    K = Dataset.from_frames(EDGES, NODES).complex
    assert K.vertex_ids.tolist() == ["C", "B", "A", "D"]
    assert (K.tail.tolist(), K.head.tolist()) == ([2, 1, 2], [1, 0, 1])
    assert K.points.tolist() == [[0, 0], [1, 0], [2, 1], [3, 1]]
    missing = NODES.assign(y=[0, np.nan, 1, 1])
    assert Dataset.from_frames(EDGES, missing).complex.points is None


def test_edges_without_ids_are_numbered_from_one():
    assert Dataset.from_frames(EDGES.drop(columns="id")).complex.edge_ids.tolist() == ["1", "2", "3"]


def test_ids_are_text_as_written_and_integers_their_digits():
    net = Dataset.from_frames(pd.DataFrame({"from": ["007", "NA"], "to": ["7", "007"], "q": [1, 2]}))
    assert net.complex.vertex_ids.tolist() == ["007", "7", "NA"]
    assert Dataset.from_frames(pd.DataFrame({"from": [1], "to": [2]})).complex.vertex_ids.tolist() == ["1", "2"]


@pytest.mark.parametrize(
    ("values", "expected"),
    [
        (pd.array([1, None, 3], dtype="Int64"), [1.0, np.nan, 3.0]),
        (pd.array([0.5, None, 3], dtype="Float64"), [0.5, np.nan, 3.0]),
        (np.array([1, 2, 3], np.uint8), [1.0, 2.0, 3.0]),
        (np.array([1, 2, 2**63], np.uint64), [1.0, 2.0, 2.0**63]),
    ],
)
def test_nullable_and_unsigned_columns_keep_their_values(values, expected):
    net = Dataset.from_frames(EDGES.assign(q=values))
    assert np.array_equal(net.cochain("q").values, expected, equal_nan=True)


def test_unsigned_integers_beyond_int64_stay_exact():
    net = Dataset.from_frames(EDGES.assign(q=np.array([1, 2, 2**64 - 1], np.uint64)))
    assert net.column("q", 1).decimals().integers.tolist() == [1, 2, 2**64 - 1]


@pytest.mark.parametrize(
    ("edges", "nodes", "message"),
    [
        (EDGES.drop(columns="from"), None, "edges: a column 'from' is needed; there are to, id, flow"),
        (EDGES.rename(columns={"from": "form"}), None, "a column 'from' is needed; .* did you mean 'form'?"),
        (EDGES.assign(id=["p", "q", "p"]), None, r"edges row 2: edge id 'p' is used before \(edges row 0\)"),
        (EDGES.assign(to=["B", "", "B"]), None, "edges row 1: to is empty; every row needs one"),
        (EDGES.assign(to=["B", "E", "B"]), NODES, "edges row 1: to names 'E', which the node table does not list"),
        (EDGES, NODES.assign(id=list("ABCA")), "nodes row 3: node id 'A' is used before"),
        (EDGES, NODES.drop(columns="id"), "nodes: a column 'id' is needed"),
        (EDGES, NODES.assign(x=["0", "1", "east", "3"]), "nodes row 2: x 'east' is not a number"),
        (EDGES.head(0), None, "edges has columns but no rows"),
        ([("A", "B")], None, "edges must be a pandas DataFrame, got list"),
        (EDGES.assign(**{"from": [1.0, 2.0, 1.5]}), None, "from must hold names, found floating-point numbers"),
        (pd.concat([EDGES, EDGES[["flow"]]], axis=1), None, "column 'flow' stands there twice"),
    ],
)
def test_frames_that_make_no_network_are_refused_with_their_row(edges, nodes, message):
    with pytest.raises(InputError, match=message) as caught:
        Dataset.from_frames(edges, nodes)
    assert "\n" not in str(caught.value)


def test_a_column_is_asked_by_name_and_by_degree_where_both_tables_have_it():
    net = Dataset.from_frames(EDGES, NODES)
    assert net.cochain("flow", 0).values.tolist() == [1, 2, 3, 4]
    assert net.cochain("x").degree == 0
    with pytest.raises(InputError, match="column 'flow' exists on vertices and edges; give the degree"):
        net.cochain("flow")
    with pytest.raises(InputError, match=r"no column 'flwo' among the edges; .* did you mean 'flow'?"):
        net.cochain("flwo", 1)
    with pytest.raises(InputError, match="no column 'q' among the edges"):
        net.cochain("q")


def test_a_field_is_asked_by_name_and_by_place_where_it_has_two():
    K = Complex.from_faces([[0, 1, 2]])
    at = {place: Field("U", place, np.zeros((n, 3))) for place, n in (("vertices", 3), ("cells", 1))}
    part = Dataset(K, fields={"U": at, "p": {"cells": at["cells"]}})
    assert part.field("U", "cells") is at["cells"]
    assert part.field("p") is at["cells"]
    with pytest.raises(InputError, match="given at vertices and at cells; say which"):
        part.field("U")
    with pytest.raises(InputError, match="field 'p' is not given at vertices but at cells"):
        part.field("p", "vertices")
    with pytest.raises(InputError, match="no field 'u'; there are U, p"):
        part.field("u")
