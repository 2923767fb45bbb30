"""Thirty meters of one water zone: one counts backwards, something leaks, and not everything can be told apart.

The same from the command line, in the folder of this file: the audit; then what the verdict would be with the first
suspect turned, beside the least sum of absolute corrections; then the adjusted flows and the nodes as tables; last a
levelling net by the limit that its trade has written down, with which no standard deviations are needed:

    dec balance data/zone/pipes.csv --nodes data/zone/nodes.csv --readings data/zone/meters.csv --value flow --sd sd \
        --supply demand --supply-sd demand_sd --storage kept --storage-sd kept_sd --open-column open \
        --common bench --common-sd 0.5% --unit L/s
    dec balance data/zone/pipes.csv --nodes data/zone/nodes.csv --readings data/zone/meters.csv --value flow --sd sd \
        --supply demand --supply-sd demand_sd --storage kept --storage-sd kept_sd --open-column open \
        --common bench --common-sd 0.5% --unit L/s --if-turned Z16 --robust
    dec balance data/zone/pipes.csv --nodes data/zone/nodes.csv --readings data/zone/meters.csv --value flow --sd sd \
        --supply demand --supply-sd demand_sd --storage kept --storage-sd kept_sd --open-column open \
        --common bench --common-sd 0.5% --unit L/s -o adjusted.csv --vertices zone_nodes.csv
    dec loops data/levelling/lines.csv --nodes data/levelling/marks.csv --value dh --fixed height \
        --preset levelling-12mm --length length_km --length-unit km --unit m

The data are invented. A leak that an audit names has to be found on the ground, a meter that it names has to be looked
at, and what it does not name may leak all the same: that the flows balance is no evidence that a place is safe or the
water fit to drink. Local codes, the operator's rules and licensed practice decide.
"""

from pathlib import Path

import dec

DATA = Path(__file__).parent / "data"
ZONE = DATA / "zone"


def main() -> None:
    """Audit the zone, ask what would explain it, and say what it cannot show; then level by a preset."""
    net = dec.read(ZONE / "pipes.csv", nodes=ZONE / "nodes.csv")
    audit = dec.balance(
        net, value="flow", sd="sd", readings=ZONE / "meters.csv", open="open", supply="demand", supply_sd="demand_sd",
        storage="kept", storage_sd="kept_sd", common="bench", common_sd="0.5%", unit="L/s", robust=True,
    )  # fmt: skip
    print(audit)
    for note in audit.notes:
        print("  note:", note)
    say_suspects(audit)
    say_limits(audit)
    say_levelling()


def say_suspects(audit: dec.Audit) -> None:
    """What stands out, alone and together, and what the verdict would be without it."""
    first = audit.suspects[0]
    print(f"first suspect: {first.id}, {first.statistic:.0f} times its sd; all else says {first.estimate:.2f} L/s")
    print(" ", first.hint)
    print("together:")
    for error in audit.extra["errors"]["found"]:
        what = "L/s leaves unseen at" if error["kind"] == "vertex" else "L/s is what all else says of"
        print(f"  {error['estimate']:.2f} {what} {error['id']}, {error['statistic']:.0f} times its sd")

    turned = audit.what_if(turned=[first.id])
    print(f"with {first.id} turned:", turned)
    loudest_meter = next(suspect for suspect in turned.suspects if suspect.kind == "edge")
    leak = turned.suspects[0]
    print(f"  a leak at {leak.id} ({leak.statistic:.1f}) explains more than any meter ({loudest_meter.id}, ", end="")
    print(f"{loudest_meter.statistic:.1f}); without that meter the flows would still not balance:")
    print("  ", audit.what_if(turned=[first.id], left_out=[loudest_meter.id]))

    # The least sum of absolute corrections agrees on the meter. It knows meters and demands, no leaks, so it puts
    # the leak on two meters beside it.
    for entry in audit.extra["robust"]["large"]:
        print(f"  robust: {entry['id']} from {entry['value']:.2f} to {entry['estimate']:.2f} L/s")


def say_limits(audit: dec.Audit) -> None:
    """What no reading can tell apart, what is not checked, and how small an error would show."""
    edges, nodes, demands = audit.edges, audit.vertices, audit.table("at_vertices")
    named = {}
    for table, what in ((edges, "meter on"), (demands, "demand at"), (nodes, "leak at")):
        for row in table[table["class"] > 0].itertuples():
            named.setdefault(row[table.columns.get_loc("class") + 1], []).append(f"{what} {row.id}")
    for members in named.values():
        if len(members) > 2:
            print("cannot be told apart:", ", ".join(members))
    for standing in ("unchecked", "inferred"):
        print(f"{standing}:", ", ".join(edges.loc[edges["standing"] == standing, "id"]))
    least = edges.dropna(subset=["detectable"]).sort_values("detectable")
    for row in (*least.head(1).itertuples(), *least.tail(1).itertuples()):
        print(f"an error on {row.id} shows from {row.detectable:.2f} L/s on, four times in five")
    for text in audit.not_shown:
        print("not shown:", text)


def say_levelling() -> None:
    """A levelling net by the limit of a preset: loops, lengths, no standard deviations."""
    lines = dec.read(DATA / "levelling" / "lines.csv", nodes=DATA / "levelling" / "marks.csv")
    audit = dec.loops(
        lines, value="dh", fixed="height", preset="levelling-12mm", length="length_km", length_unit="km", unit="m"
    )
    print(audit)
    for loop in audit.loops[:2]:
        legs = " ".join(f"{'+' if sign > 0 else '-'}{line}" for line, sign in loop["legs"])
        print(f"  {legs} closes by {1000 * loop['misclosure']:.1f} mm, allowed {1000 * loop['limit']:.1f} mm")
    print("  a limit says which loop is out and not which line: for that, give standard deviations")


if __name__ == "__main__":
    main()
