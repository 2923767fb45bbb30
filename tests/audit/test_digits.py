"""Digits that add up: whole flows against brute force, and published decimals against exact fractions."""

import itertools
import math
import random
from fractions import Fraction

import numpy as np
import pandas as pd
import pytest

from dec.audit.digits.grid import balanced_grid
from dec.audit.digits.rounding import Rounded, rounded
from dec.audit.digits.tables import rounded_columns, rounded_dict, rounded_vertex_columns
from dec.audit.digits.whole import half_up, whole_flows
from dec.audit.exactly import net_inflow
from dec.audit.questions import balance, loops
from dec.calculus.complex import grid
from dec.calculus.dataset import Dataset, Field
from dec.errors import AccuracyError, InputError
from dec.topology.graphs import spanning_forest, tree_flows

from .measured_networks import measured


def small_network(seed: int) -> tuple[np.ndarray, np.ndarray, int, np.ndarray, int]:
    """A small multigraph with flows in parts of a unit whose net inflow is whole at every vertex."""
    rng = random.Random(seed)
    n, m, parts = rng.randint(1, 5), rng.randint(1, 9), rng.choice([2, 3, 4, 7, 10, 64])
    tail = np.array([rng.randrange(n) for _ in range(m)])
    head = np.array([rng.randrange(n) for _ in range(m)])
    fine = np.array([rng.randint(-3 * parts, 3 * parts) for _ in range(m)])
    forest = spanning_forest(tail, head, n)
    wanted = np.array([parts * rng.randint(-2, 2) for _ in range(n)])
    carried, _ = tree_flows(tail, head, forest, net_inflow(tail, head, fine, n) - wanted)
    return tail, head, n, fine + carried, parts


def brute_force(tail: np.ndarray, head: np.ndarray, n: int, fine: np.ndarray, parts: int) -> set[tuple[int, ...]]:
    """Every choice of floor and ceiling that keeps all balances."""
    wanted = [Fraction(int(total), parts) for total in net_inflow(tail, head, fine, n)]
    choices = [sorted({math.floor(Fraction(int(f), parts)), math.ceil(Fraction(int(f), parts))}) for f in fine]
    found = set()
    for choice in itertools.product(*choices):
        total = [0] * n
        for a, b, flow in zip(tail.tolist(), head.tolist(), choice, strict=True):
            total[a] -= flow
            total[b] += flow
        if total == wanted:
            found.add(choice)
    return found


def test_whole_flows_of_a_thousand_small_networks_are_among_those_that_brute_force_finds() -> None:
    several = 0
    for seed in range(1000):
        case = small_network(seed)
        possible = brute_force(*case)
        assert tuple(whole_flows(*case).tolist()) in possible, seed
        several += len(possible) > 1
    assert several > 200  # the choice is seldom forced


def test_flows_that_need_no_move_are_the_nearest_whole_numbers() -> None:
    tail, head = np.array([0, 1, 2]), np.array([1, 2, 0])
    assert whole_flows(tail, head, 3, np.array([17, 17, 17]), 10).tolist() == [2, 2, 2]
    assert whole_flows(tail, head, 3, np.array([-15, -15, -15]), 10).tolist() == [-1, -1, -1]


def test_flows_that_leave_a_fraction_at_a_vertex_are_refused() -> None:
    with pytest.raises(InputError, match="vertex 0 has -5 / 10"):
        whole_flows(np.array([0]), np.array([1]), 2, np.array([5]), 10)


def test_halves_go_up_and_no_difference_moves_by_a_unit() -> None:
    rng = random.Random(7)
    fine = np.array([rng.randint(-2000, 2000) for _ in range(500)] + [-15, -5, 5, 15])
    whole = half_up(fine, 10)
    assert whole.tolist() == [math.floor(Fraction(f, 10) + Fraction(1, 2)) for f in fine.tolist()]
    moved = np.abs(10 * (whole[:, None] - whole[None, :]) - (fine[:, None] - fine[None, :]))
    assert moved.max() == 9  # in tenths of a unit: it comes near one unit and stays below


def test_two_hundred_thousand_flows_balance_exactly_and_stay_within_floor_and_ceiling() -> None:
    # a lattice of streets, flows from random chords with the rest carried along a tree
    side, rng = 317, np.random.default_rng(5)
    number = np.arange(side * side).reshape(side, side)
    tail = np.concatenate([number[:, :-1].ravel(), number[:-1].ravel()])
    head = np.concatenate([number[:, 1:].ravel(), number[1:].ravel()])
    n = side * side
    assert len(tail) >= 200_000
    put_in = rng.integers(-3, 4, n)
    flow = rng.normal(size=len(tail)) * 50
    flow[::7] = np.rint(flow[::7])
    forest = spanning_forest(tail, head, n)
    carried, _ = tree_flows(tail, head, forest, net_inflow(tail, head, flow, n) + put_in)
    flow += carried
    fine, parts = balanced_grid(tail, head, n, flow, put_in, 0)
    whole = whole_flows(tail, head, n, fine, parts)
    gap = net_inflow(tail, head, whole, n) + put_in
    assert not gap[1:].any()
    assert ((whole >= np.floor(flow)) & (whole <= np.ceil(flow))).all()
    assert (whole == np.floor(flow + 0.5)).mean() > 0.8  # and most are the nearest


def exact_gaps(found: Rounded) -> list[Fraction]:
    """What the published decimals leave over at each group of vertices that must balance, from their text."""
    audit = found.audit
    network = audit.data.complex
    names = [str(name) for name in network.vertex_ids]
    above = {name: name for name in [*names, "outside"]}

    def root(name: str) -> str:
        while above[name] != name:
            name = above[name]
        return name

    columns = rounded_columns(found)["rounded"].tolist()
    for name in audit.asked["open"]:
        above[root(name)] = root("outside")
    for text, a, b in zip(columns, network.tail.tolist(), network.head.tolist(), strict=True):
        if not text:
            above[root(names[a])] = root(names[b])
    total = dict.fromkeys(map(root, names), Fraction(0))
    for text, a, b in zip(columns, network.tail.tolist(), network.head.tolist(), strict=True):
        total[root(names[a])] -= Fraction(text or 0)
        total[root(names[b])] += Fraction(text or 0)
    supplies = rounded_vertex_columns(found)
    for name, text in zip(supplies["id"].tolist(), supplies["rounded_supply"].tolist(), strict=True):
        total[root(name)] += Fraction(text or 0)
    return [gap for name, gap in total.items() if name != root("outside")]


@pytest.mark.parametrize("unit", ["0.1", "1", "0.25", "5"])
def test_published_flows_of_random_audits_balance_in_exact_decimals(unit: str) -> None:
    compared = 0
    for seed in range(120):
        audit = measured("balance", seed).audit()
        found = rounded(audit, unit, round_supplies=True)
        assert not any(exact_gaps(found)), seed
        size = Fraction(unit)
        texts = rounded_columns(found)["rounded"].tolist()
        for text, value in zip(texts, audit.edges["adjusted"].tolist(), strict=True):
            assert (text == "") == math.isnan(value)
            if text:
                compared += 1
                count, whole = value / float(unit), Fraction(text) / size
                assert whole in {math.floor(count), math.ceil(count)}
    assert compared > 400


def test_published_differences_of_random_audits_close_and_move_by_less_than_a_unit() -> None:
    compared = 0
    for seed in range(60):
        audit = measured("loop", seed).audit()
        found = rounded(audit, "0.5")
        heights = dict(zip(*rounded_vertex_columns(found).values(), strict=True))
        rows = zip(rounded_columns(found)["rounded"].tolist(), audit.edges.itertuples(), strict=True)
        for text, row in rows:
            start, end = row[2], row[3]
            if not text:
                assert math.isnan(row.adjusted)
                continue
            compared += 1
            assert Fraction(text) == Fraction(heights[end]) - Fraction(heights[start])
            assert abs(Fraction(text) - Fraction(row.adjusted)) < Fraction("0.5")
    assert compared > 200


@pytest.mark.parametrize("law", ["balance", "loop"])
def test_a_published_table_passes_an_audit_of_its_own_decimals(law: str) -> None:
    decided = 0
    for seed in range(40):
        first = measured(law, seed).audit()
        found = rounded(first, "0.5", round_supplies=True)
        edges = first.edges[["id", "from", "to"]].assign(**rounded_columns(found))
        nodes = pd.DataFrame(rounded_vertex_columns(found))
        net = Dataset.from_frames(edges, nodes)
        if law == "balance":
            supply = dict(zip(nodes["id"], nodes["rounded_supply"].replace("", "0"), strict=True))
            again = balance(net, value="rounded", open=first.asked["open"], supply=supply)
        else:
            again = loops(net, value="rounded", fixed="rounded_potential")
        assert again.holds in {True, None}, seed
        decided += again.holds is True
    assert decided > 20


def test_a_rounded_table_keeps_its_sums() -> None:
    # The matrix rounding example of Ahuja, Magnanti and Orlin, Network Flows, 1993, section 6.2 (from memory).
    body = [["3.1", "6.8", "7.3"], ["9.6", "2.4", "0.7"], ["3.6", "1.2", "6.5"]]
    rows, columns = ["17.2", "12.7", "11.3"], ["16.3", "10.4", "14.5"]
    edges = [(f"r{i}", f"c{j}", body[i][j]) for i in range(3) for j in range(3)]
    edges += [("in", f"r{i}", rows[i]) for i in range(3)] + [(f"c{j}", "out", columns[j]) for j in range(3)]
    net = Dataset.from_frames(pd.DataFrame(edges, columns=["from", "to", "amount"]))
    audit = balance(net, value="amount", open=("in", "out"))
    assert audit.holds
    found = rounded(audit, 1)
    assert not any(exact_gaps(found))
    for whole, (_, _, text) in zip(found.edges.tolist(), edges, strict=True):
        assert whole in {math.floor(Fraction(text)), math.ceil(Fraction(text))}


def street(flow: list[str], unit: list[str] | None = None) -> Dataset:
    rows = {"id": ["a", "b", "c"], "from": ["S", "J", "J"], "to": ["J", "T", "U"], "flow": flow}
    nodes = pd.DataFrame({"id": ["S", "J", "T", "U"], "put_in": ["", "0.25", "-2.25", ""]})
    return Dataset.from_frames(pd.DataFrame(rows if unit is None else {**rows, "unit": unit}), nodes)


def test_a_known_supply_that_is_no_whole_multiple_is_refused_by_name_or_rounded_on_request() -> None:
    audit = balance(street(["5.0", "2.25", "3.0"]), value="flow", sd=0.1, supply="put_in")
    with pytest.raises(InputError, match=r"unit 0.1, vertex 'J' has 0.25, which is 2.5 of them; .*--round-supplies"):
        rounded(audit, "0.1")
    found = rounded(audit, "0.1", round_supplies=True)
    assert not any(exact_gaps(found))
    assert found.notes == ("2 supplies rounded beside the flows (J, T)",)
    exact = rounded(audit, "0.05")
    assert rounded_vertex_columns(exact)["rounded_supply"].tolist() == ["", "0.25", "-2.25", ""]
    assert exact.notes == ()


def test_the_coarsest_unit_of_a_component_counts_in_it_and_digits_keep_their_zeros() -> None:
    audit = balance(street(["5.0", "2.0", "3.0"], ["0.01", "", "0.5"]), value="flow", sd=0.1, open=("S", "T", "U"))
    assert rounded_columns(rounded(audit, "unit"))["rounded"].tolist() == ["5.0", "2.0", "3.0"]
    assert rounded_columns(rounded(audit, "0.01"))["rounded"].tolist() == ["5.00", "2.00", "3.00"]
    assert rounded_columns(rounded(audit, 10))["rounded"].tolist() in (["10", "0", "10"], ["0", "0", "0"])
    assert rounded_dict(rounded(audit, "unit"))["units"] == ["0.5"]


def test_mapped_supplies_have_to_be_given_again() -> None:
    audit = balance(street(["5.0", "2.0", "3.0"]), value="flow", sd=0.1, supply={"J": 0}, open=("S", "T", "U"))
    with pytest.raises(InputError, match="give supply= here once more"):
        rounded(audit, 1)
    assert not any(exact_gaps(rounded(audit, 1, supply={"J": 0})))


def test_storage_counts_with_the_other_sign() -> None:
    rows = {"from": ["S", "J"], "to": ["J", "T"], "flow": ["5.0", "3.0"]}
    nodes = pd.DataFrame({"id": ["S", "J", "T"], "kept": ["", "2", ""]})
    net = Dataset.from_frames(pd.DataFrame(rows), nodes)
    audit = balance(net, value="flow", sd=0.1, storage="kept", open=("S", "T"))
    found = rounded(audit, 1)
    assert found.edges.tolist() == [5, 3]
    assert found.vertices.tolist() == [0, -2, 0]


@pytest.mark.parametrize(
    ("unit", "says"),
    [
        ("0", "must be positive, got 0"),
        ("-0.1", "must be positive"),
        ("nothing", "digits must be a positive decimal, as 0.1, or an edge column"),
        (None, "a positive number or the name of an edge column, got None"),
        ("unit", "column unit must state a unit on an edge of every component"),
        ("1e-40", "at most 30 places"),
    ],
)
def test_a_unit_that_cannot_be_used_is_refused(unit: object, says: str) -> None:
    audit = balance(street(["5.0", "2.0", "3.0"], ["", "", ""]), value="flow", sd=0.1, open=("S", "T", "U"))
    with pytest.raises(InputError, match=says):
        rounded(audit, unit)


def test_more_digits_than_adjusted_values_have_are_refused() -> None:
    audit = balance(street(["5.0", "2.0", "3.1"]), value="flow", sd=0.1, open=("S", "T", "U"))
    with pytest.raises(AccuracyError, match="publish fewer digits"):
        rounded(audit, "1e-14")


def test_values_that_do_not_balance_are_not_forced_to() -> None:
    with pytest.raises(AccuracyError, match="some miss by 1 units"):
        balanced_grid(np.array([0, 1]), np.array([1, 2]), 3, np.array([5.0, 4.0]), np.array([5, 0, 0]), 2)


def test_a_mesh_has_no_digits_to_round() -> None:
    square = grid((3, 3))
    field = Field("U", "vertices", np.tile([1.0, 0.0], (9, 1)))
    audit = balance(Dataset(square, fields={"U": {"vertices": field}}), field="U")
    with pytest.raises(InputError, match="this audit is one of a mesh"):
        rounded(audit, 1)


def test_a_fixed_potential_that_moves_is_said() -> None:
    rows = pd.DataFrame({"from": ["A", "B", "C"], "to": ["B", "C", "A"], "dh": ["1.14", "2.24", "-3.38"]})
    found = rounded(loops(Dataset.from_frames(rows), value="dh", fixed={"A": "100.25", "C": "103.6"}), "0.1")
    assert rounded_vertex_columns(found)["rounded_potential"].tolist()[0] == "100.3"  # half up, from 100.25
    assert found.notes == ("1 fixed potential rounded to the unit too (A)",)


@pytest.mark.parametrize("noise", [1e-12, 1e-9, 1e-6])
def test_values_of_a_less_exact_solver_are_balanced_first(noise: float) -> None:
    rng, side = np.random.default_rng(9), 30
    network = grid((side, side))
    tail, head, n = network.tail, network.head, side * side
    flow = rng.normal(size=len(tail)) * 20
    forest = spanning_forest(tail, head, n)
    flow += tree_flows(tail, head, forest, net_inflow(tail, head, flow, n))[0]
    flow += rng.normal(size=len(tail)) * noise
    fine, parts = balanced_grid(tail, head, n, flow, np.zeros(n, np.int64), 0)
    assert not net_inflow(tail, head, fine, n)[1:].any()
    assert np.abs(fine / parts - flow).max() < 1e4 * noise
    whole = whole_flows(tail, head, n, fine, parts)
    assert not net_inflow(tail, head, whole, n).any()
    assert ((whole >= np.floor(flow)) & (whole <= np.ceil(flow))).all()
