"""The two questions: do the flows balance, do the differences close?"""

from collections.abc import Iterable, Mapping
from typing import Any

from dec.audit.given.asked import ALPHA, Asked
from dec.audit.network import audit_differences, audit_flows
from dec.audit.record import Audit
from dec.calculus.dataset import Dataset
from dec.errors import InputError

__all__ = ["balance", "loops"]


def balance(
    data: Dataset, value: str | None = None, sd: object = None, open: str | Iterable[Any] = (),
    supply: Any = None, *, field: str | None = None, at: str | None = None, alpha: float = 0.05,
    limit: float | str | None = None, unit: str | None = None, readings: Any = None, supply_sd: Any = None,
    storage: Any = None, storage_sd: Any = None, common: str | None = None, common_sd: Any = None,
    preset: str | None = None, transition: Any = None, sidak: bool = False, robust: bool = False,
    figures: str = "auto", decimal: str = ".",
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
        Network: what is put in at vertices (taken out: negative); a plain text names a node column. A vertex whose
        supply is empty, or that a mapping leaves out, is taken as open, and a note says so.
    supply_sd : None, float, str or mapping
        Network: how well supplies are known, as `sd` or by id; exactly where it is 0, empty or not given.
    storage, storage_sd : as supply and supply_sd
        Network: what is kept back at vertices in the time of the readings: counts as a supply with the other sign.
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
    readings : None, path or DataFrame
        Network: a table of readings, one row each: ``edge``, the column `value`, optionally ``sensor``, ``mounted``
        (+1 or -1) and ``factor`` (0.001, 1/3.6). Several readings of one edge count as their weighted mean and check
        each other.
    common, common_sd : None, or str and float or str
        Network: an edge column of groups whose readings share one error, and the standard deviation of that error, as
        one number or a percentage of the reading.
    preset : None or str
        Network: a limit or an accuracy of a trade, by name; see `dec.preset` and `dec presets`. Never a default.
    transition : None, float or str
        Network: transitional flow of the meters, for presets of meter classes: a number or a column of the readings; a
        text such as "1.6+0.02" or "Q2+0.02" adds a floor to every standard deviation, for readings of 0.
    sidak : bool
        Network: hold single tests against one limit for all of them together, at `alpha`.
    robust : bool
        Network: compare with the least sum of absolute corrections.
    figures : "auto", "all" or "estimate"
        Network too large for an exact factor: redundancies of the leading suspects only, of every edge at one solve
        each, or of every edge by random projection with a stated error.
    decimal : "." or ","
        Decimal sign of the table of readings, where that is a file.

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
    _refuse_unfit(
        field, at, sd=sd, open=None if isinstance(open, tuple | list) and not open else open, supply=supply,
        readings=readings, supply_sd=supply_sd, storage=storage, storage_sd=storage_sd, common=common,
        common_sd=common_sd, preset=preset, transition=transition, sidak=sidak or None, robust=robust or None,
        figures=_unlike(figures, "auto"), alpha=_unlike(alpha, ALPHA),
    )  # fmt: skip
    if field is not None:
        from dec.audit.meshes.questions import audit_flux

        return audit_flux(data, field, at, limit, unit)
    assert value is not None
    return audit_flows(data, Asked(
        value, sd, readings, open, supply, supply_sd, storage, storage_sd, common=common, common_sd=common_sd,
        alpha=alpha, limit=limit, unit=unit, preset=preset, transition=transition, sidak=sidak, robust=robust,
        figures=figures, decimal=decimal, law="balance",
    ))  # fmt: skip


def loops(
    data: Dataset, value: str | None = None, sd: object = None, fixed: str | Mapping[Any, Any] | None = None, *,
    field: str | None = None, at: str | None = None, alpha: float = 0.05, limit: float | str | None = None,
    unit: str | None = None, readings: Any = None, fixed_sd: Any = None, common: str | None = None,
    common_sd: Any = None, preset: str | None = None, length: str | None = None, length_unit: str | None = None,
    transition: Any = None, sidak: bool = False, robust: bool = False, figures: str = "auto", decimal: str = ".",
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
    fixed_sd : None, float, str or mapping
        Network: how well they are known, as `sd` or by id; exactly where it is 0, empty or not given.
    field : str
        Mesh: the vector field whose circulation is taken.
    at : "vertices", "cells" or None
        Mesh: which field, where the file has the name at both.
    alpha : float
        Chance that the global test refuses readings that are in order.
    limit : None, float or str
        As in `balance`.
    unit : str or None
        Echoed wherever the values are shown; presets of levelling need it.
    readings : None, path or DataFrame
        Network: a table of readings, one row each: ``edge``, the column `value`, optionally ``sensor``, ``mounted``
        (+1 or -1) and ``factor`` (0.001, 1/3.6). Several readings of one edge count as their weighted mean and check
        each other.
    common, common_sd : None, or str and float or str
        Network: an edge column of groups whose readings share one error, and the standard deviation of that error, as
        one number or a percentage of the reading.
    preset : None or str
        Network: a limit or an accuracy of a trade, by name; see `dec.preset` and `dec presets`. Never a default.
    length, length_unit : None or str
        Network: edge column of lengths and its unit ("m", "km", "mi", "ft"), for presets of levelling.
    transition : None, float or str
        As in `balance`.
    sidak : bool
        Network: hold single tests against one limit for all of them together, at `alpha`.
    robust : bool
        Network: compare with the least sum of absolute corrections.
    figures : "auto", "all" or "estimate"
        Network too large for an exact factor: redundancies of the leading suspects only, of every edge at one solve
        each, or of every edge by random projection with a stated error.
    decimal : "." or ","
        Decimal sign of the table of readings, where that is a file.

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
    _refuse_unfit(
        field, at, sd=sd, fixed=fixed, readings=readings, fixed_sd=fixed_sd, common=common, common_sd=common_sd,
        preset=preset, length=length, length_unit=length_unit, transition=transition, sidak=sidak or None,
        robust=robust or None, figures=_unlike(figures, "auto"), alpha=_unlike(alpha, ALPHA),
    )  # fmt: skip
    if field is not None:
        from dec.audit.meshes.questions import audit_circulation

        return audit_circulation(data, field, at, limit, unit)
    assert value is not None
    return audit_differences(data, Asked(
        value, sd, readings, fixed=fixed, fixed_sd=fixed_sd, common=common, common_sd=common_sd, alpha=alpha,
        limit=limit, unit=unit, preset=preset, length=length, length_unit=length_unit, transition=transition,
        sidak=sidak, robust=robust, figures=figures, decimal=decimal, law="loop",
    ))  # fmt: skip


def _unlike(given: object, usual: object) -> object:
    return None if isinstance(given, int | float | str) and given == usual else given


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
    if value is not None and data.complex.dim > 1 and value not in data.columns.get(1, {}):
        fields = ", ".join(data.fields) or "none here"
        message = f"value {value!r} names an edge column, and this is a mesh; give field (--field) instead ({fields})"
        raise InputError(message)
