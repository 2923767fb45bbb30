"""The balance law on a surface in space: net flux out of every closed shell."""

from dataclasses import replace

import numpy as np

from dec.arrays import AnyArray, BoolArray, FloatArray, IntArray
from dec.audit.meshes.cells import Balances
from dec.audit.meshes.fields import Integrals, group_sums, middles, row_sums
from dec.audit.meshes.limits import Limit, Sums, table_of
from dec.audit.meshes.repeats import refuse_repeated
from dec.audit.meshes.statements import TOO_WIDE, beyond_limit, counted
from dec.calculus.complex import Complex
from dec.calculus.dataset import Dataset
from dec.errors import InputError
from dec.geometry.measures import face_centres
from dec.geometry.shape import shell_volumes

__all__ = ["balance_shells"]

_NAMED = 3


def balance_shells(data: Dataset, integrals: Integrals, bound: Limit, unit: str | None) -> Balances:
    """The net outward flux of every closed shell; that of open sheets and named face groups is listed.

    Parameters
    ----------
    data : Dataset
        A surface in space.
    integrals : Integrals
        Flux through faces, as they are turned.
    bound : Limit
    unit : str or None

    Returns
    -------
    Balances
        Tables "shells" and, where there are face groups, "regions". Only closed ones are judged.

    Raises
    ------
    InputError
        If a face is given twice, or the faces of a closed shell are not turned alike; the message gives the count.
    """
    K = data.complex
    refuse_repeated(K)
    label, count = K.sheets.label, K.sheets.count
    closed = _closed(K)
    badly = _badly_turned(K)
    _refuse_mixed(K, closed, badly)
    size = np.bincount(label, minlength=count)
    sums = row_sums(integrals, label, count)
    sums = replace(sums, value=np.where(badly == 0, sums.value, np.nan), terms=size)
    places = _sheet_places(K, label, size)
    ids = _sheet_names(closed)
    shells = table_of(
        ids, sums, bound.of(sums), places, judged=closed, undecided=bound.undecided(sums), more={"faces": size}
    )
    tables = {"shells": shells}
    regions = _region_table(data, integrals, bound)
    if regions is not None:
        tables["regions"] = regions
    return Balances(
        tables,
        int(closed.sum()),
        _verdict(shells, int(closed.sum()), unit),
        (),
        (*_notes(K, closed, badly, ids), *_doubts(bound, sums, closed)),
        ("that a part is tight: a closed mesh is not a tight part",),
    )


def _is_tilted_plane(K: Complex) -> bool:
    assert K.points is not None
    spread = np.cov(K.points.T)
    smallest, _, largest = np.linalg.eigvalsh(spread)
    return bool(smallest <= 1e-18 * largest)


def _closed(K: Complex) -> BoolArray:
    """Return for each sheet whether all its edges have exactly two faces."""
    uses = K.incidences
    closed = np.ones(K.sheets.count, dtype=bool)
    closed[K.sheets.label[uses.cell[uses.uses[uses.facet] != 2]]] = False
    return closed


def _badly_turned(K: Complex) -> IntArray:
    """Return for each sheet at how many edges its two faces are not turned alike."""
    one, _, opposite = K.incidences.pairs()
    return np.bincount(K.sheets.label[one[~opposite]], minlength=K.sheets.count)


def _refuse_mixed(K: Complex, closed: BoolArray, badly: IntArray) -> None:
    mixed = closed & (badly > 0)
    if not mixed.any():
        return
    one_sided = mixed & ~K.sheets.is_orientable
    if one_sided.any():
        mixed = one_sided
        way_out = "it is one-sided, so they cannot be; cut it open or take it out"
    else:
        faces = int(mixed[K.sheets.label[K.sheets.fewest_turns()]].sum())
        way_out = f"turning {counted(faces, 'face')} would do, dec check lists the edges"
    shell = int(np.cumsum(closed)[np.argmax(mixed)])
    message = (
        f"all faces of a closed shell must be turned alike for a flux out of it, in shell {shell} they are not: "
        f"{counted(int(badly[mixed].sum()), 'edge')} badly turned; {way_out}"
    )
    raise InputError(message)


def _sheet_places(K: Complex, label: IntArray, size: IntArray) -> FloatArray:
    middle = face_centres(K)
    sums = [np.bincount(label, weights=middle[:, k], minlength=len(size)) for k in range(3)]
    return np.asarray((np.stack(sums) / np.maximum(size, 1)).T)


def _sheet_names(closed: BoolArray) -> AnyArray:
    number = np.where(closed, np.cumsum(closed), np.cumsum(~closed))
    words = zip(closed.tolist(), number.tolist(), strict=True)
    names = np.empty(len(closed), dtype=object)
    names[:] = [f"shell {n}" if is_closed else f"open sheet {n}" for is_closed, n in words]
    return names


def _region_table(data: Dataset, integrals: Integrals, bound: Limit) -> dict[str, AnyArray] | None:
    K = data.complex
    regions = [region for region in data.regions.values() if region.degree == 2 and len(region.cells)]
    if not regions:
        return None
    groups = [region.cells for region in regions]
    sums = group_sums(integrals, groups, np.ones(K.counts[2], np.int64))
    judged = np.array([K.region(group).is_closed for group in groups])
    places = np.stack([middles(K, 2, group) for group in groups])
    ids = np.array([region.name for region in regions], dtype=object)
    undecided = bound.undecided(sums)
    more = {"faces": sums.terms}
    return table_of(ids, sums, bound.of(sums), places, judged=judged, undecided=undecided, more=more)


def _notes(K: Complex, closed: BoolArray, badly: IntArray, ids: AnyArray) -> list[str]:
    notes = ["a net flux is positive the way the faces are turned, outward for a shell turned outward"]
    if _is_tilted_plane(K):
        notes.append(
            "all points lie in one plane, but not at one z: turn the mesh into the plane z = constant to have every "
            "face balanced across its edges"
        )
    volume, doubt = shell_volumes(K)
    inward = np.flatnonzero(closed & (volume < -doubt))
    if len(inward):
        notes.append(
            f"turned inward (inside out, or the skin of a cavity): {_some(ids, inward)}; the value is the flux into "
            "the enclosed volume, nothing was flipped"
        )
    if not closed.all():
        opened = counted(int((~closed).sum()), "open sheet")
        notes.append(f"{opened}: nothing has to balance through an open surface")
    crowded = int((K.incidences.uses > 2).sum())
    if crowded:
        notes.append(
            f"{counted(crowded, 'edge')} with three or more faces (a baffle, or parts that touch): sheets end there "
            "and are not put together to shells"
        )
    mixed = np.flatnonzero(~closed & (badly > 0))
    if len(mixed):
        edges = counted(int(badly[mixed].sum()), "edge")
        notes.append(f"faces not turned alike at {edges}, so without a net flux: {_some(ids, mixed)}")
    return notes


def _doubts(bound: Limit, sums: Sums, closed: BoolArray) -> list[str]:
    shells = Sums(sums.value[closed], sums.gross[closed], sums.error[closed], sums.terms[closed])
    return [] if bound.kind == "rule" else bound.doubts(shells, "shell")


def _some(ids: AnyArray, rows: IntArray) -> str:
    more = f" and {len(rows) - _NAMED} more" if len(rows) > _NAMED else ""
    return ", ".join(str(name) for name in ids[rows[:_NAMED]]) + more


def _verdict(shells: dict[str, AnyArray], n_closed: int, unit: str | None) -> str:
    if not n_closed:
        return "no closed shell, so nothing has to balance"
    bad = int(np.count_nonzero(np.equal(shells["holds"], False)))
    if bad:
        found = ", ".join(beyond_limit(shells, unit, "out of"))
        return f"{bad} of {counted(n_closed, 'closed shell')} not balanced: {found}"
    if not np.equal(shells["holds"][np.isfinite(shells["limit"])], True).all():
        return f"whether the {counted(n_closed, 'closed shell')} balances is not decided{TOO_WIDE}"
    return f"every closed shell balances within the limit ({n_closed} in all)"
