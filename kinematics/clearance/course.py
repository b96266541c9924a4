"""The course of one body as another sees it: Chebyshev polynomials over tiles of the motion's rectangle.

Poses and their exact second derivatives at any point cost a small matrix product; how far the polynomials lie from
solved poses is measured, and is part of what the proof reports.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import TypeAlias

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.clearance.cells import values_at

Array: TypeAlias = NDArray[np.float64]


#: How near the polynomials keep to solved poses, mm, where the motion lets them …
ACCURACY_MM = 1e-6
#: … within this many halvings of its rectangle; beyond, the error is what it is, and is reported.
MOST_HALVINGS = 8


@dataclass(frozen=True)
class Tile:
    """A rectangle low…high (2,) and coefficients (nu, nv, 12): nine of the rotation, three of the shift.

    error_mm : greatest distance of a point from its solved place, where tried. spare (2, 2) : how fast a point's second
    derivative in u, and in v, can change with u and v: bounds from the coefficients, for points within reach.
    """

    low: Array
    high: Array
    coefficients: Array
    error_mm: float
    spare: Array


def nodes(count: int) -> Array:
    """Chebyshev nodes on −1…1."""
    return np.cos(np.pi * (np.arange(count) + 0.5) / count)


def _half_way(count: int) -> Array:
    """Points between the nodes, and both ends."""
    return np.cos(np.pi * np.arange(count + 1) / count)


def _spread(low: float, high: float, line: Array) -> Array:
    """Points of −1…1 on low…high; one point where there is no width."""
    return low + (high - low) * (line + 1.0) / 2.0 if high > low else np.array([low])


def fit(values: Array) -> Array:
    """Coefficients (nu, nv, k) of the polynomial through values at the nodes (nu, nv, k)."""
    out = values
    for axis in (0, 1):
        n = out.shape[axis]
        k = np.arange(n)[:, None]
        matrix = 2.0 / n * np.cos(np.pi * k * (np.arange(n)[None] + 0.5) / n)
        matrix[0] /= 2.0
        out = np.moveaxis(np.tensordot(matrix, out, axes=(1, axis)), 0, axis)
    return np.ascontiguousarray(out)


def tiles(
    poses: Callable[[Array, Array], Array],
    low: Array,
    high: Array,
    reach_mm: float,
    accuracy_mm: float = ACCURACY_MM,
    degrees: tuple[int, int] = (14, 11),
    depth: int = 0,
) -> list[Tile]:
    """Cover a rectangle with tiles on which the polynomials keep to the solved poses.

    poses : (u, v) arrays → (n, 12); reach_mm : distance of the farthest vertex, which turns an error of the
    rotation into one of a point.
    """
    wide = high > low
    counts = [degrees[k] if wide[k] else 1 for k in range(2)]
    # one call solves the nodes and, half-way between them and at the corners, where the polynomial is farthest off
    at_nodes = [_spread(low[k], high[k], nodes(counts[k])) for k in range(2)]
    between = [_spread(low[k], high[k], _half_way(counts[k])) for k in range(2)]
    both = [np.meshgrid(*lines, indexing="ij") for lines in (at_nodes, between)]
    u, v = (np.concatenate([mesh[k].ravel() for mesh in both]) for k in range(2))
    solved = poses(u, v)
    number = counts[0] * counts[1]
    coefficients = fit(solved[:number].reshape(counts[0], counts[1], 12))
    tile = Tile(low, high, coefficients, 0.0, np.zeros((2, 2)))
    apart = np.abs(evaluate(tile, u[number:], v[number:]) - solved[number:])
    error = float(np.max(apart[:, :9].max(axis=1) * 3.0 * reach_mm + apart[:, 9:].max(axis=1) * 1.7321))
    if error <= accuracy_mm or depth >= MOST_HALVINGS:
        return [Tile(low, high, coefficients, error, _third(coefficients, low, high, reach_mm))]
    # halve along the axis whose last coefficients are the larger ones
    tail = [float(np.abs(np.take(coefficients, [-1, -2], axis=k)).max()) if wide[k] else 0.0 for k in range(2)]
    axis = int(np.argmax(tail))
    middle = (low[axis] + high[axis]) / 2.0
    first_high, second_low = high.copy(), low.copy()
    first_high[axis] = second_low[axis] = middle
    rest = (reach_mm, accuracy_mm, degrees, depth + 1)
    return [*tiles(poses, low, first_high, *rest), *tiles(poses, second_low, high, *rest)]


def _third(coefficients: Array, low: Array, high: Array, reach_mm: float) -> Array:
    """Bounds of a point's third derivatives, (2, 2): of f_uu in u and v, of f_vv in u and v.

    On −1…1 the k-th derivative of a Chebyshev polynomial is greatest at the ends, where it is known; the sum over the
    coefficients bounds the whole (T. J. Rivlin, *Chebyshev Polynomials*, 1990, from memory).
    """
    sizes = np.abs(coefficients)
    scale = [2.0 / (high[k] - low[k]) if high[k] > low[k] else 0.0 for k in range(2)]

    def bound(du: int, dv: int) -> float:
        ends_u = _end_values(coefficients.shape[0], du) * scale[0] ** du
        ends_v = _end_values(coefficients.shape[1], dv) * scale[1] ** dv
        each = np.einsum("i,j,ijk->k", ends_u, ends_v, sizes)
        return float(np.linalg.norm(each[:9]) * reach_mm + np.linalg.norm(each[9:]))

    return np.array([[bound(3, 0), bound(2, 1)], [bound(1, 2), bound(0, 3)]])


def _end_values(count: int, order: int) -> Array:
    """Greatest size of the derivative of that order of T₀… on −1…1: ∏ (k² − m²)/(2m + 1), m below the order."""
    k = np.arange(count, dtype=float)
    value = np.ones(count)
    for m in range(order):
        value = value * np.maximum(k * k - m * m, 0.0) / (2.0 * m + 1.0)
    return value


def evaluate(tile: Tile, u: Array, v: Array) -> Array:
    """Values (n, 12) at points of a tile."""
    out = np.empty((len(u), 12))
    values_at(tile.coefficients, tile.low, tile.high, np.asarray(u, float), np.asarray(v, float), 0, 0, out)
    return out
