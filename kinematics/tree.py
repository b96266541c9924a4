"""The tree of bodies: where each body is for given coordinates, and how its points move with them.

Knows bodies, not joints. Works with the pose axis last (components first), which keeps every operation one
pass over contiguous memory; ``motion.py`` turns results to leading axes.

Coordinates: a free body has six — a rotation, updated by a small rotation vector on the left, and the position
of its reference point —, a hinged body an angle, a sliding body a displacement. Columns of every Jacobian are
the unknown coordinates in the bodies' order, then the coordinates that inputs set directly.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.mechanism import (
    CHASSIS,
    WHEEL_CENTRE,
    CoordinateInput,
    FreeBody,
    HingedBody,
    Mechanism,
    SlidingBody,
)

Array = NDArray[np.float64]

#: No Newton or prediction step turns a body by more than this (rad): a longer one has left the model's trust.
GREATEST_TURN = 1.0

#: A body held at its own reference point alone turns all the same: arms count as this share of the mechanism's size.
SHORTEST_ARM_SHARE = 0.05


def cross_first(a: Array, b: Array) -> Array:
    """Cross product over the first axis, (3, B) × (3, B)."""
    first = a[1] * b[2]
    out = np.empty((3, *first.shape))
    np.subtract(first, a[2] * b[1], out=out[0])
    np.subtract(a[2] * b[0], a[0] * b[2], out=out[1])
    np.subtract(a[0] * b[1], a[1] * b[0], out=out[2])
    return out


def dot_first(a: Array, b: Array) -> Array:
    """Scalar product over the first axis, (3, B) · (3, B) → (B,)."""
    return a[0] * b[0] + a[1] * b[1] + a[2] * b[2]


def rotate_first(rotation: Array, vector: Array) -> Array:
    """(3, 3, B) times (3, 1 or B) → (3, B)."""
    return rotation[:, 0] * vector[0] + rotation[:, 1] * vector[1] + rotation[:, 2] * vector[2]


def multiply_first(a: Array, b: Array) -> Array:
    """(3, 3, B) times (3, 3, B) → (3, 3, B)."""
    return a[:, 0, None] * b[0] + a[:, 1, None] * b[1] + a[:, 2, None] * b[2]


def exponential_first(vector: Array) -> Array:
    """Rotation matrices (3, 3, B) of rotation vectors (3, B), rad (Rodrigues' formula)."""
    angle = np.sqrt(dot_first(vector, vector))
    first, second = np.sinc(angle / np.pi), 0.5 * np.sinc(angle / (2 * np.pi)) ** 2
    x, y, z = vector
    out = second * (vector[:, None] * vector)
    diagonal = 1.0 - second * (angle * angle)
    out[0, 0] += diagonal
    out[1, 1] += diagonal
    out[2, 2] += diagonal
    fx, fy, fz = first * x, first * y, first * z
    out[0, 1] -= fz
    out[0, 2] += fy
    out[1, 0] += fz
    out[1, 2] -= fx
    out[2, 0] -= fy
    out[2, 1] += fx
    return out


@dataclass(frozen=True)
class State:
    """Coordinates of every body, the pose axis last.

    turns : (free bodies, 3, 3, B); places : (free bodies, 3, B), mm; scalars : (hinged and sliding bodies, B).
    """

    turns: Array
    places: Array
    scalars: Array

    @property
    def count(self) -> int:
        """The number of poses."""
        return int(self.scalars.shape[-1])

    def take(self, index: NDArray[np.intp] | NDArray[np.bool_]) -> State:
        """Return some of the poses."""
        return State(self.turns[..., index], self.places[..., index], self.scalars[..., index])

    def put(self, index: NDArray[np.intp], other: State) -> None:
        """Write another state's poses over some of this one's, in place."""
        self.turns[..., index] = other.turns
        self.places[..., index] = other.places
        self.scalars[..., index] = other.scalars

    def copy(self) -> State:
        """Return a state that shares no memory with this one."""
        return State(self.turns.copy(), self.places.copy(), self.scalars.copy())


@dataclass(frozen=True)
class Frame:
    """Where one body is: ``x = rotation (X − reference) + place``; rotation None means unturned."""

    rotation: Array | None
    reference: Array
    place: Array

    def locate(self, point: Array) -> Array:
        """Present position (3, B) of a design-position point (3, 1 or B)."""
        arm = point - self.reference
        return self.place + (arm if self.rotation is None else rotate_first(self.rotation, arm))

    def turn(self, direction: Array) -> Array:
        """Present direction (3, B) of a design-position direction (3, 1 or B)."""
        return direction if self.rotation is None else rotate_first(self.rotation, direction)


@dataclass(frozen=True)
class _Link:
    """One body's own coordinates: kind, column, and the design-position constants (3, 1 or B)."""

    name: str
    kind: str
    parent: str
    column: int
    slot: int
    reference: Array
    axis: Array


class Tree:
    """The bodies of a mechanism, prepared for evaluation over ``count`` poses.

    Parameters
    ----------
    mechanism : whose points may carry geometry variants.
    shape : the leading shape of the poses; points with leading axes are broadcast to it.
    """

    def __init__(self, mechanism: Mechanism, shape: tuple[int, ...]) -> None:
        self.mechanism = mechanism
        self.points = {name: _last(point, shape) for name, point in mechanism.points.items()}
        driven = {item.body: item.name for item in mechanism.inputs if isinstance(item, CoordinateInput)}
        self.unknowns = sum(body.unknowns for body in mechanism.bodies if body.name not in driven)
        self.driven = tuple(driven.values())
        self.columns = self.unknowns + len(driven)
        self.links: dict[str, _Link] = {}
        column, free, scalar = 0, 0, 0
        for body in mechanism.bodies:
            at = column
            if body.name in driven:
                at = self.unknowns + self.driven.index(driven[body.name])
            else:
                column += body.unknowns
            if isinstance(body, FreeBody):
                link = _Link(body.name, "free", CHASSIS, at, free, self._reference(body), np.zeros((3, 1)))
                free += 1
            else:
                link = self._scalar_link(body, at, scalar)
                scalar += 1
            self.links[body.name] = link
        self._free, self._scalar = free, scalar
        #: Size of each coordinate's typical effect, mm per unit: makes columns of unlike units comparable.
        self.scale = self._scale()

    def _scalar_link(self, body: HingedBody | SlidingBody, column: int, slot: int) -> _Link:
        if isinstance(body, HingedBody):
            first, second = (self.points[name] for name in body.axis)
            along, reference, kind = second - first, first, "hinge"
        elif isinstance(body.axis, str):
            along, reference, kind = self.points[body.axis], np.zeros((3, 1)), "slide"
        else:
            upper, lower = (self.points[name] for name in body.axis)
            along, reference, kind = upper - lower, upper, "slide"
        axis = along / np.sqrt(dot_first(along, along))
        return _Link(body.name, kind, body.parent, column, slot, reference, axis)

    def _reference(self, body: FreeBody) -> Array:
        names = self.mechanism.attachments(body.name)
        if WHEEL_CENTRE in names:
            return self.points[WHEEL_CENTRE]
        held = [self.points[name] for name in names]
        return sum(held[1:], held[0]) / len(held) if held else np.zeros((3, 1))

    def _scale(self) -> Array:
        scale = np.ones(self.columns)
        first = [point[:, 0] for point in self.points.values()]
        least = SHORTEST_ARM_SHARE * float(np.ptp(first, axis=0).max()) if first else 0.0
        for name, link in self.links.items():
            if link.kind == "slide":
                continue
            arms = [
                float(np.max(np.linalg.norm(self.points[point] - link.reference, axis=0)))
                for point in self.mechanism.attachments(name)
            ]
            scale[link.column : link.column + (3 if link.kind == "free" else 1)] = max([*arms, least, 1e-6])
        return scale

    def design(self, count: int) -> State:
        """The design position, ``count`` times."""
        turns = np.zeros((self._free, 3, 3, count))
        turns[:, range(3), range(3)] = 1.0
        places = np.zeros((self._free, 3, count))
        for link in self.links.values():
            if link.kind == "free":
                places[link.slot] = link.reference
        return State(turns, places, np.zeros((self._scalar, count)))

    def with_driven(self, state: State, values: Mapping[str, Array]) -> State:
        """Set the coordinates that inputs fix directly; ``values`` maps input names to (B,); those left out are 0."""
        scalars = state.scalars.copy()
        for item in self.mechanism.inputs:
            if isinstance(item, CoordinateInput):
                scalars[self.links[item.body].slot] = values.get(item.name, 0.0)
        return State(state.turns, state.places, scalars)

    def advance(self, state: State, step: Array) -> State:
        """Move every unknown coordinate by ``step`` (unknowns, B): rotations by a vector on the left."""
        turns, places, scalars = state.turns.copy(), state.places.copy(), state.scalars.copy()
        for link in self.links.values():
            if link.column >= self.unknowns:
                continue
            if link.kind == "free":
                vector = step[link.column : link.column + 3]
                angle = np.sqrt(dot_first(vector, vector))
                too_long = angle > GREATEST_TURN
                if too_long.any():
                    vector = vector * np.where(too_long, GREATEST_TURN / np.maximum(angle, GREATEST_TURN), 1.0)
                turns[link.slot] = multiply_first(exponential_first(vector), state.turns[link.slot])
                places[link.slot] += step[link.column + 3 : link.column + 6]
            else:
                own = step[link.column]
                scalars[link.slot] += np.clip(own, -GREATEST_TURN, GREATEST_TURN) if link.kind == "hinge" else own
        return State(turns, places, scalars)

    def frames(self, state: State) -> dict[str, Frame]:
        """Where every body is (rods not included)."""
        zero = np.zeros((3, 1))
        frames = {CHASSIS: Frame(None, zero, zero)}
        for link in self.links.values():
            parent = frames[link.parent]
            if link.kind == "free":
                frames[link.name] = Frame(state.turns[link.slot], link.reference, state.places[link.slot])
            elif link.kind == "hinge":
                own = exponential_first(link.axis * state.scalars[link.slot])
                turned = own if parent.rotation is None else multiply_first(parent.rotation, own)
                frames[link.name] = Frame(turned, link.reference, parent.locate(link.reference))
            else:
                shift = parent.turn(link.axis) * state.scalars[link.slot]
                frames[link.name] = Frame(parent.rotation, link.reference, parent.locate(link.reference) + shift)
        return frames

    def chain(self, body: str) -> tuple[_Link, ...]:
        """The body and its ancestors, the chassis left out."""
        links: list[_Link] = []
        while body != CHASSIS:
            links.append(self.links[body])
            body = links[-1].parent
        return tuple(links)

    def twist(self, body: str, frames: Mapping[str, Frame], rates: Array) -> tuple[Array, Array]:
        """Angular velocity and velocity of the body-fixed point at the origin, (3, B) each.

        ``rates`` (columns, B) are the coordinates' rates; a free body's are its angular velocity and the
        velocity of its reference point.
        """
        count = rates.shape[-1]
        angular, velocity = np.zeros((3, count)), np.zeros((3, count))
        for link in self.chain(body):
            place = frames[link.name].place
            if link.kind == "free":
                own = rates[link.column : link.column + 3]
                angular += own
                velocity += rates[link.column + 3 : link.column + 6] - cross_first(own, place)
            else:
                axis = frames[link.parent].turn(link.axis) * rates[link.column]
                if link.kind == "hinge":
                    angular += axis
                    velocity -= cross_first(axis, place)
                else:
                    velocity += axis
        return angular, velocity


def _last(point: Array, shape: tuple[int, ...]) -> Array:
    """(3,) → (3, 1); (..., 3) → (3, B), broadcast to the poses' shape."""
    if point.ndim == 1:
        return point[:, None]
    spread = np.broadcast_to(point, (*shape, 3))
    return np.ascontiguousarray(np.moveaxis(spread.reshape(-1, 3), 0, -1))
