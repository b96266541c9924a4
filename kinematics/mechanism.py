"""Bodies, joints and inputs as data; ``Layout`` (by name) and ``Mechanism`` (with coordinates).

Knows no solver, no file format and no pixel. A layout names its points; ``Layout.mechanism`` puts
coordinates to the names. Everything here is frozen data in mm, body frame, design position.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field, replace
from types import MappingProxyType
from typing import TypeAlias

import numpy as np
from numpy.typing import ArrayLike, NDArray

from knucklepath.kinematics.errors import MechanismError

Array: TypeAlias = NDArray[np.float64]

CHASSIS = "chassis"
WHEEL_CENTRE = "wheel.centre"
#: Names under which a project may speak of the body that carries the wheel.
CARRIER_ALIASES = ("knuckle", "wheel")
#: Two hardpoints nearer than this (mm) count as one and the same point.
COINCIDENT_MM = 1e-3
#: Sine of the angle below which three points count as lying on one line.
COLLINEAR_SINE = 1e-6


@dataclass(frozen=True)
class HingedBody:
    """Turns about the line through two points of its parent: one unknown, an angle (rad).

    ``axis`` names the two points; ``input``, if given, names the input that sets the angle.
    """

    name: str
    axis: tuple[str, str]
    parent: str = CHASSIS
    input: str | None = None
    unknowns: int = field(default=1, init=False)


@dataclass(frozen=True)
class SlidingBody:
    """Moves along a direction fixed in its parent, without turning in it: one unknown, a displacement (mm).

    ``axis`` names a direction vector ("rack.axis"), or two points: the sliding direction then runs from the
    second to the first. ``input``, if given, names the input that sets the displacement.
    """

    name: str
    axis: str | tuple[str, str]
    parent: str = CHASSIS
    input: str | None = None
    unknowns: int = field(default=1, init=False)


@dataclass(frozen=True)
class FreeBody:
    """Six unknowns, a rotation and a translation. The knuckle of most layouts."""

    name: str
    unknowns: int = field(default=6, init=False)

    @property
    def parent(self) -> str:
        """A free body stands on the chassis alone."""
        return CHASSIS

    @property
    def input(self) -> None:
        """No input sets a free body's coordinates directly."""
        return None


Body: TypeAlias = HingedBody | SlidingBody | FreeBody


@dataclass(frozen=True)
class Rod:
    """Keeps the distance between a point of one body and a point of another: one equation.

    A rod is also a thing: it has a pose (the turn that carries its design direction into its present one,
    without spin), can carry meshes, and is drawn. Its name is the name of that body.
    """

    name: str
    body_a: str
    point_a: str
    body_b: str
    point_b: str
    equations: int = field(default=1, init=False)

    @property
    def points(self) -> tuple[str, ...]:
        """The points that the joint needs."""
        return (self.point_a, self.point_b)


@dataclass(frozen=True)
class Ball:
    """Holds one point of two bodies together: three equations."""

    name: str
    body_a: str
    body_b: str
    at: str
    equations: int = field(default=3, init=False)

    @property
    def points(self) -> tuple[str, ...]:
        """The points that the joint needs."""
        return (self.at,)


@dataclass(frozen=True)
class PointOnLine:
    """Keeps a point of ``body_a`` on a line of ``body_b`` that runs through two of its points: two equations."""

    name: str
    body_a: str
    at: str
    body_b: str
    line: tuple[str, str]
    equations: int = field(default=2, init=False)

    @property
    def points(self) -> tuple[str, ...]:
        """The points that the joint needs."""
        return (self.at, *self.line)


@dataclass(frozen=True)
class Hinge:
    """Leaves two bodies only the turn about the line through two points: five equations."""

    name: str
    body_a: str
    body_b: str
    axis: tuple[str, str]
    equations: int = field(default=5, init=False)

    @property
    def points(self) -> tuple[str, ...]:
        """The points that the joint needs."""
        return self.axis


@dataclass(frozen=True)
class Fixed:
    """Welds two bodies together at a point: six equations."""

    name: str
    body_a: str
    body_b: str
    at: str
    equations: int = field(default=6, init=False)

    @property
    def points(self) -> tuple[str, ...]:
        """The points that the joint needs."""
        return (self.at,)


Joint: TypeAlias = Rod | Ball | PointOnLine | Hinge | Fixed


@dataclass(frozen=True)
class PointInput:
    """Sets the displacement (mm) of a body's point along a chassis direction of any length: one equation."""

    name: str
    body: str
    point: str
    direction: tuple[float, float, float] = (0.0, 0.0, 1.0)


@dataclass(frozen=True)
class CoordinateInput:
    """Sets the own coordinate of a hinged (rad) or sliding (mm) body; the coordinate is then no unknown."""

    name: str
    body: str


Input: TypeAlias = PointInput | CoordinateInput


@dataclass(frozen=True)
class Mechanism:
    """A mechanism with coordinates: what the closure solver takes.

    Attributes
    ----------
    bodies, joints, inputs : the declaration; joints and bodies refer to ``points`` by name.
    points : name → array (..., 3), mm at the design position. Leading axes, where a point has them, are
        geometry variants and broadcast against the inputs' axes.
    """

    bodies: tuple[Body, ...]
    joints: tuple[Joint, ...]
    inputs: tuple[Input, ...]
    points: Mapping[str, Array]

    def __post_init__(self) -> None:
        frozen = {name: np.asarray(value, dtype=float) for name, value in self.points.items()}
        object.__setattr__(self, "points", MappingProxyType(frozen))
        _check_references(self)
        _check_inputs(self)
        _check_geometry(self)

    def body(self, name: str) -> Body:
        """Look a body up by name.

        Raises
        ------
        MechanismError : no body has that name.
        """
        for body in self.bodies:
            if body.name == name:
                return body
        raise MechanismError(f"there is no body '{name}'; bodies: {', '.join(self.body_names)}", body=name)

    @property
    def rods(self) -> tuple[Rod, ...]:
        """The rods, in the order of the declaration."""
        return tuple(joint for joint in self.joints if isinstance(joint, Rod))

    @property
    def body_names(self) -> tuple[str, ...]:
        """All that has a pose: the chassis, the bodies, the rods."""
        return (CHASSIS, *(body.name for body in self.bodies), *(rod.name for rod in self.rods))

    @property
    def is_batched(self) -> bool:
        """True when any point carries geometry variants."""
        return any(point.ndim > 1 for point in self.points.values())

    def attachments(self, body: str) -> tuple[str, ...]:
        """Names of the points at which joints and child bodies hold a body (its own hinge axis not included)."""
        names: list[str] = []
        for joint in self.joints:
            if isinstance(joint, Rod):
                if joint.body_a == body:
                    names.append(joint.point_a)
                if joint.body_b == body:
                    names.append(joint.point_b)
            elif isinstance(joint, PointOnLine):
                if joint.body_a == body:
                    names.append(joint.at)
                if joint.body_b == body:
                    names.extend(joint.line)
            elif body in (joint.body_a, joint.body_b):
                names.extend(joint.points)
        for child in self.bodies:
            if child.parent == body and isinstance(child, HingedBody):
                names.extend(child.axis)
            elif child.parent == body and isinstance(child, SlidingBody) and not isinstance(child.axis, str):
                names.append(child.axis[1])
        names.extend(item.point for item in self.inputs if isinstance(item, PointInput) and item.body == body)
        return tuple(dict.fromkeys(names))

    def neighbours(self) -> frozenset[frozenset[str]]:
        """Pairs of body names that a joint holds together (rods count as bodies)."""
        pairs: set[frozenset[str]] = set()
        for body in self.bodies:
            if not isinstance(body, FreeBody):
                pairs.add(frozenset((body.name, body.parent)))
        for joint in self.joints:
            if isinstance(joint, Rod):
                pairs.add(frozenset((joint.name, joint.body_a)))
                pairs.add(frozenset((joint.name, joint.body_b)))
            else:
                pairs.add(frozenset((joint.body_a, joint.body_b)))
        return frozenset(pairs)

    def shared_points(self, a: str, b: str) -> tuple[str, ...]:
        """Names of the points at which two bodies (rods count) are joined and that stand still in both of them."""
        names: list[str] = []
        for joint in self.joints:
            if isinstance(joint, Rod):
                ends = {joint.body_a: joint.point_a, joint.body_b: joint.point_b}
                if joint.name in (a, b):
                    names += [point for body, point in ends.items() if body in (a, b)]
            elif {joint.body_a, joint.body_b} == {a, b} and not isinstance(joint, PointOnLine):
                names += joint.points
        for body in self.bodies:
            if isinstance(body, HingedBody) and {body.name, body.parent} == {a, b}:
                names += body.axis
        return tuple(dict.fromkeys(names))

    def with_points(self, points: Mapping[str, ArrayLike]) -> Mechanism:
        """Return the same mechanism with some points replaced; arrays (..., 3) make geometry variants."""
        for name in points:
            if name not in self.points:
                raise MechanismError(f"there is no point '{name}'; points: {', '.join(self.points)}")
        changed = {name: np.asarray(value, dtype=float) for name, value in points.items()}
        return replace(self, points={**self.points, **changed})


@dataclass(frozen=True)
class Layout:
    """A suspension layout: which bodies there are, how joints tie them, and which points it needs.

    Attributes
    ----------
    id : short name used in project files, lower case with hyphens.
    title : name for people.
    points : table name → {point name → one line of help}; a project gives each as ``[points.TABLE]``.
    bodies, joints : the declaration, with points named "table.point". The points "wheel.centre" and the
        direction "rack.axis" are always there.
    example : "table.point" → (x, y, z) in mm, with "wheel.centre": a sound left corner. The audit at
        registration and ``knucklepath new`` use it.
    carrier : the body that carries the wheel.
    steering_axis : the lower and the upper steering ball joint, or None for a virtual steering axis.
    description : a sentence or two.
    """

    id: str
    title: str
    points: Mapping[str, Mapping[str, str]]
    bodies: tuple[Body, ...]
    joints: tuple[Joint, ...]
    example: Mapping[str, tuple[float, float, float]]
    carrier: str = "knuckle"
    steering_axis: tuple[str, str] | None = None
    description: str = ""

    @property
    def point_names(self) -> tuple[str, ...]:
        """Every hardpoint as "table.point", in the order of the declaration."""
        return tuple(f"{table}.{point}" for table, names in self.points.items() for point in names)

    @property
    def steers(self) -> bool:
        """True when the layout has a body that the rack input moves."""
        return any(body.input == "rack" for body in self.bodies)

    def mechanism(
        self,
        points: Mapping[str, ArrayLike],
        *,
        steered: bool = True,
        rack_axis: ArrayLike = (0.0, 1.0, 0.0),
    ) -> Mechanism:
        """Put coordinates to the layout's names.

        Parameters
        ----------
        points : "table.point" → (..., 3) mm, with "wheel.centre".
        steered : False fixes what the rack would move to the chassis (an axle without a rack).
        rack_axis : (3,) direction of positive rack displacement, normalised here.

        Raises
        ------
        MechanismError : a point is missing, or the geometry is degenerate.
        """
        given = {name: np.asarray(value, dtype=float) for name, value in points.items()}
        missing = [name for name in (*self.point_names, WHEEL_CENTRE) if name not in given]
        if missing:
            raise MechanismError(f"layout '{self.id}' needs the point {missing[0]}")
        axis = np.asarray(rack_axis, dtype=float)
        length = float(np.linalg.norm(axis))
        if not np.isfinite(length) or length < COLLINEAR_SINE:
            raise MechanismError("the rack's axis has no direction; [0, 1, 0] runs across the car", body="rack")
        bodies, joints = self.bodies, self.joints
        if not steered:
            bodies, joints = _without_rack(bodies, joints)
        inputs: list[Input] = [PointInput("travel", self.carrier, WHEEL_CENTRE)]
        inputs += [CoordinateInput(body.input, body.name) for body in bodies if body.input]
        return Mechanism(bodies, joints, tuple(inputs), {**given, "rack.axis": axis / length})


def _without_rack(bodies: tuple[Body, ...], joints: tuple[Joint, ...]) -> tuple[tuple[Body, ...], tuple[Joint, ...]]:
    """Drop what the rack input moves; its joints then hold on to its parent."""
    stands_for = {body.name: body.parent for body in bodies if body.input == "rack"}
    kept = tuple(body for body in bodies if body.name not in stands_for)
    tied = tuple(
        replace(
            joint,
            body_a=stands_for.get(joint.body_a, joint.body_a),
            body_b=stands_for.get(joint.body_b, joint.body_b),
        )
        for joint in joints
    )
    return kept, tied


def _check_references(mechanism: Mechanism) -> None:
    """Refuse duplicate names, unknown bodies, unknown points and parents declared after their children."""
    seen = {CHASSIS}
    for body in mechanism.bodies:
        if body.name in seen:
            raise MechanismError(f"two bodies are called '{body.name}'", body=body.name)
        if body.parent not in seen:
            raise MechanismError(
                f"body '{body.name}' hangs on '{body.parent}', which is not declared before it",
                body=body.name,
            )
        seen.add(body.name)
    joints: set[str] = set()
    for joint in mechanism.joints:
        if isinstance(joint, Rod) and joint.name in seen:
            raise MechanismError(f"two bodies are called '{joint.name}'", body=joint.name)
        if joint.name in joints:
            raise MechanismError(f"two joints are called '{joint.name}'", joint=joint.name)
        joints.add(joint.name)
        for name in (joint.body_a, joint.body_b):
            if name not in seen or any(name == rod.name for rod in mechanism.rods):
                raise MechanismError(f"joint '{joint.name}' ties an unknown body '{name}'", joint=joint.name)
        if joint.body_a == joint.body_b:
            raise MechanismError(f"joint '{joint.name}' ties '{joint.body_a}' to itself", joint=joint.name)
        if isinstance(joint, Rod):
            seen.add(joint.name)
    for owner, name in _point_references(mechanism):
        if name not in mechanism.points:
            raise MechanismError(f"'{owner}' needs the point {name}, which is not given")
        point = mechanism.points[name]
        if point.shape[-1:] != (3,) or not np.isfinite(point).all():
            raise MechanismError(f"the point {name} must be three finite numbers")


def _check_inputs(mechanism: Mechanism) -> None:
    """Refuse inputs of one name, inputs that move no body, and inputs without a coordinate or direction to set."""
    moving = {body.name: body for body in mechanism.bodies}
    names: set[str] = set()
    driven: set[str] = set()
    for item in mechanism.inputs:
        if item.name in names:
            raise MechanismError(f"two inputs are called '{item.name}'")
        names.add(item.name)
        if item.body not in moving:
            raise MechanismError(
                f"the input '{item.name}' is to move '{item.body}', which is no moving body; "
                f"moving bodies: {', '.join(moving) or 'none'}",
                body=item.body,
            )
        if isinstance(item, PointInput):
            size = float(np.linalg.norm(item.direction))
            if not (np.isfinite(size) and size > 0.0):
                raise MechanismError(f"the input '{item.name}' needs a direction of three finite numbers, not all zero")
            continue
        if isinstance(moving[item.body], FreeBody):
            raise MechanismError(
                f"the input '{item.name}' is to set the coordinate of '{item.body}', which is free; "
                "only a hinged or a sliding body has one",
                body=item.body,
            )
        if item.body in driven:
            raise MechanismError(f"two inputs set the coordinate of '{item.body}'", body=item.body)
        driven.add(item.body)


def _point_references(mechanism: Mechanism) -> Iterator[tuple[str, str]]:
    for body in mechanism.bodies:
        if isinstance(body, FreeBody):
            continue
        names = (body.axis,) if isinstance(body.axis, str) else body.axis
        yield from ((body.name, name) for name in names)
    for joint in mechanism.joints:
        yield from ((joint.name, name) for name in joint.points)
    yield from ((item.name, item.point) for item in mechanism.inputs if isinstance(item, PointInput))


def _check_geometry(mechanism: Mechanism) -> None:
    """Refuse rods and axes without length, and hinged bodies whose every joint lies on their own axis."""
    points = mechanism.points

    def apart(a: str, b: str) -> bool:
        return bool((np.linalg.norm(points[a] - points[b], axis=-1) > COINCIDENT_MM).all())

    for body in mechanism.bodies:
        if isinstance(body, FreeBody):
            continue
        if isinstance(body.axis, str):
            if not (np.linalg.norm(points[body.axis], axis=-1) > 0.0).all():
                raise MechanismError(f"{body.axis} has no direction, so '{body.name}' cannot slide", body=body.name)
            continue
        first, second = body.axis
        if not apart(first, second):
            raise MechanismError(
                f"{first} and {second} are the same point, so '{body.name}' has no axis; "
                "move them apart along the axis",
                body=body.name,
            )
        held = [name for name in mechanism.attachments(body.name) if name not in body.axis]
        if isinstance(body, HingedBody) and held:
            along = points[second] - points[first]
            arms = [np.cross(along, points[name] - points[first]) for name in held]
            sines = [
                np.linalg.norm(arm, axis=-1)
                / (np.linalg.norm(along, axis=-1) * np.linalg.norm(points[name] - points[first], axis=-1) + 1e-300)
                for arm, name in zip(arms, held, strict=True)
            ]
            if all((sine < COLLINEAR_SINE).all() for sine in sines):
                raise MechanismError(
                    f"{held[0]} lies on the line through {first} and {second}, so '{body.name}' turns without "
                    "moving it; move it off that line",
                    body=body.name,
                )
    for joint in mechanism.joints:
        pair: tuple[str, str] | None = None
        if isinstance(joint, Rod):
            pair = (joint.point_a, joint.point_b)
        elif isinstance(joint, Hinge):
            pair = joint.axis
        elif isinstance(joint, PointOnLine):
            pair = joint.line
        if pair and not apart(*pair):
            raise MechanismError(
                f"{pair[0]} and {pair[1]} are the same point, so '{joint.name}' has no length; move them apart",
                joint=joint.name,
            )
        if isinstance(joint, PointOnLine):
            along = points[joint.line[1]] - points[joint.line[0]]
            off = np.cross(along, points[joint.at] - points[joint.line[0]])
            off = off / np.linalg.norm(along, axis=-1, keepdims=True)
            if not (np.linalg.norm(off, axis=-1) <= COINCIDENT_MM).all():
                raise MechanismError(
                    f"{joint.at} does not lie on the line through {' and '.join(joint.line)}, on which "
                    f"'{joint.name}' is to keep it; move it there",
                    joint=joint.name,
                )
