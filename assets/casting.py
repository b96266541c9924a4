"""Castings for the demo: rounded shapes that flow into one another, and the mesh of their skin.

A shape is a field: a function from points (n, 3) to signed distances (n,), mm, negative inside. The skin is found by
surface nets: one vertex in each cell of a grid that the surface crosses, joined across the crossed edges and then
brought onto the surface (S. F. F. Gibson, "Constrained elastic surface nets", 1998; from memory).
Needed only to make the demo's meshes again (``make_demo.py``); the program itself never imports this.
"""

from __future__ import annotations

from collections.abc import Callable
from itertools import product
from typing import TypeAlias

import numpy as np
from manifold3d import Error, Manifold, Mesh
from numpy.typing import ArrayLike, NDArray

Array: TypeAlias = NDArray[np.float64]
Field: TypeAlias = Callable[[Array], Array]

#: Steps that bring a vertex onto the surface, and the farthest it may go, in cells.
LANDING_STEPS = 6
FARTHEST = 0.45
#: How far the skin may stray when its needless triangles are taken out, mm.
SIMPLER_MM = 0.05


def limb(a: ArrayLike, b: ArrayLike, radius: float, end_radius: float) -> Field:
    """A round limb from a to b, tapered."""
    start, along = np.asarray(a, dtype=float), np.asarray(b, dtype=float) - np.asarray(a, dtype=float)

    def distance(points: Array) -> Array:
        share = np.clip((points - start) @ along / (along @ along), 0.0, 1.0)
        return np.linalg.norm(points - start - share[:, None] * along, axis=1) - radius - (end_radius - radius) * share

    return distance


def cushion(at: ArrayLike, half: ArrayLike, frame: Array, rounding: float) -> Field:
    """A box with round edges: half sizes (3,) along the columns of a frame (3, 3)."""
    centre, inner = np.asarray(at, dtype=float), np.asarray(half, dtype=float) - rounding

    def distance(points: Array) -> Array:
        beyond = np.abs((points - centre) @ frame) - inner
        return np.linalg.norm(np.maximum(beyond, 0.0), axis=1) + np.minimum(beyond.max(axis=1), 0.0) - rounding

    return distance


def cheese(at: ArrayLike, axis: Array, radius: float, half: float, rounding: float) -> Field:
    """A cylinder with round edges about a unit axis."""
    centre = np.asarray(at, dtype=float)

    def distance(points: Array) -> Array:
        along = (points - centre) @ axis
        across = np.linalg.norm(points - centre - along[:, None] * axis, axis=1)
        beyond = np.column_stack((across - radius + rounding, np.abs(along) - half + rounding))
        return np.linalg.norm(np.maximum(beyond, 0.0), axis=1) + np.minimum(beyond.max(axis=1), 0.0) - rounding

    return distance


def saddle(
    hub: ArrayLike,
    axis: Array,
    top: Array,
    radii: tuple[float, float],
    along: tuple[float, float],
    half_deg: float,
    rounding: float,
) -> Field:
    """A round-edged piece of a ring about an axis: between two radii, from and to along it, so far to either side."""
    centre, across = np.asarray(hub, dtype=float), np.cross(axis, top)
    radius, length, middle = (radii[0] + radii[1]) / 2.0, (along[1] - along[0]) / 2.0, (along[0] + along[1]) / 2.0
    inner = np.array([(radii[1] - radii[0]) / 2.0, length, np.radians(half_deg) * radius]) - rounding

    def distance(points: Array) -> Array:
        from_hub = points - centre
        up, sideways = from_hub @ top, from_hub @ across
        unrolled = (np.hypot(up, sideways) - radius, from_hub @ axis - middle, np.arctan2(sideways, up) * radius)
        beyond = np.abs(np.column_stack(unrolled)) - inner
        return np.linalg.norm(np.maximum(beyond, 0.0), axis=1) + np.minimum(beyond.max(axis=1), 0.0) - rounding

    return distance


def flowing(fillet: float, *fields: Field) -> Field:
    """Shapes joined with a fillet, one after the other."""

    def distance(points: Array) -> Array:
        found = fields[0](points)
        for field in fields[1:]:
            found = _least(found, field(points), fillet)
        return found

    return distance


def hollowed(field: Field, fillet: float, *tools: Field) -> Field:
    """A shape with others taken away, the edges rounded."""

    def distance(points: Array) -> Array:
        found = field(points)
        for tool in tools:
            found = -_least(-found, tool(points), fillet)
        return found

    return distance


def _least(a: Array, b: Array, fillet: float) -> Array:
    """The lesser of two distances, smooth where they are alike."""
    share = np.maximum(fillet - np.abs(a - b), 0.0) / fillet
    return np.minimum(a, b) - 0.25 * fillet * share * share


def cast(field: Field, low: ArrayLike, high: ArrayLike, cell: float) -> Manifold:
    """The solid inside a field, within a box that it does not touch, meshed with cells of a size, mm.

    Raises
    ------
    ValueError : the shape is thinner than the cells can tell, so that its skin is no closed surface.
    """
    start = np.asarray(low, dtype=float)
    count = np.ceil((np.asarray(high, dtype=float) - start) / cell).astype(int) + 1
    axes = [start[k] + cell * np.arange(count[k]) for k in range(3)]
    nodes = np.stack(np.meshgrid(*axes, indexing="ij"), axis=-1)
    values = field(nodes.reshape(-1, 3)).reshape(tuple(count))
    vertices, index = _vertices(values, start, cell)
    quads = _quads(values < 0.0, index)
    vertices = _landed(vertices, field, cell)
    triangles = _halved(vertices, quads)
    solid = Manifold(Mesh(vertices.astype(np.float32), triangles.astype(np.uint32)))
    if solid.status() != Error.NoError:
        raise ValueError(f"the casting's skin is not closed ({solid.status()}); take smaller cells than {cell:g} mm")
    return solid.simplify(SIMPLER_MM)


def _vertices(values: Array, start: Array, cell: float) -> tuple[Array, NDArray[np.int64]]:
    """One vertex (n, 3) in each crossed cell, at the mean of its edges' crossings; and each cell's number or -1."""
    shape = tuple(size - 1 for size in values.shape)
    corner = {
        bits: values[tuple(slice(bit, bit + size) for bit, size in zip(bits, shape, strict=True))]
        for bits in product((0, 1), repeat=3)
    }
    total, hits = np.zeros((*shape, 3)), np.zeros(shape)
    for a, b in (
        (a, b)
        for a in corner
        for b in corner
        if sum(b) - sum(a) == 1 and all(x <= y for x, y in zip(a, b, strict=True))
    ):
        crossed = (corner[a] < 0.0) != (corner[b] < 0.0)
        share = np.where(crossed, corner[a] / np.where(crossed, corner[a] - corner[b], 1.0), 0.0)
        place = np.array(a) + share[..., None] * (np.array(b) - np.array(a))
        total += np.where(crossed[..., None], place, 0.0)
        hits += crossed
    used = hits > 0
    index = np.full(shape, -1, dtype=np.int64)
    index[used] = np.arange(int(used.sum()))
    return start + cell * (np.argwhere(used) + total[used] / hits[used][:, None]), index


def _quads(inside: NDArray[np.bool_], index: NDArray[np.int64]) -> NDArray[np.int64]:
    """Four vertices (m, 4) around each crossed edge of the grid, seen anticlockwise from outside."""
    found = []
    for axis in range(3):
        other, third = (axis + 1) % 3, (axis + 2) % 3
        first = np.take(inside, np.arange(inside.shape[axis] - 1), axis=axis)
        second = np.take(inside, np.arange(1, inside.shape[axis]), axis=axis)
        at = np.argwhere(first != second)
        steps = np.zeros((4, 3), dtype=np.int64)
        steps[:, other], steps[:, third] = (-1, 0, 0, -1), (-1, -1, 0, 0)
        around = index[tuple(np.moveaxis(at[:, None] + steps, -1, 0))]
        inward = second[tuple(at.T)]
        around[inward] = around[inward][:, ::-1]
        found.append(around)
    return np.concatenate(found)


def _landed(vertices: Array, field: Field, cell: float) -> Array:
    """Bring vertices onto the surface, none farther than a share of a cell."""
    landed, small = vertices.copy(), 1e-3 * cell
    for _ in range(LANDING_STEPS):
        slope = np.stack([field(landed + small * e) - field(landed - small * e) for e in np.eye(3)], axis=1) / (
            2.0 * small
        )
        step = field(landed)[:, None] * slope / np.maximum((slope**2).sum(axis=1), 0.25)[:, None]
        landed = vertices + np.clip(landed - step - vertices, -FARTHEST * cell, FARTHEST * cell)
    return landed


def _halved(vertices: Array, quads: NDArray[np.int64]) -> NDArray[np.int64]:
    """Cut quads along the shorter diagonal."""
    a, b, c, d = (vertices[quads[:, k]] for k in range(4))
    short = (np.linalg.norm(c - a, axis=1) <= np.linalg.norm(d - b, axis=1))[:, None]
    first = np.where(short, quads[:, [0, 1, 2]], quads[:, [0, 1, 3]])
    second = np.where(short, quads[:, [0, 2, 3]], quads[:, [1, 2, 3]])
    return np.concatenate((first, second))
