"""A Poisson problem whose numbers are the columns of a network."""

import numpy as np

from dec.arrays import BoolArray, FloatArray
from dec.calculus.dataset import Dataset
from dec.errors import InputError
from dec.solvers.method import Method
from dec.solvers.poisson import solve_poisson
from dec.solvers.solution import Solution

__all__ = ["solve_network"]


def solve_network(
    data: Dataset, source: str, conductance: str | None = None, fixed: str | None = None, *, exponent: float = 1.0,
    rtol: float = 1e-8, method: str | Method = "auto", unbalanced: str = "refuse",
) -> Solution:  # fmt: skip
    """Potentials and flows of a network from the columns of its tables; see `solve_poisson`.

    Parameters
    ----------
    data : Dataset
    source : str
        Node column of what is put in (taken out: negative); a cell may be empty only where the potential is fixed.
    conductance : str or None
        Edge column of positive numbers without a gap; None counts every edge as 1.
    fixed : str or None
        Node column of potentials that are held; empty cells are not.
    exponent, rtol, method, unbalanced
        As in `solve_poisson`.

    Returns
    -------
    Solution

    Raises
    ------
    InputError, UnsolvableError, AccuracyError
        As `solve_poisson`; a cell that cannot be used is named with its file and line. A mesh is refused.

    Examples
    --------
    >>> import pandas as pd
    >>> edges = pd.DataFrame({"from": ["A", "B"], "to": ["B", "C"]})
    >>> nodes = pd.DataFrame({"id": ["A", "B", "C"], "put_in": [2.0, 0.0, None], "level": [None, None, 5.0]})
    >>> solve_network(Dataset.from_frames(edges, nodes), "put_in", fixed="level").potential.values.tolist()
    [9.0, 7.0, 5.0]
    """
    if 1 not in data.columns:
        name = data.inputs[0].name if data.inputs else "the data"
        message = (
            f"solve takes an edge table (from, to) and a node table with the sources, but {name} is a mesh; in Python, "
            "solve_poisson(complex, source, conductance=Metric(complex)) solves on a mesh"
        )
        raise InputError(message)
    held = np.full(data.complex.counts[0], np.nan) if fixed is None else data.column(fixed, 0).numbers()
    is_held = ~np.isnan(held)
    amount = _without_gaps(data, source, 0, allowed=is_held)
    weight = None if conductance is None else _without_gaps(data, conductance, 1)
    return solve_poisson(
        data.complex, amount, conductance=weight, fixed=(np.flatnonzero(is_held), held[is_held]), exponent=exponent,
        rtol=rtol, method=method, unbalanced=unbalanced,
    )  # fmt: skip


def _without_gaps(data: Dataset, name: str, degree: int, allowed: BoolArray | None = None) -> FloatArray:
    column = data.column(name, degree)
    numbers = np.array(column.numbers())
    gap = np.isnan(numbers)
    if allowed is not None:
        numbers[gap & allowed] = 0.0
        gap &= ~allowed
    if gap.any():
        way_out = "write 0 where nothing is put in" if degree == 0 else "every edge needs one"
        message = f"{column.place(int(np.argmax(gap)))}: {name} must be a number, found an empty cell; {way_out}"
        raise InputError(message)
    return numbers
