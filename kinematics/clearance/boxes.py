"""The tree of oriented boxes over a mesh's triangles: built once, plain arrays, compiled.

Knows no motion. A tree is a ``Tree`` of arrays: node i has centre, three axes (rows), half widths, two children or,
at a leaf, a run of triangles.
"""

from __future__ import annotations

from typing import NamedTuple, TypeAlias

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.clearance.compiled import compiled

Array: TypeAlias = NDArray[np.float64]
Index: TypeAlias = NDArray[np.int64]

#: Triangles in a leaf, at most.
LEAF = 1


class BoxTree(NamedTuple):
    """centre (N, 3), axes (N, 3, 3) rows, half (N, 3), child (N,) first child or −1, start, length (N,) of a leaf's
    run in corners (T, 3, 3)."""

    centre: Array
    axes: Array
    half: Array
    child: Index
    start: Index
    length: Index
    corners: Array


def build_tree(vertices: Array, faces: NDArray[np.int32]) -> BoxTree:
    """Build the tree of a mesh; time n log n, memory linear in triangles.

    Raises
    ------
    ValueError : there is no triangle.
    """
    if not len(faces):
        raise ValueError("a tree needs at least one triangle")
    corners = np.ascontiguousarray(vertices[faces], dtype=np.float64)
    return BoxTree(*_build(corners))


@compiled
def principal_axes(matrix):
    """Eigenvectors (columns) of a symmetric (3, 3) matrix by Jacobi's rotations; any orthonormal frame if it is zero.

    Own, because numba's needs scipy, which nothing else here does.
    """
    work, vectors = matrix.copy(), np.eye(3)
    for _ in range(24):
        size = abs(work[0, 0]) + abs(work[1, 1]) + abs(work[2, 2])
        if abs(work[0, 1]) + abs(work[0, 2]) + abs(work[1, 2]) <= 1e-15 * size:
            break
        for p in range(2):
            for q in range(p + 1, 3):
                if abs(work[p, q]) <= 1e-300:
                    continue
                slope = (work[q, q] - work[p, p]) / (2.0 * work[p, q])
                tangent = (1.0 if slope >= 0.0 else -1.0) / (abs(slope) + np.sqrt(slope * slope + 1.0))
                cosine = 1.0 / np.sqrt(tangent * tangent + 1.0)
                sine = tangent * cosine
                for k in range(3):
                    one, two = work[k, p], work[k, q]
                    work[k, p], work[k, q] = cosine * one - sine * two, sine * one + cosine * two
                for k in range(3):
                    one, two = work[p, k], work[q, k]
                    work[p, k], work[q, k] = cosine * one - sine * two, sine * one + cosine * two
                    one, two = vectors[k, p], vectors[k, q]
                    vectors[k, p], vectors[k, q] = cosine * one - sine * two, sine * one + cosine * two
    return vectors


@compiled
def _build(corners):
    total = len(corners)
    most = 2 * total + 1
    centre = np.zeros((most, 3))
    axes = np.zeros((most, 3, 3))
    half = np.zeros((most, 3))
    child = np.full(most, -1, dtype=np.int64)
    start = np.zeros(most, dtype=np.int64)
    count = np.zeros(most, dtype=np.int64)
    order = np.arange(total)
    middle = np.empty((total, 3))
    for t in range(total):
        for k in range(3):
            middle[t, k] = (corners[t, 0, k] + corners[t, 1, k] + corners[t, 2, k]) / 3.0
    stack = np.empty(256, dtype=np.int64)
    start[0], count[0] = 0, total
    nodes, top = 1, 1
    stack[0] = 0
    key = np.empty(total)
    while top > 0:
        top -= 1
        node = stack[top]
        first, size = start[node], count[node]
        mean = np.zeros(3)
        for i in range(first, first + size):
            t = order[i]
            for v in range(3):
                for k in range(3):
                    mean[k] += corners[t, v, k]
        mean /= 3.0 * size
        spread = np.zeros((3, 3))
        for i in range(first, first + size):
            t = order[i]
            for v in range(3):
                x = corners[t, v, 0] - mean[0]
                y = corners[t, v, 1] - mean[1]
                z = corners[t, v, 2] - mean[2]
                spread[0, 0] += x * x
                spread[0, 1] += x * y
                spread[0, 2] += x * z
                spread[1, 1] += y * y
                spread[1, 2] += y * z
                spread[2, 2] += z * z
        spread[1, 0] = spread[0, 1]
        spread[2, 0] = spread[0, 2]
        spread[2, 1] = spread[1, 2]
        vectors = principal_axes(spread)
        for k in range(3):
            for j in range(3):
                axes[node, k, j] = vectors[j, k]
        if size == 1:
            # a triangle's own box lies along its longest edge
            t = order[first]
            longest, edge = -1.0, 0
            for v in range(3):
                length = 0.0
                for k in range(3):
                    length += (corners[t, (v + 1) % 3, k] - corners[t, v, k]) ** 2
                if length > longest:
                    longest, edge = length, v
            along = corners[t, (edge + 1) % 3] - corners[t, edge]
            across = np.cross(along, corners[t, (edge + 2) % 3] - corners[t, edge])
            size_along = np.sqrt((along * along).sum())
            size_across = np.sqrt((across * across).sum())
            if size_along > 1e-12 and size_across > 1e-12 * size_along:
                along /= size_along
                across /= size_across
                axes[node, 0] = along
                axes[node, 1] = np.cross(across, along)
                axes[node, 2] = across
        low = np.full(3, np.inf)
        high = np.full(3, -np.inf)
        for i in range(first, first + size):
            t = order[i]
            for v in range(3):
                for k in range(3):
                    reach = (
                        axes[node, k, 0] * corners[t, v, 0]
                        + axes[node, k, 1] * corners[t, v, 1]
                        + axes[node, k, 2] * corners[t, v, 2]
                    )
                    if reach < low[k]:
                        low[k] = reach
                    if reach > high[k]:
                        high[k] = reach
        for j in range(3):
            centre[node, j] = 0.0
            for k in range(3):
                centre[node, j] += axes[node, k, j] * (low[k] + high[k]) / 2.0
            # a hair wider, so that rounding never leaves a corner outside
            half[node, j] = (high[j] - low[j]) / 2.0 * (1.0 + 1e-12) + 1e-11 * (abs(high[j]) + abs(low[j]))
        if size <= LEAF:
            continue
        widest = 0
        for k in range(3):
            if half[node, k] > half[node, widest]:
                widest = k
        for i in range(first, first + size):
            t = order[i]
            key[i] = (
                axes[node, widest, 0] * middle[t, 0]
                + axes[node, widest, 1] * middle[t, 1]
                + axes[node, widest, 2] * middle[t, 2]
            )
        # split at the mean: boxes shrink evenly where a mesh is fine in one place and coarse in another
        cut = 0.0
        for i in range(first, first + size):
            cut += key[i]
        cut /= size
        left = 0
        for i in range(first, first + size):
            if key[i] < cut:
                at = first + left
                order[i], order[at] = order[at], order[i]
                key[i], key[at] = key[at], key[i]
                left += 1
        if left == 0 or left == size:
            left = size // 2
        child[node] = nodes
        start[nodes], count[nodes] = first, left
        start[nodes + 1], count[nodes + 1] = first + left, size - left
        stack[top] = nodes
        stack[top + 1] = nodes + 1
        top += 2
        nodes += 2
    return (
        centre[:nodes].copy(),
        axes[:nodes].copy(),
        half[:nodes].copy(),
        child[:nodes].copy(),
        start[:nodes].copy(),
        count[:nodes].copy(),
        corners[order],
    )
