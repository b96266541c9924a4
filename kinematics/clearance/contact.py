"""A point that two meeting triangles share. Engines of distance say that surfaces meet, but not reliably where."""

from __future__ import annotations

from typing import TypeAlias

import numpy as np
from numpy.typing import NDArray

Array: TypeAlias = NDArray[np.float64]

#: Barycentric coordinates may fall this far below 0 before a point counts as beside a triangle.
BESIDE = 1e-9
#: Squared sine below which two edges are parallel.
PARALLEL = 1e-14


def meeting_point(first: Array, second: Array) -> Array:
    """A point (3,) of both triangles (3, 3), a corner in each row; the middle of their nearest points if they miss.

    Triangles that cross share a segment: its middle is returned. Triangles that only touch, or lie in one plane, are
    met where their nearest points are.
    """
    ends = [*_through(first, second), *_through(second, first)]
    if ends:
        # both triangles are convex, so the mean of shared points is shared
        return np.asarray(np.mean(ends, axis=0))
    pairs = [(corner, nearest_on_triangle(corner, second)) for corner in first]
    pairs += [(corner, nearest_on_triangle(corner, first)) for corner in second]
    pairs += [_nearest_of_edges(first[i], first[i - 1], second[j], second[j - 1]) for i in range(3) for j in range(3)]
    on_a, on_b = min(pairs, key=lambda pair: float(np.linalg.norm(pair[0] - pair[1])))
    return np.asarray((on_a + on_b) / 2.0)


def _through(edges_of: Array, triangle: Array) -> list[Array]:
    """Where the edges of one triangle go through the other; none where they lie in its plane."""
    normal = np.cross(triangle[1] - triangle[0], triangle[2] - triangle[0])
    heights = (edges_of - triangle[0]) @ normal
    found = []
    for k in range(3):
        h0, h1 = heights[k - 1], heights[k]
        if h0 * h1 > 0.0 or h0 == h1:
            continue
        point = edges_of[k - 1] + (edges_of[k] - edges_of[k - 1]) * (h0 / (h0 - h1))
        if barycentric(point, triangle).min() >= -BESIDE:
            found.append(point)
    return found


def barycentric(point: Array, triangle: Array) -> Array:
    """(3,) barycentric coordinates of a point's foot on the plane of a triangle with an area."""
    a, b, c = triangle
    normal = np.cross(b - a, c - a)
    over = normal @ normal
    one = np.cross(c - b, point - b) @ normal / over
    two = np.cross(a - c, point - c) @ normal / over
    return np.array([one, two, 1.0 - one - two])


def nearest_on_triangle(point: Array, triangle: Array) -> Array:
    """The point (3,) of a triangle with an area that is nearest to a point (3,)."""
    weights = barycentric(point, triangle)
    if weights.min() >= 0.0:
        return np.asarray(weights @ triangle)
    feet = [_nearest_on_edge(point, triangle[k - 1], triangle[k]) for k in range(3)]
    return min(feet, key=lambda foot: float(np.linalg.norm(foot - point)))


def _nearest_on_edge(point: Array, a: Array, b: Array) -> Array:
    along = b - a
    return np.asarray(a + float(np.clip((point - a) @ along / (along @ along), 0.0, 1.0)) * along)


def _nearest_of_edges(a: Array, b: Array, c: Array, d: Array) -> tuple[Array, Array]:
    """Nearest points of the segments ab and cd where both lie between the ends; else some points of them.

    Ends are the business of ``nearest_on_triangle``, so clamping needs no second round.
    """
    u, v, w = b - a, d - c, a - c
    uu, uv, vv, uw, vw = u @ u, u @ v, v @ v, u @ w, v @ w
    gram = uu * vv - uv * uv
    s = float(np.clip((uv * vw - vv * uw) / gram, 0.0, 1.0)) if gram > PARALLEL * uu * vv else 0.0
    t = float(np.clip((uv * s + vw) / vv, 0.0, 1.0))
    return np.asarray(a + s * u), np.asarray(c + t * v)
