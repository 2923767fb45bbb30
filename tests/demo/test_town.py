"""The town of any size: true flows balance exactly, readings are what they say they are, faults are where they say."""

from fractions import Fraction

import numpy as np
import pandas as pd
import pytest
from scipy.stats import chi2

from dec.audit.questions import balance, loops
from dec.calculus.dataset import Dataset
from dec.demo import town as module
from dec.demo.town import Town, main, town
from dec.errors import InputError
from dec.files.read import read


def dataset(made: Town) -> Dataset:
    return Dataset.from_frames(made.edges, made.nodes)


def thousandths(texts: pd.Series) -> list[int | None]:
    return [None if text == "" else int(Fraction(text) * 1000) for text in texts]


@pytest.mark.parametrize(("n_edges", "zones"), [(200, 1), (200, 5), (239, 5), (1001, 3), (5000, 1), (20_000, 7)])
def test_a_town_has_just_so_many_pipes_and_zones(n_edges: int, zones: int):
    made = town(n_edges, zones=zones, seed=n_edges)
    network = dataset(made).complex
    assert (network.counts[1], network.n_components) == (n_edges, zones)
    opened = (made.nodes["open"] == "yes").to_numpy()
    assert np.bincount(network.component_labels[opened], minlength=zones).min() >= 2
    ends = np.sort(np.stack([network.tail, network.head]), axis=0)
    assert len(np.unique(ends, axis=1).T) < n_edges, "some pipes lie side by side"
    assert not (network.tail == network.head).any()


def test_true_flows_balance_to_the_last_digit_at_every_node():
    made = town(3000, leaks=2, leak=4.0, reversed_meters=1)
    network = dataset(made).complex
    left = [int(amount) for amount in made.supply]
    for tail, head, flow in zip(network.tail.tolist(), network.head.tolist(), made.flow.tolist(), strict=True):
        left[tail] -= flow
        left[head] += flow
    assert not any(left)
    known = thousandths(made.nodes["demand"])
    lost = {name: 4000 for what, name in made.planted if what == "leak"}
    assert len(lost) == 2
    for name, stated, true in zip(made.nodes["id"], known, made.supply.tolist(), strict=True):
        assert stated is None or stated == true + lost.get(name, 0)


def test_every_cell_is_a_decimal_of_three_places_or_empty():
    made = town(400)
    for name in ("flow", "sd", "dh", "dh_sd"):
        texts = made.edges[name][made.edges[name] != ""]
        assert texts.str.fullmatch(r"-?\d+\.\d{3}").all()
        assert 0 < (made.edges[name] == "").sum() < 0.1 * 400
    assert (made.edges["sd"] == "").equals(made.edges["flow"] == "")
    assert ((made.nodes["demand"] == "") == (made.nodes["open"] == "yes")).all()


def test_readings_spread_about_the_truth_as_their_standard_deviations_say():
    """Squares of errors in their own sd over 20,000 pipes, against the 99.9 % bounds of chi-square."""
    made = town(20_000, seed=3)
    for name, truth in (("flow", made.flow), ("dh", made.level)):
        read_as, sd = (thousandths(made.edges[column]) for column in (name, "sd" if name == "flow" else "dh_sd"))
        network = dataset(made).complex
        true = truth if name == "flow" else truth[network.head] - truth[network.tail]
        errors = [(r - t) / s for r, t, s in zip(read_as, true.tolist(), sd, strict=True) if r is not None]
        low, high = chi2.ppf([0.0005, 0.9995], len(errors))
        assert low < sum(error**2 for error in errors) < high


def test_a_clean_town_holds_under_both_laws():
    data = dataset(town(2000, seed=5, zones=2))
    assert balance(data, "flow", "sd", "open", "demand").holds
    assert loops(data, "dh", "dh_sd", "height").holds


@pytest.mark.parametrize(("option", "what"), [("reversed_meters", "reversed"), ("factor_meters", "factor")])
@pytest.mark.parametrize("seed", range(3))
def test_a_faulty_meter_is_the_first_suspect(option: str, what: str, seed: int):
    made = town(300, seed=seed, **{option: 1})
    ((planted, name),) = made.planted
    audit = balance(dataset(made), "flow", "1%+0.05", "open", "demand")
    assert planted == what
    assert not audit.holds
    first = audit.suspects[0]
    assert name in {first.id, *(other for _, other in first.inseparable_from)}


def test_a_leak_breaks_the_balance_at_its_node():
    made = town(300, leaks=1, leak=5.0, unmetered=0.0)
    ((_, name),) = made.planted
    audit = balance(dataset(made), "flow", "1%+0.05", "open", "demand")
    worst = audit.vertices.sort_values("statistic", ascending=False).iloc[0]
    assert not audit.holds
    assert (worst["id"], round(worst["residual"])) == (name, 5)


def test_the_same_seed_gives_the_same_town_and_another_seed_another():
    first, second, other = town(250, seed=1), town(250, seed=1), town(250, seed=2)
    pd.testing.assert_frame_equal(first.edges, second.edges)
    pd.testing.assert_frame_equal(first.nodes, second.nodes)
    assert not first.edges.equals(other.edges)


def test_faults_do_not_move_the_town_or_its_noise():
    plain, faulty = town(250, seed=1), town(250, seed=1, reversed_meters=2)
    differs = (plain.edges["flow"] != faulty.edges["flow"]).to_numpy()
    assert set(plain.edges["id"][differs]) == {name for _, name in faulty.planted}
    assert plain.nodes.equals(faulty.nodes)


@pytest.mark.parametrize(
    ("given", "says"),
    [
        ({"n_edges": 199}, "a town must have 200 to 10,000,000 pipes, got 199"),
        ({"n_edges": 200, "zones": 6}, "200 pipes make 1 to 5 zones, got 6"),
        ({"n_edges": 200, "zones": 0}, "zones, got 0"),
        ({"n_edges": 200, "unmetered": 0.9}, "must lie between 0 and 0.5, got 0.9"),
        ({"n_edges": 200, "leaks": 11}, "200 pipes take 0 to 10 faults, got 11"),
        ({"n_edges": 200, "leaks": -1}, "faults, got -1"),
    ],
)
def test_a_town_that_cannot_be_is_refused(given: dict, says: str):
    with pytest.raises(InputError) as caught:
        town(**given)
    assert says in str(caught.value)


def test_the_command_writes_tables_that_read_back_as_the_same_town(tmp_path, capsys):
    folder = tmp_path / "large"
    words = ["--edges", "400", "--seed", "7", "--zones", "2", "--reversed", "1", "--leaks", "1", str(folder)]
    assert main(words) == 0
    made, net = town(400, seed=7, zones=2, reversed_meters=1, leaks=1), read(folder / "pipes.csv", folder / "nodes.csv")
    for table, degree in ((made.edges, 1), (made.nodes, 0)):
        assert {name: column.cells.tolist() for name, column in net.columns[degree].items()} == table.to_dict("list")
    planted = pd.read_csv(folder / "planted.csv", dtype=str)
    assert tuple(planted.itertuples(index=False, name=None)) == made.planted
    assert main(words) == 5
    assert "pipes.csv exists; use --force" in capsys.readouterr().err
    assert main([*words, "--force"]) == 0
    assert main(["--edges", "3", str(tmp_path)]) == 3
    assert "a town must have 200" in capsys.readouterr().err


def test_a_folder_that_cannot_be_made_is_one_line_of_error(tmp_path, capsys):
    (tmp_path / "file").write_text("")
    assert module.main(["--edges", "200", str(tmp_path / "file" / "town")]) == 5
    assert "the folder cannot be made" in capsys.readouterr().err
