"""A day of meter counters becomes flows: one rolls over, one is exchanged, telegrams are lost, an hour is foretold.

There is no command for this; the flows that come out are what `dec balance` takes. The data are invented. A value put
into a gap is no reading: amounts that are billed, and conclusions about leaks, follow the rules for meters, local codes
and the operator's practice.
"""

import csv
from fractions import Fraction
from pathlib import Path

import numpy as np

import dec
from dec import steps

COUNTERS = Path(__file__).parent / "data" / "counters" / "readings.csv"
HALF_HOUR = Fraction(1, 2)  # h
M2_EXCHANGED = 27  # row of the first reading of the new meter, 13:30


def litres(flow: Fraction) -> str:
    """A flow in m3/h as text in L/s."""
    return f"{float(flow / Fraction(36, 10)):.2f}"


def main() -> None:
    """Unroll the counters, fill their gaps, difference them, and check that the day adds up."""
    times, names, readings = read_counters()
    try:
        steps.meter_totals(readings)
    except dec.InputError as error:
        print("as they stand:", error)
    stated = {(M2_EXCHANGED, names.index("M2")): steps.MeterChange(last="43361.94", first="10.03")}
    totals = steps.meter_totals(readings, roll_over=100_000, changes=stated)

    filled = steps.fill(totals, order=3)
    for row, column in np.argwhere(~filled.is_read):
        value, off = float(filled.values[row, column]), float(filled.remainder[row, column])
        print(f"{names[column]} at {times[row]}: {value:.3f} m3 since midnight put in, off by up to {off:.3f}")

    flows = steps.difference(filled.values, h=HALF_HOUR)  # m3/h, exact
    day = steps.definite_sum(flows, h=HALF_HOUR)
    for column, name in enumerate(names):
        assert day[column] == filled.values[-1, column]  # to the last digit, whatever was put in
        print(f"{name}: {float(day[column]):.2f} m3 in the day, most {litres(max(flows[:, column]))} L/s")

    used = flows @ np.array([1, 1, -1], dtype=object)  # in through M1 and M2, on through M3
    least = min(range(len(used)), key=lambda row: used[row])
    all_day = float(steps.definite_sum(used, h=HALF_HOUR))
    print(f"Mill Lane uses least from {times[least]}: {litres(used[least])} L/s; {all_day:.2f} m3 all day")
    say_what_comes(filled.values, names)


def say_what_comes(totals: np.ndarray, names: list[str]) -> None:
    """The hour after midnight, by polynomials of two degrees: what differs between them is not known."""
    for order in (1, 3):
        carried = steps.extend(totals, after=2, order=order)
        for column, name in enumerate(names):
            total, off = carried.values[-1, column], carried.remainder[-1, column]
            more, times = total - totals[-1, column], carried.amplification[-1, column]
            said = f"{float(more):.2f} m3 in the next hour, off by up to {float(off):.2f}"
            said += f"; errors of readings count {times} times"
            print(f"{name}, order {order}: {said}")


def read_counters() -> tuple[list[str], list[str], np.ndarray]:
    """Times, meters and readings as they are written; text, so that every digit counts."""
    with COUNTERS.open(encoding="utf-8", newline="") as file:
        header, *rows = csv.reader(file)
    return [row[0] for row in rows], header[1:], np.array([row[1:] for row in rows], dtype=object)


if __name__ == "__main__":
    main()
