"""Many small linear systems at once, with the poses on the last axis. Knows no mechanism.

LAPACK solves a 6 × 6 system in about 2 µs, most of it call overhead. Elimination written over whole arrays,
the pose axis last and contiguous, is several times cheaper; its pivot order is found once, with complete
pivoting, on a matrix typical of all, and systems for which that order is poor go to LAPACK.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

#: A pivot this much smaller than the typical system's makes the fixed order doubtful.
POOR_PIVOT = 1e-5


@dataclass(frozen=True)
class PivotOrder:
    """Row and column order of elimination, found with complete pivoting on a typical matrix.

    ``sign`` is the sign of the two permutations together; ``pivots`` (n,) are the typical pivots' sizes.
    """

    rows: NDArray[np.intp]
    columns: NDArray[np.intp]
    sign: float
    pivots: Array


def pivot_order(matrix: Array) -> PivotOrder:
    """Find the order of elimination of a typical (n, n) matrix by complete pivoting."""
    work = np.array(matrix, dtype=float)
    n = len(work)
    rows, columns, sign = np.arange(n), np.arange(n), 1.0
    pivots = np.zeros(n)
    for k in range(n):
        block = np.abs(work[k:, k:])
        i, j = np.unravel_index(int(np.argmax(block)), block.shape)
        for order, axis, other in ((rows, 0, k + int(i)), (columns, 1, k + int(j))):
            if other != k:
                order[[k, other]] = order[[other, k]]
                swapped = np.take(work, [other, k], axis=axis)
                work[(slice(None),) * axis + ([k, other],)] = swapped
                sign = -sign
        pivots[k] = abs(work[k, k])
        if pivots[k] > 0.0:
            work[k + 1 :, k:] -= np.outer(work[k + 1 :, k] / work[k, k], work[k, k:])
    return PivotOrder(rows, columns, sign, pivots)


def solve_many(matrix: Array, right: Array, order: PivotOrder, work: Array | None = None) -> tuple[Array, Array]:
    """Solve B systems of n equations for k right-hand sides.

    Parameters
    ----------
    matrix : (n, n, B).
    right : (n, k, B).
    order : pivot order of a typical matrix.
    work : (n, n + k or more, B) to work in, contents lost; made anew where not given.

    Returns
    -------
    solutions (n, k, B) — nan where a system is singular — and determinants (B,).
    """
    n, k = right.shape[:2]
    work = np.empty((n, n + k, matrix.shape[-1])) if work is None else work[:, : n + k]
    for target, row in enumerate(order.rows):
        # not "raise": that mode takes into a copy first
        np.take(matrix[row], order.columns, axis=0, out=work[target, :n], mode="clip")
        work[target, n:] = right[row]
    determinant = np.full(matrix.shape[-1], order.sign)
    poor = np.zeros(matrix.shape[-1], dtype=bool)
    with np.errstate(all="ignore"):
        for i in range(n):
            pivot = work[i, i]
            poor |= ~(np.abs(pivot) > POOR_PIVOT * order.pivots[i])
            determinant *= pivot
            work[i, i + 1 :] /= pivot
            for j in range(i + 1, n):
                work[j, i + 1 :] -= work[j, i] * work[i, i + 1 :]
        result = np.empty_like(right)
        for i in range(n - 1, -1, -1):
            value = work[i, n:]
            for j in range(i + 1, n):
                value -= work[i, j] * work[j, n:]
            result[order.columns[i]] = value
    if poor.any():
        result[..., poor], determinant[poor] = _lapack(matrix[..., poor], right[..., poor])
    return result, determinant


def _lapack(matrix: Array, right: Array) -> tuple[Array, Array]:
    """Solve the doubtful ones with partial pivoting; singular and non-finite systems give nan."""
    a, b = np.moveaxis(matrix, -1, 0), np.moveaxis(right, -1, 0)
    usable = np.isfinite(a).all(axis=(1, 2)) & np.isfinite(b).all(axis=(1, 2))
    determinant = np.full(len(a), np.nan)
    result = np.full(b.shape, np.nan)
    determinant[usable] = np.linalg.det(a[usable])
    usable &= determinant != 0.0
    result[usable] = np.linalg.solve(a[usable], b[usable])
    return np.moveaxis(result, 0, -1), determinant
