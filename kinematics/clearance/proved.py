"""Every pair of a project proved or refuted over the whole motion. The front door of the proof engine.

Importing this module imports numba; ``sampled.py`` is the way for machines without it.
"""

from __future__ import annotations

import os
from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor, as_completed
from dataclasses import replace
from typing import TypeAlias

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.clearance.boxes import BoxTree, build_tree
from knucklepath.kinematics.clearance.compiled import is_kept
from knucklepath.kinematics.clearance.course import ACCURACY_MM, Tile, tiles
from knucklepath.kinematics.clearance.gap import Gap, Verdict, relative_poses, sound_faces, worst_first
from knucklepath.kinematics.clearance.inside import (
    is_closed,
    one_vertex_of_each_piece,
    winding_number,
    without_repeats,
)
from knucklepath.kinematics.clearance.pairs import Pair, Relief
from knucklepath.kinematics.clearance.proof import FAR, Search
from knucklepath.kinematics.clearance.relief import relief_note, relieved
from knucklepath.kinematics.clearance.sampled import sampled_gaps
from knucklepath.kinematics.clearance.solids import Solid
from knucklepath.kinematics.clearance.traverse import cell_holds, distance
from knucklepath.kinematics.motion import Motion, solve_motion
from knucklepath.kinematics.wheel import Corner

Array: TypeAlias = NDArray[np.float64]
Range: TypeAlias = tuple[float, float]

#: Poses that tell whether the mechanism locks within the motion, and that the sampled search uses where it does.
CHECK_GRID = (23, 15)

#: Said of a pair of which one part contains the other.
INSIDE = "{} and {}: one lies wholly inside the other."
#: A winding number that an open mesh should not have about something outside it.
DOUBTFUL_WINDING = 0.1


class Prepared:
    """A solid's tree and what an inside test needs, built once; with reliefs, of what they leave of it."""

    def __init__(self, solid: Solid, reliefs: tuple[Relief, ...] = ()) -> None:
        self.solid = solid
        self.vertices = np.ascontiguousarray(solid.vertices, dtype=float)
        self.faces = sound_faces(solid, self.vertices)
        # for the inside test: whole, each triangle once; slivers without area may be what closes a mesh
        self.whole = self.vertices
        self.shell = without_repeats(self.vertices, self.faces)
        self.closed = is_closed(self.vertices, self.shell) or is_closed(
            self.vertices, without_repeats(self.vertices, np.ascontiguousarray(solid.faces, dtype=np.int32))
        )
        if reliefs:
            left = relieved(solid, reliefs)
            self.vertices, self.faces = left.vertices, left.faces
        self.tree: BoxTree = build_tree(self.vertices, self.faces)
        self.reach = float(np.linalg.norm(self.whole, axis=1).max())


def engine_is_compiled() -> bool:
    """True when the engine's machine code lies ready, so that the first pair need not wait for it."""
    return is_kept(cell_holds)


def proved_gaps(
    corner: Corner,
    pairs: Sequence[Pair],
    travel_mm: Range,
    rack_mm: Range = (0.0, 0.0),
    *,
    tolerance_mm: float = 0.05,
    progress: Callable[[int, int], None] | None = None,
    finished: list[Gap] | None = None,
) -> list[Gap]:
    """Prove or refute every pair's required gap, and find its smallest gap to ``tolerance_mm``.

    Parameters
    ----------
    travel_mm, rack_mm : the motion's rectangle, lowest and highest.
    tolerance_mm : the proven gap lies at most this much below the smallest gap found.
    progress : called with (done, total). finished : gets each Gap as soon as it is known, so that what is done survives
        an interruption.

    Returns
    -------
    A Gap for each pair, worst first. Where the mechanism locks within the rectangle nothing can be proven over it:
    those pairs are searched on the poses that can be reached, and say so.

    Raises
    ------
    MeshError : a solid has no triangle with an area, or coordinates that are not finite.
    """
    done: list[Gap] = [] if finished is None else finished
    grid = solve_motion(
        corner,
        np.linspace(*travel_mm, CHECK_GRID[0])[:, None],
        np.linspace(*rack_mm, CHECK_GRID[1] if rack_mm[1] > rack_mm[0] else 1)[None],
    )
    if not grid.reached.all():
        for gap in sampled_gaps(grid, pairs, tolerance_mm=tolerance_mm, progress=progress):
            done.append(_with_note(gap, "The mechanism locks within the motion, so this is sampled, not proven."))
        return worst_first(done)
    prepared: dict[str, Prepared] = {}
    for pair in pairs:
        for solid in (pair.a, pair.b):
            if solid.name not in prepared:
                prepared[solid.name] = Prepared(solid)
    low, high = np.array([travel_mm[0], rack_mm[0]]), np.array([travel_mm[1], rack_mm[1]])
    reach = max((part.reach for part in prepared.values()), default=0.0)
    courses: dict[tuple[str, str], list[Tile]] = {}
    for pair in pairs:
        bodies = (corner.body(pair.a.body), corner.body(pair.b.body))
        if bodies[0] != bodies[1] and bodies not in courses:
            courses[bodies] = _course(corner, bodies, low, high, reach)
    threads = min(2, os.cpu_count() or 1)
    pool = ThreadPoolExecutor(threads)
    try:
        waiting = [pool.submit(_prove_pair, corner, pair, prepared, courses, low, high, tolerance_mm) for pair in pairs]
        for number, ready in enumerate(as_completed(waiting), 1):
            done.append(ready.result())
            if progress is not None:
                progress(number, len(pairs))
    finally:
        pool.shutdown(wait=False, cancel_futures=True)
    return worst_first(done)


def _course(corner: Corner, bodies: tuple[str, str], low: Array, high: Array, reach_mm: float) -> list[Tile]:
    """How one body moves as another sees it, as polynomials over the motion's rectangle."""

    def poses(u: Array, v: Array) -> Array:
        rotation, shift = relative_poses(solve_motion(corner, u, v), *bodies)
        return np.concatenate((rotation.reshape(-1, 9), shift), axis=1)

    return tiles(poses, low, high, reach_mm)


def _prove_pair(
    corner: Corner,
    pair: Pair,
    prepared: dict[str, Prepared],
    courses: dict[tuple[str, str], list[Tile]],
    low: Array,
    high: Array,
    tolerance_mm: float,
) -> Gap:
    first, second = prepared[pair.a.name], prepared[pair.b.name]
    if pair.relief:
        first, second = Prepared(pair.a, pair.relief), Prepared(pair.b, pair.relief)

    design = np.clip(np.zeros(2), low, high)
    at_design = solve_motion(corner, design[0], design[1])
    winding, on_a, on_b = _winding(at_design, pair, first, second)
    sure = first.closed and second.closed
    if winding > (0.5 if sure else 0.9):
        return _gap(pair, at_design, 0.0, 0.0, on_a, on_b, 1, note=INSIDE.format(pair.a.name, pair.b.name))
    doubtful = not sure and winding > DOUBTFUL_WINDING
    if corner.body(pair.a.body) == corner.body(pair.b.body):
        # they never move against each other: one distance says all
        value, on_a, on_b = distance(first.tree, second.tree, np.eye(3), np.zeros(3), FAR)
        return _gap(pair, at_design, float(value), float(value), on_a, on_b, 1, _notes(pair, first, second), doubtful)
    search = Search(first.tree, second.tree, courses[corner.body(pair.a.body), corner.body(pair.b.body)])
    search.seed()
    enough = pair.required_mm if pair.required_mm > 0.0 else 2.0 * tolerance_mm
    shown = search.best >= enough and search.prove(lambda: enough)
    search.descend(tolerance_mm)
    proven: float | None = enough if shown else None
    if search.best > 0.0 and search.prove(lambda: search.best - tolerance_mm):
        proven = max(search.best - tolerance_mm, 0.0)
    if search.best <= 0.0:
        proven = 0.0
    place = solve_motion(corner, *search.pose)
    assert search.on_a is not None
    assert search.on_b is not None
    note = _notes(pair, first, second)
    if search.error_mm > ACCURACY_MM:
        note = f"{note} {pair.a.name} and {pair.b.name}: polynomials up to {search.error_mm:.1e} mm off.".strip()
    if proven is None:
        note = f"{note} The search gave up after {search.evaluations} evaluations.".strip()
    return _gap(pair, place, search.best, proven, search.on_a, search.on_b, search.evaluations, note, doubtful)


def _winding(motion: Motion, pair: Pair, first: Prepared, second: Prepared) -> tuple[float, Array, Array]:
    """How far one part winds about a piece of the other at a pose where they do not meet, and the nearest points.

    Near 1 it lies inside, near 0 outside; a mesh with holes gives something in between. Surfaces that a proof keeps
    apart cannot change sides, so one pose settles the whole motion. Where parts may touch at a joint nothing is asked.
    """
    rotation, shift = (value[0] for value in relative_poses(motion, pair.a.body, pair.b.body))
    value, on_a, on_b = distance(first.tree, second.tree, np.ascontiguousarray(rotation), shift.copy(), FAR)
    if value <= 0.0 or pair.relief:
        return 0.0, on_a, on_b
    moved = second.whole @ rotation.T + shift
    most = 0.0
    for inner, inner_faces, outer, outer_faces in (
        (moved, second.shell, first.whole, first.shell),
        (first.whole, first.shell, moved, second.shell),
    ):
        low, high = outer.min(axis=0), outer.max(axis=0)
        for point in one_vertex_of_each_piece(inner, inner_faces):
            if ((point >= low) & (point <= high)).all():
                most = max(most, abs(winding_number(point, outer, outer_faces)))
    return most, on_a, on_b


def _notes(pair: Pair, first: Prepared, second: Prepared) -> str:
    """What a reader must know besides: open meshes, and reliefs."""
    texts = []
    if pair.relief:
        texts.append(relief_note(pair))
    names = [part.solid.name for part in (first, second) if not part.closed]
    if names:
        texts.append(
            f"{' and '.join(names)}: open mesh; being wholly inside cannot be proven, distances to its surface hold."
        )
    return " ".join(texts)


def _gap(
    pair: Pair,
    pose: Motion,
    value: float,
    proven: float | None,
    on_a: Array,
    on_b: Array,
    evaluations: int,
    note: str = "",
    doubtful: bool = False,
) -> Gap:
    """The answer for a pair; ``doubtful`` when an open mesh leaves it open whether one part lies inside the other."""
    if value <= 0.0:
        verdict: Verdict = "touching"
    elif value < pair.required_mm:
        verdict = "tight"
    elif proven is not None and proven >= pair.required_mm and not doubtful:
        verdict = "clear"
    else:
        verdict = "undecided"
    turn, shift = pose.rotation(pair.a.body), pose.translation(pair.a.body)
    return Gap(
        between=(pair.a.name, pair.b.name),
        required_mm=float(pair.required_mm),
        verdict=verdict,
        gap_mm=max(float(value), 0.0),
        proven_gap_mm=proven,
        travel_mm=float(pose.travel_mm),
        rack_mm=float(pose.rack_mm),
        point_a_mm=turn @ on_a + shift,
        point_b_mm=turn @ on_b + shift,
        evaluations=evaluations,
        note=note,
    )


def _with_note(gap: Gap, text: str) -> Gap:
    return replace(gap, note=f"{gap.note} {text}".strip())
