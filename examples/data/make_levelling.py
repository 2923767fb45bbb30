"""levelling/lines.csv, lines_clean.csv and marks.csv: a levelling net round Kestrel Tarn, a lake that does not exist.

Each line carries the height of its second end above its first; the two files of lines differ in one reading.

Run: python examples/data/make_levelling.py [OUTDIR]
"""

import numpy as np
from tables import decimal_text, output_folder, write_table

SEED = 11
SD_PER_ROOT_KM = 0.0015  # m
BLUNDER = ("L07", 500)  # line and 0.1 mm: 50 mm too high
HEIGHTS = {  # 0.1 mm, true
    "BM1": 2148370,
    "BM2": 2314920,
    "M1": 2187164,
    "M2": 2239518,
    "M3": 2275033,
    "M4": 2201847,
    "M5": 2260791,
    "M6": 2333256,
    "M7": 2168902,
    "M8": 2359675,
}
BENCH_MARKS = ("BM1", "BM2")  # their heights are given, to the millimetre
LINES = [  # from, to, tens of metres
    ("BM1", "M1", 94),
    ("M1", "M2", 121),
    ("M2", "M3", 87),
    ("M3", "BM2", 76),
    ("BM1", "M4", 142),
    ("M4", "M5", 133),
    ("M5", "M2", 158),
    ("BM2", "M5", 117),
    ("M4", "M1", 109),
    ("M3", "M6", 164),
    ("M6", "BM2", 98),
    ("BM1", "M7", 71),
    ("M7", "M4", 105),
    ("M5", "M3", 149),
    ("M3", "M2", 91),
    ("M6", "M8", 83),
]


def observed():
    """Differences of height with noise.

    Returns
    -------
    difference : int64 array, shape (n1,)
        0.1 mm, second end minus first.
    sd : float64 array, shape (n1,)
        Metres.
    """
    true = np.array([HEIGHTS[head] - HEIGHTS[tail] for tail, head, _ in LINES])
    sd = SD_PER_ROOT_KM * np.sqrt([length / 100 for _, _, length in LINES])
    noise = np.random.default_rng(SEED).standard_normal(len(LINES)) * sd
    return np.rint(true + 10000 * noise).astype(np.int64), sd


def rows(difference, sd):
    """Lines of the table, heights and deviations in metres.

    Parameters
    ----------
    difference : int64 array, shape (n1,)
        0.1 mm.
    sd : float64 array, shape (n1,)
        Metres.

    Returns
    -------
    list of tuple
        id, from, to, dh, length_km, sd.
    """
    return [
        (
            f"L{number + 1:02d}",
            tail,
            head,
            decimal_text(difference[number], 4),
            decimal_text(length, 2),
            decimal_text(round(1e5 * sd[number]), 5),
        )
        for number, (tail, head, length) in enumerate(LINES)
    ]


def main():
    """Write lines.csv, lines_clean.csv and marks.csv."""
    folder = output_folder("make the tables of the levelling net") / "levelling"
    header = ["id", "from", "to", "dh", "length_km", "sd"]
    difference, sd = observed()
    write_table(folder / "lines_clean.csv", header, rows(difference, sd))
    line, size = BLUNDER
    difference[int(line[1:]) - 1] += size
    write_table(folder / "lines.csv", header, rows(difference, sd))
    marks = [(name, decimal_text(height // 10, 3) if name in BENCH_MARKS else None) for name, height in HEIGHTS.items()]
    write_table(folder / "marks.csv", ["id", "height"], marks)


if __name__ == "__main__":
    main()
