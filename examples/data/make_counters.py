"""counters/readings.csv: one day of counter readings of three water meters of Harrowmere, a town that does not exist.

Mill Lane takes water in through M1 and M2 and passes some on through M3. True flows are whole numbers of 0.01 m3 each
half hour; the counters add them up without error, M1's rolls over, M2 is exchanged, and some telegrams are lost.

Run: python examples/data/make_counters.py [OUTDIR]
"""

import numpy as np
from tables import decimal_text, output_folder, write_table

SEED = 31
HALF_HOURS = 48
FULL = 10_000_000  # five digits and two decimals, in 0.01 m3
START = {"M1": 9_976_412, "M2": 4_310_077, "M3": 120_850}  # 0.01 m3
DAILY_MEAN = {"M1": 2000, "M2": 1250, "M3": 610}  # 0.01 m3 each half hour
EXCHANGED = ("M2", 27, 1_003)  # the new counter when it was put in, between rows 26 and 27
LOST = {"M1": (9, 33), "M2": (), "M3": (14, 15, 40)}  # rows without a telegram


def true_amounts(random):
    """What passes each meter in each half hour, 0.01 m3: low at night, high in the morning and the evening."""
    hour = np.arange(HALF_HOURS) / 2 + 0.25
    shape = 1 - 0.55 * np.cos(2 * np.pi * (hour - 3) / 24) + 0.3 * np.cos(4 * np.pi * (hour - 8) / 24)
    wobble = random.normal(0, 0.02, (len(DAILY_MEAN), HALF_HOURS))
    return {
        name: np.rint(mean * (shape + row)).astype(np.int64)
        for (name, mean), row in zip(DAILY_MEAN.items(), wobble, strict=True)
    }


def readings(amounts):
    """Counters at every half hour, 0.01 m3, and what the old M2 showed when it was taken out."""
    shown = {name: (START[name] + np.concatenate([[0], np.cumsum(a)])) % FULL for name, a in amounts.items()}
    name, row, first = EXCHANGED
    last = int(shown[name][row - 1]) + int(amounts[name][row - 1]) // 3
    later = first + int(shown[name][row]) - last
    shown[name][row:] += later - shown[name][row]
    return shown, last


def main():
    """Write readings.csv."""
    folder = output_folder("make the counter readings") / "counters"
    shown, _ = readings(true_amounts(np.random.default_rng(SEED)))
    rows = []
    for row in range(HALF_HOURS + 1):
        cells = [None if row in LOST[name] else decimal_text(shown[name][row], 2) for name in shown]
        rows.append((f"{row // 2:02d}:{row % 2 * 30:02d}", *cells))
    write_table(folder / "readings.csv", ["time", *shown], rows)


if __name__ == "__main__":
    main()
