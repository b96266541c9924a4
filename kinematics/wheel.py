"""One corner of a car as data: the mechanism, its wheel, its spring, the vehicle around it.

Knows no solver. Frames, signs and names follow ISO 8855:2011 where it defines them: x forward, y left,
z up, mm; camber positive with the top outboard and toe positive with the front inboard (the trade's signs).
"""

from __future__ import annotations

from dataclasses import dataclass
from difflib import get_close_matches
from typing import Literal

import numpy as np

from knucklepath.kinematics.errors import MechanismError
from knucklepath.kinematics.mechanism import CARRIER_ALIASES, CHASSIS, Array, Mechanism

UP = np.array([0.0, 0.0, 1.0])


def wheel_down(spin_axis: Array) -> Array:
    """Unit vector in the wheel plane that points down.

    Parameters
    ----------
    spin_axis : (..., 3) unit vectors.

    Returns
    -------
    (..., 3) unit vectors ``d = −(z − (z·s)s)/|z − (z·s)s|``; nan where the spin axis is vertical.
    """
    s_z = spin_axis[..., 2]
    level = np.sqrt(spin_axis[..., 0] ** 2 + spin_axis[..., 1] ** 2)
    with np.errstate(invalid="ignore", divide="ignore"):
        down = spin_axis * (s_z / level)[..., None]
        down[..., 2] = -level
        down[level == 0.0] = np.nan
    return down


@dataclass(frozen=True)
class Wheel:
    """The wheel at the design position. Lengths in mm, angles in degrees; ``centre`` is (3,).

    ``tyre_radius`` is the free outer radius, for clearance (None: the loaded radius).
    """

    centre: Array
    loaded_radius: float
    camber_deg: float = 0.0
    toe_deg: float = 0.0
    tyre_radius: float | None = None
    tyre_width: float | None = None
    rim_diameter: float | None = None

    def __post_init__(self) -> None:
        object.__setattr__(self, "centre", np.asarray(self.centre, dtype=float))

    @property
    def spin_axis(self) -> Array:
        """(3,) unit vector pointing outboard: (cos γ sin δ, cos γ cos δ, −sin γ)."""
        camber, toe = np.radians(self.camber_deg), np.radians(self.toe_deg)
        return np.array([np.cos(camber) * np.sin(toe), np.cos(camber) * np.cos(toe), -np.sin(camber)])

    @property
    def contact(self) -> Array:
        """(3,) contact point at the design position, mm."""
        return self.centre + self.loaded_radius * wheel_down(self.spin_axis)

    @property
    def outer_radius(self) -> float:
        """Radius of the tyre for clearance, mm."""
        return self.loaded_radius if self.tyre_radius is None else self.tyre_radius


@dataclass(frozen=True)
class Spring:
    """A straight spring-damper unit: ``chassis`` and ``moving`` (3,) mm, ``moving`` fixed to the body ``on``."""

    chassis: Array
    moving: Array
    on: str
    shortest: float | None = None
    longest: float | None = None
    rate_n_per_mm: float | None = None
    preload_n: float | None = None

    def __post_init__(self) -> None:
        object.__setattr__(self, "chassis", np.asarray(self.chassis, dtype=float))
        object.__setattr__(self, "moving", np.asarray(self.moving, dtype=float))


@dataclass(frozen=True)
class Vehicle:
    """The car around the corner: lengths in mm, shares 0…1 of the whole car. None where not given."""

    wheelbase: float | None = None
    centre_of_gravity_height: float | None = None
    front_brake_share: float | None = None
    front_drive_share: float | None = None


@dataclass(frozen=True)
class Corner:
    """A left corner ready to be moved.

    Attributes
    ----------
    mechanism : bodies, joints, inputs "travel" and, where it steers, "rack".
    wheel : at the design position.
    carrier : the body that carries the wheel.
    steering_axis : names of the lower and upper steering ball joint, or None (virtual axis).
    axle : "front" or "rear".
    spring, vehicle : None where not given.
    """

    mechanism: Mechanism
    wheel: Wheel
    carrier: str = "knuckle"
    steering_axis: tuple[str, str] | None = None
    axle: Literal["front", "rear"] = "front"
    spring: Spring | None = None
    vehicle: Vehicle | None = None

    @property
    def steered(self) -> bool:
        """True when the mechanism has a rack input."""
        return any(item.name == "rack" for item in self.mechanism.inputs)

    @property
    def body_names(self) -> tuple[str, ...]:
        """Every name that a part may stand on: the mechanism's bodies and the aliases "knuckle" and "wheel"."""
        names = self.mechanism.body_names
        return (*names, *(alias for alias in CARRIER_ALIASES if alias not in names))

    def body(self, name: str) -> str:
        """Name of the mechanism's body that ``name`` means; "knuckle" and "wheel" mean the carrier.

        Raises
        ------
        MechanismError : no such body; the message gives the nearest name.
        """
        if name in self.mechanism.body_names:
            return name
        if name in CARRIER_ALIASES:
            return self.carrier
        near = get_close_matches(name, self.body_names, n=1)
        hint = f"did you mean '{near[0]}'? " if near else ""
        raise MechanismError(f"there is no body '{name}'; {hint}Bodies: {', '.join(self.body_names)}", body=name)

    def point(self, name: str) -> Array:
        """(..., 3) design position of a named point of the mechanism, mm."""
        return self.mechanism.points[name]

    def joined(self, a: str, b: str) -> bool:
        """True when two bodies share a joint or are one body. "wheel" is joined to its carrier only."""
        if a == b:
            return True
        if "wheel" in (a, b):
            other = b if a == "wheel" else a
            return self.body(other) == self.carrier and other != CHASSIS
        return self.body(a) == self.body(b) or frozenset((self.body(a), self.body(b))) in self.mechanism.neighbours()
