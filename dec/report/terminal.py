"""A result as text for a terminal: rich renderables made from its JSON object, nothing read, nothing printed."""

from collections.abc import Iterator, Mapping, Sequence
from typing import Any

from rich import box
from rich.console import RenderableType
from rich.padding import Padding
from rich.table import Table
from rich.text import Text

from dec.report.suspicion import (
    called,
    chance_sentence,
    leak_words,
    part_sentences,
    reading_of,
    robust_sentences,
    suspect_sentences,
    together_sentences,
    what_if_sentence,
)
from dec.report.wording import checked_sentence, number, verdict_sentence, visible

__all__ = ["SHOWN", "audit_view", "check_view", "presets_view", "solve_view", "verify_view"]

_ROWS = 8
SHOWN = 20  # rows of each table that a view needs: more than its own, and all edges that are suspects
_AXES = ("x", "y", "z")
_ON_MESH = ("faces", "cells", "shells", "regions", "boundaries", "holes")
_ONE = {"vertices": "vertex", "edges": "edge", "faces": "face", "cells": "cell"}
_MARK = {True: "holds", False: "FAILS", None: "open"}
_STYLE = {True: "bold green", False: "bold red", None: "bold yellow"}


def audit_view(result: Mapping[str, Any]) -> Iterator[RenderableType]:
    """An audit for reading: verdict, first suspect and what was not checked, then the worst rows.

    Parameters
    ----------
    result : mapping
        The object that ``Audit.to_dict`` returns, with all rows or with `SHOWN` of them.

    Yields
    ------
    rich renderables
        Fit for 80 columns. Text of the caller's is never taken as markup.
    """
    yield _heading(result, "balance" if result["law"] == "balance" else "loops", result["holds"])
    yield _item("verdict", verdict_sentence(result))
    for place, line in enumerate(suspect_sentences(result)):
        yield _item("suspect" if not place else "", line)
    if checked_sentence(result):
        yield _item("checked", checked_sentence(result))
    for name, lines in (
        ("parts", part_sentences(result)), ("what if", [what_if_sentence(result)]),
        ("together", together_sentences(result)),
        ("robust", robust_sentences(result)), ("chance", [chance_sentence(result)]),
    ):  # fmt: skip
        for place, line in enumerate(filter(None, lines)):
            yield _item(name if not place else "", line)
    for place, statement in enumerate(result.get("whole") or ()):
        says = "exactly" if statement["holds"] else f"NOT: {statement['left']} against {statement['right']}"
        yield _item("exactly" if not place else "", f"{visible(statement['name'])}: {says}")
    yield Text("")
    yield from _tables(result)
    yield from _remarks("note", result["notes"])
    yield from _remarks("not shown", result["not_shown"])


def check_view(result: Mapping[str, Any]) -> Iterator[RenderableType]:
    """A soundness check for reading: what it is, then each statement and whether it holds."""
    failed = sum(not f["holds"] for f in result["findings"])
    yield _heading(result, "check", not failed)
    counts = (f"{n:,} {_ONE[name] if n == 1 else name}" for name, n in result["counts"].items())
    yield _item("cells", ", ".join(counts))
    numbers = result["betti"]
    betti = "holes not counted" if numbers is None else ", ".join(f"b{k} = {n}" for k, n in enumerate(numbers))
    yield _item(
        "shape", f"{_plural(result['components'], 'component')}, Euler characteristic {result['euler']}, {betti}"
    )
    if result["dim"] > 1:
        yield _item("surface" if result["dim"] == 2 else "solid", _kind(result))
    for name, text in result["facts"].items():
        yield _item(name, visible(text))
    table = _table(("", "left"), ("statement", "left"), ("against", "right"), ("where", "left"))
    for finding in result["findings"]:
        mark = Text(_MARK[finding["holds"]], _STYLE[finding["holds"]])
        against = "" if finding["holds"] else number(finding["measured"])
        table.add_row(mark, visible(finding["name"]), against, _places(finding["where"]))
    yield table
    yield from _remarks("note", result["notes"])


def verify_view(result: Mapping[str, Any]) -> Iterator[RenderableType]:
    """A recheck for reading: whether everything fits, what was looked at, and what a recheck cannot show."""
    word = "VERIFIES" if result["holds"] else "DOES NOT VERIFY"
    law = f" ({visible(result['law'])})" if result["law"] else ""
    yield Text(f"certificate{law}  ").append(word, _STYLE[result["holds"]])
    yield from _remarks("problem", result["problems"])
    yield from _remarks("checked", result["checked"])
    yield from _remarks("not shown", result["not_shown"])


def presets_view(result: Mapping[str, Any]) -> Iterator[RenderableType]:
    """The presets for reading: what each sets, in words, with its source."""
    for preset in result["presets"]:
        figures = ", ".join(f"{name}={number(float(value))}" for name, value in preset["figures"].items())
        yield Text(f"{preset['name']}  [{preset['sets']}]  {figures}")
        yield Padding(Text(visible(preset["says"].partition(": ")[2])), (0, 0, 1, 4))


def solve_view(result: Mapping[str, Any], *, why: bool = False) -> Iterator[RenderableType]:
    """A solution for reading: how it was found and how good it is, then the largest flows and potentials.

    Parameters
    ----------
    result : mapping
        The object that ``Solution.to_dict`` returns, with "inputs".
    why : bool
        Whether to say why the method was chosen.
    """
    names = ", ".join(visible(i["name"]) for i in result["inputs"])
    yield Text(f"solve for {visible(result['asked']['source'])}: {names}")
    yield _item("method", f"{result['method']}{', because ' + visible(result['because']) if why else ''}")
    bound = result["error_bound"]
    says = "no error bound" if bound is None else f"error at most {number(bound, 3)} in the energy norm"
    yield _item("accuracy", f"relative residual {number(result['residual'], 3)}; {says}")
    if result["energy"] is not None:
        low, high = result["energy"]
        yield _item("energy", f"between {number(low, 10)} and {number(high, 10)}")
    yield _item("gauge", visible(result["gauge"]))
    for name, rows, key in (("edges", result["edges"], "flow"), ("vertices", result["vertices"], "potential")):
        table = _table((name, "left"), (key, "right"), title=f"{name}, largest {key} first")
        for row in sorted(rows, key=lambda r: -abs(r[key]))[:_ROWS]:
            table.add_row(visible(row["id"]), number(row[key]))
        yield table
        yield from _more(len(rows), "--json or -o FILE")
    yield from _remarks("note", result["notes"])
    yield from _remarks("not shown", result["not_shown"])


def _heading(result: Mapping[str, Any], what: str, holds: bool | None) -> RenderableType:
    names = ", ".join(visible(i["name"]) for i in result["inputs"]) or "data from memory"
    asked = result.get("asked", {})
    of = visible(asked.get("value") or asked.get("field") or "")
    unit = f" [{visible(asked['unit'])}]" if asked.get("unit") else ""
    line = Text(f"{what}{' of ' + of if of else ''}{unit}: {names}  ")
    word = {True: "HOLDS", False: "DOES NOT HOLD", None: "NOT DECIDED" if result.get("dof") else "CANNOT BE CHECKED"}[
        holds
    ]
    if what == "check":
        word = "SOUND" if holds else "NOT SOUND"
    return line.append(word, _STYLE[holds])


def _tables(result: Mapping[str, Any]) -> Iterator[RenderableType]:
    if result["suspects"]:
        yield from _suspects(result)
    if result["law"] == "balance" and "vertices" in result:
        rows = [v for v in result["vertices"] if v["residual"] is not None]
        rows.sort(key=lambda v: -_badness(v))
        yield from _worst("vertices", "in - out + supply", rows, "residual", _count(result, "vertices", rows))
    elif "loops" in result:
        yield from _loops(result)
        if result["loops"] or result["asked"].get("fixed"):
            yield from _potentials(result["vertices"], _count(result, "vertices", result["vertices"]))
    tables = {name: result[name] for name in _ON_MESH if result.get(name)}
    places = (row.get(axis) for rows in tables.values() for row in rows for axis in _AXES)
    size = max((abs(place) for place in places if place is not None), default=0.0)
    size = result.get("shown", {}).get("largest_coordinate", size)
    for name, rows in tables.items():
        yield from _worst_cells(name, rows, size, _count(result, name, rows))


def _badness(row: Mapping[str, Any]) -> float:
    """Return what a vertex misses, in its sd or over its limit where it has one."""
    if row["statistic"] is not None:
        return float(row["statistic"])
    return float(abs(row["residual"]) / (row["limit"] or 1.0))


def _count(result: Mapping[str, Any], name: str, rows: Sequence[Any]) -> int:
    """Return how many rows there are in all, of which these may be the first."""
    return int(result.get("shown", {}).get("of", {}).get(name, len(rows)))


def _suspects(result: Mapping[str, Any]) -> Iterator[RenderableType]:
    table = _table(
        ("suspect", "left"), ("reads", "right"), ("all else", "right"), ("times sd", "right"), ("", "left"),
        title="what stands out, loudest first",
    )  # fmt: skip
    for suspect in result["suspects"][:_ROWS]:
        alike, is_place = suspect["inseparable_from"], suspect["kind"] == "vertex"
        more = f"or {called(alike[0], result['law'])}{', ...' if len(alike) > 1 else ''}" if alike else ""
        value, estimate = (None, "") if is_place else reading_of(suspect, result)
        words = ", ".join(filter(None, (leak_words(suspect, result) if is_place else "", more)))
        table.add_row(
            called(suspect, result["law"]), "" if is_place else number(value), estimate,
            number(suspect["statistic"], 3), words,
        )  # fmt: skip
    yield table
    yield from _more(len(result["suspects"]), "--json")


def _worst(
    title: str, heading: str, rows: Sequence[Mapping[str, Any]], key: str, count: int
) -> Iterator[RenderableType]:
    if not rows:
        return
    with_sd, with_limit = (any(row[name] is not None for row in rows) for name in ("sd", "limit"))
    spread = (("sd", "right"), ("times sd", "right")) if with_sd else ()
    held = (("allowed", "right"), ("", "left")) if with_limit else ()
    table = _table((title, "left"), (heading, "right"), *spread, *held, title=f"{title}, worst first")
    for row in rows[:_ROWS]:
        figures: list[str | Text] = [number(row["sd"], 3), number(row["statistic"], 3)] if with_sd else []
        if with_limit:
            mark = Text(_MARK[row["holds"]], _STYLE[row["holds"]]) if row["holds"] is not None else Text("")
            figures += [number(row["limit"], 4), mark]
        table.add_row(visible(row["id"]), number(row[key]), *figures)
    yield table
    yield from _more(count, "--json or --vertices FILE")


def _loops(result: Mapping[str, Any]) -> Iterator[RenderableType]:
    if not result["loops"]:
        return
    table = _table(
        ("loop", "left"),
        ("closes by", "right"),
        ("allowed", "right"),
        ("", "left"),
        ("legs", "left"),
        title="loops, worst first",
    )
    read_at = "at_vertices" in result
    for loop in result["loops"][:_ROWS]:
        legs = " ".join(f"{'+' if sign > 0 else '-'}{_leg(name, read_at)}" for name, sign in loop["legs"][:6])
        more = f" ... {len(loop['legs'])} legs" if len(loop["legs"]) > 6 else ""
        mark = Text(_MARK[loop["holds"]], _STYLE[loop["holds"]])
        ends = [visible(name) for name in loop["held"] or () if name != "outside"]
        held = f", {' to '.join(ends)} held" if ends else ""
        row = (number(loop["misclosure"]), number(loop["limit"], 4), mark, legs + more + held)
        table.add_row(visible(loop["id"]), *row)
    yield table
    yield from _more(_count(result, "loops", result["loops"]), "--json")


def _leg(name: str, read_at: bool) -> str:
    """Return a leg's name; one through a measured potential is no line but the way there from the datum."""
    return f"(reading {visible(name)})" if read_at and name.startswith("at ") else visible(name)


def _potentials(rows: Sequence[Mapping[str, Any]], count: int) -> Iterator[RenderableType]:
    with_sd = any(row["potential_sd"] is not None for row in rows)
    spread = (("sd", "right"),) if with_sd else ()
    table = _table(("vertices", "left"), ("adjusted", "right"), *spread, title="vertices, as numbered")
    for row in rows[:_ROWS]:
        figures = (number(row["potential_sd"], 3),) if with_sd else ()
        table.add_row(visible(row["id"]), number(row["potential"], 9), *figures)
    yield table
    yield from _more(count, "--json or --vertices FILE")


def _worst_cells(name: str, rows: Sequence[Mapping[str, Any]], size: float, count: int) -> Iterator[RenderableType]:
    """Yield one table; `size` is the largest coordinate of the audit, against which rounding noise shows as 0."""
    table = _table(
        (name, "left"),
        ("value", "right"),
        ("limit", "right"),
        ("", "left"),
        ("at", "left"),
        title=f"{name}, worst first",
    )
    for row in rows[:_ROWS]:
        places = (row[axis] for axis in _AXES if row.get(axis) is not None)
        place = ", ".join(number(p if abs(p) > 1e-12 * size else 0.0, 4) for p in places)
        mark = Text(_MARK[row["holds"]], _STYLE[row["holds"]])
        table.add_row(visible(row["id"]), number(row["value"]), number(row["limit"], 3), mark, place)
    yield table
    yield from _more(count, "--json or -o FILE" if name in ("faces", "cells") else "--json")


def _kind(result: Mapping[str, Any]) -> str:
    manifold = "manifold" if result["manifold"] else "not a manifold"
    sides = {True: "orientable", False: "not orientable", None: "orientation not defined"}[result["orientable"]]
    loops = result["boundary_loops"]
    edge = "closed" if result["closed"] else ("" if not loops else _plural(loops, "boundary loop"))
    return ", ".join(part for part in (manifold, sides, edge) if part)


def _places(where: Sequence[Any]) -> str:
    shown = [
        " - ".join(visible(p) for p in place) if isinstance(place, list) else visible(place) for place in where[:4]
    ]
    return ", ".join(shown) + (", ..." if len(where) > 4 else "")


def _remarks(name: str, texts: Sequence[str]) -> Iterator[RenderableType]:
    for place, text in enumerate(texts):
        yield _item(name if not place else "", visible(text))


def _item(name: str, text: str) -> RenderableType:
    grid = Table.grid(padding=(0, 1))
    grid.add_column(width=9, style="bold")
    grid.add_column(overflow="fold")
    grid.add_row(Text(name), Text(text))
    return Padding(grid, (0, 0, 0, 2))


def _table(*columns: tuple[str, Any], title: str = "") -> Table:
    heading = Text(title) if title else None
    table = Table(
        box=box.SIMPLE_HEAD, title=heading, title_justify="left", pad_edge=False, min_width=len(title)
    )  # a title wider than its table would be broken in two
    for text, justify in columns:
        table.add_column(Text(text), justify=justify, overflow="fold")
    return table


def _more(count: int, where: str = "--json or -o FILE") -> Iterator[RenderableType]:
    if count > _ROWS:
        yield Text(f"  {count - _ROWS:,} more in {where}\n")


def _plural(count: int, noun: str) -> str:
    return f"{count:,} {noun}{'' if count == 1 else 's'}"
