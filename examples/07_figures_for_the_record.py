"""Figures to hand over: flows rounded so that they still add up, and a certificate that a colleague can recheck.

The same from the command line, in the folder of this file:

    dec balance data/town/pipes.csv --nodes data/town/nodes.csv --value flow --sd sd --supply demand \
        --open-column open --unit L/s --digits 0.1 --round-supplies -o published.csv --certificate town.json
    dec verify town.json data/town/pipes.csv data/town/nodes.csv
    dec check ../meshes/moebius.obj --certificate band.json
    dec verify band.json ../meshes/moebius.obj

The last two state the holes of a mesh. `dec verify` is the one file dec/verify.py, which needs Python alone, so that
nobody has to trust the program that made the figures. A certificate says that the sums are right. It does not say that
meters are right, that nothing leaks or that a space is safe; local codes and licensed practice decide what follows.
"""

from decimal import Decimal
from pathlib import Path

import dec
from dec.verify import verify

DATA = Path(__file__).parent / "data" / "town"
MESHES = Path(__file__).parent.parent / "meshes"


def main() -> None:
    """Round the town's flows, certify the audit, recheck it, change one digit and recheck again."""
    names = ("pipes.csv", "nodes.csv")
    net = dec.read(DATA / names[0], nodes=DATA / names[1])
    audit = dec.balance(net, value="flow", sd="sd", supply="demand", open="open", unit="L/s")
    published = dec.rounded(audit, "0.1", round_supplies=True)
    one_by_one = [Decimal(f"{value:.1f}") for value in audit.edges["adjusted"].fillna(0)]
    print(f"rounded one by one, {unbalanced(net, one_by_one, published)} junctions no longer balance")
    tenths = [Decimal(int(tenth)) / 10 for tenth in published.edges]
    print(f"rounded together, {unbalanced(net, tenths, published)} do not")
    files = {name: (DATA / name).read_bytes() for name in names}
    certificate = audit.certify(contents=list(files.values()))
    report = verify(certificate, files)
    print(f"recheck: {'holds' if report.holds else 'does not hold'}; {report.checked[-1]}")
    files["pipes.csv"] = files["pipes.csv"].replace(b"-14.34", b"-14.43")
    print(f"after two digits of P21 changed places: {verify(certificate, files).problems[0]}")
    for name in ("moebius.obj", "bracket.stl"):
        K = dec.read(MESHES / name).complex
        groups = ", ".join(f"H{k} = {K.homology(k)}" for k in range(K.dim + 1))
        print(f"{name}: {groups}")


def unbalanced(net: dec.Dataset, flows: list[Decimal], published: dec.Rounded) -> int:
    """How many closed vertices with all flows and the supply known miss their balance."""
    K, known = net.complex, published.follows
    left = [Decimal(int(tenth)) / 10 for tenth in published.vertices]
    usable = [bool(stated) for stated in published.stated]
    for tail, head, flow, follows in zip(K.tail.tolist(), K.head.tolist(), flows, known.tolist(), strict=True):
        left[tail] -= flow
        left[head] += flow
        if not follows:
            usable[tail] = usable[head] = False
    return sum(amount != 0 for amount, is_usable in zip(left, usable, strict=True) if is_usable)


if __name__ == "__main__":
    main()
