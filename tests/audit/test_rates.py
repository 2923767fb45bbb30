"""Simulated meters: false alarms come at the stated rate, and errors of the stated size are found at the stated rate.

Seeded; the bounds are those that a binomial count with the stated rate keeps in 99.9 % of all series. Rates and sizes:
Baarda, A Testing Procedure for Use in Geodetic Networks, 1968, from memory; Sidak, Rectangular confidence regions for
the means of multivariate normal distributions, J. Amer. Statist. Assoc. 62 (1967), from memory.
"""

from collections.abc import Iterator
from dataclasses import dataclass, replace
from functools import cache

import numpy as np
import pandas as pd
import pytest
from scipy.stats import binom, chi2

from dec.audit.questions import balance, loops
from dec.audit.record import Audit
from dec.audit.tested.single_errors import CRITICAL
from dec.calculus.columns import Column
from dec.calculus.dataset import Dataset

N = 2000
BLOCK = 100  # networks that are put into one audit, as parts that nothing joins, where each by itself takes too long
FIVE_PER_CENT = 1.959964
ENDS = [("S", "A"), ("A", "B"), ("A", "C"), ("B", "C"), ("C", "D"), ("B", "D"), ("D", "T"), ("C", "C"), ("C", "E")]
ENDS += [("E", "D"), ("E", "E2")]
FLOW = np.array([8.0, 5.0, 3.0, 1.5, 2.5, 3.5, 8.0, 0.0, 2.0, 2.0, 0.0])
HEIGHT = dict(zip(["S", "A", "B", "C", "D", "E", "E2", "T"], [0.0, 2, 3, -1, 5, 4, 4, 7], strict=True))
HELD = ("S", "B", "T")
PLACES = list(HEIGHT)
TRUE = {"balance": FLOW, "loop": np.array([HEIGHT[b] - HEIGHT[a] for a, b in ENDS])}
SD = np.array([0.1, 0.2, 0.1, 0.3, 0.1, 0.15, 0.1, 0.1, 0.2, 0.1, 0.1])
LAWS = ["balance", "loop"]
KNOWN_EDGES = [1, 4, 8]
KNOWN_PLACE = {"balance": "C", "loop": "B"}  # a leak there, or an error of the held potential
GROUPS = ["one", "one", "", "two", "two", "one", "", "", "two", "one", "one"]
COMMON_SD = 0.2


def bounds(rate: float, n: int = N) -> tuple[int, int]:
    return int(binom.ppf(0.0005, n, rate)), int(binom.ppf(0.9995, n, rate))


def keeps(count: int, rate: float, n: int = N) -> bool:
    low, high = bounds(rate, n)
    return low <= count <= high


def networks(ends: list[tuple[str, str]], count: int) -> Dataset:
    """So many networks side by side: vertex A of the third is called A.2."""
    edges = [(f"{a}{b}{e}.{k}", f"{a}.{k}", f"{b}.{k}") for k in range(count) for e, (a, b) in enumerate(ends)]
    places = list(dict.fromkeys([*PLACES, *(end for pair in ends for end in pair)])) if ends is ENDS else None
    names = [f"{v}.{k}" for k in range(count) for v in places] if places else None
    frame = pd.DataFrame(edges, columns=["id", "from", "to"])
    return Dataset.from_frames(frame, None if names is None else pd.DataFrame({"id": names}))


def with_column(net: Dataset, **values: object) -> Dataset:
    columns = {name: Column(name, np.asarray(cells)) for name, cells in values.items()}
    return replace(net, columns={0: net.columns[0], 1: {**net.columns.get(1, {}), **columns}})


def asked(law: str, net: Dataset, count: int, *, too_high: float = 0.0, **options) -> Audit:
    """The audit of `count` networks; `too_high` is added to what is held at the known place."""
    if law == "balance":
        return balance(net, "y", open=[f"{v}.{k}" for k in range(count) for v in "ST"], **options)
    at_fault = KNOWN_PLACE["loop"]
    held = {f"{v}.{k}": HEIGHT[v] + too_high * (v == at_fault) for k in range(count) for v in HELD}
    return loops(net, "y", fixed=held, **options)


@dataclass(frozen=True)
class Series:
    """What N audits of one network each say; arrays of N rows."""

    audits: list[Audit]

    def figures(self, table: str, column: str) -> np.ndarray:
        n = len(ENDS) if table == "edges" else len(PLACES)
        return np.array([audit.tables[table][column][:n] for audit in self.audits])


@cache
def clean(law: str) -> Series:
    rng, net = np.random.default_rng(20), networks(ENDS, 1)
    readings = TRUE[law] + SD * rng.standard_normal((N, len(SD)))
    return Series([asked(law, with_column(net, y=reading), 1, sd=SD, sidak=True) for reading in readings])


def blocks(law: str, readings: np.ndarray, **options) -> Iterator[Audit]:
    """Audits of a hundred networks each, one row of readings a network."""
    net = networks(ENDS, BLOCK)
    for rows in readings.reshape(-1, BLOCK * len(ENDS)):
        yield asked(law, with_column(net, y=rows), BLOCK, sd=np.tile(SD, BLOCK), **options)


def per_network(audits: list[Audit], table: str, column: str) -> np.ndarray:
    """A column of the audits of blocks, one row a network."""
    n = BLOCK * (len(ENDS) if table == "edges" else len(PLACES))
    return np.concatenate([audit.tables[table][column][:n].reshape(BLOCK, -1) for audit in audits])


@pytest.mark.parametrize("law", LAWS)
def test_a_network_among_others_has_the_figures_that_it_has_alone(law: str):
    """So that the series below may put a hundred into one audit."""
    series = clean(law)
    readings = series.figures("edges", "value")[:BLOCK]
    together = list(blocks(law, readings))
    for table, column in (("edges", "adjusted"), ("edges", "adjusted_sd"), ("edges", "statistic"),
                          ("vertices", "fault_sd"), ("vertices", "fault_statistic")):  # fmt: skip
        alone = series.figures(table, column)[:BLOCK]
        np.testing.assert_allclose(per_network(together, table, column), alone, rtol=1e-9, atol=1e-9)
    assert together[0].chi_square == pytest.approx(sum(a.chi_square for a in series.audits[:BLOCK]), rel=1e-9)


@pytest.mark.parametrize(("law", "dof"), [("balance", 6), ("loop", 6)])
def test_clean_meters_fail_the_global_test_in_five_per_cent(law: str, dof: int):
    audits = clean(law).audits
    assert {audit.dof for audit in audits} == {dof}
    assert keeps(sum(not audit.holds for audit in audits), 0.05)
    assert np.mean([audit.chi_square for audit in audits]) == pytest.approx(dof, abs=3.3 * np.sqrt(2 * dof / N))


@pytest.mark.parametrize("law", LAWS)
@pytest.mark.parametrize(("limit", "rate"), [(CRITICAL, 0.001), (FIVE_PER_CENT, 0.05)])
def test_the_test_of_one_known_error_keeps_its_rate_on_clean_meters(law: str, limit: float, rate: float):
    statistic = clean(law).figures("edges", "statistic")
    for edge in KNOWN_EDGES:
        assert keeps((statistic[:, edge] > limit).sum(), rate)
    place = PLACES.index(KNOWN_PLACE[law])
    assert keeps((clean(law).figures("vertices", "fault_statistic")[:, place] > limit).sum(), rate)


@pytest.mark.parametrize("edge", KNOWN_EDGES)
@pytest.mark.parametrize("law", LAWS)
def test_an_error_of_the_detectable_size_is_found_in_eighty_per_cent(law: str, edge: int):
    rng = np.random.default_rng(21 + edge)
    readings = TRUE[law] + SD * rng.standard_normal((N, len(SD)))
    readings[:, edge] += clean(law).audits[0].tables["edges"]["detectable"][edge]
    statistic = per_network(list(blocks(law, readings)), "edges", "statistic")[:, edge]
    assert keeps((statistic > CRITICAL).sum(), 0.8)


@pytest.mark.parametrize("law", LAWS)
def test_a_fault_at_a_vertex_of_the_detectable_size_is_found_in_eighty_per_cent(law: str):
    """A leak that is fed by way of A, or a bench mark whose stated height is too high."""
    rng, place = np.random.default_rng(31), PLACES.index(KNOWN_PLACE[law])
    size = 4.13 * clean(law).audits[0].tables["vertices"]["fault_sd"][place]
    readings = TRUE[law] + SD * rng.standard_normal((N, len(SD)))
    if law == "balance":
        readings[:, [0, 2]] += size
    audits = list(blocks(law, readings, too_high=size))
    assert keeps((per_network(audits, "vertices", "fault_statistic")[:, place] > CRITICAL).sum(), 0.8)
    found = per_network(audits, "vertices", "fault")[:, place]
    assert found.mean() == pytest.approx(size, abs=3.3 * size / 4.13 / np.sqrt(N))


@pytest.mark.parametrize("law", LAWS)
def test_sidaks_limit_gives_at_most_the_stated_chance_of_any_suspect_where_tests_depend(law: str):
    """Sidak's inequality is one: dependent tests exceed together, so that fewer networks have a suspect at all."""
    audits = clean(law).audits
    alarms = sum(bool(audit.suspects) for audit in audits)
    assert 0 < alarms <= bounds(0.05)[1]
    edges, places = clean(law).figures("edges", "statistic"), clean(law).figures("vertices", "fault_statistic")
    largest = np.nanmax(np.hstack([edges, places]), axis=1)
    assert alarms == (largest > audits[0].asked["critical"]).sum()


def test_sidaks_limit_gives_just_the_stated_chance_where_tests_are_independent():
    """Ten meters in pairs along pipes that nothing joins: two meters and the leak between them are one test."""
    ends, tests = [("S", "J"), ("J", "T")], 10
    rng, net = np.random.default_rng(41), networks(ends, tests * BLOCK)
    opened = [f"{v}.{k}" for k in range(tests * BLOCK) for v in "ST"]
    few = balance(
        with_column(networks(ends, tests), y=[1.0] * (2 * tests)), "y", 1.0, opened[: 2 * tests], sidak=True
    )  # fmt: skip
    assert few.extra["chance"]["tests"] == tests
    largest = []
    for _ in range(N // BLOCK):
        readings = 5.0 + rng.standard_normal(2 * tests * BLOCK)
        audit = balance(with_column(net, y=readings), "y", 1.0, opened)
        largest.append(audit.tables["edges"]["statistic"].reshape(BLOCK, -1).max(axis=1))
    assert keeps((np.concatenate(largest) > few.asked["critical"]).sum(), 0.05)


def covers(audits: list[Audit], law: str) -> list[bool]:
    """For each edge, and vertex with a potential: whether the truth lies within 1.96 sd in 95 % of N networks.

    What the law alone decides (a dead end, a self-loop, a held height) has no sd but rounding, and is the truth.
    """
    kept = []
    for table, column, true in (("edges", "adjusted", TRUE[law]), ("vertices", "potential", [*HEIGHT.values()])):
        value, sd = (per_network(audits, table, name) for name in (column, f"{column}_sd"))
        for k in np.flatnonzero(~np.isnan(sd[0])):
            miss, decided = np.abs(value[:, k] - true[k]), sd[:, k].max() < 1e-12
            inside = miss <= FIVE_PER_CENT * sd[:, k]
            kept.append(bool(miss.max() < 1e-12) if decided else keeps(inside.sum(), 0.95))
    return kept


def chi_square_is_ordinary(audits: list[Audit]) -> bool:
    low, high = chi2.ppf([0.0005, 0.9995], sum(audit.dof for audit in audits))
    return low <= sum(audit.chi_square for audit in audits) <= high


@pytest.mark.parametrize("law", LAWS)
def test_adjusted_values_of_correlated_readings_are_as_sure_as_they_say(law: str):
    """A pipe without a meter among them; left out of account, the common errors would spoil it."""
    rng = np.random.default_rng(51)
    readings = TRUE[law] + SD * rng.standard_normal((N, len(SD)))
    for group in ("one", "two"):
        readings[:, [e for e, name in enumerate(GROUPS) if name == group]] += (
            COMMON_SD * rng.standard_normal(N)[:, None]
        )
    readings[:, 5] = np.nan
    names = [f"{name}.{k}" if name else "" for k in range(BLOCK) for name in GROUPS]
    net = with_column(networks(ENDS, BLOCK), meter=np.array(names, dtype=object))
    known, ignored = [], []
    for rows in readings.reshape(-1, BLOCK * len(ENDS)):
        one = with_column(net, y=rows)
        known.append(asked(law, one, BLOCK, sd=np.tile(SD, BLOCK), common="meter", common_sd=COMMON_SD))
        ignored.append(asked(law, one, BLOCK, sd=np.tile(SD, BLOCK)))
    assert {known[0].edges["standing"][5]} == {"inferred"}
    assert len(covers(known, law)) >= len(ENDS)
    assert all(covers(known, law))
    assert chi_square_is_ordinary(known)
    assert not all(covers(ignored, law))
    assert not chi_square_is_ordinary(ignored)


SENSORS = [  # edge, sensor's sd in its own unit, mounted, factor
    (0, 0.1, 1, ""), (0, 0.2, -1, ""), (1, 0.2, 1, ""), (2, 0.1, 1, "0.5"), (2, 0.3, 1, ""), (2, 0.1, -1, "2"),
    (3, 0.3, 1, ""), (4, 0.05, 1, "3.6"), (4, 0.3, 1, ""), (6, 0.1, -1, ""), (7, 0.1, 1, ""), (8, 0.2, 1, ""),
    (9, 0.1, 1, ""), (10, 0.1, 1, ""), (10, 0.15, -1, "0.5"),
]  # fmt: skip


@pytest.mark.parametrize("law", LAWS)
def test_adjusted_values_of_edges_read_several_times_are_as_sure_as_they_say(law: str):
    """Sensors that are mounted the other way round or read another unit among them, and an edge that none reads."""
    rng, net = np.random.default_rng(61), networks(ENDS, BLOCK)
    names = net.complex.edge_ids
    table = pd.DataFrame(
        [(names[k * len(ENDS) + e], mounted, factor) for k in range(BLOCK) for e, _, mounted, factor in SENSORS],
        columns=["edge", "mounted", "factor"],
    )
    edge, sd, mounted = (np.array([row[i] for row in SENSORS]) for i in range(3))
    factor = np.array([float(row[3] or 1) for row in SENSORS])
    audits = []
    for _ in range(N // BLOCK):
        own = mounted * TRUE[law][edge] / factor + sd * rng.standard_normal((BLOCK, len(SENSORS)))
        table["y"] = [repr(float(number)) for number in own.ravel()]
        audits.append(asked(law, net, BLOCK, sd=np.tile(sd, BLOCK), readings=table))
    plain = asked(law, with_column(networks(ENDS, 1), y=np.where(np.arange(11) == 5, np.nan, 1.0)), 1, sd=SD)
    assert audits[0].dof == BLOCK * (plain.dof + len(SENSORS) - 10)
    assert all(covers(audits, law))
    assert chi_square_is_ordinary(audits)
    statistic = np.concatenate([a.tables["readings"]["statistic"].reshape(BLOCK, -1) for a in audits])
    for k in np.flatnonzero(~np.isnan(statistic[0])):
        assert keeps((statistic[:, k] > FIVE_PER_CENT).sum(), 0.05)
