"""The pipes under the streets of a made-up town: where they run, what flows in them, how high their ends lie."""

from dataclasses import dataclass

import numpy as np

from dec.arrays import BoolArray, FloatArray, IntArray
from dec.calculus.complex import Complex
from dec.solvers.poisson import solve_poisson
from dec.topology.graphs import joined, spanning_forest, tree_flows

__all__ = ["Streets", "balanced_flows", "laid_out", "levels", "net_inflow"]

_BLOCK = 180.0  # metres between streets
_PIPES_PER_CORNER = 1.45
_CORNERS_PER_RESERVOIR = 600
_DOUBLE = 0.005  # share of streets with a second pipe


@dataclass(frozen=True, slots=True)
class Streets:
    """The network without numbers on it: ends of the pipes, which nodes are open, places in m."""

    tail: IntArray
    head: IntArray
    opened: IntArray
    points: FloatArray

    @property
    def length(self) -> IntArray:
        """Length of each pipe in metres."""
        straight = np.linalg.norm(self.points[self.tail] - self.points[self.head], axis=1)
        return np.asarray(np.rint(1.04 * straight) + 1, dtype=np.int64)  # streets bend


def laid_out(n_edges: int, zones: int, random: np.random.Generator) -> Streets:
    """The streets of a town of exactly so many pipes: a random tree of them, others at random, some doubled, and feeds.

    Parameters
    ----------
    n_edges, zones : int
        Each zone is a strip of its own with a reservoir for every 600 corners, and two at least.
    random : numpy.random.Generator

    Returns
    -------
    Streets
        Corners first, reservoirs last; each reservoir feeds two corners. Pipes in the order of their ends.
    """
    wanted = n_edges / _PIPES_PER_CORNER / zones
    rows = max(int(np.sqrt(wanted)), 2)
    columns = max(int(wanted / rows), 2)
    n_corners = rows * columns
    corner = np.arange(n_corners * zones)
    row, column = corner % n_corners // columns, corner % columns
    right, down = corner[column < columns - 1], corner[row < rows - 1]
    tail, head = np.concatenate([right, down]), np.concatenate([right + 1, down + columns])
    per_zone = max(2, n_corners // _CORNERS_PER_RESERVOIR)
    fed = np.concatenate([z * n_corners + random.choice(n_corners, per_zone, replace=False) for z in range(zones)])
    opened = len(corner) + np.arange(len(fed))
    beside = np.where(column[fed] < columns - 1, fed + 1, fed - 1)
    kept = _kept_streets(tail, head, len(corner), n_edges - 2 * len(fed), random)
    tail = np.concatenate([tail[kept], fed, beside])
    head = np.concatenate([head[kept], opened, opened])
    order = np.lexsort([head, tail])
    places = np.stack([column + corner // n_corners * (columns + 1), rows - row], axis=1).astype(np.float64)
    places += random.uniform(-0.2, 0.2, places.shape)
    points = np.rint(_BLOCK * np.concatenate([places, places[fed] + 0.45]))
    return Streets(tail[order], head[order], opened, points)


def _kept_streets(tail: IntArray, head: IntArray, n_corners: int, n_kept: int, random: np.random.Generator) -> IntArray:
    """Return which streets have a pipe; one with two pipes stands there twice."""
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import minimum_spanning_tree

    rank = random.permutation(len(tail)) + 1
    tree = minimum_spanning_tree(coo_array((rank.astype(np.float64), (tail, head)), (n_corners, n_corners)).tocsr())
    in_tree = np.zeros(len(tail) + 1, dtype=bool)
    in_tree[tree.data.astype(np.int64)] = True
    order = np.argsort(rank)  # streets by rank
    streets = np.concatenate([order[in_tree[1:]], order[~in_tree[1:]]])
    n_double = max(1, int(_DOUBLE * n_kept), n_kept - len(tail))
    single = streets[: n_kept - n_double]
    return np.concatenate([single, random.choice(single, n_double, replace=False)])


def balanced_flows(streets: Streets, supply: IntArray, random: np.random.Generator) -> IntArray:
    """Whole flows near those of pipes of many widths, corrected along a tree until every node balances.

    Parameters
    ----------
    streets : Streets
    supply : int64 array, shape (n0,)
        Put in at each node in whole units; that of open nodes is not read.
    random : numpy.random.Generator

    Returns
    -------
    int64 array, shape (n1,)
    """
    tail, head, n = streets.tail, streets.head, len(supply)
    conductance = random.lognormal(0.0, 0.7, len(tail)) / streets.length
    network = Complex.from_edges(tail, head, n)
    held = (streets.opened, np.zeros(len(streets.opened)))
    found = solve_poisson(network, supply.astype(np.float64), conductance=conductance, fixed=held, rtol=1e-6)
    flow = np.rint(found.flow.values).astype(np.int64)
    number, n_joined = joined(streets.opened, n)
    surplus = np.zeros(n_joined, dtype=np.int64)
    np.add.at(surplus, number, net_inflow(streets, flow) + supply)
    forest = spanning_forest(number[tail], number[head], n_joined, roots=number[streets.opened[:1]])
    carried, _ = tree_flows(number[tail], number[head], forest, surplus)
    return flow + carried


def net_inflow(streets: Streets, flow: IntArray) -> IntArray:
    """Inflow minus outflow of every node; int64 array of shape (n0,)."""
    net = np.zeros(len(streets.points), dtype=np.int64)
    np.add.at(net, streets.head, flow)
    np.subtract.at(net, streets.tail, flow)
    return net


def levels(streets: Streets, is_open: BoolArray, random: np.random.Generator) -> IntArray:
    """Heights of gentle hills in mm, where the reservoirs stand on towers; int64 array of shape (n0,)."""
    east, north = streets.points.T / 1000.0
    hills = 60_000 + 15_000 * np.sin(east / 0.9) * np.cos(north / 1.3) + random.normal(0.0, 1500.0, len(east))
    return np.asarray(np.rint(hills + 30_000 * is_open), dtype=np.int64)
