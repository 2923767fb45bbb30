"""zone/: one night hour of Kiln Hill, the upper water zone of Harrowmere, a town that does not exist.

The true flows balance to the last digit of 0.01 L/s, with a leak that no table names; the readings carry noise, six
meters share the error of their calibration bench, and one meter counts backwards.

Run: python examples/data/make_zone.py [OUTDIR]
"""

import numpy as np
from make_town import true_flows
from tables import decimal_text, output_folder, write_table

NOISE_SEED = 1
NODES = [  # id, place, kind, what is put in in 0.01 L/s
    ("W2", "Kiln Hill pumps", "works", None),
    ("T1", "Beacon tank", "tank", 0),
    ("X2", "valve to the lower zone", "outlet", -905),
    ("K01", "Pump Lane", "junction", 0),
    ("K02", "Brick Street", "consumer", -214),
    ("K03", "Infirmary", "consumer", -388),
    ("K04", "Tank Road", "junction", 0),
    ("K05", "Clay Pits", "consumer", -167),
    ("K06", "School Corner", "consumer", -243),
    ("K07", "Chapel Cross", "junction", 0),
    ("K08", "Beacon Way", "consumer", -152),
    ("K09", "Kiln Green", "consumer", -186),
    ("K10", "Upper Market", "consumer", -319),
    ("K11", "Fountain", "consumer", -128),
    ("K12", "Terrace", "consumer", -201),
    ("K13", "West Gate", "junction", 0),
    ("K14", "Laundry", "consumer", -276),
    ("K15", "Foundry", "consumer", -341),
    ("K16", "East Gate", "junction", 0),
    ("K17", "Lark Farm", "consumer", -84),
]
PIPES = (
    "W2-K01 W2-K02 K01-K02 K02-K03 K03-K04 T1-K04 T1-K08 K01-K05 K02-K06 K03-K07 K04-K08 K05-K06 K06-K07 K07-K08 "
    "K05-K09 K06-K10 K07-K11 K08-K12 K09-K10 K10-K11 K11-K12 K09-K13 K10-K14 K11-K15 K12-K16 K13-K14 K14-K15 "
    "K14-K15 K15-K16 K13-K17 K16-X2"
)
UNMETERED = ("Z03", "Z19", "Z28")
KEPT = 640  # what the tank gains, 0.01 L/s
BENCH = ("Z09", "Z10", "Z12", "Z13", "Z16", "Z17")  # meters calibrated on one bench
SHARED = 0.005  # standard deviation of the bench's error, of each reading
TWO_METERS = {"Z01": (-1, False), "Z06": (1, True)}  # the second meter: how it is mounted, whether it counts m3/h
TURNED = "Z16"
LEAK = ("K07", 130)  # 0.01 L/s
SHARE, LEAST = 0.01, 5.0  # standard deviation of a meter: of its reading, and at least so many 0.01 L/s


def meter_rows(names, flow, random):
    """Lines of the table of meters: one or two a pipe, as they read.

    Parameters
    ----------
    names : list of str
        Pipes.
    flow : int64 array, shape (n1,)
        0.01 L/s along each pipe.
    random : numpy.random.Generator
        Draws the bench's error, then the noise.

    Returns
    -------
    list of tuple
        sensor, edge, unit, mounted, factor, flow, sd; the last two in the meter's own unit.
    """
    shared = SHARED * random.standard_normal()
    rows = []
    for name, amount in zip(names, flow.tolist(), strict=True):
        if name in UNMETERED:
            continue
        meters = [(1, False), *([TWO_METERS[name]] if name in TWO_METERS else [])]
        for number, (mounted, hourly) in enumerate(meters):
            noise = random.standard_normal() * max(LEAST, SHARE * abs(amount))
            reading = round(amount * (1 + shared * (name in BENCH)) + noise) * mounted * (-1 if name == TURNED else 1)
            scale = 3.6 if hourly else 1.0
            sd = round(10 * scale * max(LEAST, SHARE * abs(reading)))
            unit, factor = ("m3/h", "0.2777777777777778") if hourly else ("L/s", None)
            sign = None if mounted > 0 else mounted
            sensor = f"{name.replace('Z', 'F')}{'ab'[number] if len(meters) > 1 else ''}"
            shown = (decimal_text(round(scale * reading), 2), decimal_text(sd, 3))
            rows.append((sensor, name, unit, sign, factor, *shown))
    return rows


def node_rows(random):
    """Lines of the table of nodes; 2 % is how well a demand is known, and 0 is exact.

    Parameters
    ----------
    random : numpy.random.Generator
        Draws the noise of the demands and of what the tank gains.

    Returns
    -------
    list of tuple
        id, place, kind, demand, demand_sd, kept, kept_sd, open.
    """
    rows = []
    for name, place, kind, amount in NODES:
        if kind in ("works", "outlet"):
            rows.append((name, place, kind, None, None, None, None, "yes"))
            continue
        reading = round(amount * (1 + 0.02 * random.standard_normal()))
        demand = (decimal_text(reading, 2), decimal_text(round(0.2 * abs(reading)), 3) if amount else None)
        gain = round(KEPT + 15 * random.standard_normal()) if kind == "tank" else None
        kept = (None, None) if gain is None else (decimal_text(gain, 2), "0.15")
        rows.append((name, place, kind, *demand, *kept, None))
    return rows


def main():
    """Write pipes.csv, nodes.csv and meters.csv."""
    folder = output_folder("make the tables of the zone") / "zone"
    number = {row[0]: index for index, row in enumerate(NODES)}
    pipes = [pipe.split("-") for pipe in PIPES.split()]
    names = [f"Z{index:02d}" for index in range(1, len(pipes) + 1)]
    tail, head = np.array([[number[a], number[b]] for a, b in pipes]).T
    length = 180 + 37 * np.arange(len(pipes)) % 210  # metres, any but equal
    supply = np.array([row[3] or 0 for row in NODES])
    supply[number["T1"]] -= KEPT
    supply[number[LEAK[0]]] -= LEAK[1]
    flow, _ = true_flows(tail, head, length, supply, number["W2"])
    random = np.random.default_rng(NOISE_SEED)
    header = ["sensor", "edge", "unit", "mounted", "factor", "flow", "sd"]
    write_table(folder / "meters.csv", header, meter_rows(names, flow, random))
    header = ["id", "place", "kind", "demand", "demand_sd", "kept", "kept_sd", "open"]
    write_table(folder / "nodes.csv", header, node_rows(random))
    rows = [
        (name, *pipe, metres, "Ashby bench" if name in BENCH else None)
        for name, pipe, metres in zip(names, pipes, length.tolist(), strict=True)
    ]
    write_table(folder / "pipes.csv", ["id", "from", "to", "length_m", "bench"], rows)


if __name__ == "__main__":
    main()
