"""The smallest gap of each pair over a grid of poses, sharpened around the smallest: a search, not a proof.

Distances come from python-fcl, imported when the first one is asked for. A pose is passed over only when a distance
already known, less how far the part can have moved since, cannot beat the smallest found so far, and is above zero:
the answer is that of the whole grid, for surfaces that meet as for a part wholly inside another.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from functools import cached_property
from typing import TypeAlias

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.clearance.contact import meeting_point
from knucklepath.kinematics.clearance.gap import Gap, Verdict, relative_poses, sound_faces, worst_first
from knucklepath.kinematics.clearance.inside import any_inside, is_closed, one_vertex_of_each_piece, without_repeats
from knucklepath.kinematics.clearance.pairs import Pair
from knucklepath.kinematics.clearance.relief import relief_note, relieved
from knucklepath.kinematics.clearance.solids import Solid
from knucklepath.kinematics.errors import ReachError
from knucklepath.kinematics.motion import Motion, solve_motion
from knucklepath.kinematics.wheel import Corner

Array: TypeAlias = NDArray[np.float64]

#: Sharpening stops when its steps are below this share of the motion's width, whatever the tolerance.
FINEST_SHARE = 1e-5
#: Steps of sharpening, at most.
MOST_STEPS = 60
#: Gains below this, mm, are rounding.
UNMOVED = 1e-9
#: Directions of the tries, in steps of travel and rack.
AROUND = np.array([(u, v) for u in (-1.0, 0.0, 1.0) for v in (-1.0, 0.0, 1.0) if u or v])


class _Body:
    """One solid prepared for distances."""

    def __init__(self, solid: Solid) -> None:
        import fcl

        self.solid = solid
        vertices = np.ascontiguousarray(solid.vertices, dtype=float)
        faces = sound_faces(solid, vertices)
        self.vertices, self.faces = vertices, faces
        self.shell = without_repeats(vertices, faces)
        # a triangle without area may be what joins its neighbours' edges, so the mesh as given counts as well
        self.closed = is_closed(vertices, self.shell) or is_closed(vertices, without_repeats(vertices, solid.faces))
        model = fcl.BVHModel()
        model.beginModel(len(vertices), len(faces))
        model.addSubModel(vertices, faces)
        model.endModel()
        self.model = model
        used = vertices[np.unique(faces)]
        low, high = used.min(axis=0), used.max(axis=0)
        self.corners = np.array(
            [[x, y, z] for x in (low[0], high[0]) for y in (low[1], high[1]) for z in (low[2], high[2])]
        )

    @cached_property
    def pieces(self) -> Array:
        """(k, 3) one vertex of each connected piece."""
        return one_vertex_of_each_piece(self.vertices, self.shell)


@dataclass(frozen=True)
class _Found:
    """A pose with its distance, in the frame of body a.

    gap : mm; on_a, on_b (3,) : nearest points; rotation (3, 3), translation (3,) : of body b; within : the name of
    the part that lies wholly inside the other, or None.
    """

    gap: float
    on_a: Array
    on_b: Array
    rotation: Array
    translation: Array
    within: str | None = None


class _Search:
    """Distances of one pair at poses of the motion."""

    def __init__(self, pair: Pair, bodies: dict[str, _Body], corner: Corner) -> None:
        import fcl

        self.pair, self.corner = pair, corner
        self.still, self.moving = bodies[pair.a.name], bodies[pair.b.name]
        # models are shared between pairs, their poses are not: what moves in one pair stands still in another
        self.still_object = fcl.CollisionObject(self.still.model, fcl.Transform())
        self.moving_object = fcl.CollisionObject(self.moving.model, fcl.Transform())
        self.evaluations = 0

    def distance(self, rotation: Array, translation: Array) -> _Found:
        """Distance and nearest points; 0 and a point of both surfaces when they meet."""
        import fcl

        self.evaluations += 1
        self.moving_object.setTransform(
            fcl.Transform(np.ascontiguousarray(rotation), np.ascontiguousarray(translation))
        )
        request = fcl.DistanceRequest(enable_nearest_points=True)
        result = fcl.DistanceResult()
        value = float(fcl.distance(self.still_object, self.moving_object, request, result))
        on_a, on_b = (np.array(point, dtype=float) for point in result.nearest_points)
        if value <= 0.0:
            # the engine names two triangles that meet; its points are then not on both of them
            still, moving = self.still, self.moving
            other = moving.vertices[moving.faces[result.b2]] @ rotation.T + translation
            on_a = on_b = meeting_point(still.vertices[still.faces[result.b1]], other)
            value = 0.0
        return _Found(value, on_a, on_b, rotation, translation)

    def checked(self, found: _Found) -> _Found:
        """The same pose as touching, when the surfaces do not meet but one part lies wholly inside the other."""
        if found.gap <= 0.0:
            return found
        still, moving = self.still, self.moving
        moved = moving.pieces @ found.rotation.T + found.translation
        # (X - t) R is X seen from body b
        back = (still.pieces - found.translation) @ found.rotation
        if still.closed and any_inside(moved, still.vertices, still.shell):
            within = moving.solid.name
        elif moving.closed and any_inside(back, moving.vertices, moving.shell):
            within = still.solid.name
        else:
            return found
        return _Found(0.0, found.on_a, found.on_a, found.rotation, found.translation, within)

    def moved(self, one: _Found, other: _Found) -> float:
        """No point of body b goes farther between two poses than this, mm, as seen from body a."""
        change = self.moving.corners @ (other.rotation - one.rotation).T + (other.translation - one.translation)
        return float(np.linalg.norm(change, axis=1).max())


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
    ReachError : the mechanism reaches no pose of the motion at all.
    """
    if pairs and not motion.reached.any():
        count = motion.reached.size
        raise ReachError(
            f"the mechanism reaches none of the {count} poses asked for, so there is no gap to measure; ask for less "
            "travel or rack",
            input="travel",
            limit=0.0,
        )
    bodies: dict[str, _Body] = {}
    gaps: list[Gap] = []
    for done, pair in enumerate(pairs, 1):
        if pair.relief:
            eased = replace(pair, a=relieved(pair.a, pair.relief), b=relieved(pair.b, pair.relief))
            own = {solid.name: _Body(solid) for solid in (eased.a, eased.b)}
            gaps.append(_search(motion, eased, own, tolerance_mm))
        else:
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
    found, at = _over_grid(search, rotations, translations, start)
    pose = (float(travel[at]), float(rack[at]))
    place = flat[at] if flat.shape else flat
    if found.gap > 0.0:
        found, pose, place = _sharpen(search, motion, found, pose, place, tolerance_mm)
    best = found.gap
    turn, shift = place.rotation(pair.a.body), place.translation(pair.a.body)
    on_a, on_b = (turn @ point + shift for point in (found.on_a, found.on_b))
    note = ""
    if pair.relief:
        note = relief_note(pair)
    elif found.within is not None:
        note = f"{found.within} lies wholly inside {pair.b.name if found.within == pair.a.name else pair.a.name}."
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


def _over_grid(search: _Search, rotations: Array, translations: Array, start: int) -> tuple[_Found, int]:
    """The smallest distance over all given poses, and which pose has it.

    A point of the moving body goes no farther between two poses than the farthest corner of its box does (the
    difference of two rigid motions is affine, its length convex), and a distance changes by no more than that. While
    it stays above zero the surfaces do not meet on the straight way from one pose to the other, so what lay outside
    stays outside: only a pose without such a bound needs an inside test.
    """
    places = np.einsum("nij,kj->nki", rotations, search.moving.corners) + translations[:, None]
    bound = np.full(len(rotations), -np.inf)
    best, at = None, start
    index = start
    while True:
        found = search.distance(rotations[index], translations[index])
        reach = found.gap
        if bound[index] <= 0.0:
            found = search.checked(found)
        if best is None or found.gap < best.gap:
            best, at = found, index
        moved = np.sqrt(((places - places[index]) ** 2).sum(axis=2).max(axis=1))
        np.maximum(bound, reach - moved, out=bound)
        bound[index] = np.inf
        index = int(bound.argmin())
        if best.gap <= 0.0 or bound[index] >= best.gap - UNMOVED:
            return best, at


def _sharpen(
    search: _Search,
    motion: Motion,
    best: _Found,
    pose: tuple[float, float],
    place: Motion,
    tolerance_mm: float,
) -> tuple[_Found, tuple[float, float], Motion]:
    """Go downhill from the grid's smallest gap by a pattern search within the motion's rectangle.

    Eight tries around the best pose; when they gain nothing, or less than counts, the step is halved, until what the
    tries differ by is below the tolerance.
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
        tries = np.unique(np.clip(at + AROUND * step, low, high), axis=0)
        tries = tries[(tries != at).any(axis=1)]
        if not len(tries):
            break
        near = solve_motion(corner, tries[:, 0], tries[:, 1])
        rotations, translations = relative_poses(near, pair.a.body, pair.b.body)
        found = [(search.distance(rotations[k], translations[k]), k) for k in range(len(tries)) if near.reached[k]]
        gained = 0.0
        spread = max((abs(item.gap - best.gap) for item, _ in found), default=0.0)
        if found:
            least, k = min(found, key=lambda item: item[0].gap)
            if least.gap < best.gap - UNMOVED:
                gained = best.gap - least.gap
                if search.moved(best, least) >= best.gap:
                    # far enough to have gone through the surface and come out inside
                    least = search.checked(least)
                best, place, at = least, near[k], tries[k]
        if best.gap <= 0.0:
            break
        if gained < 0.25 * tolerance_mm:
            if spread < 0.25 * tolerance_mm:
                break
            step = step / 2.0
    return best, (float(at[0]), float(at[1])), place
