"""A table of readings: applied exactly as mounted, several of one edge as one, nothing taken that cannot be meant."""

import hashlib
import random
from fractions import Fraction
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from dec.audit.given.readings import Readings, read_readings
from dec.audit.given.repeats import applied_notes, combined_readings
from dec.calculus.complex import Complex
from dec.calculus.dataset import Dataset
from dec.errors import InputError


@pytest.fixture
def net() -> Dataset:
    edges = {"id": ["P1", "P12", "007", "NA"], "from": list("ABCC"), "to": list("BCAA")}
    return Dataset.from_frames(pd.DataFrame(edges))


def exact(readings: Readings) -> list[Fraction | None]:
    d = readings.decimals
    return [Fraction(int(i), 10**d.places) if there else None for i, there in zip(d.integers, d.present, strict=True)]


def table(**columns: list) -> pd.DataFrame:
    return pd.DataFrame(columns)


def test_each_reading_counts_as_mounted_and_scaled_to_the_last_digit(net: Dataset, tmp_path: Path):
    file = tmp_path / "readings.csv"
    file.write_text("sensor,edge,mounted,factor,flow\nS1,P1,-1,3.6,1.50\nS2,NA,+1,,-2\nS3,007,,0.06,10.1\nS4,P12,,,\n")
    readings = combined_readings(net, file, "flow", None)
    assert exact(readings) == [Fraction(-54, 10), None, Fraction(606, 1000), Fraction(-2)]
    np.testing.assert_array_equal(readings.value, [-5.4, np.nan, 0.606, -2.0])
    rows = readings.repeats
    assert rows.edge.tolist() == [0, 3, 2]
    assert rows.sensor.tolist() == ["S1", "S2", "S3"]
    assert rows.raw.tolist() == [1.5, -2, 10.1]
    assert rows.mounted.tolist() == [-1, 1, 1]
    assert rows.factor.tolist() == [3.6, 1, 0.06]
    assert rows.value.tolist() == [-5.4, -2, 0.606]
    assert (rows.sd, readings.sd, readings.sd_said, rows.dof, rows.chi_square) == (None, None, None, 0, 0.0)


def test_the_file_is_kept_with_the_hash_of_its_bytes(net: Dataset, tmp_path: Path):
    file = tmp_path / "readings.csv"
    file.write_bytes(b"edge;y\nP1; 1,5\n;\n")
    readings = combined_readings(net, file, "y", None, decimal=",")
    assert readings.repeats.input.name == "readings.csv"
    assert readings.repeats.input.sha256 == hashlib.sha256(file.read_bytes()).hexdigest()
    assert readings.repeats.notes == ("readings.csv: rows without any entry skipped: 1 (first: line 3)",)
    assert readings.value[0] == 1.5
    assert combined_readings(net, table(edge=["P1"], y=[1.5]), "y", None).repeats.input is None


def test_two_runs_of_one_line_are_their_weighted_mean_and_no_parallel_edge(net: Dataset):
    # Hard case of levelling networks in the catalogue of check values: 1.234 of weight 2, 1.238 of weight 6 -> 1.237
    # (own, by hand); chi-square by hand: 2 * 0.003^2 + 6 * 0.001^2 = 2.4e-5, sd 1 / sqrt(8).
    runs = table(edge=["P1", "P1"], y=["1.234", "1.238"], s=[2**-0.5, 6**-0.5])
    readings = combined_readings(net, runs, "y", "s")
    assert readings.value[0] == pytest.approx(1.237, abs=1e-15)
    assert readings.sd[0] == pytest.approx(8**-0.5, rel=1e-15)
    assert readings.repeats.dof == 1
    assert readings.repeats.chi_square == pytest.approx(2.4e-5, rel=1e-12)
    assert readings.value.shape == (4,)
    assert net.complex.counts == (3, 4)
    assert readings.measured.tolist() == [True, False, False, False]


def test_equal_readings_have_exactly_themselves_as_mean_and_a_chi_square_of_zero(net: Dataset):
    readings = combined_readings(net, table(edge=["P1"] * 3, y=["0.1"] * 3), "y", 0.3)
    assert exact(readings)[0] == Fraction(1, 10)
    assert readings.repeats.chi_square == 0
    assert readings.sd[0] == pytest.approx(0.3 / 3**0.5, rel=1e-15)


def reference(rows: list[tuple[int, Fraction, Fraction]], n_edges: int):
    """Mean, mean of magnitudes, squared sd, dof and chi-square in fractions, edge by edge."""
    means, sizes, variances, dof, chi_square = [], [], [], 0, Fraction(0)
    for edge in range(n_edges):
        own = [(y, 1 / sd**2) for e, y, sd in rows if e == edge]
        if not own:
            means.append(None)
            sizes.append(None)
            variances.append(None)
            continue
        total = sum(w for _, w in own)
        mean = sum(y * w for y, w in own) / total
        means.append(mean)
        sizes.append(sum(abs(y) * w for y, w in own) / total)
        variances.append(1 / total)
        dof += len(own) - 1
        chi_square += sum((y - mean) ** 2 * w for y, w in own)
    return means, sizes, variances, dof, chi_square


@pytest.mark.parametrize("seed", range(60))
def test_means_and_chi_square_equal_those_in_fractions(seed: int, tmp_path: Path):
    rng = random.Random(seed)
    n = rng.randint(1, 6)
    net = Dataset.from_frames(pd.DataFrame({"id": [f"e{i}" for i in range(n)], "from": ["A"] * n, "to": ["B"] * n}))
    big = rng.choice([0, 0, 10**9, 10**14])
    rows, lines = [], ["edge,mounted,factor,y,s"]
    for _ in range(rng.randint(1, 14)):
        edge, mounted = rng.randrange(n), rng.choice(["", "1", "+1", "-1", "-1.0"])
        factor, raw = rng.choice(["", "1", "3.6", "-0.5", "1e3"]), f"{big + rng.randint(-500, 500) / 100:.2f}"
        sd = rng.choice(["0.1", "0.25", "2", "1e-3"])
        lines.append(f"e{edge},{mounted},{factor},{raw},{sd}")
        scale = Fraction(factor or 1)
        rows.append((edge, Fraction(raw) * (-1 if mounted.startswith("-") else 1) * scale, Fraction(sd) * abs(scale)))
    file = tmp_path / "r.csv"
    file.write_text("\n".join(lines))
    readings = combined_readings(net, file, "y", "s")
    means, sizes, variances, dof, chi_square = reference(rows, n)
    assert readings.repeats.dof == dof
    assert readings.repeats.chi_square == pytest.approx(float(chi_square), rel=1e-9, abs=1e-15)
    assert readings.measured.tolist() == [mean is not None for mean in means]
    several = {edge for edge, *_ in rows if sum(e == edge for e, *_ in rows) > 1}
    for edge, (mean, size, variance, found) in enumerate(zip(means, sizes, variances, exact(readings), strict=True)):
        if mean is None:
            assert np.isnan(readings.value[edge])
            assert np.isnan(readings.sd[edge])
            continue
        if edge not in several:
            assert found == mean
        assert abs(Fraction(readings.value[edge]) - mean) <= 8 * Fraction(2) ** -52 * size
        assert float(found) == readings.value[edge]
        assert readings.sd[edge] == pytest.approx(float(variance) ** 0.5, rel=1e-14)


def test_nothing_cancels_in_the_chi_square_of_large_readings(net: Dataset):
    # By hand: two readings 0.002 apart, sd 0.001 each: 2 * (0.001 / 0.001)^2.
    huge = table(edge=["P1", "P1"], y=["100000000000000000.001", "100000000000000000.003"])
    assert combined_readings(net, huge, "y", 0.001).repeats.chi_square == pytest.approx(2, rel=1e-12)


@pytest.mark.parametrize("seed", range(20))
def test_combined_readings_and_parallel_edges_tell_the_same_story(seed: int):
    """Least squares of all rows: chi-square and dof split exactly into those among repeats and those of the loops."""
    rng = np.random.default_rng(seed)
    tail, head = np.array([0, 1, 2, 0, 1]), np.array([1, 2, 0, 3, 3])
    edge = np.concatenate([np.arange(5), rng.integers(0, 5, 8)])
    y, sd = rng.normal(size=13).round(3), rng.uniform(0.5, 2, 13).round(2)
    ids = [f"e{i}" for i in range(5)]
    net = Dataset.from_frames(pd.DataFrame({"id": ids, "from": tail, "to": head}))
    readings = combined_readings(net, table(edge=[ids[e] for e in edge], y=y, s=sd), "y", "s")

    def adjusted(ends_tail, ends_head, values, deviations):
        D = np.zeros((len(values), 4))
        np.add.at(D, (np.arange(len(values)), ends_tail), -1)
        np.add.at(D, (np.arange(len(values)), ends_head), 1)
        u = np.linalg.lstsq(D[:, 1:] / deviations[:, None], values / deviations, rcond=None)[0]
        return u, float((((values - D[:, 1:] @ u) / deviations) ** 2).sum())

    heights, all_rows = adjusted(tail[edge], head[edge], y, sd)
    same, combined = adjusted(tail, head, readings.value, readings.sd)
    np.testing.assert_allclose(same, heights, atol=1e-12)
    assert combined + readings.repeats.chi_square == pytest.approx(all_rows, rel=1e-12)
    assert (5 - 3) + readings.repeats.dof == 13 - 3


def test_a_table_of_single_readings_equals_a_column():
    edges = pd.DataFrame({"id": ["a", "b"], "from": ["A", "B"], "to": ["B", "A"], "y": ["1.10", "-3"], "s": [0.1, 2]})
    net = Dataset.from_frames(edges)
    rows = edges.rename(columns={"id": "edge"})
    for sd in (None, 0.5, "2%+0.1", "s"):
        column, rowwise = read_readings(net, "y", sd), combined_readings(net, rows, "y", sd)
        assert column.value.tolist() == rowwise.value.tolist()
        assert exact(column) == exact(rowwise)
        if sd is not None:
            assert column.sd.tolist() == pytest.approx(rowwise.sd.tolist(), rel=1e-15)


@pytest.mark.parametrize(
    ("sd", "expected", "said"),
    [
        # two readings of 10 and -20 with factors 3 and -0.5
        (0.5, [0.5, 0.5], "0.5 for every reading"),
        ("0.5", [0.5, 0.5], "0.5 for every reading"),
        ("2%", [0.6, 0.2], "2 % of the reading, in the unit of each sensor"),
        ("2%+0.1", [0.9, 0.25], "2 % of the reading plus 0.1, in the unit of each sensor"),
        ("s", [0.3, 0.2], "column s of readings, in the unit of each sensor"),
        ("col:2%", [3, 1], "column 2% of readings, in the unit of each sensor"),
        ([0.1, 0.4], [0.3, 0.2], "one a row of readings, in the unit of each sensor"),
    ],
)
def test_a_plain_number_is_in_the_unit_of_the_edge_and_every_other_sd_in_that_of_the_sensor(net, sd, expected, said):
    rows = table(edge=["P1", "P12"], factor=["3", "-0.5"], y=["10", "-20"], s=["0.1", "0.4"], **{"2%": ["1", "2"]})
    readings = combined_readings(net, rows, "y", sd)
    assert readings.sd[:2].tolist() == pytest.approx(expected, rel=1e-15)
    assert readings.repeats.sd.tolist() == pytest.approx(expected, rel=1e-15)
    assert readings.sd_said == said


@pytest.mark.parametrize(
    ("sd", "says"),
    [
        (0, "sd must be positive, got 0"),
        ("0%", "readings row 0: sd must be positive where there is a reading, got 0; add a floor"),
        ("s", "readings row 1: sd must be positive where there is a reading, got nothing; leave the reading empty"),
        ("col:nope", "readings: a column 'nope' is needed; there are edge, factor, y, s"),
        (
            "t",
            "sd must be a number, a percentage (2%, or 2%+0.1) or a column of readings (edge, factor, y, s), got 't'",
        ),
        ([1.0], "sd must give 2 numbers, one a row, got 1"),
        (
            [1.0, np.nan],
            "readings row 1: sd must be positive where there is a reading, got nothing; give every row one",
        ),
        ([1e-90, 1.0], "readings row 0: sd must be positive and lie within 1e-100 and 1e+100 where there is a reading"),
        ([[1.0], [1.0, 2.0]], "sd must be a rectangular array"),
    ],
)
def test_sd_of_rows_that_cannot_be_used_is_refused(net: Dataset, sd, says: str):
    rows = table(edge=["P1", "P12"], factor=["1e-20", "1"], y=["10", "-20"], s=["0.1", ""])
    with pytest.raises(InputError) as caught:
        combined_readings(net, rows, "y", sd)
    assert says in str(caught.value)


@pytest.mark.parametrize(
    ("text", "says"),
    [
        ("edge,y\np12,1\n", "r.csv line 2: edge 'p12' is not in the edge table; close names: 'P12'"),
        ("edge,y\nP1,1\n7,1\n", "r.csv line 3: edge '7' is not in the edge table; "),
        ("edge,y\nzzz,\n", "r.csv line 2: edge 'zzz' is not in the edge table; ids are text, as written"),
        ("edge,y\nP1,1\n,1\n", "r.csv line 3: edge is empty; every row must name the edge that it reads"),
        ("edge,y,mounted\nP1,1,2\n", "r.csv line 2: mounted must be +1 or -1, got '2'; write -1 where"),
        ("edge,y,mounted\nP1,1,0\n", "r.csv line 2: mounted must be +1 or -1, got '0'"),
        ("edge,y,mounted\nP1,1,-\n", "r.csv line 2: mounted must be +1 or -1, got '-'"),
        ("edge,y,mounted\nP1,,nan\n", "r.csv line 2: mounted must be +1 or -1, got 'nan'"),
        ("edge,y,factor\nP1,1,2\nP12,1,0.0\n", "r.csv line 3: factor must be a number other than 0"),
        ("edge,y,factor\nP1,1,l/s\n", "r.csv line 2: factor must be a number other than 0"),
        ("edge,y,factor\nP1,1,1e999\n", "r.csv line 2: factor must be a number other than 0"),
        ("edge,y,factor\nP1,1e60,1e60\n", "r.csv line 2: y times factor must lie within 1e+100, got 1e+120"),
        ("edge,y\nP1,1e101\n", "r.csv line 2: y must lie within 1e+100"),
        ("edge,y\nP1,five\n", "r.csv line 2: y 'five' is not a number; leave the cell empty if nothing was measured"),
        (
            "sensor,edge,y\nS,P1,1\nS,P12,1\n",
            "r.csv line 3: sensor 'S' is named before (r.csv line 2); one row a sensor",
        ),
        ("edge,y\nP1,1\nP12,1\nP1,2\n", "r.csv line 4: edge 'P1' has another reading (r.csv line 2); several readings"),
        ("edge,x\nP1,1\n", "r.csv: a column 'y' is needed; there are edge, x"),
        ("edgs,y\nP1,1\n", "r.csv: a column 'edge' is needed; there are edgs, y; did you mean 'edgs'?"),
        ("edge,y\n", "r.csv has a header but no rows"),
    ],
)
def test_a_table_that_cannot_be_meant_is_refused_with_its_line(net: Dataset, tmp_path: Path, text: str, says: str):
    file = tmp_path / "r.csv"
    file.write_text(text)
    with pytest.raises(InputError) as caught:
        combined_readings(net, file, "y", None)
    assert says in str(caught.value)


@pytest.mark.parametrize(
    ("given", "value", "says"),
    [
        (table(edge=[1.5], y=[1]), "y", "readings: edge must hold names, found floating-point numbers"),
        (
            table(edge=["P1"], sensor=[1.5], y=[1]),
            "y",
            "readings: sensor must hold names, found floating-point numbers",
        ),
        (table(edge=["P1"], mounted=[True], y=[1]), "y", "readings row 0: mounted must be +1 or -1, got 'True'"),
        (table(edge=["P1"], factor=[0.0], y=[1]), "y", "readings row 0: factor must be a number other than 0"),
        (table(edge=["P1"], factor=[np.inf], y=[1]), "y", "readings row 0: factor must be a number other than 0"),
        (table(edge=[], y=[]), "y", "readings must have columns and rows, got an empty frame"),
        ([1, 2], "y", "readings must be the path of a table or a pandas DataFrame, got list"),
        ("mesh.vtu", "y", "mesh.vtu: a table of readings must be one of .csv .tsv .txt .parquet, found .vtu"),
        ("nowhere.csv", "y", "nowhere.csv: no such file"),
        (table(edge=["P1"], factor=["2"]), "factor", "value must name the column of readings, got 'factor'"),
        (pd.DataFrame([["P1", 1, 2]], columns=["edge", "y", "y"]), "y", "readings: column 'y' stands there twice"),
    ],
)
def test_what_is_no_table_of_readings_is_refused(net: Dataset, given, value: str, says: str):
    with pytest.raises(InputError) as caught:
        combined_readings(net, given, value, None)
    assert says in str(caught.value)


def test_readings_too_many_deviations_apart_are_refused_and_do_not_overflow(net: Dataset):
    with pytest.raises(InputError, match=r"readings row \d: y is more than 1e150 sd from another reading"):
        combined_readings(net, table(edge=["P1", "P1"], y=["1e90", "-1e90"]), "y", 1e-90)


def test_a_network_without_edge_ids_is_refused():
    rows = table(edge=["1"], y=[1])
    with pytest.raises(InputError, match="edges: edges must have ids for a table of readings to name them"):
        combined_readings(Dataset.from_frames(pd.DataFrame({"from": ["A"], "to": ["B"]})), rows, "y", None)
    with pytest.raises(InputError, match="the network: edges must have ids"):
        combined_readings(Dataset(Complex.from_edges([0], [1])), rows, "y", None)
    named = Dataset(Complex.from_edges([0], [1], edge_ids=["1"]))
    assert combined_readings(named, rows, "y", None).value.tolist() == [1.0]


def test_whole_numbers_in_a_frame_name_edges_and_sensors():
    net = Dataset.from_frames(pd.DataFrame({"id": [5, 7], "from": [1, 2], "to": [2, 3]}))
    rows = table(edge=[7, 5], sensor=[1, 2], mounted=[-1, 1], factor=[2.5, np.nan], y=[4, 3])
    readings = combined_readings(net, rows, "y", None)
    assert readings.value.tolist() == [3.0, -10.0]
    assert readings.repeats.sensor.tolist() == ["1", "2"]


def test_what_was_applied_is_said(net: Dataset, tmp_path: Path):
    file = tmp_path / "r.csv"
    file.write_text(
        "edge;sensor;mounted;factor;y\nP1;S1;-1;;1\nP1;S2;;3,6;1\nP12;S3;-1;3,6;2\n007;;;0,06;5\nNA;S5;-1;9;\n"
    )
    readings = combined_readings(net, file, "y", 0.5, decimal=",")
    chi_square = 2 * (2.3 / 0.5) ** 2  # -1 and 3.6: 2.3 from their mean
    assert applied_notes(net.complex, readings.repeats) == [
        "2 sensors are mounted the other way: their readings count negative (S1, S3; 2 rows)",
        "factor 0.06 applied to the sensor on edge 007",
        "factor 3.6 applied to 2 sensors (S2, S3)",
        f"1 edge with several readings (P1): weighted means; 1 independent check among them, chi-square {chi_square:g}",
    ]


def test_nothing_applied_is_nothing_said(net: Dataset):
    readings = combined_readings(net, table(edge=["P1"], mounted=["+1"], factor=["1.0"], y=["3"]), "y", None)
    assert applied_notes(net.complex, readings.repeats) == []


def test_the_order_of_the_rows_does_not_matter(net: Dataset):
    rows = table(edge=["P1", "P12", "P1", "007"], y=["1.25", "2", "1.75", "-1"], s=["0.5", "1", "0.25", "1"])
    first = combined_readings(net, rows, "y", "s")
    second = combined_readings(net, rows.iloc[::-1], "y", "s")
    np.testing.assert_allclose(first.value, second.value, rtol=1e-15)
    np.testing.assert_allclose(first.sd, second.sd, rtol=1e-15)
    assert first.repeats.chi_square == pytest.approx(second.repeats.chi_square, rel=1e-14)


def test_parquet_reads_as_csv_does(net: Dataset, tmp_path: Path):
    pytest.importorskip("pyarrow")
    file = tmp_path / "r.parquet"
    table(edge=["P1", "P1"], mounted=[1, -1], y=[2.5, -3.0]).to_parquet(file)
    readings = combined_readings(net, file, "y", 1.0)
    assert readings.value[0] == 2.75
    assert readings.repeats.input.sha256 == hashlib.sha256(file.read_bytes()).hexdigest()
