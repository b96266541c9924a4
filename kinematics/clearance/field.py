"""The distance to a part's surface, on a grid about the part. Compiled; knows no motion.

The grid is dense. Within ``band_mm`` of the surface the distances are exact; farther out they are lower bounds, good
enough to see that a point is far away.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TypeAlias

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.clearance.compiled import compiled
from knucklepath.kinematics.clearance.threads import in_threads
from knucklepath.kinematics.clearance.triangles import point_triangle

Array: TypeAlias = NDArray[np.float64]
Values: TypeAlias = NDArray[np.float32]
Faces: TypeAlias = NDArray[np.int32]

#: Cubes of voxels that a search begins with, along each side.
CUBE = 32
#: Two neighbours on either side of a surface: one of them is within half a step of it.
BESIDE = 0.5001


@dataclass(frozen=True)
class DistanceField:
    """Distances at ``origin + step · (i, j, k)``: values (nx, ny, nz) float32, mm; negative inside a closed part.

    What lies within closed surfaces counts as inside; a hole wider than the step makes a part hollow, and then all
    distances are positive. low, high (3,) : the part's own box.
    """

    origin: Array
    step: float
    values: Values
    low: Array
    high: Array


def finest_step(size: Array, wished: float, pad_mm: float, most: int) -> float:
    """The wished step of a grid over a padded box of a size (3,); larger where that makes more than ``most`` points.

    Eight steps are counted in besides the pad.
    """
    step = wished
    while float(np.prod((size + 2.0 * pad_mm) / step + 8.0)) > most:
        step *= 1.02
    return step


def distance_field(vertices: Array, faces: Faces, step: float, band_mm: float) -> DistanceField:
    """Measure the distance to a surface.

    Parameters
    ----------
    vertices (n, 3) mm, faces (m, 3).
    step : distance of grid points, mm; band_mm : how far from the surface the distances are exact.
    """
    used = vertices[np.unique(faces)]
    low, high = used.min(axis=0), used.max(axis=0)
    pad = band_mm + 2.0 * step
    shape = np.ceil((high - low + 2.0 * pad) / step).astype(np.int64) + 1
    origin = low - pad
    triangles = np.ascontiguousarray(vertices[faces])
    centres = triangles.mean(axis=1)
    radii = np.linalg.norm(triangles - centres[:, None], axis=-1).max(axis=1)
    balls = np.column_stack((centres, radii))
    values = np.empty(tuple(shape), dtype=np.float32)
    slabs = [(start, min(start + CUBE, int(shape[0]))) for start in range(0, int(shape[0]), CUBE)]
    in_threads(lambda slab: _measure(triangles, balls, origin, step, values, *slab, band_mm + 2.0 * step), slabs)
    _sign(values, BESIDE * step)
    return DistanceField(origin, step, values, low, high)


@compiled
def _measure(
    triangles: Array, balls: Array, origin: Array, step: float, values: Values, first: int, last: int, band: float
) -> None:
    """Fill the slab first…last by halving cubes, each with the triangles that can be nearest to a point in it.

    A triangle at distance D from the middle of a cube of radius r is nearest to none of its points if another one is
    nearer to the middle than D − 2r.
    """
    shape = values.shape
    count = len(triangles)
    room = np.empty(count * 8 + 64, dtype=np.int32)
    for index in range(count):
        room[index] = index
    away = np.empty(count)
    work = np.empty(3)
    middle = np.empty(3)
    stack = np.empty((256, 6), dtype=np.int64)
    for y in range(0, shape[1], CUBE):
        for z in range(0, shape[2], CUBE):
            stack[0] = np.array([first, y, z, CUBE, 0, count])
            top = 1
            while top > 0:
                top -= 1
                ix, iy, iz, size = stack[top, 0], stack[top, 1], stack[top, 2], stack[top, 3]
                start, number = stack[top, 4], stack[top, 5]
                if ix >= last or iy >= shape[1] or iz >= shape[2]:
                    continue
                for k in range(3):
                    middle[k] = origin[k] + step * (stack[top, k] + (size - 1) / 2.0)
                radius = (size - 1) / 2.0 * step * np.sqrt(3.0)
                nearest, which = np.inf, 0
                for n in range(number):
                    m = room[start + n]
                    # a ball about a triangle tells of most that they are too far away
                    dx, dy, dz = middle[0] - balls[m, 0], middle[1] - balls[m, 1], middle[2] - balls[m, 2]
                    reach = nearest + 2.0 * radius + balls[m, 3]
                    if dx * dx + dy * dy + dz * dz > reach * reach:
                        away[n] = np.inf
                        continue
                    triangle = triangles[m]
                    away[n] = np.sqrt(point_triangle(middle, triangle[0], triangle[1], triangle[2], work))
                    if away[n] < nearest:
                        nearest, which = away[n], n
                if size == 1:
                    values[ix, iy, iz] = nearest
                    continue
                if nearest - radius > band:
                    for i in range(ix, min(ix + size, last)):
                        for j in range(iy, min(iy + size, shape[1])):
                            for k in range(iz, min(iz + size, shape[2])):
                                dx = origin[0] + step * i - middle[0]
                                dy = origin[1] + step * j - middle[1]
                                dz = origin[2] + step * k - middle[2]
                                values[i, j, k] = nearest - np.sqrt(dx * dx + dy * dy + dz * dz)
                    continue
                begin = start + number
                if begin + number > len(room):
                    larger = np.empty(2 * (begin + number), dtype=np.int32)
                    larger[:begin] = room[:begin]
                    room = larger
                # the nearest one first: it is near to the halves too, so that they drop the others early
                room[begin] = room[start + which]
                kept = 1
                for n in range(number):
                    if n != which and away[n] <= nearest + 2.0 * radius:
                        room[begin + kept] = room[start + n]
                        kept += 1
                half = size // 2
                for corner in range(8):
                    stack[top, 0] = ix + half * (corner & 1)
                    stack[top, 1] = iy + half * ((corner >> 1) & 1)
                    stack[top, 2] = iz + half * (corner >> 2)
                    stack[top, 3] = half
                    stack[top, 4] = begin
                    stack[top, 5] = kept
                    top += 1


@compiled
def flood(values: Values, level: float) -> NDArray[np.bool_]:
    """Points (nx, ny, nz) that can be reached from the grid's first point through neighbours above a level.

    The grid's outermost points must lie above it.
    """
    nx, ny, nz = values.shape
    reached = np.zeros((nx, ny, nz), dtype=np.bool_)
    stack = np.empty(1 << 16, dtype=np.int64)
    stack[0] = 0
    reached[0, 0, 0] = True
    top = 1
    while top > 0:
        top -= 1
        here = stack[top]
        x, rest = divmod(here, ny * nz)
        y, z = divmod(rest, nz)
        if top + 6 > len(stack):
            larger = np.empty(2 * len(stack), dtype=np.int64)
            larger[:top] = stack[:top]
            stack = larger
        for side in range(6):
            i, j, k = x, y, z
            if side == 0:
                i -= 1
            elif side == 1:
                i += 1
            elif side == 2:
                j -= 1
            elif side == 3:
                j += 1
            elif side == 4:
                k -= 1
            else:
                k += 1
            if i < 0 or j < 0 or k < 0 or i >= nx or j >= ny or k >= nz:
                continue
            if not reached[i, j, k] and values[i, j, k] > level:
                reached[i, j, k] = True
                stack[top] = (i * ny + j) * nz + k
                top += 1
    return reached


@compiled
def _sign(values: Values, level: float) -> None:
    """Make distances negative at points that no way leads to from outside without passing the surface."""
    reached = flood(values, level)
    for i in range(values.shape[0]):
        for j in range(values.shape[1]):
            for k in range(values.shape[2]):
                if not reached[i, j, k] and values[i, j, k] > level:
                    values[i, j, k] = -values[i, j, k]


__all__ = ["DistanceField", "distance_field", "finest_step", "flood"]
