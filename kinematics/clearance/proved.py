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
from knucklepath.kinematics.clearance.course import tiles
from knucklepath.kinematics.clearance.gap import Gap, Verdict, relative_poses, sound_faces, worst_first
from knucklepath.kinematics.clearance.inside import is_closed, wholly_inside
from knucklepath.kinematics.clearance.pairs import Pair, PairError, Relief
from knucklepath.kinematics.clearance.proof import FAR, Search
from knucklepath.kinematics.clearance.relief import without_spheres
from knucklepath.kinematics.clearance.sampled import sampled_gaps
from knucklepath.kinematics.clearance.solids import Solid
from knucklepath.kinematics.clearance.traverse import cell_holds, distance
from knucklepath.kinematics.motion import Motion, solve_motion
from knucklepath.kinematics.wheel import Corner

Array: TypeAlias = NDArray[np.float64]
Range: TypeAlias = tuple[float, float]

#: Poses that tell whether the mechanism locks within the motion, and that the sampled search uses where it does.
CHECK_GRID = (23, 15)


class Prepared:
    """A solid's tree and what an inside test needs, built once; with reliefs, of what they leave of it."""

    def __init__(self, solid: Solid, reliefs: tuple[Relief, ...] = ()) -> None:
        self.solid = solid
        self.vertices = np.ascontiguousarray(solid.vertices, dtype=float)
        self.faces = sound_faces(solid, self.vertices)
        self.closed = is_closed(self.vertices, self.faces)
        if reliefs:
            self.vertices, self.faces = without_spheres(self.vertices, self.faces, reliefs)
        if len(self.faces):
            self.tree: BoxTree = build_tree(self.vertices, self.faces)
            self.reach = float(np.linalg.norm(self.vertices[np.unique(self.faces)], axis=1).max())


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
    threads = min(2, os.cpu_count() or 1)
    pool = ThreadPoolExecutor(threads)
    try:
        waiting = [pool.submit(_prove_pair, corner, pair, prepared, low, high, tolerance_mm) for pair in pairs]
        for number, ready in enumerate(as_completed(waiting), 1):
            done.append(ready.result())
            if progress is not None:
                progress(number, len(pairs))
    finally:
        pool.shutdown(wait=False, cancel_futures=True)
    return worst_first(done)


def _prove_pair(
    corner: Corner, pair: Pair, prepared: dict[str, Prepared], low: Array, high: Array, tolerance_mm: float
) -> Gap:
    first, second = prepared[pair.a.name], prepared[pair.b.name]
    if pair.relief:
        first, second = Prepared(pair.a, pair.relief), Prepared(pair.b, pair.relief)
        for part in (first, second):
            if not len(part.faces):
                raise PairError(f"the relief swallows all of '{part.solid.name}'; make it smaller")

    def poses(u: Array, v: Array) -> Array:
        motion = solve_motion(corner, u, v)
        rotation, shift = relative_poses(motion, pair.a.body, pair.b.body)
        return np.concatenate((rotation.reshape(-1, 9), shift), axis=1)

    design = np.clip(np.zeros(2), low, high)
    at_design = solve_motion(corner, design[0], design[1])
    inside = None if pair.relief else _inside(at_design, pair, first, second)
    if inside is not None:
        return _gap(pair, at_design, 0.0, 0.0, *inside, 1)
    if corner.body(pair.a.body) == corner.body(pair.b.body):
        # they never move against each other: one distance says all
        value, on_a, on_b = distance(first.tree, second.tree, np.eye(3), np.zeros(3), FAR)
        return _gap(pair, at_design, float(value), float(value), on_a, on_b, 1, note=_notes(pair, first, second))
    search = Search(first.tree, second.tree, tiles(poses, low, high, second.reach))
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
    if proven is None:
        note = f"{note} The search gave up after {search.evaluations} evaluations.".strip()
    return _gap(pair, place, search.best, proven, search.on_a, search.on_b, search.evaluations, search.error_mm, note)


def _inside(motion: Motion, pair: Pair, first: Prepared, second: Prepared) -> tuple[Array, Array] | None:
    """Points to show when one part lies wholly inside the other at a pose, else None.

    Surfaces that a proof keeps apart cannot change sides, so one pose settles the whole motion.
    """
    rotation, shift = (value[0] for value in relative_poses(motion, pair.a.body, pair.b.body))
    value, on_a, on_b = distance(first.tree, second.tree, np.ascontiguousarray(rotation), shift.copy(), FAR)
    if value <= 0.0:
        return None
    moved = second.vertices @ rotation.T + shift
    if first.closed and wholly_inside(moved, second.faces, first.vertices, first.faces):
        return on_a, on_b
    if second.closed and wholly_inside(first.vertices, first.faces, moved, second.faces):
        return on_a, on_b
    return None


def _notes(pair: Pair, first: Prepared, second: Prepared) -> str:
    """What a reader must know besides: open meshes, and reliefs."""
    texts = []
    if pair.relief:
        joints = " and ".join(relief.joint for relief in pair.relief)
        texts.append(
            f"{pair.a.name} and {pair.b.name}: contact within {pair.relief[0].radius_mm:g} mm of {joints} is ignored."
        )
    names = [part.solid.name for part in (first, second) if not part.closed]
    if names:
        texts.append(
            f"{' and '.join(names)}: open mesh; being wholly inside cannot be told, distances to its surface hold."
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
    error_mm: float = 0.0,
    note: str = "",
) -> Gap:
    if value <= 0.0:
        verdict: Verdict = "touching"
        if np.linalg.norm(on_a - on_b) > 0.0:
            note = f"{pair.a.name} and {pair.b.name}: one lies wholly inside the other. {note}".strip()
    elif value < pair.required_mm:
        verdict = "tight"
    elif proven is not None and proven >= pair.required_mm:
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
