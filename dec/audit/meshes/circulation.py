"""The loop law on a mesh: circulation round every face, every boundary loop and every hole."""

from collections.abc import Mapping

import numpy as np

from dec.arrays import AnyArray
from dec.audit.meshes.fields import Integrals, boundary_sums, centres, integrated, mesh_counts, walk_places, walk_sums
from dec.audit.meshes.holes import Holes, find_holes, no_walks
from dec.audit.meshes.limits import Limit, read_limit, table_of
from dec.audit.meshes.statements import (
    TOO_WIDE,
    all_hold,
    beyond_limit,
    counted,
    n_undecided,
    renamed,
    whole_rows,
    worst,
)  # fmt: skip
from dec.audit.record import Audit
from dec.calculus.complex import Complex
from dec.calculus.dataset import Dataset
from dec.calculus.exact import check_stokes
from dec.findings import Finding
from dec.topology.polygons import Walks

__all__ = ["audit_circulation"]


def audit_circulation(data: Dataset, field: str, at: str | None, limit: float | str | None, unit: str | None) -> Audit:
    """Whether a vector field closes round every face, boundary loop and hole of a mesh; see `dec.loops`.

    Parameters
    ----------
    data : Dataset
        A surface or a solid with points.
    field : str
    at : "vertices", "cells" or None
    limit : None, float or str
        None: the integration rule's own estimated error; a number; or a percentage of gross ("0.1%"), gross being
        the sum of the magnitudes of the circulations along the edges of the loop.
    unit : str or None
        Of the circulation; echoed.

    Returns
    -------
    Audit
        Tables "faces", "boundaries" and "holes", each worst first, by |value| / limit. ``holds`` is True when all of
        them are within their limits, and None when they are but there are holes that could not be listed.

    Raises
    ------
    InputError
        If the dataset is no mesh or has no points, the field cannot be used, or the limit is no limit.

    Notes
    -----
    Circulation is taken along each edge by the rule of `dec.geometry.fields`, and added up round loops in floating
    point. That the faces together, turned alike, have the circulation of the boundary is decided exactly.
    """
    K = data.complex
    bound = read_limit(limit)
    integrals = integrated(data, field, at, "circulation")
    counts, betti = mesh_counts(K)
    holes = find_holes(K, betti[1])
    faces, doubts = _face_table(integrals, bound)
    boundaries = K.boundary_walks() if K.dim == 2 else no_walks()
    tables = {
        "faces": faces,
        "boundaries": _walk_table(integrals, boundaries, bound, "boundary"),
        "holes": _walk_table(integrals, holes.walks, bound, "hole"),
    }
    whole, turned = _whole(K, integrals)
    ok = all_hold(tables)
    rank = K.counts[1] - K.counts[0] + counts["components"]
    return Audit(
        "loop", None if ok and holes.unlisted else ok, data, counts, rank - holes.unlisted, None, bound.absolute, None,
        tables, notes=(
            *data.notes, f"circulation along every edge, integration rule: {integrals.rule}",
            bound.said("the sum of the magnitudes along the edges of the loop", unit), *doubts, turned,
            *_boundary_notes(K, boundaries), *holes.notes,
        ),
        not_shown=_not_shown(bound, holes), asked={"field": field, "at": integrals.at, "limit": limit, "unit": unit},
        method="circulation of the field along every edge, added up round every face, boundary loop and hole",
        extra={"shares": None, "whole": whole_rows((whole,)), "verdict": _verdict(tables, counts, holes, unit)},
    )  # fmt: skip


def _boundary_notes(K: Complex, boundaries: Walks) -> list[str]:
    notes = []
    if len(boundaries):
        notes.append(
            "a boundary is walked the way its faces are turned: with the surface on the left where they are turned "
            "counter-clockwise, so an outline runs counter-clockwise and the rim of a hole clockwise"
        )
    loose = int((K.incidences.uses == 1).sum()) - len(boundaries.edges) if K.dim == 2 else 0
    if loose:
        notes.append(
            f"{counted(loose, 'boundary edge')} belong to no closed loop, as edges of three or more faces interrupt "
            "the boundary; they are in the sums round faces only"
        )
    return notes


def _face_table(integrals: Integrals, bound: Limit) -> tuple[dict[str, AnyArray], list[str]]:
    K = integrals.cochain.complex
    sums = boundary_sums(integrals)
    undecided = bound.undecided(sums)
    table = table_of(np.arange(K.counts[2]), sums, bound.of(sums), centres(K, 2), undecided=undecided)
    return table, bound.doubts(sums, "face")


def _walk_table(integrals: Integrals, walks: Walks, bound: Limit, what: str) -> dict[str, AnyArray]:
    sums = walk_sums(integrals, walks)
    ids = np.array([f"{what} {k + 1}" for k in range(len(walks))], dtype=object)
    places = walk_places(integrals.cochain.complex, walks)
    more = {"edges": np.diff(walks.offsets)}
    return table_of(ids, sums, bound.of(sums), places, undecided=bound.undecided(sums), more=more)


def _whole(K: Complex, integrals: Integrals) -> tuple[Finding, str]:
    """Return the exact statement on the whole mesh, and a note on how the faces are turned in it."""
    if K.dim == 3:
        skin = K.chain(3, np.ones(K.counts[3], np.int64)).boundary()
        found = check_stokes(skin, integrals.cochain)
        name = "the circulations round the faces of the skin, turned outward, add up to zero"
        return renamed(found, name), "the circulation round a face is taken as the face is turned"
    sign = K.sheets.sign.astype(np.int64)
    found = check_stokes(K.chain(2, np.where(sign == 0, 1, sign)), integrals.cochain)
    one_sided = int((~K.sheets.is_orientable).sum())
    if one_sided:
        note = (
            f"{one_sided} of {counted(K.sheets.count, 'sheet')} one-sided, like a Moebius strip: no coherent "
            "orientation exists, the faces there are added up as stored and compared with the boundary of that chain"
        )
        return renamed(found, "the circulations round the faces, as stored, add up to that of their boundary"), note
    against = int((sign < 0).sum())
    note = "all faces of a sheet are turned alike"
    if against:
        note = f"{counted(against, 'face')} turned against the first of the sheet; turned alike in the sum over all"
    return renamed(found, "the circulations round the faces, turned alike, add up to the boundary's"), note


def _verdict(
    tables: Mapping[str, Mapping[str, AnyArray]], counts: Mapping[str, int], holes: Holes, unit: str | None
) -> str:
    faces = tables["faces"]
    bad = int(np.count_nonzero(np.equal(faces["holds"], False)))
    rounds = beyond_limit(tables["holes"], unit, "round") + beyond_limit(tables["boundaries"], unit, "round")
    around = f"; {', '.join(rounds)}" if rounds else ""
    if bad:
        found = worst(faces, unit, "round face")
        return f"{bad} of {counted(len(faces['id']), 'face')} not closed, worst {found}{around}"
    open_faces = n_undecided({"faces": faces})
    if rounds and not open_faces:
        return f"closed on every face{around}: no potential exists"
    if open_faces or n_undecided(tables):
        where = f"at {open_faces} of {counted(len(faces['id']), 'face')}" if open_faces else "round a boundary or hole"
        return f"not decided {where}{TOO_WIDE}{around}"
    if holes.unlisted:
        return f"closed on every face; {counted(holes.unlisted, 'hole')} not examined"
    places = ["face"] + ["boundary"] * bool(counts["boundary_loops"]) + ["hole"] * bool(counts["holes"])
    listed = " and ".join(filter(None, [", ".join(places[:-1]), places[-1]]))
    return f"closed on every {listed} within the limit: a potential exists"


def _not_shown(bound: Limit, holes: Holes) -> tuple[str, ...]:
    texts = (bound.unseen(), "that the field is right: one that closes everywhere is a gradient, not a validated model")
    return (*texts, "circulation round holes") if holes.unlisted else texts
