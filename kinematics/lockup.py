"""Why a mechanism locks, in words: which bodies stand in line where, or about which axis the motion runs out.

Next to a lock-up the Jacobian is almost singular, and its null vector is the motion that is left while every input
is held. Knows no layout.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.closure import Closure
from knucklepath.kinematics.following import Solution
from knucklepath.kinematics.frames import screw_axis
from knucklepath.kinematics.mechanism import CHASSIS, WHEEL_CENTRE, Ball, HingedBody, Input, PointInput, Rod
from knucklepath.kinematics.tree import Frame

Array = NDArray[np.float64]

#: A least singular value (mm per mm) above this is no dead centre: the path ends for another reason.
SINGULAR = 0.1
#: Points slower than this share of what the body's turning moves are said hardly to move.
STILL_SHARE = 0.05


def lock_reason(solution: Solution, input: str | None = None, towards: float = 1.0) -> str:
    """Say in words what locks at the first pose of a solution next to a singular position.

    Parameters
    ----------
    input : the input that can go no further; the first one where not given.
    towards : the sense in which it was to go, by its sign.

    Returns
    -------
    What stands in line, or how the rest turns on; a colon; and what follows from it. A rod or an arm stands in line
    with a body when it points straight at the axis about which that body turns, so that its force has no lever.
    """
    closure = solution.closure
    state = solution.state.take(np.array([0]))
    _, singular, right = np.linalg.svd(closure.scaled_jacobian(state))
    if not len(singular) or singular[-1] > SINGULAR:
        return "no pose beyond it closes every joint"
    rates = np.zeros((closure.tree.columns, 1))
    rates[: closure.tree.unknowns, 0] = right[-1] / closure.tree.scale[: closure.tree.unknowns]
    left = _MotionLeft(closure, closure.tree.frames(state), rates)
    chosen = next((item for item in closure.mechanism.inputs if item.name == input), closure.mechanism.inputs[0])
    if isinstance(chosen, PointInput):
        return _point_runs_out(left, chosen, towards)
    return _coordinate_runs_out(left, chosen)


def _point_runs_out(left: _MotionLeft, item: PointInput, towards: float) -> str:
    body = left.turning(item.body)
    what = "the wheel centre" if item.point == WHEEL_CENTRE else item.point
    upright = not any(item.direction[:2])
    end = ("top" if towards * item.direction[2] > 0.0 else "bottom") if upright else "end"
    ends = f"{what} is at the {end} of its path"
    still = [name for name in left.still(body) if name != item.point]
    held = left.holding(body, still) if still else {}
    if held:
        return f"{_in_line(body, held)} while {_and(still)} hardly {'moves' if len(still) == 1 else 'move'}: {ends}"
    idle = left.rods_at(body, still)
    if idle:
        return f"{_and(idle)} {'ends' if len(idle) == 1 else 'end'} on the axis about which {body} turns: {ends}"
    across = "level" if upright else "across its direction of travel"
    return f"{left.describe(body)}, which carries {what} {across}: {ends}"


def _coordinate_runs_out(left: _MotionLeft, item: Input) -> str:
    body = left.turning(item.body)
    held = {name: at for name, at in left.holding(body, left.still(body)).items() if left.ties(name, item.body)}
    if held:
        points = "points" if len(held) == 1 else "point"
        line = f"{_in_line(body, held)} and {points} straight at the axis about which {body} turns"
        return f"{line}: {item.body} has no lever on it"
    return f"{left.describe(body)}, which leaves {item.body} where it is: {item.body} has no lever on it"


@dataclass(frozen=True)
class _MotionLeft:
    """The motion (columns, 1) that is left while every input is held, at frames of one pose."""

    closure: Closure
    frames: dict[str, Frame]
    rates: Array

    def motion(self, body: str) -> tuple[Array, Array]:
        """Angular velocity and velocity of the point at the origin, (3,) each."""
        if body == CHASSIS:
            return np.zeros(3), np.zeros(3)
        angular, velocity = self.closure.tree.twist(body, self.frames, self.rates)
        return angular[:, 0], velocity[:, 0]

    def place(self, body: str, point: str) -> Array:
        """Where a body's point is now, (3,)."""
        return np.asarray(self.frames[body].locate(self.closure.tree.points[point])[:, 0])

    def speed(self, body: str, point: str) -> float:
        """How fast a body's point moves."""
        angular, velocity = self.motion(body)
        return float(np.linalg.norm(velocity + np.cross(angular, self.place(body, point))))

    def fastest(self, body: str) -> float:
        """Speed of the fastest point at which a body is held, or of one as far from its axis as the body is large."""
        link = self.closure.tree.links[body]
        speeds = [self.speed(body, name) for name in self.closure.mechanism.attachments(body)]
        turning = 0.0 if link.kind == "slide" else np.linalg.norm(self.motion(body)[0])
        return max([float(turning * self.closure.tree.scale[link.column]), *speeds])

    def turning(self, body: str) -> str:
        """The body itself if it moves, else the one that moves most."""
        speeds = {name: self.fastest(name) for name in self.closure.tree.links}
        most = max(speeds, key=lambda name: speeds[name])
        return body if speeds.get(body, 0.0) > STILL_SHARE * speeds[most] else most

    def still(self, body: str) -> list[str]:
        """Points at which a body is held and that hardly move."""
        least = STILL_SHARE * self.fastest(body)
        return [name for name in self.closure.mechanism.attachments(body) if self.speed(body, name) < least]

    def holding(self, body: str, still: list[str]) -> dict[str, str]:
        """Rods from points at rest, and moving arms, that hold a moving point of the body: name → that point."""
        held: dict[str, str] = {}
        least = STILL_SHARE * self.fastest(body)
        for joint in self.closure.mechanism.joints:
            if isinstance(joint, Rod) and body in (joint.body_a, joint.body_b):
                ends = [(joint.body_a, joint.point_a), (joint.body_b, joint.point_b)]
                (_, at), (other, far) = ends if joint.body_a == body else ends[::-1]
                if at not in still and self.speed(other, far) < least:
                    held[joint.name] = at
            elif isinstance(joint, Ball) and body in (joint.body_a, joint.body_b) and joint.at not in still:
                other = joint.body_b if joint.body_a == body else joint.body_a
                if other != CHASSIS and isinstance(self.closure.mechanism.body(other), HingedBody):
                    held[other] = joint.at
        return held

    def rods_at(self, body: str, points: list[str]) -> list[str]:
        """Rods that end at one of these points of the body."""
        rods = self.closure.mechanism.rods
        return [
            rod.name
            for rod in rods
            if (rod.body_a == body and rod.point_a in points) or (rod.body_b == body and rod.point_b in points)
        ]

    def ties(self, name: str, body: str) -> bool:
        """True when a rod, or a joint of the body of that name, ends at ``body``."""
        return any(
            name in (joint.name, joint.body_a, joint.body_b) and body in (joint.body_a, joint.body_b)
            for joint in self.closure.mechanism.joints
        )

    def describe(self, body: str) -> str:
        """Say about which axis a body turns, or that it slides."""
        own = self.closure.mechanism.body(body)
        if isinstance(own, HingedBody) and own.parent == CHASSIS:
            return f"{body} turns about the line through {own.axis[0]} and {own.axis[1]}"
        angular, velocity = self.motion(body)
        span = float(self.closure.tree.scale.max())
        if np.linalg.norm(angular) * span < STILL_SHARE * np.linalg.norm(velocity):
            return f"{body} slides along {_listed(velocity / np.linalg.norm(velocity), 2)}"
        middle = self.frames[body].place[:, 0]
        axis = screw_axis(angular, velocity + np.cross(angular, middle), middle)
        return f"{body} turns about the axis through {_listed(axis.point, 0)} mm along {_listed(axis.direction, 2)}"


def _in_line(body: str, held: dict[str, str]) -> str:
    return f"{_and(list(held))} {_stands(list(held))} in line with {body} at {_and(list(held.values()))}"


def _stands(names: list[str]) -> str:
    return "stands" if len(names) == 1 else "stand"


def _listed(vector: Array, digits: int) -> str:
    return "(" + ", ".join(f"{value + 0.0:.{digits}f}" for value in np.round(vector, digits)) + ")"


def _and(names: list[str]) -> str:
    return names[0] if len(names) == 1 else ", ".join(names[:-1]) + " and " + names[-1]
