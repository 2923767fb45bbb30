"""What a caller gives for a Poisson problem, read into checked arrays."""

from collections.abc import Mapping
from typing import Any, TypeAlias

import numpy as np
from numpy.typing import ArrayLike

from dec.arrays import BoolArray, FloatArray, IntArray, float_array, index_array
from dec.calculus.cochain import Cochain
from dec.calculus.complex import Complex
from dec.errors import InputError
from dec.geometry.metric import Metric

__all__ = [
    "Conductance", "Fixed", "Source", "first_not_positive", "given_conductances", "given_exponents", "given_fixed",
    "given_sources",
]  # fmt: skip

Source: TypeAlias = Cochain | Mapping[Any, float] | ArrayLike
Conductance: TypeAlias = Metric | ArrayLike | None
Fixed: TypeAlias = Mapping[Any, float] | tuple[ArrayLike, ArrayLike] | None


def given_conductances(network: Complex, given: Conductance) -> tuple[FloatArray, bool]:
    """The conductance of every edge, shape (n1,), and whether a metric gave it, which may be zero or negative.

    Raises
    ------
    InputError
        If the shape is another, an array holds a number that is not positive, or the metric lives elsewhere.

    Examples
    --------
    >>> given_conductances(Complex.from_edges([0], [1]), [2])
    (array([2.]), False)
    """
    n_edges = len(network.tail)
    if given is None:
        return np.ones(n_edges), False
    if isinstance(given, Metric):
        if given.complex is not network:
            message = "the metric lives on another complex than the problem; build both from the same Complex object"
            raise InputError(message)
        return given.weights(1), True
    weights = float_array(given, "conductance", finite=False)
    if weights.shape != (n_edges,):
        message = f"conductance must have shape ({n_edges},), one number an edge, got {weights.shape}"
        raise InputError(message)
    if not ((weights > 0) & np.isfinite(weights)).all():
        message = (
            f"conductance must be positive and finite, got {first_not_positive(network, weights)}; "
            "leave out an edge through which nothing can flow"
        )
        raise InputError(message)
    return weights, False


def first_not_positive(network: Complex, weights: FloatArray) -> str:
    """The first number that is not positive and finite, and the edge where it stands, in words."""
    edge = int(np.argmin((weights > 0) & np.isfinite(weights)))
    return f"{weights[edge]} at {_edge_name(network, edge)}"


def _edge_name(network: Complex, edge: int) -> str:
    return f"edge {edge if network.edge_ids is None else network.edge_ids[edge]}"


def given_exponents(network: Complex, given: ArrayLike) -> FloatArray:
    """The exponent of every edge, float64 of shape (n1,).

    Raises
    ------
    InputError
        If the shape is another, or an exponent is not in 1 to 2; the message names the edge.

    Examples
    --------
    >>> given_exponents(Complex.from_edges([0, 1], [1, 2]), 1.852)
    array([1.852, 1.852])
    """
    n_edges = len(network.tail)
    powers = float_array(given, "exponent", finite=False)
    if powers.shape not in {(), (n_edges,)}:
        message = f"exponent must be one number, or one for each of {n_edges} edges, got shape {powers.shape}"
        raise InputError(message)
    bad = ~((powers >= 1.0) & (powers <= 2.0))
    if bad.any():
        where = f" at {_edge_name(network, int(np.argmax(bad)))}" if n_edges else ""
        message = (
            f"exponent must be 1 to 2 (1 for proportional, 1.852 for Hazen-Williams, 2 for turbulent loss), "
            f"got {powers[bad][0]}{where}"
        )
        raise InputError(message)
    return np.broadcast_to(powers, (n_edges,))


def given_sources(network: Complex, given: Source) -> tuple[FloatArray, bool]:
    """The sources with shape (n0, m), and whether they came without columns.

    Raises
    ------
    InputError
        If the shape is another, a number is not finite, or a vertex is not known; the message names the vertex.

    Examples
    --------
    >>> given_sources(Complex.from_edges([0], [1]), {1: 2.5})[0].ravel()
    array([0. , 2.5])
    """
    n = network.counts[0]
    if isinstance(given, Cochain):
        if given.complex is not network or given.degree != 0:
            message = (
                f"source must be a cochain of degree 0 on the complex of the problem, got degree {given.degree}"
                f"{'' if given.complex is network else ' on another complex'}"
            )
            raise InputError(message)
        values = given.values.astype(np.float64)
    elif isinstance(given, Mapping):
        values = np.zeros(n)
        values[network.vertex_numbers(given)] = float_array(list(given.values()), "source", ndim=1, finite=False)
    else:
        values = float_array(given, "source", finite=False)
    if values.ndim not in {1, 2} or len(values) != n or 0 in values.shape[1:]:
        message = f"source must have shape ({n},) or ({n}, m), one number or row a vertex, got {values.shape}"
        raise InputError(message)
    bad = ~np.isfinite(values)
    if bad.any():
        vertex = int(np.argwhere(bad)[0, 0])
        message = (
            f"source must be finite, got {values[bad][0]} at {_vertex_name(network, vertex)}; "
            "write 0 where nothing is put in"
        )
        raise InputError(message)
    return values[:, None] if values.ndim == 1 else values, values.ndim == 1


def _vertex_name(network: Complex, vertex: int) -> str:
    return f"vertex {vertex if network.vertex_ids is None else network.vertex_ids[vertex]}"


def given_fixed(
    network: Complex, given: Fixed, n_columns: int, label: IntArray, count: int
) -> tuple[BoolArray, FloatArray]:
    """Which vertices are fixed, bool of shape (n0,), and potentials to start from, float64 of shape (n0, m).

    Parameters
    ----------
    network : Complex
    given : mapping, pair or None
        As `solve_poisson`.
    n_columns : int
        m.
    label : int64 array, shape (n0,)
        Component of each vertex.
    count : int
        Number of components.

    Raises
    ------
    InputError
        If vertices are not known or named twice, or potentials are not finite or of another number.

    Examples
    --------
    >>> is_fixed, start = given_fixed(Complex.from_edges([0, 1], [1, 2]), {0: 4.0, 2: 1.0}, 1, np.zeros(3, int), 1)
    >>> start.ravel()
    array([4. , 2.5, 1. ])
    """
    n = network.counts[0]
    is_fixed, start = np.zeros(n, dtype=bool), np.zeros((n, n_columns))
    vertices, values = _fixed_pairs(network, given)
    if not len(vertices):
        return is_fixed, start
    if values.shape[0] != len(vertices) or values.ndim > 2 or (values.ndim == 2 and values.shape[1] != n_columns):
        message = (
            f"fixed must give one potential for each of {len(vertices)} vertices"
            f"{f' and {n_columns} columns' if values.ndim == 2 else ''}, got shape {values.shape}"
        )
        raise InputError(message)
    if len(np.unique(vertices)) < len(vertices):
        ordered = np.sort(vertices)
        twice = int(ordered[1:][ordered[1:] == ordered[:-1]][0])
        message = f"fixed names {_vertex_name(network, twice)} twice; give one potential for it"
        raise InputError(message)
    columns = values if values.ndim == 2 else values[:, None]
    is_fixed[vertices] = True
    parts = label[vertices]
    for j in range(n_columns):
        column = columns[:, j if columns.shape[1] > 1 else 0]
        low, high = np.full(count, np.inf), np.full(count, -np.inf)
        np.minimum.at(low, parts, column)
        np.maximum.at(high, parts, column)
        low[np.isinf(low)] = high[np.isinf(high)] = 0.0
        start[:, j] = (low + (high - low) / 2)[label]
        start[vertices, j] = column
    return is_fixed, start


def _fixed_pairs(network: Complex, given: Fixed) -> tuple[IntArray, FloatArray]:
    if given is None:
        return np.empty(0, np.int64), np.empty(0)
    if isinstance(given, Mapping):
        return network.vertex_numbers(given), float_array(list(given.values()), "fixed", ndim=1)
    try:
        indices, values = given
    except (TypeError, ValueError):
        message = (
            "fixed must be a mapping of vertex to potential, or a pair (indices, values), "
            f"got {type(given).__name__} {given!r:.60}"
        )
        raise InputError(message) from None
    vertices = index_array(indices, "indices of fixed")
    outside = (vertices < 0) | (vertices >= network.counts[0])
    if outside.any():
        message = f"fixed must name vertices 0 .. {network.counts[0] - 1}, got {vertices[np.argmax(outside)]}"
        raise InputError(message)
    potentials = float_array(values, "fixed")
    return vertices, np.broadcast_to(potentials, vertices.shape) if potentials.ndim == 0 else potentials
