"""Poses and second derivatives from Chebyshev coefficients, compiled; the cell that a proof looks at."""

from __future__ import annotations

from typing import NamedTuple, TypeAlias

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.clearance.compiled import compiled

Array: TypeAlias = NDArray[np.float64]


class Cell(NamedTuple):
    """A cell of the motion: its middle pose (0) and corner poses (1 to 4), and second derivatives at all five.

    rotations (5, 3, 3), shifts (5, 3); bends_u, bent_u and bends_v, bent_v : the same of the second derivatives;
    width_u, width_v; spare_u, spare_v : by how much a second derivative between the five can exceed theirs.
    """

    rotations: Array
    shifts: Array
    bends_u: Array
    bent_u: Array
    bends_v: Array
    bent_v: Array
    width_u: float
    width_v: float
    spare_u: float
    spare_v: float


@compiled
def cell_of(coefficients, low, high, spare, ulo, uhi, vlo, vhi):
    """The cell ulo…uhi × vlo…vhi of a tile.

    No point of a cell is farther from the nearest of its middle and corners than half the cell's width in u and half
    in v, taken together as shares: so much can a second derivative differ from the nearest one known.
    """
    us = np.array([(ulo + uhi) / 2.0, ulo, uhi, ulo, uhi])
    vs = np.array([(vlo + vhi) / 2.0, vlo, vlo, vhi, vhi])
    values = np.empty((3, 5, 12))
    values_at(coefficients, low, high, us, vs, 0, 0, values[0])
    values_at(coefficients, low, high, us, vs, 2, 0, values[1])
    values_at(coefficients, low, high, us, vs, 0, 2, values[2])
    turns = np.empty((3, 5, 3, 3))
    shifts = np.empty((3, 5, 3))
    for kind in range(3):
        for pose in range(5):
            for i in range(3):
                shifts[kind, pose, i] = values[kind, pose, 9 + i]
                for j in range(3):
                    turns[kind, pose, i, j] = values[kind, pose, 3 * i + j]
    half_u, half_v = (uhi - ulo) / 2.0, (vhi - vlo) / 2.0
    return Cell(
        turns[0],
        shifts[0],
        turns[1],
        shifts[1],
        turns[2],
        shifts[2],
        uhi - ulo,
        vhi - vlo,
        max(spare[0, 0] * half_u, spare[0, 1] * half_v),
        max(spare[1, 0] * half_u, spare[1, 1] * half_v),
    )


@compiled
def _basis(x, scale, order, out):
    """Chebyshev polynomials at x, or their second derivatives times scale²."""
    n = len(out)
    if order == 0:
        for k in range(n):
            out[k] = 1.0 if k == 0 else (x if k == 1 else 2.0 * x * out[k - 1] - out[k - 2])
        return
    t0, t1, d0, d1, e0, e1 = 1.0, x, 0.0, 1.0, 0.0, 0.0
    for k in range(n):
        if k == 0 or k == 1:
            out[k] = 0.0
        else:
            e2 = 4.0 * d1 + 2.0 * x * e1 - e0
            d2 = 2.0 * t1 + 2.0 * x * d1 - d0
            t2 = 2.0 * x * t1 - t0
            out[k] = e2 * scale * scale
            t0, t1, d0, d1, e0, e1 = t1, t2, d1, d2, e1, e2


@compiled
def values_at(coefficients, low, high, u, v, order_u, order_v, out):
    """Write values (n, 12), or second derivatives in u or v, at points."""
    nu, nv = coefficients.shape[0], coefficients.shape[1]
    bu, bv = np.empty(nu), np.empty(nv)
    su = 2.0 / (high[0] - low[0]) if high[0] > low[0] else 0.0
    sv = 2.0 / (high[1] - low[1]) if high[1] > low[1] else 0.0
    for n in range(len(u)):
        _basis((u[n] - low[0]) * su - 1.0 if su > 0.0 else 0.0, su, order_u, bu)
        _basis((v[n] - low[1]) * sv - 1.0 if sv > 0.0 else 0.0, sv, order_v, bv)
        for k in range(12):
            out[n, k] = 0.0
        for i in range(nu):
            if bu[i] == 0.0:
                continue
            for j in range(nv):
                weight = bu[i] * bv[j]
                for k in range(12):
                    out[n, k] += weight * coefficients[i, j, k]


@compiled
def height(direction, rotation, shift, point):
    """direction · (rotation point + shift)."""
    total = 0.0
    for i in range(3):
        moved = shift[i]
        for k in range(3):
            moved += rotation[i, k] * point[k]
        total += direction[i] * moved
    return total
