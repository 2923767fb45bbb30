"""A levelling net between two bench marks: which line carries the blunder, and which heights are best?

The same from the command line, in the folder of this file:

    dec loops data/levelling/lines.csv --nodes data/levelling/marks.csv --value dh --sd sd --fixed height --unit m
"""

from pathlib import Path

import dec

NET = Path(__file__).parent / "data" / "levelling"


def main() -> None:
    """Audit the lines as observed, then the lines after the suspect was levelled again."""
    for name in ("lines.csv", "lines_clean.csv"):
        net = dec.read(NET / name, nodes=NET / "marks.csv")
        audit = dec.loops(net, value="dh", sd="sd", fixed="height", unit="m")
        print(name, audit)
        for suspect in audit.suspects[:1]:
            print(f"  first suspect {suspect.id}: {suspect.statistic:.1f} sd, all else says {suspect.estimate:.4f} m")
        worst = audit.loops[0]
        legs = " ".join(f"{'+' if sign > 0 else '-'}{line}" for line, sign in worst["legs"])
        print(
            f"  worst loop {legs} closes by {1000 * worst['misclosure']:.1f} mm, allowed {1000 * worst['limit']:.1f} mm"
        )
    for row in audit.vertices.itertuples():
        print(f"  {row.id:4s} {row.potential:9.4f} m  sd {1000 * row.potential_sd:.1f} mm")


if __name__ == "__main__":
    main()
