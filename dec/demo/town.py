"""Harrowmere at any size: one hour of the meters of a made-up water network, with the faults that were planted in it.

Run: ``python -m dec.demo.town --edges 1000000 DIR`` writes pipes.csv and nodes.csv there.
"""

import argparse
import sys
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from dec.arrays import AnyArray, BoolArray, IntArray, ObjectArray
from dec.demo.streets import Streets, balanced_flows, laid_out, levels, net_inflow
from dec.errors import DecError, InputError, OutputError
from dec.files.tables_out import csv_bytes
from dec.files.writing import write_atomically

if TYPE_CHECKING:
    import pandas as pd

__all__ = ["Town", "main", "town"]

_SMALLEST, _LARGEST, _SMALLEST_ZONE = 200, 10_000_000, 40
_LARGEST_SIZE = 1e6
_LOUD = 0.8  # meters that are faulty stand on pipes that carry more than this share of all pipes
# Thousandths of L/s, of metres and of the readings' unit, all whole numbers
_FLOW_FLOOR, _FLOW_SHARE = 50, 0.01
_LEVEL_FLOOR, _LEVEL_PER_ROOT_KM = 2, 6.0


@dataclass(frozen=True, eq=False)
class Town:
    """A town's tables, what is true of it, and what was planted.

    Attributes
    ----------
    edges : DataFrame
        Columns id, from, to, length_m; flow and sd in L/s; dh and dh_sd, height differences in m. All text.
    nodes : DataFrame
        Columns id, x, y; demand in L/s (taken out: negative), empty where open is yes; height in m, given there only.
    flow : int64 array, shape (n1,)
        True flows in 0.001 L/s.
    supply : int64 array, shape (n0,)
        What is truly put in, in 0.001 L/s, leaks and reservoirs included: inflow - outflow + supply is 0 everywhere.
    level : int64 array, shape (n0,)
        True heights in 0.001 m.
    planted : tuple of (what, id)
        "reversed", "factor" and "leak", in this order.
    """

    edges: "pd.DataFrame"
    nodes: "pd.DataFrame"
    flow: IntArray
    supply: IntArray
    level: IntArray
    planted: tuple[tuple[str, str], ...]


def town(
    n_edges: int, *, seed: int = 0, zones: int = 1, unmetered: float = 0.05, reversed_meters: int = 0,
    factor_meters: int = 0, factor: float = 3.6, leaks: int = 0, leak: float = 5.0,
) -> Town:  # fmt: skip
    """A water network of so many pipes, with meter readings and levelled heights.

    Streets run on a grid whose corners are moved, some streets are missing, some have two pipes. Flows follow from
    demands and pipes and are then whole numbers of 0.001 L/s that balance exactly. Meters read them with a standard
    deviation of 1 % plus 0.05 L/s, rounding included; heights are levelled to 6 mm per root km.

    Parameters
    ----------
    n_edges : int
        200 to 10,000,000.
    seed : int
        The same seed gives the same town.
    zones : int
        Parts that no pipe joins; each has two reservoirs at least, which are open to the outside.
    unmetered : float
        Share of pipes without a meter, and again of pipes without a height difference.
    reversed_meters, factor_meters : int
        Meters that read the wrong sign, or `factor` times the flow; they stand on pipes that carry much.
    factor : float
        3.6 is a meter left in m3/h.
    leaks : int
        Nodes that lose water of which their demand knows nothing.
    leak : float
        L/s lost at each.

    Returns
    -------
    Town

    Raises
    ------
    InputError
        If there are too few or too many pipes, too many zones or faults for them, or a share that is none.

    Examples
    --------
    >>> made = town(200, reversed_meters=1)
    >>> len(made.edges), made.planted
    (200, (('reversed', 'P140'),))
    """
    _refuse_unfit(n_edges, zones, unmetered, (reversed_meters, factor_meters, leaks))
    if seed < 0 or not 0 < abs(factor) <= _LARGEST_SIZE or not abs(leak) <= _LARGEST_SIZE:
        message = (
            f"seed must be 0 or more, a factor not 0, a factor and a leak within {_LARGEST_SIZE:g}, got {seed}, "
            f"{factor:g} and {leak:g}"
        )
        raise InputError(message)
    layout, faults, noise = (np.random.default_rng([seed, part]) for part in range(3))
    streets = laid_out(n_edges, zones, layout)
    n, is_open = len(streets.points), np.zeros(len(streets.points), dtype=bool)
    is_open[streets.opened] = True
    demand = -layout.integers(60, 420, n) * (layout.random(n) < 0.9) * ~is_open
    leaking = faults.choice(np.flatnonzero(~is_open), leaks, replace=False)
    supply = demand.copy()
    supply[leaking] -= round(1000 * leak)
    flow = balanced_flows(streets, supply, layout)
    supply[streets.opened] = -net_inflow(streets, flow)[streets.opened]
    level = levels(streets, is_open, layout)
    sd = _FLOW_FLOOR + np.rint(_FLOW_SHARE * np.abs(flow)).astype(np.int64)
    reading, metered = _read(flow, sd, noise), noise.random(n_edges) >= unmetered
    chosen = _loud_meters(streets, flow, metered, is_open, reversed_meters + factor_meters, faults)
    turned, scaled = chosen[:reversed_meters], chosen[reversed_meters:]
    reading[turned] *= -1
    reading[scaled] = np.rint(factor * reading[scaled]).astype(np.int64)
    pipes, places = _names("P", n_edges), _node_names(is_open)
    edges = _edge_table(streets, pipes, places, (reading, sd), metered, level, noise, unmetered)
    nodes = _node_table(streets, places, demand, is_open, level)
    planted = [("reversed", pipes[e]) for e in turned] + [("factor", pipes[e]) for e in scaled]
    return Town(edges, nodes, flow, supply, level, (*planted, *(("leak", places[v]) for v in leaking)))


def _refuse_unfit(n_edges: int, zones: int, unmetered: float, faults: tuple[int, ...]) -> None:
    if not _SMALLEST <= n_edges <= _LARGEST:
        message = f"a town must have {_SMALLEST} to {_LARGEST:,} pipes, got {n_edges}"
    elif not 1 <= zones <= n_edges // _SMALLEST_ZONE:
        message = f"{n_edges} pipes make 1 to {n_edges // _SMALLEST_ZONE} zones, got {zones}"
    elif not 0 <= unmetered <= 0.5:
        message = f"the share of pipes without a meter must lie between 0 and 0.5, got {unmetered}"
    elif min(faults) < 0 or sum(faults) > n_edges // 20:
        message = f"{n_edges} pipes take 0 to {n_edges // 20} faults, got {sum(faults)}"
    else:
        return
    raise InputError(message)


def _read(true: IntArray, sd: IntArray, random: np.random.Generator) -> IntArray:
    """Return readings rounded to whole units; rounding adds 1/12 to the variance, so the noise has that much less."""
    return np.asarray(np.rint(true + random.standard_normal(len(true)) * np.sqrt(sd**2 - 1 / 12)), dtype=np.int64)


def _loud_meters(
    streets: Streets, flow: IntArray, metered: BoolArray, is_open: BoolArray, count: int, random: np.random.Generator
) -> IntArray:
    able = np.flatnonzero(metered & ~is_open[streets.head])
    loud = able[np.abs(flow[able]) >= np.quantile(np.abs(flow), _LOUD)]
    return np.asarray(random.choice(loud, count, replace=False), dtype=np.int64)


def _edge_table(
    streets: Streets, pipes: ObjectArray, places: ObjectArray, flow: tuple[IntArray, IntArray], metered: BoolArray,
    level: IntArray, random: np.random.Generator, unmetered: float,
) -> "pd.DataFrame":  # fmt: skip
    rise, levelled = level[streets.head] - level[streets.tail], random.random(len(pipes)) >= unmetered
    rise_sd = np.rint(_LEVEL_PER_ROOT_KM * np.sqrt(streets.length / 1000.0)).astype(np.int64)
    rise_sd = np.maximum(rise_sd, _LEVEL_FLOOR)
    return _frame({
        "id": pipes, "from": places[streets.tail], "to": places[streets.head],
        "length_m": _texts("%d", streets.length),
        "flow": _given(flow[0], metered), "sd": _given(flow[1], metered),
        "dh": _given(_read(rise, rise_sd, random), levelled), "dh_sd": _given(rise_sd, levelled),
    })  # fmt: skip


def _node_table(
    streets: Streets, places: ObjectArray, demand: IntArray, is_open: BoolArray, level: IntArray
) -> "pd.DataFrame":
    east, north = streets.points.T
    return _frame({
        "id": places, "x": _texts("%d", east), "y": _texts("%d", north), "demand": _given(demand, ~is_open),
        "open": np.where(is_open, "yes", "").astype(object), "height": _given(level, is_open),
    })  # fmt: skip


def _frame(columns: dict[str, ObjectArray]) -> "pd.DataFrame":
    import pandas as pd

    return pd.DataFrame(columns, dtype=object)


def _given(thousandths: IntArray, shown: BoolArray) -> ObjectArray:
    """Return decimals of three places, empty where nothing is shown."""
    texts = np.full(len(shown), "", dtype=object)
    texts[shown] = _texts("%.3f", thousandths[shown] / 1000.0)
    return texts


def _texts(form: str, values: AnyArray) -> ObjectArray:
    """Return the numbers as text, all of them in one formatting step."""
    return np.array(((form + "\n") * len(values) % tuple(values.tolist())).split("\n")[:-1], dtype=object)


def _names(letter: str, count: int) -> ObjectArray:
    return _texts(f"{letter}%0{len(str(count))}d", np.arange(1, count + 1))


def _node_names(is_open: BoolArray) -> ObjectArray:
    n_open = int(is_open.sum())
    return np.concatenate([_names("J", len(is_open) - n_open), _names("R", n_open)])


def main(arguments: Sequence[str] | None = None) -> int:
    """Write the tables of a town into a folder; exit code 0, or 3 or 5 with one line on standard error."""
    parser = argparse.ArgumentParser(prog="python -m dec.demo.town", description="Tables of a made-up water network.")
    parser.add_argument("dir", metavar="DIR", help="folder for pipes.csv and nodes.csv; made if it is not there")
    parser.add_argument("--edges", type=int, default=100_000, metavar="N", help="pipes (100000)")
    for name, what in (("seed", "of the random numbers"), ("zones", "parts that no pipe joins")):
        parser.add_argument(f"--{name}", type=int, default=int(name == "zones"), metavar="N", help=what)
    faults = ("meters that read the wrong sign", "meters that read 3.6 times the flow", "nodes that lose 5 L/s")
    for name, what in zip(("reversed", "factor", "leaks"), faults, strict=True):
        parser.add_argument(f"--{name}", type=int, default=0, metavar="N", help=f"{what} (0)")
    parser.add_argument("--force", action="store_true", help="replace existing files")
    options = parser.parse_args(arguments)
    try:
        _write(Path(options.dir), options)
    except DecError as error:
        sys.stderr.write(f"town: {ascii(str(error))[1:-1]}\n")
        return 5 if isinstance(error, OutputError) else 3
    return 0


def _write(folder: Path, options: Any) -> None:
    made = town(
        options.edges, seed=options.seed, zones=options.zones, reversed_meters=options.reversed,
        factor_meters=options.factor, leaks=options.leaks,
    )  # fmt: skip
    planted = {"what": [what for what, _ in made.planted], "id": [name for _, name in made.planted]}
    tables: dict[str, Mapping[str, Any]] = {
        "pipes.csv": _columns(made.edges), "nodes.csv": _columns(made.nodes), "planted.csv": planted,
    }  # fmt: skip
    for name in tables:
        if (folder / name).exists() and not options.force:
            message = f"{folder / name} exists; use --force to replace it, or name an empty folder"
            raise OutputError(message)
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        message = f"{folder}: the folder cannot be made ({error.strerror})"
        raise OutputError(message) from None
    for name, table in tables.items():
        write_atomically(folder / name, csv_bytes(table), force=options.force)


def _columns(frame: "pd.DataFrame") -> dict[str, AnyArray]:
    return {str(name): frame[name].to_numpy(dtype=object) for name in frame.columns}


if __name__ == "__main__":
    sys.exit(main())
