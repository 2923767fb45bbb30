"""What the reader of an audit has to know beside its figures: notes, and what was not shown."""

import numpy as np

from dec.arrays import BoolArray, IntArray
from dec.audit.adjustment import Adjustment
from dec.audit.flows import MOST_SPREAD_WORK
from dec.audit.laplacian import LARGEST_FOR_ALL
from dec.audit.names import counted, edge_names, few, vertex_names
from dec.audit.readings import Readings
from dec.calculus.complex import Complex

__all__ = ["datum_notes", "general_notes", "not_shown", "self_loop_notes", "supply_notes"]


def supply_notes(network: Complex, guessed: IntArray) -> list[str]:
    """A note on vertices taken as open because their supply is not given."""
    if not len(guessed):
        return []
    which = f"{counted(len(guessed), 'vertex', 'vertices')} without a supply value"
    return [f"{which} taken as open ({few(vertex_names(network, guessed))}); write 0 where nothing is put in"]


def self_loop_notes(network: Complex, *, balance: bool) -> list[str]:
    """A note on edges that start and end at one vertex."""
    edges = np.flatnonzero(network.tail == network.head)
    if not len(edges):
        return []
    which = f"{counted(len(edges), 'edge', 'edges')} with both ends at one vertex ({few(edge_names(network, edges))})"
    return [f"{which}; {'no balance sees such an edge' if balance else 'such an edge must read zero'}"]


def datum_notes(network: Complex, fixed: BoolArray, reached: IntArray) -> list[str]:
    """A note on parts whose potentials hang on no fixed one.

    Parameters
    ----------
    network : Complex
    fixed : bool array, shape (n0,)
    reached : int64 array, shape (n0,)
        Part of each vertex: what measured edges join, the fixed vertices taken as one.
    """
    if not fixed.any():
        return ["no potential is fixed: in each part the lowest-numbered vertex is taken as 0, only differences count"]
    held = np.zeros(int(reached.max()) + 1, dtype=bool)
    held[reached[fixed]] = True
    loose = np.flatnonzero(~held)
    if not len(loose):
        return []
    lowest = np.unique(reached, return_index=True)[1][loose]
    which = f"{counted(len(loose), 'part', 'parts')} without a fixed potential"
    names = few(vertex_names(network, lowest))
    return [f"{which}: only differences inside count there, measured from {names}, taken as 0"]


def general_notes(network: Complex, readings: Readings, adjustment: Adjustment) -> list[str]:
    """Notes that both laws share: what is unchecked or unknown, and what was left out."""
    notes = []
    if readings.sd is None:
        notes.append("no standard deviations given: the adjusted values give every reading the same weight")
    elif adjustment.adjusted_sd is not None and (
        np.isnan(adjustment.adjusted_sd) & (adjustment.standing == "inferred")
    ).any():  # fmt: skip
        notes.append(f"standard deviations of inferred values are left out: more than {MOST_SPREAD_WORK:,} steps")
    if adjustment.redundancy is None:
        notes.append(
            f"more than {LARGEST_FOR_ALL} unknowns: redundancies, tests of single edges and suspects are left out"
        )
    for word, says in (
        ("unchecked", "measured, but nothing can contradict them"),
        ("unknown", "not measured, and their values do not follow from the others"),
    ):
        edges = np.flatnonzero(adjustment.standing == word)
        if len(edges):
            names = few(edge_names(network, edges))
            notes.append(f"{counted(len(edges), 'edge', 'edges')} {word}: {says} ({names})")
    return notes


def not_shown(readings: Readings, adjustment: Adjustment, *, balance: bool) -> tuple[str, ...]:
    """What the audit does not show, in sentences."""
    what = "balance" if balance else "loop"
    texts = [f"errors that cancel in every {what}, and errors smaller than the detectable size of each edge"]
    if (adjustment.standing == "unchecked").any():
        texts.append("errors of unchecked edges, however large")
    if not readings.measured.all():
        texts.append("anything on edges that are not measured beyond what follows from the others")
    if balance:
        texts.append(
            "safety: figures that balance are no evidence that there is no leak, that a space may be entered or that "
            "an alarm may be muted; local codes and licensed practice decide"
        )
    else:
        texts.append("a shift common to all fixed values; local codes and licensed practice decide what is accepted")
    return tuple(texts)
