"""Digits that add up: the adjusted values of an audit as whole multiples of a unit that still obey its law."""

from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np

from dec.arrays import BoolArray, FloatArray, IntArray
from dec.audit.digits.grid import balanced_grid, steps_for
from dec.audit.digits.units import Units, read_units
from dec.audit.digits.whole import half_up, whole_flows
from dec.audit.exactly import as_text
from dec.audit.given.readings import Known, known_at_vertices, with_storage
from dec.audit.names import counted, few, vertex_names
from dec.audit.record import Audit
from dec.calculus.complex import Complex
from dec.errors import InputError
from dec.topology.graphs import components, joined

__all__ = ["Rounded", "known_supplies", "rounded"]


@dataclass(frozen=True, eq=False)
class Rounded:
    """Values of an audit as whole numbers of units.

    Attributes
    ----------
    audit : Audit
    units : Units
    edges : int64 array, shape (n1,)
        Flows or differences; 0 where `follows` is false.
    follows : bool array, shape (n1,)
        False on edges whose value does not follow from the readings.
    vertices : int64 array, shape (n0,)
        Balance: what goes in; 0 at open vertices. Loop law: potentials.
    stated : bool array, shape (n0,)
        Balance: where something is put in and the vertex is not open. Loop law: everywhere.
    notes : tuple of str
    """

    audit: Audit
    units: Units
    edges: IntArray
    follows: BoolArray
    vertices: IntArray
    stated: BoolArray
    notes: tuple[str, ...]


def rounded(
    audit: Audit, unit: object, *, supply: object = None, storage: object = None, round_supplies: bool = False
) -> Rounded:
    """The adjusted values of a network audit in whole units, so that what is published adds up exactly.

    Parameters
    ----------
    audit : Audit
        Of a network.
    unit : int, float or str
        A positive decimal, or an edge column of them; see `read_units`. The coarsest of a component counts in it.
    supply, storage : as given to `dec.balance`
        Needed only where they were not the names of columns.
    round_supplies : bool
        Whether a supply that is no whole multiple of the unit is rounded too, as a flow from the outside; otherwise
        it is refused.

    Returns
    -------
    Rounded
        Balance: what enters every closed vertex, supply included, is what leaves it, as whole numbers; every flow is
        the floor or the ceiling of the adjusted one. Vertices that only balance together, because a flow between them
        is not known, do so here. Loop law: potentials are rounded half up and each difference is that of its ends, so
        that every loop closes and no difference moves by a unit or more.

    Raises
    ------
    InputError
        If the audit is one of a mesh, a unit cannot be used, or a known supply is no whole multiple of it.
    AccuracyError
        If adjusted values are not accurate enough for that unit.

    Examples
    --------
    >>> import pandas as pd
    >>> from dec.audit.questions import balance
    >>> from dec.calculus.dataset import Dataset
    >>> rows = {"id": ["a", "b", "c", "d"], "from": ["S", "J", "J", "J"], "to": ["J", "T", "T", "T"],
    ...         "flow": ["1.0", "0.33", "0.33", "0.34"]}
    >>> audit = balance(Dataset.from_frames(pd.DataFrame(rows)), value="flow", sd=0.1, open=("S", "T"))
    >>> rounded(audit, "0.1").edges
    array([10,  3,  3,  4])
    """
    if "edges" not in audit.tables:
        message = "digits are rounded on a network, this audit is one of a mesh; leave digits out"
        raise InputError(message)
    units = read_units(audit.data, unit)
    if audit.law == "loop":
        return _rounded_differences(audit, units)
    return _rounded_flows(audit, units, known_supplies(audit, supply, storage), round_supplies)


def known_supplies(audit: Audit, supply: object = None, storage: object = None) -> Known | None:
    """What is put in at vertices less what is stored, as the audit was asked; None where neither was given.

    Parameters
    ----------
    audit : Audit
        Of a balance.
    supply, storage : as given to `dec.balance`
        Needed only where they were not the names of columns.

    Raises
    ------
    InputError
        If they were given otherwise, and are not given again.
    """
    found: list[Known | None] = []
    for what, given in (("supply", supply), ("storage", storage)):
        said = audit.asked.get(what)
        source: Any = given
        if given is None and isinstance(said, str) and said in audit.data.columns.get(0, {}):
            source = said
        if source is None and said is not None:
            message = f"{what} was given to the audit as {said}, not as a column; give {what}= here once more"
            raise InputError(message)
        found.append(None if source is None else known_at_vertices(audit.data, source, what))
    put_in, stored = found
    return put_in if stored is None else with_storage(put_in, stored)


def _rounded_flows(audit: Audit, units: Units, known: Known | None, round_supplies: bool) -> Rounded:
    network, n = audit.data.complex, audit.data.complex.counts[0]
    amount = np.asarray(audit.tables["edges"]["adjusted"], dtype=np.float64) / units.at(network.tail)
    follows = ~np.isnan(amount)
    is_open = _is_open(audit)
    whole, loose, given = _supplies(audit, units, known, is_open, round_supplies)
    group, n_groups = _groups(audit, follows, is_open)
    at = np.flatnonzero(loose)
    tail = group[np.concatenate([network.tail[follows], np.full(len(at), n)])]
    head = group[np.concatenate([network.head[follows], at])]
    put_in = np.zeros(n_groups, np.int64)
    np.add.at(put_in, group[:n], whole)
    put_in[group[n]] = 0
    flow = np.concatenate([amount[follows], given[at]])
    fine, parts = balanced_grid(tail, head, n_groups, flow, put_in, int(group[n]))
    found = whole_flows(tail, head, n_groups, fine, parts)
    edges = np.zeros(network.counts[1], np.int64)
    edges[follows] = found[: int(follows.sum())]
    whole[at] = found[int(follows.sum()) :]
    notes = []
    if len(at):
        which = f"{counted(len(at), 'supply', 'supplies')} rounded beside the flows"
        notes.append(f"{which} ({few(vertex_names(network, at))})")
    stated = ~is_open & (np.zeros(n, dtype=bool) if known is None else known.decimals.present)
    return Rounded(audit, units, edges, follows, whole, stated, (*notes, *_gap_notes(follows)))


def _rounded_differences(audit: Audit, units: Units) -> Rounded:
    network, n = audit.data.complex, audit.data.complex.counts[0]
    potential = np.asarray(audit.tables["vertices"]["potential"], dtype=np.float64)[:n]
    amount = potential / units.at(np.arange(n))
    parts = steps_for(amount)
    fine = np.rint(amount * parts).astype(np.int64)
    whole = half_up(fine, parts)
    follows = ~np.isnan(np.asarray(audit.tables["edges"]["adjusted"], dtype=np.float64))
    edges = np.where(follows, whole[network.head] - whole[network.tail], 0)
    fixed = {str(name) for name in audit.asked.get("fixed") or ()}
    names = vertex_names(network)
    # a float that is the nearest to a multiple of the unit stands for it
    off = np.flatnonzero(np.abs(fine - whole * parts) > np.maximum(1, np.abs(amount) * parts * 2.0**-50))
    moved = [name for name in names[off].tolist() if name in fixed]
    notes = []
    if moved:
        which = f"{counted(len(moved), 'fixed potential', 'fixed potentials')} rounded to the unit too"
        notes.append(f"{which} ({few(moved)})")
    stated = np.ones(n, dtype=bool)
    return Rounded(audit, units, edges, follows, whole, stated, (*notes, *_gap_notes(follows)))


def _gap_notes(follows: BoolArray) -> tuple[str, ...]:
    missing = int((~follows).sum())
    if not missing:
        return ()
    return (f"{counted(missing, 'edge', 'edges')} without a published value: it does not follow from the readings",)


def _is_open(audit: Audit) -> BoolArray:
    names = vertex_names(audit.data.complex)
    opened = {str(name) for name in audit.asked.get("open") or ()}
    return np.fromiter((name in opened for name in names.tolist()), bool, len(names))


def _groups(audit: Audit, follows: BoolArray, is_open: BoolArray) -> tuple[IntArray, int]:
    """Return what balances together: open vertices with the outside, which comes last, and ends of unknown flows."""
    network, n = audit.data.complex, audit.data.complex.counts[0]
    number, n_joined = joined(np.append(np.flatnonzero(is_open), n), n + 1)
    idle = ~follows
    count, label = components(number[network.tail[idle]], number[network.head[idle]], n_joined)
    return label[number], count


def _supplies(
    audit: Audit, units: Units, known: Known | None, is_open: BoolArray, round_supplies: bool
) -> tuple[IntArray, BoolArray, FloatArray]:
    """Return exact supplies in units, which vertices have one that must be rounded, and those in units."""
    network, n = audit.data.complex, audit.data.complex.counts[0]
    whole, loose, given = np.zeros(n, np.int64), np.zeros(n, dtype=bool), np.zeros(n)
    if known is None:
        return whole, loose, given
    needed = known.decimals.present & ~is_open
    above, below = units.counted(known.decimals)
    steps_for((above[needed] / below[needed]).astype(np.float64))
    measured = audit.tables.get("at_vertices")
    if measured is not None:
        unit, names = units.at(np.arange(n)), vertex_names(network)
        adjusted = dict(zip(map(str, measured["id"]), np.asarray(measured["adjusted"]).tolist(), strict=True))
        loose = needed & np.fromiter((name in adjusted for name in names.tolist()), bool, n)
        given[loose] = [adjusted[name] for name in names[loose].tolist()] / unit[loose]
    rest = needed & ~loose
    broken = rest & np.asarray(above % below != 0, dtype=bool)
    if broken.any() and not round_supplies:
        _refuse(known, int(np.argmax(broken)), units, network)
    given[broken] = (above[broken] / below[broken]).astype(np.float64)
    whole[rest & ~broken] = (above // below)[rest & ~broken].astype(np.int64)
    return whole, loose | broken, given


def _refuse(known: Known, vertex: int, units: Units, network: Complex) -> None:
    name = str(vertex_names(network, np.array([vertex]))[0])
    amount = as_text(int(known.decimals.integers[vertex]), known.decimals.places)
    unit = units.texts(np.ones(1, np.int64), np.array([vertex]))[0]
    message = (
        f"supplies must be whole multiples of the unit {unit}, vertex {name!r} has {amount}, which is "
        f"{float(Fraction(amount) / Fraction(unit)):.6g} of them; take a finer unit, or have supplies rounded too "
        "(round_supplies, --round-supplies)"
    )
    raise InputError(message)
