"""mains/: the water mains of the town of Harrowmere, which does not exist, as a model for heads and flows.

Losses are model values: Hazen and Williams, Hydraulic Tables (first 1905), in the usual SI form
loss = 10.67 length flow^1.852 / (C^1.852 diameter^4.87), metres and cubic metres a second (from memory). The constants
C are common practice: 100 for old cast iron, 130 for newer ductile iron, 140 for polyethylene.

Run: python examples/data/make_mains.py [OUTDIR]
"""

import math

from tables import decimal_text, output_folder, write_table

EXPONENT = 1.852
USUAL_SPEED = 0.6  # m/s, at which the proportional stand-in loses as much
NODES = [  # id, place, ground in 0.1 m, what is put in in 0.1 L/s, head held in 0.1 m
    ("R1", "Hart Hill reservoir", 920, 0, 960),
    ("R2", "Mill Tower", 780, 0, 915),
    ("J1", "Northgate", 641, -42, None),
    ("J2", "Market", 583, -95, None),
    ("J3", "Church Street", 602, -61, None),
    ("J4", "Corn Exchange", 557, -83, None),
    ("J5", "Tanners Row", 544, -38, None),
    ("J6", "Lower Bridge", 489, -124, None),
    ("J7", "Dye Works", 467, -156, None),
    ("J8", "Ropewalk", 472, -29, None),
    ("J9", "Mill Lane", 538, -47, None),
    ("J10", "Quay", 451, -52, None),
]
MAINS = [  # from, to, metres, millimetres, C
    ("R1", "J1", 900, 300, 100),
    ("J1", "J2", 520, 250, 100),
    ("J1", "J2", 535, 200, 130),  # laid beside the old one
    ("J1", "J3", 610, 250, 130),
    ("J2", "J4", 480, 200, 100),
    ("J3", "J4", 350, 150, 100),
    ("J3", "J5", 540, 200, 130),
    ("J4", "J6", 430, 150, 100),
    ("J5", "J6", 390, 150, 130),
    ("J6", "J7", 620, 150, 140),
    ("J5", "J8", 700, 150, 130),
    ("J7", "J8", 310, 100, 100),
    ("J7", "J9", 450, 200, 130),
    ("R2", "J9", 760, 300, 130),
    ("J9", "J10", 380, 150, 140),
    ("J10", "J8", 520, 100, 140),
    ("J2", "J9", 840, 200, 100),
]


def conductance(length, millimetres, C):
    """(L/s)^1.852 per metre of loss."""
    return (1000 * C) ** EXPONENT * (millimetres / 1000) ** 4.87 / (10.67 * length)


def proportional(length, millimetres, C):
    """L/s per metre of loss, right at the usual speed alone."""
    flow = 1000 * USUAL_SPEED * math.pi / 4 * (millimetres / 1000) ** 2
    return flow / (flow**EXPONENT / conductance(length, millimetres, C))


def main():
    """Write mains.csv and junctions.csv."""
    folder = output_folder("make mains/") / "mains"
    mains = [
        (f"M{number:02d}", *main, f"{conductance(*main[2:]):.5g}", f"{proportional(*main[2:]):.5g}")
        for number, main in enumerate(MAINS, start=1)
    ]
    write_table(folder / "mains.csv", ["id", "from", "to", "length_m", "diameter_mm", "C", "hw", "linear"], mains)
    nodes = [
        (name, place, decimal_text(ground, 1), decimal_text(amount, 1), None if head is None else decimal_text(head, 1))
        for name, place, ground, amount, head in NODES
    ]
    write_table(folder / "junctions.csv", ["id", "place", "ground_m", "put_in", "head_m"], nodes)


if __name__ == "__main__":
    main()
