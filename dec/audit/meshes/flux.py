"""The balance law on a mesh: nothing may appear or vanish in a face, a cell or a closed shell."""

from dec.audit.meshes.cells import Balances, balance_cells
from dec.audit.meshes.fields import Integrals, integrated, mesh_counts
from dec.audit.meshes.limits import read_limit
from dec.audit.meshes.shells import balance_shells
from dec.audit.meshes.statements import all_hold, whole_rows
from dec.audit.record import Audit
from dec.calculus.complex import Complex
from dec.calculus.dataset import Dataset

__all__ = ["audit_flux"]

_NOT_VALIDATED = "that the field is right: a conserved flux is not a validated model"


def audit_flux(data: Dataset, field: str, at: str | None, limit: float | str | None, unit: str | None) -> Audit:
    """Whether as much of a vector field flows out of every part of a mesh as flows in; see `dec.balance`.

    Parameters
    ----------
    data : Dataset
        A mesh in the plane (one balance a face), a surface in space (one a closed shell) or a solid (one a cell).
    field : str
    at : "vertices", "cells" or None
    limit : None, float or str
        None: the integration rule's own estimated error; a number; or a percentage of gross ("0.1%"), gross being
        the sum of the magnitudes of the fluxes out of and into the part.
    unit : str or None
        Of the flux; echoed.

    Returns
    -------
    Audit
        Tables "faces" or "cells" and "boundaries", or "shells" and "regions"; each worst first. ``holds`` is None
        where a surface has no closed shell.

    Raises
    ------
    InputError
        If the dataset is no mesh or has no points, the field cannot be used, the limit is no limit, a face or cell is
        given twice, or the faces of a closed shell are not turned alike.

    Notes
    -----
    Net fluxes are positive outward. They are added up in floating point; that those of all cells together are the
    flux out through the boundary is decided exactly.
    """
    K = data.complex
    bound = read_limit(limit)
    integrals = integrated(data, field, at, "flux")
    counts, betti = mesh_counts(K)
    if integrals.cochain.degree == K.dim - 1:
        found = balance_cells(data, integrals, bound, betti[-1], unit)
    else:
        found = balance_shells(data, integrals, bound, unit)
    notes = [
        f"flux {_through(K, integrals)}, integration rule: {integrals.rule}",
        bound.said("the sum of the magnitudes of the fluxes that are added up", unit),
    ]  # fmt: skip
    return Audit(
        "balance", _holds(found), data, counts, found.dof, None, bound.absolute, None, found.tables,
        notes=(*data.notes, *notes, *found.notes),
        not_shown=(bound.unseen(), _NOT_VALIDATED, *found.not_shown),
        asked={"field": field, "at": integrals.at, "limit": limit, "unit": unit},
        method=f"flux of the field {_through(K, integrals)}, added up outward",
        extra={"shares": None, "whole": whole_rows(found.whole), "verdict": found.verdict},
    )  # fmt: skip


def _through(K: Complex, integrals: Integrals) -> str:
    return "across every edge" if integrals.cochain.degree == 1 else "through every face"


def _holds(found: Balances) -> bool | None:
    return all_hold(found.tables) if found.dof else None
