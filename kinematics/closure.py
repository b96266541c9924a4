"""Joint equations with exact derivatives, and Newton's method on all poses at once.

Knows bodies and joints, no layout: whatever ``Mechanism`` declares is solved the same way. The pose axis is
last throughout (see ``tree.py``). Residuals are in mm: turned directions are weighted with the mechanism's size.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.linear import PivotOrder, pivot_order, solve_many
from knucklepath.kinematics.mechanism import (
    CHASSIS,
    Ball,
    CoordinateInput,
    Fixed,
    Hinge,
    Joint,
    Mechanism,
    PointInput,
    PointOnLine,
    Rod,
)
from knucklepath.kinematics.tree import Frame, State, Tree, cross_first, dot_first

Array = NDArray[np.float64]

#: What every joint of an accepted pose keeps to, mm (or the mechanism's own unit).
ACCEPTED_RESIDUAL = 1e-9
#: What Newton aims at: an order below, so that rounding of the last step does not matter.
SOUGHT_RESIDUAL = 1e-10
#: Newton doubles its digits at each step; a start that needs more than this is a poor one.
MOST_STEPS = 12


@dataclass(frozen=True)
class Evaluation:
    """Residuals (equations, B), their Jacobian (equations, columns, B), and the frames they were taken at."""

    residual: Array
    jacobian: Array
    frames: dict[str, Frame]

    @property
    def error(self) -> Array:
        """Largest residual of each pose, (B,), mm."""
        return np.asarray(np.abs(self.residual).max(axis=0))


@dataclass(frozen=True)
class Workspace:
    """The large arrays of Newton's method, one piece of memory that all its steps write over.

    residual (equations, B); jacobian (equations, columns, B); elimination (equations, unknowns + right sides, B).
    """

    residual: Array
    jacobian: Array
    elimination: Array


@dataclass(frozen=True)
class Corrected:
    """What Newton made of a start.

    state; error (B,) largest residual, mm; determinant (B,) of the Jacobian; rates (unknowns, inputs, B) per
    unit of each input; moved (B,) how far the coordinates went, mm.
    """

    state: State
    error: Array
    determinant: Array
    rates: Array
    moved: Array

    @property
    def converged(self) -> NDArray[np.bool_]:
        """(B,) poses whose every joint closes."""
        return np.asarray(self.error <= ACCEPTED_RESIDUAL)

    def take(self, index: NDArray[np.intp]) -> Corrected:
        """Return some of the poses, or one of them several times."""
        return Corrected(
            self.state.take(index),
            self.error[index],
            self.determinant[index],
            self.rates[..., index],
            self.moved[index],
        )


class Closure:
    """The equations of a mechanism, ready to be evaluated for many poses.

    Parameters
    ----------
    mechanism : the declaration with coordinates.
    shape : leading shape of the poses; needed where points carry geometry variants.
    """

    def __init__(self, mechanism: Mechanism, shape: tuple[int, ...] = ()) -> None:
        self.mechanism = mechanism
        self.shape = shape
        self.tree = Tree(mechanism, shape)
        self.input_names = tuple(item.name for item in mechanism.inputs)
        self.rows: dict[str, slice] = {}
        at = 0
        for joint in mechanism.joints:
            self.rows[joint.name] = slice(at, at + joint.equations)
            at += joint.equations
        self._point_inputs = tuple(item for item in mechanism.inputs if isinstance(item, PointInput))
        for item in self._point_inputs:
            self.rows[f"input {item.name}"] = slice(at, at + 1)
            at += 1
        self.equations = at
        self._size = self._typical_size()
        self._design_of = {joint.name: _design_constants(joint, self.tree.points) for joint in mechanism.joints}

    def _typical_size(self) -> float:
        if not self.tree.points:
            return 1.0
        first = np.stack([point[:, 0] for point in self.tree.points.values()])
        return float(max(np.ptp(first, axis=0).max() / 4.0, 1e-9))

    @property
    def _design(self) -> State:
        return self.tree.design(int(np.prod(self.shape)) if self.mechanism.is_batched else 1)

    @cached_property
    def _at_design(self) -> Evaluation:
        return self.evaluate(self._design, {})

    @cached_property
    def order(self) -> PivotOrder:
        """Elimination order, from the design position."""
        return pivot_order(self._at_design.jacobian[:, : self.tree.unknowns, 0])

    @cached_property
    def at_design(self) -> Corrected:
        """The design position, where every joint is closed: one pose, or one of each geometry variant.

        The sign of its determinant tells the mechanism's branch.
        """
        state, evaluation = self._design, self._at_design
        rates, determinant = self._solve(evaluation, self._input_columns(evaluation))
        return Corrected(state, evaluation.error, determinant, rates, np.zeros(state.count))

    def for_poses(self, index: NDArray[np.intp]) -> Closure:
        """The same equations for some of the poses; only geometry variants make a difference."""
        if not self.mechanism.is_batched:
            return self
        some = object.__new__(Closure)
        some.__dict__.update(self.__dict__)
        some.__dict__["at_design"] = self.at_design.take(index)
        some.__dict__["order"] = self.order
        some.tree = object.__new__(Tree)
        some.tree.__dict__.update(self.tree.__dict__)

        def pick(value: Array) -> Array:
            return value[..., index] if value.shape[-1] > 1 else value

        some.tree.points = {name: pick(point) for name, point in self.tree.points.items()}
        some.tree.links = {
            name: type(link)(
                link.name,
                link.kind,
                link.parent,
                link.column,
                link.slot,
                pick(link.reference),
                pick(link.axis),
            )
            for name, link in self.tree.links.items()
        }
        some._design_of = {name: tuple(pick(axis) for axis in axes) for name, axes in self._design_of.items()}
        return some

    def _workspace(self, count: int) -> Workspace:
        right = max(1, len(self.input_names))
        widths = (1, self.tree.columns, self.tree.unknowns + right)
        whole = np.empty((sum(widths), self.equations, count))
        parts = np.split(whole, np.cumsum(widths)[:-1])
        residual, jacobian, elimination = (part.reshape(self.equations, len(part), count) for part in parts)
        return Workspace(residual[:, 0], jacobian, elimination)

    def evaluate(self, state: State, inputs: Mapping[str, Array], space: Workspace | None = None) -> Evaluation:
        """Residuals and Jacobian at a state.

        ``inputs`` maps input names to (B,) values; inputs left out are at their design value, 0. With ``space``, the
        result's arrays lie in it and hold until it is used again.
        """
        tree = self.tree
        frames = tree.frames(state)
        space = space or self._workspace(state.count)
        residual, jacobian = space.residual, space.jacobian
        jacobian[:] = 0.0
        for joint in self.mechanism.joints:
            self._joint(joint, frames, residual, jacobian)
        for item in self._point_inputs:
            row = self.rows[f"input {item.name}"].start
            design = tree.points[item.point]
            now = frames[item.body].locate(design)
            along = (np.asarray(item.direction, dtype=float) / np.linalg.norm(item.direction))[:, None]
            residual[row] = dot_first(along, now - design) - inputs.get(item.name, 0.0)
            self._push_along(jacobian, row, item.body, frames, now, along, 1.0)
        return Evaluation(residual, jacobian, frames)

    def _joint(self, joint: Joint, frames: Mapping[str, Frame], residual: Array, jacobian: Array) -> None:
        points, start = self.tree.points, self.rows[joint.name].start
        a, b = frames[joint.body_a], frames[joint.body_b]
        if isinstance(joint, Rod):
            at_a, at_b = a.locate(points[joint.point_a]), b.locate(points[joint.point_b])
            apart, (length, squared) = at_a - at_b, self._design_of[joint.name]
            # (|d|² − L²)/2L instead of |d| − L: smooth, no root, and equal to first order.
            residual[start] = (dot_first(apart, apart) - squared) / (2.0 * length)
            along = apart / length
            self._push_along(jacobian, start, joint.body_a, frames, at_a, along, 1.0)
            self._push_along(jacobian, start, joint.body_b, frames, at_b, along, -1.0)
            return
        at = points[joint.axis[0]] if isinstance(joint, Hinge) else points[joint.at]
        at_a, at_b = a.locate(at), b.locate(at)
        if isinstance(joint, PointOnLine):
            on_line = b.locate(points[joint.line[0]])
            for row, axis in enumerate(self._design_of[joint.name], start):
                across = b.turn(axis)
                apart = at_a - on_line
                # less what the point is off the line at design, a hair: that position is closed whatever its digits
                residual[row] = dot_first(across, apart) - dot_first(axis, at - points[joint.line[0]])
                self._push_along(jacobian, row, joint.body_a, frames, at_a, across, 1.0)
                self._push_along(jacobian, row, joint.body_b, frames, on_line, across, -1.0)
                self._push_turn(jacobian, row, joint.body_b, frames, cross_first(across, apart))
            return
        residual[start : start + 3] = at_a - at_b
        self._push_point(jacobian, start, joint.body_a, frames, at_a, 1.0)
        self._push_point(jacobian, start, joint.body_b, frames, at_b, -1.0)
        if isinstance(joint, Ball):
            return
        for row, (of_a, of_b) in enumerate(_pairs(self._design_of[joint.name], joint), start + 3):
            turned_a, turned_b = a.turn(of_a), b.turn(of_b)
            residual[row] = self._size * dot_first(turned_a, turned_b)
            moment = self._size * cross_first(turned_a, turned_b)
            self._push_turn(jacobian, row, joint.body_a, frames, moment)
            self._push_turn(jacobian, row, joint.body_b, frames, -moment)

    def _push_along(
        self,
        jacobian: Array,
        row: int,
        body: str,
        frames: Mapping[str, Frame],
        at: Array,
        along: Array,
        sign: float,
    ) -> None:
        """Add ``sign · along · d(point)/d(coordinates)`` to one row."""
        for link in self.tree.chain(body):
            column = link.column
            if link.kind == "slide":
                jacobian[row, column] += sign * dot_first(along, frames[link.parent].turn(link.axis))
                continue
            moment = cross_first(at - frames[link.name].place, along)
            if link.kind == "free":
                jacobian[row, column : column + 3] += sign * moment
                jacobian[row, column + 3 : column + 6] += sign * along
            else:
                jacobian[row, column] += sign * dot_first(moment, frames[link.parent].turn(link.axis))

    def _push_point(
        self, jacobian: Array, row: int, body: str, frames: Mapping[str, Frame], at: Array, sign: float
    ) -> None:
        """Add ``sign · d(point)/d(coordinates)`` to three rows."""
        for link in self.tree.chain(body):
            column = link.column
            if link.kind == "slide":
                jacobian[row : row + 3, column] += sign * frames[link.parent].turn(link.axis)
                continue
            arm = at - frames[link.name].place
            if link.kind == "free":
                x, y, z = sign * arm
                for i, j, value in ((0, 1, z), (1, 2, x), (2, 0, y)):
                    jacobian[row + i, column + j] += value
                    jacobian[row + j, column + i] -= value
                for i in range(3):
                    jacobian[row + i, column + 3 + i] += sign
            else:
                axis = frames[link.parent].turn(link.axis)
                jacobian[row : row + 3, column] += sign * cross_first(axis, arm)

    def _push_turn(self, jacobian: Array, row: int, body: str, frames: Mapping[str, Frame], moment: Array) -> None:
        """Add ``moment · (angular velocity per coordinate)`` to one row."""
        for link in self.tree.chain(body):
            if link.kind == "free":
                jacobian[row, link.column : link.column + 3] += moment
            elif link.kind == "hinge":
                jacobian[row, link.column] += dot_first(moment, frames[link.parent].turn(link.axis))

    def _input_columns(self, evaluation: Evaluation) -> Array:
        """−∂residual/∂input, (equations, inputs, B): right-hand sides for the exact rates."""
        count = evaluation.residual.shape[-1]
        right = np.zeros((self.equations, len(self.input_names), count))
        for k, item in enumerate(self.mechanism.inputs):
            if isinstance(item, CoordinateInput):
                column = self.tree.unknowns + self.tree.driven.index(item.name)
                right[:, k] = -evaluation.jacobian[:, column]
            else:
                right[self.rows[f"input {item.name}"], k] = 1.0
        return right

    def _solve(self, evaluation: Evaluation, right: Array, space: Workspace | None = None) -> tuple[Array, Array]:
        """Solve with the Jacobian for right sides (equations, k, B): solutions (unknowns, k, B), determinants (B,)."""
        square = evaluation.jacobian[:, : self.tree.unknowns]
        return solve_many(square, right, self.order, None if space is None else space.elimination)

    def correct(
        self,
        state: State,
        inputs: Mapping[str, Array],
        most_steps: int = MOST_STEPS,
        sought: float = SOUGHT_RESIDUAL,
    ) -> Corrected:
        """Newton from ``state`` with the inputs held at ``inputs`` (name → (B,)).

        Poses that are within ``sought`` (mm) are left alone while the others go on. Never raises: look at
        ``converged``.
        """
        tree = self.tree
        state = tree.with_driven(state, inputs) if tree.driven else state
        space = self._workspace(state.count)
        evaluation = self.evaluate(state, inputs, space)
        moved = np.zeros((tree.unknowns, state.count))
        for _ in range(most_steps):
            open_poses = ~(evaluation.error <= sought)
            if not open_poses.any():
                break
            step = self._solve(evaluation, -evaluation.residual[:, None], space)[0]
            step = np.where(open_poses & np.isfinite(step[:, 0]).all(axis=0), step[:, 0], 0.0)
            if not step.any():
                break
            moved += step
            state = tree.advance(state, step)
            evaluation = self.evaluate(state, inputs, space)
        rates, determinant = self._solve(evaluation, self._input_columns(evaluation), space)
        return Corrected(state, evaluation.error, determinant, rates, self.size_of(moved))

    def size_of(self, step: Array) -> Array:
        """Length of a step (unknowns, B) in mm, angles weighted with what they move."""
        weighted = step * self.tree.scale[: self.tree.unknowns, None]
        return np.asarray(np.sqrt((weighted * weighted).sum(axis=0)))

    def scaled_jacobian(self, state: State) -> Array:
        """Jacobian (equations, unknowns) of the first pose of ``state``, every column in mm per mm."""
        jacobian = self.evaluate(state, {}).jacobian[:, : self.tree.unknowns, 0]
        return np.asarray(jacobian / self.tree.scale[: self.tree.unknowns])


def _design_constants(joint: Joint, points: Mapping[str, Array]) -> tuple[Array, ...]:
    """What a joint's equations compare with, from the design position.

    Rod: its length and length squared, (1 or B,). Point on line: two directions across the line. Hinge: the axis and
    two across it. Fixed: x, y, z.
    """
    if isinstance(joint, Rod):
        apart = points[joint.point_a] - points[joint.point_b]
        squared = dot_first(apart, apart)
        return (np.sqrt(squared), squared)
    if isinstance(joint, Fixed):
        return tuple(np.eye(3)[:, [i]] for i in range(3))
    if isinstance(joint, Hinge | PointOnLine):
        first, second = joint.axis if isinstance(joint, Hinge) else joint.line
        along = points[second] - points[first]
        along = along / np.sqrt(dot_first(along, along))
        # the coordinate axis that the line is farthest from gives a well-conditioned pair
        least = np.eye(3)[:, np.abs(along).argmin(axis=0)]
        one = cross_first(along, least)
        one = one / np.sqrt(dot_first(one, one))
        pair = (one, cross_first(along, one))
        return (along, *pair) if isinstance(joint, Hinge) else pair
    return ()


def _pairs(axes: tuple[Array, ...], joint: Joint) -> tuple[tuple[Array, Array], ...]:
    """Which direction of body a must stay across which direction of body b."""
    if isinstance(joint, Hinge):
        along, one, two = axes
        return ((along, one), (along, two))
    x, y, z = axes
    return ((x, y), (y, z), (z, x))


def pose_frames(closure: Closure, state: State) -> dict[str, Frame]:
    """Frames of all that has a pose, rods included.

    A rod's turn is the shortest that carries its design direction into its present one: it has no spin of its own.
    """
    frames = closure.tree.frames(state)
    for rod in closure.mechanism.rods:
        design_a, design_b = closure.tree.points[rod.point_a], closure.tree.points[rod.point_b]
        at_a = frames[rod.body_a].locate(design_a)
        now = _unit(frames[rod.body_b].locate(design_b) - at_a)
        was = _unit(design_b - design_a)
        turn = cross_first(was, now)
        cosine = dot_first(was, now)
        matrix = (turn[:, None] * turn[None, :]) / (1.0 + cosine)
        for i in range(3):
            matrix[i, i] += cosine
        for i, j, k in ((0, 1, 2), (1, 2, 0), (2, 0, 1)):
            matrix[i, j] -= turn[k]
            matrix[j, i] += turn[k]
        frames[rod.name] = Frame(matrix, design_a, at_a)
    return frames


def rod_twist(closure: Closure, rod: Rod, frames: Mapping[str, Frame], rates: Array) -> tuple[Array, Array]:
    """Angular velocity and velocity at the origin, (3, B) each, of a rod as posed by ``pose_frames``.

    From the quaternion (1 + e₀·e, e₀ × e) of the shortest turn: ω = 2 vec(q̇ q*)/|q|².
    """
    points, tree = closure.tree.points, closure.tree

    def end(body: str, point: str) -> tuple[Array, Array]:
        at = frames[body].locate(points[point])
        if body == CHASSIS:
            return at, np.zeros((3, rates.shape[-1]))
        angular, velocity = tree.twist(body, frames, rates)
        return at, velocity + cross_first(angular, at)

    at_a, velocity_a = end(rod.body_a, rod.point_a)
    at_b, velocity_b = end(rod.body_b, rod.point_b)
    along = at_b - at_a
    length = np.sqrt(dot_first(along, along))
    now, was = along / length, _unit(points[rod.point_b] - points[rod.point_a])
    rate = (velocity_b - velocity_a) / length
    rate = rate - now * dot_first(now, rate)
    scalar, vector = 1.0 + dot_first(was, now), cross_first(was, now)
    scalar_rate, vector_rate = dot_first(was, rate), cross_first(was, rate)
    angular = (scalar * vector_rate - scalar_rate * vector - cross_first(vector_rate, vector)) / scalar
    return angular, velocity_a - cross_first(angular, at_a)


def _unit(vector: Array) -> Array:
    return np.asarray(vector / np.sqrt(dot_first(vector, vector)))
