"""A town's water meters for one hour: which one stands the wrong way round?

The same from the command line, in the folder of this file:

    dec balance data/town/pipes.csv --nodes data/town/nodes.csv --value flow --sd sd \
        --supply demand --open-column open --unit L/s

A balance that closes is no proof that a network has no leak; local codes and its operator's rules decide.
"""

from pathlib import Path

import dec

TOWN = Path(__file__).parent / "data" / "town"


def main() -> None:
    """Audit the meters, then ask again without the first suspect's reading."""
    net = dec.read(TOWN / "pipes.csv", nodes=TOWN / "nodes.csv")
    audit = dec.balance(net, value="flow", sd="sd", supply="demand", open="open", unit="L/s")
    print(audit)
    suspect = audit.suspects[0]
    print(f"first suspect: {suspect.id}, {suspect.statistic:.0f} sd; all else says {suspect.estimate:.2f} L/s")
    print(suspect.hint)

    edges = audit.edges
    unchecked = edges[edges["standing"] == "unchecked"]
    print("measured, but nothing can contradict them:", ", ".join(unchecked["id"]))

    # What would the verdict be without that reading? The data stay as they are.
    readings = edges["value"].where(edges["id"] != suspect.id)
    frame = edges[["id", "from", "to", "sd"]].assign(flow=readings)
    nodes = (
        audit.vertices[["id"]]
        .head(net.complex.counts[0])
        .assign(demand=net.column("demand", 0).numbers(), open=net.column("open", 0).flags().astype(int))
    )
    without = dec.Dataset.from_frames(frame, nodes)
    print("without it:", dec.balance(without, value="flow", sd="sd", supply="demand", open="open"))


if __name__ == "__main__":
    main()
