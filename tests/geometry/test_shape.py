"""Facts about a mesh that need coordinates: one planted fault a finding."""

import numpy as np
import pytest

from dec.calculus.complex import Complex, grid
from dec.errors import InputError
from dec.geometry.shape import check_shape, shell_volumes

from .shapes import delaunay, hexahedra, icosahedron, joined, sample


def failing(K):
    return {f.name: (f.measured, f.where) for f in check_shape(K) if not f.holds}


def shells(*scales, inside_out=()):
    """Icosahedra of different size about one centre; those named are turned inside out."""
    base = icosahedron()
    faces, points = base.faces.flat.reshape(-1, 3), []
    blocks = []
    for i, scale in enumerate(scales):
        blocks.append((faces[:, ::-1] if i in inside_out else faces) + 12 * i)
        points.append(base.points * scale)
    return Complex.from_faces(np.concatenate(blocks), points=np.concatenate(points))


def test_sound_samples_have_nothing_against_them():
    names = ("annulus.vtu", "wing.vtu", "torus.off", "moebius.obj", "elbow.vtu")
    made = (joined("bracket.stl"), icosahedron(), delaunay(0, 20, 3), hexahedra(jitter=0.1))
    for K in (*(sample(name)[0] for name in names), *made):
        assert failing(K) == {}


def test_grids_have_nothing_against_them_whatever_closes():
    for closes in (False, True):
        for shape in ((5,), (3, 4), (3, 4, 2)):
            assert failing(grid(shape, spacing=0.1, periodic=closes)) == {}


def test_every_finding_is_named_for_what_holds():
    names = [f.name for f in check_shape(icosahedron())]
    assert names == [
        "no two vertices lie at one place", "no edge has zero length", "no face has zero area",
        "closed surfaces are turned outward",
    ]  # fmt: skip
    assert [f.name for f in check_shape(delaunay(0, 12, 3))][-1] == "every cell has positive volume"
    assert len(check_shape(grid(4))) == 2


def test_vertices_at_one_place_are_named_after_the_lowest():
    points = [[0, 0], [1, 0], [0, 1], [-0.0, 0], [1, 0], [0, 0]]
    K = Complex.from_edges([0, 1], [1, 2], points=points, vertex_ids=list("ABCDEF"))
    assert failing(K) == {"no two vertices lie at one place": (3, ("D", "E", "F"))}


def test_an_edge_of_zero_length_is_named_by_its_ends():
    K = Complex.from_edges([0, 1], [1, 2], points=[[0, 0], [1, 0], [1, 0]])
    assert failing(K)["no edge has zero length"] == (1, ((1, 2),))


@pytest.mark.parametrize("points", [
    [[0, 0], [1, 0], [3, 0]],
    [[0.1, 0.3], [0.2, 0.6], [0.3, 0.9]],
    [[1e6 + 0.5, 0], [1e6 + 0.75, 0], [1e6, 0]],
    [[0, 0, 0], [0.1, 0.2, 0.3], [0.3, 0.6, 0.9]],
])  # fmt: skip
def test_corners_on_a_line_make_no_area(points):
    assert failing(Complex.from_faces([[0, 1, 2]], points=points)) == {"no face has zero area": (1, (0,))}


def test_a_thin_face_has_an_area_all_the_same():
    assert failing(Complex.from_faces([[0, 1, 2]], points=[[0, 0], [1, 0], [0.3, 1e-14]])) == {}
    assert failing(Complex.from_faces([[0, 1, 2]], points=np.array([[0, 0], [1, 0], [0.3, 1]]) * 1e-60)) == {}


def test_a_solid_turned_inside_out_is_named_cell_by_cell():
    K = delaunay(0, 12, 3)
    cells = K.solids["tetra"].copy()
    cells[[2, 5]] = cells[[2, 5]][:, [1, 0, 2, 3]]
    flat = np.concatenate([cells, [[0, 1, 2, 12]]])
    points = np.concatenate([K.points, [K.points[[0, 1, 2]].mean(axis=0)]])
    found = failing(Complex.from_cells({"tetra": flat}, points=points))
    assert found == {"every cell has positive volume": (3, (2, 5, len(cells)))}


def test_a_closed_surface_turned_inside_out_is_named_by_its_lowest_face():
    assert failing(shells(1, inside_out=[0])) == {"closed surfaces are turned outward": (1, (0,))}
    apart = shells(1, 1, inside_out=[1])
    apart = Complex.from_faces(
        apart.faces.flat.reshape(-1, 3), points=apart.points + np.repeat([[0, 0, 0], [5, 0, 0]], 12, axis=0)
    )
    assert failing(apart) == {"closed surfaces are turned outward": (1, (20,))}


def test_a_cavity_may_be_turned_inward():
    assert failing(shells(2, 1, inside_out=[1])) == {}
    assert failing(shells(1, 2, inside_out=[0])) == {}
    assert failing(shells(4, 3, 2, 1, inside_out=[1, 3])) == {}


def test_an_outer_shell_may_not_be_turned_inward_even_with_something_inside():
    assert failing(shells(2, 1, inside_out=[0, 1])) == {"closed surfaces are turned outward": (2, (0, 20))}
    assert failing(shells(2, 1, inside_out=[0])) == {"closed surfaces are turned outward": (1, (0,))}


def test_a_neighbour_whose_box_reaches_round_is_not_a_body_around_it():
    # a bent tube: its bounding box holds the small body, its inside does not
    torus = sample("torus.off")[0]
    small = icosahedron()
    size = np.abs(torus.points).max()
    points = np.concatenate([torus.points, small.points * 0.01 * size + torus.points.mean(axis=0)])
    faces = np.concatenate(
        [torus.faces.flat.reshape(-1, 3), small.faces.flat.reshape(-1, 3)[:, ::-1] + torus.counts[0]]
    )
    assert failing(Complex.from_faces(faces, points=points)) == {"closed surfaces are turned outward": (1, (576,))}


def test_open_surfaces_and_faces_not_turned_alike_have_no_volume():
    K = shells(1, 3)
    faces = K.faces.flat.reshape(-1, 3).copy()
    faces[0] = faces[0, ::-1]
    faces = np.delete(faces, 39, axis=0)
    mixed = Complex.from_faces(faces, points=K.points)
    assert np.isnan(shell_volumes(mixed)[0]).all()
    assert failing(mixed) == {}


def test_shell_volumes_are_the_known_ones_far_from_the_origin_too():
    # a regular icosahedron of circumradius 1: volume (5 (3 + sqrt 5) / 12) a^3 with a = 1 / sin(72 degrees)
    expected = 5 * (3 + 5**0.5) / 12 / np.sin(np.deg2rad(72)) ** 3
    volumes, doubt = shell_volumes(shells(1, 2, inside_out=[1]))
    np.testing.assert_allclose(volumes, [expected, -8 * expected], rtol=1e-14)
    assert (doubt < 1e-12).all()
    far = shells(1)
    far = Complex.from_faces(far.faces.flat.reshape(-1, 3), points=far.points + 1e6)
    assert shell_volumes(far)[0][0] == pytest.approx(expected, rel=1e-8)


def test_polygons_enclose_volume_too():
    cube = hexahedra((1, 1, 1), spacing=(1, 2, 3))
    signs = cube.coboundary(2).toarray()[0]
    loops = [cube.faces.row(f)[::s] for f, s in enumerate(signs)]
    K = Complex.from_faces([*loops[:-1], loops[-1][[0, 1, 2]], loops[-1][[0, 2, 3]]], points=cube.points)
    assert K.faces.width is None
    assert shell_volumes(K)[0].tolist() == pytest.approx([6])
    assert failing(K) == {}


def test_a_shape_without_points_is_refused():
    with pytest.raises(InputError, match="this complex has none"):
        check_shape(Complex.from_faces([[0, 1, 2]]))
