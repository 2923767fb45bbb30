"""Named groups become regions: none is lost because of its name."""

import numpy as np
import pytest

from dec.calculus.complex import Complex
from dec.errors import InputError
from dec.files.parts import Group, MeshParts, ragged_of
from dec.files.regions import regions_of

FACES = np.array([[0, 1, 2], [2, 1, 3], [2, 3, 4]])
EDGES = np.array([[0, 1], [3, 1]])
PARTS = MeshParts(np.zeros((5, 3)), np.array([5, 5, 5, 3, 3]), ragged_of([FACES, EDGES]))


def regions(*groups: Group) -> dict[str, tuple[int, list[int]]]:
    parts = MeshParts(PARTS.points, PARTS.kinds, PARTS.nodes, groups=groups)
    found = regions_of(Complex.from_faces(FACES, 5), parts, np.arange(3), "t.msh")
    return {name: (region.degree, region.cells.tolist()) for name, region in found.items()}


def test_groups_of_one_name_and_dimension_are_one_region():
    one, two = Group("wall", 2, np.array([2])), Group("wall", 2, np.array([0, 2]))
    assert regions(one, two) == {"wall": (2, [0, 2])}


def test_groups_of_one_name_and_several_dimensions_get_the_dimension_added():
    K = Complex.from_faces(FACES, 5)
    edges = [next(e for e in range(K.counts[1]) if {K.tail[e], K.head[e]} == set(row)) for row in EDGES.tolist()]
    one, two = Group("wall", 2, np.array([1])), Group("wall", 1, np.array([3, 4]))
    assert regions(one, two) == {"wall (faces)": (2, [1]), "wall (edges)": (1, sorted(edges))}


def test_a_name_that_is_another_with_its_dimension_is_refused():
    groups = Group("wall", 2, np.array([1])), Group("wall", 1, np.array([3])), Group("wall (edges)", 2, np.array([0]))
    with pytest.raises(InputError, match=r"the name 'wall \(edges\)' stands for edges and for faces; rename one group"):
        regions(*groups)


def test_a_group_of_cells_that_are_none_of_the_mesh_is_refused_and_not_dropped():
    parts = MeshParts(PARTS.points, PARTS.kinds, ragged_of([FACES, np.array([[0, 4], [3, 1]])]))
    group = Group("inlet", 1, np.array([3, 4]))
    lost = MeshParts(parts.points, parts.kinds, parts.nodes, groups=(group,))
    with pytest.raises(InputError, match="group 'inlet' holds 2 edges, 1 of them are no edges"):
        regions_of(Complex.from_faces(FACES, 5), lost, np.arange(3), "t.msh")
