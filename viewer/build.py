"""From a project's checked values to a corner, rods, rules and load cases. Reads no file.

What the schema cannot say stands here: how values depend on each other, and on the layout.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.audit import audit
from knucklepath.kinematics.clearance.pairs import PairError, pairs_to_check
from knucklepath.kinematics.clearance.solids import RodStyle, Solid
from knucklepath.kinematics.errors import MechanismError, ProjectError
from knucklepath.kinematics.following import solve
from knucklepath.kinematics.limits import DriveShaft, JointLimit, joint_bodies
from knucklepath.kinematics.mechanism import CHASSIS, COINCIDENT_MM, WHEEL_CENTRE, Layout, Mechanism
from knucklepath.kinematics.motion import lock_reason, solve_motion
from knucklepath.kinematics.wheel import Corner, Spring, Vehicle, Wheel
from knucklepath.viewer.parts import body_of
from knucklepath.viewer.plausible import check_corner_size, check_lengths, check_wheel_size
from knucklepath.viewer.source import Source, dotted, one_line, printable
from knucklepath.viewer.toml_lines import KeyPath

Array = NDArray[np.float64]

#: Turn of the carrier (rad) on a travel as long as the hardpoints' span, at most: sensible corners have 0.3 to 3.
MOST_TURN = 50.0
#: Length of a direction below which it points nowhere.
NO_DIRECTION = 1e-6


@dataclass(frozen=True)
class ClearanceRule:
    """What must stay apart: two names, either of them "*", and the gap asked for, mm.

    relief : radius, mm, about the joints that both parts share, inside which they may touch; 0 for none.
    """

    a: str
    b: str
    gap: float
    relief: float = 0.0


@dataclass(frozen=True)
class LoadCase:
    """A load on the tyre at the contact point.

    contact_force (3,) N, ground frame; aligning_moment N·m about z; torque_reaction : what takes braking or drive
    torque.
    """

    name: str
    contact_force: Array
    aligning_moment: float = 0.0
    torque_reaction: Literal["knuckle", "drive shaft"] = "knuckle"


def build_corner(source: Source, layout: Layout, values: Mapping[str, Any], units: str) -> Corner:
    """The corner of a project, audited.

    Parameters
    ----------
    values : as checked, lengths in mm; units : the file's, for messages.

    Raises
    ------
    ProjectError : sizes that no corner has, or geometry that makes no mechanism, at the hardpoint concerned.
    """
    points = {
        f"{table}.{name}": np.asarray(point)
        for table, named in values.get("points", {}).items()
        for name, point in named.items()
    }
    points[WHEEL_CENTRE] = np.asarray(values["wheel"]["centre"])
    wheel = Wheel(**values["wheel"])
    diagonal = check_corner_size(source, points, units)
    check_wheel_size(source, wheel, diagonal, units)
    if wheel.centre[1] <= 0.0:
        raise source.error(("wheel", "centre"), "the file gives the left corner: y must be positive (y points left)")
    check_lengths(source, values, diagonal)
    mechanism = _mechanism(source, layout, points, values.get("rack"))
    bare = Corner(mechanism, wheel, layout.carrier, layout.steering_axis, values.get("axle", "front"))
    _check_moves(source, layout, bare, diagonal)
    bodies = [body.name for body in layout.bodies]
    return Corner(
        mechanism=mechanism,
        wheel=wheel,
        carrier=layout.carrier,
        steering_axis=layout.steering_axis,
        axle=values.get("axle", "front"),
        spring=_spring(source, values["spring"], bare, bodies) if "spring" in values else None,
        vehicle=Vehicle(**values["vehicle"]) if "vehicle" in values else None,
    )


def _mechanism(
    source: Source, layout: Layout, points: Mapping[str, Array], rack: Mapping[str, Any] | None
) -> Mechanism:
    axis = np.asarray((rack or {}).get("axis", (0.0, 1.0, 0.0)))
    length = float(np.linalg.norm(axis))
    if length < NO_DIRECTION:
        raise source.error(("rack", "axis"), "has no direction; write for example axis = [0.0, 1.0, 0.0]")
    if axis[1] < -NO_DIRECTION * length:
        raise source.error(
            ("rack", "axis"), "points to the right; rack displacement counts to the left (+y): turn all three signs"
        )
    if layout.steering_axis is not None:
        lower, upper = layout.steering_axis
        if np.linalg.norm(points[upper] - points[lower]) <= COINCIDENT_MM:
            raise source.error(
                ("points", *upper.split(".")), f"is the same point as {lower}, so the steering axis has no direction"
            )
    try:
        mechanism = layout.mechanism(points, steered=rack is not None, rack_axis=axis)
        audit(mechanism)
    except MechanismError as error:
        raise _at_hardpoint(source, layout, error) from error
    return mechanism


def _at_hardpoint(source: Source, layout: Layout, error: MechanismError) -> ProjectError:
    """Give a fault of the mechanism the key and line of the hardpoint, or table, that it is about."""
    named = [name for name in layout.point_names if name in error.message]
    if named:
        first = min(named, key=error.message.index)
        return source.error(("points", *first.split(".")), one_line(error.message))
    if WHEEL_CENTRE in error.message:
        return source.error(("wheel", "centre"), one_line(error.message))
    for table in (error.body, error.joint):
        if table is not None and table in layout.points:
            return source.error(("points", table), one_line(error.message))
    return source.error(("points",), one_line(error.message))


def _check_moves(source: Source, layout: Layout, corner: Corner, diagonal: float) -> None:
    """Refuse a design position that is as good as singular: the audit passes it, yet it cannot be moved sensibly."""
    turn = float(np.linalg.norm(solve_motion(corner, 0.0).twist(corner.carrier)[:3]))
    if not turn * diagonal <= MOST_TURN:
        reason = lock_reason(solve(corner.mechanism, {"travel": 0.0})).partition(":")[0]
        table = next((name for name in layout.points if name in reason.split()), None)
        raise source.error(
            ("points", table) if table else ("points",),
            f"at the design position '{corner.carrier}' would turn {np.degrees(turn):.3g} deg per mm of travel, so the "
            f"geometry is as good as singular ({reason}); move a joint off the line or axis on which it lies",
        )


def _spring(source: Source, given: Mapping[str, Any], corner: Corner, bodies: Sequence[str]) -> Spring:
    body = body_of(source, ("spring", "on"), given["on"], corner, bodies)
    if body == CHASSIS:
        moving = ", ".join(name for name in corner.body_names if name != CHASSIS)
        raise source.error(("spring", "on"), f"is the chassis; name the body that carries the moving end: {moving}")
    spring = Spring(**{**given, "on": corner.carrier if body == "wheel" else body})
    length = float(np.linalg.norm(spring.chassis - spring.moving))
    if length <= COINCIDENT_MM:
        raise source.error(("spring", "moving"), "is the same point as chassis; a spring needs a length")
    if spring.shortest is not None and spring.longest is not None and spring.shortest >= spring.longest:
        raise source.error(
            ("spring", "longest"), f"must be greater than shortest ({spring.shortest:g} mm); are the two swapped?"
        )
    # a length outside these at the design position is a requirement not met, not a wrong file
    return spring


def build_rods(given: Mapping[str, Any]) -> RodStyle:
    """Diameters of what the program draws."""
    each: dict[str, float | None] = {}
    for name, rod in given.items():
        if isinstance(rod, dict):
            if rod.get("shown") is False:
                each[name] = None
            elif "diameter" in rod:
                each[name] = rod["diameter"]
    return RodStyle(given["diameter"], each) if "diameter" in given else RodStyle(each=each)


def build_rules(
    source: Source, given: Sequence[Mapping[str, Any]], corner: Corner, solids: Sequence[Solid]
) -> tuple[ClearanceRule, ...]:
    """Clearance rules, each of whose names means something that is there.

    Raises
    ------
    ProjectError : an unknown name, with the nearest; or a pair of one.
    """
    rules = []
    for position, entry in enumerate(given):
        a, b = entry["between"]
        path = ("clearances", position, "between")
        if a == b and a != "*":
            raise source.error(path, f"names '{printable(a)}' twice; name two things that must stay apart")
        rule = ClearanceRule(a, b, entry["gap"], entry.get("relief", 0.0))
        try:
            pairs_to_check(corner, solids, (rule,))
        except PairError as error:
            raise source.error(path, one_line(str(error))) from error
        rules.append(rule)
    return tuple(rules)


def build_joint_limits(source: Source, given: Sequence[Mapping[str, Any]], corner: Corner) -> tuple[JointLimit, ...]:
    """Joint limits, each of a joint that is there.

    Raises
    ------
    ProjectError : an unknown joint, or an axis without direction.
    """
    limits = []
    for position, entry in enumerate(given):
        try:
            joint_bodies(corner.mechanism, entry["joint"])
        except MechanismError as error:
            raise source.error(("joint_limits", position, "joint"), one_line(error.message)) from error
        axis = _direction(source, ("joint_limits", position, "axis"), entry["axis"], "[0.0, 0.0, 1.0]")
        limits.append(JointLimit(entry["joint"], axis, entry["greatest_deg"]))
    return tuple(limits)


def build_drive_shaft(source: Source, given: Mapping[str, Any]) -> DriveShaft:
    """The drive shaft.

    Raises
    ------
    ProjectError : its ends are one point, or its axis has no direction.
    """
    inner, outer = np.asarray(given["inner"]), np.asarray(given["outer"])
    if np.linalg.norm(outer - inner) <= COINCIDENT_MM:
        raise source.error(("drive_shaft", "outer"), "is the same point as inner; a shaft needs a length")
    example = "[0.0, 1.0, 0.0]"
    axis = _direction(source, ("drive_shaft", "inner_axis"), given.get("inner_axis", (0.0, 1.0, 0.0)), example)
    rest = {key: value for key, value in given.items() if key.startswith("greatest")}
    return DriveShaft(inner, outer, axis, **rest)


def _direction(source: Source, path: KeyPath, given: Sequence[float], example: str) -> Array:
    axis = np.asarray(given, dtype=float)
    length = float(np.linalg.norm(axis))
    if length < NO_DIRECTION:
        raise source.error(path, f"has no direction; write for example {example}")
    return axis / length


def build_loads(source: Source, given: Sequence[Mapping[str, Any]]) -> tuple[LoadCase, ...]:
    """Load cases, each with a name of its own.

    Raises
    ------
    ProjectError : two have one name.
    """
    cases: list[LoadCase] = []
    for position, entry in enumerate(given):
        path = ("loads", position, "name")
        if any(case.name == entry["name"] for case in cases):
            raise source.error(path, f"two load cases are called '{printable(entry['name'])}'; rename one of them")
        cases.append(LoadCase(**{**entry, "contact_force": np.asarray(entry["contact_force"])}))
    return tuple(cases)


def unused_keys(data: Mapping[str, Any], keys: Sequence[tuple[str, ...]]) -> tuple[str, ...]:
    """Those of some keys that a file gives, dotted."""
    found = []
    for path in keys:
        here: Any = data
        for step in path:
            here = here.get(step) if isinstance(here, dict) else None
        if here is not None:
            found.append(dotted(path))
    return tuple(found)
