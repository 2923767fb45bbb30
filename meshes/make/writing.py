"""Mesh files that hold the mesh and nothing else: no clock, no version of a writer."""

import argparse
import re
from pathlib import Path

import meshio
import numpy as np

__all__ = ["output_folder", "write_obj", "write_off", "write_stl", "write_vtu"]


def output_folder(description):
    """Folder named on the command line, made if it is not there.

    Parameters
    ----------
    description : str
        First line of the help text.

    Returns
    -------
    pathlib.Path
        An existing folder.
    """
    parser = argparse.ArgumentParser(description=description)
    parser.add_argument(
        "outdir", type=Path, metavar="OUTDIR", help="folder to write into; files of the same name are replaced"
    )
    folder = parser.parse_args().outdir
    folder.mkdir(parents=True, exist_ok=True)
    return folder


def write_vtu(path, points, cells, *, point_data=None, cell_data=None):
    """Write an unstructured grid as XML with uncompressed base64 arrays.

    Uncompressed, because two builds of a compression library may give two files. Connectivity is 32 bit.

    Parameters
    ----------
    path : pathlib.Path
        File to write.
    points : float64 array, shape (n0, 3)
        Coordinates.
    cells : tuple of (str, int array)
        One kind of cell as meshio names it and its corners, shape (n, corners).
    point_data, cell_data : dict of str to array, optional
        Named arrays with one row per point or per cell.
    """
    kind, corners = cells
    mesh = meshio.Mesh(
        points,
        [(kind, corners.astype(np.int32))],
        point_data=point_data or {},
        cell_data={name: [values] for name, values in (cell_data or {}).items()},
    )
    meshio.vtu.write(path, mesh, binary=True, compression=None)
    text, n_comments = re.subn(r"<!--.*?-->\s*", "", path.read_text(encoding="ascii"))
    if n_comments != 1:
        message = f"{path.name}: expected the writer's one comment line, found {n_comments}"
        raise RuntimeError(message)
    path.write_text(text.rstrip() + "\n", encoding="ascii", newline="\n")


def write_stl(path, points, triangles, *, header):
    """Write a binary STL: little-endian 32-bit floats, each triangle with its own three corners.

    Parameters
    ----------
    path : pathlib.Path
        File to write.
    points : float array, shape (n0, 3)
        Coordinates; they are rounded to 32 bits.
    triangles : int array, shape (n2, 3)
        Corners, counter-clockwise seen from outside.
    header : str
        Up to 80 ASCII characters; must not begin with "solid", which marks the text form.
    """
    corners = points[triangles]
    normals = np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0])
    record = np.dtype([("normal", "<f4", 3), ("corners", "<f4", (3, 3)), ("attribute", "<u2")])
    facets = np.zeros(len(triangles), dtype=record)
    facets["normal"] = normals / np.linalg.norm(normals, axis=1, keepdims=True) + 0.0  # no negative zeros
    facets["corners"] = corners
    count = np.array(len(triangles), dtype="<u4")
    path.write_bytes(header.encode("ascii").ljust(80) + count.tobytes() + facets.tobytes())


def write_off(path, points, triangles, *, n_edges, comment):
    """Write an OFF text file, coordinates to nine decimals.

    Parameters
    ----------
    path : pathlib.Path
        File to write.
    points : float array, shape (n0, 3)
        Coordinates.
    triangles : int array, shape (n2, 3)
        Corners, counted from 0.
    n_edges : int
        Number of edges, which the format wants on its second line.
    comment : str
        One line of text.
    """
    lines = ["OFF", f"# {comment}", f"{len(points)} {len(triangles)} {n_edges}"]
    lines += [_coordinates(point) for point in points]
    lines += ["3 " + " ".join(map(str, triangle)) for triangle in triangles.tolist()]
    path.write_text("\n".join(lines) + "\n", encoding="ascii", newline="\n")


def write_obj(path, points, faces, *, comment):
    """Write an OBJ text file, coordinates to nine decimals.

    Parameters
    ----------
    path : pathlib.Path
        File to write.
    points : float array, shape (n0, 3)
        Coordinates.
    faces : int array, shape (n2, corners)
        Corners, counted from 0 here and from 1 in the file.
    comment : str
        One line of text.
    """
    lines = [f"# {comment}"]
    lines += ["v " + _coordinates(point) for point in points]
    lines += ["f " + " ".join(map(str, face)) for face in (faces + 1).tolist()]
    path.write_text("\n".join(lines) + "\n", encoding="ascii", newline="\n")


def _coordinates(point):
    """Coordinates with nine decimals, zero without a sign."""
    return " ".join(f"{value:.9f}" for value in np.round(point, 9) + 0.0)
