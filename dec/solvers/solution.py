"""The solution of a Poisson problem: potentials, flows, and how good they are."""

import json
from dataclasses import dataclass, field
from html import escape
from typing import Any

import numpy as np

from dec.arrays import AnyArray, FloatArray
from dec.calculus.cochain import Cochain

__all__ = ["Solution"]

SCHEMA = "dec.solve/1"

_NOT_SHOWN = (
    "that conductances, sources and fixed potentials are right: residual and bound speak of the arithmetic only",
    "that the law between flow and drop describes the real network",
)


@dataclass(frozen=True, eq=False)
class Solution:
    """The result of `solve_poisson`.

    Attributes
    ----------
    potential : Cochain
        Of degree 0, float64. Fixed values are met exactly.
    flow : Cochain
        Of degree 1, float64, positive from tail to head. It is -conductance * d(potential) up to `error_bound`, and
        unlike that product it balances at every vertex to rounding.
    residual : float
        Norm of what does not balance in the flow that the potentials drive, relative to the norm of the right side;
        recomputed from the potentials. Of several columns, the largest.
    error_bound : float, or float64 array of shape (m,) for m columns, or None
        On |u - u*| in the energy norm, the root of the sum of c (du - du*)^2, rounding included; the flow is as near
        to the exact one, in the root of the sum of (f - f*)^2 / c. Under a power law the root of twice the sum of the
        Fenchel gaps, the same number where the exponent is 1. None where a conductance is not positive.
    energy : tuple of (low, high), or None
        Between these lies the sum of flow times drop of the exact solution; arrays for several columns. None without
        a bound, and where exponents differ between edges.
    method, because : str
        What solved it, and why that was chosen.
    iterations : int
        Of the linear solver, correction included, or Newton steps; 0 for a direct method.
    gauge : str
        What fixes the constant in the potentials.
    n_components : int
    backward_error : float or None
        Norm of what does not balance, relative to ||L|| ||u|| + ||right side||; None under a power law.
    asked : dict
        rtol, method, exponent, unbalanced.
    notes, not_shown : tuple of str
    """

    potential: Cochain
    flow: Cochain
    residual: float
    error_bound: float | FloatArray | None
    energy: tuple[float | FloatArray, float | FloatArray] | None
    method: str
    because: str
    iterations: int
    gauge: str
    n_components: int
    backward_error: float | None = None
    asked: dict[str, Any] = field(default_factory=dict)
    notes: tuple[str, ...] = ()
    not_shown: tuple[str, ...] = _NOT_SHOWN

    def to_dict(self) -> dict[str, Any]:
        """The solution as plain Python objects, keys as in the JSON; a number that is not finite becomes None.

        Returns
        -------
        dict
            "vertices" and "edges" hold one entry a cell, with its id as text; potentials and flows are lists where
            there are several columns.
        """
        network = self.potential.complex
        return {
            "schema": SCHEMA,
            "method": self.method,
            "because": self.because,
            "residual": _plain(self.residual),
            "error_bound": _plain(self.error_bound),
            "gauge": self.gauge,
            "vertices": _rows(network.vertex_ids, "potential", self.potential.values),
            "edges": _rows(network.edge_ids, "flow", self.flow.values),
            "energy": _plain(self.energy),
            "iterations": self.iterations,
            "backward_error": _plain(self.backward_error),
            "n_components": self.n_components,
            "asked": {key: _plain(value) for key, value in self.asked.items()},
            "notes": list(self.notes),
            "not_shown": list(self.not_shown),
        }

    def to_json(self, *, indent: int | None = None) -> str:
        """The solution as JSON text: the same problem gives the same bytes.

        Parameters
        ----------
        indent : int or None
            Spaces a level; None for one line.
        """
        return json.dumps(self.to_dict(), indent=indent, ensure_ascii=False, allow_nan=False)

    def __repr__(self) -> str:
        columns = self.potential.n_columns
        more = "" if columns is None else f", {columns} columns"
        return (
            f"<Solution of {self.potential.complex.counts[0]:,} potentials{more}: {self.method}, residual "
            f"{self.residual:.2g}, {self._bound_in_words()}>"
        )

    def _bound_in_words(self) -> str:
        if self.error_bound is None:
            return "no error bound"
        return f"error at most {np.max(self.error_bound, initial=0.0):.2g} in the energy norm"

    def _repr_html_(self) -> str:
        rows = [
            ("potentials", repr(self.potential)[1:-1]), ("method", f"{self.method}: {self.because}"),
            ("residual", f"{self.residual:.3g}"), ("error", self._bound_in_words()), ("gauge", self.gauge),
            ("components", f"{self.n_components:,}"),
        ]  # fmt: skip
        rows += [("note", note) for note in self.notes[:3]]
        cells = "".join(f"<tr><th>{escape(name)}</th><td>{escape(text[:300])}</td></tr>" for name, text in rows)
        return f"<table><caption>dec solution</caption>{cells}</table>"


def _rows(ids: AnyArray | None, name: str, values: FloatArray) -> list[dict[str, Any]]:
    names = range(len(values)) if ids is None else ids
    return [{"id": str(i), name: _plain(value)} for i, value in zip(names, values.tolist(), strict=True)]


def _plain(value: object) -> object:
    """Return the value as JSON has it."""
    if isinstance(value, np.generic | np.ndarray):
        value = value.tolist()
    if isinstance(value, list | tuple):
        return [_plain(item) for item in value]
    return None if isinstance(value, float) and not np.isfinite(value) else value
