"""Heads in a town's water mains: what do the demands leave at every junction, and how sure is the arithmetic?

The same from the command line, in the folder of this file; first with losses proportional to flow, then by the power
law of Hazen and Williams, then as nobody can solve it, since nothing says where the water comes from (exit code 4):

    dec solve data/mains/mains.csv --nodes data/mains/junctions.csv --source put_in --conductance linear \
        --fixed head_m --why
    dec solve data/mains/mains.csv --nodes data/mains/junctions.csv --source put_in --conductance hw \
        --fixed head_m --exponent 1.852 --why
    dec solve data/mains/mains.csv --nodes data/mains/junctions.csv --source put_in --conductance linear

The losses are model values, from the formula of Hazen and Williams (Hydraulic Tables, first 1905), with constants that
nobody measured. Pressures for design, fire flow or the operation of a real network need a licensed engineer and follow
local codes.
"""

from pathlib import Path

import numpy as np

import dec

MAINS = Path(__file__).parent / "data" / "mains"


def main() -> None:
    """Solve with both laws, read the bound, and ask for what cannot be answered."""
    net = dec.read(MAINS / "mains.csv", nodes=MAINS / "junctions.csv")
    K = net.complex
    put_in = net.column("put_in", 0).numbers()
    head = net.column("head_m", 0).numbers()
    held = np.flatnonzero(~np.isnan(head))
    fixed = (held, head[held])

    linear = net.column("linear", 1).numbers()
    first = dec.solve_poisson(K, put_in, conductance=linear, fixed=fixed)
    print("proportional:", first)
    print(f"  {first.method}, because {first.because}")
    # The bound holds for all mains together, so for each of them alone:
    print(f"  no flow is off by more than {(first.error_bound * np.sqrt(linear)).max():.1g} L/s by the arithmetic,")
    print(f"  no loss by more than {(first.error_bound / np.sqrt(linear)).max():.1g} m")

    power = dec.solve_poisson(K, put_in, conductance=net.column("hw", 1).numbers(), fixed=fixed, exponent=1.852)
    print("Hazen-Williams:", power)
    low, high = power.energy
    print(f"  flow times loss, over all mains: {low:.9g} to {high:.9g} L/s m")

    above = power.potential.values - net.column("ground_m", 0).numbers()
    above[held] = np.inf
    lowest = int(np.argmin(above))
    print(f"  least head above ground, in this model: {above[lowest]:.1f} m at {K.vertex_ids[lowest]}")
    print(f"  the two laws differ by up to {np.abs(first.potential.values - power.potential.values).max():.1f} m,")
    print("  far more than either bound: a bound speaks of the arithmetic, never of the law or the constants")
    for vertex in held:
        out = power.flow.values[K.tail == vertex].sum() - power.flow.values[K.head == vertex].sum()
        print(f"  {K.vertex_ids[vertex]} gives {out:.2f} L/s")

    try:
        dec.solve_poisson(K, put_in, conductance=linear)
    except dec.UnsolvableError as error:
        print("without the reservoirs' heads, refused:", error)


if __name__ == "__main__":
    main()
