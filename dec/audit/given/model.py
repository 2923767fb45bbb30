"""The network as both laws read it: one edge a reading, those at vertices running from the outside."""

from dataclasses import dataclass, replace

import numpy as np

from dec.arrays import BoolArray, FloatArray, IntArray
from dec.audit.exactly import common_unit
from dec.audit.given.readings import Known, Readings
from dec.calculus.columns import Decimals
from dec.calculus.complex import Complex
from dec.errors import InputError

__all__ = ["Model", "model_of"]


@dataclass(frozen=True, slots=True)
class Model:
    """Edges with readings, the outside among their ends.

    A measured supply is a flow from the outside, a measured potential a difference to it: neither law needs to know
    more of them.

    Attributes
    ----------
    tail, head : int64 arrays, shape (m,)
        First the edges of the network, then one from the outside to each vertex with a reading of its own.
    n_vertices : int
        n0 + 1: the outside comes last.
    n_edges : int
        Edges of the network, n1.
    vertex : int64 array, shape (m - n1,)
        Vertex of each reading at a vertex.
    readings : Readings
        One an edge of the model.
    known : Known or None
        What is known exactly at vertices; shape (n0 + 1,).
    attached : int64 array
        Vertices that are one with the outside: open ones, or those with an exact potential.
    relative : float64 array or None
        Standard deviations up to a common factor, for adjusting readings whose own are not given.
    """

    tail: IntArray
    head: IntArray
    n_vertices: int
    n_edges: int
    vertex: IntArray
    readings: Readings
    known: Known | None
    attached: IntArray
    relative: FloatArray | None = None

    @property
    def measured(self) -> BoolArray:
        """True where there is a reading; bool array of shape (m,)."""
        return self.readings.measured

    @property
    def sd(self) -> FloatArray:
        """Standard deviations, relative ones or 1 where none were given; float64 array of shape (m,)."""
        if self.readings.sd is not None:
            return self.readings.sd
        return np.ones(len(self.tail)) if self.relative is None else self.relative

    @property
    def joint(self) -> IntArray:
        """The attached vertices and the outside, which are one; int64 array."""
        return np.append(self.attached, self.n_vertices - 1)


def model_of(network: Complex, readings: Readings, known: Known | None, opened: IntArray | None, what: str) -> Model:
    """The model of one law.

    Parameters
    ----------
    network : Complex
    readings : Readings
        One an edge of the network.
    known : Known or None
        Supplies, or potentials: exact where their standard deviation is 0, readings elsewhere.
    opened : int64 array or None
        Vertices open to the outside; None where those with an exact value are one with it (the loop law).
    what : str
        What is known at vertices, for messages.

    Returns
    -------
    Model

    Raises
    ------
    InputError
        If readings at vertices have standard deviations and those on edges have none.
    """
    n = network.counts[0]
    none = np.empty(0, np.int64)
    if known is None:
        attached = none if opened is None else opened
        return Model(network.tail, network.head, n + 1, network.counts[1], none, readings, None, attached)
    sd = np.zeros(n) if known.sd is None else known.sd
    present = known.decimals.present
    vertex = np.flatnonzero(present & (sd > 0))
    exact = present & (sd == 0)
    attached = np.flatnonzero(exact) if opened is None else opened
    held = Known(
        np.append(np.where(exact, known.value, 0.0), 0.0),
        Decimals(
            np.append(np.where(exact, known.decimals.integers, 0), 0), known.decimals.places, np.append(exact, False)
        ),
    )
    if not len(vertex):
        return Model(network.tail, network.head, n + 1, network.counts[1], vertex, readings, held, attached)
    if readings.sd is None:
        message = f"{what} is given with a standard deviation, so the readings on edges need one too; give sd"
        raise InputError(message)
    (own, at_vertices), places = common_unit(readings.decimals, known.decimals)
    whole = replace(
        readings,
        value=np.append(readings.value, known.value[vertex]),
        sd=np.append(readings.sd, sd[vertex]),
        decimals=Decimals(
            np.append(own, at_vertices[vertex]), places, np.append(readings.measured, np.ones(len(vertex), dtype=bool))
        ),
    )
    tail = np.append(network.tail, np.full(len(vertex), n))
    return Model(tail, np.append(network.head, vertex), n + 1, network.counts[1], vertex, whole, held, attached)
