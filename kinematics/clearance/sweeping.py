"""The least distance from a moving part at the points of a grid, compiled: by halving space and quartering the motion.

Poses form a grid; a cell of stride s spans s of its steps along each input. Where the distances at a cell's four
corner poses all exceed √(best² + extra(s)), no pose within it can bring the part nearer than ``best`` (see
``envelope.py``), and the cell is passed over. A cube of grid points drops, for all of them, the cells that bring the
part no nearer to any of them, and hands the rest to its eight halves.
"""

from __future__ import annotations

from typing import NamedTuple, TypeAlias

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.clearance.compiled import compiled

Array: TypeAlias = NDArray[np.float64]
Values: TypeAlias = NDArray[np.float32]

#: Grid points along each side of the cubes that a search begins with.
BLOCK = 16
#: Strides of the cells of poses, from the first ones down to single steps.
STRIDES = (8, 4, 2, 1)
#: Cubes of at least this size look at the coarse field.
COARSE_SIZE = 4
#: Strides, by number, that cells are quartered down to in cubes of 1, 2, 4, 8 and 16 points a side.
FINEST = (3, 2, 1, 1, 0)


class Field(NamedTuple):
    """A part's distance field (see ``field.py``) for the kernel: values flattened, and their shape.

    share : its points over those of the finest field along an axis, 1 or less; step : between its points, mm.
    low, high (3,) : the part's box in steps of the finest field, from its first point.
    """

    values: Values
    shape: tuple[int, int, int]
    share: float
    step: float
    low: Array
    high: Array


class Sweep(NamedTuple):
    """What is swept, and how finely.

    poses (nu · nv, 12) : nine of the rotation and three of the shift, from the grid's frame, mm, into the part's, in
    steps of its finest field from that field's first point.
    counts : nu and nv, one more than a multiple of the first stride, or 1.
    extra (4,) : for each stride, mm².
    """

    poses: Array
    nu: int
    nv: int
    extra: Array


class Grid(NamedTuple):
    """Where distances are wanted, and how they are rounded off.

    Values above ``cap`` are cut off there, those below ``enough`` become 0, and those within ``apart`` of the level are
    put as much below it.
    """

    origin: Array
    step: float
    level: float
    cap: float
    enough: float
    apart: float


@compiled
def sweep_slab(fine: Field, coarse: Field, sweep: Sweep, grid: Grid, values: Values, first: int, last: int) -> None:
    """Fill values (nx, ny, nz) float32 for first ≤ i < last, a slab of BLOCK layers."""
    nu, nv = sweep.nu, sweep.nv
    ny, nz = values.shape[1], values.shape[2]
    big = STRIDES[0]
    # cells are numbered by their first pose and stride: pose · 4 + stride's number
    cells = np.empty(6 * (nu * nv + 64), dtype=np.int64)
    cell_stack = np.empty(64, dtype=np.int64)
    roots = 0
    for u in range(0, max(nu - 1, 1), big):
        for v in range(0, max(nv - 1, 1), big):
            cells[roots] = (u * nv + v) * 4
            roots += 1
    known = np.empty(nu * nv)
    seen = np.zeros(nu * nv, dtype=np.int64)
    stamp, hint = 0, (nu // 2) * nv + nv // 2
    stack = np.empty((64, 6), dtype=np.int64)
    limits = np.empty(64)
    for y in range(0, ny, BLOCK):
        for z in range(0, nz, BLOCK):
            stack[0, 0], stack[0, 1], stack[0, 2], stack[0, 3] = first, y, z, BLOCK
            stack[0, 4], stack[0, 5], limits[0] = 0, roots, grid.cap
            top = 1
            while top > 0:
                top -= 1
                i0, j0, k0, size = stack[top, 0], stack[top, 1], stack[top, 2], stack[top, 3]
                start, number, limit = stack[top, 4], stack[top, 5], limits[top]
                if i0 >= last or j0 >= ny or k0 >= nz:
                    continue
                middle = (size - 1) / 2.0
                px = grid.origin[0] + grid.step * (i0 + middle)
                py = grid.origin[1] + grid.step * (j0 + middle)
                pz = grid.origin[2] + grid.step * (k0 + middle)
                radius = middle * grid.step * np.sqrt(3.0)
                single = size == 1
                rough = size >= COARSE_SIZE
                field_step = coarse.step if rough else fine.step
                # the field may exceed the distance by this much in the square, and lie below it by the other
                blur = 0.0 if single else 0.75 * field_step * field_step
                above = 0.0 if single else radius + 0.87 * field_step
                stamp += 1
                halvings = 0
                while size >> (halvings + 1) > 0:
                    halvings += 1
                finest = FINEST[halvings]
                if not rough:
                    # the last point's nearest pose first: it is this one's too, or near it
                    seen[hint] = stamp
                    known[hint] = _at(fine, sweep.poses, hint, px, py, pz)
                    limit = min(limit, known[hint] + above)
                begin = start + number
                kept = 0
                for n in range(number):
                    cell_stack[0] = cells[start + n]
                    waiting = 1
                    while waiting > 0 and limit > grid.enough:
                        waiting -= 1
                        cell = cell_stack[waiting]
                        depth, pose = cell & 3, cell >> 2
                        stride = STRIDES[depth]
                        step_u = stride * nv if nu > 1 else 0
                        step_v = stride if nv > 1 else 0
                        low = np.inf
                        for c in range(4):
                            at = pose + (step_u if c & 1 else 0) + (step_v if c & 2 else 0)
                            if seen[at] != stamp:
                                seen[at] = stamp
                                if rough:
                                    known[at] = _at(coarse, sweep.poses, at, px, py, pz)
                                else:
                                    known[at] = _at(fine, sweep.poses, at, px, py, pz)
                            value = known[at]
                            if value < low:
                                low = value
                            if value + above < limit:
                                limit = value + above
                                if not rough:
                                    hint = at
                        if low > 0.0 and low * low > blur:
                            sure = np.sqrt(low * low - blur) - radius
                            if sure > 0.0 and sure * sure >= limit * limit + sweep.extra[depth]:
                                continue
                        if depth >= finest:
                            if not single:
                                cells[begin + kept] = cell
                                kept += 1
                            continue
                        half_u, half_v = step_u // 2, step_v // 2
                        for c in range(4):
                            if (c & 1 and nu == 1) or (c & 2 and nv == 1):
                                continue
                            at = pose + (half_u if c & 1 else 0) + (half_v if c & 2 else 0)
                            cell_stack[waiting] = at * 4 + depth + 1
                            waiting += 1
                    if limit <= grid.enough:
                        break
                if limit <= grid.enough:
                    limit = 0.0
                elif single and abs(limit - grid.level) < grid.apart:
                    limit = grid.level - grid.apart
                if single:
                    values[i0, j0, k0] = limit
                elif limit == 0.0 or kept == 0:
                    # without a cell left nothing comes nearer to any of the points than the limit
                    if abs(limit - grid.level) < grid.apart:
                        limit = grid.level - grid.apart
                    for i in range(i0, min(i0 + size, last)):
                        for j in range(j0, min(j0 + size, ny)):
                            for k in range(k0, min(k0 + size, nz)):
                                values[i, j, k] = limit
                else:
                    half = size // 2
                    for corner in range(8):
                        stack[top, 0] = i0 + half * (corner & 1)
                        stack[top, 1] = j0 + half * ((corner >> 1) & 1)
                        stack[top, 2] = k0 + half * (corner >> 2)
                        stack[top, 3], stack[top, 4], stack[top, 5] = half, begin, kept
                        limits[top] = limit
                        top += 1


@compiled
def _at(field: Field, poses: Array, pose: int, x: float, y: float, z: float) -> float:
    """The part's field at a point of the grid's frame, at one pose: trilinear; outside its grid the distance to the
    part's box."""
    # no views of one pose: counting who holds them would cost more than the rest, and make the threads wait
    px = poses[pose, 0] * x + poses[pose, 1] * y + poses[pose, 2] * z + poses[pose, 9]
    py = poses[pose, 3] * x + poses[pose, 4] * y + poses[pose, 5] * z + poses[pose, 10]
    pz = poses[pose, 6] * x + poses[pose, 7] * y + poses[pose, 8] * z + poses[pose, 11]
    fx, fy, fz = px * field.share, py * field.share, pz * field.share
    nx, ny, nz = field.shape
    if fx < 0.0 or fy < 0.0 or fz < 0.0 or fx >= nx - 1 or fy >= ny - 1 or fz >= nz - 1:
        dx = max(field.low[0] - px, px - field.high[0], 0.0)
        dy = max(field.low[1] - py, py - field.high[1], 0.0)
        dz = max(field.low[2] - pz, pz - field.high[2], 0.0)
        return field.share * field.step * np.sqrt(dx * dx + dy * dy + dz * dz)
    i, j, k = int(fx), int(fy), int(fz)
    a, b, c = fx - i, fy - j, fz - k
    values = field.values
    # unsigned, so that no index is tried for counting from the end
    one, row, layer = np.uint64(1), np.uint64(nz), np.uint64(ny * nz)
    at = np.uint64((i * ny + j) * nz + k)
    far = at + layer
    v00 = values[at] * (1.0 - c) + values[at + one] * c
    v01 = values[at + row] * (1.0 - c) + values[at + row + one] * c
    v10 = values[far] * (1.0 - c) + values[far + one] * c
    v11 = values[far + row] * (1.0 - c) + values[far + row + one] * c
    return (v00 * (1.0 - b) + v01 * b) * (1.0 - a) + (v10 * (1.0 - b) + v11 * b) * a
