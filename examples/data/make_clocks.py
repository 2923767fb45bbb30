"""clocks.csv: nine comparisons between six clocks of a laboratory that does not exist.

Each line carries the second clock's reading minus the first's.

Run: python examples/data/make_clocks.py [OUTDIR]
"""

import numpy as np
from tables import decimal_text, output_folder, write_table

SEED = 5
AHEAD = {"C1": 0.0, "C2": 41.3, "C3": -118.7, "C4": 262.5, "C5": 7.9, "C6": -63.2}  # ns ahead of C1, true
COMPARISONS = [  # first, second, sd in 0.1 ns
    ("C1", "C2", 8),
    ("C2", "C3", 12),
    ("C3", "C4", 15),
    ("C4", "C5", 10),
    ("C5", "C6", 9),
    ("C6", "C1", 14),
    ("C1", "C4", 11),
    ("C2", "C5", 8),
    ("C3", "C6", 20),
]


def main():
    """Write clocks.csv."""
    noise = np.random.default_rng(SEED).standard_normal(len(COMPARISONS))
    lines = [
        (
            f"K{number}",
            first,
            second,
            decimal_text(round(10 * (AHEAD[second] - AHEAD[first]) + sd * noise[number - 1]), 1),
            decimal_text(sd, 1),
        )
        for number, (first, second, sd) in enumerate(COMPARISONS, start=1)
    ]
    write_table(output_folder("make clocks.csv") / "clocks.csv", ["id", "from", "to", "offset_ns", "sd_ns"], lines)


if __name__ == "__main__":
    main()
