"""Shapes for the demo's parts: solids by manifold3d, smooth enough to look at, light enough to ship.

Needed only to make the demo's meshes again (``make_demo.py``); the program itself never imports this.
"""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import Any, TypeAlias

import numpy as np
from manifold3d import CrossSection, Manifold
from numpy.typing import ArrayLike, NDArray

Array: TypeAlias = NDArray[np.float64]

#: Sides of round things of middling size.
SEGMENTS = 28
#: Detail finer than this, mm, is melted away before a part is written.
SIMPLER_MM = 0.02


def frame_along(direction: ArrayLike, up: ArrayLike = (0.0, 0.0, 1.0)) -> Array:
    """(3, 3) rotation that turns z into a direction, x kept as near as may be to across ``up``."""
    z = np.asarray(direction, dtype=float)
    z = z / np.linalg.norm(z)
    x = np.cross(np.asarray(up, dtype=float), z)
    if np.linalg.norm(x) < 1e-6:
        x = np.cross([1.0, 0.0, 0.0], z)
    x /= np.linalg.norm(x)
    return np.column_stack((x, np.cross(z, x), z))


def placed(solid: Manifold, at: ArrayLike, direction: ArrayLike, up: ArrayLike = (0.0, 0.0, 1.0)) -> Manifold:
    """Turn a solid's z axis along a direction and move its origin to a point."""
    matrix = np.column_stack((frame_along(direction, up), np.asarray(at, dtype=float)))
    return solid.transform(matrix)


def drum(at: ArrayLike, direction: ArrayLike, radius: float, length: float, segments: int = SEGMENTS) -> Manifold:
    """A cylinder centred at a point."""
    return placed(Manifold.cylinder(length, radius, radius, segments, True), at, direction)


def bar(a: ArrayLike, b: ArrayLike, radius: float, segments: int = SEGMENTS) -> Manifold:
    """A round bar from a to b."""
    start, end = np.asarray(a, dtype=float), np.asarray(b, dtype=float)
    return drum((start + end) / 2.0, end - start, radius, float(np.linalg.norm(end - start)), segments)


def globe(at: ArrayLike, radius: float, segments: int = SEGMENTS) -> Manifold:
    """A ball."""
    return Manifold.sphere(radius, segments).translate(tuple(np.asarray(at, dtype=float)))


def block(at: ArrayLike, size: ArrayLike, direction: ArrayLike = (0.0, 0.0, 1.0)) -> Manifold:
    """A box centred at a point, its z along a direction."""
    return placed(Manifold.cube(tuple(np.asarray(size, dtype=float)), True), at, direction)


def skin(*solids: Manifold) -> Manifold:
    """The convex hull of some solids: a web between bosses."""
    return Manifold.batch_hull(list(solids))


def turned(profile: Sequence[tuple[float, float]], at: ArrayLike, axis: ArrayLike, segments: int) -> Manifold:
    """Turn a closed outline of (distance along the axis, radius) about an axis through a point."""
    outline = [(radius, along) for along, radius in profile]
    around_it = zip(outline, outline[1:] + outline[:1], strict=True)
    if sum(a[0] * b[1] - b[0] * a[1] for a, b in around_it) < 0.0:
        outline.reverse()
    return placed(Manifold.revolve(CrossSection([outline]), segments), at, axis)


def around(centre: Array, axis: Array, radius: float, angle_deg: float, along: float = 0.0) -> Array:
    """A point at a radius and an angle about an axis (0° towards +z, turning towards +x), moved along it."""
    up = np.array([0.0, 0.0, 1.0]) - axis * axis[2]
    up /= np.linalg.norm(up)
    ahead = np.cross(axis, up)
    ahead *= np.sign(ahead[0])
    angle = np.radians(angle_deg)
    return centre + axis * along + radius * (np.cos(angle) * up + np.sin(angle) * ahead)


def write_stl(solid: Manifold, path: Path) -> int:
    """Write a binary STL, mm, triangles in a fixed order; returns their number."""
    mesh: Any = solid.simplify(SIMPLER_MM).to_mesh()
    corners = np.asarray(mesh.vert_properties, dtype=np.float32)[:, :3][np.asarray(mesh.tri_verts)]
    # each triangle begins at its least corner, and they stand in order: the same solid gives the same bytes
    keys = np.round(corners.astype(float), 3)
    first = np.array([min(range(3), key=lambda k, t=triangle: tuple(t[k])) for triangle in keys])
    turned_corners = np.stack([np.roll(t, -f, axis=0) for t, f in zip(corners, first, strict=True)])
    order = np.lexsort(np.round(turned_corners.astype(float), 3).reshape(len(corners), 9).T[::-1])
    corners = turned_corners[order]
    edge = corners[:, 1] - corners[:, 0]
    normal = np.cross(edge, corners[:, 2] - corners[:, 0])
    length = np.linalg.norm(normal, axis=1, keepdims=True)
    record = np.zeros(len(corners), dtype=[("normal", "<f4", 3), ("corners", "<f4", (3, 3)), ("spare", "<u2")])
    record["normal"] = normal / np.where(length > 0.0, length, 1.0)
    record["corners"] = corners
    header = b"knucklepath demo part, invented, mm".ljust(80, b" ")
    path.write_bytes(header + np.uint32(len(corners)).tobytes() + record.tobytes())
    return len(corners)
