"""Readings of one wheel: named numbers with units, computed from a ``Motion``.

Knows no file and no pixel. Definitions and signs follow ISO 8855:2011 where it defines them; camber (top
outboard), toe (front inboard), caster (top rearward) and kingpin inclination (top inboard) carry the trade's
signs. Every rate is exact (from the instant motion), never a difference. A reading that does not exist is
nan; one whose denominator vanishes is inf, signed by the side it tends to.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from knucklepath.kinematics.frames import RATE_FLOOR, ScrewAxis
from knucklepath.kinematics.motion import Motion
from knucklepath.kinematics.tree import cross_first, dot_first
from knucklepath.kinematics.wheel import Corner

Array = NDArray[np.float64]

#: Velocities (mm per mm) below this are rounding of zero.
VELOCITY_FLOOR = 1e-10


@dataclass(frozen=True)
class WheelState:
    """What every reading starts from, components first: points and directions (3, B), mm and mm/mm.

    spin : spin axis, outboard; centre, contact : wheel centre and contact point; angular, velocity : of the
    knuckle at the wheel centre per mm of travel; angular is per mm.
    """

    motion: Motion
    spin: Array
    centre: Array
    contact: Array
    angular: Array
    velocity: Array

    def shaped(self, value: Array) -> Array:
        """(..., B) → leading axes first."""
        return self.motion._shaped(value)

    def velocity_at(self, point: Array) -> Array:
        """Velocity (3, B) of the knuckle's point that is now at ``point`` (3, B)."""
        return self.velocity + cross_first(self.angular, point - self.centre)


def wheel_state(motion: Motion) -> WheelState:
    """Collect the wheel's pose and exact motion once for all readings; kept with the motion."""
    kept = motion.__dict__.get("_wheel_state")
    if isinstance(kept, WheelState):
        return kept
    wheel = motion.corner.wheel
    spin = motion.turn_last("wheel", wheel.spin_axis)
    centre = motion.point_last("wheel", wheel.centre)
    level = np.sqrt(spin[0] ** 2 + spin[1] ** 2)
    with np.errstate(invalid="ignore", divide="ignore"):
        lean = spin[2] / level
    down = np.stack((spin[0] * lean, spin[1] * lean, -level))
    angular, at_origin = motion.twist_last("wheel")
    velocity = at_origin + cross_first(angular, centre)
    state = WheelState(motion, spin, centre, centre + wheel.loaded_radius * down, angular, velocity)
    motion.__dict__["_wheel_state"] = state
    return state


def spin_axis(motion: Motion) -> Array:
    """(..., 3) unit vector along the wheel's spin axis, pointing outboard."""
    return motion._shaped(wheel_state(motion).spin)


def contact_point(motion: Motion) -> Array:
    """(..., 3) contact point: wheel centre + loaded radius · downward direction in the wheel plane, mm."""
    return motion._shaped(wheel_state(motion).contact)


def _over(numerator: Array, rate: Array) -> Array:
    """numerator/rate with vanishing rates as signed zeros, and 0/0 as nan."""
    rate = np.where(np.abs(rate) < RATE_FLOOR, np.copysign(0.0, rate), rate)
    numerator = np.where(np.abs(numerator) < VELOCITY_FLOOR, 0.0, numerator)
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.asarray(numerator / rate)


def _front_offsets(state: WheelState) -> tuple[Array, Array]:
    """(y, z) of the front-view instant centre from the wheel centre: (−v_z/ω_x, v_y/ω_x)."""
    rate = state.angular[0]
    return -_over(state.velocity[2], rate), _over(state.velocity[1], rate)


def _side_offsets(state: WheelState) -> tuple[Array, Array]:
    """(x, z) of the side-view instant centre from the wheel centre: (v_z/ω_y, −v_x/ω_y)."""
    rate = state.angular[1]
    return _over(state.velocity[2], rate), -_over(state.velocity[0], rate)


def front_instant_centre(motion: Motion) -> Array:
    """(..., 3) front-view instant centre in the plane x = w_x, mm: where y and z velocity vanish."""
    state = wheel_state(motion)
    y, z = _front_offsets(state)
    return motion._shaped(np.stack((state.centre[0], state.centre[1] + y, state.centre[2] + z)))


def side_instant_centre(motion: Motion) -> Array:
    """(..., 3) side-view instant centre in the plane y = w_y, mm: where x and z velocity vanish."""
    state = wheel_state(motion)
    x, z = _side_offsets(state)
    return motion._shaped(np.stack((state.centre[0] + x, state.centre[1], state.centre[2] + z)))


def _steering_last(state: WheelState) -> tuple[Array, Array]:
    """A point (3, B) of the steering axis and its upward unit direction (3, B)."""
    motion, corner = state.motion, state.motion.corner
    if corner.steering_axis is not None:
        lower, upper = corner.steering_axis
        design = corner.mechanism.points
        bottom = motion.point_last(_owner(corner, lower), design[lower])
        top = motion.point_last(_owner(corner, upper), design[upper])
        along = top - bottom
        return bottom, along / np.sqrt(dot_first(along, along))
    if not corner.steered:
        none = np.full_like(state.centre, np.nan)
        return none, none
    angular, at_origin = motion.twist_last("wheel", "rack")
    squared = dot_first(angular, angular)
    with np.errstate(invalid="ignore", divide="ignore"):
        turning = np.sqrt(squared) > RATE_FLOOR
        point = np.where(turning, cross_first(angular, at_origin) / squared, np.nan)
        along = np.where(turning, angular / np.sqrt(squared), np.nan)
    return point, np.where(along[2] < 0.0, -along, along)


def _owner(corner: Corner, point: str) -> str:
    """The body to which a steering ball joint belongs: the carrier, or else the one body that holds it."""
    if point in corner.mechanism.attachments(corner.carrier):
        return corner.carrier
    for joint in corner.mechanism.joints:
        if point in joint.points:
            return joint.body_a
    for body in corner.mechanism.bodies:
        if point in corner.mechanism.attachments(body.name):
            return body.name
    return corner.carrier


def steering_axis(motion: Motion) -> tuple[Array, Array]:
    """A point (..., 3), mm, and the upward unit direction (..., 3) of the steering axis.

    The line through the two steering ball joints, or, where a layout has none, the virtual axis: the instant
    screw axis of the knuckle per mm of rack with the wheel-centre height held. nan where there is neither.
    """
    point, along = _steering_last(wheel_state(motion))
    return motion._shaped(point), motion._shaped(along)


def _ground_offset(state: WheelState) -> tuple[Array, Array]:
    """(x, y) from where the steering axis meets the ground to the contact point."""
    point, along = _steering_last(state)
    down = (state.contact[2] - point[2]) / along[2]
    foot = point + along * down
    return state.contact[0] - foot[0], state.contact[1] - foot[1]


def _camber(state: WheelState) -> Array:
    return -np.degrees(np.arcsin(np.clip(state.spin[2], -1.0, 1.0)))


def _toe(state: WheelState) -> Array:
    return np.degrees(np.arctan2(state.spin[0], state.spin[1]))


def _caster(state: WheelState) -> Array:
    along = _steering_last(state)[1]
    return np.degrees(np.arctan2(-along[0], along[2]))


def _kingpin(state: WheelState) -> Array:
    along = _steering_last(state)[1]
    return np.degrees(np.arctan2(-along[1], along[2]))


def _scrub(state: WheelState) -> Array:
    x, y = _ground_offset(state)
    level = np.hypot(state.spin[0], state.spin[1])
    return np.asarray((x * state.spin[0] + y * state.spin[1]) / level)


def _trail(state: WheelState) -> Array:
    x, y = _ground_offset(state)
    level = np.hypot(state.spin[0], state.spin[1])
    return np.asarray((-x * state.spin[1] + y * state.spin[0]) / level)


def contact_slopes(motion: Motion) -> tuple[Array, Array]:
    """(dx/dz, dy/dz), each (...): how the knuckle-fixed point at the contact moves as it rises."""
    state = wheel_state(motion)
    velocity = state.velocity_at(state.contact)
    return motion._shaped(velocity[0] / velocity[2]), motion._shaped(velocity[1] / velocity[2])


def jacking_force(
    motion: Motion, contact_force: ArrayLike, torque_reaction: Literal["knuckle", "drive shaft"] = "knuckle"
) -> Array:
    """Vertical force on the body that the links return for the patch's lateral and longitudinal force, N.

    Parameters
    ----------
    contact_force : (3,) N on the tyre.
    torque_reaction : "drive shaft" takes the longitudinal slope at the wheel centre instead of the contact.

    Returns
    -------
    (...) N, + lifts the body: −F_y·(dy/dz) − F_x·(dx/dz) (virtual work of a motion that moves no spring).
    """
    force = np.asarray(contact_force, dtype=float)
    state = wheel_state(motion)
    slope_x, slope_y = contact_slopes(motion)
    if torque_reaction == "drive shaft":
        slope_x = motion._shaped(state.velocity[0] / state.velocity[2])
    return np.asarray(-force[1] * slope_y - force[0] * slope_x)


def _roll_centre_height(state: WheelState) -> Array:
    # fvsa_height / fvsa_length is the contact point's slope dy/dz, which exists where the centre is at infinity
    velocity = state.velocity_at(state.contact)
    return np.asarray(state.contact[1] * velocity[1] / velocity[2])


def _camber_rate(state: WheelState) -> Array:
    change = cross_first(state.angular, state.spin)
    return -np.degrees(change[2] / np.sqrt(1.0 - state.spin[2] ** 2))


def _toe_rate(state: WheelState) -> Array:
    change = cross_first(state.angular, state.spin)
    squared = state.spin[0] ** 2 + state.spin[1] ** 2
    return np.degrees((change[0] * state.spin[1] - state.spin[0] * change[1]) / squared)


def _screw(state: WheelState) -> ScrewAxis:
    kept = state.__dict__.get("_screw")
    if isinstance(kept, ScrewAxis):
        return kept
    squared = dot_first(state.angular, state.angular)
    rate = np.sqrt(squared)
    with np.errstate(invalid="ignore", divide="ignore"):
        turning = rate > RATE_FLOOR
        direction = np.where(turning, state.angular / rate, np.nan)
        point = np.where(turning, state.centre + cross_first(state.angular, state.velocity) / squared, np.nan)
        pitch = np.where(turning, dot_first(state.angular, state.velocity) / squared, np.inf)
    screw = ScrewAxis(direction, point, np.where(np.isnan(rate), np.nan, pitch), rate)
    state.__dict__["_screw"] = screw
    return screw


def _spring_length(state: WheelState) -> Array:
    spring = state.motion.corner.spring
    assert spring is not None
    apart = state.motion.point_last(spring.on, spring.moving) - spring.chassis[:, None]
    return np.asarray(np.sqrt(dot_first(apart, apart)))


def _motion_ratio(state: WheelState) -> Array:
    spring = state.motion.corner.spring
    assert spring is not None
    apart = state.motion.point_last(spring.on, spring.moving) - spring.chassis[:, None]
    velocity = state.motion.velocity_last(spring.on, spring.moving)
    return np.abs(dot_first(apart, velocity)) / np.sqrt(dot_first(apart, apart))


def _anti(axle: str, work: str) -> Callable[[WheelState], Array]:
    """Anti-dive and its kin: 100 · share · tan θ · wheelbase / centre-of-gravity height.

    tan θ is the slope dx/dz of the point that carries the force: the contact where the knuckle reacts the
    torque (braking), the wheel centre where a drive shaft does (driving).
    """

    def function(state: WheelState) -> Array:
        vehicle = state.motion.corner.vehicle
        assert vehicle is not None
        share = vehicle.front_brake_share if work == "braking" else vehicle.front_drive_share
        assert share is not None
        assert vehicle.wheelbase is not None
        assert vehicle.centre_of_gravity_height is not None
        share = share if axle == "front" else 1.0 - share
        at = state.contact if work == "braking" else state.centre
        velocity = state.velocity_at(at)
        slope = velocity[0] / velocity[2] * (1.0 if axle == "front" else -1.0)
        return np.asarray(100.0 * share * slope * vehicle.wheelbase / vehicle.centre_of_gravity_height)

    return function


def _anti_available(axle: str, work: str) -> Callable[[Corner], bool]:
    def available(corner: Corner) -> bool:
        vehicle = corner.vehicle
        if vehicle is None or corner.axle != axle:
            return False
        share = vehicle.front_brake_share if work == "braking" else vehicle.front_drive_share
        if share is None or vehicle.wheelbase is None or vehicle.centre_of_gravity_height is None:
            return False
        return work == "braking" or (share > 0.0 if axle == "front" else share < 1.0)

    return available


def _always(corner: Corner) -> bool:
    return True


def _has_spring(corner: Corner) -> bool:
    return corner.spring is not None


@dataclass(frozen=True)
class Reading:
    """A named number that can be read from a motion.

    Attributes
    ----------
    id : "camber"; column : its column in tables, "camber_deg"; unit : "deg"; title : for people.
    function : ``Motion`` → array of the motion's shape.
    available : ``Corner`` → whether the project has what the reading needs.
    """

    id: str
    column: str
    unit: str
    title: str
    function: Callable[[Motion], Array]
    available: Callable[[Corner], bool] = _always


def _reading(
    id: str,
    unit: str,
    title: str,
    function: Callable[[WheelState], Array],
    available: Callable[[Corner], bool] = _always,
    column: str | None = None,
) -> Reading:
    def of_motion(motion: Motion) -> Array:
        state = wheel_state(motion)
        return motion._shaped(np.asarray(function(state)))

    suffix = {"%": "percent", "": "", "mm/mm": "", "deg/mm": "deg_per_mm", "mm/rad": "mm_per_rad"}.get(unit, unit)
    return Reading(id, column or (f"{id}_{suffix}" if suffix else id), unit, title, of_motion, available)


def _coordinate(id: str, title: str, function: Callable[[WheelState], Array]) -> Reading:
    return _reading(id, "mm", title, function)


BUILTIN_READINGS: tuple[Reading, ...] = (
    _reading("camber", "deg", "Camber", _camber),
    _reading("toe", "deg", "Toe", _toe),
    _reading("caster", "deg", "Caster", _caster),
    _reading("kingpin_inclination", "deg", "Kingpin inclination", _kingpin),
    _reading("scrub_radius", "mm", "Scrub radius", _scrub),
    _reading("caster_trail", "mm", "Caster trail", _trail),
    _reading(
        "half_track_change",
        "mm",
        "Half-track change",
        lambda s: s.contact[1] - s.motion.corner.wheel.contact[1],
    ),
    _reading("wheelbase_change", "mm", "Wheelbase change", lambda s: s.centre[0] - s.motion.corner.wheel.centre[0]),
    _coordinate("wheel_centre_x", "Wheel centre x", lambda s: s.centre[0]),
    _coordinate("wheel_centre_y", "Wheel centre y", lambda s: s.centre[1]),
    _coordinate("wheel_centre_z", "Wheel centre z", lambda s: s.centre[2]),
    _coordinate("contact_x", "Contact point x", lambda s: s.contact[0]),
    _coordinate("contact_y", "Contact point y", lambda s: s.contact[1]),
    _coordinate("contact_z", "Contact point z", lambda s: s.contact[2]),
    _coordinate("front_centre_y", "Front-view centre y", lambda s: s.centre[1] + _front_offsets(s)[0]),
    _coordinate("front_centre_z", "Front-view centre z", lambda s: s.centre[2] + _front_offsets(s)[1]),
    _coordinate("side_centre_x", "Side-view centre x", lambda s: s.centre[0] + _side_offsets(s)[0]),
    _coordinate("side_centre_z", "Side-view centre z", lambda s: s.centre[2] + _side_offsets(s)[1]),
    _coordinate(
        "fvsa_length",
        "Front-view swing arm length",
        lambda s: s.contact[1] - s.centre[1] - _front_offsets(s)[0],
    ),
    _coordinate(
        "fvsa_height",
        "Front-view swing arm height",
        lambda s: s.centre[2] - s.contact[2] + _front_offsets(s)[1],
    ),
    _coordinate("svsa_length", "Side-view swing arm length", lambda s: -_side_offsets(s)[0]),
    _coordinate(
        "svsa_height",
        "Side-view swing arm height",
        lambda s: s.centre[2] - s.contact[2] + _side_offsets(s)[1],
    ),
    _reading("roll_centre_height", "mm", "Roll-centre height", _roll_centre_height),
    _reading("camber_rate", "deg/mm", "Camber rate", _camber_rate),
    _reading("toe_rate", "deg/mm", "Toe rate", _toe_rate),
    _coordinate("axis_point_x", "Instant axis point x", lambda s: _screw(s).point[0]),
    _coordinate("axis_point_y", "Instant axis point y", lambda s: _screw(s).point[1]),
    _coordinate("axis_point_z", "Instant axis point z", lambda s: _screw(s).point[2]),
    _reading("axis_direction_x", "", "Instant axis direction x", lambda s: _screw(s).direction[0]),
    _reading("axis_direction_y", "", "Instant axis direction y", lambda s: _screw(s).direction[1]),
    _reading("axis_direction_z", "", "Instant axis direction z", lambda s: _screw(s).direction[2]),
    _reading("axis_pitch", "mm/rad", "Instant axis pitch", lambda s: _screw(s).pitch_mm_per_rad),
    _reading("spring_length", "mm", "Spring length", _spring_length, _has_spring),
    _reading("motion_ratio", "", "Motion ratio", _motion_ratio, _has_spring),
    _reading("anti_dive", "%", "Anti-dive", _anti("front", "braking"), _anti_available("front", "braking")),
    _reading("anti_lift", "%", "Anti-lift", _anti("rear", "braking"), _anti_available("rear", "braking")),
    _reading("anti_squat", "%", "Anti-squat", _anti("rear", "driving"), _anti_available("rear", "driving")),
    _reading(
        "anti_lift_drive",
        "%",
        "Anti-lift, driving",
        _anti("front", "driving"),
        _anti_available("front", "driving"),
    ),
)


def corner_readings(motion: Motion, readings: Iterable[Reading] = BUILTIN_READINGS) -> dict[str, Array]:
    """Every available reading: column name → array of the motion's shape, in the readings' order."""
    with np.errstate(invalid="ignore", divide="ignore"):
        return {reading.column: reading.function(motion) for reading in readings if reading.available(motion.corner)}
