"""Random networks as files in many dialects, with the certificates of their audits and solutions."""

import random
from collections.abc import Callable
from dataclasses import dataclass
from decimal import Decimal
from pathlib import Path

import dec
from dec.audit.certificate import audit_certificate
from dec.solvers.certificate import solve_certificate
from dec.solvers.network import solve_network

LAWS = ("balance", "loop", "solve")


@dataclass
class Certified:
    """A certificate and the files it was made from; `rows` are the lines of each file that hold a row."""

    law: str
    certificate: bytes
    files: dict[str, bytes]
    rows: dict[str, list[int]]


def certified(folder: Path, law: str, seed: int, *, with_lines: bool = True) -> Certified:
    """One random network in a random dialect, audited or solved, with its certificate."""
    rng = random.Random(f"{law} {seed}")
    sign = rng.choice([".", ","])
    separator = rng.choice([";", "\t"] if sign == "," else [";", "\t", ","])
    write = _Writer(rng, separator, sign)
    n = rng.randint(2, 9)
    names = [f"v{v}" if rng.random() < 0.9 else f"no {v} é" for v in range(n)]
    ends = [(names[v], names[rng.randrange(v)]) for v in range(1, n)]  # in one piece
    ends += [(rng.choice(names), rng.choice(names)) for _ in range(rng.randint(0, 8))]
    has_ids, missing = rng.random() < 0.8, 0.0 if law == "solve" else 0.2
    edges = [
        {**({"id": f"e{k}"} if has_ids else {}), "from": a, "to": b,
         "value": "" if rng.random() < missing else write.number(law == "solve"), "note": write.note()}
        for k, (a, b) in enumerate(ends)
    ]  # fmt: skip
    nodes = [{"id": name, "at": "", "more": "", "remark": write.note()} for name in names]
    for node in nodes[:-1]:
        node["at"] = write.number(False) if law != "loop" or rng.random() < 0.4 else ""
        node["more"] = write.number(False) if law == "balance" and rng.random() < 0.4 else ""
    if law == "solve":
        nodes[-1]["more"] = write.number(False)  # held there
    files = {"edges.csv": write.table(edges), "nodes.csv": write.table(nodes)}
    for name, data in files.items():
        (folder / name).write_bytes(data)
    net = dec.read(folder / "edges.csv", folder / "nodes.csv", decimal=sign)
    contents = list(files.values()) if with_lines else []
    make: Callable[[], bytes] = {
        "balance": lambda: audit_certificate(_balance(net, rng), contents=contents),
        "loop": lambda: audit_certificate(_loops(net, rng), fixed="at", contents=contents),
        "solve": lambda: solve_certificate(
            solve_network(net, "at", "value", "more"), net, "at", "value", "more", contents=contents
        ),
    }[law]  # fmt: skip
    rows = {
        name: sorted({int(line) for column in net.columns[degree].values() for line in column.lines})
        for degree, name in ((1, "edges.csv"), (0, "nodes.csv"))
    }
    return Certified(law, make(), files, rows)


def _balance(net: dec.Dataset, rng: random.Random) -> dec.Audit:
    opened = [net.complex.vertex_ids[0]]  # so that supplies need not add up to zero
    given = {"sd": 0.1} if rng.random() < 0.5 else {"limit": rng.choice([None, "5", "0.25"])}
    return dec.balance(net, value="value", open=opened, supply="at", storage="more", unit="l/s", **given)


def _loops(net: dec.Dataset, rng: random.Random) -> dec.Audit:
    given = {"sd": 0.1} if rng.random() < 0.5 else {"limit": rng.choice([None, "5", "0.25"])}
    return dec.loops(net, value="value", fixed="at", **given)


class _Writer:
    """Tables in one dialect: separator, line ends, byte order mark, blanks, quotation marks, blank lines."""

    def __init__(self, rng: random.Random, separator: str, sign: str) -> None:
        self.rng, self.separator, self.sign = rng, separator, sign
        self.end = rng.choice(["\n", "\r\n", "\r"])
        self.mark = rng.random() < 0.3

    def number(self, is_positive: bool) -> str:
        rng = self.rng
        value = Decimal(rng.randint(1 if is_positive else -900, 900)).scaleb(-rng.randint(0, 3))
        text = f"{value:E}" if rng.random() < 0.1 else f"{value:f}"
        return text.replace(".", self.sign)

    def note(self) -> str:
        inner = "\n" if self.end == "\r\n" else " "
        return self.rng.choice(["", "seen", 'so "called"', f"a{self.separator}b", f"two{inner}lines", "0"])

    def cell(self, text: str) -> str:
        if any(mark in text for mark in (self.separator, '"', "\n", "\r")) or self.rng.random() < 0.05:
            return '"' + text.replace('"', '""') + '"'
        return f" {text} " if self.rng.random() < 0.1 else text

    def table(self, rows: list[dict[str, str]]) -> bytes:
        lines = [list(rows[0]), *(list(row.values()) for row in rows)]
        texts = [self.separator.join(map(self.cell, line)) for line in lines]
        if self.rng.random() < 0.3:
            texts.insert(
                self.rng.randint(1, len(texts)), self.rng.choice(["", "  ", self.separator * (len(rows[0]) - 1)])
            )
        return (("\ufeff" if self.mark else "") + self.end.join([*texts, ""])).encode()
