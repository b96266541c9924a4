"""The smallest gap of each pair over a grid of poses, sharpened around the smallest: a search, not a proof.

Distances come from python-fcl, imported when the first one is asked for. A pose is passed over only when a distance
already known, less how far the part can have moved since, cannot beat the smallest found so far: the answer is that
of the whole grid.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import TypeAlias

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.clearance.gap import Gap, Verdict, relative_poses, sound_faces, worst_first
from knucklepath.kinematics.clearance.inside import is_closed, wholly_inside
from knucklepath.kinematics.clearance.pairs import Pair
from knucklepath.kinematics.clearance.solids import Solid
from knucklepath.kinematics.motion import Motion, solve_motion
from knucklepath.kinematics.wheel import Corner

Array: TypeAlias = NDArray[np.float64]

#: Sharpening stops when its steps are below this share of the motion's width, whatever the tolerance.
FINEST_SHARE = 1e-5
#: Steps of sharpening, at most.
MOST_STEPS = 60
#: Gains below this, mm, are rounding.
UNMOVED = 1e-9


class _Body:
    """One solid prepared for distances."""

    def __init__(self, solid: Solid) -> None:
        import fcl

        self.solid = solid
        vertices = np.ascontiguousarray(solid.vertices, dtype=float)
        faces = sound_faces(solid, vertices)
        self.vertices, self.faces = vertices, faces
        self.closed = is_closed(vertices, faces)
        model = fcl.BVHModel()
        model.beginModel(len(vertices), len(faces))
        model.addSubModel(vertices, faces)
        model.endModel()
        self.object = fcl.CollisionObject(model, fcl.Transform())
        used = vertices[np.unique(faces)]
        low, high = used.min(axis=0), used.max(axis=0)
        self.corners = np.array(
            [[x, y, z] for x in (low[0], high[0]) for y in (low[1], high[1]) for z in (low[2], high[2])]
        )


class _Search:
    """Distances of one pair at poses of the motion."""

    def __init__(self, pair: Pair, bodies: dict[str, _Body], corner: Corner) -> None:
        self.pair, self.corner = pair, corner
        self.still, self.moving = bodies[pair.a.name], bodies[pair.b.name]
        self.evaluations = 0

    def distance(self, rotation: Array, translation: Array) -> tuple[float, Array, Array]:
        """Distance and nearest points in the frame of body a; 0 when the surfaces meet."""
        import fcl

        self.evaluations += 1
        self.moving.object.setTransform(
            fcl.Transform(np.ascontiguousarray(rotation), np.ascontiguousarray(translation))
        )
        request = fcl.DistanceRequest(enable_nearest_points=True)
        result = fcl.DistanceResult()
        value = float(fcl.distance(self.still.object, self.moving.object, request, result))
        on_a, on_b = (np.array(point, dtype=float) for point in result.nearest_points)
        if value <= 0.0:
            return 0.0, on_a, on_a
        return value, on_a, on_b

    def inside(self, rotation: Array, translation: Array) -> str | None:
        """Name of the part that lies wholly inside the other at a pose where the surfaces do not meet, or None."""
        moved = self.moving.vertices @ rotation.T + translation
        if self.still.closed and wholly_inside(moved, self.moving.faces, self.still.vertices, self.still.faces):
            return self.moving.solid.name
        if self.moving.closed and wholly_inside(self.still.vertices, self.still.faces, moved, self.moving.faces):
            return self.still.solid.name
        return None


def sampled_gaps(
    motion: Motion,
    pairs: Sequence[Pair],
    *,
    tolerance_mm: float = 0.05,
    progress: Callable[[int, int], None] | None = None,
) -> list[Gap]:
    """Search the smallest gap of every pair.

    Parameters
    ----------
    motion : over a grid of poses; those that cannot be reached are passed over.
    pairs : what to check.
    tolerance_mm : sharpening goes on while a step can gain more than this.
    progress : called with (done, total) after each pair.

    Returns
    -------
    A Gap for each pair, worst first: touching, then by how much is missing.

    Raises
    ------
    MeshError : a solid has no triangle with an area, or coordinates that are not finite.
    """
    bodies: dict[str, _Body] = {}
    gaps: list[Gap] = []
    for done, pair in enumerate(pairs, 1):
        for solid in (pair.a, pair.b):
            if solid.name not in bodies:
                bodies[solid.name] = _Body(solid)
        gaps.append(_search(motion, pair, bodies, tolerance_mm))
        if progress is not None:
            progress(done, len(pairs))
    return worst_first(gaps)


def _search(motion: Motion, pair: Pair, bodies: dict[str, _Body], tolerance_mm: float) -> Gap:
    search = _Search(pair, bodies, motion.corner)
    reached = np.flatnonzero(motion.reached.reshape(-1))
    flat = motion[np.unravel_index(reached, motion.shape)] if motion.shape else motion
    rotations, translations = relative_poses(flat, pair.a.body, pair.b.body)
    travel, rack = flat.travel_mm.reshape(-1), flat.rack_mm.reshape(-1)
    # the pose nearest to design comes first: it is the one to report where nothing moves against anything
    start = int(np.argmin(travel**2 + rack**2))
    best, at, points = _over_grid(search, rotations, translations, start)
    # surfaces that never meet keep their sides, so one inside test at one pose settles the whole grid
    within = search.inside(rotations[at], translations[at]) if best > 0.0 else None
    pose = (float(travel[at]), float(rack[at]))
    place = flat[at] if flat.shape else flat
    if best > 0.0 and within is None:
        best, pose, points, place = _sharpen(search, motion, best, pose, points, place, tolerance_mm)
    turn, shift = place.rotation(pair.a.body), place.translation(pair.a.body)
    on_a, on_b = (turn @ point + shift for point in points)
    note = ""
    if within is not None:
        best, note = 0.0, f"{within} lies wholly inside {pair.b.name if within == pair.a.name else pair.a.name}."
        on_b = on_a
    elif not (search.still.closed and search.moving.closed):
        opened = [body.solid.name for body in (search.still, search.moving) if not body.closed]
        note = (
            f"{' and '.join(opened)}: open mesh, so being wholly inside cannot be told; distances to its surface hold."
        )
    verdict: Verdict = "touching" if best <= 0.0 else "tight" if best < pair.required_mm else "undecided"
    return Gap(
        between=(pair.a.name, pair.b.name),
        required_mm=float(pair.required_mm),
        verdict=verdict,
        gap_mm=float(best),
        proven_gap_mm=None,
        travel_mm=pose[0],
        rack_mm=pose[1],
        point_a_mm=on_a,
        point_b_mm=on_b,
        evaluations=search.evaluations,
        note=note,
    )


def _over_grid(
    search: _Search, rotations: Array, translations: Array, start: int
) -> tuple[float, int, tuple[Array, Array]]:
    """Smallest distance over all given poses, which pose, and the nearest points in the frame of body a.

    A point of the moving body goes no farther between two poses than the farthest corner of its box does (the
    difference of two rigid motions is affine, its length convex), and a distance changes by no more than that.
    """
    places = np.einsum("nij,kj->nki", rotations, search.moving.corners) + translations[:, None]
    bound = np.full(len(rotations), -np.inf)
    best, at, points = np.inf, 0, (np.zeros(3), np.zeros(3))
    index = start
    while True:
        value, on_a, on_b = search.distance(rotations[index], translations[index])
        if value < best:
            best, at, points = value, index, (on_a, on_b)
        moved = np.sqrt(((places - places[index]) ** 2).sum(axis=2).max(axis=1))
        np.maximum(bound, value - moved, out=bound)
        bound[index] = np.inf
        index = int(bound.argmin())
        if best <= 0.0 or bound[index] >= best - UNMOVED:
            return best, at, points


def _sharpen(
    search: _Search,
    motion: Motion,
    best: float,
    pose: tuple[float, float],
    points: tuple[Array, Array],
    place: Motion,
    tolerance_mm: float,
) -> tuple[float, tuple[float, float], tuple[Array, Array], Motion]:
    """Go downhill from the grid's smallest gap by a pattern search within the motion's rectangle.

    A step of (du, dv) moves no point by more than the poses tried show; when four tries gain nothing the step is
    halved, until what it could still gain is below the tolerance.
    """
    corner, pair = motion.corner, search.pair
    low = np.array([motion.travel_mm.min(), motion.rack_mm.min()])
    high = np.array([motion.travel_mm.max(), motion.rack_mm.max()])
    width = high - low
    counts = np.array([len(np.unique(motion.travel_mm)), len(np.unique(motion.rack_mm))])
    step = width / np.maximum(counts - 1, 1) / 2.0
    at = np.array(pose)
    for _ in range(MOST_STEPS):
        if (step <= FINEST_SHARE * width).all():
            break
        tries = np.array([at + sign * unit * step for unit in np.eye(2) for sign in (1.0, -1.0)])
        tries = np.unique(np.clip(tries, low, high), axis=0)
        tries = tries[(tries != at).any(axis=1)]
        if not len(tries):
            break
        near = solve_motion(corner, tries[:, 0], tries[:, 1])
        rotations, translations = relative_poses(near, pair.a.body, pair.b.body)
        found = [(*search.distance(rotations[k], translations[k]), k) for k in range(len(tries)) if near.reached[k]]
        gained = 0.0
        reach = max((abs(value - best) for value, *_ in found), default=0.0)
        if found:
            value, on_a, on_b, k = min(found, key=lambda item: item[0])
            if value < best - UNMOVED:
                gained = best - value
                best, points, place, at = value, (on_a, on_b), near[k], tries[k]
        if best <= 0.0:
            break
        if gained < 0.25 * tolerance_mm:
            if reach < 0.25 * tolerance_mm:
                break
            step = step / 2.0
    return best, (float(at[0]), float(at[1])), points, place
