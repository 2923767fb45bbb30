"""The balance law cell by cell: net flux out of the faces of a plane mesh, or out of the cells of a solid."""

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from dec.arrays import AnyArray, FloatArray, IntArray
from dec.audit.meshes.fields import Integrals, boundary_sums, centres, group_sums, middles
from dec.audit.meshes.limits import Limit, table_of
from dec.audit.meshes.repeats import refuse_repeated
from dec.audit.meshes.statements import TOO_WIDE, counted, measured, n_undecided, renamed, worst
from dec.calculus.complex import Complex
from dec.calculus.dataset import Dataset
from dec.calculus.exact import check_stokes
from dec.findings import Finding
from dec.geometry.measures import cell_volumes, face_area_vectors

__all__ = ["Balances", "balance_cells"]

_WHOLE = "whole boundary"


@dataclass(frozen=True)
class Balances:
    """What the balance law found on a mesh.

    Attributes
    ----------
    tables : mapping of str to mapping of str to array
    dof : int
        Independent balances.
    verdict : str
    whole : tuple of Finding
        Exact statements on the whole mesh.
    notes, not_shown : tuple of str
    """

    tables: Mapping[str, Mapping[str, AnyArray]]
    dof: int
    verdict: str
    whole: tuple[Finding, ...] = ()
    notes: tuple[str, ...] = ()
    not_shown: tuple[str, ...] = ()


def balance_cells(data: Dataset, integrals: Integrals, bound: Limit, relations: int, unit: str | None) -> Balances:
    """The net outward flux of every cell, and of the boundary as a whole and in its named parts.

    Parameters
    ----------
    data : Dataset
        A mesh in the plane or a solid.
    integrals : Integrals
        Flux across edges of a plane mesh, or through faces of a solid.
    bound : Limit
    relations : int
        Between the balances: the last Betti number.
    unit : str or None

    Returns
    -------
    Balances
        Tables "faces" or "cells", and "boundaries", in which only the boundary as a whole is judged.

    Raises
    ------
    InputError
        If a face or cell is given twice.
    """
    K = data.complex
    refuse_repeated(K)
    what = ("face", "cell")[K.dim - 2]
    measure = face_area_vectors(K)[:, 2] if K.dim == 2 else cell_volumes(K)
    outward = np.where(measure < 0, -1, 1)
    sums = boundary_sums(integrals, outward)
    undecided = bound.undecided(sums)
    cells = table_of(np.arange(K.counts[-1]), sums, bound.of(sums), centres(K, K.dim), undecided=undecided)
    chain = K.chain(K.dim, outward)
    skin = chain.boundary().coefficients
    boundaries, left_out = _boundary_table(data, integrals, bound, skin)
    name = f"the net fluxes out of the {what}s add up to the flux out through the boundary"
    whole = renamed(check_stokes(chain, integrals.cochain), name)
    return Balances(
        {f"{what}s": cells, "boundaries": boundaries},
        K.counts[-1] - relations,
        _verdict(what, cells, boundaries, unit),
        (whole,),
        (*_notes(K, what, measure, skin), *left_out, *bound.doubts(sums, what)),
    )


def _boundary_table(
    data: Dataset, integrals: Integrals, bound: Limit, skin: IntArray
) -> tuple[dict[str, AnyArray], list[str]]:
    """Return the boundary as a whole, its loops in the plane, its named regions, and notes on regions left out."""
    K = data.complex
    facets = ("edges", "faces")[K.dim - 2]
    names, groups, notes = [_WHOLE], [np.flatnonzero(skin)], []
    if K.dim == 2:
        walks = K.boundary_walks()
        loops = np.split(walks.edges, walks.offsets[1:-1]) if len(walks) else []
        names += [f"boundary {k + 1}" for k in range(len(loops))]
        groups += [np.asarray(loop, np.int64) for loop in loops]
    for region in data.regions.values():
        if region.degree != K.dim - 1:
            continue
        inside = int((skin[region.cells] == 0).sum())
        if inside:
            notes.append(f"region {region.name} is left out: {inside} of its {len(region.cells)} {facets} lie inside")
            continue
        names.append(region.name)
        groups.append(region.cells)
    sums = group_sums(integrals, groups, skin)
    judged = np.arange(len(groups)) == 0
    places = np.stack([middles(K, K.dim - 1, group) for group in groups])
    ids = np.array(names, dtype=object)
    # the whole boundary is as well known as the sum of all cells, however rough the field is at some of it
    return table_of(ids, sums, bound.of(sums), places, judged=judged, more={facets: sums.terms}), notes


def _notes(K: Complex, what: str, measure: FloatArray, skin: IntArray) -> list[str]:
    notes = ["a net flux is positive outward; nothing has to balance through a part of the boundary alone"]
    backward, empty = int((measure < 0).sum()), int((measure == 0).sum())
    if backward:
        turn = "clockwise" if K.dim == 2 else "inside out (negative volume)"
        notes.append(f"{backward} of {counted(len(measure), what)} turned {turn}; outward is outward for them too")
    if empty:
        size = "area" if K.dim == 2 else "volume"
        notes.append(f"{counted(empty, what)} without {size}: the flux out is taken as turned")
    overlapping = int(np.count_nonzero(skin[K.incidences.uses > 1]))
    if overlapping:
        facet = ("edge", "face")[K.dim - 2]
        notes.append(f"{counted(overlapping, facet)} with {what}s that overlap on one side; these count as boundary")
    return notes


def _verdict(what: str, cells: Mapping[str, AnyArray], boundaries: Mapping[str, AnyArray], unit: str | None) -> str:
    row = int(np.argmax(boundaries["id"] == _WHOLE))
    total = f"{measured(boundaries['value'][row], unit)} out through the whole boundary"
    bad = int(np.count_nonzero(np.equal(cells["holds"], False)))
    if bad:
        found = worst(cells, unit, f"out of {what}")
        return f"{bad} of {counted(len(cells['id']), what)} not balanced, worst {found}; {total}"
    if not boundaries["holds"][row]:
        return f"every {what} balances, but not all together: {total} where {boundaries['limit'][row]:.2g} is allowed"
    undecided = n_undecided({what: cells})
    if undecided:
        return f"not decided at {undecided} of {counted(len(cells['id']), what)}{TOO_WIDE}; {total}"
    return f"every {what} balances within the limit; {total}"
