"""bracket.stl and bracket.vtu: an L-shaped mounting bracket with two through holes. Lengths in millimetres.

Drawn and meshed once with the OpenCASCADE kernel in the gmsh wheel (4.15.2), which only this script needs:
python -m venv cad; cad/bin/pip install gmsh==4.15.2 meshio

Run: cad/bin/python meshes/make/bracket.py OUTDIR
"""

import gmsh
import numpy as np
from writing import output_folder, write_stl, write_vtu

LENGTH, WIDTH, HEIGHT, SHEET = 60.0, 40.0, 50.0, 6.0  # mm: foot along x, width along y, upright along z, thickness
INNER_FILLET, CORNER_FILLET, HOLE_RADIUS = 8.0, 6.0, 4.5  # mm
FOOT_HOLE, UPRIGHT_HOLE = (39.0, 20.0), (20.0, 32.0)  # mm: (x, y) of the one along z, (y, z) of the one along x
EDGE_LENGTH, EDGES_PER_TURN = 4.5, 12  # mm; edges of the mesh round a full circle
STREAM = np.array([8.0, 0.0, 1.0])  # m/s
TURNING = np.array([0.0, 40.0, 0.0])  # rad/s
CENTRE = np.array([30.0, 20.0, 25.0])  # mm


def draw():
    """Tag of the solid, drawn in the open model: two plates, five rounded edges, two holes.

    Returns
    -------
    int
        Tag of the volume.
    """
    occ = gmsh.model.occ
    foot = occ.addBox(0, 0, 0, LENGTH, WIDTH, SHEET)
    upright = occ.addBox(0, 0, 0, SHEET, WIDTH, HEIGHT)
    ((_, body),), _ = occ.fuse([(3, foot)], [(3, upright)])
    occ.synchronize()
    edges = [((SHEET, 0, SHEET), (SHEET, WIDTH, SHEET))]
    edges += [((LENGTH, y, 0), (LENGTH, y, SHEET)) for y in (0, WIDTH)]
    edges += [((0, y, HEIGHT), (SHEET, y, HEIGHT)) for y in (0, WIDTH)]
    tags = [_edge(low, high) for low, high in edges]
    ((_, body),) = occ.fillet([body], tags, [INNER_FILLET] + [CORNER_FILLET] * 4)
    drills = [
        (3, occ.addCylinder(*FOOT_HOLE, -1, 0, 0, SHEET + 2, HOLE_RADIUS)),
        (3, occ.addCylinder(-1, *UPRIGHT_HOLE, SHEET + 2, 0, 0, HOLE_RADIUS)),
    ]
    ((_, body),), _ = occ.cut([(3, body)], drills)
    occ.synchronize()
    return body


def skin(body):
    """Points, outward triangles and the number of the CAD face each triangle lies on.

    Parameters
    ----------
    body : int
        Tag of the volume.

    Returns
    -------
    points : float64 array, shape (n0, 3)
        Millimetres, rounded to nanometres and then to 32-bit floats so that STL and VTU hold the same numbers.
    triangles : int64 array, shape (n2, 3)
        Corners, counter-clockwise seen from outside.
    faces : int32 array, shape (n2,)
        Number of the CAD face, from 1.
    """
    for name, value in {
        "Mesh.Algorithm": 6,
        "Mesh.MeshSizeMax": EDGE_LENGTH,
        "Mesh.MeshSizeFromCurvature": EDGES_PER_TURN,
        "Mesh.RandomSeed": 1,
        "General.NumThreads": 1,
    }.items():
        gmsh.option.setNumber(name, value)
    gmsh.model.mesh.generate(2)
    gmsh.model.mesh.setOutwardOrientation(body)
    tags, coordinates, _ = gmsh.model.mesh.getNodes()
    order = np.argsort(tags)
    points = np.round(coordinates.reshape(-1, 3)[order], 6).astype(np.float32).astype(np.float64) + 0.0
    blocks, faces = [], []
    for number, (_, face) in enumerate(sorted(gmsh.model.getEntities(2)), start=1):
        corners = gmsh.model.mesh.getElementsByType(2, face)[1].reshape(-1, 3)
        blocks.append(np.searchsorted(tags[order], corners))
        faces.append(np.full(len(corners), number, dtype=np.int32))
        print(f"face {number}: {gmsh.model.getType(2, face)}, {len(corners)} triangles, {_box(2, face)}")
    return points, np.concatenate(blocks), np.concatenate(faces)


def air(points):
    """Velocity of the undisturbed stream: constant plus a rigid rotation, as if the part were not there.

    Parameters
    ----------
    points : float64 array, shape (n, 3)
        Positions, millimetres.

    Returns
    -------
    float64 array, shape (n, 3)
        Metres per second.
    """
    return STREAM + np.cross(TURNING, (points - CENTRE) / 1000) + 0.0  # no negative zeros


def _edge(low, high):
    """Tag of the one edge with these ends."""
    near = 1e-3
    box = [value - near for value in low] + [value + near for value in high]
    ((_, tag),) = gmsh.model.getEntitiesInBoundingBox(*box, dim=1)
    return tag


def _box(dimension, tag):
    """Bounding box as text, to tenths."""
    box = np.round(gmsh.model.getBoundingBox(dimension, tag), 1) + 0.0
    return f"from {box[:3].tolist()} to {box[3:].tolist()}"


def main():
    """Write bracket.stl and bracket.vtu."""
    folder = output_folder("make bracket.stl and bracket.vtu")
    gmsh.initialize()
    try:
        gmsh.option.setNumber("General.Terminal", 0)
        points, triangles, faces = skin(draw())
    finally:
        gmsh.finalize()
    write_stl(folder / "bracket.stl", points, triangles, header="mounting bracket, mm. BSD-3-Clause, the dec authors")
    write_vtu(
        folder / "bracket.vtu",
        points,
        ("triangle", triangles),
        point_data={"air": air(points)},
        cell_data={"part": faces},
    )


if __name__ == "__main__":
    main()
