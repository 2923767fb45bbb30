"""Certificates: results with all that it takes to recheck them by other means, sealed against damage."""

import hashlib
import json
import zlib
from collections.abc import Mapping, Sequence
from typing import Any

from dec.calculus.dataset import Input
from dec.errors import InputError

__all__ = ["MOST_CELLS", "SCHEMA", "Chain", "certified_inputs", "homology_certificate", "refuse_many_cells", "sealed"]

SCHEMA = "dec.certificate/1"
MOST_CELLS = 20_000  # what is eliminated over the integers, in plain Python, when a homology is rechecked

Chain = Sequence[tuple[int, int]]


def sealed(entries: Mapping[str, Any]) -> bytes:
    """A certificate as the bytes of a JSON file, with a digest of what it says.

    Parameters
    ----------
    entries : mapping of str to what JSON holds
        Everything but the keys "schema" and "seal", which are added.

    Returns
    -------
    bytes
        The same entries give the same bytes. The seal tells damage and careless changes, not forgery: against that,
        `dec.verify` computes everything anew from the tables.

    Examples
    --------
    >>> sealed({"law": "loop"})[:50]
    b'{"schema": "dec.certificate/1", "law": "loop", "se'
    """
    whole = {"schema": SCHEMA, **entries}
    canonical = json.dumps(whole, sort_keys=True, separators=(",", ":"), allow_nan=False).encode("ascii")
    whole["seal"] = hashlib.sha256(canonical).hexdigest()
    return json.dumps(whole, allow_nan=False).encode("ascii") + b"\n"


def certified_inputs(
    inputs: Sequence[Input], holds: Sequence[str], contents: Sequence[bytes] = ()
) -> list[dict[str, Any]]:
    """What a certificate says of the files that went in.

    Parameters
    ----------
    inputs : sequence of Input
    holds : sequence of str
        What each holds: "edges", "nodes", "readings" or "mesh".
    contents : sequence of bytes
        Their bytes, or nothing. With them every line gets a digest of six hexadecimal digits (CRC-32, its lower 24
        bits), by which a recheck names a line that was changed, whatever stands in it.

    Raises
    ------
    InputError
        If two files have one name, or the contents are not those that were read.

    Examples
    --------
    >>> data = b"from,to"
    >>> given = Input("e.csv", hashlib.sha256(data).hexdigest(), len(data))
    >>> certified_inputs([given], ["edges"], [data])[0]["lines"]
    'c7ba96'
    """
    names = [given.name for given in inputs]
    if len(set(names)) < len(names):
        message = f"a certificate names its input files, so their names must differ, got {', '.join(names)}; rename one"
        raise InputError(message)
    found = []
    for number, (given, what) in enumerate(zip(inputs, holds, strict=True)):
        entry: dict[str, Any] = {"name": given.name, "sha256": given.sha256, "bytes": given.bytes, "holds": what}
        if contents:
            data = contents[number]
            if hashlib.sha256(data).hexdigest() != given.sha256:
                message = f"{given.name} must be as it was read, its bytes have changed since; run the audit again"
                raise InputError(message)
            end = b"\n" if b"\n" in data else b"\r"
            entry["line_end"] = end.decode("ascii")
            entry["lines"] = "".join(f"{zlib.crc32(line) & 0xFFFFFF:06x}" for line in data.split(end))
        found.append(entry)
    return found


def homology_certificate(
    counts: Sequence[int], boundaries: Sequence[Sequence[Chain]], homology: Sequence[Mapping[str, Any]],
    inputs: Sequence[Input] = (),
) -> bytes:  # fmt: skip
    """A certificate of a homology: boundary matrices, ranks, torsion and cycles, all in whole numbers.

    Parameters
    ----------
    counts : sequence of int
        Cells of degree 0, 1, ..., K.
    boundaries : sequence of K matrices
        For each degree from 1 the boundary of every cell, as pairs of a cell one degree lower and its coefficient. Of
        a relative homology: of the cells that are not in the subcomplex alone.
    homology : sequence of K + 1 mappings
        For each degree "rank" (int), "torsion" (sequence of int > 1, invariant factors or prime powers) and "cycles",
        chains that are a basis of the free part, each as pairs of a cell and its coefficient.
    inputs : sequence of Input
        Mesh files; the recheck compares their SHA-256 alone.

    Returns
    -------
    bytes
        `dec.verify` multiplies the boundary matrices, takes the boundary of every cycle, and finds ranks and torsion
        by an elimination of its own.

    Raises
    ------
    InputError
        If there are more than 20,000 cells, or the lists do not belong together.

    Examples
    --------
    >>> ring = [[(0, -1), (1, 1)], [(1, -1), (2, 1)], [(2, -1), (0, 1)]]
    >>> found = [{"rank": 1, "torsion": (), "cycles": [[(0, 1)]]},
    ...          {"rank": 1, "torsion": (), "cycles": [[(0, 1), (1, 1), (2, 1)]]}]
    >>> json.loads(homology_certificate([3, 3], [ring], found))["homology"][1]["cycles"]
    [[0, 1, 1, 1, 2, 1]]
    """
    refuse_many_cells(counts)
    if len(boundaries) != len(counts) - 1 or len(homology) != len(counts):
        message = (
            f"for {len(counts)} degrees there must be {len(counts) - 1} boundary matrices and {len(counts)} homology "
            f"groups, got {len(boundaries)} and {len(homology)}"
        )
        raise InputError(message)
    degrees = [
        {
            "rank": int(found["rank"]), "torsion": [int(factor) for factor in found["torsion"]],
            "cycles": [_flat(cycle) for cycle in found["cycles"]],
        }
        for found in homology
    ]  # fmt: skip
    return sealed({
        "law": "homology", "inputs": certified_inputs(inputs, ["mesh"] * len(inputs)), "counts": list(map(int, counts)),
        "boundaries": [[_flat(column) for column in matrix] for matrix in boundaries], "homology": degrees,
    })  # fmt: skip


def refuse_many_cells(counts: Sequence[int]) -> None:
    """Nothing, or InputError where a complex has more cells than a recheck in plain Python can be asked to take."""
    if sum(counts) > MOST_CELLS:
        message = (
            f"a homology is certified up to {MOST_CELLS:,} cells, as its recheck eliminates in plain Python, "
            f"got {sum(counts):,}; certify a coarser or a reduced complex"
        )
        raise InputError(message)


def _flat(chain: Chain) -> list[int]:
    """Return a chain as cell, coefficient, cell, coefficient, and so on; cells with coefficient 0 are left out."""
    return [int(number) for pair in chain if pair[1] for number in pair]
