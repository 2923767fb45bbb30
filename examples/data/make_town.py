"""town/pipes.csv and town/nodes.csv: one hour of the water meters of Harrowmere, a town that does not exist.

The true flows balance to the last digit of 0.01 L/s; the readings carry 1 % noise, and one meter is mounted backwards.

Run: python examples/data/make_town.py [OUTDIR]
"""

import numpy as np
from scipy.sparse import coo_array
from scipy.sparse.csgraph import breadth_first_order
from scipy.sparse.linalg import spsolve
from tables import decimal_text, output_folder, write_table

LAYOUT_SEED, NOISE_SEED = 2718, 4
N_STREETS, BLOCK = 6, 220.0  # streets each way and the metres between them
MISSING_STREETS = "J02-J03 J05-J11 J07-J08 J09-J15 J13-J19 J16-J17 J20-J21 J23-J29 J28-J34 J31-J32"
OTHER_PIPES = "R1-J01 R1-J04 J06-J37 J10-J17 J15-J22 J18-X1 J20-J27 J25-J32 J14-J15 W1-J33 W1-J35"
UNMETERED = "J02-J08 J10-J11 J11-J17 J25-J26 J26-J32 J25-J32 J30-J36"
WITHOUT_DEMAND = ("J01", "J15", "J21", "J33")
OPEN = {"R1": "reservoir", "W1": "works", "X1": "outlet"}
WORKS, OUTLET = 3140, -870  # put in, 0.01 L/s
DIAMETERS = np.array([80, 100, 150, 200, 250, 300, 400])  # mm
SPEED = 0.8  # m/s at most, which chooses the diameter
REVERSED = ("J13", "J14")  # the meter that is mounted backwards


def layout(random):
    """Nodes and pipes of the town.

    Parameters
    ----------
    random : numpy.random.Generator
        Moves the street corners off their square grid.

    Returns
    -------
    ids : list of str
        Nodes; the corners J01 to J36 row by row, then a farm, then the open ends.
    points : int64 array, shape (n0, 2)
        Metres east and north.
    pipes : list of tuple of str
        From and to of each pipe.
    """
    corners = [f"J{number:02d}" for number in range(1, N_STREETS**2 + 1)]
    row, column = np.divmod(np.arange(N_STREETS**2), N_STREETS)
    grid = BLOCK * np.column_stack([column, -row]) + random.uniform(-45, 45, (N_STREETS**2, 2))
    ends = np.array([[5.9, 0.6], [-0.6, 1.1], [3.4, -6.0], [6.1, -2.3]]) * BLOCK
    points = np.rint(np.concatenate([grid, ends]) + np.array([400, 1500])).astype(np.int64)
    streets = [(corners[i], corners[i + 1]) for i in range(N_STREETS**2) if column[i] < N_STREETS - 1]
    streets += [(corners[i], corners[i + N_STREETS]) for i in range(N_STREETS * (N_STREETS - 1))]
    missing = _pairs(MISSING_STREETS)
    pipes = [street for street in streets if street not in missing] + _pairs(OTHER_PIPES)
    return [*corners, "J37", "R1", "W1", "X1"], points, sorted(pipes)


def true_flows(tail, head, length, supply, reservoir):
    """Whole flows that balance, near those of a network whose wider pipes carry more.

    Parameters
    ----------
    tail, head : int64 arrays, shape (n1,)
        Ends of the pipes.
    length : int64 array, shape (n1,)
        Metres.
    supply : int64 array, shape (n0,)
        Put in at each node, 0.01 L/s; the reservoir's is not read.
    reservoir : int
        Node that makes up the difference.

    Returns
    -------
    flow : int64 array, shape (n1,)
        0.01 L/s along each pipe; inflow - outflow + supply is 0 at every node but the reservoir.
    diameter : int64 array, shape (n1,)
        Millimetres.
    """
    n_vertices = len(supply)
    ends = np.arange(len(tail))
    signs = np.concatenate([-np.ones(len(tail)), np.ones(len(tail))])
    difference = coo_array((signs, (np.tile(ends, 2), np.concatenate([tail, head]))), (len(tail), n_vertices)).tocsc()
    free = np.arange(n_vertices) != reservoir
    conductance = 1 / length
    for _ in range(3):
        weighted = difference.multiply(conductance[:, None]).tocsc()
        laplacian = (difference.T @ weighted).tocsc()[:, free][free]
        potential = np.zeros(n_vertices)
        potential[free] = spsolve(laplacian.tocsc(), supply[free].astype(np.float64))
        flow = -conductance * (difference @ potential)
        wanted = 1000 * np.sqrt(4 * np.abs(flow) * 1e-5 / (np.pi * SPEED))
        diameter = DIAMETERS[np.minimum(np.searchsorted(DIAMETERS, wanted), len(DIAMETERS) - 1)]
        conductance = (diameter / 100) ** 2 / length
    return _repaired(np.rint(flow).astype(np.int64), tail, head, supply, reservoir), diameter


def _repaired(flow, tail, head, supply, reservoir):
    """Flows of which those on a spanning tree are set so that every node but the root balances."""
    joined = coo_array((np.ones(len(tail)), (tail, head)), (len(supply), len(supply)))
    order, parent = breadth_first_order(joined.tocsr(), reservoir, directed=False)
    for vertex in order[:0:-1]:
        above = parent[vertex]
        is_pipe = ((tail == vertex) & (head == above)) | ((head == vertex) & (tail == above))
        pipe = np.flatnonzero(is_pipe)[0]  # the first of two parallel pipes
        surplus = supply[vertex] + flow[head == vertex].sum() - flow[tail == vertex].sum()
        flow[pipe] += surplus if tail[pipe] == vertex else -surplus
    return flow


def readings(flow, random):
    """Meter readings: the true flows with noise of 1 %, at least 0.05 L/s.

    Parameters
    ----------
    flow : int64 array, shape (n1,)
        0.01 L/s.
    random : numpy.random.Generator
        Draws the noise.

    Returns
    -------
    reading : int64 array, shape (n1,)
        0.01 L/s.
    sd : int64 array, shape (n1,)
        0.001 L/s, from the readings.
    """
    noise = random.standard_normal(len(flow)) * np.maximum(5.0, 0.01 * np.abs(flow))
    reading = np.rint(flow + noise).astype(np.int64)
    return reading, np.rint(np.maximum(50.0, 0.1 * np.abs(reading))).astype(np.int64)


def _pairs(text):
    """Pairs of ids from words of the form A-B."""
    return [tuple(word.split("-")) for word in text.split()]


def pipe_rows(pipes, length, diameter, reading, sd):
    """Lines of the pipe table; a pipe without a meter has empty cells.

    Parameters
    ----------
    pipes : list of tuple of str
        From and to of each pipe.
    length, diameter, reading, sd : int64 arrays, shape (n1,)
        Metres, millimetres, 0.01 L/s, 0.001 L/s.

    Returns
    -------
    list of tuple
        id, from, to, length_m, diameter_mm, flow, sd.
    """
    unmetered = _pairs(UNMETERED)
    rows = []
    for index, pipe in enumerate(pipes):
        metered = (decimal_text(reading[index], 2), decimal_text(sd[index], 3))
        measured = (None, None) if pipe in unmetered else metered
        rows.append((f"P{index + 1:02d}", *pipe, length[index], diameter[index], *measured))
    return rows


def node_rows(ids, points, supply):
    """Lines of the node table; the demand of an open node is not given.

    Parameters
    ----------
    ids : list of str
        Nodes.
    points : int64 array, shape (n0, 2)
        Metres.
    supply : int64 array, shape (n0,)
        Put in, 0.01 L/s.

    Returns
    -------
    list of tuple
        id, x, y, kind, demand, open.
    """
    rows = []
    for index, name in enumerate(ids):
        kind = OPEN.get(name, "consumer" if supply[index] else "junction")
        given = (None, "yes") if name in OPEN else (decimal_text(supply[index], 2), None)
        rows.append((name, *points[index], kind, *given))
    return rows


def main():
    """Write pipes.csv and nodes.csv."""
    folder = output_folder("make the tables of the town") / "town"
    random = np.random.default_rng(LAYOUT_SEED)
    ids, points, pipes = layout(random)
    number = {name: index for index, name in enumerate(ids)}
    tail, head = np.array([[number[a], number[b]] for a, b in pipes]).T
    length = np.rint(1.04 * np.linalg.norm(points[tail] - points[head], axis=1)).astype(np.int64)  # streets bend
    supply = -random.integers(60, 420, len(ids))
    supply[[number[name] for name in WITHOUT_DEMAND]] = 0
    supply[number["W1"]], supply[number["X1"]] = WORKS, OUTLET
    flow, diameter = true_flows(tail, head, length, supply, number["R1"])
    reading, sd = readings(flow, np.random.default_rng(NOISE_SEED))
    reading[pipes.index(REVERSED)] *= -1
    pipe_header = ["id", "from", "to", "length_m", "diameter_mm", "flow", "sd"]
    write_table(folder / "pipes.csv", pipe_header, pipe_rows(pipes, length, diameter, reading, sd))
    node_header = ["id", "x", "y", "kind", "demand", "open"]
    write_table(folder / "nodes.csv", node_header, node_rows(ids, points, supply))


if __name__ == "__main__":
    main()
