"""What the reader of an audit has to know beside its figures: notes, and what was not shown."""

import numpy as np

from dec.arrays import BoolArray, IntArray
from dec.audit.adjusted.adjustment import MOST_INFERRED_WORK, Adjustment
from dec.audit.adjusted.evidence import LOUDEST_PLACES, Evidence
from dec.audit.given.asked import Asked
from dec.audit.given.common_errors import CommonErrors
from dec.audit.given.deviations import percentage
from dec.audit.given.model import Model
from dec.audit.given.readings import Readings
from dec.audit.names import NAMED, counted, edge_names, few, vertex_names
from dec.audit.tested.single_errors import LEADING
from dec.audit.tested.testing import Tested
from dec.calculus.complex import Complex
from dec.report.wording import number

__all__ = [
    "common_note", "datum_notes", "difference_notes", "general_notes", "limit_note", "not_shown", "self_loop_notes",
    "supply_notes",
]  # fmt: skip


def common_note(found: CommonErrors, readings: Readings) -> str:
    """A note on the errors that readings share: how many readings, which groups, and the size."""
    moved = np.diff(found.moves.indptr) > 0
    n_moved = int(moved.sum()) if readings.repeats is None else int(moved[readings.repeats.edge].sum())
    said = counted(n_moved, "reading", "readings")
    groups = f"{counted(len(found.names), 'group', 'groups')} ({few(found.names)})"
    return f"{said} in {groups} share one error a group beside their own: {found.said}"


def difference_notes(asked: Asked, levelled: bool) -> list[str]:
    """Notes on the units that a levelling preset went by, and on standard deviations that are shares of differences."""
    notes = []
    if levelled:
        notes.append(f"differences taken as {asked.unit}, lengths as {asked.length_unit}")
    if isinstance(asked.sd, str) and percentage(asked.sd) is not None:
        notes.append(
            "standard deviations are a share of each difference; a share of a height difference is seldom its accuracy"
        )
    return notes


def limit_note(one: str) -> str:
    """A note that a limit names no suspect.

    Parameters
    ----------
    one : str
        What is held against the limit, a vertex or a loop.
    """
    return (
        f"a limit names no suspect: it says which {one} is out, not which reading; for that, give standard deviations"
    )


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

    Returns
    -------
    list of str
        Empty where every part has one.
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


def general_notes(network: Complex, model: Model, adjustment: Adjustment, tests: Tested) -> list[str]:
    """Notes that both laws share: what is unchecked or unknown, and what was left out."""
    notes = []
    if model.readings.sd is None and model.relative is not None:
        notes.append("the adjusted values weigh every line by the inverse of its length")
    elif model.readings.sd is None:
        notes.append("no standard deviations given: the adjusted values give every reading the same weight")
    elif adjustment.adjusted_sd is not None and (
        np.isnan(adjustment.adjusted_sd) & (adjustment.standing == "inferred")
    ).any():  # fmt: skip
        notes.append(f"standard deviations of inferred values are left out: more than {MOST_INFERRED_WORK:,} steps")
    if model.readings.sd is not None and not tests.is_all:
        notes += _left_out_notes(tests, adjustment.evidence, balance=adjustment.potential is None)
    elif model.readings.sd is not None and adjustment.redundancy is None:
        notes.append("redundancies are left out: an exact factor would fill; the single tests are exact")
    for word, of_one, of_many in (
        ("unchecked", "measured, but nothing can contradict it", "measured, but nothing can contradict them"),
        ("unknown", "not measured, and its value does not follow from the others",
         "not measured, and their values do not follow from the others"),
    ):  # fmt: skip
        edges = np.flatnonzero(adjustment.standing[: network.counts[1]] == word)
        if len(edges):
            names, says = few(edge_names(network, edges[: NAMED + 1])), of_one if len(edges) == 1 else of_many
            notes.append(f"{counted(len(edges), 'edge', 'edges')} {word}: {says} ({names})")
    return notes


def _left_out_notes(tests: Tested, evidence: Evidence, *, balance: bool) -> list[str]:
    """Notes on single tests that were not made, or estimated."""
    if evidence.diagonal is not None and not tests.relative_error:
        hidden = evidence.testable & np.isnan(evidence.diagonal)
        edges, places = int(hidden[: evidence.n_edges].sum()), int(hidden[evidence.n_edges :].sum())
        notes = []
        if edges:
            which = counted(edges, "reading", "readings")
            notes.append(f"redundancies and tests of {which} are left out: standard deviations lie too far apart there")
        if places:
            loud = f"the {LOUDEST_PLACES} loudest held values are tested"
            notes.append(f"{loud}; tests of {places} more are left out, each would take a solve")
        return notes
    if tests.relative_error:
        of = "them" if balance else "what a redundancy lacks to 1"
        says = (
            f"redundancies and tests of single edges are estimated by random projection, with a standard error of "
            f"{tests.relative_error:.0%} of {of}; the suspects' are exact"
        )
    else:
        says = (
            f"redundancies are left out, and single tests are exact for the {LEADING} readings with the largest "
            "corrections alone; --figures estimate or all gives them for every edge"
        )
    return [f"the network is too large for an exact factor: {says}"]


def not_shown(
    model: Model, adjustment: Adjustment, tests: Tested, *, balance: bool, unit: str | None = None
) -> tuple[str, ...]:
    """What the audit does not show, in sentences."""
    what = "balance" if balance else "loop"
    texts = [f"errors that cancel in every {what}"]
    own = tests.detectable[: model.n_edges]
    if np.isfinite(own).any():
        middle, largest = (_size(float(found), unit) for found in (np.nanmedian(own), np.nanmax(own)))
        sizes = middle if middle == largest else f"median {middle}, largest {largest}"
        n_own, n_checked = int(np.isfinite(own).sum()), int((adjustment.standing[: model.n_edges] == "checked").sum())
        of = "" if tests.is_all or n_own >= n_checked else f"; worked out for {n_own:,} of {n_checked:,}"
        texts[0] += f", and errors smaller than the detectable size of each edge ({sizes}{of})"
    if (adjustment.standing[: model.n_edges] == "unchecked").any():
        texts.append("errors of unchecked edges, however large")
    if not model.measured[: model.n_edges].all():
        texts.append("anything on edges that are not measured beyond what follows from the others")
    if balance:
        places = tests.detectable[len(model.tail) :]
        if np.isfinite(places).any():
            least, largest = (_size(float(found), unit) for found in (np.nanmin(places), np.nanmax(places)))
            sizes = least if least == largest else f"{least} to {largest}"
            texts.append(f"leaks below the detectable size at their vertex, {sizes}")
        texts.append(
            "safety: figures that balance are no evidence that there is no leak, that a space is safe to enter or that "
            "an alarm may be muted; local codes and licensed practice decide"
        )
    else:
        texts.append("a shift common to all fixed values; local codes and licensed practice decide what is accepted")
    return tuple(texts)


def _size(size: float, unit: str | None) -> str:
    return f"{number(size, 3)} {unit}" if unit else number(size, 3)
