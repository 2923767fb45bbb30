"""The two questions: do the flows balance, do the differences close?"""

from collections.abc import Iterable, Mapping
from typing import Any

from dec.audit.network import audit_differences, audit_flows
from dec.audit.record import Audit
from dec.calculus.dataset import Dataset
from dec.errors import InputError

__all__ = ["balance", "loops"]


def balance(
    data: Dataset, value: str | None = None, sd: object = None, open: str | Iterable[Any] = (),
    supply: Any = None, *, field: str | None = None, at: str | None = None, alpha: float = 0.05,
    limit: float | str | None = None, unit: str | None = None,
) -> Audit:  # fmt: skip
    """Do the flows add up? An audit of one network column, or of one mesh field.

    Parameters
    ----------
    data : Dataset
        From `dec.read` or `Dataset.from_frames`.
    value : str
        Network: the edge column of flows, positive from tail to head. An empty cell is not measured.
    sd : None, float, str or array_like of shape (n1,)
        Network: standard deviations, as one number, a percentage of the reading ("2%", "2%+0.1"), an edge column, or
        one number an edge.
    open : str or iterable of ids
        Network: vertices that exchange an unknown amount with the outside; a plain text names a yes-or-no column.
    supply : None, str, mapping or array_like of shape (n0,)
        Network: what is put in at vertices (taken out: negative), exactly known; a plain text names a node column.
        A vertex whose supply is empty, or that a mapping leaves out, is taken as open, and a note says so.
    field : str
        Mesh: the vector field whose flux is balanced.
    at : "vertices", "cells" or None
        Mesh: which field, where the file has the name at both.
    alpha : float
        Chance that the global test refuses readings that are in order.
    limit : None, float or str
        Network without sd: the largest residual allowed. Mesh: a number, or a percentage of gross ("0.1%"); by default
        the integration rule's own estimated error.
    unit : str or None
        Echoed wherever the values are shown.

    Returns
    -------
    Audit
        With sd, ``holds`` is the chi-square test at 1 - alpha; with `limit`, every residual within it; with neither,
        whether the decimals as written add up to exactly zero. None when nothing can be checked.

    Raises
    ------
    InputError
        If a column, field, id or number cannot be used.
    UnsolvableError
        If a part without an open vertex has supplies that do not add up to zero.
    AccuracyError
        If the largest standard deviation is more than about 10^7 times the smallest.

    Notes
    -----
    The residual of a vertex is inflow minus outflow plus supply.

    Examples
    --------
    >>> import pandas as pd
    >>> edges = pd.DataFrame({"id": ["in", "out"], "from": ["S", "J"], "to": ["J", "T"], "flow": ["5.2", "5.0"]})
    >>> audit = balance(Dataset.from_frames(edges), value="flow", sd=0.1, open=("S", "T"))
    >>> audit.holds, audit.dof, audit.edges["adjusted"].round(6).tolist()
    (True, 1, [5.1, 5.1])
    """
    _refuse_mixed(data, value, field)
    _refuse_unfit(field, at, sd=sd, open=None if isinstance(open, tuple | list) and not open else open, supply=supply)
    if field is not None:
        from dec.audit.mesh import audit_flux

        return audit_flux(data, field, at, limit, unit)
    assert value is not None
    return audit_flows(data, value, sd, open, supply, alpha, limit, unit)


def loops(
    data: Dataset, value: str | None = None, sd: object = None, fixed: str | Mapping[Any, Any] | None = None, *,
    field: str | None = None, at: str | None = None, alpha: float = 0.05, limit: float | str | None = None,
    unit: str | None = None,
) -> Audit:  # fmt: skip
    """Do the differences close? An audit of one network column, or of one mesh field.

    Parameters
    ----------
    data : Dataset
        From `dec.read` or `Dataset.from_frames`.
    value : str
        Network: the edge column of differences, head minus tail. An empty cell is not measured.
    sd : None, float, str or array_like of shape (n1,)
        As in `balance`.
    fixed : None, str or mapping of id to number
        Network: potentials that are held; a plain text names a node column, whose empty cells are not held.
    field : str
        Mesh: the vector field whose circulation is taken.
    at : "vertices", "cells" or None
        Mesh: which field, where the file has the name at both.
    alpha : float
        Chance that the global test refuses readings that are in order.
    limit : None, float or str
        As in `balance`.
    unit : str or None
        Echoed wherever the values are shown.

    Returns
    -------
    Audit
        ``holds`` as in `balance`.

    Raises
    ------
    InputError
        If a column, field, id or number cannot be used.
    AccuracyError
        As in `balance`.

    Examples
    --------
    >>> import pandas as pd
    >>> lines = pd.DataFrame({"from": ["A", "B", "C"], "to": ["B", "C", "A"], "dh": ["1.10", "2.20", "-3.27"]})
    >>> audit = loops(Dataset.from_frames(lines), value="dh", sd=0.01)
    >>> audit.holds, audit.loops[0]["misclosure"], round(audit.chi_square, 9)
    (True, 0.03, 3.0)
    """
    _refuse_mixed(data, value, field)
    _refuse_unfit(field, at, sd=sd, fixed=fixed)
    if field is not None:
        from dec.audit.mesh import audit_circulation

        return audit_circulation(data, field, at, limit, unit)
    assert value is not None
    return audit_differences(data, value, sd, fixed, alpha, limit, unit)


def _refuse_unfit(field: str | None, at: str | None, **network: object) -> None:
    """Refuse what would be ignored: network words beside a field, and a place beside a column."""
    if field is None and at is not None:
        message = f"at belongs to a mesh field, not to a network column, got {at!r}"
        raise InputError(message)
    given = [name for name, value in network.items() if field is not None and value is not None]
    if given:
        message = f"{given[0]} belongs to a network column, not to a mesh field; leave it out"
        raise InputError(message)


def _refuse_mixed(data: Dataset, value: str | None, field: str | None) -> None:
    if not isinstance(data, Dataset):
        message = f"data must be a Dataset, got {type(data).__name__}; make one with dec.read or Dataset.from_frames"
        raise InputError(message)
    if (value is None) == (field is None):
        message = "give either the column of a network (value) or the field of a mesh (field)"
        raise InputError(message)
