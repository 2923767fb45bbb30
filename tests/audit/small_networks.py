"""Small random networks with everything that can go wrong in one, the same at every run."""

import random
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
import pandas as pd

from dec.calculus.dataset import Dataset

Ends = list[tuple[int, int]]


@dataclass
class Case:
    """Parallel edges, self-loops, missing readings (sometimes all), isolated vertices and several parts occur.

    `numbers` holds supplies or held potentials by vertex; None where no such column is used.
    """

    n: int
    ends: Ends
    reading: dict[int, Fraction]
    sd: list[Fraction]
    chosen: list[int]
    numbers: dict[int, Fraction] | None
    net: Dataset

    @property
    def names(self) -> list[str]:
        return [f"v{v}" for v in self.chosen]


def parts(n: int, pairs: Ends) -> list[int]:
    """The lowest vertex that each vertex is joined with, by relabelling again and again."""
    label = list(range(n))
    for a, b in pairs:
        low, high = sorted((label[a], label[b]))
        label = [low if x == high else x for x in label]
    return label


def flow_case(seed: int, widest: int = 0) -> Case:
    """Vertices that are open (`chosen`), and in every second case supplies that closed parts can balance."""
    rng = random.Random(seed)
    n, ends, reading, sd, frame = _readings(rng, widest)
    opened = _some_vertices(rng, n)
    if rng.random() < 0.5:
        net = Dataset.from_frames(frame, pd.DataFrame({"id": [f"v{v}" for v in range(n)]}))
        return Case(n, ends, reading, sd, opened, None, net)
    supply = {v: Fraction(rng.randint(-50, 50), 10) for v in range(n)}
    label = parts(n, ends)
    for part in set(label):
        members = [v for v in range(n) if label[v] == part]
        if not set(members) & set(opened):
            supply[members[-1]] -= sum(supply[v] for v in members)
    given = {v: supply[v] for v in range(n) if rng.random() < 0.9}
    opened = sorted({*opened, *(set(range(n)) - set(given))})
    nodes = {"id": [f"v{v}" for v in range(n)], "supply": [decimal(given.get(v)) for v in range(n)]}
    return Case(n, ends, reading, sd, opened, given, Dataset.from_frames(frame, pd.DataFrame(nodes)))


def difference_case(seed: int, widest: int = 0) -> Case:
    """Vertices whose potential is held (`chosen`)."""
    rng = random.Random(seed)
    n, ends, reading, sd, frame = _readings(rng, widest)
    fixed = {v: Fraction(rng.randint(-1000, 1000), 10) for v in _some_vertices(rng, n)}
    nodes = {"id": [f"v{v}" for v in range(n)], "height": [decimal(fixed.get(v)) for v in range(n)]}
    return Case(n, ends, reading, sd, sorted(fixed), fixed, Dataset.from_frames(frame, pd.DataFrame(nodes)))


def decimal(number: Fraction | None) -> str:
    return "" if number is None else str(float(number))


def _some_vertices(rng: random.Random, n: int) -> list[int]:
    share = rng.choice([0.0, 0.3])
    return [v for v in range(n) if rng.random() < share]


def _readings(rng: random.Random, widest: int) -> tuple[int, Ends, dict[int, Fraction], list[Fraction], pd.DataFrame]:
    n, m = rng.randint(1, 7), rng.randint(1, 11)
    ends = [(rng.randrange(n), rng.randrange(n)) for _ in range(m)]
    missing = rng.choice([0.0, 0.2, 0.5, 1.0])
    texts = ["" if rng.random() < missing else str(rng.randint(-300, 300) / 10 ** rng.randint(0, 2)) for _ in ends]
    spans = [f"1e{rng.randint(-widest, 0)}" if widest else rng.choice(["0.25", "0.5", "1", "2"]) for _ in ends]
    tail, head = np.array(ends).T
    frame = pd.DataFrame({
        "id": [f"e{e}" for e in range(m)], "from": [f"v{v}" for v in tail], "to": [f"v{v}" for v in head],
        "y": texts, "sd": spans,
    })  # fmt: skip
    reading = {e: Fraction(text) for e, text in enumerate(texts) if text}
    return n, ends, reading, [Fraction(text) for text in spans], frame
