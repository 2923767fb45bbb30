"""The certificate of a solution: numbers from which residual and error bound follow in exact arithmetic."""

from collections.abc import Sequence

import numpy as np

from dec.arrays import FloatArray, ObjectArray
from dec.calculus.certificates import certified_inputs, sealed
from dec.calculus.dataset import Dataset
from dec.errors import InputError
from dec.solvers.proof import exact_proof
from dec.solvers.solution import Solution

__all__ = ["MOST_EDGES", "solve_certificate"]

MOST_EDGES = 10_000


def solve_certificate(
    solution: Solution, data: Dataset, source: str, conductance: str | None = None, fixed: str | None = None, *,
    contents: Sequence[bytes] = (),
) -> bytes:  # fmt: skip
    """The certificate of `solve_network` as the bytes of a JSON file; `dec.verify` rechecks it.

    Parameters
    ----------
    solution : Solution
        Of that problem, with an exponent of 1.
    data : Dataset
    source, conductance, fixed : str or None
        The columns it was made from.
    contents : sequence of bytes
        The input files' bytes in the order of ``data.inputs``, so that a recheck can name any line that was changed.

    Returns
    -------
    bytes
        "edges" hold id, from, to, flow and conductance, "vertices" id and potential, "supply" and "fixed" what was
        given at vertices, "open" the fixed ones. "residual" is the norm of what does not balance in the flow that the
        potentials drive, in the unit of the flow; "bound" is on |u - u*| in the energy norm. Both are exact figures
        rounded upwards; "stated_bound" is what the solution said.

    Raises
    ------
    InputError
        If there are more than 10,000 edges, an exponent other than 1, or the solution is one of another problem.

    Examples
    --------
    >>> import json
    >>> import pandas as pd
    >>> from dec.solvers.network import solve_network
    >>> edges = pd.DataFrame({"from": ["A", "B"], "to": ["B", "C"]})
    >>> nodes = pd.DataFrame({"id": ["A", "B", "C"], "put_in": [2.0, 0.0, -2.0]})
    >>> data = Dataset.from_frames(edges, nodes)
    >>> found = json.loads(solve_certificate(solve_network(data, "put_in"), data, "put_in"))
    >>> found["edges"][0], found["residual"]
    (['1', 'A', 'B', 2.0, 1.0], 0.0)
    """
    network = data.complex
    _refuse_other(solution, data)
    given = None if fixed is None else data.column(fixed, 0).numbers()
    held = np.full(network.counts[0], np.nan) if given is None else given
    is_fixed = ~np.isnan(held)
    amount = np.nan_to_num(data.column(source, 0).numbers())
    weight = np.ones(network.counts[1]) if conductance is None else data.column(conductance, 1).numbers()
    potential, flow = solution.potential.values, solution.flow.values
    if not (potential[is_fixed] == held[is_fixed]).all():
        message = "the solution must be that of these columns, but it does not have their fixed potentials"
        raise InputError(message)
    residual, bound = exact_proof(network.tail, network.head, weight, amount, is_fixed, potential, flow)
    names = _names(network.vertex_ids, network.counts[0])
    edges = (_names(network.edge_ids, network.counts[1]), names[network.tail], names[network.head], flow, weight)
    holding = ["edges", "nodes"][: len(data.inputs)]
    columns = {"source": source, "conductance": conductance, "fixed": fixed}
    return sealed({
        "law": "solve", "unit": None, "inputs": certified_inputs(data.inputs, holding, contents),
        "decimal": data.column(source, 0).decimal, "columns": columns,
        "edges": [list(row) for row in zip(*(column.tolist() for column in edges), strict=True)],
        "vertices": _pairs(names, potential), "supply": _pairs(names[amount != 0], amount[amount != 0]),
        "fixed": _pairs(names[is_fixed], held[is_fixed]), "open": names[is_fixed].tolist(), "sums": [],
        "residual": residual, "bound": bound, "stated_bound": solution.error_bound,
    })  # fmt: skip


def _refuse_other(solution: Solution, data: Dataset) -> None:
    network = data.complex
    if 1 not in data.columns:
        message = "a solution is certified on a network, from its tables; these data are a mesh"
        raise InputError(message)
    if network.counts[1] > MOST_EDGES:
        message = (
            f"a solution is certified up to {MOST_EDGES:,} edges, in exact arithmetic, got {network.counts[1]:,}; "
            "its own residual and error bound hold for any size"
        )
        raise InputError(message)
    if np.any(np.asarray(solution.asked.get("exponent", 1.0)) != 1.0):
        message = "a solution is certified where flow is proportional to drop (exponent 1), this one has another law"
        raise InputError(message)
    if solution.potential.complex is not network or solution.potential.n_columns is not None:
        message = "the solution must be that of these data, in one column"
        raise InputError(message)


def _names(ids: ObjectArray | None, count: int) -> ObjectArray:
    return np.array([str(name) for name in (range(count) if ids is None else ids)], dtype=object)


def _pairs(names: ObjectArray, values: FloatArray) -> list[list[object]]:
    return [list(pair) for pair in zip(names.tolist(), values.tolist(), strict=True)]
