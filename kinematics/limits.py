"""Limits that are clearances in another guise: joint angles, spring stroke, drive-shaft angles and plunge, lock-up.

Each is sought over the whole motion: on a grid of poses, then sharpened around the worst. Knows no file format.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from difflib import get_close_matches
from typing import TypeAlias

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.errors import MechanismError
from knucklepath.kinematics.mechanism import Ball, Mechanism, Rod
from knucklepath.kinematics.motion import Limit, Motion, find_limit, solve_motion
from knucklepath.kinematics.tree import dot_first
from knucklepath.kinematics.wheel import Corner

Array: TypeAlias = NDArray[np.float64]
Range: TypeAlias = tuple[float, float]

#: Poses of the first search, travel × rack.
GRID = (23, 15)
#: Sharpening halves its steps this often.
HALVINGS = 14
#: Differences below this, mm or deg, are rounding.
TIE = 1e-9
#: Lock-up is sought as far as this share beyond the stated travel and rack.
BEYOND = 0.5


@dataclass(frozen=True)
class JointLimit:
    """A ball joint or rod end whose stud may lean by ``greatest_deg`` from ``axis`` (3,), where both stand at design.

    joint : the hardpoint's name, "lower_arm.ball_joint" or "tie_rod.outboard", or the ball joint's own, "top mount".
        Where several joints meet at a hardpoint, the limit is for each of them.

    A rod's pose has no spin about the rod's own line. A rod end whose stud stands across the rod is judged so; play
    that lets the rod roll shares the lean out between its two ends.
    """

    joint: str
    axis: Array
    greatest_deg: float


@dataclass(frozen=True)
class DriveShaft:
    """A shaft from ``inner`` on the chassis to ``outer`` on the knuckle, both (3,) mm at design.

    inner_axis (3,) : of the output that the shaft hangs on, in either sense. Limits in deg and mm; None where not
    stated.
    """

    inner: Array
    outer: Array
    inner_axis: Array
    greatest_inner_deg: float | None = None
    greatest_outer_deg: float | None = None
    greatest_plunge: float | None = None


@dataclass(frozen=True)
class LimitResult:
    """What a limit came to: its extreme over the motion, against what is allowed, and the pose of the extreme.

    unit : "deg" or "mm"; kind : "at most" or "at least", how ``extreme`` must stand to ``limit``; note : or "".
    """

    name: str
    kind: str
    extreme: float
    limit: float
    unit: str
    ok: bool
    travel_mm: float
    rack_mm: float
    note: str = ""


def joint_bodies(mechanism: Mechanism, joint: str) -> tuple[tuple[str, str], ...]:
    """The pairs of bodies that ball joints and rod ends tie together: at a hardpoint, or by a ball joint's own name.

    Raises
    ------
    MechanismError : there is no such joint; the message gives the nearest name and those that there are.
    """
    known: dict[str, list[tuple[str, str]]] = {}
    for item in mechanism.joints:
        if isinstance(item, Ball):
            known.setdefault(item.at, []).append((item.body_a, item.body_b))
        elif isinstance(item, Rod):
            known.setdefault(item.point_a, []).append((item.name, item.body_a))
            known.setdefault(item.point_b, []).append((item.name, item.body_b))
    points = list(known)
    for item in mechanism.joints:
        if isinstance(item, Ball):
            known.setdefault(item.name, [(item.body_a, item.body_b)])
    if joint not in known:
        near = get_close_matches(joint, known, n=1)
        hint = f"did you mean '{near[0]}'? " if near else ""
        raise MechanismError(
            f"there is no ball joint or rod end '{joint}'; {hint}Joints: {', '.join(points) or 'none'}"
        )
    return tuple(known[joint])


def check_limits(
    corner: Corner,
    travel_mm: Range,
    rack_mm: Range,
    joints: tuple[JointLimit, ...] = (),
    shaft: DriveShaft | None = None,
) -> list[LimitResult]:
    """Check everything that is stated, over the motion's rectangle.

    Poses that cannot be reached are passed over; the lock-up margins say where that begins.

    Raises
    ------
    MechanismError : a joint limit names no joint.
    """
    search = _Search(corner, travel_mm, rack_mm)
    results = [_joint(search, limit) for limit in joints]
    spring = corner.spring
    if spring is not None:
        for name, limit, kind in (
            ("spring, shortest", spring.shortest, "at least"),
            ("spring, longest", spring.longest, "at most"),
        ):
            if limit is not None:
                results.append(search.result(name, kind, limit, "mm", _spring_length))
    if shaft is not None:
        results += _shaft(search, shaft)
    return results + _lock_up(corner, travel_mm, rack_mm)


class _Search:
    """Extremes of quantities over a motion."""

    def __init__(self, corner: Corner, travel_mm: Range, rack_mm: Range) -> None:
        self.corner = corner
        self.low, self.high = np.array([travel_mm[0], rack_mm[0]]), np.array([travel_mm[1], rack_mm[1]])
        self.rack = np.linspace(*rack_mm, GRID[1]) if rack_mm[1] > rack_mm[0] else np.array([rack_mm[0]])
        self.grid = solve_motion(corner, np.linspace(*travel_mm, GRID[0])[:, None], self.rack[None])

    def extreme(self, quantity: Callable[[Motion], Array], sign: float) -> tuple[float, float, float]:
        """Greatest of ``sign`` times a quantity, and the travel and rack where it is."""
        values = sign * np.where(self.grid.reached, quantity(self.grid), np.nan)
        if not np.isfinite(values).any():
            return float("nan"), float("nan"), float("nan")
        # among equals the pose with the least rack: what does not depend on it is reported without it
        preferred = values - TIE * np.abs(self.grid.rack_mm)
        at = np.unravel_index(int(np.nanargmax(preferred)), values.shape)
        best = float(values[at])
        pose = np.array([self.grid.travel_mm[at], self.grid.rack_mm[at]])
        step = (self.high - self.low) / np.maximum(np.array(self.grid.shape) - 1, 1)
        moves = np.array([[u, v] for u in (-1.0, 0.0, 1.0) for v in (-1.0, 0.0, 1.0) if u or v])
        for _ in range(HALVINGS):
            tries = np.clip(pose + moves * step, self.low, self.high)
            near = solve_motion(self.corner, tries[:, 0], tries[:, 1])
            found = sign * np.where(near.reached, quantity(near), np.nan)
            if np.isfinite(found).any() and np.nanmax(found) > best + TIE:
                best, pose = float(np.nanmax(found)), tries[int(np.nanargmax(found))]
            else:
                step = step / 2.0
        return sign * best, float(pose[0]), float(pose[1])

    def result(self, name: str, kind: str, limit: float, unit: str, quantity: Callable[[Motion], Array]) -> LimitResult:
        """The extreme of a quantity against a limit."""
        value, travel, rack = self.extreme(quantity, 1.0 if kind == "at most" else -1.0)
        ok = value <= limit if kind == "at most" else value >= limit
        return LimitResult(name, kind, value, limit, unit, bool(ok), travel, rack)


def _angle_deg(motion: Motion, first: Array, second: Array) -> Array:
    """Angle (...) between two directions (3, B) of any length, deg; exact near 0 and 180 as well."""
    a = first / np.sqrt(dot_first(first, first))
    b = second / np.sqrt(dot_first(second, second))
    apart, along = a - b, a + b
    return motion._shaped(
        np.degrees(2.0 * np.arctan2(np.sqrt(dot_first(apart, apart)), np.sqrt(dot_first(along, along))))
    )


def _joint(search: _Search, limit: JointLimit) -> LimitResult:
    pairs = joint_bodies(search.corner.mechanism, limit.joint)

    def lean(motion: Motion) -> Array:
        leans = [
            _angle_deg(motion, motion.turn_last(first, limit.axis), motion.turn_last(second, limit.axis))
            for first, second in pairs
        ]
        return np.asarray(np.maximum.reduce(leans))

    return search.result(f"{limit.joint}, angle", "at most", limit.greatest_deg, "deg", lean)


def _spring_length(motion: Motion) -> Array:
    spring = motion.corner.spring
    assert spring is not None
    apart = motion.point_last(spring.on, spring.moving) - spring.chassis[:, None]
    return motion._shaped(np.sqrt(dot_first(apart, apart)))


def _shaft(search: _Search, shaft: DriveShaft) -> list[LimitResult]:
    at_design = shaft.outer - shaft.inner
    design = float(np.linalg.norm(at_design))
    # an axis is a line: a shaft bends by the acute angle to it, whichever way the direction was written
    inner_axis, spin_axis = (
        axis * np.copysign(1.0, axis @ at_design) for axis in (shaft.inner_axis, search.corner.wheel.spin_axis)
    )

    def along(motion: Motion) -> Array:
        return motion.point_last("wheel", shaft.outer) - shaft.inner[:, None]

    def inner(motion: Motion) -> Array:
        return _angle_deg(motion, along(motion), np.broadcast_to(inner_axis[:, None], along(motion).shape))

    def outer(motion: Motion) -> Array:
        return _angle_deg(motion, along(motion), motion.turn_last("wheel", spin_axis))

    def plunge(motion: Motion) -> Array:
        reach = along(motion)
        return np.abs(motion._shaped(np.sqrt(dot_first(reach, reach))) - design)

    stated = (
        ("drive shaft, inner angle", shaft.greatest_inner_deg, "deg", inner),
        ("drive shaft, outer angle", shaft.greatest_outer_deg, "deg", outer),
        ("drive shaft, plunge", shaft.greatest_plunge, "mm", plunge),
    )
    return [search.result(name, "at most", limit, unit, how) for name, limit, unit, how in stated if limit is not None]


def _lock_up(corner: Corner, travel_mm: Range, rack_mm: Range) -> list[LimitResult]:
    """How far beyond the stated travel and rack the mechanism goes before it locks."""
    results = []
    racks = sorted({0.0, *rack_mm})
    for name, end in (("bump", travel_mm[1]), ("rebound", travel_mm[0])):
        towards = end * (1.0 + BEYOND)
        found = [(find_limit(corner, "travel", towards, rack_mm=rack), rack) for rack in racks]
        results.append(_margin(f"travel to lock-up, {name}", end, towards, found, "travel"))
    for name, end in (("left", rack_mm[1]), ("right", rack_mm[0])):
        if end != 0.0:
            towards = end * (1.0 + BEYOND)
            held = [(find_limit(corner, "rack", towards, travel_mm=at), at) for at in sorted({0.0, *travel_mm})]
            results.append(_margin(f"rack to lock-up, {name}", end, towards, held, "rack"))
    return results


def _margin(name: str, end: float, towards: float, found: list[tuple[Limit | None, float]], moving: str) -> LimitResult:
    worst, held, note = abs(towards), 0.0, f"no lock-up as far as {abs(towards):.1f} mm"
    for limit, other in found:
        # where the held input alone locks, the margin of that input says so; this one has none to tell
        if limit is not None and limit.input == moving and abs(limit.value_mm) < worst:
            worst, held, note = abs(limit.value_mm), other, limit.reason
    value = np.copysign(worst, end)
    travel, rack = (value, held) if moving == "travel" else (held, value)
    return LimitResult(name, "at least", worst, abs(end), "mm", worst >= abs(end), float(travel), float(rack), note)
