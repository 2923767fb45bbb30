"""Datasets from frames and tables: ids are text, nothing is guessed, and every refusal names its place."""

import copy
import pickle
from decimal import Decimal

import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st

from dec.calculus.complex import Complex
from dec.calculus.dataset import Dataset, Field, Input
from dec.errors import InputError


def frames(edges: dict, nodes: dict | None = None) -> Dataset:
    return Dataset.from_frames(pd.DataFrame(edges), None if nodes is None else pd.DataFrame(nodes))


def test_ids_are_text_as_written():
    net = frames({"id": ["007", "NA"], "from": ["<script>", "nan"], "to": ["nan", "None"]})
    assert net.complex.vertex_ids.tolist() == ["<script>", "nan", "None"]
    assert net.complex.edge_ids.tolist() == ["007", "NA"]


def test_whole_numbers_as_ids_become_text_and_edges_without_ids_are_counted_from_one():
    net = frames({"from": [1, 2], "to": [2, 3]}, {"id": [3, 2, 1]})
    assert net.complex.vertex_ids.tolist() == ["3", "2", "1"]
    assert net.complex.tail.tolist() == [2, 1]
    assert net.complex.edge_ids.tolist() == ["1", "2"]


def test_vertices_come_in_the_order_of_the_node_table_or_else_of_first_mention():
    assert frames({"from": ["B", "A"], "to": ["A", "C"]}).complex.vertex_ids.tolist() == ["B", "A", "C"]
    net = frames({"from": ["B"], "to": ["A"]}, {"id": ["A", "B", "Z"]})
    assert net.complex.vertex_ids.tolist() == ["A", "B", "Z"]


@given(st.lists(st.tuples(st.sampled_from("ABCDE"), st.sampled_from("ABCDE")), min_size=1, max_size=8), st.booleans())
def test_ends_are_numbered_as_by_looking_each_up_in_a_list(pairs: list[tuple[str, str]], with_nodes: bool):
    table = {"from": [a for a, _ in pairs], "to": [b for _, b in pairs]}
    names = list("EXDCBA") if with_nodes else list(dict.fromkeys(name for pair in pairs for name in pair))
    network = frames(table, {"id": names} if with_nodes else None).complex
    assert network.vertex_ids.tolist() == names
    assert network.tail.tolist() == [names.index(a) for a, _ in pairs]
    assert network.head.tolist() == [names.index(b) for _, b in pairs]


def test_self_loops_and_parallel_edges_stay():
    net = frames({"from": ["A", "A", "A"], "to": ["B", "B", "A"]})
    assert (net.complex.tail.tolist(), net.complex.head.tolist()) == ([0, 0, 0], [1, 1, 0])


ONE_EDGE = {"from": ["A"], "to": ["B"]}
TWO_EDGES = {"from": ["A", "B"], "to": ["B", "C"]}


@pytest.mark.parametrize(
    ("edges", "nodes", "says"),
    [
        (
            {"from": ["A"], "too": ["B"]},
            None,
            "edges: a column 'to' is needed; there are from, too; did you mean 'too'?",
        ),
        (ONE_EDGE, {"name": ["A"]}, "nodes: a column 'id' is needed"),
        ({"id": ["x", "x"], **TWO_EDGES}, None, "edges row 1: edge id 'x' is used before (edges row 0)"),
        ({"id": ["x", None], **TWO_EDGES}, None, "edges row 1: id is empty"),
        ({"from": ["A", np.nan], "to": ["B", "C"]}, None, "edges row 1: from is empty"),
        ({"from": ["A", "B"], "to": ["B", " "]}, None, "edges row 1: to is empty"),
        ({"from": [1.0, 2.0], "to": [2, 3]}, None, "edges: from must hold names, found floating-point numbers"),
        (
            {"from": ["J12"], "to": ["J 13"]},
            {"id": ["J12", "J13"]},
            "edges row 0: to names 'J 13', which the node table",
        ),
        ({"from": ["J12"], "to": ["J 13"]}, {"id": ["J12", "J13"]}, "does not list; close names: 'J13'"),
        (ONE_EDGE, {"id": ["A", "B", "A"]}, "nodes row 2: node id 'A' is used before (nodes row 0)"),
        ({"from": [], "to": []}, None, "edges has columns but no rows"),
        (ONE_EDGE, {"id": []}, "nodes has columns but no rows"),
        ({}, None, "a column 'from' is needed; there are none"),
        (ONE_EDGE, {"id": ["A", "B"], "x": ["1", "east"], "y": ["0", "0"]}, "nodes row 1: x 'east' is not a number"),
    ],
)
def test_frames_that_cannot_be_used_are_refused_by_name_and_place(edges: dict, nodes: dict | None, says: str):
    with pytest.raises(InputError) as caught:
        frames(edges, nodes)
    assert says in str(caught.value)


@pytest.mark.parametrize("given", [None, {"from": ["A"], "to": ["B"]}, [["A", "B"]]])
def test_anything_but_a_frame_is_refused(given):
    with pytest.raises(InputError, match="edges must be a pandas DataFrame, got"):
        Dataset.from_frames(given)


def test_two_columns_of_one_name_are_refused():
    frame = pd.DataFrame([["A", "B", 1, 2]], columns=["from", "to", "flow", "flow"])
    with pytest.raises(InputError, match="column 'flow' stands there twice"):
        Dataset.from_frames(frame)


@pytest.mark.parametrize(
    ("values", "integers", "places"),
    [
        (pd.array([1, None], dtype="Int64"), [1, 0], 0),
        (pd.array([1.5, None], dtype="Float64"), [15, 0], 1),
        (np.array([2**64 - 1, 3], dtype=np.uint64), [2**64 - 1, 3], 0),
        (np.array([-128, 127], dtype=np.int8), [-128, 127], 0),
        ([Decimal("0.10"), None], [10, 0], 2),
        (["1.50", ""], [150, 0], 2),
        (pd.Series([1e-7, "2"], dtype=object), [1, 20000000], 7),
    ],
)
def test_value_columns_of_any_kind_keep_every_digit(values, integers: list[int], places: int):
    found = frames({"from": ["A", "A"], "to": ["B", "B"], "y": values}).column("y", 1).decimals()
    assert (found.integers.tolist(), found.places) == (integers, places)


def test_a_column_that_is_not_there_is_refused_with_the_nearest_name():
    net = frames({"from": ["A"], "to": ["B"], "flow": [1]})
    with pytest.raises(InputError, match=r"no column 'flwo' among the edges; .* did you mean 'flow'"):
        net.column("flwo", 1)
    with pytest.raises(InputError, match="no column 'h' among the vertices: there is no node table"):
        net.column("h", 0)
    with pytest.raises(InputError, match="no column 5 among the edges"):
        net.column(5, 1)


def test_cochains_have_nan_where_nothing_was_measured_and_need_a_degree_for_a_shared_name():
    edges = {"from": ["A", "B"], "to": ["B", "A"], "q": ["1.5", ""]}
    net = frames(edges, {"id": ["A", "B"], "q": [1, 2], "h": [3, 4]})
    np.testing.assert_array_equal(net.cochain("q", 1).values, [1.5, np.nan])
    assert net.cochain("h").degree == 0
    with pytest.raises(InputError, match="column 'q' exists on vertices and edges; give the degree"):
        net.cochain("q")


def test_points_need_x_and_y_of_every_node():
    edges = {"from": ["A"], "to": ["B"]}
    net = frames(edges, {"id": ["A", "B"], "x": ["0", "3"], "y": [0, 4], "z": [1, 1]})
    assert net.complex.points.tolist() == [[0, 0, 1], [3, 4, 1]]
    assert frames(edges, {"id": ["A", "B"], "x": ["0", ""], "y": [0, 4]}).complex.points is None
    assert frames(edges, {"id": ["A", "B"], "x": ["0", "1"]}).complex.points is None


def test_fields_are_found_by_name_and_place():
    network = frames({"from": ["A"], "to": ["B"]})
    at_vertices, at_cells = (Field("U", at, np.zeros((2, 3))) for at in ("vertices", "cells"))
    both = Dataset(network.complex, fields={"U": {"vertices": at_vertices, "cells": at_cells}})
    assert both.field("U", "cells") is at_cells
    with pytest.raises(InputError, match="given at vertices and at cells; say which"):
        both.field("U")
    one = Dataset(network.complex, fields={"U": {"cells": at_cells}})
    assert one.field("U") is at_cells
    with pytest.raises(InputError, match="not given at vertices but at cells"):
        one.field("U", "vertices")
    with pytest.raises(InputError, match="no field 'V'; there are U"):
        one.field("V")


def test_inputs_are_kept_with_the_data():
    read = Input("edges.csv", "0" * 64, 10)
    assert frames({"from": ["A"], "to": ["B"]}).with_inputs(read).inputs == (read,)


def test_a_32_bit_float_counts_as_the_decimal_that_prints_it():
    frame = pd.DataFrame({"from": ["A", "B"], "to": ["B", "C"], "flow": np.array([0.1, np.nan], dtype="f4")})
    decimals = Dataset.from_frames(frame).column("flow", 1).decimals()
    assert (decimals.integers.tolist(), decimals.places, decimals.present.tolist()) == ([1, 0], 1, [True, False])


def test_a_dataset_says_in_one_line_what_it_holds():
    net = frames({"from": ["A"], "to": ["B"], "flow": [1], "sd": [2]}, {"id": ["A", "B"], "x": [0, 1], "open": [1, 0]})
    assert repr(net) == "<Dataset: 2 vertices, 1 edge; columns flow, sd; at nodes open>"
    places = {at: Field("air", at, np.zeros((n, 1))) for at, n in (("vertices", 2), ("cells", 1))}
    assert repr(Dataset(net.complex, fields={"air": places})).endswith("; fields air (vertices and cells)>")
    many = frames({**ONE_EDGE, **{f"c{k}": [k] for k in range(20)}})
    assert repr(many).endswith("c6, c7, ...>")


def test_a_dataset_can_be_pickled_and_copied():
    net = frames({"from": ["A"], "to": ["B"], "flow": [1.5]})
    for again in (pickle.loads(pickle.dumps(net)), copy.deepcopy(net)):
        assert again.column("flow", 1).numbers().tolist() == [1.5]
        assert again.complex.vertex_ids.tolist() == ["A", "B"]


def test_a_mask_in_the_place_of_vertex_numbers_is_refused_with_a_way_out():
    with pytest.raises(InputError, match=r"got bool; numpy\.flatnonzero turns a mask"):
        Complex.from_edges(np.array([True, False]), [1, 0])
