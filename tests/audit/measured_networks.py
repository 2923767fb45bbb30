"""Small random networks with readings at vertices, storage and common errors, each beside its reference."""

import random
from dataclasses import dataclass, replace
from fractions import Fraction
from functools import cache

import numpy as np
import pandas as pd

from dec.audit.questions import balance, loops
from dec.audit.record import Audit
from dec.calculus.columns import Column
from dec.calculus.dataset import Dataset

from .dense_reference import Reference, Row, differences, flows
from .small_networks import Case, decimal, difference_case, flow_case, parts

ZERO = Fraction(0)


@dataclass
class Measured:
    """A network, the arguments of its audit, and what the definitions say of it.

    `read_at` lists the vertices with a reading of their own; `error` says what one unit of an error at a vertex adds to
    the readings, where that can be at all.
    """

    law: str
    case: Case
    net: Dataset
    arguments: dict[str, object]
    read_at: list[int]
    exact: Reference
    error: dict[int, Row]

    def audit(self, **more: object) -> Audit:
        return (balance if self.law == "balance" else loops)(self.net, "y", **{**self.arguments, **more})

    def reading_of(self, e: int) -> int:
        """Which reading is that of a coordinate."""
        return self.exact.at.index(e)

    @property
    def groups(self) -> list[int]:
        """The lowest vertex that each balances together with."""
        opened = self.case.chosen
        idle = [ends for e, ends in enumerate(self.case.ends) if e not in self.case.reading]
        return parts(self.case.n, [*((opened[0], v) for v in opened), *idle])


@cache
def measured(law: str, seed: int, shared: str = "") -> Measured:
    """One network; `shared` is the size of a common error: "", a number or a percentage."""
    return _flows(seed, shared) if law == "balance" else _differences(seed, shared)


def _flows(seed: int, shared: str) -> Measured:
    case, rng = flow_case(seed), random.Random(seed + 10_000)
    has_supply, has_storage = rng.random() < 0.7, rng.random() < 0.5
    n, opened = case.n, set(case.chosen)
    supply, supply_sd = _at_vertices(rng, n, 0.9)
    storage, storage_sd = _at_vertices(rng, n, 0.6)
    if not has_supply:
        supply, supply_sd = dict.fromkeys(range(n), ZERO), {}
    if not has_storage:
        storage, storage_sd = {}, {}
    opened |= set(range(n)) - set(supply)
    square = {v: supply_sd.get(v, ZERO) ** 2 + (storage_sd.get(v, ZERO) if v in storage else ZERO) ** 2 for v in supply}
    read_at = [v for v in range(n) if square.get(v)]
    label = parts(n, case.ends)
    for part in set(label):  # what no vertex exchanges must add up
        members = [v for v in range(n) if label[v] == part]
        if not set(members) & (opened | set(read_at)):
            left = sum((supply[v] - storage.get(v, ZERO) for v in members), ZERO)
            if has_supply:
                supply[members[0]] -= left
            else:
                storage[members[0]] = storage.get(members[0], ZERO) + left
    put_in = {v: supply[v] - storage.get(v, ZERO) for v in supply}
    edges, common, arguments = _shared(case, rng, shared)
    nodes = {"id": [f"v{v}" for v in range(n)]}
    arguments |= {"sd": "sd", "open": [f"v{v}" for v in case.chosen]}
    for name, values, sds, is_there in (
        ("supply", supply, supply_sd, has_supply), ("storage", storage, storage_sd, has_storage),
    ):  # fmt: skip
        nodes[name] = [decimal(values.get(v)) for v in range(n)]
        nodes[f"{name} sd"] = [decimal(sds.get(v)) for v in range(n)]
        if is_there:
            arguments |= {name: name, f"{name}_sd": f"{name} sd"}
    closed = [v for v in range(n) if v not in opened]
    exact_put_in = {v: x for v, x in put_in.items() if v not in read_at}
    start, basis, leak = flows(case.ends, closed, exact_put_in, read_at)
    case.chosen = sorted(opened)
    exact = _reference(case, start, basis, common, [(put_in[v], square[v]) for v in read_at])
    error = {v: [row[i] for i in exact.at] for v, row in leak.items() if row is not None}
    net = Dataset.from_frames(edges, pd.DataFrame(nodes))
    return Measured("balance", case, net, arguments, read_at, exact, error)


def _differences(seed: int, shared: str) -> Measured:
    case, rng = difference_case(seed), random.Random(seed + 20_000)
    height = {v: Fraction(rng.randint(-1000, 1000), 10) for v in range(case.n) if rng.random() < 0.5}
    sd = {v: Fraction(rng.choice(["0", "0.25", "0.5", "1"])) for v in height if rng.random() < 0.6}
    read_at = [v for v in height if sd.get(v)]
    fixed = {v: x for v, x in height.items() if not sd.get(v)}
    edges, common, arguments = _shared(case, rng, shared)
    nodes = {
        "id": [f"v{v}" for v in range(case.n)], "height": [decimal(height.get(v)) for v in range(case.n)],
        "height sd": [decimal(sd.get(v)) for v in range(case.n)],
    }  # fmt: skip
    arguments |= {"sd": "sd", "fixed": "height", "fixed_sd": "height sd"}
    start, basis, moved = differences(case.ends, case.n, fixed, read_at)
    case.chosen = sorted(fixed)
    case.numbers = fixed
    exact = _reference(case, start, basis, common, [(height[v], sd[v] ** 2) for v in read_at])
    error = {v: [row[i] for i in exact.at] for v, row in moved.items()}
    net = Dataset.from_frames(edges, pd.DataFrame(nodes))
    return Measured("loop", case, net, arguments, read_at, exact, error)


def _at_vertices(rng: random.Random, n: int, share: float) -> tuple[dict[int, Fraction], dict[int, Fraction]]:
    """Numbers at some vertices, some of them measured, some with an sd of 0."""
    given = {v: Fraction(rng.randint(-50, 50), 10) for v in range(n) if rng.random() < share}
    return given, {v: Fraction(rng.choice(["0", "0.25", "0.5", "1"])) for v in given if rng.random() < 0.4}


def _shared(case: Case, rng: random.Random, size: str) -> tuple[pd.DataFrame, dict[str, list[Fraction]], dict]:
    """The edge table, how far each common error moves each edge, and the arguments that say so."""
    crew = [rng.choice(["", "north", "south", "east"]) for _ in case.ends]
    frame = pd.DataFrame({
        "id": [f"e{e}" for e in range(len(case.ends))],
        "from": [f"v{a}" for a, _ in case.ends], "to": [f"v{b}" for _, b in case.ends],
        "y": [decimal(case.reading.get(e)) for e in range(len(case.ends))],
        "sd": [decimal(sd) for sd in case.sd], "crew": crew,
    })  # fmt: skip
    if not size:
        return frame, {}, {}
    share = Fraction(size.rstrip("%")) / 100 if size.endswith("%") else None
    moves = {
        name: [
            ZERO if crew[e] != name or e not in case.reading
            else Fraction(size) if share is None else share * case.reading[e]
            for e in range(len(case.ends))
        ]
        for name in ("north", "south", "east")
    }  # fmt: skip
    return frame, moves, {"common": "crew", "common_sd": size}


def _reference(
    case: Case, start: Row, basis: list[Row], common: dict[str, list[Fraction]], more: list[tuple[Fraction, Fraction]]
) -> Reference:
    seen, m = sorted(case.reading), len(case.ends)
    at = seen + list(range(m, m + len(more)))
    return Reference(
        start, basis, at, [*(case.reading[e] for e in seen), *(y for y, _ in more)],
        [*(case.sd[e] ** 2 for e in seen), *(square for _, square in more)],
        [[moves[e] for e in seen] + [ZERO] * len(more) for moves in common.values()],
    )  # fmt: skip


def rows_of_vertices(net: Measured) -> dict[int, int]:
    """The row of the vertex table that each vertex is told in."""
    n, group = net.case.n, net.groups
    if net.law == "loop":
        return {v: v for v in range(n)}
    joined = [g for g in sorted(set(group)) if group.count(g) > 1 and all(group[v] != g for v in net.case.chosen)]
    return {v: n + joined.index(group[v]) if group[v] in joined else v for v in range(n)}


def possible_errors(net: Measured, audit: Audit) -> dict[tuple[str, str], Row]:
    """By kind and id, what one unit of each error adds to the readings; only those that the readings can contradict."""
    exact, m, at = net.exact, len(net.case.ends), rows_of_vertices(net)
    names, found = audit.tables["vertices"]["id"].tolist(), {}
    for k, i in enumerate(exact.at):
        kind = "edge" if i < m else "supply" if net.law == "balance" else "potential"
        found[kind, f"e{i}" if i < m else f"v{net.read_at[i - m]}"] = exact.alone(k)
    found |= {("vertex", names[at[v]]): error for v, error in net.error.items()}
    return {name: error for name, error in found.items() if any(exact.seen(error))}


def well_checked(law: str, seed: int) -> Measured:
    """A network whose every edge is measured, one vertex open or held, with readings that the law admits."""
    rng = random.Random(seed + 40_000)
    n, m = 6, 13
    ends = [(v, rng.randrange(v)) for v in range(1, n)] + [(rng.randrange(n), rng.randrange(n)) for _ in range(m - n)]
    sd = [Fraction(rng.choice(["0.25", "0.5", "1"])) for _ in ends]
    free: dict[int, Fraction] = {}
    if law == "balance":
        start, basis, moved = flows(ends, list(range(1, n)), free, [])
        arguments: dict[str, object] = {"sd": "sd", "open": ["v0"]}
    else:
        start, basis, moved = differences(ends, n, {0: ZERO}, [])
        arguments = {"sd": "sd", "fixed": {"v0": 0}}
    z = [Fraction(rng.randint(-40, 40)) for _ in basis[0]]
    reading = {e: sum((a * b for a, b in zip(basis[e], z, strict=True)), start[e]) for e in range(len(ends))}
    case = Case(n, ends, reading, sd, [0], None if law == "balance" else {0: ZERO}, None)  # type: ignore[arg-type]
    frame, _, _ = _shared(case, rng, "")
    net = Dataset.from_frames(frame, pd.DataFrame({"id": [f"v{v}" for v in range(n)]}))
    exact = _reference(case, start, basis, {}, [])
    error = {v: [row[i] for i in exact.at] for v, row in moved.items() if row is not None}
    return Measured(law, case, net, arguments, [], exact, error)


def with_readings(net: Measured, reading: dict[int, float]) -> Measured:
    """The same network with other readings of its measured edges, in its table and in its reference."""
    cells = np.array([reading.get(e, np.nan) for e in range(len(net.case.ends))])
    columns = {**net.net.columns, 1: {**net.net.columns[1], "y": Column("y", cells)}}
    told = [Fraction(repr(float(reading[i]))) if i in reading else net.exact.reading[k]
            for k, i in enumerate(net.exact.at)]  # fmt: skip
    return replace(net, net=replace(net.net, columns=columns), exact=replace(net.exact, reading=told))


def nearly_right(net: Measured, rng: np.random.Generator, size: float = 0.2) -> dict[int, float]:
    """Readings of the measured edges near values that the law admits."""
    right = {e: net.exact.coordinate(e) for e in net.case.reading}
    return {e: float(value[0]) + rng.normal(0, size) for e, value in right.items() if value is not None}


def columns_of(audit: Audit, name: str, m: int) -> np.ndarray:
    """A column of the edges, then of the readings at vertices."""
    table = audit.tables
    more = table["at_vertices"][name] if "at_vertices" in table else table["edges"][name][:0]
    assert len(table["edges"]["id"]) == m
    return np.concatenate([table["edges"][name], more])


def with_repeats(net: Measured, seed: int) -> tuple[pd.DataFrame, Reference]:
    """A table of one to three readings of each measured edge, and the reference with one row a reading.

    Sensors are turned and scaled; one reading in ten is far out.
    """
    rng, exact, m = random.Random(seed + 30_000), net.exact, len(net.case.ends)
    rows, place, reading, variance, source = [], [], [], [], []
    for k, e in enumerate(exact.at):
        if e >= m:
            continue
        for _ in range(rng.randint(1, 3)):
            sign, factor = rng.choice(["", "1", "-1"]), rng.choice(["", "1", "0.5", "10"])
            scale = Fraction(sign or 1) * Fraction(factor or 1)
            off = Fraction(rng.randint(-200, 200), 100) + (30 if rng.random() < 0.1 else 0)
            raw, sd = decimal((exact.reading[k] + off) / scale), rng.choice(["0.25", "0.5", "1"])
            rows.append({"edge": f"e{e}", "mounted": sign, "factor": factor, "y": raw, "own": sd})
            place.append(e)
            reading.append(Fraction(raw) * scale)
            variance.append((Fraction(sd) * scale) ** 2)
            source.append(k)
    order = list(range(len(rows)))
    rng.shuffle(order)
    more = [k for k, i in enumerate(exact.at) if i >= m]
    own = [i for i in exact.at if i >= m]
    frame = pd.DataFrame([rows[i] for i in order], columns=["edge", "mounted", "factor", "y", "own"])
    return frame, Reference(
        exact.start, exact.basis, [*(place[i] for i in order), *own],
        [reading[i] for i in order] + [exact.reading[k] for k in more],
        [variance[i] for i in order] + [exact.variance[k] for k in more],
        [[moves[source[i]] for i in order] + [ZERO] * len(more) for moves in exact.common],
    )  # fmt: skip
