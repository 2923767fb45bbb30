"""The certificate of a complex's homology, for a recheck by other means."""

from collections.abc import Sequence
from itertools import pairwise
from typing import Any

import numpy as np
from scipy.sparse import csr_array

from dec.calculus.certificates import Chain, homology_certificate, refuse_many_cells
from dec.calculus.complex import Complex
from dec.calculus.dataset import Input
from dec.calculus.homology_groups import boundary_cells

__all__ = ["certified_homology"]


def certified_homology(complex: Complex, *, relative: bool = False, inputs: Sequence[Input] = ()) -> bytes:
    """Ranks, torsion and cycles of every degree with all boundary matrices, as the bytes of a JSON file.

    Parameters
    ----------
    complex : Complex
        Of at most 20,000 cells.
    relative : bool
        Of the complex relative to its boundary; cells are then numbered without those of the boundary.
    inputs : sequence of Input
        The files it was read from; the recheck compares their SHA-256 alone.

    Returns
    -------
    bytes
        `dec.verify` rechecks them.

    Raises
    ------
    InputError
        If there are more cells.
    TopologyError
        As `Complex.homology`.

    Examples
    --------
    >>> import json
    >>> K = Complex.from_faces([[0, 1, 2], [0, 2, 3]])
    >>> [group["rank"] for group in json.loads(certified_homology(K, relative=True))["homology"]]
    [0, 0, 1]
    """
    matrices = [csr_array(complex.coboundary(k)) for k in range(complex.dim)]
    inside = [np.arange(n) for n in complex.counts]
    if relative:
        inside = [np.flatnonzero(~of_degree) for of_degree in boundary_cells(complex)]
        matrices = [csr_array(matrix[inside[k + 1]][:, inside[k]]) for k, matrix in enumerate(matrices)]
    counts = [len(cells) for cells in inside]
    refuse_many_cells(counts)
    found: list[dict[str, Any]] = []
    for k in range(complex.dim + 1):
        group = complex.homology(k, relative=relative)
        cycles = csr_array(group.cycles)[:, inside[k]]
        found.append({"rank": group.rank, "torsion": group.torsion, "cycles": _rows(csr_array(cycles))})
    return homology_certificate(counts, [_rows(matrix) for matrix in matrices], found, inputs)


def _rows(matrix: csr_array) -> list[Chain]:
    """Return each row as pairs of a column and its number."""
    ends = matrix.indptr.tolist()
    pairs = list(zip(matrix.indices.tolist(), matrix.data.tolist(), strict=True))
    return [pairs[start:end] for start, end in pairwise(ends)]
