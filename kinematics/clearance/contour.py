"""A watertight surface between grid points below a level and those above it: marching cubes. Compiled.

W. E. Lorensen and H. E. Cline, "Marching Cubes", SIGGRAPH 1987 (from memory). The table is not copied from anywhere
but made here: on each side of a cube the crossings are joined so that points below the level keep apart, which both
cubes of a side see alike, so the surface closes; loops are cut into triangles without lines that lie in a side, so no
edge has more than two triangles.
"""

from __future__ import annotations

from typing import TypeAlias

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.clearance.compiled import compiled

Array: TypeAlias = NDArray[np.float64]
Values: TypeAlias = NDArray[np.float32]
Faces: TypeAlias = NDArray[np.int32]
Table: TypeAlias = NDArray[np.int8]

#: Corner c of a cube lies at (c & 1, c >> 1 & 1, c >> 2); edges by their two corners, along x, y and z.
EDGES = (
    *((c, c | 1) for c in (0, 2, 4, 6)),
    *((c, c | 2) for c in (0, 1, 4, 5)),
    *((c, c | 4) for c in (0, 1, 2, 3)),
)
#: Sides of a cube, corners in a circle that turns left about the outward normal.
SIDES = ((0, 4, 6, 2), (1, 3, 7, 5), (0, 1, 5, 4), (2, 6, 7, 3), (0, 2, 3, 1), (4, 5, 7, 6))


def cube_table() -> Table:
    """(256, 16) triangles of each case as triples of edge numbers, ended by −1; bit c of a case: corner c is below."""
    number = {frozenset(edge): index for index, edge in enumerate(EDGES)}
    sides_of = [{s for s, side in enumerate(SIDES) if set(edge) <= set(side)} for edge in EDGES]
    table = np.full((256, 16), -1, dtype=np.int8)
    for case in range(256):
        after = _steps(case, number)
        triangles: list[int] = []
        while after:
            loop = [next(iter(after))]
            while (step := after.pop(loop[-1])) != loop[0]:
                loop.append(step)
            for triangle in _cut(loop, sides_of):
                triangles.extend(triangle)
        table[case, : len(triangles)] = triangles
    return table


def _steps(case: int, number: dict[frozenset[int], int]) -> dict[int, int]:
    """For each crossed edge the crossed edge that follows on the surface, across one side of the cube."""
    after: dict[int, int] = {}
    for side in SIDES:
        below = [bool(case >> corner & 1) for corner in side]
        for k in range(4):
            # the surface runs along each run of points below, from where the circle comes to it to where it leaves
            if below[k] and not below[(k + 1) % 4]:
                back = k
                while below[(back - 1) % 4]:
                    back -= 1
                leaves = number[frozenset((side[k], side[(k + 1) % 4]))]
                enters = number[frozenset((side[back % 4], side[(back - 1) % 4]))]
                after[enters] = leaves
    return after


def _cut(loop: list[int], sides_of: list[set[int]]) -> list[tuple[int, int, int]]:
    """Triangles of a loop of edges whose inner lines lie in no side of the cube.

    Raises
    ------
    AssertionError : there is no such way; it does not happen for a cube.
    """
    ways = _ways(tuple(loop), sides_of)
    assert ways is not None
    return ways


def _ways(loop: tuple[int, ...], sides_of: list[set[int]]) -> list[tuple[int, int, int]] | None:
    """The first way to cut a polygon, by the triangle on its last side."""
    if len(loop) < 3:
        return []
    for k in range(1, len(loop) - 1):
        lines = [
            pair for pair, inner in (((loop[0], loop[k]), k > 1), ((loop[k], loop[-1]), k < len(loop) - 2)) if inner
        ]
        if any(sides_of[a] & sides_of[b] for a, b in lines):
            continue
        first, second = _ways(loop[: k + 1], sides_of), _ways(loop[k:], sides_of)
        if first is not None and second is not None:
            return [(loop[0], loop[k], loop[-1]), *first, *second]
    return None


def contour(values: Values, level: float, origin: Array, step: float) -> tuple[Array, Faces]:
    """The surface at a level, as (vertices (n, 3), faces (m, 3)), wound so that lower values lie inside.

    Points at or below the level are inside. The outermost grid points must lie above it.
    """
    table = cube_table()
    corners = np.array(EDGES, dtype=np.int64)
    points, triangles = _count(values, level, table)
    vertices = np.empty((points, 3))
    faces = np.empty((triangles, 3), dtype=np.int32)
    _extract(values, level, table, corners, origin, step, vertices, faces)
    return vertices, faces


@compiled
def _case(values: Values, level: float, i: int, j: int, k: int) -> int:
    case = 0
    for corner in range(8):
        if values[i + (corner & 1), j + ((corner >> 1) & 1), k + (corner >> 2)] <= level:
            case |= 1 << corner
    return case


@compiled
def _count(values: Values, level: float, table: Table) -> tuple[int, int]:
    nx, ny, nz = values.shape
    points, triangles = 0, 0
    for i in range(nx):
        for j in range(ny):
            for k in range(nz):
                inside = values[i, j, k] <= level
                points += i + 1 < nx and inside != (values[i + 1, j, k] <= level)
                points += j + 1 < ny and inside != (values[i, j + 1, k] <= level)
                points += k + 1 < nz and inside != (values[i, j, k + 1] <= level)
                if i + 1 < nx and j + 1 < ny and k + 1 < nz:
                    row = table[_case(values, level, i, j, k)]
                    n = 0
                    while row[n] >= 0:
                        n += 3
                    triangles += n // 3
    return points, triangles


@compiled
def _extract(
    values: Values,
    level: float,
    table: Table,
    corners: NDArray[np.int64],
    origin: Array,
    step: float,
    vertices: Array,
    faces: Faces,
) -> None:
    nx, ny, nz = values.shape
    # numbers of the points on the edges that start in two neighbouring layers
    layers = np.full((2, ny, nz, 3), -1, dtype=np.int32)
    points, triangles = 0, 0
    ends = np.array([[1, 0, 0], [0, 1, 0], [0, 0, 1]])
    for i in range(nx):
        here = layers[i % 2]
        for j in range(ny):
            for k in range(nz):
                a = values[i, j, k]
                for axis in range(3):
                    p, q, r = i + ends[axis, 0], j + ends[axis, 1], k + ends[axis, 2]
                    if p >= nx or q >= ny or r >= nz:
                        continue
                    b = values[p, q, r]
                    if (a <= level) != (b <= level):
                        share = (level - a) / (b - a)
                        vertices[points, 0] = origin[0] + step * (i + share * ends[axis, 0])
                        vertices[points, 1] = origin[1] + step * (j + share * ends[axis, 1])
                        vertices[points, 2] = origin[2] + step * (k + share * ends[axis, 2])
                        here[j, k, axis] = points
                        points += 1
        if i == 0:
            continue
        for j in range(ny - 1):
            for k in range(nz - 1):
                case = _case(values, level, i - 1, j, k)
                if case == 0 or case == 255:
                    continue
                row = table[case]
                n = 0
                while row[n] >= 0:
                    for t in range(3):
                        edge = row[n + t]
                        corner = corners[edge, 0]
                        at = layers[(i - 1 + (corner & 1)) % 2]
                        faces[triangles, t] = at[j + ((corner >> 1) & 1), k + (corner >> 2), edge // 4]
                    triangles += 1
                    n += 3


__all__ = ["contour", "cube_table"]
