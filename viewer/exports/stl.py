"""Meshes as binary STL."""

from __future__ import annotations

import numpy as np

from knucklepath.kinematics.clearance.primitives import Mesh


def binary_stl(mesh: Mesh, title: str = "knucklepath, mm") -> bytes:
    """A mesh as binary STL: an 80-byte header, the count, and 50 bytes a triangle.

    title : what the header says, at most 80 ASCII characters; it must not begin with "solid", as text files do.
    """
    vertices, faces = mesh
    corners = vertices[faces]
    normals = np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0])
    normals /= np.maximum(np.linalg.norm(normals, axis=1, keepdims=True), np.finfo(float).tiny)
    rows = np.zeros(len(faces), dtype=[("normal", "<f4", 3), ("corners", "<f4", (3, 3)), ("attribute", "<u2")])
    rows["normal"], rows["corners"] = normals, corners
    return title.encode("ascii").ljust(80) + len(faces).to_bytes(4, "little") + rows.tobytes()
