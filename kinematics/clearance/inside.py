"""Whether one mesh lies wholly inside another: the winding number at one point of each of its pieces."""

from __future__ import annotations

from typing import TypeAlias

import numpy as np
from numpy.typing import NDArray

Array: TypeAlias = NDArray[np.float64]
Faces: TypeAlias = NDArray[np.int32]

#: Vertices nearer than this, mm, are one vertex when edges are matched.
SAME_VERTEX = 1e-6


def winding_number(point: Array, vertices: Array, faces: Faces) -> float:
    """How often a closed mesh winds about a point (3,): 1 inside, 0 outside.

    A. van Oosterom and J. Strackee, "The solid angle of a plane triangle", IEEE Trans. Biomed. Eng. 30 (1983)
    (citation from memory).
    """
    a, b, c = (vertices[faces[:, k]] - point for k in range(3))
    la, lb, lc = (np.linalg.norm(corner, axis=1) for corner in (a, b, c))
    triple = np.einsum("ij,ij->i", a, np.cross(b, c))
    dots = (
        la * lb * lc
        + np.einsum("ij,ij->i", a, b) * lc
        + np.einsum("ij,ij->i", b, c) * la
        + np.einsum("ij,ij->i", c, a) * lb
    )
    return float(np.arctan2(triple, dots).sum() / (2.0 * np.pi))


def without_repeats(vertices: Array, faces: Faces) -> Faces:
    """The triangles (k, 3) of a mesh, each once: one that is listed again with the same winding adds nothing."""
    corners = _merged(vertices)[faces]
    first = corners.argmin(axis=1)[:, None]
    turned = np.take_along_axis(corners, (first + np.arange(3)) % 3, axis=1)
    _, kept = np.unique(turned, axis=0, return_index=True)
    return np.ascontiguousarray(faces[np.sort(kept)])


def _merged(vertices: Array) -> NDArray[np.int64]:
    """For every vertex the number of the place that it lies at."""
    _, same = np.unique(np.round(vertices / SAME_VERTEX).astype(np.int64), axis=0, return_inverse=True)
    return same.reshape(-1).astype(np.int64)


def is_closed(vertices: Array, faces: Faces) -> bool:
    """True when every edge is shared by two triangles that run along it in opposite directions."""
    corners = _merged(vertices)[faces]
    edges = np.concatenate([corners[:, [0, 1]], corners[:, [1, 2]], corners[:, [2, 0]]])
    edges = edges[edges[:, 0] != edges[:, 1]]
    base = np.int64(len(vertices) + 1)
    there, back = edges[:, 0] * base + edges[:, 1], edges[:, 1] * base + edges[:, 0]
    return bool(np.array_equal(np.sort(there), np.sort(back)))


def one_vertex_of_each_piece(vertices: Array, faces: Faces) -> Array:
    """One vertex (k, 3) of every connected piece of a mesh."""
    corners = _merged(vertices)[faces]
    label = np.arange(int(corners.max()) + 1)
    while True:
        least = label[corners].min(axis=1)
        new = label.copy()
        for k in range(3):
            np.minimum.at(new, corners[:, k], least)
        new = new[new]
        if np.array_equal(new, label):
            break
        label = new
    _, first = np.unique(label[corners[:, 0]], return_index=True)
    return np.asarray(vertices[faces[first, 0]])


def wholly_inside(vertices: Array, faces: Faces, outer_vertices: Array, outer_faces: Faces) -> bool:
    """True when a piece of the first mesh lies inside the second, closed one; their surfaces must not meet."""
    return any_inside(one_vertex_of_each_piece(vertices, faces), outer_vertices, outer_faces)


def any_inside(points: Array, vertices: Array, faces: Faces) -> bool:
    """True when any of some points (k, 3) lies inside a closed mesh, whichever way it is wound."""
    near = points[((points >= vertices.min(axis=0)) & (points <= vertices.max(axis=0))).all(axis=1)]
    return any(abs(winding_number(point, vertices, faces)) > 0.5 for point in near)
