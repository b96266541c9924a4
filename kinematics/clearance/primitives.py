"""Closed triangle meshes of simple solids, as plain arrays. Knows no mechanism.

Every function returns ``(vertices (n, 3), faces (m, 3))`` in mm, watertight and wound outward. Round things are
polygons that enclose the true solid: outer faces lie outside it and bores inside it, by at most
``radius · (1/cos(π/segments) − 1)``, about twice that on a ball, which is curved both ways. So a gap between meshes is
never larger than the gap between the solids.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import TypeAlias

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array: TypeAlias = NDArray[np.float64]
Faces: TypeAlias = NDArray[np.int32]
Mesh: TypeAlias = tuple[Array, Faces]

#: Corners of a tyre's round shoulder.
SHOULDER_STEPS = 6
#: A step along the axis below this share of a profile's length is rounding: the face is flat across the axis.
FLAT_SHARE = 1e-9


def axis_frame(direction: ArrayLike) -> Array:
    """(3, 3) rotation whose columns are two directions across a unit direction, and that direction."""
    along = np.asarray(direction, dtype=float)
    along = along / np.linalg.norm(along)
    least = np.eye(3)[int(np.abs(along).argmin())]
    one = np.cross(least, along)
    one /= np.linalg.norm(one)
    return np.column_stack((one, np.cross(along, one), along))


def lathe(
    start: ArrayLike,
    direction: ArrayLike,
    profile: Sequence[tuple[float, float]] | Array,
    segments: int = 24,
    *,
    ring: bool = False,
) -> Mesh:
    """Turn a profile about an axis.

    Parameters
    ----------
    start, direction : (3,) a point of the axis, mm, and its direction.
    profile : (p, 2) distance along the axis and radius, mm. An open profile begins and ends at radius 0; a
        ``ring`` is a closed one that nowhere touches the axis.
    segments : number of sides. They lie outside the round solid: faces that look away from the axis have polygons
        about their circles, faces that look towards it (bores) polygons within theirs.
    """
    outline = np.asarray(profile, dtype=float)
    angles = np.arange(segments) * (2.0 * np.pi / segments)
    frame = axis_frame(direction)
    circle = np.cos(angles)[:, None] * frame[:, 0] + np.sin(angles)[:, None] * frame[:, 1]
    origin = np.asarray(start, dtype=float)
    inner = _enclosing(outline, segments, ring)
    vertices = (origin + inner[:, None, :1] * frame[:, 2] + inner[:, None, 1:] * circle[None]).reshape(-1, 3)
    rows = len(inner)
    here = np.arange(rows if ring else rows - 1)[:, None] * segments
    after = (np.arange(1, rows + 1) % rows if ring else np.arange(1, rows))[:, None] * segments
    around = np.arange(segments)[None]
    beside = (around + 1) % segments
    quads = np.stack((here + around, here + beside, after + beside, after + around), axis=-1).reshape(-1, 4)
    faces = [quads[:, [0, 1, 2]], quads[:, [0, 2, 3]]]
    if not ring:
        poles = origin + outline[[0, -1], :1] * frame[:, 2]
        first, last = len(vertices), len(vertices) + 1
        vertices = np.concatenate((vertices, poles))
        rim, top = around[0], (rows - 1) * segments + around[0]
        faces.append(np.column_stack((np.full(segments, first), beside[0], rim)))
        faces.append(np.column_stack((np.full(segments, last), top, (rows - 1) * segments + beside[0])))
    return outward(vertices, np.concatenate(faces).astype(np.int32))


def _enclosing(outline: Array, segments: int, ring: bool) -> Array:
    """The profile (p, 2) whose polygons enclose the solid of the given one, without the poles of an open profile.

    A corner between a face that looks outward and one that looks inward becomes two, joined by a narrow flat ring.
    """
    fatter = 1.0 / np.cos(np.pi / segments)
    after = np.roll(outline, -1, axis=0)
    # an open profile is closed along the axis, where the area needs no term
    clockwise = float(np.sum(outline[:, 0] * after[:, 1] - after[:, 0] * outline[:, 1])) < 0.0
    ahead = after[:, 0] - outline[:, 0]
    level = np.abs(ahead) <= FLAT_SHARE * float(np.ptp(outline[:, 0]))
    looks = np.where(level, 0.0, np.sign(ahead)) * (1.0 if clockwise else -1.0)
    rows: list[tuple[float, float]] = []
    for k in range(len(outline)) if ring else range(1, len(outline) - 1):
        along, radius = outline[k]
        sides = [fatter if side > 0.0 else 1.0 for side in (looks[k - 1], looks[k]) if side != 0.0] or [fatter]
        rows.extend((along, radius * scale) for scale in dict.fromkeys(sides))
    return np.array(rows)


def signed_volume(vertices: Array, faces: Faces) -> float:
    """Volume, mm³, of a closed mesh; negative where it is wound inward (divergence theorem)."""
    a, b, c = (vertices[faces[:, k]] for k in range(3))
    return float(np.einsum("ij,ij->", a, np.cross(b, c)) / 6.0)


def outward(vertices: Array, faces: Faces) -> Mesh:
    """Turn a closed mesh's winding outward."""
    return vertices, faces if signed_volume(vertices, faces) >= 0.0 else np.ascontiguousarray(faces[:, ::-1])


def merged(meshes: Sequence[Mesh]) -> Mesh:
    """Put closed meshes side by side into one; overlaps are left as they are."""
    offsets = np.cumsum([0, *(len(vertices) for vertices, _ in meshes)])
    return (
        np.concatenate([vertices for vertices, _ in meshes]),
        np.concatenate([faces + offset for (_, faces), offset in zip(meshes, offsets, strict=False)]).astype(np.int32),
    )


def cylinder(a: ArrayLike, b: ArrayLike, radius: float, segments: int = 24) -> Mesh:
    """A cylinder with its flat ends at ``a`` and ``b``."""
    start, along = _between(a, b)
    length = float(np.linalg.norm(along))
    return lathe(start, along, [(0, 0), (0, radius), (length, radius), (length, 0)], segments)


def tube(a: ArrayLike, b: ArrayLike, outer: float, inner: float, segments: int = 24) -> Mesh:
    """A tube from ``a`` to ``b``."""
    start, along = _between(a, b)
    length = float(np.linalg.norm(along))
    return lathe(start, along, [(0, inner), (0, outer), (length, outer), (length, inner)], segments, ring=True)


def ball(centre: ArrayLike, radius: float, segments: int = 20) -> Mesh:
    """A sphere, enclosed."""
    half = max(segments // 2, 4)
    angles = np.linspace(0.0, np.pi, half + 1)
    fatter = radius / np.cos(np.pi / (2 * half))
    profile = np.column_stack((-fatter * np.cos(angles), fatter * np.sin(angles)))
    profile[[0, -1], 1] = 0.0
    return lathe(centre, (0.0, 0.0, 1.0), profile, segments)


def rod(a: ArrayLike, b: ArrayLike, radius: float, end_radius: float, segments: int = 20) -> Mesh:
    """A rod between two joint centres with a ball at each end."""
    start, along = _between(a, b)
    length = float(np.linalg.norm(along))
    balls = [ball(a, end_radius, segments), ball(b, end_radius, segments)]
    if length <= 2.0 * end_radius:
        return merged(balls)
    return merged([lathe(start, along, [(0, 0), (0, radius), (length, radius), (length, 0)], segments), *balls])


def tyre_ring(centre: ArrayLike, spin: ArrayLike, outer: float, width: float, inner: float, segments: int = 72) -> Mesh:
    """A tyre: a ring with rounded shoulders about the spin axis.

    Parameters
    ----------
    outer, inner : radii at the tread and at the rim, mm; width : overall, mm.

    The ring has chamfered beads, straight side walls and a flat tread; shoulders between them are rounded by 0.42 of
    the wall's height or 0.36 of half the width, whichever is less. The mesh encloses it: at 72 segments and a radius
    of 300 mm it is fatter by at most 0.29 mm.
    """
    half, wall = width / 2.0, outer - inner
    shoulder = min(0.42 * wall, 0.36 * half)
    # corners between tangents of the round shoulder: its sides touch it from outside, the first and last are the
    # side wall and the tread
    angles = (np.arange(SHOULDER_STEPS) + 0.5) * (np.pi / 2.0 / SHOULDER_STEPS)
    tangent = shoulder / np.cos(np.pi / 4.0 / SHOULDER_STEPS)
    right = np.column_stack((half - shoulder + tangent * np.cos(angles), outer - shoulder + tangent * np.sin(angles)))
    bead = np.array([[0.84 * half, inner], [half, inner + 0.40 * (wall - shoulder)]])
    side = np.concatenate((bead, right))
    mirrored = side[::-1] * [-1.0, 1.0]
    return lathe(centre, spin, np.concatenate((side, mirrored)), segments, ring=True)


def rim_barrel(
    centre: ArrayLike, spin: ArrayLike, radius: float, width: float, segments: int = 72, offset: float = 0.25
) -> Mesh:
    """A rim: a thin barrel with flanges, and a disc with a boss at ``offset`` of the half width outboard."""
    half, wall = width / 2.0, max(0.03 * radius, 4.0)
    flange = radius + wall * 1.2
    barrel = [
        (-half, flange),
        (-half, radius - 1.6 * wall),
        (half, radius - 1.6 * wall),
        (half, flange),
        (half - wall, flange),
        (half - wall, radius - 0.2 * wall),
        (0.25 * half, radius - 0.8 * wall),
        (-half + wall, radius - 0.2 * wall),
        (-half + wall, flange),
    ]
    at, thick = offset * half, wall
    disc = [
        (at - thick, 0.0),
        (at - thick, 0.26 * radius),
        (at + 0.2 * half, 0.92 * radius - wall),
        (at + 0.2 * half + thick, 0.92 * radius),
        (at + 0.2 * half + 2 * thick, 0.92 * radius - wall),
        (at + thick, 0.26 * radius),
        (at + 2.2 * thick, 0.22 * radius),
        (at + 2.2 * thick, 0.0),
    ]
    return merged([lathe(centre, spin, barrel, segments, ring=True), lathe(centre, spin, disc, segments)])


def coil(length: float, radius: float, wire: float, turns: float = 7.0, segments: int = 12) -> Mesh:
    """A coil spring along +z from 0 to ``length``, flat ends; for drawing."""
    steps = int(turns * 24)
    t = np.linspace(0.0, 1.0, steps + 1)
    angle = 2.0 * np.pi * turns * t
    centre = np.column_stack((radius * np.cos(angle), radius * np.sin(angle), wire + (length - 2 * wire) * t))
    tangent = np.gradient(centre, axis=0)
    tangent /= np.linalg.norm(tangent, axis=1, keepdims=True)
    out = np.column_stack((np.cos(angle), np.sin(angle), np.zeros(steps + 1)))
    up = np.cross(tangent, out)
    around = np.arange(segments) * (2.0 * np.pi / segments)
    section = np.cos(around)[None, :, None] * out[:, None] + np.sin(around)[None, :, None] * up[:, None]
    vertices = (centre[:, None] + wire * section).reshape(-1, 3)
    here = np.arange(steps)[:, None] * segments
    side = np.arange(segments)[None]
    beside = (side + 1) % segments
    quads = np.stack((here + side, here + beside, here + segments + beside, here + segments + side), axis=-1)
    quads = quads.reshape(-1, 4)
    first, last = len(vertices), len(vertices) + 1
    vertices = np.concatenate((vertices, centre[[0, -1]]))
    caps = [
        np.column_stack((np.full(segments, first), beside[0], side[0])),
        np.column_stack((np.full(segments, last), steps * segments + side[0], steps * segments + beside[0])),
    ]
    faces = np.concatenate((quads[:, [0, 1, 2]], quads[:, [0, 2, 3]], *caps)).astype(np.int32)
    return outward(vertices, faces)


def _between(a: ArrayLike, b: ArrayLike) -> tuple[Array, Array]:
    start = np.asarray(a, dtype=float)
    return start, np.asarray(b, dtype=float) - start
