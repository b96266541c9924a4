"""``Motion``: where every body of a corner is, and how it moves, over travel and rack.

Knows the solver; knows no reading, plugin, file or pixel. Results carry leading axes: points (..., 3),
rotations (..., 3, 3), twists (..., 6).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from knucklepath.kinematics.closure import pose_frames, rod_twist
from knucklepath.kinematics.errors import MechanismError
from knucklepath.kinematics.following import Solution, follow, solve
from knucklepath.kinematics.frames import ScrewAxis, cross, screw_axis
from knucklepath.kinematics.lockup import lock_reason
from knucklepath.kinematics.mechanism import CHASSIS, Rod
from knucklepath.kinematics.tree import Frame, cross_first
from knucklepath.kinematics.wheel import Corner

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Motion:
    """A solved corner over any set of poses; index it like an array to get some of them.

    At the design position every body's frame is the body frame of the car, so a design-position point X of a
    body is now at ``rotation(body) @ X + translation(body)``. Poses that cannot be reached are nan.
    """

    corner: Corner
    solution: Solution

    @property
    def shape(self) -> tuple[int, ...]:
        """The poses' leading shape."""
        return self.solution.shape

    @cached_property
    def travel_mm(self) -> Array:
        """(...) travel as asked for, mm."""
        return self._shaped(self.solution.inputs["travel"])

    @cached_property
    def rack_mm(self) -> Array:
        """(...) rack displacement, mm; zero on an axle without a rack."""
        values = self.solution.inputs.get("rack")
        return np.zeros(self.shape) if values is None else self._shaped(values)

    @cached_property
    def reached(self) -> NDArray[np.bool_]:
        """(...) False where the mechanism locks before the pose."""
        return np.asarray(self.solution.reached.reshape(self.shape))

    @cached_property
    def residual_mm(self) -> Array:
        """(...) largest joint residual, mm."""
        return self._shaped(self.solution.error)

    @cached_property
    def closeness(self) -> Array:
        """(...) Jacobian determinant over its design value: near 0 the geometry is near-singular."""
        return self._shaped(np.where(self.solution.reached, self.solution.determinant, np.nan))

    def __getitem__(self, index: Any) -> Motion:
        """Some of the poses, by numpy indexing over the leading axes."""
        chosen = np.arange(int(np.prod(self.shape))).reshape(self.shape)[index]
        flat = np.asarray(chosen).reshape(-1)
        whole = self.solution
        part = Solution(
            closure=whole.closure.for_poses(flat),
            shape=np.asarray(chosen).shape,
            inputs={name: value[flat] for name, value in whole.inputs.items()},
            state=whole.state.take(flat),
            reached=whole.reached[flat],
            share=whole.share[flat],
            error=whole.error[flat],
            determinant=whole.determinant[flat],
            rates=whole.rates[..., flat],
        )
        return Motion(self.corner, part)

    def _shaped(self, value: Array) -> Array:
        """(..., B) pose-last → leading axes first."""
        moved = np.moveaxis(value, -1, 0)
        return np.asarray(moved.reshape((*self.shape, *moved.shape[1:])))

    @cached_property
    def _frames(self) -> Mapping[str, Frame]:
        return pose_frames(self.solution.closure, self.solution.state)

    def _frame(self, body: str) -> Frame:
        return self._frames[self.corner.body(body)]

    def _blank(self, value: Array) -> Array:
        """Put nan where the pose was not reached (pose axis last)."""
        count = len(self.solution.reached)
        value = np.broadcast_to(value, (*value.shape[:-1], count))
        if self.solution.reached.all():
            return value
        return np.where(self.solution.reached, value, np.nan)

    def rotation(self, body: str) -> Array:
        """(..., 3, 3) rotation of a body from its design position."""
        rotation = self._frame(body).rotation
        if rotation is None:
            rotation = np.eye(3)[..., None]
        return self._shaped(self._blank(rotation))

    def translation(self, body: str) -> Array:
        """(..., 3) translation of a body, mm: where the point at the origin has gone."""
        frame = self._frame(body)
        zero = np.zeros((3, 1))
        return self._shaped(self._blank(frame.locate(zero)))

    def matrix(self, body: str) -> Array:
        """(..., 4, 4) homogeneous matrix of a body, mm."""
        out = np.zeros((*self.shape, 4, 4))
        out[..., :3, :3] = self.rotation(body)
        out[..., :3, 3] = self.translation(body)
        out[..., 3, 3] = 1.0
        return out

    def point(self, body: str, at: ArrayLike) -> Array:
        """(..., 3) where the body's design-position point ``at`` (3,) is now, mm."""
        return self._shaped(self.point_last(body, np.asarray(at, dtype=float)))

    def point_last(self, body: str, at: Array) -> Array:
        """As ``point``, with components first: (3, B). For work over large grids."""
        return self._blank(self._frame(body).locate(self._design(at)))

    def turn_last(self, body: str, direction: Array) -> Array:
        """Present direction (3, B) of a design-position direction (3,)."""
        return self._blank(self._frame(body).turn(self._design(direction)))

    def _design(self, at: Array) -> Array:
        if at.ndim == 1:
            return at[:, None]
        return np.moveaxis(np.broadcast_to(at, (*self.shape, 3)).reshape(-1, 3), 0, -1)

    def twist_last(self, body: str, per: str = "travel") -> tuple[Array, Array]:
        """Angular velocity (3, B), rad, and velocity at the origin (3, B), mm, per unit of an input."""
        closure, body = self.solution.closure, self.corner.body(body)
        count = len(self.solution.reached)
        if body == CHASSIS:
            return np.zeros((3, count)), np.zeros((3, count))
        rates = self._rates(per)
        for joint in closure.mechanism.joints:
            if isinstance(joint, Rod) and joint.name == body:
                angular, velocity = rod_twist(closure, joint, self._frames, rates)
                break
        else:
            angular, velocity = closure.tree.twist(body, self._frames, rates)
        return self._blank(angular), self._blank(velocity)

    def _rates(self, per: str) -> Array:
        """Rates of every coordinate (columns, B) per unit of one input."""
        closure = self.solution.closure
        if per not in closure.input_names:
            raise MechanismError(f"there is no input '{per}'; inputs: {', '.join(closure.input_names)}")
        rates = np.zeros((closure.tree.columns, len(self.solution.reached)))
        rates[: closure.tree.unknowns] = self.solution.rates[:, closure.input_names.index(per)]
        if per in closure.tree.driven:
            rates[closure.tree.unknowns + closure.tree.driven.index(per)] = 1.0
        return rates

    def twist(self, body: str, per: str = "travel") -> Array:
        """(..., 6) twist of a body per mm of travel or rack, the other input held. Exact, by implicit rates.

        Angular velocity (rad/mm) first, then the velocity (mm/mm) of the body-fixed point at the origin.
        """
        return self._shaped(np.concatenate(self.twist_last(body, per)))

    def velocity(self, body: str, at: ArrayLike, per: str = "travel") -> Array:
        """(..., 3) velocity of the body's design-position point ``at``, mm per mm of the input."""
        return self._shaped(self.velocity_last(body, np.asarray(at, dtype=float), per))

    def velocity_last(self, body: str, at: Array, per: str = "travel") -> Array:
        """As ``velocity``, with components first: (3, B)."""
        angular, velocity = self.twist_last(body, per)
        return velocity + cross_first(angular, self.point_last(body, at))

    def screw(self, per: str = "travel") -> ScrewAxis:
        """Instant screw axis of the knuckle; its point is the one nearest the wheel centre."""
        centre = self.point("wheel", self.corner.wheel.centre)
        twist = self.twist("wheel", per)
        angular, velocity = twist[..., :3], twist[..., 3:]
        return screw_axis(angular, velocity + cross(angular, centre), centre)


def solve_motion(corner: Corner, travel_mm: ArrayLike, rack_mm: ArrayLike = 0.0) -> Motion:
    """Solve a corner for all given travels and rack displacements at once.

    Parameters
    ----------
    corner : a left corner.
    travel_mm, rack_mm : arrays that broadcast against each other; ``travel[:, None], rack[None, :]`` is a grid.
        Geometry variants on the mechanism's points broadcast in front.

    Returns
    -------
    Motion; poses that cannot be reached are nan and marked, never raised.

    Raises
    ------
    MechanismError : rack displacement is asked of an axle without a rack.
    """
    travel, rack = np.asarray(travel_mm, dtype=float), np.asarray(rack_mm, dtype=float)
    if corner.steered:
        return Motion(corner, solve(corner.mechanism, {"travel": travel, "rack": rack}))
    if rack.any():
        raise MechanismError("this axle has no rack; only rack 0 can be asked for")
    return Motion(corner, solve(corner.mechanism, {"travel": np.broadcast_arrays(travel, rack)[0]}))


@dataclass(frozen=True)
class Limit:
    """Where a mechanism locks.

    input : "travel" or "rack"; value_mm : the last value reached; others : the inputs held; reason : for people.
    """

    input: str
    value_mm: float
    others: Mapping[str, float]
    reason: str


def find_limit(
    corner: Corner, input: str = "travel", towards: float = 60.0, rack_mm: float = 0.0, travel_mm: float = 0.0
) -> Limit | None:
    """Find where a corner locks on the way from the design position to ``towards``, to 0.01 mm.

    Parameters
    ----------
    input : "travel" or "rack"; the other one is held at ``rack_mm`` or ``travel_mm``.
    towards : where to go, mm.

    Returns
    -------
    Limit, or None when ``towards`` is reached. A pose where the held input alone cannot be reached gives that
    input's limit.

    Raises
    ------
    MechanismError : there is no such input, or the points carry geometry variants.
    """
    if corner.mechanism.is_batched:
        raise MechanismError("a limit is sought for one geometry at a time, not for variants")
    held = {"travel": travel_mm, "rack": rack_mm}
    if not corner.steered:
        held.pop("rack")
    held[input] = 0.0
    first = solve(corner.mechanism, held)
    if not first.reached.all():
        other = next(name for name in held if name != input and held[name] != 0.0)
        return find_limit(corner, other, held[other])
    closure = first.closure
    begin = {name: np.array([value]) for name, value in held.items()}
    end = {**begin, input: np.array([towards], dtype=float)}
    last, share = follow(closure, first.state, begin, end)
    if share[0] >= 1.0:
        return None
    value = float(share[0]) * towards
    others = {name: value for name, value in held.items() if name != input}
    reason = lock_reason(replace(first, state=last.state, rates=last.rates), input, towards)
    return Limit(input, value, others, reason)


__all__ = ["Limit", "Motion", "find_limit", "lock_reason", "solve_motion"]
