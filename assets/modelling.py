"""Solids for the demo's parts, by manifold3d: round bars, webs, turned bodies, forks with their bolts; and the writer.

Needed only to make the demo's meshes again (``make_demo.py``); the program itself never imports this.
"""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import Any, TypeAlias

import numpy as np
from manifold3d import CrossSection, Manifold, OpType
from numpy.typing import ArrayLike, NDArray

Array: TypeAlias = NDArray[np.float64]

UP = np.array([0.0, 0.0, 1.0])
#: Sides of round things of middling size.
SEGMENTS = 20
#: Detail finer than this, mm, is melted away before a part is written.
SIMPLER_MM = 0.05
#: Play between a joint's ball and its race, mm: enough that the meshes never meet.
PLAY_MM = 0.6
#: Width across flats, mm, from which a hexagon's broken corners are worth their triangles.
BROKEN_CORNERS_FROM = 25.0


def unit(vector: ArrayLike) -> Array:
    """A vector (3,) made one long."""
    along = np.asarray(vector, dtype=float)
    return along / np.linalg.norm(along)


def frame_along(direction: ArrayLike, up: ArrayLike = UP) -> Array:
    """(3, 3) rotation that turns z into a direction, its y kept as near as may be to ``up``."""
    z = unit(direction)
    x = np.cross(np.asarray(up, dtype=float), z)
    if np.linalg.norm(x) < 1e-6:
        x = np.cross([0.0, 1.0, 0.0], z)
    x = unit(x)
    return np.column_stack((x, np.cross(z, x), z))


def placed(solid: Manifold, at: ArrayLike, direction: ArrayLike, up: ArrayLike = UP) -> Manifold:
    """Turn a solid's z axis along a direction and move its origin to a point."""
    return solid.transform(np.column_stack((frame_along(direction, up), np.asarray(at, dtype=float))))


def drum(at: ArrayLike, direction: ArrayLike, radius: float, length: float, segments: int = SEGMENTS) -> Manifold:
    """A cylinder centred at a point."""
    return placed(Manifold.cylinder(length, radius, radius, segments, True), at, direction)


def bar(
    a: ArrayLike, b: ArrayLike, radius: float, end_radius: float | None = None, segments: int = SEGMENTS
) -> Manifold:
    """A round bar from a to b, tapered where the end has a radius of its own."""
    start, end = np.asarray(a, dtype=float), np.asarray(b, dtype=float)
    length = float(np.linalg.norm(end - start))
    solid = Manifold.cylinder(length, radius, radius if end_radius is None else end_radius, segments)
    return placed(solid, start, end - start)


def globe(at: ArrayLike, radius: float, segments: int = 20) -> Manifold:
    """A ball."""
    return Manifold.sphere(radius, segments).translate(tuple(np.asarray(at, dtype=float)))


def block(at: ArrayLike, size: ArrayLike, direction: ArrayLike = UP, up: ArrayLike = UP) -> Manifold:
    """A box centred at a point, its z along a direction."""
    return placed(Manifold.cube(tuple(np.asarray(size, dtype=float)), True), at, direction, up)


def bevelled(
    at: ArrayLike, direction: ArrayLike, radius: float, length: float, bevel: float = 1.2, segments: int = SEGMENTS
) -> Manifold:
    """A cylinder with both edges broken."""
    half = length / 2.0
    outline = [(-half, 0.0), (-half, radius - bevel), (-half + bevel, radius)]
    outline += [(half - bevel, radius), (half, radius - bevel), (half, 0.0)]
    return turned(outline, at, direction, segments)


def hexagon(at: ArrayLike, direction: ArrayLike, across: float, length: float) -> Manifold:
    """A hexagon head or nut by its width across flats; a large one has its corners broken."""
    corner = across / np.sqrt(3.0)
    if across < BROKEN_CORNERS_FROM:
        return drum(at, direction, corner, length, 6)
    return drum(at, direction, corner, length, 6) ^ bevelled(at, direction, 0.985 * corner, length, 0.14 * corner, 24)


def skin(*solids: Manifold) -> Manifold:
    """The convex hull of some solids: a web between bosses."""
    return Manifold.batch_hull(list(solids))


def together(solids: Sequence[Manifold]) -> Manifold:
    """The union of many solids."""
    return Manifold.batch_boolean(list(solids), OpType.Add)


def turned(profile: Sequence[tuple[float, float]], at: ArrayLike, axis: ArrayLike, segments: int) -> Manifold:
    """Turn a closed outline of (distance along the axis, radius) about an axis through a point."""
    outline = [(radius, along) for along, radius in profile]
    around_it = zip(outline, outline[1:] + outline[:1], strict=True)
    if sum(a[0] * b[1] - b[0] * a[1] for a, b in around_it) < 0.0:
        outline.reverse()
    return placed(Manifold.revolve(CrossSection([outline]), segments), at, axis)


def arc(
    middle: tuple[float, float], radius: float, start_deg: float, stop_deg: float, steps: int
) -> list[tuple[float, float]]:
    """Points of an arc in a profile's plane: (along, radius), 0° along the axis, turning outward."""
    angles = np.radians(np.linspace(start_deg, stop_deg, steps + 1))
    return [(middle[0] + radius * float(np.cos(a)), middle[1] + radius * float(np.sin(a))) for a in angles]


def joint_bolt(at: ArrayLike, axis: ArrayLike, ball: float, jaw: float, plate: float, bolt: float) -> Manifold:
    """A spherical joint's ball on its bolt: spacer cones out to jaws at ± jaw, plates so thick, head and nut beyond."""
    centre, along = np.asarray(at, dtype=float), unit(axis)
    solid = globe(centre, ball, 16) + drum(centre, along, bolt, 2.0 * (jaw + plate) + 2.0, 8)
    for side in (-1.0, 1.0):
        solid += bar(
            centre + side * 0.75 * ball * along, centre + side * (jaw + 0.2) * along, 0.62 * ball, 1.9 * bolt, 12
        )
        outside = jaw + plate
        solid += drum(centre + side * (outside + 0.7) * along, along, 2.15 * bolt, 1.8, 12)
        solid += hexagon(centre + side * (outside + 1.4 + 0.75 * bolt) * along, along, 3.2 * bolt, 1.6 * bolt)
    return solid + drum(centre - (jaw + plate + 2.6 * bolt) * along, along, 0.95 * bolt, 1.6 * bolt, 8)


def race(at: ArrayLike, axis: ArrayLike, ball: float, radius: float, width: float) -> tuple[Manifold, Manifold]:
    """A spherical joint's housing ring, and what must be cut from all that meets it."""
    ring = bevelled(at, axis, radius, width)
    return ring, globe(at, ball + PLAY_MM) + drum(at, axis, 0.80 * ball, 3.0 * radius, 20)


def around(centre: Array, axis: Array, radius: float, angle_deg: float, along: float = 0.0) -> Array:
    """A point at a radius and an angle about an axis (0° towards +z, turning towards +x), moved along it."""
    up = unit(UP - axis * axis[2])
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
    rank = np.unique(keys.reshape(-1, 3), axis=0, return_inverse=True)[1].reshape(-1, 3)
    first = rank.argmin(axis=1)
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
