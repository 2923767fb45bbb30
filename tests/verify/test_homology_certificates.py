"""Certificates of homology: rechecked by an elimination of their own, refused once a number in them is another."""

import json
import random
from typing import Any

import pytest

from dec.calculus.certificates import homology_certificate, sealed
from dec.calculus.certified_homology import certified_homology
from dec.calculus.complex import Complex, grid
from dec.calculus.dataset import Input
from dec.errors import InputError
from dec.verify import _invariants, _smith, verify

from ..topology.known_spaces import (  # noqa: TID252  # one set of spaces serves three folders
    TORUS,
    heap,
    house_with_two_rooms,
    lens_space,
    pseudo_projective_plane,
    surface_of_genus,
    telescope,
    triangles_of_random_corners,
    wrapped_polygons,
)
from ..topology.slow_smith import smith  # noqa: TID252

SPACES = {
    "torus": (lambda: Complex.from_faces(TORUS), ["Z", "Z^2", "Z"]),
    "projective plane, 3-fold": (lambda: pseudo_projective_plane(3), ["Z", "Z/3", "0"]),
    "projective plane, 4-fold": (lambda: pseudo_projective_plane(4), ["Z", "Z/4", "0"]),
    "two circles wrapped": (lambda: wrapped_polygons([4, 6]), ["Z^2", "Z/2 + Z/12", "0"]),
    "house with two rooms": (house_with_two_rooms, ["Z", "0", "0"]),
    "lens space": (lambda: lens_space(5, 2), ["Z", "Z/5", "0", "Z"]),
    "surface of genus 2": (lambda: surface_of_genus(2), ["Z", "Z^4", "Z"]),
    "grid with a boundary": (lambda: grid((5, 4)), ["Z", "0", "0"]),
}


def groups(report_checked: list[str]) -> list[str]:
    return [text.split(": ")[1] for text in report_checked]


@pytest.mark.parametrize("name", SPACES)
def test_known_spaces_verify(name: str) -> None:
    space, known = SPACES[name]
    complex_ = space()
    assert [str(complex_.homology(k)) for k in range(complex_.dim + 1)] == known
    report = verify(certified_homology(complex_), {})
    assert report.problems == []
    assert len(report.checked) == complex_.dim + 1
    if complex_.dim == 2:
        assert verify(certified_homology(complex_, relative=True), {}).problems == []


@pytest.mark.parametrize("seed", range(12))
def test_random_complexes_verify(seed: int) -> None:
    for complex_ in (heap(12, 8, seed), triangles_of_random_corners(20, 8, seed), telescope(1 + seed % 4, first=True)):
        assert verify(certified_homology(complex_), {}).problems == []


def test_the_elimination_of_the_recheck_agrees_with_the_slow_one() -> None:
    rng = random.Random(5)
    for _ in range(400):
        n, m = rng.randint(1, 6), rng.randint(1, 6)
        rows = [[rng.choice([0, 0, 1, -1, 2, -3, 4, 6]) for _ in range(m)] for _ in range(n)]
        columns = [{i: rows[i][j] for i in range(n) if rows[i][j]} for j in range(m)]
        found, slow = _smith(columns), smith(rows)
        assert len(found) == len(slow)
        assert _invariants(found) == [f for f in slow if f > 1]


def test_a_changed_number_is_refused() -> None:
    rng, refused = random.Random(6), 0
    for name in ("torus", "projective plane, 4-fold", "two circles wrapped", "surface of genus 2"):
        certificate = certified_homology(SPACES[name][0]())
        for _ in range(25):
            entries = json.loads(certificate)
            del entries["seal"], entries["schema"]
            change(entries, rng)
            assert not verify(sealed(entries), {}).holds, name
            refused += 1
    assert refused == 100


def change(entries: dict[str, Any], rng: random.Random) -> None:
    """One number becomes wrong: a coefficient, a cell of a cycle, a rank, a torsion, or a cycle taken twice over."""
    kind = rng.choice(["boundary", "cycle", "twice", "rank", "torsion", "counts", "lost"])
    degree = rng.randrange(len(entries["homology"]))
    cycles = [cycle for group in entries["homology"][1:] for cycle in group["cycles"]]
    if kind == "boundary":
        rng.choice(entries["boundaries"][0])[1] *= 2  # an edge with one end twice over fits no face any more
    elif kind == "cycle" and cycles:
        rng.choice(cycles)[1] += 1
    elif kind == "twice" and cycles:
        cycle = rng.choice(cycles)
        cycle[1::2] = [2 * value for value in cycle[1::2]]
    elif kind == "torsion":
        entries["homology"][degree]["torsion"].append(2)
    elif kind == "counts":
        entries["counts"][degree] += 1
    elif kind == "lost" and cycles:
        next(group for group in entries["homology"][1:] if group["cycles"])["cycles"].pop()
    else:
        entries["homology"][degree]["rank"] += 1


def test_a_cycle_that_is_a_multiple_of_another_is_no_basis() -> None:
    ring = [[(0, -1), (1, 1)], [(1, -1), (2, 1)], [(2, -1), (0, 1)]]
    found = [
        {"rank": 1, "torsion": (), "cycles": [[(0, 1)]]},
        {"rank": 1, "torsion": (), "cycles": [[(0, 2), (1, 2), (2, 2)]]},
    ]
    report = verify(homology_certificate([3, 3], [ring], found), {})
    assert report.problems == ["the cycles of degree 1 are no basis of the free part of its homology"]


def test_mesh_files_are_compared_by_their_hash() -> None:
    data = b"solid"
    given = Input("part.stl", "0" * 64, len(data))
    certificate = certified_homology(Complex.from_faces(TORUS), inputs=[given])
    report = verify(certificate, {"part.stl": data})
    assert report.problems == ["part.stl: its bytes are not those that were certified"]
    assert "part.stl is compared by its SHA-256 alone" in report.not_shown


def test_a_complex_too_large_for_the_recheck_is_refused() -> None:
    with pytest.raises(InputError, match="certified up to 20,000 cells"):
        certified_homology(grid((100, 100)))


def test_twelve_thousand_cells_are_rechecked() -> None:
    report = verify(certified_homology(grid((14, 14, 8), periodic=True)), {})
    assert report.problems == []
    assert [text.split(",")[0] for text in report.checked] == [
        f"degree {k}: rank {r}" for k, r in enumerate((1, 3, 3, 1))
    ]
