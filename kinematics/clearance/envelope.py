"""The volume that a part sweeps over the whole motion, as a watertight mesh that contains every pose of it.

A sampled distance function says more than it seems to. For any closed set S and any points xᵢ with weights wᵢ ≥ 0,
Σwᵢ = 1 and mean x, the distances obey

    Σ wᵢ d(xᵢ)  ≤  √(d(x)² + Σ wᵢ |xᵢ − x|²)

(take the point of S nearest to x and Jensen's inequality). Every stage here is such a mean: a point of the mesh between
grid points of the envelope, a pose between solved poses, a value between grid points of the part's distance field. So
their errors add as squares, and a contour at

    level² = margin² + ¾ step² + ¾ field step² + ¼ (pose steps)² + what the poses' paths are curved

contains everything within the margin of every pose, in between too. A point x outside the contour in a cube of the
grid is a mean of grid points outside and of crossings; were it not, a plane would part it from all of them, and beyond
a plane through a cube there is a corner, which then is inside and so is x.

Importing this module imports numba.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from math import ceil, hypot, sqrt
from typing import TypeAlias

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.clearance.compiled import is_kept
from knucklepath.kinematics.clearance.contour import contour
from knucklepath.kinematics.clearance.field import DistanceField, distance_field, finest_step, flood
from knucklepath.kinematics.clearance.gap import relative_poses, sound_faces
from knucklepath.kinematics.clearance.primitives import signed_volume
from knucklepath.kinematics.clearance.solids import Solid
from knucklepath.kinematics.clearance.sweeping import BLOCK, STRIDES, Field, Grid, Sweep, sweep_slab
from knucklepath.kinematics.clearance.threads import in_threads
from knucklepath.kinematics.errors import MeshError, ReachError
from knucklepath.kinematics.motion import solve_motion
from knucklepath.kinematics.wheel import Corner

Array: TypeAlias = NDArray[np.float64]
Faces: TypeAlias = NDArray[np.int32]
Range: TypeAlias = tuple[float, float]

#: Shares of the squared level that the envelope's grid, the poses and the part's field take up.
SHARES = (0.60, 0.20, 0.20)
#: What is left of it for curved paths.
CURVED_SHARE = 0.03
#: The square that they share is at most this many times the squared accuracy.
MOST_BUDGET = 2.0
#: Second differences of paths between solved poses may exceed those at solved poses by this factor.
CURVATURE_SAFETY = 1.5
#: Points of the envelope's grid, and of the part's field, at most: 4 bytes each.
MOST_POINTS, MOST_FIELD = 80_000_000, 60_000_000
#: Finer than this, mm, no grid of that many points is.
LEAST_ACCURACY = 0.1
#: Large cubes of space look at every fourth point of the field, which stays in the processor's cache.
COARSER = 4
#: Poses of each input at most.
MOST_POSES = 801
#: Poses of each input that tell how fast the part moves.
FIRST_POSES = 9
#: What rounding to 4-byte numbers may take from the margin, in the mesh's files too, mm.
ROUNDING = 1e-3
#: No vertex of the mesh is nearer than about this to a grid point, mm, so that none coincide in 4-byte numbers.
KEPT_APART = 0.02


def engine_is_compiled() -> bool:
    """True when the machine code lies ready from an earlier run."""
    return is_kept(sweep_slab)


@dataclass(frozen=True)
class Envelope:
    """A swept volume as seen from a body.

    Attributes
    ----------
    vertices (n, 3) mm, faces (m, 3) : watertight, wound outward, without closed cavities.
    volume_mm3, low (3,), high (3,) : of the mesh.
    margin_mm : it exceeds the sweep by at least this everywhere.
    convex_fatness_mm : where the sweep is flat or bulges it exceeds it by at most this.
    fatness_mm : it exceeds it by at most this everywhere, but for closed cavities, which are filled.
    poses : poses of the part that were joined.
    """

    vertices: Array
    faces: Faces
    volume_mm3: float
    low: Array
    high: Array
    margin_mm: float
    convex_fatness_mm: float
    fatness_mm: float
    poses: int


@dataclass(frozen=True)
class _Poses:
    """Solved poses on a grid: from the place where the envelope stands into the part, y = turns x + shifts.

    turns (nu, nv, 3, 3), shifts (nu, nv, 3); steps (2,) : longest way of a point from a pose to the next along travel
    and rack, mm; bend : farthest that a path's middle leaves the line between its neighbours, both together, mm.
    """

    turns: Array
    shifts: Array
    steps: Array
    bend: float


def swept_envelope(
    corner: Corner,
    solid: Solid,
    travel_mm: Range,
    rack_mm: Range = (0.0, 0.0),
    *,
    on: str = "chassis",
    margin_mm: float = 1.0,
    accuracy_mm: float = 2.8,
    progress: Callable[[int, int], None] | None = None,
) -> Envelope:
    """Sweep a solid over a rectangle of the motion.

    Parameters
    ----------
    travel_mm, rack_mm : the motion's rectangle, lowest and highest.
    on : the body as seen from which the part moves.
    margin_mm : by how much the mesh must exceed the sweep at least.
    accuracy_mm : by how much more it may exceed it where the sweep is flat or bulges. Parts too large for the grid
        get less; ``convex_fatness_mm`` says what was reached.
    progress : called with (done, total).

    Returns
    -------
    Envelope. An open mesh gives the sweep of its surface, fattened, with what that encloses.

    Raises
    ------
    ReachError : the mechanism locks within the rectangle.
    MeshError : the solid has no triangle with an area, or coordinates that are not finite.
    MechanismError : there is no body ``on``.
    ValueError : a negative margin, or an accuracy below LEAST_ACCURACY.
    """
    if margin_mm < 0.0 or accuracy_mm < LEAST_ACCURACY:
        raise ValueError(f"margin_mm must not be negative and accuracy_mm must be at least {LEAST_ACCURACY} mm")
    corner.body(on)
    vertices = np.ascontiguousarray(solid.vertices, dtype=float)
    faces = sound_faces(solid, vertices)
    used = vertices[np.unique(faces)]
    margin, pad = margin_mm + ROUNDING, margin_mm + accuracy_mm
    # a large margin would let the steps grow until hollow corners are filled
    budget = min((pad - KEPT_APART) ** 2 - margin**2, MOST_BUDGET * accuracy_mm**2) * (1.0 - CURVED_SHARE)
    poses = _solve(corner, (on, solid.body), travel_mm, rack_mm, used, sqrt(4.0 * SHARES[1] * budget), margin_mm)
    places = np.einsum("uvji,uvpj->uvpi", poses.turns, _box_corners(used, 0.0) - poses.shifts[..., None, :])
    low, high = places.reshape(-1, 3).min(axis=0), places.reshape(-1, 3).max(axis=0)
    step = finest_step(high - low, sqrt(SHARES[0] * budget / 0.75), pad, MOST_POINTS)
    field_step = finest_step(np.ptp(used, axis=0), sqrt(SHARES[2] * budget / 0.75), pad + step, MOST_FIELD)
    level = _level(margin, step, field_step, poses)
    field = distance_field(vertices, faces, field_step, level + step)
    origin = low - (level + 2.0 * step)
    shape = np.ceil((high + level + 2.0 * step - origin) / step).astype(np.int64) + 1
    values = _union(field, poses, origin, step, tuple(shape), level, margin, progress)
    # what no way from outside leads to is inside: this fills the part itself and closed cavities
    np.minimum(values, level - KEPT_APART, out=values, where=~flood(values, level))
    mesh, triangles = contour(values, level, origin, step)
    if not len(triangles):
        raise MeshError(f"part '{solid.name}' leaves no volume")
    loose = sqrt(0.75) * (step + field.step)
    return Envelope(
        vertices=mesh,
        faces=triangles,
        volume_mm3=signed_volume(mesh - origin, triangles),
        low=mesh.min(axis=0),
        high=mesh.max(axis=0),
        margin_mm=margin_mm,
        convex_fatness_mm=level + KEPT_APART,
        fatness_mm=level + KEPT_APART + loose,
        poses=poses.turns.shape[0] * poses.turns.shape[1],
    )


def _level(margin: float, step: float, field_step: float, poses: _Poses) -> float:
    squares = margin**2 + 0.75 * (step**2 + field_step**2) + _spread(poses, 1)
    return sqrt(squares + _curved(margin, step, poses, 1))


def _spread(poses: _Poses, stride: int) -> float:
    """Greatest mean square distance of a path's points at a pose cell's corners from their mean, mm²."""
    return float(stride**2 * (poses.steps @ poses.steps) / 4.0)


def _curved(margin: float, step: float, poses: _Poses, stride: int) -> float:
    """What bent paths add to the squared level, mm²: grid points within a cube's diagonal and the margin of a part."""
    bend = poses.bend * stride**2
    return 2.0 * (margin + sqrt(3.0) * step) * bend + bend**2


def _box_corners(points: Array, pad: float) -> Array:
    """(8, 3) corners of the box about points (n, 3)."""
    low, high = points.min(axis=0) - pad, points.max(axis=0) + pad
    bits = np.arange(8)[:, None] >> np.arange(3) & 1
    return np.asarray(np.where(bits, high, low), dtype=float)


def _solve(
    corner: Corner, bodies: tuple[str, str], travel: Range, rack: Range, used: Array, longest: float, margin: float
) -> _Poses:
    """Poses so close that no point of the part goes farther than hypot(step, step) = ``longest`` between them."""
    counts = [FIRST_POSES if high > low else 1 for low, high in (travel, rack)]
    points = _box_corners(used, margin + 2.0 * STRIDES[0] * longest)
    while True:
        poses = _measured(corner, bodies, travel, rack, counts, points)
        if hypot(*poses.steps) <= longest:
            return poses
        each = longest / sqrt(float(np.count_nonzero(poses.steps)))
        wished = [
            STRIDES[0] * ceil((counts[k] - 1) * poses.steps[k] / each / STRIDES[0]) + 1 if counts[k] > 1 else 1
            for k in range(2)
        ]
        wished = [min(max(wished[k], counts[k]), MOST_POSES) for k in range(2)]
        if wished == counts:
            return poses
        counts = wished


def _measured(
    corner: Corner, bodies: tuple[str, str], travel: Range, rack: Range, counts: list[int], points: Array
) -> _Poses:
    lines = [np.linspace(*limits, count) for limits, count in zip((travel, rack), counts, strict=True)]
    motion = solve_motion(corner, lines[0][:, None], lines[1][None])
    if not motion.reached.all():
        first = np.argwhere(~motion.reached)[0]
        at = float(lines[0][first[0]])
        raise ReachError(
            f"the mechanism locks within the motion, for example at travel {at:+.1f} mm, rack "
            f"{lines[1][first[1]]:+.1f} mm: an envelope needs every pose; reduce the motion",
            input="travel",
            limit=at,
        )
    # the pose of ``on`` as seen from the part: it takes a point beside the part into the part's own frame
    turns, shifts = relative_poses(motion, bodies[1], bodies[0])
    turns, shifts = turns.reshape(*counts, 3, 3), shifts.reshape(*counts, 3)
    steps, bend = np.zeros(2), 0.0
    for axis in range(2):
        if counts[axis] == 1:
            continue
        r, t = np.moveaxis(turns, axis, 0), np.moveaxis(shifts, axis, 0)
        # where a point that is at ``points`` of the part at one pose is at the pose after it, and at the one before
        after = _carried(r[:-1], t[:-1], r[1:], t[1:], points)
        before = _carried(r[1:], t[1:], r[:-1], t[:-1], points)
        steps[axis] = max(np.linalg.norm(way - points, axis=-1).max() for way in (after, before))
        second = np.linalg.norm(after[1:] - 2.0 * points + before[:-1], axis=-1).max()
        bend += CURVATURE_SAFETY * float(second) / 8.0
    return _Poses(np.ascontiguousarray(turns), np.ascontiguousarray(shifts), steps, bend)


def _carried(r: Array, t: Array, r_next: Array, t_next: Array, points: Array) -> Array:
    """Places (..., p, 3) in the part at the next pose of what is at ``points`` (p, 3) of the part now."""
    outside = np.einsum("...ji,...pj->...pi", r, points - t[..., None, :])
    return np.einsum("...ij,...pj->...pi", r_next, outside) + t_next[..., None, :]


def _union(
    field: DistanceField,
    poses: _Poses,
    origin: Array,
    step: float,
    shape: tuple[int, ...],
    level: float,
    margin: float,
    progress: Callable[[int, int], None] | None,
) -> NDArray[np.float32]:
    """The least distance over all poses at every grid point, as far as the contour needs it."""
    values = np.empty(shape, dtype=np.float32)
    one = _spread(poses, 1) + _curved(margin, step, poses, 1)
    extra = np.array([_spread(poses, s) + _curved(margin, step, poses, s) - one for s in STRIDES])
    turns_u, turns_v = poses.turns.shape[:2]
    cap, enough = level + step, max(level - step, 0.0)
    count = turns_u * turns_v
    shifts = poses.shifts.reshape(count, 3) - field.origin
    into_field = np.concatenate((poses.turns.reshape(count, 9), shifts), axis=1) / field.step
    sweep = Sweep(into_field, turns_u, turns_v, extra)
    fine, coarse = _flat(field, 1), _flat(field, COARSER)
    grid = Grid(origin, step, level, cap, enough, KEPT_APART)
    slabs = [(start, min(start + BLOCK, shape[0])) for start in range(0, shape[0], BLOCK)]
    in_threads(lambda slab: sweep_slab(fine, coarse, sweep, grid, values, *slab), slabs, progress)
    return values


def _flat(field: DistanceField, every: int) -> Field:
    """A field with only each n-th point along every axis, for the kernel."""
    values = np.ascontiguousarray(field.values[::every, ::every, ::every])
    nx, ny, nz = values.shape
    low, high = ((end - field.origin) / field.step for end in (field.low, field.high))
    return Field(values.reshape(-1), (nx, ny, nz), 1.0 / every, field.step * every, low, high)


__all__ = ["Envelope", "engine_is_compiled", "swept_envelope"]
